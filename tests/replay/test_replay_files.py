"""Sweeps from files judged again. All values are invented."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from harness.analysis import analyse
from harness.errors import FileMistakes
from harness.judging.limit_file import parse_limits
from harness.logs.writing import write_csv
from harness.records import Conditions, LimitSet, Sweep, Verdict
from harness.replay import read_file, replay_file
from harness.station import find_limits

C0_F, C1_F, C_LOW_HZ = 1.55e-9, 0.32e-9, 1e3


@pytest.fixture(scope="module")
def limits() -> LimitSet:
    """The mist disc's limits without the low-frequency capacitance, which a log of a sweep does not hold."""
    text = find_limits("mist-discs/MD-1650.toml").read_text(encoding="utf-8")
    head, _, rest = text.partition('[[require]]\ncharacteristic = "c_at"')
    return parse_limits(head + rest[rest.index("[[require]]") :], "MD-1650.toml")


@pytest.fixture
def sweep_of(rng: np.random.Generator) -> Callable[[float], Sweep]:
    """A disc's sweep, dense about its resonance, with noise, in no order."""

    def made(fs_hz: float) -> Sweep:
        f = np.concatenate([np.linspace(1.5e6, 1.9e6, 200), np.linspace(0.98, 1.02, 201) * fs_hz])
        q, g = 200.0, 2 * np.pi * fs_hz * C1_F * 200.0
        z = 1 / (2j * np.pi * f * C0_F + g / (1 + 1j * q * (f / fs_hz - fs_hz / f)))
        noise = rng.standard_normal((2, f.size))
        z = z + 1e-3 * abs(z) * (noise[0] + 1j * noise[1])
        order = rng.permutation(f.size)
        return Sweep(f[order], z[order])

    return made


@pytest.mark.parametrize(
    ("fs_hz", "verdict"), [(1.650e6, Verdict.PASS), (1.680e6, Verdict.FAIL), (1.661995e6, Verdict.FAIL)]
)
def test_written_log_is_judged(
    tmp_path: Path, limits: LimitSet, sweep_of: Callable[[float], Sweep], fs_hz: float, verdict: Verdict
) -> None:
    """A sweep written as CSV and judged from the file: the verdict of its truth, and the stem of the file as serial."""
    path = tmp_path / "MD-0042.csv"
    path.write_text(write_csv(sweep_of(fs_hz)), encoding="utf-8")
    one = replay_file(path, limits, None)
    assert one.judgement.verdict is verdict
    assert (one.serial, one.source, one.original, one.trouble) == ("MD-0042", str(path), None, None)
    assert one.fit is not None
    fs = one.fit.values["fs"]
    assert fs.value is not None
    assert fs.u is not None
    assert abs(fs.value - fs_hz) < 4 * fs.u


def test_file_is_judged_as_its_sweep_is(tmp_path: Path, limits: LimitSet, sweep_of: Callable[[float], Sweep]) -> None:
    """The log loses no bit: judged from the file and judged from memory, in rising frequency, are the same."""
    sweep = sweep_of(1.65e6)
    path = tmp_path / "MD-0042.csv"
    path.write_text(write_csv(sweep), encoding="utf-8")
    order = np.argsort(sweep.f_hz, kind="stable")
    fit, judgement = analyse(Sweep(sweep.f_hz[order], sweep.z_ohm[order], Conditions()), limits)
    one = replay_file(path, limits, None)
    assert repr(one.judgement) == repr(judgement)
    assert repr(one.fit) == repr(fit)


def test_file_twice_is_the_same_twice(tmp_path: Path, limits: LimitSet, sweep_of: Callable[[float], Sweep]) -> None:
    """The same file, judged again after another one: the same bits."""
    paths = [tmp_path / "MD-0001.csv", tmp_path / "MD-0002.csv"]
    for path, fs_hz in zip(paths, (1.65e6, 1.68e6), strict=True):
        path.write_text(write_csv(sweep_of(fs_hz)), encoding="utf-8")
    there = [repr(replay_file(path, limits, None)) for path in paths]
    back = [repr(replay_file(path, limits, None)) for path in reversed(paths)]
    assert there == back[::-1]


@pytest.mark.parametrize(
    ("content", "line"),
    [
        (b"", None),
        (b"frequency_hz,resistance_ohm\n1,2\n", None),
        (b"frequency_hz,resistance_ohm,reactance_ohm\n1e6,1\n", 2),
        (b"frequency_hz,resistance_ohm,reactance_ohm\n1e6,1,2\n1.1e6,x,2\n", 3),
        (b"\xff\xfe\x00", None),
    ],
)
def test_file_that_cannot_be_read_is_no_verdict(
    tmp_path: Path, limits: LimitSet, content: bytes, line: int | None
) -> None:
    """No verdict with the code bad-data, its mistakes beside it, and no exception: the other files go on."""
    path = tmp_path / "MD-0042.csv"
    path.write_bytes(content)
    one = replay_file(path, limits, None)
    assert one.judgement.verdict is Verdict.NONE
    (reason,) = one.judgement.reasons
    assert reason.code == "bad-data"
    assert str(path) in reason.text
    assert one.fit is None
    assert one.trouble is not None
    assert one.trouble.exit_code == 2
    assert line is None or line in [mistake.line for mistake in one.trouble.mistakes]


@pytest.mark.parametrize("name", ["nowhere.csv", "."])
def test_file_that_is_not_there(tmp_path: Path, limits: LimitSet, name: str) -> None:
    """A file that is missing, or a folder: FileMistakes with the system's words; judged, a no verdict."""
    path = tmp_path / name
    with pytest.raises(FileMistakes, match="the file cannot be read") as caught:
        read_file(path, None)
    assert caught.value.exit_code == 2
    assert replay_file(path, limits, None).judgement.verdict is Verdict.NONE


def test_transmission_needs_to_know_how_the_part_was_connected(
    tmp_path: Path, limits: LimitSet, sweep_of: Callable[[float], Sweep]
) -> None:
    """The fixture reaches the reader: with it the log is judged, without it this one is no verdict."""
    sweep = sweep_of(1.65e6)
    path = tmp_path / "MD-0042.csv"
    path.write_text(write_csv(Sweep(sweep.f_hz, sweep.z_ohm, absolute=False)), encoding="utf-8")
    assert replay_file(path, limits, None).judgement.verdict is Verdict.NONE
    assert replay_file(path, limits, "series").judgement.verdict is Verdict.PASS
