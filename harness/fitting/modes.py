"""Further modes: where would one more branch help most, and how small a one could this sweep have shown?

A branch of given frequency and Q is linear in its complex amplitude, so each candidate's best amplitude and what
it would gain are closed sums (a matched filter on what the fit left over).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting.trial import SIGNIFICANT
from harness.records import Complexes, Floats

_Q_SHARES = (0.2, 0.5, 1.0, 2.0, 5.0)
_MOST_CANDIDATES = 201


@dataclass(frozen=True, slots=True, eq=False)
class Leftover:
    """What a fit left of one sweep: Y measured − Y fitted ``(N,)`` in siemens, over weights 1/|Y| (0: dropped)."""

    f_hz: Floats
    y_s: Complexes
    weight: Floats


def leftover(f_hz: Floats, z_ohm: Complexes, weight: Floats, circuit: Circuit) -> Leftover:
    """One sweep's leftover; ``circuit`` is a single circuit, its series resistance taken off first."""
    fitted = resonator.admittance(circuit, f_hz)
    measured = 1 / np.where(weight > 0, z_ohm - circuit.rs_ohm, 1.0)
    return Leftover(f_hz, np.where(weight > 0, measured - fitted, 0), weight / np.abs(fitted))


def next_branch(left: Leftover, circuit: Circuit, window_hz: tuple[float, float]) -> tuple[Floats, float]:
    """Start parameters (ln f, ln Q, ln G, θ) of the branch that would gain most, and its gain in misfit²."""
    f_candidates = _candidates(left, window_hz)
    best, found = -np.inf, (float(f_candidates[0]), 1.0, 0j)
    for share in _Q_SHARES:
        q = max(float(circuit.q[0]) * share, 2.0)
        amplitude, gain = _matched(left, f_candidates, q)
        gain = np.where(np.abs(np.angle(amplitude)) < 1.3, gain, 0.0)  # a branch that takes power, not gives it
        k = int(gain.argmax())
        if gain[k] > best:
            best, found = float(gain[k]), (float(f_candidates[k]), q, complex(amplitude[k]))
    f0, q0, a0 = found
    start = np.array([np.log(f0), np.log(q0), np.log(max(abs(a0), 1e-30)), np.clip(np.angle(a0), -1.0, 1.0)])
    return start, best


def floor(left: Leftover, circuit: Circuit, window_hz: tuple[float, float], noise: float) -> float:
    """Least relative conductance that a further mode of the wanted one's Q, anywhere in the window but within two
    bandwidths of fs, must have to be seen at the worst place. Infinite where the sweep has a hole for it."""
    fs, q = float(circuit.f_hz[0]), float(circuit.q[0])
    f = _candidates(left, window_hz)
    f = f[np.abs(f / fs - 1) > 2 / q]
    if f.size == 0:
        return float("inf")
    f = np.sort(np.concatenate([f, 0.5 * (f[1:] + f[:-1])]))
    shape = _shapes(left.f_hz, f, q) * left.weight
    energy = (np.abs(shape) ** 2).sum(axis=-1)
    with np.errstate(divide="ignore"):
        least = np.sqrt(SIGNIFICANT * noise**2 / energy)
    return float(least.max() / circuit.g_s[0])


def _candidates(left: Leftover, window_hz: tuple[float, float]) -> Floats:
    inside = (left.weight > 0) & (left.f_hz >= window_hz[0]) & (left.f_hz <= window_hz[1])
    f = np.unique(left.f_hz[inside])
    if f.size <= _MOST_CANDIDATES:
        return f if f.size else np.array([window_hz[0]])
    return np.asarray(f[np.unique(np.linspace(0, f.size - 1, _MOST_CANDIDATES).astype(int))])


def _shapes(f_hz: Floats, centre_hz: Floats, q: float) -> Complexes:
    ratio = f_hz[None, :] / centre_hz[:, None]
    return np.asarray(1 / (1 + 1j * q * (ratio - 1 / ratio)))


def _matched(left: Leftover, centre_hz: Floats, q: float) -> tuple[Complexes, Floats]:
    shape = _shapes(left.f_hz, centre_hz, q)
    w2 = left.weight**2
    energy = (np.abs(shape) ** 2 * w2).sum(axis=-1)
    amplitude = (np.conj(shape) * (left.y_s * w2)).sum(axis=-1) / np.maximum(energy, 1e-300)
    return amplitude, np.abs(amplitude) ** 2 * energy


def with_branch(parameters: Floats, branch: Floats) -> Floats:
    """A parameter vector ``(P,)`` with one branch more, before Rs."""
    return np.concatenate([parameters[:-1], branch, parameters[-1:]])


def wanted_first(circuit: Circuit, window_hz: tuple[float, float]) -> list[int]:
    """The order of a circuit's branches that puts the one of greatest conductance inside the window first."""
    inside = (circuit.f_hz >= window_hz[0]) & (circuit.f_hz <= window_hz[1])
    first = int(np.where(inside, circuit.g_s, 0.0).argmax())
    return [first, *(m for m in range(len(circuit.f_hz)) if m != first)]
