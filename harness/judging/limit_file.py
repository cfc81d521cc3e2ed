"""Limit-file text → LimitSet, or every mistake in it at once.

Three passes over one text: ``tomllib`` (a syntax error ends it), the models of ``schema`` (keys and values), and
``limit_checks`` (keys against each other) on whatever the models could read. Mistakes carry their line.
"""

from __future__ import annotations

from harness.errors import FileMistakes
from harness.judging.limit_checks import check_tables, search_window
from harness.judging.loading import limit_set
from harness.judging.schema import LimitFile, limits_schema
from harness.records import LimitSet
from harness.toml.document import mistakes, tables_and_lines
from harness.toml.findings import Finding, read_tables
from harness.toml.positions import Path

__all__ = ["limits_schema", "parse_limits"]


def parse_limits(text: str, file: str) -> LimitSet:
    """The limits that ``text`` states; ``file`` is only its name for messages.

    ``text`` is the file decoded as UTF-8 without newline translation (a byte order mark may lead), so that
    the hash is the file's own. Raises FileMistakes with all mistakes, each with its line, key and remedy.
    """
    raw, lines = tables_and_lines(text, file)
    doc, findings, kept = read_tables(LimitFile, raw)
    findings = (*findings, *_unless_reported(list(check_tables(kept)), findings))
    window = search_window(kept)[0]
    if findings or doc is None or window is None:
        raise FileMistakes(mistakes(findings, file, lines))
    return limit_set(doc, window, text)


def _unless_reported(later: list[Finding], first: tuple[Finding, ...]) -> list[Finding]:
    """Findings of the second pass, without those that miss a key which the first pass could not read."""
    spoilt = {_table(finding.path) for finding in first}
    return [finding for finding in later if not spoilt.intersection(finding.missed_in)]


def _table(path: Path) -> Path:
    """The table that a key stands in; an element of a list counts as its list's key."""
    return path[:-2] if isinstance(path[-1], int) else path[:-1]
