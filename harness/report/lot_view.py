"""A lot's numbers as the page's template shows them: every number with its key, its exact value and its text.

The keys are those of ``lot --json``, dots between levels, so that whoever reads the page by program finds the same.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from harness.characteristics import CHARACTERISTICS
from harness.judging.wording import label
from harness.records import LimitSet, Requirement
from harness.report import svg
from harness.report.amounts import NOTHING, Scale, scale_for
from harness.report.part_rows import PartRow
from harness.report.words import (
    CAUTIONS,
    LOT_WORDS,
    MARKS,
    UNSEEN,
    Mark,
    lot_mark,
    lot_sentence,
    percent,
    phrase,
    visible,
)
from harness.statistics.capability import Capability, Index
from harness.statistics.lot import LotStatistics, requirements_by_key
from harness.statistics.yields import FINAL, FIRST_PASS, Share


@dataclass(frozen=True, slots=True)
class Number:
    """``value`` as Python writes it exactly, "" where there is none."""

    key: str
    value: str
    text: str


def number(key: str, value: float | int | None, text: str) -> Number:
    return Number(key, "" if value is None else repr(value), text)


@dataclass(frozen=True, slots=True)
class Card:
    """One required characteristic: its name, what is allowed, its histogram (None without values), its figures."""

    title: str
    name: str
    allowed: str
    drawing: Markup | None
    figures: tuple[tuple[str, tuple[Number, ...], str], ...]  # label, value or value with limits, unit
    population: str
    note: str


@dataclass(frozen=True, slots=True)
class Column:
    """A required characteristic in the table of parts."""

    key: str
    title: str
    unit: str
    scale: Scale
    step: float | None


def view(
    lot: str, limits: LimitSet, statistics: LotStatistics, rows: Sequence[PartRow], traceability: Mapping[str, str]
) -> dict[str, Any]:
    """Everything the template names."""
    yields, required = statistics.yields, requirements_by_key(limits)
    mark, against = lot_mark(yields, limits)
    columns = [_column(name, statistics.characteristics[name], needs) for name, needs in required.items()]
    return {
        "lot": visible(lot),
        "part_number": limits.part_number,
        "description": limits.description,
        "revision": limits.revision,
        "screened": _screened(rows),
        "mark": MARKS.get(mark),
        "word": LOT_WORDS.get(mark, ""),
        "shape": svg.shape(mark, 64, MARKS[mark].ink) if mark else "",
        "sentence": lot_sentence(yields),
        "against": against,
        "total": number("parts", yields.parts, str(yields.parts)),
        "tiles": _tiles(statistics),
        "stripe": svg.stripe(_verdicts(statistics)) if yields.parts else "",
        "yields": [
            _yield("first_pass_yield", "First-pass yield", yields.first_pass, FIRST_PASS),
            _yield("final_yield", "Final yield", yields.final, FINAL),
        ],
        "grades": [(visible(name), number(f"grades.{name}", n, str(n))) for name, n in yields.grades.items()],
        "confidence": f"{100 * statistics.confidence:g} %",
        "reasons": _reasons(statistics),
        "cards": [_card(key, statistics.characteristics[key], required[key]) for key in required],
        "others": [_other(key, one) for key, one in statistics.characteristics.items() if key not in required],
        "looked_at": [_part(row, ()) for row in rows if row.verdict != "pass"],
        "columns": columns,
        "parts": [_part(row, columns) for row in rows],
        "sha256": limits.sha256,
        "traceability": [(visible(name), visible(text)) for name, text in traceability.items()],
        "cautions": CAUTIONS,
        "unseen": UNSEEN,
    }


def _screened(rows: Sequence[PartRow]) -> str:
    if not rows:
        return ""
    first, last = (end.replace("T", " ")[:16] for end in (min(r.at for r in rows), max(r.at for r in rows)))
    return f"{first} to {last} UTC" if first != last else f"{first} UTC"


# ── counts ───────────────────────────────────────────────────────────────────────────────────


def _verdicts(statistics: LotStatistics) -> list[tuple[str, int]]:
    yields = statistics.yields
    return [("pass", yields.passed), ("no verdict", yields.no_verdict), ("fail", yields.failed)]


def _tiles(statistics: LotStatistics) -> list[tuple[Mark, Markup, Number]]:
    keys = {"pass": "pass", "fail": "fail", "no verdict": "no_verdict"}
    return [
        (MARKS[verdict], svg.shape(verdict, 22), number(keys[verdict], count, str(count)))
        for verdict, count in _verdicts(statistics)
    ]


def _yield(key: str, title: str, share: Share, means: str) -> dict[str, Any]:
    return {
        "title": title,
        "value": number(f"{key}.value", share.value, percent(share.value)),
        "low": number(f"{key}.low", share.low, percent(share.low)),
        "high": number(f"{key}.high", share.high, percent(share.high)),
        "means": f"{share.passed} of {share.of}: {means}",
    }


def _reasons(statistics: LotStatistics) -> list[tuple[str, Markup, Number]]:
    found = statistics.yields.fail_reasons
    rows = []
    for reason in found:
        text = phrase(reason.code, reason.characteristic)
        drawing = svg.bar(reason.count / found[0].count, f"{text}: {reason.count}")
        key = f"fail_reasons.{reason.characteristic}.{reason.code}"
        rows.append((visible(text), drawing, number(key, reason.count, str(reason.count))))
    return rows


# ── characteristics ──────────────────────────────────────────────────────────────────────────


def _card(key: str, one: Capability, needs: Requirement) -> Card:
    scale = scale_for(one.characteristic, needs, one.values)
    return Card(
        title=_title(one, needs),
        name=CHARACTERISTICS[one.characteristic].name,
        allowed=_allowed(one, scale),
        drawing=_drawing(one, needs, scale),
        figures=(
            *_spread(key, one, scale),
            ("Pp", _index(key, "pp", one.pp), ""),
            ("Ppk", _index(key, "ppk", one.ppk), ""),
        ),
        population=one.population,
        note=one.note or "",
    )


def _title(one: Capability, needs: Requirement | None) -> str:
    sign = label(needs) if needs is not None else CHARACTERISTICS[one.characteristic].sign
    return sign if one.element == 1 else f"{sign}, element {one.element}"


def _drawing(one: Capability, needs: Requirement, scale: Scale) -> Markup | None:
    if one.mean is None:
        return None
    least, greatest = (None if limit is None else scale.of(limit) for limit in (one.least, one.greatest))
    values = [scale.of(value) for value in one.values]
    return svg.histogram_svg(
        values, sign=_title(one, needs), unit=scale.sign, least=least, greatest=greatest, mean=scale.of(one.mean)
    )


def _spread(key: str, one: Capability, scale: Scale) -> list[tuple[str, tuple[Number, ...], str]]:
    """n, mean, standard deviation, least, median, greatest: to three digits of the standard deviation."""
    figures: list[tuple[str, tuple[Number, ...], str]] = [
        ("n", (number(f"characteristics.{key}.n", one.n, str(one.n)),), "")
    ]
    for field, title, value in (
        ("mean", "mean", one.mean),
        ("sd", "standard deviation", one.sd),
        ("min", "least", one.min),
        ("median", "median", one.median),
        ("max", "greatest", one.max),
    ):
        shown = number(f"characteristics.{key}.{field}", value, scale.text(value, one.sd))
        figures.append((title, (shown,), scale.sign if value is not None else ""))
    return figures


def _index(key: str, field: str, index: Index) -> tuple[Number, ...]:
    ends = (("", index.value), ("_low", index.low), ("_high", index.high))
    texts = [
        number(f"characteristics.{key}.{field}{end}", value, NOTHING if value is None else f"{value:.2f}")
        for end, value in ends
    ]
    return tuple(texts) if index.value is not None else (texts[0],)


def _allowed(one: Capability, scale: Scale) -> str:
    unit = f" {scale.sign}".rstrip()
    if one.greatest is None:
        return f"at least {scale.exactly(one.least)}{unit}"
    if one.least is None:
        return f"at most {scale.exactly(one.greatest)}{unit}"
    return f"{scale.exactly(one.least)} to {scale.exactly(one.greatest)}{unit}"


def _other(key: str, one: Capability) -> dict[str, Any]:
    scale = scale_for(one.characteristic, None, one.values)
    return {
        "title": _title(one, None),
        "name": CHARACTERISTICS[one.characteristic].name,
        "unit": scale.sign,
        "figures": [shown for _, numbers, _ in _spread(key, one, scale) for shown in numbers],
    }


# ── parts ────────────────────────────────────────────────────────────────────────────────────


def _column(key: str, one: Capability, needs: Requirement) -> Column:
    scale = scale_for(one.characteristic, needs, one.values)
    return Column(key, _title(one, needs), scale.sign, scale, one.sd)


def _part(row: PartRow, columns: Sequence[Column]) -> dict[str, Any]:
    values = [(row.values.get(column.key), column) for column in columns]
    return {
        "serial": visible(row.serial),
        "shape": svg.shape(row.verdict, 13),
        "word": MARKS[row.verdict].word,
        "grade": visible(row.grade or ""),
        "attempts": row.attempts,
        "waiting": not row.final,
        "reason": visible(row.reason),
        "values": [number(column.key, value, column.scale.text(value, column.step)) for value, column in values],
    }
