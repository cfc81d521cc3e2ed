"""Histograms: nothing lost, no bar astride a limit, axes that can be read, drawings with nothing cut off."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harness.report.histogram import histogram, ticks
from harness.report.svg import bar, histogram_svg, shape, stripe
from harness.report.words import MARKS

NUMBERS = st.lists(st.floats(-1000, 1000, allow_nan=False).map(lambda x: round(x, 3)), min_size=1, max_size=80)
LIMITS = st.tuples(
    st.one_of(st.none(), st.integers(-500, 0).map(float)), st.one_of(st.none(), st.integers(1, 500).map(float))
)


@given(NUMBERS, LIMITS)
def test_every_value_is_in_a_bar_or_counted_beyond(values, limits):
    """Bars and what lies beyond the axis add up to all values, inside and outside the limits each for itself."""
    least, greatest = limits
    found = histogram(values, least, greatest)
    assert sum(one.count for one in found.bars) + found.below + found.above == len(values)
    outside = sum((least is not None and v < least) or (greatest is not None and v > greatest) for v in values)
    beyond = [v for v in values if v < found.low or v > found.high]
    inside_beyond = len(beyond) if least is greatest is None else 0
    assert found.below + found.above >= len(beyond)
    drawn_outside = sum(one.count for one in found.bars if not one.inside)
    assert drawn_outside <= outside <= drawn_outside + found.below + found.above + inside_beyond
    assert found.low < found.high
    assert all(found.low <= one.start < one.stop <= found.high for one in found.bars)


@given(NUMBERS, LIMITS)
def test_no_bar_stands_astride_a_limit(values, limits):
    """Bars of parts inside lie between the limits, bars of parts outside beyond them."""
    least, greatest = limits
    found = histogram(values, least, greatest)
    slack = 1e-6 * (found.high - found.low)
    for one in found.bars:
        after_least = least is None or one.start >= least - slack
        before_greatest = greatest is None or one.stop <= greatest + slack
        if one.inside:
            assert after_least
            assert before_greatest
        else:
            assert (least is not None and one.stop <= least + slack) or (
                greatest is not None and one.start >= greatest - slack
            )


def test_a_value_on_a_limit_is_inside():
    """Equal to a limit is inside, as it is judged."""
    found = histogram([10.0, 20.0, 15.0], 10.0, 20.0)
    assert all(one.inside for one in found.bars)


def test_the_smallest_step_past_a_limit_is_outside():
    """The next float after a limit stands in a bar of its own, outside."""
    found = histogram([15.0, 16.0, 20.000000000000004], 10.0, 20.0)
    assert [one.count for one in found.bars if not one.inside] == [1]


def test_one_far_value_does_not_flatten_the_rest():
    """A part far off is counted beyond the axis, which stays with the limits and the others."""
    found = histogram([100.0 + 0.1 * k for k in range(20)] + [5000.0], 95.0, 105.0)
    assert (found.above, found.below) == (1, 0)
    assert found.high < 110


def test_equal_values_make_one_bar_on_an_axis_with_a_width():
    """A lot without spread still has an axis."""
    found = histogram([7.0] * 5, None, None)
    assert [one.count for one in found.bars] == [5]
    assert found.low < 7.0 < found.high


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6), st.integers(2, 6))
def test_ticks_are_round_and_lie_on_the_axis(low, width, about):
    """Ticks lie within the axis, evenly, one or more, and not more than asked for and a bit."""
    found = ticks(low, low + width, about)
    assert len(found) <= about + 2
    assert all(low - 1e-6 * width <= tick <= low + width + 1e-6 * width for tick in found)
    steps = [b - a for a, b in pairwise(found)]
    assert all(step == pytest.approx(steps[0], rel=1e-3) for step in steps)


# ── drawings ─────────────────────────────────────────────────────────────────────────────────


def drawn(values, least=None, greatest=None, sign="fs", unit="kHz") -> ET.Element:
    mean = sum(values) / len(values)
    return ET.fromstring(histogram_svg(values, sign=sign, unit=unit, least=least, greatest=greatest, mean=mean))


def texts(root: ET.Element) -> list[ET.Element]:
    return [one for one in root.iter() if one.tag.endswith("text")]


CASES = [
    ([1650.0 + 0.7 * (k % 11 - 5) for k in range(40)], 1638.0, 1662.0),
    ([1650.0 + 0.7 * (k % 11 - 5) for k in range(40)] + [1664.0, 1900.0, 1200.0], 1638.0, 1662.0),
    ([0.001 * k for k in range(30)], None, 0.02),
    ([200.0, 210.0], 140.0, None),
    ([1.0], 0.99, 1.01),
    ([5e7, 9.99e7], None, None),
    ([1000.0, 2000.0, 3000.0], 1999.9, 2000.1),
]


@pytest.mark.parametrize(("values", "least", "greatest"), CASES)
def test_no_label_is_cut_off_or_upon_another(values, least, greatest):
    """Every label lies within the drawing, and no two on one line overlap."""
    boxes = []
    for text in texts(drawn(values, least, greatest)):
        x, y, width = float(text.get("x")), float(text.get("y")), 6.0 * len(text.text)
        start = x - {"start": 0.0, "middle": 0.5, "end": 1.0}[text.get("text-anchor")] * width
        assert start >= -1.0
        assert start + width <= 361.0, text.text
        assert 0 < y < 190
        boxes.append((round(y), start, start + width, text.text))
    for y, start, stop, text in boxes:
        for other_y, other_start, other_stop, other in boxes:
            if text != other and abs(y - other_y) < 9:
                assert stop <= other_start + 1 or other_stop <= start + 1, (text, other)


@pytest.mark.parametrize(("values", "least", "greatest"), CASES)
def test_the_axis_names_its_unit_and_the_limits(values, least, greatest):
    """The axis has sign and unit, two ticks or more; a line and a word stand at each limit, one at the mean."""
    words = [text.text for text in texts(drawn(values, least, greatest))]
    assert "fs / kHz" in words
    assert ("min" in words, "max" in words) == (least is not None, greatest is not None)
    assert "mean" in words or any("further" in word for word in words)


def test_the_drawing_says_in_words_what_it_shows():
    """Who cannot see the drawing reads how many parts, from where to where, how many outside."""
    root = drawn([1650.0, 1664.0], 1638.0, 1662.0)
    assert root[0].text == "Histogram of fs: 2 parts from 1650 to 1664 kHz, 1 outside the limits"


def test_texts_are_escaped():
    """Whatever a sign or unit holds, it cannot become markup."""
    root = drawn([1.0, 2.0], sign='<b a="&">', unit="]]>")
    assert any(text.text == '<b a="&"> / ]]>' for text in texts(root))


def test_shapes_tell_verdicts_apart_without_colour():
    """Each verdict has a shape of its own."""
    kinds = [re.search(r"</title><(\w+)", shape(verdict)).group(1) for verdict in MARKS]
    assert len(set(kinds)) == len(MARKS)


def test_the_stripe_is_as_long_as_the_lot():
    """The shares of the stripe add up to its whole width, and fail and no verdict are hatched."""
    root = ET.fromstring(stripe([("pass", 30), ("no verdict", 4), ("fail", 6)]))
    rects = [one for one in root.iter() if one.tag.endswith("rect")]
    assert [float(one.get("width")) for one in rects] == [540.0, 72.0, 108.0]
    lines = [float(one.get("x1")) for one in root.iter() if one.tag.endswith("line")]
    assert min(lines) >= 540.0
    assert root[0].text == "30 pass, 4 no verdict, 6 fail"


def test_a_bar_fills_its_share():
    """A reason's bar is as long as its share of the most frequent one's."""
    rects = [one for one in ET.fromstring(bar(0.25, "fs")).iter() if one.tag.endswith("rect")]
    assert [float(one.get("width")) for one in rects] == [200.0, 50.0]
