"""Resource strings: the forms that do, and a sentence naming them for all others."""

from __future__ import annotations

import pytest

from drivers.errors import ResourceError
from drivers.wire.opening import open_wire
from drivers.wire.resource import FORMS, parse_resource

GOOD = [
    ("TCPIP::127.0.0.1::5025::SOCKET", "socket", "127.0.0.1", 5025),
    ("tcpip0::meter-3.plant::5025::socket", "socket", "meter-3.plant", 5025),
    ("TCPIP::[::1]::5025::SOCKET", "socket", "::1", 5025),
    ("TCPIP::127.0.0.1::hislip0,44103::INSTR", "hislip", "127.0.0.1", 44103),
    ("TCPIP::meter::hislip2::INSTR", "hislip", "meter", 4880),
    ("TCPIP::meter::HISLIP0", "hislip", "meter", 4880),
    ("TCPIP::meter::inst0::INSTR", "visa", "meter", None),
    ("TCPIP::meter,1024::inst0::INSTR", "visa", "meter", 1024),
    ("TCPIP::meter::INSTR", "visa", "meter", None),
    ("USB0::0x1234::0x5678::SN01::INSTR", "visa", "", None),
    ("GPIB0::17::INSTR", "visa", "", None),
    (" GPIB::17 ", "visa", "", None),
]
BAD = [
    "",
    "meter",
    "127.0.0.1:5025",
    "TCPIP::host::SOCKET",
    "TCPIP::::5025::SOCKET",
    "TCPIP::host::port::SOCKET",
    "TCPIP::a b::5025::SOCKET",
    "TCPIP::h::5025::SOCKET\n;",
    "/dev/ttyUSB0",
    "ASRL1::INSTR",
    "GPIB::INSTR",
    "USB::1::INSTR",
]


@pytest.mark.parametrize(("text", "kind", "host", "port"), GOOD)
def test_good_resources(text: str, kind: str, host: str, port: int | None) -> None:
    """Each form is read into its kind, host and port, the standard port filled in."""
    parsed = parse_resource(text)
    assert (parsed.kind, parsed.host, parsed.port) == (kind, host, port)


@pytest.mark.parametrize("text", BAD)
def test_bad_resources_name_what_would_do(text: str) -> None:
    """Anything else is refused before a library or a socket is touched, naming every form."""
    with pytest.raises(ResourceError) as caught:
        open_wire(text, 0.1)
    assert all(form in str(caught.value) for form in FORMS)


@pytest.mark.parametrize("port", ["0", "65536", "99999"])
def test_ports_have_a_range(port: str) -> None:
    """A port no network has is refused."""
    with pytest.raises(ResourceError, match="between 1 and 65535"):
        parse_resource(f"TCPIP::host::{port}::SOCKET")
