"""Real logs of real parts, any bytes at all, and the way back to text."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from harness.errors import FileMistakes, Mistake
from harness.logs import read_log, write_csv
from harness.logs.columns import NAMES as NAMES_OF_COLUMNS
from harness.logs.mistakes import MOST_LISTED
from harness.records import Sweep

# folder, pattern, how many files, points in each (0: differs): the measured data's own README
SHAPES = [
    ("air_transducer_40khz", "unit_*.csv", 10, 201),
    ("inductors", "*.csv", 2, 201),
    ("disc_35mm_radial", "*.csv", 1, 201),
    ("bar_12mm_length", "*.csv", 1, 301),
    ("crystal_transmission", "*.csv", 4, 6401),
]


@pytest.mark.parametrize(("folder", "pattern", "files", "points"), SHAPES)
def test_every_measured_log_reads(measured: Path, folder: str, pattern: str, files: int, points: int) -> None:
    """Every measured sweep reads, with the number of points it has and finite impedances."""
    paths = sorted((measured / folder).glob(pattern))
    assert len(paths) == files
    for path in paths:
        sweep = read_log(path.read_bytes(), str(path))
        assert sweep.f_hz.shape == sweep.z_ohm.shape == (points,)
        assert np.all(np.isfinite(sweep.z_ohm))
        assert np.all(np.diff(sweep.f_hz) >= 0)
        assert sweep.absolute == (folder != "crystal_transmission")


def test_measured_values_arrive(measured: Path) -> None:
    """The first row of an air transducer's file (2907.063276 Ω, −88.63843724°) is the first impedance."""
    path = measured / "air_transducer_40khz" / "unit_01.csv"
    sweep = read_log(path.read_bytes(), str(path))
    assert sweep.f_hz[0] == 25000.0
    assert sweep.z_ohm[0] == pytest.approx(2907.063276 * np.exp(1j * np.radians(-88.63843724)))


@pytest.mark.parametrize(
    ("file", "peak_hz"),
    [("a100_25c", 6269781), ("b300_45c", 10959730), ("c300_25c", 10003990), ("c300_65c", 10003840)],
)
@pytest.mark.parametrize("fixture", [None, "series"])
def test_crystals_keep_their_published_peaks(measured: Path, file: str, peak_hz: float, fixture: str | None) -> None:
    """Least |Z| and greatest conductance of the relative sweep lie at the published S21 peak, cable phase or not."""
    path = measured / "crystal_transmission" / f"{file}.csv"
    sweep = read_log(path.read_bytes(), str(path), fixture=fixture)
    assert not sweep.absolute
    assert sweep.f_hz[np.argmin(np.abs(sweep.z_ohm))] == peak_hz
    assert sweep.f_hz[np.argmax((1 / sweep.z_ohm).real)] == peak_hz


def test_files_of_parameters_are_no_sweeps(measured: Path) -> None:
    """A table of circuit elements is refused in one sentence, not read as a sweep."""
    for name in ("bvd_parameters.csv", "air_transducer_40khz/reference.csv"):
        with pytest.raises(FileMistakes, match="no frequency_hz") as caught:
            read_log((measured / name).read_bytes(), name)
        assert len(caught.value.mistakes) == 1


NAMES = st.sampled_from(["a.csv", "a.s1p", "a.s2p", "a.ts", "a", "a.txt", "a.s9p"])
FIXTURES = st.sampled_from([None, "series", "shunt"])
WORDS = [*NAMES_OF_COLUMNS, ",", ",", ";", "\t", "\n", "\n", "\r\n", " ", "#", "!", '"', "[", "]", "\ufeff", "²", "µ"]
NUMBERS = ["1", "2", "3e3", "-1", "0", "1,5", "nan", "1e999", "9.91e37", "1e308", "5e-324"]
LINES = [
    "# MHz S RI R 50\n", "# GHz Z MA\n", "# Y DB", "[Version] 2.0\n", "[Number of Ports] 2\n", "[Number of Ports] 1\n",
    "[Network Data]\n", "[End]", "[Reference] 50", "[Two-Port Data Order] 12_21\n", "[Number of Frequencies] 2\n",
]  # fmt: skip
TOKENS = st.sampled_from([*WORDS, *NUMBERS, *LINES])


def _read_or_refuse(data: bytes, name: str, fixture: str | None) -> None:
    refused: tuple[Mistake, ...] = ()
    try:
        sweep = read_log(data, name, fixture=fixture)
    except FileMistakes as error:
        refused = error.mistakes
        assert refused, "refused without a mistake"
    if not refused:
        assert sweep.f_hz.size >= 2
        assert np.all(np.isfinite(sweep.z_ohm))
        assert np.all(sweep.f_hz > 0)
    assert len(refused) <= MOST_LISTED + 1
    for mistake in refused:
        assert mistake.text.endswith(".")
        assert "\n" not in mistake.sentence()


@given(st.binary(max_size=200), NAMES, FIXTURES)
@example(b"\x1c", "a.s1p", None)  # white space to text, not to bytes
@example(b"\x1c", "a.csv", None)
@example(b"frequency_hz,s21_db,s21_deg\n1,1e999,0\n2,1,1\n", "a.csv", None)
@example(b"frequency_hz,s21_db,s21_deg\n1,9e9,0\n2,1,1\n", "a.csv", None)
@example(b"frequency_hz,s21_db,s21_deg\n1,-9e9,0\n2,-9e9,1\n", "a.csv", None)
@example(b"frequency_hz,s21_db,s21_deg\n1,9e9,0\n2,9e9,1\n", "a.csv", "series")
@example(b'frequency_hz,"' + b"x" * 200_000 + b'"\n', "a.csv", None)
@example(b"# MHz S RI\n1" + b"0" * 5000 + b" .1 .2\n", "a.s1p", None)
@example(b"[Version] 2.0\n[Number of Ports] " + b"9" * 5000, "a.ts", None)
@example(b"# MHz S RI\n1e" + b"9" * 5000 + b" .1 .2\n", "a.s1p", None)
def test_any_bytes_are_read_or_refused(data: bytes, name: str, fixture: str | None) -> None:
    """Whatever the bytes, they give a sound sweep or mistakes with a sentence each; never anything else."""
    _read_or_refuse(data, name, fixture)


@given(st.lists(TOKENS, max_size=40).map("".join), NAMES, FIXTURES)
def test_any_broken_log_is_read_or_refused(text: str, name: str, fixture: str | None) -> None:
    """The same for text put together from the pieces of real logs."""
    _read_or_refuse(text.encode(), name, fixture)


@given(st.data(), NAMES, FIXTURES)
def test_any_damaged_log_is_read_or_refused(data: st.DataObject, name: str, fixture: str | None) -> None:
    """The same for a sound log with a stretch of bytes changed or lost."""
    sound = data.draw(
        st.sampled_from(
            [
                b"frequency_hz,resistance_ohm,reactance_ohm\n1000,1,2\n2000,3,4\n3000,5,6\n",
                b"frequency_hz;s21_db;s21_deg\r\n1000;-3;2\r\n2000;-1;4\r\n3000;-5;6\r\n",
                b"# MHz S RI R 50\n1 0 0 .1 0 .1 0 0 0\n2 0 0 .9 0 .9 0 0 0\n3 0 0 .1 0 .1 0 0 0\n1 2 3 4 5\n",
                b"[Version] 2.0\n# MHz Z MA\n[Number of Ports] 1\n[Number of Frequencies] 2\n[Network Data]\n"
                b"1 2 3\n2 3 4\n[End]\n",
            ]
        )
    )
    start = data.draw(st.integers(0, len(sound)))
    length = data.draw(st.integers(0, 12))
    _read_or_refuse(sound[:start] + data.draw(st.binary(max_size=6)) + sound[start + length :], name, fixture)


COUNT = st.shared(st.integers(2, 30), key="points")
FINITE = st.floats(-1e30, 1e30).filter(lambda x: x != 0)


@given(
    COUNT.flatmap(lambda n: hnp.arrays(np.float64, n, elements=st.floats(1e-3, 1e12), unique=True)),
    COUNT.flatmap(lambda n: hnp.arrays(np.float64, n, elements=FINITE)),
    COUNT.flatmap(lambda n: hnp.arrays(np.float64, n, elements=FINITE)),
)
def test_written_sweeps_read_back_bit_for_bit(f_hz: np.ndarray, r_ohm: np.ndarray, x_ohm: np.ndarray) -> None:
    """Write and read: the same frequencies, resistances and reactances, by rising frequency, to the last bit."""
    again = read_log(write_csv(Sweep(f_hz, r_ohm + 1j * x_ohm)).encode(), "again.csv")
    order = np.argsort(f_hz)
    assert again.f_hz.tobytes() == f_hz[order].tobytes()
    assert again.z_ohm.real.tobytes() == r_ohm[order].tobytes()
    assert again.z_ohm.imag.tobytes() == x_ohm[order].tobytes()
    assert again.absolute


def test_a_relative_sweep_stays_relative(measured: Path) -> None:
    """A sweep whose ohms do not count is written as transmission, and reads back as one with the same shape."""
    path = measured / "crystal_transmission" / "c300_25c.csv"
    sweep = read_log(path.read_bytes(), str(path))
    text = write_csv(sweep)
    assert text.startswith("frequency_hz,s21_db,s21_deg\n")
    again = read_log(text.encode(), "again.csv")
    assert not again.absolute
    np.testing.assert_allclose(again.z_ohm, sweep.z_ohm, rtol=1e-9)


def test_written_text_is_as_documented() -> None:
    """The columns and the numbers of a written log."""
    text = write_csv(Sweep(np.array([2e3, 1e3]), np.array([0.1 - 2j, 1 / 3 + 0j])))
    assert text == "frequency_hz,resistance_ohm,reactance_ohm\n1000.0,0.3333333333333333,0.0\n2000.0,0.1,-2.0\n"
