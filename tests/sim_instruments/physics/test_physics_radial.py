"""Disc and ring against published roots and tables, and against each other's limits."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import optimize

from sim_instruments.physics.materials import INVENTED_HARD, PZT_5A, PZT_5H, Material, State
from sim_instruments.physics.radial import Ring

LOSSLESS = State(lossless=True)


def with_poisson(sigma: float, kp: float = 0.3) -> Material:
    """PZT-5A's disc with another planar Poisson's ratio and planar coupling."""
    s12 = -sigma * PZT_5A.s11
    eps = PZT_5A.eps33t_relative * 8.8541878128e-12
    d31 = -kp * np.sqrt(eps * (PZT_5A.s11 + s12) / 2)
    return replace(PZT_5A, s12=s12, s13=0.0, d33=0.0, d31=float(d31))


def reactance(part: Ring, f: float) -> float:
    return float((1 / part.admittance(np.asarray(f), LOSSLESS)).imag)


def susceptance(part: Ring, f: float) -> float:
    return float(part.admittance(np.asarray(f), LOSSLESS).imag)


def series(part: Ring, low: float, high: float, n: int = 2001) -> list[float]:
    """Every zero of the lossless reactance in a range: the poles of Y."""
    f = np.linspace(low, high, n)
    x = (1 / part.admittance(f, LOSSLESS)).imag
    # reactance rises through a zero and falls back through a pole
    rises = np.flatnonzero((x[:-1] < 0) & (x[1:] > 0))
    return [optimize.brentq(lambda g: reactance(part, g), f[k], f[k + 1], xtol=1e-9 * f[k]) for k in rises]


def hertz_per_root(material: Material, radius_m: float) -> float:
    """f of a dimensionless root ka = 1: v/(2πa), v² = 1/(ρ s11 (1 − σ²))."""
    sigma = -material.s12 / material.s11
    return 1 / (2 * np.pi * radius_m * np.sqrt(material.density_kg_m3 * material.s11 * (1 - sigma**2)))


def test_disc_resonances_are_giurgiutius_roots() -> None:
    """σ = 0.33: 2.067364, 5.395106, 8.575401, 11.734360 (Giurgiutiu, SHM with PWAS, 2nd ed., ch. 10 eq. 58)."""
    material = with_poisson(0.33)
    unit = hertz_per_root(material, 10e-3)
    found = series(Ring(material, 0.0, 10e-3, 1e-3), 0.5 * unit, 13 * unit)
    assert np.array(found) / unit == pytest.approx([2.067364, 5.395106, 8.575401, 11.734360], rel=3e-7)


@pytest.mark.parametrize(
    ("sigma", "eta1", "eta2"), [(0.25, 2.01717, 5.37977), (0.31, 2.05506, 5.39128), (0.38, 2.09743, 5.40465)]
)
def test_disc_roots_of_other_poisson_ratios(sigma: float, eta1: float, eta2: float) -> None:
    """The first two roots for three more of the tabulated ratios (references §1.7)."""
    material = with_poisson(sigma)
    unit = hertz_per_root(material, 10e-3)
    found = series(Ring(material, 0.0, 10e-3, 1e-3), 0.5 * unit, 7 * unit)
    assert np.array(found) / unit == pytest.approx([eta1, eta2], abs=6e-6)


@pytest.mark.parametrize(
    ("sigma", "x", "kp"),
    [(0.27, 0.05, 0.3423), (0.31, 0.1, 0.4702), (0.35, 0.15, 0.5604), (0.38, 0.2, 0.6304), (0.31, 0.01, 0.1580)],
)
def test_disc_of_a_tabulated_kp_has_the_tabulated_spacing(sigma: float, x: float, kp: float) -> None:
    """A disc made with kp shows x = (fp − fs)/fs of the table of kp over x (references §1.7) to its last digit."""
    part = Ring(with_poisson(sigma, kp), 0.0, 10e-3, 1e-3)
    (fs,) = series(part, 7e4, 1.4e5)
    fp = optimize.brentq(lambda f: susceptance(part, f), fs * (1 + 1e-9), 1.4 * fs)
    # one unit of kp's last digit moves x by about 2 x Δkp/kp
    assert (fp - fs) / fs == pytest.approx(x, abs=1.5 * x * 1e-4 / kp)


@pytest.mark.parametrize(("material", "np_hz_m"), [(PZT_5A, 1982.05), (PZT_5H, 1930.88)], ids=["5A", "5H"])
def test_disc_frequency_constant_of_published_sets(material: Material, np_hz_m: float) -> None:
    """fs times diameter is the planar frequency constant that follows from Erturk & Inman's constants (§1.8)."""
    (fs,) = series(Ring(material, 0.0, 10e-3, 1e-3), 6e4, 1.5e5)
    assert fs * 20e-3 == pytest.approx(np_hz_m, rel=3e-6)


def test_low_frequency_capacitance_is_the_free_one() -> None:
    """At 1 kHz disc and ring show ε33T · area / thickness and the dielectric loss tangent."""
    for inner in (0.0, 3e-3):
        part = Ring(INVENTED_HARD, inner, 7e-3, 0.5e-3)
        free = INVENTED_HARD.at(LOSSLESS).eps33t.real * np.pi * (7e-3**2 - inner**2) / 0.5e-3
        y = complex(part.admittance(np.asarray(1e3), State()))
        assert y.imag / (2e3 * np.pi) == pytest.approx(free, rel=1e-4)
        assert y.real / y.imag == pytest.approx(INVENTED_HARD.tan_dielectric, rel=1e-4)


def test_ring_with_a_vanishing_hole_is_the_disc() -> None:
    """The admittance goes to the disc's as the hole closes, with the square of its radius."""
    f = np.linspace(80e3, 300e3, 60)
    disc = Ring(INVENTED_HARD, 0.0, 7e-3, 0.5e-3).admittance(f, State())
    off = [
        float(np.abs(Ring(INVENTED_HARD, hole, 7e-3, 0.5e-3).admittance(f, State()) / disc - 1).max())
        for hole in (1e-5, 1e-6)
    ]
    assert off[0] < 0.03
    assert off[1] < 0.02 * off[0]


def test_narrow_ring_breathes_at_the_hoop_frequency() -> None:
    """A thin narrow ring has fs = 1/(2π r √(ρ s11)) and keff = k31 (one-dimensional hoop, derived by hand)."""
    mean, half = 10e-3, 0.02e-3
    part = Ring(INVENTED_HARD, mean - half, mean + half, 0.5e-3)
    hoop = 1 / (2 * np.pi * mean * np.sqrt(INVENTED_HARD.density_kg_m3 * INVENTED_HARD.s11))
    (fs,) = series(part, 0.5 * hoop, 2 * hoop)
    fp = optimize.brentq(lambda f: susceptance(part, f), fs * (1 + 1e-9), 1.2 * fs)
    assert fs == pytest.approx(hoop, rel=1e-5)
    k31 = np.sqrt(complex(INVENTED_HARD.at(LOSSLESS).k31_2).real)
    assert np.sqrt(1 - fs**2 / fp**2) == pytest.approx(k31, rel=1e-4)


def test_real_and_complex_bessel_routes_agree() -> None:
    """The quick real functions, used where nothing is lossy, and the complex ones give the same admittance."""
    for inner in (0.0, 3e-3):
        part = Ring(INVENTED_HARD, inner, 7e-3, 0.5e-3)
        f = np.array([60e3, 150e3, 400e3])
        quick = part.admittance(f, LOSSLESS)
        assert np.allclose(part.admittance(f * (1 + 1e-13j), LOSSLESS), quick, rtol=1e-8)
