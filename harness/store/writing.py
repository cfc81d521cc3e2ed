"""What is put into the store, each function inside the one transaction that it is given."""

from __future__ import annotations

import hashlib
import json
from typing import Any

from sqlalchemy import Connection, RowMapping, func, insert, select

from harness.errors import SetupError
from harness.records import LimitSet, Opening, Record
from harness.store import canonical, sweep_codec
from harness.store.reading import opening_of
from harness.store.results import AttemptId, Written
from harness.store.tables import attempt, limit_file, lot, reason, record, sweep, value


def put_lot(conn: Connection, lot_id: str, limits: LimitSet, operator: str, at: str) -> None:
    """Open the lot under ``limits``, or continue it if it was opened under the same limit file."""
    for name, text in (("lot", lot_id), ("operator", operator)):
        _refuse_unreadable(name, text)
    known = conn.execute(
        select(lot.c.limits_sha256, lot.c.part_number, limit_file.c.revision).join(limit_file).where(lot.c.id == lot_id)
    ).one_or_none()
    if known is None:
        _put_limits(conn, limits)
        row = {"id": lot_id, "part_number": limits.part_number, "limits_sha256": limits.sha256}
        conn.execute(insert(lot), row | {"opened_at": at, "operator": operator})
    elif known.limits_sha256 != limits.sha256:
        raise SetupError(
            f"lot '{lot_id}' was opened under {known.part_number} revision {known.revision} "
            f"({known.limits_sha256[:12]}), "
            f"not under {limits.part_number} revision {limits.revision} ({limits.sha256[:12]}).",
            remedy="Screen it under the limits it was opened with, or open a new lot.",
        )


def _put_limits(conn: Connection, limits: LimitSet) -> None:
    if hashlib.sha256(limits.text.encode()).hexdigest() != limits.sha256:
        raise ValueError("LimitSet.sha256 is not the SHA-256 of its text's UTF-8 bytes")
    if conn.execute(select(limit_file.c.sha256).where(limit_file.c.sha256 == limits.sha256)).first() is None:
        row = {"sha256": limits.sha256, "part_number": limits.part_number, "revision": limits.revision}
        conn.execute(insert(limit_file), row | {"text": limits.text})


def put_attempt(conn: Connection, opening: Opening) -> AttemptId:
    """Open an attempt. ValueError for a lot that is not open under these limits, or a number that is not next."""
    for name, text in (("serial", opening.serial), ("operator", opening.operator)):
        _refuse_unreadable(name, text)
    limits = conn.execute(select(lot.c.limits_sha256, lot.c.part_number).where(lot.c.id == opening.lot)).one_or_none()
    if limits is None or tuple(limits) != (opening.limits_sha256, opening.part_number):
        raise ValueError(f"lot '{opening.lot}' is not open under the limits of this attempt")
    due = next_number(conn, opening.lot, opening.serial, opening.element)
    if opening.number != due:
        raise ValueError(f"attempt {opening.number} at '{opening.serial}' opened where {due} is next")
    row = {name: getattr(opening, name) for name in OPENING_COLUMNS}
    made = conn.execute(insert(attempt), row | {"plan": canonical.canonical_json(opening.plan)})
    return AttemptId(_made_id(made.inserted_primary_key))


OPENING_COLUMNS = (
    "lot", "serial", "identity", "element", "number", "operator", "part_number", "limits_sha256", "at",
)  # fmt: skip


def next_number(conn: Connection, lot_id: str, serial: str, element: int) -> int:
    """The number of the next attempt at this part's element in this lot, from 1."""
    mine = (attempt.c.lot == lot_id) & (attempt.c.serial == serial) & (attempt.c.element == element)
    last = conn.execute(select(func.max(attempt.c.number)).where(mine)).scalar_one()
    return 1 if last is None else int(last) + 1


def put_record(conn: Connection, chain: str, done: Record, attempt_id: AttemptId) -> Written:
    """Write the record of an opened attempt at the end of the chain: document, sweep, values and reasons."""
    opened = _opened(conn, attempt_id)
    if opening_of(opened) != _as_stored(done.opening):
        raise ValueError(f"the record's opening is not the one that attempt {attempt_id} was opened with")
    last = conn.execute(
        select(record.c.seq, record.c.hash).where(record.c.chain == chain).order_by(record.c.seq.desc()).limit(1)
    ).one_or_none()
    seq, prev = (1, canonical.NO_HASH) if last is None else (last.seq + 1, last.hash)
    link = canonical.Link(
        chain, seq, prev, attempt_id, opened["revision"], opened["lot_opened_at"], opened["lot_operator"]
    )
    sweep_sha256 = _put_sweep(conn, done)
    document = canonical.document_of(done, link, sweep_sha256)
    digest = canonical.hash_of(document)
    points = 0 if done.sweep is None else len(done.sweep.f_hz)
    row = record_row(done, sweep_sha256, points) | {"chain": chain, "seq": seq, "hash": digest, "prev_hash": prev}
    made = conn.execute(insert(record), row | {"attempt_id": attempt_id, "document": document})
    record_id = _made_id(made.inserted_primary_key)
    for table, rows in ((value, value_rows(done)), (reason, reason_rows(done))):
        if rows:
            conn.execute(insert(table), [{"record_id": record_id} | one for one in rows])
    return Written(chain, seq, digest, record_id)


def _opened(conn: Connection, attempt_id: AttemptId) -> RowMapping:
    found = conn.execute(
        select(
            attempt,
            limit_file.c.revision,
            lot.c.opened_at.label("lot_opened_at"),
            lot.c.operator.label("lot_operator"),
            record.c.seq,
        )
        .select_from(attempt)
        .join(lot, lot.c.id == attempt.c.lot)
        .join(limit_file, limit_file.c.sha256 == attempt.c.limits_sha256)
        .outerjoin(record, record.c.attempt_id == attempt.c.id)
        .where(attempt.c.id == attempt_id)
    ).mappings().one_or_none()  # fmt: skip
    if found is None:
        raise ValueError(f"attempt {attempt_id} was never opened")
    if found["seq"] is not None:
        raise ValueError(f"attempt {attempt_id} has its record already: {found['seq']}")
    return found


def _as_stored(opening: Opening) -> Opening:
    """The opening with its plan as JSON gives it back: tuples as lists."""
    plan = json.loads(canonical.canonical_json(opening.plan))
    return Opening(**{name: getattr(opening, name) for name in OPENING_COLUMNS}, plan=plan)


def _put_sweep(conn: Connection, done: Record) -> str | None:
    """Keep the sweep once under its hash."""
    if done.sweep is None:
        return None
    sha256, blob = sweep_codec.encode(done.sweep.f_hz, done.sweep.z_ohm)
    if conn.execute(select(sweep.c.sha256).where(sweep.c.sha256 == sha256)).first() is None:
        row = {"sha256": sha256, "points": len(done.sweep.f_hz), "codec": sweep_codec.CODEC, "blob": blob}
        conn.execute(insert(sweep), row)
    return sha256


# ── what is repeated from the document ───────────────────────────────────────────────────────


def record_row(done: Record, sweep_sha256: str | None, points: int) -> dict[str, Any]:
    """The columns of ``record`` that repeat its document."""
    opening, judgement = done.opening, done.judgement
    return {
        "lot": opening.lot,
        "serial": opening.serial,
        "element": opening.element,
        "number": opening.number,
        "verdict": judgement.verdict.value,
        "grade": judgement.grade,
        "final": int(done.final),
        "at": done.at,
        "sweep_sha256": sweep_sha256,
        "points": points,
    }


def value_rows(done: Record) -> list[dict[str, Any]]:
    """The rows of ``value``: the values as judged."""
    return [
        {"characteristic": name, "value": one.value, "u": one.u, "unit": one.unit}
        for name, one in done.judgement.values.items()
    ]


def reason_rows(done: Record) -> list[dict[str, Any]]:
    """The rows of ``reason``, in the judgement's order."""
    return [
        {
            "position": position,
            "code": one.code,
            "characteristic": one.characteristic,
            "value": one.value,
            "limit_value": one.limit,
            "text": one.text,
        }
        for position, one in enumerate(done.judgement.reasons)
    ]


def _made_id(key: Any) -> int:
    return int(key[0])


def _refuse_unreadable(name: str, text: str) -> None:
    """Bytes that were no text, as a scanner or a file in another encoding brings them, cannot be kept in a document."""
    try:
        text.encode()
    except UnicodeEncodeError as exc:
        shown = text.encode("utf-8", "backslashreplace").decode()
        raise SetupError(f"the {name} '{shown}' is not readable text.", remedy="Give it in UTF-8.") from exc
    if "\0" in text or (not text.strip() and name != "operator"):
        raise SetupError(f"the {name} {text!r} is empty or holds a zero character.", remedy="Give it in plain text.")
