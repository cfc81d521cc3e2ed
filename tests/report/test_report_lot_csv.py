"""A lot as CSV: one row a part, numbers that read back exactly, text that stays in its cell."""

from __future__ import annotations

import csv
import io

from report_examples import attempt, lot, sound_values

from harness.report.lot_csv import lot_csv
from harness.statistics.capability import capability
from harness.statistics.parts import parts_of


def rows(attempts) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(lot_csv(attempts))))


def test_one_row_a_part_with_how_it_stands():
    """Each part once: its standing, tries, reason, and which attempt was its first valid one."""
    found = rows(lot())
    assert len(found) == 40
    passed, unjudged, retried, failed = found[0], found[2], found[3], found[9]
    assert (passed["verdict"], passed["attempts"], passed["final"], passed["reason"]) == ("pass", "1", "true", "")
    assert (unjudged["verdict"], unjudged["first_valid_attempt"], unjudged["fs_hz"]) == ("no verdict", "", "")
    assert (retried["verdict"], retried["attempts"], retried["first_valid_attempt"]) == ("pass", "2", "2")
    assert (failed["verdict"], failed["reason"], failed["reason_characteristic"]) == ("fail", "above-max", "fs")


def test_values_are_those_of_the_statistics_bit_for_bit():
    """The column of a characteristic is the population of its capability."""
    attempts = lot()
    for name, column in (("fs", "fs_hz"), ("qm", "qm"), ("c_at", "c_at_f"), ("l1", "l1_h"), ("tan_delta", "tan_delta")):
        values = tuple(float(row[column]) for row in rows(attempts) if row[column])
        assert values == capability(name, parts_of(attempts)).values


def test_the_value_of_a_rework_does_not_replace_the_first():
    """A reworked part shows its first valid attempt's value, and its standing now."""
    tries = [attempt("A", "fail", values=sound_values(1)), attempt("A", "pass", 2, values=sound_values(2))]
    (row,) = rows(tries)
    assert (row["verdict"], row["first_valid_verdict"]) == ("pass", "fail")
    assert float(row["fs_hz"]) == sound_values(1)["fs"]


def test_odd_serials_stay_in_their_cell():
    """Commas, quotes and line ends in a serial come back as they were."""
    serials = ['a,"b"', "line\nend", "<b>", "=1+1", " "]
    assert [row["serial"] for row in rows([attempt(serial) for serial in serials])] == serials


def test_an_empty_lot_is_a_header_alone():
    """No parts: one line, with the columns of standing."""
    text = lot_csv([])
    assert text.startswith("serial,element,verdict,")
    assert text.count("\n") == 1


def test_elements_have_rows_of_their_own():
    """A part of two elements has two rows, each with its own values."""
    found = rows([attempt("A", values=sound_values(k), element=k) for k in (1, 2)])
    assert [(row["serial"], row["element"]) for row in found] == [("A", "1"), ("A", "2")]
    assert found[0]["fs_hz"] != found[1]["fs_hz"]


def test_the_same_lot_gives_the_same_text():
    """Deterministic to the byte, lines ending in a line feed."""
    assert lot_csv(lot()) == lot_csv(lot())
    assert "\r" not in lot_csv(lot())
