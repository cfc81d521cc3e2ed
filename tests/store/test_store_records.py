"""Writing and reading back: what goes in comes out, in order, and what does not fit is refused with nothing written."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from sqlalchemy import text
from store_examples import NOW, bits, make_limits, make_opening, make_record, make_sweep, new_store, screen, screened

from harness.errors import SetupError, StationError, UnsoundError
from harness.records import Judgement, Reason, Value, Verdict
from harness.store import AttemptId, Store, open_store, verify
from harness.store.canonical import NO_HASH

LOT = "L-0301"


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    """A new store with the example lot open."""
    with new_store(tmp_path / "ringtrue.db") as opened:
        yield opened


def counts(store: Store) -> dict[str, int]:
    tables = ("lot", "limit_file", "attempt", "record", "sweep", "value", "reason")
    with store.transaction() as connection:
        return {name: connection.execute(text(f"SELECT count(*) FROM {name}")).scalar_one() for name in tables}


# ── records ──────────────────────────────────────────────────────────────────────────────────


def test_a_record_comes_back_as_it_was(store: Store) -> None:
    """Through the store and back to the last bit, also after the store was closed."""
    records = [
        make_record(make_opening("FH-0001")),
        make_record(make_opening("FH-0001", 2), sweep=None, fit=None, final=False),
        make_record(make_opening("FH-0001", 3), sweep=make_sweep(3, points=24)),
    ]
    written = [store.write_record(record, store.open_attempt(record.opening)) for record in records]
    store.close()
    with open_store(store.place, mode="read", now=NOW) as again:
        found = again.history("FH-0001")
    assert [bits(one.record) for one in found] == [bits(record) for record in records]
    assert [(one.chain, one.seq, one.hash, one.record_id) for one in found] == [
        (one.chain, one.seq, one.hash, one.record_id) for one in written
    ]
    assert [one.points for one in found] == [401, 0, 24]
    assert {one.revision for one in found} == {"C"}


def test_hashes_chain(store: Store) -> None:
    """Numbers rise from 1 without gaps, and each record names the hash before it."""
    written = [screen(store, f"FH-{n:04d}", seed=n) for n in range(1, 5)]
    assert [one.seq for one in written] == [1, 2, 3, 4]
    with store.transaction() as connection:
        rows = connection.execute(text("SELECT prev_hash, hash FROM record ORDER BY seq")).all()
    assert [row.prev_hash for row in rows] == [NO_HASH, *(one.hash for one in written[:-1])]
    assert [row.hash for row in rows] == [one.hash for one in written]


def test_the_same_sweep_is_kept_once(store: Store) -> None:
    """Two records of one sweep share its row, and both read it back."""
    screen(store, "FH-0001", seed=5)
    screen(store, "FH-0002", seed=5)
    assert counts(store)["sweep"] == 1
    assert store.history("FH-0002")[0].points == 401
    assert verify(store).sound


def test_a_record_needs_its_attempt(store: Store) -> None:
    """No record without an opened attempt, none twice, none for another opening; nothing is left of the try."""
    attempt = store.open_attempt(make_opening())
    before = counts(store)
    with pytest.raises(ValueError, match="never opened"):
        store.write_record(make_record(), AttemptId(99))
    with pytest.raises(ValueError, match="not the one"):
        store.write_record(make_record(make_opening("FH-0002")), attempt)
    assert counts(store) == before
    store.write_record(make_record(), attempt)
    with pytest.raises(ValueError, match="has its record already"):
        store.write_record(make_record(), attempt)
    assert counts(store)["record"] == 1


def test_a_record_that_cannot_be_kept_leaves_nothing(store: Store) -> None:
    """A NaN among the values is refused, and neither sweep nor half a record stays behind."""
    attempt = store.open_attempt(make_opening())
    before = counts(store)
    judgement = Judgement(Verdict.PASS, "A", (), {"fs": Value(float("nan"), None, "Hz")})
    with pytest.raises(ValueError, match="cannot be kept"):
        store.write_record(make_record(judgement=judgement), attempt)
    assert counts(store) == before
    store.write_record(make_record(), attempt)
    assert verify(store).sound


def test_attempts_count_from_one(store: Store) -> None:
    """The next number counts attempts at one part's element in one lot, recorded or not; another number is refused."""
    store.open_lot("L-0302", make_limits(), "operator 3", NOW)
    assert store.next_number(LOT, "FH-0001") == 1
    store.open_attempt(make_opening())
    assert store.next_number(LOT, "FH-0001") == 2
    assert store.next_number(LOT, "FH-0001", element=2) == 1
    assert store.next_number("L-0302", "FH-0001") == 1
    for number in (1, 3):
        with pytest.raises(ValueError, match="2 is next"):
            store.open_attempt(make_opening(number=number))
    store.open_attempt(make_opening(element=2))
    store.open_attempt(make_opening(number=2))


@pytest.mark.parametrize("serial", ["", "  ", "\udce9", "A\0B"])
def test_a_serial_that_is_no_text_is_refused(store: Store, serial: str) -> None:
    """Half characters, zeros and blanks are a sentence, and nothing is opened."""
    with pytest.raises(SetupError, match="the serial"):
        store.open_attempt(make_opening(serial))
    assert counts(store)["attempt"] == 0


def test_an_attempt_needs_its_lot_under_its_limits(store: Store) -> None:
    """An attempt in a lot that is not open, or under other limits than the lot's, is a bug and is refused."""
    for wrong in (make_opening(lot="L-9"), make_opening(limits_sha256="ab" * 32), make_opening(part_number="MR-113")):
        with pytest.raises(ValueError, match="not open under the limits"):
            store.open_attempt(wrong)


# ── lots ─────────────────────────────────────────────────────────────────────────────────────


def test_a_lot_is_continued_under_its_limits(store: Store) -> None:
    """Opened again under the same limits the lot goes on; under another revision it is refused, naming both."""
    screen(store)
    info = store.open_lot(LOT, make_limits(), "operator 5", "2026-03-03T08:00:00.000000Z")
    assert (info.operator, info.opened_at, info.records) == ("operator 3", NOW, 1)
    before = counts(store)
    old, new = make_limits().sha256[:12], make_limits("D").sha256[:12]
    with pytest.raises(SetupError) as caught:
        store.open_lot(LOT, make_limits("D"), "operator 3", NOW)
    for word in (LOT, f"revision C ({old})", f"revision D ({new})", "open a new lot"):
        assert word in caught.value.sentence()
    assert counts(store) == before


def test_limits_are_kept_once_as_text(store: Store) -> None:
    """The limit file's text is kept under its hash, once for all lots; a hash that is not the text's is a bug."""
    store.open_lot("L-0302", make_limits(), "operator 3", NOW)
    store.open_lot("L-0303", make_limits("D"), "operator 3", NOW)
    assert counts(store)["limit_file"] == 2
    assert store.limits_text(make_limits("D").sha256) == make_limits("D").text
    with pytest.raises(SetupError, match="no lot in this store"):
        store.limits_text("ab" * 32)
    with pytest.raises(ValueError, match="SHA-256"):
        store.open_lot("L-0304", replace(make_limits("E"), sha256="ab" * 32), "operator 3", NOW)


def test_lots_are_listed_with_their_counts(store: Store) -> None:
    """Every lot with its limits and how many records it has, in the order opened."""
    store.open_lot("A-1", make_limits("D"), "", "2026-03-04T08:00:00.000000Z")
    screen(store, "FH-0001")
    screen(store, "FH-0002")
    assert [(one.lot, one.part_number, one.revision, one.records) for one in store.lots()] == [
        (LOT, "MD-1650", "C", 2),
        ("A-1", "MD-1650", "D", 0),
    ]


def test_an_unknown_name_gets_the_near_ones(store: Store) -> None:
    """A slip in a lot or serial is answered with what was probably meant."""
    with pytest.raises(SetupError, match="The store holds no serial yet"):
        store.history("FH-0001")
    for n in range(1, 5):
        screen(store, f"FH-{n:04d}", seed=n)
    for call in (store.lot_info, store.lot_summaries, store.records_of_lot):
        with pytest.raises(SetupError, match=r"there is no lot 'L-0310' in this store\. Did you mean 'L-0301'"):
            call("L-0310")
    with pytest.raises(SetupError, match="Did you mean 'FH-000"):
        store.history("FH-00O3")
    with pytest.raises(SetupError, match=r"there is no serial 'zzz' in this store\.$"):
        store.history("zzz")


# ── reading ──────────────────────────────────────────────────────────────────────────────────


def test_a_lot_reads_in_the_order_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Over more than one page, with sweeps or without, and while the same store writes in between."""
    monkeypatch.setattr("harness.store.store._PAGE", 3)
    with new_store(tmp_path / "s.db") as store:
        for n in range(1, 8):
            screen(store, f"FH-{n:04d}", seed=n)
        found = []
        for one in store.records_of_lot(LOT):
            found.append(one.seq)
            if one.seq == 2:
                screen(store, "FH-0100", seed=100)
        assert found == [1, 2, 3, 4, 5, 6, 7, 8]
        bare = list(store.records_of_lot(LOT, sweeps=False))
        assert all(one.record.sweep is None and one.points == 401 for one in bare)
        assert bits(bare[0].record) == bits(replace(make_record(make_opening("FH-0001")), sweep=None))


def test_summaries_say_what_the_documents_say(tmp_path: Path) -> None:
    """What statistics read from the repeated columns equals what the documents hold."""
    with open_store(str(screened(tmp_path)), mode="read", now=NOW) as store:
        found = store.lot_summaries(LOT)
        for short, one in zip(found, store.records_of_lot(LOT, sweeps=False), strict=True):
            record = one.record
            opening, judgement = record.opening, record.judgement
            assert (short.record_id, short.seq, short.at, short.final) == (
                one.record_id,
                one.seq,
                record.at,
                record.final,
            )
            assert (short.serial, short.element, short.number) == (opening.serial, opening.element, opening.number)
            assert (short.verdict, short.grade) == (judgement.verdict, judgement.grade)
            assert short.reasons == tuple((reason.code, reason.characteristic) for reason in judgement.reasons)
            assert short.values == {name: (value.value, value.u) for name, value in judgement.values.items()}
    assert len(found) == 8


def test_summaries_keep_to_their_lot(store: Store) -> None:
    """Another lot's records, values and reasons do not show."""
    store.open_lot("L-0302", make_limits(), "operator 3", NOW)
    opening = make_opening("FH-0001", lot="L-0302")
    store.write_record(make_record(opening), store.open_attempt(opening))
    assert store.lot_summaries(LOT) == ()
    assert len(store.lot_summaries("L-0302")) == 1


def test_the_standing_is_the_last_record(store: Store) -> None:
    """None before the first record, then the last attempt's verdict, per element."""
    assert store.standing(LOT, "FH-0001") is None
    unsure = Judgement(Verdict.NONE, None, (Reason("open", None, None, None, "no contact"),), {})
    screen(store, judgement=unsure, final=False)
    first = store.standing(LOT, "FH-0001")
    assert first is not None
    assert (first.verdict, first.final, first.number) == (Verdict.NONE, False, 1)
    screen(store, number=2, judgement=Judgement(Verdict.PASS, "B", (), {}))
    last = store.standing(LOT, "FH-0001")
    assert last is not None
    assert (last.verdict, last.grade, last.final, last.number) == (Verdict.PASS, "B", True, 2)
    assert store.standing(LOT, "FH-0001", element=2) is None


def test_a_changed_record_is_not_read_as_evidence(tmp_path: Path) -> None:
    """Reading a record that no longer matches its hash says so, rather than show it."""
    with new_store(tmp_path / "s.db") as store:
        screen(store)
        with store.transaction() as connection:
            connection.execute(text("DROP TRIGGER guard_record_update"))
            connection.execute(text("UPDATE record SET document = replace(document, '\"fail\"', '\"pass\"')"))
        with pytest.raises(UnsoundError, match=r"record 1 does not match its hash.*record verify"):
            store.history("FH-0001")


def test_a_changed_sweep_is_not_read_as_evidence(tmp_path: Path) -> None:
    """The same for a sweep; without sweeps the records still read."""
    with new_store(tmp_path / "s.db") as store:
        screen(store)
        with store.transaction() as connection:
            connection.execute(text("DROP TRIGGER guard_sweep_update"))
            connection.execute(text("UPDATE sweep SET blob = x'01'"))
        with pytest.raises(UnsoundError, match="the sweep of record 1"):
            store.history("FH-0001")
        assert len(list(store.records_of_lot(LOT, sweeps=False))) == 1


# ── interrupted attempts ─────────────────────────────────────────────────────────────────────


def test_an_interrupted_attempt_becomes_no_verdict(store: Store) -> None:
    """Attempts without a record are found at the next start, closed once as no verdict, and not final."""
    screen(store, "FH-0001")
    lost = [make_opening("FH-0002"), make_opening("FH-0003")]
    for opening in lost:
        store.open_attempt(opening)
    store.close()
    with open_store(store.place, mode="write", now=NOW) as again:
        assert [one.opening for one in again.interrupted()] == lost
        assert verify(again).open_attempts == 2
        at = "2026-03-02T09:00:00.000000Z"
        assert [one.seq for one in again.close_interrupted(at, {"ringtrue": "0.1.0"})] == [2, 3]
        assert again.interrupted() == ()
        assert again.close_interrupted(at, {}) == ()
        record = again.history("FH-0002")[0].record
        assert (record.opening, record.at, record.sweep, record.fit) == (lost[0], at, None, None)
        assert (record.judgement.verdict, record.final) == (Verdict.NONE, False)
        assert [reason.code for reason in record.judgement.reasons] == ["interrupted"]
        assert again.next_number(LOT, "FH-0002") == 2
        soundness = verify(again)
    assert (soundness.sound, soundness.open_attempts) == (True, 0)


# ── trouble ──────────────────────────────────────────────────────────────────────────────────


def test_a_full_disk_loses_nothing_written(store: Store) -> None:
    """When the disk is full the try is undone whole, told as station trouble, and works once there is room."""
    screen(store, "FH-0001")
    with store.transaction() as connection:
        pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()
        connection.exec_driver_sql(f"PRAGMA max_page_count={pages}")
    opening = make_opening("FH-0002")
    attempt = store.open_attempt(opening)
    chance = np.random.default_rng(1)
    noise = chance.standard_normal(5000) + 1j * chance.standard_normal(5000)
    record = make_record(opening, sweep=replace(make_sweep(), f_hz=np.arange(5000.0), z_ohm=noise))
    with pytest.raises(StationError, match="disk is full") as caught:
        store.write_record(record, attempt)
    assert store.place in caught.value.sentence()
    assert counts(store)["record"] == 1
    with store.transaction() as connection:
        connection.exec_driver_sql("PRAGMA max_page_count=1000000")
    assert store.write_record(record, attempt).seq == 2
    assert verify(store).sound


def test_a_busy_store_is_station_trouble(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Another writer in the middle of a transaction: after the wait, a sentence."""
    monkeypatch.setattr("harness.store.engines.PRAGMAS", {"write": ("busy_timeout=20",), "read": ()})
    with new_store(tmp_path / "s.db") as one, open_store(one.place, mode="write", now=NOW) as two:
        with one.transaction(), pytest.raises(StationError, match="being written by another process"):
            two.open_attempt(make_opening())
        two.open_attempt(make_opening())
