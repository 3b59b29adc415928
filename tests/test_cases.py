"""Every worked example runs as it stands and says where its numbers come from."""

from __future__ import annotations

import tomllib
from functools import cache
from itertools import pairwise
from pathlib import Path

import pytest

import optics
from optics.outcome.side import SideAngular

CASES = sorted((Path(__file__).parents[1] / "cases").glob("**/*.toml"))
KINDS = {
    "blue-fluorescent-pixel",
    "flexible-pet-barrier",
    "green-bottom-pixel",
    "polymer-f8bt",
    "red-top-microcavity",
    "silicon-microdisplay",
    "transparent-porthole",
    "white-lighting-panel",
    "white-tandem",
}
# Warnings that a case shows on purpose, by a part of their text; all others warn of nothing.
MEANT_WARNINGS = {"polymer-f8bt": ("emitter f8bt: its own film polymer is taken as transparent",)}
ANGLES_DEG = tuple(float(angle) for angle in range(0, 91, 5))


def case_called(stem: str) -> optics.Case:
    (path,) = [one for one in CASES if one.stem == stem]
    return optics.read_case(path)


@cache
def budget_of(stem: str) -> optics.Budget:
    return optics.budget(case_called(stem))


@cache
def angular_of(stem: str) -> optics.Angular:
    return optics.angular(case_called(stem), ANGLES_DEG)


def brighter_side(seen: optics.Angular) -> SideAngular:
    return max(seen.sides.values(), key=lambda side: side.current_efficiency_cd_A)


def falls_from_the_normal(side: SideAngular) -> bool:
    """Whether luminance falls over all angles; None where no visible light goes."""
    curve = [value for value in side.relative_luminance if value is not None]
    assert len(curve) == len(ANGLES_DEG)
    return all(after < before for before, after in pairwise(curve))


def shift_to_60_deg(side: SideAngular) -> float:
    """Largest distance in u', v' from the color along the normal, up to 60 degrees."""
    shifts = zip(ANGLES_DEG, side.delta_uv, strict=True)
    return max(shift for angle, shift in shifts if angle <= 60.0 and shift is not None)


def test_there_is_a_case_of_every_kind() -> None:
    assert {path.stem for path in CASES} >= KINDS


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_case_runs_without_stray_warning_and_adds_up(path: Path) -> None:
    outcome = budget_of(path.stem).to_dict()
    meant = MEANT_WARNINGS.get(path.stem, ())
    assert len(outcome["warnings"]) == len(meant)
    for part, warning in zip(meant, outcome["warnings"], strict=True):
        assert part in warning
    assert outcome["accuracy"]["energy_balance"] <= 1e-6
    assert outcome["accuracy"]["integration_error"] <= 1e-6
    for one in outcome["emitters"]:
        assert one["lost_share"] < 1e-3
        assert sum(one["destinations"].values()) == pytest.approx(1.0, abs=1e-6)
    for unit in outcome["chain"]:
        parts = [share for key, share in unit.items() if key != "unit"]
        assert sum(parts) == pytest.approx(1.0, abs=1e-6)
        assert min(parts) >= 0.0


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_angles_bring_no_stray_warning(path: Path) -> None:
    warnings = angular_of(path.stem).warnings
    meant = MEANT_WARNINGS.get(path.stem, ())
    assert len(warnings) == len(meant)
    for part, warning in zip(meant, warnings, strict=True):
        assert part in warning


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_own_optical_constants_say_where_they_come_from(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    local = tomllib.loads(text).get("materials", {})
    marked = {
        line.split("]")[0].removeprefix("[materials.")
        for line in text.splitlines()
        if line.startswith("[materials.") and ("# invented" in line or "# from memory" in line)
    }
    assert marked == set(local)
    assert "invented" in tomllib.loads(text)["title"]


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_the_guide_lists_every_case_with_its_numbers(path: Path) -> None:
    guide = (path.parents[1] / "docs" / "cases.md").read_text(encoding="utf-8")
    (row,) = [line for line in guide.splitlines() if f"(../cases/{path.name})" in line]
    cells = row.split("|")
    eqe, outcoupled, current_efficiency = (float(cell) for cell in cells[2:5])
    x, y = (float(part) for part in cells[5].split(","))
    side = brighter_side(angular_of(path.stem))
    assert current_efficiency == pytest.approx(side.current_efficiency_cd_A, abs=0.0501)
    assert (x, y) == pytest.approx((side.x_normal, side.y_normal), abs=0.000501)
    outcome = budget_of(path.stem)
    assert outcome.outcoupling_efficiency is not None
    assert eqe == pytest.approx(100 * outcome.external_quantum_efficiency, abs=0.0501)
    assert outcoupled == pytest.approx(100 * outcome.outcoupling_efficiency, abs=0.0501)


def test_purpose_comes_first() -> None:
    for path in CASES:
        head = path.read_text(encoding="utf-8").split("title =")[0]
        lines = [line for line in head.splitlines() if line]
        assert all(line.startswith("#") for line in lines), path
        assert "Lindenlicht" in lines[0], path
        assert any(line.startswith("# Purpose: ") for line in lines), path


def test_one_material_has_the_same_constants_in_every_case() -> None:
    seen: dict[str, object] = {}
    for path in CASES:
        for name, entry in tomllib.loads(path.read_text()).get("materials", {}).items():
            assert seen.setdefault(name, entry) == entry, (path, name)


def test_the_green_pixel_behaves_like_a_plain_bottom_emitter() -> None:
    """Common practice, no source: some 20 to 30 % leave a plain planar device, more with a lens."""
    case = case_called("green-bottom-pixel")
    plain = budget_of("green-bottom-pixel").to_dict()
    matched = optics.budget(case.replace("substrate.exit", "matched")).to_dict()
    assert 0.15 < plain["outcoupling_efficiency"] < 0.35
    assert plain["external_quantum_efficiency_top"] < 1e-6
    assert matched["external_quantum_efficiency_bottom"] == pytest.approx(
        plain["external_quantum_efficiency_matched"], abs=2e-6
    )


def test_nothing_leaves_through_the_opaque_backplane() -> None:
    """Either antinode of the cavity beats the place between them by far."""
    case = case_called("red-top-microcavity")
    first = budget_of("red-top-microcavity")
    assert first.external_quantum_efficiency_bottom < 1e-3
    assert first.outcoupling_efficiency is not None
    assert 0.34 < first.outcoupling_efficiency < 0.55  # published: 0.34 isotropic to 0.50 flat
    off = optics.budget(case.replace("layers.HTL.thickness_nm", 100.0))
    second = optics.budget(case.replace("layers.HTL.thickness_nm", 200.0))
    assert first.external_quantum_efficiency > 5.0 * off.external_quantum_efficiency
    assert second.external_quantum_efficiency > 5.0 * off.external_quantum_efficiency


def test_the_red_cavity_is_tuned_for_the_normal_and_not_for_photons() -> None:
    """A longer cavity lets more photons out, but most of them far from the normal."""
    case = case_called("red-top-microcavity")
    tuned = angular_of("red-top-microcavity").sides["top"]
    assert falls_from_the_normal(tuned)
    assert tuned.peak_nm_normal == pytest.approx(620.0, abs=6.0)
    assert tuned.fwhm_nm_normal is not None
    assert tuned.fwhm_nm_normal < 0.9 * 48.0  # narrower than the emitter by itself
    assert tuned.lambertian_ratio is not None
    assert tuned.lambertian_ratio < 0.8
    assert shift_to_60_deg(tuned) < 0.04
    longer = optics.angular(case.replace("layers.HTL.thickness_nm", 33.0), ANGLES_DEG)
    most = longer.sides["top"]
    assert most.external_quantum_efficiency > 1.05 * tuned.external_quantum_efficiency
    assert most.current_efficiency_cd_A < 0.75 * tuned.current_efficiency_cd_A
    assert not falls_from_the_normal(most)


@pytest.mark.parametrize(
    ("stem", "side", "peak_nm", "shift"),
    [
        ("blue-fluorescent-pixel", "bottom", 458.0, 0.02),
        ("silicon-microdisplay", "top", 525.0, 0.02),
        ("flexible-pet-barrier", "bottom", 588.0, 0.02),
    ],
)
def test_colored_pixels_are_brightest_along_the_normal(
    stem: str, side: str, peak_nm: float, shift: float
) -> None:
    """A shift of 0.004 is just seen, 0.02 tolerated (common practice, no source)."""
    seen = angular_of(stem).sides[side]
    assert falls_from_the_normal(seen)
    assert seen.peak_nm_normal == pytest.approx(peak_nm, abs=10.0)
    assert shift_to_60_deg(seen) < shift


def test_whites_are_white_along_the_normal() -> None:
    """Common practice, no source: 3000 to 5000 K, |Duv| to 0.0054, Ra of 80 for rooms to work in.

    Two emitters alone reach less, so the panel with them is asked for 75.
    """
    rendering = {"white-tandem": 80.0, "white-lighting-panel": 75.0}
    for stem, least in rendering.items():
        side = angular_of(stem).sides["bottom"]
        assert side.correlated_color_temperature_K is not None
        assert 3000.0 < side.correlated_color_temperature_K < 5000.0
        assert side.duv is not None
        assert abs(side.duv) < 0.0054
        assert side.color_rendering_index is not None
        assert side.color_rendering_index > least


def test_spin_statistics_scale_the_fluorescent_pixel() -> None:
    case = case_called("blue-fluorescent-pixel")
    (unit,) = budget_of("blue-fluorescent-pixel").chain
    assert unit["dark_excitons"] == pytest.approx(0.95 * 0.60)
    singlets = optics.budget(case.replace("emitters.blue.exciton_fraction", 0.25))
    assert singlets.external_quantum_efficiency == pytest.approx(
        budget_of("blue-fluorescent-pixel").external_quantum_efficiency * 0.25 / 0.40, rel=1e-12
    )


def test_silicon_swallows_what_passes_the_mirror() -> None:
    case = case_called("silicon-microdisplay")
    on_silicon = budget_of("silicon-microdisplay")
    assert on_silicon.external_quantum_efficiency_bottom == 0.0
    assert on_silicon.destinations["substrate"] == 0.0
    in_air = optics.budget(case.replace("surroundings.bottom", "air"))
    assert in_air.external_quantum_efficiency_bottom > 0.0


def test_shares_of_the_panel_sum_to_one_and_its_emitters_add_up() -> None:
    case = case_called("white-lighting-panel")
    assert sum(emitter.share for emitter in case.emitters) == pytest.approx(1.0)
    outcome = budget_of("white-lighting-panel")
    assert len(outcome.chain) == 1
    assert outcome.external_quantum_efficiency == pytest.approx(
        sum(one.external_quantum_efficiency for one in outcome.emitters), rel=1e-12
    )


def test_every_charge_passes_both_units_of_the_tandem() -> None:
    outcome = budget_of("white-tandem")
    assert [unit["unit"] for unit in outcome.chain] == ["yellow", "blue"]
    assert [unit["unbalanced"] for unit in outcome.chain] == pytest.approx([0.05, 0.10])
    lower = [one for one in case_called("white-tandem").emitters if one.unit == "yellow"]
    assert sum(one.share for one in lower) == pytest.approx(1.0)
    generated = sum(one.generated for one in outcome.emitters)
    assert generated > 1.0  # more photons than charges, which one unit cannot give


def test_more_light_leaves_into_water_than_into_air() -> None:
    case = case_called("transparent-porthole")
    wet = budget_of("transparent-porthole")
    dry = optics.budget(case.replace("surroundings.top", "air"))
    assert wet.external_quantum_efficiency_bottom > 0.05
    assert wet.external_quantum_efficiency_top > 1.2 * dry.external_quantum_efficiency_top


def test_water_gets_the_light_that_air_reflects() -> None:
    """Beyond 49 degrees in water the side in air reflects totally and returns the light."""
    wet = case_called("transparent-porthole")
    dry = wet.replace("surroundings.top", "air")
    into_water, into_air = (
        optics.angular(case, [0.0, 45.0, 52.0]).sides["top"].relative_luminance
        for case in (wet, dry)
    )
    assert None not in (*into_water, *into_air)
    assert (into_water[2] or 0.0) > 1.6 * (into_water[1] or 0.0)
    assert (into_air[2] or 0.0) < 1.1 * (into_air[1] or 0.0)
    bottom, top = (angular_of("transparent-porthole").sides[name] for name in ("bottom", "top"))
    assert bottom.current_efficiency_cd_A == pytest.approx(top.current_efficiency_cd_A, rel=0.2)


def test_the_polymer_is_birefringent_and_its_result_an_upper_bound() -> None:
    case = case_called("polymer-f8bt")
    ordinary, extraordinary = case.stack.permittivity(case.wavelength_nm)
    film = case.stack.film_index("polymer")
    assert (ordinary[:, film].real - extraordinary[:, film].real).min() > 0.1
    (warning,) = budget_of("polymer-f8bt").warnings
    assert "upper bound" in warning
