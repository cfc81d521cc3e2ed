"""Counts and yields of a lot against published numbers and lots that can be counted by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binomtest

from harness.records import Grade, Verdict
from harness.statistics.attempts import Attempt
from harness.statistics.parts import parts_of, standing
from harness.statistics.yields import count, share, wilson


def attempt(serial: str, verdict: str = "pass", number: int = 1, *, final: bool = True, **more) -> Attempt:
    """One invented attempt."""
    reasons = more.get("reasons", () if verdict == "pass" else (("above-max", "fs"),))
    element, grade = more.get("element", 1), more.get("grade")
    return Attempt(serial, number, element, verdict, grade, final, "2026-11-20T06:00:00.000000Z", reasons, {})


def counted(*attempts: Attempt, grades=()):
    return count(parts_of(attempts), grades)


# R. G. Newcombe, Statistics in Medicine 17 (1998) 857-872, table I, method 3 (Wilson's score): from memory.
NEWCOMBE = [(81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0000, 0.1611), (1, 29, 0.0061, 0.1718)]


@pytest.mark.parametrize(("passed", "of", "low", "high"), NEWCOMBE)
def test_wilson_gives_newcombes_table(passed, of, low, high):
    """Wilson's limits agree with Newcombe's published table to its four decimals."""
    assert wilson(passed, of) == pytest.approx((low, high), abs=5e-5)


@given(of=st.integers(1, 5000), data=st.data(), confidence=st.sampled_from([0.8, 0.9, 0.95, 0.99]))
def test_wilson_equals_scipy(of, data, confidence):
    """Wilson's limits are those of an independent library, and hold the share between them."""
    passed = data.draw(st.integers(0, of))
    low, high = wilson(passed, of, confidence)
    theirs = binomtest(passed, of).proportion_ci(confidence, method="wilson")
    assert (low, high) == pytest.approx((theirs.low, theirs.high), rel=1e-9, abs=1e-12)
    assert 0.0 <= low <= passed / of <= high <= 1.0


def test_wilson_of_nothing_and_of_all():
    """Nothing counted says nothing; a whole lot passed reaches 1 exactly, none passed 0 exactly."""
    assert wilson(0, 0) == (0.0, 1.0)
    assert wilson(40, 40)[1] == 1.0
    assert wilson(0, 40)[0] == 0.0


@pytest.mark.parametrize(("passed", "of"), [(-1, 3), (4, 3), (1, 0)])
def test_wilson_refuses_what_is_no_share(passed, of):
    """More passed than counted, or fewer than none, is a mistake of the caller."""
    with pytest.raises(ValueError, match="not a share"):
        wilson(passed, of)


def test_share_of_nothing_has_no_value():
    """A yield of no parts is None, limits too."""
    nothing = share(0, 0)
    assert (nothing.value, nothing.low, nothing.high) == (None, None, None)


def test_coverage_of_wilsons_limits(rng: np.random.Generator):
    """The 95 % limits hold the true yield in about 95 % of lots."""
    passed = rng.binomial(60, 0.9, size=4000)
    table = {int(k): wilson(int(k), 60) for k in np.unique(passed)}
    held = np.mean([table[int(k)][0] <= 0.9 <= table[int(k)][1] for k in passed])
    assert 0.925 < held < 0.985


# ── parts ────────────────────────────────────────────────────────────────────────────────────


def test_counts_are_by_how_parts_stand_after_their_last_attempt():
    """A part that passed at its second try is one part, passed; its first try is no part of its own."""
    found = counted(
        attempt("A"),
        attempt("B", "no verdict", final=False),
        attempt("B", "pass", 2),
        attempt("C", "fail"),
        attempt("D", "no verdict", final=False),
        attempt("D", "no verdict", 2),
    )
    assert (found.parts, found.passed, found.failed, found.no_verdict, found.open) == (4, 2, 1, 1, 0)


def test_first_pass_yield_is_of_first_attempts():
    """First-pass yield counts parts whose first attempt passed over all parts, no verdict as not passed."""
    found = counted(
        attempt("A"), attempt("B", "no verdict", final=False), attempt("B", "pass", 2), attempt("C", "fail")
    )
    assert (found.first_pass.passed, found.first_pass.of) == (1, 3)
    assert found.first_pass.value == pytest.approx(1 / 3)


def test_final_yield_leaves_out_parts_that_wait():
    """A part without a final attempt is not in the final yield; a final no verdict is, and has not passed."""
    found = counted(
        attempt("A"),
        attempt("B", "no verdict", final=False),
        attempt("C", "no verdict", final=True),
    )
    assert (found.final.passed, found.final.of, found.open) == (1, 2, 1)


def test_an_unfinished_rework_does_not_undo_the_last_final_verdict():
    """After a final fail, a further attempt that is not final leaves the final yield as it was."""
    found = counted(attempt("A", "fail"), attempt("A", "no verdict", 2, final=False))
    assert (found.final.passed, found.final.of, found.no_verdict) == (0, 1, 1)


def test_attempts_are_ordered_by_number_and_never_by_the_clock():
    """Attempts given in another order come to the same standing."""
    tries = [attempt("A", "pass", 3), attempt("A", "no verdict", 1, final=False), attempt("A", "fail", 2)]
    assert standing(parts_of(tries)[0]).number == 3
    assert counted(*tries) == counted(*reversed(tries))


def test_a_part_of_several_elements_stands_by_its_worst():
    """One failed element fails the part, whatever the others say, and counts once."""
    found = counted(attempt("A", element=1), attempt("A", "fail", element=2), attempt("B"), attempt("B", element=2))
    assert (found.parts, found.passed, found.failed) == (2, 1, 1)
    assert found.first_pass.passed == found.final.passed == 1


def test_fail_reasons_are_ranked_by_the_first_reason_of_each_part():
    """Reasons count parts that stand failed, once each, by their first reason; ties in the order of names."""
    qm = (("below-min", "qm"), ("above-max", "fs"))
    found = counted(
        attempt("A", "fail", reasons=qm),
        attempt("B", "fail"),
        attempt("C", "fail", reasons=qm),
        attempt("D", "fail", reasons=(("no-resonance", "fs"),)),
        attempt("E", "no verdict", reasons=qm),
        attempt("F", "fail"),
        attempt("F", "pass", 2),
    )
    ranked = [(reason.characteristic, reason.code, reason.count) for reason in found.fail_reasons]
    assert ranked == [("qm", "below-min", 2), ("fs", "above-max", 1), ("fs", "no-resonance", 1)]
    assert sum(reason.count for reason in found.fail_reasons) == found.failed


def test_a_fail_without_a_reason_is_still_counted():
    """Reasons add up to the failed parts even where a record names none."""
    found = counted(attempt("A", "fail", reasons=()))
    assert [(reason.code, reason.count) for reason in found.fail_reasons] == [("no-reason", 1)]


def test_grades_count_passed_parts_and_list_empty_grades():
    """Every grade of the limit file is listed, those without a part too."""
    grades = [Grade(name, "fs", 0.0, 1.0, "Hz") for name in ("L", "M", "H")]
    found = counted(attempt("A", grade="M"), attempt("B", grade="M"), attempt("C", "fail", grade="L"), grades=grades)
    assert dict(found.grades) == {"L": 0, "M": 2, "H": 0}
    assert list(found.grades) == ["L", "M", "H"]


def test_an_empty_lot_has_counts_of_zero_and_no_yields():
    """No attempts: zero parts, no yields, nothing raised."""
    found = counted()
    assert (found.parts, found.passed, found.failed, found.no_verdict) == (0, 0, 0, 0)
    assert found.first_pass.value is None
    assert found.final.value is None


def test_the_verdicts_of_records_are_understood():
    """The verdict words of records and of statistics are the same."""
    found = counted(*[attempt(str(number), verdict) for number, verdict in enumerate(Verdict)])
    assert (found.passed, found.failed, found.no_verdict) == (1, 1, 1)


VERDICTS = st.sampled_from(["pass", "fail", "no verdict"])


@given(st.lists(st.tuples(st.sampled_from("ABCDE"), VERDICTS, st.booleans(), st.integers(1, 2)), max_size=25))
def test_a_lot_always_adds_up(rows):
    """Passed, failed and no verdict are all parts; reasons are all the failed; yields lie within their limits."""
    numbers: dict[str, int] = {}
    attempts = []
    for serial, verdict, final, element in rows:
        numbers[serial] = numbers.get(serial, 0) + 1
        attempts.append(attempt(serial, verdict, numbers[serial], final=final, element=element))
    found = counted(*attempts)
    assert found.passed + found.failed + found.no_verdict == found.parts == len(numbers)
    assert sum(reason.count for reason in found.fail_reasons) == found.failed
    assert found.final.of + found.open == found.parts
    for one in (found.first_pass, found.final):
        assert (one.value is None) == (one.of == 0)
        assert one.value is None or one.low <= one.value <= one.high
