"""HiSLIP messages (IVI-6.1, protocol version 1.0): 16 bytes of header, then the payload. PURE."""

from __future__ import annotations

import struct
from dataclasses import dataclass
from enum import IntEnum

HEADER_BYTES = 16
_HEADER = struct.Struct("!2sBBIQ")  # "HS", type, control code, parameter, payload length

VERSION = 0x0100
VENDOR = int.from_bytes(b"HM", "big")
FIRST_VENDOR_DEFINED = 128


class Type(IntEnum):
    """Message types."""

    INITIALIZE = 0
    INITIALIZE_RESPONSE = 1
    FATAL_ERROR = 2
    ERROR = 3
    ASYNC_LOCK = 4
    ASYNC_LOCK_RESPONSE = 5
    DATA = 6
    DATA_END = 7
    DEVICE_CLEAR_COMPLETE = 8
    DEVICE_CLEAR_ACKNOWLEDGE = 9
    ASYNC_REMOTE_LOCAL_CONTROL = 10
    ASYNC_REMOTE_LOCAL_RESPONSE = 11
    TRIGGER = 12
    INTERRUPTED = 13
    ASYNC_INTERRUPTED = 14
    ASYNC_MAXIMUM_MESSAGE_SIZE = 15
    ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE = 16
    ASYNC_INITIALIZE = 17
    ASYNC_INITIALIZE_RESPONSE = 18
    ASYNC_DEVICE_CLEAR = 19
    ASYNC_SERVICE_REQUEST = 20
    ASYNC_STATUS_QUERY = 21
    ASYNC_STATUS_RESPONSE = 22
    ASYNC_DEVICE_CLEAR_ACKNOWLEDGE = 23
    ASYNC_LOCK_INFO = 24
    ASYNC_LOCK_INFO_RESPONSE = 25


class Fatal(IntEnum):
    """Control codes of FatalError: the connection is closed after it."""

    UNIDENTIFIED = 0
    POOR_HEADER = 1
    CHANNELS_NOT_ESTABLISHED = 2
    INVALID_INITIALIZATION = 3
    TOO_MANY_CLIENTS = 4


class NonFatal(IntEnum):
    """Control codes of Error: the message is ignored."""

    UNIDENTIFIED = 0
    UNRECOGNIZED_TYPE = 1
    UNRECOGNIZED_CONTROL_CODE = 2
    UNRECOGNIZED_VENDOR_MESSAGE = 3
    MESSAGE_TOO_LARGE = 4


class PoorHeader(ValueError):
    """Sixteen bytes that are no HiSLIP header."""


@dataclass(frozen=True, slots=True)
class Header:
    """``type`` stays a number: a client may send one that nobody knows."""

    type: int
    control: int
    parameter: int
    length: int


def encode(type_: Type, control: int = 0, parameter: int = 0, payload: bytes = b"") -> bytes:
    """One whole message.

    >>> encode(Type.DATA_END, 0, 0xFFFFFF00, b"1").hex(" ")
    '48 53 07 00 ff ff ff 00 00 00 00 00 00 00 00 01 31'
    """
    return _HEADER.pack(b"HS", type_, control, parameter, len(payload)) + payload


def decode(header: bytes) -> Header:
    """The header of a message; raises PoorHeader when its prologue is not "HS"."""
    prologue, type_, control, parameter, length = _HEADER.unpack(header)
    if prologue != b"HS":
        raise PoorHeader(f"a message must begin with 'HS', not {prologue!r}")
    return Header(type_, control, parameter, length)
