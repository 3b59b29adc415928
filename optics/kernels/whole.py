"""Both half stacks at the nodes of a panel, and the whole stack lit from outside.

Rows are laid out as in `planar`; medium 0 of either half is the emitter film.
"""

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import borrowing, rowwise
from optics.kernels.field import absorbed_in_film, absorbs, film_coefficients
from optics.kernels.halfstack import abs2, inward, outward, phase_factors, waves
from optics.kernels.planar import LANES, at
from optics.kernels.problem import Half, Source, Work


@borrowing
def solve_waves(
    source: Source, up: Half, down: Half, work_up: Work, work_down: Work, u: Complexes
) -> None:
    """Waves of both halves; medium 0 of either is the emitter film."""
    waves(0, u, up.eps_o, up.eps_e, up.kd, work_up.kz, work_up.y, work_up.e)
    waves(1, u, down.eps_o, down.eps_e, down.kd, work_down.kz, work_down.y, work_down.e)
    phase_factors(work_up.kz[0], float(source.kd), source.eps_o == source.eps_e, work_up.e[0])
    _copy(work_up.kz[0], work_down.kz[0])
    _copy(work_up.y[0], work_down.y[0])
    _copy(work_up.e[0], work_down.e[0])


@rowwise
def _copy(row: Floats, other: Floats) -> None:
    for i in range(row.size):
        other[i] = row[i]


@borrowing
def solve_half(half: Half, work: Work, u: Complexes) -> None:
    """Reflections, amplitudes and absorption of a half stack lit from the emitter film.

    The waves are at hand.
    """
    outward(work.y, work.e, work.r_far, work.f)
    for lane in range(LANES):
        work.absorbed[lane] = 0.0
    for j in range(1, half.kd.size - 1):
        eps_o, eps_e = half.eps_o[j], half.eps_e[j]
        if absorbs(eps_o, eps_e):
            film_coefficients(
                u, eps_o, eps_e, half.kd[j], work.kz[j], work.e[j], work.alpha[j], work.beta[j]
            )
            absorbed_in_film(
                work.e[j], work.r_far[j], work.f[j], work.alpha[j], work.beta[j], work.absorbed
            )


@borrowing
def light_half(half: Half, beyond: Floats, work: Work) -> None:
    """Light a half stack from outside, already solved from the emitter film.

    beyond : float (ROW,)
        Reflection at the emitter film's other face, so that the whole stack is lit; zeros for
        the half by itself.
    """
    inward(work.y, work.e, beyond, work.r_near, work.g)
    for lane in range(LANES):
        work.absorbed_outside[lane] = 0.0
    for j in range(1, half.kd.size - 1):
        if absorbs(half.eps_o[j], half.eps_e[j]):
            absorbed_in_film(
                work.e[j], work.r_near[j], work.g[j], work.alpha[j], work.beta[j],
                work.absorbed_outside,
            )  # fmt: skip


@borrowing
def _from_outside(side: int, half: Half, near: Work, far: Work, stack: Floats) -> None:
    """Light the whole stack from one side: fill in its R, T and A in `StackPowers` (5, LANES).

    From an absorbing medium, which carries no flux at these wavevectors, no light comes.
    """
    light_half(half, far.r_far[0], near)
    last, last_far = near.y.shape[0] - 1, far.y.shape[0] - 1
    _put_stack(
        near.y[last], far.y[last_far], near.r_near[last], far.f[last_far], near.g[0], near.e[0],
        near.absorbed_outside, far.absorbed, stack[side * LANES :], stack[2 * LANES :],
        stack[(3 + side) * LANES :],
    )  # fmt: skip


@rowwise
def _put_stack(
    y: Floats, y_far: Floats, reflected: Floats, out: Floats, entered: Floats, through: Floats,
    absorbed_near: Floats, absorbed_far: Floats, r: Floats, t: Floats, a: Floats,
) -> None:  # fmt: skip
    for lane in range(LANES):
        flux = y[lane]
        carries = flux > 0.0
        inv = 1.0 / (flux if carries else 1.0)
        arrived = abs2(at(entered, lane) * at(through, lane))
        power = absorbed_near[lane] + absorbed_far[lane] * arrived
        passed = abs2(at(out, lane)) * arrived * y_far[lane]
        r[lane] = abs2(at(reflected, lane)) if carries else 1.0
        t[lane] = passed * inv if carries else 0.0
        a[lane] = power * inv if carries else 0.0


@borrowing
def solve_stack(
    from_bottom: bool,
    from_top: bool,
    up: Half,
    down: Half,
    work_up: Work,
    work_down: Work,
    stack: Floats,
) -> None:
    """Whole stack lit from one side or both; both halves are solved from the emitter film.

    Parameters
    ----------
    stack : float (5 * LANES,), output
        `StackPowers` one after the other; R = 1, A = 0 from a side that is not lit. T is the
        same both ways between transparent media.
    """
    for place in range(5 * LANES):
        stack[place] = 1.0 if place < 2 * LANES else 0.0
    if from_top:
        _from_outside(1, up, work_up, work_down, stack)
    if from_bottom:
        _from_outside(0, down, work_down, work_up, stack)
