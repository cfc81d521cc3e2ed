"""The chain of rods against closed forms."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.physics.materials import ALUMINIUM, INVENTED_HARD, PZT_5A, STEEL, State
from sim_instruments.physics.rods import Chain, Rod, Stack

LOSSLESS = State(lossless=True)
AREA = 3e-4


def strongest(part: Chain, near_hz: float) -> float:
    """Where |Y| of the lossless part is greatest within 10 ppm; its pole, to one step of 10 ppb."""
    f = near_hz * (1 + np.linspace(-1e-5, 1e-5, 2001))
    return float(f[np.argmax(np.abs(part.admittance(f, LOSSLESS)))])


def test_single_ring_is_the_k33_bar() -> None:
    """One free ring alone is Z = (1 − k33² tan X / X)/(jωC^S), C^S = ε33T(1 − k33²)A/l, at complex frequency too."""
    part, c = Chain((Stack(PZT_5A, 1, 10e-3, AREA),)), PZT_5A.at(State())
    f = np.array([1e3, 120e3, 170e3, 250e3, 150e3 * (1 + 0.02j)])
    s_d = c.s33 * (1 - c.k33_2)
    x = np.pi * f * 10e-3 * np.sqrt(c.density_kg_m3 * s_d)
    z = (1 - c.k33_2 * np.tan(x) / x) / (2j * np.pi * f * c.eps33t * (1 - c.k33_2) * AREA / 10e-3)
    assert np.allclose(1 / part.admittance(f, State()), z, rtol=1e-9)


def test_uniform_rod_rings_at_half_a_wavelength() -> None:
    """A rod with a vanishingly thin ring in it resonates at f = √(E/ρ)/(2L), the free-free rod's closed form."""
    half = 50e-3
    part = Chain((Rod(STEEL, half * 0.8, AREA), Stack(INVENTED_HARD, 1, 1e-9, AREA), Rod(STEEL, half * 1.2, AREA)))
    want = np.sqrt(STEEL.young_pa / STEEL.density_kg_m3) / (4 * half)
    assert strongest(part, want) == pytest.approx(want, rel=1e-7)


def test_two_metals_of_equal_travel_time_meet_in_a_node() -> None:
    """Two unlike rods of equal travel time, joined by a vanishing ring, resonate as f = 1/(2·total travel time)."""
    speeds = [np.sqrt(m.young_pa / m.density_kg_m3) for m in (STEEL, ALUMINIUM)]
    time = 10e-6
    part = Chain(
        (
            Rod(STEEL, speeds[0] * time, AREA),
            Stack(INVENTED_HARD, 1, 1e-9, AREA),
            Rod(ALUMINIUM, speeds[1] * time, 2 * AREA),
        )
    )
    # each side is a quarter wavelength then: node at the joint whatever the two impedances
    want = 1 / (4 * time)
    assert strongest(part, want) == pytest.approx(want, rel=1e-7)


def test_low_frequency_capacitance_is_free_and_counts_rings() -> None:
    """At 1 kHz four rings in parallel show 4 ε33T A/l and the dielectric loss."""
    part = Chain((Rod(STEEL, 20e-3, AREA), Stack(INVENTED_HARD, 4, 2e-3, AREA), Rod(ALUMINIUM, 20e-3, AREA)))
    y = complex(part.admittance(np.asarray(1e3), State()))
    free = 4 * complex(INVENTED_HARD.at(LOSSLESS).eps33t).real * AREA / 2e-3
    assert y.imag / (2e3 * np.pi) == pytest.approx(free, rel=1e-3)
    assert y.real / y.imag == pytest.approx(INVENTED_HARD.tan_dielectric, rel=1e-2)


def test_chain_is_the_same_from_either_end() -> None:
    """Reversing the sections changes nothing (reciprocity), and a section may be cut in two."""
    sections = (Rod(STEEL, 20e-3, AREA), Stack(INVENTED_HARD, 2, 2e-3, AREA), Rod(ALUMINIUM, 30e-3, 2 * AREA))
    cut = (
        Rod(STEEL, 5e-3, AREA),
        Rod(STEEL, 15e-3, AREA),
        Stack(INVENTED_HARD, 1, 2e-3, AREA),
        Stack(INVENTED_HARD, 1, 2e-3, AREA),
        Rod(ALUMINIUM, 30e-3, 2 * AREA),
    )
    f = np.linspace(10e3, 150e3, 200)
    y = Chain(sections).admittance(f, State())
    assert np.allclose(Chain(sections[::-1]).admittance(f, State()), y, rtol=1e-7)
    assert np.allclose(Chain(cut).admittance(f, State()), y, rtol=1e-9)
