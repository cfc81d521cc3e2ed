"""Scripted trouble: which fault, from when on, how many times.

PURE. Instruments tell the ``FaultBook`` each thing they are about to do (an ``Event``); it says which faults strike
there. A fault opens at its moment and strikes the next ``times`` events of its own kind:

========================  ================  ======================================================================
name                      strikes           what is seen at the wire
========================  ================  ======================================================================
silence                   any query         the command is carried out, the answer never comes
late-answer               any query         the answer comes ``seconds`` late (7 unless told)
half-block                TRACe? IMP        the first half of the answer, without its end
wrong-count               TRACe? IMP        one point fewer than asked, otherwise sound
garbage                   any query         bytes that mean nothing, as many as the answer had
nan, infinity             TRACe? IMP        every seventh number reads 9.91E37 or 9.9E37
error-in-queue            a sweep           −240 "Hardware error" in the error queue, the readings look right
wrong-identity            *IDN?             another maker's instrument answers
frequency-not-accepted    LIST:FREQuency    the middle frequency is taken 0.1 % higher, and read back so
drop-connection           any command       the connection is closed without an answer
contact-bounce            a sweep           the contact opens for a few short stretches
part-pulled-out           a sweep           open from its middle on, until a verdict is signalled
handler-stuck             a handler line    neither done nor answered
scan-lost                 a scan            the scanner sends nothing
========================  ================  ======================================================================

To add one: a row in ``TARGETS`` and here, and the place that asks for it by name.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Collection, Mapping
from dataclasses import dataclass

# name → the kind of event it strikes
TARGETS = {
    "silence": "query",
    "late-answer": "query",
    "half-block": "readings",
    "wrong-count": "readings",
    "garbage": "query",
    "nan": "readings",
    "infinity": "readings",
    "error-in-queue": "sweep",
    "wrong-identity": "identity",
    "frequency-not-accepted": "list",
    "drop-connection": "command",
    "contact-bounce": "sweep",
    "part-pulled-out": "sweep",
    "handler-stuck": "handler",
    "scan-lost": "scan",
}

AT_ONCE = "at once"
_MOMENT = re.compile(r"sweep\s+(?P<sweep>\d+)|command\s+(?P<command>\S.*?)(?:\s+(?P<nth>\d+))?", re.IGNORECASE)
_KEYS = {"name", "when", "times", "seconds"}


class FaultMistake(ValueError):
    """A fault that cannot be understood; the message is a sentence that says what would do."""


@dataclass(frozen=True, slots=True)
class Event:
    """Something an instrument is about to do: its kinds, and every spelling under which a fault may name it."""

    kinds: frozenset[str]
    spellings: Collection[str] = ()


@dataclass(frozen=True, slots=True)
class Fault:
    """``sweep`` n: open from the nth sweep after arming. ``command``, ``nth``: from the nth such. Neither: at once."""

    name: str
    times: int = 1
    sweep: int = 0
    command: str = ""
    nth: int = 1
    seconds: float = 7.0


@dataclass(slots=True)
class _Armed:
    fault: Fault
    left: int
    sweeps: int = 0
    commands: int = 0

    def struck_by(self, event: Event) -> bool:
        self.sweeps += "sweep" in event.kinds
        self.commands += bool(self.fault.command) and self.fault.command in event.spellings
        is_open = self.sweeps >= self.fault.sweep and (not self.fault.command or self.commands >= self.fault.nth)
        if not is_open or not self.left or TARGETS[self.fault.name] not in event.kinds:
            return False
        self.left -= 1
        return True


class FaultBook:
    """The faults armed at one bench, shared by its instruments."""

    def __init__(self, faults: Collection[Fault] = ()) -> None:
        self._armed: list[_Armed] = []
        for fault in faults:
            self.arm(fault)

    def arm(self, fault: Fault) -> None:
        self._armed.append(_Armed(fault, fault.times))

    def clear(self) -> None:
        self._armed.clear()

    def pending(self) -> list[str]:
        """Names of the faults still to strike."""
        return [armed.fault.name for armed in self._armed if armed.left]

    def strikes(self, event: Event) -> dict[str, Fault]:
        """Count the event; the faults that strike it, by name."""
        return {armed.fault.name: armed.fault for armed in self._armed if armed.struck_by(event)}


def read_faults(text: str) -> list[Fault]:
    """The faults of a TOML text: ``[[fault]]`` tables with ``name``, ``when``, ``times``, ``seconds``."""
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as trouble:
        raise FaultMistake(f"not TOML: {trouble}") from None
    unknown = sorted(set(document) - {"format", "fault"})
    if unknown:
        raise FaultMistake(f"unknown key '{unknown[0]}'; a fault file holds [[fault]] tables")
    tables = document.get("fault", [])
    if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
        raise FaultMistake("'fault' must be written as [[fault]] tables")
    return [read_fault(table) for table in tables]


def read_fault(table: Mapping[str, object]) -> Fault:
    """One fault from its keys; ``when`` is "at once", "sweep N", "command HEADER [N]", or the number of a sweep.

    >>> read_fault({"name": "nan", "when": "sweep 3"}).sweep
    3
    """
    unknown = sorted(set(table) - _KEYS)
    if unknown:
        raise FaultMistake(f"a fault has no key '{unknown[0]}'; it has {', '.join(sorted(_KEYS))}")
    name = table.get("name")
    if not isinstance(name, str) or name not in TARGETS:
        raise FaultMistake(f"there is no fault '{name}'; there are {', '.join(TARGETS)}")
    times = table.get("times", 1)
    if isinstance(times, bool) or not isinstance(times, int) or times < 1:
        raise FaultMistake(f"'times' must be a whole number from 1 up, not {times!r}")
    seconds = table.get("seconds", 7.0)
    if isinstance(seconds, bool) or not isinstance(seconds, int | float) or not 0 <= seconds <= 3600:
        raise FaultMistake(f"'seconds' must be a number from 0 to 3600, not {seconds!r}")
    sweep, command, nth = _moment(table.get("when"))
    return Fault(name, times, sweep, command, nth, float(seconds))


def _moment(when: object) -> tuple[int, str, int]:
    if when is None or when == AT_ONCE:
        return 0, "", 1
    if isinstance(when, int) and not isinstance(when, bool) and when >= 1:
        return when, "", 1
    found = _MOMENT.fullmatch(when.strip()) if isinstance(when, str) else None
    if found is None or found["sweep"] == "0" or found["nth"] == "0":
        raise FaultMistake(
            f'\'when\' must be "{AT_ONCE}", "sweep N", "command HEADER N" or the number of a sweep, not {when!r}'
        )
    if found["sweep"]:
        return int(found["sweep"]), "", 1
    return 0, found["command"].upper(), int(found["nth"] or 1)
