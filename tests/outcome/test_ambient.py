"""The device as seen from outside, against `tmm`, closed forms and the light budget's own light."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tmm  # type: ignore[import-untyped]
from angular_devices import driven, no_constants, semitransparent, without_slabs
from devices import case, pixel

import optics
from optics.device.errors import CaseError
from optics.outcome.ambient import ambient, daylight
from optics.outcome.angular import angular
from optics.outcome.color import observer_at
from optics.outcome.side_ambient import PARTS

NM = [455.0, 550.0, 640.0]
ANGLES = [0.0, 8.0, 41.0, 73.0, 88.0]


def lossy(document: dict[str, Any]) -> dict[str, Any]:
    """The emitter's own film absorbs, which its emission leaves out and ambient light does not."""
    document["materials"]["host"] = {"n": 1.80, "k": 0.02}
    return document


def bare(document: dict[str, Any], *films: dict[str, Any]) -> dict[str, Any]:
    """Other films, the first of which emits."""
    document["layers"] = list(films)
    document["emitters"][0]["layer"] = films[0]["name"]
    return document


DEVICES = {
    "glass below": lambda: lossy(driven(pixel())),
    "absorbing slabs": lambda: lossy(semitransparent()),
    "no slabs": lambda: lossy(without_slabs()),
}


def by_tmm(given: optics.Case, side: str, angle_deg: float, nm: float, pol: str) -> list[float]:
    """R, T, A of slabs and films; A layer by layer."""
    stack, at = given.stack, np.array([nm])
    n = [complex(index) for index in np.sqrt(stack.permittivity(at)[0][0])]
    d: list[float] = stack.thickness_nm.tolist()
    kind = ["c"] * len(n)
    for slab, below in ((stack.substrate, True), (stack.cover, False)):
        if slab is not None:
            index = complex(np.sqrt(slab.material.permittivity(at)[0][0]))
            place = 0 if below else len(n)
            n.insert(place, index)
            d.insert(place, slab.thickness_mm * 1e6)
            kind.insert(place, "i")
    outer = [complex(np.sqrt(one.permittivity(at)[0][0])) for one in (stack.bottom, stack.top)]
    n, d, kind = [outer[0], *n, outer[1]], [np.inf, *d, np.inf], ["i", *kind, "i"]
    if side == "top":
        n, d, kind = n[::-1], d[::-1], kind[::-1]
    found = tmm.inc_tmm(pol, n, d, kind, np.deg2rad(angle_deg), nm)
    # Of the layers in between, the slabs included.
    absorbed = sum(tmm.inc_absorp_in_each_layer(found)[1:-1])
    return [float(found["R"]), float(found["T"]), float(absorbed)]


@pytest.mark.parametrize("name", DEVICES)
@pytest.mark.parametrize("side", ["bottom", "top"])
def test_against_tmm_with_incoherent_slabs(name: str, side: str) -> None:
    given = case(DEVICES[name]())
    response = ambient(given, None, ANGLES, NM).sides[side]
    assert response is not None
    for w, nm in enumerate(NM):
        for i, angle in enumerate(ANGLES):
            for k, pol in enumerate("sp"):
                expected = by_tmm(given, side, angle, nm, pol)
                # Slab faces use Re n here and n + ik there: k = 1e-8 of the polymer.
                assert response.powers[w, k, i] == pytest.approx(expected, abs=1e-7)


def test_without_the_compiler_the_numbers_are_the_same() -> None:
    script = """
from angular_devices import semitransparent
from devices import case
from optics.outcome.ambient import ambient
sides = ambient(case(semitransparent()), None, [0, 60], [500.0, 600.0]).sides
print(*(repr(float(x)) for side in sides.values() for x in side.powers.ravel()))
"""
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parent)}
    runs = [
        subprocess.run(
            [sys.executable, "-c", script], env={**environment, **more}, check=True,
            capture_output=True, text=True,
        ).stdout.split()
        for more in ({}, {"NUMBA_DISABLE_JIT": "1"})
    ]  # fmt: skip
    compiled, plain = ([float(word) for word in words] for words in runs)
    assert len(plain) == 2 * 2 * 2 * 2 * 3
    assert compiled == pytest.approx(plain, rel=1e-12, abs=1e-14)


@pytest.mark.parametrize("exit_", ["planar", "matched"])
def test_everything_adds_up_to_one(exit_: str) -> None:
    result = ambient(case(lossy(semitransparent(exit_))), None, [0, 30, 60, 89, 90])
    assert result.energy_balance < 1e-12
    for side in result.sides.values():
        assert side is not None
        parts = [getattr(side, f"luminous_{part}_stack") for part in PARTS]
        assert np.sum(parts, axis=0) == pytest.approx(1.0, abs=1e-12)


def test_the_same_light_gets_through_either_way() -> None:
    document = lossy(semitransparent())
    del document["surroundings"]
    both = ambient(case(document), None, [0, 35, 70], NM).sides
    below, above = both["bottom"], both["top"]
    assert below is not None
    assert above is not None
    assert below.powers[..., 1] == pytest.approx(above.powers[..., 1], rel=1e-10)
    assert below.powers[..., 2].min() > 0.01


def test_absorbing_surroundings_have_no_outside_and_swallow_what_reaches_them() -> None:
    result = ambient(case(without_slabs("si")), None, [0, 50], NM)
    assert result.sides["bottom"] is None
    above = result.sides["top"]
    assert above is not None
    assert np.all(above.powers[..., 1] == 0.0)
    assert result.energy_balance < 1e-12
    assert result.to_dict(spectral=True)["sides"]["bottom"] is None
    assert np.isnan(result.to_dataset()["reflectance"].sel(side="bottom")).all()


def test_one_slab_between_two_airs_by_hand() -> None:
    """R of two incoherent faces is 2 r/(1 + r); films of the slab's own index do nothing."""
    document = bare(pixel(), {"name": "one", "material": "glass", "thickness_nm": 50})
    side = ambient(case(document), None, [0.0]).sides["bottom"]
    assert side is not None
    face = ((1.52 - 1.0) / (1.52 + 1.0)) ** 2
    assert side.luminous_reflectance[0] == pytest.approx(2 * face / (1 + face), rel=1e-12)
    assert side.luminous_transmittance[0] == pytest.approx((1 - face) / (1 + face), rel=1e-12)


def test_grazing_light_is_reflected_white() -> None:
    side = ambient(case(driven(pixel())), None, [90.0]).sides["bottom"]
    assert side is not None
    assert side.luminous_reflectance[0] == pytest.approx(1.0, rel=1e-12)
    # CIE 15 prints D65 as 0.31272, 0.32903; its sum at 5 nm and ours agree to 3e-5.
    assert (side.reflected_x[0], side.reflected_y[0]) == pytest.approx((0.31272, 0.32903), abs=3e-5)


def test_daylight_is_the_table_of_the_standard() -> None:
    # CIE 15, table T.1 (from memory): relative powers of D65.
    known = {400.0: 82.7549, 450.0: 117.008, 500.0: 109.354, 560.0: 100.0, 700.0: 71.6091}
    assert daylight(np.array(list(known))) == pytest.approx(list(known.values()), abs=1e-3)


def test_contrast_is_own_light_over_the_mirror_image() -> None:
    given = case(driven(semitransparent()))
    result, emitted = ambient(given, 300.0, ANGLES), angular(given, ANGLES)
    for name, side in result.sides.items():
        assert side is not None
        assert side.contrast_ratio is not None
        own = emitted.sides[name].luminance_cd_m2
        assert side.luminance_cd_m2 == own
        for place, light in enumerate(own or ()):
            glare = side.luminous_reflectance[place] * 300.0 / np.pi
            assert light is not None
            assert side.contrast_ratio[place] == pytest.approx(1.0 + light / glare, rel=1e-12)
    weaker = ambient(given, 30.0, ANGLES).to_dict()["sides"]["bottom"]
    strong = result.to_dict()["sides"]["bottom"]
    gain = [(one - 1.0) / (other - 1.0) for one, other in
            zip(weaker["contrast_ratio"], strong["contrast_ratio"], strict=True)]  # fmt: skip
    assert gain == pytest.approx([10.0] * len(ANGLES), rel=1e-9)


def test_filter_and_polarizer_are_passed_twice(tmp_path: Any) -> None:
    (tmp_path / "f.csv").write_text("wavelength_nm,transmittance\n400,0.5\n700,0.5\n")
    document = driven(semitransparent())
    document["sides"] = {
        "bottom": {"filter": str(tmp_path / "f.csv"), "polarizer_transmittance": 0.4}
    }
    result = ambient(case(document), 100.0, [0, 30])
    assert (result.wavelength_nm[0], result.wavelength_nm[-1]) == (400.0, 700.0)
    below, above = result.sides["bottom"], result.sides["top"]
    assert below is not None
    assert above is not None
    twice = np.array(below.luminous_reflectance) / below.luminous_reflectance_stack
    assert twice == pytest.approx(0.2**2, rel=1e-12)
    assert above.luminous_reflectance == above.luminous_reflectance_stack
    for side in (below, above):
        once = np.array(side.luminous_transmittance) / side.luminous_transmittance_stack
        assert once == pytest.approx(0.2, rel=1e-12)
    assert any("polarizer counts as a neutral factor" in line for line in result.warnings)
    with pytest.raises(CaseError, match=r"sides\.bottom\.filter: found a filter known from 400"):
        ambient(case(document), None, [0], [390, 500])


def test_wavelengths_that_leave_daylight_out_are_told() -> None:
    narrow = ambient(case(pixel()), None, [0], [500, 550, 600])
    nm = np.arange(380.0, 781.0, 5.0)  # the illuminant's own points
    seen = daylight(nm) * observer_at(nm)[:, 1]
    kept = (nm >= 500.0) & (nm <= 600.0)
    lost = 1.0 - np.trapezoid(seen[kept], nm[kept]) / np.trapezoid(seen, nm)
    # Trapezoids of 5 nm against those of 1 nm on curves 100 nm wide.
    assert narrow.lost_share == pytest.approx(lost, abs=1e-3)
    assert any("% of daylight" in line for line in narrow.warnings)
    wide = ambient(case(pixel()), None, [0])
    assert wide.lost_share < 1e-5
    assert not any("daylight" in line for line in wide.warnings)


def test_impossible_questions_are_told() -> None:
    given = case(pixel())
    with pytest.raises(CaseError, match=r"drive\.current_density_mA_cm2: found nothing"):
        ambient(given, 500.0)
    with pytest.raises(ValueError, match="illuminance: found 0; expected lux above 0") as caught:
        ambient(given, 0.0, [91.0], [500.0, 400.0])
    assert "angles: found 91" in str(caught.value)
    assert "wavelengths: found 500, 400; expected two or more" in str(caught.value)
    with pytest.raises(ValueError, match="expected visible ones"):
        ambient(given, None, [0], [900.0, 950.0])


def test_results_say_the_same_in_every_form() -> None:
    result = ambient(case(driven(pixel())), 500.0, [0, 60], [450, 550, 650])
    said = no_constants(json.dumps(result.to_dict(spectral=True)))
    side = said["sides"]["bottom"]
    assert said["schema"] == "outcouple.ambient/1"
    data = result.to_dataset()
    mean = data["reflectance"].mean("polarization").sel(side="bottom").to_numpy()
    assert side["reflectance"] == pytest.approx(mean, rel=1e-14)
    assert data["contrast_ratio"].sel(side="bottom").to_numpy() == pytest.approx(
        side["contrast_ratio"]
    )
    frame = result.to_frame(spectral=True)
    row = frame[
        (frame["side"] == "bottom") & (frame["quantity"] == "absorptance")
        & (frame["angle_deg"] == 60.0) & (frame["wavelength_nm"] == 650.0)
    ]  # fmt: skip
    assert row["value"].tolist() == [side["absorptance"][1][2]]
    units = dict(zip(frame["quantity"], frame["unit"], strict=True))
    assert units["reflected_luminance_cd_m2"] == "cd m-2"
