"""The judge's truth table, line by line, and what each reason says."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from conftest import ROOT
from hypothesis import given, settings
from hypothesis import strategies as st

from harness.errors import SetupError
from harness.judging.judge import grade_of, judge
from harness.judging.limit_file import parse_limits
from harness.judging.requirements import acceptance_zone, coverage, decide, greatest_u, refuse_empty_zones
from harness.judging.wording import action_for
from harness.records import (
    ApplicationSpec,
    Caveat,
    Conditions,
    ConditionSpec,
    Fit,
    FitStatus,
    Grade,
    Judgement,
    LimitSet,
    Reading,
    Requirement,
    Residual,
    Value,
    Verdict,
)

LIMITS = parse_limits(
    """
format = 1
part_number = "MD-1650"
revision = "A"
[mode]
kind = "thickness"
search = ["1.50 MHz", "1.90 MHz"]
[measurement.contact]
frequency = "1 kHz"
min = 1.5
max = 2.5
unit = "nF"
max_tan_delta = 0.05
[conditions]
temperature = ["18 degC", "28 degC"]
min_age_h = 24
[[require]]
characteristic = "fs"
unit = "kHz"
min = 1630.0
max = 1670.0
u_max = 1.0
action = "Yellow tray."
[[require]]
characteristic = "qm"
min = 100
rule = "simple"
[[require]]
characteristic = "fr"
unit = "kHz"
min = 1600
between = "hold"
[[grade]]
name = "L"
characteristic = "fs"
unit = "kHz"
min = 1640
max = 1650
[[grade]]
name = "H"
characteristic = "fs"
unit = "kHz"
min = 1650
max = 1670
""",
    "here",
)
FS = Value(1.650e6, 100.0, "Hz")
GOOD = {"fs": FS, "qm": Value(200.0, 4.0, "1"), "fr": Value(1.651e6, 100.0, "Hz")}
ROOM = Conditions(temperature_degc=23.0, age_h=100.0)
OK = Fit(FitStatus.OK, "", GOOD, residual=Residual(1e-3, 800))


def capacitor(stage: str, c_f: float, tan_delta: float = 0.01, f_hz: float = 1e3) -> Reading:
    return Reading(stage, f_hz, 1 / (2j * math.pi * f_hz * c_f * (1 - 1j * tan_delta)))


HELD = (capacitor("contact before", 2e-9), capacitor("contact after", 2.001e-9))


def fitted(**values: Value | None) -> Fit:
    """The good fit with some values replaced (None: left out)."""
    merged = {**GOOD, **values}
    return replace(OK, values={key: value for key, value in merged.items() if value is not None})


def refused(status: FitStatus, left: float = 0.003) -> Fit:
    """A fit that is not ok; ``left`` is the misfit that a plain element leaves of the sweep."""
    return Fit(status, "", residual=Residual(left, 0))


def verdict(fit: Fit = OK, conditions: Conditions = ROOM, readings: tuple[Reading, ...] = HELD) -> Judgement:
    return judge(fit, LIMITS, conditions, readings)


def codes(judgement: Judgement) -> list[str]:
    return [reason.code for reason in judgement.reasons]


HOT = replace(ROOM, temperature_degc=28.1)
OPEN = (capacitor("contact before", 2e-12), capacitor("contact after", 2e-12))
SHORT = (Reading("contact before", 1e3, 0.3 + 0j), Reading("contact after", 1e3, 0.3 + 0j))
LOW = Value(1.620e6, 100.0, "Hz")
NO = FitStatus.NO_RESONANCE

TRUTH_TABLE = [
    # what, fit, conditions, readings → verdict, codes
    ("all is well", OK, ROOM, HELD, "pass", []),
    ("all is well, contact not looked at", OK, ROOM, (), "pass", []),
    ("too hot", OK, HOT, HELD, "no verdict", ["temperature"]),
    ("too cold", OK, replace(ROOM, temperature_degc=17.9), HELD, "no verdict", ["temperature"]),
    ("at the edge of the temperatures", OK, replace(ROOM, temperature_degc=28.0), HELD, "pass", []),
    ("too young", OK, replace(ROOM, age_h=23.9), HELD, "no verdict", ["age"]),
    ("just old enough", OK, replace(ROOM, age_h=24.0), HELD, "pass", []),
    ("temperature and age not known", OK, Conditions(), HELD, "pass", []),
    ("a bad part, too hot", fitted(fs=LOW), HOT, HELD, "no verdict", ["temperature"]),
    ("contacted, neither a resonance nor a plain element", refused(NO, 0.3), ROOM, HELD, "no verdict", ["disturbed"]),
    ("no part", refused(NO), ROOM, OPEN, "no verdict", ["no-part"]),
    ("a good fit, but no part", OK, ROOM, OPEN, "no verdict", ["no-part"]),
    ("a bad fit, but no part", fitted(fs=LOW), ROOM, OPEN, "no verdict", ["no-part"]),
    ("lead lost during the sweep", OK, ROOM, (HELD[0], OPEN[1]), "no verdict", ["no-part"]),
    ("shorted", refused(NO), ROOM, SHORT, "no verdict", ["shorted"]),
    (
        "capacitance above its window",
        OK,
        ROOM,
        (capacitor("contact before", 2.6e-9), HELD[1]),
        "no verdict",
        ["poor-contact"],
    ),
    (
        "capacitance below its window",
        OK,
        ROOM,
        (HELD[0], capacitor("contact after", 1.4e-9)),
        "no verdict",
        ["poor-contact"],
    ),
    ("lossy contact", OK, ROOM, (capacitor("contact before", 2e-9, 0.06), HELD[1]), "no verdict", ["poor-contact"]),
    ("unstable contact", OK, ROOM, (HELD[0], capacitor("contact after", 2.1e-9)), "no verdict", ["poor-contact"]),
    (
        "contact reading not a number",
        OK,
        ROOM,
        (Reading("contact before", 1e3, complex(math.nan, 0)), HELD[1]),
        "no verdict",
        ["poor-contact"],
    ),
    ("contacted, no resonance", refused(NO), ROOM, HELD, "fail", ["no-resonance"]),
    ("contacted before only, no resonance", refused(NO), ROOM, HELD[:1], "no verdict", ["no-resonance"]),
    ("not looked at, no resonance", refused(NO), ROOM, (), "no verdict", ["no-resonance"]),
    ("contacted, no resonance, too hot", refused(NO), HOT, HELD, "no verdict", ["temperature"]),
    ("contacted, fs outside the window", fitted(fs=Value(1.95e6, 10.0, "Hz")), ROOM, HELD, "fail", ["outside-search"]),
    (
        "not looked at, fs outside the window",
        fitted(fs=Value(1.45e6, 10.0, "Hz")),
        ROOM,
        (),
        "no verdict",
        ["outside-search"],
    ),
    ("not resolved", refused(FitStatus.NOT_RESOLVED), ROOM, HELD, "no verdict", ["not-resolved"]),
    ("bad data", refused(FitStatus.BAD_DATA), ROOM, HELD, "no verdict", ["bad-data"]),
    ("fs proven low", fitted(fs=LOW), ROOM, HELD, "fail", ["below-min"]),
    ("fs proven high", fitted(fs=Value(1.6705e6, 100.0, "Hz")), ROOM, HELD, "fail", ["above-max"]),
    ("fs inside, too close", fitted(fs=Value(1.66990e6, 100.0, "Hz")), ROOM, HELD, "fail", ["too-close"]),
    ("fs outside, too close", fitted(fs=Value(1.67010e6, 100.0, "Hz")), ROOM, HELD, "fail", ["too-close"]),
    ("fr too close, to be held", fitted(fr=Value(1.60005e6, 100.0, "Hz")), ROOM, HELD, "no verdict", ["too-close"]),
    ("fs u too large", fitted(fs=Value(1.65e6, 1001.0, "Hz")), ROOM, HELD, "no verdict", ["u-too-large"]),
    ("fs u too large, yet proven out", fitted(fs=Value(1.69e6, 1001.0, "Hz")), ROOM, HELD, "fail", ["above-max"]),
    (
        "fs u too large, out but not proven",
        fitted(fs=Value(1.671e6, 1001.0, "Hz")),
        ROOM,
        HELD,
        "no verdict",
        ["u-too-large"],
    ),
    ("fs u just right", fitted(fs=Value(1.65e6, 1000.0, "Hz")), ROOM, HELD, "pass", []),
    ("fs u not known", fitted(fs=Value(1.65e6, None, "Hz")), ROOM, HELD, "no verdict", ["no-uncertainty"]),
    ("qm equal to its limit, simple", fitted(qm=Value(100.0, 4.0, "1")), ROOM, HELD, "pass", []),
    (
        "qm a hair below its limit, simple",
        fitted(qm=Value(math.nextafter(100, 0), 4.0, "1")),
        ROOM,
        HELD,
        "fail",
        ["below-min"],
    ),
    ("qm u not known, simple", fitted(qm=Value(200.0, None, "1")), ROOM, HELD, "pass", []),
    ("fr missing without a word", fitted(fr=None), ROOM, HELD, "no verdict", ["not-reached"]),
    ("fr not a number", fitted(fr=Value(math.nan, 1.0, "Hz")), ROOM, HELD, "no verdict", ["not-reached"]),
    ("a fail beats a doubt", fitted(fs=LOW, fr=None), ROOM, HELD, "fail", ["below-min"]),
    (
        "proven fails first",
        fitted(fs=Value(1.66990e6, 100.0, "Hz"), qm=Value(50.0, 1.0, "1")),
        ROOM,
        HELD,
        "fail",
        ["below-min", "too-close"],
    ),
    (
        "all fails, as in the file",
        fitted(fs=LOW, qm=Value(50.0, 1.0, "1"), fr=Value(1.5e6, 1.0, "Hz")),
        ROOM,
        HELD,
        "fail",
        ["below-min"] * 3,
    ),
    ("another element", OK, replace(ROOM, element=2), HELD, "no verdict", ["no-requirement"]),
]


@pytest.mark.parametrize(
    ("what", "fit", "conditions", "readings", "wanted", "why"),
    TRUTH_TABLE,
    ids=lambda x: x if isinstance(x, str) else "",
)
def test_truth_table(what, fit, conditions, readings, wanted, why) -> None:
    """Each line of the truth table gives its verdict for its reasons."""
    judgement = verdict(fit, conditions, readings)
    assert (str(judgement.verdict), codes(judgement)) == (wanted, why), what
    assert (judgement.grade is not None) <= (wanted == "pass")
    assert all(reason.text and not reason.text.endswith(".") for reason in judgement.reasons)


def test_a_contact_without_a_window_is_not_proven() -> None:
    """Without a contact window in the limit file, no resonance stays no verdict whatever the readings."""
    limits = replace(LIMITS, measurement=replace(LIMITS.measurement, contact=None))
    assert judge(refused(NO), limits, ROOM, HELD).verdict is Verdict.NONE


@pytest.mark.parametrize(
    ("code", "wanted", "why"), [("absent", "fail", "absent"), ("not-reached", "no verdict", "not-reached")]
)
def test_a_missing_value_is_judged_by_its_caveat(code: str, wanted: str, why: str) -> None:
    """What the part does not have fails; what the sweep did not reach gives no verdict; the sentence says which."""
    fit = replace(fitted(fr=Value(None, None, "Hz")), caveats=(Caveat(code, "fr", "the phase never reaches zero"),))
    judgement = verdict(fit)
    assert (str(judgement.verdict), codes(judgement)) == (wanted, [why])
    assert "the phase never reaches zero" in judgement.reasons[0].text


def test_an_unwanted_mode_below_a_high_floor_is_no_verdict() -> None:
    """Nothing seen, but the sweep could not have seen enough: that speaks of the sweep, not of the part."""
    requirement = Requirement("unwanted_g", None, 0.1, "1")
    floor = (Caveat("floor", "unwanted_g", "one of less than 0.3 could hide"),)
    weak = decide(requirement, Value(0.0, 0.3 / 1.645, "1"), floor)
    assert (weak.verdict, weak.reason and weak.reason.code) == (Verdict.NONE, "not-reached")
    assert decide(requirement, Value(0.0, 0.05 / 1.645, "1"), floor).verdict is Verdict.PASS
    seen = decide(requirement, Value(0.09, 0.02, "1"))
    assert (seen.verdict, seen.reason and seen.reason.code) == (Verdict.FAIL, "too-close")


# ── the repeated reading ─────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("change", "noise", "changed"),
    [
        (0.0, 1e-3, False),
        (0.009, 1e-3, False),
        (0.0092, 1e-3, True),
        (0.5, 1e-3, True),
        (0.0019, 0.0, False),
        (0.0021, 0.0, True),
        (0.006, None, False),
        (0.008, None, True),
        (math.nan, 1e-3, True),
    ],
)
def test_a_part_that_changed_during_the_sweep(change: float, noise: float | None, changed: bool) -> None:
    """The first frequency measured again may differ by 5·√2 noise and 0.2 %; noise not known is read off the misfit."""
    first = Reading("first", 1.5e6, 30 - 40j)
    again = Reading("repeat", 1.5e6, (30 - 40j) * (1 + change * 1j))
    judgement = judge(OK, LIMITS, ROOM, (*HELD, again), first=first, noise_relative=noise)
    assert codes(judgement) == (["changed-during-sweep"] if changed else [])


def test_a_changed_part_is_no_verdict_even_when_it_fails() -> None:
    """A part that changed while it was measured never fails either."""
    again = Reading("repeat", 1.5e6, 60 - 40j)
    first = Reading("first", 1.5e6, 30 - 40j)
    judgement = judge(fitted(fs=LOW), LIMITS, ROOM, (*HELD, again), first=first, noise_relative=1e-3)
    assert judgement.verdict is Verdict.NONE


def test_a_repetition_elsewhere_is_not_compared() -> None:
    """A repeat reading at another frequency than the sweep's first says nothing."""
    again, first = Reading("repeat", 1.6e6, 60 - 40j), Reading("first", 1.5e6, 30 - 40j)
    assert judge(OK, LIMITS, ROOM, (*HELD, again), first=first).verdict is Verdict.PASS


# ── caveats, grades, actions ─────────────────────────────────────────────────────────────────


def test_what_is_not_known_is_said() -> None:
    """Unknown temperature, age and contact pass with caveats, beside the fit's own, each once."""
    fit = replace(OK, caveats=(Caveat("bounced", None, "x"), Caveat("bounced", None, "x")))
    judgement = verdict(fit, Conditions(), ())
    assert [caveat.code for caveat in judgement.caveats] == [
        "bounced",
        "temperature-unknown",
        "age-unknown",
        "contact-not-proven",
    ]


@pytest.mark.parametrize(
    ("khz", "grade"),
    [
        (1640.0, "L"),
        (math.nextafter(1650.0, 0), "L"),
        (1650.0, "H"),
        (1669.0, "H"),
        (1670.0, "H"),
        (1639.9, None),
    ],
)
def test_grades_meet_without_gap(khz: float, grade: str | None) -> None:
    """A value where two grades meet is in the upper one; the topmost holds its own end."""
    assert grade_of(LIMITS.grades, {"fs": Value(khz * 1e3, 1.0, "Hz")}) == grade


def test_a_pass_outside_all_grades_says_so() -> None:
    """A part may pass without a grade; a caveat tells."""
    judgement = verdict(fitted(fs=Value(1.635e6, 100.0, "Hz")))
    assert (judgement.verdict, judgement.grade) == (Verdict.PASS, None)
    assert judgement.caveats[-1].code == "no-grade"


def test_a_grade_is_chosen_by_the_referred_value() -> None:
    """A part a hair below a grade's edge while warm belongs above it once referred."""
    spec = ConditionSpec(reference_degc=23.0, fs_per_k=-1e-4)
    limits = replace(LIMITS, conditions=spec)
    judgement = judge(fitted(fs=Value(1.6499e6, 10.0, "Hz")), limits, replace(ROOM, temperature_degc=26.0), HELD)
    assert judgement.grade == "H"
    assert judgement.values["fs"].value == pytest.approx(1.6499e6 / (1 - 3e-4), rel=1e-12)


def test_the_operator_reads_the_requirements_own_action() -> None:
    """A fail shows the action of its requirement; a spoilt measurement shows how to mend it."""
    failed = verdict(fitted(fs=LOW)).reasons[0]
    assert action_for(failed, LIMITS) == "Yellow tray."
    assert "Load it again" in action_for(verdict(readings=OPEN).reasons[0], LIMITS)
    doubtful = verdict(fitted(fs=Value(1.65e6, 2e3, "Hz"))).reasons[0]
    assert action_for(doubtful, LIMITS).startswith("Measure again")


def test_every_reason_without_a_requirement_has_an_action() -> None:
    """Whatever reason the truth table yields, the operator is told what to do, but where the file is silent."""
    for _, fit, conditions, readings, _, _ in TRUTH_TABLE:
        for reason in verdict(fit, conditions, readings).reasons:
            silent = reason.characteristic in ("qm", "fr") and reason.code in ("below-min", "too-close")
            assert action_for(reason, LIMITS) or silent, reason


# ── sentences ────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("value", "u", "text"),
    [
        (1671.2e3, 300.0, "fs 1 671.2 kHz is 1.2 kHz above the highest allowed 1 670.0 kHz"),
        (1669.8e3, 300.0, "fs 1 669.80 kHz is too close to the highest allowed 1 670.00 kHz to prove (u 0.30 kHz)"),
        (
            1670.2e3,
            300.0,
            "fs 1 670.20 kHz is 0.20 kHz above the highest allowed 1 670.00 kHz, "
            "too close to prove either way (u 0.30 kHz)",
        ),
        (1670.0e3, 300.0, "fs is exactly the highest allowed 1 670 kHz: too close to prove (u 0.30 kHz)"),
        (1500.0e3, 300.0, "fs 1 500 kHz is 130 kHz below the lowest allowed 1 630 kHz"),
        (1670.0001e3, 0.0, "fs 1 670.00010 kHz is 0.00010 kHz above the highest allowed 1 670.00000 kHz"),
    ],
)
def test_reasons_read_aloud(value: float, u: float, text: str) -> None:
    """A reason names the characteristic, its value, how far from which limit, in the file's unit."""
    requirement = Requirement("fs", 1630e3, 1670e3, "kHz")
    reason = decide(requirement, Value(value, u, "Hz")).reason
    assert reason is not None
    assert reason.text == text


@pytest.mark.parametrize(
    ("requirement", "value", "text"),
    [
        (Requirement("r1", None, 2.0, "ohm"), 2.51, "R1 2.51 Ω is 0.51 Ω above the highest allowed 2.00 Ω"),
        (Requirement("qm", 900.0, None, "1"), 812.3, "Qm 812 is 88 below the lowest allowed 900"),
        (
            Requirement("c_at", 1.5e-9, None, "nF", at_hz=1e3),
            1.41e-9,
            "C at 1 kHz 1.410 nF is 0.090 nF below the lowest allowed 1.500 nF",
        ),
        (Requirement("drive_share", 0.8, None, "%"), 0.5, "drive share 50 % is 30 % below the lowest allowed 80 %"),
        (Requirement("phase_max", 60.0, None, "deg"), 45.2, "phase 45 ° is 15 ° below the lowest allowed 60 °"),
    ],
)
def test_reasons_in_every_unit(requirement: Requirement, value: float, text: str) -> None:
    """Ohm and degree have their signs, ratios none, low-frequency characteristics their frequency."""
    reason = decide(requirement, Value(value, 0.0, "1")).reason
    assert reason is not None
    assert reason.text == text


limit = st.floats(1e-3, 1e9) | st.integers(1, 10**7).map(float) | st.floats(1e-12, 1e-6)
near = st.floats(-1.0, 1.0) | st.sampled_from([1e-3, -1e-3, 1e-9, -1e-9, 1e-15, -1e-15, 3e-16, -3e-16])


@given(limit, near, st.floats(0, 1), st.sampled_from(["Hz", "kHz", "MHz", "mHz"]), st.booleans())
@settings(deadline=None)
def test_value_and_limit_never_print_equal(edge: float, away: float, u: float, unit: str, upper: bool) -> None:
    """Whatever the numbers, a reason prints value and limit apart, the difference not as nothing, and they add up."""
    requirement = Requirement("fs", None if upper else edge, edge if upper else None, unit)
    value = edge * (1 + away)
    reason = decide(requirement, Value(value, u * edge * 1e-3, "Hz")).reason
    if reason is None or value == edge:
        return
    numbers = _numbers(reason.text, unit)
    shown, bound = numbers[0], numbers[-2] if reason.code == "too-close" else numbers[-1]
    assert shown != bound
    assert (shown > bound) == (value > edge)
    if "above the" in reason.text or "below the" in reason.text:
        assert numbers[1] > 0
        assert abs(shown - bound) == numbers[1]


def _numbers(text: str, unit: str) -> list:
    """The exact decimals of a sentence, in order."""
    from decimal import Decimal

    words = text.replace(")", "").split(unit)
    return [Decimal("".join(_tail(word))) for word in words[:-1]]


def _tail(word: str) -> list[str]:
    picked: list[str] = []
    for piece in reversed(word.split()):
        if not piece.replace(".", "").replace("e", "").replace("-", "").replace("+", "").isdigit():
            break
        picked.insert(0, piece)
    return picked


# ── zones and rates ──────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("risk", "k"),
    [
        # Eurachem/CITAC guide on compliance, as quoted: k = 1.64 (5 %), 2.33 (1 %); here the exact normal quantiles
        (0.05, 1.644854),
        (0.01, 2.326348),
        # ILAC-G8 table 1 (from memory): 2.275 % for w = U (k = 2), 0.135 % for 1.5 U (k = 3)
        (0.0227501, 2.0),
        (0.00134990, 3.0),
    ],
)
def test_guard_band_factors(risk: float, k: float) -> None:
    """The guard band is the one-sided normal quantile of the accepted risk."""
    assert coverage(Requirement("fs", None, 1.0, "Hz", max_false_accept=risk)) == pytest.approx(k, abs=2e-6)


def test_acceptance_zone_shrinks_by_the_guard_band() -> None:
    """Zone [min + k u, max − k u]; simple keeps the limits; nothing left is None."""
    requirement = Requirement("fs", 10.0, 20.0, "Hz")
    low, high = acceptance_zone(requirement, 1.0) or (0.0, 0.0)
    assert (low, high) == pytest.approx((11.644854, 18.355146), abs=1e-6)
    assert acceptance_zone(replace(requirement, rule="simple"), 1.0) == (10.0, 20.0)
    assert acceptance_zone(replace(requirement, min=None), 1.0) == (-math.inf, high)
    assert acceptance_zone(requirement, 4.0) is None
    assert greatest_u(requirement) == pytest.approx(10 / 2 / 1.644854, rel=1e-6)
    assert acceptance_zone(requirement, greatest_u(requirement) * (1 - 1e-9)) is not None


def test_an_empty_zone_refuses_the_lot_and_names_the_u_that_would_do() -> None:
    """A lot in which nothing could pass is refused before it starts."""
    refuse_empty_zones(LIMITS, {"fs": 300.0, "qm": 1e9})
    with pytest.raises(SetupError, match=r"No part can pass fs: at u 15 kHz .*u below 12 kHz would do"):
        refuse_empty_zones(LIMITS, {"fs": 15e3})


@given(
    st.floats(1600e3, 1700e3),
    st.floats(0, 30e3),
    st.sampled_from(["simple", "guarded"]),
    st.sampled_from(["fail", "hold"]),
)
@settings(deadline=None)
def test_zone_and_decision_agree(value: float, u: float, rule: str, between: str) -> None:
    """What lies in the acceptance zone passes and nothing else does; guarded never passes what simple fails."""
    requirement = Requirement("fs", 1630e3, 1670e3, "kHz", rule=rule, between=between)
    zone = acceptance_zone(requirement, u)
    decided = decide(requirement, Value(value, u, "Hz"))
    inside = zone is not None and zone[0] + 1e-6 < value < zone[1] - 1e-6
    outside = zone is None or value < zone[0] - 1e-6 or value > zone[1] + 1e-6
    assert (decided.verdict is Verdict.PASS) or not inside
    assert (decided.verdict is not Verdict.PASS) or not outside
    if decided.verdict is Verdict.PASS:
        assert decide(replace(requirement, rule="simple"), Value(value, u, "Hz")).verdict is Verdict.PASS


def test_guard_bands_keep_the_false_accept_rate(rng: np.random.Generator) -> None:
    """Parts that lie exactly on the limit are accepted in 5 % of tries, and proven out in 5 %; the rest between."""
    requirement = Requirement("fs", None, 1670e3, "kHz", between="hold")
    u, n = 250.0, 20_000
    measured = 1670e3 + u * rng.standard_normal(n)
    found = [decide(requirement, Value(float(y), u, "Hz")).verdict for y in measured]
    spread = 4 * math.sqrt(0.05 * 0.95 / n)
    assert found.count(Verdict.PASS) / n == pytest.approx(0.05, abs=spread)
    assert found.count(Verdict.FAIL) / n == pytest.approx(0.05, abs=spread)


# ── bits ─────────────────────────────────────────────────────────────────────────────────────


def test_judging_twice_gives_the_same(rng: np.random.Generator) -> None:
    """The same inputs give an equal judgement, with the application's figures in it."""
    limits: LimitSet = replace(LIMITS, application=ApplicationSpec(1.65e6, 0.005, 30.0))
    fit = fitted(fs=Value(float(1.65e6 + 100 * rng.standard_normal()), 50.0, "Hz"))
    first, second = (judge(fit, limits, ROOM, HELD) for _ in range(2))
    assert first == second
    assert first.values["drive_share"].value == pytest.approx(0.9, abs=0.05)


def test_shipped_files_share_the_room() -> None:
    """The grades of the shipped mist disc cover its whole acceptance zone."""
    limits = parse_limits((ROOT / "limits/mist-discs/MD-1650.toml").read_text(encoding="utf-8"), "MD-1650.toml")
    requirement = next(r for r in limits.requirements if r.characteristic == "fs")
    assert (limits.grades[0].min, limits.grades[-1].max) == (requirement.min, requirement.max)
    assert all(isinstance(grade, Grade) for grade in limits.grades)
