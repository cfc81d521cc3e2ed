"""What instruments report ⇄ impedance, as mirrored pairs named ``a_to_z`` and ``z_to_a``.

Every function takes numbers or arrays that broadcast, angles in degrees, and returns arrays. None warns
and none raises: an open comes out as inf + 0j ohm, what is not determined (0/0, NaN in) as NaN; whoever
reads a log or a wire decides what to make of those.

Circuit relations are the plain definitions; the scattering ones are those of a real reference z0:

- S11 = (Z − z0)/(Z + z0)
- part in series between two ports: S21 = 2·z0/(Z + 2·z0)
- part from the line to ground (shunt): S21 = 2·Z/(2·Z + z0)

(voltage dividers of a matched source and load; tested against scikit-rf's own networks).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from harness.records import Complexes, Floats

OPEN_OHM = complex(np.inf, 0.0)
_QUIET = np.errstate(all="ignore")


@_QUIET
def ztheta_to_z(magnitude_ohm: ArrayLike, theta_deg: ArrayLike) -> Complexes:
    """|Z| in ohm and its phase → Z.

    >>> complex(ztheta_to_z(2.0, 90.0).round(12))
    2j
    """
    return _from_polar(magnitude_ohm, theta_deg)


@_QUIET
def z_to_ztheta(z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → |Z| in ohm and phase in (−180, 180]."""
    return _to_polar(z_ohm)


@_QUIET
def rx_to_z(r_ohm: ArrayLike, x_ohm: ArrayLike) -> Complexes:
    """Resistance and reactance → Z = R + jX, bit for bit."""
    return _complex(r_ohm, x_ohm)


@_QUIET
def z_to_rx(z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → resistance and reactance in ohm."""
    z = np.asarray(z_ohm, dtype=np.complex128)
    return z.real, z.imag


@_QUIET
def gb_to_z(g_s: ArrayLike, b_s: ArrayLike) -> Complexes:
    """Conductance and susceptance in siemens → Z = 1/(G + jB)."""
    return _ratio(1.0, _complex(g_s, b_s))


@_QUIET
def z_to_gb(z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → conductance and susceptance in siemens; of a short: inf, 0."""
    y = _ratio(1.0, z_ohm)
    return y.real, y.imag


@_QUIET
def ytheta_to_z(magnitude_s: ArrayLike, theta_deg: ArrayLike) -> Complexes:
    """|Y| in siemens and its phase (the admittance's own: + for a capacitor) → Z."""
    return _ratio(1.0, _from_polar(magnitude_s, theta_deg))


@_QUIET
def z_to_ytheta(z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → |Y| in siemens and the admittance's phase."""
    return _to_polar(_ratio(1.0, z_ohm))


@_QUIET
def cpd_to_z(f_hz: ArrayLike, cp_f: ArrayLike, d: ArrayLike) -> Complexes:
    """Parallel capacitance and dissipation D = tan δ = G/B → Z = 1/(ωCp(D + j)).

    >>> complex(cpd_to_z(1 / (2 * np.pi), 0.5, 0.0))
    -2j
    """
    omega_c = 2 * np.pi * np.asarray(f_hz, dtype=np.float64) * np.asarray(cp_f, dtype=np.float64)
    return _ratio(1.0, _complex(omega_c * np.asarray(d), omega_c))


@_QUIET
def z_to_cpd(f_hz: ArrayLike, z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → parallel capacitance Im(Y)/ω in farad and D = Re(Y)/Im(Y)."""
    g, b = z_to_gb(z_ohm)
    return _real_ratio(b, 2 * np.pi * np.asarray(f_hz, dtype=np.float64)), _real_ratio(g, b)


@_QUIET
def csd_to_z(f_hz: ArrayLike, cs_f: ArrayLike, d: ArrayLike) -> Complexes:
    """Series capacitance and dissipation D = tan δ = R/|X| → Z = (D − j)/(ωCs)."""
    omega_c = 2 * np.pi * np.asarray(f_hz, dtype=np.float64) * np.asarray(cs_f, dtype=np.float64)
    d, omega_c = np.broadcast_arrays(np.asarray(d, dtype=np.float64), omega_c)
    return _complex(_real_ratio(d, omega_c), -_real_ratio(np.ones_like(d), omega_c))


@_QUIET
def z_to_csd(f_hz: ArrayLike, z_ohm: ArrayLike) -> tuple[Floats, Floats]:
    """Z → series capacitance −1/(ωX) in farad and D = −R/X."""
    r, x = z_to_rx(z_ohm)
    omega_x = 2 * np.pi * np.asarray(f_hz, dtype=np.float64) * x
    return _real_ratio(-np.ones_like(omega_x), omega_x), _real_ratio(-r, x)


@_QUIET
def s11_to_z(s11: ArrayLike, z0_ohm: float) -> Complexes:
    """Reflection → Z = z0 (1 + S11)/(1 − S11); S11 = 1 is an open."""
    s = np.asarray(s11, dtype=np.complex128)
    return _ratio(z0_ohm * (1 + s), 1 - s)


@_QUIET
def z_to_s11(z_ohm: ArrayLike, z0_ohm: float) -> Complexes:
    """Z → reflection (Z − z0)/(Z + z0)."""
    z = np.asarray(z_ohm, dtype=np.complex128)
    return _ratio_of_z(z - z0_ohm, z + z0_ohm, z, at_open=1.0)


@_QUIET
def s21_series_to_z(s21: ArrayLike, z0_ohm: float) -> Complexes:
    """Transmission through a part in series between the ports → Z = 2·z0 (1 − S21)/S21; S21 = 0 is an open."""
    s = np.asarray(s21, dtype=np.complex128)
    return _ratio(2 * z0_ohm * (1 - s), s)


@_QUIET
def z_to_s21_series(z_ohm: ArrayLike, z0_ohm: float) -> Complexes:
    """Z of a part in series between the ports → transmission 2·z0/(Z + 2·z0)."""
    z = np.asarray(z_ohm, dtype=np.complex128)
    return _ratio_of_z(2 * z0_ohm, z + 2 * z0_ohm, z, at_open=0.0)


@_QUIET
def s21_shunt_to_z(s21: ArrayLike, z0_ohm: float) -> Complexes:
    """Transmission past a part from line to ground → Z = z0·S21/(2 (1 − S21)); S21 = 1 is an open."""
    s = np.asarray(s21, dtype=np.complex128)
    return _ratio(z0_ohm * s, 2 * (1 - s))


@_QUIET
def z_to_s21_shunt(z_ohm: ArrayLike, z0_ohm: float) -> Complexes:
    """Z of a part from line to ground → transmission 2·Z/(2·Z + z0)."""
    z = np.asarray(z_ohm, dtype=np.complex128)
    return _ratio_of_z(2 * z, 2 * z + z0_ohm, z, at_open=1.0)


@_QUIET
def divider_to_z(ratio: ArrayLike, sense_ohm: float) -> Complexes:
    """Two channels around a sense resistor: ratio = V(sense)/V(part + sense) → Z = Rs (1 − ratio)/ratio."""
    k = np.asarray(ratio, dtype=np.complex128)
    return _ratio(sense_ohm * (1 - k), k)


@_QUIET
def z_to_divider(z_ohm: ArrayLike, sense_ohm: float) -> Complexes:
    """Z above a sense resistor → the ratio of the two channels, Rs/(Z + Rs)."""
    z = np.asarray(z_ohm, dtype=np.complex128)
    return _ratio_of_z(sense_ohm, z + sense_ohm, z, at_open=0.0)


@_QUIET
def db_deg_to_complex(level_db: ArrayLike, phase_deg: ArrayLike) -> Complexes:
    """Level 20·lg|N| and phase → N (Touchstone's DB format)."""
    return _from_polar(10.0 ** (np.asarray(level_db, dtype=np.float64) / 20), phase_deg)


@_QUIET
def complex_to_db_deg(number: ArrayLike) -> tuple[Floats, Floats]:
    """N → level 20·lg|N| (−inf for 0) and phase."""
    magnitude, phase_deg = _to_polar(number)
    return 20 * np.log10(magnitude), phase_deg


def _complex(real: ArrayLike, imag: ArrayLike) -> Complexes:
    """Put together without arithmetic, so that no bit and no sign of zero is lost."""
    re, im = np.broadcast_arrays(np.asarray(real, dtype=np.float64), np.asarray(imag, dtype=np.float64))
    whole = np.empty(re.shape, dtype=np.complex128)
    whole.real, whole.imag = re, im
    return whole


def _from_polar(magnitude: ArrayLike, phase_deg: ArrayLike) -> Complexes:
    size, turn = np.asarray(magnitude, dtype=np.float64), np.radians(np.asarray(phase_deg, dtype=np.float64))
    return _complex(size * np.cos(turn), size * np.sin(turn))


def _to_polar(number: ArrayLike) -> tuple[Floats, Floats]:
    whole = np.asarray(number, dtype=np.complex128)
    return np.asarray(np.abs(whole)), np.asarray(np.degrees(np.angle(whole)))


def _ratio(over: ArrayLike, under: ArrayLike) -> Complexes:
    """Complex division where x/0 is ``OPEN_OHM`` and 0/0 is NaN."""
    a, b = np.asarray(over, dtype=np.complex128), np.asarray(under, dtype=np.complex128)
    quotient = np.asarray(a / b)
    return np.where((b == 0) & (a != 0) & ~np.isnan(a), OPEN_OHM, quotient)


def _ratio_of_z(over: ArrayLike, under: ArrayLike, z_ohm: Complexes, at_open: float) -> Complexes:
    """``_ratio`` of two expressions in Z, with its limit where Z is an open."""
    return np.where(np.isinf(z_ohm), at_open, _ratio(over, under))


def _real_ratio(over: ArrayLike, under: ArrayLike) -> Floats:
    return np.asarray(np.asarray(over, dtype=np.float64) / np.asarray(under, dtype=np.float64))
