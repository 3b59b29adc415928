"""Layout of complex numbers at the nodes of a panel: real parts first, then imaginary ones.

A row holds one quantity at all nodes and both polarizations, s first: LANES real parts, then
LANES imaginary parts. Loops over rows vectorize in full, which they do not over complex numbers
whose parts lie side by side.
"""

from optics.kernels.arrays import Floats
from optics.kernels.compiled import scalar
from optics.kernels.rules import NODES

LANES = 2 * NODES
ROW = 2 * LANES


@scalar
def at(row: Floats, lane: int) -> complex:
    """Value of a row (ROW,) in one lane: node number lane for s, NODES + node for p."""
    return complex(row[lane], row[LANES + lane])


@scalar
def put(row: Floats, lane: int, z: complex) -> None:
    """Set a row's value in one lane."""
    row[lane] = z.real
    row[LANES + lane] = z.imag
