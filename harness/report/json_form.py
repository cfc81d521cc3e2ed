"""What ``--json`` prints: the values of ``records`` as plain dictionaries. Keys are a contract.

SI units throughout; no NaN or infinity: a value that does not exist is null, and a warning says why.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from typing import Any

from harness.records import Caveat, Correction, Fit, FitStatus, Instrument, Judgement, LimitSet, Reason, Value


def dumps(value: object) -> str:
    """One line of JSON. Raises ValueError rather than print NaN or infinity."""
    return json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(", ", ": "))


def fit_form(file: str, fit: Fit) -> dict[str, Any]:
    """One object of ``fit --json``."""
    return {
        "file": file,
        "status": fit.status.value,
        "message": fit.message,
        "values": values_form(fit.values),
        "modes": [{"f": m.f_hz, "q": m.q, "g": m.g_s, "wanted": m.wanted} for m in fit.modes],
        "residual": {"relative_rms": number(fit.residual.relative_rms), "dof": fit.residual.dof},
        "warnings": [caveat_form(c) for c in fit.caveats],
    }


def bad_file_form(file: str, text: str) -> dict[str, Any]:
    """The object of a log that cannot be read."""
    return fit_form(file, Fit(FitStatus.BAD_DATA, text))


def judgement_form(serial: str, source: str, judgement: Judgement) -> dict[str, Any]:
    """One line of ``replay --json``, and the beginning of one of ``screen`` and ``history``."""
    return {
        "serial": serial,
        "source": source,
        "verdict": judgement.verdict.value,
        "grade": judgement.grade,
        "reasons": [reason_form(r) for r in judgement.reasons],
        "values": values_form(judgement.values),
        "warnings": [caveat_form(c) for c in judgement.caveats],
    }


def limits_form(part_number: str, revision: str, sha256: str) -> dict[str, str]:
    return {"part_number": part_number, "revision": revision, "sha256": sha256}


def limit_set_form(limits: LimitSet) -> dict[str, str]:
    return limits_form(limits.part_number, limits.revision, limits.sha256)


def values_form(values: Mapping[str, Value]) -> dict[str, Any]:
    return {key: {"value": number(v.value), "u": number(v.u), "unit": v.unit} for key, v in values.items()}


def reason_form(reason: Reason) -> dict[str, Any]:
    return {
        "code": reason.code,
        "characteristic": reason.characteristic,
        "value": number(reason.value),
        "limit": number(reason.limit),
        "text": reason.text,
    }


def caveat_form(caveat: Caveat) -> dict[str, Any]:
    return {"code": caveat.code, "characteristic": caveat.characteristic, "text": caveat.text}


def instruments_form(instruments: Sequence[Instrument]) -> list[dict[str, Any]]:
    return [
        {
            "role": i.role,
            "resource": i.resource,
            "dialect": i.dialect,
            "maker": i.maker,
            "model": i.model,
            "serial": i.serial,
            "firmware": i.firmware,
        }
        for i in instruments
    ]


def correction_form(correction: Correction) -> dict[str, Any]:
    return {
        "fixture": correction.fixture,
        "rs_ohm": correction.rs_ohm,
        "ls_h": correction.ls_h,
        "cp_f": correction.cp_f,
        "u_rs_ohm": correction.u_rs_ohm,
        "u_ls_h": correction.u_ls_h,
        "u_cp_f": correction.u_cp_f,
    }


def number(value: float | None) -> float | None:
    """A finite number or null."""
    return None if value is None or not math.isfinite(value) else float(value)
