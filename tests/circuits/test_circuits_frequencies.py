"""Critical frequencies against published circuits, their existence, and their approximations."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_examples import COLUMNS, DERIVED, EXAMPLES
from hypothesis import given, settings
from hypothesis import strategies as st

from harness.circuits import frequencies, resonator
from harness.circuits.resonator import Circuit, from_elements


def critical(circuit: Circuit) -> dict[str, float]:
    """All six frequencies and what stands at them, bracketed by hand around fs and fp."""
    fs, fp = float(circuit.fs_hz), float(frequencies.fp_hz(circuit))
    width = fs / float(circuit.q[0])
    fm = frequencies.extremum_hz(circuit, fs - 2 * width, fs + 2 * width, greatest=False)
    fn = frequencies.extremum_hz(circuit, max(fp - 2 * width, fs), fp + 2 * width, greatest=True)
    return {
        "fs": fs,
        "fp": fp,
        "m": float(frequencies.figure_of_merit(circuit)),
        "fm": float(fm),
        "fn": float(fn),
        "fr": float(frequencies.zero_phase_hz(circuit, fs - 0.5 * width, fp + width, last=False)),
        "fa": float(frequencies.zero_phase_hz(circuit, fs - 0.5 * width, fp + width, last=True)),
        "zm": float(frequencies.level_ohm(circuit, fm)),
        "zn": float(frequencies.level_ohm(circuit, fn)),
    }


@pytest.mark.parametrize("name", list(DERIVED))
def test_critical_frequencies_of_published_circuits(name: str) -> None:
    """Six frequencies, Zm, Zn and M equal the 40-digit solution to the ten digits printed."""
    want = dict(zip(COLUMNS, DERIVED[name], strict=True))
    got = critical(EXAMPLES[name].circuit)
    assert got == pytest.approx({key: want[key] for key in got}, rel=1.5e-9)
    assert got["fm"] < got["fs"] < got["fr"] < got["fa"] < got["fp"] < got["fn"]


def test_half_power_points_of_a_bolt_clamped_drive() -> None:
    """bolt40_1 falls to half its conductance at the two frequencies solved with 40 digits, fs/Q apart."""
    peak, low, high = frequencies.half_power_hz(EXAMPLES["bolt40_1"].circuit)
    assert float(peak) == pytest.approx(40079.11761, rel=1e-9)
    assert float(low) == pytest.approx(40031.4900172, rel=1e-11)
    assert float(high) == pytest.approx(40126.8018679, rel=1e-11)
    assert float(high - low) == pytest.approx(95.3118506994, rel=1e-9)


@pytest.mark.parametrize(
    ("load_f", "exact_hz", "approximate_hz"),
    [
        (10e-12, 2015644.24679, 2015644.43174),
        (20e-12, 2015284.58648, 2015284.64943),
        (30e-12, 2015136.4724, 2015136.50377),
    ],
)
def test_load_capacitance_pulls_a_crystal(load_f: float, exact_hz: float, approximate_hz: float) -> None:
    """The load resonance is fp with the load beside C0 (sedra_2MHz, solved with 40 digits)."""
    crystal = EXAMPLES["sedra_2MHz"]
    loaded = from_elements(crystal.r1, crystal.l1, crystal.c1, crystal.c0 + load_f)
    assert float(frequencies.fp_hz(loaded)) == pytest.approx(exact_hz, rel=1e-11)
    fs = float(crystal.circuit.fs_hz)
    assert fs * (1 + crystal.c1 / (2 * (crystal.c0 + load_f))) == pytest.approx(approximate_hz, rel=1e-11)


@pytest.mark.parametrize(("r1", "exists"), [(643.186339335, True), (800.0, True), (820.0, False), (1200.0, False)])
def test_zero_phase_exists_only_above_a_figure_of_merit(r1: float, exists: bool) -> None:
    """air40 has fr and fa with R1 = 800 ohm (M 2.0735) and none with 820 (M 2.0229); the least M is 2.0470."""
    air = EXAMPLES["air40"]
    circuit = from_elements(r1, air.l1, air.c1, air.c0)
    least = 1 + np.sqrt(1 + air.c1 / air.c0)
    assert least == pytest.approx(2.0470, abs=2e-4)
    assert bool(frequencies.figure_of_merit(circuit) >= least) is exists
    found = critical(circuit)
    assert np.isfinite([found["fr"], found["fa"]]).tolist() == [exists, exists]


@given(st.floats(2.0, 200.0), st.floats(1.005, 3.0))
@settings(max_examples=50, deadline=None)
def test_least_figure_of_merit_holds_for_any_ratio(r: float, times: float) -> None:
    """fr and fa exist just above M = 1 + √(1 + 1/r) and not just below, for any r = C0/C1."""
    fs, c1 = 1e5, 1e-10
    l1 = 1 / ((2 * np.pi * fs) ** 2 * c1)
    for factor, exists in ((times, True), (1 / times, False)):
        m = (1 + np.sqrt(1 + 1 / r)) * factor
        r1 = 1 / (2 * np.pi * fs * r * c1 * m)
        found = critical(from_elements(r1, l1, c1, r * c1))
        assert np.isfinite(found["fr"]) == exists
        assert np.isfinite(found["fa"]) == exists


def exact_zero_phase_hz(r1: float, l1: float, c1: float, c0: float) -> list[float]:
    """Roots of the exact quadratic in ω² for zero susceptance."""
    b = c0 * r1**2 - 2 * l1 * c0 / c1 - l1
    roots = np.roots([l1**2 * c0, b, c0 / c1**2 + 1 / c1])
    return sorted(float(np.sqrt(root.real) / (2 * np.pi)) for root in roots)


@pytest.mark.parametrize("name", ["bolt40_1", "air40", "custom508", "bolt41"])
def test_zero_phase_solves_the_exact_quadratic(name: str) -> None:
    """fr and fa are the two roots of L1²C0 W² + (C0R1² − 2L1C0/C1 − L1) W + C0/C1² + 1/C1 = 0, W = ω²."""
    e = EXAMPLES[name]
    found = critical(e.circuit)
    assert [found["fr"], found["fa"]] == pytest.approx(exact_zero_phase_hz(e.r1, e.l1, e.c1, e.c0), rel=1e-9)


# relative errors of the large-M approximations (IEEE Std 177 form, from memory), exact solve with 40 digits;
# the last column is the IRE formula Qm = fn²/(2π fm Zm CT (fn² − fm²))
APPROXIMATIONS = [
    ("sedra_2MHz", None, None, -2.7e-9, -3.7e-5),
    ("etut_10MHz", None, None, -3.5e-8, -1.3e-4),
    ("bolt40_1", -1.4e-8, -1.3e-8, -4.6e-7, -3.9e-4),
    ("link_fbar_1G96", -2.5e-7, -2.4e-7, -1.8e-5, -2.7e-3),
    ("custom508", -6.5e-5, -5.8e-5, -7.1e-4, -1.1e-2),
    ("air40", -9.9e-4, -1.8e-3, -3.9e-2, -8.5e-2),
]


@pytest.mark.parametrize(("name", "fm_error", "fr_error", "zm_error", "q_error"), APPROXIMATIONS)
def test_large_m_approximations_err_as_published(
    name: str, fm_error: float | None, fr_error: float | None, zm_error: float, q_error: float
) -> None:
    """The textbook approximations miss the exact values by what a 40-digit solve says, to two digits."""
    e = EXAMPLES[name]
    found, q = critical(e.circuit), float(e.circuit.q[0])
    r, fs, m = e.c0 / e.c1, found["fs"], found["m"]
    errors = {
        "fm": fs * (1 - r / (2 * q**2)) / found["fm"] - 1,
        "fr": fs * (1 + r / (2 * q**2)) / found["fr"] - 1,
        "zm": e.r1 * (1 - 1 / m**2) / found["zm"] - 1,
        "ire": qm_ire(found["fm"], found["fn"], found["zm"], e.c0 + e.c1) / q - 1,
    }
    want = {"fm": fm_error, "fr": fr_error, "zm": zm_error, "ire": q_error}
    for key, value in want.items():
        if value is not None:
            assert errors[key] == pytest.approx(value, rel=0.06), key


def qm_ire(fm: float, fn: float, zm: float, ct: float) -> float:
    """The IRE formula for Qm from the extremes of |Z| (IRE Standards on Piezoelectric Crystals; from memory)."""
    return fn**2 / (2 * np.pi * fm * zm * ct * (fn**2 - fm**2))


@pytest.mark.parametrize(
    ("elements", "fs_hz", "fp_hz", "rel"),
    [
        # Circuit Cellar, Test Your EQ #67: fs, fp and C1 given; L1 and C0 follow
        ((10.0, 9.353538e-3, 27.1e-15, 6.370466e-12), 9.996490e6, 10.017730e6, 2e-7),
        # a transtutors exercise: fs, fp, R1 and Z far below resonance given
        ((20.0, 54.85396e-3, 0.0540027e-12, 29.0150e-12), 2924.21e3, 2926.93e3, 1e-6),
        # J. Bentley, Principles of Measurement Systems, piezoelectric force sensor as a circuit
        ((50.0, 2.5e-3, 400e-12, 1000e-12), 159154.94, 188314.67, 1e-7),
    ],
)
def test_inverse_problems_close(
    elements: tuple[float, float, float, float], fs_hz: float, fp_hz: float, rel: float
) -> None:
    """Elements worked out from published frequencies give those frequencies again."""
    circuit = from_elements(*elements)
    assert float(circuit.fs_hz) == pytest.approx(fs_hz, rel=rel)
    assert float(frequencies.fp_hz(circuit)) == pytest.approx(fp_hz, rel=rel)


def test_bentleys_impedances_at_both_resonances() -> None:
    """Bentley's sensor: |Z| and phase at fs and at fp (40-digit solve)."""
    circuit = from_elements(50.0, 2.5e-3, 400e-12, 1000e-12)
    z = resonator.impedance(circuit, np.array([float(circuit.fs_hz), float(frequencies.fp_hz(circuit))]))
    assert np.abs(z) == pytest.approx([49.938, 14310.7], rel=2e-5)
    assert np.degrees(np.angle(z)) == pytest.approx([-2.862, -3.386], abs=1e-3)


def test_transtutors_crystal_is_a_capacitor_far_below() -> None:
    """The exercise's crystal reads −j11 000 ohm at 498.66 kHz; its C0 neglects the branch, C1/C0 = 0.19 %."""
    circuit = from_elements(20.0, 54.85396e-3, 0.0540027e-12, 29.0150e-12)
    z = resonator.impedance(circuit, np.array([498.66e3]))[0]
    assert z.imag == pytest.approx(-11000.0, rel=2.1e-3)


def test_parallel_resonance_stops_at_the_next_branch() -> None:
    """With a further branch above, fp lies below it; the branch alone would put fp beyond."""
    f, q, g = np.array([1e5, 1.04e5]), np.array([500.0, 500.0]), np.array([0.1, 0.01])
    circuit = Circuit(np.asarray(1e-9), np.asarray(0.01), f, q, g, 0 * f, np.asarray(0.0))
    fp = float(frequencies.fp_hz(circuit))
    alone = float(frequencies.fp_hz(from_one(circuit)))
    assert 1e5 < fp < 1.04e5 < alone
    lossless = 2 * np.pi * fp * 1e-9 - float((g / q / (fp / f - f / fp)).sum())
    assert lossless == pytest.approx(0, abs=1e-12)


def from_one(circuit: Circuit) -> Circuit:
    """The circuit's first branch alone."""
    pick = (circuit.f_hz[:1], circuit.q[:1], circuit.g_s[:1], circuit.theta_rad[:1])
    return Circuit(circuit.c_f, circuit.tan_delta, *pick, circuit.rs_ohm)


@pytest.mark.parametrize("c_f", [0.0, -1e-9])
def test_no_parallel_resonance_without_capacitance(c_f: float) -> None:
    """A circuit whose remaining capacitance is not positive has no fp: NaN, not a number made up."""
    one = EXAMPLES["bolt40_1"].circuit
    bare = Circuit(np.asarray(c_f), one.tan_delta, one.f_hz, one.q, one.g_s, one.theta_rad, one.rs_ohm)
    assert np.isnan(frequencies.fp_hz(bare))


def test_losses_do_not_move_the_parallel_resonance() -> None:
    """fp is defined with the losses removed, so dielectric loss and motional phase leave it where it is."""
    one = EXAMPLES["bolt40_1"].circuit
    lossy = Circuit(one.c_f, np.asarray(0.05), one.f_hz, one.q, one.g_s, np.array([0.1]), np.asarray(5.0))
    assert float(frequencies.fp_hz(lossy)) == float(frequencies.fp_hz(one))
    assert float(frequencies.fp_hz(lossy.lossless())) == float(frequencies.fp_hz(one))


def test_extremes_on_the_edge_are_not_extremes() -> None:
    """Where the range does not hold the extremum, the answer is NaN instead of the range's edge."""
    circuit = EXAMPLES["bolt40_1"].circuit
    assert np.isnan(frequencies.extremum_hz(circuit, 35e3, 39e3, greatest=False))
    assert np.isnan(frequencies.extremum_hz(circuit, 43e3, 50e3, greatest=True))
    assert np.isnan(frequencies.zero_phase_hz(circuit, 43e3, 50e3, last=True))


def test_greatest_phase_lies_between_the_resonances() -> None:
    """The greatest phase equals the one on a fine grid between fs and fp."""
    circuit = EXAMPLES["air40"].circuit
    f = np.linspace(39946.0, 41819.0, 100_001)
    want = np.degrees(np.angle(resonator.impedance(circuit, f))).max()
    got = frequencies.phase_max_deg(circuit, 39946.0, 41819.0)
    assert float(got) == pytest.approx(float(want), abs=1e-3)
