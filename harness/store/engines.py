"""Connections to SQLite: one at a time in a process, and its errors in our words.

The newer SQLite of ``pysqlite3`` is used where it is installed: SQLite before 3.51.3 can, very rarely, corrupt a
store when two connections write and checkpoint in the same instant. One writer and read-only readers keep clear of
that too.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Engine, create_engine, event
from sqlalchemy.exc import DBAPIError, IntegrityError
from sqlalchemy.pool import QueuePool

from harness.errors import SetupError, StationError

try:
    from pysqlite3 import dbapi2 as sqlite
except ImportError:
    import sqlite3 as sqlite

BUSY_MS = 5000
_BOTH = ("trusted_schema=OFF", f"busy_timeout={BUSY_MS}", "foreign_keys=ON", "recursive_triggers=ON")
# A verdict that was shown must survive a power cut: FULL flushes the log at every commit.
PRAGMAS = {
    "write": (*_BOTH, "journal_mode=WAL", "synchronous=FULL"),
    "read": (*_BOTH, "query_only=ON"),
}
_BEGIN = {"write": "BEGIN IMMEDIATE", "read": "BEGIN"}

# SQLite's primary result codes, in words: (sentence, remedy)
_BUSY = ("the store is being written by another process.", "Let it finish or stop it, then try again.")
_READ_ONLY = ("the store may not be written.", "Check the permissions of the file and of its folder.")
_DAMAGED = ("the store is damaged.", "Keep a copy, run 'ringtrue record verify', and restore the last backup.")
_TROUBLE = {
    5: _BUSY,
    6: _BUSY,
    8: _READ_ONLY,
    10: ("the store's disk failed to read or write.", "Check the disk and the mount, then try again."),
    11: _DAMAGED,
    13: ("the store's disk is full; nothing of this was written.", "Free some space, then try again."),
    14: ("the store cannot be opened.", "Check that its folder exists and may be written."),
    26: _DAMAGED,
}


def sqlite_version() -> str:
    """The version of the SQLite in use here."""
    return str(sqlite.sqlite_version)


def connect(path: Path, mode: str) -> Any:
    """A bare driver connection; mode "read" neither creates nor changes the file."""
    access = {"read": "ro", "write": "rwc"}[mode]
    return sqlite.connect(
        f"{path.resolve().as_uri()}?mode={access}", uri=True, check_same_thread=False, isolation_level=None
    )


def sqlite_engine(path: Path, mode: str) -> Engine:
    """An engine of one connection, set up by ``PRAGMAS`` and beginning every transaction by itself."""
    engine = create_engine(
        "sqlite://",
        module=sqlite,
        creator=lambda: connect(path, mode),
        poolclass=QueuePool,
        pool_size=1,
        max_overflow=0,
    )

    @event.listens_for(engine, "connect")
    def set_up(connection: Any, _: Any) -> None:
        for pragma in PRAGMAS[mode]:
            connection.execute(f"PRAGMA {pragma}")

    @event.listens_for(engine, "begin")
    def begin(connection: Connection) -> None:
        connection.exec_driver_sql(_BEGIN[mode])

    return engine


@contextmanager
def translated(place: str) -> Iterator[None]:
    """SQLite's complaints as StationError; a broken constraint is a bug of ours and passes as it is."""
    try:
        yield
    except IntegrityError:
        raise
    except DBAPIError as exc:
        raise _station_error(exc.orig, place) from exc
    except sqlite.Error as exc:
        raise _station_error(exc, place) from exc


def _station_error(error: BaseException | None, place: str) -> StationError:
    code = getattr(error, "sqlite_errorcode", None) or 0
    sentence, remedy = _TROUBLE.get(code & 0xFF, (f"the store could not be used: {error}.", ""))
    return StationError(sentence, place=place, remedy=remedy)


def is_damage(error: StationError) -> bool:
    """Whether the file itself is broken, as against busy, full or out of reach."""
    return error.text == _DAMAGED[0]


def missing(place: str) -> SetupError:
    """What a reading command says where there is no store."""
    return SetupError(f"there is no store at {place}.", remedy="Run a screening first, or give --store.")
