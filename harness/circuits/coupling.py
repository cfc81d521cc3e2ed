"""Coupling factors from the series and parallel resonance, each by its own mode's formula.

Formulas of IEEE Std 176-1987 §6 (attribution from memory; each is checked against a closed-form
resonator in the tests). ``fs`` and ``fp`` in hertz, any shape; the result is the factor k (1), NaN where
fp ≤ fs.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from harness.circuits.frequencies import root
from harness.records import Floats


def keff(fs_hz: ArrayLike, fp_hz: ArrayLike) -> Floats:
    """Effective coupling of any mode: k² = (fp² − fs²)/fp².

    >>> round(float(keff(38.64e3, 39.78e3)), 6)
    0.237685
    """
    fs, fp = np.asarray(fs_hz, dtype=float), np.asarray(fp_hz, dtype=float)
    return _root((fp - fs) * (fp + fs) / fp**2)


def k31(fs_hz: ArrayLike, fp_hz: ArrayLike) -> Floats:
    """Length mode of a thin bar, field across: k²/(1 − k²) = (π/2)(fp/fs) tan((π/2)(fp − fs)/fs)."""
    fs, fp = np.asarray(fs_hz, dtype=float), np.asarray(fp_hz, dtype=float)
    ratio = np.pi / 2 * (fp / fs) * np.tan(np.pi / 2 * (fp - fs) / fs)
    return _root(ratio / (1 + ratio))


def k33(fs_hz: ArrayLike, fp_hz: ArrayLike) -> Floats:
    """Length mode of a rod with the field along it: k² = (π/2)(fs/fp) tan((π/2)(fp − fs)/fp)."""
    fs, fp = np.asarray(fs_hz, dtype=float), np.asarray(fp_hz, dtype=float)
    return _root(np.pi / 2 * (fs / fp) * np.tan(np.pi / 2 * (fp - fs) / fp))


def kt(fs_hz: ArrayLike, fp_hz: ArrayLike) -> Floats:
    """Thickness mode of a plate: the same formula as k33, with the clamped plate's constants."""
    return k33(fs_hz, fp_hz)


def radial_root(poisson: ArrayLike) -> Floats:
    """Lowest root η₁ of (1 − σ) J₁(η) = η J₀(η), the thin disc's first radial mode.

    >>> round(float(radial_root(0.33)), 5)
    2.06736
    """
    sigma = np.asarray(poisson, dtype=float)
    low, high = np.full(sigma.shape, 1.5), np.full(sigma.shape, 2.4)
    return root(lambda eta: eta * special.j0(eta) - (1 - sigma) * special.j1(eta), low, high)


def kp(fs_hz: ArrayLike, fp_hz: ArrayLike, poisson: float) -> Floats:
    """Planar coupling of a thin plain disc with planar Poisson's ratio σ.

    k²/(1 − k²) = [(1 − σ) J₁(y) − y J₀(y)] / [(1 + σ) J₁(y)], y = η₁ fp/fs. Not for rings or thick discs.
    """
    fs, fp = np.asarray(fs_hz, dtype=float), np.asarray(fp_hz, dtype=float)
    y = radial_root(poisson) * fp / fs
    ratio = ((1 - poisson) * special.j1(y) - y * special.j0(y)) / ((1 + poisson) * special.j1(y))
    return _root(ratio / (1 + ratio))


def _root(square: Floats) -> Floats:
    return np.sqrt(np.where(square > 0, square, np.nan))
