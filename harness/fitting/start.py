"""Where a fit begins: the conductance peak, its half-power width, and what capacitance is left.

Rows ``(B, N)`` with frequencies rising. Dropped points have weight 0.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from harness.fitting.model import Data
from harness.records import Floats


def conductance(data: Data) -> tuple[Floats, Floats]:
    """G and B in siemens, ``(B, N)``; 0 where a point is dropped."""
    square = data.r_ohm * data.r_ohm + data.x_ohm * data.x_ohm
    safe = np.where((data.weight > 0) & (square > 0), square, 1.0)
    keep = (data.weight > 0).astype(float)
    return keep * data.r_ohm / safe, -keep * data.x_ohm / safe


def single_branch(data: Data, search_hz: tuple[float, float] | None, *, widen: float = 1.0) -> Floats:
    """Start parameters ``(B, 7)`` of one branch (layout of ``model``), Rs = 0.

    The peak is the greatest conductance inside ``search_hz`` above the line from the sweep's one end to the
    other, since dielectric loss and modes beyond the window make G rise. ``widen`` scales the width found.
    """
    g, b = conductance(data)
    level = g - _chord(data, g)
    inside = data.weight > 0
    if search_hz is not None:
        inside = inside & (data.f_hz >= search_hz[0]) & (data.f_hz <= search_hz[1])
    peak = np.where(inside, level, -np.inf).argmax(axis=-1)
    rows = np.arange(len(g))
    f0, top = data.f_hz[rows, peak], np.maximum(level[rows, peak], 1e-30)
    width = widen * _half_width(data, level, peak, top)
    q = np.clip(f0 / width, 0.5, 1e7)
    detuning = q[:, None] * (data.f_hz / f0[:, None] - f0[:, None] / data.f_hz)
    branch = top[:, None] / (1 + detuning**2)
    c, loss = _static(data, g - branch, b + branch * detuning)
    zero = np.zeros_like(f0)
    return np.stack([np.log(c), loss, np.log(f0), np.log(q), np.log(top), zero, zero], axis=-1)


def _chord(data: Data, g: Floats) -> Floats:
    """The straight line through the medians of G at the sweep's two ends, never above either median's level."""
    n = max(2, g.shape[-1] // 40)
    low, high = np.median(g[:, :n], axis=-1), np.median(g[:, -n:], axis=-1)
    share = (data.f_hz - data.f_hz[:, :1]) / np.maximum(data.f_hz[:, -1:] - data.f_hz[:, :1], 1e-300)
    return np.asarray(low[:, None] + (high - low)[:, None] * share)


def _half_width(data: Data, level: Floats, peak: np.ndarray, top: Floats) -> Floats:
    """Full width at half of ``top``, hertz: twice the nearer side, at least the spacing at the peak."""
    index = np.arange(level.shape[-1])
    fallen = (level < 0.5 * top[:, None]) & (data.weight > 0)
    f0 = np.take_along_axis(data.f_hz, peak[:, None], axis=-1)
    far = np.inf
    above = np.where(fallen & (index > peak[:, None]), data.f_hz - f0, far).min(axis=-1)
    below = np.where(fallen & (index < peak[:, None]), f0 - data.f_hz, far).min(axis=-1)
    near = np.minimum(above, below)
    span = data.f_hz[:, -1] - data.f_hz[:, 0]
    return np.where(np.isfinite(near) & (near > 0), 2 * near, np.maximum(span / 2, 1e-9 * f0[:, 0]))


def _static(data: Data, g: Floats, b: Floats) -> tuple[Floats, Floats]:
    """C (farad) and tan δ that suit the rest, by medians, so that the resonance itself does not count."""
    omega = 2 * np.pi * data.f_hz
    kept = data.weight > 0
    size = median(np.hypot(g, b) / omega, kept)
    c = np.maximum(median(b / omega, kept), 0.05 * size + 1e-18)
    return c, np.clip(median(g / omega, kept) / c, 0.0, 0.5)


def median(values: Floats, kept: NDArray[np.bool_]) -> Floats:
    """Median ``(B,)`` of each row's ``kept`` values, the upper one of two; infinite where a row keeps none."""
    ranked = np.sort(np.where(kept, values, np.inf), axis=-1)
    middle = kept.sum(axis=-1) // 2
    return np.asarray(np.take_along_axis(ranked, np.minimum(middle, values.shape[-1] - 1)[:, None], axis=-1)[:, 0])
