"""The misfit of a circuit to impedances, and its exact derivatives.

Parameters of one circuit with M branches, ``P = 3 + 4M``, in this order:
ln C, tan δ, then per branch ln f, ln Q, ln G, θ, and last Rs. Sweeps are rows; everything is real arithmetic
on separate real and imaginary parts: NumPy's complex product may round differently in a vector's body and tail,
and a sweep's bits must not depend on the batch it travels in.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harness.circuits.resonator import Circuit
from harness.records import Complexes, Floats

LN_C, TAN_DELTA, FIRST_BRANCH, BRANCH = 0, 1, 2, 4
LN_F, LN_Q, LN_G, THETA = 0, 1, 2, 3


@dataclass(frozen=True, slots=True, eq=False)
class Data:
    """Sweeps as rows ``(B, N)``: frequencies, measured R and X, weights, and the noise's own scale.

    ``weight`` is 1 or 0 (dropped). ``sigma_ohm`` is the standard deviation of R and of X; None: proportional to |Z|.
    """

    f_hz: Floats
    r_ohm: Floats
    x_ohm: Floats
    weight: Floats
    sigma_ohm: Floats | None

    def rows(self, index: np.ndarray) -> Data:
        sigma = None if self.sigma_ohm is None else self.sigma_ohm[index]
        return Data(self.f_hz[index], self.r_ohm[index], self.x_ohm[index], self.weight[index], sigma)


def data_of(f_hz: Floats, z_ohm: Complexes, weight: Floats, sigma_ohm: Floats | None = None) -> Data:
    """Rows ``(B, N)`` from frequencies and complex impedances of that shape."""
    return Data(f_hz, np.ascontiguousarray(z_ohm.real), np.ascontiguousarray(z_ohm.imag), weight, sigma_ohm)


def branches_of(parameters: Floats) -> int:
    return (int(parameters.shape[-1]) - 3) // BRANCH


def circuit_of(parameters: Floats) -> Circuit:
    """The circuit(s) of a parameter array ``S + (P,)``."""
    m = branches_of(parameters)
    branch = parameters[..., FIRST_BRANCH : FIRST_BRANCH + BRANCH * m].reshape((*parameters.shape[:-1], m, BRANCH))
    return Circuit(
        np.exp(parameters[..., LN_C]),
        parameters[..., TAN_DELTA],
        np.exp(branch[..., LN_F]),
        np.exp(branch[..., LN_Q]),
        np.exp(branch[..., LN_G]),
        branch[..., THETA],
        parameters[..., -1],
    )


def parameters_of(circuit: Circuit) -> Floats:
    """Mirror of ``circuit_of``."""
    branch = np.stack([np.log(circuit.f_hz), np.log(circuit.q), np.log(circuit.g_s), circuit.theta_rad], axis=-1)
    flat = branch.reshape((*branch.shape[:-2], -1))
    head = np.stack([np.log(circuit.c_f), circuit.tan_delta], axis=-1)
    return np.concatenate([head, flat, np.asarray(circuit.rs_ohm)[..., None]], axis=-1)


def misfit(parameters: Floats, data: Data) -> Floats:
    """Weighted misfit ``(B, 2N)``: real parts, then imaginary parts of (Z_model − Z)/σ, σ = |Z_model| if not given."""
    circuit = circuit_of(parameters)
    a, b = admittance(circuit, data.f_hz)
    rm, xm = impedance(circuit, a, b)
    scale = _scale(data, rm, xm)
    return np.concatenate([(rm - data.r_ohm) * scale, (xm - data.x_ohm) * scale], axis=-1)


def misfit_and_slopes(parameters: Floats, data: Data, free: tuple[int, ...]) -> tuple[Floats, list[Floats], Floats]:
    """Misfit ``(B, 2N)``, its derivative by each parameter in ``free``, each ``(B, 2N)``, and the weights in both.

    The weights are held: with σ ∝ |Z_model| this is the likelihood's own equation, free of the bias that
    minimising over the weights would bring. dZ = −dY/Y².
    """
    circuit = circuit_of(parameters)
    a, b = admittance(circuit, data.f_hz)
    rm, xm = impedance(circuit, a, b)
    scale = _scale(data, rm, xm)
    value = np.concatenate([(rm - data.r_ohm) * scale, (xm - data.x_ohm) * scale], axis=-1)
    # −1/Y² = −(a − jb)²/|Y|⁴
    square = a * a + b * b
    over = scale / (square * square)
    turn_re, turn_im = (b * b - a * a) * over, 2 * a * b * over
    slopes = []
    for k in free:
        if k == parameters.shape[-1] - 1:
            slopes.append(np.concatenate([scale, np.zeros_like(scale)], axis=-1))
            continue
        da, db = _admittance_slope(circuit, data.f_hz, k)
        slopes.append(np.concatenate([turn_re * da - turn_im * db, turn_re * db + turn_im * da], axis=-1))
    return value, slopes, np.concatenate([scale, scale], axis=-1)


def _scale(data: Data, rm: Floats, xm: Floats) -> Floats:
    if data.sigma_ohm is not None:
        return data.weight / data.sigma_ohm
    return data.weight / np.sqrt(rm * rm + xm * xm)


def impedance(circuit: Circuit, a: Floats, b: Floats) -> tuple[Floats, Floats]:
    """Resistance and reactance, ohm, ``(B, N)``, of an admittance a + jb behind the circuit's Rs."""
    square = a * a + b * b
    return circuit.rs_ohm[..., None] + a / square, -b / square


def _branch(circuit: Circuit, f: Floats, m: int) -> tuple[Floats, Floats, Floats, Floats]:
    """Conductance and susceptance of branch m, its detuning q = Q(f/fm − fm/f), and 1/(1 + q²)."""
    fm, big_q = circuit.f_hz[..., m, None], circuit.q[..., m, None]
    theta = circuit.theta_rad[..., m, None]
    c, s = np.cos(theta), np.sin(theta)
    q = big_q * (f / fm - fm / f)
    h = 1 / (1 + q * q)
    g = circuit.g_s[..., m, None] * h
    return g * (c + s * q), g * (s - c * q), q, h


def admittance(circuit: Circuit, f: Floats) -> tuple[Floats, Floats]:
    """Conductance and susceptance without Rs, siemens, ``(B, N)``, in real arithmetic."""
    omega_c = 2 * np.pi * f * circuit.c_f[..., None]
    a, b = omega_c * circuit.tan_delta[..., None], omega_c
    for m in range(circuit.f_hz.shape[-1]):
        am, bm, _, _ = _branch(circuit, f, m)
        a, b = a + am, b + bm
    return a, b


def _admittance_slope(circuit: Circuit, f: Floats, k: int) -> tuple[Floats, Floats]:
    """Derivative of Y by parameter ``k`` (not Rs): real and imaginary part."""
    if k in (LN_C, TAN_DELTA):
        omega_c = 2 * np.pi * f * circuit.c_f[..., None]
        if k == LN_C:
            return omega_c * circuit.tan_delta[..., None], omega_c
        return omega_c, np.zeros_like(omega_c)
    m, kind = divmod(k - FIRST_BRANCH, BRANCH)
    a, b, q, h = _branch(circuit, f, m)
    if kind == LN_G:
        return a, b
    if kind == THETA:
        return -b, a
    if kind == LN_Q:  # −jq/(1 + jq) = −h(q² + jq)
        real, imag = -h * q * q, -h * q
    else:  # LN_F: jQv/(1 + jq) = Qvh(q + j), v = f/fm + fm/f
        fm = circuit.f_hz[..., m, None]
        qvh = circuit.q[..., m, None] * (f / fm + fm / f) * h
        real, imag = qvh * q, qvh
    return a * real - b * imag, a * imag + b * real
