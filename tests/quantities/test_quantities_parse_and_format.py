"""Numbers with units: what people write is read exactly, and what is shown can be read back."""

from __future__ import annotations

import contextlib
import doctest
import math
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harness import quantities
from harness.quantities import (
    PREFIXES,
    QuantityError,
    format_si,
    group,
    number,
    parse,
    prefix_power,
    scale,
    unit_factor,
    written,
)

DIMENSIONS = ("Hz", "ohm", "F", "H", "S", "V", "A", "W", "N", "m", "s", "h", "degC", "K", "deg", "1", "1/K")
PREFIXED = ("Hz", "ohm", "F", "H", "S", "V", "A", "W", "N", "m", "s")

READ = [
    ("1.65 MHz", "Hz", 1650000.0),
    ("1.65MHz", "Hz", 1650000.0),
    ("  1650   kHz ", "Hz", 1650000.0),
    ("1 650.5 kHz", "Hz", 1650500.0),
    ("1\u202f650 kHz", "Hz", 1650000.0),
    ("1.65e6 Hz", "Hz", 1650000.0),
    ("+.5 mHz", "Hz", 0.0005),
    ("20 ohm", "ohm", 20.0),
    ("20 kOhm", "ohm", 20000.0),
    ("20 m\u03a9", "ohm", 0.02),
    ("20 M\u2126", "ohm", 2e7),
    ("4 nF", "F", 4e-9),
    ("4 uF", "F", 4e-6),
    ("4 \u00b5F", "F", 4e-6),
    ("4 \u03bcF", "F", 4e-6),
    ("4 fF", "F", 4e-15),
    ("3 mm", "m", 0.003),
    ("3 m", "m", 3.0),
    ("2 min", "s", 120.0),
    ("2 ms", "s", 0.002),
    ("2 d", "h", 48.0),
    ("23 °C", "degC", 23.0),
    ("-5 degC", "degC", -5.0),
    ("0.5 K", "K", 0.5),
    ("90 °", "deg", 90.0),
    ("0.3", "1", 0.3),
    ("12 %", "1", 0.12),
    ("500 ppm", "1", 0.0005),
    ("-30 ppm/K", "1/K", -3e-5),
    ("0.1 %/K", "1/K", 0.001),
]


@pytest.mark.parametrize(("text", "dimension", "value"), READ)
def test_reads_what_people_write(text: str, dimension: str, value: float) -> None:
    """Every usual way to write a quantity gives the very float of its decimal value."""
    assert parse(text, dimension) == value


REFUSED = [
    ("1650", "Hz", "has no unit"),
    ("1.65 Mhz", "Hz", "not a unit known here; expected Hz, kHz or MHz"),
    ("1.65 pF", "Hz", "does not measure this; expected Hz, kHz or MHz"),
    ("5 V", "ohm", "expected ohm, mohm or kohm"),
    ("5 kdegC", "degC", "not a unit known here"),
    ("5 k", "ohm", "not a unit known here"),
    ("5 kppm", "1", "not a unit known here"),
    ("1,65 MHz", "Hz", "comma"),
    ("1,650,000Hz", "Hz", "comma"),
    ("1.65 M Hz", "Hz", "cannot read"),
    ("MHz", "Hz", "cannot read"),
    ("nan Hz", "Hz", "cannot read"),
    ("inf Hz", "Hz", "cannot read"),
    ("1_000 Hz", "Hz", "unit"),
    ("1 65 kHz", "Hz", "cannot read"),
    ("", "Hz", "cannot read"),
    ("1e999 Hz", "Hz", "too large"),
    ("1e300 THz", "Hz", "too large"),
]


@pytest.mark.parametrize(("text", "dimension", "says"), REFUSED)
def test_refuses_with_one_sentence(text: str, dimension: str, says: str) -> None:
    """What cannot be a quantity of the dimension is refused in one line that says what would do."""
    with pytest.raises(QuantityError, match=says) as caught:
        parse(text, dimension)
    assert "\n" not in str(caught.value)


@given(st.text(max_size=12), st.sampled_from(DIMENSIONS))
def test_any_text_is_read_or_refused(text: str, dimension: str) -> None:
    """No text raises anything but QuantityError, and what is read is a finite float."""
    with contextlib.suppress(QuantityError):
        assert math.isfinite(parse(text, dimension))


@given(
    st.decimals(min_value=-10000, max_value=10000, places=6, allow_nan=False),
    st.sampled_from(sorted(PREFIXES)),
    st.sampled_from(PREFIXED),
)
def test_prefixes_round_once(value: Decimal, prefix: str, dimension: str) -> None:
    """A written decimal with a prefix is the nearest float of its exact value, not a rounding beside it."""
    exact = float(value.scaleb(PREFIXES[prefix]))
    assert scale(float(value), prefix + dimension, dimension) == exact
    assert parse(f"{value} {prefix}{dimension}", dimension) == exact


def test_binary_rounding_does_not_show() -> None:
    """1.005 kHz is 1005 Hz, although 1.005 * 1000 is not; so are 4.35 % and whole numbers from a file."""
    assert 1.005 * 1000 != 1005.0
    assert scale(1.005, "kHz", "Hz") == 1005.0
    assert scale(4.35, "%", "1") == 0.0435
    assert scale(3, "kHz", "Hz") == 3000.0
    assert scale(1670.1, "kHz", "Hz") == 1670100.0


def test_infinity_passes_through_scale() -> None:
    """A limit of infinity from a file stays infinity; whether it may be one is for the reader to say."""
    assert scale(math.inf, "kHz", "Hz") == math.inf
    assert math.isnan(scale(math.nan, "%", "1"))


@pytest.mark.parametrize(
    ("unit", "dimension", "factor", "power"),
    [("kHz", "Hz", 1, 3), ("%", "1", 0.01, 0), ("ppm/K", "1/K", 1e-6, 0), ("min", "s", 60, 0), (" d ", "h", 24, 0)],
)
def test_factor_and_power(unit: str, dimension: str, factor: float, power: int) -> None:
    """A unit's way to SI is a factor and a power of ten, kept apart."""
    assert unit_factor(unit, dimension) == (factor, power)


SHOWN = [
    (1650000.0, "Hz", 6, "1.65 MHz"),
    (999999.96, "Hz", 6, "1 MHz"),
    (999999.4, "Hz", 6, "999.999 kHz"),
    (0.0, "ohm", 6, "0 Ω"),
    (1.2e-9, "F", 3, "1.2 nF"),
    (4.7e-6, "F", 3, "4.7 µF"),
    (-0.25, "V", 3, "-250 mV"),
    (1234.5, "degC", 6, "1 234.5 °C"),
    (0.0005, "1", 3, "0.0005"),
    (1e-20, "F", 3, "1e-05 fF"),
    (2e15, "Hz", 3, "2 000 THz"),
    (math.inf, "Hz", 3, "inf Hz"),
    (math.nan, "ohm", 3, "nan Ω"),
    (90.0, "deg", 3, "90 °"),
    (-3e-5, "1/K", 3, "-3e-05 1/K"),
]


@pytest.mark.parametrize(("value", "unit", "digits", "text"), SHOWN)
def test_shows_what_people_read(value: float, unit: str, digits: int, text: str) -> None:
    """Values are shown with the prefix that suits, rounded before the prefix is chosen."""
    assert format_si(value, unit, digits=digits) == text


@given(
    st.floats(min_value=1e-13, max_value=1e13) | st.floats(min_value=-1e13, max_value=-1e-13) | st.just(0.0),
    st.sampled_from(DIMENSIONS),
    st.integers(1, 12),
)
def test_shown_values_read_back(value: float, unit: str, digits: int) -> None:
    """What is shown can be typed in again, and is the value to the digits shown."""
    again = parse(format_si(value, unit, digits=digits), unit)
    assert again == pytest.approx(value, rel=0.51 * 10.0 ** (1 - digits), abs=0)


@given(st.floats(min_value=1e-14, max_value=9e14), st.sampled_from(PREFIXED))
def test_prefix_suits(value: float, unit: str) -> None:
    """The number before a prefix lies between 1 and 1000."""
    assert 1 - 1e-9 <= value / 10.0 ** prefix_power(value, unit) < 1000


@pytest.mark.parametrize("unit", ["1", "deg", "degC", "K", "h", "1/K"])
def test_units_without_prefix(unit: str) -> None:
    """Ratios, angles, temperatures and hours take no prefix."""
    assert prefix_power(1e6, unit) == 0


def test_every_prefix_is_written_and_read() -> None:
    """Each power that can be chosen has a sign, and the sign is read as that power."""
    for power in range(-15, 13, 3):
        assert parse(f"2 {written('ohm', power)}", "ohm") == float(f"2e{power}")


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (1670.05, 6, "1 670.05"),
        (123456789.0, 6, "123 456 789"),
        (1e9, 3, "1e+09"),
        (1e-5, 3, "1e-05"),
        (-1234.0, 6, "-1 234"),
    ],
)
def test_plain_numbers(value: float, digits: int, text: str) -> None:
    """Plain numbers have grouped thousands and no exponent in the range people read."""
    assert number(value, digits) == text


@pytest.mark.parametrize(
    ("text", "grouped"),
    [
        ("1234567.8901", "1 234 567.8901"),
        ("-1000", "-1 000"),
        ("999", "999"),
        ("1e+06", "1e+06"),
        ("nan", "nan"),
        ("", ""),
    ],
)
def test_group(text: str, grouped: str) -> None:
    """Only the whole part of a plain number is grouped."""
    assert group(text) == grouped


def test_docstring_examples() -> None:
    """The examples in the module are what it does."""
    result = doctest.testmod(quantities)
    assert result.failed == 0
    assert result.attempted > 0
