"""Tampering: whatever is edited, deleted, moved or put in behind the store's back is found and named."""

from __future__ import annotations

import shutil
import sqlite3
import zlib
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sqlalchemy.dialects import sqlite as sqlite_dialect
from store_examples import NOW, make_opening, new_store, screen, screened

from harness.store import Finding, Soundness, open_store, verify, verify_at
from harness.store.canonical import canonical_json, hash_of, parse_document
from harness.store.guards import guards
from harness.store.tables import metadata

Edit = Callable[[sqlite3.Connection], object]


@pytest.fixture(scope="module")
def template(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store with eight records, made once and copied for each test."""
    return screened(tmp_path_factory.mktemp("template"))


@pytest.fixture
def path(template: Path, tmp_path: Path) -> Path:
    """This test's own copy."""
    return Path(shutil.copy(template, tmp_path / "ringtrue.db"))


def tamper(path: Path, *edits: str | Edit, rearm: bool = True) -> None:
    """Edit as someone would who holds the file: guards off, foreign keys unchecked, guards back."""
    raw = sqlite3.connect(path, isolation_level=None)
    for name in guards():
        raw.execute(f"DROP TRIGGER {name}")
    for edit in edits:
        raw.execute(edit) if isinstance(edit, str) else edit(raw)
    if rearm:
        for text in guards().values():
            raw.execute(text)
    raw.close()


def names(table: str) -> list[str]:
    return [column.name for column in metadata.tables[table].columns]


def soundness(path: Path) -> Soundness:
    with open_store(str(path), mode="read", now=NOW) as store:
        return verify(store)


def findings(path: Path) -> tuple[Finding, ...]:
    found = soundness(path)
    assert found.sound is (not found.findings)
    return found.findings


def kinds(path: Path) -> set[str]:
    return {one.kind for one in findings(path)}


def rehash(raw: sqlite3.Connection, seq: int, change: Callable[[dict], object]) -> None:
    """Change a document and its hash, as one who knows the format would, but not the records after it."""
    (document,) = raw.execute("SELECT document FROM record WHERE seq = ?", (seq,)).fetchone()
    found = parse_document(document)
    change(found)
    text = canonical_json(found)
    raw.execute("UPDATE record SET document = ?, hash = ? WHERE seq = ?", (text, hash_of(text), seq))


# ── sound ────────────────────────────────────────────────────────────────────────────────────


def test_an_untouched_store_is_sound(path: Path) -> None:
    """No finding, one chain with its head, progress to the end; tampering that undoes itself leaves it sound."""
    steps: list[tuple[int, int]] = []
    with open_store(str(path), mode="read", now=NOW) as store:
        found = verify(store, lambda done, total: steps.append((done, total)))
        head = store.history("FH-0003")[-1].hash
        assert [(one.chain, one.records, one.head, one.anchored_to) for one in found.chains] == [
            (store.chain, 8, head, None)
        ]
    assert (found.sound, found.findings, found.open_attempts) == (True, (), 0)
    assert steps[-1] == (8, 8)
    tamper(path)
    assert soundness(path) == found


def test_an_empty_store_is_sound(tmp_path: Path) -> None:
    """A store without records has a chain without a head."""
    with new_store(tmp_path / "s.db") as store:
        found = verify(store)
    assert found.sound
    assert [(one.records, one.head) for one in found.chains] == [(0, None)]


def test_pages_do_not_matter(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The same answer record by record as all at once."""
    tamper(path, "DELETE FROM record WHERE seq = 4", "UPDATE record SET verdict = 'pass' WHERE seq = 6")
    whole = findings(path)
    monkeypatch.setattr("harness.store.verifying._PAGE", 1)
    assert sorted(map(str, findings(path))) == sorted(map(str, whole))


# ── guards ───────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("table", [table.name for table in metadata.sorted_tables])
@pytest.mark.parametrize("verb", ["UPDATE {t} SET {c} = {c}", "DELETE FROM {t}", "REPLACE", "OR IGNORE"])
@pytest.mark.parametrize("recursive", ["ON", "OFF"])
def test_rows_are_only_added(path: Path, table: str, verb: str, recursive: str) -> None:
    """Update, delete and replace are refused on every table, from any connection, whatever its settings."""
    raw = sqlite3.connect(path)
    raw.execute(f"PRAGMA recursive_triggers={recursive}")
    before = raw.execute(f"SELECT * FROM {table}").fetchall()
    if verb in ("REPLACE", "OR IGNORE"):
        how = f"INSERT {'OR REPLACE' if verb == 'REPLACE' else verb} INTO {table} SELECT * FROM {table} LIMIT 1"
    else:
        how = verb.format(t=table, c=metadata.tables[table].columns.keys()[-1])
    with pytest.raises(sqlite3.IntegrityError, match="only ever added"):
        raw.execute(how)
    assert raw.execute(f"SELECT * FROM {table}").fetchall() == before
    raw.close()


def test_a_second_row_of_the_same_number_is_refused(path: Path) -> None:
    """Replacing a record by its number in the chain, under a new id, is refused as well."""
    raw = sqlite3.connect(path)
    columns = [name for name in names("record") if name != "id"]
    listed = ", ".join(columns)
    with pytest.raises(sqlite3.IntegrityError, match="only ever added"):
        raw.execute(f"INSERT OR REPLACE INTO record ({listed}) SELECT {listed} FROM record WHERE seq = 3")
    raw.close()


@pytest.mark.parametrize("name", sorted(guards()))
def test_a_dropped_guard_is_found(path: Path, name: str) -> None:
    """Each guard is missed when it is gone."""
    raw = sqlite3.connect(path)
    raw.execute(f"DROP TRIGGER {name}")
    raw.commit()
    raw.close()
    found = findings(path)
    assert [one.kind for one in found] == ["schema"]
    assert name in found[0].text


def test_a_changed_schema_is_found(path: Path) -> None:
    """A guard that does nothing, a trigger of someone else's, a table without STRICT, a table with a column more."""
    head = "CREATE TRIGGER {n} BEFORE DELETE ON lot BEGIN SELECT 1; END"
    tamper(path, lambda raw: raw.execute(head.format(n="helpful")))
    assert [one.kind for one in findings(path)] == ["schema"]
    tamper(path, "DROP TRIGGER helpful")
    assert findings(path) == ()
    tamper(path, lambda raw: raw.execute(head.format(n="guard_lot_delete")), rearm=False)
    assert {one.kind for one in findings(path)} == {"schema"}
    raw = sqlite3.connect(path)
    raw.execute("DROP TRIGGER guard_lot_delete")
    for text in guards().values():
        raw.execute(text)
    raw.execute("ALTER TABLE reason ADD COLUMN extra TEXT")
    raw.commit()
    raw.close()
    found = findings(path)
    assert [one.text for one in found if one.kind == "schema"] == ["table reason is not as it was made"]


# ── edits ────────────────────────────────────────────────────────────────────────────────────

TABLES_REPEATING = ("record", "value", "reason", "attempt", "lot", "limit_file", "sweep")
COLUMNS = [(name, column) for name in TABLES_REPEATING for column in names(name)]


@pytest.mark.parametrize(("table", "column"), COLUMNS)
def test_every_edited_column_is_found(path: Path, table: str, column: str) -> None:
    """One changed cell, in any column of any table that holds evidence."""
    zeros = f"x'01{zlib.compress(bytes(24 * 401), 3).hex()}'"
    by_name = {"verdict": "'pass'", "final": "0", "blob": zeros}
    by_type = {"INTEGER": f"coalesce({column}, 0) + 1000", "REAL": "1.25", "TEXT": f"coalesce({column}, '') || 'x'"}
    kind = metadata.tables[table].columns[column].type.compile(sqlite_dialect.dialect())
    other = by_name.get(column) or by_type[kind]
    where = {"value": "record_id = 3 AND characteristic = 'fs'", "reason": "record_id = 3"}.get(table, "rowid = 1")
    tamper(path, f"UPDATE {table} SET {column} = {other} WHERE {where}")
    assert findings(path), f"{table}.{column} was changed unseen"


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_any_edited_document_is_found(template: Path, tmp_path: Path, data: st.DataObject) -> None:
    """Any one character of any document changed, cut out or doubled: that record is named."""
    path = shutil.copy(template, tmp_path / "edited.db")
    seq = data.draw(st.integers(1, 8))
    raw = sqlite3.connect(path)
    document, serial = raw.execute("SELECT document, serial FROM record WHERE seq = ?", (seq,)).fetchone()
    raw.close()
    at = data.draw(st.integers(0, len(document) - 1))
    put = data.draw(st.sampled_from(["", document[at] * 2, "7", "é", "\x00"]))
    edited = document[:at] + put + document[at + 1 :]
    if edited == document:
        return
    tamper(path, lambda raw: raw.execute("UPDATE record SET document = ? WHERE seq = ?", (edited, seq)))
    found = findings(path)
    assert [(one.kind, one.seq, one.serial) for one in found] == [("changed", seq, serial)]


def test_text_that_is_not_utf8_is_found(path: Path) -> None:
    """Bytes that are no text in a document or a name are findings, not a broken check."""
    tamper(path, "UPDATE record SET document = CAST(x'7bff7d' AS TEXT) WHERE seq = 2")
    assert [(one.kind, one.seq) for one in findings(path)] == [("changed", 2)]
    tamper(path, "UPDATE attempt SET plan = CAST(x'ff' AS TEXT) WHERE id = 3")
    assert {(one.kind, one.seq) for one in findings(path)} == {("changed", 2), ("changed", 3)}


@pytest.mark.parametrize("seq", [1, 3, 7])
def test_a_rehashed_document_is_found(path: Path, seq: int) -> None:
    """A changed document with a hash that fits it no longer fits the record after it."""
    tamper(path, lambda raw: rehash(raw, seq, lambda found: found.update(software={})))
    assert [(one.kind, one.seq) for one in findings(path)] == [("changed", seq)]


def test_a_foreign_format_is_unreadable(path: Path) -> None:
    """A document that fits its hash and cannot be read is its own kind of finding."""
    tamper(path, lambda raw: rehash(raw, 8, lambda found: found.update(format=2)))
    assert [(one.kind, one.seq) for one in findings(path)] == [("unreadable", 8)]
    tamper(path, lambda raw: raw.execute("UPDATE record SET document = '{', hash = ? WHERE seq = 8", (hash_of("{"),)))
    assert [(one.kind, one.seq) for one in findings(path)] == [("unreadable", 8)]


@pytest.mark.parametrize("key", ["judgement", "identity", "fit", "sweep"])
def test_a_rehashed_document_without_a_part_is_unreadable(path: Path, key: str) -> None:
    """A document of the right format with the wrong insides ends as a finding."""
    tamper(path, lambda raw: rehash(raw, 8, lambda found: found.update({key: 7})))
    assert [(one.kind, one.seq) for one in findings(path)] == [("unreadable", 8)]


# ── rows gone, moved, put in ─────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("seq", range(1, 8))
@pytest.mark.parametrize("thorough", [False, True])
def test_a_deleted_record_is_missing(path: Path, seq: int, thorough: bool) -> None:
    """Also when all that belongs to it went along."""
    whole = [f"DELETE FROM {name} WHERE record_id = {seq}" for name in ("value", "reason")] if thorough else []
    drop = f"DELETE FROM sweep WHERE sha256 = (SELECT sweep_sha256 FROM record WHERE seq = {seq})"
    tamper(path, *whole, *([drop] if thorough else []), f"DELETE FROM record WHERE seq = {seq}")
    found = findings(path)
    assert ("missing", seq) in {(one.kind, one.seq) for one in found}
    if thorough:
        assert len(found) == 1


def test_a_closed_gap_is_missing(path: Path) -> None:
    """Two records deleted and the rest renumbered to hide it: one finding that says how many and where."""
    tamper(
        path,
        *(f"DELETE FROM {name} WHERE record_id IN (3, 4)" for name in ("value", "reason")),
        "DELETE FROM sweep WHERE sha256 IN (SELECT sweep_sha256 FROM record WHERE seq IN (3, 4))",
        "DELETE FROM record WHERE seq IN (3, 4)",
        *(f"UPDATE record SET seq = seq - 2 WHERE seq = {seq}" for seq in range(5, 9)),
    )
    assert [(one.kind, one.seq) for one in findings(path)] == [("missing", 3)]


@pytest.mark.parametrize("last", [1, 3, 8])
@pytest.mark.parametrize("thorough", [False, True])
def test_a_cut_tail_is_found(path: Path, last: int, thorough: bool) -> None:
    """The newest records deleted, with all that belongs to them if thorough: the store knows how many there were."""
    after = 8 - last
    whole = [f"DELETE FROM {name} WHERE record_id > {after}" for name in ("value", "reason")] if thorough else []
    drop = f"DELETE FROM sweep WHERE sha256 IN (SELECT sweep_sha256 FROM record WHERE seq > {after})"
    tamper(path, *whole, *([drop] if thorough else []), f"DELETE FROM record WHERE seq > {after}")
    found = findings(path)
    assert ("tail-cut", after + 1) in {(one.kind, one.seq) for one in found}
    assert thorough is (len(found) == 1)


@pytest.mark.parametrize(("a", "b"), [(3, 4), (2, 7), (1, 8), (7, 8)])
def test_swapped_rows_are_reordered(path: Path, a: int, b: int) -> None:
    """Two records exchange their numbers: found as moved, nothing called missing."""
    moves = [(a, 100), (b, a), (100, b)]
    tamper(path, *(f"UPDATE record SET seq = {new} WHERE seq = {old}" for old, new in moves))
    found = findings(path)
    assert {one.kind for one in found} <= {"reordered", "changed"}
    assert {one.seq for one in found if one.kind == "reordered"} >= ({a, b} - {8})


@pytest.mark.parametrize("pair", [(3, 4), (2, 8)])
def test_swapped_contents_are_found(path: Path, pair: tuple[int, int]) -> None:
    """Two rows exchange documents and hashes but keep their numbers and values."""
    a, b = pair

    def swap(raw: sqlite3.Connection) -> None:
        rows = {s: raw.execute("SELECT document, hash FROM record WHERE seq = ?", (s,)).fetchone() for s in pair}
        raw.execute("UPDATE record SET document = ?, hash = ? WHERE seq = ?", (*rows[b], a))
        raw.execute("UPDATE record SET document = ?, hash = ? WHERE seq = ?", (*rows[a], b))

    tamper(path, swap)
    found = findings(path)
    assert any(one.kind == "reordered" for one in found)
    assert {one.seq for one in found} >= {a, b}


def put_in(raw: sqlite3.Connection, copied: int, seq: int) -> None:
    """A copy of a record as record ``seq``, with an attempt of its own."""
    for name, instead in {
        "attempt": {"id": "9", "number": "9"},
        "record": {"id": "9", "seq": str(seq), "attempt_id": "9", "number": "9"},
    }.items():
        cells = ", ".join(instead.get(column, column) for column in names(name))
        where = "id" if name == "attempt" else "seq"
        raw.execute(f"INSERT INTO {name} SELECT {cells} FROM {name} WHERE {where} = {copied}")


@pytest.mark.parametrize("seq", [0, -5, 9, 1000])
def test_a_copied_record_was_put_in(path: Path, seq: int) -> None:
    """A copy of a genuine record at the front or at the end is called inserted."""
    tamper(path, lambda raw: put_in(raw, 3, seq))
    assert "inserted" in kinds(path)


def test_a_record_put_in_between_is_one_finding_of_its_kind(path: Path) -> None:
    """A copy in the middle with the rest moved up: the copy is inserted; the moved ones are not each called missing."""
    moves = [f"UPDATE record SET seq = seq + 1 WHERE seq = {seq}" for seq in range(8, 4, -1)]
    tamper(path, *moves, lambda raw: put_in(raw, 2, 5))
    found = findings(path)
    assert [one.seq for one in found if one.kind == "inserted"] == [5]
    assert {one.kind for one in found} <= {"inserted", "changed"}


def test_a_record_of_another_chain_is_found(path: Path) -> None:
    """A record moved to another chain's name is found by its document; a store renamed disowns its chain."""
    tamper(path, "UPDATE record SET chain = 'other' WHERE seq = 8")
    assert "inserted" in kinds(path)
    tamper(path, "UPDATE record SET chain = (SELECT chain FROM store_info)")
    assert findings(path) == ()
    tamper(path, "UPDATE store_info SET chain = 'other'")
    assert kinds(path) == {"inserted"}


@pytest.mark.parametrize("table", ["value", "reason", "sweep", "attempt", "lot", "limit_file"])
def test_deleted_rows_beside_the_records_are_found(path: Path, table: str) -> None:
    """Rows that documents speak of and that are gone."""
    where = "rowid = 4" if table in ("sweep", "attempt") else "1"
    tamper(path, f"DELETE FROM {table} WHERE {where}")
    assert kinds(path) <= {"missing", "changed"}
    assert findings(path)


@pytest.mark.parametrize(
    "row",
    [
        "value VALUES (99, 'fs', 1.0, NULL, 'Hz')",
        "value VALUES (3, 'qm', 1.0, NULL, '1')",
        "reason VALUES (99, 0, 'x', NULL, NULL, NULL, 'x')",
        "reason VALUES (3, 1, 'x', NULL, NULL, NULL, 'x')",
        "sweep VALUES ('ab', 0, 1, x'01')",
        "lot VALUES ('L-9', 'MD-1650', 'no such', '', '')",
        "limit_file VALUES ('ab', 'MD-1650', 'Z', 'text')",
        "attempt SELECT 99, 'L-9', serial, identity, element, 9, plan, operator, part_number, limits_sha256, at "
        "FROM attempt WHERE id = 1",
    ],
)
def test_orphan_rows_are_found(path: Path, row: str) -> None:
    """Rows that belong to no record, lot or limit file, or that a document does not speak of."""
    tamper(path, f"INSERT INTO {row}")
    assert findings(path)


def test_a_deleted_open_attempt_is_found(tmp_path: Path) -> None:
    """An opened attempt that someone wiped out before it became a record is missed, at the end or between."""
    path = tmp_path / "s.db"
    with new_store(path) as store:
        screen(store)
        store.open_attempt(make_opening("FH-0002"))
        assert verify(store).sound
    for table, kind in (("attempt WHERE id = 2", "tail-cut"),):
        tamper(path, f"DELETE FROM {table}")
        assert [one.kind for one in findings(path)] == [kind]
    with open_store(str(path), mode="write", now=NOW) as store:
        store.open_attempt(make_opening("FH-0003"))
    assert [one.kind for one in findings(path)] == ["missing"]


def test_a_damaged_file_is_unreadable(path: Path) -> None:
    """Pages of the file overwritten: a finding or two, never a traceback, whichever pages they are."""
    whole = path.read_bytes()
    size = 4096
    seen = set()
    for page in range(1, len(whole) // size):
        path.write_bytes(whole[: page * size] + b"\xa5" * size + whole[(page + 1) * size :])
        found = verify_at(str(path), now=NOW).findings
        assert {one.kind for one in found} <= {"unreadable", "schema", "missing", "changed", "tail-cut", "inserted"}
        seen |= {one.kind for one in found}
    assert "unreadable" in seen


def test_every_kind_is_one_of_the_stated(path: Path) -> None:
    """All seven kinds and no other come out of the tampering here."""
    stated = {"changed", "missing", "inserted", "reordered", "tail-cut", "schema", "unreadable"}
    tamper(path, "DELETE FROM record WHERE seq IN (3, 8)", "UPDATE record SET hash = 'x' WHERE seq = 5", rearm=False)
    assert kinds(path) <= stated
    assert all(one.text and not one.text.endswith("\n") for one in findings(path))
    assert len(set(findings(path))) == len(findings(path))
