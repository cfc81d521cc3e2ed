"""Who may use the instrument: HiSLIP's exclusive and shared locks.

SHELL (asyncio). Minimal: exclusive or shared by a key, with a time to wait; a session holds one kind at a time.
"""

from __future__ import annotations

import asyncio
from dataclasses import dataclass, field
from enum import IntEnum


class LockAnswer(IntEnum):
    """Control codes of AsyncLockResponse."""

    FAILED = 0
    EXCLUSIVE = 1
    SHARED = 2
    INVALID = 3


@dataclass(slots=True)
class Locks:
    """Holders by session number."""

    exclusive: int | None = None
    shared: set[int] = field(default_factory=set)
    key: bytes = b""
    _changed: asyncio.Condition = field(default_factory=asyncio.Condition)

    @property
    def holders(self) -> int:
        return len(self.shared | ({self.exclusive} if self.exclusive is not None else set()))

    async def request(self, session: int, key: bytes, wait_s: float) -> LockAnswer:
        """Lock for ``session``: shared by those with the same ``key``, exclusive when it is empty."""
        if session == self.exclusive or session in self.shared:
            return LockAnswer.INVALID
        try:
            async with asyncio.timeout(wait_s), self._changed:
                await self._changed.wait_for(lambda: self._is_free(key))
                self._take(session, key)
        except TimeoutError:
            return LockAnswer.FAILED
        return LockAnswer.EXCLUSIVE  # "success" for either kind; SHARED answers a release

    async def release(self, session: int) -> LockAnswer:
        """Give up what ``session`` holds; INVALID when that is nothing."""
        async with self._changed:
            self._changed.notify_all()
            if session == self.exclusive:
                self.exclusive = None
                return LockAnswer.EXCLUSIVE
            if session in self.shared:
                self.shared.remove(session)
                return LockAnswer.SHARED
        return LockAnswer.INVALID

    async def may_use(self, session: int) -> None:
        """Wait until nobody else's lock stands in the way."""
        async with self._changed:
            await self._changed.wait_for(lambda: self._is_open_to(session))

    def _is_free(self, key: bytes) -> bool:
        return self.exclusive is None and (not self.shared or (bool(key) and key == self.key))

    def _take(self, session: int, key: bytes) -> None:
        if key:
            self.shared.add(session)
            self.key = key
        else:
            self.exclusive = session

    def _is_open_to(self, session: int) -> bool:
        if self.exclusive is not None:
            return session == self.exclusive
        return not self.shared or session in self.shared
