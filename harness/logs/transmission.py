"""Transmission S21 → impedance, as far as the connection is known.

- fixture "series" or "shunt": the formulas of ``correction.conversions``.
- none: taken as in series, and only its frequencies and bandwidths count. A part in series shows a peak of |S21| at
  fs and a dip at fp above it; a shunt part shows the dip at fs, and read as in series would pass off fp as fs. So
  what does not look like series is refused, not guessed.
- a phase that would make a part in series active (negative resistance), or no capacitor over most of the sweep, is
  the fixture's own, as cables give it: it is turned to zero at the greatest |S21|, where the part is resistive, and
  again only the shape counts.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from harness.correction import conversions
from harness.logs.checks import Points
from harness.logs.mistakes import Mistakes
from harness.records import Complexes, Floats

FIXTURES: dict[str, Callable[[Complexes, float], Complexes]] = {
    "series": conversions.s21_series_to_z,
    "shunt": conversions.s21_shunt_to_z,
}
# A peak or dip of |S21| counts from this share of the usual level on; so many active points are an accident.
_CLEAR = 0.05
# Re Z below minus this share of |Z| is no noise: 12° beyond a lossless part.
_ACTIVE = 0.2
# fp/fs of a part stays below this: keff² = 1 − (fs/fp)² < 0.56.
_MOST_FP_OVER_FS = 1.5


def transmission_to_z(points: Points, fixture: str | None, mistakes: Mistakes) -> tuple[Complexes, bool]:
    """Z in ohm ``(N,)``, and whether its level is to be believed. Raises FileMistakes where not even its shape is."""
    with np.errstate(all="ignore"):
        level = np.abs(points.quantity)
    if fixture is None and np.all(np.isfinite(level)):
        _check_series(points, level, mistakes)
    if fixture == "shunt":
        return conversions.s21_shunt_to_z(points.quantity, points.z0_ohm), True
    z_ohm = conversions.s21_series_to_z(points.quantity, points.z0_ohm)
    peak = int(np.argmax(level))
    if not (0 < level[peak] < np.inf) or _phase_is_the_parts(z_ohm, level >= level[peak] / 2):
        return z_ohm, fixture is not None
    turn = np.conj(points.quantity[peak]) / level[peak]
    return conversions.s21_series_to_z(points.quantity * turn, points.z0_ohm), False


def _check_series(points: Points, level: Floats, mistakes: Mistakes) -> None:
    remedy = "Say how the part was connected: --fixture series or --fixture shunt."
    peak, dip = int(np.argmax(level)), int(np.argmin(level))
    if level[peak] > 1:
        text = "S21 is above 0 dB, which no part alone can do, so its level means nothing without the fixture."
        mistakes.stop(int(points.lines[peak]), "", text, remedy)
    if not _may_be_series(points.f_hz, level, peak, dip):
        text = "the transmission dips more than it peaks, so whether the part was in series cannot be told."
        mistakes.stop(int(points.lines[dip]), "", text, remedy)


def _may_be_series(f_hz: Floats, level: Floats, peak: int, dip: int) -> bool:
    """Whether the peak outweighs the dip, or there are both, in the order and distance of fs and fp."""
    usual = float(np.median(level))
    rise, fall = float(level[peak]) - usual, usual - float(level[dip])
    if fall <= max(rise, _CLEAR * usual):
        return True
    return rise > _CLEAR * usual and bool(f_hz[peak] < f_hz[dip] < _MOST_FP_OVER_FS * f_hz[peak])


def _phase_is_the_parts(z_ohm: Complexes, strong: NDArray[np.bool_]) -> bool:
    """Whether hardly any well transmitted point has a negative resistance to speak of, and most are capacitive."""
    with np.errstate(all="ignore"):
        active = z_ohm.real < -_ACTIVE * np.abs(z_ohm)
    return bool(np.mean(active[strong]) <= _CLEAR and np.mean(z_ohm.imag < 0) > 0.5)
