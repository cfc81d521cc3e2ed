"""A serial line on a pseudo-terminal.

SHELL (asyncio). Both ends are raw; the far end stays open here, so that the line outlives a station that closes it.
"""

from __future__ import annotations

import asyncio
import os
import pty
import tty
from collections.abc import Callable

_PIECE = 4096
_LONGEST_LINE = 4096


class PtyLine:
    """``path`` is what the station opens; ``on_line`` gets each line it sends, without its end."""

    def __init__(self, on_line: Callable[[bytes], None]) -> None:
        self._on_line = on_line
        self._held = bytearray()
        self._near, self._far = pty.openpty()
        tty.setraw(self._near)
        tty.setraw(self._far)
        os.set_blocking(self._near, False)
        self.path = os.ttyname(self._far)
        asyncio.get_running_loop().add_reader(self._near, self._readable)

    def write(self, data: bytes) -> None:
        """Send; what a full line does not take is lost, as on a wire without flow control."""
        try:
            os.write(self._near, data)
        except BlockingIOError:
            return

    def close(self) -> None:
        asyncio.get_running_loop().remove_reader(self._near)
        os.close(self._near)
        os.close(self._far)

    def _readable(self) -> None:
        self._held += os.read(self._near, _PIECE)
        *lines, rest = bytes(self._held).split(b"\n")
        self._held = bytearray(rest[:_LONGEST_LINE])
        for line in lines:
            self._on_line(line.removesuffix(b"\r"))
