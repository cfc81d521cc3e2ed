"""From a resource string to an open wire."""

from __future__ import annotations

from drivers.wire.protocol import Wire, WireLog, keep_no_log
from drivers.wire.resource import parse_resource
from drivers.wire.tcp import TcpWire


def open_wire(resource: str, timeout_s: float, log: WireLog = keep_no_log) -> Wire:
    """An open connection to a meter: ``TCPIP::…::SOCKET`` over an own socket, everything else through VISA.

    ``timeout_s`` bounds connecting and every write. Raises ResourceError for a string that is no resource (naming
    the forms that would do) or needs software that is not here, ConnectionLost or NoAnswer when nobody is there.
    """
    parsed = parse_resource(resource)
    if parsed.kind == "socket" and parsed.port is not None:
        return TcpWire(parsed.text, parsed.host, parsed.port, timeout_s, log)
    from drivers.wire.visa import VisaWire  # noqa: PLC0415 - PyVISA costs 0.3 s; whoever needs none pays none

    return VisaWire(parsed, timeout_s, log)


def open_serial(port: str, baud: int, timeout_s: float = 5.0, log: WireLog = keep_no_log) -> Wire:
    """An open serial port. Raises ResourceError for settings that cannot be, ConnectionLost when it is not there."""
    from drivers.wire.serial_port import SerialWire  # noqa: PLC0415 - a bench without serial lines needs no pyserial

    return SerialWire(port, baud, timeout_s, log)
