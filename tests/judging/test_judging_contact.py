"""The contact check: what readings far below resonance say of the fixture."""

from __future__ import annotations

import math

import pytest

from harness.judging.contact import capacitor, check_contact
from harness.records import ContactWindow, Reading

WINDOW = ContactWindow(1e3, 1.5e-9, 2.5e-9, 0.05)


def reading(stage: str, c_f: float, tan_delta: float = 0.01) -> Reading:
    return Reading(stage, 1e3, 1 / (2e3 * math.pi * c_f * (tan_delta + 1j)))


def test_a_lossy_capacitor_is_recovered() -> None:
    """Y = ωC(tan δ + j) gives C and tan δ back."""
    assert capacitor(reading("contact before", 2e-9, 0.02)) == pytest.approx((2e-9, 0.02), rel=1e-12)


@pytest.mark.parametrize("z", [0j, complex(math.inf, 0), complex(math.nan, 1)])
def test_no_impedance_no_capacitor(z: complex) -> None:
    """Zero, infinity and NaN give no capacitance."""
    assert math.isnan(capacitor(Reading("contact before", 1e3, z))[0])


@pytest.mark.parametrize(("before", "after", "code"), [
    (reading("contact before", 1.5e-9), reading("contact after", 1.52e-9), None),
    (reading("contact before", 2.5e-9), reading("contact after", 2.5e-9), None),
    (reading("contact before", 0.374e-9), reading("contact after", 2e-9), "no-part"),
    (reading("contact before", 0.376e-9), reading("contact after", 2e-9), "poor-contact"),
    (reading("contact before", 2e-9), reading("contact after", 2.05e-9), None),
    (reading("contact before", 2e-9), reading("contact after", 2.07e-9), "poor-contact"),
    (reading("contact before", 2e-9, 0.05001), reading("contact after", 2e-9), "poor-contact"),
    (reading("contact before", 2e-9, -0.02), reading("contact after", 2e-9), None),
    (Reading("contact before", 1e3, 1e4 + 0j), reading("contact after", 2e-9), "shorted"),
    (Reading("contact before", 1e3, 1e6 + 0j), reading("contact after", 2e-9), "no-part"),
    (Reading("contact before", 1e3, 2j), reading("contact after", 2e-9), "shorted"),
    (Reading("contact before", 1e3, 9e4j), reading("contact after", 2e-9), "poor-contact"),
])  # fmt: skip
def test_windows(before: Reading, after: Reading, code: str | None) -> None:
    """In the window, before and after, and alike is proven; each other case has its code."""
    check = check_contact(WINDOW, (before, after))
    assert check.proven == (code is None)
    assert [reason.code for reason in check.reasons] == ([] if code is None else [code])


def test_value_just_past_the_window_reads_as_past() -> None:
    """A reading a hair outside is printed with the digits that tell it from the limit."""
    check = check_contact(WINDOW, (reading("contact before", 2.50001e-9), reading("contact after", 2e-9)))
    assert "2.50001 nF" in check.reasons[0].text
    lossy = check_contact(WINDOW, (reading("contact before", 2e-9, 0.0500001), reading("contact after", 2e-9)))
    assert "0.0500001" in lossy.reasons[0].text


def test_other_readings_do_not_prove_contact() -> None:
    """Only contact readings count, and both are needed."""
    assert not check_contact(WINDOW, (reading("repeat", 2e-9),)).proven
    assert not check_contact(WINDOW, (reading("contact before", 2e-9),)).proven
    assert not check_contact(None, (reading("contact before", 2e-9), reading("contact after", 2e-9))).proven
