"""Further modes: where would one more branch help most, and how small a one could this sweep have shown?

A branch of given frequency and Q is linear in its complex amplitude, so each candidate's best amplitude and what
it would gain are closed sums (a matched filter on what the fit left over).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model, solver
from harness.fitting.trial import SIGNIFICANT
from harness.records import Complexes, Floats

_Q_SHARES = (0.2, 0.5, 1.0, 2.0, 5.0)
# what a mode must be worth to be significant in spite of noise 19 times in 20 (one-sided)
_SURELY_SIGNIFICANT = (np.sqrt(SIGNIFICANT) + 1.645) ** 2
_MOST_CANDIDATES = 201


@dataclass(frozen=True, slots=True, eq=False)
class Leftover:
    """What a fit left of one sweep: Y measured − Y fitted ``(N,)`` in siemens, over weights that make it the misfit:
    1/|Y|, or 1/(σ|Y|²) where σ is given (0: dropped)."""

    f_hz: Floats
    y_s: Complexes
    weight: Floats


def leftover(data: model.Data, weight: Floats, circuit: Circuit) -> Leftover:
    """One sweep's leftover; ``circuit`` is a single circuit, its series resistance taken off first."""
    f_hz, z_ohm = data.f_hz[0], data.r_ohm[0] + 1j * data.x_ohm[0]
    fitted = resonator.admittance(circuit, f_hz)
    measured = 1 / np.where(weight > 0, z_ohm - circuit.rs_ohm, 1.0)
    scale = np.abs(fitted) if data.sigma_ohm is None else data.sigma_ohm[0] * np.abs(fitted) ** 2
    return Leftover(f_hz, np.where(weight > 0, measured - fitted, 0), weight / scale)


def next_branches(left: Leftover, circuit: Circuit, window_hz: tuple[float, float]) -> tuple[Floats, float]:
    """Starts (ln f, ln Q, ln G, θ) of branches that would gain most, one for each of several widths, best first:
    ``(K, 4)``; and the best one's gain in misfit²."""
    f_candidates = _candidates(left, window_hz)
    starts, gains = [], []
    for share in _Q_SHARES:
        q = max(float(circuit.q[0]) * share, 2.0)
        amplitude, gain = _matched(left, f_candidates, q)
        gain = np.where(np.abs(np.angle(amplitude)) < 1.3, gain, 0.0)  # a branch that takes power, not gives it
        k = int(gain.argmax())
        a = complex(amplitude[k])
        size, angle = np.log(max(abs(a), 1e-30)), float(np.clip(np.angle(a), -1.0, 1.0))
        starts.append([np.log(f_candidates[k]), np.log(q), size, angle])
        gains.append(float(gain[k]))
    order = np.argsort(gains, kind="stable")[::-1]
    return np.array(starts)[order], gains[int(order[0])]


def split(parameters: Floats) -> Floats:
    """A start with the wanted branch split in two of half the size and width, a third of its width to either side."""
    first = parameters[model.FIRST_BRANCH : model.FIRST_BRANCH + model.BRANCH].copy()
    apart = np.exp(-first[model.LN_Q]) / 3
    first[model.LN_Q] += np.log(2)
    first[model.LN_G] -= np.log(2)
    first[model.THETA] = 0.0
    lower, upper = first.copy(), first.copy()
    lower[model.LN_F] -= apart
    upper[model.LN_F] += apart
    out = with_branch(parameters, upper)
    out[model.FIRST_BRANCH : model.FIRST_BRANCH + model.BRANCH] = lower
    return out


def floor(data: model.Data, parameters: Floats, free: tuple[int, ...], within_hz: tuple[float, float]) -> float:
    """Least relative conductance, at unit noise, that a further mode of the wanted one's Q, anywhere within a range but
    two bandwidths of fs, must have to be seen 19 times in 20 at the worst place. Infinite where the sweep has a hole.

    What the fitted parameters would take on of such a mode is no sign of it, so each candidate's trace in the misfit
    is first freed of theirs.
    """
    circuit = model.circuit_of(parameters)
    fs, q = float(circuit.f_hz[0]), float(circuit.q[0])
    f = data.f_hz[0][(data.weight[0] > 0) & (data.f_hz[0] >= within_hz[0]) & (data.f_hz[0] <= within_hz[1])]
    f = _thinned(np.unique(f), _MOST_CANDIDATES // 2)
    f = f[np.abs(f / fs - 1) > 2 / q]
    if f.size == 0:
        return float("inf")
    f = np.sort(np.concatenate([f, 0.5 * (f[1:] + f[:-1])]))
    f = f[np.abs(f / fs - 1) > 2 / q]
    _, slopes, held = model.misfit_and_slopes(parameters[None, :], data, free)
    seen = (
        -held[0, : data.f_hz.shape[-1]] / resonator.admittance(circuit, data.f_hz[0]) ** 2 * _shapes(data.f_hz[0], f, q)
    )
    traces = np.concatenate([seen.real, seen.imag], axis=-1)
    # no matrix products: the order of their sums may depend on how many threads there are
    common = np.stack([(traces * slope[0]).sum(axis=-1) for slope in slopes], axis=-1)
    inverse = solver.inverse_normal(slopes)[0]
    energy = (traces**2).sum(axis=-1) - np.einsum("ki,ij,kj->k", common, inverse, common)
    with np.errstate(divide="ignore"):
        least = np.sqrt(_SURELY_SIGNIFICANT / np.maximum(energy, 0.0))
    return float(least.max() / circuit.g_s[0])


def _candidates(left: Leftover, window_hz: tuple[float, float]) -> Floats:
    inside = (left.weight > 0) & (left.f_hz >= window_hz[0]) & (left.f_hz <= window_hz[1])
    f = _thinned(np.unique(left.f_hz[inside]))
    return f if f.size else np.array([window_hz[0]])


def _thinned(f_hz: Floats, most: int = _MOST_CANDIDATES) -> Floats:
    if f_hz.size <= most:
        return f_hz
    return np.asarray(f_hz[np.unique(np.linspace(0, f_hz.size - 1, most).astype(int))])


def _shapes(f_hz: Floats, centre_hz: Floats, q: float) -> Complexes:
    detuning = _detuning(f_hz, centre_hz, q)
    return np.asarray((1 - 1j * detuning) / (1 + detuning * detuning))


def _detuning(f_hz: Floats, centre_hz: Floats, q: float) -> Floats:
    ratio = f_hz[None, :] / centre_hz[:, None]
    return np.asarray(q * (ratio - 1 / ratio))


def _matched(left: Leftover, centre_hz: Floats, q: float) -> tuple[Complexes, Floats]:
    """Best complex amplitude of a branch at each centre, and its gain: sums over h(1 + jq)·y and h, h = 1/(1 + q²)."""
    detuning = _detuning(left.f_hz, centre_hz, q)
    h = 1 / (1 + detuning * detuning)
    w2 = left.weight**2
    y_re, y_im = left.y_s.real * w2, left.y_s.imag * w2
    energy = np.maximum((h * w2).sum(axis=-1), 1e-300)
    real = (h * (y_re - detuning * y_im)).sum(axis=-1)
    imaginary = (h * (y_im + detuning * y_re)).sum(axis=-1)
    amplitude = (real + 1j * imaginary) / energy
    return amplitude, (real * real + imaginary * imaginary) / energy


def with_branch(parameters: Floats, branch: Floats) -> Floats:
    """A parameter vector ``(P,)`` with one branch more, before Rs."""
    return np.concatenate([parameters[:-1], branch, parameters[-1:]])


def wanted_first(circuit: Circuit, window_hz: tuple[float, float]) -> list[int]:
    """The order of a circuit's branches that puts the one of greatest conductance inside the window first."""
    inside = (circuit.f_hz >= window_hz[0]) & (circuit.f_hz <= window_hz[1])
    first = int(np.where(inside, circuit.g_s, 0.0).argmax())
    return [first, *(m for m in range(len(circuit.f_hz)) if m != first)]
