"""One process owns a station: a lock that the kernel frees when its holder ends, however it ends."""

from __future__ import annotations

import contextlib
import fcntl
import hashlib
import json
import os
import socket
from pathlib import Path

import platformdirs

from harness.errors import StationError


class StationLock:
    """Holds the lock of the station whose file is ``station_file`` until ``release``.

    The lock file lies beside the station file, or in the user's run folder where that one cannot be written.
    Raises StationError naming the owner when another process has it.
    """

    def __init__(self, station_file: Path, command: str, now: str) -> None:
        self._handle = _open(station_file)
        try:
            fcntl.flock(self._handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as exc:
            owner = _owner(self._handle)
            os.close(self._handle)
            raise StationError(
                f"this station is in use by {owner}.",
                place=str(station_file),
                remedy="End that one first, or use another station.",
            ) from exc
        note = {"command": command, "pid": os.getpid(), "host": socket.gethostname(), "since": now}
        os.ftruncate(self._handle, 0)
        os.pwrite(self._handle, json.dumps(note).encode(), 0)

    def release(self) -> None:
        with contextlib.suppress(OSError):  # closed already
            os.ftruncate(self._handle, 0)
            os.close(self._handle)


def _open(station_file: Path) -> int:
    """A file descriptor of the lock file, created where needed; never inherited by a child."""
    real = station_file.resolve()
    flags = os.O_RDWR | os.O_CREAT | os.O_CLOEXEC
    try:
        return os.open(real.with_name(real.name + ".lock"), flags, 0o666)
    except OSError:
        folder = platformdirs.user_runtime_path("ringtrue", ensure_exists=True)
        digest = hashlib.sha256(str(real).encode()).hexdigest()[:16]
        try:
            return os.open(folder / f"{digest}.lock", flags, 0o600)
        except OSError as exc:
            raise StationError(
                f"the station's lock file cannot be made ({exc.strerror}).",
                place=str(folder),
                remedy="Make the folder of the station file writable.",
            ) from exc


def _owner(handle: int) -> str:
    try:
        note = json.loads(os.pread(handle, 4096, 0))
        return f"'{note['command']}' (process {note['pid']} on {note['host']}, since {note['since']})"
    except (ValueError, KeyError, TypeError):
        return "another process that has just started"
