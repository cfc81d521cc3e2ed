"""Thousands of sweeps at once, one branch each.

Maximum likelihood for noise of a given standard deviation, or proportional to |Z| with its scale estimated per
sweep; uncertainties from the inverse of JᵀJ, scaled by the sweep's own residuals and never below the noise given.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harness.fitting import model, start, trial
from harness.fitting.model import Data
from harness.fitting.trial import LEAST_KNOWN_C0
from harness.records import Floats

CHUNK_POINTS = 25_600  # at a time: what fits a core's own cache; changes no bit


@dataclass(frozen=True, slots=True, eq=False)
class BatchFit:
    """Arrays ``(B,)``; NaN where ``status`` is not "ok". ``u_…`` are standard uncertainties in the same unit.

    Where the points stay so near the resonance that C0 is not told to 30 %, it is NaN, and so is what hangs on it: fp,
    tan δ and keff.
    """

    status: NDArray[np.str_]
    fs_hz: Floats
    fp_hz: Floats
    r1_ohm: Floats
    q: Floats
    c0_f: Floats
    tan_delta: Floats
    c1_f: Floats
    l1_h: Floats
    keff: Floats
    u_fs_hz: Floats
    u_fp_hz: Floats
    u_r1_ohm: Floats
    u_q: Floats
    u_c0_f: Floats
    u_tan_delta: Floats
    u_c1_f: Floats
    u_l1_h: Floats
    u_keff: Floats
    relative_rms: Floats


_NAMES = ("fs_hz", "fp_hz", "r1_ohm", "q", "c0_f", "tan_delta", "c1_f", "l1_h", "keff")
_BESIDE = np.array([name in ("fp_hz", "c0_f", "tan_delta", "keff") for name in 2 * _NAMES] + [False])


def fit_batch(
    f_hz: ArrayLike,
    z_ohm: ArrayLike,
    *,
    sigma_ohm: ArrayLike | None = None,
    search_hz: Sequence[float] | None = None,
    series_resistance: bool = False,
    motional_phase: bool = False,
) -> BatchFit:
    """Fit one resonance to each of ``B`` sweeps of ``N`` points.

    ``f_hz`` ``(N,)`` or ``(B, N)``, hertz, any order; ``z_ohm`` complex ``(B, N)``, or ``(N,)`` as one sweep;
    ``sigma_ohm`` standard deviation of the real and of the imaginary part, broadcast to ``(B, N)``. Points that are
    not finite are dropped. ``search_hz`` bounds where the resonance may lie. ``series_resistance`` and
    ``motional_phase`` free Rs and θ. Raises ValueError only where shapes do not match.

    >>> from harness.circuits import resonator
    >>> f = np.linspace(39e3, 43e3, 401)
    >>> z = resonator.impedance(resonator.from_elements(21.05, 0.03515, 4.4862e-10, 4.07569e-9), f)
    >>> fit = fit_batch(f, z)
    >>> str(fit.status[0]), round(float(fit.fs_hz[0]), 3)
    ('ok', 40079.118)
    """
    data = _rows(f_hz, z_ohm, sigma_ohm)
    window = None if search_hz is None else (float(search_hz[0]), float(search_hz[1]))
    free = (0, 1, 2, 3, 4, *((5,) if motional_phase else ()), *((6,) if series_resistance else ()))
    count, points = data.f_hz.shape
    rows = max(1, CHUNK_POINTS // max(points, 1))
    parts = [_chunk(data.rows(np.arange(k, min(k + rows, count))), window, free) for k in range(0, count, rows)]
    if not parts:
        return BatchFit(np.empty(0, dtype="<U13"), *(np.empty(0) for _ in range(2 * len(_NAMES) + 1)))
    columns = [np.concatenate(column) for column in zip(*parts, strict=True)]
    return BatchFit(*columns)


def _rows(f_hz: ArrayLike, z_ohm: ArrayLike, sigma_ohm: ArrayLike | None) -> Data:
    """Checked, sorted rows; points that are not finite (or not positive in f) get weight 0 and a harmless stand-in."""
    z = np.atleast_2d(np.asarray(z_ohm, dtype=np.complex128))
    f = np.asarray(f_hz, dtype=np.float64)
    if z.ndim != 2 or f.ndim not in (1, 2) or f.shape[-1] != z.shape[-1] or (f.ndim == 2 and f.shape != z.shape):
        raise ValueError(f"frequencies {np.shape(f_hz)} and impedances {np.shape(z_ohm)} do not match: (N,) or (B, N)")
    f = np.ascontiguousarray(np.broadcast_to(f, z.shape))
    sigma = None
    if sigma_ohm is not None:
        try:
            sigma = np.ascontiguousarray(np.broadcast_to(np.asarray(sigma_ohm, dtype=np.float64), z.shape))
        except ValueError:
            raise ValueError(f"sigma {np.shape(sigma_ohm)} does not match impedances {z.shape}") from None
    good = np.isfinite(f) & (f > 0) & np.isfinite(z.real) & np.isfinite(z.imag) & (z != 0)
    if sigma is not None:
        good &= np.isfinite(sigma) & (sigma > 0)
        sigma = np.where(good, sigma, 1.0)
    fill = np.where(good, f, 0).max(axis=-1, keepdims=True) if z.shape[-1] else f
    f, z = np.where(good, f, np.where(fill > 0, fill, 1.0)), np.where(good, z, 1.0)
    order = np.argsort(f, axis=-1, kind="stable")
    f, z, weight = (np.take_along_axis(part, order, axis=-1) for part in (f, z, good.astype(float)))
    sigma = None if sigma is None else np.take_along_axis(sigma, order, axis=-1)
    return model.data_of(f, z, weight, sigma)


def _chunk(data: Data, window: tuple[float, float] | None, free: tuple[int, ...]) -> list[NDArray[np.generic]]:
    count = data.weight.sum(axis=-1)
    status = np.full(len(count), "bad-data", dtype="<U13")
    values = np.full((len(count), 2 * len(_NAMES) + 1), np.nan)
    enough = np.flatnonzero(count >= len(free) + 3)
    status[enough], values[enough] = _fitted(data.rows(enough), window, free)
    if window is not None:
        # another resonance outside the window can spoil the whole: look at the window alone
        inside = data.weight * ((data.f_hz >= window[0]) & (data.f_hz <= window[1]))
        again = np.flatnonzero((count >= len(free) + 3) & (status != "ok") & (inside.sum(axis=-1) >= len(free) + 3))
        words, columns = _fitted(data.weighted(inside).rows(again), window, free)
        status[again[words == "ok"]], values[again[words == "ok"]] = "ok", columns[words == "ok"]
    return [status, *values.T]


def _fitted(data: Data, window: tuple[float, float] | None, free: tuple[int, ...]) -> tuple[NDArray[np.str_], Floats]:
    """Status words ``(B,)`` and columns ``(B, 19)``, NaN where not ok."""
    if len(data.f_hz) == 0:
        return np.empty(0, dtype="<U13"), np.empty((0, 2 * len(_NAMES) + 1))
    fitted = trial.fit_branches(data, start.single_branch(data, window), free)
    words = trial.judge_fit(data, fitted, window)
    columns = _columns(fitted, free)
    unreached = ~(fitted.covariance[:, 0, 0] < LEAST_KNOWN_C0**2)
    columns[unreached[:, None] & _BESIDE] = np.nan
    columns[words != "ok"] = np.nan
    return words, columns


def _columns(fitted: trial.Fitted, free: tuple[int, ...]) -> Floats:
    """Values, their uncertainties and the misfit, ``(B, 19)``, by exact derivatives in the logarithms."""
    p = fitted.parameters
    ln_c, loss, ln_f, ln_q, ln_g = (p[:, k] for k in range(5))
    ln_c1 = ln_g - np.log(2 * np.pi) - ln_f - ln_q
    rho = np.exp(ln_c1 - ln_c)
    values = [
        np.exp(ln_f), np.exp(ln_f) * np.sqrt(1 + rho), np.exp(-ln_g), np.exp(ln_q), np.exp(ln_c), loss,
        np.exp(ln_c1), np.exp(ln_q - np.log(2 * np.pi) - ln_f - ln_g), np.sqrt(rho / (1 + rho)),
    ]  # fmt: skip
    one, zero = np.ones_like(rho), np.zeros_like(rho)
    half_fp, half_k = 0.5 * rho / (1 + rho), 0.5 / (1 + rho)
    # rows: d ln(value) by ln C, tan δ, ln f, ln Q, ln G  (tan δ itself: its plain derivative)
    slopes = [
        (zero, zero, one, zero, zero),
        (-half_fp, zero, 1 - half_fp, -half_fp, half_fp),
        (zero, zero, zero, zero, -one),
        (zero, zero, zero, one, zero),
        (one, zero, zero, zero, zero),
        (zero, one, zero, zero, zero),
        (zero, zero, -one, -one, one),
        (zero, zero, -one, one, -one),
        (-half_k, zero, -half_k, -half_k, half_k),
    ]
    u = []
    for name, value, slope in zip(_NAMES, values, slopes, strict=True):
        g = np.stack(slope, axis=-1)
        variance = np.einsum("bi,bij,bj->b", g, fitted.covariance[:, :5, :5], g)
        u.append(np.sqrt(variance) * (1.0 if name == "tan_delta" else np.abs(value)))
    return np.stack([*values, *u, fitted.relative_rms], axis=-1)
