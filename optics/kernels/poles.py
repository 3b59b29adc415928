"""Guided modes and plasmons of a stack: poles of the dipole's power in the in-plane wavevector.

Region. Bound modes with Re u > 0 and |Im u| <= max(2 n, Re u), n being the largest Re n of all
media. What lies beyond are overdamped waves of metal films, an endless series u = c - i m pi /
(k0 d), m = 1, 2, ..., each dead within a fraction of a film's thickness. How far to go in Re u:

- s: no bound mode has Re u^2 above the largest Re eps (from integral(|psi'|^2) =
  integral((eps - u^2) |psi|^2)), nor Im u^2 < 0.
- p: plasmons of thin films and gaps lie far out. There |r| of every interface bounds the
  reflection of all behind it, R <- (|r| + R e) / (1 - |r| R e) with e = |exp(2 i kz d)|; while
  no denominator reaches 0 no wave can close in on itself, and beyond that there is no mode. Lone
  interfaces have theirs at u^2 = eps1 eps2 / (eps1 + eps2).
"""

import math
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from optics.kernels import modal_search
from optics.kernels.arrays import Complexes, Floats, Integers
from optics.kernels.exits import ABSORBING
from optics.kernels.halfstack import P, S
from optics.kernels.modal_sheet import Films
from optics.kernels.problem import Problem

_OVERDAMPED = 2.0  # times the largest index
_FARTHEST = 1000.0  # u of a plasmon where no loss bounds it
_MARGIN = 0.02  # beyond the edge of the sheet of bound modes, relative or in radians
_BEYOND = 1.08  # radius of the region over that of the farthest mode in it
_SECTOR = 0.25 * math.pi + 0.15  # of w, where |Im u| <= Re u and u is beyond all indices
_NEAREST = 1e-8  # decay constants below it are none
_RESONANT = 1.3  # how far beyond a lone interface's plasmon to look
_REAL = 1e-10  # |Im s| of what is real in a lossless stack
_MOST_ZEROS = 4096
_OPAQUE = 40.0  # decay, as an exponent, beyond which a metal's back face is out of reach
_EDGE_SHIFTS = (0.0, 0.31, 0.57, 0.83)


class Modes(NamedTuple):
    """Modes of one stack at one wavelength, by falling Re u, s before p."""

    s: Complexes  # (n,) place on the sheet, see `modal_sheet`
    polarization: Integers  # (n,) S or P
    u: Complexes  # (n,) effective index, Re u >= 0
    decay: Complexes  # (n, 2) decay constants over k0 in the bottom and the top medium
    missing: int  # zeros counted but not found: 0 unless something went wrong


def films_of(problem: Problem, row: int) -> Films:
    """Gather a whole stack, bottom to top, at one wavelength (emitter film lossless)."""
    source, _, up, down = problem

    def joined(below: NDArray[np.generic], own: float, above: NDArray[np.generic]) -> Complexes:
        inner = [below[row, -2:0:-1], np.array([own]), above[row, 1:-1]]
        return np.ascontiguousarray(np.concatenate(inner))

    return Films(
        joined(down.eps_o, source.eps_o[row], up.eps_o).astype(np.complex128),
        joined(down.eps_e, source.eps_e[row], up.eps_e).astype(np.complex128),
        joined(down.kd, source.kd[row], up.kd).astype(np.float64),
        complex(down.eps_o[row, -1]),
        complex(up.eps_o[row, -1]),
    )


def outer_line(problem: Problem, row: int) -> float:
    """Largest outer light line at one wavelength."""
    open_sides = problem.sides.kind != ABSORBING
    return float(problem.sides.n_outer[row, open_sides].max())


def place_on_sheet(films: Films, s: Complexes) -> tuple[Complexes, Complexes]:
    """Decay constants (n, 2) and effective index (n,) at s; the mirror image with Re u >= 0."""
    w = np.exp(s)
    other = (films.top - films.bottom) / w
    decay = np.stack([0.5 * (w + other), 0.5 * (w - other)], axis=-1)
    nearer = np.abs(decay[:, 1]) < np.abs(decay[:, 0])
    square = np.where(nearer, films.top + decay[:, 1] ** 2, films.bottom + decay[:, 0] ** 2)
    index = np.sqrt(square)  # principal: Re >= 0
    return decay, index


def largest_index(films: Films) -> float:
    """Largest Re n among films and outer media."""
    outer = [films.bottom, films.top]
    return float(np.sqrt(np.concatenate([films.eps_o, films.eps_e, outer])).real.max())


def is_lossless(films: Films) -> bool:
    """Tell whether no medium absorbs."""
    media = np.concatenate([films.eps_o, films.eps_e, [films.bottom, films.top]])
    return not media.imag.any()


def without_hidden_depth(films: Films) -> Films:
    """Make metals no thicker than what any field can cross, which changes no mode.

    Otherwise the overdamped waves across their depth would be without number.
    """
    metal = (films.eps_o.real < 0.0) & (films.eps_e.real < 0.0)
    reach = np.minimum(np.sqrt(films.eps_o).imag, np.sqrt(films.eps_e).imag)
    with np.errstate(divide="ignore"):
        most = np.where(metal, _OPAQUE / reach, np.inf)
    return films._replace(kd=np.minimum(films.kd, most))


def bound_modes(films: Films) -> Modes:
    """Every bound mode of a stack in the region that the module describes.

    Parameters
    ----------
    films : Films
        Of `films_of`.

    Returns
    -------
    Modes
        Each polished until the last step is below 1e-11 of s, normally at rounding.
    """
    films = without_hidden_depth(films)
    found, missing = [], 0
    for pol in (S, P):
        zeros: Complexes = np.empty(0, dtype=np.complex128)
        for box in _boxes(films, pol):
            inside, lost = _zeros(films, pol, box)
            zeros, missing = np.concatenate([zeros, inside]), missing + lost
        if is_lossless(films):
            zeros = np.where(np.abs(zeros.imag) < _REAL, zeros.real, zeros)
        decay, index = place_on_sheet(films, zeros)
        limit = np.maximum(_OVERDAMPED * largest_index(films), index.real)
        # Between metals waves below cut-off have Re u = 0: they carry nothing anywhere.
        bound = (decay.real > 0.0).all(axis=1) & (np.abs(index.imag) <= limit)
        bound &= index.real > _NEAREST
        found.append((pol, zeros[bound], index[bound], decay[bound]))
    return _sorted(found, missing)


def leaky_modes(films: Films, largest_loss: float = 0.3) -> Modes:
    """Modes that lose power by radiation into an outer medium: Re g < 0 on one side or both.

    Only those whose radiation runs away from the stack on every side that it reaches, and that
    fade on their way, Im u > 0.

    Parameters
    ----------
    films : Films
    largest_loss : float
        Largest Im u; the list has no natural end.
    """
    every = zeros_on_all_sheets(films, largest_loss)
    # By tunneling only, Re g and Im u are rounding.
    clear = np.array([films.bottom, films.top]).imag == 0.0
    below = every.u.real[:, None] < _light_lines(films)
    leaks = (every.decay.real < 0.0) | (clear & below)
    kept = leaks.any(axis=1) & touch_axis(films, every) & (every.u.imag > -_REAL)
    found = chosen(every, kept)
    return found._replace(u=found.u.real + 1j * np.maximum(found.u.imag, 0.0))


def touch_axis(films: Films, modes: Modes) -> NDArray[np.bool_]:
    """Tell which zeros (n,) lie on the sheets that the real axis borders on next to them.

    There, waves run away from the stack on a side whose light line lies beyond u, and decay on
    one whose line lies below. A zero elsewhere may decay on a side beyond whose line it lies
    and yet draw its power in from there.
    """
    lines = _light_lines(films)
    radiates = modes.u.real[:, None] < lines
    fits = np.where(radiates, modes.decay.imag < 0.0, modes.decay.real > 0.0)
    return np.asarray(fits.all(axis=1))


def _light_lines(films: Films) -> Floats:
    """Index of the bottom and the top medium (2,); 0 of a metal."""
    outer = np.array([films.bottom, films.top])
    return np.where(outer.real > 0.0, np.sqrt(outer).real, 0.0)


def zeros_on_all_sheets(films: Films, largest_loss: float) -> Modes:
    """Zeros of the modes' function on all four sheets, with |Im u| up to a largest one."""
    films = without_hidden_depth(films)
    found, missing = [], 0
    reach = 2.2 * math.hypot(largest_index(films), largest_loss)
    delta = abs(films.top - films.bottom)
    near = max(delta / reach, _NEAREST)
    edges = np.linspace(-math.pi + 0.013, math.pi + 0.013, 5)
    for pol in (S, P):
        parts = []
        for low, high in pairwise(edges.tolist()):
            inside, lost = _zeros(films, pol, (math.log(near), math.log(reach), low, high))
            parts.append(inside)
            missing += lost
        zeros = np.concatenate(parts)
        decay, index = place_on_sheet(films, zeros)
        kept = (np.abs(index.imag) <= largest_loss) & (index.real > 0.0)
        found.append((pol, zeros[kept], index[kept], decay[kept]))
    return _sorted(found, missing)


def chosen(modes: Modes, kept: NDArray[np.bool_]) -> Modes:
    """Those for which kept (n,) is true."""
    return Modes(modes.s[kept], modes.polarization[kept], modes.u[kept], modes.decay[kept],
                 modes.missing)  # fmt: skip


def _sorted(found: list[tuple[int, Complexes, Complexes, Complexes]], missing: int) -> Modes:
    polarization = np.concatenate([np.full(s.size, pol) for pol, s, _, _ in found])
    s, index = (np.concatenate([part[k] for part in found]) for k in (1, 2))
    decay = np.concatenate([part[3] for part in found])
    order = np.lexsort((-index.real, polarization))
    return Modes(s[order], polarization[order], index[order], decay[order], missing)


def _zeros(films: Films, pol: int, box: tuple[float, ...]) -> tuple[Complexes, int]:
    """Zeros in a rectangle of s, and how many are missing.

    If a zero lies on the rectangle's edge the edge is moved a little outward.
    """
    left, right, low, high = box
    found = np.empty(_MOST_ZEROS, dtype=np.complex128)
    for shift in _EDGE_SHIFTS:
        by = shift * _MARGIN
        moved = np.array([left - by, right + by, low - by, high + by])
        done, total = modal_search.find_zeros(
            films, pol, moved, np.empty((modal_search.STACK + 2, 4)),
            np.empty(modal_search.STACK + 2), found,
        )  # fmt: skip
        if total >= 0 and done == total:
            return found[:done].copy(), 0
    return found[:done].copy(), max(total - done, 1)


def _boxes(films: Films, pol: int) -> list[tuple[float, float, float, float]]:
    """Rectangles (left, right, low, high) of s that cover the region."""
    n = largest_index(films)
    real_outside = films.bottom.imag == 0.0 and films.top.imag == 0.0
    overdamped = _OVERDAMPED * max(n, 1e-3)
    delta = abs(films.top - films.bottom)
    near = math.sqrt(delta) * (1.0 - _MARGIN)
    outside = max(abs(films.bottom), abs(films.top))

    def radius(u: float) -> float:
        return 2.0 * _BEYOND * math.sqrt(u * u + outside)

    far = radius(math.sqrt(2.0) * overdamped)
    if not real_outside:
        # Between the parallel cuts of both media the sheet reaches down to w = 0.
        near = min(near, delta / far)
    near = max(near, _NEAREST)
    media = np.concatenate([films.eps_o, films.eps_e, [films.bottom, films.top]])
    if is_lossless(films) and (pol == S or media.real.min() > 0.0):
        # A self-adjoint problem: every bound mode is real.
        return [(math.log(near), math.log(2.0 * _BEYOND * n), -0.2, 0.21)]
    edge = 0.5 * math.pi + _MARGIN
    low = -0.11 if pol == S and real_outside else -edge
    boxes = [(math.log(near), math.log(far), low, edge)]
    reach = radius(plasmon_reach(films)) if pol == P else 0.0
    if reach > far:
        boxes.append((math.log(far), math.log(reach), -_SECTOR, _SECTOR))
    return boxes


def plasmon_reach(films: Films) -> float:
    """Upper bound of |u| of p modes with |Im u| <= Re u."""
    thick = films.kd > 0.0
    eps_o = np.concatenate([[films.bottom], films.eps_o[thick], [films.top]])
    eps_e = np.concatenate([[films.bottom], films.eps_e[thick], [films.top]])
    n = largest_index(films)
    if eps_o.real.min() > 0.0 and eps_e.real.min() > 0.0:
        return 1.5 * float(np.sqrt(np.abs(np.concatenate([eps_o, eps_e]))).max())
    # At large u a uniaxial film acts as an isotropic one of other thickness.
    stretch = np.sqrt(eps_o / eps_e)
    stretch = np.where(stretch.real < 0.0, -stretch, stretch)
    static = eps_o / stretch
    total = static[1:] + static[:-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        lone = np.sqrt(np.abs(static[1:] * static[:-1] / total))
    lone = lone[np.isfinite(lone) & (static[1:] != static[:-1])]
    reach = max(1.5 * n, _RESONANT * float(lone.max(initial=0.0)))
    kd = films.kd[thick] * stretch[1:-1].real
    while reach < _FARTHEST and not _closed_to_waves(eps_o, eps_e, kd, reach):
        reach *= 1.15
    return min(reach, _FARTHEST)


def _closed_to_waves(eps_o: Complexes, eps_e: Complexes, kd: Floats, reach: float) -> bool:
    """Tell whether no p mode with |Im u| <= Re u can have |u| = reach or more."""
    u = reach * np.exp(1j * math.pi / 4.0 * np.array([-1.0, -0.5, 0.0, 0.5, 1.0]))
    kz = np.sqrt(eps_o[:, None] * (1.0 - u**2 / eps_e[:, None]))
    kz = np.where(kz.imag < 0.0, -kz, kz)
    y = kz / eps_o[:, None]
    r = np.abs((y[1:] - y[:-1]) / (y[1:] + y[:-1])).max(axis=1)
    behind = r[0]
    for j, one_pass in enumerate(np.exp(-math.sqrt(2.0) * kd * reach)):
        back = behind * one_pass
        if r[j + 1] * back >= 1.0:
            return False
        behind = (r[j + 1] + back) / (1.0 - r[j + 1] * back)
    return True
