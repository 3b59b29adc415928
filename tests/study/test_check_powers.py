"""The check's own quadrature and fields against closed forms: who checks must be right too."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from optics.study.check_fields import Unsuitable, equivalents
from optics.study.check_powers import QUANTITIES, powers
from optics.study.check_resonances import resonances
from optics.study.check_rows import Place, compared
from optics.study.check_stack import Layers, Medium, Outside, admittance, normal

PUBLISHED = Path(__file__).parents[1] / "published"


def isotropic(index: complex, thickness_nm: float = np.inf) -> Medium:
    return Medium(complex(index) ** 2, complex(index) ** 2, thickness_nm)


def open_side(index: float) -> Outside:
    return Outside("open", isotropic(index), index, 0.0)


def stack(*films: Medium, emitter: int, bottom: float, top: float) -> Layers:
    return Layers(550.0, films, emitter, (open_side(bottom), open_side(top)))


def table(name: str) -> list[dict[str, str]]:
    lines = (PUBLISHED / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def test_lossless_guide_meets_its_closed_form() -> None:
    guide = stack(isotropic(1.8, 200.0), emitter=0, bottom=1.5, top=1.0)
    found = powers(guide, [50.0])
    assert found.failure == ""
    for row in table("dipole_lossless_slab.csv"):
        index = QUANTITIES.index(row["quantity"])
        expected = [float(row["vertical"]), float(row["horizontal"])]
        # the table has eight decimals
        assert found.budget[index, :, 0] == pytest.approx(expected, abs=1e-8)


def test_mode_indices_of_the_lossless_guide() -> None:
    guide = stack(isotropic(1.8, 200.0), emitter=0, bottom=1.5, top=1.0)
    places = sorted(
        mode.place.real
        for mode in resonances(guide, (0.0, 1.0, 1.5, 1.8, 3.6))
        if mode.place.real > 1.5
    )
    expected = sorted(float(r["mode_index"]) for r in table("dipole_lossless_slab_modes.csv"))
    assert places == pytest.approx(expected, abs=1e-8)


@pytest.mark.parametrize("row", table("dipole_touching_interface.csv"), ids=lambda row: row["n1"])
def test_dipole_at_an_interface_meets_published_values(row: dict[str, str]) -> None:
    n1, n2 = float(row["n1"]), float(row["n2"])
    touching = stack(isotropic(n1, 100.0), emitter=0, bottom=n1, top=n2)
    found = powers(touching, [100.0])
    rate = [float(row["F_perp"]), float(row["F_par"])]
    beyond = [float(row["fraction_perp"]), float(row["fraction_par"])]
    total, into_top = found.budget[0, :, 0], found.budget[QUANTITIES.index("air_top"), :, 0]
    assert total == pytest.approx(rate, abs=1e-8)
    assert into_top / total == pytest.approx(beyond, abs=1e-8)


@pytest.mark.parametrize("polarization", ["s", "p"])
@pytest.mark.parametrize("u", [0.0, 0.4, 0.9, 1.4, 1.9])
def test_equivalent_films_have_equal_phase_and_admittance(u: float, polarization: str) -> None:
    film = Medium(1.8**2 + 0j, 1.62**2 + 0j, 80.0)
    stand_in = equivalents([film], u, polarization)
    other = Medium(stand_in.eps[0], stand_in.eps[0], stand_in.thickness_nm[0])
    at = np.array([u], dtype=complex)
    phases = [normal(m, at, polarization)[0] * m.thickness_nm for m in (film, other)]
    sizes = [admittance(m, at, polarization)[0] for m in (film, other)]
    # Films do not care for the sign of kz: both may change it together.
    sign = np.sign((phases[1] / phases[0]).real)
    assert sign * phases[1] == pytest.approx(phases[0], rel=1e-12)
    assert sign * sizes[1] == pytest.approx(sizes[0], rel=1e-12)


def test_films_without_equivalent_are_refused() -> None:
    # 1 - 4 Y^2 u^2 < 0 needs eps_e > eps_o, near u^2 = eps_e / 2
    with pytest.raises(Unsuitable, match="no isotropic equivalent"):
        equivalents([Medium(1.62**2 + 0j, 1.85**2 + 0j, 80.0)], 1.85 / 2**0.5, "p")


@pytest.mark.parametrize(
    ("engine", "independent", "scale", "result"),
    [
        (1.0, 1.0 + 0.9e-6, 1.0, "pass"),
        (1.0, 1.0 + 1.1e-6, 1.0, "fail"),
        (1.0, 1.0 + 1.1e-6, 2.0, "pass"),
        (0.0, 0.0, 0.0, "pass"),
        (1e-30, 0.0, 0.0, "fail"),
        (float("nan"), 1.0, 1.0, "fail"),
        (1.0, float("nan"), 1.0, "fail"),
        (float("inf"), float("inf"), 1.0, "fail"),
    ],
)
def test_only_a_finite_difference_within_the_tolerance_passes(
    engine: float, independent: float, scale: float, result: str
) -> None:
    row = compared("power", "F", "by hand", Place("e"), engine, independent, scale, 1e-6)
    assert row.result == result
