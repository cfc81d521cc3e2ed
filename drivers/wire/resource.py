"""Resource strings, read without opening anything: which wire, which host, which port.

The forms are those of VISA (VPP-4.3 §4.3.1); ``hislipN,port`` and ``host,port`` carry a port of their own.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from drivers.errors import ResourceError

HISLIP_PORT = 4880  # IVI-6.1 §3.1

FORMS = (
    "TCPIP::host::port::SOCKET",
    "TCPIP::host::hislip0::INSTR",
    "TCPIP::host::hislip0,port::INSTR",
    "TCPIP::host::inst0::INSTR",
    "USB::maker id::model id::serial::INSTR",
    "GPIB::address::INSTR",
)

_PATTERNS = tuple(
    (kind, re.compile(pattern, re.IGNORECASE))
    for kind, pattern in (
        ("socket", r"TCPIP\d*::(?P<host>[^:\s,]+|\[[^\]\s]+\])::(?P<port>\d{1,5})::SOCKET"),
        ("hislip", r"TCPIP\d*::(?P<host>[^:\s,]+)::hislip\d+(,(?P<port>\d{1,5}))?(::INSTR)?"),
        ("visa", r"TCPIP\d*::(?P<host>[^:\s,]+)(,(?P<port>\d{1,5}))?(::(inst\d+|gpib\d+(,\d+)*))?(::INSTR)?"),
        ("visa", r"USB\d*(::[^:\s]+){3,4}(::INSTR)?"),
        ("visa", r"GPIB\d*(::\d{1,2}){1,2}(::INSTR)?"),
    )
)


@dataclass(frozen=True, slots=True)
class Resource:
    """A resource string in parts. ``kind``: "socket", "hislip" or "visa"; host and port where the kind has them."""

    text: str
    kind: str
    host: str = ""
    port: int | None = None


def parse_resource(text: str) -> Resource:
    """The parts of a resource string. Raises ResourceError naming the forms that would do.

    >>> parse_resource("TCPIP::127.0.0.1::5025::SOCKET")
    Resource(text='TCPIP::127.0.0.1::5025::SOCKET', kind='socket', host='127.0.0.1', port=5025)
    """
    stripped = text.strip()
    for kind, pattern in _PATTERNS:
        found = pattern.fullmatch(stripped)
        if found is None:
            continue
        parts = found.groupdict()
        port = None if parts.get("port") is None else int(parts["port"])
        if port is not None and not 1 <= port <= 65535:
            raise ResourceError(f"port {port} is not between 1 and 65535.", resource=text)
        if kind == "hislip" and port is None:
            port = HISLIP_PORT
        return Resource(stripped, kind, (parts.get("host") or "").strip("[]"), port)
    raise ResourceError("this is no resource known here.", resource=text, hint=f"Use one of {'; '.join(FORMS)}.")
