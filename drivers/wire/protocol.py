"""What every wire can do. TYPES.

Timeouts are seconds for the whole call, however the bytes dribble in. After NoAnswer or ConnectionLost a wire to
a meter is given up: every further call raises OutOfStep, so that a late answer cannot be taken for a fresh one.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol

WireLog = Callable[[str, bytes], None]
"""Called with SENT or RECEIVED and the bytes, as they pass."""

SENT = ">"
RECEIVED = "<"


class Wire(Protocol):
    """A connection that moves bytes. ``resource`` names it in errors."""

    @property
    def resource(self) -> str: ...

    def write(self, data: bytes) -> None:
        """Send all of ``data``. Raises OutOfStep when an earlier answer was not read to its end."""
        ...

    def read_line(self, timeout_s: float) -> bytes:
        """The bytes up to the next line end, without it; NoAnswer when the line end is missing."""
        ...

    def read_exactly(self, count: int, timeout_s: float) -> bytes:
        """Just ``count`` bytes."""
        ...

    def clear(self) -> None:
        """Drop what has come and was not read; on buses that have it, a device clear."""
        ...

    def close(self) -> None:
        """Close; closing again does nothing."""
        ...


def keep_no_log(direction: str, data: bytes) -> None:
    """The log of a wire that is not listened to."""
