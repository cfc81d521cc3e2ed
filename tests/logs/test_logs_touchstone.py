"""Touchstone logs: the specification's own examples, scikit-rf as the independent reader, and bad input."""

from __future__ import annotations

import re
import warnings
from pathlib import Path

import numpy as np
import pytest
import skrf

from harness.correction import conversions as c
from harness.errors import FileMistakes
from harness.logs import read_log

# Examples of the Touchstone File Format Specification, version 2.0 (IBIS Open Forum), by their number there.
EX_8 = "# MHz S MA R 50\n2.000 0.894 -12.136\n3.000 0.894 -12.136\n"  # its one point, and one more to make a sweep
ANGLES = ["-4", "-22", "-45", "-62", "-89"]
EX_9 = "! one-port Z\n# MHz Z MA R 75\n" + "\n".join(
    f"{f} {m} {a}" for f, m, a in zip((100, 200, 300, 400, 500), (0.99, 0.80, 0.707, 0.40, 0.01), ANGLES, strict=True)
)
V2_ROWS = "\n".join(
    f"{f} {m} {a}" for f, m, a in zip((100, 200, 300, 400, 500), (74.25, 60, 53.025, 30, 0.75), ANGLES, strict=True)
)
EX_10 = f"""[Version] 2.0
# MHz Z MA
[Number of Ports] 1
[Number of Frequencies] 5
[Reference] 20.0
[Network Data]
{V2_ROWS}
[End]
"""
EX_11 = "# kHz H MA R 1\n2 .95 -26 3.57 157 .04 76 .66 -14\n"
EX_13 = """! 2-port S-parameter file, three frequency points
# GHz S RI R 50.0
!freq RelS11 ImS11 ReS21 ImS21 ReS12 ImS12 ReS22 ImS22
1.0000 0.3926 -0.1211 -0.0003 -0.0021 -0.0003 -0.0021 0.3926 -0.1211
2.0000 0.3517 -0.3054 -0.0096 -0.0298 -0.0096 -0.0298 0.3517 -0.3054
10.000 0.3419 0.3336 -0.0134 0.0379 -0.0134 0.0379 0.3419 0.3336
"""
# Laid out as example 18 (noise from 4 GHz after 22 GHz, bare option line); the numbers are invented.
EX_18_LIKE = """!2-port network, S-parameter and noise data
#
! network data
2 .95 -26 0.30 157 .04 76 .66 -14
22 .60 -144 0.13 40 .14 40 .56 -85
! noise parameters
4 .7 .64 69 .38
18 2.7 .46 -33 .40
"""


def _scikit_rf(folder: Path, name: str, text: str) -> skrf.Network:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # its remarks on reference impedances are none of ours
        return skrf.Network(str(path))


def _mistakes(text: str | bytes, file: str) -> list[str]:
    with pytest.raises(FileMistakes) as caught:
        read_log(text.encode() if isinstance(text, str) else text, file)
    return str(caught.value).splitlines()


def test_example_8() -> None:
    """S 0.894 ∠ −12.136° at 50 Ω is 196.0762 − j367.1192 Ω (computed from the printed S)."""
    sweep = read_log(EX_8.encode(), "ex_8.s1p")
    assert sweep.f_hz.tolist() == [2e6, 3e6]
    assert sweep.z_ohm[0] == pytest.approx(196.0762 - 367.1192j, abs=1e-4)
    assert sweep.absolute


def test_examples_9_and_10_are_the_same_impedances() -> None:
    """Version 1 normalises Z to R (0.99 · 75 Ω), version 2 does not (74.25 Ω): the two examples agree."""
    first, second = read_log(EX_9.encode(), "ex_9.s1p"), read_log(EX_10.encode(), "ex_10.ts")
    assert first.f_hz.tolist() == second.f_hz.tolist() == [1e8, 2e8, 3e8, 4e8, 5e8]
    np.testing.assert_allclose(first.z_ohm, second.z_ohm, rtol=1e-12)
    assert np.abs(second.z_ohm) == pytest.approx([74.25, 60, 53.025, 30, 0.75])
    assert np.degrees(np.angle(second.z_ohm)) == pytest.approx([-4, -22, -45, -62, -89])


def test_example_11_is_refused() -> None:
    """Hybrid parameters do not give a part's impedance, and the sentence says so."""
    assert "H (hybrid) parameters" in _mistakes(EX_11, "ex_11.s2p")[0]


def test_example_13() -> None:
    """The second pair of a two-port record is S21."""
    sweep = read_log(EX_13.encode(), "ex_13.s2p", fixture="shunt")
    s21 = np.array([-0.0003 - 0.0021j, -0.0096 - 0.0298j, -0.0134 + 0.0379j])
    assert sweep.f_hz.tolist() == [1e9, 2e9, 10e9]
    np.testing.assert_allclose(sweep.z_ohm, 50 * s21 / (2 * (1 - s21)), rtol=1e-14)


@pytest.mark.parametrize("noise_begins", ["4", "22"])
def test_noise_data_is_left_aside(noise_begins: str) -> None:
    """Network data ends at the first frequency that does not rise; a bare # means GHz S MA R 50."""
    text = EX_18_LIKE.replace("\n4 .7", f"\n{noise_begins} .7").replace("\n18 2.7", "\n30 2.7")
    sweep = read_log(text.encode(), "ex_18.s2p", fixture="shunt")
    assert sweep.f_hz.tolist() == [2e9, 22e9]
    assert c.z_to_s21_shunt(sweep.z_ohm, 50.0)[1] == pytest.approx(0.13 * np.exp(1j * np.radians(40)))


def test_admittance_is_normalised_too() -> None:
    """Version 1 holds Y·R, version 2 siemens: 0.5 at 50 Ω and 0.01 S are both 100 Ω.

    scikit-rf 2.2.0 multiplies Y by R where it ought to divide, so the comparison with it below keeps to R 1.
    """
    first = read_log(b"# MHz Y RI R 50\n1 0.5 0\n2 0 0.5\n", "y.s1p")
    text = EX_10.replace("Z MA", "Y RI").replace("cies] 5", "cies] 2").replace(V2_ROWS, "1 0.01 0\n2 0 0.01")
    second = read_log(text.encode(), "y.ts")
    np.testing.assert_allclose(first.z_ohm, [100, -100j], rtol=1e-14)
    np.testing.assert_allclose(second.z_ohm, [100, -100j], rtol=1e-14)


SAME_AS_SCIKIT_RF = {
    "ex_8.s1p": EX_8,
    "ex_9.s1p": EX_9,
    "ex_13.s2p": EX_13,
    "ex_18.s2p": EX_18_LIKE,
    "db.s1p": "# kHz S DB R 75\n100 -1.5 -40\n200 -0.5 30\n",
    "ri.s1p": "# Hz S RI R 60\n100 .5 -.40\n200 -0.5 .3\n",
    "y.s1p": "# MHz Y RI R 1\n1 0.1 0.9\n2 0.2 1.9\n",
    "z_db.s1p": "# MHz Z DB R 50\n1 3 -80\n2 6 70\n",
    "wrapped.s2p": "# MHz S RI R 50\n1 .1 .2\n .3 .4\n .3 .4 .1 .2\n2 .1 .2 .3 .5 .3 .5\n .1 .2\n",
}


@pytest.mark.parametrize("name", SAME_AS_SCIKIT_RF)
def test_agrees_with_scikit_rf(name: str, tmp_path: Path) -> None:
    """scikit-rf, reading the same text, finds the same frequencies and the same impedance or transmission."""
    text = SAME_AS_SCIKIT_RF[name]
    network = _scikit_rf(tmp_path, name, text)
    sweep = read_log(text.encode(), name, fixture="series")
    np.testing.assert_allclose(sweep.f_hz, network.f, rtol=1e-14)
    if network.nports == 1:
        np.testing.assert_allclose(sweep.z_ohm, network.z[:, 0, 0], rtol=1e-9)
    else:
        shunt = read_log(text.encode(), name, fixture="shunt")
        np.testing.assert_allclose(c.z_to_s21_shunt(shunt.z_ohm, 50.0), network.s[:, 1, 0], rtol=1e-12)


@pytest.mark.parametrize("form", ["ri", "ma", "db"])
@pytest.mark.parametrize("unit", ["hz", "khz", "mhz", "ghz"])
def test_reads_what_scikit_rf_writes(form: str, unit: str, tmp_path: Path) -> None:
    """A network written by scikit-rf in any format and unit comes back as its impedance."""
    f = np.linspace(1.6e6, 1.7e6, 21)
    z = 1 / (2j * np.pi * f * 1.2e-9 + 0.2 / (1 + 300j * (f / 1.65e6 - 1.65e6 / f)))
    s = c.z_to_s11(z, 75.0).reshape(-1, 1, 1)
    frequency = skrf.Frequency.from_f(f / skrf.Frequency(unit=unit).multiplier, unit=unit)
    network = skrf.Network(frequency=frequency, s=s, z0=75.0)
    network.write_touchstone("disc", dir=str(tmp_path), form=form)
    sweep = read_log((tmp_path / "disc.s1p").read_bytes(), "disc.s1p")
    np.testing.assert_allclose(sweep.f_hz, f, rtol=1e-12)
    np.testing.assert_allclose(sweep.z_ohm, z, rtol=1e-9)


@pytest.mark.parametrize(
    ("order", "row"), [("21_12", ".1 .2 .3 .4 .5 .6 .7 .8"), ("12_21", ".1 .2 .5 .6 .3 .4 .7 .8")]
)  # fmt: skip
def test_version_2_two_port_order(order: str, row: str) -> None:
    """Version 2 states the order of N21 and N12; either gives the same S21."""
    text = _version_2(2, f"1 {row}\n2 {row}", f"[Two-Port Data Order] {order}\n[Matrix Format] Full")
    sweep = read_log(text.encode(), "x.ts", fixture="series")
    assert c.z_to_s21_series(sweep.z_ohm, 50.0)[0] == pytest.approx(0.3 + 0.4j)


@pytest.mark.parametrize("matrix", ["Lower", "upper"])
def test_version_2_triangles(matrix: str) -> None:
    """A symmetric two-port may state one triangle only; the middle pair is S21."""
    extra = f"[Two-Port Data Order] 21_12\n[Matrix Format] {matrix}"
    text = _version_2(2, "1 .1 .2 .3 .4 .7 .8\n2 .1 .2 .3 .4 .7 .8", extra)
    sweep = read_log(text.encode(), "x.ts", fixture="series")
    assert c.z_to_s21_series(sweep.z_ohm, 50.0)[0] == pytest.approx(0.3 + 0.4j)


def _version_2(ports: int, rows: str, extra: str = "", count: int = 2) -> str:
    return (
        f"! a comment first\n[Version] 2.0\n# MHz S RI R 50\n[Number of Ports] {ports}\n{extra}\n"
        f"[Number of Frequencies] {count}\n[Begin Information]\n[Anything] goes\nhere 1 2 3\n[End Information]\n"
        f"[Network Data]\n{rows}\n[End]\n"
    )


def test_version_2_details() -> None:
    """Information is skipped, only the first option line counts, references may go over lines and override R,
    noise data is left aside."""
    extra = "# Hz S DB R 1\n[Two-Port Data Order] 21_12\n[Number of Noise Frequencies] 1\n[Reference] 75\n75"
    text = _version_2(2, "1 0 0 .5 0 .5 0 0 0\n2 0 0 .5 0 .5 0 0 0\n[Noise Data]\n4 .7 .64 69 19", extra)
    assert read_log(text.encode(), "x.ts", fixture="series").z_ohm.real == pytest.approx([150, 150])


SAME = {
    "order of options": "# R 50 RI S MHz\n1 .1 .2\n2 .3 .4\n",
    "case": "# mHZ s ri r 50\n1 .1 .2\n2 .3 .4\n",
    "comments": "!a\n# MHz S RI R 50 ! here\n1 .1 .2 ! there\n!\n2 .3 .4\n",
    "second option line": "# MHz S RI R 50\n1 .1 .2\n# Hz Z MA R 1\n2 .3 .4\n",
    "blank lines": "\n# MHz S RI R 50\n\n1 .1 .2\n\n2 .3 .4\n\n",
    "tabs": "#\tMHz S RI R 50\n1\t.1\t.2\n2\t.3\t.4\n",
    "no space after #": "#MHz S RI R 50\n1 .1 .2\n2 .3 .4\n",
    "CRLF": "# MHz S RI R 50\r\n1 .1 .2\r\n2 .3 .4\r\n",
    "byte order mark": "\ufeff# MHz S RI R 50\n1 .1 .2\n2 .3 .4\n",
    "a reference a port": "# MHz S RI R 50 50\n1 .1 .2\n2 .3 .4\n",
    "R by default": "# MHz S RI\n1 .1 .2\n2 .3 .4\n",
}


@pytest.mark.parametrize("habit", SAME)
@pytest.mark.parametrize("name", ["x.s1p", "x.S1P", "x.ts", "x", "x.txt"])
def test_tolerated_habits(habit: str, name: str) -> None:
    """Order, case, comments and white space do not matter, nor does a name without a telling suffix."""
    sweep = read_log(SAME[habit].encode(), name)
    assert sweep.f_hz.tolist() == [1e6, 2e6]
    np.testing.assert_allclose(c.z_to_s11(sweep.z_ohm, 50.0), [0.1 + 0.2j, 0.3 + 0.4j], rtol=1e-14)


def test_comments_may_be_in_any_encoding() -> None:
    """Instruments write "°" and "Ω" into comments as they like; the data is what must be clean."""
    sweep = read_log(b"! 23 \xb0C, 50 \xd9\n# MHz S RI R 50\n1 .1 .2\n2 .3 .4\n", "x.s1p")
    assert sweep.f_hz.size == 2


def test_frequencies_are_not_rounded_twice() -> None:
    """1.6701 in MHz is 1670100 Hz exactly, and 0.0016701 in GHz too."""
    assert read_log(b"# MHz S RI\n1.6701 0 0\n1.67013e0 0 0\n", "x.s1p").f_hz.tolist() == [1670100.0, 1670130.0]
    assert read_log(b"# GHz S RI\n0.0016701 0 0\n1.67013E-3 0 0\n", "x.s1p").f_hz.tolist() == [1670100.0, 1670130.0]


ROW9 = "1 .1 .2 .3 .4 .3 .4 .1 .2\n"
BAD = {
    "empty": ("x.s1p", "", None, "the file is empty"),
    "comments only": ("x.s1p", "! nothing\n", None, "empty"),
    "no data": ("x.s1p", "# MHz S RI R 50\n", None, "no data"),
    "one point": ("x.s1p", "# MHz S RI R 50\n1 .1 .2\n", None, "one point"),
    "no option line": ("x.s1p", "1 .1 .2\n2 .1 .2\n", None, "no option line"),
    "a CSV log": ("x.s1p", "frequency_hz,impedance_ohm,phase_deg\n1,2,3\n", None, r"CSV log's name ends in \.csv"),
    "data first": ("x.s1p", "1 .1 .2\n# MHz S RI R 50\n2 .1 .2\n", 1, "before the option line"),
    "strange option": ("x.s1p", "# MHz S RI R 50 Q\n1 .1 .2\n2 .1 .2\n", 1, "'q' is no option"),
    "two references": ("x.s1p", "# MHz S RI R 50 75\n1 .1 .2\n2 .1 .2\n", 1, "different references"),
    "option twice": ("x.s1p", "# MHz kHz S RI\n1 .1 .2\n2 .1 .2\n", 1, "second choice"),
    "R without number": ("x.s1p", "# MHz S RI R\n1 .1 .2\n2 .1 .2\n", 1, "R is not followed"),
    "R of zero": ("x.s1p", "# MHz S RI R 0\n1 .1 .2\n2 .1 .2\n", 1, "R is not followed"),
    "three ports": ("x.s3p", "# MHz S RI R 50\n", None, "3 ports"),
    "no ports": ("x.s0p", "# MHz S RI R 50\n", None, "0 ports"),
    "two-port Z": ("x.s2p", "# MHz Z RI R 50\n" + ROW9, None, "Z parameters of two ports"),
    "two-port G": ("x.s2p", "# MHz G RI R 50\n" + ROW9, None, "G .inverse hybrid. parameters"),
    "named one, holds two": ("x.s1p", "# MHz S RI R 50\n" + ROW9, 2, "2 ports and not 1.*Name the file .s2p"),
    "named two, holds one": ("x.s2p", "# MHz S RI\n1 .1 .2\n2 .1 .2\n3 .1 .2\n", 2, "which is 1 port and not 2"),
    "neither": ("x", "# MHz S RI\n1 .1 .2 .3\n", 2, "4 numbers; one port has 3"),
    "short record": (
        "x.s1p",
        "# MHz S RI\n1 .1 .2\n2 .1\n3 .1 .2\n",
        3,
        "2 numbers where 1 port has 3",
    ),
    "short last record": ("x.s2p", "# MHz S RI\n" + ROW9 + "2 .1 .2 .3 .4\n", 3, "5 numbers where 2 ports have 9"),
    "long record": ("x.s1p", "# MHz S RI\n1 .1 .2\n2 .1 .2 .3 .4\n", 3, "5 numbers where 1 port"),
    "not a number": ("x.s1p", "# MHz S RI\n1 .1 .2\n2 .1 x\n3 .1 .2\n", 3, "'x' is not a number"),
    "NaN": ("x.s1p", "# MHz S RI\n1 .1 .2\n2 .1 nan\n3 .1 .2\n", 3, "'nan' is not a measured value"),
    "decimal comma": ("x.s1p", "# MHz S RI\n1 .1 .2\n2 0,1 .2\n3 .1 .2\n", 3, "'0,1' has a comma"),
    "goes back": ("x.s1p", "# MHz S RI\n2 .1 .2\n3 .1 .2\n1 .1 .2\n", 4, "goes back from 3000000 Hz to 1000000 Hz"),
    "repeated": ("x.s1p", "# MHz S RI\n1 .1 .2\n1 .1 .3\n2 .1 .2\n", 3, "repeats the frequency of line 2"),
    "two-port goes back": ("x.s2p", "# MHz S RI\n2" + ROW9[1:] + "3" + ROW9[1:] + ROW9, 4, "goes back"),
    "noise is none": ("x.s2p", "# MHz S RI\n5" + ROW9[1:] + "6" + ROW9[1:] + "1 2 3 4 5\n2 3 4\n", 5, "not 5 numbers"),
    "open": ("x.s1p", "# MHz S RI\n1 1 0\n2 .1 .2\n", 2, "open"),
    "short": ("x.s1p", "# MHz Z RI\n1 0 0\n2 .1 .2\n", 2, "exactly 0 ohm"),
    "keywords in version 1": ("x.s1p", "# MHz S RI\n[End]\n1 .1 .2\n", 2, "need .Version. 2.0"),
    "encoding": ("x.s1p", b"# MHz S RI\n1 .1 \xb2\n", 2, "byte 0xB2"),
    "UTF-16": ("x.s1p", EX_8.encode("utf-16"), None, "UTF-16"),
    "other version": ("x.ts", "[Version] 3.0\n# MHz S RI\n", 1, "version '3.0' cannot"),
    "cut short": ("x.ts", EX_10.replace("[End]\n", ""), None, r"\[End\]: the keyword is missing"),
    "fewer frequencies": ("x.ts", EX_10.replace("cies] 5", "cies] 6"), None, "6 frequencies are announced and 5"),
    "after the end": ("x.ts", EX_10 + "1 2 3\n", 13, "follows the end"),
    "no number of ports": ("x.ts", EX_10.replace("[Number of Ports] 1\n", ""), None, "Number Of Ports"),
    "no number of frequencies": ("x.ts", EX_10.replace("[Number of Frequencies] 5\n", ""), None, "Of Frequencies"),
    "no option line in 2.0": ("x.ts", EX_10.replace("# MHz Z MA\n", ""), None, "no option line"),
    "four ports": ("x.ts", _version_2(4, "1 2 3"), None, "4 ports are more"),
    "name against file": ("x.s2p", EX_10, None, "the name says 2 ports and the file says 1"),
    "no order": ("x.ts", _version_2(2, ROW9 + "2" + ROW9[1:]), None, "must state it"),
    "strange order": (
        "x.ts",
        _version_2(1, "1 2 3\n2 3 4", "[Two-Port Data Order] 11_22"),
        5,
        "'11_22' is no data order",
    ),
    "strange matrix": ("x.ts", _version_2(1, "1 2 3\n2 3 4", "[Matrix Format] Half"), 5, "'Half' is no matrix"),
    "different references": (
        "x.ts",
        _version_2(2, ROW9 + "2" + ROW9[1:], "[Two-Port Data Order] 21_12\n[Reference] 50 75"),
        None,
        "different references",
    ),
    "too many references": ("x.ts", EX_10.replace("20.0", "20 20"), None, "2 references are given for 1 ports"),
    "bad reference": ("x.ts", EX_10.replace("20.0", "-5"), 5, "-5 is not a resistance above zero"),
    "worded reference": ("x.ts", EX_10.replace("20.0", "fifty"), 5, "'fifty' is not a number"),
    "mixed mode": ("x.ts", _version_2(1, "1 2 3\n2 3 4", "[Mixed-Mode Order] D2,3"), 5, "mixed-mode"),
    "unknown keyword": ("x.ts", _version_2(1, "1 2 3\n2 3 4", "[Colour] red"), 5, r"\[Colour\]: this is no keyword"),
    "ports in words": ("x.ts", EX_10.replace("Ports] 1", "Ports] one"), 3, "'one' is not a whole number"),
    "data before network data": (
        "x.ts",
        EX_10.replace("[Network", "1 2 3\n[Network").replace("[Reference] 20.0\n", ""),
        5,
        "before .Network Data.",
    ),
}


@pytest.mark.parametrize("kind", BAD)
def test_bad_input_gets_a_sentence(kind: str) -> None:
    """Each kind of bad input is told with file, line as far as there is one, what is wrong and what to do."""
    name, text, line, says = BAD[kind]
    told = _mistakes(text, name)
    place = f"{name}: " if line is None else f"{name}:{line}: "
    matching = [sentence for sentence in told if sentence.startswith(place) and re.search(says, sentence)]
    assert len(matching) == 1, told
    assert len(told) <= 2, told


def test_all_mistakes_in_one_go() -> None:
    """Records of wrong width and cells that are no numbers are all told, by line."""
    told = _mistakes("# MHz S RI\n1 .1 .2\n2 .1\n3 x y\n4 nan 0\n3 .1 .2\n", "x.s1p")
    assert [line.split(":")[1] for line in told] == ["3", "4", "4", "5"]


def test_transmission_without_fixture_is_relative() -> None:
    """A two-port log without a fixture is a sweep whose ohms do not count."""
    text = "# MHz S RI R 50\n1 0 0 .1 0 .1 0 0 0\n2 0 0 .9 0 .9 0 0 0\n3 0 0 .1 0 .1 0 0 0\n"
    sweep = read_log(text.encode(), "x.s2p")
    assert not sweep.absolute
    assert np.argmin(np.abs(sweep.z_ohm)) == 1


def test_a_csv_comment_is_no_option_line() -> None:
    """A # line of a CSV log is taken for a Touchstone option line only if nothing in it is strange."""
    csv = b"# MHz range, 50 ohm\nfrequency_hz,resistance_ohm,reactance_ohm\n1,2,3\n2,3,4\n"
    assert read_log(csv, "log").f_hz.tolist() == [1, 2]
