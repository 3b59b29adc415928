"""Exponentials and angles of waves, written so that loops over them can vectorize.

A table lookup and a short series in what is left over; 1e-15 of unit size, which is what the
machine's own functions give for these arguments. They take most of the time that a half stack
takes, and the machine's own stop every loop that calls them from vectorizing.
"""

import math

import numpy as np

from optics.kernels.compiled import scalar

_BITS = 5
_FINE = 1 << _BITS  # parts of one decay constant
_LARGEST = 700.0  # 1e-304: beyond it a wave counts as decayed that far and no further
_COARSE_DECAY = np.exp(-np.arange(_LARGEST + 2.0))
_FINE_DECAY = np.exp(-np.arange(_FINE) / _FINE)

_PARTS = 64  # of a full turn
_PER_PART = _PARTS / (2.0 * math.pi)
_PART = 2.0 * math.pi / _PARTS
# The part in two pieces, the first short enough that a multiple of it is exact (Cody & Waite).
_PART_HIGH = float(np.float32(_PART))
_PART_LOW = (_PART - _PART_HIGH) + 2.4492935982947064e-16 / _PARTS  # 2 pi beyond double precision
_COS = np.cos(np.arange(_PARTS) * _PART)
_SIN = np.sin(np.arange(_PARTS) * _PART)


# 1 / n!
_C2, _C3, _C4, _C5, _C6, _C7, _C8 = (1.0 / math.factorial(n) for n in range(2, 9))


@scalar
def decay(x: float) -> float:
    """exp(-x) for x >= 0."""
    x = x if x < _LARGEST else _LARGEST  # whatever is no number never gets to the table
    i = np.int64(x * _FINE + 0.5)
    r = i * (1.0 / _FINE) - x
    series = 1.0 + r * (1.0 + r * (_C2 + r * (_C3 + r * (_C4 + r * (_C5 + r * _C6)))))
    return _COARSE_DECAY[i >> _BITS] * _FINE_DECAY[i & (_FINE - 1)] * series


@scalar
def turn(t: float) -> complex:
    """exp(i t) for real t up to about 1e6 in size."""
    step = math.floor(t * _PER_PART + 0.5)
    r = (t - step * _PART_HIGH) - step * _PART_LOW
    i = np.int64(step) & (_PARTS - 1)
    q = r * r
    s = r * (1.0 - q * (_C3 - q * (_C5 - q * _C7)))
    c = 1.0 - q * (_C2 - q * (_C4 - q * (_C6 - q * _C8)))
    return complex(_COS[i] * c - _SIN[i] * s, _SIN[i] * c + _COS[i] * s)


@scalar
def exp_i(z: complex) -> complex:
    """exp(i z) for Im z >= 0: the phase factor of every wave."""
    w = turn(z.real)
    e = decay(z.imag)
    return complex(e * w.real, e * w.imag)
