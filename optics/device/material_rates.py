"""How the permittivity of a material changes with the numbers of its model."""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from functools import partial
from typing import NamedTuple

import numpy as np

from optics.device import laws
from optics.device.constants import HC_EV_NM
from optics.device.materials import ComplexArray, FloatArray, Law, Material

#: Rates of the ordinary and the extraordinary permittivity.
EpsilonRates = tuple[ComplexArray, ComplexArray]


class MaterialNumber(NamedTuple):
    """A number of a local material, such as ``cauchy_nm.0`` of ``materials.htl.cauchy_nm.0``."""

    name: str
    keys: tuple[str, ...]


def permittivity_rates(
    material: Material,
    number: MaterialNumber,
    local_names: Collection[str],
    wavelength_nm: FloatArray,
) -> EpsilonRates | None:
    """Rates of change of a film's or slab's permittivity with a number of a local material.

    Parameters
    ----------
    material : Material
        As the stack holds it.
    number : MaterialNumber
        The material itself, or one that it is a mixture or a pair of.
    local_names : collection of str
        The case's own materials, which stand before bundled ones of the same name.
    wavelength_nm : array, shape (n,)

    Returns
    -------
    (ordinary, extraordinary) : complex arrays, shape (n,), or None
        Per unit of the number; None where the material does not depend on it.
    """
    if material.name not in local_names:
        return None  # bundled, and what it is made of too
    if material.name == number.name:
        return _own_rates(material.law, number.keys, wavelength_nm)
    inner = partial(
        permittivity_rates, number=number, local_names=local_names, wavelength_nm=wavelength_nm
    )
    if isinstance(material.law, laws.Pair):
        return _pair_rates(material.law, inner, wavelength_nm)
    if isinstance(material.law, laws.Mix):
        return _mix_rates(material.law, inner, wavelength_nm)
    return None


def index_rates(ordinary: ComplexArray, extraordinary: ComplexArray, step: complex) -> EpsilonRates:
    """Rates of both permittivities when both indices change by `step`: d eps = 2 (n + ik) d n."""
    return _by_index(ordinary, step), _by_index(extraordinary, step)


def _by_index(epsilon: ComplexArray, step: complex | FloatArray) -> ComplexArray:
    return np.asarray(2.0 * np.sqrt(epsilon) * step, dtype=np.complex128)


def has_rates(material: Material, keys: Sequence[str]) -> bool:
    """Whether the rates of a number of a material's own model are known."""
    return _slope_of(material.law, tuple(keys)) is not None


def _own_rates(law: Law, keys: tuple[str, ...], wavelength_nm: FloatArray) -> EpsilonRates | None:
    slope = _slope_of(law, keys)
    assert slope is not None, keys
    return slope(wavelength_nm)


_Slope = Callable[[FloatArray], tuple[ComplexArray, ComplexArray]]


def _slope_of(law: Law, keys: tuple[str, ...]) -> _Slope | None:
    """Derivative of a law with respect to one of its numbers; None if it has none."""
    first, *rest = keys
    if isinstance(law, laws.Constant) and first in _CONSTANT:
        return partial(_constant, law, *_CONSTANT[first])
    if isinstance(law, laws.Cauchy) and first in ("cauchy_nm", "k"):
        return partial(_cauchy, law, int(rest[0]) if first == "cauchy_nm" else None)
    if isinstance(law, laws.Sellmeier) and first == "sellmeier":
        return partial(_sellmeier, law, rest[0], int(rest[1]))
    if isinstance(law, laws.LorentzDrude) and first == "lorentz_drude":
        return partial(_lorentz_drude, law, tuple(rest))
    return None


# Step of the ordinary and the extraordinary index for each number of a constant material.
_CONSTANT: dict[str, tuple[complex, complex]] = {
    "n": (1.0, 1.0),
    "k": (1.0j, 1.0j),
    "n_ordinary": (1.0, 0.0),
    "n_extraordinary": (0.0, 1.0),
    "k_ordinary": (1.0j, 0.0),
    "k_extraordinary": (0.0, 1.0j),
}


def _constant(
    law: laws.Constant, ordinary: complex, extraordinary: complex, wavelength_nm: FloatArray
) -> EpsilonRates:
    eps_o, eps_e = law(wavelength_nm)
    return _by_index(eps_o, ordinary), _by_index(eps_e, extraordinary)


def _cauchy(law: laws.Cauchy, place: int | None, wavelength_nm: FloatArray) -> EpsilonRates:
    step = 1.0j if place is None else np.asarray(wavelength_nm ** (-2.0 * place))
    rate = _by_index(law(wavelength_nm)[0], step)
    return rate, rate


def _sellmeier(
    law: laws.Sellmeier, key: str, place: int, wavelength_nm: FloatArray
) -> EpsilonRates:
    squared_um2 = (wavelength_nm * 1e-3) ** 2
    above = squared_um2 - law.c_um2[place]
    rate = squared_um2 / above if key == "b" else law.b[place] * squared_um2 / above**2
    return rate.astype(np.complex128), rate.astype(np.complex128)


def _lorentz_drude(
    law: laws.LorentzDrude, keys: tuple[str, ...], wavelength_nm: FloatArray
) -> EpsilonRates:
    photon = (HC_EV_NM / wavelength_nm).astype(np.complex128)
    plasma2 = law.plasma_ev**2
    free = -plasma2 / (photon * (photon + 1j * law.gamma0_ev))  # per f0
    if keys[0] == "f0":
        rate = free
    elif keys[0] == "gamma0_eV":
        rate = -1j * law.f0 * free / (photon + 1j * law.gamma0_ev)
    elif keys[0] == "plasma_eV":
        rate = 2.0 / law.plasma_ev * (law(wavelength_nm)[0] - 1.0)
    else:
        f, gamma, omega = law.oscillators[int(keys[1])]
        bound = plasma2 / (omega**2 - photon**2 - 1j * photon * gamma)  # per f
        slopes = (
            bound,
            1j * photon * f * bound**2 / plasma2,
            -2.0 * omega * f * bound**2 / plasma2,
        )
        rate = slopes[int(keys[2])]
    return rate, rate


def _pair_rates(
    law: laws.Pair, inner: Callable[[Material], EpsilonRates | None], wavelength_nm: FloatArray
) -> EpsilonRates | None:
    ordinary, extraordinary = inner(law.ordinary), inner(law.extraordinary)
    if ordinary is None and extraordinary is None:
        return None
    nothing = np.zeros(wavelength_nm.shape, dtype=np.complex128)
    return (
        nothing if ordinary is None else ordinary[0],
        nothing if extraordinary is None else extraordinary[0],
    )


def _mix_rates(
    law: laws.Mix, inner: Callable[[Material], EpsilonRates | None], wavelength_nm: FloatArray
) -> EpsilonRates | None:
    """Chain rule through a mixture.

    Bruggeman's root obeys sum f (e_i - e)/(e_i + 2e) = 0, so that by the implicit function
    de/de_i = f_i e/(e_i + 2e)^2 over sum f_j e_j/(e_j + 2e)^2.
    """
    found = [inner(part) for part in law.components]
    if all(one is None for one in found):
        return None
    parts = np.stack([part.permittivity(wavelength_nm)[0] for part in law.components])
    fractions = law.fractions[:, None]
    if law.rule == "linear":
        shares = fractions * np.ones_like(parts)
    else:
        mixed = law(wavelength_nm)[0]
        each = fractions / (parts + 2.0 * mixed) ** 2
        shares = each * mixed / (each * parts).sum(axis=0)
    rate = np.zeros(wavelength_nm.shape, dtype=np.complex128)
    for share, one in zip(shares, found, strict=True):
        if one is not None:
            rate += share * one[0]
    return rate, rate
