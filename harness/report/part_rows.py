"""One row a part: how it stands, why, and its values, for the tables of a lot."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from harness.report.words import phrase
from harness.statistics.attempts import Attempt
from harness.statistics.lot import key
from harness.statistics.parts import parts_of, standing


@dataclass(frozen=True, slots=True)
class PartRow:
    """A part by its last attempt. ``reason`` "" for a pass; ``values`` by the keys of the statistics, SI."""

    serial: str
    verdict: str
    grade: str | None
    attempts: int
    final: bool
    at: str
    reason: str
    values: Mapping[str, float | None]


def part_rows(attempts: Iterable[Attempt], sentences: Mapping[str, str] | None = None) -> tuple[PartRow, ...]:
    """Rows in the order in which parts first appear. A part whose sentence is not given gets its reason in short."""
    told = {} if sentences is None else sentences
    rows = []
    for part in parts_of(attempts):
        stand = standing(part)
        last = [tries[-1] for tries in part.tries.values()]
        values = {key(name, a.element): value for a in last for name, (value, _) in a.values.items()}
        rows.append(
            PartRow(
                serial=part.serial,
                verdict=stand.verdict,
                grade=stand.grade if stand.verdict == "pass" else None,
                attempts=max(len(tries) for tries in part.tries.values()),
                final=all(attempt.final for attempt in last),
                at=max(attempt.at for attempt in last),
                reason="" if stand.verdict == "pass" else told.get(part.serial) or _short(stand),
                values=values,
            )
        )
    return tuple(rows)


def _short(attempt: Attempt) -> str:
    return phrase(*attempt.reasons[0]) if attempt.reasons else phrase("no-reason", None)
