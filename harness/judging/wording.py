"""Sentences an operator can read aloud, and what to do about each reason.

Numbers are shown in the unit the limit file uses, with as many digits as it takes to tell a value from its limit:
a reason never reads "1 670.0 is above 1 670.0". Decimal arithmetic on each float's shortest digits, so that what is
printed adds up.
"""

from __future__ import annotations

import math
from decimal import Decimal, localcontext

from harness.characteristics import CHARACTERISTICS
from harness.quantities import format_si, group, unit_factor, written
from harness.records import LimitSet, Reason, Requirement

_DIGITS_OF_DIFFERENCE = 2
_PRECISION = 700  # digits that hold any two floats' difference exactly
_LONGEST = 12  # decimals, or digits before the point, beyond which a power of ten reads better

# What the operator does where no requirement's own action applies.
_ACTIONS = {
    "disturbed": "Check the contact pins and seat the part again.",
    "no-part": "Look into the fixture: is there a part, does its lead hold? Load it again.",
    "shorted": "Look for solder or a bent pin between the electrodes. Load the part again.",
    "poor-contact": "Clean the contacts and load the part again.",
    "changed-during-sweep": "Let the part rest, close the fixture and measure again.",
    "temperature": "Let the part come to room temperature and measure again.",
    "age": "Put the part back until it is old enough.",
    "no-resonance": "Set the part aside as failed.",
    "outside-search": "Set the part aside as failed; is it the right part number?",
    "not-resolved": "Measure again.",
    "bad-data": "Measure again; if it comes back, call the test engineer.",
    "not-reached": "Call the test engineer: the sweep does not reach what the limit file asks.",
    "no-uncertainty": "Call the test engineer: the uncertainty of the measurement is not known.",
    "u-too-large": "Measure again; if it comes back, call the test engineer.",
    "no-requirement": "Call the test engineer: the limit file says nothing about this element.",
}


def action_for(reason: Reason, limits: LimitSet, element: int = 1) -> str:
    """What the operator does about ``reason``: the requirement's own action, else the usual one for its code."""
    for requirement in limits.requirements:
        if (requirement.characteristic, requirement.element) == (reason.characteristic, element):
            own = requirement.action if reason.code not in _ACTIONS else ""
            return own or _ACTIONS.get(reason.code, "")
    return _ACTIONS.get(reason.code, "")


def label(requirement: Requirement) -> str:
    """The sign on paper, with the frequency of a low-frequency characteristic: "fs", "C at 1 kHz"."""
    return sign(requirement.characteristic, requirement.at_hz)


def sign(characteristic: str, at_hz: float | None = None) -> str:
    known = CHARACTERISTICS[characteristic].sign
    return known if at_hz is None else f"{known} at {format_si(at_hz, 'Hz')}"


def unit_shown(unit: str, dimension: str) -> str:
    """The unit as it stands on paper: "kHz", "Ω", "%", and nothing for plain ratios."""
    factor, power = unit_factor(unit, dimension)
    if factor == 1.0:
        return written(dimension, power) if power % 3 == 0 else unit
    return unit


def in_unit(value: float, unit: str, dimension: str) -> Decimal:
    """An SI value in ``unit``, exactly what the float's shortest digits say."""
    factor, power = unit_factor(unit, dimension)
    return Decimal(repr(float(value))).scaleb(-power - round(math.log10(factor)))


def decimals_to_tell(difference: Decimal, written_out: Decimal) -> int:
    """Decimals that show ``difference`` with two digits, and ``written_out`` as written where that is not far off."""
    if not difference:
        return max(0, _own_decimals(written_out))
    least = _DIGITS_OF_DIFFERENCE - 1 - difference.adjusted()
    return max(0, least, min(_own_decimals(written_out), least + 4))


def plain(number: Decimal, decimals: int) -> str:
    """A number with so many decimals and spaces in thousands; as a power of ten where that would be too long."""
    shown = to_decimals(number, decimals)
    if decimals <= _LONGEST and number.adjusted() <= _LONGEST:
        return group(f"{shown:.{decimals}f}")
    return f"{shown:.{max(0, shown.adjusted() + decimals)}e}" if shown else "0"


def to_decimals(number: Decimal, decimals: int) -> Decimal:
    """``number`` rounded to so many decimals; never a negative zero."""
    with localcontext(prec=_PRECISION):
        return number.quantize(Decimal(1).scaleb(-decimals)) + 0


def past_limit(requirement: Requirement, value: float, limit: float, *, above: bool) -> str:
    """``fs 1 671.2 kHz is 1.2 kHz above the highest allowed 1 670.0 kHz``."""
    shown = _Shown(requirement, value, limit)
    side = "above the highest" if above else "below the lowest"
    return f"{label(requirement)} {shown.value} is {shown.difference} {side} allowed {shown.limit}"


def too_close(requirement: Requirement, value: float, limit: float, u: float, *, above: bool) -> str:
    """``fs 1 669.8 kHz is too close to the highest allowed 1 670.0 kHz to prove (u 0.30 kHz)``."""
    shown = _Shown(requirement, value, limit)
    side, name = ("highest", "above") if above else ("lowest", "below")
    spread = f"(u {amount(u, requirement)})"
    if value == limit:
        return f"{label(requirement)} is exactly the {side} allowed {shown.limit}: too close to prove {spread}"
    if (value > limit) == above:
        head = f"{label(requirement)} {shown.value} is {shown.difference} {name} the {side} allowed {shown.limit}"
        return f"{head}, too close to prove either way {spread}"
    return f"{label(requirement)} {shown.value} is too close to the {side} allowed {shown.limit} to prove {spread}"


def amount(value: float, requirement: Requirement) -> str:
    """A small positive amount (an uncertainty) with two digits and its unit."""
    dimension = CHARACTERISTICS[requirement.characteristic].unit
    number = in_unit(value, requirement.unit, dimension)
    return _with_unit(number, max(0, _DIGITS_OF_DIFFERENCE - 1 - number.adjusted()) if number else 0, requirement)


def stated(value: float, requirement: Requirement) -> str:
    """A limit as the file states it."""
    number = in_unit(value, requirement.unit, CHARACTERISTICS[requirement.characteristic].unit)
    return _with_unit(number, max(0, _own_decimals(number)), requirement)


def rounded(value: float, step: float, requirement: Requirement) -> str:
    """``value`` with the decimals that show ``step`` with two digits."""
    dimension = CHARACTERISTICS[requirement.characteristic].unit
    small = in_unit(step, requirement.unit, dimension)
    decimals = max(0, _DIGITS_OF_DIFFERENCE - 1 - small.adjusted()) if small else 0
    return _with_unit(in_unit(value, requirement.unit, dimension), decimals, requirement)


class _Shown:
    """A value, a limit and their difference, printed to match."""

    def __init__(self, requirement: Requirement, value: float, limit: float) -> None:
        dimension = CHARACTERISTICS[requirement.characteristic].unit
        number = in_unit(value, requirement.unit, dimension)
        bound = in_unit(limit, requirement.unit, dimension)
        difference = abs(number - bound)
        decimals = decimals_to_tell(difference, bound)
        with localcontext(prec=_PRECISION):  # from what is printed, so that the three add up
            shown = abs(to_decimals(number, decimals) - to_decimals(bound, decimals))
        self.value = _with_unit(number, decimals, requirement)
        self.limit = _with_unit(bound, decimals, requirement)
        self.difference = _with_unit(shown, decimals, requirement)


def _with_unit(number: Decimal, decimals: int, requirement: Requirement) -> str:
    dimension = CHARACTERISTICS[requirement.characteristic].unit
    return f"{plain(number, decimals)} {unit_shown(requirement.unit, dimension)}".rstrip()


def _own_decimals(number: Decimal) -> int:
    exponent = number.normalize().as_tuple().exponent
    return -exponent if isinstance(exponent, int) else 0
