"""A swept impedance analyser that speaks SCPI: ``respond(message) → answer``.

PURE: no I/O and no clock. Its errors come from the seed; what it measures from the terminals it is given; the time a
sweep takes is stated in the ``Answer`` for the server to wait. One instrument serves all its connections, one
message at a time; cutting streams into messages is each connection's own matter (``scpi.MessageBuffer``).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from sim_instruments import scpi
from sim_instruments.faults import Event, Fault, FaultBook
from sim_instruments.physics import noise
from sim_instruments.status import OPERATION_COMPLETE, Status

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

LOWEST_HZ, HIGHEST_HZ = 20.0, 10e6
STEPS_PER_HZ = 1e6  # of the synthesizer
MOST_POINTS = 4001
LOWEST_V, HIGHEST_V = 0.005, 2.0
MOST_AVERAGES = 999

NOISE_RELATIVE = 0.0015  # standard deviation of R and of X, over |Z|
GREATEST_GAIN_ERROR = 0.001
GREATEST_FREQUENCY_ERROR = 2e-6
DIGITS = 7

_HARDWARE_ERROR = -240


class Terminals(Protocol):
    """What is connected: impedances ``(N,)`` in ohm at ``f_hz`` ``(N,)``, with disturbances by fault name."""

    def impedance(
        self, f_hz: Floats, drive_v: float, disturbances: Mapping[str, Fault], chance: np.random.Generator
    ) -> Complexes: ...


@dataclass(frozen=True, slots=True)
class Answer:
    """The response to one message, and how it reaches the wire.

    The instrument is busy for ``busy_s`` first; the answer then lingers ``late_s`` on its own connection. ``cut``: its
    end is missing. ``drop``: the connection closes instead.
    """

    data: bytes = b""
    busy_s: float = 0.0
    late_s: float = 0.0
    cut: bool = False
    drop: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class Settings:
    """What ``*RST`` sets back."""

    f_hz: Floats = field(default_factory=lambda: np.array([1000.0]))
    averages: int = 1
    drive_v: float = 1.0
    real64: bool = False
    swapped: bool = False


@dataclass(slots=True)
class _Turn:
    """What happened while one message was carried out."""

    parts: list[bytes] = field(default_factory=list)
    busy_s: float = 0.0
    struck: dict[str, Fault] = field(default_factory=dict)


class Analyser:
    """State: settings, the last sweep, status. ``s_per_point`` is the time of one averaged reading."""

    def __init__(
        self, terminals: Terminals, *, seed: int = 0, faults: FaultBook | None = None, s_per_point: float = 2e-5
    ) -> None:
        self._terminals = terminals
        self._faults = faults if faults is not None else FaultBook()
        self._s_per_point = s_per_point
        self._chance = np.random.default_rng([seed, 1])
        self._flaws = noise.Flaws(
            gain_error=self._chance.uniform(-1, 1) * GREATEST_GAIN_ERROR,
            frequency_error=self._chance.uniform(-1, 1) * GREATEST_FREQUENCY_ERROR,
            digits=DIGITS,
        )
        self._identity = f"Hollowmere Instruments,ZA-12,HM{seed % 100000:05d},1.2.0"
        self._settings = Settings()
        self._z_ohm: Complexes | None = None
        self._turn = _Turn()
        self.status = Status()

    def respond(self, message: bytes) -> bytes:
        """Carry out one or more program messages, apart by line feeds; the bytes of the response."""
        return b"".join(self.answer(line).data for line in message.removesuffix(b"\n").split(b"\n"))

    def answer(self, message: bytes) -> Answer:
        """Carry out one program message (without its end)."""
        turn = self._turn = _Turn()
        try:
            for command in scpi.parse(message):
                self._carry_out(command)
        except scpi.ScpiError as error:
            self.status.report(error.code)  # a command error: the rest of the message is not carried out
        return _answer(turn, self._chance)

    def _carry_out(self, command: scpi.Command) -> None:
        row = _lookup(command)
        event = Event(row.kinds_for(command), _spoken(command, row))
        struck = self._faults.strikes(event)
        self._turn.struck.update(struck)
        if "drop-connection" in self._turn.struck:
            return
        if "error-in-queue" in struck:
            self.status.report(_HARDWARE_ERROR)
        try:
            response = row.do(self, command.params, struck)
        except scpi.ScpiError as error:
            if error.code > -200:
                raise
            self.status.report(error.code)
        else:
            if response is not None:
                self._turn.parts.append(response)

    # ── common commands and status ───────────────────────────────────────────────────────────

    def _identify(self, params: tuple[str, ...], struck: Mapping[str, Fault]) -> bytes:
        scpi.none(params)
        return b"Ashgrove Test Works,PS-3,0,0.9" if "wrong-identity" in struck else self._identity.encode("ascii")

    def _reset(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.none(params)
        self._change(Settings())

    def _clear(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.none(params)
        self.status.clear()

    def _complete(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.none(params)
        self.status.events |= OPERATION_COMPLETE

    def _wait(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.none(params)

    def _set_event_enable(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        self.status.event_enable = _register(params)

    def _set_service_enable(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        self.status.service_enable = _register(params) & ~64

    # ── settings ─────────────────────────────────────────────────────────────────────────────

    def _change(self, settings: Settings) -> None:
        """Take new settings; what was measured under the old ones is stale."""
        self._settings = settings
        self._z_ohm = None

    def _set_mode(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.word(scpi.one(params), ["LIST"])

    def _set_list(self, params: tuple[str, ...], struck: Mapping[str, Fault]) -> None:
        if not params:
            raise scpi.ScpiError(-109)
        f_hz = np.array([scpi.number(text, "HZ") for text in params])
        if len(f_hz) > MOST_POINTS:
            raise scpi.ScpiError(-223)
        if not np.all((f_hz >= LOWEST_HZ) & (f_hz <= HIGHEST_HZ)):
            raise scpi.ScpiError(-222)
        if "frequency-not-accepted" in struck:
            f_hz[len(f_hz) // 2] *= 1.001
        self._change(replace(self._settings, f_hz=np.round(f_hz * STEPS_PER_HZ) / STEPS_PER_HZ))

    def _set_averages(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        averages = scpi.integer(_limit(scpi.one(params), 1, MOST_AVERAGES, 1))
        if not 1 <= averages <= MOST_AVERAGES:
            raise scpi.ScpiError(-222)
        self._change(replace(self._settings, averages=averages))

    def _set_drive(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        drive_v = scpi.number(_limit(scpi.one(params), LOWEST_V, HIGHEST_V, 1.0), "V")
        if not LOWEST_V <= drive_v <= HIGHEST_V:
            raise scpi.ScpiError(-222)
        self._change(replace(self._settings, drive_v=drive_v))

    def _set_format(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        kind = scpi.word(params[0] if params else scpi.one(params), ["ASCii", "REAL"])
        if len(params) > 2:
            raise scpi.ScpiError(-108)
        if kind == "REAL" and len(params) == 2 and scpi.integer(params[1]) != 64:
            raise scpi.ScpiError(-224)
        self._settings = replace(self._settings, real64=kind == "REAL")

    def _set_border(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        swapped = scpi.word(scpi.one(params), ["NORMal", "SWAPped"]) == "SWAPPED"
        self._settings = replace(self._settings, swapped=swapped)

    # ── measuring ────────────────────────────────────────────────────────────────────────────

    def _trigger(self, params: tuple[str, ...], _: Mapping[str, Fault]) -> None:
        scpi.none(params)
        raise scpi.ScpiError(-211)  # sweeps begin with INITiate alone; no trigger is waited for

    def _initiate(self, params: tuple[str, ...], struck: Mapping[str, Fault]) -> None:
        scpi.none(params)
        settings = self._settings
        flaws = replace(self._flaws, noise_relative=NOISE_RELATIVE / math.sqrt(settings.averages))
        z_ohm = noise.read(
            lambda f_hz: self._terminals.impedance(f_hz, settings.drive_v, struck, self._chance),
            settings.f_hz,
            flaws,
            self._chance,
        )
        self._z_ohm = _shown(z_ohm.real) + 1j * _shown(z_ohm.imag)
        self._turn.busy_s += len(settings.f_hz) * settings.averages * self._s_per_point

    def _trace(self, params: tuple[str, ...], struck: Mapping[str, Fault]) -> bytes:
        name = scpi.word(scpi.one(params), ["FREQuency", "IMPedance"])
        if self._z_ohm is None:
            raise scpi.ScpiError(-230)
        if name == "FREQUENCY":
            return self._numbers(self._settings.f_hz, decimals=12)
        readings = np.column_stack([self._z_ohm.real, self._z_ohm.imag]).ravel()
        for fault, number in (("nan", scpi.NOT_A_NUMBER), ("infinity", scpi.INFINITE)):
            if fault in struck:
                readings[::7] = number
        if "wrong-count" in struck:
            readings = readings[:-2]
        return self._numbers(readings, decimals=DIGITS - 1)

    def _numbers(self, values: Floats, decimals: int) -> bytes:
        if self._settings.real64:
            return scpi.real64(values, self._settings.swapped)
        return scpi.nr3(values, decimals)

    def _show(self, text: str) -> bytes:
        return text.encode("ascii")

    def message_interrupted(self) -> None:
        """A new message came before the last response was read (IEEE 488.2 §6.3.2.3; seen by HiSLIP alone)."""
        self.status.report(-410)

    def input_overrun(self) -> None:
        """A message longer than the input buffer."""
        self.status.report(-363)


def _answer(turn: _Turn, chance: np.random.Generator) -> Answer:
    """What is sent for a carried-out message, with the faults that struck it."""
    struck = turn.struck
    if "drop-connection" in struck:
        return Answer(drop=True)
    data = b";".join(turn.parts) + b"\n" if turn.parts else b""
    if not data or "silence" in struck:
        return Answer(busy_s=turn.busy_s)
    if "garbage" in struck:
        data = _garbage(len(data), chance)
    late_s = struck["late-answer"].seconds if "late-answer" in struck else 0.0
    if "half-block" in struck:
        return Answer(data[: len(data) // 2], turn.busy_s, late_s, cut=True)
    return Answer(data, turn.busy_s, late_s)


def _garbage(length: int, chance: np.random.Generator) -> bytes:
    """Bytes that are no SCPI response: above ASCII, so never digits, quotes or ``#``; ended like an answer."""
    return chance.integers(0x80, 0x100, size=max(length - 1, 1), dtype=np.uint8).tobytes() + b"\n"


def _shown(values: Floats) -> Floats:
    """The decimal numbers that the instrument shows, the same in text and in blocks."""
    return np.array([float(f"{value:.{DIGITS - 1}e}") for value in values])


def _register(params: tuple[str, ...]) -> int:
    bits = scpi.integer(scpi.one(params))
    if not 0 <= bits <= 255:
        raise scpi.ScpiError(-222)
    return bits


def _limit(text: str, lowest: float, highest: float, default: float) -> str:
    """MINimum, MAXimum or DEFault as its number; other text as it is."""
    for choice, number in (("MINimum", lowest), ("MAXimum", highest), ("DEFault", default)):
        if text.upper() in scpi.spellings(choice):
            return repr(number)
    return text


# ── the commands ─────────────────────────────────────────────────────────────────────────────

Do = Callable[[Analyser, tuple[str, ...], Mapping[str, Fault]], bytes | None]


@dataclass(frozen=True, slots=True)
class _Row:
    do: Do
    kinds: frozenset[str]
    spellings: frozenset[str]

    def kinds_for(self, command: scpi.Command) -> frozenset[str]:
        """Only the trace of impedances holds readings."""
        is_readings = "trace" in self.kinds and command.params[:1] and command.params[0].upper().startswith("IMP")
        return self.kinds | {"readings"} if is_readings else self.kinds


def _asked(show: Callable[[Analyser], bytes | str | int]) -> Do:
    """A query without parameters."""

    def do(analyser: Analyser, params: tuple[str, ...], _: Mapping[str, Fault]) -> bytes:
        scpi.none(params)
        shown = show(analyser)
        return shown if isinstance(shown, bytes) else str(shown).encode("ascii")

    return do


_COMMANDS: list[tuple[str, Do, str]] = [
    ("*IDN?", Analyser._identify, "identity"),
    ("*RST", Analyser._reset, ""),
    ("*CLS", Analyser._clear, ""),
    ("*OPC", Analyser._complete, ""),
    ("*OPC?", _asked(lambda a: 1), ""),
    ("*ESR?", _asked(lambda a: a.status.take_events()), ""),
    ("*ESE", Analyser._set_event_enable, ""),
    ("*ESE?", _asked(lambda a: a.status.event_enable), ""),
    ("*SRE", Analyser._set_service_enable, ""),
    ("*SRE?", _asked(lambda a: a.status.service_enable), ""),
    ("*STB?", _asked(lambda a: a.status.byte()), ""),
    ("*TST?", _asked(lambda a: 0), ""),
    ("*WAI", Analyser._wait, ""),
    ("*TRG", Analyser._trigger, ""),
    ("SYSTem:ERRor[:NEXT]?", _asked(lambda a: a.status.next_error()), ""),
    ("SYSTem:ERRor:COUNt?", _asked(lambda a: len(a.status.queue)), ""),
    ("SYSTem:VERSion?", _asked(lambda a: "1999.0"), ""),
    ("[SENSe:]FREQuency:MODE", Analyser._set_mode, ""),
    ("[SENSe:]FREQuency:MODE?", _asked(lambda a: "LIST"), ""),
    ("[SENSe:]LIST:FREQuency", Analyser._set_list, "list"),
    ("[SENSe:]LIST:FREQuency?", _asked(lambda a: scpi.nr3(a._settings.f_hz, 12)), ""),
    ("[SENSe:]LIST:FREQuency:POINts?", _asked(lambda a: len(a._settings.f_hz)), ""),
    ("[SENSe:]AVERage:COUNt", Analyser._set_averages, ""),
    ("[SENSe:]AVERage:COUNt?", _asked(lambda a: a._settings.averages), ""),
    ("SOURce:VOLTage", Analyser._set_drive, ""),
    ("SOURce:VOLTage?", _asked(lambda a: scpi.nr3([a._settings.drive_v])), ""),
    ("FORMat[:DATA]", Analyser._set_format, ""),
    ("FORMat[:DATA]?", _asked(lambda a: "REAL,64" if a._settings.real64 else "ASC"), ""),
    ("FORMat:BORDer", Analyser._set_border, ""),
    ("FORMat:BORDer?", _asked(lambda a: "SWAP" if a._settings.swapped else "NORM"), ""),
    ("INITiate[:IMMediate]", Analyser._initiate, "sweep"),
    ("TRACe[:DATA]?", Analyser._trace, "trace"),
]


def _table() -> dict[str, _Row]:
    table: dict[str, _Row] = {}
    for pattern, do, kind in _COMMANDS:
        mark = "?" if pattern.endswith("?") else ""
        spellings = frozenset(spelling + mark for spelling in scpi.spellings(pattern.removesuffix("?")))
        kinds = {"command", kind, "query" if mark else ""} - {""}
        table |= dict.fromkeys(spellings, _Row(do, frozenset(kinds), spellings))
    return table


_TABLE = _table()


def _lookup(command: scpi.Command) -> _Row:
    """The row of a header; a numeric suffix 1 is the same as none (SCPI-1999 vol. 1 §6.2.5.2)."""
    mark = "?" if command.query else ""
    row = _TABLE.get(command.header + mark)
    if row is not None:
        return row
    nodes = [node.rstrip("0123456789") for node in command.header.split(":")]
    row = _TABLE.get(":".join(nodes) + mark)
    if row is None:
        raise scpi.ScpiError(-113)
    if any(node != bare and node != f"{bare}1" for node, bare in zip(command.header.split(":"), nodes, strict=True)):
        raise scpi.ScpiError(-114)
    return row


def _spoken(command: scpi.Command, row: _Row) -> frozenset[str]:
    """How a fault's ``when`` may name this command: any spelling, alone or with its first parameter."""
    if not command.params:
        return row.spellings
    return row.spellings | {f"{spelling} {command.params[0].upper()}" for spelling in row.spellings}
