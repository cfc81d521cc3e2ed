"""A TOML file's text by its model: the model, or every mistake at once."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict

from harness.errors import FileMistakes, Mistake
from harness.toml.findings import Finding, read_tables
from harness.toml.positions import Path, line_of, positions

_PLACE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)")
_COMMA_NUMBER = re.compile(r"=\s*\[?\s*[+-]?\d+,\d")


class Block(BaseModel):
    """A table of a file: unknown keys are mistakes."""

    model_config = ConfigDict(extra="forbid", frozen=True)


Document = TypeVar("Document", bound=BaseModel)


def read_document(model: type[Document], text: str, file: str) -> Document:
    """``text`` as ``model``. Raises FileMistakes with all mistakes; ``file`` is only its name for messages."""
    raw, lines = tables_and_lines(text, file)
    doc, findings, _ = read_tables(model, raw)
    if doc is None:
        raise FileMistakes(mistakes(findings, file, lines))
    return doc


def tables_and_lines(text: str, file: str) -> tuple[dict[str, Any], dict[Path, int]]:
    """The file's tables, and the line of every key. Raises FileMistakes where the text is not TOML."""
    body = text.removeprefix("\ufeff").replace("\r\n", "\n")
    try:
        body.encode("utf-8")
        return tomllib.loads(body), positions(body)
    except UnicodeEncodeError as exc:
        mistake = Mistake(file, None, "", "The file is not UTF-8 text.", "Save it as UTF-8.")
        raise FileMistakes([mistake]) from exc
    except RecursionError as exc:
        mistake = Mistake(file, None, "", "Lists or tables are nested too deeply.", "Three levels are enough.")
        raise FileMistakes([mistake]) from exc
    except ValueError as exc:  # TOMLDecodeError, and numbers of thousands of digits
        raise FileMistakes([_syntax_mistake(str(exc), body, file)]) from exc


def mistakes(findings: Iterable[Finding], file: str, lines: dict[Path, int]) -> list[Mistake]:
    """Findings with their lines."""
    return [_mistake(finding, file, lines) for finding in findings]


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


def _mistake(finding: Finding, file: str, lines: dict[Path, int]) -> Mistake:
    key = ""
    for part in finding.path:
        key += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if key else part
    return Mistake(file, line_of(lines, finding.path), key, finding.text, finding.remedy)
