"""What is wrong with a file's tables, found by its model: pydantic's errors as sentences with paths."""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar, get_args, get_origin

from pydantic import BaseModel, ValidationError

from harness.toml.positions import Path
from harness.toml.readers import Unreadable, nearest

Document = TypeVar("Document", bound=BaseModel)


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


def read_tables(
    model: type[Document], raw: Mapping[str, Any]
) -> tuple[Document | None, tuple[Finding, ...], dict[str, Any]]:
    """The file's tables as a model (None with mistakes), the mistakes, and what can still be checked further.

    The third is ``raw`` without every key that a mistake is about, so that each key is reported once and
    the checks of one key against another still run on all that can be read.
    """
    kept = copy.deepcopy(dict(raw))
    try:
        return model.model_validate(raw), (), kept
    except ValidationError as exc:
        errors = exc.errors(include_url=False)
    shape = _shape_of(model)
    findings = tuple(_finding(error, shape) for error in errors)
    for finding in findings:
        _take_out(kept, finding.path)
    return None, findings, kept


@dataclass(frozen=True, slots=True)
class _Shape:
    """A model's tables by where they stand, and which of them come several times."""

    tables: Mapping[tuple[str, ...], type[BaseModel]]
    repeated: frozenset[str]


def tables_of(model: type[BaseModel]) -> dict[tuple[str, ...], type[BaseModel]]:
    """Every table of a file, by the names that lead to it: () is the file itself."""
    found: dict[tuple[str, ...], type[BaseModel]] = {(): model}
    for name, field in model.model_fields.items():
        inner, _ = _block_in(field.annotation)
        if inner is not None:
            found |= {(name, *path): table for path, table in tables_of(inner).items()}
    return found


def _shape_of(model: type[BaseModel]) -> _Shape:
    tables = tables_of(model)
    fields = [(name, field) for table in tables.values() for name, field in table.model_fields.items()]
    return _Shape(tables, frozenset(name for name, field in fields if _block_in(field.annotation)[1]))


def _block_in(annotation: Any) -> tuple[type[BaseModel] | None, bool]:
    """The table that a key holds, and whether it holds several of them."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation, False
    several = get_origin(annotation) is list
    for argument in get_args(annotation):
        inner, deeper = _block_in(argument)
        if inner is not None:
            return inner, several or deeper
    return None, False


def _finding(error: Any, shape: _Shape) -> Finding:
    path, kind = tuple(error["loc"]), error["type"]
    table = tuple(part for part in path[:-1] if isinstance(part, str))
    name = str(path[-1])
    if kind == "value_error" and isinstance(error["ctx"]["error"], Unreadable):
        said = error["ctx"]["error"]
        return Finding(path, said.text, said.remedy)
    if kind == "extra_forbidden":
        return Finding(path, "is not a key known here.", _key_remedy(name, table, shape))
    if kind == "missing":
        return Finding(path, "is missing.", _missing_remedy(name, table, shape))
    if kind in ("too_short", "too_long"):
        return Finding(path, *(_no_table(name) if name in shape.repeated else _TWO))
    if kind == "list_type":
        return Finding(path, *(_not_several(name) if name in shape.repeated else _TWO))
    return Finding(path, "is not a table.", f"Write a table with its keys: {_header(path, shape)}.")


_TWO = ("needs exactly two values, the lowest and the highest.", 'Such as ["18 degC", "28 degC"].')


def _no_table(name: str) -> tuple[str, str]:
    return f"holds no {_SINGULAR.get(name, name)}.", f"Write at least one [[{name}]] table."


def _not_several(name: str) -> tuple[str, str]:
    return "is a single value or table where several tables belong.", f"Write [[{name}]] with two brackets."


_SINGULAR = {"require": "requirement"}


def _key_remedy(key: str, table: tuple[str, ...], shape: _Shape) -> str:
    known = list(shape.tables[table].model_fields) if table in shape.tables else []
    holders = [where for where, model in shape.tables.items() if key in model.model_fields]
    elsewhere = [where for where in holders if where and where != table]
    if close := nearest(key, known):
        return close
    if elsewhere:
        return f"It belongs in {_header(elsewhere[0], shape)}."
    return f"Known here are {', '.join(known)}."


def _missing_remedy(key: str, table: tuple[str, ...], shape: _Shape) -> str:
    path = (*table, key)
    if path in shape.tables:
        return f"Write {_header(path, shape)} with its keys."
    return shape.tables[table].model_fields[key].description or ""


def _header(path: Sequence[str | int], shape: _Shape) -> str:
    name = ".".join(str(part) for part in path if isinstance(part, str))
    return f"[[{name}]]" if name in shape.repeated else f"[{name}]"


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
