"""From a path or URL to a ``Store``: look first, touch nothing that is not ours, create only to write."""

from __future__ import annotations

import os
import uuid
from pathlib import Path
from typing import Literal

from sqlalchemy import insert, select
from sqlalchemy.engine import make_url
from sqlalchemy.exc import ArgumentError

from harness.errors import SetupError, StationError
from harness.store import engines
from harness.store.guards import guards
from harness.store.store import Store
from harness.store.tables import APPLICATION_ID, SCHEMA_VERSION, metadata, store_info

Mode = Literal["read", "write"]
_MAGIC = b"SQLite format 3\0"
_GIVE_ANOTHER = "Give another path with --store."


def open_store(url_or_path: str, *, mode: Mode, now: str, made_by: str = "ringtrue") -> Store:
    """The store at a bare path or ``sqlite:///`` URL.

    ``mode`` "read" never creates anything; "write" makes missing folders, the file and its tables, marked with
    ``made_by`` and ``now`` (ISO 8601 UTC). Raises SetupError where there is no store or something that is not ours,
    StationError where the disk will not have it.
    """
    path = _path_of(url_or_path)
    place = str(path)
    version = _look(path, place)
    if version is None and mode == "read":
        raise engines.missing(place)
    if version is not None and version > SCHEMA_VERSION:
        raise SetupError(
            f"the store at {place} was made by a newer ringtrue: schema {version}, known here up to {SCHEMA_VERSION}.",
            remedy="Update ringtrue.",
        )
    if version is None:
        _create(path, place, made_by, now)
    engine = engines.sqlite_engine(path, mode)
    try:
        with engines.translated(place), engine.begin() as connection:
            chain = connection.execute(select(store_info.c.chain)).scalar_one()
    except BaseException:
        engine.dispose()
        raise
    return Store(engine, place=place, chain=chain)


# ── where ────────────────────────────────────────────────────────────────────────────────────


def _path_of(url_or_path: str) -> Path:
    """The file meant by a bare path or an SQLite URL. Raises SetupError for anything else."""
    if not url_or_path.strip() or "\0" in url_or_path:
        raise SetupError("the store's path is empty or not a path.", remedy=_GIVE_ANOTHER)
    if "://" not in url_or_path:
        return Path(url_or_path).expanduser()
    try:
        url = make_url(url_or_path)
    except (ArgumentError, ValueError) as exc:
        raise SetupError(f"'{url_or_path}' is not a store's URL.", remedy="Give a path, or sqlite:///PATH.") from exc
    kind = url.get_backend_name()
    if kind == "postgresql":
        raise SetupError(
            "a station keeps its own store in SQLite; this version cannot keep one in PostgreSQL.",
            remedy="Give a path, or sqlite:///PATH.",
        )
    if kind != "sqlite":
        raise SetupError(
            f"a store is kept in SQLite or PostgreSQL, not in '{kind}'.", remedy="Give a path, or sqlite:///PATH."
        )
    if not url.database or url.database == ":memory:":
        raise SetupError("a store in memory would lose its records.", remedy="Give a path, or sqlite:///PATH.")
    return Path(url.database).expanduser()


def _look(path: Path, place: str) -> int | None:
    """The schema version of the store at ``path``, None where there is none yet. SetupError if it is not ours."""
    try:
        if not path.exists():
            return None
        if path.is_dir():
            raise SetupError(
                f"{place} is a folder, not a store.", remedy=f"Give a file in it, such as {path / 'ringtrue.db'}."
            )
        with path.open("rb") as file:
            head = file.read(len(_MAGIC))
    except OSError as exc:
        raise SetupError(f"the store at {place} cannot be read: {exc.strerror}.", remedy=_GIVE_ANOTHER) from exc
    if not head:
        return None
    if head != _MAGIC:
        raise SetupError(f"{place} is not a ringtrue store.", remedy=_GIVE_ANOTHER)
    journal = path.with_name(f"{path.name}-journal")
    if journal.exists() and journal.stat().st_size:
        raise SetupError(
            f"{place} is not a ringtrue store: a change to it was never finished ({journal.name} lies beside it).",
            remedy=_GIVE_ANOTHER,
        )
    return _version(path, place)


def _version(path: Path, place: str) -> int | None:
    """The schema version that an SQLite file states; None for one without any table, as a killed creation leaves it."""
    with engines.translated(place):
        connection = engines.connect(path, "read")
        try:
            connection.execute(f"PRAGMA busy_timeout={engines.BUSY_MS}")
            tables = {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
            if not tables:
                return None
            (application,) = connection.execute("PRAGMA application_id").fetchone()
            if application != APPLICATION_ID or "store_info" not in tables:
                raise SetupError(f"{place} is an SQLite file, but not a ringtrue store.", remedy=_GIVE_ANOTHER)
            found = connection.execute("SELECT schema_version FROM store_info").fetchone()
        finally:
            connection.close()
    if found is None:
        raise SetupError(f"the store at {place} does not say its schema; it is not whole.", remedy="Restore a backup.")
    return int(found[0])


# ── creating ─────────────────────────────────────────────────────────────────────────────────


def _create(path: Path, place: str, made_by: str, now: str) -> None:
    """Make the store beside its place and name it at the end: a killed creation leaves no half store."""
    made = [folder for folder in (path.parent, *path.parent.parents) if not folder.exists()]
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as exc:
        sentence = f"the folder {path.parent} cannot be made: {exc.strerror}."
        raise StationError(sentence, place=place, remedy=_GIVE_ANOTHER) from exc
    if path.exists():
        _fill(path, place, made_by, now)
    else:
        _fill_and_name(path, place, made_by, now)
    for folder in {path.parent, *(one.parent for one in made)}:
        _flush_folder(folder)


def _fill_and_name(path: Path, place: str, made_by: str, now: str) -> None:
    beside = path.with_name(f".{path.name}.{uuid.uuid4().hex}")
    try:
        _fill(beside, place, made_by, now)
        os.link(beside, path)
    except FileExistsError:
        pass  # another process was first, and its store is as good
    except OSError:
        _fill(path, place, made_by, now)  # a file system without hard links
    finally:
        beside.unlink(missing_ok=True)


def _fill(path: Path, place: str, made_by: str, now: str) -> None:
    """Tables and guards in one transaction, into a file that has none yet."""
    engine = engines.sqlite_engine(path, "write")
    try:
        with engines.translated(place), engine.begin() as connection:
            # Another process may have filled it between the look and this transaction.
            if connection.exec_driver_sql("SELECT count(*) FROM sqlite_master").scalar_one() == 0:
                connection.exec_driver_sql(f"PRAGMA application_id = {APPLICATION_ID}")
                metadata.create_all(connection, checkfirst=False)
                for text in guards().values():
                    connection.exec_driver_sql(text)
                chain = uuid.uuid4().hex
                row = {"id": 1, "schema_version": SCHEMA_VERSION, "chain": chain, "made_by": made_by, "made_at": now}
                connection.execute(insert(store_info), row)
    finally:
        engine.dispose()


def _flush_folder(folder: Path) -> None:
    """Make a new name in a folder survive a power cut; SQLite does it for its log, not for a new store's own name."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
