"""Station files: read, and refused with every mistake at once."""

from __future__ import annotations

import pytest

from harness.bench import Device, Devices
from harness.errors import FileMistakes
from harness.records import Correction
from harness.station import StationSpec, parse_station

MINIMAL = """\
format = 1
[identity]
station = "bay 2"
[bench.meter]
resource = "TCPIP::192.0.2.7::5025::SOCKET"
dialect = "scpi-analyser"
"""

FULL = """\
format = 1

[identity]
station = "Fenwick Hollow, bay 2"
operator = "second shift"

[bench.meter]
resource = "TCPIP::192.0.2.7::hislip0::INSTR"
dialect = "scpi-analyser"
timeout = "500 ms"

[bench.scanner]
port = "/dev/ttyUSB0"
baud = 115200

[bench.handler]
port = "/dev/ttyUSB1"

[fixture]
name = "nest 4"
series_resistance = "120 mohm"
u_series_resistance = "0.01 ohm"
series_inductance = "80 nH"
u_series_inductance = "5 nH"
stray_capacitance = "3.2 pF"
u_stray_capacitance = "0.2 pF"

[conditions]
temperature = "23.5 degC"
u_temperature = "0.3 K"

[store]
url = "/var/lib/ringtrue/bay2.db"
"""


def sentences(text: str) -> list[str]:
    with pytest.raises(FileMistakes) as caught:
        parse_station(text, "station.toml")
    assert caught.value.exit_code == 2
    return str(caught.value).splitlines()


def test_minimal_station() -> None:
    """A meter and a name suffice: no fixture, no lines, five seconds, no temperature, no store."""
    meter = Device("meter", "TCPIP::192.0.2.7::5025::SOCKET", "scpi-analyser", timeout_s=5.0)
    assert parse_station(MINIMAL, "station.toml") == StationSpec(
        "bay 2", None, Devices(meter, None, None), Correction("fixture"), None, 0.5, None
    )


def test_whole_station_in_si_units() -> None:
    """Every key, with its prefix and unit, as SI numbers."""
    assert parse_station(FULL, "station.toml") == StationSpec(
        name="Fenwick Hollow, bay 2",
        operator="second shift",
        devices=Devices(
            Device("meter", "TCPIP::192.0.2.7::hislip0::INSTR", "scpi-analyser", timeout_s=0.5),
            Device("scanner", "/dev/ttyUSB0", baud=115200),
            Device("handler", "/dev/ttyUSB1", baud=9600),
        ),
        correction=Correction("nest 4", 0.12, 80e-9, 3.2e-12, 0.01, 5e-9, 0.2e-12),
        temperature_degc=23.5,
        u_temperature_k=0.3,
        store="/var/lib/ringtrue/bay2.db",
    )


def test_all_mistakes_at_once_by_line() -> None:
    """A dozen mistakes: each with its line and key, in the order of the file, and what would do."""
    text = """\
format = 2
[identity]
station = ""
operater = "second shift"
[bench.meter]
resource = 5025
timeout = "5 Hz"
[bench.scaner]
port = "/dev/ttyUSB0"
[bench.handler]
port = "/dev/ttyUSB1"
baud = 9600.5
[fixture]
series_resistance = "0,12 ohm"
u_series_inductance = "-5 nH"
[conditions]
temperature = "296 K"
u_temperature = "-1 K"
"""
    said = sentences(text)
    expected = [
        ("station.toml:1:", "format", ""),
        ("station.toml:3:", "identity.station", "empty"),
        ("station.toml:4:", "identity.operater", "operator"),
        ("station.toml:5:", "bench.meter.dialect", ""),
        ("station.toml:6:", "bench.meter.resource", "5025"),
        ("station.toml:7:", "bench.meter.timeout", "ms, s or min"),
        ("station.toml:8:", "bench.scaner", "scanner"),
        ("station.toml:12:", "bench.handler.baud", "whole number"),
        ("station.toml:14:", "fixture.series_resistance", "point"),
        ("station.toml:15:", "fixture.u_series_inductance", "below 0"),
        ("station.toml:17:", "conditions.temperature", "degC"),
        ("station.toml:18:", "conditions.u_temperature", "below 0"),
    ]
    assert len(said) == len(expected)
    for sentence, (place, key, words) in zip(said, expected, strict=True):
        assert sentence.startswith(place)
        assert f"{key}:" in sentence
        assert words in sentence


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("u_series_resistance", "-1 mohm"),
        ("u_series_inductance", "-1 nH"),
        ("u_stray_capacitance", "-1 pF"),
        ("u_stray_capacitance", "1 pH"),
        ("series_inductance", "nan H"),
    ],
)
def test_fixture_values_that_cannot_be(key: str, value: str) -> None:
    """A negative uncertainty, another dimension, no number: each refused by its line."""
    (sentence,) = sentences(f'{MINIMAL}[fixture]\n{key} = "{value}"\n')
    assert sentence.startswith(f"station.toml:8: fixture.{key}:")


@pytest.mark.parametrize(
    "text",
    ["", "format = 1\n", "[bench\n", "format = 1\nformat = 1\n", "\x00", "format = 1\n[identity]\nstation = 'a\n"],
)
def test_what_is_no_station_file_is_refused(text: str) -> None:
    """Empty, torn or doubled: sentences that name the file, never a traceback."""
    assert all(sentence.startswith("station.toml") for sentence in sentences(text))


def test_wrong_timeout_of_zero() -> None:
    """A timeout must be above nothing."""
    (sentence,) = sentences(MINIMAL + 'timeout = "0 s"\n')
    assert sentence.startswith("station.toml:7: bench.meter.timeout: 0 is not above 0.")
