"""Coupling factors against published roots and tables solved in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special

from harness.circuits import coupling

# Giurgiutiu, Structural Health Monitoring with PWAS, 2nd ed., ch. 10, eq. (58); equals the row for σ = 0.33
GIURGIUTIU_FIRST = 2.067364

# σ, η1 (solved numerically)
ROOTS = [
    (0.25, 2.01717), (0.27, 2.02997), (0.28, 2.03630), (0.29, 2.04260), (0.30, 2.04885), (0.31, 2.05506),
    (0.32, 2.06123), (0.33, 2.06736), (0.34, 2.07346), (0.35, 2.07951), (0.36, 2.08552), (0.38, 2.09743),
]  # fmt: skip

# x = (fp − fs)/fs; kp for σ = 0.27, 0.31, 0.35, 0.38 (solved numerically)
KP = [
    (0.005, 0.1117, 0.1122, 0.1126, 0.1129), (0.01, 0.1574, 0.1580, 0.1586, 0.1591),
    (0.02, 0.2211, 0.2219, 0.2228, 0.2234), (0.03, 0.2688, 0.2699, 0.2709, 0.2717),
    (0.04, 0.3083, 0.3095, 0.3107, 0.3116), (0.05, 0.3423, 0.3436, 0.3450, 0.3460),
    (0.06, 0.3724, 0.3739, 0.3753, 0.3765), (0.08, 0.4244, 0.4260, 0.4277, 0.4290),
    (0.10, 0.4683, 0.4702, 0.4720, 0.4734), (0.12, 0.5065, 0.5085, 0.5106, 0.5121),
    (0.14, 0.5403, 0.5425, 0.5447, 0.5464), (0.15, 0.5559, 0.5581, 0.5604, 0.5621),
    (0.16, 0.5706, 0.5730, 0.5753, 0.5771), (0.18, 0.5981, 0.6006, 0.6030, 0.6049),
    (0.20, 0.6232, 0.6258, 0.6284, 0.6304), (0.25, 0.6775, 0.6804, 0.6833, 0.6856),
    (0.30, 0.7228, 0.7260, 0.7292, 0.7316),
]  # fmt: skip

# x, k31, k33 = kt, keff (closed form)
OTHERS = [
    (0.01, 0.15594, 0.15553, 0.14037), (0.02, 0.21895, 0.21782, 0.19706), (0.05, 0.33896, 0.33483, 0.30491),
    (0.10, 0.46354, 0.45312, 0.41660), (0.15, 0.55000, 0.53277, 0.49382), (0.20, 0.61630, 0.59224, 0.55277),
    (0.25, 0.66972, 0.63899, 0.60000),
]  # fmt: skip


def test_first_radial_root_as_published() -> None:
    """The thin disc's first root at σ = 0.33 is Giurgiutiu's 2.067364."""
    assert float(coupling.radial_root(0.33)) == pytest.approx(GIURGIUTIU_FIRST, abs=5e-7)


@pytest.mark.parametrize(("poisson", "root"), ROOTS)
def test_radial_roots(poisson: float, root: float) -> None:
    """η1 for twelve Poisson's ratios, to five decimals, and it solves (1 − σ)J1 = ηJ0."""
    got = float(coupling.radial_root(poisson))
    assert got == pytest.approx(root, abs=6e-6)
    assert (1 - poisson) * special.j1(got) == pytest.approx(got * special.j0(got), abs=1e-13)


@pytest.mark.parametrize("row", KP)
def test_planar_coupling_table(row: tuple[float, ...]) -> None:
    """kp at four Poisson's ratios, to four decimals."""
    got = [float(coupling.kp(1.0, 1 + row[0], sigma)) for sigma in (0.27, 0.31, 0.35, 0.38)]
    assert got == pytest.approx(list(row[1:]), abs=6e-5)


@pytest.mark.parametrize("x", [0.01, 0.05, 0.1, 0.2])
def test_planar_coupling_near_the_trade_approximation(x: float) -> None:
    """kp at σ = 0.31 lies within 0.0006 of 1/√(0.395 fs/(fp − fs) + 0.574) (industry constants, from memory)."""
    assert float(coupling.kp(1.0, 1 + x, 0.31)) == pytest.approx(1 / np.sqrt(0.395 / x + 0.574), abs=6e-4)


@pytest.mark.parametrize(("x", "k31", "k33", "keff"), OTHERS)
def test_coupling_table_of_bars_plates_and_keff(x: float, k31: float, k33: float, keff: float) -> None:
    """k31, k33, kt and keff over (fp − fs)/fs, to five decimals."""
    got = [float(f(1.0, 1 + x)) for f in (coupling.k31, coupling.k33, coupling.kt, coupling.keff)]
    assert got == pytest.approx([k31, k33, k33, keff], abs=6e-6)


@pytest.mark.parametrize(("fs_khz", "fp_khz", "k"), [(38.64, 39.78, 0.237685), (38.62, 39.77, 0.238739)])
def test_sandwich_transducer_keff(fs_khz: float, fp_khz: float, k: float) -> None:
    """Sensors 2020, 20(7), 1952: calculated and measured resonances of a sandwich transducer."""
    assert float(coupling.keff(1e3 * fs_khz, 1e3 * fp_khz)) == pytest.approx(k, abs=6e-7)


def lossless_bar_ratio(k31: float) -> float:
    """fp/fs of a lossless thin bar, its antiresonance solved on Y ∝ 1 − k² + k² tan(x)/x, x = (π/2) f/fs."""
    x = np.linspace(np.pi / 2 * (1 + 1e-9), np.pi * (1 - 1e-9), 2_000_001)
    y = 1 - k31**2 + k31**2 * np.tan(x) / x
    k = int(np.flatnonzero((y[:-1] < 0) & (y[1:] >= 0))[0])
    return float((x[k] - y[k] * (x[k + 1] - x[k]) / (y[k + 1] - y[k])) / (np.pi / 2))


@pytest.mark.parametrize("k", [0.1, 0.344176, 0.388776, 0.6])
def test_bar_coupling_comes_back_from_the_bars_own_admittance(k: float) -> None:
    """k31 of a closed-form bar (0.344176, 0.388776: PZT-5A, 5H of Erturk & Inman 2011, App. E) comes back."""
    assert float(coupling.k31(1.0, lossless_bar_ratio(k))) == pytest.approx(k, abs=1e-6)


@pytest.mark.parametrize("k", [0.1, 0.484667, 0.515726, 0.70307])
def test_plate_coupling_comes_back_from_the_plates_own_impedance(k: float) -> None:
    """kt of a closed-form plate, Z ∝ 1 − k² tan(x)/x, x = (π/2) f/fp (values: PZT-5A, 5H, as above) comes back."""
    x = np.linspace(0.3, np.pi / 2 * (1 - 1e-9), 2_000_001)
    z = 1 - k**2 * np.tan(x) / x
    j = int(np.flatnonzero((z[:-1] > 0) & (z[1:] <= 0))[-1])
    fs = float((x[j] - z[j] * (x[j + 1] - x[j]) / (z[j + 1] - z[j])) / (np.pi / 2))
    assert float(coupling.kt(fs, 1.0)) == pytest.approx(k, abs=1e-6)
    assert float(coupling.k33(fs, 1.0)) == pytest.approx(k, abs=1e-6)


@pytest.mark.parametrize("formula", [coupling.keff, coupling.k31, coupling.k33, coupling.kt])
def test_no_coupling_without_an_antiresonance_above(formula: object) -> None:
    """fp at or below fs, or not there, is no coupling: NaN."""
    got = formula(np.array([1.0, 1.0, 1.0]), np.array([1.0, 0.99, np.nan]))  # type: ignore[operator]
    assert np.isnan(got).all()
