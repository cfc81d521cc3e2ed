"""One record as one canonical JSON document, and back.

PURE. Canonical: keys sorted, no spaces, UTF-8, floats as the shortest text that reads back to the same bits, no NaN
or Infinity. The hash of a document is the SHA-256 of its UTF-8 bytes; the document holds its chain, its number in it
and the hash before it, so that the hashes chain. The sweep's numbers are outside, named by their own hash. ``format``
says how to read it: a key may be added with a default; anything else is a new format number.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import MISSING, dataclass, fields
from typing import Any, TypeVar

import numpy as np

from harness.records import (
    Caveat,
    Complexes,
    Conditions,
    Correction,
    Fit,
    FitStatus,
    Floats,
    Instrument,
    Judgement,
    Mode,
    Opening,
    Reading,
    Reason,
    Record,
    Residual,
    Sweep,
    Value,
    Verdict,
)

FORMAT = 1
NO_HASH = "0" * 64  # what the first record of a chain follows

T = TypeVar("T")


class DocumentError(ValueError):
    """A document that cannot be read back; the message is a clause for after "the document"."""


@dataclass(frozen=True, slots=True)
class Link:
    """What the store adds to a record: its place in the chain, its attempt, and what its lot was opened under."""

    chain: str
    seq: int
    prev: str
    attempt: int
    revision: str
    lot_opened_at: str
    lot_operator: str


def canonical_json(thing: Any) -> str:
    """The one JSON text of ``thing``. Raises ValueError on NaN, Infinity, half characters or what JSON cannot say."""
    try:
        text = json.dumps(
            thing, sort_keys=True, ensure_ascii=False, allow_nan=False, separators=(",", ":"), default=_plain_scalar
        )
        text.encode()
    except (TypeError, ValueError) as exc:
        raise ValueError(f"this cannot be kept as a document: {exc}") from exc
    return text


def hash_of(document: str) -> str:
    """SHA-256 (hex) of the document's UTF-8 bytes; bytes that were not UTF-8 in the store count as they are."""
    return hashlib.sha256(document.encode("utf-8", "surrogateescape")).hexdigest()


# ── record to document ───────────────────────────────────────────────────────────────────────


def document_of(record: Record, link: Link, sweep_sha256: str | None) -> str:
    """The canonical document of ``record`` at ``link``. Raises ValueError where a number is not finite."""
    opening, sweep = record.opening, record.sweep
    return canonical_json(
        {
            "format": FORMAT,
            "chain": link.chain,
            "seq": link.seq,
            "prev": link.prev,
            "attempt": link.attempt,
            "identity": {
                "serial": opening.serial,
                "identity": opening.identity,
                "element": opening.element,
                "number": opening.number,
            },
            "lot": {"id": opening.lot, "opened_at": link.lot_opened_at, "operator": link.lot_operator},
            "limits": {
                "part_number": opening.part_number,
                "revision": link.revision,
                "sha256": opening.limits_sha256,
            },
            "opening": {"at": opening.at, "operator": opening.operator, "plan": opening.plan},
            "conditions": None if sweep is None else _flat(sweep.conditions),
            "instruments": [_flat(instrument) for instrument in record.instruments],
            "correction": _flat(record.correction),
            "sweep": None if sweep is None else _sweep_dict(sweep, sweep_sha256),
            "fit": None if record.fit is None else _fit_dict(record.fit),
            "judgement": _judgement_dict(record.judgement),
            "software": dict(record.software),
            "final": record.final,
            "at": record.at,
        }
    )


def _sweep_dict(sweep: Sweep, sha256: str | None) -> dict[str, Any]:
    return {
        "sha256": sha256,
        "points": len(sweep.f_hz),
        "absolute": sweep.absolute,
        "noise_relative": sweep.noise_relative,
        "u_z_relative": sweep.u_z_relative,
        "u_f_relative": sweep.u_f_relative,
        "readings": [_flat(reading) for reading in sweep.readings],
    }


def _fit_dict(fit: Fit) -> dict[str, Any]:
    return {
        "status": fit.status.value,
        "message": fit.message,
        "values": _values_dict(fit.values),
        "modes": [_flat(mode) for mode in fit.modes],
        "residual": _flat(fit.residual),
        "warnings": [_flat(caveat) for caveat in fit.caveats],
        "budget": {name: dict(parts) for name, parts in fit.budget.items()},
        "span_hz": None if fit.span_hz is None else list(fit.span_hz),
    }


def _judgement_dict(judgement: Judgement) -> dict[str, Any]:
    return {
        "verdict": judgement.verdict.value,
        "grade": judgement.grade,
        "reasons": [_flat(reason) for reason in judgement.reasons],
        "values": _values_dict(judgement.values),
        "warnings": [_flat(caveat) for caveat in judgement.caveats],
    }


def _values_dict(values: Mapping[str, Value]) -> dict[str, Any]:
    return {name: _flat(value) for name, value in values.items()}


def _flat(thing: Any) -> dict[str, Any]:
    """A dataclass of plain fields as a mapping; complex numbers as [re, im]."""
    found = {field.name: getattr(thing, field.name) for field in fields(thing)}
    return {name: [v.real, v.imag] if isinstance(v, complex) else v for name, v in found.items()}


def _plain_scalar(thing: Any) -> Any:
    """NumPy's scalars as Python's, and read-only mappings as dicts; json asks here for what it does not know."""
    if isinstance(thing, np.generic):
        return thing.item()
    if isinstance(thing, Mapping):
        return dict(thing)
    raise TypeError(f"{type(thing).__name__} has no place in JSON")


# ── document to record ───────────────────────────────────────────────────────────────────────


def parse_document(document: str) -> dict[str, Any]:
    """The document as a mapping of the format known here. Raises DocumentError."""
    try:
        found = json.loads(document)
    except ValueError as exc:
        raise DocumentError("is not JSON") from exc
    if not isinstance(found, dict) or found.get("format") != FORMAT:
        raise DocumentError(f"is not of format {FORMAT}")
    return found


def link_of(found: Mapping[str, Any]) -> Link:
    """The link of a parsed document. Raises DocumentError."""
    try:
        lot, limits = found["lot"], found["limits"]
        return Link(
            found["chain"],
            found["seq"],
            found["prev"],
            found["attempt"],
            limits["revision"],
            lot["opened_at"],
            lot["operator"],
        )
    except (KeyError, TypeError) as exc:
        raise DocumentError(f"lacks {exc}") from exc


def record_from(found: Mapping[str, Any], numbers: tuple[Floats, Complexes] | None) -> Record:
    """The record of a parsed document and of its sweep's ``(f_hz, z_ohm)``; without numbers, ``sweep`` is None.

    Raises DocumentError where a key is missing or of another kind than it should be.
    """
    try:
        return Record(
            opening=_opening(found),
            sweep=None if numbers is None else _sweep(found, *numbers),
            fit=None if found["fit"] is None else _fit(found["fit"]),
            judgement=_judgement(found["judgement"]),
            correction=_unflat(Correction, found["correction"]),
            instruments=tuple(_unflat(Instrument, one) for one in found["instruments"]),
            software=found["software"],
            final=found["final"],
            at=found["at"],
        )
    except (KeyError, TypeError, ValueError, AttributeError) as exc:
        raise DocumentError(f"cannot be read back ({exc})") from exc


def _opening(found: Mapping[str, Any]) -> Opening:
    identity, limits, opening = found["identity"], found["limits"], found["opening"]
    return Opening(
        serial=identity["serial"],
        identity=identity["identity"],
        lot=found["lot"]["id"],
        part_number=limits["part_number"],
        limits_sha256=limits["sha256"],
        operator=opening["operator"],
        number=identity["number"],
        element=identity["element"],
        plan=opening["plan"],
        at=opening["at"],
    )


def _sweep(found: Mapping[str, Any], f_hz: Floats, z_ohm: Complexes) -> Sweep:
    about = found["sweep"]
    return Sweep(
        f_hz,
        z_ohm,
        conditions=_unflat(Conditions, found["conditions"]),
        readings=tuple(Reading(r["stage"], r["f_hz"], complex(*r["z_ohm"])) for r in about["readings"]),
        noise_relative=about["noise_relative"],
        u_z_relative=about["u_z_relative"],
        u_f_relative=about["u_f_relative"],
        absolute=about["absolute"],
    )


def _fit(found: Mapping[str, Any]) -> Fit:
    span = found["span_hz"]
    return Fit(
        status=FitStatus(found["status"]),
        message=found["message"],
        values=_values(found["values"]),
        modes=tuple(_unflat(Mode, mode) for mode in found["modes"]),
        residual=_unflat(Residual, found["residual"]),
        caveats=tuple(_unflat(Caveat, caveat) for caveat in found["warnings"]),
        budget=found["budget"],
        span_hz=None if span is None else (span[0], span[1]),
    )


def _judgement(found: Mapping[str, Any]) -> Judgement:
    return Judgement(
        verdict=Verdict(found["verdict"]),
        grade=found["grade"],
        reasons=tuple(_unflat(Reason, reason) for reason in found["reasons"]),
        values=_values(found["values"]),
        caveats=tuple(_unflat(Caveat, caveat) for caveat in found["warnings"]),
    )


def _values(found: Mapping[str, Any]) -> dict[str, Value]:
    return {name: _unflat(Value, value) for name, value in found.items()}


def _unflat(kind: type[T], found: Mapping[str, Any]) -> T:
    """The dataclass of ``found``: a key that the document does not have yet takes its default."""
    return kind(**{field.name: found[field.name] for field in _fields(kind) if field.name in found or _required(field)})


def _fields(kind: type) -> Any:
    return fields(kind)


def _required(field: Any) -> bool:
    return field.default is MISSING and field.default_factory is MISSING
