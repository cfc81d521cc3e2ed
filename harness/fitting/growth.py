"""From one branch to the circuit that the data ask for: the slope of the background, further modes, series resistance.

Each step offers a larger circuit and keeps it where the data bear it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.circuits.resonator import Circuit
from harness.fitting import model, modes, solver, trial
from harness.fitting.model import Data
from harness.fitting.trial import SIGNIFICANT, Fitted
from harness.records import Floats

_MOST_PHASE = 0.6  # rad: a branch turned further is no resonance but a misfit of something else
_LEAST_Q_SHARE = 0.4  # of the wanted Q: a broader hump is a misfit of the background, not a mode
ALIKE = 0.3  # correlation of neighbouring residuals from which something is left over
_FAR = 2.0  # times fs: where the branch stands that gives the background its slope
_ROUNDING = 4.0  # misfit²/noise² that weights moving with the model may cost
_TINY = 1e-6  # of C: how much of that branch is put in to see what it would do


@dataclass(frozen=True, slots=True, eq=False)
class Grown:
    """A circuit fitted to one sweep, and which of its parameters were free."""

    fitted: Fitted
    free: tuple[int, ...]

    @property
    def parameters(self) -> Floats:
        return np.asarray(self.fitted.parameters[0])

    @property
    def circuit(self) -> Circuit:
        return model.circuit_of(self.parameters)

    @property
    def information(self) -> float:
        """Schwarz's criterion (G. Schwarz, 1978) for Gaussian noise of unknown scale."""
        n = 2 * float(self.fitted.weight[0].sum())
        return float(n * np.log(max(self.fitted.cost[0], 1e-300) / n) + len(self.free) * np.log(n))


def all_but_rs(parameters: Floats) -> tuple[int, ...]:
    """Every parameter but the series resistance."""
    return tuple(range(parameters.shape[-1] - 1))


def used_hz(data: Data) -> tuple[float, float]:
    """The range of the points that count."""
    kept = data.f_hz[0][data.weight[0] > 0]
    return float(kept[0]), float(kept[-1])


def bear_slope(data: Data, begin: Grown) -> Grown:
    """The fit with a background that rises with frequency, if it does; else as it was.

    What lies beside the modes in the data is the sum of all modes beyond: a reactance rises everywhere (R. M. Foster,
    1924), and so does the capacitance it looks like. A branch held at twice fs, its size free, carries that slope. It
    is taken wherever it comes out positive, small or not, so that the other parameters' uncertainties know of it.
    """
    tried, size, free = _slope_begun(data, begin)
    step, _ = _slope_step(data, tried, (*free, size))
    if not step[-1] > 0:
        return begin
    moved = tried.copy()
    moved[list(free)] += np.clip(step[:-1], -0.5, 0.5)
    moved[size] += np.log1p(step[-1])
    sloped = Grown(trial.fit_branches(data, moved[None, :], (*free, size)), (*free, size))
    # the slope's size may go to nothing, so more misfit than before is a solution that was not reached
    lost = sloped.fitted.cost[0] - begin.fitted.cost[0] > _ROUNDING * float(begin.fitted.scale[0]) ** 2
    return sloped if sloped.fitted.converged[0] and not lost and _sane(data, sloped) else begin


def with_least_slope(data: Data, begin: Grown) -> Floats | None:
    """Parameters under a slope of its own standard uncertainty, where the data would rather have it fall; else None."""
    tried, size, free = _slope_begun(data, begin)
    _, variance = _slope_step(data, tried, (*free, size))
    if not np.isfinite(variance) or variance <= 0:
        return None
    tried[size] += np.log(np.sqrt(variance) * float(begin.fitted.scale[0]))
    held = Grown(trial.fit_branches(data, tried[None, :], free), free)
    return held.parameters if held.fitted.converged[0] and _sane(data, held) else None


def elsewhere(parameters: Floats, free: tuple[int, ...]) -> Floats | None:
    """A start with the held branch half as far off again, of the same slope and level at fs; None where none is held.

    Far below its resonance at f_n a branch is the capacitance c/(1 − x²), x = f/f_n, which rises by 2cx²/(1 − x²)²
    per relative step of f.
    """
    held = held_branches(parameters, free)
    if not held:
        return None
    out, at = parameters.copy(), model.FIRST_BRANCH + model.BRANCH * held[0]
    out[at + model.LN_F] += np.log(1.5)
    fs = parameters[model.FIRST_BRANCH + model.LN_F]
    x1, x2 = np.exp(2 * (fs - parameters[at + model.LN_F])), np.exp(2 * (fs - out[at + model.LN_F]))
    times = x1 / (1 - x1) ** 2 / (x2 / (1 - x2) ** 2)
    out[at + model.LN_G] += np.log(1.5 * times)
    ln_c = parameters[at + model.LN_G] - parameters[at + model.LN_F] - parameters[at + model.LN_Q] - np.log(2 * np.pi)
    lost = np.exp(ln_c - out[model.LN_C]) * (times / (1 - x2) - 1 / (1 - x1))
    out[model.LN_C] += np.log(max(1 - lost, 0.1))
    return out


def held_branches(parameters: Floats, free: tuple[int, ...]) -> list[int]:
    """Branches that only carry the background's slope: their frequency was not free."""
    places = range(model.FIRST_BRANCH, parameters.size - 1, model.BRANCH)
    return [m for m, k in enumerate(places) if k not in free]


def has_slope(grown: Grown) -> bool:
    return bool(held_branches(grown.parameters, grown.free))


def _slope_begun(data: Data, begin: Grown) -> tuple[Floats, int, tuple[int, ...]]:
    """Parameters with a tiny branch far above put in, the place of its size, and the parameters free before."""
    fs, high = float(begin.circuit.f_hz[0]), used_hz(data)[1]
    far_hz, ln_q = max(_FAR * fs, 1.5 * high), begin.parameters[model.FIRST_BRANCH + model.LN_Q]
    ln_g = begin.parameters[model.LN_C] + np.log(_TINY * 2 * np.pi * far_hz) + ln_q
    tried = modes.with_branch(begin.parameters, np.array([np.log(far_hz), ln_q, ln_g, 0.0]))
    last = begin.parameters.size - 1
    return tried, last + model.LN_G, tuple(k for k in begin.free if k < last)


def _slope_step(data: Data, tried: Floats, free: tuple[int, ...]) -> tuple[Floats, float]:
    """The full step of ``free``, and the last one's variance at unit noise: the slope enters linearly in its size."""
    value, slopes, _ = model.misfit_and_slopes(tried[None, :], data, free)
    step, covariance = solver.full_step(value, slopes)
    return step[0], float(covariance[0, -1, -1])


def add_modes(data: Data, grown: Grown, window_hz: tuple[float, float], least: int, most: int) -> Grown:
    """Add branches: up to ``least`` in any case, beyond that, up to ``most``, while each is significant."""
    count = 1
    while count < most:
        # where neighbours err alike the noise estimate is misfit too, and no measure of what is promising
        asked = count < least or grown.fitted.lag_one[0] > ALIKE
        more = _one_more(data, grown, window_hz, least_gain=0.0 if asked else SIGNIFICANT / 3)
        if more is None:
            break
        gain = (grown.fitted.cost[0] - more.fitted.cost[0]) / max(more.fitted.scale[0] ** 2, 1e-24)
        # by Schwarz's criterion with room to spare, since the branch's place was searched for
        worth = more.information < grown.information - 20
        if count >= least and (gain < SIGNIFICANT or not worth):
            break
        grown, count = more, count + 1
    return grown


def with_series_resistance(data: Data, grown: Grown) -> Grown:
    """The fit with a series resistance where the data clearly prefer one and it is positive, else as it was.

    A series resistance turns the wanted branch much as its own phase does, so it is tried beside that and in its place.
    """
    last, theta = grown.parameters.size - 1, model.FIRST_BRANCH + model.THETA
    straight = grown.parameters.copy()
    straight[theta] = 0.0
    beside, instead = (*grown.free, last), (*(k for k in grown.free if k != theta), last)
    for begin, free in ((grown.parameters, beside), (straight, instead)):
        wider = Grown(trial.fit_branches(data, begin[None, :], free), free)
        sound = wider.fitted.converged[0] and wider.parameters[-1] > 0 and _sane(data, wider)
        if sound and wider.information < grown.information - 10:
            grown = wider
    return grown


def _one_more(data: Data, grown: Grown, window_hz: tuple[float, float], *, least_gain: float) -> Grown | None:
    """The fit with the branch that helps most added, wanted branch first; None where none makes sense.

    ``least_gain``: fall of misfit²/noise² that the best candidate must promise as it stands.
    """
    left = modes.leftover(data, grown.fitted.weight[0], grown.circuit)
    branches, gain = modes.next_branches(left, grown.circuit, used_hz(data))
    if gain <= least_gain * float(grown.fitted.scale[0]) ** 2:
        return None
    starts = [modes.with_branch(grown.parameters, branch) for branch in branches]
    # the most promising and a split of the wanted one; the others only where neither comes to anything
    for begins in ([starts[0], _halves(data, grown)], starts[1:]):
        found = [more for more in _tried(data, grown, np.stack(begins)) if _sane(data, more)]
        if found:
            return _reordered(data, min(found, key=lambda more: more.information), window_hz)
    return None


def _halves(data: Data, grown: Grown) -> Floats:
    """A start with the wanted branch split in two, settled first without phases, which trade against each other."""
    begin = modes.split(grown.parameters)
    thetas = range(model.FIRST_BRANCH + model.THETA, begin.size - 1, model.BRANCH)
    last = begin.size - 1 - model.BRANCH
    free = (*(k for k in grown.free if k < last), *range(last, last + model.BRANCH))
    straight = tuple(k for k in free if k not in thetas)
    return np.asarray(trial.fit_branches(data, begin[None, :], straight).parameters[0])


def _tried(data: Data, grown: Grown, begins: Floats) -> list[Grown]:
    """Fits with one branch more, from several starts ``(K, P)``."""
    last = grown.parameters.size - 1
    free = (*(k for k in grown.free if k < last), *range(last, last + model.BRANCH))
    fitted = trial.fit_branches(data.rows(np.zeros(len(begins), dtype=np.intp)), begins, free)
    ends = [Grown(fitted.rows(np.array([k])), free) for k in _distinct(fitted)]
    low, high = used_hz(data)
    inside = [low < np.exp(more.parameters[last]) < high for more in ends]
    found = [more for more, within in zip(ends, inside, strict=True) if within]
    if not inside[0]:
        # of those that left the data the cheapest is enough
        found.append(_beyond(data, ends[0], last, float(grown.parameters[model.FIRST_BRANCH + model.LN_Q])))
    return [more for more in found if more.fitted.converged[0]]


def _distinct(fitted: Fitted) -> list[int]:
    """Rows that ended in different places, cheapest first."""
    out: list[int] = []
    for k in np.argsort(fitted.cost, kind="stable"):
        if all(abs(fitted.cost[k] / fitted.cost[j] - 1) > 1e-6 for j in out):
            out.append(int(k))
    return out


def _beyond(data: Data, more: Grown, at: int, ln_q: float) -> Grown:
    """A branch beyond the data shows only its slope: its width and phase cannot be told from its height."""
    begin = more.parameters.copy()
    begin[at + model.LN_G] += ln_q - begin[at + model.LN_Q]
    begin[at + model.LN_Q], begin[at + model.THETA] = ln_q, 0.0
    free = tuple(k for k in more.free if k not in (at + model.LN_Q, at + model.THETA))
    return Grown(trial.fit_branches(data, begin[None, :], free), free)


def _reordered(data: Data, grown: Grown, window_hz: tuple[float, float]) -> Grown | None:
    """The same fit with its strongest branch in the window first, solved again if that changed the order."""
    source = modes.wanted_first(grown.circuit, window_hz)
    where = _columns(source, grown.parameters.size)
    if np.array_equal(where, np.arange(where.size)):
        return grown
    free = tuple(k for k in range(where.size) if int(where[k]) in grown.free)
    again = Grown(trial.fit_branches(data, grown.parameters[None, where], free), free)
    return again if again.fitted.converged[0] and _sane(data, again) else None


def _columns(order: list[int], size: int) -> np.ndarray:
    """Which old parameter stands at each place when branches come in ``order``."""
    blocks = [model.FIRST_BRANCH + model.BRANCH * m + np.arange(model.BRANCH) for m in order]
    return np.concatenate([np.arange(model.FIRST_BRANCH), *blocks, [size - 1]])


def _sane(data: Data, grown: Grown) -> bool:
    """Branches that take power, not wider than the data, the wanted one within; a branch held in place is not asked."""
    circuit, fitted = grown.circuit, grown.fitted
    low, high = used_hz(data)
    span = high - low
    places = model.FIRST_BRANCH + model.BRANCH * np.arange(circuit.f_hz.size) + model.LN_F
    moved = np.isin(places, grown.free)
    if not np.isfinite(fitted.cost[0]) or np.any(np.abs(circuit.theta_rad) > _MOST_PHASE):
        return False
    inside = (circuit.f_hz > low - span) & (circuit.f_hz < high + span)
    narrow = circuit.q > max(1.0, _LEAST_Q_SHARE * float(circuit.q[0]))
    wanted = low <= circuit.f_hz[0] <= high and circuit.f_hz[0] / circuit.q[0] < span
    return bool(wanted and (inside | ~moved).all() and (narrow | ~moved).all())
