"""The simulated bench as a process: listen, write the station file, say so on one line, serve until told to stop.

SHELL (asyncio).
"""

from __future__ import annotations

import asyncio
import json
import signal
import tempfile
from collections.abc import Sequence
from contextlib import ExitStack
from dataclasses import asdict, dataclass
from pathlib import Path

from sim_instruments.faults import Fault
from sim_instruments.rig import Rig
from sim_instruments.station_file import station_text
from sim_instruments.tray import Tray

STATION_FILE = "station.toml"


@dataclass(frozen=True, slots=True)
class Options:
    """``directory`` None: a temporary one, removed at the end."""

    seed: int
    faults: Sequence[Fault]
    ms_per_point: float
    directory: Path | None
    by_hand: bool = False


async def serve(tray: Tray, options: Options) -> None:
    """Run the bench until SIGTERM or SIGINT."""
    told = asyncio.Event()
    for number in (signal.SIGTERM, signal.SIGINT):
        asyncio.get_running_loop().add_signal_handler(number, told.set)
    rig = Rig(
        tray.lot,
        tray.empty,
        seed=options.seed,
        faults=options.faults,
        s_per_point=options.ms_per_point / 1000,
        by_hand=options.by_hand,
    )
    try:
        addresses = await rig.open()
        with ExitStack() as stack:
            directory = options.directory or Path(stack.enter_context(tempfile.TemporaryDirectory(prefix="sim-bench-")))
            station = directory.resolve() / STATION_FILE
            station.write_text(station_text(addresses, tray.fixture), encoding="utf-8")
            print(json.dumps({"ready": True, **asdict(addresses), "station": str(station)}), flush=True)
            await told.wait()
    finally:
        await rig.close()
