"""All zeros of the modes' function in a rectangle, by the argument principle.

The phase is followed around a rectangle in steps that are short beside the distance of any zero,
so that the count is exact; rectangles are split until each holds few zeros, which Newton steps
find together (each repelled by the others: O. Aberth, Math. Comp. 27, 339 (1973), from memory).
A rectangle is done when it has yielded as many zeros as its contour counts.
"""

import cmath
import math

from optics.kernels.arrays import Complexes, Floats
from optics.kernels.compiled import inline, kernel
from optics.kernels.modal_sheet import Films, wronskian

_LONGEST_STEP = 0.25
_SAFE = 0.6  # step over the distance at which a lone zero would show in the slope
_SURPRISE = 0.35  # phase, in radians, by which a step may differ from what the slopes foretell
_SHORTEST_STEP = 1e-9
_TOGETHER = 4  # zeros sought at once
_SMALL = 0.6  # longest side of a rectangle in which several are sought
_POINT = 1e-7  # side of a rectangle whose zeros count as one multiple zero
_ITERATIONS = 60
_CONVERGED = 2e-15
_SETTLED = 1e-11  # last step of zeros that count as found
STACK = 400  # rectangles that may wait


@inline
def turned(films: Films, pol: int, a: complex, b: complex) -> float:
    """Change of the phase from a to b in radians; nan if a zero lies on the way."""
    length = abs(b - a)
    direction = (b - a) / length
    value, slope, _ = wronskian(films, pol, a)
    total, t, h = 0.0, 0.0, _LONGEST_STEP
    while t < length:
        pace = abs(slope) / max(abs(value), 1e-300)
        h = min(h, length - t, _LONGEST_STEP, _SAFE / max(pace, 1e-12))
        while True:
            if h < _SHORTEST_STEP * min(1.0, length):
                return math.nan
            there = a + direction * (t + h) if t + h < length else b
            next_value, next_slope, _ = wronskian(films, pol, there)
            if next_value == 0.0:
                return math.nan
            change = cmath.phase(next_value / value)
            foretold = 0.5 * h * (direction * (slope / value + next_slope / next_value)).imag
            # A step is fine if both of its ends would have seen a zero beside it.
            fine = abs(next_slope) * h <= 1.5 * _SAFE * abs(next_value)
            if fine and abs(change - foretold) < _SURPRISE:
                break
            h *= 0.5
        total += change
        t += h
        value, slope = next_value, next_slope
        h *= 2.0
    return total


@inline
def count(films: Films, pol: int, box: Floats) -> int:
    """Zeros within a rectangle (left, right, low, high) of s; -1 if one lies on its edge."""
    left, right, low, high = box[0], box[1], box[2], box[3]
    total = turned(films, pol, complex(left, low), complex(right, low))
    total += turned(films, pol, complex(right, low), complex(right, high))
    total += turned(films, pol, complex(right, high), complex(left, high))
    total += turned(films, pol, complex(left, high), complex(left, low))
    if math.isnan(total):
        return -1
    return round(total / (2.0 * math.pi))


@inline
def polish(films: Films, pol: int, n: int, box: Floats, found: Complexes) -> bool:
    """Find the n zeros of a small rectangle together; False if that does not succeed."""
    middle = complex(0.5 * (box[0] + box[1]), 0.5 * (box[2] + box[3]))
    wide, tall = box[1] - box[0], box[3] - box[2]
    reach = abs(complex(wide, tall))
    for i in range(n):
        angle = 2.0 * math.pi * i / n + 0.4
        away = 0.25 if n > 1 else 0.0
        found[i] = middle + away * complex(wide * math.cos(angle), tall * math.sin(angle))
    for _ in range(_ITERATIONS):
        largest = 0.0
        for i in range(n):
            value, slope, _ = wronskian(films, pol, found[i])
            if value == 0.0:
                continue
            repulsion = 0j
            for j in range(n):
                if j != i and found[j] != found[i]:
                    repulsion += 1.0 / (found[i] - found[j])
            divisor = slope / value - repulsion
            if divisor == 0.0:
                return False
            step = 1.0 / divisor
            if abs(step) > 0.5 * reach:
                step *= 0.5 * reach / abs(step)
            found[i] -= step
            if abs(found[i] - middle) > reach:
                return False
            largest = max(largest, abs(step))
        if largest < _CONVERGED * (1.0 + abs(middle)):
            break
    good = largest < _SETTLED
    for i in range(n):
        inside = box[0] <= found[i].real <= box[1] and box[2] <= found[i].imag <= box[3]
        good = good and inside
    return good


@inline
def split(box: Floats, fraction: float, first: Floats, second: Floats) -> None:
    """Cut a rectangle across its longer side."""
    first[:] = box
    second[:] = box
    side = 0 if box[1] - box[0] >= box[3] - box[2] else 2
    cut = box[side] + fraction * (box[side + 1] - box[side])
    first[side + 1] = cut
    second[side] = cut


@kernel
def find_zeros(
    films: Films, pol: int, box: Floats, boxes: Floats, counts: Floats, found: Complexes
) -> tuple[int, int]:
    """All zeros in a rectangle of s.

    Parameters
    ----------
    films : Films
    pol : int
        S or P.
    box : float (4,)
        Left, right, low, high.
    boxes : float (STACK, 4), counts : float (STACK,)
        Work space.
    found : complex (f,), output

    Returns
    -------
    int
        How many zeros were found.
    int
        How many the contour around the rectangle counts; -1 if a zero lies on its edge.
    """
    total = count(films, pol, box)
    if total <= 0:
        return 0, total
    boxes[0, :] = box
    counts[0] = total
    waiting, done = 1, 0
    trial = found[found.size - _TOGETHER :]
    while waiting > 0:
        waiting -= 1
        here = boxes[waiting].copy()
        n = int(counts[waiting])
        longest = max(here[1] - here[0], here[3] - here[2])
        few = n == 1 or (n <= _TOGETHER and longest < _SMALL)
        if few and polish(films, pol, n, here, trial):
            for i in range(n):
                found[done + i] = trial[i]
            done += n
            continue
        if longest < _POINT:
            for _ in range(min(n, found.size - _TOGETHER - done)):
                found[done] = complex(0.5 * (here[0] + here[1]), 0.5 * (here[2] + here[3]))
                done += 1
            continue
        if waiting + 2 > STACK or done + n > found.size - 2 * _TOGETHER:
            break
        inner = -1
        for trial_cut in range(8):
            # Never the middle, where symmetric stacks have their zeros.
            fraction = 0.4637 + 0.0917 * ((trial_cut * 0.618034 + 0.35) % 1.0)
            split(here, fraction, boxes[waiting], boxes[waiting + 1])
            inner = count(films, pol, boxes[waiting])
            if 0 <= inner <= n:
                break
        if inner < 0 or inner > n:
            break
        counts[waiting], counts[waiting + 1] = inner, n - inner
        if inner == 0:
            boxes[waiting, :] = boxes[waiting + 1]
            counts[waiting] = n
            waiting += 1
        elif inner == n:
            waiting += 1
        else:
            waiting += 2
    return done, total
