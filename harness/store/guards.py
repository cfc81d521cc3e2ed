"""The triggers that let rows be added and nothing else.

``INSERT OR REPLACE`` deletes the row in its way without asking the delete trigger, unless the connection has
``recursive_triggers`` on. Ours has; other programs' connections may not, so a trigger before each insert also refuses
a row whose key is taken.
"""

from __future__ import annotations

from sqlalchemy import Table, UniqueConstraint

from harness.store.tables import metadata

_REFUSAL = "rows of {table} are only ever added: {verb} is refused"


def guards() -> dict[str, str]:
    """Name → ``CREATE TRIGGER`` text of every guard, in SQLite's words."""
    return {name: text for table in metadata.sorted_tables for name, text in _guards_of(table)}


def _guards_of(table: Table) -> list[tuple[str, str]]:
    name = table.name
    found = [_guard(name, verb, f"BEFORE {verb.upper()} ON {name}") for verb in ("update", "delete")]
    taken = " OR ".join(f"EXISTS (SELECT 1 FROM {name} WHERE {_same(key)})" for key in _keys(table))
    found.append(_guard(name, "replace", f"BEFORE INSERT ON {name} WHEN {taken}"))
    return found


def _guard(table: str, verb: str, head: str) -> tuple[str, str]:
    name = f"guard_{table}_{verb}"
    refusal = _REFUSAL.format(table=table, verb=verb)
    return name, f"CREATE TRIGGER {name} {head} BEGIN SELECT RAISE(ABORT, '{refusal}'); END"


def _same(key: list[str]) -> str:
    return " AND ".join(f"{column} = NEW.{column}" for column in key)


def _keys(table: Table) -> list[list[str]]:
    """The column sets that may not repeat: the primary key and every unique constraint."""
    keys = [[column.name for column in table.primary_key.columns]]
    uniques = [c for c in table.constraints if isinstance(c, UniqueConstraint)]
    return keys + sorted([column.name for column in unique.columns] for unique in uniques)
