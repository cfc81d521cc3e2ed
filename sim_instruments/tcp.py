"""SCPI over a plain TCP socket: program messages and responses end with a line feed.

SHELL (asyncio).
"""

from __future__ import annotations

import asyncio

from sim_instruments.listener import Streams
from sim_instruments.scpi import MessageBuffer, ScpiError
from sim_instruments.shared import SharedAnalyser

_PIECE = 1 << 16


def scpi_socket(instrument: SharedAnalyser) -> Streams:
    """The client handler for a ``Listener``."""

    async def serve_client(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        buffer = MessageBuffer()
        while piece := await reader.read(_PIECE):
            try:
                messages = buffer.feed(piece)
            except ScpiError as error:
                instrument.analyser.status.report(error.code)
                continue
            for message in messages:
                answer = await instrument.answer(message)
                if answer.drop:
                    writer.transport.abort()
                    return
                writer.write(answer.data)
                await writer.drain()

    return serve_client
