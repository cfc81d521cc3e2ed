"""Station-file text → StationSpec, or every mistake in it at once."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated

from pydantic import Field

from harness.bench import Device, Devices
from harness.records import Correction
from harness.toml import readers as r
from harness.toml.document import Block, read_document

Name = Annotated[str, r.text(empty=False)]
Seconds = Annotated[float, r.quantity("s", above=0.0)]
Baud = Annotated[int, r.whole(300, 4_000_000)]


class Identity(Block):
    """Who this station is."""

    station: Name = Field(description="Name of the station, as it stands in every record.")
    operator: Name | None = Field(default=None, description="Operator when --operator is not given.")


class Meter(Block):
    """The instrument that measures impedance."""

    resource: Name = Field(description='VISA resource, such as "TCPIP::192.0.2.7::hislip0::INSTR".')
    dialect: Name = Field(description="The words it speaks: a shipped dialect's name, or the path of a dialect file.")
    identity: Annotated[str, r.pattern()] | None = Field(
        default=None, description='Regular expression for "maker,model,serial"; another instrument is refused.'
    )
    timeout: Seconds = Field(default=5.0, description='Longest wait for an answer, such as "5 s".')


class Line(Block):
    """A device on a serial line."""

    port: Name = Field(description="Serial port, such as /dev/ttyUSB0.")
    baud: Baud = Field(default=9600, description="Speed of the line.")


class Bench(Block):
    """The instruments of this station by role."""

    meter: Meter = Field(description="The impedance meter.")
    scanner: Line | None = Field(default=None, description="The code scanner.")
    handler: Line | None = Field(default=None, description="The part handler.")


class Fixture(Block):
    """What the fixture adds between the meter's terminals and the part's electrodes, with standard uncertainties."""

    name: Name = Field(default="fixture", description="Name of the fixture or nest.")
    series_resistance: Annotated[float, r.quantity("ohm")] = Field(default=0.0, description="Leads and contacts.")
    u_series_resistance: Annotated[float, r.quantity("ohm", least=0.0)] = Field(
        default=0.0, description="Its uncertainty."
    )
    series_inductance: Annotated[float, r.quantity("H")] = Field(default=0.0, description="Leads.")
    u_series_inductance: Annotated[float, r.quantity("H", least=0.0)] = Field(
        default=0.0, description="Its uncertainty."
    )
    stray_capacitance: Annotated[float, r.quantity("F")] = Field(default=0.0, description="Across the contacts.")
    u_stray_capacitance: Annotated[float, r.quantity("F", least=0.0)] = Field(
        default=0.0, description="Its uncertainty."
    )


class Surroundings(Block):
    """What the parts are measured at, where no thermometer says so."""

    temperature: Annotated[float, r.quantity("degC")] | None = Field(default=None, description="Of the parts.")
    u_temperature: Annotated[float, r.quantity("K", least=0.0)] = Field(
        default=0.5, description="Its standard uncertainty."
    )


class StoreBlock(Block):
    """Where records go."""

    url: Name = Field(description="Path of the store's file, or a database URL.")


class StationFile(Block):
    """A station file."""

    format: Annotated[int, r.whole(1, 1)] = Field(description="Write format = 1.")
    identity: Identity = Field(description="Who this station is.")
    bench: Bench = Field(description="The instruments.")
    fixture: Fixture = Field(default_factory=Fixture, description="The fixture's own impedance.")
    conditions: Surroundings = Field(default_factory=Surroundings, description="Temperature.")
    store: StoreBlock | None = Field(default=None, description="Where records go.")


@dataclass(frozen=True, slots=True)
class StationSpec:
    """A station file, read, in SI units."""

    name: str
    operator: str | None
    devices: Devices
    correction: Correction
    temperature_degc: float | None
    u_temperature_k: float
    store: str | None


def parse_station(text: str, file: str) -> StationSpec:
    """The station that ``text`` describes. Raises FileMistakes with all mistakes by line."""
    doc = read_document(StationFile, text, file)
    meter, fixture = doc.bench.meter, doc.fixture
    return StationSpec(
        doc.identity.station,
        doc.identity.operator,
        Devices(
            Device("meter", meter.resource, meter.dialect, timeout_s=meter.timeout, identity=meter.identity),
            _line("scanner", doc.bench.scanner),
            _line("handler", doc.bench.handler),
        ),
        Correction(
            fixture.name,
            fixture.series_resistance,
            fixture.series_inductance,
            fixture.stray_capacitance,
            fixture.u_series_resistance,
            fixture.u_series_inductance,
            fixture.u_stray_capacitance,
        ),
        doc.conditions.temperature,
        doc.conditions.u_temperature,
        doc.store.url if doc.store else None,
    )


def _line(role: str, line: Line | None) -> Device | None:
    return None if line is None else Device(role, line.port, baud=line.baud)
