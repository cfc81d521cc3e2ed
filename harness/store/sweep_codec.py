"""A sweep's numbers to bytes and back, bit for bit.

PURE. The canonical bytes are the frequencies (N little-endian float64), then the impedances (N pairs of little-endian
float64, real and imaginary): 24 bytes a point. The hash is over these, not over the stored blob, so that the packing
may change without changing a hash. A blob is one format byte and what that format makes of them; format 1 is zlib,
level 3.
"""

from __future__ import annotations

import hashlib
import zlib

import numpy as np

from harness.records import Complexes, Floats

CODEC = 1
_POINT = 24
_LEVEL = 3


class BlobError(ValueError):
    """Bytes that are not the sweep they should be; the message is a clause for after "the sweep"."""


def canonical_bytes(f_hz: Floats, z_ohm: Complexes) -> bytes:
    """``f_hz`` (N,) hertz and ``z_ohm`` (N,) ohm as 24·N bytes, NaN payloads and signs of zero kept."""
    return f_hz.astype("<f8", copy=False).tobytes() + z_ohm.astype("<c16", copy=False).tobytes()


def encode(f_hz: Floats, z_ohm: Complexes) -> tuple[str, bytes]:
    """The sweep's SHA-256 (hex) and its blob."""
    raw = canonical_bytes(f_hz, z_ohm)
    return hashlib.sha256(raw).hexdigest(), bytes([CODEC]) + zlib.compress(raw, _LEVEL)


def decode(blob: bytes, points: int, sha256: str) -> tuple[Floats, Complexes]:
    """Frequencies ``(points,)`` and impedances ``(points,)``, checked against the hash. Raises BlobError."""
    if not blob or blob[0] != CODEC:
        raise BlobError(f"has format {blob[0] if blob else 'none'}, which this version cannot read")
    raw = _inflate(blob[1:], points * _POINT)
    if hashlib.sha256(raw).hexdigest() != sha256:
        raise BlobError("does not match its hash")
    split = points * 8
    f_hz = np.frombuffer(raw[:split], dtype="<f8").astype(np.float64)
    z_ohm = np.frombuffer(raw[split:], dtype="<c16").astype(np.complex128)
    return f_hz, z_ohm


def _inflate(packed: bytes, size: int) -> bytes:
    """Unpack to exactly ``size`` bytes, never holding more than one byte beyond."""
    unpacker = zlib.decompressobj()
    try:
        raw = unpacker.decompress(packed, size + 1)
    except zlib.error as exc:
        raise BlobError("cannot be unpacked") from exc
    if len(raw) != size or not unpacker.eof or unpacker.unused_data:
        raise BlobError(f"does not unpack to the {size // _POINT} points it should have")
    return raw
