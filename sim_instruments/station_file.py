"""The station file for a simulated bench: where its instruments listen, and what its fixture is. PURE."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol


class Listening(Protocol):
    """The addresses that a station needs."""

    @property
    def hislip(self) -> str: ...

    @property
    def scanner(self) -> str: ...

    @property
    def handler(self) -> str: ...


@dataclass(frozen=True, slots=True)
class FixtureValues:
    """The simulated fixture's own values: series arm, stray capacitance beside the part, ambient temperature."""

    rs_ohm: float
    ls_h: float
    cp_f: float
    temperature_degc: float


_IDENTITY = r"Hollowmere Instruments,ZA-12,HM\d+"


def station_text(addresses: Listening, fixture: FixtureValues) -> str:
    """TOML ready for ``--station``. The fixture's values are true; the stated u are what a correction would leave."""
    return f"""\
format = 1

[identity]
station = "sim-bench-1"

[bench.meter]
resource = "{addresses.hislip}"
dialect = "scpi-analyser"
identity = '{_IDENTITY}'
timeout = "5 s"

[bench.scanner]
port = "{addresses.scanner}"
baud = 9600

[bench.handler]
port = "{addresses.handler}"
baud = 9600

[fixture]
name = "sim-nest-1"
series_resistance = "{fixture.rs_ohm:.6g} ohm"
u_series_resistance = "0.01 ohm"
series_inductance = "{fixture.ls_h * 1e9:.6g} nH"
u_series_inductance = "5 nH"
stray_capacitance = "{fixture.cp_f * 1e12:.6g} pF"
u_stray_capacitance = "0.2 pF"

[conditions]
temperature = "{fixture.temperature_degc:.6g} degC"
u_temperature = "0.5 K"
"""
