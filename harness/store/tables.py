"""The tables: evidence as text and bytes, and beside it what is asked of it most often.

The document in ``record`` is the evidence; every other column of ``record``, and the tables ``value`` and ``reason``,
repeat parts of it so that a lot can be read without opening documents. ``verify`` compares the two. Rows are only
ever added. STRICT tables on SQLite take four types; the variants keep eight-byte numbers on every database.
"""

from __future__ import annotations

from sqlalchemy import (
    REAL,
    BigInteger,
    CheckConstraint,
    Column,
    Double,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    Table,
    Text,
    UniqueConstraint,
)
from sqlalchemy.types import TypeEngine

SCHEMA_VERSION = 1
APPLICATION_ID = 0x52494E47  # "RING", in the header of an SQLite file

F64: TypeEngine[float] = Double().with_variant(REAL(), "sqlite")
I64: TypeEngine[int] = BigInteger().with_variant(Integer(), "sqlite")

metadata = MetaData(
    naming_convention={
        "ix": "ix_%(table_name)s_%(column_0_N_name)s",
        "uq": "uq_%(table_name)s_%(column_0_N_name)s",
        "ck": "ck_%(table_name)s_%(constraint_name)s",
        "fk": "fk_%(table_name)s_%(column_0_N_name)s_%(referred_table_name)s",
        "pk": "pk_%(table_name)s",
    }
)

# One row: who made this store, when, and the id of the chain that it writes.
store_info = Table(
    "store_info",
    metadata,
    Column("id", I64, CheckConstraint("id = 1", name="single"), primary_key=True, autoincrement=False),
    Column("schema_version", I64, nullable=False),
    Column("chain", Text, nullable=False),
    Column("made_by", Text, nullable=False),
    Column("made_at", Text, nullable=False),
    sqlite_strict=True,
)

limit_file = Table(
    "limit_file",
    metadata,
    Column("sha256", Text, primary_key=True),
    Column("part_number", Text, nullable=False),
    Column("revision", Text, nullable=False),
    Column("text", Text, nullable=False),
    sqlite_strict=True,
)

lot = Table(
    "lot",
    metadata,
    Column("id", Text, primary_key=True),
    Column("part_number", Text, nullable=False),
    Column("limits_sha256", Text, ForeignKey(limit_file.c.sha256), nullable=False),
    Column("opened_at", Text, nullable=False),
    Column("operator", Text, nullable=False),
    sqlite_strict=True,
)

# Ids of attempts and records are given out once, without gaps: AUTOINCREMENT remembers the last even if its row goes.
attempt = Table(
    "attempt",
    metadata,
    Column("id", I64, primary_key=True),
    Column("lot", Text, ForeignKey(lot.c.id), nullable=False),
    Column("serial", Text, nullable=False),
    Column("identity", Text, nullable=False),
    Column("element", I64, nullable=False),
    Column("number", I64, nullable=False),
    Column("plan", Text, nullable=False),
    Column("operator", Text, nullable=False),
    Column("part_number", Text, nullable=False),
    Column("limits_sha256", Text, ForeignKey(limit_file.c.sha256), nullable=False),
    Column("at", Text, nullable=False),
    UniqueConstraint("lot", "serial", "element", "number"),
    Index(None, "serial"),
    sqlite_strict=True,
    sqlite_autoincrement=True,
)

sweep = Table(
    "sweep",
    metadata,
    Column("sha256", Text, primary_key=True),
    Column("points", I64, nullable=False),
    Column("codec", I64, nullable=False),
    Column("blob", LargeBinary, nullable=False),
    sqlite_strict=True,
)

record = Table(
    "record",
    metadata,
    Column("id", I64, primary_key=True),
    Column("chain", Text, nullable=False),
    Column("seq", I64, nullable=False),
    Column("hash", Text, nullable=False),
    Column("prev_hash", Text, nullable=False),
    Column("attempt_id", I64, ForeignKey(attempt.c.id), nullable=False, unique=True),
    # from here on repeated from the document, which stands last: what follows it would be slow to reach
    Column("lot", Text, ForeignKey(lot.c.id), nullable=False),
    Column("serial", Text, nullable=False),
    Column("element", I64, nullable=False),
    Column("number", I64, nullable=False),
    Column("verdict", Text, nullable=False),
    Column("grade", Text),
    Column("final", I64, nullable=False),
    Column("at", Text, nullable=False),
    Column("sweep_sha256", Text, ForeignKey(sweep.c.sha256)),
    Column("points", I64, nullable=False),
    Column("document", Text, nullable=False),
    CheckConstraint("verdict in ('pass', 'fail', 'no verdict')", name="verdict"),
    CheckConstraint("final in (0, 1)", name="final"),
    UniqueConstraint("chain", "seq"),
    Index(None, "lot", "id"),
    Index(None, "serial", "id"),
    sqlite_strict=True,
    sqlite_autoincrement=True,
)

value = Table(
    "value",
    metadata,
    Column("record_id", I64, ForeignKey(record.c.id), primary_key=True, autoincrement=False),
    Column("characteristic", Text, primary_key=True),
    Column("value", F64),
    Column("u", F64),
    Column("unit", Text, nullable=False),
    sqlite_strict=True,
    sqlite_with_rowid=False,
)

reason = Table(
    "reason",
    metadata,
    Column("record_id", I64, ForeignKey(record.c.id), primary_key=True, autoincrement=False),
    Column("position", I64, primary_key=True, autoincrement=False),
    Column("code", Text, nullable=False),
    Column("characteristic", Text),
    Column("value", F64),
    Column("limit_value", F64),
    Column("text", Text, nullable=False),
    sqlite_strict=True,
    sqlite_with_rowid=False,
)
