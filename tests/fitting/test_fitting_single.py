"""The careful fit of one sweep: unwanted modes, their floor, span, bounce, correlated misfit."""

from __future__ import annotations

import numpy as np
import pytest
from fitting_sweeps import around, noisy, one_branch, with_modes

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model, single
from harness.fitting.single import Choice, SingleFit, fit_one
from harness.records import Complexes, FitStatus, Floats

NOISE = 0.0015
WINDOW = (1.5e6, 1.9e6)
F = np.linspace(*WINDOW, 401)


def seen(fit: SingleFit) -> list[tuple[float, float, float]]:
    """Modes beside the wanted one inside the data: frequency, Q, conductance over the wanted one's."""
    circuit = model.circuit_of(fit.parameters)
    rows = zip(circuit.f_hz[1:], circuit.q[1:], circuit.g_s[1:] / circuit.g_s[0], strict=True)
    return [(float(f), float(q), float(g)) for f, q, g in rows if F[0] <= f <= F[-1]]


def test_clean_sweeps_show_no_unwanted_mode(rng: np.random.Generator) -> None:
    """Of 60 one-mode sweeps at most one shows a mode that is not there."""
    alarms = 0
    for _ in range(60):
        circuit = one_branch(fs=rng.uniform(1.62e6, 1.68e6), q=rng.uniform(80, 400), r=rng.uniform(3, 10))
        alarms += bool(seen(fit_one(F, noisy(resonator.impedance(circuit, F), NOISE, rng), Choice(WINDOW))))
    assert alarms <= 1


def test_floor_is_honest(rng: np.random.Generator) -> None:
    """A mode of twice the floor's conductance, planted anywhere beyond two bandwidths of fs, is found in ≥ 95 %."""
    found = 0
    for _ in range(40):
        circuit = one_branch(fs=rng.uniform(1.62e6, 1.68e6), q=200.0, r=5.0)
        fs = float(circuit.f_hz[0])
        clean = fit_one(F, noisy(resonator.impedance(circuit, F), NOISE, rng), Choice(WINDOW))
        at = 0.0
        while abs(at / fs - 1) < 2.5 / 200 or not 1.01 * F[0] < at < 0.99 * F[-1]:
            at = rng.uniform(F[0], F[-1])
        planted = with_modes(circuit, (at, 200.0, 2 * clean.floor))
        modes = seen(fit_one(F, noisy(resonator.impedance(planted, F), NOISE, rng), Choice(WINDOW)))
        found += any(abs(f / at - 1) < 1 / 200 for f, _, _ in modes)
    assert found >= 38


def test_planted_modes_come_back_within_their_uncertainty(rng: np.random.Generator) -> None:
    """One and two unwanted modes of 5–50 %: frequency and conductance within 3.5 u, of 24 sweeps at least 23."""
    good = 0
    for k in range(24):
        circuit = one_branch(fs=1.65e6, q=200.0, r=5.0)
        plan = [(1.65e6 * (1 + rng.uniform(0.02, 0.05)), rng.uniform(120, 300), rng.uniform(0.05, 0.5))]
        if k % 2:
            plan.append((1.65e6 * (1 - rng.uniform(0.02, 0.05)), rng.uniform(120, 300), rng.uniform(0.05, 0.5)))
        fit = fit_one(F, noisy(resonator.impedance(with_modes(circuit, *plan), F), NOISE, rng), Choice(WINDOW))
        good += fit.status is FitStatus.OK and all(_found(fit, *mode) for mode in plan)
    assert good >= 23


def _found(fit: SingleFit, f_hz: float, q: float, share: float) -> bool:
    circuit = model.circuit_of(fit.parameters)
    k = int(np.argmin(np.abs(circuit.f_hz - f_hz)))
    at = model.FIRST_BRANCH + model.BRANCH * k
    u = {name: float(np.sqrt(fit.covariance[row, row])) for name, row in _rows(fit, at).items()}
    f_near = abs(np.log(circuit.f_hz[k] / f_hz)) < 3.5 * u["f"]
    g_near = abs(np.log(circuit.g_s[k] / circuit.g_s[0] / share)) < 3.5 * np.hypot(u["g"], u["g0"])
    return bool(f_near and g_near)


def _rows(fit: SingleFit, at: int) -> dict[str, int]:
    wanted = model.FIRST_BRANCH + model.LN_G
    return {"f": fit.free.index(at), "g": fit.free.index(at + model.LN_G), "g0": fit.free.index(wanted)}


@pytest.mark.parametrize("split", [0.004, 0.006, 0.01])
def test_split_mode_is_two_modes(split: float, rng: np.random.Generator) -> None:
    """A mode split in two, close as their own width, is told apart, the stronger one wanted."""
    circuit = with_modes(one_branch(fs=1.65e6, q=200.0), (1.65e6 * (1 + split), 200.0, 0.6))
    fit = fit_one(F, noisy(resonator.impedance(circuit, F), NOISE, rng), Choice(WINDOW))
    assert fit.status is FitStatus.OK
    assert len(seen(fit)) == 1
    assert seen(fit)[0][0] == pytest.approx(1.65e6 * (1 + split), rel=5e-4)
    assert seen(fit)[0][2] == pytest.approx(0.6, rel=0.1)
    assert float(np.exp(fit.parameters[2])) == pytest.approx(1.65e6, rel=5e-4)


def test_c0_does_not_depend_on_how_many_modes_are_fitted(rng: np.random.Generator) -> None:
    """With one branch over a narrow span, and with two over everything, C0 and fs agree within 3 u."""
    circuit = with_modes(one_branch(fs=1.65e6, q=200.0), (1.87e6, 150.0, 0.3))
    z = noisy(resonator.impedance(circuit, F), NOISE, rng)
    narrow, wide = fit_one(F, z, Choice(WINDOW, span=0.05)), fit_one(F, z, Choice(WINDOW))
    c0 = [float(resonator.c0_f(model.circuit_of(fit.parameters))) for fit in (narrow, wide)]
    truth = float(resonator.c0_f(circuit))
    assert c0[1] == pytest.approx(truth, rel=2e-3)
    assert c0[0] == pytest.approx(truth, rel=2e-2)
    assert np.exp(narrow.parameters[2]) == pytest.approx(np.exp(wide.parameters[2]), rel=1e-5)


def test_wanted_mode_is_the_strongest_inside_the_window(rng: np.random.Generator) -> None:
    """The window decides which of two modes is wanted, though the other is stronger."""
    circuit = with_modes(one_branch(fs=1.6e6, q=200.0), (1.8e6, 200.0, 0.4))
    z = noisy(resonator.impedance(circuit, F), NOISE, rng)
    for window, fs in ((WINDOW, 1.6e6), ((1.75e6, 1.85e6), 1.8e6)):
        fit = fit_one(F, z, Choice(window))
        assert fit.status is FitStatus.OK
        assert float(np.exp(fit.parameters[2])) == pytest.approx(fs, rel=1e-4)


def test_span_keeps_only_points_near_fs(rng: np.random.Generator) -> None:
    """A span of 4 % keeps the points within 4 % of fs and no others."""
    fit = fit_one(F, noisy(resonator.impedance(one_branch(), F), NOISE, rng), Choice(WINDOW, span=0.04))
    kept = fit.data.f_hz[0][fit.data.weight[0] > 0]
    assert kept[0] == pytest.approx(1.65e6 * 0.96, abs=1.1e3)
    assert kept[-1] == pytest.approx(1.65e6 * 1.04, abs=1.1e3)


def bounced(z: Complexes, rng: np.random.Generator) -> Complexes:
    """Three lone readings through a bad contact."""
    out = z.copy()
    out[rng.choice(np.arange(5, 396, 8), 3, replace=False)] += 10 ** rng.uniform(1.5, 4.5, 3)
    return out


def test_contact_bounce_is_left_out_and_counted(rng: np.random.Generator) -> None:
    """Three wild points move fs, R1 and C0 by less than 3 u, are counted, and leave no mode behind."""
    for _ in range(15):
        z = noisy(resonator.impedance(one_branch(), F), NOISE, rng)
        clean, got = fit_one(F, z, Choice(WINDOW)), fit_one(F, bounced(z, rng), Choice(WINDOW))
        assert got.status is FitStatus.OK
        assert 2 <= got.bounced <= 3  # one of 30 ohm is nothing beside a large impedance
        assert seen(got) == []
        u = np.sqrt(np.diag(clean.covariance))[:5]
        assert (np.abs(got.parameters[:5] - clean.parameters[:5]) < 3 * u).all()


def test_dropped_points_are_counted(rng: np.random.Generator) -> None:
    """NaN readings are left out and counted."""
    z = noisy(resonator.impedance(one_branch(), F), NOISE, rng)
    z[[3, 70, 200]] = np.nan
    fit = fit_one(F, z, Choice(WINDOW))
    assert fit.status is FitStatus.OK
    assert fit.dropped == 3


def test_instruments_own_noise_is_a_floor(rng: np.random.Generator) -> None:
    """A sweep quieter than the instrument can be is not believed to be more certain than the instrument."""
    z = noisy(resonator.impedance(one_branch(), F), 1e-5, rng)
    free, told = (fit_one(F, z, Choice(WINDOW), noise_relative=noise) for noise in (None, NOISE))
    ratio = np.sqrt(np.diag(told.covariance)[2] / np.diag(free.covariance)[2])
    assert ratio == pytest.approx(NOISE / free.scale, rel=0.05)


def test_background_that_rises_is_carried(rng: np.random.Generator) -> None:
    """A mode far above the sweep makes the capacitance rise; C0 at fs comes out right all the same."""
    plain = one_branch(fs=1.65e6, q=200.0)
    far = with_modes(plain, (4.9e6, 200.0, 0.4))
    errors = []
    for _ in range(20):
        fit = fit_one(F, noisy(resonator.impedance(far, F), NOISE, rng), Choice(WINDOW))
        errors.append(float(resonator.c0_f(model.circuit_of(fit.parameters)) / resonator.c0_f(far)) - 1)
        assert seen(fit) == []
    assert abs(np.mean(errors)) < 2e-4


def test_same_bits_in_any_order_of_points(rng: np.random.Generator) -> None:
    """The order in which the points were measured does not matter."""
    z = noisy(resonator.impedance(one_branch(), F), NOISE, rng)
    order = rng.permutation(F.size)
    one, other = fit_one(F, z, Choice(WINDOW)), fit_one(F[order], z[order], Choice(WINDOW))
    np.testing.assert_array_equal(one.parameters, other.parameters)
    np.testing.assert_array_equal(one.covariance, other.covariance)


def test_misfit_of_the_model_widens_the_uncertainty(rng: np.random.Generator) -> None:
    """A sweep that the circuit does not describe (a warped frequency axis) has correlated residuals and a wider u."""
    plain = one_branch()
    z = resonator.impedance(plain, F)
    warped = np.interp(F, F + 300 * np.sin(F / 8e3), np.arange(F.size))
    bent = np.interp(warped, np.arange(F.size), z.real) + 1j * np.interp(warped, np.arange(F.size), z.imag)
    fit = fit_one(F, noisy(bent, 1e-4, rng), Choice(WINDOW, most_branches=1))
    straight = fit_one(F, noisy(z, 1e-4, rng), Choice(WINDOW, most_branches=1))
    assert fit.status is FitStatus.OK
    assert fit.lag_one > 0.3
    assert straight.lag_one == 0.0
    assert fit.covariance[2, 2] > 10 * straight.covariance[2, 2]


def test_refits_begin_where_the_fit_ended(rng: np.random.Generator) -> None:
    """Refits of the same data move nothing; of data scaled by 1 % they move ln G by 1 % and fs not at all."""
    z = noisy(resonator.impedance(one_branch(), F), NOISE, rng)
    fit = fit_one(F, z, Choice(WINDOW))
    span, place, same, scaled = single.refits(fit, [z, 1.01 * z])
    np.testing.assert_allclose(same[:6], fit.parameters[:6], rtol=1e-6, atol=1e-6)
    assert scaled[4] - fit.parameters[4] == pytest.approx(-np.log(1.01), abs=1e-6)
    assert scaled[2] == pytest.approx(fit.parameters[2], abs=1e-9)
    assert 0 < np.abs(span - fit.parameters)[2] < 1e-5
    assert np.abs(place - fit.parameters)[2] < 1e-5


def theta_circuit(theta: float) -> Circuit:
    """A part whose branch is turned, as a lossy distributed element's is."""
    plain = one_branch(q=150.0)
    turned = np.array([theta])
    return Circuit(plain.c_f, plain.tan_delta, plain.f_hz, plain.q, plain.g_s, turned, plain.rs_ohm)


@pytest.mark.parametrize("theta", [-0.1, -0.03, 0.0, 0.05])
def test_motional_phase_is_part_of_the_circuit(theta: float, rng: np.random.Generator) -> None:
    """θ comes back within 4 u, and fs, Q, R1 with it."""
    f: Floats = around(theta_circuit(theta), 401)
    z = noisy(resonator.impedance(theta_circuit(theta), f), 5e-4, rng)
    fit = fit_one(f, z, Choice((float(f[0]), float(f[-1]))))
    want = model.parameters_of(theta_circuit(theta))
    u = np.sqrt(np.diag(fit.covariance))
    assert (np.abs(fit.parameters[2:6] - want[2:6]) < 4 * u[2:6]).all()
