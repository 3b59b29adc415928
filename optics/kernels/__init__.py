"""Storey 1: compiled physics on plain arrays, in nanometers, free of objects and files.

Lengths enter as ``k0 * d`` and in-plane wavevectors as ``u = kappa / k0``, so that one wavelength
is one dimensionless problem. Time factor exp(-i w t), Im n >= 0 for loss.
"""

from optics.kernels.compiled import cache_is_warm

__all__ = ["cache_is_warm"]
