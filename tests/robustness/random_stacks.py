"""Random stacks that a device could be: every number is invented, the metals are tabulated.

A family is a kind of stack that is hard for a reason of its own; `FAMILIES` gives how many of
each make up the suite. Stack number i of a family is always the same one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache
from typing import Any

import numpy as np
from numpy.random import Generator, default_rng
from stacks import Film, Slab, slab

from optics.device import catalogue
from optics.device.materials import Material

SEED = 20261201
AGAINST_LITERAL = 6  # stacks of each family that the literal model repeats
CLOSEST_NM = 0.5  # the contract's closest approach to an absorber
METALS = ("ag-yang", "ag-mcpeak", "al-rakic", "al-mcpeak", "au-olmon", "mg-palm", "ca-mathewson")


@dataclass(frozen=True, slots=True)
class RandomStack:
    """A stack in the terms of the literal model; `z_nm` is the first of `positions_nm`."""

    name: str
    wavelength_nm: float
    films: list[Film]
    bottom: complex
    top: complex
    emitter: int
    positions_nm: list[float]
    substrate: Slab | None = None
    cover: Slab | None = None

    @property
    def z_nm(self) -> float:
        return self.positions_nm[0]

    def given(self) -> dict[str, Any]:
        """Arguments of the literal model."""
        names = ("wavelength_nm", "films", "bottom", "top", "emitter", "z_nm", "substrate", "cover")
        return {name: getattr(self, name) for name in names}


@cache
def _table(name: str) -> Material:
    return catalogue.load(name)


def metal_eps(rng: Generator, nm: float) -> complex:
    """Permittivity of a tabulated metal that covers the wavelength."""
    fitting = [name for name in METALS if _table(name).covers(nm)]
    return complex(_table(str(rng.choice(fitting))).permittivity(np.array([nm]))[0][0])


def log_uniform(rng: Generator, low: float, high: float) -> float:
    return float(np.exp(rng.uniform(np.log(low), np.log(high))))


def chance(rng: Generator, share: float) -> bool:
    return bool(rng.random() < share)


def dielectric(rng: Generator, d_nm: float, lossy: float = 0.4, uniaxial: float = 0.2) -> Film:
    """Film of index 1.3 to 2.4, with probabilities of loss and of birefringence."""

    def loss() -> float:
        return log_uniform(rng, 1e-6, 0.5) if chance(rng, lossy) else 0.0

    n_o = complex(rng.uniform(1.3, 2.4), loss())
    if not chance(rng, uniaxial):
        return n_o**2, n_o**2, d_nm
    n_e = complex(n_o.real + rng.uniform(-0.25, 0.25), loss())
    return n_o**2, n_e**2, d_nm


def metal_film(rng: Generator, nm: float, d_nm: float) -> Film:
    eps = metal_eps(rng, nm)
    return eps, eps, d_nm


def some_film(rng: Generator, nm: float, metallic: float = 0.2) -> Film:
    if chance(rng, metallic):
        return metal_film(rng, nm, log_uniform(rng, 3, 200))
    return dielectric(rng, log_uniform(rng, 3, 300))


def emitter_film(rng: Generator, d_nm: float | None = None) -> Film:
    return dielectric(rng, log_uniform(rng, 5, 120) if d_nm is None else d_nm, lossy=0.1)


def some_slab(rng: Generator) -> Slab | None:
    if chance(rng, 0.3):
        return None
    k = log_uniform(rng, 1e-9, 1e-6) if chance(rng, 0.5) else 0.0
    outside = float(rng.choice([1.0, 1.0, 1.33]))
    return slab(str(rng.choice(["planar", "matched"])), k, rng.uniform(0.1, 2.0), outside)


def _outer(rng: Generator, given: Slab | None) -> complex:
    """Permittivity next to the films: the slab's, or the surroundings'."""
    index = rng.uniform(1.34, 2.1) if given else float(rng.choice([1.0, 1.0, 1.33, 1.52]))
    return complex(index * index)


def _swallows(eps: complex) -> bool:
    return eps.imag > 0.0 or eps.real < 0.0


def _positions(rng: Generator, films: list[Film], emitter: int, ends: list[complex]) -> list[float]:
    """One to three dipoles, in any order, at least CLOSEST_NM from what absorbs."""
    around = [ends[0], *films, ends[1]]
    low, high = 0.0, films[emitter][2]
    if _touches_absorber(around, emitter + 1, -1):
        low = CLOSEST_NM
    if _touches_absorber(around, emitter + 1, 1):
        high -= CLOSEST_NM
    count = int(rng.choice([1, 1, 1, 2, 3]))
    return [float(z) for z in rng.uniform(low, high, count)]


def _touches_absorber(around: list[Any], at: int, step: int) -> bool:
    """Whether what touches the emitter film on one side (films without thickness too) absorbs."""
    at += step
    while 0 < at < len(around) - 1:
        if any(map(_swallows, around[at][:2])):
            return True
        if around[at][2] > 0.0:
            return False
        at += step
    return _swallows(complex(around[at]))


def assemble(
    rng: Generator,
    nm: float,
    films: list[Film],
    emitter: int,
    positions_nm: list[float] | None = None,
    outer: tuple[complex, complex] | None = None,
    slabs: tuple[Slab | None, Slab | None] | None = None,
) -> RandomStack:
    """Put outer media and dipoles around films; what is not given is drawn."""
    if slabs is None:
        slabs = (some_slab(rng), None if chance(rng, 0.6) else some_slab(rng))
    if outer is None:
        outer = (_outer(rng, slabs[0]), _outer(rng, slabs[1]))
    for given, eps in zip(slabs, outer, strict=True):
        if given is not None:
            given["outside_n"] = min(given["outside_n"], float(np.sqrt(eps).real))
    if positions_nm is None:
        positions_nm = _positions(rng, films, emitter, list(outer))
    return RandomStack("", nm, films, outer[0], outer[1], emitter, positions_nm, *slabs)


def _wavelength(rng: Generator) -> float:
    return float(rng.uniform(380, 780))


def anything(rng: Generator) -> RandomStack:
    """One to nine films of any kind in any order."""
    nm, count = _wavelength(rng), int(rng.integers(1, 10))
    films = [some_film(rng, nm) for _ in range(count)]
    emitter = int(rng.integers(count))
    films[emitter] = emitter_film(rng)
    return assemble(rng, nm, films, emitter)


def bottom_emitting(rng: Generator) -> RandomStack:
    """Conductor, transport films and emitter on glass under a metal mirror."""
    nm = _wavelength(rng)
    conductor = complex(rng.uniform(1.7, 2.1), log_uniform(rng, 1e-3, 0.05)) ** 2
    films: list[Film] = [(conductor, conductor, rng.uniform(50, 180))]
    films += [dielectric(rng, log_uniform(rng, 5, 200), 0.2) for _ in range(rng.integers(1, 4))]
    emitter = len(films)
    films.append(emitter_film(rng, rng.uniform(8, 60)))
    films += [dielectric(rng, log_uniform(rng, 5, 120), 0.2) for _ in range(rng.integers(1, 3))]
    films.append(metal_film(rng, nm, rng.uniform(60, 200)))
    substrate = slab(str(rng.choice(["planar", "matched"])), log_uniform(rng, 1e-9, 1e-7))
    index = rng.uniform(1.45, 1.85)
    return assemble(rng, nm, films, emitter, None, (complex(index**2), 1 + 0j), (substrate, None))


def cavity(rng: Generator) -> RandomStack:
    """Emitter between two metals, the upper one thin, up to 800 nm apart."""
    nm = _wavelength(rng)
    films = [metal_film(rng, nm, rng.uniform(30, 200)), dielectric(rng, log_uniform(rng, 5, 600))]
    films += [emitter_film(rng), dielectric(rng, log_uniform(rng, 5, 200))]
    films += [metal_film(rng, nm, rng.uniform(5, 40)), dielectric(rng, rng.uniform(20, 90))]
    return assemble(rng, nm, films, 2)


def gaps(rng: Generator) -> RandomStack:
    """Films of no or next to no thickness, the emitter film down to 1 nm between metals."""
    nm, count = _wavelength(rng), int(rng.integers(3, 8))
    films = [some_film(rng, nm, 0.4) for _ in range(count)]
    emitter = int(rng.integers(1, count - 1))
    films[emitter] = emitter_film(rng, log_uniform(rng, 1.2, 20))
    for i in range(count):
        if i != emitter and chance(rng, 0.4):
            thin = float(rng.choice([0.0, 0.0, 1e-9, 1e-4, 0.1, 1.0]))
            films[i] = (*films[i][:2], thin)
    return assemble(rng, nm, films, emitter)


def resonance(rng: Generator) -> RandomStack:
    """Thin metal whose permittivity is near minus its neighbors': modes may run backward."""
    nm, n = rng.uniform(330, 420), rng.uniform(1.5, 2.5)
    eps = complex(-(n**2) * rng.uniform(0.5, 2.0), log_uniform(rng, 0.05, 1.0))
    films = [dielectric(rng, rng.uniform(5, 60), 0.2), emitter_film(rng, rng.uniform(10, 60))]
    films += [(eps, eps, rng.uniform(5, 40)), (complex(n**2), complex(n**2), rng.uniform(10, 80))]
    return assemble(rng, nm, films, 1)


def thick(rng: Generator) -> RandomStack:
    """A film of 2 to 10 um in any place, among others or as the emitter's own."""
    nm, count = _wavelength(rng), int(rng.integers(1, 6))
    films = [some_film(rng, nm) for _ in range(count)]
    emitter = int(rng.integers(count))
    films[emitter] = emitter_film(rng)
    at = int(rng.integers(count))
    lossy = 0.0 if at == emitter else 0.5
    films[at] = dielectric(rng, float(rng.choice([2000.0, 5000.0, 10000.0])), lossy)
    return assemble(rng, nm, films, emitter)


def equal_indices(rng: Generator) -> RandomStack:
    """Films, emitter and outer media of two or three indices only, exactly equal."""
    nm, count = _wavelength(rng), int(rng.integers(1, 7))
    palette = [1.5, float(rng.choice([1.5, 1.7, 1.9])), 1.0]
    films: list[Film] = []
    for _ in range(count):
        eps = complex(float(rng.choice(palette[:2])) ** 2)
        films.append((eps, eps, float(rng.choice([20.0, 50.0, 50.0, 100.0, 400.0]))))
    emitter = int(rng.integers(count))
    if chance(rng, 0.5):
        films.append(metal_film(rng, nm, 80.0))
    outer = (complex(float(rng.choice(palette)) ** 2), complex(float(rng.choice(palette)) ** 2))
    slabs = [slab(str(rng.choice(["planar", "matched"]))) if chance(rng, 0.5) else None
             for _ in range(2)]  # fmt: skip
    return assemble(rng, nm, films, emitter, None, outer, (slabs[0], slabs[1]))


def beside_metal(rng: Generator) -> RandomStack:
    """Dipole half a nanometer from a metal."""
    nm, count = _wavelength(rng), int(rng.integers(2, 7))
    films = [some_film(rng, nm) for _ in range(count)]
    emitter = int(rng.integers(count - 1))
    films[emitter] = emitter_film(rng)
    films[emitter + 1] = metal_film(rng, nm, log_uniform(rng, 5, 200))
    at = films[emitter][2] - CLOSEST_NM
    return assemble(rng, nm, films, emitter, [at, 0.5 * films[emitter][2]])


def outermost(rng: Generator) -> RandomStack:
    """Emitter in the first or the last film, or the only one; a dipole on the outer face too."""
    nm, count = _wavelength(rng), int(rng.integers(1, 6))
    films = [some_film(rng, nm, 0.1) for _ in range(count)]
    emitter = 0 if chance(rng, 0.5) else count - 1
    films[emitter] = emitter_film(rng)
    made = assemble(rng, nm, films, emitter)
    if chance(rng, 0.5):
        return made
    face = 0.0 if emitter == 0 else films[emitter][2]
    return replace(made, positions_nm=[face, *made.positions_nm])


def _soaking(rng: Generator, nm: float) -> complex:
    """Permittivity of surroundings like silicon, weakly absorbing, or metallic."""
    kind = rng.integers(3)
    if kind == 0:
        return complex(rng.uniform(3.7, 5.5), log_uniform(rng, 1e-3, 0.3)) ** 2
    if kind == 1:
        return complex(rng.uniform(1.3, 2.2), log_uniform(rng, 1e-6, 0.5)) ** 2
    return metal_eps(rng, nm)


def _against(rng: Generator, absorbing_above: bool, other: Slab | None) -> RandomStack:
    """Absorbing surroundings on one side, another slab or none on the other."""
    nm, count = _wavelength(rng), int(rng.integers(1, 7))
    films = [some_film(rng, nm) for _ in range(count)]
    emitter = int(rng.integers(count))
    films[emitter] = emitter_film(rng)
    soaks, clear = _soaking(rng, nm), _outer(rng, other)
    if absorbing_above:
        return assemble(rng, nm, films, emitter, None, (clear, soaks), (other, None))
    return assemble(rng, nm, films, emitter, None, (soaks, clear), (None, other))


def absorber_below(rng: Generator) -> RandomStack:
    """Absorbing surroundings below, any slab above."""
    return _against(rng, False, some_slab(rng))


def absorber_above(rng: Generator) -> RandomStack:
    """Absorbing surroundings above, any slab below."""
    return _against(rng, True, some_slab(rng))


FAMILIES: dict[Callable[[Generator], RandomStack], int] = {
    anything: 2940,
    bottom_emitting: 1500,
    cavity: 1000,
    gaps: 1000,
    resonance: 60,
    thick: 500,
    equal_indices: 500,
    beside_metal: 1000,
    outermost: 500,
    absorber_below: 500,
    absorber_above: 500,
}


def random_stack(family: Callable[[Generator], RandomStack], number: int) -> RandomStack:
    """Stack of that number, the same in every run."""
    made = family(default_rng([SEED, *family.__name__.encode(), number]))
    return replace(made, name=f"{family.__name__}-{number}")


def mirrored(stack: RandomStack) -> RandomStack:
    """The same stack upside down."""
    own_nm = stack.films[stack.emitter][2]
    return replace(
        stack,
        films=stack.films[::-1],
        bottom=stack.top,
        top=stack.bottom,
        emitter=len(stack.films) - 1 - stack.emitter,
        positions_nm=[own_nm - z for z in stack.positions_nm],
        substrate=stack.cover,
        cover=stack.substrate,
    )
