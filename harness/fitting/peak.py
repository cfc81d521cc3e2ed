"""One peak of a transmission log whose level means nothing: its frequency and its width, and no more.

t(f) = b₀ + b₁x + A/(1 + jQ(f/f₀ − f₀/f)), x from −1 to 1 over the points used, b and A complex: what passes beside
the resonance and the fixture's delay are in b and in A's phase.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.fitting import solver
from harness.records import Complexes, FitStatus, Floats

_REACH = 4.0  # half-power widths to either side of the peak
_LEAST_WIDTH = 3  # points within the half-power width
_LEAST_POINTS = 12
_MOST_MISFIT = 0.02  # rms over the peak's height; a slow sweep of one resonance leaves less
_LEAST_HEIGHT = 10.0  # times the misfit


@dataclass(frozen=True, slots=True)
class Peak:
    """``status`` with a sentence; where ok, f₀ and Q with their standard uncertainties, the misfit (rms over the
    peak's height), degrees of freedom, and the range of frequencies used."""

    status: FitStatus
    message: str
    f_hz: float = np.nan
    u_f_hz: float = np.nan
    q: float = np.nan
    u_q: float = np.nan
    misfit: float = np.nan
    dof: int = 0
    span_hz: tuple[float, float] = (np.nan, np.nan)


def fit_peak(f_hz: Floats, transmission: Complexes, window_hz: tuple[float, float]) -> Peak:
    """The highest peak inside a window.

    ``f_hz`` ``(N,)`` in hertz, any order; ``transmission`` ``(N,)``, complex, in any unit.
    """
    good = np.isfinite(f_hz) & (f_hz > 0) & np.isfinite(transmission.real) & np.isfinite(transmission.imag)
    order = np.argsort(f_hz[good], kind="stable")
    f, t = f_hz[good][order], transmission[good][order]
    if f.size < _LEAST_POINTS or f[-1] <= f[0]:
        return Peak(FitStatus.BAD_DATA, f"only {f.size} usable points; at least {_LEAST_POINTS} are needed")
    size = np.where((f >= window_hz[0]) & (f <= window_hz[1]), np.abs(t), -np.inf)
    top = int(size.argmax())
    if not np.isfinite(size[top]) or not size[top] > 0:
        return Peak(FitStatus.NO_RESONANCE, "there are no points in the window")
    low, high = _half_power(np.abs(t), top)
    if low is None or high is None:
        return Peak(FitStatus.NO_RESONANCE, "the transmission shows no peak in the window")
    width = float(f[high] - f[low])
    if high - low - 1 < _LEAST_WIDTH or not width > 0:
        text = f"the points do not resolve the peak near {f[top]:.8g} Hz; measure closer together there"
        return Peak(FitStatus.NOT_RESOLVED, text)
    near = np.abs(f - f[top]) <= _REACH * width
    return _fitted(f[near], t[near] / size[top], float(f[top]), width)


def _half_power(size: Floats, top: int) -> tuple[int | None, int | None]:
    """The nearest points to either side where the power has fallen to half; None where it does not."""
    fallen = np.flatnonzero(size < size[top] / np.sqrt(2))
    below, above = fallen[fallen < top], fallen[fallen > top]
    return (int(below[-1]) if below.size else None), (int(above[0]) if above.size else None)


def _fitted(f: Floats, t: Complexes, f0: float, width: float) -> Peak:
    begin = np.array([np.log(f0), np.log(f0 / width), *_linear_start(f, t, f0, f0 / width)])
    evaluate = _evaluator(f, t)
    found = solver.solve(evaluate, begin[None, :], tuple(range(8)))
    ln_f, ln_q, a_re, a_im = (float(part) for part in found.parameters[0, :4])
    dof = 2 * f.size - 8
    rms, height = float(np.sqrt(found.cost[0] / (2 * f.size))), float(np.hypot(a_re, a_im))
    at, q, misfit = float(np.exp(ln_f)), float(np.exp(ln_q)), rms / max(height, 1e-300)
    inside = f[0] <= at <= f[-1]
    if not inside or not found.converged[0] or misfit > 1 / _LEAST_HEIGHT or dof < 4 or misfit > _MOST_MISFIT:
        text = (
            f"the peak near {f0:.8g} Hz is not the curve of one resonance (misfit {100 * misfit:.2g} % of its height): "
            "swept so fast that it rings, or several modes at once; sweep more slowly, over less"
        )
        return Peak(FitStatus.NOT_RESOLVED, text)
    lag = _lag_one(evaluate(found.parameters, np.arange(1))[0][0])
    # neighbours that err alike tell less than they seem to; and Student's t for the scale
    covariance = solver.covariance(found.normal)[0] * found.cost[0] / (dof - 2) * (1 + lag) / (1 - lag)
    u_ln_f, u_ln_q = (float(np.sqrt(covariance[k, k])) for k in (0, 1))
    span = (float(f[0]), float(f[-1]))
    return Peak(FitStatus.OK, "peak found and resolved", at, at * u_ln_f, q, q * u_ln_q, misfit, dof, span)


def _lag_one(value: Floats) -> float:
    """Correlation of neighbouring misfits, from 0 to 0.9."""
    n = value.size // 2
    alike = sum(float((part[1:] * part[:-1]).sum()) for part in (value[:n], value[n:]))
    return float(np.clip(alike / max(float((value**2).sum()), 1e-300), 0.0, 0.9))


def _linear_start(f: Floats, t: Complexes, f0: float, q: float) -> list[float]:
    """A and b₀, b₁ that suit a given f₀ and Q, by complex least squares."""
    columns = np.stack([_shape(f, f0, q), np.ones(f.size), _across(f)], axis=-1)
    scale = np.linalg.norm(columns, axis=0)
    found = np.linalg.lstsq(columns / scale, t, rcond=None)[0] / scale
    return [float(part) for number in found for part in (number.real, number.imag)]


def _across(f: Floats) -> Floats:
    return np.asarray(2 * (f - f[0]) / (f[-1] - f[0]) - 1)


def _shape(f: Floats, f0: float, q: float) -> Complexes:
    return np.asarray(1 / (1 + 1j * q * (f / f0 - f0 / f)))


def _evaluator(f: Floats, t: Complexes) -> solver.Evaluate:
    """Misfit and slopes by (ln f₀, ln Q, Re A, Im A, Re b₀, Im b₀, Re b₁, Im b₁) for single-row use."""
    x = _across(f)

    def evaluate(parameters: Floats, rows: solver.Index) -> tuple[Floats, list[Floats], Floats]:
        values, slopes = [], []
        for p in parameters:
            f0, q = float(np.exp(p[0])), float(np.exp(p[1]))
            a, shape = complex(p[2], p[3]), _shape(f, f0, q)
            ratio = f / f0
            turn = a * shape * shape
            columns = [
                turn * 1j * q * (ratio + 1 / ratio), -turn * 1j * q * (ratio - 1 / ratio), shape, 1j * shape,
                np.ones(f.size) + 0j, 1j * np.ones(f.size), x + 0j, 1j * x,
            ]  # fmt: skip
            values.append(_split(a * shape + complex(p[4], p[5]) + complex(p[6], p[7]) * x - t))
            slopes.append([_split(np.asarray(column)) for column in columns])
        value = np.stack(values)
        return value, [np.stack(column) for column in zip(*slopes, strict=True)], np.ones_like(value)

    return evaluate


def _split(z: Complexes) -> Floats:
    return np.concatenate([z.real, z.imag])
