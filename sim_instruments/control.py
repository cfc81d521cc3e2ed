"""The control port: one JSON object a line, answered by one JSON object a line.

SHELL (asyncio). ``{"command": "present", "serial": "MD-0001"}`` or, shorter, ``{"present": "MD-0001"}``. The answer
is ``{"ok": true, …}`` or ``{"ok": false, "error": sentence}``.

=================  =========================  ========================================================================
command            keys                       does
=================  =========================  ========================================================================
present            serial                     part into the fixture, then its serial from the scanner; none: next one
load               serial                     the same without a scan
eject                                         part out, unjudged
scan                                          the scanner reads the part in the fixture once more
fault              name, when, times, seconds arms a fault (``faults``)
clear-faults                                  disarms all
truth              serial                     what each part is: defect, family, values
lot                                           the serials in order
status                                        part in the fixture, verdicts received, faults still to strike
=================  =========================  ========================================================================
"""

from __future__ import annotations

import asyncio
import json
from collections.abc import Awaitable, Callable, Mapping
from dataclasses import asdict
from typing import Protocol

from sim_instruments.bench import Bench, BenchRefusal
from sim_instruments.faults import FaultBook, FaultMistake, read_fault
from sim_instruments.listener import Streams

Json = dict[str, object]


class Controlled(Protocol):
    """What the control port acts on."""

    bench: Bench
    faults: FaultBook

    async def put_in(self, serial: str | None, scan: bool) -> str: ...

    def eject(self) -> str | None: ...

    def scan(self) -> str: ...

    def truth(self, serial: str | None) -> dict[str, Mapping[str, object]]: ...


def control_port(rig: Controlled) -> Streams:
    """The client handler for a ``Listener``."""

    async def serve_client(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        while line := await _line(reader):
            if line.strip():
                writer.write(json.dumps(await carry_out(rig, line), allow_nan=False).encode("utf-8") + b"\n")
                await writer.drain()

    return serve_client


async def _line(reader: asyncio.StreamReader) -> bytes:
    try:
        return await reader.readline()
    except ValueError:  # a line beyond the reader's limit
        return b""


async def carry_out(rig: Controlled, line: bytes) -> Json:
    """One request line to its answer; whatever is wrong with it is said in the answer."""
    try:
        command, keys = read_request(line)
        return {"ok": True, **await _COMMANDS[command].do(rig, keys)}
    except (BenchRefusal, FaultMistake) as refusal:
        return {"ok": False, "error": str(refusal)}


def read_request(line: bytes) -> tuple[str, Json]:
    """The command and its keys, short form written out; raises BenchRefusal with a sentence."""
    try:
        request = json.loads(line)
    except ValueError as trouble:
        raise BenchRefusal(f"not a JSON object on one line: {trouble}") from None
    if not isinstance(request, dict):
        raise BenchRefusal("not a JSON object")
    if "command" not in request:
        request = _written_out(request)
    keys = dict(request)
    command = keys.pop("command")
    if not isinstance(command, str) or command not in _COMMANDS:
        raise BenchRefusal(f"there is no command {command!r}; there are {', '.join(_COMMANDS)}")
    unknown = sorted(set(keys) - set(_COMMANDS[command].keys))
    if unknown:
        raise BenchRefusal(f"'{command}' has no key '{unknown[0]}'")
    return command, keys


def _written_out(request: Json) -> Json:
    """``{"present": "MD-0001"}`` → ``{"command": "present", "serial": "MD-0001"}``; null and true stand for nothing."""
    found = [name for name in request if name in _COMMANDS]
    if len(found) != 1:
        raise BenchRefusal(f'no command; write {{"command": …}} with one of {", ".join(_COMMANDS)}')
    rest = dict(request)
    main = rest.pop(found[0])
    if main is None or main is True:
        return {"command": found[0], **rest}
    keys = _COMMANDS[found[0]].keys
    if not keys:
        raise BenchRefusal(f"'{found[0]}' takes nothing with it")
    return {"command": found[0], keys[0]: main, **rest}


def _serial(keys: Json) -> str | None:
    serial = keys.get("serial")
    if serial is not None and not isinstance(serial, str):
        raise BenchRefusal(f"'serial' must be text, not {serial!r}")
    return serial


async def _present(rig: Controlled, keys: Json) -> Json:
    return {"serial": await rig.put_in(_serial(keys), scan=True)}


async def _load(rig: Controlled, keys: Json) -> Json:
    return {"serial": await rig.put_in(_serial(keys), scan=False)}


async def _eject(rig: Controlled, _: Json) -> Json:
    return {"serial": rig.eject()}


async def _scan(rig: Controlled, _: Json) -> Json:
    return {"serial": rig.scan()}


async def _fault(rig: Controlled, keys: Json) -> Json:
    fault = read_fault(keys)
    rig.faults.arm(fault)
    return {"fault": fault.name}


async def _clear_faults(rig: Controlled, _: Json) -> Json:
    rig.faults.clear()
    return {}


async def _truth(rig: Controlled, keys: Json) -> Json:
    return {"truth": rig.truth(_serial(keys))}


async def _lot(rig: Controlled, _: Json) -> Json:
    return {"lot": [specimen.serial for specimen in rig.bench.lot]}


async def _status(rig: Controlled, _: Json) -> Json:
    bench = rig.bench
    verdicts = {serial: [asdict(verdict) for verdict in given] for serial, given in bench.verdicts.items()}
    return {
        "fixture": bench.serial,
        "mode": "hand" if bench.by_hand else "feeding",
        "verdicts": verdicts,
        "faults": rig.faults.pending(),
    }


class _Row:
    """A command: what does it, and the keys it takes, the main one first."""

    def __init__(self, do: Callable[[Controlled, Json], Awaitable[Json]], *keys: str) -> None:
        self.do = do
        self.keys = keys


_COMMANDS = {
    "present": _Row(_present, "serial"),
    "load": _Row(_load, "serial"),
    "eject": _Row(_eject),
    "scan": _Row(_scan),
    "fault": _Row(_fault, "name", "when", "times", "seconds"),
    "clear-faults": _Row(_clear_faults),
    "truth": _Row(_truth, "serial"),
    "lot": _Row(_lot),
    "status": _Row(_status),
}
