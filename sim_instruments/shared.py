"""One instrument behind several connections: one message at a time, and the time it takes.

SHELL (asyncio): the only place where simulated time becomes real time.
"""

from __future__ import annotations

import asyncio

from sim_instruments.analyser import Analyser, Answer


class SharedAnalyser:
    """Whoever calls ``answer`` first is served first; the others wait until the sweep is over."""

    def __init__(self, analyser: Analyser) -> None:
        self.analyser = analyser
        self._turn = asyncio.Lock()

    async def answer(self, message: bytes) -> Answer:
        """Carry out one message, busy as long as the instrument is; a late answer lingers without keeping others."""
        async with self._turn:
            answer = self.analyser.answer(message)
            if answer.busy_s:
                await asyncio.sleep(answer.busy_s)
        if answer.late_s:
            await asyncio.sleep(answer.late_s)
        return answer
