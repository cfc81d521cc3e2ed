"""The misfit and its derivatives, before any fit."""

from __future__ import annotations

import numpy as np
import pytest

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model

FREE = {m: tuple(range(3 + 4 * m)) for m in (1, 2, 3)}


def example(branches: int, rng: np.random.Generator) -> Circuit:
    """A random circuit near 1 MHz, every parameter away from zero."""
    f = 1e6 * (1 + 0.1 * np.arange(branches)) * (1 + 0.01 * rng.standard_normal(branches))
    q = 10 ** rng.uniform(1, 3, branches)
    g = 10 ** rng.uniform(-3, -1, branches)
    theta = 0.2 * rng.standard_normal(branches)
    return Circuit(np.asarray(1e-9), np.asarray(0.02), f, q, g, theta, np.asarray(2.0))


@pytest.mark.parametrize("branches", [1, 2, 3])
def test_real_arithmetic_equals_the_circuit(branches: int, rng: np.random.Generator) -> None:
    """Admittance and impedance in real arithmetic equal the complex formula of the circuit."""
    circuit = example(branches, rng)
    f = np.linspace(0.8e6, 1.5e6, 101)
    a, b = model.admittance(circuit, f)
    np.testing.assert_allclose(a + 1j * b, resonator.admittance(circuit, f), rtol=1e-12)
    r, x = model.impedance(circuit, a, b)
    np.testing.assert_allclose(r + 1j * x, resonator.impedance(circuit, f), rtol=1e-12)


@pytest.mark.parametrize("branches", [1, 2, 3])
def test_parameters_and_circuit_mirror_each_other(branches: int, rng: np.random.Generator) -> None:
    """circuit → parameters → circuit changes nothing but the last bits."""
    circuit = example(branches, rng)
    back = model.circuit_of(model.parameters_of(circuit))
    for name in Circuit.__slots__:
        np.testing.assert_allclose(getattr(back, name), getattr(circuit, name), rtol=1e-13)


@pytest.mark.parametrize("with_sigma", [False, True])
@pytest.mark.parametrize("branches", [1, 2, 3])
def test_slopes_are_exact(branches: int, with_sigma: bool, rng: np.random.Generator) -> None:
    """Each derivative equals the complex-step derivative (W. Squire and G. Trapp, 1998), the weights held."""
    p = model.parameters_of(example(branches, rng))
    f = np.linspace(0.8e6, 1.5e6, 41)
    z = 30 * (rng.standard_normal(41) + 1j * rng.standard_normal(41))
    weight = (rng.random(41) > 0.1).astype(float)
    sigma = rng.uniform(0.1, 1.0, 41)[None, :] if with_sigma else None
    data = model.data_of(f[None, :], z[None, :], weight[None, :], sigma)
    value, slopes, held = model.misfit_and_slopes(p[None, :], data, FREE[branches])
    np.testing.assert_array_equal(value, model.misfit(p[None, :], data))
    for k, slope in zip(FREE[branches], slopes, strict=True):
        moved = p.astype(complex)
        moved[k] += 1e-30j
        circuit = model.circuit_of(moved)
        r, x = model.impedance(circuit, *model.admittance(circuit, f))
        want = np.concatenate([r.imag, x.imag]) / 1e-30 * held[0]
        np.testing.assert_allclose(slope[0], want, rtol=1e-9, atol=1e-12 * np.abs(want).max())


def test_misfit_of_the_truth_is_the_noise(rng: np.random.Generator) -> None:
    """Model first: at the true circuit the misfit is exactly the noise put in, and none without noise."""
    circuit = example(2, rng)
    f = np.linspace(0.8e6, 1.5e6, 301)
    z = resonator.impedance(circuit, f)
    p = model.parameters_of(circuit)[None, :]
    ones = np.ones((1, 301))
    assert np.abs(model.misfit(p, model.data_of(f[None, :], z[None, :], ones))).max() < 1e-9
    noise = 0.01 * (rng.standard_normal(301) + 1j * rng.standard_normal(301))
    data = model.data_of(f[None, :], (z + np.abs(z) * noise)[None, :], ones)
    np.testing.assert_allclose(
        model.misfit(p, data)[0], -np.concatenate([noise.real, noise.imag]), rtol=1e-6, atol=1e-10
    )
