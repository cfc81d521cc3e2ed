"""The simulated bench as a whole: meter, scanner, handler and control port around one nest.

SHELL (asyncio). Opens the lines, wires the pure instruments to them, and closes everything again.
"""

from __future__ import annotations

import asyncio
from collections.abc import Mapping, Sequence
from contextlib import AsyncExitStack
from dataclasses import dataclass

from sim_instruments.analyser import Analyser
from sim_instruments.bench import Bench, BenchRefusal, Impedance, Specimen
from sim_instruments.control import control_port
from sim_instruments.faults import Fault, FaultBook
from sim_instruments.handler import Handler
from sim_instruments.hislip import HislipServer
from sim_instruments.listener import Listener, Streams
from sim_instruments.pty_line import PtyLine
from sim_instruments.scanner import Scanner
from sim_instruments.shared import SharedAnalyser
from sim_instruments.tcp import scpi_socket


@dataclass(frozen=True, slots=True)
class Addresses:
    """Where each part of the bench listens, as a station names it."""

    hislip: str
    socket: str
    scanner: str
    handler: str
    control: str


class Rig:
    """``wait_s``: how long ``present`` waits for the part that is being measured to get its final verdict."""

    def __init__(
        self,
        lot: Sequence[Specimen],
        empty: Impedance,
        *,
        seed: int = 0,
        faults: Sequence[Fault] = (),
        s_per_point: float = 2e-5,
        wait_s: float = 60.0,
        by_hand: bool = False,
    ) -> None:
        self.bench = Bench(lot, empty, by_hand)
        self.faults = FaultBook(faults)
        self.analyser = Analyser(self.bench, seed=seed, faults=self.faults, s_per_point=s_per_point)
        self._handler = Handler(self.bench, self.faults)
        self._scanner = Scanner(self.bench, self.faults)
        self._wait_s = wait_s
        self._changed = asyncio.Event()
        self._queue = asyncio.Lock()
        self._open = AsyncExitStack()
        self._handler_line: PtyLine | None = None
        self._scanner_line: PtyLine | None = None

    async def open(self) -> Addresses:
        """Listen everywhere; the addresses."""
        instrument = SharedAnalyser(self.analyser)
        ports = [
            await self._listen(HislipServer(instrument).serve_client),
            await self._listen(scpi_socket(instrument)),
            await self._listen(control_port(self)),
        ]
        self._handler_line = PtyLine(self._on_handler_line)
        self._open.callback(self._handler_line.close)
        self._scanner_line = PtyLine(lambda _: None)  # a scanner takes no orders
        self._open.callback(self._scanner_line.close)
        return Addresses(
            hislip=f"TCPIP::127.0.0.1::hislip0,{ports[0]}::INSTR",
            socket=f"TCPIP::127.0.0.1::{ports[1]}::SOCKET",
            scanner=self._scanner_line.path,
            handler=self._handler_line.path,
            control=f"127.0.0.1:{ports[2]}",
        )

    async def close(self) -> None:
        await self._open.aclose()

    async def _listen(self, serve_client: Streams) -> int:
        listener = Listener(serve_client)
        port = await listener.open()
        self._open.push_async_callback(listener.close)
        return port

    # ── the station's side ───────────────────────────────────────────────────────────────────

    def _on_handler_line(self, line: bytes) -> None:
        answer = self._handler.respond(line)
        self._say(answer, self._scanner.due())
        self._tell_waiting()

    def _tell_waiting(self) -> None:
        """Wake whoever waits for the nest to change; each waits on the event that was there when it looked."""
        self._changed.set()
        self._changed = asyncio.Event()

    def _say(self, handler: bytes, scanner: bytes) -> None:
        if self._handler_line is not None and handler:
            self._handler_line.write(handler)
        if self._scanner_line is not None and scanner:
            self._scanner_line.write(scanner)

    # ── the hand's side (control port) ───────────────────────────────────────────────────────

    async def put_in(self, serial: str | None, scan: bool) -> str:
        """Put a part in by hand, the next one of the lot if no serial is named; waits for the one that sits there."""
        wanted = None if serial is None else self.bench.find(serial)
        self.bench.by_hand = True
        if wanted is not None and wanted.serial in self.bench.fed:
            # the handler was quicker than the hand: this part has been in, and has its verdict
            self.bench.fed.remove(wanted.serial)
            return wanted.serial
        async with self._queue:
            await self._wait_for_room(wanted)
            specimen = wanted or self.bench.next_in_tray()
            if specimen is None:
                raise BenchRefusal("every part of the lot has had a final verdict")
            self.bench.place(specimen, scan)
            self._say(self._handler.placed(), self._scanner.due())
            return specimen.serial

    async def _wait_for_room(self, wanted: Specimen | None) -> None:
        places = (None,) if wanted is None else (None, wanted.serial)
        try:
            async with asyncio.timeout(self._wait_s):
                while self.bench.serial not in places:
                    await self._changed.wait()
        except TimeoutError:
            raise BenchRefusal(
                f"part {self.bench.serial} has sat in the fixture for {self._wait_s:g} s without a final verdict"
            ) from None

    def eject(self) -> str | None:
        self.bench.by_hand = True
        serial = self.bench.eject()
        self._tell_waiting()
        return serial

    def scan(self) -> str:
        """Pull the scanner's trigger once more."""
        self._say(b"", self._scanner.scan())
        return self.bench.serial or ""

    def truth(self, serial: str | None) -> dict[str, Mapping[str, object]]:
        wanted = self.bench.lot if serial is None else [self.bench.find(serial)]
        return {specimen.serial: specimen.truth() for specimen in wanted}
