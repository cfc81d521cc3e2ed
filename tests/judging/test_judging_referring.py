"""Values referred to the reference temperature and age, and what that adds to their uncertainty."""

from __future__ import annotations

import math

import numpy as np
import pytest

from harness.judging.referring import added_u, referred
from harness.records import Conditions, ConditionSpec, Value

SPEC = ConditionSpec(
    min_degc=18.0,
    max_degc=28.0,
    reference_degc=23.0,
    fs_per_k=-100e-6,
    u_fs_per_k=10e-6,
    c0_per_k=4e-3,
    u_c0_per_k=4e-4,
    min_age_h=24.0,
    reference_age_h=240.0,
    fs_per_decade=5e-4,
    u_fs_per_decade=1e-4,
    c0_per_decade=-0.01,
    u_c0_per_decade=2e-3,
)
VALUES = {
    "fs": Value(1.65e6, 100.0, "Hz"),
    "fp": Value(1.83e6, None, "Hz"),
    "fr": Value(None, None, "Hz"),
    "c0": Value(1.5e-9, 1e-11, "F"),
    "c_at": Value(1.9e-9, 1e-11, "F"),
    "qm": Value(200.0, 2.0, "1"),
    "keff": Value(0.43, 0.001, "1"),
}


def test_at_the_reference_only_uncertainty_is_added() -> None:
    """At reference temperature and age no value moves; fs gains a·u(T), Qm and keff nothing."""
    found, caveats = referred(VALUES, Conditions(temperature_degc=23.0, u_temperature_k=0.5, age_h=240.0), SPEC)
    assert {key: value.value for key, value in found.items()} == {key: value.value for key, value in VALUES.items()}
    assert found["fs"].u == pytest.approx(math.hypot(100.0, 1.65e6 * 100e-6 * 0.5), rel=1e-12)
    assert found["qm"] == VALUES["qm"]
    assert found["keff"] == VALUES["keff"]
    assert caveats == ()


def test_a_warm_old_part_is_referred() -> None:
    """Frequencies and capacitances are divided by (1 + aΔT)(1 + b·log₁₀(t/t₀)), each with its own coefficients."""
    found, _ = referred(VALUES, Conditions(temperature_degc=27.0, u_temperature_k=0.5, age_h=2400.0), SPEC)
    assert found["fs"].value == pytest.approx(1.65e6 / (1 - 400e-6) / (1 + 5e-4), rel=1e-12)
    assert found["c0"].value == pytest.approx(1.5e-9 / 1.016 / 0.99, rel=1e-12)
    assert found["c_at"].value == pytest.approx(1.9e-9 / 1.016 / 0.99, rel=1e-12)
    fs = found["fs"].value
    assert fs is not None
    parts = (100.0 * fs / 1.65e6, fs * 100e-6 * 0.5, fs * 10e-6 * 4.0, fs * 1e-4 * 1.0)
    assert found["fs"].u == pytest.approx(math.hypot(*parts), rel=1e-12)


def test_referring_undoes_what_temperature_and_age_did(rng: np.random.Generator) -> None:
    """A part moved by the model comes back to its reference value."""
    for _ in range(20):
        degc, age = rng.uniform(18, 28), 10 ** rng.uniform(1.4, 4)
        moved = 1.65e6 * (1 - 100e-6 * (degc - 23)) * (1 + 5e-4 * math.log10(age / 240))
        values = {"fs": Value(moved, 1.0, "Hz")}
        found, _ = referred(values, Conditions(temperature_degc=degc, age_h=age), SPEC)
        assert found["fs"].value == pytest.approx(1.65e6, rel=1e-12)


def test_a_value_without_uncertainty_or_value_keeps_that() -> None:
    """None stays None."""
    found, _ = referred(VALUES, Conditions(temperature_degc=27.0), SPEC)
    assert found["fp"].u is None
    assert found["fr"] == VALUES["fr"]


def test_an_unknown_temperature_counts_as_anywhere_in_the_window() -> None:
    """No shift, but the rectangle's standard deviation 5 K/√3 times the coefficient (JCGM 100, 4.3.7), and a caveat."""
    found, caveats = referred(VALUES, Conditions(age_h=240.0), SPEC)
    assert found["fs"].value == 1.65e6
    assert found["fs"].u == pytest.approx(math.hypot(100.0, 1.65e6 * 100e-6 * 5 / math.sqrt(3)), rel=1e-12)
    assert [caveat.code for caveat in caveats] == ["temperature-unknown"]


def test_an_unknown_age_is_not_referred() -> None:
    """Age not known: nothing is referred to it, and a caveat says so."""
    found, caveats = referred(VALUES, Conditions(temperature_degc=23.0), SPEC)
    assert found["fs"].value == 1.65e6
    assert [caveat.code for caveat in caveats] == ["age-unknown"]


def test_without_references_nothing_changes() -> None:
    """A limit file without coefficients leaves every value and uncertainty alone, without caveats."""
    found, caveats = referred(VALUES, Conditions(temperature_degc=40.0, age_h=1.0), ConditionSpec())
    assert found == VALUES
    assert caveats == ()


def test_contributions_by_name() -> None:
    """The relative contributions are available by source, for a budget."""
    parts = added_u(Conditions(temperature_degc=27.0, u_temperature_k=0.0, age_h=2400.0), SPEC, "fs")
    assert parts == pytest.approx({"temperature": 40e-6, "ageing": 1e-4})
    assert added_u(Conditions(), SPEC, "qm") == {}
