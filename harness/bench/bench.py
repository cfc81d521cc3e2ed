"""The opened bench. One owner, one thread."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from contextlib import contextmanager

import numpy as np

from drivers.codec.lines import encode_verdict
from drivers.errors import (
    AnswerError,
    ConnectionLost,
    DriverError,
    InstrumentError,
    NoAnswer,
    NotUsable,
    ResourceError,
    WireError,
)
from drivers.handler import SerialHandler
from drivers.meter import ScpiMeter
from drivers.roles import Handler, Identity, Meter, Scanner
from drivers.scanner import SerialScanner
from harness.bench.devices import Devices
from harness.errors import SetupError, StationError
from harness.records import Complexes, Floats, Instrument, Plan, Reading

_CODES: tuple[tuple[type[DriverError], str], ...] = (  # most specific first
    (NoAnswer, "no-answer"),
    (ConnectionLost, "connection-lost"),
    (WireError, "connection-lost"),
    (InstrumentError, "instrument-error"),
    (NotUsable, "not-usable"),
    (AnswerError, "bad-answer"),
    (DriverError, "bench-fault"),
)


class BenchFault(StationError):
    """Something on the bench failed while a part was in it: ``code`` names the kind for the record."""

    def __init__(self, code: str, text: str, *, place: str = "", remedy: str = "") -> None:
        self.code = code
        super().__init__(text, place=place, remedy=remedy)


class Bench:
    """A meter, and perhaps a scanner and a part handler, open and ready. Close it, or use it as a context.

    Opening raises SetupError (a resource or dialect that is wrong) or StationError (an instrument that does not
    answer); every other method raises BenchFault.
    """

    def __init__(self, devices: Devices) -> None:
        self._scanner: Scanner | None = None
        self._handler: Handler | None = None
        meter = devices.meter
        with _starting():
            self._meter: Meter = ScpiMeter(meter.resource, meter.dialect, timeout_s=meter.timeout_s)
        try:
            with _starting():
                self.instrument = _expected(_instrument(self._meter.identify()), meter.identity)
                if devices.scanner is not None:
                    self._scanner = SerialScanner(devices.scanner.resource, devices.scanner.baud)
                if devices.handler is not None:
                    self._handler = SerialHandler(devices.handler.resource, devices.handler.baud)
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Bench:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @property
    def has_scanner(self) -> bool:
        return self._scanner is not None

    @property
    def has_handler(self) -> bool:
        return self._handler is not None

    def sweep(self, plan: Plan) -> tuple[Floats, Complexes]:
        """Measure a plan: frequencies as read back and impedances at the meter's terminals, in the plan's order."""
        with _working():
            trace = self._meter.sweep(plan.f_hz, plan.drive_v)
        return trace.f_hz, trace.z_ohm

    def reading(self, stage: str, f_hz: float, drive_v: float) -> Reading:
        """Measure one frequency."""
        f, z = self.sweep(Plan(np.array([f_hz]), drive_v, stage))
        return Reading(stage, float(f[0]), complex(z[0]))

    def reopen(self) -> None:
        """Connect the meter anew after a fault, and make sure it is the same one."""
        with _working():
            self._meter.reopen()

    def scan(self, timeout_s: float) -> str | None:
        """The next code from the scanner, or None when none came in time."""
        if self._scanner is None:
            return None
        with _working():
            return self._scanner.read(timeout_s)

    def early_codes(self) -> tuple[str, ...]:
        """Codes that came since the last ``scan``, taken off the line: none of them is the next part's."""
        found = []
        while (code := self.scan(0.0)) is not None:
            found.append(code)
        return tuple(found)

    def refuse_untellable(self, grades: Iterable[str]) -> None:
        """Raise SetupError for a grade that the part handler's line cannot carry; without a handler all will do."""
        if self._handler is None:
            return
        for grade in grades:
            try:
                encode_verdict("pass", grade)
            except ValueError as exc:
                remedy = "Name the grade otherwise in the limit file."
                raise SetupError(str(exc), place=f"grade {grade!r}", remedy=remedy) from exc

    def next_part(self, timeout_s: float) -> bool | None:
        """Ask the handler for a part: True in the fixture, False none left, None nothing said in time."""
        if self._handler is None:
            return True
        with _working():
            return self._handler.next_part(timeout_s)

    def signal(self, outcome: str, grade: str | None) -> None:
        """Tell the handler what becomes of the part; returns once acknowledged."""
        if self._handler is not None:
            with _working():
                self._handler.signal(outcome, grade)

    def close(self) -> None:
        for device in (self._handler, self._scanner, self._meter):
            if device is not None:
                device.close()


def check(devices: Devices) -> None:
    """Raise SetupError for a meter's resource or dialect that is wrong. Opens nothing."""
    with _starting():
        ScpiMeter(devices.meter.resource, devices.meter.dialect)


def _expected(found: Instrument, pattern: str | None) -> Instrument:
    """The instrument, where it is the one that the station file expects. Raises StationError."""
    named = f"{found.maker},{found.model},{found.serial}"
    if pattern is not None and not re.fullmatch(pattern, named):
        raise StationError(
            f"the meter names itself '{named}', which is not what the station file expects ({pattern}).",
            place=found.resource,
            remedy="Connect the right one, or correct identity in [bench.meter].",
        )
    return found


def _instrument(identity: Identity) -> Instrument:
    return Instrument(
        "meter",
        identity.resource,
        identity.dialect,
        identity.maker,
        identity.model,
        identity.serial,
        identity.firmware,
        identity.u_z_relative,
        identity.u_f_relative,
        identity.noise_relative,
    )


@contextmanager
def _starting() -> Iterator[None]:
    try:
        yield
    except ResourceError as exc:
        raise SetupError(exc.text, place=exc.resource, remedy=exc.hint) from exc
    except DriverError as exc:
        raise StationError(exc.text, place=exc.resource, remedy=exc.hint) from exc


@contextmanager
def _working() -> Iterator[None]:
    try:
        yield
    except DriverError as exc:
        code = next(code for kind, code in _CODES if isinstance(exc, kind))
        raise BenchFault(code, exc.text, place=exc.resource, remedy=exc.hint) from exc
