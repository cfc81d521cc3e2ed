"""When a lot is held: rules, counters and words, on records made by hand (all figures invented)."""

from __future__ import annotations

import pytest
from run_fakes import limits

from harness.records import Correction, Judgement, LotSpec, Opening, Reason, Record, Requirement, Verdict
from harness.run.watch import LotWatch

FS = Requirement("fs", 1638e3, 1662e3, "kHz")
QM = Requirement("qm", 140.0, None, "1")


def record(verdict: Verdict, *reasons: Reason, serial: str = "MD-0001") -> Record:
    opening = Opening(serial, "scanned", "L-7", "MD-1650", "0" * 64, "operator 3", 1, 1, {}, "2026-03-02T08:00:00Z")
    judgement = Judgement(verdict, None, reasons, {})
    return Record(opening, None, None, judgement, Correction(), (), {}, final=True, at=opening.at)


def reason(
    code: str, characteristic: str | None = None, value: float | None = None, limit: float | None = None
) -> Reason:
    return Reason(code, characteristic, value, limit, "a sentence")


def passed() -> Record:
    return record(Verdict.PASS)


def failed(code: str = "above-max", characteristic: str = "fs", value: float = 1.67e6, limit: float = 1662e3) -> Record:
    return record(Verdict.FAIL, reason(code, characteristic, value, limit))


def unjudged(code: str = "no-part") -> Record:
    return record(Verdict.NONE, reason(code))


HIGH = failed()
LOW = failed("below-min", "fs", 1.63e6, 1638e3)
WEAK = failed("below-min", "qm", 100.0, 140.0)


def held_at(spec: LotSpec, *records: Record) -> list[int]:
    """After which of the records (from 1) the lot is held."""
    watch = LotWatch(spec, (FS, QM))
    return [k for k, one in enumerate(records, 1) if watch.see(one) is not None]


@pytest.mark.parametrize(
    ("records", "held"),
    [
        ([HIGH, HIGH, HIGH], [3]),
        ([HIGH, HIGH, passed(), HIGH, HIGH, HIGH], [6]),
        ([HIGH, HIGH, unjudged(), HIGH, HIGH], []),
        ([HIGH, HIGH, LOW, LOW, WEAK], []),
        ([HIGH, LOW, LOW, LOW], [4]),
        ([HIGH, HIGH, failed("too-close", "fs", 1661.9e3, 1662e3)], [3]),
        ([HIGH, HIGH, failed("too-close", "fs", 1638.1e3, 1638e3)], []),
        ([LOW, LOW, failed("too-close", "fs", 1637.99e3, 1638e3)], [3]),
        ([record(Verdict.FAIL)] * 4, []),
        ([passed()] * 5, []),
    ],
)
def test_same_reason_in_a_row(records: list[Record], held: list[int]) -> None:
    """Three of the same characteristic at the same limit, by the first reason; anything between starts anew.

    Too close to a limit counts with beyond it, on whichever side of the limit the value lies.
    """
    assert held_at(LotSpec(stop_same_reason=3), *records) == held


@pytest.mark.parametrize(
    ("records", "held"),
    [
        ([unjudged(), unjudged()], [2]),
        ([unjudged(), unjudged("no-answer")], [2]),
        ([unjudged(), passed(), unjudged(), HIGH, unjudged()], []),
        ([unjudged(), passed(), unjudged(), unjudged()], [4]),
    ],
)
def test_no_verdicts_in_a_row(records: list[Record], held: list[int]) -> None:
    """Two without a verdict in a row, of whatever kind; a pass or a fail starts anew."""
    assert held_at(LotSpec(stop_no_verdict=2), *records) == held


def test_no_rule_never_holds() -> None:
    """A limit file without [lot] keys holds no lot."""
    assert held_at(LotSpec(), *[HIGH] * 20, *[unjudged()] * 20) == []


@pytest.mark.parametrize(
    ("one", "what", "cause"),
    [
        (HIGH, "fs above its limit", "thin discs"),
        (LOW, "fs below its limit", "thick or soft discs"),
        (failed("too-close", "fs", 1661.9e3, 1662e3), "fs too close to its upper limit", "thin discs"),
        (failed("too-close", "fs", 1637.9e3, 1638e3), "fs too close to its lower limit", "thick or soft discs"),
        (WEAK, "Qm below its limit", "a poor bond, cracks"),
        (failed("below-min", "kt", 0.1, 0.38), "kt below its limit", "weak poling"),
        (failed("outside-search", "fs", 1.95e6, 1.9e6), "fs above its limit", "thin discs"),
        (record(Verdict.FAIL, reason("no-resonance", "fs")), "no resonance", "parts not poled or broken"),
        (record(Verdict.FAIL, reason("absent", "fa", None, 1.7e6)), "fa absent", "the process before this station"),
    ],
)
def test_words_of_a_held_lot(one: Record, what: str, cause: str) -> None:
    """What the parts have in common, the likely cause, and the reference part."""
    watch = LotWatch(LotSpec(stop_same_reason=2), (FS, QM))
    assert watch.see(one) is None
    held = watch.see(one)
    assert held is not None
    assert held.text.startswith(f"2 parts in a row failed for the same reason: {what}. Likely cause: {cause}")
    assert held.text.endswith("Measure a reference part before going on; then start this lot again.")


@pytest.mark.parametrize(
    ("code", "cause"),
    [
        ("no-part", "parts not reaching the contacts"),
        ("shorted", "solder bridges"),
        ("poor-contact", "worn or dirty contact pins"),
        ("no-answer", "the bench or the fixture"),
    ],
)
def test_words_of_a_lot_without_verdicts(code: str, cause: str) -> None:
    """The cause goes by the last part's reason."""
    held = LotWatch(LotSpec(stop_no_verdict=1)).see(unjudged(code))
    assert held is not None
    assert held.text.startswith(f"1 part without a verdict. Likely cause: {cause}")


def test_yield_counts_each_part_of_the_lot_once() -> None:
    """A part held and then passed counts as passed; parts of earlier runs count; exactly the least yield suffices."""
    earlier = {("MD-0001", 1): Verdict.NONE, ("MD-0002", 1): Verdict.FAIL}
    watch = LotWatch(LotSpec(min_yield=0.5), (), earlier)
    assert watch.short_of_yield() == ""  # nothing judged in this run: nothing new to say
    watch.see(record(Verdict.FAIL, serial="MD-0003"))
    assert watch.short_of_yield().startswith(
        "0 of the lot's 3 parts judged so far passed, below the least yield of 50 %"
    )
    watch.see(record(Verdict.PASS, serial="MD-0001"))
    watch.see(record(Verdict.PASS, serial="MD-0004"))
    assert watch.short_of_yield() == ""
    assert (watch.judged, watch.passed) == (3, 2)


def test_shipped_limit_file_holds_after_its_own_counts() -> None:
    """The mist disc's file: the fifth same fail and the third no verdict hold the lot."""
    disc = limits()
    watch = LotWatch(disc.lot, disc.requirements)
    assert [watch.see(HIGH) is not None for _ in range(5)] == [False] * 4 + [True]
    watch = LotWatch(disc.lot, disc.requirements)
    assert [watch.see(unjudged()) is not None for _ in range(3)] == [False, False, True]
