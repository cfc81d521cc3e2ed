"""What the store answers with. TYPES."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import NewType

from harness.records import Opening, Record, Verdict

AttemptId = NewType("AttemptId", int)


@dataclass(frozen=True, slots=True)
class Written:
    """Where a durable record stands: its chain, its number and hash there, and its id in this store."""

    chain: str
    seq: int
    hash: str
    record_id: int


@dataclass(frozen=True, slots=True)
class OpenAttempt:
    """An attempt that was opened and has no record."""

    id: AttemptId
    opening: Opening


@dataclass(frozen=True, slots=True)
class LotInfo:
    """A lot, the limits it is screened under, and how many records it has."""

    lot: str
    part_number: str
    revision: str
    limits_sha256: str
    opened_at: str
    operator: str
    records: int


@dataclass(frozen=True, slots=True)
class Standing:
    """How one part stands in a lot after its last record. ``number`` is the attempt's."""

    verdict: Verdict
    grade: str | None
    final: bool
    number: int
    at: str
    record_id: int


@dataclass(frozen=True, slots=True, eq=False)
class StoredRecord:
    """A record with its place in the store. ``points`` counts the sweep's, also where the sweep was not read along."""

    record: Record
    record_id: int
    chain: str
    seq: int
    hash: str
    revision: str
    points: int


@dataclass(frozen=True, slots=True)
class AttemptSummary:
    """What statistics need of one record, read without opening its document.

    ``reasons`` are (code, characteristic or None) in order; ``values`` are (value, u) by characteristic, SI, as judged.
    """

    record_id: int
    seq: int
    serial: str
    element: int
    number: int
    verdict: Verdict
    grade: str | None
    final: bool
    at: str
    reasons: tuple[tuple[str, str | None], ...]
    values: Mapping[str, tuple[float | None, float | None]]
