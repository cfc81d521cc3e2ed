"""Counts of a lot: how many pass, at the first try and in the end, and why the others do not."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from scipy.special import ndtri

from harness.records import Grade
from harness.statistics.parts import FAIL, NONE, PASS, Part, final_verdict, first_verdict, standing

CONFIDENCE = 0.95

FIRST_PASS = "parts whose first attempt passed, over all parts; no verdict counts as not passed"
FINAL = "parts whose last final attempt passed, over parts with a final attempt; no verdict counts as not passed"


@dataclass(frozen=True, slots=True)
class Share:
    """``passed`` of ``of``: the share (1) with its confidence limits; all None where there is nothing to count."""

    passed: int
    of: int
    value: float | None
    low: float | None
    high: float | None


@dataclass(frozen=True, slots=True)
class FailReason:
    """How many parts stand failed with this as their first reason."""

    characteristic: str | None
    code: str
    count: int


@dataclass(frozen=True, slots=True)
class Yields:
    """Parts by how they stand after their last attempt; ``open`` ones have no final attempt yet.

    ``fail_reasons`` most frequent first; ``grades`` counts the parts that stand passed.
    """

    parts: int
    passed: int
    failed: int
    no_verdict: int
    open: int
    first_pass: Share
    final: Share
    fail_reasons: tuple[FailReason, ...]
    grades: Mapping[str, int]


def wilson(passed: int, of: int, confidence: float = CONFIDENCE) -> tuple[float, float]:
    """Two-sided confidence limits of a share by Wilson's score interval, without continuity correction.

    (p + z²/2n ± z √(p(1−p)/n + z²/4n²)) / (1 + z²/n), p = passed/n, z = Φ⁻¹((1 + confidence)/2). E. B. Wilson,
    "Probable inference, the law of succession, and statistical inference", J. Am. Stat. Assoc. 22 (1927) 209–212.
    Nothing counted says nothing: (0, 1). Raises ValueError unless 0 ≤ passed ≤ of.

    >>> [round(limit, 4) for limit in wilson(81, 263)]
    [0.2553, 0.3662]
    """
    if not 0 <= passed <= of:
        raise ValueError(f"{passed} of {of} is not a share")
    if of == 0:
        return 0.0, 1.0
    z = float(ndtri((1.0 + confidence) / 2.0))
    p, z2n = passed / of, z * z / of
    centre = p + z2n / 2.0
    half = z * math.sqrt(p * (1.0 - p) / of + z2n / (4.0 * of))
    low, high = (centre - half) / (1.0 + z2n), (centre + half) / (1.0 + z2n)
    # at the ends the limits are 0 and 1 exactly, which rounding would miss
    return (0.0 if passed == 0 else low), (1.0 if passed == of else high)


def share(passed: int, of: int, confidence: float = CONFIDENCE) -> Share:
    """``passed`` of ``of`` with Wilson's limits; no value where there is nothing to count."""
    low, high = wilson(passed, of, confidence)
    return Share(passed, of, passed / of, low, high) if of else Share(0, 0, None, None, None)


def count(parts: Sequence[Part], grades: Sequence[Grade] = (), confidence: float = CONFIDENCE) -> Yields:
    """The counts of a lot. ``grades`` of the limit file are all listed, those without a part too."""
    stand = [standing(part) for part in parts]
    by_verdict = Counter(attempt.verdict for attempt in stand)
    firsts = [first_verdict(part) for part in parts]
    finals = [verdict for part in parts if (verdict := final_verdict(part)) is not None]
    reasons = Counter(_first_reason(a.reasons) for a in stand if a.verdict == FAIL)
    sorted_into = Counter(a.grade for a in stand if a.verdict == PASS and a.grade is not None)
    return Yields(
        parts=len(parts),
        passed=by_verdict[PASS],
        failed=by_verdict[FAIL],
        no_verdict=by_verdict[NONE],
        open=len(parts) - len(finals),
        first_pass=share(firsts.count(PASS), len(firsts), confidence),
        final=share(finals.count(PASS), len(finals), confidence),
        fail_reasons=_ranked(reasons),
        grades={**{grade.name: 0 for grade in grades}, **dict(sorted(sorted_into.items()))},
    )


def _first_reason(reasons: tuple[tuple[str, str | None], ...]) -> tuple[str, str | None]:
    return reasons[0] if reasons else ("no-reason", None)


def _ranked(reasons: Counter[tuple[str, str | None]]) -> tuple[FailReason, ...]:
    """Most frequent first, then by name, so that the order is the same each time."""
    rows = [FailReason(characteristic, code, number) for (code, characteristic), number in reasons.items()]
    return tuple(sorted(rows, key=lambda row: (-row.count, row.characteristic or "", row.code)))
