"""What a station file says of each instrument. TYPES."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Device:
    """One instrument: a VISA resource or a serial port, the dialect it speaks, its timeout or line speed.

    ``identity``: a regular expression that the whole of "maker,model,serial" must match.
    """

    role: str
    resource: str
    dialect: str = ""
    timeout_s: float = 5.0
    baud: int = 9600
    identity: str | None = None


@dataclass(frozen=True, slots=True)
class Devices:
    """The bench of a station: a meter, and a scanner and a part handler where there are any."""

    meter: Device
    scanner: Device | None = None
    handler: Device | None = None
