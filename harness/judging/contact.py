"""Is the part contacted, and did it stay the same: readings beside the sweep against the contact window.

At a frequency far below resonance a part is a lossy capacitor: Y = ωC(tan δ + j), so C = Im Y/ω and tan δ = Re Y/Im Y.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

from harness.quantities import format_si
from harness.records import ContactWindow, Fit, Reading, Reason

# A share of the window's lowest capacitance below which nothing, or only a lead, sits in the fixture.
_OPEN_SHARE = 0.25
# A share of the window's least impedance below which the electrodes are joined.
_SHORT_SHARE = 0.2
# Greatest relative difference of the capacitance before and after the sweep.
_DRIFT = 0.03
# What the first frequency, measured again, may differ beyond its noise: settling and resolution.
_REPEAT_ALLOWANCE = 0.002
_REPEAT_ALLOWANCE_UNKNOWN_NOISE = 0.01
_STAGES = ("contact before", "contact after")


@dataclass(frozen=True, slots=True)
class ContactCheck:
    """``proven``: in the window before and after, and alike. ``reasons``: why there can be no verdict."""

    proven: bool
    reasons: tuple[Reason, ...] = ()


def capacitor(reading: Reading) -> tuple[float, float]:
    """Capacitance (F) and tan δ (1) of the lossy capacitor that has this impedance; NaN where there is none."""
    if not cmath.isfinite(reading.z_ohm) or reading.z_ohm == 0 or not reading.f_hz > 0:
        return math.nan, math.nan
    admittance = 1.0 / reading.z_ohm
    loss = admittance.real / admittance.imag if admittance.imag else math.inf
    return admittance.imag / (2.0 * math.pi * reading.f_hz), loss


def check_contact(window: ContactWindow | None, readings: tuple[Reading, ...]) -> ContactCheck:
    """The contact readings of a sweep against ``window``; without either, contact is not proven, and not refused."""
    taken = [reading for reading in readings if reading.stage in _STAGES]
    if window is None or not taken:
        return ContactCheck(False)
    reasons = tuple(reason for reading in taken if (reason := _judge_reading(window, reading)) is not None)
    if reasons:
        return ContactCheck(False, reasons[:1])
    drift = _drift(taken)
    if drift is not None:
        return ContactCheck(False, (drift,))
    return ContactCheck({reading.stage for reading in taken} == set(_STAGES))


def _judge_reading(window: ContactWindow, reading: Reading) -> Reason | None:
    when = reading.stage.removeprefix("contact ")
    capacitance, loss = capacitor(reading)
    least_ohm = 1.0 / (2.0 * math.pi * reading.f_hz * window.max_f) if reading.f_hz > 0 else math.nan
    if abs(reading.z_ohm) < _SHORT_SHARE * least_ohm:
        text = f"the electrodes are joined: only {format_si(abs(reading.z_ohm), 'ohm', digits=3)} {when} the sweep"
        return Reason("shorted", "c_at", None, None, text)
    if not math.isfinite(capacitance):
        return Reason("poor-contact", "c_at", None, None, f"the contact reading {when} the sweep is not a number")
    if abs(capacitance) < _OPEN_SHARE * window.min_f:
        text = f"no part, or its lead is open: only {format_si(capacitance, 'F', digits=3)} {when} the sweep"
        return Reason("no-part", "c_at", capacitance, window.min_f, text)
    return _outside(window, capacitance, loss, when)


def _outside(window: ContactWindow, capacitance: float, loss: float, when: str) -> Reason | None:
    if not window.min_f <= capacitance <= window.max_f:
        limit = window.min_f if capacitance < window.min_f else window.max_f
        span = f"{format_si(window.min_f, 'F')} to {format_si(window.max_f, 'F')}"
        digits = _digits(capacitance, limit)
        text = f"capacitance {format_si(capacitance, 'F', digits=digits)} {when} the sweep is not within {span}"
        return Reason("poor-contact", "c_at", capacitance, limit, text)
    if not loss <= window.max_tan_delta:
        digits = _digits(loss, window.max_tan_delta)
        text = f"loss tan δ {loss:.{digits}g} {when} the sweep is above {window.max_tan_delta:g}"
        return Reason("poor-contact", "tan_delta_at", loss, window.max_tan_delta, text)
    return None


def _digits(value: float, limit: float) -> int:
    """Significant digits that tell ``value`` from ``limit``, at least three."""
    away = abs(value - limit) / max(abs(value), abs(limit))
    return 3 if away > 0.01 else min(17, 2 - math.floor(math.log10(away)))


def _drift(taken: list[Reading]) -> Reason | None:
    values = [capacitor(reading)[0] for reading in taken]
    change = (max(values) - min(values)) / min(values)
    if change <= _DRIFT:
        return None
    text = f"the contact is unstable: capacitance changed by {100 * change:.1f} % during the sweep"
    return Reason("poor-contact", "c_at", values[-1], values[0], text)


def check_repeat(
    readings: tuple[Reading, ...], first: Reading | None, noise_relative: float | None, fit: Fit
) -> Reason | None:
    """The first frequency, measured again at the end, against what it gave at ``first``.

    Each reading's real and imaginary part has the standard deviation σ|Z|, their difference √2 σ|Z|; five of those
    are passed once in 270 000 sweeps (Rayleigh: exp(−25/2)), beside a small allowance.
    """
    again = [reading for reading in readings if reading.stage == "repeat"]
    if not again or first is None or abs(again[-1].f_hz - first.f_hz) > 1e-6 * first.f_hz:
        return None
    before, after = first.z_ohm, again[-1].z_ohm
    change = abs(after - before) / abs(before) if before != 0 else math.inf
    allowed = _repeat_allowance(noise_relative, fit)
    if change <= allowed:
        return None
    text = f"the part changed during the sweep: the first impedance came back {100 * change:.2g} % different"
    if not math.isfinite(change):
        text = "the part changed during the sweep: the first impedance did not come back as a number"
    value = change if math.isfinite(change) else None
    return Reason("changed-during-sweep", None, value, allowed, text)


def _repeat_allowance(noise: float | None, fit: Fit) -> float:
    if noise is None and fit.residual.relative_rms is not None:
        noise = fit.residual.relative_rms / math.sqrt(2.0)
    if noise is None:
        return _REPEAT_ALLOWANCE_UNKNOWN_NOISE
    return 5.0 * math.sqrt(2.0) * noise + _REPEAT_ALLOWANCE
