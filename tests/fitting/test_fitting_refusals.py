"""What is no transducer, and what the points do not resolve, never comes out as a confident number."""

from __future__ import annotations

import numpy as np
import pytest
from fitting_sweeps import noisy, one_branch

from harness.circuits import resonator
from harness.fitting import fit_batch
from harness.fitting.single import Choice, fit_one
from harness.records import FitStatus

N, ROWS = 101, 500
WINDOW = (1.5e6, 1.9e6)
F = np.linspace(*WINDOW, N)
W = 2 * np.pi * F


def white(rng: np.random.Generator, size: float = 1.0) -> np.ndarray:
    """Complex white noise, ``(ROWS, N)``."""
    return size * (rng.standard_normal((ROWS, N)) + 1j * rng.standard_normal((ROWS, N)))


NOISES = {
    "white": lambda rng: white(rng),
    "white about a resistance": lambda rng: 50 + white(rng, 20.0),
    "level and phase at random": lambda rng: np.exp(white(rng).real + 2j * np.pi * rng.random((ROWS, N))),
    "level and phase at random, passive": lambda rng: np.exp(
        white(rng).real + 1j * np.pi * (rng.random((ROWS, N)) - 0.5)
    ),
    "random walk": lambda rng: np.cumsum(white(rng), axis=1),
    "a capacitor in 30 % noise": lambda rng: 1 / (1j * W * 1.5e-9) * (1 + white(rng, 0.3)),
    "an open fixture": lambda rng: 1 / (1j * W * 1e-12 + white(rng, 3e-6)),
    "a short": lambda rng: 0.01 + white(rng, 0.01),
}

PARTS = {
    "coil": 1 + 1j * W * 150e-6,
    "coil with its own capacitance, resonant in the window": 1
    / (1j * W / ((2 * np.pi * 1.7e6) ** 2 * 150e-6) + 1 / (20 + 1j * W * 150e-6)),
    "capacitor": 1 / (1j * W * 1.5e-9 * (1 - 0.02j)),
    "capacitor behind a resistor": 30 + 1 / (1j * W * 1.5e-9),
    "capacitor beside a resistor": 1 / (1 / 60 + 1j * W * 1.5e-9),
    "capacitor behind a resistor and leads": 3 + 1 / (1j * W * 1.5e-9) + 0.3e-6j * W,
    "relaxing dielectric": 1 / (1j * W * 1.2e-9 + 1j * W * 0.5e-9 / (1 + 1j * F / 1.7e6)),
    "resistor": np.full(N, 50 + 0j),
    "open": 1 / (1j * W * 1e-12),
    "short": 0.02 + 20e-9j * W,
    "flat line": np.full(N, 5 - 5j),
}


@pytest.mark.parametrize("kind", list(NOISES))
def test_pure_noise_is_never_a_resonance(kind: str, rng: np.random.Generator) -> None:
    """Of 500 sweeps of each kind of noise none comes out ok."""
    got = fit_batch(F, NOISES[kind](rng))
    assert np.count_nonzero(got.status == "ok") == 0
    assert np.isnan(got.fs_hz).all()


@pytest.mark.parametrize("kind", list(NOISES))
def test_pure_noise_is_never_a_resonance_with_care(kind: str, rng: np.random.Generator) -> None:
    """Nor by the careful fit of one sweep, which may add branches (8 sweeps of each kind)."""
    z = NOISES[kind](rng)[:8]
    found = [fit_one(F, row, Choice(WINDOW)).status for row in z]
    assert FitStatus.OK not in found


@pytest.mark.parametrize("noise", [0.0, 0.0015, 0.05])
@pytest.mark.parametrize("kind", list(PARTS))
def test_other_parts_have_no_resonance(kind: str, noise: float, rng: np.random.Generator) -> None:
    """Coil, capacitor, resistor, open and short are refused, whatever is freed and at any noise."""
    z = noisy(PARTS[kind], noise, rng, 12)
    for options in ({}, {"search_hz": WINDOW}, {"series_resistance": True}, {"motional_phase": True}):
        assert "ok" not in fit_batch(F, z, **options).status
    assert fit_batch(F, z).status.tolist().count("no-resonance") >= 10
    single = fit_one(F, z[0], Choice(WINDOW))
    assert single.status in (FitStatus.NO_RESONANCE, FitStatus.NOT_RESOLVED)
    assert single.message


@pytest.mark.parametrize(
    ("kind", "word"), [("coil", "a coil"), ("capacitor", "a capacitor"), ("resistor", "a resistor")]
)
def test_the_message_says_what_it_looks_like(kind: str, word: str) -> None:
    """The sentence names what the sweep looks like, so that the operator knows what lies in the fixture."""
    assert word in fit_one(F, PARTS[kind], Choice(WINDOW)).message


def test_a_comb_too_wide_for_the_resonance_never_lies(rng: np.random.Generator) -> None:
    """Q from 100 to 100 000 on 101 points: what is called ok lies within 5 u of the truth, the rest is refused."""
    refused = {}
    for q in (1e2, 1e3, 1e4, 1e5):
        words = []
        for _ in range(40):
            fs = rng.uniform(1.55e6, 1.8e6)
            circuit = one_branch(fs=fs, q=q, r=8.0)
            got = fit_batch(F, noisy(resonator.impedance(circuit, F), 0.0015, rng), search_hz=WINDOW)
            words.append(str(got.status[0]))
            if words[-1] == "ok":
                assert abs(got.fs_hz[0] - fs) < 5 * got.u_fs_hz[0] + 1e-9 * fs
                assert abs(got.q[0] - q) < 5 * got.u_q[0]
        refused[q] = sum(word != "ok" for word in words)
    assert refused[1e2] == 0
    assert refused[1e4] == refused[1e5] == 40


def test_not_resolved_says_where_to_look_closer(rng: np.random.Generator) -> None:
    """The refusal of a resonance seen on too few points names its place and asks for more points there."""
    fs = 1.7e6
    circuit = one_branch(fs=fs, q=1200.0, r=8.0)
    got = fit_one(F, noisy(resonator.impedance(circuit, F), 0.0005, rng), Choice(WINDOW))
    assert got.status is FitStatus.NOT_RESOLVED
    assert "closer" in got.message
    assert "Hz" in got.message


def test_too_few_points_are_bad_data() -> None:
    """Nine points cannot carry a fit with care; nor can ten at one frequency."""
    z = resonator.impedance(one_branch(), F)
    assert fit_one(F[:9], z[:9], Choice(WINDOW)).status is FitStatus.BAD_DATA
    assert fit_one(np.full(20, 1.6e6), z[:20], Choice(WINDOW)).status is FitStatus.BAD_DATA
    assert fit_one(F, np.full(N, np.nan + 0j), Choice(WINDOW)).status is FitStatus.BAD_DATA
    assert fit_one(np.empty(0), np.empty(0, dtype=complex), Choice(WINDOW)).status is FitStatus.BAD_DATA


def test_resonance_outside_the_window_is_refused(rng: np.random.Generator) -> None:
    """A clear resonance outside the search window is not the wanted one."""
    circuit = one_branch(fs=1.6e6)
    z = noisy(resonator.impedance(circuit, F), 0.0015, rng)
    assert fit_one(F, z, Choice((1.75e6, 1.9e6))).status is not FitStatus.OK
    assert fit_batch(F, z, search_hz=(1.75e6, 1.9e6)).status[0] != "ok"
