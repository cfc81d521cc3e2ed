"""The peak of a transmission log: found where the sweep is slow, refused where it rings."""

from __future__ import annotations

import numpy as np
import pytest

from harness.fitting.peak import fit_peak
from harness.records import Complexes, FitStatus, Floats

F0, Q = 10.004e6, 60_000.0
F = np.linspace(10.000e6, 10.008e6, 1601)
WINDOW = (float(F[0]), float(F[-1]))


def transmission(f: Floats, f0: float = F0, q: float = Q) -> Complexes:
    """A resonance in transmission, with a path beside it and a cable's delay. Invented."""
    return np.asarray((0.7 / (1 + 1j * q * (f / f0 - f0 / f)) + 0.01j) * np.exp(-2j * np.pi * f * 3e-9 + 1j))


def swept(rate_hz_per_s: float, rng: np.random.Generator) -> Complexes:
    """The envelope of a resonator driven by a frequency ramp: τ ȧ = drive − (1 + jq) a, by exact steps."""
    tau = Q / (np.pi * F0)
    step = (F[1] - F[0]) / rate_hz_per_s / tau
    a, out = 0j, []
    for f in F:
        pull = 1 + 1j * Q * (f / F0 - F0 / f)
        a = (a - 1 / pull) * np.exp(-pull * step) + 1 / pull
        out.append(a)
    return np.asarray(0.7 * np.array(out) + 1e-3 * (rng.standard_normal(F.size) + 1j * rng.standard_normal(F.size)))


def test_slow_sweep_gives_frequency_and_q(rng: np.random.Generator) -> None:
    """Of 100 slow sweeps, frequency and Q lie within 1.96 u in 88–100 %, and u is small."""
    inside = []
    for _ in range(100):
        noise = 1e-3 * (rng.standard_normal(F.size) + 1j * rng.standard_normal(F.size))
        got = fit_peak(F, transmission(F) + noise, WINDOW)
        assert got.status is FitStatus.OK
        inside.append([abs(got.f_hz - F0) < 1.96 * got.u_f_hz, abs(got.q - Q) < 1.96 * got.u_q])
        assert got.u_f_hz < 1.0
    assert np.mean(inside, axis=0).min() >= 0.88


def test_fast_sweep_is_refused(rng: np.random.Generator) -> None:
    """A sweep so fast that the resonance rings is not resolved, and the sentence says what to do."""
    tau = Q / (np.pi * F0)
    width = F0 / Q
    slow, fast = (fit_peak(F, swept(times * width / tau, rng), WINDOW) for times in (0.005, 5.0))
    assert slow.status is FitStatus.OK
    assert slow.f_hz == pytest.approx(F0, abs=0.05 * width)
    assert fast.status is FitStatus.NOT_RESOLVED
    assert "slowly" in fast.message


def test_comb_too_wide_is_refused() -> None:
    """A peak on one or two points is not resolved."""
    coarse = F[::80]
    got = fit_peak(coarse, transmission(coarse), WINDOW)
    assert got.status is FitStatus.NOT_RESOLVED


def test_nothing_there(rng: np.random.Generator) -> None:
    """Noise, a slope, an empty window and too few points give no number."""
    noise = 1e-3 * (rng.standard_normal(F.size) + 1j * rng.standard_normal(F.size))
    for t in (noise, 0.01 + 1e-4 * noise, np.linspace(0.1, 1.0, F.size) + 0j):
        assert fit_peak(F, np.asarray(t), WINDOW).status is not FitStatus.OK
    assert fit_peak(F, transmission(F), (1e6, 2e6)).status is FitStatus.NO_RESONANCE
    assert fit_peak(F[:5], transmission(F[:5]), WINDOW).status is FitStatus.BAD_DATA


def test_window_chooses_the_peak() -> None:
    """Of two peaks the one inside the window is meant, though the other is higher."""
    t = transmission(F) + 0.3 * transmission(F, f0=10.002e6)
    got = fit_peak(F, t, (10.001e6, 10.003e6))
    assert got.status is FitStatus.OK
    assert got.f_hz == pytest.approx(10.002e6, abs=20)
