"""The simulated bench as a process with trouble scripted, and a station that screens on it.

with FaultyBench(lot_file) as rig:
    rig.arm("nan", when="sweep 2")
    run = rig.screen("socket", ["MD-0001", "MD-0002"], store_path)
"""

from __future__ import annotations

import json
import socket
import subprocess
import sys
import threading
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import drivers
from harness.errors import RingtrueError
from harness.judging.limit_file import parse_limits
from harness.records import LimitSet, Record
from harness.run.events import BenchTrouble, Event, Ready, Recorded, Refused
from harness.run.lot import screen_lot
from harness.run.part import Job
from harness.run.serials import FromScanner
from harness.station import find_limits, open_station, parse_station

NOW = "2026-03-02T08:00:00.000000Z"
LOT = "L-7"
TIMEOUT = "0.5 s"
_DIALECT = Path(drivers.__file__).with_name("dialects") / "scpi-analyser.toml"

# MD-0001 sound, MD-0002 with a resonance far off, MD-0003 sound, MD-0004 with an open lead; all invented.
# The last one is never put in: a handler with nothing left to come would say so and end the lot.
LOT_FILE = """\
family = "MD-1650"
seed = 11
[[part]]
count = 1
[[part]]
defect = "wrong-thickness"
[[part]]
count = 1
[[part]]
defect = "open-lead"
[[part]]
count = 1
"""


def limits(attempts: int = 2, points: int = 201) -> LimitSet:
    """The mist disc's limits, with another number of attempts and fewer points."""
    text = find_limits("mist-discs/MD-1650.toml").read_text(encoding="utf-8")
    text = text.replace("attempts = 2", f"attempts = {attempts}").replace("points = 401", f"points = {points}")
    return parse_limits(text, "MD-1650.toml")


@dataclass
class Run:
    """What came of one screening: events in order, and the error that ended it, if one did."""

    events: list[Event] = field(default_factory=list)
    error: RingtrueError | None = None

    @property
    def records(self) -> list[Record]:
        return [event.record for event in self.events if isinstance(event, Recorded)]

    @property
    def refused(self) -> list[str]:
        return [event.text for event in self.events if isinstance(event, Refused)]

    @property
    def trouble(self) -> list[str]:
        return [event.text for event in self.events if isinstance(event, BenchTrouble)]

    def codes(self) -> list[str]:
        """The first reason of each attempt without a verdict."""
        return [r.judgement.reasons[0].code for r in self.records if r.judgement.verdict.value == "no verdict"]

    def verdicts(self) -> dict[str, set[str]]:
        """Every pass or fail that was recorded, by serial."""
        found: dict[str, set[str]] = {}
        for record in self.records:
            if record.judgement.verdict.value != "no verdict":
                found.setdefault(record.opening.serial, set()).add(record.judgement.verdict.value)
        return found


class FaultyBench:
    """A context: the process ends with it."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        quick = _DIALECT.read_text(encoding="utf-8").replace("s_per_point = 0.05", "s_per_point = 0.001")
        self._dialect = folder / "quick.toml"
        self._dialect.write_text(quick, encoding="utf-8")
        lot = folder / "lot.toml"
        lot.write_text(LOT_FILE, encoding="utf-8")
        command = [sys.executable, "-m", "sim_instruments", "serve", "--ms-per-point", "0", "--lot", str(lot)]
        self._process = subprocess.Popen(
            [*command, "--dir", str(folder)], stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, text=True
        )
        assert self._process.stdout is not None
        self.at: dict[str, Any] = json.loads(self._process.stdout.readline())
        self.control(command="eject")  # from here on parts are put in by hand

    def __enter__(self) -> FaultyBench:
        return self

    def __exit__(self, *_: object) -> None:
        self._process.terminate()
        self._process.communicate(timeout=20)

    # ── the hand at the bench ────────────────────────────────────────────────────────────────

    def control(self, **order: object) -> dict[str, Any]:
        """One order to the control port; its answer."""
        host, port = self.at["control"].split(":")
        with socket.create_connection((host, int(port)), 70) as line, line.makefile("rw") as text:
            text.write(json.dumps(order) + "\n")
            text.flush()
            return dict(json.loads(text.readline()))

    def arm(self, name: str, **keys: object) -> None:
        answer = self.control(command="fault", name=name, **keys)
        assert answer["ok"], answer

    def outcomes(self, serial: str) -> list[str]:
        """What the handler was told of a part, all runs of this bench together."""
        return [one["outcome"] for one in self.control(command="status")["verdicts"].get(serial, [])]

    def truth(self, serial: str) -> dict[str, Any]:
        return dict(self.control(command="truth", serial=serial)["truth"][serial])

    # ── the station ──────────────────────────────────────────────────────────────────────────

    def station_text(self, wire: str, timeout: str = TIMEOUT) -> str:
        """The bench's own station file, over ``wire`` ("hislip" or "socket"), and impatient with a silent meter."""
        text = Path(self.at["station"]).read_text(encoding="utf-8")
        text = text.replace(self.at["hislip"], self.at[wire]).replace('timeout = "5 s"', f'timeout = "{timeout}"')
        return text.replace('dialect = "scpi-analyser"', f'dialect = "{self._dialect}"')

    def screen(
        self, wire: str, serials: Sequence[str], store: Path, of: LimitSet | None = None, timeout: str = TIMEOUT
    ) -> Run:
        """Put these parts in by hand one after another, scanned, and screen until the last has its final verdict.

        Faults are cleared and the fixture emptied at the end, whatever happened.
        """
        run = Run()
        hand = threading.Thread(target=self._put_in, args=(serials,))
        try:
            self._screen(run, hand, len(serials), self.station_text(wire, timeout), store, of or limits())
        except RingtrueError as error:
            run.error = error
        finally:
            self.control(command="clear-faults")
            while hand.is_alive():  # it waits for a verdict that will not come
                self.control(command="eject")
                hand.join(0.05)
            self.control(command="eject")
        return run

    def _put_in(self, serials: Sequence[str]) -> None:
        for serial in serials:
            self.control(command="present", serial=serial)

    def _screen(self, run: Run, hand: threading.Thread, parts: int, text: str, store: Path, of: LimitSet) -> None:
        path = self._folder / "station-variant.toml"
        path.write_text(text, encoding="utf-8")
        gone = 0

        def stopping() -> bool:
            return gone + sum(record.final for record in run.records) >= parts

        with open_station(parse_station(text, str(path)), path, str(store), "test", NOW, "ringtrue test") as station:
            job = Job(LOT, of, station.correction, station.conditions(None), "test", {}, lambda: NOW)
            for event in screen_lot(station, job, FromScanner(station.bench), stopping):
                run.events.append(event)
                gone += isinstance(event, Refused)
                if isinstance(event, Ready):
                    hand.start()
