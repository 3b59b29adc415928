"""Constructors for every kind of material a case file can describe.

Each refuses numbers that no material can have with a `CaseError` that lists all of them.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import get_args

import numpy as np

from optics.device import laws
from optics.device.errors import CaseError, Fault, nearest
from optics.device.laws import MixRule
from optics.device.materials import (
    FloatArray,
    Material,
    TableUse,
    all_tables,
    common_range_nm,
    span_text,
)
from optics.device.tables import IndexTable

# Volume fractions are typed as decimals; their sum may miss 1 by rounding only.
FRACTION_SUM_SLACK = 1e-9


def constant(name: str, n: float, k: float = 0.0) -> Material:
    """Make a material of the same n + ik at every wavelength.

    Raises
    ------
    CaseError
        When n or k is negative or not finite, or both are zero.
    """
    checks = _Checks(name)
    checks.index("n", n, "k", k)
    checks.settle()
    return Material(name, _constant_law(complex(n, k), complex(n, k)))


def birefringent(
    name: str,
    n_ordinary: float,
    n_extraordinary: float,
    k_ordinary: float = 0.0,
    k_extraordinary: float = 0.0,
) -> Material:
    """Make a uniaxial material of constant indices, optic axis along the film's normal.

    Raises
    ------
    CaseError
        When an index is negative or not finite, or n and k are both zero.
    """
    checks = _Checks(name)
    checks.index("n_ordinary", n_ordinary, "k_ordinary", k_ordinary)
    checks.index("n_extraordinary", n_extraordinary, "k_extraordinary", k_extraordinary)
    checks.settle()
    law = _constant_law(complex(n_ordinary, k_ordinary), complex(n_extraordinary, k_extraordinary))
    return Material(name, law, isotropic=False)


def tabulated(name: str, table: IndexTable, table_name: str | None = None) -> Material:
    """Make a material from a table: linear in n and in k between its points, never beyond.

    Parameters
    ----------
    name : str
        Of the material.
    table : IndexTable
        From `read_index_table`.
    table_name : str, optional
        What results call the table; the file name when left out.
    """
    use = TableUse(
        name=table_name or table.path.name,
        source=table.header.get("source", ""),
        range_nm=(float(table.wavelength_nm[0]), float(table.wavelength_nm[-1])),
        sha256=table.sha256,
    )
    law = laws.Tabulated(table.wavelength_nm, table.n, table.k)
    return Material(name, law, range_nm=use.range_nm, tables=(use,))


def pair(name: str, ordinary: Material, extraordinary: Material) -> Material:
    """Make a uniaxial material from two isotropic ones, optic axis along the film's normal.

    Raises
    ------
    CaseError
        When one of them is birefringent or their wavelengths do not overlap.
    """
    checks = _Checks(name)
    checks.isotropic("ordinary", ordinary)
    checks.isotropic("extraordinary", extraordinary)
    parts = (ordinary, extraordinary)
    checks.overlap("ordinary, extraordinary", parts)
    checks.settle()
    law = laws.Pair(ordinary, extraordinary)
    return Material(name, law, False, common_range_nm(parts), all_tables(parts))


def cauchy(name: str, cauchy_nm: Sequence[float], k: float = 0.0) -> Material:
    """Make a material of index A + B/λ² (+ C/λ⁴), λ in nm, with a constant k.

    Raises
    ------
    CaseError
        When there are not two or three finite coefficients, or k is negative.
    """
    checks = _Checks(name)
    checks.finite_list("cauchy_nm", cauchy_nm)
    if len(cauchy_nm) not in (2, 3):
        checks.add("cauchy_nm", f"{len(cauchy_nm)} coefficients", "2 or 3: A, B and optionally C")
    checks.at_least_zero("k", k)
    checks.settle()
    return Material(name, laws.Cauchy(tuple(float(value) for value in cauchy_nm), float(k)))


def sellmeier(name: str, b: Sequence[float], c_um2: Sequence[float]) -> Material:
    """Make a lossless material of n² = 1 + Σ b λ²/(λ² - c), λ in µm.

    Wavelengths on a resonance or with n² ≤ 0 are refused when they are asked for.

    Raises
    ------
    CaseError
        When b and c differ in length, are empty or not finite, or a c is negative.
    """
    checks = _Checks(name)
    checks.finite_list("sellmeier.b", b)
    checks.finite_list("sellmeier.c_um2", c_um2)
    if len(b) != len(c_um2) or not b:
        checks.add(
            "sellmeier",
            f"{len(b)} values of b and {len(c_um2)} of c_um2",
            "as many of one as of the other, at least one",
        )
    for position, value in enumerate(c_um2):
        checks.at_least_zero(f"sellmeier.c_um2[{position}]", value)
    checks.settle()
    return Material(name, laws.Sellmeier(_floats(b), _floats(c_um2)))


def lorentz_drude(
    name: str,
    plasma_eV: float,
    f0: float,
    gamma0_eV: float,
    oscillators: Sequence[Sequence[float]],
) -> Material:
    """Make a metal of ε = 1 - f0 ωp²/(ω(ω + iΓ0)) + Σ f ωp²/(ω_j² - ω² - iωΓ).

    Form and sign of A. D. Rakić et al., Appl. Opt. 37, 5271 (1998), for exp(-iωt).

    Parameters
    ----------
    plasma_eV : float
        ωp, eV.
    f0, gamma0_eV : float
        Strength and damping (eV) of the free electrons.
    oscillators : sequence of (f, Γ, ω_j)
        Strength, damping and resonance of the bound ones, the last two in eV. May be empty.

    Raises
    ------
    CaseError
        When a number is negative or not finite, or an oscillator is not three numbers.
    """
    checks = _Checks(name)
    checks.at_least_zero("lorentz_drude.plasma_eV", plasma_eV)
    checks.at_least_zero("lorentz_drude.f0", f0)
    checks.at_least_zero("lorentz_drude.gamma0_eV", gamma0_eV)
    for position, oscillator in enumerate(oscillators):
        key = f"lorentz_drude.oscillators[{position}]"
        if len(oscillator) != 3:
            checks.add(key, f"{len(oscillator)} numbers", "three: f, Γ in eV, ω in eV")
            continue
        for part, value in zip(("f", "Γ", "ω"), oscillator, strict=True):
            checks.at_least_zero(f"{key} {part}", value)
    checks.settle()
    rows = tuple((float(f), float(gamma), float(omega)) for f, gamma, omega in oscillators)
    return Material(name, laws.LorentzDrude(float(plasma_eV), float(f0), float(gamma0_eV), rows))


def mix(
    name: str,
    components: Sequence[tuple[Material, float]],
    rule: MixRule = "bruggeman",
) -> Material:
    """Make a mixture of isotropic materials by volume fraction.

    Parameters
    ----------
    components : sequence of (Material, float)
        With their volume fractions, which sum to 1.
    rule : {"bruggeman", "linear"}
        Spherical inclusions on an equal footing, or the volume average of the permittivity.

    Raises
    ------
    CaseError
        When there is no component, one is birefringent, a fraction is out of 0 to 1, their sum
        is not 1, the wavelengths do not overlap, or the rule is unknown.
    """
    checks = _Checks(name)
    parts = tuple(material for material, _ in components)
    fractions = [float(fraction) for _, fraction in components]
    for part, fraction in zip(parts, fractions, strict=True):
        checks.isotropic(f"mix.{part.name}", part)
        if not 0.0 <= fraction <= 1.0:
            checks.add(f"mix.{part.name}", f"{fraction:g}", "a volume fraction from 0 to 1")
    if not parts:
        checks.add("mix", "nothing", "materials with their volume fractions")
    elif not abs(sum(fractions) - 1.0) <= FRACTION_SUM_SLACK:
        checks.add("mix", f"fractions that sum to {sum(fractions):.10g}", "a sum of 1")
    if parts:
        checks.overlap("mix", parts)
    if rule not in laws.MIX_RULES:
        near = nearest(str(rule), get_args(MixRule))
        checks.add("rule", repr(rule), " or ".join(get_args(MixRule)), near)
    checks.settle()
    law = laws.Mix(parts, _floats(fractions), rule)
    return Material(name, law, True, common_range_nm(parts), all_tables(parts))


def _constant_law(ordinary: complex, extraordinary: complex) -> laws.Constant:
    # Products, because ** raises OverflowError where a product gives inf, which is refused later.
    return laws.Constant(ordinary * ordinary, extraordinary * extraordinary)


def _floats(values: Sequence[float]) -> FloatArray:
    array = np.array(values, dtype=np.float64)
    array.flags.writeable = False
    return array


class _Checks:
    """Collects what is wrong with the numbers of one material."""

    def __init__(self, name: str) -> None:
        self._where = f"material {name}"
        self._faults: list[Fault] = []

    def add(self, key: str, found: str, expected: str, near: str | None = None) -> None:
        self._faults.append(Fault(self._where, key, found, expected, near))

    def settle(self) -> None:
        if self._faults:
            raise CaseError(self._faults)

    def at_least_zero(self, key: str, value: float) -> None:
        if not (np.isfinite(value) and value >= 0.0):
            self.add(key, f"{value:g}", "a finite number, 0 or more")

    def index(self, n_key: str, n: float, k_key: str, k: float) -> None:
        self.at_least_zero(n_key, n)
        self.at_least_zero(k_key, k)
        if n == 0.0 and k == 0.0:
            self.add(n_key, "0 with k = 0", "a refractive index that is not zero altogether")

    def finite_list(self, key: str, values: Sequence[float]) -> None:
        for position, value in enumerate(values):
            if not np.isfinite(value):
                self.add(f"{key}[{position}]", f"{value:g}", "a finite number")

    def isotropic(self, key: str, part: Material) -> None:
        if not part.isotropic:
            self.add(key, f"{part.name}, which is birefringent", "an isotropic material")

    def overlap(self, key: str, parts: Sequence[Material]) -> None:
        low, high = common_range_nm(parts)
        if low > high:
            ranges = ", ".join(f"{part.name} with {span_text(part.range_nm)}" for part in parts)
            self.add(key, ranges, "materials with wavelengths in common")
