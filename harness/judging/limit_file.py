"""Limit-file text → LimitSet, or every mistake in it at once.

Three passes over one text: ``tomllib`` (a syntax error ends it), the models of ``schema`` (keys and values), and
``limit_checks`` (keys against each other) on whatever the models could read. Mistakes carry their line.
"""

from __future__ import annotations

import re
import tomllib
from typing import Any

from harness.errors import FileMistakes, Mistake
from harness.judging.findings import Finding, read_tables
from harness.judging.limit_checks import check_tables, search_window
from harness.judging.loading import limit_set
from harness.judging.schema import limits_schema
from harness.judging.toml_positions import Path, line_of, positions
from harness.records import LimitSet

__all__ = ["limits_schema", "parse_limits"]

_PLACE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)")
_COMMA_NUMBER = re.compile(r"=\s*\[?\s*[+-]?\d+,\d")


def parse_limits(text: str, file: str) -> LimitSet:
    """The limits that ``text`` states; ``file`` is only its name for messages.

    ``text`` is the file decoded as UTF-8 without newline translation (a byte order mark may lead), so that
    the hash is the file's own. Raises FileMistakes with all mistakes, each with its line, key and remedy.
    """
    raw, lines = _tables_and_lines(text, file)
    doc, findings, kept = read_tables(raw)
    findings = (*findings, *_unless_reported(list(check_tables(kept)), findings))
    window = search_window(kept)[0]
    if findings or doc is None or window is None:
        raise FileMistakes([_mistake(finding, file, lines) for finding in findings])
    return limit_set(doc, window, text)


def _tables_and_lines(text: str, file: str) -> tuple[dict[str, Any], dict[Path, int]]:
    body = text.removeprefix("\ufeff").replace("\r\n", "\n")
    try:
        body.encode("utf-8")
        return tomllib.loads(body), positions(body)
    except UnicodeEncodeError as exc:
        mistake = Mistake(file, None, "", "The file is not UTF-8 text.", "Save it as UTF-8.")
        raise FileMistakes([mistake]) from exc
    except RecursionError as exc:
        mistake = Mistake(file, None, "", "Lists or tables are nested too deeply.", "Limit files need three levels.")
        raise FileMistakes([mistake]) from exc
    except ValueError as exc:  # TOMLDecodeError, and numbers of thousands of digits
        raise FileMistakes([_syntax_mistake(str(exc), body, file)]) from exc


def _syntax_mistake(said: str, body: str, file: str) -> Mistake:
    place = _PLACE.search(said)
    rows = body.split("\n")
    line = int(place.group(1)) if place and place.group(1) else len(rows) if place else None
    row = rows[line - 1] if line is not None and line <= len(rows) else ""
    reason = _PLACE.sub("", said).split("\n")[0].rstrip(".")
    key = row.partition("=")[0].strip() if "=" in row else ""
    if _COMMA_NUMBER.search(row):
        return Mistake(
            file, line, key, "A number is written with a comma.", "Write decimals with a point, such as 1.5."
        )
    return Mistake(file, line, "", f"This is not TOML: {reason}.", _syntax_remedy(reason, row))


def _syntax_remedy(reason: str, row: str) -> str:
    if "overwrite" in reason or "twice" in reason or "Cannot declare" in reason:
        return "Is a key or a table written twice?"
    if row.count('"') % 2 or row.count("'") % 2:
        return "Is a closing quote missing?"
    if "Invalid value" in reason:
        return "Put texts and numbers with units in quotes."
    return "Look at this line and the one before it."


def _unless_reported(later: list[Finding], first: tuple[Finding, ...]) -> list[Finding]:
    """Findings of the second pass, without those that miss a key which the first pass could not read."""
    spoilt = {_table(finding.path) for finding in first}
    return [finding for finding in later if not spoilt.intersection(finding.missed_in)]


def _table(path: Path) -> Path:
    """The table that a key stands in; an element of a list counts as its list's key."""
    return path[:-2] if isinstance(path[-1], int) else path[:-1]


def _mistake(finding: Finding, file: str, lines: dict[Path, int]) -> Mistake:
    key = ""
    for part in finding.path:
        key += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if key else part
    return Mistake(file, line_of(lines, finding.path), key, finding.text, finding.remedy)
