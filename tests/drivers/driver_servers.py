"""Little servers and doubles for the driver tests.

``listening(script)`` runs ``script(connection)`` in a thread for each client; ``FakeMeter`` is the other end of a
MemoryWire, made of one function per command; ``SimulatedBench`` is ``python -m sim_instruments serve`` as a process.
"""

from __future__ import annotations

import contextlib
import json
import socket
import subprocess
import sys
import threading
from collections.abc import Callable, Iterator

import numpy as np

from drivers.codec.block import encode_block, encode_numbers
from drivers.codec.text import encode_list
from drivers.wire.memory import MemoryWire

SHORT_S = 0.2


@contextlib.contextmanager
def listening(script: Callable[[socket.socket], None]) -> Iterator[int]:
    """A server on a free port, given; each client gets ``script``, whose connection is closed when it returns."""
    server = socket.create_server(("127.0.0.1", 0))
    connections: list[socket.socket] = []
    clients: list[threading.Thread] = []

    def serve(connection: socket.socket) -> None:
        with connection, contextlib.suppress(ConnectionError):  # the client under test may hang up first
            script(connection)

    def accept() -> None:
        while True:
            try:
                connection, _ = server.accept()
            except OSError:
                return
            connections.append(connection)
            clients.append(threading.Thread(target=serve, args=(connection,)))
            clients[-1].start()

    acceptor = threading.Thread(target=accept)
    acceptor.start()
    try:
        yield server.getsockname()[1]
    finally:
        server.shutdown(socket.SHUT_RDWR)
        server.close()
        for connection in connections:  # a failed test may have left its end open
            with contextlib.suppress(OSError):
                connection.shutdown(socket.SHUT_RDWR)
        for thread in (acceptor, *clients):
            thread.join(5)
            assert not thread.is_alive()


def line_from(connection: socket.socket) -> bytes:
    """One line from a client, or what came before it hung up."""
    line = b""
    while not line.endswith(b"\n") and (byte := connection.recv(1)):
        line += byte
    return line


def refused_port() -> int:
    """A port where nobody listens."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        return int(server.getsockname()[1])


class FakeMeter:
    """Answers by the words of the shipped dialects. ``answers`` overrides what a question gets; ``sent`` is the log.

    Its impedance is 10 + f/1 MHz − 5j ohm, known without measuring.
    """

    def __init__(self, transfer: str = "block") -> None:
        self.transfer = transfer
        self.answers: dict[str, bytes] = {}
        self.errors: list[str] = []
        self.sent: list[str] = []
        self.identity = b"Maker,Model,Serial,1.0"
        self.f_hz = np.empty(0)
        self.drive = "0"
        self.opened = 0

    def open(self, resource: str, timeout_s: float) -> MemoryWire:
        self.opened += 1
        return MemoryWire(self.respond, resource)

    def respond(self, data: bytes) -> bytes:
        assert data.endswith(b"\n")
        line = data[:-1].decode("ascii")
        self.sent.append(line)
        command, _, argument = line.partition(" ")
        if line in self.answers:
            return self.answers[line]
        if command == "SENSe:LIST:FREQuency":
            self.f_hz = np.array([float(item) for item in argument.split(",")])
        if command == "SOURce:VOLTage":
            self.drive = argument
        return self._answer(line) + b"\n" if "?" in line else b""

    def _answer(self, line: str) -> bytes:
        if line == "SYSTem:ERRor:NEXT?":
            return self.errors.pop(0).encode() if self.errors else b'0,"No error"'
        questions: dict[str, Callable[[], bytes]] = {
            "*IDN?": lambda: self.identity,
            "*OPC?": lambda: b"1",
            "SENSe:LIST:FREQuency:POINts?": lambda: str(self.f_hz.size).encode(),
            "SOURce:VOLTage?": lambda: self.drive.encode(),
            "TRACe:DATA? FREQ": lambda: self.numbers(self.f_hz),
            "TRACe:DATA? IMP": lambda: self.numbers(self.parts()),
        }
        return questions[line]()

    def parts(self) -> np.ndarray:
        return np.column_stack((10 + self.f_hz / 1e6, np.full(self.f_hz.size, -5.0))).ravel()

    def numbers(self, values: np.ndarray) -> bytes:
        return (
            encode_block(encode_numbers(values)) if self.transfer == "block" else encode_list(values, ".15E").encode()
        )


class SimulatedBench:
    """The simulators in a process of their own; ``control`` speaks to the control port."""

    def __init__(self, parts: int = 6, seed: int = 1) -> None:
        command = [sys.executable, "-m", "sim_instruments", "serve", "--parts", str(parts), "--seed", str(seed)]
        self.process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
        assert self.process.stdout is not None
        self.ready = json.loads(self.process.stdout.readline())

    def control(self, **request: object) -> dict[str, object]:
        host, port = self.ready["control"].split(":")
        with socket.create_connection((host, int(port)), 5) as connection:
            connection.sendall(json.dumps(request).encode() + b"\n")
            answer = json.loads(line_from(connection))
        assert answer["ok"], answer
        return dict(answer)

    def close(self) -> None:
        self.process.terminate()
        self.process.communicate(timeout=10)
