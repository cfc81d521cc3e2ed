"""The same sweeps fitted by independent, well-kept libraries: lmfit and scikit-rf."""

from __future__ import annotations

import warnings

import lmfit
import numpy as np
import pytest
import skrf
from fitting_sweeps import around, noisy, one_branch
from skrf.vectorFitting import VectorFitting

from harness.circuits import resonator
from harness.fitting import fit_batch
from harness.records import Complexes, Floats


def circuit_z(f: Floats, c0: float, loss: float, fs: float, q: float, r1: float) -> Complexes:
    """The five-parameter circuit, written down anew."""
    y = 2j * np.pi * f * c0 * (1 - 1j * loss) + 1 / (r1 * (1 + 1j * q * (f / fs - fs / f)))
    return np.asarray(1 / y)


def by_lmfit(f: Floats, z: Complexes) -> lmfit.model.ModelResult:
    """lmfit, weights 1/|z|, begun from the conductance peak and its half-power width."""
    y = 1 / z
    k = int(y.real.argmax())
    half = f[y.real > y.real[k] / 2]
    fit = lmfit.Model(circuit_z)
    begin = fit.make_params(
        c0=float(np.median(y.imag / (2 * np.pi * f))),
        loss=0.01,
        fs=float(f[k]),
        q=float(f[k] / (half[-1] - half[0])),
        r1=float(1 / y.real[k]),
    )
    return fit.fit(z, begin, f=f, weights=1 / np.abs(z))


@pytest.mark.parametrize(
    ("fs", "q", "r", "r1"), [(40e3, 420.0, 9.0, 21.0), (1.65e6, 200.0, 5.0, 1.35), (40e3, 27.0, 10.4, 643.0)]
)
def test_lmfit_agrees(fs: float, q: float, r: float, r1: float, rng: np.random.Generator) -> None:
    """Values within a tenth of u (only the weights differ: |z| as measured there, as modelled here), u within 5 %."""
    circuit = one_branch(fs=fs, q=q, r=r, r1=r1)
    f = around(circuit, 401)
    for z in noisy(resonator.impedance(circuit, f), 0.001, rng, 3):
        ours, theirs = fit_batch(f, z), by_lmfit(f, z).params
        for mine, name in (("fs_hz", "fs"), ("q", "q"), ("r1_ohm", "r1"), ("c0_f", "c0"), ("tan_delta", "loss")):
            u = getattr(ours, "u_" + mine)[0]
            assert abs(getattr(ours, mine)[0] - theirs[name].value) < 0.1 * u, name
            assert u == pytest.approx(theirs[name].stderr, rel=0.05), name


def test_vector_fitting_of_scikit_rf_finds_the_same_pole(rng: np.random.Generator) -> None:
    """scikit-rf's vector fitting of S11: its pole pair nearest the jω axis is fs and Q of the part loaded by 50 ohm."""
    circuit = one_branch(fs=1.65e6, q=200.0, r=5.0, r1=20.0)
    f = around(circuit, 401)
    z = noisy(resonator.impedance(circuit, f), 1e-4, rng)
    ours = fit_batch(f, z)
    # a matched port loads the part; the loaded pole follows from our own circuit
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        s11 = ((z - 50) / (z + 50))[:, None, None]
        network = skrf.Network(frequency=skrf.Frequency.from_f(f, unit="hz"), s=s11, z0=50)
        fitting = VectorFitting(network)
        fitting.vector_fit(n_poles_real=1, n_poles_cmplx=1)
    pole = fitting.poles[np.abs(fitting.poles.imag) > 0][0]
    got = loaded_pole(ours.c0_f[0], ours.tan_delta[0], ours.fs_hz[0], ours.q[0], ours.r1_ohm[0])
    assert abs(pole) / (2 * np.pi) == pytest.approx(abs(got) / (2 * np.pi), rel=2e-5)
    assert -abs(pole) / (2 * pole.real) == pytest.approx(-abs(got) / (2 * got.real), rel=5e-3)


def loaded_pole(c0: float, loss: float, fs: float, q: float, r1: float) -> complex:
    """Natural frequency s of the part across 50 ohm near fs: 1/50 + Y(s) = 0, a cubic."""
    w0, l1 = 2 * np.pi * fs, q * r1 / (2 * np.pi * fs)
    across, branch = np.array([c0 * (1 - 1j * loss), 1 / 50]), np.array([l1, r1, w0 * w0 * l1])
    roots = np.roots(np.polyadd(np.polymul(across, branch), np.array([1.0, 0.0])))
    return complex(roots[np.argmin(np.abs(roots - 1j * w0))])
