"""All that is said of a lot, from its attempts and its limits; and the same as ``lot --json``."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from harness.characteristics import CHARACTERISTICS
from harness.records import LimitSet, Requirement
from harness.statistics.attempts import Attempt
from harness.statistics.capability import Capability, capability
from harness.statistics.parts import Part, parts_of
from harness.statistics.yields import CONFIDENCE, Share, Yields, count


@dataclass(frozen=True, slots=True)
class LotStatistics:
    """Counts and yields, and the characteristics by key: the id, with "@element" behind it from element 2 on.

    Characteristics come as the limit file requires them, then the others in the order of the table of characteristics.
    ``confidence`` is that of every limit given.
    """

    yields: Yields
    characteristics: Mapping[str, Capability]
    confidence: float = CONFIDENCE


def summarise(attempts: Iterable[Attempt], limits: LimitSet, confidence: float = CONFIDENCE) -> LotStatistics:
    """The statistics of a lot under its limits. ``attempts`` in any order that keeps parts as they came."""
    parts = parts_of(attempts)
    required = requirements_by_key(limits)
    found: dict[str, Capability] = {}
    for characteristic, element in _subjects(parts, required.values()):
        name = key(characteristic, element)
        needs = required.get(name)
        least, greatest = (needs.min, needs.max) if needs is not None else (None, None)
        found[name] = capability(characteristic, parts, least, greatest, element=element, confidence=confidence)
    return LotStatistics(count(parts, limits.grades, confidence), found, confidence)


def key(characteristic: str, element: int) -> str:
    """The key of a characteristic of an element.

    >>> key("fs", 1), key("fs", 2)
    ('fs', 'fs@2')
    """
    return characteristic if element == 1 else f"{characteristic}@{element}"


def requirements_by_key(limits: LimitSet) -> dict[str, Requirement]:
    """The requirements by the key of what they limit; the first where there are several."""
    found: dict[str, Requirement] = {}
    for requirement in limits.requirements:
        found.setdefault(key(requirement.characteristic, requirement.element), requirement)
    return found


def _subjects(parts: Sequence[Part], required: Iterable[Requirement]) -> list[tuple[str, int]]:
    """What to look at: every characteristic that is required, then every other that some attempt has a value of."""
    subjects = {(requirement.characteristic, requirement.element): None for requirement in required}
    seen = {
        (characteristic, element)
        for part in parts
        for element, tries in part.tries.items()
        for attempt in tries
        for characteristic, (value, _) in attempt.values.items()
        if value is not None and characteristic in CHARACTERISTICS
    }
    order = list(CHARACTERISTICS)
    others = sorted(seen - subjects.keys(), key=lambda subject: (subject[1], order.index(subject[0])))
    return [*subjects, *others]


# ── lot --json ───────────────────────────────────────────────────────────────────────────────


def to_json(statistics: LotStatistics, lot: str, limits: LimitSet) -> dict[str, Any]:
    """``lot --json``: plain dictionaries in SI units, None where a value does not exist."""
    yields = statistics.yields
    return {
        "lot": lot,
        "limits": {"part_number": limits.part_number, "revision": limits.revision, "sha256": limits.sha256},
        "parts": yields.parts,
        "pass": yields.passed,
        "fail": yields.failed,
        "no_verdict": yields.no_verdict,
        "first_pass_yield": _share(yields.first_pass),
        "final_yield": _share(yields.final),
        "fail_reasons": _fail_reasons(yields),
        "grades": dict(yields.grades),
        "characteristics": {name: _capability(one) for name, one in statistics.characteristics.items()},
    }


def _fail_reasons(yields: Yields) -> list[dict[str, Any]]:
    """One entry a characteristic, the most frequent first, with its codes and their counts."""
    codes: dict[str | None, dict[str, int]] = {}
    for reason in yields.fail_reasons:
        codes.setdefault(reason.characteristic, {})[reason.code] = reason.count
    entries = [{"characteristic": name, "count": sum(found.values()), "codes": found} for name, found in codes.items()]
    return sorted(entries, key=_count_of, reverse=True)


def _count_of(entry: Mapping[str, Any]) -> int:
    return int(entry["count"])


def _share(share: Share) -> dict[str, float | None]:
    return {"value": share.value, "low": share.low, "high": share.high}


def _capability(one: Capability) -> dict[str, Any]:
    return {
        "n": one.n,
        "mean": one.mean,
        "sd": one.sd,
        "min": one.min,
        "max": one.max,
        "median": one.median,
        "unit": one.unit,
        "pp": one.pp.value,
        "pp_low": one.pp.low,
        "pp_high": one.pp.high,
        "ppk": one.ppk.value,
        "ppk_low": one.ppk.low,
        "ppk_high": one.ppk.high,
        "population": one.population,
        "note": one.note,
    }
