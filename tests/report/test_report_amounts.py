"""Numbers as people read them: rounding, prefixes, and what they read back as."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harness.characteristics import CHARACTERISTICS
from harness.quantities import parse
from harness.records import Requirement
from harness.report.amounts import Scale, scale_for, uncertain

SHOWN = [
    (1650210.4, 170.0, "Hz", "1 650.21 ± 0.34 kHz"),
    (1650210.4, 3.0, "Hz", "1 650.2104 ± 0.0060 kHz"),
    (1650210.4, 17e3, "Hz", "1.650 ± 0.034 MHz"),
    (40079.11761, 0.25, "Hz", "40 079.12 ± 0.50 Hz"),
    (1.899e-9, 0.0115e-9, "F", "1.899 ± 0.023 nF"),
    (1.1345, 0.00455, "ohm", "1.1345 ± 0.0091 Ω"),
    (420.505, 0.6, "1", "420.5 ± 1.2"),
    (0.31489, 0.0006, "1", "0.3149 ± 0.0012"),
    (-88.31819, 0.01, "deg", "-88.318 ± 0.020 °"),
    (500.0, 600.0, "Hz", "500 ± 1 200 Hz"),
    (2.5e6, 4.98e4, "Hz", "2.50 ± 0.10 MHz"),
    (0.0, 0.05, "ohm", "0 ± 100 mΩ"),
    (1.234e-7, 0.6e-9, "1", "(1.234 ± 0.012)e-7"),
    (2.99e-6, 0.05e-6, "m", "2.99 ± 0.10 µm"),
]


@pytest.mark.parametrize(("value", "u", "unit", "text"), SHOWN)
def test_a_value_with_its_uncertainty(value, u, unit, text):
    """Two significant digits of U = 2u, the value to the same place, one prefix for both."""
    assert uncertain(value, u, unit) == text


@pytest.mark.parametrize("u", [None, 0.0, math.nan, math.inf, -1.0])
def test_without_an_uncertainty_the_value_stands_alone(u):
    """An uncertainty that is not known is not shown as one."""
    assert uncertain(1650210.0, u, "Hz") == "1.65021 MHz"


@pytest.mark.parametrize("value", [None, math.nan, math.inf])
def test_no_value_is_a_dash(value):
    """A value that does not exist is a dash, with or without an uncertainty."""
    assert uncertain(value, 1.0, "Hz") == "–"


def test_a_forced_prefix_is_kept():
    """A column of values can share one prefix."""
    assert uncertain(1650210.4, 170.0, "Hz", power=6) == "1.65021 ± 0.00034 MHz"


UNITS = st.sampled_from(sorted({known.unit for known in CHARACTERISTICS.values()}))


@given(st.floats(1e-12, 1e9), st.floats(1e-5, 2.0), UNITS)
def test_what_is_shown_reads_back_within_its_rounding(value, relative, unit):
    """Whatever value and uncertainty: the text reads back to both, to 5 % of U."""
    expanded = 2 * value * relative
    text = uncertain(value, value * relative, unit)
    head, tail = text.split(" ± ")
    if head.startswith("("):
        number, _, rest = tail.partition(")")
        factor, sign = rest.split(" ")[0], "".join(rest.split(" ")[1:])
        shown = parse(f"{head[1:]}{factor} {sign}", unit), parse(f"{number}{factor} {sign}", unit)
    else:
        sign = tail.rpartition(" ")[2] if unit != "1" else ""
        number = tail.rpartition(" ")[0] if unit != "1" else tail
        shown = parse(f"{head} {sign}", unit), parse(f"{number} {sign}", unit)
    assert shown[0] == pytest.approx(value, abs=0.0501 * expanded)
    assert shown[1] == pytest.approx(expanded, rel=0.0501)


def test_a_scale_shows_the_unit_of_the_limit_file():
    """Values in kHz and % as the file writes them, to three digits of the spread; limits with their own digits."""
    kilohertz, percent = Scale("kHz", "Hz"), Scale("%", "1")
    assert (kilohertz.sign, kilohertz.of(1650210.0)) == ("kHz", 1650.21)
    assert kilohertz.text(1650210.4, 2345.0) == "1 650.21"
    assert kilohertz.exactly(1638e3) == "1 638"
    assert (percent.sign, percent.text(0.0041, 0.0003), percent.exactly(0.012)) == ("%", "0.4100", "1.2")
    assert kilohertz.text(None) == kilohertz.exactly(None) == kilohertz.text(math.nan) == "–"


def test_a_scale_without_a_spread_shows_six_digits():
    """Equal or single values have no spread to round to."""
    assert Scale("kHz", "Hz").text(1650210.4) == Scale("kHz", "Hz").text(1650210.4, 0.0) == "1 650.21"
    assert Scale("", "1").text(0.0) == "0"


def test_a_tiny_spread_never_asks_for_more_digits_than_a_float_has():
    """The digits of a value end where a float's do."""
    text = Scale("kHz", "Hz").text(1650210.4, 1e-12)
    assert len(text.replace(" ", "").replace(".", "")) <= 15


def test_a_characteristic_without_requirement_gets_the_prefix_of_its_middle():
    """One far value does not choose the unit."""
    assert scale_for("l1", None, [1.2e-3, 1.3e-3, 5.0]).unit == "mH"
    assert scale_for("l1", None, []).unit == "H"
    assert scale_for("qm", None, [1e5]).unit == ""
    assert scale_for("fs", Requirement("fs", 1.0, None, "MHz"), [1.0]).unit == "MHz"
