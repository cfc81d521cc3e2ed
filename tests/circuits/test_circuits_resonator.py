"""The circuit itself: against published values, element-by-element arithmetic, and passivity."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_examples import DERIVED, EXAMPLES
from hypothesis import given, settings
from hypothesis import strategies as st

from harness.circuits import resonator
from harness.circuits.resonator import Circuit

BOLT = EXAMPLES["bolt40_1"]

# f, Re Z, Im Z of bolt40_1, solved with 40 digits
VECTORS = [
    (1000.0, 0.2072010244, -35175.55453),
    (35000.0, 2.112343955, -762.2822375),
    (39000.0, 9.574092095, -326.0757041),
    (40000.0, 19.61032451, -34.17953613),
    (40079.11761, 21.04017908, -0.4545699219),
    (40500.0, 32.20382971, 227.9635436),
    (42000.0, 1719.620259, 7295.911281),
    (42227.3430895, 40625.46658, -924.7518972),
    (43000.0, 151.1713252, -3337.091569),
    (45000.0, 11.24722961, -1501.986363),
    (60000.0, 0.1993593074, -714.1673051),
]


def by_elements(f_hz: np.ndarray, r1: float, l1: float, c1: float, c0: float, loss: float, rs: float) -> np.ndarray:
    """The same network, element by element: Rs in series with C0's lossy admittance beside R1 + jωL1 + 1/jωC1."""
    w = 2 * np.pi * f_hz
    branch = r1 + 1j * w * l1 + 1 / (1j * w * c1)
    return rs + 1 / (1j * w * c0 * (1 - 1j * loss) + 1 / branch)


@pytest.mark.parametrize(("f_hz", "re", "im"), VECTORS)
def test_impedance_of_a_bolt_clamped_drive_at_eleven_frequencies(f_hz: float, re: float, im: float) -> None:
    """The impedance of bolt40_1 equals the 40-digit solution to the ten digits printed."""
    z = resonator.impedance(BOLT.circuit, np.array([f_hz]))[0]
    # at fs itself the frequency is printed to 10 digits only, and Im Z moves by 2 Q R1 df/f
    assert z == pytest.approx(complex(re, im), rel=2e-9, abs=1e-8)


@pytest.mark.parametrize("name", list(DERIVED))
def test_elements_come_back_from_the_circuit(name: str) -> None:
    """fs, Q and M follow from the elements, and R1, L1, C1, C0 come back from the circuit."""
    example, derived = EXAMPLES[name], DERIVED[name]
    circuit = example.circuit
    assert float(circuit.fs_hz) == pytest.approx(derived[0], rel=1e-9)
    assert float(circuit.q[0]) == pytest.approx(derived[3], rel=1e-9)
    back = [f(circuit) for f in (resonator.r1_ohm, resonator.l1_h, resonator.c1_f, resonator.c0_f)]
    assert [float(x) for x in back] == pytest.approx([example.r1, example.l1, example.c1, example.c0], rel=1e-12)
    assert example.c0 / example.c1 == pytest.approx(derived[2], rel=1e-9)
    assert example.c0 + example.c1 == pytest.approx(derived[12], rel=1e-9)


def test_low_frequency_capacitance_is_the_sum_of_both() -> None:
    """Far below resonance a one-branch part is C0 + C1: Im Y/ω → CT."""
    f = np.array([1.0])
    y = resonator.admittance(BOLT.circuit, f)
    assert y.imag[0] / (2 * np.pi) == pytest.approx(DERIVED["bolt40_1"][12], rel=1e-8)


positive = st.floats(-1.0, 1.0)


@given(positive, positive, positive, positive, st.floats(0, 0.3), st.floats(0, 10.0))
@settings(max_examples=100, deadline=None)
def test_circuit_is_the_network_of_its_elements(a: float, b: float, c: float, d: float, loss: float, rs: float) -> None:
    """The formula in fs, Q and G equals complex arithmetic over the single elements."""
    r1, l1, c1, c0 = 21.05 * 10**a, 0.03515 * 10**b, 4.4862e-10 * 10**c, 4.07569e-9 * 10**d
    one = resonator.from_elements(r1, l1, c1, c0, loss)
    circuit = Circuit(one.c_f, one.tan_delta, one.f_hz, one.q, one.g_s, one.theta_rad, np.asarray(rs))
    f = float(one.fs_hz) * np.linspace(0.5, 1.6, 57)
    np.testing.assert_allclose(resonator.impedance(circuit, f), by_elements(f, r1, l1, c1, c0, loss, rs), rtol=1e-9)


branches = st.lists(st.tuples(st.floats(0.5, 2.0), st.floats(1.0, 1e5), st.floats(1e-6, 1.0)), min_size=1, max_size=4)


@given(branches, st.floats(1e-12, 1e-7), st.floats(0, 1.0), st.floats(0, 50.0))
@settings(max_examples=100, deadline=None)
def test_circuit_without_phase_is_passive(
    modes: list[tuple[float, float, float]], c: float, loss: float, rs: float
) -> None:
    """No circuit of positive elements gives power back: Re Z ≥ 0 at every frequency."""
    f, q, g = (np.array(column) for column in zip(*modes, strict=True))
    circuit = Circuit(np.asarray(c), np.asarray(loss), 1e5 * f, q, g, 0 * f, np.asarray(rs))
    grid = np.geomspace(1e3, 1e7, 401)
    z = resonator.impedance(circuit, np.concatenate([grid, 1e5 * f]))
    assert np.isfinite(z).all()
    assert (z.real >= 0).all()


def test_arrays_of_circuits_equal_each_alone() -> None:
    """A stack of circuits gives row by row what each gives alone, at common and at own frequencies."""
    ones = [EXAMPLES[name].circuit for name in ("bolt40_1", "bolt40_2", "bolt28")]
    many = Circuit(*(np.stack([getattr(one, part) for one in ones]) for part in Circuit.__slots__))
    f = np.linspace(25e3, 45e3, 33)
    own = np.stack([f, f + 100, f + 200])
    for k, one in enumerate(ones):
        np.testing.assert_array_equal(resonator.impedance(many, f)[k], resonator.impedance(one, f))
        np.testing.assert_array_equal(resonator.impedance(many, own)[k], resonator.impedance(one, own[k]))


def test_c0_counts_every_other_mode_but_not_the_wanted_one() -> None:
    """C0 is the imaginary part of everything but the wanted branch at fs, over ω, with its loss as tan δ."""
    f, q, g = np.array([1e5, 1.3e5]), np.array([200.0, 100.0]), np.array([0.05, 0.02])
    circuit = Circuit(np.asarray(2e-9), np.asarray(0.01), f, q, g, np.array([0.05, -0.03]), np.asarray(3.0))
    w = 2 * np.pi * 1e5
    other = 0.02 * np.exp(-0.03j) / (1 + 100j * (1e5 / 1.3e5 - 1.3e5 / 1e5))
    rest = 1j * w * 2e-9 * (1 - 0.01j) + other
    assert float(resonator.c0_f(circuit)) == pytest.approx(rest.imag / w, rel=1e-14)
    assert float(resonator.tan_delta_at_fs(circuit)) == pytest.approx(rest.real / rest.imag, rel=1e-14)


def test_series_resonance_multiplies_the_voltage_and_takes_the_power() -> None:
    """At fs the reactances carry Q times the source's voltage, and most power goes into the part.

    Common practice, no source: 15 V at Q ≈ 7 is about 100 V.
    """
    fs, q, r1, loss = 1.65e6, 7.0, 30.0, 0.02
    l1, c1 = q * r1 / (2 * np.pi * fs), 1 / (2 * np.pi * fs * q * r1)
    circuit = resonator.from_elements(r1, l1, c1, 1e-9, loss)
    current = 15.0 * resonator.branch_admittances(circuit, np.array([fs]))[0, 0]
    assert abs(current) * 2 * np.pi * fs * l1 == pytest.approx(q * 15.0, rel=1e-12)
    assert abs(current) / (2 * np.pi * fs * c1) == pytest.approx(105.0, rel=1e-12)
    taken = 15.0**2 * resonator.admittance(circuit, np.array([fs]))[0].real
    assert abs(current) ** 2 * r1 / taken > 0.9


def test_parallel_resonance_multiplies_the_current() -> None:
    """At fp the current that circulates between C0 and the branch is Q times the input's.

    Common practice, no source. Q is that of the tank: C0's reactance over R1.
    """
    fp = DERIVED["bolt40_1"][1]
    y = resonator.admittance(BOLT.circuit, np.array([fp]))[0]
    branch = resonator.branch_admittances(BOLT.circuit, np.array([fp]))[0, 0]
    q = 1 / (2 * np.pi * fp * BOLT.c0 * BOLT.r1)
    assert q > 40
    assert abs(2j * np.pi * fp * BOLT.c0 / y) == pytest.approx(q, rel=2e-3)
    assert abs(branch / y) == pytest.approx(q, rel=2e-3)
