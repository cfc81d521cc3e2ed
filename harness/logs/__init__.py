"""Logged sweeps: the bytes of a CSV or Touchstone file ⇄ Sweep.

PURE: bytes and a name in, a Sweep or every mistake of the file out; who opens files is outside. May import
correction, circuits, records, characteristics, quantities, errors and NumPy; nothing with a file, clock or
wire. ``reading`` is the door, ``encoding`` makes text of bytes and ``numbers`` numbers of cells, ``table`` and
``columns`` read CSV, ``touchstone`` (with ``touchstone_layout``, ``touchstone_keywords``) Touchstone 1.1 and 2.0,
``transmission`` makes impedance of S21, ``checks`` holds what every log must meet, ``mistakes`` collects,
``writing`` mirrors the CSV reader. To add a column pair: a row in ``columns.PAIRS``. To add a format: a
module that returns ``checks.Points``, and its suffix in ``reading``.
"""

from harness.logs.reading import read_log
from harness.logs.writing import write_csv

__all__ = ["read_log", "write_csv"]
