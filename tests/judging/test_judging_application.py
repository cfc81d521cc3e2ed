"""Application figures: the board's share of power, and Lang's droplets."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from harness.judging.application import drive_share, droplet_m, figures, power_share
from harness.records import ApplicationSpec, Value

BOARD = ApplicationSpec(board_hz=1.65e6, board_tolerance=0.005, loaded_q=30.0)
WATER = replace(BOARD, surface_tension_n_per_m=0.0728, density_kg_per_m3=998.2)


@pytest.mark.parametrize(("q", "share"), [(300.0, 0.10), (30.0, 0.92)])
def test_a_board_half_a_percent_off(q: float, share: float) -> None:
    """At ±0.5 % a Q of 300 leaves 10 % of the peak power and a loaded Q of 30 leaves 92 %."""
    assert drive_share(1.65e6, 0.0, replace(BOARD, loaded_q=q)) == pytest.approx(share, abs=0.005)


def test_power_share_is_the_resonators_own() -> None:
    """1/(1 + Q²x²) is |I|²R of a series R, L, C at equal voltage, over its peak."""
    f0, q = 40e3, 50.0
    f = np.linspace(38e3, 42e3, 41)
    reactance = q * (f / f0 - f0 / f)
    direct = np.abs(1 / (1 + 1j * reactance)) ** 2
    assert [power_share(float(x), f0, q) for x in f] == pytest.approx(list(direct))
    half = f0 * (math.sqrt(1 + 1 / (4 * q * q)) + 1 / (2 * q))
    assert power_share(half, f0, q) == pytest.approx(0.5, rel=1e-12)


def test_the_worst_case_is_worst() -> None:
    """No board within tolerance and no fs within 2u delivers less than the stated share."""
    spec = replace(BOARD, loaded_shift=-0.003)
    worst = drive_share(1.652e6, 800.0, spec)
    assert worst is not None
    boards = 1.65e6 * (1 + np.linspace(-0.005, 0.005, 41))
    parts = (1.652e6 + np.linspace(-1600, 1600, 41)) * (1 - 0.003)
    all_shares = [power_share(float(b), float(p), 30.0) for b in boards for p in parts]
    assert worst == pytest.approx(min(all_shares), rel=1e-12)


def test_figures_need_their_inputs() -> None:
    """Without a board, a loaded Q or fs there is no share; without a liquid, or with a mesh, no droplet."""
    fs = {"fs": Value(1.65e6, 100.0, "Hz")}
    assert figures(fs, ApplicationSpec()) == ({}, ())
    assert figures({}, BOARD) == ({}, ())
    assert set(figures(fs, BOARD)[0]) == {"drive_share"}
    assert set(figures(fs, WATER)[0]) == {"drive_share", "droplet"}
    assert set(figures(fs, replace(WATER, mesh=True))[0]) == {"drive_share"}
    assert set(figures(fs, replace(BOARD, loaded_q=None))[0]) == set()


@pytest.mark.parametrize(
    ("f_hz", "um"), [(20e3, 56.473), (100e3, 19.314), (800e3, 4.828), (1.65e6, 2.9799), (3.0e6, 2.0004)]
)
def test_lang(f_hz: float, um: float) -> None:
    """Lang (JASA 34, 1962), formula recomputed for water at 20 °C: checks the formula, not any spray."""
    assert droplet_m(f_hz, 0.0728, 998.2) * 1e6 == pytest.approx(um, rel=1e-4)


def test_higher_frequency_smaller_droplets() -> None:
    """Common practice, no source: droplets shrink as the frequency rises, by its two-thirds power."""
    assert droplet_m(80e3, 0.07, 1000) / droplet_m(10e3, 0.07, 1000) == pytest.approx(0.25, rel=1e-12)


@pytest.mark.parametrize(
    ("f_hz", "labelled"), [(9.9e3, True), (10e3, False), (800e3, False), (801e3, True), (1.65e6, True)]
)
def test_droplets_outside_langs_range_are_labelled(f_hz: float, labelled: bool) -> None:
    """Outside 10 kHz to 800 kHz the droplet carries the caveat that it is extrapolated."""
    found, caveats = figures({}, replace(WATER, board_hz=f_hz))
    assert "droplet" in found
    assert [caveat.code for caveat in caveats] == (["outside-formula"] if labelled else [])
