"""The piezo element as a circuit: a lossy capacitance beside motional branches.

Y(f) = jωC(1 − j tan δ) + Σ G e^{jθ} / (1 + jQ(f/f_m − f_m/f)),  Z = Rs + 1/Y

With θ = 0 a branch is exactly R1, L1, C1 in series (Butterworth–Van Dyke; IEEE Std 177-1966):
R1 = 1/G, L1 = Q·R1/(2πf_m), C1 = G/(2πf_m·Q). A motional phase θ ≠ 0 carries what the losses of a
distributed element add, since a lossy plate is not exactly five numbers.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from harness.records import Complexes, Floats


@dataclass(frozen=True, slots=True, eq=False)
class Circuit:
    """One circuit or an array of them. ``c_f``, ``tan_delta``, ``rs_ohm``: shape ``S``; the branch arrays
    ``f_hz``, ``q``, ``g_s``, ``theta_rad``: ``S + (M,)``, wanted branch first."""

    c_f: Floats
    tan_delta: Floats
    f_hz: Floats
    q: Floats
    g_s: Floats
    theta_rad: Floats
    rs_ohm: Floats

    @property
    def fs_hz(self) -> Floats:
        """Series resonance of the wanted branch."""
        return np.asarray(self.f_hz[..., 0])

    def lossless(self) -> Circuit:
        """The same circuit with its losses removed: the dielectric's, the motional phase, the fixture's.

        The branches keep Q and G: only their ratio counts in ``reactive_susceptance``.
        """
        zero = np.zeros_like(self.theta_rad)
        return Circuit(self.c_f, 0 * self.tan_delta, self.f_hz, self.q, self.g_s, zero, 0 * self.rs_ohm)


def from_elements(r1_ohm: float, l1_h: float, c1_f: float, c0_f: float, tan_delta: float = 0.0) -> Circuit:
    """The single-branch circuit of given elements.

    >>> circuit = from_elements(21.05, 0.03515, 4.4862e-10, 4.07569e-9)
    >>> round(float(circuit.fs_hz), 5), round(float(circuit.q[0]), 6)
    (40079.11761, 420.505082)
    """
    fs = 1 / (2 * np.pi * np.sqrt(l1_h * c1_f))
    q = np.sqrt(l1_h / c1_f) / r1_ohm
    one = np.atleast_1d
    return Circuit(
        np.asarray(c0_f), np.asarray(tan_delta), one(fs), one(q), one(1 / r1_ohm), np.zeros(1), np.asarray(0.0)
    )


def branch_admittances(circuit: Circuit, f_hz: ArrayLike) -> Complexes:
    """Each branch's admittance in siemens at ``f_hz``, ``(N,)`` or ``S + (N,)``: shape ``S + (M, N)``."""
    f = np.asarray(f_hz, dtype=np.float64)[..., None, :]
    fm, q = circuit.f_hz[..., None], circuit.q[..., None]
    amplitude = circuit.g_s[..., None] * np.exp(1j * circuit.theta_rad[..., None])
    return np.asarray(amplitude / (1 + 1j * q * (f / fm - fm / f)))


def admittance(circuit: Circuit, f_hz: ArrayLike) -> Complexes:
    """Admittance of the element without its series resistance, siemens, ``S + (N,)``.

    ``f_hz`` is ``(N,)`` or ``S + (N,)``.
    """
    f = np.asarray(f_hz, dtype=np.float64)
    static = 2j * np.pi * f * (circuit.c_f * (1 - 1j * circuit.tan_delta))[..., None]
    return np.asarray(static + branch_admittances(circuit, f).sum(axis=-2))


def impedance(circuit: Circuit, f_hz: ArrayLike) -> Complexes:
    """Impedance with the series resistance, ohm, ``S + (N,)``."""
    return np.asarray(circuit.rs_ohm[..., None] + 1 / admittance(circuit, f_hz))


def background_at_fs(circuit: Circuit) -> Complexes:
    """Everything but the wanted branch, at its fs, in siemens: shape ``S``.

    C0 is its imaginary part over ω, so that it does not depend on how many branches were fitted.
    """
    fs = circuit.fs_hz
    omega = 2 * np.pi * fs
    static = 1j * omega * circuit.c_f * (1 - 1j * circuit.tan_delta)
    fm, q = circuit.f_hz[..., 1:], circuit.q[..., 1:]
    ratio = fs[..., None] / fm
    others = circuit.g_s[..., 1:] * np.exp(1j * circuit.theta_rad[..., 1:]) / (1 + 1j * q * (ratio - 1 / ratio))
    return np.asarray(static + others.sum(axis=-1))


def c0_f(circuit: Circuit) -> Floats:
    """Capacitance beside the wanted mode, farad."""
    return np.asarray(background_at_fs(circuit).imag / (2 * np.pi * circuit.fs_hz))


def tan_delta_at_fs(circuit: Circuit) -> Floats:
    """Loss of everything but the wanted branch at its fs: Re/Im."""
    y = background_at_fs(circuit)
    return np.asarray(y.real / y.imag)


def r1_ohm(circuit: Circuit) -> Floats:
    return np.asarray(1 / circuit.g_s[..., 0])


def c1_f(circuit: Circuit) -> Floats:
    return np.asarray(circuit.g_s[..., 0] / (2 * np.pi * circuit.fs_hz * circuit.q[..., 0]))


def l1_h(circuit: Circuit) -> Floats:
    return np.asarray(circuit.q[..., 0] / (circuit.g_s[..., 0] * 2 * np.pi * circuit.fs_hz))
