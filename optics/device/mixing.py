"""Permittivity of a mixture from those of its components."""

from __future__ import annotations

import numpy as np

from optics.device.materials import ComplexArray, FloatArray

# Below this, relative to the largest component, an imaginary part is rounding of the eigenvalues.
ROUNDING = 1e-12
POLISH_STEPS = 2


def volume_average(permittivity: ComplexArray, fraction: FloatArray) -> ComplexArray:
    """Average of the permittivity by volume.

    Parameters
    ----------
    permittivity : ndarray of complex, shape (n_component, n)
        One row per component.
    fraction : ndarray of float, shape (n_component,)
        Volume fractions, sum 1.

    Returns
    -------
    ndarray of complex, shape (n,)
    """
    return np.asarray(fraction @ permittivity, dtype=np.complex128)


def bruggeman(permittivity: ComplexArray, fraction: FloatArray) -> ComplexArray:
    """Symmetric effective medium of spherical inclusions, any number of components.

    The root of Σ f (ε_i - ε)/(ε_i + 2ε) = 0 with Im ε ≥ 0 that goes over into the volume average
    when the depolarization factor of the inclusions goes from 1/3 to 0.

    Parameters
    ----------
    permittivity : ndarray of complex, shape (n_component, n)
        One row per component, Im ≥ 0, nowhere zero.
    fraction : ndarray of float, shape (n_component,)
        Volume fractions, sum 1.

    Returns
    -------
    ndarray of complex, shape (n,)

    Notes
    -----
    D. A. G. Bruggeman, Ann. Phys. 416, 636 (1935), from memory. The choice of the root is derived
    here: written as ε = h(ε) = 1/Σ 3f/(ε_i + 2ε), h maps the upper half plane into itself, so it
    has one attracting fixed point there or, when every component is lossless, on its edge. That
    point moves continuously with the depolarization factor; all other roots repel or lie below.
    """
    present = fraction > 0.0
    epsilon, share = permittivity[present], fraction[present]
    if share.size == 1:
        return np.array(epsilon[0], dtype=np.complex128)
    roots = _all_roots(epsilon, share)
    scale = np.abs(epsilon).max(axis=0)
    lossless = np.all(epsilon.imag == 0.0, axis=0)
    # Without loss the eigenvalues' imaginary parts of this size are rounding.
    edge = np.abs(roots.imag) <= ROUNDING * scale
    roots = np.where(edge & lossless, roots.real + 0j, roots)
    allowed = (roots.imag >= 0.0) | edge
    steepness = np.where(allowed, np.abs(_slope(roots, epsilon, share)), np.inf)
    steepness[np.isnan(steepness)] = np.inf
    chosen = np.argmin(steepness, axis=0)
    root = np.take_along_axis(roots, chosen[None, :], axis=0)[0]
    root = _polish(root, epsilon, share)
    # Rounding may leave -1e-17; a passive mixture has Im ε ≥ 0 exactly.
    return root.real + 1j * (np.maximum(root.imag, 0.0) + 0.0)


def _all_roots(epsilon: ComplexArray, share: FloatArray) -> ComplexArray:
    """Every root, shape (n_component, n): eigenvalues of (3uuᵀ - 1)/2 · diag(ε_i), u = √f.

    Σ 3fε/(ε_i + 2ε) = 1 is where diag(ε_i) + 2ε - 3ε uuᵀ is singular; the inverse of 3uuᵀ - 2 is
    (3uuᵀ - 1)/2 because uᵀu = 1. Unlike a polynomial's, these roots stay accurate when there are
    many components.
    """
    u = np.sqrt(share / share.sum())
    projector = (3.0 * np.outer(u, u) - np.eye(u.size)) / 2.0
    matrices = projector[None, :, :] * epsilon.T[:, None, :]
    return np.asarray(np.linalg.eigvals(matrices).T, dtype=np.complex128)


def _slope(roots: ComplexArray, epsilon: ComplexArray, share: FloatArray) -> ComplexArray:
    """Return h' at the roots, where h(ε) = ε; shape as `roots`."""
    total = np.zeros_like(roots)
    with np.errstate(all="ignore"):
        for one, part in zip(epsilon, share, strict=True):
            total += part / (one[None, :] + 2.0 * roots) ** 2
        return np.asarray(6.0 * roots**2 * total, dtype=np.complex128)


def _polish(root: ComplexArray, epsilon: ComplexArray, share: FloatArray) -> ComplexArray:
    """Newton steps on Σ 3fε/(ε_i + 2ε) - 1, kept only where they bring the residual down."""
    column = share[:, None]
    best, best_residual = root, _residual(root, epsilon, share)
    for _ in range(POLISH_STEPS):
        with np.errstate(all="ignore"):
            slope = (3.0 * column * epsilon / (epsilon + 2.0 * best) ** 2).sum(axis=0)
            trial = best - best_residual / slope
            residual = _residual(trial, epsilon, share)
            better = np.abs(residual) < np.abs(best_residual)
        best = np.where(better, trial, best)
        best_residual = np.where(better, residual, best_residual)
    return best


def _residual(root: ComplexArray, epsilon: ComplexArray, share: FloatArray) -> ComplexArray:
    return np.asarray(
        (3.0 * share[:, None] * root / (epsilon + 2.0 * root)).sum(axis=0) - 1.0,
        dtype=np.complex128,
    )
