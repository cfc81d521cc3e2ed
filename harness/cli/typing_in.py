"""Lines typed at the station, in a way that Ctrl-C can end."""

from __future__ import annotations

import io
import os
import selectors
import sys
from collections.abc import Callable
from typing import TextIO

_TURN_S = 0.2  # how soon a stop is noticed while nobody types


class TypedLines:
    """The next line of ``stream`` with its end, or "" at its end or once ``stopping`` says so.

    A plain ``readline`` is taken up again by Python after a signal, so a first Ctrl-C would wait for the next line.
    ``prompt`` stands before each line where a person types.
    """

    def __init__(self, stream: TextIO, stopping: Callable[[], bool], prompt: str) -> None:
        self._stream, self._stopping = stream, stopping
        self._prompt = prompt if stream.isatty() else ""
        self._held = b""
        self._ended = False

    def __call__(self) -> str:
        if self._prompt:
            print(self._prompt, end="", file=sys.stderr, flush=True)
        try:
            number = self._stream.fileno()
        except io.UnsupportedOperation:  # a stream without a file beneath it cannot be waited for
            return self._stream.readline()
        while b"\n" not in self._held and not self._ended:
            if not self._wait(number):
                return ""
            piece = os.read(number, 65536)
            self._ended = not piece
            self._held += piece
        line, end, self._held = self._held.partition(b"\n")
        if self._prompt and not end:
            print(file=sys.stderr)  # Ctrl-D left the cursor behind the prompt
        return (line + end).decode("utf-8", "replace")

    def _wait(self, number: int) -> bool:
        """Until there is something to read (True) or the lot is to stop (False)."""
        with selectors.SelectSelector() as selector:  # select also takes regular files, which epoll refuses
            selector.register(number, selectors.EVENT_READ)
            while not self._stopping():
                if selector.select(_TURN_S):
                    return True
        return False
