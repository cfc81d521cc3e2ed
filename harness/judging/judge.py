"""Fit × LimitSet → Judgement: the truth table.

1. What spoils the measurement (temperature, age, contact, a part that changed) ends in no verdict, whatever the fit.
2. A fit that is not ok ends in no verdict, but for one case: contact proven and no resonance is a fail; so is a
   resonance outside the search window.
3. Else each requirement is decided: any fail is a fail, else any undecided one is no verdict, else pass.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from harness.errors import StationError
from harness.judging.application import figures
from harness.judging.contact import ContactCheck, check_contact, check_repeat
from harness.judging.referring import referred
from harness.judging.requirements import Decision, decide
from harness.quantities import format_si
from harness.records import (
    Caveat,
    Conditions,
    ConditionSpec,
    Fit,
    FitStatus,
    Grade,
    Judgement,
    LimitSet,
    Reading,
    Reason,
    Value,
    Verdict,
)

_STATUS_TEXT = {
    FitStatus.NO_RESONANCE: "no resonance was found in the search window",
    FitStatus.NOT_RESOLVED: "the sweep does not resolve the resonance",
    FitStatus.BAD_DATA: "the sweep cannot be used",
}


_PLAIN = 0.02  # misfit that a plain element may leave, beside five times the noise


def _plain_misfit(noise_relative: float | None) -> float:
    return max(_PLAIN, 5 * math.sqrt(2) * (noise_relative or 0.0))


def judge(
    fit: Fit,
    limits: LimitSet,
    conditions: Conditions,
    readings: tuple[Reading, ...] = (),
    *,
    first: Reading | None = None,
    noise_relative: float | None = None,
) -> Judgement:
    """The verdict on one sweep's ``fit`` under ``limits``.

    ``readings`` were taken beside the sweep; ``first`` is the sweep's first point, for comparing with its repetition at
    the end, under ``noise_relative``, the instrument's standard deviation over |Z| (None: taken from the misfit). Only
    the requirements of the conditions' element are judged.
    """
    contact = check_contact(limits.measurement.contact, readings)
    values, caveats = _values(fit, limits, conditions)
    caveats = _each_once(fit.caveats + caveats + _contact_caveat(limits, contact))
    spoilt = (*_condition_reasons(conditions, limits.conditions), *contact.reasons)
    repeat = check_repeat(readings, first, noise_relative, fit)
    spoilt = spoilt if repeat is None else (*spoilt, repeat)
    if spoilt:
        return Judgement(Verdict.NONE, None, spoilt, values, caveats)
    unfit = _unfit(fit, limits, contact, noise_relative)
    if unfit is not None:
        verdict, reason = unfit
        return Judgement(verdict, None, (reason,), values, caveats)
    return _by_requirements(limits, conditions.element, values, caveats)


def _values(fit: Fit, limits: LimitSet, conditions: Conditions) -> tuple[dict[str, Value], tuple[Caveat, ...]]:
    """The fit's values referred to reference temperature and age, and the application's figures from them."""
    if fit.status is not FitStatus.OK:
        return {}, ()
    values, caveats = referred(fit.values, conditions, limits.conditions)
    results, more = figures(values, limits.application)
    return {**values, **results}, caveats + more


def _each_once(caveats: tuple[Caveat, ...]) -> tuple[Caveat, ...]:
    return tuple(dict.fromkeys(caveats))


def refuse_conditions(conditions: Conditions, spec: ConditionSpec) -> None:
    """Raise StationError where what is known before the first part already forbids every verdict."""
    found = _condition_reasons(conditions, spec)
    if found:
        raise StationError(
            f"no part of this lot could get a verdict now: {found[0].text}.",
            place="conditions",
            remedy="Wait, or put the station in order; then start the lot.",
        )


def _condition_reasons(conditions: Conditions, spec: ConditionSpec) -> tuple[Reason, ...]:
    found = []
    degc, low, high = conditions.temperature_degc, spec.min_degc, spec.max_degc
    if degc is not None and low is not None and high is not None and not low <= degc <= high:
        limit = low if degc < low else high
        text = f"the part is at {degc:.4g} °C, allowed is {low:g} to {high:g} °C"
        found.append(Reason("temperature", None, degc, limit, text))
    age, least = conditions.age_h, spec.min_age_h
    if age is not None and least is not None and not age >= least:
        text = f"the part was poled {age:.4g} h ago, allowed is from {least:g} h on"
        found.append(Reason("age", None, age, least, text))
    return tuple(found)


def _contact_caveat(limits: LimitSet, contact: ContactCheck) -> tuple[Caveat, ...]:
    if limits.measurement.contact is None or contact.proven or contact.reasons:
        return ()
    return (Caveat("contact-not-proven", None, "the contact was not checked both before and after the sweep"),)


def _unfit(
    fit: Fit, limits: LimitSet, contact: ContactCheck, noise_relative: float | None
) -> tuple[Verdict, Reason] | None:
    """A verdict that the fit's status or its place outside the search window gives; None: judge the requirements."""
    proven = Verdict.FAIL if contact.proven else Verdict.NONE
    unproven = "" if contact.proven else "; the contact is not proven"
    if fit.status is not FitStatus.OK:
        text = fit.message.rstrip(".") or _STATUS_TEXT[fit.status]
        left = fit.residual.relative_rms
        if fit.status is FitStatus.NO_RESONANCE and (left is None or left > _plain_misfit(noise_relative)):
            # a part that has lost its resonance is a plain capacitor; a bounced contact is not, and proves nothing
            told = "the sweep shows neither a resonance nor a plain element"
            return Verdict.NONE, Reason("disturbed", None, left, None, f"{told}; is the contact loose?")
        if fit.status is FitStatus.NO_RESONANCE:
            return proven, Reason("no-resonance", "fs", None, None, text + unproven)
        return Verdict.NONE, Reason(str(fit.status), None, None, None, text)
    fs = fit.values.get("fs")
    low, high = limits.mode.search_hz
    if fs is None or fs.value is None or low <= fs.value <= high:
        return None
    span = f"{format_si(low, 'Hz')} to {format_si(high, 'Hz')}"
    text = f"fs {format_si(fs.value, 'Hz', digits=8)} lies outside the search window {span}"
    limit = low if fs.value < low else high
    return proven, Reason("outside-search", "fs", fs.value, limit, text + unproven)


def _by_requirements(
    limits: LimitSet, element: int, values: Mapping[str, Value], caveats: tuple[Caveat, ...]
) -> Judgement:
    mine = [requirement for requirement in limits.requirements if requirement.element == element]
    if not mine:
        text = f"the limit file requires nothing of element {element}"
        return Judgement(Verdict.NONE, None, (Reason("no-requirement", None, None, None, text),), values, caveats)
    decisions = [decide(requirement, values.get(requirement.characteristic), caveats) for requirement in mine]
    for verdict in (Verdict.FAIL, Verdict.NONE):
        reasons = _reasons(decisions, verdict)
        if reasons:
            return Judgement(verdict, None, reasons, values, caveats)
    grade = grade_of(limits.grades, values)
    if limits.grades and grade is None:
        text = "the part passes, but lies in none of the grades"
        caveats = (*caveats, Caveat("no-grade", limits.grades[0].characteristic, text))
    return Judgement(Verdict.PASS, grade, (), values, caveats)


def _reasons(decisions: list[Decision], verdict: Verdict) -> tuple[Reason, ...]:
    """The reasons of one kind, proven ones first, else as the file orders its requirements."""
    found = [decision for decision in decisions if decision.verdict is verdict]
    ordered = sorted(found, key=lambda decision: not decision.proven)
    return tuple(decision.reason for decision in ordered if decision.reason is not None)


def grade_of(grades: tuple[Grade, ...], values: Mapping[str, Value]) -> str | None:
    """The grade of unrounded values: min ≤ y < max, or y = max where no other grade begins."""
    for inclusive in (False, True):
        for grade in grades:
            value = values.get(grade.characteristic)
            if value is None or value.value is None:
                continue
            if grade.min <= value.value < grade.max or (inclusive and value.value == grade.max):
                return grade.name
    return None
