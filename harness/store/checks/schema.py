"""Are the tables and their guards as they were made, and is the file whole?"""

from __future__ import annotations

from collections.abc import Iterator

from sqlalchemy import Connection, Table

from harness.store.checks.findings import Finding
from harness.store.guards import guards
from harness.store.tables import metadata


def schema_findings(conn: Connection) -> Iterator[Finding]:
    """Damage that SQLite finds, tables of another shape, guards that are gone, changed or not ours."""
    for (text,) in conn.exec_driver_sql("PRAGMA quick_check(1)"):
        if text != "ok":
            yield Finding("unreadable", None, None, None, f"the file is damaged: {' '.join(text.split())}")
    strict = {row.name: bool(row.strict) for row in conn.exec_driver_sql("PRAGMA table_list")}
    for table in metadata.sorted_tables:
        if table.name not in strict:
            yield _schema(f"table {table.name} is gone")
        elif not strict[table.name] or _columns(conn, table) != _columns_made(conn, table):
            yield _schema(f"table {table.name} is not as it was made")
    yield from _guard_findings(conn)


def _guard_findings(conn: Connection) -> Iterator[Finding]:
    there = {
        row.name: row.sql for row in conn.exec_driver_sql("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'")
    }
    made = guards()
    for name in sorted(made.keys() | there.keys()):
        if name not in there:
            yield _schema(f"the guard {name} is gone: rows could have been changed")
        elif name not in made:
            yield _schema(f"the trigger {name} is not one of the store's")
        elif there[name] != made[name]:
            yield _schema(f"the guard {name} is not as it was made")


def _columns(conn: Connection, table: Table) -> list[tuple[str, str]]:
    return [(row.name, row.type) for row in conn.exec_driver_sql(f"PRAGMA table_info({table.name})")]


def _columns_made(conn: Connection, table: Table) -> list[tuple[str, str]]:
    return [(column.name, column.type.compile(conn.dialect)) for column in table.columns]


def _schema(text: str) -> Finding:
    return Finding("schema", None, None, None, text)
