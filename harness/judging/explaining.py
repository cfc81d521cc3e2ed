"""Limits in plain words: what is measured and how it is judged, and what a careful reader would question."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import partial

from harness.characteristics import CHARACTERISTICS
from harness.errors import Mistake
from harness.judging import wording
from harness.judging.application import droplet_m, power_share
from harness.judging.limit_checks import FREQUENCIES
from harness.judging.requirements import acceptance_zone, coverage, greatest_u
from harness.quantities import format_si
from harness.records import Grade, LimitSet, Requirement
from harness.toml.positions import Path, line_of, positions

_KINDS = {
    "thickness": "thickness mode of a plate or disc",
    "radial": "radial mode of a thin plain disc",
    "length": "length mode of a bar, field across it",
    "length-33": "length mode of a rod, field along it",
    "ring": "radial mode of a ring",
    "stack": "longitudinal mode of a stack",
}


@dataclass(frozen=True, slots=True)
class Row:
    """One line of an explanation: the part of the file it belongs to, what it is about, in words."""

    section: str
    topic: str
    text: str


def explain(limits: LimitSet) -> list[str]:
    """The limits in sentences, one a line."""
    return [f"{row.topic}: {row.text}" for row in explanation(limits)]


def explanation(limits: LimitSet) -> list[Row]:
    """The limits in rows for a table: part, measuring, conditions, requirements, grades, lot, application."""
    sections = {
        "part": _part,
        "measuring": _measuring,
        "conditions": _conditions,
        "requirements": _requirements,
        "grades": _grades,
        "lot": _lot,
        "application": _application,
    }
    return [Row(name, topic, text) for name, rows in sections.items() for topic, text in rows(limits)]


def _part(limits: LimitSet) -> Iterator[tuple[str, str]]:
    about = f", {limits.description}" if limits.description else ""
    yield "Part number", f"{limits.part_number}, revision {limits.revision}{about}"
    if limits.serial_pattern is not None:
        yield "Serials", f"must match {limits.serial_pattern}"


def _measuring(limits: LimitSet) -> Iterator[tuple[str, str]]:
    mode, spec = limits.mode, limits.measurement
    low, high = (format_si(f, "Hz") for f in mode.search_hz)
    yield "Mode", f"{_KINDS[mode.kind]}, looked for from {low} to {high}"
    span = "the whole search window" if mode.span is None else f"{100 * mode.span:g} % either side of fs"
    count = "one motional branch" if mode.branches == 1 else f"{mode.branches} motional branches"
    yield "Circuit", f"{count}, fitted over {span}"
    how = "located, then resolved" if spec.strategy == "two-pass" else "one even sweep"
    tries = "one try" if spec.attempts == 1 else f"{spec.attempts} tries"
    yield "Sweep", f"{how}, up to {spec.points} points at {format_si(spec.drive_v, 'V')}; {tries}, then hold"
    if spec.contact is None:
        yield "Contact", "not checked: a part without a resonance gets no verdict"
    else:
        window = f"{format_si(spec.contact.min_f, 'F')} to {format_si(spec.contact.max_f, 'F')}"
        yield (
            "Contact",
            f"at {format_si(spec.contact.f_hz, 'Hz')}, before and after: {window} and tan δ up to "
            f"{spec.contact.max_tan_delta:g}; else no verdict. Well contacted and no resonance: fail",
        )


def _conditions(limits: LimitSet) -> Iterator[tuple[str, str]]:
    spec = limits.conditions
    yield "Loading", f"{spec.loading}; clamping: {spec.clamping}"
    if spec.min_degc is not None and spec.max_degc is not None:
        yield "Temperature", f"{spec.min_degc:g} to {spec.max_degc:g} °C; outside there is no verdict"
    if spec.reference_degc is not None:
        rates = f"fs {_ppm(spec.fs_per_k, spec.u_fs_per_k)}, C0 {_ppm(spec.c0_per_k, spec.u_c0_per_k)} per kelvin"
        yield "Referred to", f"{spec.reference_degc:g} °C by {rates}"
    if spec.min_age_h is not None:
        yield "Age", f"at least {spec.min_age_h:g} h after poling; younger parts get no verdict"
    if spec.reference_age_h is not None:
        rates = (
            f"fs {_ppm(spec.fs_per_decade, spec.u_fs_per_decade)}, C0 {_ppm(spec.c0_per_decade, spec.u_c0_per_decade)}"
        )
        yield "Referred to", f"{spec.reference_age_h:g} h after poling by {rates} per tenfold age"


def _ppm(rate: float, u: float) -> str:
    return f"{1e6 * rate:+g} ± {1e6 * u:g} ppm"


def _requirements(limits: LimitSet) -> Iterator[tuple[str, str]]:
    for requirement in limits.requirements:
        name = CHARACTERISTICS[requirement.characteristic].name
        element = "" if requirement.element == 1 else f", element {requirement.element}"
        yield f"{wording.label(requirement)} ({name}{element})", requirement_sentence(requirement)


def requirement_sentence(requirement: Requirement) -> str:
    """Limits, rule, acceptance zone and action of one requirement."""
    parts = [_limits(requirement), _rule(requirement)]
    if requirement.u_max is not None:
        most = wording.stated(requirement.u_max, requirement)
        parts.append(f"no verdict when its uncertainty is above {most}")
        if requirement.rule == "guarded":
            parts.append(f"at that uncertainty accepted {_zone(requirement, requirement.u_max)}")
    if requirement.action:
        parts.append(f"when not met: {requirement.action}")
    return "; ".join(parts)


def _limits(requirement: Requirement) -> str:
    low = None if requirement.min is None else wording.stated(requirement.min, requirement)
    high = None if requirement.max is None else wording.stated(requirement.max, requirement)
    if low is not None and high is not None:
        return f"from {low} to {high}"
    return f"at least {low}" if low is not None else f"at most {high}"


def _rule(requirement: Requirement) -> str:
    if requirement.rule == "simple":
        return "accepted as measured, whatever the uncertainty"
    k, risk = coverage(requirement), 100 * requirement.max_false_accept
    between = "fails" if requirement.between == "fail" else "is held without a verdict"
    return f"guarded by {k:.3g} u (at most {risk:g} % false accept); too close to prove {between}"


def _zone(requirement: Requirement, u: float) -> str:
    zone = acceptance_zone(requirement, u)
    if zone is None:
        return f"nowhere: only an uncertainty below {wording.amount(greatest_u(requirement), requirement)} would do"
    low, high = (wording.rounded(end, u, requirement) if math.isfinite(end) else "" for end in zone)
    if low and high:
        return f"from {low} to {high}"
    return f"from {low} on" if low else f"up to {high}"


def _grades(limits: LimitSet) -> Iterator[tuple[str, str]]:
    for grade in limits.grades:
        low, high = (wording.stated(end, _as_requirement(grade)) for end in (grade.min, grade.max))
        yield f"Grade {grade.name}", f"{wording.sign(grade.characteristic)} from {low} to below {high}"


def _as_requirement(grade: Grade) -> Requirement:
    return Requirement(grade.characteristic, grade.min, grade.max, grade.unit)


def _lot(limits: LimitSet) -> Iterator[tuple[str, str]]:
    spec = limits.lot
    if spec.stop_same_reason is not None:
        yield "Hold the lot", f"after {spec.stop_same_reason} fails in a row for the same reason"
    if spec.stop_no_verdict is not None:
        yield "Hold the lot", f"after {spec.stop_no_verdict} parts in a row without a verdict"
    if spec.min_yield is not None:
        yield "Least yield", f"{100 * spec.min_yield:g} %"


def _application(limits: LimitSet) -> Iterator[tuple[str, str]]:
    spec = limits.application
    if spec.board_hz is not None:
        yield "Board", f"{format_si(spec.board_hz, 'Hz')} within {100 * spec.board_tolerance:g} %"
        if spec.loaded_q is not None:
            share = power_share(1 + spec.board_tolerance, 1.0, spec.loaded_q)
            text = f"loaded Q {spec.loaded_q:g}, loaded fs {100 * spec.loaded_shift:+g} %"
            yield "Load", f"{text}; a board off by its tolerance alone delivers {100 * share:.0f} % of the peak power"
        if not spec.mesh and spec.surface_tension_n_per_m and spec.density_kg_per_m3:
            size = droplet_m(spec.board_hz, spec.surface_tension_n_per_m, spec.density_kg_per_m3)
            range_note = "" if 10e3 <= spec.board_hz <= 800e3 else ", extrapolated beyond its 10 kHz to 800 kHz"
            yield "Droplets", f"{format_si(size, 'm', digits=3)} median by Lang's formula{range_note}; information only"
    if spec.mesh:
        yield "Droplets", "set by the mesh's apertures, not by frequency"


# ── what a careful reader would question ─────────────────────────────────────────────────────


def check_sentences(limits: LimitSet, file: str = "") -> list[str]:
    """Warnings about limits that are valid: each a sentence with file, line and remedy."""
    body = limits.text.removeprefix("\ufeff").replace("\r\n", "\n")
    mistake = partial(_warning, positions(body), file)
    return [mistake(path, text, remedy).sentence() for path, text, remedy in _warnings(limits)]


def _warning(lines: dict[Path, int], file: str, path: Path, text: str, remedy: str) -> Mistake:
    return Mistake(file, line_of(lines, path), "", text, remedy)


Doubt = tuple[Path, str, str]


def _warnings(limits: LimitSet) -> Iterator[Doubt]:
    if limits.measurement.contact is None:
        text = "No contact window: a dead part gets no verdict, because it cannot be told from an open lead."
        yield ("measurement",), text, "Write [measurement.contact]."
    for index, requirement in enumerate(limits.requirements):
        for text, remedy in _requirement_doubts(requirement, limits):
            yield ("require", index), text, remedy
    yield from _grade_doubts(limits)


def _requirement_doubts(requirement: Requirement, limits: LimitSet) -> Iterator[tuple[str, str]]:
    name = wording.label(requirement)
    if not requirement.action:
        yield f"{name} has no action: the operator is not told what to do.", "Write action."
    if requirement.u_max is not None and acceptance_zone(requirement, requirement.u_max) is None:
        most = wording.amount(greatest_u(requirement), requirement)
        yield f"{name} accepts nothing at its u_max.", f"A u_max below {most} would do."
    if requirement.characteristic in FREQUENCIES and requirement.min is not None and requirement.max is not None:
        margin = (requirement.max - requirement.min) / 4
        low, high = limits.mode.search_hz
        if requirement.min - low < margin or high - requirement.max < margin:
            text = f"The search window ends close to the limits of {name}; parts just outside may be missed."
            yield text, f"Leave at least {wording.amount(margin, requirement)} on either side."


def _grade_doubts(limits: LimitSet) -> Iterator[Doubt]:
    if not limits.grades:
        return
    required = [r for r in limits.requirements if r.characteristic == limits.grades[0].characteristic]
    low = max((r.min for r in required if r.min is not None), default=-math.inf)
    high = min((r.max for r in required if r.max is not None), default=math.inf)
    for index, grade in enumerate(limits.grades):
        if grade.min < low or grade.max > high:
            text = f"Grade {grade.name} reaches beyond the required limits; no part will come from there."
            yield ("grade", index), text, "Let the grades end where the limits do."
    least, most = min(g.min for g in limits.grades), max(g.max for g in limits.grades)
    if least > low or most < high:
        yield ("grade",), "The grades leave out part of what is accepted; such parts pass without a grade.", ""
