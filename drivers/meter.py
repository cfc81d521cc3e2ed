"""A swept impedance meter that speaks SCPI, by the words of its dialect.

A sweep is one conversation: clear, set, ask back, trigger, wait for completion, read, ask for errors. If anything in
it fails, even by an interrupt, the connection is dropped on the spot, since the missing answer may still come; then
only ``reopen`` (or ``identify`` on a meter never connected) leads on.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.codec import block, text
from drivers.dialect import MeterDialect, load_dialect
from drivers.errors import AnswerError, DriverError, InstrumentError, NotUsable, OutOfStep, ResourceError
from drivers.roles import Identity, Trace
from drivers.wire.opening import open_wire
from drivers.wire.protocol import Wire
from drivers.wire.resource import parse_resource

MOST_ERRORS = 50

Floats = NDArray[np.float64]


class ScpiMeter:
    """Fulfils ``roles.Meter``. Connects at the first ``identify``, ``sweep`` or ``reopen``, not when made.

    ``resource``: ``TCPIP::host::port::SOCKET``, ``TCPIP::host::hislip0::INSTR`` or another form of
    ``wire.resource``; ``dialect``: a name of ``dialect.shipped_dialects()``, a file's path, or a MeterDialect;
    ``timeout_s``: for connecting and for each answer; the wait for a sweep grows with its points;
    ``opener``: what makes the wire, such as ``functools.partial(open_wire, log=print)`` to see every
    byte. Raises ResourceError for a string or dialect that cannot be.

    ::

        meter = ScpiMeter("TCPIP::192.0.2.7::5025::SOCKET", "scpi-analyser")
        trace = meter.sweep(np.linspace(1.6e6, 1.7e6, 401), drive_v=1.0)
    """

    def __init__(
        self,
        resource: str,
        dialect: str | MeterDialect,
        timeout_s: float = 3.0,
        *,
        opener: Callable[[str, float], Wire] = open_wire,
    ) -> None:
        if opener is open_wire:
            parse_resource(resource)
        self._resource = resource
        self._dialect = load_dialect(dialect) if isinstance(dialect, str) else dialect
        self._timeout_s = timeout_s
        self._opener = opener
        self._wire: Wire | None = None
        self._known: Identity | None = None
        self._dropped = ""

    # ── the role ─────────────────────────────────────────────────────────────────────────────

    def identify(self) -> Identity:
        """Who answers now. Raises AnswerError when it is another instrument than the first time, WireError."""
        with self._conversation() as wire:
            return self._identity(wire)

    def sweep(self, f_hz: Sequence[float] | Floats, drive_v: float) -> Trace:
        """Impedance at ``f_hz`` ``(N,)``, hertz, in the order given, at ``drive_v`` volts.

        Raises InstrumentError with everything in the instrument's error queue; NotUsable for a reading that is no
        number or an overload, and for a frequency or drive level read back different; AnswerError for an answer
        that cannot be right; WireError; ResourceError for frequencies or a drive the instrument does not have.
        """
        wanted = np.atleast_1d(np.asarray(f_hz, dtype=np.float64))
        self._check_plan(wanted, drive_v)
        most = self._dialect.max_points
        traces = [self._sweep_list(wanted[at : at + most], drive_v) for at in range(0, wanted.size, most)]
        return Trace(np.concatenate([t.f_hz for t in traces]), np.concatenate([t.z_ohm for t in traces]))

    def reopen(self) -> None:
        """Close, connect again and identify. Raises AnswerError when another instrument answers, WireError."""
        self.close()
        self.identify()

    def close(self) -> None:
        """Close the connection; the next ``identify``, ``sweep`` or ``reopen`` opens it again."""
        self._drop("")

    # ── the connection ───────────────────────────────────────────────────────────────────────

    @contextlib.contextmanager
    def _conversation(self) -> Iterator[Wire]:
        """The wire, opened if need be; dropped if anything at all goes wrong before the conversation is over."""
        if self._dropped:
            raise OutOfStep(
                f"the connection was given up {self._dropped}.", resource=self._resource, hint="Open it again."
            )
        try:
            yield self._wire or self._connect()
        except BaseException as exc:
            self._drop(f"after {type(exc).__name__}")
            if isinstance(exc, DriverError) and not exc.resource:
                raise type(exc)(exc.text, resource=self._resource, hint=exc.hint) from exc
            raise

    def _connect(self) -> Wire:
        wire = self._wire = self._opener(self._resource, self._timeout_s)
        wire.clear()
        if self._dialect.reset:
            self._say(wire, self._dialect.reset)
        self._say(wire, self._dialect.clear)
        self._identity(wire)
        return wire

    def _drop(self, why: str) -> None:
        self._dropped = why
        if self._wire is not None:
            wire, self._wire = self._wire, None
            wire.close()

    def _identity(self, wire: Wire) -> Identity:
        fields = text.decode_identity(self._ask(wire, self._dialect.identify))
        found = Identity(
            resource=self._resource,
            dialect=self._dialect.name,
            maker=fields.maker,
            model=fields.model,
            serial=fields.serial,
            firmware=fields.firmware,
            u_z_relative=self._dialect.u_z_relative,
            u_f_relative=self._dialect.u_f_relative,
            noise_relative=self._dialect.noise_relative,
        )
        if self._known is not None and found != self._known:
            raise AnswerError(
                f"{_named(found)} answers here now, it was {_named(self._known)} before.",
                resource=self._resource,
                hint="Put the first one back, or start anew with this one.",
            )
        self._known = found
        return found

    # ── one sweep ────────────────────────────────────────────────────────────────────────────

    def _sweep_list(self, wanted: Floats, drive_v: float) -> Trace:
        with self._conversation() as wire:
            reading, errors = None, self._set(wire, wanted, drive_v)
            if not errors:
                reading, errors = self._measure(wire, wanted.size), self._errors(wire)
        if errors or reading is None:
            raise InstrumentError(f"the instrument reports {'; '.join(map(str, errors))}.", resource=self._resource)
        self._check_settings(reading, wanted, drive_v)
        self._check_readings(reading)
        return Trace(reading.f_hz, reading.r_ohm + 1j * reading.x_ohm)

    def _set(self, wire: Wire, wanted: Floats, drive_v: float) -> list[text.ErrorEntry]:
        """Send the settings; what the instrument thinks of them."""
        dialect = self._dialect
        self._say(wire, dialect.clear)
        values = {
            "{frequencies}": text.encode_list(wanted, dialect.frequency_format),
            "{drive}": text.encode_list([drive_v], dialect.drive_format),
        }
        for line in dialect.settings:
            for place, value in values.items():
                line = line.replace(place, value)
            self._say(wire, line)
        return self._errors(wire)

    def _measure(self, wire: Wire, points: int) -> _Reading:
        dialect = self._dialect
        taken_points = float(points) if not dialect.points else text.decode_number(self._ask(wire, dialect.points))
        drive_v = None if not dialect.drive else text.decode_number(self._ask(wire, dialect.drive))
        self._say(wire, dialect.trigger)
        done = self._ask(wire, dialect.complete, self._timeout_s + points * dialect.s_per_point)
        if done != dialect.complete_answer:
            raise AnswerError(f"expected '{dialect.complete_answer}' when the sweep is done, got {done!r}.")
        f_hz = self._ask_numbers(wire, dialect.frequencies, points)
        parts = self._ask_numbers(wire, dialect.impedance, 2 * points)
        return _Reading(taken_points, drive_v, f_hz, parts[0::2], parts[1::2])

    def _errors(self, wire: Wire) -> list[text.ErrorEntry]:
        """Empty the error queue."""
        found: list[text.ErrorEntry] = []
        while len(found) < MOST_ERRORS:
            entry = text.decode_error(self._ask(wire, self._dialect.error))
            if entry.code == 0:
                return found
            found.append(entry)
        raise AnswerError(f"the error queue does not end: {MOST_ERRORS} entries, the first {found[0]}.")

    # ── questions ────────────────────────────────────────────────────────────────────────────

    def _say(self, wire: Wire, line: str) -> None:
        wire.write(line.encode("ascii") + b"\n")

    def _ask(self, wire: Wire, question: str, timeout_s: float | None = None) -> str:
        self._say(wire, question)
        return text.to_text(wire.read_line(timeout_s or self._timeout_s)).strip()

    def _ask_numbers(self, wire: Wire, question: str, count: int) -> Floats:
        self._say(wire, question)
        take = self._take_block if self._dialect.answer == "block" else self._take_text
        values = take(wire, count)
        if values.size != count:
            raise AnswerError(f"asked {question}, expected {count} numbers, got {values.size}.")
        return values

    def _take_text(self, wire: Wire, count: int) -> Floats:
        return text.decode_list(text.to_text(wire.read_line(self._timeout_s)), self._dialect.sentinels)

    def _take_block(self, wire: Wire, count: int) -> Floats:
        dialect = self._dialect
        reader = block.BlockReader(most_bytes=8 * count)
        while reader.wants:
            reader.feed(wire.read_exactly(reader.wants, self._timeout_s))
        rest = wire.read_line(self._timeout_s)
        if rest:
            raise AnswerError(f"after the block came {block.shown(rest)}, not a line end.")
        values = block.decode_numbers(reader.payload, dialect.block_number, dialect.block_order)
        return text.replace_sentinels(values, dialect.sentinels)

    # ── checks ───────────────────────────────────────────────────────────────────────────────

    def _check_plan(self, wanted: Floats, drive_v: float) -> None:
        low, high = self._dialect.min_f_hz, self._dialect.max_f_hz
        if wanted.ndim != 1 or not wanted.size:
            raise ResourceError("a sweep needs a list of at least one frequency.", resource=self._resource)
        outside = wanted[~((wanted >= low) & (wanted <= high))]  # NaN is outside too
        if outside.size:
            raise ResourceError(
                f"{outside[0]:.9g} Hz is not between {low:.9g} Hz and {high:.9g} Hz, which this meter measures.",
                resource=self._resource,
            )
        if not self._dialect.min_drive_v <= drive_v <= self._dialect.max_drive_v:
            raise ResourceError(
                f"a drive of {drive_v:g} V is not between {self._dialect.min_drive_v:g} V and "
                f"{self._dialect.max_drive_v:g} V, which this meter gives.",
                resource=self._resource,
            )

    def _check_settings(self, reading: _Reading, wanted: Floats, drive_v: float) -> None:
        if reading.points != wanted.size:
            raise self._not_usable(f"{wanted.size} frequencies were asked, the meter took {reading.points:g}.")
        step = self._dialect.drive_step_relative * drive_v
        if reading.drive_v is not None and not abs(reading.drive_v - drive_v) <= step:
            raise self._not_usable(f"a drive of {drive_v:g} V was asked, the meter set {reading.drive_v:g} V.")
        step_hz = np.maximum(self._dialect.f_step_relative * wanted, self._dialect.f_step_hz)
        other = np.flatnonzero(~(np.abs(reading.f_hz - wanted) <= step_hz))
        if other.size:
            at = other[0]
            raise self._not_usable(
                f"{other.size} of {wanted.size} frequencies were not taken: {wanted[at]:.9g} Hz was asked, "
                f"{reading.f_hz[at]:.9g} Hz measured."
            )

    def _check_readings(self, reading: _Reading) -> None:
        bad = np.flatnonzero(~(np.isfinite(reading.r_ohm) & np.isfinite(reading.x_ohm)))
        if bad.size:
            at = bad[0]
            missing = np.isnan(reading.r_ohm[at]) or np.isnan(reading.x_ohm[at])
            raise self._not_usable(
                f"{bad.size} of {reading.f_hz.size} readings are no impedance, the first "
                f"({'not a number' if missing else 'overload'}) at {reading.f_hz[at]:.9g} Hz."
            )

    def _not_usable(self, sentence: str) -> NotUsable:
        return NotUsable(sentence, resource=self._resource)


@dataclass(frozen=True, slots=True, eq=False)
class _Reading:
    """What came back from one list: points and drive as asked back, frequencies, resistances, reactances ``(N,)``."""

    points: float
    drive_v: float | None
    f_hz: Floats
    r_ohm: Floats
    x_ohm: Floats


def _named(identity: Identity) -> str:
    return " ".join(part for part in (identity.maker, identity.model, identity.serial, identity.firmware) if part)
