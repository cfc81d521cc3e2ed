"""Serial sources by themselves: lists and their mistakes, scanner, keyboard, numbers."""

from __future__ import annotations

import pytest
from run_fakes import FakeBench

from harness.errors import FileMistakes
from harness.run.serials import (
    FromKeyboard,
    FromList,
    FromScanner,
    Numbered,
    Serial,
    Wait,
    auto_start,
    numbered,
    pattern_fault,
    read_list,
)

PATTERN = r"MD-\d{4,6}"


def test_list_leaves_out_comments_and_blank_lines() -> None:
    """One serial a line, in order; blanks around them, Windows line ends and a byte order mark do not matter."""
    text = "\ufeff# tray 1\r\nMD-0001\r\n\r\n  MD-0003 \r\n   # and\r\nMD-0002"
    assert read_list(text, "serials.txt", PATTERN) == ("MD-0001", "MD-0003", "MD-0002")


def test_all_mistakes_of_a_list_at_once_by_line() -> None:
    """Wrong forms and doubles, each with its line; a double names the line of the first."""
    text = "MD-0001\n# comment\nmd-0002\nMD-0001\nMD-000\n\nMD-0003\nMD-0001\n"
    with pytest.raises(FileMistakes) as caught:
        read_list(text, "serials.txt", PATTERN)
    assert str(caught.value).splitlines() == [
        r"serials.txt:3: serial 'md-0002' does not match this part number's pattern MD-\d{4,6}.",
        "serials.txt:4: serial 'MD-0001' was already in line 1. List each part once.",
        r"serials.txt:5: serial 'MD-000' does not match this part number's pattern MD-\d{4,6}.",
        "serials.txt:8: serial 'MD-0001' was already in line 1. List each part once.",
    ]
    assert caught.value.exit_code == 2


def test_line_numbers_are_an_editors() -> None:
    """Only a newline ends a line: a form feed or a Unicode line separator is a mistake in its own line."""
    with pytest.raises(FileMistakes) as caught:
        read_list("MD-0001\fMD-0002\nMD\u20280003\nMD-000\n", "serials.txt", PATTERN)
    assert [mistake.line for mistake in caught.value.mistakes] == [1, 2, 3]


@pytest.mark.parametrize("text", ["", "\n\n", "# nothing but this\n"])
def test_list_without_serials_is_a_mistake(text: str) -> None:
    """An empty list is no lot: said of the file as a whole."""
    with pytest.raises(FileMistakes, match=r"serials.txt: there is no serial in this list\. Put one serial on each"):
        read_list(text, "serials.txt", PATTERN)


@pytest.mark.parametrize(
    ("serial", "pattern", "fault"),
    [
        ("MD-0001", PATTERN, None),
        ("anything at all", None, None),
        ("Größe 7/µ", None, None),
        ("MD-0001x", PATTERN, "does not match"),
        ("xMD-0001", PATTERN, "does not match"),
        ("MD-0001\n", None, "cannot be printed"),
        ("MD\x1b[31m", None, "cannot be printed"),
        ("MD\udcff", None, "cannot be printed"),
        ("MD\u200b0001", None, "cannot be printed"),
        ("9" * 80, None, None),
        ("9" * 81, None, "more than 80"),
    ],
)
def test_what_can_be_a_serial(serial: str, pattern: str | None, fault: str | None) -> None:
    """The whole serial must match; what cannot be printed or is too long is none; sentences are printable."""
    said = pattern_fault(serial, pattern)
    assert (said is None) == (fault is None)
    if said is not None and fault is not None:
        assert fault in said
        assert said.isprintable()


def test_scanner_gives_codes_and_waits() -> None:
    """A code without the blanks around it, or not yet; an empty code is none."""
    source = FromScanner(FakeBench(codes=[" MD-0001 ", None, "  "]))  # type: ignore[arg-type]
    assert source.next(0.5) == Serial("MD-0001", "scanned")
    assert source.next(0.5) is Wait.NOT_YET
    assert source.next(0.5) is Wait.NOT_YET


def test_keyboard_tells_an_empty_line_from_the_end() -> None:
    """Enter alone asks again; the end of input ends."""
    lines = iter(["MD-0001\n", "\n", ""])
    source = FromKeyboard(lambda: next(lines))
    assert [source.next(0.5) for _ in range(3)] == [Serial("MD-0001", "typed"), Wait.NOT_YET, Wait.END]


def test_list_ends() -> None:
    """Each serial once, identity "file", then the end, again and again."""
    source = FromList(["MD-0001"])
    assert [source.next(0.5) for _ in range(3)] == [Serial("MD-0001", "file"), Wait.END, Wait.END]


@pytest.mark.parametrize(
    ("k", "tray", "serial"),
    [
        (0, 20, "L7-T01-P01"),
        (19, 20, "L7-T01-P20"),
        (20, 20, "L7-T02-P01"),
        (2000, 20, "L7-T101-P01"),
        (3, 1, "L7-T04-P01"),
    ],
)
def test_numbers(k: int, tray: int, serial: str) -> None:
    """Position counts within the tray, trays from 1; more than 99 trays take three digits."""
    assert numbered("L7", tray, k) == serial


def test_numbers_start_behind_the_highest_used() -> None:
    """Only serials of this lot's form count; names that look like a pattern are taken as they are."""
    assert auto_start([], "L7", 20) == 0
    assert auto_start(["L7-T01-P03", "L7-T02-P01", "L7-T01-P20", "MD-0001", "L77-T09-P01"], "L7", 20) == 21
    assert auto_start(["L.7-T01-P02", "LX7-T01-P09"], "L.7", 20) == 2


def test_numbered_source_asks_for_each_part_and_ends_with_its_input() -> None:
    """By hand it asks; with a handler it does not, and says so in its prompt."""
    answers = iter(["\n", ""])
    by_hand, handled = Numbered("L7", 20, 5, lambda: next(answers)), Numbered("L7", 20, 5, None)
    assert (by_hand.asks, handled.asks) == (True, False)
    assert "Enter" in by_hand.prompt
    assert "Enter" not in handled.prompt
    assert [by_hand.confirm(), by_hand.confirm(), handled.confirm()] == [True, False, True]
    assert handled.next(0.5) == Serial("L7-T01-P06", "auto")
    assert handled.next(0.5) == Serial("L7-T01-P07", "auto")
