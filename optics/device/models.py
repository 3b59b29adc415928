"""Constructors for every kind of material a case file can describe."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

from optics.device.materials import Material
from optics.device.tables import IndexTable

MixRule = Literal["bruggeman", "linear"]


def constant(name: str, n: float, k: float = 0.0) -> Material:
    """Same n + ik at every wavelength."""
    raise NotImplementedError


def tabulated(name: str, table: IndexTable, table_name: str | None = None) -> Material:
    """Linear in n and in k between the points of a table."""
    raise NotImplementedError


def birefringent(
    name: str,
    n_ordinary: float,
    n_extraordinary: float,
    k_ordinary: float = 0.0,
    k_extraordinary: float = 0.0,
) -> Material:
    """Constant indices, optic axis along the film's normal."""
    raise NotImplementedError


def pair(name: str, ordinary: Material, extraordinary: Material) -> Material:
    """Birefringent material from two isotropic ones."""
    raise NotImplementedError


def cauchy(name: str, cauchy_nm: Sequence[float], k: float = 0.0) -> Material:
    """N = A + B/λ² (+ C/λ⁴), λ in nm."""
    raise NotImplementedError


def sellmeier(name: str, b: Sequence[float], c_um2: Sequence[float]) -> Material:
    """n² = 1 + Σ b λ²/(λ² − c), λ in µm."""
    raise NotImplementedError


def lorentz_drude(
    name: str,
    plasma_eV: float,
    f0: float,
    gamma0_eV: float,
    oscillators: Sequence[Sequence[float]],
) -> Material:
    """Rakić's form; oscillators as [f, Γ, ω], Γ and ω in eV."""
    raise NotImplementedError


def mix(
    name: str,
    components: Sequence[tuple[Material, float]],
    rule: MixRule = "bruggeman",
) -> Material:
    """Mixture of isotropic materials by volume fraction."""
    raise NotImplementedError
