"""Errors: one sentence with place and remedy, sorted by who can mend it."""

from __future__ import annotations

import pytest

from harness.errors import FileMistakes, Mistake, RingtrueError, SetupError, StationError, UnsoundError


@pytest.mark.parametrize(
    ("place", "remedy", "sentence"),
    [
        ("", "", "The lot is unknown."),
        ("lot", "", "lot: The lot is unknown."),
        ("", "Check its name.", "The lot is unknown. Check its name."),
        ("lot", "Check its name.", "lot: The lot is unknown. Check its name."),
    ],
)
def test_sentence_has_place_and_remedy(place: str, remedy: str, sentence: str) -> None:
    """Place, sentence and remedy stand on one line, each only if there is one."""
    error = RingtrueError("The lot is unknown.", place=place, remedy=remedy)
    assert str(error) == error.sentence() == sentence


def test_exit_codes() -> None:
    """Each kind of error knows its exit code, and all have one root."""
    codes = {kind: kind.exit_code for kind in (SetupError, FileMistakes, StationError, UnsoundError)}
    assert codes == {SetupError: 2, FileMistakes: 2, StationError: 3, UnsoundError: 4}
    assert all(issubclass(kind, RingtrueError) for kind in codes)
    assert issubclass(FileMistakes, SetupError)


@pytest.mark.parametrize(
    ("mistake", "sentence"),
    [
        (
            Mistake("a.csv", 7, "phase_deg", "the cell is empty.", "Fill it."),
            "a.csv:7: phase_deg: the cell is empty. Fill it.",
        ),
        (Mistake("a.csv", None, "", "the file is empty."), "a.csv: the file is empty."),
        (Mistake("a.csv", 1, "", "no names."), "a.csv:1: no names."),
    ],
)
def test_mistake_sentence(mistake: Mistake, sentence: str) -> None:
    """A mistake names file, line and key as far as it has them."""
    assert mistake.sentence() == sentence


def test_mistakes_come_by_file_and_line() -> None:
    """All mistakes are told at once, by file, then by line, those of a whole file first."""
    found = [
        Mistake("b", 1, "", "one."),
        Mistake("a", 9, "", "nine."),
        Mistake("a", None, "", "whole."),
        Mistake("a", 2, "", "two."),
    ]
    error = FileMistakes(found)
    assert str(error).splitlines() == ["a: whole.", "a:2: two.", "a:9: nine.", "b:1: one."]
    assert len(error.mistakes) == 4
