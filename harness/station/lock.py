"""One process owns a station: a lock that the kernel frees when its holder ends, however it ends."""

from __future__ import annotations

import contextlib
import fcntl
import json
import os
import socket
from pathlib import Path

from harness.errors import StationError

_REMEDY = "End that one first, or use another station."
_NO_NAME = "another process"


class StationLock:
    """Holds the lock of the station whose file is ``station_file`` until ``release``.

    The lock file lies beside the station file. Where none can be made there, the station file itself is locked, so
    that every user of the machine meets the same lock; the owner then cannot leave its name. Raises StationError when
    another process has it.
    """

    def __init__(self, station_file: Path, command: str, now: str) -> None:
        self._handle = _open(station_file.resolve())
        try:
            fcntl.flock(self._handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as exc:
            owner = _owner(self._handle)
            os.close(self._handle)
            place = str(station_file)
            if isinstance(exc, BlockingIOError):
                raise StationError(f"this station is in use by {owner}.", place=place, remedy=_REMEDY) from exc
            raise _unlockable(exc, station_file) from exc
        note = {"command": command, "pid": os.getpid(), "host": socket.gethostname(), "since": now}
        _write_note(self._handle, json.dumps(note).encode())

    def release(self) -> None:
        """Give the lock back; a second time does nothing."""
        handle, self._handle = self._handle, -1
        if handle >= 0:
            _write_note(handle, b"")
            os.close(handle)


def _open(station_file: Path) -> int:
    """A file descriptor to lock, never inherited by a child: the lock file, made where needed, or the station file."""
    lock_file = station_file.with_name(station_file.name + ".lock")
    tries = (
        (lock_file, os.O_RDWR | os.O_CREAT),
        (lock_file, os.O_RDONLY),  # another user's
        (station_file, os.O_RDONLY),
    )
    trouble: OSError | None = None
    for path, flags in tries:
        try:
            return os.open(path, flags | os.O_CLOEXEC, 0o666)
        except OSError as exc:
            trouble = trouble or exc
    assert trouble is not None
    raise _unlockable(trouble, lock_file) from trouble


def _unlockable(exc: OSError, place: Path) -> StationError:
    return StationError(
        f"the station cannot be locked ({exc.strerror}).",
        place=str(place),
        remedy="Make the folder of the station file writable, on a disk of this machine.",
    )


def _write_note(handle: int, note: bytes) -> None:
    """Say who holds the lock, to those who meet it. The lock holds without: in another's file, on a full disk."""
    if fcntl.fcntl(handle, fcntl.F_GETFL) & os.O_ACCMODE != os.O_RDWR:
        return
    with contextlib.suppress(OSError):
        os.ftruncate(handle, 0)
        os.pwrite(handle, note, 0)


def _owner(handle: int) -> str:
    """The owner by its note. What else stands in the file (a station file, a note half written) is no note."""
    try:
        note = json.loads(os.pread(handle, 4096, 0))
        return f"'{note['command']}' (process {note['pid']} on {note['host']}, since {note['since']})"
    except (ValueError, KeyError, TypeError):
        return _NO_NAME
