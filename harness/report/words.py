"""The words, shapes and colours every report shares: verdicts, reasons in short, the lot in one sentence, cautions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from harness.characteristics import CHARACTERISTICS
from harness.records import LimitSet
from harness.statistics.yields import FailReason, Share, Yields


@dataclass(frozen=True, slots=True)
class Mark:
    """A verdict as it is shown: word, shape and colour together, never colour alone.

    ``colour`` is a terminal's colour name, ``paint`` and ``ink`` the page's background and the text upon it. The
    paints differ in lightness as well as in hue; nothing flashes.
    """

    word: str
    shape: str
    colour: str
    paint: str
    ink: str


MARKS: Mapping[str, Mark] = {
    "pass": Mark("PASS", "●", "green", "#00754a", "#ffffff"),
    "fail": Mark("FAIL", "■", "red", "#c2161b", "#ffffff"),
    "no verdict": Mark("NO VERDICT", "▲", "yellow", "#ffd000", "#14181d"),
}

# What a lot's mark says beside its shape and colour.
LOT_WORDS: Mapping[str, str] = {"pass": "YIELD MET", "fail": "YIELD TOO LOW", "no verdict": "NOT YET JUDGED"}

# What a reason says in a few words, where the sentence of the record is not at hand; {} is the characteristic's sign.
_PHRASES = {
    "above-max": "{} above the highest allowed",
    "below-min": "{} below the lowest allowed",
    "too-close": "{} too close to its limit to prove",
    "u-too-large": "uncertainty of {} too large",
    "no-uncertainty": "uncertainty of {} not known",
    "not-reached": "{} not reached by the sweep",
    "absent": "the part has no {}",
    "no-resonance": "no resonance found",
    "outside-search": "{} outside the search window",
    "not-resolved": "resonance not resolved by the sweep",
    "bad-data": "sweep cannot be used",
    "no-sweep": "no sweep recorded",
    "no-part": "no part, or an open lead",
    "shorted": "electrodes joined",
    "poor-contact": "poor contact",
    "changed-during-sweep": "part changed during the sweep",
    "temperature": "temperature outside the allowed range",
    "age": "not long enough after poling",
    "no-requirement": "nothing required of this element",
    "interrupted": "attempt interrupted",
    "no-answer": "instrument did not answer",
    "connection-lost": "connection to the instrument lost",
    "instrument-error": "instrument reported an error",
    "not-usable": "instrument's answer not usable",
    "bad-answer": "instrument's answer not readable",
    "bench-fault": "bench fault",
    "no-reason": "no reason recorded",
}

CAUTIONS = (
    "Piezoelectric parts hold charge and make it again when heated or flexed: short them before touching them.",
    "Drive stages ring up to several times their supply voltage.",
    "PZT contains lead: no eating at the bench, wash hands, collect broken parts.",
    "Airborne ultrasound has exposure limits. Atomisers that run dry burn out.",
    "Follow the local codes, and leave what they reserve for licensed people to them.",
)
UNSEEN = (
    "Impedance does not show polarity, electrode adhesion, insulation, acoustic output or spray. "
    "Parts that pass here are not proven in these."
)

_CONTROL_PICTURES = {**{code: 0x2400 + code for code in range(0x20)}, 0x7F: 0x2421} | dict.fromkeys(
    [*range(0x80, 0xA0), 0x2028, 0x2029, *range(0x202A, 0x202F), *range(0x2066, 0x206A), *range(0xD800, 0xE000)], 0xFFFD
)


def visible(text: str) -> str:
    """``text`` with its control characters made visible, so that no serial can move a cursor or turn a line round.

    >>> visible("A\\x1b[2J")
    'A␛[2J'
    """
    return text.translate(_CONTROL_PICTURES)


def phrase(code: str, characteristic: str | None) -> str:
    """A reason in a few words.

    >>> phrase("above-max", "fs"), phrase("some-new-code", None)
    ('fs above the highest allowed', 'some new code')
    """
    known = CHARACTERISTICS.get(characteristic or "")
    sign = known.sign if known is not None else characteristic or "the value"
    return _PHRASES.get(code, code.replace("-", " ")).format(sign)


def counted(number: int, one: str, many: str) -> str:
    return f"{number} {one if number == 1 else many}"


def percent(value: float | None) -> str:
    """A share as people read it; never rounded up to 100 % nor down to 0 %.

    >>> percent(0.9321), percent(0.99999), percent(1.0), percent(None)
    ('93.2 %', '> 99.9 %', '100.0 %', '–')
    """
    if value is None:
        return "–"
    text = f"{100 * value:.1f}"
    if text == "100.0" and value < 1:
        return "> 99.9 %"
    return "< 0.1 %" if text == "0.0" and value > 0 else f"{text} %"


# ── a lot in words ───────────────────────────────────────────────────────────────────────────


def lot_sentence(yields: Yields) -> str:
    """How the lot stands, in one sentence."""
    if not yields.parts:
        return "No part of this lot has been screened."
    head = f"{yields.passed} of {counted(yields.parts, 'part', 'parts')} passed"
    clauses = [_failed(yields.failed, yields.fail_reasons)] if yields.failed else []
    if yields.no_verdict:
        clauses.append(f"{yields.no_verdict} {'has' if yields.no_verdict == 1 else 'have'} no verdict")
    return "; ".join([head, *clauses]) + "."


def _failed(number: int, reasons: Sequence[FailReason]) -> str:
    first = phrase(reasons[0].code, reasons[0].characteristic)
    if len(reasons) == 1:
        return f"{number} failed: {first}"
    if reasons[0].count == reasons[1].count:
        return f"{number} failed, for {len(reasons)} reasons"
    return f"{number} failed, most often: {first}"


def lot_mark(yields: Yields, limits: LimitSet) -> tuple[str, str]:
    """The lot against the least yield of its limits: which mark it bears ("" for none), and a sentence."""
    least, final = limits.lot.min_yield, yields.final
    waiting = f" {counted(yields.open, 'part waits', 'parts wait')} for another try." if yields.open else ""
    if final.value is None:
        return ("no verdict" if yields.parts else ""), f"No part has a final verdict yet.{waiting}"
    if least is None:
        return "", f"Final yield {percent(final.value)}; the limit file states no least yield.{waiting}"
    met = final.value >= least
    word = "meets" if met else "is below"
    text = f"Final yield {percent(final.value)} {word} the least yield of {100 * least:g} % that the limits ask."
    unsure = " The count of parts is too small to be sure of it." if not _sure(final, least) else ""
    return ("pass" if met else "fail"), text + unsure + waiting


def _sure(final: Share, least: float) -> bool:
    """Whether the confidence limits leave the least yield on one side."""
    return final.low is not None and final.high is not None and not final.low < least <= final.high
