"""SCPI over HiSLIP (IVI-6.1) in synchronized mode: two connections a session, messages with numbers.

SHELL (asyncio). The server's half of: initialization, maximum message size, data with message ids and RMT, interrupted
queries, device clear, status query, trigger, locks, remote/local, and the errors of a client that errs. No overlap
mode, service requests, descriptors or TLS.
"""

from __future__ import annotations

import asyncio
import struct
from collections.abc import Awaitable, Callable
from dataclasses import dataclass, field

from sim_instruments.analyser import Answer
from sim_instruments.hislip_locks import Locks
from sim_instruments.hislip_messages import (
    FIRST_VENDOR_DEFINED,
    HEADER_BYTES,
    VENDOR,
    VERSION,
    Fatal,
    Header,
    NonFatal,
    PoorHeader,
    Type,
    decode,
    encode,
)
from sim_instruments.scpi import MessageBuffer, ScpiError
from sim_instruments.shared import SharedAnalyser

SUB_ADDRESS = b"hislip0"
LARGEST_MESSAGE = 1 << 20
MOST_SESSIONS = 16
_PIECE = 1 << 16
_TRIGGER = b"*TRG"


@dataclass(slots=True, eq=False)
class _Session:
    """One client: its two channels and what is under way."""

    number: int
    sync: asyncio.StreamWriter
    asynchronous: asyncio.StreamWriter | None = None
    largest_to_client: int = LARGEST_MESSAGE
    buffer: MessageBuffer = field(default_factory=MessageBuffer)
    unread: bool = False  # a response was sent, and the client has not said that it has it whole
    clearing: bool = False
    work: asyncio.Task[None] | None = None

    def abort(self) -> None:
        for writer in (self.sync, self.asynchronous):
            if writer is not None:
                writer.transport.abort()


class _Refused(Exception):
    """The connection ends with a FatalError."""

    def __init__(self, code: Fatal, text: str) -> None:
        self.code = code
        super().__init__(text)


class HislipServer:
    """``serve_client`` is the client handler for a ``Listener``; both channels of a session come in there."""

    def __init__(self, instrument: SharedAnalyser) -> None:
        self._instrument = instrument
        self._locks = Locks()
        self._sessions: dict[int, _Session] = {}
        self._last_number = 0
        self._on_sync: dict[int, _Do] = {
            Type.DATA: self._data,
            Type.DATA_END: self._data,
            Type.TRIGGER: self._trigger,
            Type.DEVICE_CLEAR_COMPLETE: self._clear_complete,
        }
        self._on_async: dict[int, _Do] = {
            Type.ASYNC_LOCK: self._lock,
            Type.ASYNC_LOCK_INFO: self._lock_info,
            Type.ASYNC_REMOTE_LOCAL_CONTROL: self._remote_local,
            Type.ASYNC_MAXIMUM_MESSAGE_SIZE: self._maximum_size,
            Type.ASYNC_DEVICE_CLEAR: self._clear,
            Type.ASYNC_STATUS_QUERY: self._status,
        }

    async def serve_client(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        try:
            await self._begin(reader, writer)
        except PoorHeader as trouble:
            await _send(writer, Type.FATAL_ERROR, Fatal.POOR_HEADER, payload=str(trouble).encode())
        except _Refused as refusal:
            await _send(writer, Type.FATAL_ERROR, refusal.code, payload=str(refusal).encode())

    # ── initialization ───────────────────────────────────────────────────────────────────────

    async def _begin(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        first = decode(await reader.readexactly(HEADER_BYTES))
        if first.length > _PIECE:
            raise PoorHeader(f"a sub-address of {first.length} bytes is none")
        payload = await reader.readexactly(first.length)
        if first.type == Type.INITIALIZE:
            await self._synchronous(reader, writer, payload)
        elif first.type == Type.ASYNC_INITIALIZE:
            await self._asynchronous(reader, writer, first.parameter)
        else:
            raise _Refused(Fatal.INVALID_INITIALIZATION, "the first message must be Initialize or AsyncInitialize")

    async def _synchronous(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter, address: bytes) -> None:
        if address not in (b"", SUB_ADDRESS):
            raise _Refused(Fatal.INVALID_INITIALIZATION, f"there is no sub-address {address!r}; use 'hislip0'")
        if len(self._sessions) >= MOST_SESSIONS:
            raise _Refused(Fatal.TOO_MANY_CLIENTS, f"{MOST_SESSIONS} clients are connected already")
        self._last_number = self._last_number % 0xFFFF + 1
        session = self._sessions[self._last_number] = _Session(self._last_number, writer)
        try:
            await _send(writer, Type.INITIALIZE_RESPONSE, 0, VERSION << 16 | session.number)
            await self._attend(session, reader, writer, self._on_sync)
        finally:  # this channel is closed by the listener, after a last word if there is one
            del self._sessions[session.number]
            if session.asynchronous is not None:
                session.asynchronous.transport.abort()
            await self._locks.release(session.number)

    async def _asynchronous(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter, number: int) -> None:
        session = self._sessions.get(number)
        if session is None or session.asynchronous is not None:
            raise _Refused(Fatal.INVALID_INITIALIZATION, f"no session {number} waits for its asynchronous channel")
        session.asynchronous = writer
        try:
            await _send(writer, Type.ASYNC_INITIALIZE_RESPONSE, 0, VENDOR)
            await self._attend(session, reader, writer, self._on_async)
        finally:
            session.sync.transport.abort()

    async def _attend(
        self, session: _Session, reader: asyncio.StreamReader, writer: asyncio.StreamWriter, table: dict[int, _Do]
    ) -> None:
        """Serve one channel until it ends."""
        while True:
            header = decode(await reader.readexactly(HEADER_BYTES))
            if header.length > LARGEST_MESSAGE:
                await _discard(reader, header.length)
                await _send(writer, Type.ERROR, NonFatal.MESSAGE_TOO_LARGE, payload=b"message too large")
                continue
            payload = await reader.readexactly(header.length)
            if header.type == Type.FATAL_ERROR:
                return
            if header.type == Type.ERROR:
                continue
            do = table.get(header.type)
            if do is not None:
                await do(session, header, payload)
            elif header.type >= FIRST_VENDOR_DEFINED:
                await _send(writer, Type.ERROR, NonFatal.UNRECOGNIZED_VENDOR_MESSAGE, payload=b"vendor message unknown")
            else:
                await _send(writer, Type.ERROR, NonFatal.UNRECOGNIZED_TYPE, payload=b"message type unknown here")

    # ── the synchronous channel ──────────────────────────────────────────────────────────────

    async def _data(self, session: _Session, header: Header, payload: bytes) -> None:
        if session.asynchronous is None:
            raise _Refused(Fatal.CHANNELS_NOT_ESTABLISHED, "data came before the asynchronous channel")
        if header.control > 1:
            await _send(session.sync, Type.ERROR, NonFatal.UNRECOGNIZED_CONTROL_CODE, payload=b"RMT is 0 or 1")
            return
        if session.clearing:
            return  # sent before the client's DeviceClearComplete: to be thrown away
        await self._settle_last_response(session, header)
        try:
            messages = session.buffer.feed(payload)
        except ScpiError as error:
            self._instrument.analyser.status.report(error.code)
            return
        if header.type == Type.DATA_END:
            messages += session.buffer.end()
        await self._carry_out(session, messages, header.parameter)

    async def _trigger(self, session: _Session, header: Header, _: bytes) -> None:
        if session.asynchronous is None:
            raise _Refused(Fatal.CHANNELS_NOT_ESTABLISHED, "a trigger came before the asynchronous channel")
        if not session.clearing:
            await self._settle_last_response(session, header)
            await self._carry_out(session, [_TRIGGER], header.parameter)

    async def _settle_last_response(self, session: _Session, header: Header) -> None:
        """A new message while the last response is not known to be read whole interrupts it."""
        if session.unread and not header.control & 1:
            self._instrument.analyser.message_interrupted()
            await _send(session.sync, Type.INTERRUPTED, 0, header.parameter)
            if session.asynchronous is not None:
                await _send(session.asynchronous, Type.ASYNC_INTERRUPTED, 0, header.parameter)
        session.unread = False

    async def _carry_out(self, session: _Session, messages: list[bytes], message_id: int) -> None:
        """Do the work as a task of its own, so that a device clear can end it."""
        work = session.work = asyncio.create_task(self._work(session, messages, message_id))
        try:
            await asyncio.wait([work])
        finally:
            work.cancel()
            session.work = None
        if not work.cancelled():
            work.result()

    async def _work(self, session: _Session, messages: list[bytes], message_id: int) -> None:
        for message in messages:
            await self._locks.may_use(session.number)
            answer = await self._instrument.answer(message)
            if answer.drop:
                session.abort()
                return
            if answer.data:
                await self._respond(session, answer, message_id)

    async def _respond(self, session: _Session, answer: Answer, message_id: int) -> None:
        """The response under its query's message id, in pieces that the client can take."""
        session.unread = True
        step = max(1, session.largest_to_client - HEADER_BYTES)
        pieces = [answer.data[at : at + step] for at in range(0, len(answer.data), step)]
        for piece in pieces[:-1]:
            await _send(session.sync, Type.DATA, 0, message_id, piece)
        await _send(session.sync, Type.DATA_END, 0, message_id, pieces[-1])

    async def _clear_complete(self, session: _Session, _: Header, __: bytes) -> None:
        session.clearing = session.unread = False
        session.buffer = MessageBuffer()
        await _send(session.sync, Type.DEVICE_CLEAR_ACKNOWLEDGE)

    # ── the asynchronous channel ─────────────────────────────────────────────────────────────

    async def _clear(self, session: _Session, _: Header, __: bytes) -> None:
        session.clearing = True
        if session.work is not None:
            session.work.cancel()
        await _answer(session, Type.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE)

    async def _status(self, session: _Session, header: Header, _: bytes) -> None:
        if header.control & 1:
            session.unread = False
        await _answer(session, Type.ASYNC_STATUS_RESPONSE, self._instrument.analyser.status.byte(session.unread))

    async def _maximum_size(self, session: _Session, _: Header, payload: bytes) -> None:
        if len(payload) != 8:
            raise _Refused(Fatal.POOR_HEADER, "AsyncMaximumMessageSize carries eight bytes")
        session.largest_to_client = max(HEADER_BYTES + 1, struct.unpack("!Q", payload)[0])
        await _answer(session, Type.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, payload=struct.pack("!Q", LARGEST_MESSAGE))

    async def _lock(self, session: _Session, header: Header, payload: bytes) -> None:
        if header.control == 1:
            answer = await self._locks.request(session.number, payload, header.parameter / 1000)
        else:
            answer = await self._locks.release(session.number)
        await _answer(session, Type.ASYNC_LOCK_RESPONSE, answer)

    async def _lock_info(self, session: _Session, _: Header, __: bytes) -> None:
        exclusive = self._locks.exclusive is not None
        await _answer(session, Type.ASYNC_LOCK_INFO_RESPONSE, int(exclusive), self._locks.holders)

    async def _remote_local(self, session: _Session, _: Header, __: bytes) -> None:
        await _answer(session, Type.ASYNC_REMOTE_LOCAL_RESPONSE)


_Do = Callable[[_Session, Header, bytes], Awaitable[None]]


async def _answer(session: _Session, type_: Type, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
    assert session.asynchronous is not None  # these messages came over it
    await _send(session.asynchronous, type_, control, parameter, payload)


async def _send(
    writer: asyncio.StreamWriter, type_: Type, control: int = 0, parameter: int = 0, payload: bytes = b""
) -> None:
    writer.write(encode(type_, control, parameter, payload))
    await writer.drain()


async def _discard(reader: asyncio.StreamReader, length: int) -> None:
    while length:
        length -= len(await reader.readexactly(min(length, _PIECE)))
