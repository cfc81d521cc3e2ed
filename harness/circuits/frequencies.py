"""The critical frequencies of a circuit, and what stands at them.

Definitions as in IEEE Std 176-1987 §6 and IEEE Std 177-1966 (cited from memory; the mathematics is derived
and tested here): fs greatest conductance of the wanted branch; fp pole of Z with losses removed; fm, fn least
and greatest |Z|; fr, fa zero susceptance, which exist only where M ≥ 1 + √(1 + 1/r), r = C0/C1.

All work on arrays of circuits ``S``, so that an uncertainty by differences costs one pass. Each circuit's roots are
bracketed on a grid of its own levels, then closed in on together.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.records import Complexes, Floats

_GRID, _FINE_GRID = 401, 1601
_MOST_STEPS = 100
_RESOLUTION = 4 * np.finfo(np.float64).eps


def fp_hz(circuit: Circuit) -> Floats:
    """Parallel resonance: the next frequency above fs where Im Y, losses removed, is zero; NaN where there is none.

    For one branch f_p = f_s √(1 + C1/C0) exactly. Lossless, B(f) = 2πf C − Σ (G/Q)/(f/f_m − f_m/f) rises
    from −∞ just above f_s, so between f_s and the next branch (or without bound) it crosses zero at most once.
    """
    fs = circuit.fs_hz
    slope = circuit.g_s / circuit.q
    above = np.where(circuit.f_hz > fs[..., None] * (1 + 1e-9), circuit.f_hz, np.inf).min(axis=-1)
    total = slope[..., 0] / (2 * np.pi * fs * np.where(circuit.c_f > 0, circuit.c_f, np.nan))
    alone = fs * np.sqrt(1 + total)
    # with branches below fs the zero lies above the single-branch value, so give room before the next branch
    high = np.where(np.isfinite(above), above * (1 - 1e-12), fs + 4 * (alone - fs) + 0.5 * fs)

    def susceptance(f: Floats) -> Floats:
        u = f[..., None] / circuit.f_hz - circuit.f_hz / f[..., None]
        return np.asarray(2 * np.pi * f * circuit.c_f - (slope / u).sum(axis=-1))

    low = fs * (1 + 1e-12)
    found = root(susceptance, low, high)
    return np.where(np.isfinite(alone) & (susceptance(high) > 0), found, np.nan)


def root(function: Callable[[Floats], Floats], low: Floats, high: Floats) -> Floats:
    """Root of ``function`` between ``low`` and ``high`` (shape ``S``), elementwise; the sign must change there.

    Bisection and inverse quadratic interpolation as in T. R. Chandrupatla, Adv. Eng. Software 28 (1997) 145–149
    (from memory): the bracket never grows, each element stops by itself, to the last bits of a float.
    """
    a, b = np.array(high, dtype=np.float64), np.array(low, dtype=np.float64)
    fa, fb = function(a), function(b)
    c, fc = a, fa
    share, done = np.full(a.shape, 0.5), np.zeros(a.shape, dtype=bool)
    with np.errstate(all="ignore"):
        for _ in range(_MOST_STEPS):
            middle = np.where(done, a, a + share * (b - a))
            value = np.where(done, fa, function(middle))
            same = np.sign(value) == np.sign(fa)
            c, fc = np.where(done, c, np.where(same, a, b)), np.where(done, fc, np.where(same, fa, fb))
            b, fb = np.where(done | same, b, a), np.where(done | same, fb, fa)
            a, fa = middle, value
            smallest = _RESOLUTION * np.abs(a) / np.abs(b - a)
            done = done | ~(smallest < 0.5) | (fa == 0)
            if done.all():
                break
            share = np.clip(_interpolated(a, b, c, fa, fb, fc), smallest, 1 - smallest)
    return np.asarray(np.where(np.abs(fa) <= np.abs(fb), a, b))


def _interpolated(a: Floats, b: Floats, c: Floats, fa: Floats, fb: Floats, fc: Floats) -> Floats:
    """How far from a to b to look next: by inverse quadratic interpolation where that is safe, else half."""
    xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
    safe = (phi**2 < xi) & ((1 - phi) ** 2 < 1 - xi)
    quadratic = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    return np.where(safe, quadratic, 0.5)


def extremum_hz(circuit: Circuit, low_hz: float, high_hz: float, *, greatest: bool) -> Floats:
    """Frequency of greatest (else least) |Z| inside a range, shape ``S``; NaN where it lies on the range's edge."""
    f = np.linspace(low_hz, high_hz, _GRID)
    level = np.abs(resonator.impedance(circuit, f))
    k = np.asarray((level if greatest else -level).argmax(axis=-1))
    inner = np.clip(k, 1, f.size - 2)
    found = root(lambda x: _slope(circuit, x), f[inner - 1], f[inner + 1])
    return np.where(k == inner, found, np.nan)


def zero_phase_hz(circuit: Circuit, low_hz: float, high_hz: float, *, last: bool) -> Floats:
    """Where Im Z first rises through zero in a range (``last``: last falls), shape ``S``; NaN where it does not.

    A part turns inductive at fr and capacitive again at fa, so one crossing can never be both.
    """
    f = np.linspace(low_hz, high_hz, _FINE_GRID)
    sign = np.sign(resonator.impedance(circuit, f).imag)
    crosses = (sign[..., :-1] * sign[..., 1:] < 0) & (sign[..., 1:] < 0 if last else sign[..., 1:] > 0)
    k = f.size - 2 - crosses[..., ::-1].argmax(axis=-1) if last else crosses.argmax(axis=-1)
    found = root(lambda g: _impedance_at(circuit, g).imag, f[k], f[k + 1])
    return np.where(crosses.any(axis=-1), found, np.nan)


def half_power_hz(circuit: Circuit) -> tuple[Floats, Floats, Floats]:
    """Frequency of the wanted branch's greatest conductance, and where it has fallen to half, below and above."""
    one = Circuit(
        circuit.c_f * 0, circuit.tan_delta, circuit.f_hz[..., :1], circuit.q[..., :1], circuit.g_s[..., :1],
        circuit.theta_rad[..., :1], circuit.rs_ohm * 0,
    )  # fmt: skip
    fs, width = one.fs_hz, one.fs_hz / one.q[..., 0]

    def conductance(f: Floats) -> Floats:
        return np.asarray(resonator.branch_admittances(one, f[..., None])[..., 0, 0].real)

    def slope(f: Floats) -> Floats:
        step = 1e-4 * width
        return conductance(f + step) - conductance(f - step)

    peak = root(slope, fs - 0.4 * width, fs + 0.4 * width)
    half = 0.5 * conductance(peak)
    below = root(lambda f: conductance(f) - half, np.maximum(peak - 3 * width, 1e-3 * fs), peak)
    above = root(lambda f: conductance(f) - half, peak, peak + 3 * width)
    return peak, below, above


def phase_max_deg(circuit: Circuit, low_hz: float, high_hz: float) -> Floats:
    """Greatest phase of Z inside a range, degrees, shape ``S``."""
    f = np.linspace(low_hz, high_hz, _GRID)
    k = np.clip(np.angle(resonator.impedance(circuit, f)).argmax(axis=-1), 1, f.size - 2)
    near = f[k][..., None] + (f[1] - f[0]) * np.linspace(-1, 1, 41)
    return np.asarray(np.degrees(np.angle(resonator.impedance(circuit, near)).max(axis=-1)))


def figure_of_merit(circuit: Circuit) -> Floats:
    """M = 1/(2π fs C0 R1) = Q/r (IEEE Std 177)."""
    fs = circuit.fs_hz
    return np.asarray(circuit.g_s[..., 0] / (2 * np.pi * fs * resonator.c0_f(circuit)))


def level_ohm(circuit: Circuit, f_hz: Floats) -> Floats:
    """|Z| at one frequency a circuit, ohm, shape ``S``; NaN where the frequency is."""
    with np.errstate(invalid="ignore"):
        return np.asarray(np.abs(_impedance_at(circuit, f_hz)))


def _impedance_at(circuit: Circuit, f_hz: Floats) -> Complexes:
    return np.asarray(resonator.impedance(circuit, f_hz[..., None])[..., 0])


def _slope(circuit: Circuit, f_hz: Floats) -> Floats:
    step = 1e-6 * f_hz * np.minimum(1.0, 100 / circuit.q[..., 0])
    return level_ohm(circuit, f_hz + step) - level_ohm(circuit, f_hz - step)
