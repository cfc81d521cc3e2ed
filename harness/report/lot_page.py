"""A lot's page: a frozen model of all it shows → one HTML file that needs nothing else.

No script, no other host, no font to fetch; prints on A4. The same model gives the same bytes.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from jinja2 import Environment, PackageLoader, StrictUndefined

from harness.records import LimitSet
from harness.report.lot_view import view
from harness.report.part_rows import PartRow, part_rows
from harness.statistics.attempts import Attempt
from harness.statistics.lot import LotStatistics, summarise


@dataclass(frozen=True, slots=True)
class LotPage:
    """``traceability``: what else to name, label → text, in the order shown: instruments, correction, software,
    station, the first and last record's hash. The limit file, its revision and hash are named from ``limits``.
    """

    lot: str
    limits: LimitSet
    statistics: LotStatistics
    rows: tuple[PartRow, ...]
    traceability: Mapping[str, str] = field(default_factory=dict)


def lot_page(
    lot: str,
    limits: LimitSet,
    attempts: Iterable[Attempt],
    traceability: Mapping[str, str],
    sentences: Mapping[str, str] | None = None,
) -> LotPage:
    """The model of a lot's page; ``sentences`` are the standing reasons of parts, by serial, as recorded."""
    kept = tuple(attempts)
    return LotPage(lot, limits, summarise(kept, limits), part_rows(kept, sentences), traceability)


def render(page: LotPage) -> str:
    """The page as HTML text."""
    environment = Environment(
        loader=PackageLoader("harness.report"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    template = environment.get_template("lot.html.j2")
    return template.render(
        view(page.lot, page.limits, page.statistics, page.rows, page.traceability),
    )
