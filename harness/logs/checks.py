"""What every log must meet, whatever its format: rising positive frequencies, two points, finite impedances."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harness.logs.mistakes import Mistakes
from harness.records import Complexes, Floats

LEAST_POINTS = 2
# A frequency column written with fewer digits than the sweep's step repeats itself often; a copied row does not.
_LEAST_ROUNDED = 10
_LEAST_ROUNDED_SHARE = 0.05
_MOST_EQUAL_READINGS = 0.1


@dataclass(frozen=True, slots=True, eq=False)
class Points:
    """A log's points before they are a Sweep: line, frequency in hertz, and the quantity as complex number ``(N,)``.

    ``kind`` says what the quantity is: "z", "s11" or "s21"; ``z0_ohm`` its reference.
    """

    kind: str
    lines: NDArray[np.int64]
    f_hz: Floats
    quantity: Complexes
    z0_ohm: float
    frequency_key: str


def check_frequencies(points: Points, mistakes: Mistakes) -> None:
    """Add a mistake for too few points, frequencies of zero or less, and where frequencies go back or repeat."""
    f, lines, key = points.f_hz, points.lines, points.frequency_key
    if f.size < LEAST_POINTS:
        mistakes.stop_if_any()  # the points are few because their cells are wrong
        count = "no point" if f.size == 0 else "one point"
        mistakes.add(
            None, "", f"the file holds {count}; a sweep needs {LEAST_POINTS} or more.", "Export the whole sweep."
        )
        return
    for i in np.flatnonzero(f <= 0):
        mistakes.add(int(lines[i]), key, f"{f[i]:.10g} Hz is not a frequency above zero.", "Remove the row.")
    steps = np.diff(f)
    _check_order(f, lines, key, steps, mistakes)
    repeats = np.flatnonzero(steps == 0)
    if repeats.size and not _rounded(steps, points.quantity):
        for i in repeats:
            text = f"{f[i + 1]:.10g} Hz repeats the frequency of line {lines[i]}."
            mistakes.add(int(lines[i + 1]), key, text, "Keep one row for each frequency.")


def check_impedances(points: Points, z_ohm: Complexes, mistakes: Mistakes) -> None:
    """Add a mistake for every point whose impedance comes out infinite, undetermined or exactly zero."""
    with np.errstate(all="ignore"):
        size = np.abs(z_ohm)
    for i in np.flatnonzero(~np.isfinite(size)):
        mistakes.add(int(points.lines[i]), "", "the reading is an open: it has no finite impedance.", "Remove the row.")
    for i in np.flatnonzero(size == 0):
        mistakes.add(int(points.lines[i]), "", "the reading is an impedance of exactly 0 ohm.", "Remove the row.")


def _check_order(f: Floats, lines: NDArray[np.int64], key: str, steps: Floats, mistakes: Mistakes) -> None:
    back = np.flatnonzero(steps < 0)
    if not back.size:
        return
    line, before, after = int(lines[back[0] + 1]), f[back[0]], f[back[0] + 1]
    if np.all(steps <= 0):
        mistakes.add(line, key, "the frequencies run downward.", "Sort the rows by rising frequency.")
        return
    times = "" if back.size == 1 else f", the first of {back.size} such places"
    text = f"the frequency goes back from {before:.10g} Hz to {after:.10g} Hz{times}."
    mistakes.add(line, key, text, "Sort the rows by rising frequency; keep one sweep in a file.")


def _rounded(steps: Floats, quantity: Complexes) -> bool:
    """Whether repeats come from a frequency column with too few digits, which is no mistake of the sweep.

    Then they are frequent, the readings beside them differ, and the steps around them are one unit of the last
    digit written: a power of ten. Such frequencies are off by up to half that unit, and are kept as written.
    """
    repeats = steps == 0
    count = int(np.count_nonzero(repeats))
    if np.any(steps < 0) or count < max(_LEAST_ROUNDED, _LEAST_ROUNDED_SHARE * steps.size) or count == steps.size:
        return False
    equal = quantity[1:][repeats] == quantity[:-1][repeats]
    places = np.flatnonzero(repeats)
    beside = np.concatenate([steps[places[places > 0] - 1], steps[places[places < steps.size - 1] + 1]])
    unit = np.log10(beside[beside > 0])
    return bool(
        np.mean(equal) <= _MOST_EQUAL_READINGS and unit.size and np.all(np.abs(unit - np.round(unit[0])) < 1e-6)
    )
