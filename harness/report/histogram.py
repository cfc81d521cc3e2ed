"""Values and limits → the bars of a histogram and its axis: what to draw, before anything is drawn.

Where there are limits a bar never straddles one: bars begin at the limits, and a value that equals a limit counts as
inside. An axis is not stretched for a few far values; those are counted beyond its ends instead.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harness.records import Floats

_MOST_BARS = 60
_BARS_IN_TOLERANCE = (6, 40)
_REACH = 3.0  # interquartile ranges beyond the quartiles that still lie on the axis
_BESIDE = 0.5  # tolerances beyond a limit that still lie on the axis
_PADDING = 0.06
_SAME = 1e-9  # relative: a spread below this is rounding


@dataclass(frozen=True, slots=True)
class Bar:
    """``count`` values from ``start`` to ``stop``, all inside the limits or all outside."""

    start: float
    stop: float
    count: int
    inside: bool


@dataclass(frozen=True, slots=True)
class Histogram:
    """Bars in order, the axis from ``low`` to ``high``, and how many values lie beyond its ends."""

    bars: tuple[Bar, ...]
    low: float
    high: float
    below: int
    above: int


def histogram(values: Sequence[float], least: float | None, greatest: float | None) -> Histogram:
    """The histogram of ``values`` (at least one), limits None where there is none, all in the unit shown."""
    numbers = np.sort(np.asarray(values, dtype=np.float64))
    low, high = _window(numbers, least, greatest)
    shown = numbers[(numbers >= low) & (numbers <= high)]
    width, origin = _bars(shown, low, high, least, greatest)
    bars = _counted(shown, width, origin, least, greatest)
    ends = [low, high, *(end for bar in bars for end in (bar.start, bar.stop))]
    pad = _PADDING * (max(ends) - min(ends))
    below, above = int((numbers < low).sum()), int((numbers > high).sum())
    return Histogram(bars, min(ends) - pad, max(ends) + pad, below, above)


def _window(numbers: Floats, least: float | None, greatest: float | None) -> tuple[float, float]:
    """The limits, and the values but for far ones."""
    q1, q3 = (float(quartile) for quartile in np.quantile(numbers, (0.25, 0.75)))
    reach = _REACH * (q3 - q1) if q3 > q1 else math.inf
    beside = _BESIDE * (greatest - least) if least is not None and greatest is not None else 0.0
    low = min(q1 - reach, math.inf if least is None else least - beside)
    high = max(q3 + reach, -math.inf if greatest is None else greatest + beside)
    near = numbers[(numbers >= low) & (numbers <= high)]
    ends = [float(near[0]), float(near[-1]), *(limit for limit in (least, greatest) if limit is not None)]
    low, high = min(ends), max(ends)
    if high - low <= _SAME * max(abs(low), abs(high)):
        room = 0.01 * max(abs(low), abs(high)) or 1.0
        return low - room, high + room
    return low, high


def _bars(shown: Floats, low: float, high: float, least: float | None, greatest: float | None) -> tuple[float, float]:
    """Width of a bar by Freedman and Diaconis' rule (2·IQR/∛n), fitted to the limits; and where bars begin."""
    q1, q3 = (float(quartile) for quartile in np.quantile(shown, (0.25, 0.75)))
    width = 2.0 * (q3 - q1) / shown.size ** (1.0 / 3.0)
    if width <= _SAME * max(abs(low), abs(high)):
        width = (high - low) / 20.0
    width = max(width, (high - low) / _MOST_BARS)
    origin = least if least is not None else greatest if greatest is not None else low
    if least is None or greatest is None or greatest <= least:
        return width, origin
    fewest, most = _BARS_IN_TOLERANCE
    wanted = min(max(round((greatest - least) / width), fewest), most)
    fitting = (greatest - least) / wanted
    while (high - low) / fitting > 2 * _MOST_BARS and wanted > 1:
        wanted -= 1
        fitting = (greatest - least) / wanted
    return fitting, origin


def _counted(
    shown: Floats, width: float, origin: float, least: float | None, greatest: float | None
) -> tuple[Bar, ...]:
    """How many values each bar holds. Each side of a limit is counted for itself, whatever rounding says."""
    index = np.floor((shown - origin) / width).astype(np.int64)
    is_below = np.zeros(shown.shape, dtype=bool) if least is None else shown < least
    is_above = np.zeros(shown.shape, dtype=bool) if greatest is None else shown > greatest
    inside = ~(is_below | is_above)
    first = 0 if least is not None else None
    end = None if greatest is None else round((greatest - origin) / width)
    if first is not None:
        index = np.where(is_below, np.minimum(index, first - 1), np.maximum(index, first))
    if end is not None:
        index = np.where(is_above, np.maximum(index, end), np.where(inside, np.minimum(index, end - 1), index))
    if first is not None and end is not None and end <= first:  # the limits coincide
        index = np.where(inside, 0, index)
    bars = []
    for number in np.unique(index):
        mine = index == number
        for is_in in (True, False):
            count = int((mine & (inside == is_in)).sum())
            if count:
                bars.append(Bar(origin + float(number) * width, origin + float(number + 1) * width, count, is_in))
    return tuple(bars)


def ticks(low: float, high: float, about: int = 5) -> list[float]:
    """Round numbers from ``low`` to ``high``: steps of 1, 2 or 5 times a power of ten, about so many.

    >>> ticks(1638.2, 1661.0)
    [1640.0, 1645.0, 1650.0, 1655.0, 1660.0]
    """
    raw = (high - low) / about
    power = math.floor(math.log10(raw))
    step = next(m for m in (1, 2, 5, 10) if m * 10.0**power >= 0.999 * raw) * 10.0**power
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    digits = max(0, 1 - math.floor(math.log10(step)))
    return [round(number * step, digits) for number in range(first, last + 1)]
