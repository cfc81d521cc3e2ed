"""What happens while a lot is screened. TYPES."""

from __future__ import annotations

from dataclasses import dataclass

from harness.records import Record
from harness.store import Written


@dataclass(frozen=True, slots=True)
class Ready:
    """The station is open and waits for parts; ``continued``: so many records this lot had before."""

    station: str
    lot: str
    continued: int
    waits_for: str


@dataclass(frozen=True, slots=True)
class Interrupted:
    """An attempt of an earlier run that had been opened but not recorded; now a no verdict."""

    written: Written


@dataclass(frozen=True, slots=True)
class Waiting:
    """Nothing in the fixture; ``text`` says what the operator is to do."""

    text: str


@dataclass(frozen=True, slots=True)
class Refused:
    """A serial that is not measured, and why."""

    serial: str
    text: str


@dataclass(frozen=True, slots=True)
class PassedOver:
    """A serial of a list whose verdict in this lot stands already: the lot goes on after it."""

    serial: str


@dataclass(frozen=True, slots=True)
class Opened:
    """An attempt has begun: durable before the first instrument command."""

    serial: str
    number: int


@dataclass(frozen=True, slots=True)
class Measuring:
    """The meter is at work on a stage: contact, locate, resolve, repeat."""

    serial: str
    stage: str


@dataclass(frozen=True, slots=True)
class Recorded:
    """The attempt is durable; from here its verdict may be shown."""

    record: Record
    written: Written


@dataclass(frozen=True, slots=True)
class BenchTrouble:
    """The bench failed or was reopened; the lot goes on if it could be."""

    text: str


@dataclass(frozen=True, slots=True)
class Held:
    """The lot is held: why, the likely cause, and what to do."""

    text: str


@dataclass(frozen=True, slots=True)
class Ended:
    """No more parts; ``judged`` counts those with a final record in this run, ``refused`` the serials not measured;
    ``note`` says so when the yield fell short of the lot's least."""

    judged: int
    refused: int
    note: str


Event = (
    Ready | Interrupted | Waiting | Refused | PassedOver | Opened | Measuring | Recorded | BenchTrouble | Held | Ended
)
