"""One sweep, fitted with care: the wanted mode found, the span cut, further modes added while the data ask.

The parameters' covariance comes from the fit; what the choice of span is worth comes from refits, and what the
fixture's correction is worth from refits under a shifted correction.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from harness.circuits import resonator
from harness.fitting import growth, model, modes, noise, plain, start, trial
from harness.fitting.growth import Grown
from harness.fitting.model import Data
from harness.fitting.trial import Fitted
from harness.records import Complexes, FitStatus, Floats

_REACHES = (10.0, 5.0)  # bandwidths to either side of the conductance peak
_NOISE_ROUNDS = 2  # a first fit under the wrong weights leaves too much, and tells too much noise
_ELSEWHERE = 0.02  # misfit that a circuit resonating outside the sweep may leave, to be believed
_INNER = 0.7  # share of the span that the refit for the model term keeps


@dataclass(frozen=True, slots=True)
class Choice:
    """How to fit: where the wanted mode may lie, branches to fit at least and at most, half-width of the span as a
    share of fs (None: everything), whether a series resistance may be chosen (by information criterion)."""

    window_hz: tuple[float, float]
    branches: int = 1
    most_branches: int = 4
    span: float | None = None
    choose_series_resistance: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class SingleFit:
    """``status`` with a sentence; where ok, the parameters ``(P,)`` (wanted branch first), the free ones' scaled
    covariance, the noise found (relative), the misfit (else what a plain element leaves), the data used and the floor
    for further modes. ``sloped``: the parameters under the slope of the background that the data, which show none,
    would still allow (else None)."""

    status: FitStatus
    message: str
    parameters: Floats
    free: tuple[int, ...]
    covariance: Floats
    scale: float
    relative_rms: float
    dof: int
    data: Data
    floor: float
    dropped: int = 0
    bounced: int = 0
    lag_one: float = 0.0
    sloped: Floats | None = None


# where there is no resonance the solver may wander off to infinities; they are looked for, and refused
@np.errstate(over="ignore", invalid="ignore", divide="ignore")
def fit_one(f_hz: Floats, z_ohm: Complexes, choice: Choice, *, noise_relative: float | None = None) -> SingleFit:
    """Fit one sweep (``(N,)`` hertz and ohm, corrected for its fixture).

    ``noise_relative``: the instrument's own noise, a share of |Z|; the covariance is never scaled below it. None: how
    the noise goes with |Z| is told from what is left over.
    """
    good = np.isfinite(f_hz) & (f_hz > 0) & np.isfinite(z_ohm.real) & np.isfinite(z_ohm.imag) & (z_ohm != 0)
    dropped = int(good.size - good.sum())
    order = np.argsort(f_hz[good], kind="stable")
    f, z = f_hz[good][order], z_ohm[good][order]
    if f.size < 10 or f[-1] <= f[0]:
        return _refused(FitStatus.BAD_DATA, f"only {f.size} usable points; at least 10 are needed", f, z, dropped)
    data, grown = _from_the_start(f, z, None, choice)
    for _ in range(_NOISE_ROUNDS if noise_relative is None else 0):
        sigma = noise.sigma_of(resonator.impedance(grown.circuit, f), z) if _word(data, grown, choice) == "ok" else None
        if sigma is None:
            break
        data, grown = _from_the_start(f, z, sigma, choice)
    word = _word(data, grown, choice)
    if word != "ok":
        status = FitStatus(word)
        return _refused(status, _explain(status, data, grown.fitted), f, z, dropped, grown.fitted)
    if choice.choose_series_resistance:
        grown = growth.with_series_resistance(data, grown)
    return _finish(data, grown, choice, dropped, noise_relative)


def _from_the_start(f: Floats, z: Complexes, sigma: Floats | None, choice: Choice) -> tuple[Data, Grown]:
    """Located, and grown to what the data ask for, under noise of a share of |Z| or of ``sigma`` ``(N,)``."""
    whole = model.data_of(f[None, :], z[None, :], np.ones((1, f.size)), None if sigma is None else sigma[None, :])
    begin, located = _locate(whole, choice)
    # what bounced stays out from here on: each larger circuit would have to find it again
    return _best(whole.weighted(located.weight), choice, begin, located)


def _best(whole: Data, choice: Choice, begin: Floats, located: Fitted) -> tuple[Data, Grown]:
    """The points kept, and the best of several ways from the located branch to what the data ask for beside it.

    The first that leaves nothing which neighbours have in common is taken, else the one of least information criterion.
    """
    data = _cut(whole, located, choice)
    one = Grown(located if data is whole else _again(data, located), growth.all_but_rs(located.parameters))
    sloped = growth.bear_slope(data, one)
    if _fits(data, sloped, choice):
        return data, _with_modes(data, sloped, choice)
    ways = [(data, growth.bear_slope(data, _with_modes(data, one, choice)))]
    if not _fits(*ways[0], choice):
        ways += [(data, _with_modes(data, sloped, choice)), *_nearby(whole, choice, begin)]
    sound = [way for way in ways if _word(*way, choice) == "ok"]
    # as many points in each, or nothing could be compared
    alike = [way for way in sound if way[0].weight.sum() == sound[0][0].weight.sum()]
    return min(alike, key=lambda way: way[1].information) if alike else ways[0]


def _nearby(whole: Data, choice: Choice, begin: Floats) -> list[tuple[Data, Grown]]:
    """From the neighbourhood of the conductance peak, which a stronger mode elsewhere does not spoil."""
    ways = []
    for close in _close(whole, choice, begin):
        data, free = _cut(whole, close, choice), growth.all_but_rs(close.parameters)
        # solving for one branch on everything would lose it again
        fitted = trial.as_it_stands(data, close.parameters, free) if data is whole else _again(data, close)
        ways.append((data, growth.bear_slope(data, _with_modes(data, Grown(fitted, free), choice))))
    return ways


def _again(data: Data, fitted: Fitted) -> Fitted:
    return trial.fit_branches(data, fitted.parameters, growth.all_but_rs(fitted.parameters))


def _with_modes(data: Data, grown: Grown, choice: Choice) -> Grown:
    return growth.add_modes(data, grown, choice.window_hz, choice.branches, choice.most_branches)


def _word(data: Data, grown: Grown, choice: Choice) -> str:
    return str(trial.judge_fit(data, grown.fitted, choice.window_hz)[0])


def _fits(data: Data, grown: Grown, choice: Choice) -> bool:
    """Is there a resonance, and little left over that neighbours have in common?"""
    return _word(data, grown, choice) == "ok" and float(grown.fitted.lag_one[0]) <= growth.ALIKE


def _close(whole: Data, choice: Choice, begin: Floats) -> list[Fitted]:
    """The branch that the neighbourhood of the conductance peak shows, if it shows one."""
    f0, q0 = np.exp(begin[2]), np.exp(begin[3])
    out = []
    for reach in _REACHES:
        near = whole.weight * (np.abs(whole.f_hz / f0 - 1) <= reach / q0)
        if near.sum() >= 12:
            data = whole.weighted(near)
            fitted = trial.fit_branches(data, begin[None, :], growth.all_but_rs(begin))
            if str(trial.judge_fit(data, fitted, choice.window_hz)[0]) == "ok":
                out.append(fitted)
    return out[:1]


def _locate(data: Data, choice: Choice) -> tuple[Floats, Fitted]:
    """A single branch with motional phase on everything, from three widths; the best of them."""
    begins = [start.single_branch(data, choice.window_hz, widen=widen)[0] for widen in (1.0, 0.25, 4.0)]
    rows = data.rows(np.zeros(len(begins), dtype=np.intp))
    fitted = trial.fit_branches(rows, np.stack(begins), (0, 1, 2, 3, 4, 5))
    fs = np.exp(fitted.parameters[:, 2])
    inside = (fs >= choice.window_hz[0]) & (fs <= choice.window_hz[1])
    cost = np.where(inside & np.isfinite(fitted.cost), fitted.cost, np.inf)
    best = int(cost.argmin())
    return begins[best], fitted.rows(np.array([best]))


def _cut(whole: Data, located: Fitted, choice: Choice) -> Data:
    """Points beyond the span get no weight (the span is a share of fs, as the limit file states it)."""
    if choice.span is None:
        return whole
    fs = float(np.exp(located.parameters[0, 2]))
    inside = whole.weight * (np.abs(whole.f_hz / fs - 1) <= choice.span)
    return whole.weighted(inside) if inside.sum() >= 10 else whole


def _finish(data: Data, grown: Grown, choice: Choice, dropped: int, noise: float | None) -> SingleFit:
    fitted = grown.fitted
    used = data.weighted(fitted.weight)
    scale = float(fitted.scale[0])
    lag = _lag_one(fitted)
    # neighbours that err alike tell less than they seem to: a first-order autoregression's variance is
    # (1 + ρ)/(1 − ρ) times as large
    stretch = (1 + lag) / (1 - lag) * max(1.0, (noise or 0.0) / max(scale, 1e-30)) ** 2
    within = _overlap(growth.used_hz(used), choice.window_hz)
    smallest = modes.floor(used, grown.parameters, grown.free, within) * max(scale, noise or 0.0)
    return SingleFit(
        FitStatus.OK,
        "resonance found and resolved",
        grown.parameters,
        grown.free,
        fitted.covariance[0] * stretch,
        scale,
        float(fitted.relative_rms[0]),
        int(fitted.dof[0]),
        used,
        smallest,
        dropped,
        _left_out(data, fitted, choice),
        lag,
        None if growth.has_slope(grown) else growth.with_least_slope(used, grown),
    )


def _left_out(data: Data, fitted: Fitted, choice: Choice) -> int:
    """How many points inside the span the fit was made without."""
    everything = _cut(data.weighted(np.ones_like(data.weight)), fitted, choice)
    return int(everything.weight.sum() - fitted.weight.sum())


def _overlap(a: tuple[float, float], b: tuple[float, float]) -> tuple[float, float]:
    return max(a[0], b[0]), min(a[1], b[1])


def _lag_one(fitted: Fitted) -> float:
    """Correlation of neighbouring residuals, between 0 and 0.9; 0 where it could be chance."""
    rho = float(fitted.lag_one[0])
    return float(np.clip(rho, 0.0, 0.9)) if rho > 3 / np.sqrt(2 * fitted.weight[0].sum()) else 0.0


def refits(fit: SingleFit, impedances: Sequence[Complexes]) -> list[Floats]:
    """Parameters again: with the inner share of the points' span, with the background's slope from elsewhere, then
    for each of ``impedances`` (same points).

    One batch, begun from the fit itself. A row that does not converge comes back as the fit's own parameters.
    """
    data = fit.data
    fs = float(np.exp(fit.parameters[2]))
    used = data.f_hz[0][data.weight[0] > 0]
    reach = max(used[-1] - fs, fs - used[0]) * _INNER
    inner = data.weight[0] * (np.abs(data.f_hz[0] - fs) <= reach)
    z0 = data.r_ohm[0] + 1j * data.x_ohm[0]
    z = np.stack([z0, z0, *impedances])
    weight = np.stack([inner, *([data.weight[0]] * (len(impedances) + 1))])
    f = np.repeat(data.f_hz, len(z), axis=0)
    begin = np.repeat(fit.parameters[None, :], len(z), axis=0)
    moved = growth.elsewhere(fit.parameters, fit.free)
    begin[1] = fit.parameters if moved is None else moved
    sigma = None if data.sigma_ohm is None else np.repeat(data.sigma_ohm, len(z), axis=0)
    again = trial.fit_branches(model.data_of(f, z, weight, sigma), begin, fit.free, rejecting=False)
    # the wanted branch must stay what it is; how the background's slope is shared out may change
    near = np.abs(again.parameters - begin)[:, : model.FIRST_BRANCH + model.BRANCH].max(axis=-1) < 1.0
    fine = again.converged & near & (weight.sum(axis=-1) > fit.parameters.size)
    return [row if ok else fit.parameters for row, ok in zip(again.parameters, fine, strict=True)]


def _refused(
    status: FitStatus, message: str, f: Floats, z: Complexes, dropped: int, tried: Fitted | None = None
) -> SingleFit:
    """``tried``: the circuit that was found wanting; one that resonates elsewhere explains the sweep all the same."""
    empty, left = np.full(7, np.nan), plain.misfit(f, z)
    if tried is not None and tried.converged[0] and tried.weight.all():
        left = float(np.fmin(left, tried.relative_rms[0]))
    data = model.data_of(f[None, :], z[None, :], np.ones((1, f.size)))
    return SingleFit(status, message, empty, (), np.empty((0, 0)), np.nan, left, 0, data, np.inf, dropped)


def _explain(status: FitStatus, data: Data, fitted: Fitted) -> str:
    tell = _EXPLANATIONS.get(status)
    return tell(data, fitted) if tell else "the sweep cannot be read"


def _no_resonance(data: Data, fitted: Fitted) -> str:
    circuit = model.circuit_of(fitted.parameters[0])
    fs, q = float(circuit.f_hz[0]), float(circuit.q[0])
    low, high = growth.used_hz(data)
    if fitted.converged[0] and q > 2 and fitted.relative_rms[0] < _ELSEWHERE and not low <= fs <= high:
        return f"the resonance lies outside the sweep, near {fs:.4g} Hz"
    phase = np.degrees(np.arctan2(data.x_ohm[0], data.r_ohm[0]))[data.weight[0] > 0]
    level = np.median(np.hypot(data.r_ohm[0], data.x_ohm[0])[data.weight[0] > 0])
    middle = float(np.median(phase))
    like = "a capacitor" if middle < -45 else "a coil" if middle > 45 else "a resistor"
    looks = f"{like} (median |Z| {level:.3g} ohm, phase {middle:.0f} deg)"
    return f"no resonance in the window; the sweep looks like {looks}"


def _not_resolved(data: Data, fitted: Fitted) -> str:
    circuit = model.circuit_of(fitted.parameters[0])
    fs, q = float(circuit.f_hz[0]), float(circuit.q[0])
    near = np.abs(data.f_hz[0] / fs - 1) * 2 * q <= 2
    points = int((near & (fitted.weight[0] > 0)).sum())
    return (
        f"the points do not resolve the resonance near {fs:.6g} Hz: {points} within its width of {fs / q:.3g} Hz; "
        "measure closer together there"
    )


_EXPLANATIONS: dict[FitStatus, Callable[[Data, Fitted], str]] = {
    FitStatus.NO_RESONANCE: _no_resonance,
    FitStatus.NOT_RESOLVED: _not_resolved,
}
