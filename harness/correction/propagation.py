"""The law of propagation of uncertainty, for several results and for complex quantities.

V_y = J·V_x·Jᵀ (JCGM 100:2008, 5.2.2 and H.2; the matrix form is JCGM 102:2011, 6.2). A complex quantity
carries a 2 × 2 covariance of its real and imaginary parts, in that order; stacks of them are ``(…, 2, 2)``.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from harness.records import Complexes, Floats


def propagate(jacobian: ArrayLike, covariance: ArrayLike) -> Floats:
    """Covariance ``(…, M, M)`` of M results from that of N inputs ``(…, N, N)`` and ∂y/∂x ``(…, M, N)``."""
    j, v = np.asarray(jacobian, dtype=np.float64), np.asarray(covariance, dtype=np.float64)
    return np.asarray(j @ v @ np.swapaxes(j, -1, -2))


def mean_and_covariance(readings: ArrayLike) -> tuple[Floats, Floats]:
    """Means ``(M,)`` of K simultaneous readings ``(K, M)`` and the covariance of those means ``(M, M)``.

    s(q̄ᵢ, q̄ⱼ) = Σₖ (qᵢₖ − q̄ᵢ)(qⱼₖ − q̄ⱼ) / (K(K − 1))   (JCGM 100, 4.2.3 and equation 17)

    Raises ValueError for fewer than two readings, which have no spread.
    """
    q = np.asarray(readings, dtype=np.float64)
    if q.ndim != 2 or q.shape[0] < 2:
        raise ValueError(f"a covariance needs two or more simultaneous readings in rows, got shape {q.shape}")
    mean = q.mean(axis=0)
    away = q - mean
    return mean, away.T @ away / (q.shape[0] * (q.shape[0] - 1))


def standard_uncertainties(covariance: ArrayLike) -> Floats:
    """Square roots of the diagonal, ``(…, M)``."""
    return np.sqrt(np.diagonal(np.asarray(covariance, dtype=np.float64), axis1=-2, axis2=-1))


def correlation(covariance: ArrayLike) -> Floats:
    """Correlation coefficients r = V_ij/(u_i·u_j), ``(…, M, M)``; NaN beside an uncertainty of zero."""
    v = np.asarray(covariance, dtype=np.float64)
    u = standard_uncertainties(v)
    with np.errstate(all="ignore"):
        return np.asarray(v / (u[..., :, None] * u[..., None, :]))


def polar_to_rectangular_u(magnitude: ArrayLike, phase_rad: ArrayLike, covariance: ArrayLike) -> Floats:
    """Covariance of (magnitude, phase in rad) → of (real, imaginary)."""
    size, turn = np.asarray(magnitude, dtype=np.float64), np.asarray(phase_rad, dtype=np.float64)
    c, s = np.cos(turn), np.sin(turn)
    return propagate(_matrix(c, -size * s, s, size * c), covariance)


def rectangular_to_polar_u(number: ArrayLike, covariance: ArrayLike) -> Floats:
    """Covariance of (real, imaginary) → of (magnitude, phase in rad); mirror of ``polar_to_rectangular_u``."""
    z = np.asarray(number, dtype=np.complex128)
    size = np.abs(z)
    with np.errstate(all="ignore"):
        c, s = z.real / size, z.imag / size
        return propagate(_matrix(c, s, -s / size, c / size), covariance)


def propagate_analytic(derivative: ArrayLike, covariance: ArrayLike) -> Floats:
    """Covariance of w = f(z) from that of z and the complex derivative f′(z), ``(…,)``.

    A complex derivative a + jb acts on (real, imaginary) as [[a, −b], [b, a]] (Cauchy–Riemann).
    """
    d = np.asarray(derivative, dtype=np.complex128)
    return propagate(_matrix(d.real, -d.imag, d.imag, d.real), covariance)


def inverse_u(number: ArrayLike, covariance: ArrayLike) -> Floats:
    """Covariance of 1/z from that of z (impedance ⇄ admittance): f′ = −1/z²."""
    z: Complexes = np.asarray(number, dtype=np.complex128)
    with np.errstate(all="ignore"):
        return propagate_analytic(-1 / z**2, covariance)


def _matrix(a: ArrayLike, b: ArrayLike, c: ArrayLike, d: ArrayLike) -> Floats:
    """Stack four broadcastable entries into ``(…, 2, 2)``."""
    entries = np.broadcast_arrays(*(np.asarray(x, dtype=np.float64) for x in (a, b, c, d)))
    return np.stack(entries, axis=-1).reshape((*entries[0].shape, 2, 2))
