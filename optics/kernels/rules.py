"""The nested quadrature rule of a panel: 15 Gauss-Legendre nodes, extended by Kronrod to 31.

Nodes come in batches of NODES, the length that the kernels' loops are laid out for; the one
place left over repeats a node with weight 0. A. S. Kronrod (1965); the extension is computed
from the Stieltjes polynomial, T. N. L. Patterson, Math. Comp. 22, 847 (1968) (from memory).
"""

import numpy as np
from numpy.polynomial import legendre

from optics.kernels.arrays import Floats

NODES = 16
STAGES = 2
PANEL_NODES = STAGES * NODES
_GAUSS = NODES - 1
#: Degrees from the earlier to the last coefficients that tell how fast a panel converges.
BEFORE = 4


def _kronrod_nodes() -> Floats:
    """Zeros of the Stieltjes polynomial E: orthogonal to P_GAUSS times all lower degrees."""
    x, w = legendre.leggauss(2 * _GAUSS)
    p = legendre.legvander(x, _GAUSS + 1)
    # E = P_(n+1) + sum a_j P_j; int P_n E P_k = 0 for k = 0..n.
    lower = np.einsum("i,i,ij,ik->kj", w, p[:, _GAUSS], p[:, : _GAUSS + 1], p[:, : _GAUSS + 1])
    top = np.einsum("i,i,i,ik->k", w, p[:, _GAUSS], p[:, _GAUSS + 1], p[:, : _GAUSS + 1])
    coefficients = np.append(np.linalg.lstsq(lower, -top, rcond=None)[0], 1.0)
    zeros = np.sort(legendre.legroots(coefficients).real)
    for _ in range(3):
        slope = legendre.legval(zeros, legendre.legder(coefficients))
        zeros = zeros - legendre.legval(zeros, coefficients) / slope
    return 0.5 * (zeros - zeros[::-1])


def _stage(x: Floats) -> Floats:
    """Interpolatory weights, and rows that give Legendre coefficients: (5, nodes)."""
    to_coefficients = np.linalg.inv(legendre.legvander(x, x.size - 1))
    last = to_coefficients[[-1, -2, -1 - BEFORE, -2 - BEFORE]]
    return np.vstack([2.0 * to_coefficients[:1], last])


def _nested() -> tuple[Floats, Floats]:
    gauss, kronrod = legendre.leggauss(_GAUSS)[0], _kronrod_nodes()
    x = np.concatenate([gauss, kronrod, kronrod[-1:]])
    rows = np.zeros((5, STAGES, 2 * NODES))
    for stage, count in enumerate((_GAUSS, 2 * _GAUSS + 1)):
        rows[:, stage, :count] = _stage(x[:count])
    return x, rows


X, _ROWS = _nested()
#: Nodes X on -1..1 (PANEL_NODES,); by stage (STAGES, PANEL_NODES): weights and the rows of
#: Legendre coefficients of the interpolant, the last two and two that come BEFORE these.
WEIGHT, DEGREE_ROWS = _ROWS[0], _ROWS[1:]
DEGREES = len(DEGREE_ROWS)
