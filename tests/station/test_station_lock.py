"""One process owns a station: tried with real processes."""

from __future__ import annotations

import errno
import fcntl
import json
import os
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from harness.errors import StationError
from harness.station.lock import StationLock

NOW = "2026-03-02T08:00:00.000000Z"
HOLD = """\
import sys
from pathlib import Path
from harness.errors import RingtrueError
from harness.station.lock import StationLock
try:
    lock = StationLock(Path(sys.argv[1]), "ringtrue screen L-7", "2026-03-02T07:59:00.000000Z")
except RingtrueError as error:
    print(error, flush=True)
    sys.exit(error.exit_code)
print("held", flush=True)
sys.stdin.readline()
"""

Hold = Callable[[Path], subprocess.Popen[str]]


@pytest.fixture
def station(tmp_path: Path) -> Path:
    path = tmp_path / "station.toml"
    path.write_text("format = 1\n", encoding="utf-8")
    return path


@pytest.fixture
def hold() -> Iterator[Hold]:
    """Start a process that takes a station's lock and keeps it until its input ends."""
    running: list[subprocess.Popen[str]] = []

    def started(path: Path) -> subprocess.Popen[str]:
        process = subprocess.Popen(
            [sys.executable, "-c", HOLD, str(path)], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
        )
        running.append(process)
        return process

    yield started
    for process in running:
        process.kill()
        process.communicate(timeout=10)


def said(process: subprocess.Popen[str]) -> str:
    assert process.stdout is not None
    return process.stdout.readline().strip()


def test_second_process_exits_3_and_names_the_owner(station: Path, hold: Hold) -> None:
    """Command, process, host and time of the owner; the remedy; exit code 3."""
    first = hold(station)
    assert said(first) == "held"
    second = hold(station)
    sentence = said(second)
    assert sentence.startswith(f"{station}: this station is in use by 'ringtrue screen L-7' (process {first.pid} on ")
    assert "since 2026-03-02T07:59:00.000000Z" in sentence
    assert sentence.endswith("End that one first, or use another station.")
    assert second.wait(10) == 3


def test_kill_9_frees_the_lock(station: Path, hold: Hold) -> None:
    """The kernel frees the lock of a killed owner; the note it leaves behind stops nobody."""
    first = hold(station)
    assert said(first) == "held"
    first.send_signal(signal.SIGKILL)
    first.wait(10)
    assert json.loads((station.parent / "station.toml.lock").read_text())["pid"] == first.pid
    lock = StationLock(station, "test", NOW)
    assert json.loads((station.parent / "station.toml.lock").read_text())["pid"] == os.getpid()
    lock.release()


def test_release_frees_the_lock_and_may_be_called_twice(station: Path, hold: Hold) -> None:
    """After ``release`` another process takes the station; the second call closes nothing that is not ours."""
    lock = StationLock(station, "test", NOW)
    lock.release()
    with open(os.devnull) as other:  # takes the number of the descriptor just closed
        lock.release()
        assert os.fstat(other.fileno())
    assert said(hold(station)) == "held"


def test_same_process_cannot_own_a_station_twice(station: Path) -> None:
    """Also within one process, and by another name for the same file."""
    lock = StationLock(station, "ringtrue page", NOW)
    link = station.parent / "link.toml"
    link.symlink_to(station)
    with pytest.raises(StationError, match="in use by 'ringtrue page'"):
        StationLock(link, "test", NOW)
    lock.release()


def test_two_stations_beside_each_other(station: Path) -> None:
    """A lock is a station file's own."""
    other = station.with_name("other.toml")
    locks = [StationLock(station, "test", NOW), StationLock(other, "test", NOW)]
    for lock in locks:
        lock.release()


def test_lock_is_not_inherited(station: Path, hold: Hold) -> None:
    """A child started while the lock is held does not keep it alive."""
    lock = StationLock(station, "test", NOW)
    child = subprocess.Popen([sys.executable, "-c", "input()"], stdin=subprocess.PIPE, close_fds=False)
    lock.release()
    assert said(hold(station)) == "held"
    child.communicate(timeout=10)


# ── folders that cannot be written: root may write anywhere, so the refusal is simulated ─────


@pytest.fixture
def unwritable(station: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The folder of ``station`` takes no new file, and its files are only read."""
    real = os.open

    def refusing(path: Path, flags: int, *rest: int) -> int:
        if Path(path).parent == station.parent and flags & os.O_ACCMODE != os.O_RDONLY:
            raise PermissionError(errno.EACCES, "Permission denied", str(path))
        return real(path, flags, *rest)

    monkeypatch.setattr(os, "open", refusing)
    return station


def test_unwritable_folder_locks_the_station_file_itself(unwritable: Path) -> None:
    """No lock file can be made: every user meets the lock on the station file, which is left as it is."""
    before = unwritable.read_bytes()
    lock = StationLock(unwritable, "test", NOW)
    with pytest.raises(StationError, match=r"in use by another process\. End that one first"):
        StationLock(unwritable, "test", NOW)
    lock.release()
    StationLock(unwritable, "test", NOW).release()
    assert unwritable.read_bytes() == before
    assert list(unwritable.parent.iterdir()) == [unwritable]


def test_another_users_lock_file_is_respected(unwritable: Path, hold: Hold) -> None:
    """Held by a user who may write: one who may only read is refused all the same, and learns the owner."""
    first = hold(unwritable)
    assert said(first) == "held"
    with pytest.raises(StationError, match=f"'ringtrue screen L-7' .process {first.pid} on "):
        StationLock(unwritable, "test", NOW)
    first.communicate("\n", timeout=10)
    lock = StationLock(unwritable, "test", NOW)
    second = hold(unwritable)  # may write, and meets the lock of the one who may not
    assert "in use by" in said(second)
    lock.release()


def test_nothing_to_lock_is_a_station_error(tmp_path: Path) -> None:
    """A folder that is not there: one sentence with place and remedy."""
    with pytest.raises(StationError, match=r"the station cannot be locked \(No such file or directory\)") as caught:
        StationLock(tmp_path / "gone" / "station.toml", "test", NOW)
    assert caught.value.exit_code == 3
    assert caught.value.remedy


def test_disk_that_knows_no_locks_is_told_apart_from_a_station_in_use(
    station: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A file system without locks: said so, and no owner is made up."""

    def refuse(handle: int, how: int) -> None:
        raise OSError(errno.ENOLCK, "No locks available")

    monkeypatch.setattr(fcntl, "flock", refuse)
    with pytest.raises(StationError, match=r"cannot be locked \(No locks available\)"):
        StationLock(station, "test", NOW)


def test_full_disk_costs_the_note_and_not_the_lock(station: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The owner's note does not fit on the disk: the station is locked all the same."""

    def full(handle: int, data: bytes, at: int) -> int:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(os, "pwrite", full)
    lock = StationLock(station, "test", NOW)
    with pytest.raises(StationError, match="in use by another process"):
        StationLock(station, "test", NOW)
    lock.release()
