"""Opening: only what is ours, never created by a reader, one clear sentence for anything else, durable settings."""

from __future__ import annotations

import os
import shutil
import sqlite3
from pathlib import Path

import pytest
from store_examples import NOW, new_store, screen, screened

from harness.errors import SetupError, StationError
from harness.store import open_store, verify, verify_at
from harness.store.tables import APPLICATION_ID


def snapshot(folder: Path) -> dict[str, bytes]:
    return {str(one.relative_to(folder)): one.read_bytes() for one in sorted(folder.rglob("*")) if one.is_file()}


def refused(where: str, mode: str = "read") -> str:
    with pytest.raises(SetupError) as caught:
        open_store(where, mode=mode, now=NOW)  # type: ignore[arg-type]
    sentence = caught.value.sentence()
    assert "\n" not in sentence
    return sentence


def test_a_reader_creates_nothing(tmp_path: Path) -> None:
    """A missing store stays missing, its folders too, and the reader is told what to do."""
    path = tmp_path / "plant" / "ringtrue.db"
    sentence = refused(str(path))
    assert f"there is no store at {path}" in sentence
    assert "Run a screening first, or give --store." in sentence
    assert list(tmp_path.iterdir()) == []


def test_a_writer_creates_folders_and_says_by_whom(tmp_path: Path) -> None:
    """Parents are made; the store says who made it and when; a second opening changes neither that nor the chain."""
    path = tmp_path / "plant" / "line 3 é%" / "ringtrue.db"
    with open_store(str(path), mode="write", now=NOW, made_by="ringtrue 0.1.0") as store:
        chain = store.chain
    with open_store(f"sqlite:///{path}", mode="write", now="2027-01-01T00:00:00.000000Z", made_by="other") as store:
        assert store.chain == chain
        assert store.place == str(path)
    row = sqlite3.connect(path).execute("SELECT schema_version, chain, made_by, made_at FROM store_info").fetchall()
    assert row == [(1, chain, "ringtrue 0.1.0", NOW)]


def test_two_stores_write_two_chains(tmp_path: Path) -> None:
    """Two stores made at the same moment have chains of different names."""
    chains = set()
    for name in ("a.db", "b.db"):
        with open_store(str(tmp_path / name), mode="write", now=NOW) as store:
            chains.add(store.chain)
    assert len(chains) == 2


@pytest.mark.parametrize("mode", ["read", "write"])
def test_what_is_not_ours_is_refused_and_untouched(tmp_path: Path, mode: str) -> None:
    """Text, another program's database, a folder, a newer store: a sentence each, not a byte changed."""
    (tmp_path / "notes.txt").write_text("SQLite is mentioned here")
    other = sqlite3.connect(tmp_path / "other.db")
    other.execute("CREATE TABLE parts (id)")
    other.commit()
    other.close()
    alike = sqlite3.connect(tmp_path / "alike.db")
    alike.execute("CREATE TABLE store_info (schema_version)")
    alike.commit()
    alike.close()
    newer = sqlite3.connect(tmp_path / "newer.db")
    newer.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    newer.execute("CREATE TABLE store_info (schema_version)")
    newer.execute("INSERT INTO store_info VALUES (2)")
    newer.commit()
    newer.close()
    before = snapshot(tmp_path)
    assert "is not a ringtrue store" in refused(str(tmp_path / "notes.txt"), mode)
    assert "an SQLite file, but not a ringtrue store" in refused(str(tmp_path / "other.db"), mode)
    assert "an SQLite file, but not a ringtrue store" in refused(str(tmp_path / "alike.db"), mode)
    assert "schema 2, known here up to 1. Update ringtrue." in refused(str(tmp_path / "newer.db"), mode)
    assert "is a folder, not a store" in refused(str(tmp_path), mode)
    assert snapshot(tmp_path) == before


@pytest.mark.parametrize(
    ("url", "clause"),
    [
        ("mysql://host/plant", "not in 'mysql'"),
        ("oracle://x", "not in 'oracle'"),
        ("postgresql://host/plant", "PostgreSQL"),
        ("postgresql+psycopg://host/plant", "PostgreSQL"),
        ("sqlite://", "in memory"),
        ("sqlite:///:memory:", "in memory"),
        ("http://[bad", "ringtrue.db|URL|not in 'http'"),
        ("", "empty"),
        ("  ", "empty"),
        ("a\0b", "empty or not a path"),
    ],
)
@pytest.mark.parametrize("mode", ["read", "write"])
def test_only_a_path_or_sqlite_is_taken(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, url: str, clause: str, mode: str
) -> None:
    """Other URLs are refused with what would do, and nothing is made of their text."""
    monkeypatch.chdir(tmp_path)
    sentence = refused(url, mode)
    assert any(one in sentence for one in clause.split("|")), sentence
    assert list(tmp_path.iterdir()) == []


def test_an_empty_or_half_made_store_is_made_whole(tmp_path: Path) -> None:
    """A file without tables, as a killed creation leaves it, is no store to a reader and a fresh one to a writer."""
    (tmp_path / "empty.db").touch()
    half = sqlite3.connect(tmp_path / "half.db")
    half.execute("PRAGMA journal_mode=WAL")
    half.close()
    for name in ("empty.db", "half.db"):
        assert "there is no store" in refused(str(tmp_path / name))
        with new_store(tmp_path / name) as store:
            screen(store)
            assert verify(store).sound


@pytest.mark.parametrize("mode", ["read", "write"])
def test_an_unfinished_change_of_another_program_is_left_alone(tmp_path: Path, mode: str) -> None:
    """A database whose writer died in the middle is not repaired by looking at it, nor called read-only."""
    raw = sqlite3.connect(tmp_path / "other.db", isolation_level=None)
    raw.execute("CREATE TABLE parts (id)")
    raw.execute("PRAGMA cache_size=1")
    raw.execute("BEGIN IMMEDIATE")
    for _ in range(20):
        raw.execute("INSERT INTO parts VALUES (zeroblob(3000))")
    for name in ("other.db", "other.db-journal"):
        shutil.copy(tmp_path / name, tmp_path / f"left-{name}")
    raw.rollback()
    raw.close()
    before = snapshot(tmp_path)
    assert "was never finished (left-other.db-journal lies beside it)" in refused(str(tmp_path / "left-other.db"), mode)
    assert snapshot(tmp_path) == before


def test_a_new_store_is_one_file_from_the_start(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The name appears only with the whole store behind it; nothing else stays; without hard links it works as well."""
    copy = tmp_path / "copy" / "ringtrue.db"
    copy.parent.mkdir()
    link = os.link

    def watched(made: Path, name: Path) -> None:
        assert not name.exists()
        shutil.copy(made, copy)
        link(made, name)

    def refusing(made: Path, name: Path) -> None:
        raise PermissionError

    for name, instead in (("a.db", watched), ("b.db", refusing)):
        monkeypatch.setattr("os.link", instead)
        with open_store(str(tmp_path / name), mode="write", now=NOW) as store:
            assert verify(store).sound
    assert verify_at(str(copy), now=NOW).sound
    assert sorted(one.name for one in tmp_path.iterdir()) == ["a.db", "b.db", "copy"]


def test_of_two_creators_the_first_stays(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A store that another process made in the meantime is opened, not overwritten."""
    path = tmp_path / "s.db"
    link = os.link

    def late(made: Path, name: Path) -> None:
        monkeypatch.setattr("os.link", link)
        with new_store(path) as first:
            screen(first)
        link(made, name)

    monkeypatch.setattr("os.link", late)
    with open_store(str(path), mode="write", now=NOW) as store:
        assert len(store.history("FH-0001")) == 1
    assert [one.name for one in tmp_path.iterdir()] == ["s.db"]


def test_a_store_that_does_not_say_its_schema_is_refused(tmp_path: Path) -> None:
    """A store whose own row is gone is refused in a sentence, not opened half."""
    path = screened(tmp_path)
    raw = sqlite3.connect(path)
    raw.execute("DROP TRIGGER guard_store_info_delete")
    raw.execute("DELETE FROM store_info")
    raw.commit()
    raw.close()
    assert "does not say its schema" in refused(str(path), "write")


def test_a_folder_that_cannot_be_made_is_station_trouble(tmp_path: Path) -> None:
    """Where no folder can be made, the station cannot store: exit 3, with the place."""
    (tmp_path / "file").write_text("x")
    for path in (tmp_path / "file" / "ringtrue.db", Path("/proc/nowhere/ringtrue.db")):
        with pytest.raises(StationError) as caught:
            open_store(str(path), mode="write", now=NOW)
        assert caught.value.exit_code == 3
        assert str(path) in caught.value.sentence()


def test_a_torn_header_is_a_sentence(tmp_path: Path) -> None:
    """A file that begins like a database and is none ends as this house's error in both modes."""
    path = tmp_path / "torn.db"
    path.write_bytes(b"SQLite format 3\0" + bytes(range(256)) * 4)
    for mode in ("read", "write"):
        with pytest.raises((SetupError, StationError)):
            open_store(str(path), mode=mode, now=NOW)  # type: ignore[arg-type]


WRITER = {
    "journal_mode": "wal",
    "synchronous": 2,  # FULL
    "foreign_keys": 1,
    "recursive_triggers": 1,
    "trusted_schema": 0,
    "busy_timeout": 5000,
    "query_only": 0,
}


def test_the_writer_flushes_every_commit(tmp_path: Path) -> None:
    """Read back from the live connection: write-ahead log, full flush, guards on, and every table strict."""
    with new_store(tmp_path / "s.db") as store, store.transaction() as connection:
        found = {name: connection.exec_driver_sql(f"PRAGMA {name}").scalar_one() for name in WRITER}
        strict = {
            row.name: row.strict for row in connection.exec_driver_sql("PRAGMA table_list") if row.schema == "main"
        }
    assert found == WRITER
    assert {name for name, is_strict in strict.items() if not is_strict} <= {"sqlite_schema", "sqlite_sequence"}
    assert len(strict) == 10


def test_the_reader_cannot_write(tmp_path: Path) -> None:
    """The read-only connection is read-only twice over, and says so as station trouble."""
    path = screened(tmp_path)
    before = path.read_bytes()
    with open_store(str(path), mode="read", now=NOW) as store:
        with store.transaction() as connection:
            assert connection.exec_driver_sql("PRAGMA query_only").scalar_one() == 1
            assert connection.exec_driver_sql("PRAGMA trusted_schema").scalar_one() == 0
        with pytest.raises(StationError, match="may not be written"):
            screen(store, "FH-0900")
    assert path.read_bytes() == before
