"""Numbers as people read them: a value with its uncertainty, and values in the unit the limits are written in."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal

from harness.characteristics import CHARACTERISTICS
from harness.judging.wording import in_unit, plain, unit_shown
from harness.quantities import format_si, group, prefix_power, written
from harness.records import Requirement

COVERAGE = 2.0  # the factor k of every ± on a report
NOTHING = "–"
_DIGITS = 6  # significant digits where no uncertainty or spread says how many are worth showing
_STEP_DIGITS = 3  # significant digits of a spread: the outer values still tell apart when one part lies far off
_MOST_DIGITS = 15  # what a float holds
_MOST_DECIMALS = 4  # beyond which a smaller prefix reads better
_LONGEST_WHOLE = 1e6
_TOO_MANY_DECIMALS = 8  # beyond which a power of ten reads better
_LEAST_POWER = -15


_FINEST, _FINE_DIGITS = 1e-9, 9


def uncertain(value: float | None, u: float | None, unit: str, *, power: int | None = None) -> str:
    """A value with its expanded uncertainty U = 2u (k = 2), both in one prefix, to two significant digits of U.

    ``unit`` is the SI unit of both; ``power`` forces a prefix (3 for kHz). Without a standard uncertainty ``u`` the
    value stands alone with six digits. Rounding as JCGM 100 (GUM) 7.2.6 advises.

    >>> uncertain(1650210.4, 170.0, "Hz"), uncertain(0.3149, 0.0006, "1"), uncertain(None, None, "Hz")
    ('1 650.21 ± 0.34 kHz', '0.3149 ± 0.0012', '–')
    """
    if value is None or not math.isfinite(value):
        return NOTHING
    if u is None or not math.isfinite(u) or u <= 0:
        return format_si(value, unit, digits=_DIGITS)
    if COVERAGE * u < abs(value) * _FINEST:  # noise-free data: more digits would only be rounding
        return format_si(value, unit, digits=_FINE_DIGITS)
    expanded = Decimal(f"{COVERAGE * u:.1e}")
    last = max(expanded.adjusted() - 1, Decimal(repr(float(value))).adjusted() - _MOST_DIGITS + 1)
    power = _suiting_power(value, COVERAGE * u, unit, last) if power is None else power
    if power - last > _TOO_MANY_DECIMALS:
        power = prefix = Decimal(repr(float(value))).adjusted()
        return f"({_at(value, power, last)} ± {_at(expanded, power, last)})e{prefix} {written(unit)}".rstrip()
    return f"{_at(value, power, last)} ± {_at(expanded, power, last)} {written(unit, power)}".rstrip()


def _suiting_power(value: float, expanded: float, unit: str, last: int) -> int:
    """The prefix of the value, or a smaller one where that saves long decimals ("1 650.21", not "1.65021")."""
    power = prefix_power(value or expanded, unit)
    if not prefix_power(1e3, unit):
        return power
    while power - last > _MOST_DECIMALS and power > _LEAST_POWER and abs(value) < _LONGEST_WHOLE * 10.0 ** (power - 3):
        power -= 3
    return power


def _at(value: float | Decimal, power: int, last: int) -> str:
    """``value`` over 10**power, rounded at 10**last, with thousands apart."""
    exact = value if isinstance(value, Decimal) else Decimal(repr(float(value)))
    rounded = exact.scaleb(-last).quantize(Decimal(1)).scaleb(last - power)
    return group(f"{rounded:.{max(0, power - last)}f}")


@dataclass(frozen=True, slots=True)
class Scale:
    """The unit that values of one characteristic are shown in: ``unit`` as written ("kHz"), ``dimension`` in SI."""

    unit: str
    dimension: str

    @property
    def sign(self) -> str:
        """The unit as it stands on paper; "" for plain ratios."""
        return unit_shown(self.unit, self.dimension)

    def of(self, value: float) -> float:
        return float(in_unit(value, self.unit, self.dimension))

    def text(self, value: float | None, step: float | None = None) -> str:
        """``value`` to three significant digits of ``step`` (SI: a spread), or to six of its own."""
        if value is None or not math.isfinite(value):
            return NOTHING
        number = in_unit(value, self.unit, self.dimension)
        if step and math.isfinite(step):
            decimals = _STEP_DIGITS - 1 - in_unit(step, self.unit, self.dimension).adjusted()
        else:
            decimals = _DIGITS - 1 - number.adjusted() if number else 0
        return plain(number, min(max(0, decimals), max(0, _MOST_DIGITS - 1 - number.adjusted())))

    def exactly(self, value: float | None) -> str:
        """``value`` with all its own digits, as a limit is stated."""
        if value is None:
            return NOTHING
        number = in_unit(value, self.unit, self.dimension).normalize()
        exponent = number.as_tuple().exponent
        return plain(number, max(0, -exponent if isinstance(exponent, int) else 0))


def scale_for(characteristic: str, requirement: Requirement | None, values: Sequence[float]) -> Scale:
    """The unit of the requirement, else the prefix that suits the middle of ``values``."""
    dimension = CHARACTERISTICS[characteristic].unit
    if requirement is not None:
        return Scale(requirement.unit, dimension)
    middle = sorted(values)[len(values) // 2] if values else 0.0
    return Scale(written(dimension, prefix_power(middle, dimension)), dimension)
