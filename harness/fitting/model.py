"""The misfit of a circuit to impedances, and its exact derivatives.

Parameters of one circuit with M branches, ``P = 3 + 4M``, in this order:
ln C, tan δ, then per branch ln f, ln Q, ln G, θ, and last ρ = Rs·G of the wanted branch, the first: nothing here has a
unit, so that no step limit depends on one. Sweeps are rows; everything is real arithmetic
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

    def weighted(self, weight: Floats) -> Data:
        """The same points with other weights."""
        return Data(self.f_hz, self.r_ohm, self.x_ohm, weight, self.sigma_ohm)

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
        parameters[..., -1] * np.exp(-branch[..., 0, LN_G]),
    )


def parameters_of(circuit: Circuit) -> Floats:
    """Mirror of ``circuit_of``."""
    branch = np.stack([np.log(circuit.f_hz), np.log(circuit.q), np.log(circuit.g_s), circuit.theta_rad], axis=-1)
    flat = branch.reshape((*branch.shape[:-2], -1))
    head = np.stack([np.log(circuit.c_f), circuit.tan_delta], axis=-1)
    share = np.asarray(circuit.rs_ohm) * circuit.g_s[..., 0]
    return np.concatenate([head, flat, share[..., None]], axis=-1)


def misfit(parameters: Floats, data: Data) -> Floats:
    """Weighted misfit ``(B, 2N)``: real parts, then imaginary parts of (Z_model − Z)/σ, σ = |Z_model| if not given."""
    circuit = circuit_of(parameters)
    rm, xm = impedance(circuit, *admittance(circuit, data.f_hz))
    scale = _scale(data, rm, xm)
    return _joined((rm - data.r_ohm) * scale, (xm - data.x_ohm) * scale)


def misfit_and_slopes(parameters: Floats, data: Data, free: tuple[int, ...]) -> tuple[Floats, list[Floats], Floats]:
    """Misfit ``(B, 2N)``, its derivative by each parameter in ``free``, each ``(B, 2N)``, and the weights in both.

    The weights are held: with σ ∝ |Z_model| this is the likelihood's own equation, free of the bias that
    minimising over the weights would bring. dZ = −dY/Y².
    """
    circuit = circuit_of(parameters)
    omega_c, branches = _parts(circuit, data.f_hz)
    a, b = _total(circuit, omega_c, branches)
    rm, xm = impedance(circuit, a, b)
    scale = _scale(data, rm, xm)
    value = _joined((rm - data.r_ohm) * scale, (xm - data.x_ohm) * scale)
    # −scale/Y² = −scale (a − jb)²/|Y|⁴
    square = a * a + b * b
    over = scale / (square * square)
    turn = (b * b - a * a) * over, 2 * a * b * over
    slopes = _static_slopes(circuit, omega_c, turn)
    for m, branch in enumerate(branches):
        slopes |= _branch_slopes(circuit, data.f_hz, m, branch, turn)
    _add_series_resistance(slopes, circuit, (scale, np.zeros_like(scale)))
    return value, [_joined(*slopes[k]) for k in free], _joined(scale, scale)


def log_misfit_and_slopes(parameters: Floats, data: Data, free: tuple[int, ...]) -> tuple[Floats, list[Floats], Floats]:
    """As ``misfit_and_slopes``, of ln(Z_model/Z): level and phase. The same to first order, and tame far from the fit.

    A peak in the wrong place costs its logarithm, not its height, so that this finds its way from afar, and a wild
    point pulls little.
    """
    circuit = circuit_of(parameters)
    omega_c, branches = _parts(circuit, data.f_hz)
    a, b = _total(circuit, omega_c, branches)
    rm, xm = impedance(circuit, a, b)
    model2, size2 = rm * rm + xm * xm, data.r_ohm * data.r_ohm + data.x_ohm * data.x_ohm
    scale = data.weight if data.sigma_ohm is None else data.weight * np.sqrt(size2) / data.sigma_ohm
    turned = np.arctan2(xm * data.r_ohm - rm * data.x_ohm, rm * data.r_ohm + xm * data.x_ohm)
    value = _joined(0.5 * np.log(model2 / np.where(size2 > 0, size2, 1.0)) * scale, turned * scale)
    # dZ/Z = −dY/(Y² Z), and 1/(Y² Z) = conj(Y² Z)/|Y² Z|²
    re, im = _times((a * a - b * b, 2 * a * b), (rm, xm))
    over = scale / (re * re + im * im)
    turn = -re * over, im * over
    slopes = _static_slopes(circuit, omega_c, turn)
    for m, branch in enumerate(branches):
        slopes |= _branch_slopes(circuit, data.f_hz, m, branch, turn)
    _add_series_resistance(slopes, circuit, (rm * scale / model2, -xm * scale / model2))
    return value, [_joined(*slopes[k]) for k in free], _joined(scale, scale)


_Pair = tuple[Floats, Floats]  # real and imaginary part, each (B, N)


def _add_series_resistance(slopes: dict[int, _Pair], circuit: Circuit, by_rs: _Pair) -> None:
    """Rs = ρ/G: its slopes by ρ, the last parameter, and by the wanted branch's ln G."""
    rs, r1 = circuit.rs_ohm[..., None], 1 / circuit.g_s[..., 0, None]
    slopes[FIRST_BRANCH + BRANCH * circuit.f_hz.shape[-1]] = by_rs[0] * r1, by_rs[1] * r1
    at = FIRST_BRANCH + LN_G
    slopes[at] = slopes[at][0] - by_rs[0] * rs, slopes[at][1] - by_rs[1] * rs


@dataclass(frozen=True, slots=True, eq=False)
class _Branch:
    """One branch at every point: conductance, susceptance, detuning q = Q(f/fm − fm/f) and 1/(1 + q²)."""

    a: Floats
    b: Floats
    q: Floats
    h: Floats


def _times(one: _Pair, other: _Pair) -> _Pair:
    return one[0] * other[0] - one[1] * other[1], one[0] * other[1] + one[1] * other[0]


def _joined(real: Floats, imaginary: Floats) -> Floats:
    return np.concatenate([real, imaginary], axis=-1)


def _scale(data: Data, rm: Floats, xm: Floats) -> Floats:
    if data.sigma_ohm is not None:
        return data.weight / data.sigma_ohm
    return np.asarray(data.weight / np.sqrt(rm * rm + xm * xm))


def admittance(circuit: Circuit, f: Floats) -> _Pair:
    """Conductance and susceptance without Rs, siemens, ``(B, N)``, in real arithmetic."""
    return _total(circuit, *_parts(circuit, f))


def impedance(circuit: Circuit, a: Floats, b: Floats) -> _Pair:
    """Resistance and reactance, ohm, ``(B, N)``, of an admittance a + jb behind the circuit's Rs."""
    square = a * a + b * b
    return circuit.rs_ohm[..., None] + a / square, -b / square


def _parts(circuit: Circuit, f: Floats) -> tuple[Floats, list[_Branch]]:
    """ωC, and the branches."""
    return 2 * np.pi * f * circuit.c_f[..., None], [_branch(circuit, f, m) for m in range(circuit.f_hz.shape[-1])]


def _branch(circuit: Circuit, f: Floats, m: int) -> _Branch:
    fm, big_q = circuit.f_hz[..., m, None], circuit.q[..., m, None]
    theta = circuit.theta_rad[..., m, None]
    c, s = np.cos(theta), np.sin(theta)
    q = big_q * (f / fm - fm / f)
    h = 1 / (1 + q * q)
    g = circuit.g_s[..., m, None] * h
    return _Branch(g * (c + s * q), g * (s - c * q), q, h)


def _total(circuit: Circuit, omega_c: Floats, branches: list[_Branch]) -> _Pair:
    a, b = omega_c * circuit.tan_delta[..., None], omega_c
    for branch in branches:
        a, b = a + branch.a, b + branch.b
    return a, b


def _static_slopes(circuit: Circuit, omega_c: Floats, turn: _Pair) -> dict[int, _Pair]:
    """By tan δ: turn·ωC; by ln C: turn·ωC (tan δ + j)."""
    real, imag = turn[0] * omega_c, turn[1] * omega_c
    loss = circuit.tan_delta[..., None]
    return {TAN_DELTA: (real, imag), LN_C: (loss * real - imag, loss * imag + real)}


def _branch_slopes(circuit: Circuit, f: Floats, m: int, branch: _Branch, turn: _Pair) -> dict[int, _Pair]:
    """With w = turn·Y_m and e = w h (q + j): by ln G w, by θ jw, by ln Q −qe, by ln f Q(f/fm + fm/f) e."""
    at = FIRST_BRANCH + BRANCH * m
    real = turn[0] * branch.a - turn[1] * branch.b
    imag = turn[0] * branch.b + turn[1] * branch.a
    e_real, e_imag = (real * branch.q - imag) * branch.h, (imag * branch.q + real) * branch.h
    fm = circuit.f_hz[..., m, None]
    qv = circuit.q[..., m, None] * (f / fm + fm / f)
    return {
        at + LN_G: (real, imag),
        at + THETA: (-imag, real),
        at + LN_Q: (-branch.q * e_real, -branch.q * e_imag),
        at + LN_F: (qv * e_real, qv * e_imag),
    }
