"""The fixture between the instrument's terminals and the part: taken off, put on, and measured.

Z_terminal = Rs + jωLs + 1/(1/Z_part + jωCp)

A series arm (leads, contacts) and a stray across the contacts, each a lumped value with its standard
uncertainty: the usual open/short model of a two-terminal fixture whose length is far below a wavelength
(common practice, no source).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from harness.errors import StationError
from harness.records import Complexes, Correction, Floats

# An open must be this much larger than the short at every frequency, or the two carry no correction.
LEAST_OPEN_OVER_SHORT = 10.0
# Above this tan δ the open leaks (dirt, moisture, a finger): stray capacitance is not what was measured.
GREATEST_OPEN_LOSS = 0.2
LEAST_POINTS = 3


@dataclass(frozen=True, slots=True, eq=False)
class Sensitivity:
    """∂ ln Z_part by each lumped value, complex ``(N,)``: the real part is the relative change of |Z|,
    the imaginary part the change of phase in radians, per ohm, per henry and per farad."""

    rs: Complexes
    ls: Complexes
    cp: Complexes


def correct(f_hz: ArrayLike, z_ohm: ArrayLike, correction: Correction) -> Complexes:
    """Terminal impedance → the part's own: Zp = Zi/(1 − jωCp·Zi) with Zi = Z − Rs − jωLs.

    ``f_hz`` in hertz and ``z_ohm`` in ohm broadcast. "No fixture" returns the same numbers, bit for bit.
    """
    omega, inner = _without_series_arm(f_hz, z_ohm, correction)
    if correction.cp_f == 0:
        return inner
    with np.errstate(all="ignore"):
        return np.asarray(inner / (1 - 1j * omega * correction.cp_f * inner))


def embed(f_hz: ArrayLike, z_ohm: ArrayLike, correction: Correction) -> Complexes:
    """The part's own impedance → what the terminals show with this fixture; mirror of ``correct``."""
    omega, z = _omega_and_z(f_hz, z_ohm)
    if correction.cp_f != 0:
        with np.errstate(all="ignore"):
            z = np.asarray(z / (1 + 1j * omega * correction.cp_f * z))
    if correction.rs_ohm == 0 and correction.ls_h == 0:
        return z
    return np.asarray(z + _arm(omega, correction.rs_ohm, correction.ls_h))


def correction_sensitivity(f_hz: ArrayLike, z_ohm: ArrayLike, correction: Correction) -> Sensitivity:
    """How ln Z_part of a terminal impedance ``z_ohm`` follows the correction's lumped values.

    With Zi as in ``correct``: ∂lnZp/∂Rs = −Zp/Zi², ∂lnZp/∂Ls = −jωZp/Zi², ∂lnZp/∂Cp = jωZp.
    """
    omega, inner = _without_series_arm(f_hz, z_ohm, correction)
    part = correct(f_hz, z_ohm, correction)
    with np.errstate(all="ignore"):
        by_rs = np.asarray(-part / inner**2)
    return Sensitivity(rs=by_rs, ls=1j * omega * by_rs, cp=1j * omega * part)


def from_open_short(
    f_hz: ArrayLike, z_open_ohm: ArrayLike, z_short_ohm: ArrayLike, *, fixture: str = "open/short"
) -> Correction:
    """The correction that a measured open and a measured short speak of, at the same frequencies ``(N,)``.

    Rs is the mean of Re Z_short; Ls and Cp are the slopes through zero of Im Z_short and of
    Im 1/(Z_open − Zs) over ω. Each standard uncertainty is the spread of the single frequencies' values
    about it, not divided by √N: a lumped value that drifts over the span is the model's error, which no
    number of points averages away.

    Raises StationError, naming the fixture, when the two cannot have been an open and a short.
    """
    omega, opened = _omega_and_z(f_hz, z_open_ohm)
    _, shorted = _omega_and_z(f_hz, z_short_ohm)
    _check_measured(omega, opened, shorted, fixture)
    rs = float(np.mean(shorted.real))
    ls, u_ls = _slope(omega, shorted.imag)
    stray = np.asarray(1 / (opened - _arm(omega, rs, ls)))
    cp, u_cp = _slope(omega, stray.imag)
    found = Correction(fixture, rs, ls, cp, float(np.std(shorted.real, ddof=1)), u_ls, u_cp)
    _check_plausible(found, omega, stray)
    return found


def _omega_and_z(f_hz: ArrayLike, z_ohm: ArrayLike) -> tuple[Floats, Complexes]:
    return 2 * np.pi * np.asarray(f_hz, dtype=np.float64), np.asarray(z_ohm, dtype=np.complex128)


def _without_series_arm(f_hz: ArrayLike, z_ohm: ArrayLike, correction: Correction) -> tuple[Floats, Complexes]:
    omega, z = _omega_and_z(f_hz, z_ohm)
    if correction.rs_ohm == 0 and correction.ls_h == 0:
        return omega, z
    return omega, np.asarray(z - _arm(omega, correction.rs_ohm, correction.ls_h))


def _arm(omega: Floats, rs_ohm: float, ls_h: float) -> Complexes:
    return np.asarray(rs_ohm + 1j * omega * ls_h)


def _slope(omega: Floats, reactive: Floats) -> tuple[float, float]:
    """Least-squares line through zero, and the spread of the points about it as a spread of the slope."""
    slope = float(omega @ reactive / (omega @ omega))
    spread = float(np.sum((reactive - slope * omega) ** 2) / (omega.size - 1))
    return slope, float(np.sqrt(spread / np.mean(omega**2)))


def _check_measured(omega: Floats, opened: Complexes, shorted: Complexes, fixture: str) -> None:
    if omega.ndim != 1 or opened.shape != omega.shape or shorted.shape != omega.shape:
        raise ValueError(
            f"open and short need the same frequencies, got {omega.shape}, {opened.shape} and {shorted.shape}"
        )
    if omega.size < LEAST_POINTS:
        raise StationError(
            f"open and short were measured at {omega.size} frequencies; their spread needs {LEAST_POINTS}.",
            place=fixture,
            remedy="Measure both over the whole range the parts use.",
        )
    if not (np.all(np.isfinite(opened)) and np.all(np.isfinite(shorted)) and np.all(omega > 0)):
        raise StationError(
            "the open or the short holds readings that are not numbers.", place=fixture, remedy="Measure it again."
        )
    ratio = float(np.min(np.abs(opened) / np.maximum(np.abs(shorted), np.finfo(float).tiny)))
    if ratio < 1 / LEAST_OPEN_OVER_SHORT:
        raise StationError(
            "the open reads lower than the short, so the two seem to be exchanged.",
            place=fixture,
            remedy="Measure the open with nothing in the fixture, the short with the contacts bridged.",
        )
    if ratio < LEAST_OPEN_OVER_SHORT:
        raise StationError(
            f"at one frequency the open is only {ratio:.3g} times the short, "
            f"where {LEAST_OPEN_OVER_SHORT:g} is the least that tells them apart.",
            place=fixture,
            remedy="Look for a poor short, a part left in the fixture, or a span reaching too high.",
        )


def _check_plausible(found: Correction, omega: Floats, stray: Complexes) -> None:
    """A passive fixture has no lumped value below zero by more than its spread, and a clean open no loss."""
    for name, value, u in (
        ("series resistance", found.rs_ohm, found.u_rs_ohm),
        ("series inductance", found.ls_h, found.u_ls_h),
        ("stray capacitance", found.cp_f, found.u_cp_f),
    ):
        if value < -2 * u:
            raise StationError(
                f"the {name} comes out negative ({value:.3g} in SI units), which no fixture has.",
                place=found.fixture,
                remedy="Clear the instrument's own compensation, then measure open and short again.",
            )
    leak, _ = _slope(omega, stray.real)
    if leak > GREATEST_OPEN_LOSS * abs(found.cp_f) + 2 * found.u_cp_f:
        raise StationError(
            f"the open leaks: its loss is {leak / abs(found.cp_f):.2g} of its susceptance.",
            place=found.fixture,
            remedy="Clean and dry the fixture, and make sure that nothing lies in it.",
        )
