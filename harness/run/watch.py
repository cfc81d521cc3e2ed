"""When a lot must be held: the same thing going wrong part after part is seldom the parts alone."""

from __future__ import annotations

from dataclasses import dataclass, field

from harness.characteristics import CHARACTERISTICS
from harness.records import LotSpec, Reason, Record, Requirement, Verdict
from harness.run.events import Held

# what a practitioner would look at first; common practice, no source
_CAUSES = {
    ("fs", "below"): "thick or soft discs, added mass, or a wrong part number in the tray",
    ("fs", "above"): "thin discs, or a wrong part number in the tray",
    ("r1", "above"): "a poor bond, a worn contact or a clamp that damps the part",
    ("qm", "below"): "a poor bond, cracks, or a clamp that damps the part",
    ("keff", "below"): "weak poling or heated parts",
    ("kt", "below"): "weak poling or heated parts",
    ("kp", "below"): "weak poling or heated parts",
    ("c0", "below"): "electrodes too small or chipped, or weak contact",
    ("c0", "above"): "thin parts or electrodes too large",
    ("unwanted_g", "above"): "chipped or cracked parts, or a clamp off centre",
    ("fs", "no-resonance"): "parts not poled or broken, or a wrong part number in the tray",
}
_NO_VERDICT_CAUSES = {
    "disturbed": "worn or dirty contact pins",
    "no-part": "parts not reaching the contacts, or a broken lead",
    "shorted": "solder bridges, or contact pins touching",
    "poor-contact": "worn or dirty contact pins",
    "changed-during-sweep": "parts still warm, or a loose contact",
    "not-resolved": "too few points for so sharp a resonance",
}


Part = tuple[str, int]
"""A part's serial and element."""


@dataclass(slots=True)
class LotWatch:
    """Feeds on final records in order; says when to hold the lot. Once held it asks for a reference part.

    ``requirements`` tell which limit a value met; ``finals`` holds the last final verdict of every part of the lot,
    those of earlier runs too. ``judged`` counts the final records of this run.
    """

    spec: LotSpec
    requirements: tuple[Requirement, ...] = ()
    finals: dict[Part, Verdict] = field(default_factory=dict)
    judged: int = 0
    _key: tuple[str, str] | None = None
    _same: int = 0
    _unjudged: int = 0

    @property
    def passed(self) -> int:
        """How many parts of the lot stand as passed."""
        return sum(verdict is Verdict.PASS for verdict in self.finals.values())

    def see(self, record: Record) -> Held | None:
        """Take one final record into account; a ``Held`` when a rule of the lot is met."""
        verdict = record.judgement.verdict
        self.judged += 1
        self.finals[record.opening.serial, record.opening.element] = verdict
        self._unjudged = self._unjudged + 1 if verdict is Verdict.NONE else 0
        key = self._reason_key(record.judgement.reasons) if verdict is Verdict.FAIL else None
        self._same = self._same + 1 if key is not None and key == self._key else int(key is not None)
        self._key = key
        return self._rule(record.judgement.reasons)

    def _rule(self, reasons: tuple[Reason, ...]) -> Held | None:
        spec = self.spec
        if spec.stop_no_verdict is not None and self._unjudged >= spec.stop_no_verdict:
            cause = _NO_VERDICT_CAUSES.get(reasons[0].code if reasons else "", "the bench or the fixture")
            return Held(f"{_rows(self._unjudged)} without a verdict. Likely cause: {cause}. {_ASK}")
        if spec.stop_same_reason is not None and self._key is not None and self._same >= spec.stop_same_reason:
            cause = _CAUSES.get(self._key, "the process before this station, or the station itself")
            what = _in_words(reasons[0], self._key[1])
            return Held(f"{_rows(self._same)} failed for the same reason: {what}. Likely cause: {cause}. {_ASK}")
        return None

    def short_of_yield(self) -> str:
        """A sentence when the lot's parts judged so far fall short of its least yield, else ""."""
        least, parts = self.spec.min_yield, len(self.finals)
        if least is None or not self.judged or self.passed >= least * parts:
            return ""
        return (
            f"{self.passed} of the lot's {parts} {'part' if parts == 1 else 'parts'} judged so far passed, below the "
            f"least yield of {100 * least:g} %: ask a quality engineer before the lot moves on."
        )

    def _reason_key(self, reasons: tuple[Reason, ...]) -> tuple[str, str] | None:
        """What the first reason is about and which limit it met: beyond it or too close to it are one trouble."""
        if not reasons:
            return None
        first = reasons[0]
        if first.value is None or first.limit is None:
            return (first.characteristic or first.code, first.code)
        return (first.characteristic or first.code, self._side(first.characteristic, first.value, first.limit))

    def _side(self, characteristic: str | None, value: float, limit: float) -> str:
        for requirement in self.requirements:
            if requirement.characteristic == characteristic and limit in (requirement.min, requirement.max):
                return "above" if limit == requirement.max else "below"
        return "above" if value > limit else "below"  # the edge of the search window


_ASK = "Measure a reference part before going on; then start this lot again."


def _rows(count: int) -> str:
    return "1 part" if count == 1 else f"{count} parts in a row"


def _in_words(reason: Reason, side: str) -> str:
    if reason.code == "no-resonance":
        return "no resonance"
    sign = CHARACTERISTICS[reason.characteristic].sign if reason.characteristic in CHARACTERISTICS else reason.code
    if reason.code == "too-close":
        return f"{sign} too close to its {'upper' if side == 'above' else 'lower'} limit"
    return f"{sign} {side} its limit" if side in ("above", "below") else f"{sign} {side}"
