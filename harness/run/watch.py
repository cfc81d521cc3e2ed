"""When a lot must be held: the same thing going wrong part after part is seldom the parts alone."""

from __future__ import annotations

from dataclasses import dataclass

from harness.characteristics import CHARACTERISTICS
from harness.records import LotSpec, Record, Verdict
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
}
_NO_VERDICT_CAUSES = {
    "no-part": "parts not reaching the contacts, or a broken lead",
    "shorted": "solder bridges, or contact pins touching",
    "poor-contact": "worn or dirty contact pins",
    "changed-during-sweep": "parts still warm, or a loose contact",
    "not-resolved": "too few points for so sharp a resonance",
}


@dataclass(slots=True)
class LotWatch:
    """Feeds on final records in order; says when to hold the lot. Once held it asks for a reference part."""

    spec: LotSpec
    passed: int = 0
    judged: int = 0
    _key: tuple[str, str] | None = None
    _same: int = 0
    _unjudged: int = 0

    def see(self, record: Record) -> Held | None:
        """Take one final record into account; a ``Held`` when a rule of the lot is met."""
        verdict = record.judgement.verdict
        self.judged += 1
        self.passed += verdict is Verdict.PASS
        self._unjudged = self._unjudged + 1 if verdict is Verdict.NONE else 0
        key = _reason_key(record) if verdict is Verdict.FAIL else None
        self._same = self._same + 1 if key is not None and key == self._key else int(key is not None)
        self._key = key
        return self._rule(record)

    def _rule(self, record: Record) -> Held | None:
        spec = self.spec
        if spec.stop_no_verdict is not None and self._unjudged >= spec.stop_no_verdict:
            code = record.judgement.reasons[0].code if record.judgement.reasons else ""
            cause = _NO_VERDICT_CAUSES.get(code, "the bench or the fixture")
            return Held(f"{self._unjudged} parts in a row without a verdict. Likely cause: {cause}. {_ASK}")
        if spec.stop_same_reason is not None and self._key is not None and self._same >= spec.stop_same_reason:
            name = CHARACTERISTICS[self._key[0]].sign if self._key[0] in CHARACTERISTICS else self._key[0]
            where = f" {self._key[1]} its limit" if self._key[1] else ""
            cause = _CAUSES.get(self._key, "the process before this station, or the station itself")
            return Held(
                f"{self._same} parts in a row failed for the same reason: {name}{where}. Likely cause: {cause}. {_ASK}"
            )
        return None

    def short_of_yield(self) -> str:
        """A sentence when the parts judged fell short of the lot's least yield, else ""."""
        least = self.spec.min_yield
        if least is None or not self.judged or self.passed >= least * self.judged:
            return ""
        share = 100 * self.passed / self.judged
        return (
            f"{share:.0f} % of {self.judged} parts passed, below the least yield of {100 * least:g} %: "
            "ask a quality engineer before the lot moves on."
        )


_ASK = "Measure a reference part before going on; then start this lot again."


def _reason_key(record: Record) -> tuple[str, str] | None:
    """The first reason's characteristic (or code) and which side of its limit the value lies on."""
    if not record.judgement.reasons:
        return None
    first = record.judgement.reasons[0]
    if first.value is None or first.limit is None:
        return (first.characteristic or first.code, "")
    return (first.characteristic or first.code, "above" if first.value > first.limit else "below")
