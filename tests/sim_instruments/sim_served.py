"""A bench with stand-in parts (a series resonance beside a capacitance), pure or behind real connections."""

from __future__ import annotations

import asyncio
import json
import os
import select
import socket
import threading
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np
import pytest
import serial

from sim_instruments.bench import Bench, Specimen
from sim_instruments.faults import Fault
from sim_instruments.rig import Rig

R1, L1, C1, C0, STRAY = 20.0, 1.0e-3, 9.3e-12, 1.0e-9, 4e-12  # invented: about 1.65 MHz


def standin_impedance(f_hz: np.ndarray, drive_v: float) -> np.ndarray:
    """Series R1 L1 C1 beside C0."""
    s = 2j * np.pi * np.asarray(f_hz)
    return 1 / (s * C0 + 1 / (R1 + s * L1 + 1 / (s * C1)))


def open_impedance(f_hz: np.ndarray, drive_v: float) -> np.ndarray:
    """Nothing but a stray capacitance."""
    return 1 / (2j * np.pi * np.asarray(f_hz) * STRAY)


def standin_lot(parts: int) -> list[Specimen]:
    """Parts that differ in their serials alone."""
    truth = {"defect": "sound", "family": "MD-1650", "values": {"fs": 1.65e6, "fr": None}}
    return [Specimen(f"MD-{n:04d}", standin_impedance, lambda: truth) for n in range(1, parts + 1)]


@pytest.fixture
def bench() -> Bench:
    """Three parts in the tray, nothing in the fixture."""
    return Bench(standin_lot(3), open_impedance)


class Served:
    """A rig that serves from a thread of its own, and the station's ends of its lines."""

    def __init__(self, rig_of: Callable[[], Rig]) -> None:
        self._loop = asyncio.new_event_loop()
        self._thread = threading.Thread(target=self._loop.run_forever)
        self._thread.start()
        self._opened: list[Any] = []

        async def start() -> None:
            self.rig = rig_of()
            self.at = await self.rig.open()

        self._run(start())

    def _run(self, work: Any) -> Any:
        return asyncio.run_coroutine_threadsafe(work, self._loop).result(10)

    def close(self) -> None:
        for opened in self._opened:
            opened.close()
        self._run(self.rig.close())
        left = self._run(self._tasks_left())
        self._loop.call_soon_threadsafe(self._loop.stop)
        self._thread.join(10)
        self._loop.close()
        assert left == []

    async def _tasks_left(self) -> list[str]:
        await asyncio.sleep(0)
        return [repr(task) for task in asyncio.all_tasks() if task is not asyncio.current_task()]

    @property
    def hislip_port(self) -> int:
        return int(self.at.hislip.split(",")[1].split("::")[0])

    def tcp(self, timeout_s: float = 5) -> socket.socket:
        return self._keep(socket.create_connection(("127.0.0.1", int(self.at.socket.split("::")[2])), timeout_s))

    def raw_hislip(self) -> socket.socket:
        return self._keep(socket.create_connection(("127.0.0.1", self.hislip_port), 5))

    def serial(self, path: str) -> serial.Serial:
        return self._keep(serial.Serial(path, 9600, timeout=5))

    def control(self) -> Control:
        host, port = self.at.control.split(":")
        return Control(self._keep(socket.create_connection((host, int(port)), 5)))

    def _keep(self, opened: Any) -> Any:
        self._opened.append(opened)
        return opened


class Control:
    """A client of the control port."""

    def __init__(self, connection: socket.socket) -> None:
        self._lines = connection.makefile("rwb")

    def send(self, request: dict[str, Any]) -> None:
        self._lines.write(json.dumps(request).encode() + b"\n")
        self._lines.flush()

    def receive(self) -> dict[str, Any]:
        return json.loads(self._lines.readline())

    def __call__(self, request: dict[str, Any]) -> dict[str, Any]:
        self.send(request)
        return self.receive()


@pytest.fixture
def serving() -> Iterator[Callable[..., Served]]:
    """Start a served rig: ``serving(parts=3, faults=[…], wait_s=…)``; all are closed, and leave nothing behind."""
    running: list[Served] = []

    def start(parts: int = 3, faults: Sequence[Fault] = (), **options: Any) -> Served:
        served = Served(lambda: Rig(standin_lot(parts), open_impedance, faults=faults, **options))
        running.append(served)
        return served

    yield start
    for served in running:
        served.close()


@pytest.fixture
def receive() -> Callable[[socket.socket, int], bytes]:
    """Exactly so many bytes from a socket."""

    def exact(connection: socket.socket, count: int) -> bytes:
        data = b""
        while len(data) < count:
            piece = connection.recv(count - len(data))
            assert piece, f"closed after {data!r}"
            data += piece
        return data

    return exact


@pytest.fixture
def is_quiet() -> Callable[[Any], bool]:
    """Whether nothing comes within a fifth of a second, and the other side has not closed either."""

    def quiet(line: Any) -> bool:
        return not select.select([line], [], [], 0.2)[0]

    return quiet


@pytest.fixture
def descriptors() -> Callable[[], set[str]]:
    """What this process has open."""

    def opened() -> set[str]:
        found = set()
        for number in os.listdir("/proc/self/fd"):
            try:
                found.add(f"{number}:{os.readlink(f'/proc/self/fd/{number}')}")
            except FileNotFoundError:
                continue
        return found

    return opened
