"""Fields of a mode, what it holds in each film, and the power that dipoles give to it.

With psi_b, psi_t the solutions that are pure outer waves at the bottom and at the top and D their
Wronskian, the brackets of the dipole's power are, at the dipole's plane,

    (1+a)(1+b)/(1-ab) = -2i (kz/sigma) psi_b psi_t / D,
    (1-a)(1-b)/(1-ab) = -2i (sigma/kz) v_b v_t / D,            v = psi'/sigma,

free of kz of the emitter film. At a mode D = 0 and psi_t is a multiple of psi_b: the residue
follows from both and dD/du, in closed form. For a slab it reduces to the textbook's
cos^2(h z - phi) / D_eff.
"""

import cmath
import math

import numpy as np

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline, kernel
from optics.kernels.halfstack import P, S, abs2
from optics.kernels.modal_sheet import Films, carried, normal_square, sheet, wronskian

# Rows of `mode_content`.
ELECTRIC, ABSORBED, FLOW = 0, 1, 2
_CIRCLE = 24  # points around modes too close to tell apart
_PANEL = 2.0  # largest |kz| times the length of a panel of Gauss nodes
_X8 = (
    -0.9602898564975363, -0.7966664774136267, -0.525532409916329, -0.18343464249564978,
    0.18343464249564978, 0.525532409916329, 0.7966664774136267, 0.9602898564975363,
)  # fmt: skip
_W8 = (
    0.10122853629037676, 0.22238103445337448, 0.31370664587788727, 0.362683783378362,
    0.362683783378362, 0.31370664587788727, 0.22238103445337448, 0.10122853629037676,
)  # fmt: skip
_FAINT = -650.0  # log of an amplitude that counts as none


@inline
def sigma_of(films: Films, pol: int, j: int) -> complex:
    """Factor between the slope of psi and the continuous quantity in film j."""
    return films.eps_o[j] if pol == P else 1.0 + 0j


@inline
def step(
    films: Films, pol: int, j: int, x: complex, d: float, state: tuple[complex, complex, float]
) -> tuple[complex, complex, float]:
    """Carry (psi, v, log of their scale) a way d up in film j; down if d < 0."""
    w, v, log = state
    if d == 0.0:
        return w, v, log
    sigma = sigma_of(films, pol, j)
    q = normal_square(films, pol, j, x)
    way = 1.0 if d > 0.0 else -1.0
    w, v, grown = carried(q, sigma, abs(d), w, way * v)
    v *= way
    size = max(abs(w) + abs(v), 1e-300)
    return w / size, v / size, log + grown + math.log(size)


@inline
def at_faces(films: Films, pol: int, s: complex, states: Complexes, logs: Floats) -> None:
    """Both solutions at every face.

    states : complex (2, 2, m + 1), output
        From the bottom, from the top; psi, v; faces from the bottom one.
    logs : float (2, m + 1), output
        Logarithm of the factor that belongs to them.
    """
    m = films.kd.size
    bottom, top, x = sheet(films, s)
    below = films.bottom if pol == P else 1.0 + 0j
    above = films.top if pol == P else 1.0 + 0j
    state = (1.0 + 0j, bottom / below, 0.0)
    for j in range(m + 1):
        states[0, 0, j], states[0, 1, j], logs[0, j] = state
        if j < m:
            state = step(films, pol, j, x, films.kd[j], state)
    state = (1.0 + 0j, -top / above, 0.0)
    for j in range(m, -1, -1):
        states[1, 0, j], states[1, 1, j], logs[1, j] = state
        if j > 0:
            state = step(films, pol, j - 1, x, -films.kd[j - 1], state)


@inline
def joined(states: Complexes, logs: Floats) -> None:
    """Turn both solutions of a mode into one, in states[0] and logs[0], of largest size 1.

    Each is accurate from its own end up to where their product is largest, not beyond.
    """
    faces = logs.shape[1]
    best, largest = 0, -math.inf
    for j in range(faces):
        size = logs[0, j] + logs[1, j]
        if size > largest:
            best, largest = j, size
    use = 0 if abs2(states[0, 0, best]) > abs2(states[0, 1, best]) else 1
    scale = states[0, use, best] / states[1, use, best]
    shift = logs[0, best] - logs[1, best]
    for j in range(best + 1, faces):
        for k in range(2):
            states[0, k, j] = scale * states[1, k, j]
        logs[0, j] = logs[1, j] + shift
    top = -math.inf
    for j in range(faces):
        size = abs(states[0, 0, j]) + abs(states[0, 1, j])
        top = max(top, logs[0, j] + math.log(max(size, 1e-300)))
    for j in range(faces):
        logs[0, j] -= top


@inline
def mode_at(
    films: Films, pol: int, x: complex, j: int, z: float, states: Complexes, logs: Floats
) -> tuple[complex, complex]:
    """Fields of a joined mode at height z in film j, from the nearer reliable face.

    A wave is followed in the direction in which it grows, where rounding dies out.
    """
    if logs[0, j] <= logs[0, j + 1]:
        w, v, log = step(films, pol, j, x, z, (states[0, 0, j], states[0, 1, j], logs[0, j]))
    else:
        start = (states[0, 0, j + 1], states[0, 1, j + 1], logs[0, j + 1])
        w, v, log = step(films, pol, j, x, z - films.kd[j], start)
    scale = math.exp(log) if log > _FAINT else 0.0
    return scale * w, scale * v


@kernel
def residues(
    films: Films,
    emitter: int,
    pol: int,
    s: complex,
    radius: float,
    kz_positions: Floats,
    eps_e: float,
    bulk: Floats,
    found: Complexes,
) -> None:
    """Residues in u of the dissipated power at a mode, relative to the bulk rate.

    Parameters
    ----------
    films : Films
    emitter : int
        Index of the emitter film.
    pol : int
    s : complex
        The mode's place on the sheet.
    radius : float
        0: closed form at one mode. Else: sum of the residues of all modes within this distance of
        s, from the integral around them, which does not mind how close they are to each other.
    kz_positions : float (z,)
        k0 times the distance from the bottom face of the emitter film.
    eps_e : float
        Normal permittivity of the emitter film.
    bulk : float (2,)
        Bulk rates, vertical and horizontal.
    found : complex (3, z), output
        Channels vertical p, horizontal p, horizontal s.
    """
    found[:, :] = 0.0
    if radius == 0.0:
        _, slope, log = wronskian(films, pol, s)
        add_product(films, emitter, pol, s, 1.0 / slope, log, kz_positions, eps_e, bulk, found)
        return
    for i in range(_CIRCLE):
        away = radius * cmath.exp(2j * math.pi * (i + 0.5) / _CIRCLE)
        value, _, log = wronskian(films, pol, s + away)
        share = away / (_CIRCLE * value)
        add_product(films, emitter, pol, s + away, share, log, kz_positions, eps_e, bulk, found)


@inline
def add_product(
    films: Films,
    emitter: int,
    pol: int,
    s: complex,
    factor: complex,
    log: float,
    kz_positions: Floats,
    eps_e: float,
    bulk: Floats,
    found: Complexes,
) -> None:
    """Add the numerators of the dissipated power, per ds, times factor / exp(log)."""
    m = films.kd.size
    bottom, top, x = sheet(films, s)
    states, logs = make_states(m), make_logs(m)
    at_faces(films, pol, s, states, logs)
    # du/ds = gb gt / u; the factor u is common to all channels.
    common = -1.5j * bottom * top * factor
    for i in range(kz_positions.size):
        z = kz_positions[i]
        low = (states[0, 0, emitter], states[0, 1, emitter], logs[0, emitter])
        high = (states[1, 0, emitter + 1], states[1, 1, emitter + 1], logs[1, emitter + 1])
        wb, vb, lb = step(films, pol, emitter, x, z, low)
        wt, vt, lt = step(films, pol, emitter, x, z - films.kd[emitter], high)
        scale = common * cmath.exp(lb + lt - log)
        if pol == S:
            found[2, i] += scale * wb * wt / bulk[1]
        else:
            found[0, i] += 2.0 * scale * x * wb * wt / (eps_e * eps_e * bulk[0])
            found[1, i] += scale * vb * vt / bulk[1]


@inline
def make_states(m: int) -> Complexes:
    """Work space of `at_faces`."""
    return np.zeros((2, 2, m + 1), dtype=np.complex128)


@inline
def make_logs(m: int) -> Floats:
    """Work space of `at_faces`."""
    return np.zeros((2, m + 1))


@kernel
def mode_content(films: Films, pol: int, s: complex, content: Floats) -> None:
    """What a mode holds in each medium: closed form outside, Gauss panels in the films.

    Parameters
    ----------
    films : Films
    pol : int
    s : complex
    content : float (3, m + 2), output
        Bottom medium, films, top medium; integrals over z of |E|^2, of the absorption
        Im eps_o |E_parallel|^2 + Im eps_e |E_z|^2, and of the power along the film,
        Re(u) |E|^2 for s and Re(u/eps_e) |H|^2 for p. In a medium into which the mode leaks
        they have no bound and are 0.
    """
    m = films.kd.size
    bottom, top, x = sheet(films, s)
    u = cmath.sqrt(x)
    states, logs = make_states(m), make_logs(m)
    at_faces(films, pol, s, states, logs)
    joined(states, logs)
    content[:, :] = 0.0
    for side in range(2):
        g = bottom if side == 0 else top
        eps = films.bottom if side == 0 else films.top
        face = 0 if side == 0 else m
        if g.real > 0.0 and logs[0, face] > _FAINT:
            scale = math.exp(logs[0, face])
            w, v = scale * states[0, 0, face], scale * states[0, 1, face]
            add_content(pol, u, eps, eps, w, v, 0.5 / g.real, content[:, 0 if side == 0 else m + 1])
    for j in range(m):
        d = films.kd[j]
        panels = math.ceil(abs(cmath.sqrt(normal_square(films, pol, j, x))) * d / _PANEL)
        for panel in range(panels):
            for i in range(8):
                z = d * (panel + 0.5 * (_X8[i] + 1.0)) / panels
                w, v = mode_at(films, pol, x, j, z, states, logs)
                weight = 0.5 * _W8[i] * d / panels
                add_content(pol, u, films.eps_o[j], films.eps_e[j], w, v, weight, content[:, j + 1])


@inline
def add_content(
    pol: int,
    u: complex,
    eps_o: complex,
    eps_e: complex,
    w: complex,
    v: complex,
    weight: float,
    content: Floats,
) -> None:
    """Add |E|^2, absorption and power along the film at one height."""
    if pol == S:
        content[ELECTRIC] += weight * abs2(w)
        content[ABSORBED] += weight * eps_o.imag * abs2(w)
        content[FLOW] += weight * u.real * abs2(w)
    else:
        plane, normal = abs2(v), abs2(u * w / eps_e)
        content[ELECTRIC] += weight * (plane + normal)
        content[ABSORBED] += weight * (eps_o.imag * plane + eps_e.imag * normal)
        content[FLOW] += weight * (u / eps_e).real * abs2(w)


@kernel
def mode_profile(films: Films, pol: int, s: complex, z: Floats, field: Complexes) -> None:
    """Fields of a mode against height.

    Parameters
    ----------
    films : Films
    pol : int
    s : complex
    z : float (n,)
        k0 times the height above the lowest film's bottom face.
    field : complex (2, n), output
        s: E, and its slope over k0; p: H, and H' / eps_o (which is E along the film, but for
        a factor i). The largest value at the faces is of size 1.
    """
    m = films.kd.size
    bottom, top, x = sheet(films, s)
    states, logs = make_states(m), make_logs(m)
    at_faces(films, pol, s, states, logs)
    joined(states, logs)
    total = films.kd.sum()
    for i in range(z.size):
        if z[i] <= 0.0 or z[i] >= total:
            face = 0 if z[i] <= 0.0 else m
            away = bottom * z[i] if z[i] <= 0.0 else -top * (z[i] - total)
            factor = cmath.exp(away + logs[0, face]) if logs[0, face] > _FAINT else 0j
            field[0, i], field[1, i] = factor * states[0, 0, face], factor * states[0, 1, face]
            continue
        j, height = 0, z[i]
        while height > films.kd[j]:
            height -= films.kd[j]
            j += 1
        field[0, i], field[1, i] = mode_at(films, pol, x, j, height, states, logs)
