"""The store: every attempt's evidence, written once, chained by hash, durable before anything is shown.

SHELL. May import SQLAlchemy Core (no ORM; nothing else in the house imports SQLAlchemy), ``harness.records``,
``characteristics``, ``quantities`` and ``errors``. Must not decide, fit or judge, nor look at a clock: time comes as
ISO 8601 UTC text with microseconds and Z.

    open_store(path, mode=…) → Store        opening.py, engines.py
    open_lot → open_attempt → write_record  writing.py      one transaction each
    history, lot_summaries, …               reading.py
    verify(store) → Soundness               verifying.py, checks/

To add a column or table: ``tables.py``, with a new SCHEMA_VERSION; what repeats the document must be compared in
``checks``. To add a key to the document: ``canonical.py``, with a default for documents that do not have it. To add a
packing of sweeps: a format byte in ``sweep_codec.py``; old ones stay readable.
"""

from harness.store.checks.findings import Finding
from harness.store.engines import sqlite_version
from harness.store.opening import open_store
from harness.store.results import (
    AttemptId,
    AttemptSummary,
    LotInfo,
    OpenAttempt,
    Standing,
    StoredRecord,
    Written,
)
from harness.store.store import Store
from harness.store.verifying import ChainState, Soundness, verify, verify_at

__all__ = [
    "AttemptId",
    "AttemptSummary",
    "ChainState",
    "Finding",
    "LotInfo",
    "OpenAttempt",
    "Soundness",
    "Standing",
    "Store",
    "StoredRecord",
    "Written",
    "open_store",
    "sqlite_version",
    "verify",
    "verify_at",
]
