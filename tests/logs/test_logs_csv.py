"""CSV logs: every pair of columns, tolerated habits, and each kind of bad input told in one sentence."""

from __future__ import annotations

import re

import numpy as np
import pytest

from harness.correction import conversions as c
from harness.errors import FileMistakes, SetupError
from harness.logs import read_log
from harness.logs.columns import NAMES, PAIRS, near_name
from harness.logs.mistakes import MOST_LISTED
from harness.records import Sweep

F = np.array([39e3, 40e3, 41e3])
Z = np.array([300 - 900j, 20 - 3j, 500 + 700j])
GOOD = "frequency_hz,resistance_ohm,reactance_ohm\n1000,1,2\n2000,3,4\n3000,5,6\n"

COLUMNS = {
    "impedance_ohm": c.z_to_ztheta,
    "resistance_ohm": c.z_to_rx,
    "conductance_s": c.z_to_gb,
    "admittance_s": c.z_to_ytheta,
    "s11_db": lambda z: c.complex_to_db_deg(c.z_to_s11(z, 50.0)),
    "s21_db": lambda z: c.complex_to_db_deg(c.z_to_s21_series(z, 50.0)),
}


def _csv(names: str, *columns: np.ndarray, separator: str = ",") -> str:
    rows = [separator.join(repr(float(x)) for x in row) for row in zip(*columns, strict=True)]
    return "\n".join([names.replace(",", separator), *rows]) + "\n"


def _mistakes(text: str | bytes, file: str = "log.csv") -> list[str]:
    data = text.encode() if isinstance(text, str) else text
    with pytest.raises(FileMistakes) as caught:
        read_log(data, file)
    return str(caught.value).splitlines()


@pytest.mark.parametrize("pair", PAIRS, ids=lambda pair: pair.first)
@pytest.mark.parametrize("separator", [",", ";", "\t"])
def test_every_pair_gives_the_impedance(pair: object, separator: str) -> None:
    """Whatever pair of columns and separator a log has, the impedance is the same."""
    first, second = COLUMNS[pair.first](Z)  # type: ignore[attr-defined]
    names = f"frequency_hz,{pair.first},{pair.second}"  # type: ignore[attr-defined]
    sweep = read_log(_csv(names, F, first, second, separator=separator).encode(), "log.csv", fixture="series")
    assert sweep.f_hz.tolist() == F.tolist()
    np.testing.assert_allclose(sweep.z_ohm, Z, rtol=1e-12)
    assert sweep.absolute


def test_shunt_fixture_and_reference() -> None:
    """Transmission past a shunt part, and reflection, take the reference resistance they were measured with."""
    level, phase = c.complex_to_db_deg(c.z_to_s21_shunt(Z, 75.0))
    text = _csv("frequency_hz,s21_db,s21_deg", F, level, phase)
    shunt = read_log(text.encode(), "log.csv", fixture="shunt", z0_ohm=75.0)
    np.testing.assert_allclose(shunt.z_ohm, Z, rtol=1e-10)
    assert shunt.absolute
    level, phase = c.complex_to_db_deg(c.z_to_s11(Z, 75.0))
    text = _csv("frequency_hz,s11_db,s11_deg", F, level, phase)
    np.testing.assert_allclose(read_log(text.encode(), "log.csv", z0_ohm=75.0).z_ohm, Z, rtol=1e-10)


HABITS = {
    "plain": GOOD.encode(),
    "byte order mark": b"\xef\xbb\xbf" + GOOD.encode(),
    "CRLF": GOOD.replace("\n", "\r\n").encode(),
    "CR": GOOD.replace("\n", "\r").encode(),
    "no last line end": GOOD.rstrip("\n").encode(),
    "comments": ("# a log, invented; 23 °C\n" + GOOD.replace("2000", "  # half way\n2000")).encode(),
    "blank lines": GOOD.replace("\n", "\n\n").encode(),
    "spaces": GOOD.replace(",", " , ").encode(),
    "other order": b"reactance_ohm,frequency_hz,resistance_ohm\n2,1000,1\n4,2000,3\n6,3000,5\n",
    "more columns": b"n,frequency_hz,resistance_ohm,reactance_ohm,note\n1,1000,1,2,a\n2,2000,3,4,\n3,3000,5,6,nan\n",
    "quotation marks": b'"frequency_hz","resistance_ohm","reactance_ohm"\n"1000","1","2"\n2000,3,4\n3000,5,6\n',
    "separators at line ends": b"frequency_hz;resistance_ohm;reactance_ohm\n1000;1;2;\n2000;3;4;\n3000;5;6;\n",
    "exponents": b"frequency_hz,resistance_ohm,reactance_ohm\n1e3,+1.0,2.\n2.0E+03,3e0,4\n3000.,5,.6e1\n",
}


@pytest.mark.parametrize("habit", HABITS)
def test_tolerated_habits(habit: str) -> None:
    """What exporters do differently without a change of meaning reads the same."""
    sweep = read_log(HABITS[habit], "log.csv")
    assert sweep.f_hz.tolist() == [1000, 2000, 3000]
    assert sweep.z_ohm.tolist() == [1 + 2j, 3 + 4j, 5 + 6j]


HEAD = "frequency_hz,resistance_ohm,reactance_ohm\n"
BAD = {
    "empty": (b"", None, "the file is empty"),
    "white space": (b" \n\t\n", None, "the file is empty"),
    "mark only": (b"\xef\xbb\xbf", None, "the file is empty"),
    "comments only": (b"# nothing\n", None, "nothing but comments"),
    "header only": (HEAD, None, "no point"),
    "one point": (HEAD + "1000,1,2\n", None, "one point"),
    "UTF-16": (GOOD.encode("utf-16"), None, "UTF-16"),
    "UTF-16 without mark": (GOOD.encode("utf-16-le"), 1, "zero bytes"),
    "UTF-32": (GOOD.encode("utf-32"), None, "UTF-32"),
    "Latin-1": ("# 23 °C\r\n".encode("latin-1") + GOOD.encode(), 1, "byte 0xB0 is not UTF-8"),
    "Latin-1 further down": (GOOD.encode() + "4000,1,2 µ\n".encode("latin-1"), 5, "byte 0xB5 is not UTF-8"),
    "binary": (bytes(range(256)), 1, "zero bytes"),
    "no second column": ("frequency_hz,impedance_ohm\n1,2\n", 1, "no phase_deg.*Add the column phase_deg"),
    "no frequency": ("impedance_ohm,phase_deg\n1,2\n", 1, "no frequency_hz"),
    "other names": ("Frequency (Hz),Z,theta\n1,2,3\n", 1, "Did you mean 'frequency_hz' by 'Frequency \\(Hz\\)'"),
    "misspelt": ("frequency_hz,resistence_ohm,reactance_ohm\n1,2,3\n", 1, "mean 'resistance_ohm' by 'resistence_ohm'"),
    "strange names": ("time,voltage\n1,2\n", 1, "no frequency_hz and no pair.*Name frequency_hz and one pair"),
    "no names, two columns": ("1000,2\n2000,3\n", 1, "two columns of numbers without names"),
    "no names, three columns": ("1000,2,3\n2000,3,4\n", 1, "3 numbers, so the columns have no names"),
    "no names, one column": ("1000\n2000\n", 1, "one column of numbers without a name"),
    "names in a comment": ("# frequency_hz,resistance_ohm,reactance_ohm\n1,2,3\n", 2, "stand in a comment"),
    "spaces between columns": (GOOD.replace(",", " "), 1, "separated by spaces"),
    "a Touchstone log": ("# MHz S RI R 50\n1 .1 .2\n2 .1 .2\n", 2, "Touchstone file's name ends in"),
    "two pairs": (
        "frequency_hz,impedance_ohm,phase_deg,resistance_ohm,reactance_ohm\n1,2,3,4,5\n",
        1,
        "more than once: impedance_ohm,phase_deg and resistance_ohm,reactance_ohm",
    ),
    "name twice": ("frequency_hz,frequency_hz,resistance_ohm,reactance_ohm\n1,2,3,4\n", 1, "named twice"),
    "decimal commas, semicolons": (HEAD.replace(",", ";") + "1000,5;1,5;2,5\n", 2, "decimal commas \\('1000,5'\\)"),
    "decimal commas, commas": (HEAD + "1000,5,1,5,2,5\n2000,5,1,5,2,5\n", 2, "decimal commas"),
    "decimal commas, quoted": (HEAD + '"1000,5","1,5","2,5"\n', 2, "decimal commas \\('1000,5'\\)"),
    "not a number": (GOOD + "4000,abc,2\n", 5, "resistance_ohm: 'abc' is not a number"),
    "unit in the cell": (GOOD + "4000,1,2 ohm\n", 5, "reactance_ohm: '2 ohm' is not a number"),
    "hexadecimal": (GOOD + "4000,0x10,2\n", 5, "'0x10' is not a number"),
    "underscore": (GOOD + "4_000,1,2\n", 5, "'4_000' is not a number"),
    "NaN": (GOOD + "4000,NaN,2\n", 5, "'NaN' is not a measured value"),
    "infinity": (GOOD + "4000,-inf,2\n", 5, "'-inf' is not a measured value"),
    "SCPI NaN": (GOOD + "4000,9.91E+37,2\n", 5, "how instruments write"),
    "too large": (GOOD + "4000,1e999,2\n", 5, "'1e999' is infinite"),
    "empty cell": (GOOD + "4000,,2\n", 5, "the cell is empty"),
    "too few cells": (GOOD + "4000,1\n", 5, "2 cells where the first line names 3"),
    "too many cells": (GOOD + "4000,1,2,x\n", 5, "4 cells where the first line names 3"),
    "open quotation": (GOOD + '4000,"1,2\n', 5, "quotation mark"),
    "goes back": (GOOD + "2500,1,2\n", 5, "goes back from 3000 Hz to 2500 Hz"),
    "second sweep": (GOOD + GOOD.removeprefix(HEAD), 5, "goes back from 3000 Hz to 1000 Hz"),
    "downward": (HEAD + "3000,1,2\n2000,1,2\n1000,1,2\n", 3, "run downward"),
    "repeated": (GOOD + "3000,7,8\n", 5, "3000 Hz repeats the frequency of line 4"),
    "zero frequency": (HEAD + "0,1,2\n1000,1,2\n", 2, "0 Hz is not a frequency above zero"),
    "negative frequency": (HEAD + "-5,1,2\n1000,1,2\n", 2, "-5 Hz is not a frequency above zero"),
    "zero impedance": (GOOD + "4000,0,0\n", 5, "exactly 0 ohm"),
    "negative magnitude": ("frequency_hz,impedance_ohm,phase_deg\n1,2,3\n2,-2,3\n", 3, "magnitude below zero"),
    "zero admittance": ("frequency_hz,conductance_s,susceptance_s\n1,0,0\n2,1,1\n", 2, "open"),
    "total reflection": ("frequency_hz,s11_db,s11_deg\n1,0,0\n2,-1,1\n", 2, "open"),
    "no transmission": ("frequency_hz,s21_db,s21_deg\n1,-9999,0\n2,-30,1\n", 2, "open"),
}


@pytest.mark.parametrize("kind", BAD)
def test_bad_input_gets_one_sentence(kind: str) -> None:
    """Each kind of bad input is one line with file, line, what is wrong and what to do."""
    text, line, says = BAD[kind]
    told = _mistakes(text)
    assert len(told) == 1
    place = "log.csv" if line is None else f"log.csv:{line}"
    assert told[0].startswith(place + ": ")
    assert re.search(says, told[0]), told[0]
    assert told[0].endswith((".", "?", "'"))


def test_all_mistakes_in_one_go() -> None:
    """Cells, rows and order are all told at once, by line."""
    told = _mistakes(HEAD + "1000,x,1\n2000,1\n3000,1,1\n2500,1,1\n2500,nan,\n")
    assert [line.split(":")[1] for line in told] == ["2", "3", "5", "6", "6"]


def test_many_mistakes_are_counted() -> None:
    """A file of nothing but mistakes lists the first twenty and says how many more there are."""
    told = _mistakes(HEAD + "x,y,z\n" * 30)
    assert len(told) == MOST_LISTED + 1
    assert told[-1] == "log.csv:8: 70 more mistakes are not listed, from this line on."


def test_one_more_mistake_is_counted_in_the_singular() -> None:
    """The count speaks English for one too."""
    assert _mistakes(HEAD + "x,y,z\n" * 7)[-1].endswith("1 more mistake is not listed, from this line on.")


def test_frequencies_written_too_short_are_no_repeats(rng: np.random.Generator) -> None:
    """A fine sweep whose frequency column has few digits repeats itself honestly and is read as it stands."""
    f = np.round(10e6 + 4.7 * np.arange(400), -1)
    z = 100 + rng.standard_normal(400) + 50j
    text = _csv("frequency_hz,resistance_ohm,reactance_ohm", f, z.real, z.imag)
    sweep = read_log(text.encode(), "log.csv")
    assert sweep.f_hz.tolist() == f.tolist()
    assert np.count_nonzero(np.diff(f) == 0) > 100


def test_rows_copied_are_repeats_even_when_many() -> None:
    """Rows doubled with the same readings, or odd steps repeated, are a mistake however frequent."""
    f = np.repeat(np.arange(1, 30) * 10.0, 2)
    z = np.repeat(np.arange(1, 30) * 1.0, 2)
    assert "repeats the frequency" in _mistakes(_csv("frequency_hz,resistance_ohm,reactance_ohm", f, z, z))[0]
    f = np.repeat(np.arange(1, 30) * 125.0, 2)
    z = np.arange(58) + 1.0
    assert "repeats the frequency" in _mistakes(_csv("frequency_hz,resistance_ohm,reactance_ohm", f, z, z))[0]


def _transmission(fixture: str, turn_deg: float = 0.0) -> tuple[np.ndarray, bytes]:
    f = np.linspace(99e3, 101e3, 401)
    y = 2j * np.pi * f * 20e-12 + 0.005 / (1 + 500j * (f / 100e3 - 100e3 / f))
    to_s21 = {"series": c.z_to_s21_series, "shunt": c.z_to_s21_shunt}[fixture]
    level, phase = c.complex_to_db_deg(to_s21(1 / y, 50.0))
    return f, _csv("frequency_hz,s21_db,s21_deg", f, level, phase + turn_deg).encode()


@pytest.mark.parametrize("turn_deg", [0.0, 130.0])
def test_transmission_without_fixture_keeps_frequency_and_bandwidth(turn_deg: float) -> None:
    """Without a fixture the sweep is relative, and resonance and width survive a fixture's own phase."""
    f, data = _transmission("series", turn_deg)
    sweep = read_log(data, "log.csv")
    assert not sweep.absolute
    g = (1 / sweep.z_ohm).real
    assert f[np.argmax(g)] == pytest.approx(100e3, abs=5.0)
    wide = f[g > g.max() / 2]
    assert wide[-1] - wide[0] == pytest.approx(100e3 / 500, abs=11.0)


def test_a_strong_low_impedance_part_in_series_is_still_read() -> None:
    """Where C0 alone passes most of the level, fp dips deeper than fs peaks; the order of the two tells."""
    f = np.linspace(1.5e6, 1.85e6, 701)
    y = 2j * np.pi * f * 1.2e-9 + 0.2 / (1 + 300j * (f / 1.65e6 - 1.65e6 / f))
    level, phase = c.complex_to_db_deg(c.z_to_s21_series(1 / y, 50.0))
    sweep = read_log(_csv("frequency_hz,s21_db,s21_deg", f, level, phase).encode(), "log.csv")
    assert not sweep.absolute
    assert f[np.argmin(np.abs(sweep.z_ohm))] == pytest.approx(1.65e6, rel=1e-3)
    level, phase = c.complex_to_db_deg(c.z_to_s21_shunt(1 / y, 50.0))
    assert "cannot be told" in _mistakes(_csv("frequency_hz,s21_db,s21_deg", f, level, phase))[0]


def test_a_dip_without_fixture_is_refused() -> None:
    """A shunt part would show its fp as fs; without a fixture that is refused, with one it is read."""
    f, data = _transmission("shunt")
    assert "cannot be told" in _mistakes(data)[0]
    sweep = read_log(data, "log.csv", fixture="shunt")
    assert f[np.argmin(np.abs(sweep.z_ohm))] == pytest.approx(100e3, abs=5.0)


def test_transmission_above_0_db_without_fixture_is_refused() -> None:
    """An uncalibrated level above 0 dB cannot be turned into a shape of Z."""
    assert "above 0 dB" in _mistakes("frequency_hz,s21_db,s21_deg\n1,-3,0\n2,4,0\n3,-3,0\n")[0]


def test_a_fixture_changes_nothing_in_other_logs() -> None:
    """One option for many files: logs of impedance ignore it."""
    assert read_log(GOOD.encode(), "a.csv", fixture="shunt").z_ohm.tolist() == [1 + 2j, 3 + 4j, 5 + 6j]


@pytest.mark.parametrize(("fixture", "z0_ohm"), [("parallel", 50.0), (None, 0.0), (None, float("nan")), (None, -5.0)])
def test_options_that_cannot_be(fixture: str | None, z0_ohm: float) -> None:
    """An unknown fixture or an impossible reference is a set-up error, not a traceback."""
    with pytest.raises(SetupError, match=r"series or shunt|above zero"):
        read_log(GOOD.encode(), "a.csv", fixture=fixture, z0_ohm=z0_ohm)


@pytest.mark.parametrize("name", ["log", "log.txt", "C300.dat", "lots/disc 7.v2"])
def test_other_suffixes_are_read_by_content(name: str) -> None:
    """A log without a telling suffix is read as what it is."""
    assert read_log(("# GHz is what a comment says\n" + GOOD).encode(), name).f_hz.size == 3


@pytest.mark.parametrize(
    ("written", "meant"),
    [("freq", "frequency_hz"), ("Frequency[Hz]", "frequency_hz"), ("|Z|", "impedance_ohm"),
     ("Phase (deg)", "phase_deg"),
     ("R", "resistance_ohm"), ("X (Ohm)", "reactance_ohm"), ("S21 dB", "s21_db"), ("temperature", None), ("", None)],
)  # fmt: skip
def test_near_names(written: str, meant: str | None) -> None:
    """Names that exporters write lead to the column meant; strange ones lead nowhere."""
    assert near_name(written) == meant


def test_the_columns_are_the_published_ones() -> None:
    """The pairs a log may have are exactly the documented ones."""
    assert [f"{pair.first},{pair.second}" for pair in PAIRS] == [
        "impedance_ohm,phase_deg",
        "resistance_ohm,reactance_ohm",
        "conductance_s,susceptance_s",
        "admittance_s,phase_deg",
        "s11_db,s11_deg",
        "s21_db,s21_deg",
    ]
    assert len(NAMES) == 12


def test_a_sweep_comes_without_conditions() -> None:
    """A log says nothing about drive, temperature or noise, so the sweep does not either."""
    sweep = read_log(GOOD.encode(), "a.csv")
    assert isinstance(sweep, Sweep)
    assert (sweep.noise_relative, sweep.conditions.temperature_degc, sweep.readings) == (None, None, ())
