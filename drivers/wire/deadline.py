"""A deadline on the monotonic clock: how much of a timeout is left."""

from __future__ import annotations

import time


class Deadline:
    """Starts when made; ``left_s`` never falls below zero."""

    def __init__(self, timeout_s: float) -> None:
        self.timeout_s = timeout_s
        self._end = time.monotonic() + timeout_s

    @property
    def left_s(self) -> float:
        return max(0.0, self._end - time.monotonic())

    @property
    def passed(self) -> bool:
        return time.monotonic() >= self._end
