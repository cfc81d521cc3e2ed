"""From a sweep as logged to its Fit and its Judgement: the one path for screening, replay, planning and ``fit``.

PURE. The fixture's share is taken off, the circuit and window come from the limit file (or, for a lone log, from
the data), characteristics get their uncertainties, and the judge decides. The same sweep, limits and version give
the same bits wherever this runs.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from harness.characteristics import CHARACTERISTICS
from harness.correction import fixture
from harness.fitting import growth, model, peak, single, values
from harness.fitting.single import Choice, SingleFit
from harness.judging.judge import judge
from harness.quantities import format_si
from harness.records import (
    Caveat,
    Complexes,
    Correction,
    Fit,
    FitStatus,
    Floats,
    Judgement,
    LimitSet,
    Mode,
    Reading,
    Residual,
    Sweep,
    Value,
)

NO_FIXTURE = Correction()
_BOTH_PORTS_OHM = 100.0  # what a transmission log is read with: a part in series between two 50 ohm ports
_SINGLE_SIDED_95 = 1.645
_MORE_BRANCHES = 3  # unwanted modes looked for beyond the branches that the part number has


def analyse(sweep: Sweep, limits: LimitSet, correction: Correction = NO_FIXTURE) -> tuple[Fit, Judgement]:
    """Fit one sweep as the limit file says, and judge it."""
    mode = limits.mode
    most = mode.branches + _MORE_BRANCHES
    choice = Choice(mode.search_hz, branches=mode.branches, most_branches=most, span=mode.span)
    fit = _fit(sweep, correction, choice, values.Wanted(mode.kind, mode.poisson))
    if fit.status is FitStatus.OK:
        fit = replace(fit, values={**fit.values, **_low_frequency(sweep, correction, low_frequency_hz(limits))})
    readings = tuple(_corrected(reading, correction) for reading in sweep.readings)
    first = None if sweep.z_ohm.size == 0 else Reading("first", float(sweep.f_hz[0]), complex(sweep.z_ohm[0]))
    judgement = judge(
        fit,
        limits,
        sweep.conditions,
        readings,
        first=None if first is None else _corrected(first, correction),
        noise_relative=sweep.noise_relative,
    )
    return fit, judgement


def fit_log(sweep: Sweep, search_hz: tuple[float, float] | None = None) -> Fit:
    """Characteristics of a lone log: no limits, so the data choose the circuit by information criterion.

    The wanted mode is the one of largest conductance, inside ``search_hz`` if given.
    """
    finite = sweep.f_hz[np.isfinite(sweep.f_hz)]
    whole = (float(finite.min()), float(finite.max())) if finite.size else (0.0, 0.0)
    window = search_hz or whole
    if not sweep.absolute:
        return _shape_only(sweep, window)
    if finite.size and not np.any((finite >= window[0]) & (finite <= window[1])):
        span = f"the sweep goes from {format_si(whole[0], 'Hz')} to {format_si(whole[1], 'Hz')}"
        return Fit(FitStatus.NO_RESONANCE, f"no point of the sweep lies in the search window; {span}")
    fit = _fit(sweep, NO_FIXTURE, Choice(window, choose_series_resistance=True), values.Wanted())
    told = any(caveat.code == "series-resistance" for caveat in fit.caveats)
    if fit.status is not FitStatus.OK or told:
        return fit
    text = "whatever resistance the leads had is part of R1, and lowers Qm: this sweep does not tell them apart"
    return replace(fit, caveats=(*fit.caveats, Caveat("leads-included", "r1", text)))


def _fit(sweep: Sweep, correction: Correction, choice: Choice, wanted: values.Wanted) -> Fit:
    z = fixture.correct(sweep.f_hz, sweep.z_ohm, correction)
    found = single.fit_one(sweep.f_hz, z, choice, noise_relative=sweep.noise_relative)
    if found.status is not FitStatus.OK:
        left = found.relative_rms if np.isfinite(found.relative_rms) else None
        return Fit(found.status, found.message, residual=Residual(left, 0), caveats=tuple(_data_caveats(found)))
    shifts = values.Shifts(_shifts(sweep, found, z, correction))
    numbers, budget = values.with_uncertainty(
        found.parameters, found.free, found.covariance, wanted, shifts, sweep.u_z_relative, sweep.u_f_relative
    )
    modes = _modes(found)
    extra, extra_caveats = _unwanted(found, choice.window_hz, sweep.u_f_relative)
    caveats = [*_data_caveats(found), *_model_caveats(found, sweep), *values.absent(numbers), *extra_caveats]
    caveats += _extrapolated(found, numbers)
    numbers |= extra
    used = found.data.f_hz[0][found.data.weight[0] > 0]
    return Fit(
        FitStatus.OK,
        found.message,
        numbers,
        modes,
        Residual(found.relative_rms, found.dof),
        tuple(caveats),
        budget,
        (float(used[0]), float(used[-1])),
    )


def _shifts(sweep: Sweep, found: SingleFit, z: Complexes, correction: Correction) -> dict[str, Floats]:
    """Refits: with another span, and under the correction moved by each of its uncertainties."""
    moves = {
        "correction rs": replace(correction, rs_ohm=correction.rs_ohm + correction.u_rs_ohm),
        "correction ls": replace(correction, ls_h=correction.ls_h + correction.u_ls_h),
        "correction cp": replace(correction, cp_f=correction.cp_f + correction.u_cp_f),
    }
    moves = {name: moved for name, moved in moves.items() if moved != correction}
    f = found.data.f_hz[0]
    z0 = found.data.r_ohm[0] + 1j * found.data.x_ohm[0]
    raw = fixture.embed(f, z0, correction)
    impedances = [np.asarray(fixture.correct(f, raw, moved)) for moved in moves.values()]
    shifts = dict(zip(["span", "place", *moves], single.refits(found, impedances), strict=True))
    return shifts if found.sloped is None else {**shifts, "background": found.sloped}


def _modes(found: SingleFit) -> tuple[Mode, ...]:
    circuit = model.circuit_of(found.parameters)
    held = growth.held_branches(found.parameters, found.free)
    rows = zip(circuit.f_hz, circuit.q, circuit.g_s, strict=True)
    return tuple(Mode(float(f), float(q), float(g), k == 0) for k, (f, q, g) in enumerate(rows) if k not in held)


def _unwanted(
    found: SingleFit, window_hz: tuple[float, float], u_f_relative: float
) -> tuple[dict[str, Value], list[Caveat]]:
    """The strongest other mode inside the window and the data, or the floor below which one could hide."""
    circuit = model.circuit_of(found.parameters)
    used = found.data.f_hz[0][found.data.weight[0] > 0]
    low, high = max(window_hz[0], float(used[0])), min(window_hz[1], float(used[-1]))
    others = [k for k in range(1, circuit.f_hz.size) if low <= circuit.f_hz[k] <= high]
    if not others:
        text = f"no unwanted mode seen; one of less than {found.floor:.2g} of the wanted one's conductance could hide"
        u = found.floor / _SINGLE_SIDED_95 if np.isfinite(found.floor) else None
        strongest = Value(0.0 if u is not None else None, u, "1")
        code = "floor" if u is not None else "not-reached"
        return {"unwanted_g": strongest, "unwanted_f": Value(None, None, "Hz")}, [Caveat(code, "unwanted_g", text)]
    k = max(others, key=lambda j: circuit.g_s[j])
    at = model.FIRST_BRANCH + model.BRANCH * k
    ratio, f = float(circuit.g_s[k] / circuit.g_s[0]), float(circuit.f_hz[k])
    slope = np.zeros(len(found.free))
    slope[found.free.index(at + model.LN_G)] = 1.0
    slope[found.free.index(model.FIRST_BRANCH + model.LN_G)] = -1.0
    u_ratio = ratio * float(np.sqrt(slope @ found.covariance @ slope))
    row = found.free.index(at + model.LN_F)
    u_f = f * float(np.hypot(np.sqrt(found.covariance[row, row]), u_f_relative))
    return {"unwanted_g": Value(ratio, u_ratio, "1"), "unwanted_f": Value(f, u_f, "Hz")}, []


def low_frequency_hz(limits: LimitSet) -> float | None:
    """The frequency at which the limit file wants the low-frequency capacitance, if it does."""
    asked = [r.at_hz for r in limits.requirements if r.at_hz is not None]
    return asked[0] if asked else None


def _low_frequency(sweep: Sweep, correction: Correction, at_hz: float | None) -> dict[str, Value]:
    """Capacitance and loss from the contact reading before the sweep, as a parallel C and tan δ."""
    near = [
        r for r in sweep.readings
        if r.stage in ("contact before", "low-frequency") and (at_hz is None or abs(r.f_hz / at_hz - 1) < 0.01)
    ]  # fmt: skip
    if not near:
        return {}
    reading = _corrected(near[0], correction)
    if not np.isfinite(reading.z_ohm) or not reading.z_ohm.imag:  # a short or an open has no capacitance
        return {}
    y = 1 / reading.z_ohm
    c = y.imag / (2 * np.pi * reading.f_hz)
    loss = y.real / y.imag
    # the stray capacitance is taken off C one for one
    relative = np.hypot(sweep.u_z_relative, sweep.noise_relative or 0.0)
    u_c = float(np.hypot(abs(c) * relative, correction.u_cp_f))
    return {"c_at": Value(float(c), u_c, "F"), "tan_delta_at": Value(float(loss), float(relative), "1")}


def _corrected(reading: Reading, correction: Correction) -> Reading:
    """A reading at the part's electrodes."""
    z = fixture.correct(np.array([reading.f_hz]), np.array([reading.z_ohm]), correction)
    return replace(reading, z_ohm=complex(z[0]))


def _shape_only(sweep: Sweep, window_hz: tuple[float, float]) -> Fit:
    """A log whose level means nothing (transmission in an unknown fixture): where the peak lies and how wide it is."""
    with np.errstate(divide="ignore", invalid="ignore"):
        transmission = np.asarray(_BOTH_PORTS_OHM / (sweep.z_ohm + _BOTH_PORTS_OHM))
    found = peak.fit_peak(sweep.f_hz, transmission, window_hz)
    if found.status is not FitStatus.OK:
        return Fit(found.status, found.message)
    bandwidth = found.f_hz / found.q
    u_f = float(np.hypot(found.u_f_hz, found.f_hz * sweep.u_f_relative))
    numbers = {
        "fs": Value(found.f_hz, u_f, "Hz"),
        "qm": Value(found.q, found.u_q, "1"),
        "bandwidth": Value(bandwidth, bandwidth * found.u_q / found.q, "Hz"),
    }
    text = (
        "the log has no usable absolute level: frequency and bandwidth only, as loaded by the measuring ports; "
        "impedance is not to be had from it"
    )
    residual = Residual(found.misfit, found.dof)
    return Fit(FitStatus.OK, found.message, numbers, (), residual, (Caveat("no-level", None, text),), {}, found.span_hz)


def _data_caveats(found: SingleFit) -> list[Caveat]:
    out = []
    if found.dropped:
        out.append(Caveat("dropped", None, f"{found.dropped} points are not numbers and were left out"))
    if found.bounced:
        out.append(Caveat("bounced", None, f"{found.bounced} lone wild points were left out (contact bounce?)"))
    return out


def _model_caveats(found: SingleFit, sweep: Sweep) -> list[Caveat]:
    out = []
    expected = sweep.noise_relative
    limit = 3 * np.sqrt(2) * expected if expected else 0.02
    if found.relative_rms > limit:
        text = f"the circuit explains the sweep only to {100 * found.relative_rms:.2g} %; uncertainties are widened"
        out.append(Caveat("model", None, text))
    elif found.lag_one > 0:
        text = f"neighbouring residuals are alike (correlation {found.lag_one:.2f}); uncertainties are widened"
        out.append(Caveat("correlated", None, text))
    rs = float(model.circuit_of(found.parameters).rs_ohm)
    if rs > 0:
        text = f"a series resistance of {rs:.3g} ohm was taken as the leads' and left out of the element"
        out.append(Caveat("series-resistance", "r1", text))
    return out


def _extrapolated(found: SingleFit, numbers: dict[str, Value]) -> list[Caveat]:
    used = found.data.f_hz[0][found.data.weight[0] > 0]
    out = []
    for key in ("fp", "fn", "fa", "fm", "fr"):
        value = numbers[key].value if key in numbers else None
        if value is not None and not used[0] <= value <= used[-1]:
            sign = CHARACTERISTICS[key].sign
            text = f"{sign} lies outside the points used ({used[0]:.6g} to {used[-1]:.6g} Hz) and is extrapolated"
            out.append(Caveat("extrapolated", key, text))
    if any(caveat.characteristic == "fp" for caveat in out):
        text = "it follows from fp, which is extrapolated"
        out += [Caveat("extrapolated", key, text) for key in ("keff", "kp", "kt", "k31", "k33") if key in numbers]
    return out
