"""What is wrong with a limit file's tables, found by the models: pydantic's errors as sentences with paths."""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from pydantic import ValidationError

from harness.judging.readers import Unreadable, nearest
from harness.judging.schema import TABLES, LimitFile
from harness.judging.toml_positions import Path


@dataclass(frozen=True, slots=True)
class Finding:
    """One mistake: the path of the key, a sentence, a remedy.

    ``missed_in``: the tables in which a key was looked for in vain; it says nothing where one of them holds a key
    that could not be read.
    """

    path: Path
    text: str
    remedy: str = ""
    missed_in: tuple[Path, ...] = ()


def read_tables(raw: Mapping[str, Any]) -> tuple[LimitFile | None, tuple[Finding, ...], dict[str, Any]]:
    """The file's tables as a model (None with mistakes), the mistakes, and what can still be checked further.

    The third is ``raw`` without every key that a mistake is about, so that each key is reported once and
    the checks of one key against another still run on all that can be read.
    """
    kept = copy.deepcopy(dict(raw))
    try:
        return LimitFile.model_validate(raw), (), kept
    except ValidationError as exc:
        errors = exc.errors(include_url=False)
    findings = tuple(_finding(error) for error in errors)
    for finding in findings:
        _take_out(kept, finding.path)
    return None, findings, kept


def _finding(error: Any) -> Finding:
    path, kind = tuple(error["loc"]), error["type"]
    table = tuple(part for part in path[:-1] if isinstance(part, str))
    if kind == "value_error" and isinstance(error["ctx"]["error"], Unreadable):
        said = error["ctx"]["error"]
        return Finding(path, said.text, said.remedy)
    if kind == "extra_forbidden":
        return Finding(path, "is not a key known here.", _key_remedy(str(path[-1]), table))
    if kind == "missing":
        return Finding(path, "is missing.", _missing_remedy(str(path[-1]), table))
    if kind in ("too_short", "too_long"):
        return Finding(path, *_LENGTHS.get(str(path[-1]), _TWO))
    if kind == "list_type":
        return Finding(path, *_NOT_A_LIST.get(str(path[-1]), _TWO))
    return Finding(path, "is not a table.", f"Write a table with its keys: {_header(path)}.")


_TWO = ("needs exactly two values, the lowest and the highest.", 'Such as ["18 degC", "28 degC"].')
_LENGTHS = {"require": ("holds no requirement.", "Write at least one [[require]] table.")}
_NOT_A_LIST = {
    name: ("is a single value or table where several tables belong.", f"Write [[{name}]] with two brackets.")
    for name in ("require", "grade")
}


def _key_remedy(key: str, table: tuple[str, ...]) -> str:
    known = list(TABLES[table].model_fields) if table in TABLES else []
    elsewhere = [where for where, model in TABLES.items() if key in model.model_fields and where and where != table]
    if close := nearest(key, known):
        return close
    if elsewhere:
        return f"It belongs in {_header(elsewhere[0])}."
    return f"Known here are {', '.join(known)}."


def _missing_remedy(key: str, table: tuple[str, ...]) -> str:
    path = (*table, key)
    if path in TABLES:
        return f"Write {_header(path)} with its keys."
    return TABLES[table].model_fields[key].description or ""


def _header(path: Sequence[str | int]) -> str:
    name = ".".join(str(part) for part in path if isinstance(part, str))
    return f"[[{name}]]" if name in ("require", "grade") else f"[{name}]"


def _take_out(kept: dict[str, Any], path: Path) -> None:
    """Remove the key that ``path`` is about; an element of a plain list takes the whole list's key with it."""
    where: Any = kept
    holder, key = kept, path[0]
    for part in path:
        if isinstance(where, dict):
            holder, key = where, part
            where = where.get(str(part))
        elif isinstance(where, list) and isinstance(part, int) and part < len(where):
            if not isinstance(where[part], dict):
                break
            where = where[part]
        else:
            break
    holder.pop(str(key), None)


def tables(kept: Mapping[str, Any], name: str) -> Iterator[tuple[Path, Mapping[str, Any]]]:
    """Each readable ``[[name]]`` table with its path."""
    found = kept.get(name)
    for index, table in enumerate(found if isinstance(found, list) else []):
        if isinstance(table, dict):
            yield (name, index), table


def table(kept: Mapping[str, Any], *names: str) -> Mapping[str, Any]:
    """The readable ``[names]`` table, empty when it is not there."""
    found: Any = kept
    for name in names:
        found = found.get(name) if isinstance(found, dict) else None
    return found if isinstance(found, dict) else {}
