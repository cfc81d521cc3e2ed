"""One try of a circuit on rows of data: solve, drop lone wild points, scale the covariance, say what it is worth."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harness.fitting import bounce, model, solver
from harness.fitting.model import Data
from harness.records import Floats

_CLEARLY_LESS = 0.9  # of the noise estimate
_UNEXPLAINED = 2.0  # times the typical step between neighbours
LEAST_KNOWN_C0 = 0.3  # relative u of C0 beyond which the sweep has not reached what lies beside the resonance
SIGNIFICANT = 60.0  # least fall of misfit²/noise² that a branch must bring, against one found anywhere by chance
_Misfit = Callable[[Floats, Data, tuple[int, ...]], tuple[Floats, list[Floats], Floats]]
_ROUGH = 1.0  # of a standard uncertainty, as ``solver.solve`` counts it
_HALF_POWER_WIDTHS = 2.0
_MOST_LOSS = 0.5  # |tan δ| of what lies beside the branch; beyond, it is no dielectric
_ALIKE = 0.5  # correlation of neighbouring residuals from which a sweep's wandering could look like a resonance
_MOST_MISFIT = 0.3  # relative, that such a sweep may leave
_LEAST_POINTS = 3  # within two half-power half-widths of fs


@dataclass(frozen=True, slots=True, eq=False)
class Fitted:
    """Rows fitted: ``parameters`` (B, P); ``covariance`` (B, F, F) of the free ones, scaled; ``scale`` (B,) the
    noise estimate (relative, or in units of the sigma given); ``relative_rms`` (B,); ``weight`` (B, N) as used;
    ``lag_one`` (B,) the correlation of neighbouring residuals."""

    parameters: Floats
    covariance: Floats
    scale: Floats
    relative_rms: Floats
    dof: NDArray[np.int64]
    cost: Floats
    converged: NDArray[np.bool_]
    weight: Floats
    lag_one: Floats

    def rows(self, index: NDArray[np.intp]) -> Fitted:
        return Fitted(
            self.parameters[index],
            self.covariance[index],
            self.scale[index],
            self.relative_rms[index],
            self.dof[index],
            self.cost[index],
            self.converged[index],
            self.weight[index],
            self.lag_one[index],
        )

    def replaced(self, index: NDArray[np.intp], other: Fitted) -> Fitted:
        """With the rows ``index`` taken from ``other``, in its order."""
        where = np.arange(len(self.cost))
        where[index] = len(where) + np.arange(index.size)
        return Fitted(
            np.concatenate([self.parameters, other.parameters])[where],
            np.concatenate([self.covariance, other.covariance])[where],
            np.concatenate([self.scale, other.scale])[where],
            np.concatenate([self.relative_rms, other.relative_rms])[where],
            np.concatenate([self.dof, other.dof])[where],
            np.concatenate([self.cost, other.cost])[where],
            np.concatenate([self.converged, other.converged])[where],
            np.concatenate([self.weight, other.weight])[where],
            np.concatenate([self.lag_one, other.lag_one])[where],
        )


def fit_branches(data: Data, begin: Floats, free: tuple[int, ...], *, rejecting: bool = True) -> Fitted:
    """Fit rows from ``begin`` (B, P), moving the parameters ``free``; with ``rejecting``, lone wild points are dropped.

    A sweep with points that step out of line, and more misfit than it has noise, is fitted a second time without them.
    They come back where that fit explains them; the second way is taken where it leaves clearly less.
    """
    if not rejecting:
        return _finish(data, _solve(data, begin, free), free)
    fitted = _dropping(data, begin, free)
    doubtful, typical = bounce.suspects(data)
    rows = np.flatnonzero(doubtful.any(axis=-1) & ~(fitted.relative_rms < _UNEXPLAINED * typical))
    if rows.size == 0:
        return fitted
    second = _doubting(data.rows(rows), begin[rows], free, doubtful[rows])
    better = second.converged & (second.scale < _CLEARLY_LESS * fitted.scale[rows])
    return fitted.replaced(rows[better], second.rows(np.flatnonzero(better)))


def as_it_stands(data: Data, parameters: Floats, free: tuple[int, ...]) -> Fitted:
    """Rows at given parameters, nothing moved."""
    return _finish(
        data, solver.solve(_evaluator(model.misfit_and_slopes, data, free), parameters, free, iterations=0), free
    )


def _dropping(data: Data, begin: Floats, free: tuple[int, ...]) -> Fitted:
    """Solve, drop lone wild points once, and solve those rows again."""
    fitted = _finish(data, _solve(data, begin, free), free)
    kept = data.weight * ~bounce.lone_wild(model.misfit(fitted.parameters, data), data.weight)
    touched = np.flatnonzero((kept != data.weight).any(axis=-1))
    if touched.size == 0:
        return fitted
    part = data.weighted(kept).rows(touched)
    again = _solve(part, fitted.parameters[touched], free, afar=False)
    return fitted.replaced(touched, _finish(part, again, free))


def _doubting(data: Data, begin: Floats, free: tuple[int, ...], doubtful: NDArray[np.bool_]) -> Fitted:
    """Solve without the doubtful points, take back those that are explained, and solve again."""
    trusted = _solve(data.weighted(data.weight * ~doubtful), begin, free)
    wild = bounce.stubborn(model.misfit(trusted.parameters, data), data.weight, doubtful)
    part = data.weighted(data.weight * ~wild)
    return _finish(part, _solve(part, trusted.parameters, free, afar=False), free)


def _solve(data: Data, begin: Floats, free: tuple[int, ...], *, afar: bool = True) -> solver.Solution:
    """From afar by logarithms first, then to the likelihood's own root."""
    if afar:
        rough = solver.solve(_evaluator(model.log_misfit_and_slopes, data, free), begin, free, tolerance=_ROUGH)
        begin = np.where(np.isfinite(rough.parameters), rough.parameters, begin)
    return solver.solve(_evaluator(model.misfit_and_slopes, data, free), begin, free)


def _evaluator(misfit: _Misfit, data: Data, free: tuple[int, ...]) -> solver.Evaluate:
    def evaluate(parameters: Floats, rows: solver.Index) -> tuple[Floats, list[Floats], Floats]:
        # all rows: no copy
        part = data if rows.size == len(data.f_hz) else data.rows(rows)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            return misfit(parameters, part, free)

    return evaluate


def _finish(data: Data, solution: solver.Solution, free: tuple[int, ...]) -> Fitted:
    count = data.weight.sum(axis=-1)
    dof = np.maximum(2 * count.astype(np.int64) - len(free), 1)
    reduced = solution.cost / dof
    scale2 = np.maximum(reduced, 1.0) if data.sigma_ohm is not None else reduced
    # the scale is itself estimated: a t-distributed quantity's standard deviation (JCGM 100, G.3; JCGM 101, 6.4.9)
    student = dof / np.maximum(dof - 2, 1)
    covariance = solver.covariance(solution.normal) * (scale2 * student)[:, None, None]
    circuit = model.circuit_of(solution.parameters)
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        rm, xm = model.impedance(circuit, *model.admittance(circuit, data.f_hz))
        rms = _measured_rms(data, rm, xm)
        lag = _lag_one(data, rm, xm)
    return Fitted(
        solution.parameters, covariance, np.sqrt(scale2), rms, dof, solution.cost, solution.converged, data.weight, lag
    )


def _measured_rms(data: Data, rm: Floats, xm: Floats) -> Floats:
    """√mean(|ΔZ|²/|Z|²) over the points kept, |Z| as measured."""
    measured = data.r_ohm**2 + data.x_ohm**2
    square = ((rm - data.r_ohm) ** 2 + (xm - data.x_ohm) ** 2) / np.where(measured > 0, measured, 1.0)
    return np.asarray(np.sqrt((data.weight * square).sum(axis=-1) / np.maximum(data.weight.sum(axis=-1), 1)))


def _lag_one(data: Data, rm: Floats, xm: Floats) -> Floats:
    """Correlation ``(B,)`` of each point's misfit with its neighbour's, real and imaginary parts together."""
    scale = data.weight / (np.hypot(rm, xm) if data.sigma_ohm is None else data.sigma_ohm)
    alike, all_of_it = np.zeros(len(scale)), np.full(len(scale), 1e-300)
    for part in ((rm - data.r_ohm) * scale, (xm - data.x_ohm) * scale):
        alike = alike + (part[:, 1:] * part[:, :-1]).sum(axis=-1)
        all_of_it = all_of_it + (part * part).sum(axis=-1)
    return np.asarray(alike / all_of_it)


def judge_fit(data: Data, fitted: Fitted, window: tuple[float, float] | None) -> NDArray[np.str_]:
    """Status words ``(B,)``: is there a resonance, inside the data and the window, and do the points resolve it?"""
    circuit = model.circuit_of(fitted.parameters)
    fs, q = circuit.f_hz[:, 0], circuit.q[:, 0]
    low = np.where(fitted.weight > 0, data.f_hz, np.inf).min(axis=-1)
    high = np.where(fitted.weight > 0, data.f_hz, -np.inf).max(axis=-1)
    if window is not None:
        low, high = np.maximum(low, window[0]), np.minimum(high, window[1])
    noise2 = fitted.scale**2
    bare = capacitor_cost(data, fitted.weight)
    with np.errstate(divide="ignore", invalid="ignore"):
        gain = (bare - fitted.cost) / np.maximum(noise2, 1e-24)
        inside = (fs >= low) & (fs <= high)
        # neighbours that err alike count for less: as much as a first-order autoregression's would
        alike = fitted.lag_one > _ALIKE
        gain = gain * np.where(alike, (1 - fitted.lag_one) / (1 + fitted.lag_one), 1.0)
        merit = circuit.g_s[:, 0] / (2 * np.pi * fs * circuit.c_f)
        wandering = alike & ((fitted.relative_rms > _MOST_MISFIT) | (merit < 1))
        sound = inside & ~wandering & (gain > SIGNIFICANT) & (q > 1.5) & (np.abs(circuit.theta_rad[:, 0]) < 1.2)
        u_loss = np.sqrt(fitted.covariance[:, 1, 1])
        sound &= ~(np.abs(circuit.tan_delta) - 3 * u_loss > _MOST_LOSS)
        sound &= np.isfinite(fitted.cost) & _turns(data, fitted.weight)
        near = np.abs(q[:, None] * (data.f_hz / fs[:, None] - fs[:, None] / data.f_hz)) <= _HALF_POWER_WIDTHS
    points = (near & (fitted.weight > 0)).sum(axis=-1)
    u_ln_f, u_ln_q, u_ln_g = (np.sqrt(fitted.covariance[:, k, k]) for k in (2, 3, 4))
    clear = (u_ln_f * q < 0.25) & (u_ln_q < 0.35) & (u_ln_g < 0.35) & fitted.converged
    words = np.where(sound, np.where(clear & (points >= _LEAST_POINTS), "ok", "not-resolved"), "no-resonance")
    return words.astype("<U13")


def _turns(data: Data, weight: Floats) -> NDArray[np.bool_]:
    """A piezo element is capacitive off resonance: somewhere the reactance must be negative. A coil's never is."""
    return np.asarray(((data.x_ohm < 0) & (weight > 0)).sum(axis=-1) >= 2)


def capacitor_cost(data: Data, weight: Floats) -> Floats:
    """Misfit² ``(B,)`` of a bare lossy capacitance, Y = jωC(1 − j tan δ), relative weights by the measured |Z|.

    Linear in 1/C and its loss: Z = (A − jB)/ω, weighted by 1/|Z|, each a mean.
    """
    omega = 2 * np.pi * data.f_hz
    size2 = data.r_ohm**2 + data.x_ohm**2
    sigma2 = np.where(size2 > 0, size2, 1.0) if data.sigma_ohm is None else data.sigma_ohm**2
    w = weight / sigma2
    base = (w / omega**2).sum(axis=-1)
    a = (w * data.r_ohm / omega).sum(axis=-1) / base
    b = (w * data.x_ohm / omega).sum(axis=-1) / base
    left = (data.r_ohm - a[:, None] / omega) ** 2 + (data.x_ohm - b[:, None] / omega) ** 2
    return np.asarray((w * left).sum(axis=-1))
