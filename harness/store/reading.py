"""What is asked of the store, each function over the connection that it is given."""

from __future__ import annotations

import difflib
import json
from collections import defaultdict
from collections.abc import Mapping, Sequence
from typing import Any

from sqlalchemy import ColumnElement, Connection, RowMapping, Select, func, select

from harness.errors import SetupError, UnsoundError
from harness.records import Complexes, Floats, Opening, Verdict
from harness.store import canonical, sweep_codec
from harness.store.results import AttemptId, AttemptSummary, LotInfo, OpenAttempt, Standing, StoredRecord
from harness.store.tables import attempt, limit_file, lot, reason, record, sweep, value

_NEAR = 1000  # how many serials are looked through for one that was meant


# ── lots and limits ──────────────────────────────────────────────────────────────────────────


def lot_infos(conn: Connection, which: ColumnElement[bool] | None = None) -> tuple[LotInfo, ...]:
    """Lots in the order they were opened."""
    records = select(func.count()).where(record.c.lot == lot.c.id).scalar_subquery()
    query = (
        select(
            lot.c.id,
            lot.c.part_number,
            limit_file.c.revision,
            lot.c.limits_sha256,
            lot.c.opened_at,
            lot.c.operator,
            records,
        )
        .join(limit_file)
        .order_by(lot.c.opened_at, lot.c.id)
    )
    if which is not None:
        query = query.where(which)
    return tuple(LotInfo(*row) for row in conn.execute(query))


def lot_info(conn: Connection, lot_id: str) -> LotInfo:
    """The lot; SetupError with lots of like name where there is none."""
    found = lot_infos(conn, lot.c.id == lot_id)
    if not found:
        raise _unknown("lot", lot_id, conn.execute(select(lot.c.id)).scalars().all())
    return found[0]


def limits_text(conn: Connection, sha256: str) -> str:
    """The text of a limit file that a lot was opened under."""
    text = conn.execute(select(limit_file.c.text).where(limit_file.c.sha256 == sha256)).scalar_one_or_none()
    if text is None:
        raise SetupError(f"no lot in this store was opened under limits {sha256[:12]}.")
    return str(text)


# ── attempts ─────────────────────────────────────────────────────────────────────────────────


def opening_of(row: RowMapping) -> Opening:
    """The opening of a row of ``attempt``."""
    plain = ("serial", "identity", "lot", "part_number", "limits_sha256", "operator", "number", "element", "at")
    return Opening(**{name: row[name] for name in plain}, plan=json.loads(row["plan"]))


def open_attempts(conn: Connection) -> tuple[OpenAttempt, ...]:
    """Attempts without a record, in the order they were opened."""
    query = (
        select(attempt)
        .outerjoin(record, record.c.attempt_id == attempt.c.id)
        .where(record.c.id.is_(None))
        .order_by(attempt.c.id)
    )
    return tuple(OpenAttempt(AttemptId(row["id"]), opening_of(row)) for row in conn.execute(query).mappings())


def count_open_attempts(conn: Connection) -> int:
    """How many attempts have no record."""
    recorded = select(record.c.id).where(record.c.attempt_id == attempt.c.id).exists()
    return int(conn.execute(select(func.count()).select_from(attempt).where(~recorded)).scalar_one())


def standing(conn: Connection, lot_id: str, serial: str, element: int) -> Standing | None:
    """The last record of a part's element in a lot."""
    mine = (record.c.lot == lot_id) & (record.c.serial == serial) & (record.c.element == element)
    columns = (record.c.verdict, record.c.grade, record.c.final, record.c.number, record.c.at, record.c.id)
    row = conn.execute(select(*columns).where(mine).order_by(record.c.number.desc()).limit(1)).one_or_none()
    return None if row is None else Standing(Verdict(row[0]), row[1], bool(row[2]), *row[3:])


# ── records ──────────────────────────────────────────────────────────────────────────────────


def history(conn: Connection, serial: str, place: str) -> list[StoredRecord]:
    """Every record of a serial, sweeps and all, oldest first; SetupError with like serials where there is none."""
    if conn.execute(select(attempt.c.id).where(attempt.c.serial == serial).limit(1)).first() is None:
        raise _unknown("serial", serial, _near_serials(conn, serial))
    return stored(conn, _documents().where(record.c.serial == serial).order_by(record.c.id), True, place)


def lot_page(conn: Connection, lot_id: str, after: int, size: int, sweeps: bool, place: str) -> list[StoredRecord]:
    """Up to ``size`` records of a lot beyond record ``after``, in the order they were written."""
    query = _documents().where((record.c.lot == lot_id) & (record.c.id > after)).order_by(record.c.id).limit(size)
    return stored(conn, query, sweeps, place)


def _documents() -> Select[Any]:
    r = record.c
    return select(r.id, r.chain, r.seq, r.hash, r.document, r.sweep_sha256, r.points)


def stored(conn: Connection, query: Select[Any], sweeps: bool, place: str) -> list[StoredRecord]:
    """Records from their documents; UnsoundError where a document or a sweep is not what was written."""
    rows = conn.execute(query).all()
    wanted = {row.sweep_sha256 for row in rows if row.sweep_sha256} if sweeps else set()
    blobs = sweep_blobs(conn, wanted)
    found = []
    for row in rows:
        try:
            if canonical.hash_of(row.document) != row.hash:
                raise canonical.DocumentError("does not match its hash")
            document = canonical.parse_document(row.document)
            numbers = sweep_numbers(blobs, row.sweep_sha256) if sweeps and row.sweep_sha256 else None
            whole = canonical.record_from(document, numbers)
            link = canonical.link_of(document)
        except (canonical.DocumentError, sweep_codec.BlobError) as exc:
            what = "sweep" if isinstance(exc, sweep_codec.BlobError) else "document"
            raise UnsoundError(
                f"the {what} of record {row.seq} {exc}.", place=place, remedy="Run 'ringtrue record verify'."
            ) from exc
        found.append(StoredRecord(whole, row.id, row.chain, row.seq, row.hash, link.revision, row.points))
    return found


def sweep_blobs(conn: Connection, wanted: set[str]) -> dict[str, RowMapping]:
    """The rows of ``sweep`` that are there, by hash."""
    rows = conn.execute(select(sweep).where(sweep.c.sha256.in_(sorted(wanted))))
    return {row["sha256"]: row for row in rows.mappings()}


def sweep_numbers(blobs: Mapping[str, RowMapping], sha256: str) -> tuple[Floats, Complexes]:
    """The sweep's frequencies and impedances. Raises BlobError."""
    if sha256 not in blobs:
        raise sweep_codec.BlobError("is missing")
    row = blobs[sha256]
    if row["blob"][:1] != bytes([row["codec"] & 0xFF]) or row["codec"] > 0xFF:
        raise sweep_codec.BlobError("is marked as packed another way than it is")
    return sweep_codec.decode(row["blob"], row["points"], sha256)


def lot_summaries(conn: Connection, lot_id: str) -> tuple[AttemptSummary, ...]:
    """Every record of a lot in the order written, from the repeated columns alone."""
    reasons: dict[int, list[tuple[str, str | None]]] = defaultdict(list)
    values: dict[int, dict[str, tuple[float | None, float | None]]] = defaultdict(dict)
    mine = record.c.lot == lot_id
    for record_id, code, characteristic in conn.execute(
        select(reason.c.record_id, reason.c.code, reason.c.characteristic)
        .join(record, record.c.id == reason.c.record_id)
        .where(mine)
        .order_by(reason.c.record_id, reason.c.position)
    ):
        reasons[record_id].append((code, characteristic))
    for record_id, characteristic, number, u in conn.execute(
        select(value.c.record_id, value.c.characteristic, value.c.value, value.c.u)
        .join(record, record.c.id == value.c.record_id)
        .where(mine)
    ):
        values[record_id][characteristic] = (number, u)
    r = record.c
    columns = (r.id, r.seq, r.serial, r.element, r.number, r.verdict, r.grade, r.final, r.at)
    return tuple(
        AttemptSummary(
            *row[:5],
            verdict=Verdict(row.verdict),
            grade=row.grade,
            final=bool(row.final),
            at=row.at,
            reasons=tuple(reasons[row.id]),
            values=values[row.id],
        )
        for row in conn.execute(select(*columns).where(mine).order_by(r.id))
    )


# ── what was meant ───────────────────────────────────────────────────────────────────────────


def _near_serials(conn: Connection, serial: str) -> list[str]:
    """Serials that stand next to this one in order, and the latest; a large store is not read through for a slip."""
    column = attempt.c.serial
    queries = (
        select(column).where(column < serial).order_by(column.desc()).distinct().limit(_NEAR),
        select(column).where(column > serial).order_by(column).distinct().limit(_NEAR),
        select(column).order_by(attempt.c.id.desc()).limit(_NEAR),
    )
    return sorted({found for query in queries for found in conn.execute(query).scalars()})


def _unknown(what: str, name: str, known: Sequence[str]) -> SetupError:
    close = difflib.get_close_matches(name, known, n=3, cutoff=0.6)
    listed = " or ".join(f"'{one}'" for one in close)
    remedy = f"Did you mean {listed}?" if close else f"The store holds no {what} yet." if not known else ""
    return SetupError(f"there is no {what} '{name}' in this store.", remedy=remedy)
