"""What the reference model is given: a planar stack with one dipole, in units of 1/k0.

Shared by both literal routes (`reference_fields` and `reference_amplitudes`); it holds
no formula of the physics beyond the contract's definitions of the light lines.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class Film:
    """One film: in-plane and normal permittivity, thickness times k0."""

    ordinary: complex
    extraordinary: complex
    depth: float

    @property
    def largest_index(self) -> float:
        return max(cmath.sqrt(self.ordinary).real, cmath.sqrt(self.extraordinary).real)

    @property
    def absorbs(self) -> bool:
        return self.ordinary.imag != 0 or self.extraordinary.imag != 0

    @property
    def metallic(self) -> bool:
        return self.ordinary.real < 0 or self.extraordinary.real < 0


@dataclass(frozen=True, slots=True)
class Slab:
    """A thick incoherent slab: absorption exponent 4 pi k d / lambda and its outer face."""

    index: float
    exponent: float
    outside: float
    matched: bool

    @property
    def exit_line(self) -> float:
        return self.index if self.matched else self.outside


@dataclass(frozen=True, slots=True)
class Geometry:
    """Films from bottom to top, the emitter film already split at the dipole's plane.

    `below` and `above` run from the dipole's plane outward; both start with their part
    of the emitter film. `bottom` and `top` are the permittivities next to the films.
    """

    below: tuple[Film, ...]
    above: tuple[Film, ...]
    whole: tuple[Film, ...]
    emitter: Film
    bottom: complex
    top: complex
    substrate: Slab | None
    cover: Slab | None

    @property
    def outer_lines(self) -> list[float]:
        """Light lines of the outer media that are transparent (at least one is)."""
        return [e.real**0.5 for e in (self.bottom, self.top) if complex(e).imag == 0]

    @property
    def largest_outer_line(self) -> float:
        return max(self.outer_lines)

    @property
    def exit_line(self) -> float:
        """The largest exit light line of both sides."""
        lines = [slab.exit_line for slab in (self.substrate, self.cover) if slab]
        for eps, slab in ((self.bottom, self.substrate), (self.top, self.cover)):
            if slab is None and complex(eps).imag == 0:
                lines.append(eps.real**0.5)
        return max(lines)

    @property
    def present(self) -> list[Film]:
        """Films that are there: one of zero thickness is as good as absent."""
        return [self.emitter, *(f for f in self.whole if f.depth > 0)]

    @property
    def near_field_line(self) -> float:
        outer = [cmath.sqrt(e).real for e in (self.bottom, self.top)]
        return 2 * max([f.largest_index for f in self.present] + outer)

    @property
    def metallic(self) -> bool:
        """Whether surface plasmons are counted: some Re eps < 0."""
        outer = (complex(self.bottom), complex(self.top))
        return any(f.metallic for f in self.present) or any(e.real < 0 for e in outer)

    @property
    def lossless(self) -> bool:
        outer = (complex(self.bottom), complex(self.top))
        return not any(f.absorbs for f in self.whole) and all(e.imag == 0 for e in outer)

    @property
    def bulk_rates(self) -> tuple[float, float]:
        """Rates (vertical, horizontal) in the unbounded emitter medium; vacuum is 1."""
        n_o = math.sqrt(self.emitter.ordinary.real)
        return n_o, (3 * n_o**2 + self.emitter.extraordinary.real) / (4 * n_o)

    def matched(self, side: str) -> Geometry | None:
        """The same with that side's slab matched; None where there is no slab."""
        slab = self.substrate if side == "bottom" else self.cover
        if slab is None:
            return None
        changed = replace(slab, matched=True)
        if side == "bottom":
            return replace(self, substrate=changed)
        return replace(self, cover=changed)

    def distance_to_loss(self) -> float | None:
        """Decay length from the dipole to the nearest matter that absorbs or has Re eps < 0.

        The field decays as exp(-kappa distance) at large kappa, with sqrt(eps_o/eps_e) of
        each film counted in. None without such matter: no mode, hence no dissipation, then
        lies beyond the largest index.
        """
        distances = []
        for films, outer in ((self.below, self.bottom), (self.above, self.top)):
            depth = 0.0
            outermost = Film(complex(outer), complex(outer), 0.0)
            for film in (*films, outermost):
                if film.absorbs or film.metallic:
                    distances.append(depth)
                    break
                depth += film.depth * math.sqrt(film.ordinary.real / film.extraordinary.real)
        if distances and min(distances) <= 0:
            raise ValueError("the dipole touches an absorber: its dissipation has no bound")
        return min(distances, default=None)

    def reach(self) -> float:
        """In-plane wavenumber (k0 = 1) beyond which nothing above e^-80 is dissipated."""
        clear = [f.largest_index for f in self.whole if not f.absorbs]
        guides = 1.05 * max([*clear, *self.outer_lines])
        distance = self.distance_to_loss()
        return guides if distance is None else max(guides, 40.0 / distance)


def geometry(
    wavelength_nm: float,
    films: list[tuple[complex, complex, float]],
    bottom: complex,
    top: complex,
    emitter: int,
    z_nm: float,
    substrate: dict[str, object] | None,
    cover: dict[str, object] | None,
) -> Geometry:
    """Scale lengths by k0, clear the emitter film's k (index kept) and split it at z."""
    k0 = 2 * math.pi / wavelength_nm
    listed = [Film(complex(o), complex(e), d * k0) for o, e, d in films]
    own = listed[emitter]
    if not 0 <= z_nm * k0 <= own.depth:
        raise ValueError(f"z_nm = {z_nm} lies outside the emitter film (0 to {films[emitter][2]})")
    clear = Film(_lossless(own.ordinary), _lossless(own.extraordinary), own.depth)
    listed[emitter] = clear
    low = replace(clear, depth=z_nm * k0)
    high = replace(clear, depth=clear.depth - z_nm * k0)
    return Geometry(
        below=(low, *reversed(listed[:emitter])),
        above=(high, *listed[emitter + 1 :]),
        whole=tuple(listed),
        emitter=clear,
        bottom=complex(bottom),
        top=complex(top),
        substrate=_slab(substrate, complex(bottom), k0),
        cover=_slab(cover, complex(top), k0),
    )


def _lossless(eps: complex) -> complex:
    return complex(eps) if eps.imag == 0 else complex(cmath.sqrt(eps).real ** 2)


def _slab(given: dict[str, object] | None, eps: complex, k0: float) -> Slab | None:
    if given is None:
        return None
    wanted = {"k", "thickness_nm", "exit", "outside_n"}
    if set(given) != wanted or given["exit"] not in ("planar", "matched"):
        raise ValueError(f"a slab needs exactly {sorted(wanted)}, found {given}")
    exponent = 2 * k0 * float(given["k"]) * float(given["thickness_nm"])  # type: ignore[arg-type]
    outside = float(given["outside_n"])  # type: ignore[arg-type]
    return Slab(eps.real**0.5, exponent, outside, given["exit"] == "matched")
