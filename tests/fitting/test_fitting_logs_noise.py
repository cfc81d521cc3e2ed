"""Lone logs: leads in series, whatever the impedance's size, and noise that is no share of |Z|."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from harness.analysis import fit_log
from harness.circuits import frequencies, resonator
from harness.circuits.resonator import Circuit
from harness.fitting import fit_batch
from harness.records import FitStatus, Sweep

LOG_HZ = np.linspace(1.5e6, 1.9e6, 401)


def circuit_of(fs_hz: float, q: float, r1_ohm: float, ratio: float) -> Circuit:
    """One branch beside C0 = ratio·C1, invented."""
    c1 = 1 / (2 * np.pi * fs_hz * q * r1_ohm)
    return resonator.from_elements(r1_ohm, q * r1_ohm / (2 * np.pi * fs_hz), c1, ratio * c1)


@pytest.mark.parametrize("r1_ohm", [1.6, 162.0, 16e3, 1.6e6])
def test_series_resistance_is_told_from_r1_at_any_level(r1_ohm: float, rng: np.random.Generator) -> None:
    """Leads of a fifth of R1: the batch and the lone log both find R1 within 4 u, from an ohm to a megohm."""
    f = np.linspace(38e3, 43e3, 401)
    clean = resonator.impedance(circuit_of(40e3, 80.0, r1_ohm, 13.0), f) + 0.2 * r1_ohm
    z = clean * (1 + 1e-3 * (rng.standard_normal((20, 401)) + 1j * rng.standard_normal((20, 401))))
    fit = fit_batch(f, z, series_resistance=True)
    assert (fit.status == "ok").all()
    assert np.abs((fit.r1_ohm - r1_ohm) / fit.u_r1_ohm).max() < 4
    lone = fit_log(Sweep(f, z[0])).values["r1"]
    assert lone.value is not None
    assert lone.u is not None
    assert abs(lone.value - r1_ohm) < 4 * lone.u


Blur = Callable[[np.ndarray, np.ndarray], np.ndarray]


def of_reflection(z: np.ndarray, noise: np.ndarray) -> np.ndarray:
    """Noise of −60 dB in the reflection coefficient at 50 ohm, as an analyser has it."""
    s = (z - 50) / (z + 50) + 1e-3 * noise / np.sqrt(2)
    return 50 * (1 + s) / (1 - s)


def of_share(z: np.ndarray, noise: np.ndarray) -> np.ndarray:
    return z * (1 + 0.003 * noise)


def additive(z: np.ndarray, noise: np.ndarray) -> np.ndarray:
    return z + 0.05 * noise


@pytest.mark.parametrize("blur", [of_share, of_reflection, additive])
def test_uncertainty_is_true_whatever_the_noise_follows(blur: Blur, rng: np.random.Generator) -> None:
    """20 logs each: fs, fp, R1, Qm, keff more than 5 u off in one at most, and no mode that is not there."""
    circuit = circuit_of(1.65e6, 200.0, 1.4, 23.0)
    z, c1, c0 = resonator.impedance(circuit, LOG_HZ), resonator.c1_f(circuit), resonator.c0_f(circuit)
    truth = {"fs": 1.65e6, "qm": 200.0, "r1": 1.4, "fp": float(frequencies.fp_hz(circuit))}
    truth["keff"] = float(np.sqrt(c1 / (c1 + c0)))
    off = 0
    for _ in range(20):
        noise = rng.standard_normal(401) + 1j * rng.standard_normal(401)
        fit = fit_log(Sweep(LOG_HZ, blur(z, noise)))
        if fit.status is FitStatus.OK:
            assert [mode for mode in fit.modes if not mode.wanted and 1.5e6 < mode.f_hz < 1.9e6] == []
            off += any(_pull(fit.values[key], true) > 5 for key, true in truth.items())
    assert off <= 1


def _pull(value, true: float) -> float:
    return abs(value.value - true) / value.u


def test_search_window_beside_the_sweep_is_told() -> None:
    """A window that holds no point of the sweep is named for what it is."""
    z = resonator.impedance(circuit_of(1.65e6, 200.0, 1.4, 23.0), LOG_HZ)
    fit = fit_log(Sweep(LOG_HZ, z), (40e3, 50e3))
    assert fit.status is FitStatus.NO_RESONANCE
    assert "no point of the sweep lies in the search window" in fit.message
