"""Where the power of a dipole goes, one wavelength after the other.

Total and trapped power are integrals of an analytic function and run on arcs below the real
axis, where the poles of forward guided modes (above or on the axis) are far away. What leaves or
is absorbed below the outer light lines is made of squared magnitudes and stays on the axis. The
total is found independently of its parts, so their difference is a true check.
"""

import numpy as np

from optics.kernels.compiled import inline, kernel
from optics.kernels.exits import ABSORBING, COLUMNS, MATCHED, OPEN
from optics.kernels.integrate import adapt
from optics.kernels.paths import ARC, ARC_FROM_BRANCH, NODES, REAL, TAIL
from optics.kernels.problem import Half, Problem, Sides, Source, bench_space

# Outcome of one wavelength, position and orientation; the order of the last axis of `shares`.
(
    AIR_BOTTOM,
    AIR_TOP,
    SUBSTRATE,
    COVER,
    GUIDED,
    SURFACE_PLASMON,
    ABSORBED,
    MATCHED_BOTTOM,
    MATCHED_TOP,
    NEAR_FIELD,
) = range(10)
OUTCOMES = 10

_SMALLEST_SCALE = 1e-5  # errors are relative to the dissipated power, but not below this


@inline
def half_of(eps_o, eps_e, kd, outer, emitter, step):
    """Media from the emitter film to one side: films in the direction of step, then outer."""
    films = eps_o.size - 1 - emitter if step > 0 else emitter
    o = np.empty(films + 2, dtype=np.complex128)
    e = np.empty(films + 2, dtype=np.complex128)
    d = np.zeros(films + 2)
    for j in range(films + 1):
        o[j] = eps_o[emitter + step * j]
        e[j] = eps_e[emitter + step * j]
        d[j] = kd[emitter + step * j]
    o[films + 1] = outer
    e[films + 1] = outer
    return Half(o, e, d)


@inline
def bulk_rates(eps_o, eps_e):
    """Rates of a vertical and a horizontal dipole in the unbounded film, vacuum = 1."""
    n_o = np.sqrt(eps_o)
    rates = np.empty(2)
    rates[0] = n_o
    rates[1] = (3.0 * eps_o + eps_e) / (4.0 * n_o)
    return rates


@inline
def largest_index(problem):
    """Largest Re n, ordinary or extraordinary, among films and outer media."""
    largest = 0.0
    for half in (problem.up, problem.down):
        for j in range(half.eps_o.size):
            largest = max(largest, np.sqrt(half.eps_o[j]).real, np.sqrt(half.eps_e[j]).real)
    return largest


@inline
def has_plasmon(problem):
    """Tell whether some film or absorbing surroundings has a negative permittivity."""
    for half in (problem.up, problem.down):
        for j in range(1, half.eps_o.size):
            if half.eps_o[j].real < 0.0 or half.eps_e[j].real < 0.0:
                return True
    return False


@inline
def light_lines(problem):
    """Ascending break points of the real axis, from 0 to the largest outer light line."""
    sides, source = problem.sides, problem.source
    trapped = 0.0
    for side in range(2):
        if sides.kind[side] != ABSORBING:
            trapped = max(trapped, sides.n_outer[side])
    points = np.empty(8)
    points[0], points[1] = 0.0, trapped
    count = 2
    for side in range(2):
        if sides.kind[side] != ABSORBING:
            points[count] = sides.n_outer[side]
            points[count + 1] = sides.n_out[side]
            count += 2
    points[count], points[count + 1] = np.sqrt(source.eps_o), np.sqrt(source.eps_e)
    points = np.sort(points[: count + 2])
    kept = np.empty(points.size)
    n = 0
    for p in points:
        if p <= trapped and (n == 0 or p - kept[n - 1] > 1e-13):
            kept[n] = p
            n += 1
    kept[n - 1] = trapped
    return kept[:n]


@kernel
def one_wavelength(problem, bench, tolerance, shares, dissipation):
    """Budget at one wavelength.

    Parameters
    ----------
    problem, bench
        See `problem`.
    tolerance : float
        Wanted accuracy of every destination, over the dissipated power.
    shares : float (positions, 2, OUTCOMES), output
        Power per destination, each orientation relative to its own bulk rate.
    dissipation : float (positions, 2), output

    Returns
    -------
    error : float
        Estimated error of the worst destination over the dissipated power.
    panels : int
    """
    nz = problem.source.kz_positions.size
    lines = light_lines(problem)
    trapped = lines[-1]
    plasmon = has_plasmon(problem)
    beyond_emitter = max(trapped, np.sqrt(problem.source.eps_e))
    far = 2.0 * largest_index(problem)
    per_panel = 0.1 * tolerance

    # The total, first coarsely, to know what errors are to be measured against.
    scale = np.full(3 * nz, 1e300)
    coarse = np.zeros(3 * nz)
    whole = (ARC, 0.0, far, min(0.5 * far, 1.0), False)
    tail = (TAIL, far, np.inf, 0.0, True)
    _, panels = adapt(False, whole, 0.0, 1.0, problem, bench, scale, 1.0, coarse)
    _, more = adapt(False, tail, 0.0, 1.0, problem, bench, scale, 1.0, coarse)
    panels += more
    for q in range(nz):
        scale[q] = max(abs(coarse[q]), _SMALLEST_SCALE)
        scale[nz + q] = max(abs(coarse[nz + q] + coarse[2 * nz + q]), _SMALLEST_SCALE)
        scale[2 * nz + q] = scale[nz + q]
    arc_total = np.zeros(3 * nz)
    error_whole, more = adapt(
        False, whole, 0.0, 1.0, problem, bench, scale, per_panel, arc_total
    )
    panels += more
    far_total = np.zeros(3 * nz)
    error_tail, more = adapt(False, tail, 0.0, 1.0, problem, bench, scale, per_panel, far_total)
    panels += more

    # Trapped light, split where a plasmon begins to be one.
    guided = np.zeros(3 * nz)
    beyond = far_total.copy()
    error = error_tail
    start = trapped
    if plasmon and beyond_emitter > trapped + 1e-12:
        depth = min(0.5 * (beyond_emitter - trapped), 1.0)
        first = (ARC_FROM_BRANCH, trapped, beyond_emitter, depth, False)
        miss, more = adapt(False, first, 0.0, 1.0, problem, bench, scale, per_panel, guided)
        error += miss
        panels += more
        start = beyond_emitter
    second = (ARC_FROM_BRANCH, start, far, min(0.5 * (far - start), 1.0), False)
    miss, more = adapt(False, second, 0.0, 1.0, problem, bench, scale, per_panel, beyond)
    error += miss
    panels += more

    # What leaves or is absorbed, between the light lines on the real axis.
    free = np.zeros(2 * COLUMNS * nz)
    free_scale = np.empty(2 * COLUMNS * nz)
    for k in range(COLUMNS):
        for q in range(nz):
            free_scale[k * nz + q] = scale[q]
            free_scale[(COLUMNS + k) * nz + q] = scale[nz + q]
    for j in range(lines.size - 1):
        panel = (REAL, lines[j], lines[j + 1], 0.0, False)
        miss, more = adapt(True, panel, 0.0, 1.0, problem, bench, free_scale, per_panel, free)
        error += miss
        panels += more

    for q in range(nz):
        for o in range(2):
            out = shares[q, o]
            for k in range(1, COLUMNS):
                value = free[(o * COLUMNS + k) * nz + q]
                out[_PLACE[k]] = value
            if o == 0:
                out[SURFACE_PLASMON] = beyond[q] if plasmon else 0.0
                out[GUIDED] = guided[q] + (0.0 if plasmon else beyond[q])
                out[NEAR_FIELD] = far_total[q]
                dissipation[q, 0] = arc_total[q] + far_total[q]
            else:
                p, s = nz + q, 2 * nz + q
                out[SURFACE_PLASMON] = beyond[p] if plasmon else 0.0
                out[GUIDED] = guided[p] + guided[s] + beyond[s] + (0.0 if plasmon else beyond[p])
                out[NEAR_FIELD] = far_total[p] + far_total[s]
                dissipation[q, 1] = arc_total[p] + arc_total[s] + far_total[p] + far_total[s]
    return max(error, error_whole + error_tail), panels


# Column of `radiated` to place in `shares`.
_PLACE = np.array(
    [0, AIR_BOTTOM, AIR_TOP, SUBSTRATE, COVER, ABSORBED, MATCHED_BOTTOM, MATCHED_TOP]
)


@kernel
def light_budget(
    k0_nm, eps_o, eps_e, thickness_nm, outer, emitter, position_nm,
    kind, n_outer, n_out, loss, tolerance, shares, dissipation, errors, panels,
):  # fmt: skip
    """Budget of every wavelength.

    Parameters
    ----------
    k0_nm : float (w,)
        2 pi / wavelength, per nm.
    eps_o, eps_e : complex (w, m)
        Permittivities of the films, bottom to top; the emitter film's are real.
    thickness_nm : float (m,)
    outer : complex (w, 2)
        Permittivity of the media next to the films: bottom, top.
    emitter : int
        Index of the emitter film.
    position_nm : float (z,)
        Dipoles, from the bottom face of the emitter film.
    kind : int (2,)
        OPEN, PLANAR, MATCHED or ABSORBING: bottom, top.
    n_outer, n_out, loss : float (w, 2)
        See `problem.Sides`.
    tolerance : float
    shares : float (w, z, 2, OUTCOMES), output
    dissipation : float (w, z, 2), output
        Axis of length 2: vertical, horizontal.
    errors : float (w,), output
    panels : int (w,), output
    """
    m = eps_o.shape[1]
    bench = bench_space(m - emitter + 1, emitter + 2, position_nm.size, COLUMNS)
    for w in range(k0_nm.size):
        kd = k0_nm[w] * thickness_nm
        e_o, e_e = eps_o[w, emitter].real, eps_e[w, emitter].real
        problem = Problem(
            Source(e_o, e_e, kd[emitter], k0_nm[w] * position_nm, bulk_rates(e_o, e_e)),
            Sides(kind, n_outer[w], n_out[w], loss[w]),
            half_of(eps_o[w], eps_e[w], kd, outer[w, 1], emitter, 1),
            half_of(eps_o[w], eps_e[w], kd, outer[w, 0], emitter, -1),
        )
        errors[w], panels[w] = one_wavelength(
            problem, bench, tolerance, shares[w], dissipation[w]
        )


__all__ = ["MATCHED", "NODES", "OPEN", "light_budget"]
