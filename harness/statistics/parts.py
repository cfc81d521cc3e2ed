"""The attempts at one part, put together: how it stands, and which attempt speaks for it."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from operator import attrgetter

from harness.statistics.attempts import Attempt

PASS, FAIL, NONE = "pass", "fail", "no verdict"
_WORST_FIRST = (FAIL, NONE, PASS)


@dataclass(frozen=True, slots=True)
class Part:
    """One serial; ``tries`` holds its attempts by element, each in the order of their numbers."""

    serial: str
    tries: Mapping[int, tuple[Attempt, ...]]


def parts_of(attempts: Iterable[Attempt]) -> tuple[Part, ...]:
    """Parts in the order in which they first appear. The number orders the attempts at one, never the clock."""
    found: dict[str, dict[int, list[Attempt]]] = {}
    for attempt in attempts:
        found.setdefault(attempt.serial, {}).setdefault(attempt.element, []).append(attempt)
    return tuple(Part(serial, {e: _in_order(tries[e]) for e in sorted(tries)}) for serial, tries in found.items())


def _in_order(tries: list[Attempt]) -> tuple[Attempt, ...]:
    return tuple(sorted(tries, key=attrgetter("number")))


def standing(part: Part) -> Attempt:
    """The attempt by which the part stands: the last one; of several elements', the worst (fail, no verdict, pass)."""
    return _worst([tries[-1] for tries in part.tries.values()])


def first_verdict(part: Part) -> str:
    """The verdict of the part's first attempt; of several elements', the worst."""
    return _worst([tries[0] for tries in part.tries.values()]).verdict


def final_verdict(part: Part) -> str | None:
    """The verdict of the part's last final attempt, of several elements' the worst; None while one has none."""
    finals = [[attempt for attempt in tries if attempt.final] for tries in part.tries.values()]
    return _worst([tries[-1] for tries in finals]).verdict if all(finals) else None


def first_valid(part: Part, element: int) -> Attempt | None:
    """The first attempt at an element that came to pass or fail, None when none did."""
    return next((attempt for attempt in part.tries.get(element, ()) if attempt.verdict in (PASS, FAIL)), None)


def _worst(attempts: list[Attempt]) -> Attempt:
    return min(attempts, key=lambda attempt: _WORST_FIRST.index(attempt.verdict))
