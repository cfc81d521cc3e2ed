"""Numbers with SI units: parse what people write, format what people read.

PURE. ``parse("1.65 MHz", "Hz") == 1650000.0`` and ``format_si(1650000.0, "Hz") == "1.65 MHz"``.
A unit that measures something else is refused with the unit that would do.
"""

from __future__ import annotations

import math
import re
from decimal import Decimal

PREFIXES = {
    "f": -15, "p": -12, "n": -9, "u": -6, "µ": -6, "μ": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9, "T": 12,
}  # fmt: skip
_WRITTEN = {-15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}

# unit as written → (the SI unit it measures in, factor, may it take a prefix)
_UNITS: dict[str, tuple[str, float, bool]] = {
    "Hz": ("Hz", 1.0, True),
    "ohm": ("ohm", 1.0, True),
    "Ohm": ("ohm", 1.0, True),
    "\u03a9": ("ohm", 1.0, True),  # Greek capital omega
    "\u2126": ("ohm", 1.0, True),  # the ohm sign, which looks the same
    "F": ("F", 1.0, True),
    "H": ("H", 1.0, True),
    "S": ("S", 1.0, True),
    "V": ("V", 1.0, True),
    "A": ("A", 1.0, True),
    "W": ("W", 1.0, True),
    "N": ("N", 1.0, True),
    "m": ("m", 1.0, True),
    "s": ("s", 1.0, True),
    "min": ("s", 60.0, False),
    "h": ("h", 1.0, False),
    "d": ("h", 24.0, False),
    "degC": ("degC", 1.0, False),
    "°C": ("degC", 1.0, False),
    "K": ("K", 1.0, False),
    "deg": ("deg", 1.0, False),
    "°": ("deg", 1.0, False),
    "1": ("1", 1.0, False),
    "": ("1", 1.0, False),
    "%": ("1", 1e-2, False),
    "ppm": ("1", 1e-6, False),
    "1/K": ("1/K", 1.0, False),
    "%/K": ("1/K", 1e-2, False),
    "ppm/K": ("1/K", 1e-6, False),
}

_SHOWN = {"ohm": "Ω", "degC": "°C", "deg": "°", "1": ""}
# Thousands may stand apart, as ``format_si`` writes them: a space, or a no-break, thin or narrow one.
_SPACES = " \u00a0\u2009\u202f"
_GROUPED = rf"[0-9]{{1,3}}(?:[{_SPACES}][0-9]{{3}})+(?![0-9])\.?[0-9]*"
_NUMBER = rf"[+-]?(?:{_GROUPED}|[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_QUANTITY = re.compile(rf"\s*({_NUMBER})\s*(\S*)\s*")
_DECIMAL_COMMA = re.compile(r"\s*[+-]?[0-9]+,[0-9].*")


class QuantityError(ValueError):
    """Text that is not a number with a unit of the wanted dimension; says what would do."""


def unit_factor(unit: str, dimension: str) -> tuple[float, int]:
    """Factor and power of ten from ``unit`` to the SI unit ``dimension``: value·factor·10**power.

    The two are kept apart so that ``scale`` can round once, correctly. Raises QuantityError for
    an unknown unit or one that measures something else.
    """
    unit = unit.strip()
    if unit in _UNITS:
        si, factor, _ = _UNITS[unit]
        power = 0
    else:
        si, factor, prefixable = _UNITS.get(unit[1:], ("", 1.0, False))
        if unit[:1] not in PREFIXES or not prefixable:
            raise QuantityError(f"'{unit}' is not a unit known here; expected {_would_do(dimension)}")
        power = PREFIXES[unit[0]]
    if si != dimension:
        raise QuantityError(f"unit '{unit}' does not measure this; expected {_would_do(dimension)}")
    return factor, power


def scale(value: float, unit: str, dimension: str) -> float:
    """``value`` given in ``unit`` as a number of SI units: 1.005 kHz is 1005.0, as on paper.

    The value is taken as the decimal number that it is written as (its shortest text), and the product is rounded
    once; binary arithmetic would make 1004.9999999999999 of that example. Infinity and NaN stay what they are.
    """
    factor, power = unit_factor(unit, dimension)
    if not math.isfinite(value):
        return float(value)
    return float(Decimal(repr(float(value))).scaleb(power) * Decimal(repr(factor)))


def parse(text: str, dimension: str) -> float:
    """A number with a unit, as text, to a float in the SI unit ``dimension``.

    >>> parse("1.65 MHz", "Hz"), parse("500 ppm", "1")
    (1650000.0, 0.0005)
    """
    match = _QUANTITY.fullmatch(text)
    if _DECIMAL_COMMA.fullmatch(text):
        raise QuantityError(f"'{text}' has a comma in its number; write a decimal point and no thousands separators")
    if not match:
        raise QuantityError(f"cannot read '{text}' as a number with a unit such as '1.5 {_example(dimension)}'")
    number, unit = match.groups()
    if not unit and dimension != "1":
        raise QuantityError(f"'{text}' has no unit; expected {_would_do(dimension)}")
    value = scale(float(re.sub(f"[{_SPACES}]", "", number)), unit, dimension)
    if not math.isfinite(value):
        raise QuantityError(f"'{text}' is too large a number")
    return value


def format_si(value: float, unit: str, *, digits: int = 6) -> str:
    """A value in SI units as a person reads it, with the prefix that suits and a space in thousands.

    >>> format_si(1650000.0, "Hz"), format_si(0.0, "ohm"), format_si(1.2e-9, "F", digits=3)
    ('1.65 MHz', '0 Ω', '1.2 nF')
    """
    if math.isfinite(value):
        value = float(f"{value:.{max(1, digits) - 1}e}")  # rounded first, so that 999 999.9 Hz is 1 MHz, not 1 000 kHz
    power = prefix_power(value, unit)
    shown = value / 10.0**power if power >= 0 else value * 10.0**-power
    return f"{number(shown, digits)} {written(unit, power)}".rstrip()


def prefix_power(value: float, unit: str) -> int:
    """The power of ten (a multiple of 3) whose prefix suits ``value``; 0 where no prefix goes."""
    if unit in ("1", "deg", "degC", "K", "h", "1/K") or not value or not math.isfinite(value):
        return 0
    power = 3 * math.floor(math.log10(abs(value)) / 3 + 1e-12)
    return max(-15, min(12, power))


def written(unit: str, power: int = 0) -> str:
    """The unit sign with its prefix: ``written("ohm", 3) == "kΩ"``."""
    return _WRITTEN[power] + _SHOWN.get(unit, unit)


def number(value: float, digits: int = 6) -> str:
    """``digits`` significant digits, no exponent between 1e-4 and 1e9, thin thousands ("1 670.0")."""
    if not math.isfinite(value):
        return str(value)
    text = f"{value:.{digits}g}"
    if "e" in text and 1e-4 <= abs(value) < 1e9:
        text = f"{value:.{max(0, digits - 1 - math.floor(math.log10(abs(value))))}f}"
    return group(text)


def group(text: str) -> str:
    """Put a space between thousands of the whole part of a plain decimal number."""
    whole, dot, rest = text.partition(".")
    if not whole.lstrip("-").isdigit() or len(whole.lstrip("-")) < 4:
        return text
    return f"{int(whole):,}".replace(",", " ") + dot + rest


def _example(dimension: str) -> str:
    return {"Hz": "kHz", "F": "nF", "1": "%"}.get(dimension, dimension)


def _would_do(dimension: str) -> str:
    choices = {
        "Hz": "Hz, kHz or MHz",
        "ohm": "ohm, mohm or kohm",
        "F": "pF, nF or µF",
        "H": "µH, mH or H",
        "V": "mV or V",
        "h": "h or d",
        "s": "ms, s or min",
        "degC": "degC",
        "K": "K",
        "m": "µm or mm",
        "deg": "deg",
        "1": "1, % or ppm",
        "1/K": "1/K, %/K or ppm/K",
    }
    return choices.get(dimension, dimension)
