"""Is a sweep without a resonance a plain element, or a broken measurement?

A capacitor with loss, a coil, a resistor, a lead: Z = R + D/ω + j(ωL − 1/(ωC)), linear in R, D, L and 1/C, also far
below the resonance of another mode, whose pull L takes up to first order.
"""

from __future__ import annotations

import numpy as np

from harness.records import Complexes, Floats


def misfit(f_hz: Floats, z_ohm: Complexes) -> float:
    """√mean(|ΔZ|²/|Z|²) that the best plain element leaves of a sweep ``(N,)``; NaN with fewer than 5 points.

    >>> f = np.linspace(1e3, 2e3, 21)
    >>> round(misfit(f, 1 / (2j * np.pi * f * 1e-9 * (1 - 0.02j))), 9)
    0.0
    """
    good = np.isfinite(f_hz) & (f_hz > 0) & np.isfinite(z_ohm) & (z_ohm != 0)
    f, z = f_hz[good], z_ohm[good]
    if f.size < 5:
        return float("nan")
    x, size = f / np.median(f), np.abs(z)
    real = np.stack([np.ones_like(x), 1 / x], axis=-1) / size[:, None]
    imag = np.stack([x, 1 / x], axis=-1) / size[:, None]
    left = [
        side - columns @ np.linalg.lstsq(columns, side)[0]
        for columns, side in ((real, z.real / size), (imag, z.imag / size))
    ]
    return float(np.sqrt(sum(np.mean(part**2) for part in left)))
