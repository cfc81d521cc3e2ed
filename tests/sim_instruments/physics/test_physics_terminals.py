"""Fixture and instrument: what lies between the truth and the reading."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.physics.fixture import NO_FIXTURE, Fixture, embed
from sim_instruments.physics.noise import Flaws, read, relaxing_degc, rounded
from sim_instruments.physics.parts import nominal_part

F = np.linspace(1.6e6, 1.7e6, 400)


def part_z(f: np.ndarray) -> np.ndarray:
    return nominal_part("MD-1650").impedance(f)


def test_fixture_is_series_arm_then_stray() -> None:
    """Hand-computed at one frequency; no fixture changes nothing; an open part leaves the stray and the leads."""
    z = np.array([50.0 - 20.0j])
    f = np.array([1e6])
    s = 2j * np.pi * 1e6
    want = 0.2 + s * 100e-9 + 1 / (1 / (50.0 - 20.0j) + s * 10e-12)
    assert embed(z, f, Fixture(0.2, 100e-9, 10e-12))[0] == pytest.approx(want)
    assert embed(z, f, NO_FIXTURE)[0] == pytest.approx(z[0])
    assert embed(np.array([1e15 + 0j]), f, Fixture())[0].imag == pytest.approx(
        -1 / (2 * np.pi * 1e6 * 4e-12) + 2 * np.pi * 1e6 * 60e-9, rel=1e-6
    )


def test_default_flaws_read_the_truth(rng: np.random.Generator) -> None:
    """Without flaws a reading is the impedance, bit for bit."""
    assert np.array_equal(read(part_z, F, Flaws(), rng), part_z(F))


def test_noise_has_the_stated_size(rng: np.random.Generator) -> None:
    """Real and imaginary part scatter by σ|Z| each, without mean and without correlation."""
    f = np.full(20000, 1.65e6)
    z = part_z(f)
    error = (read(part_z, f, Flaws(noise_relative=1e-3), rng) - z) / np.abs(z)
    assert error.real.std() == pytest.approx(1e-3, rel=0.03)
    assert error.imag.std() == pytest.approx(1e-3, rel=0.03)
    assert abs(error.mean()) < 3e-5
    assert abs(np.corrcoef(error.real, error.imag)[0, 1]) < 0.03


def test_gain_and_frequency_errors_are_systematic(rng: np.random.Generator) -> None:
    """Gain multiplies Z; a fast reference reads the impedance of a higher frequency."""
    flaws = Flaws(gain_error=2e-3 + 1e-3j, frequency_error=1e-4)
    want = part_z(F * (1 + 1e-4)) * (1.002 + 0.001j)
    assert np.allclose(read(part_z, F, flaws, rng), want, rtol=1e-12)


def test_resolution_keeps_digits_of_the_range() -> None:
    """Four digits of 123.456 − 0.0678j leave 123.5 − 0.1j; nothing is rounded without digits."""
    z = np.array([123.456 - 0.0678j])
    assert rounded(z, 4)[0] == pytest.approx(123.5 - 0.1j)
    assert rounded(z, None)[0] == z[0]
    assert rounded(np.array([0j]), 4)[0] == 0


def test_bounce_spoils_few_points_wildly(rng: np.random.Generator) -> None:
    """About the stated share of points lies far off, with added resistance; the others are exact."""
    z, shown = part_z(F), read(part_z, F, Flaws(bounce_share=0.02), rng)
    wild = shown != z
    assert 1 <= wild.sum() <= 25
    added = (shown - z)[wild]
    assert np.all((added.real > 29) & (added.real < 31e3))
    assert np.abs(added.imag).max() < 1e-6


def test_same_seed_same_reading() -> None:
    """A reading is decided by the seed, and noise does not depend on the part."""
    flaws = Flaws(noise_relative=1e-3, bounce_share=0.01)
    first, again = (read(part_z, F, flaws, np.random.default_rng(5)) for _ in range(2))
    assert np.array_equal(first, again)
    other = read(lambda f: 100.0 + 0j * f, F, Flaws(noise_relative=1e-3), np.random.default_rng(5))
    quiet = read(part_z, F, Flaws(noise_relative=1e-3), np.random.default_rng(5))
    assert np.allclose((other - 100) / 100, (quiet - part_z(F)) / np.abs(part_z(F)), atol=1e-12)


def test_a_warm_part_cools_to_ambient() -> None:
    """Exponential: 63 % of the way after one time constant."""
    t = relaxing_degc(np.array([0.0, 10.0, 1e4]), 33.0, 23.0, 10.0)
    assert t == pytest.approx([33.0, 23.0 + 10 / np.e, 23.0])
