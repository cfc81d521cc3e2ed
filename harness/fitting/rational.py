"""A closed-form start: the lossy resonator as a ratio of polynomials, by linear least squares.

With s = jf/f₀, one branch beside a capacitance is Y(s) = (b₁s + b₂s² + b₃s³)/(1 + a₁s + a₂s²); multiplied out it is
linear in its five coefficients (E. C. Levy, 1959), and weighting by the last denominator found removes the bias of
that (C. K. Sanathanan and J. Koerner, 1963). Attributions from memory. It needs no point near the resonance: the
branch's tails off resonance tell where it is.
"""

from __future__ import annotations

import numpy as np

from harness.fitting.model import Data
from harness.fitting.start import conductance
from harness.records import Floats

_ROUNDS = 4


def single_branch(data: Data) -> Floats:
    """Parameters ``(B, 7)`` of one branch (layout of ``model``); rows that give no resonator are NaN.

    Rows ``(B, N)`` with at least 5 points of weight 1 each.
    """
    g, b = conductance(data)
    kept = data.weight > 0
    f0 = np.sqrt(np.where(kept, data.f_hz, np.inf).min(axis=-1) * np.where(kept, data.f_hz, -np.inf).max(axis=-1))[
        :, None
    ]
    size = np.hypot(g, b)
    scale = np.median(np.where(kept, size, 0.0), axis=-1)[:, None]
    scale = np.where(scale > 0, scale, 1.0)
    x, g, b = data.f_hz / f0, g / scale, b / scale
    columns, right = _equations(x, g, b)
    weight = data.weight / np.where(size > 0, size / scale, 1.0)
    found = np.full((len(x), 5), np.nan)
    for _ in range(_ROUNDS):
        found = _least_squares(columns, right, weight)
        a1, a2 = found[:, 3, None], found[:, 4, None]
        denominator = np.hypot(1 - a2 * x * x, a1 * x)
        floor = 1e-3 * np.median(denominator, axis=-1, keepdims=True)
        weight = data.weight / np.where(size > 0, size / scale, 1.0) / np.maximum(denominator, np.maximum(floor, 1e-12))
    return _parameters(found, f0[:, 0], scale[:, 0])


def _equations(x: Floats, g: Floats, b: Floats) -> tuple[Floats, Floats]:
    """Columns ``(B, 2N, 5)`` of (b₁, b₂, b₃, a₁, a₂) and the right side ``(B, 2N)``: real parts, then imaginary."""
    zero = np.zeros_like(x)
    real = np.stack([zero, -(x**2), zero, x * b, x**2 * g], axis=-1)
    imag = np.stack([x, zero, -(x**3), -x * g, x**2 * b], axis=-1)
    return np.concatenate([real, imag], axis=-2), np.concatenate([g, b], axis=-1)


def _least_squares(columns: Floats, right: Floats, weight: Floats) -> Floats:
    """Row by row by QR, the columns scaled to length one first; NaN where the columns do not tell all five apart."""
    both = np.concatenate([weight, weight], axis=-1)
    a, y = columns * both[:, :, None], right * both
    length = np.sqrt((a * a).sum(axis=1))
    length = np.where(length > 0, length, 1.0)
    q, r = np.linalg.qr(a / length[:, None, :])
    firm = np.abs(np.diagonal(r, axis1=1, axis2=2)).min(axis=1) > 1e-13
    r = np.where(firm[:, None, None], r, np.eye(5))
    projected = (q * y[:, :, None]).sum(axis=1)
    solved = np.linalg.solve(r, projected[:, :, None])[:, :, 0] / length
    return np.where(firm[:, None], solved, np.nan)


def _parameters(found: Floats, f0: Floats, scale: Floats) -> Floats:
    """Coefficients → (ln C, tan δ, ln f, ln Q, ln G, θ, Rs). C∞ = b₃/a₂, C∞ + C1 = b₁, each times scale/(2πf₀)."""
    b1, _, b3, a1, a2 = (found[:, k] for k in range(5))
    with np.errstate(invalid="ignore", divide="ignore"):
        root = np.sqrt(a2)
        q = np.clip(np.where(a1 > 0, root / a1, 1e5), 1.0, 1e5)  # a noisy loss may come out negative: sharp, then
        c = b3 / a2
        c1 = b1 - c
        # at resonance s² = −1/a₂: G = Q·ω₀C1 in the scaled units
        g = q * c1 / root
        sound = (a2 > 0) & (c > 0) & (c1 > 0)
        zero = np.zeros_like(q)
        out = np.stack(
            [np.log(c * scale / (2 * np.pi * f0)), zero, np.log(f0 / root), np.log(q), np.log(g * scale), zero, zero],
            axis=-1,
        )
    return np.where(sound[:, None], out, np.nan)
