"""Capability of one characteristic against published examples, an independent library and the awkward lots."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from harness.statistics.attempts import Attempt
from harness.statistics.capability import Capability, capability, pp_limits, ppk_limits
from harness.statistics.parts import parts_of


def attempts(values, *, verdict: str = "pass") -> list[Attempt]:
    """One part a value, each with one attempt; None is a part whose fit gave no value."""
    return [one(f"P{index:04d}", value, verdict) for index, value in enumerate(values)]


def one(serial: str, value: float | None, verdict: str = "pass", number: int = 1, element: int = 1) -> Attempt:
    values = {"fs": (value, None if value is None else 1.0)}
    return Attempt(serial, number, element, verdict, None, True, "", (), values)


def of(values, least=None, greatest=None, **more) -> Capability:
    return capability("fs", parts_of(attempts(values)), least, greatest, **more)


def spread_like(mean: float, sd: float, n: int) -> np.ndarray:
    """``n`` values with exactly this mean and standard deviation (n − 1)."""
    shape = np.sin(np.arange(n) * 2.399963)
    return mean + sd * (shape - shape.mean()) / shape.std(ddof=1)


# NIST/SEMATECH e-Handbook 6.1.6: USL 20, LSL 8, mean 16, s 2 give Cp 1.0, Cpk 0.6667 (Cpu 0.6667, Cpl 1.3333).
@pytest.mark.parametrize(
    ("least", "greatest", "pp", "ppk"), [(8, 20, 1.0, 0.6667), (None, 20, None, 0.6667), (8, None, None, 1.3333)]
)
def test_the_e_handbooks_example(least, greatest, pp, ppk):
    """Pp and Ppk of the e-Handbook's worked example, two-sided and of either side."""
    found = of(spread_like(16.0, 2.0, 50), least, greatest)
    assert found.ppk.value == pytest.approx(ppk, abs=5e-5)
    assert found.pp.value == (None if pp is None else pytest.approx(pp, rel=1e-12))


def test_the_chi_square_limits_of_montgomerys_example():
    """USL 62, LSL 38, n 20, s 1.75 (Montgomery, from memory; recomputed unrounded): 2.2857, 1.5649 to 3.0056."""
    found = of(spread_like(50.0, 1.75, 20), 38.0, 62.0)
    assert found.pp.value == pytest.approx(2.285714, abs=1e-6)
    assert (found.pp.low, found.pp.high) == pytest.approx((1.5649, 3.0056), abs=5e-5)


def test_the_chi_square_limits_are_two_sided():
    """A public page takes χ²(0.05) for the lower limit, 1.671; two-sided 95 % needs χ²(0.025), 1.565."""
    low, _ = pp_limits(2.285714, 20)
    assert low == pytest.approx(1.565, abs=5e-4)
    assert low != pytest.approx(1.671, abs=0.05)


# Worked examples whose inputs are public; results by Bissell's formula.
BISSELL = [(90, 100, 97.0, 1.6, 30, 0.6250, 0.4248, 0.8252), (10, 20, 16.0, 1.2, 50, 1.1111, 0.8725, 1.3497)]


@pytest.mark.parametrize(("least", "greatest", "mean", "sd", "n", "ppk", "low", "high"), BISSELL)
def test_bissells_limits_of_worked_examples(least, greatest, mean, sd, n, ppk, low, high):
    """Ppk and its limits by Bissell's formula, from values with the example's mean and deviation."""
    found = of(spread_like(mean, sd, n), least, greatest)
    assert tuple(found.ppk) == pytest.approx((ppk, low, high), abs=5e-5)


def test_bissells_limits_are_not_the_misprinted_ones():
    """Cpk 1.33, n 20: 0.8826…1.7774 by the formula; the printed 0.99…1.67 leaves out a factor Cpk."""
    assert ppk_limits(1.33, 20) == pytest.approx((0.8826, 1.7774), abs=5e-5)
    misprinted = 1.33 - 1.959964 * math.sqrt(1 / (9 * 20) / 1.33**2 + 1 / 38)
    assert misprinted == pytest.approx(0.99, abs=0.005)
    assert ppk_limits(1.33, 20)[0] < misprinted - 0.1


# NIST/SEMATECH e-Handbook 6.3.2.2, individuals: mean 50.81.
def test_mean_of_the_e_handbooks_individuals():
    """The ten individuals of e-Handbook 6.3.2.2 have the printed mean 50.81."""
    found = of([49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1])
    assert found.mean == pytest.approx(50.81, abs=1e-12)
    assert found.median == pytest.approx(51.25)


VALUES = st.lists(st.floats(1.0e6, 2.0e6, allow_nan=False), min_size=2, max_size=60)


@given(VALUES)
def test_moments_equal_an_independent_library(values):
    """Mean, standard deviation, median, least and greatest are those of NumPy and scipy.stats."""
    found = of(values)
    assert found.n == len(values)
    assert found.mean == pytest.approx(stats.tmean(values), rel=1e-12)
    assert found.sd == pytest.approx(np.std(values, ddof=1), rel=1e-6, abs=1e-6)
    assert (found.min, found.max) == (min(values), max(values))
    assert found.median == np.median(values)


@given(st.floats(0.05, 5.0), st.integers(2, 400), st.sampled_from([0.8, 0.9, 0.95, 0.99]))
def test_limits_equal_an_independent_library(index, n, confidence):
    """The χ² limits are those of scipy.stats; Bissell's lie symmetrically about the index."""
    alpha = 1 - confidence
    theirs = index * np.sqrt(stats.chi2.ppf([alpha / 2, 1 - alpha / 2], n - 1) / (n - 1))
    assert pp_limits(index, n, confidence) == pytest.approx(tuple(theirs), rel=1e-9)
    low, high = ppk_limits(index, n, confidence)
    half = stats.norm.ppf(1 - alpha / 2) * math.sqrt(1 / (9 * n) + index**2 / (2 * (n - 1)))
    assert (index - low, high - index) == pytest.approx((half, half), rel=1e-9)


def test_limits_hold_the_true_index_as_often_as_they_say(rng: np.random.Generator):
    """Of 20 000 normal lots of 50, the 95 % limits of Pp hold the true index in 95 %, of Ppk in about as many."""
    lots = rng.normal(0.3, 1.0, size=(20_000, 50))
    true_pp, true_ppk = 8.0 / 6.0, 3.7 / 3.0
    sd = lots.std(axis=1, ddof=1)
    pps, ppks = 8.0 / (6 * sd), np.minimum(4 - lots.mean(axis=1), lots.mean(axis=1) + 4) / (3 * sd)
    held_pp = np.mean([low <= true_pp <= high for low, high in (pp_limits(float(v), 50) for v in pps)])
    held_ppk = np.mean([low <= true_ppk <= high for low, high in (ppk_limits(float(v), 50) for v in ppks)])
    assert 0.94 < held_pp < 0.96
    assert 0.93 < held_ppk < 0.97


# ── awkward lots: a sentence instead of a number ─────────────────────────────────────────────


def test_no_value_at_all():
    """A lot without a value says so and gives no number."""
    found = of([], 1.0, 2.0)
    assert (found.n, found.mean, found.sd, found.min, found.max, found.median) == (0, None, None, None, None, None)
    assert found.pp == found.ppk == (None, None, None)
    assert found.note == "No part has a value."


def test_one_value_has_no_spread():
    """One part: its value, no deviation, a sentence."""
    found = of([1650e3], 1640e3, 1660e3)
    assert (found.n, found.mean, found.sd, found.ppk.value) == (1, 1650e3, None, None)
    assert "no spread" in found.note


def test_two_values_give_wide_limits():
    """Two parts: an index with honest, very wide limits."""
    found = of([1649e3, 1651e3], 1640e3, 1660e3)
    assert found.note is None
    assert found.pp.low < 0.1 * found.pp.value
    assert found.pp.high > 2 * found.pp.value


@pytest.mark.parametrize("value", [0.1, 1650210.3, 1e-9, 0.0])
def test_equal_values_have_exactly_no_spread(value):
    """Values that are all equal have that mean exactly and deviation zero, whatever binary rounding does."""
    found = of([value] * 7, value - 1.0, value + 1.0)
    assert (found.mean, found.sd, found.pp.value) == (value, 0.0, None)
    assert found.note == "All 7 values are equal, so no capability can be stated."


def test_a_small_spread_on_a_large_value_is_not_lost():
    """A spread of a millionth of the value comes out to six digits."""
    assert of([1e9, 1e9 + 1e-3, 1e9 - 1e-3]).sd == pytest.approx(1e-3, rel=1e-4)


def test_a_spread_next_to_nothing_states_no_capability():
    """An index that no float holds is None with a sentence, never infinity."""
    found = of([0.0, 5e-324, 1.5e-323], -1e9, 1e9)
    assert found.pp == found.ppk == (None, None, None)
    assert "next to nothing" in found.note


@pytest.mark.parametrize("factor", [1e-200, 1e200])
def test_extreme_numbers_neither_vanish_nor_overflow(factor):
    """The deviation of very small and very large values is right, without a warning."""
    assert of([factor, 2 * factor, 3 * factor]).sd == pytest.approx(factor, rel=1e-12)


def test_one_sided_limits_have_no_pp():
    """With one limit there is a Ppk of that side, no Pp, and a sentence."""
    found = of([1.0, 2.0, 3.0], None, 5.0)
    assert found.pp == (None, None, None)
    assert found.ppk.value == pytest.approx(1.0)
    assert found.note.startswith("Only a highest allowed value is set")


def test_without_limits_there_is_no_capability():
    """Without a limit: mean and spread, a sentence, no index."""
    found = of([1.0, 2.0])
    assert (found.pp.value, found.ppk.value, found.mean) == (None, None, 1.5)
    assert found.note == "No limits are set, so there is no capability."


def test_a_mean_outside_the_limits_has_a_negative_ppk():
    """A lot beyond its limit shows a negative Ppk rather than none."""
    assert of([11.0, 12.0, 13.0], 0.0, 10.0).ppk.value == pytest.approx(-2 / 3)


def test_values_that_are_not_numbers_are_left_out():
    """None, NaN and infinity are no values; the population says how many were left out."""
    found = of([1.0, None, 2.0, math.nan, math.inf])
    assert found.values == (1.0, 2.0)
    assert found.population.endswith("left out: 3 without a value")


# ── the population ───────────────────────────────────────────────────────────────────────────


def test_failed_parts_are_in_the_population():
    """All parts failed: they are the population all the same."""
    found = capability("fs", parts_of(attempts([1.0, 2.0, 3.0], verdict="fail")), 5.0, 9.0)
    assert (found.n, found.mean) == (3, 2.0)
    assert found.population == "first valid attempt of 3 of 3 parts, failed parts included"


def test_no_verdicts_are_skipped_for_the_next_valid_attempt():
    """A no verdict's value does not count; the first attempt that came to a verdict does; later ones do not."""
    tries = [one("A", 9.0, "no verdict", 1), one("A", 2.0, "fail", 2), one("A", 3.0, "pass", 3), one("B", 4.0)]
    assert capability("fs", parts_of(tries)).values == (2.0, 4.0)


def test_parts_without_a_valid_attempt_are_named():
    """A part that never came to a verdict is left out, and said to be."""
    found = capability("fs", parts_of([one("A", 1.0), one("B", 9.0, "no verdict")]))
    assert found.values == (1.0,)
    assert found.population == (
        "first valid attempt of 1 of 2 parts, failed parts included; left out: 1 without a valid attempt"
    )


def test_a_later_value_does_not_stand_in_for_a_first_valid_attempt_without_one():
    """A part that failed without a value is not replaced by its reworked self."""
    tries = [one("A", None, "fail", 1), one("A", 5.0, "pass", 2), one("B", 4.0)]
    assert capability("fs", parts_of(tries)).values == (4.0,)


def test_elements_are_kept_apart():
    """The characteristic of element 2 is taken from the attempts at element 2 alone."""
    tries = [one("A", 1.0), one("A", 7.0, element=2)]
    assert capability("fs", parts_of(tries), element=2).values == (7.0,)


@given(st.lists(st.one_of(st.none(), st.floats(-1e9, 1e9)), max_size=12), st.booleans(), st.booleans())
def test_any_lot_gives_plain_numbers_or_a_sentence(values, has_least, has_greatest):
    """Whatever the values, every number is finite or None, and a missing index has its sentence."""
    found = of(values, -1e9 if has_least else None, 1e9 if has_greatest else None)
    numbers = [found.mean, found.sd, found.median, *found.pp, *found.ppk]
    json.dumps(numbers, allow_nan=False)
    assert found.pp.value is not None or found.note
