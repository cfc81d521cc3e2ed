"""A listening TCP port on the loopback, and the tasks of whoever connects.

SHELL (asyncio). ``close`` leaves neither port nor task behind.
"""

from __future__ import annotations

import asyncio
import socket
from collections.abc import Awaitable, Callable

Streams = Callable[[asyncio.StreamReader, asyncio.StreamWriter], Awaitable[None]]


class Listener:
    """``serve_client`` runs once a connection; the connection closes when it returns."""

    def __init__(self, serve_client: Streams) -> None:
        self._serve_client = serve_client
        self._tasks: set[asyncio.Task[None]] = set()
        self._server: asyncio.Server | None = None

    async def open(self) -> int:
        """Listen on a free port of 127.0.0.1; the port."""
        self._server = await asyncio.start_server(self._accepted, "127.0.0.1", 0)
        port: int = self._server.sockets[0].getsockname()[1]
        return port

    async def close(self) -> None:
        if self._server is not None:
            self._server.close()
            await self._server.wait_closed()
        for task in self._tasks:
            task.cancel()
        await asyncio.gather(*self._tasks, return_exceptions=True)

    def _accepted(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        task = asyncio.create_task(self._attend(reader, writer))
        self._tasks.add(task)
        task.add_done_callback(self._tasks.discard)

    async def _attend(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        writer.get_extra_info("socket").setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        try:
            await self._serve_client(reader, writer)
        except (ConnectionError, asyncio.IncompleteReadError):
            return  # the client went away: that is its right at any moment
        finally:
            writer.close()
