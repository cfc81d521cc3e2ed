"""Sweep → CSV text; mirror of the table reader."""

from __future__ import annotations

import numpy as np

from harness.correction import conversions
from harness.logs.columns import FREQUENCY
from harness.records import Floats, Sweep

# The reference that the reader assumes too, so that a relative sweep reads back with the same shape.
_Z0_OHM = 50.0


def write_csv(sweep: Sweep) -> str:
    """The points of a sweep as a CSV log, rows by rising frequency, numbers written so that no bit is lost.

    ``frequency_hz,resistance_ohm,reactance_ohm``; a sweep that is not ``absolute`` is written as transmission
    (``s21_db,s21_deg``), so that it reads back as one, its ohms still not counting. Conditions and readings beside
    the sweep are not part of a log.
    """
    order = np.argsort(sweep.f_hz, kind="stable")
    f_hz, z_ohm = sweep.f_hz[order], sweep.z_ohm[order]
    if sweep.absolute:
        return _rows("resistance_ohm,reactance_ohm", f_hz, *conversions.z_to_rx(z_ohm))
    return _rows("s21_db,s21_deg", f_hz, *conversions.complex_to_db_deg(conversions.z_to_s21_series(z_ohm, _Z0_OHM)))


def _rows(names: str, *columns: Floats) -> str:
    lists = [column.tolist() for column in columns]
    body = "".join(",".join(map(repr, row)) + "\n" for row in zip(*lists, strict=True))
    return f"{FREQUENCY},{names}\n{body}"
