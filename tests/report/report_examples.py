"""Invented limits and lots for the tests of reports; no part of any plant."""

from __future__ import annotations

from dataclasses import replace

from harness.records import (
    ApplicationSpec,
    ConditionSpec,
    Grade,
    LimitSet,
    LotSpec,
    MeasurementSpec,
    ModeSpec,
    Requirement,
)
from harness.statistics import Attempt

LIMITS = LimitSet(
    part_number="MD-1650",
    revision="C",
    description="invented mist disc",
    mode=ModeSpec("thickness", (1.5e6, 1.9e6)),
    measurement=MeasurementSpec(),
    conditions=ConditionSpec(),
    requirements=(
        Requirement("fs", 1638e3, 1662e3, "kHz", action="Yellow tray."),
        Requirement("qm", 140.0, None, "1"),
        Requirement("c_at", 1.65e-9, 2.15e-9, "nF", at_hz=1e3),
        Requirement("tan_delta", None, 0.012, "%"),
    ),
    grades=(Grade("L", "fs", 1638e3, 1650e3, "kHz"), Grade("H", "fs", 1650e3, 1662e3, "kHz")),
    lot=LotSpec(min_yield=0.9),
    application=ApplicationSpec(),
    text="",
    sha256="0f1e2d3c" * 8,
)

TRACEABILITY = {
    "instrument": "invented analyser, serial 0007",
    "correction": "fixture A, 42 nH",
    "records": "1 (9d0c5b1e) to 44 (41be7c90)",
}


def with_least_yield(least: float | None) -> LimitSet:
    return replace(LIMITS, lot=LotSpec(min_yield=least))


def attempt(serial: str, verdict: str = "pass", number: int = 1, **more) -> Attempt:
    """One attempt; values by keyword ``values`` (SI)."""
    reasons = more.get("reasons", {"fail": (("above-max", "fs"),), "no verdict": (("poor-contact", "c_at"),)})
    reasons = reasons.get(verdict, ()) if isinstance(reasons, dict) else reasons
    values = {name: (value, abs(value or 0) * 1e-4) for name, value in more.get("values", {}).items()}
    at = f"2026-11-20T06:{number:02d}:09.000000Z"
    final = more.get("final", True)
    return Attempt(serial, number, more.get("element", 1), verdict, more.get("grade"), final, at, reasons, values)


def sound_values(step: int) -> dict[str, float]:
    """Values of a part that passes, a little different for each ``step``."""
    return {
        "fs": 1650e3 + 700.0 * ((step * 7) % 11 - 5),
        "qm": 200.0 + 3.3 * ((step * 5) % 13 - 6),
        "c_at": 1.9e-9 + 1.1e-11 * ((step * 3) % 7 - 3),
        "tan_delta": 0.004 + 1.7e-4 * ((step * 4) % 9 - 4),
        "l1": 1.2e-3 + 1e-6 * (step % 5),
    }


def lot(parts: int = 40) -> list[Attempt]:
    """A lot: most pass, every tenth fails above fs, the third has no verdict, the fourth passes at its second try."""
    attempts = []
    for step in range(parts):
        serial, values = f"MD-{step + 1:04d}", sound_values(step)
        if step % 10 == 9:
            attempts.append(attempt(serial, "fail", values={**values, "fs": 1664e3 + 900.0 * step}))
        elif step == 2:
            attempts += [attempt(serial, "no verdict", final=False), attempt(serial, "no verdict", 2)]
        elif step == 3:
            attempts += [
                attempt(serial, "no verdict", final=False),
                attempt(serial, "pass", 2, values=values, grade="L"),
            ]
        else:
            attempts.append(attempt(serial, values=values, grade="L" if values["fs"] < 1650e3 else "H"))
    return attempts
