"""The door of the room: the bytes of a log and its name → Sweep."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from harness.correction import conversions
from harness.errors import SetupError
from harness.logs.checks import Points, check_frequencies, check_impedances
from harness.logs.mistakes import Mistakes
from harness.logs.table import read_table
from harness.logs.touchstone import read_touchstone
from harness.logs.touchstone_keywords import is_version_2
from harness.logs.touchstone_layout import looks_like_options
from harness.records import Complexes, Floats, Sweep

FIXTURES: dict[str, Callable[[Complexes, float], Complexes]] = {
    "series": conversions.s21_series_to_z,
    "shunt": conversions.s21_shunt_to_z,
}
# A peak or dip of |S21| counts from this share of the usual level on.
_CLEAR = 0.05
# Re Z below minus this share of |Z| is no noise: 12° beyond a lossless part.
_ACTIVE = 0.2
# fp/fs of a part stays below this: keff² = 1 − (fs/fp)² < 0.56.
_MOST_FP_OVER_FS = 1.5


def read_log(data: bytes, file: str, *, fixture: str | None = None, z0_ohm: float = 50.0) -> Sweep:
    """The sweep in a CSV or Touchstone log. ``file`` is its name, for its suffix and for sentences.

    Read by suffix (``.csv``; ``.s1p``, ``.s2p``, ``.ts``), else by content. ``z0_ohm`` is the reference of S columns
    in CSV (Touchstone states its own). ``fixture`` says how a transmission log's part was connected, "series" or
    "shunt" (formulas in ``correction.conversions``); it changes nothing in other logs.

    Transmission without a fixture is taken as in series and the sweep marked ``absolute=False``: its frequencies
    and bandwidths count, not its ohms. Transmission that may be a shunt part's is refused rather than misread. A phase that would
    make the part active is the fixture's: it is turned to zero at the greatest |S21|, where the part is resistive.

    Raises FileMistakes with every mistake of the file by line (the first 20, and how many more), SetupError for
    a fixture or reference that cannot be.
    """
    if fixture is not None and fixture not in FIXTURES:
        raise SetupError(f"'{fixture}' is no way to connect a part.", place="fixture", remedy="Say series or shunt.")
    if not (np.isfinite(z0_ohm) and z0_ohm > 0):
        raise SetupError(
            f"{z0_ohm:g} ohm is no reference.", place="z0", remedy="Give a resistance above zero, usually 50."
        )
    mistakes = Mistakes(file)
    points = _read_points(data, file, mistakes, float(z0_ohm))
    check_frequencies(points, mistakes)
    mistakes.stop_if_any()
    z_ohm = _impedance(points, fixture, mistakes)
    check_impedances(points, z_ohm, mistakes)
    mistakes.stop_if_any()
    return Sweep(points.f_hz, z_ohm, absolute=points.kind != "s21" or fixture is not None)


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


def _impedance(points: Points, fixture: str | None, mistakes: Mistakes) -> Complexes:
    if points.kind == "z":
        return points.quantity
    if points.kind == "s11":
        return conversions.s11_to_z(points.quantity, points.z0_ohm)
    if fixture is not None:
        return FIXTURES[fixture](points.quantity, points.z0_ohm)
    return _relative_impedance(points, mistakes)


def _relative_impedance(points: Points, mistakes: Mistakes) -> Complexes:
    """Transmission of unknown fixture as if in series, turned so that S21 is real where it is greatest."""
    with np.errstate(all="ignore"):
        level = np.abs(points.quantity)
    remedy = "Say how the part was connected (fixture series or shunt)."
    if not np.all(np.isfinite(level)):
        return np.full(level.shape, np.inf + 0j)
    peak = int(np.argmax(level))
    if level[peak] > 1:
        text = "S21 is above 0 dB, which no part alone can do, so its level means nothing without the fixture."
        mistakes.stop(int(points.lines[peak]), "", text, remedy)
    if not _may_be_series(points.f_hz, level):
        text = "the transmission dips more than it peaks, so whether the part was in series cannot be told."
        mistakes.stop(int(points.lines[int(np.argmin(level))]), "", text, remedy)
    if level[peak] == 0:
        return np.full(level.shape, np.inf + 0j)
    z_ohm = conversions.s21_series_to_z(points.quantity, points.z0_ohm)
    if _is_passive(z_ohm[level >= level[peak] / 2]):
        return z_ohm
    turn = np.conj(points.quantity[peak]) / level[peak]
    return conversions.s21_series_to_z(points.quantity * turn, points.z0_ohm)


def _is_passive(z_ohm: Complexes) -> bool:
    """Whether hardly any impedance has a negative resistance to speak of, as phases of a bare fixture would give."""
    active = z_ohm.real < -_ACTIVE * np.abs(z_ohm)
    return bool(np.mean(active) <= _CLEAR)


def _may_be_series(f_hz: Floats, level: Floats) -> bool:
    """Whether |S21| looks like a part in series: a peak at fs, and any deeper dip (fp) soon above it.

    A shunt part does the opposite, and read as in series would show its fp as fs.
    """
    peak, dip = int(np.argmax(level)), int(np.argmin(level))
    usual = float(np.median(level))
    rise, fall = float(level[peak]) - usual, usual - float(level[dip])
    if fall <= max(rise, _CLEAR * usual):
        return True
    return rise > _CLEAR * usual and bool(f_hz[peak] < f_hz[dip] < _MOST_FP_OVER_FS * f_hz[peak])
