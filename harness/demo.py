"""The whole job on a simulated bench: screen a lot, judge it again under tighter limits, report it.

SHELL. Starts the simulators as a process of their own and speaks to them through real connections, as a station
would. Nothing here knows how they are made.
"""

from __future__ import annotations

import json
import os
import re
import selectors
import subprocess
import sys
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from harness.desk import lot_html
from harness.errors import SetupError, StationError
from harness.judging.limit_file import parse_limits
from harness.records import LimitSet
from harness.replay import replay_lot
from harness.run.events import Event
from harness.run.lot import screen_lot
from harness.run.part import Clock, Job
from harness.run.serials import FromScanner
from harness.station import find_limits, open_station, parse_station
from harness.store import open_store

START_S = 30.0
LOT = "DEMO-1"
LIMITS = "mist-discs/MD-1650.toml"
_SHARE = 0.5  # how much of the tolerance of fs the tighter limits keep


@dataclass(frozen=True, slots=True)
class Files:
    """Where the demonstration leaves things."""

    folder: Path

    @property
    def store(self) -> Path:
        return self.folder / "ringtrue.db"

    @property
    def tighter(self) -> Path:
        return self.folder / "tighter.toml"

    @property
    def report(self) -> Path:
        return self.folder / "lot-report.html"


def new_folder(wanted: Path | None) -> Files:
    """The folder to write into: as told, else ./ringtrue-demo, the next free number if taken.

    Raises SetupError where a folder named by hand holds a store already, or cannot be made.
    """
    folder = wanted or _free(Path("ringtrue-demo"))
    files = Files(folder)
    if files.store.exists():
        raise SetupError(
            "there is a store from an earlier demonstration here.", place=str(folder), remedy="Name another folder."
        )
    try:
        (folder / "bench").mkdir(parents=True, exist_ok=True)
    except OSError as exc:
        raise SetupError(f"the folder cannot be made ({exc.strerror}).", place=str(folder)) from exc
    return files


def _free(folder: Path) -> Path:
    k = 2
    found = folder
    while found.exists():
        found = folder.with_name(f"{folder.name}-{k}")
        k += 1
    return found


@contextmanager
def simulated_bench(parts: int, seed: int, folder: Path) -> Iterator[Mapping[str, Any]]:
    """A simulated bench as a process of its own; yields what it said when it was ready, and ends it afterwards."""
    command = [sys.executable, "-m", "sim_instruments", "serve", "--parts", str(parts), "--seed", str(seed)]
    command += ["--dir", str(folder / "bench")]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL)
    try:
        yield _ready(process)
    finally:
        process.terminate()
        try:
            process.wait(10)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
        if process.stdout is not None:
            process.stdout.close()


def _ready(process: subprocess.Popen[bytes]) -> Mapping[str, Any]:
    """The one line the bench prints once everything listens."""
    assert process.stdout is not None
    said = b""
    deadline = time.monotonic() + START_S
    with selectors.DefaultSelector() as selector:
        selector.register(process.stdout, selectors.EVENT_READ)
        while not said.endswith(b"\n"):
            if not selector.select(max(0.0, deadline - time.monotonic())):
                raise StationError(f"the simulated bench was not ready within {START_S:g} s.")
            piece = os.read(process.stdout.fileno(), 65536)
            if not piece:
                raise StationError("the simulated bench ended before it was ready.", remedy="Its own message is above.")
            said += piece
    ready: Mapping[str, Any] = json.loads(said)
    return ready


def tighter_text(text: str, low_hz: float, high_hz: float) -> str:
    """The same limit file with the tolerance of fs halved about its middle, and a revision that says so."""
    middle, half = (low_hz + high_hz) / 2, _SHARE * (high_hz - low_hz) / 2
    block = re.search(r'characteristic = "fs".*?(?=\n\[)', text, re.DOTALL)
    if block is None:
        raise SetupError("the limit file of the demonstration has no requirement of fs.")
    inner = re.sub(r"min = [\d.]+", f"min = {(middle - half) / 1e3:.3f}", block[0])
    inner = re.sub(r"max = [\d.]+", f"max = {(middle + half) / 1e3:.3f}", inner)
    text = text[: block.start()] + inner + text[block.end() :]
    return re.sub(r'revision = "[^"]*"', 'revision = "tighter"', text, count=1)


@dataclass(frozen=True, slots=True)
class Told:
    """A plain sentence about what happens next."""

    text: str


@dataclass(frozen=True, slots=True)
class Changed:
    """Parts whose verdict differs under the tighter limits, as (serial, before, after)."""

    parts: tuple[tuple[str, str, str], ...]
    of: int


def demonstrate(
    files: Files, parts: int, seed: int, clock: Clock, software: Mapping[str, str]
) -> Iterator[Event | Told | Changed]:
    """Screen a simulated lot, judge it again under tighter limits, write the report."""
    path = find_limits(LIMITS)
    text = path.read_text(encoding="utf-8")
    limits = parse_limits(text, str(path))
    yield Told(f"Starting a simulated bench with {parts} parts of {limits.part_number} (seed {seed}).")
    with simulated_bench(parts, seed, files.folder) as ready:
        yield Told(f"It listens at {ready['hislip']}, with a scanner and a part handler on pseudo-terminals.")
        yield from _screen(files, Path(ready["station"]), limits, clock, software)
    yield Told("Judging the same sweeps again, with the tolerance of fs halved. The records stay as they are.")
    fs = next(r for r in limits.requirements if r.characteristic == "fs")
    assert fs.min is not None
    assert fs.max is not None
    files.tighter.write_text(tighter_text(text, fs.min, fs.max), encoding="utf-8")
    tighter = parse_limits(files.tighter.read_text(encoding="utf-8"), str(files.tighter))
    with open_store(str(files.store), mode="read", now=clock()) as store:
        replayed = list(replay_lot(store, LOT, tighter))
        changed = [
            (r.serial, r.original.record.judgement.verdict.value, r.judgement.verdict.value)
            for r in replayed
            if r.original is not None and r.original.record.judgement.verdict is not r.judgement.verdict
        ]
        yield Changed(tuple(changed), len(replayed))
        files.report.write_text(lot_html(store, LOT), encoding="utf-8")


def _screen(
    files: Files, station_file: Path, limits: LimitSet, clock: Clock, software: Mapping[str, str]
) -> Iterator[Event]:
    spec = parse_station(station_file.read_text(encoding="utf-8"), str(station_file))
    made_by = f"ringtrue {software['ringtrue']}"
    with open_station(spec, station_file, str(files.store), "ringtrue demo", clock(), made_by) as station:
        job = Job(LOT, limits, station.correction, station.conditions(None), "demo", software, clock)
        yield from screen_lot(station, job, FromScanner(station.bench))
