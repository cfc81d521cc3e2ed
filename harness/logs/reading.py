"""The door of the room: the bytes of a log and its name → Sweep."""

from __future__ import annotations

import numpy as np

from harness.correction import conversions
from harness.errors import SetupError
from harness.logs.checks import Points, check_frequencies, check_impedances
from harness.logs.mistakes import Mistakes
from harness.logs.table import read_table
from harness.logs.touchstone import read_touchstone
from harness.logs.touchstone_keywords import is_version_2
from harness.logs.touchstone_layout import looks_like_options
from harness.logs.transmission import FIXTURES, transmission_to_z
from harness.records import Complexes, Sweep


def read_log(data: bytes, file: str, *, fixture: str | None = None, z0_ohm: float = 50.0) -> Sweep:
    """The sweep in a CSV or Touchstone log. ``file`` is its name, for its suffix and for sentences.

    Read by suffix (``.csv``; ``.s1p``, ``.s2p``, ``.ts``), else by content. ``z0_ohm`` is the reference of S columns
    in CSV (Touchstone states its own). ``fixture`` says how a transmission log's part was connected, "series" or
    "shunt"; it changes nothing in other logs. What transmission without it can tell: ``logs.transmission``.

    Raises FileMistakes with every mistake of the file by line (the first 20, and how many more), SetupError for
    a fixture or reference that cannot be.
    """
    if fixture is not None and fixture not in FIXTURES:
        raise SetupError(f"'{fixture}' is no way to connect a part.", place="fixture", remedy="Say series or shunt.")
    if not (np.isfinite(z0_ohm) and z0_ohm > 0):
        text = f"{z0_ohm:g} ohm is no reference."
        raise SetupError(text, place="z0", remedy="Give a resistance above zero, usually 50.")
    mistakes = Mistakes(file)
    points = _read_points(data, file, mistakes, float(z0_ohm))
    check_frequencies(points, mistakes)
    mistakes.stop_if_any()
    z_ohm, absolute = _impedance(points, fixture, mistakes)
    check_impedances(points, z_ohm, mistakes)
    mistakes.stop_if_any()
    return Sweep(points.f_hz, z_ohm, absolute=absolute)


def _read_points(data: bytes, file: str, mistakes: Mistakes, z0_ohm: float) -> Points:
    _, dot, suffix = file.rpartition(".")
    suffix = suffix.lower() if dot else ""
    ports = suffix[1:-1]
    if suffix.startswith("s") and suffix.endswith("p") and ports.isascii() and ports.isdigit():
        if int(ports) not in (1, 2):
            text = f"{ports} ports are not what a part is measured with here."
            mistakes.stop(None, "", text, "Export one port (.s1p) or two (.s2p).")
        return read_touchstone(data, mistakes, int(ports))
    if suffix == "ts" or (suffix != "csv" and _is_touchstone(data)):
        return read_touchstone(data, mistakes, None)
    return read_table(data, mistakes, z0_ohm)


def _is_touchstone(data: bytes) -> bool:
    """Whether the first line that is no Touchstone comment is a version keyword or an option line."""
    text = data.decode("utf-8", errors="replace").lstrip("\ufeff")
    lines = (line.partition("!")[0].strip() for line in text.splitlines())
    first = next((line for line in lines if line), "")
    return is_version_2(first) or (first.startswith("#") and looks_like_options(first))


def _impedance(points: Points, fixture: str | None, mistakes: Mistakes) -> tuple[Complexes, bool]:
    """Z in ohm, and whether its level is to be believed."""
    if points.kind == "z":
        return points.quantity, True
    if points.kind == "s11":
        return conversions.s11_to_z(points.quantity, points.z0_ohm), True
    return transmission_to_z(points, fixture, mistakes)
