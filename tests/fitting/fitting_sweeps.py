"""Sweeps of known circuits with seeded noise; shared by the tests of fitting."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model
from harness.records import Complexes, Floats


def one_branch(
    fs: float = 1.65e6, q: float = 200.0, r: float = 5.0, r1: float = 1.35, loss: float = 0.015, rs: float = 0.0
) -> Circuit:
    """A part by fs, Q, capacitance ratio r = C0/C1, R1, tan δ and a series resistance. Invented values."""
    c1 = 1 / (2 * np.pi * fs * q * r1)
    one = np.ones(1)
    return Circuit(np.asarray(r * c1), np.asarray(loss), fs * one, q * one, one / r1, 0 * one, np.asarray(rs))


def with_modes(circuit: Circuit, *modes: tuple[float, float, float]) -> Circuit:
    """The circuit with further branches (f in hertz, Q, conductance over the wanted one's)."""
    f, q, share = (np.array(column) for column in zip(*modes, strict=True))
    return Circuit(
        circuit.c_f,
        circuit.tan_delta,
        np.append(circuit.f_hz, f),
        np.append(circuit.q, q),
        np.append(circuit.g_s, share * circuit.g_s[0]),
        np.append(circuit.theta_rad, 0 * f),
        circuit.rs_ohm,
    )


def around(circuit: Circuit, n: int, *, widths: float = 8.0) -> Floats:
    """``n`` frequencies over fs to fp with ``widths`` half-power half-widths beyond either."""
    fs, q = float(circuit.f_hz[0]), float(circuit.q[0])
    fp = fs * np.sqrt(1 + circuit.g_s[0] / (2 * np.pi * fs * q * float(circuit.c_f)))
    return np.linspace(fs * (1 - widths / (2 * q)), fp + fs * widths / (2 * q), n)


def noisy(z_ohm: Complexes, sigma: float, rng: np.random.Generator, rows: int | None = None) -> Complexes:
    """Noise of σ|Z| on the real and on the imaginary part; ``rows`` sweeps of it, or one."""
    shape = z_ohm.shape if rows is None else (rows, *z_ohm.shape)
    return np.asarray(z_ohm + sigma * np.abs(z_ohm) * (rng.standard_normal(shape) + 1j * rng.standard_normal(shape)))


@dataclass(frozen=True, slots=True)
class Bound:
    """Truth and Cramér–Rao bound (standard deviation) of each quantity."""

    truth: dict[str, float]
    least: dict[str, float]


def bound(circuit: Circuit, f_hz: Floats, sigma: float) -> Bound:
    """Cramér–Rao bound of the five-parameter fit for noise of σ|Z|, propagated to what a batch fit returns."""
    p = model.parameters_of(circuit)[None, :]
    z = resonator.impedance(circuit, f_hz)[None, :]
    data = model.data_of(f_hz[None, :], z, np.ones((1, f_hz.size)))
    _, slopes, _ = model.misfit_and_slopes(p, data, (0, 1, 2, 3, 4))
    jacobian = np.stack([slope[0] for slope in slopes], axis=-1)
    covariance = np.linalg.inv(jacobian.T @ jacobian) * sigma**2
    truth, gradients = _quantities(p[0, :5])
    return Bound(truth, {k: float(np.sqrt(g @ covariance @ g)) for k, g in gradients.items()})


def _quantities(p: Floats) -> tuple[dict[str, float], dict[str, Floats]]:
    """Values and gradients by (ln C, tan δ, ln f, ln Q, ln G), by complex step."""
    truth = {k: float(v.real) for k, v in _from(p.astype(complex)).items()}
    gradients = {k: np.zeros(5) for k in truth}
    for j in range(5):
        moved = p.astype(complex)
        moved[j] += 1e-30j
        for key, value in _from(moved).items():
            gradients[key][j] = value.imag / 1e-30
    return truth, gradients


def _from(p: NDArray[np.complex128]) -> dict[str, complex]:
    c0, loss, fs, q, g = np.exp(p[0]), p[1], np.exp(p[2]), np.exp(p[3]), np.exp(p[4])
    c1 = g / (2 * np.pi * fs * q)
    return {
        "fs_hz": fs,
        "fp_hz": fs * np.sqrt(1 + c1 / c0),
        "r1_ohm": 1 / g,
        "q": q,
        "c0_f": c0,
        "tan_delta": loss,
        "c1_f": c1,
        "l1_h": q / (g * 2 * np.pi * fs),
        "keff": np.sqrt(c1 / (c0 + c1)),
    }
