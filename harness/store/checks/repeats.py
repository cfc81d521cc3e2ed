"""Does everything that repeats a document say what the document says: columns, values, reasons, attempt, lot, sweep?"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Column, Connection, RowMapping, select

from harness.records import Record
from harness.store import canonical, reading, sweep_codec, writing
from harness.store.checks.chain import Examined
from harness.store.checks.findings import Finding
from harness.store.tables import attempt, limit_file, lot, reason, value

Rows = Mapping[Any, Sequence[RowMapping]]


@dataclass(frozen=True, slots=True)
class _Told:
    """One record as its intact document tells it."""

    one: Examined
    record: Record
    link: canonical.Link
    sweep_sha256: str | None
    points: int


class Repeats:
    """Compares pages of records; a lot or limit file that disagrees is reported once, not at each of its records."""

    def __init__(self) -> None:
        self._reported: set[str] = set()

    def findings(self, conn: Connection, page: Sequence[Examined]) -> Iterator[Finding]:
        """What disagrees with the intact documents of a page."""
        told: list[_Told] = []
        for one in page:
            try:
                told += _told(one)
            except (canonical.DocumentError, KeyError, TypeError) as exc:
                yield one.finding("unreadable", f"the document of record {one.row.seq} cannot be read back ({exc})")
        ids = [t.one.row.id for t in told]
        values = _rows(conn, value.c.record_id, ids)
        reasons = _rows(conn, reason.c.record_id, ids)
        attempts = _rows(conn, attempt.c.id, [t.link.attempt for t in told])
        blobs = reading.sweep_blobs(conn, {t.sweep_sha256 for t in told if t.sweep_sha256})
        for t in told:
            yield from _columns(t)
            yield from _values(t, values[t.one.row.id])
            yield from _reasons(t, reasons[t.one.row.id])
            yield from _attempt(t, attempts[t.link.attempt])
            yield from _sweep(t, blobs)
        yield from self._lots_and_limits(conn, told)

    def _lots_and_limits(self, conn: Connection, told: Sequence[_Told]) -> Iterator[Finding]:
        lots = _rows(conn, lot.c.id, {t.record.opening.lot for t in told})
        limits = _rows(conn, limit_file.c.sha256, {t.record.opening.limits_sha256 for t in told})
        for t in told:
            for finding in (*_lot(t, lots[t.record.opening.lot]), *_limits(t, limits[t.record.opening.limits_sha256])):
                if finding.text not in self._reported:
                    self._reported.add(finding.text)
                    yield finding


def _told(one: Examined) -> list[_Told]:
    if one.document is None or one.link is None:
        return []
    about = one.document["sweep"]
    sha256, points = (None, 0) if about is None else (about["sha256"], about["points"])
    return [_Told(one, canonical.record_from(one.document, None), one.link, sha256, points)]


def _rows(conn: Connection, key: Column[Any], wanted: Iterable[Any]) -> Rows:
    """The whole rows of ``key``'s table for the wanted keys, in the order of the primary key."""
    found: dict[Any, list[RowMapping]] = defaultdict(list)
    query = select(key.table).where(key.in_(set(wanted))).order_by(*key.table.primary_key)
    for row in conn.execute(query).mappings():
        found[row[key]].append(row)
    return found


# ── one question each ────────────────────────────────────────────────────────────────────────


def _columns(t: _Told) -> Iterator[Finding]:
    due = writing.record_row(t.record, t.sweep_sha256, t.points)
    due |= {"prev_hash": t.link.prev, "attempt_id": t.link.attempt}
    for name, said in due.items():
        there = getattr(t.one.row, name)
        if there != said:
            yield _changed(t, f"its {name} reads {there!r}, its document says {said!r}")


def _values(t: _Told, rows: Sequence[RowMapping]) -> Iterator[Finding]:
    due = {row["characteristic"]: row for row in writing.value_rows(t.record)}
    there = {row["characteristic"]: {name: row[name] for name in row if name != "record_id"} for row in rows}
    for name in sorted(due.keys() | there.keys()):
        if due.get(name) != there.get(name):
            yield _changed(t, f"its value of {name} is not what its document says")


def _reasons(t: _Told, rows: Sequence[RowMapping]) -> Iterator[Finding]:
    there = [{name: row[name] for name in row if name != "record_id"} for row in rows]
    if there != writing.reason_rows(t.record):
        yield _changed(t, "its reasons are not what its document says")


def _attempt(t: _Told, rows: Sequence[RowMapping]) -> Iterator[Finding]:
    if not rows:
        yield t.one.finding("missing", f"the attempt of record {t.one.row.seq} is missing")
        return
    try:
        opened = reading.opening_of(rows[0])
    except ValueError:
        opened = None
    if opened != t.record.opening:
        yield _changed(t, "its attempt was not opened as its document says")


def _sweep(t: _Told, blobs: Mapping[str, RowMapping]) -> Iterator[Finding]:
    if t.sweep_sha256 is None:
        return
    try:
        f_hz, _ = reading.sweep_numbers(blobs, t.sweep_sha256)
    except sweep_codec.BlobError as exc:
        kind = "changed" if t.sweep_sha256 in blobs else "missing"
        yield t.one.finding(kind, f"the sweep of record {t.one.row.seq} {exc}")
        return
    if len(f_hz) != t.points:
        yield _changed(t, f"its sweep has {len(f_hz)} points, its document says {t.points}")


def _lot(t: _Told, rows: Sequence[RowMapping]) -> Iterator[Finding]:
    opening = t.record.opening
    if not rows:
        yield t.one.finding("missing", f"lot '{opening.lot}' is missing")
        return
    said = {
        "part_number": opening.part_number,
        "limits_sha256": opening.limits_sha256,
        "opened_at": t.link.lot_opened_at,
        "operator": t.link.lot_operator,
    }
    for name, word in said.items():
        if rows[0][name] != word:
            yield t.one.finding("changed", f"the {name} of lot '{opening.lot}' is not what its records say")


def _limits(t: _Told, rows: Sequence[RowMapping]) -> Iterator[Finding]:
    opening = t.record.opening
    shown = opening.limits_sha256[:12]
    if not rows:
        yield t.one.finding("missing", f"limit file {shown} is missing")
    elif (rows[0]["part_number"], rows[0]["revision"]) != (opening.part_number, t.link.revision):
        yield t.one.finding("changed", f"the part number or revision of limit file {shown} is not what its records say")


def _changed(t: _Told, what: str) -> Finding:
    return t.one.finding("changed", f"record {t.one.row.seq}: {what}")
