"""Names of the array types that kernels take."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]
Flags = NDArray[np.bool_]

#: R seen from the bottom, R from the top, T, absorptance from the bottom, absorptance from the top
StackPowers = tuple[float, float, float, float, float]
