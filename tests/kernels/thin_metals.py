"""Stacks with a thin metal near its plasma resonance; every number is invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from reference import Reference
from stacks import film, metal

#: A seed with a backward mode that an arc of depth k0 passes under, unseen by the balance.
TRAP = 1064
# Seeds of both kinds.
NEAR, FAR = 200, 60
# Re eps of the metal over the largest index squared, beyond which no backward mode is looked for;
# and one within.
BEYOND, WITHIN = 4.0, 1.5


def thin_metal(seed: int) -> Reference:
    """Re eps from -0.5 to -12, 5 to 40 nm, between films of n = 1.4 to 2.6; dipole 2 nm off."""
    draw = np.random.default_rng(seed)
    n = draw.uniform(1.4, 2.6, 3)
    eps = complex(-draw.uniform(0.5, 12.0), 10 ** draw.uniform(-2.5, 0.0))
    films = [
        film(n[0], draw.uniform(5, 80)),
        film(n[1], draw.uniform(20, 80)),
        metal(eps, draw.uniform(5, 40)),
        film(n[2], draw.uniform(5, 80)),
    ]
    below = bool(draw.integers(2))
    own = films[1 if below else 3]
    z_nm = draw.uniform(0.0, own[2] - 2.0) if below else draw.uniform(2.0, own[2])
    return Reference(450.0, films, draw.uniform(1.0, 2.0) ** 2, 1.0, 1 if below else 3, z_nm)


def far_metal(seed: int, factor: float) -> Reference:
    """As `thin_metal`, its Re eps that factor beyond the resonance with the densest medium."""
    stack = thin_metal(seed)
    largest = max(*(f[0].real for f in stack.films), stack.bottom.real)
    draw = np.random.default_rng(seed + 10_000)
    eps = complex(-factor * largest * draw.uniform(1.0, 1.1), stack.films[2][0].imag)
    films = [*stack.films[:2], metal(eps, stack.films[2][2]), stack.films[3]]
    return replace(stack, films=films, _made=[])
