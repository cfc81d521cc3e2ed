"""``ringtrue checkup``: everything a bug report needs."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from harness.cli.options import JsonOption, StationOption, StoreOption
from harness.cli.output import clock, console, environment, print_json_line
from harness.errors import RingtrueError

_LIBRARIES = (
    "numpy", "scipy", "sqlalchemy", "pydantic", "typer", "rich", "pyvisa", "pyvisa-py", "pyserial", "jinja2",
    "platformdirs", "pysqlite3",
)  # fmt: skip


def checkup(station: StationOption = None, store: StoreOption = None, json: JsonOption = False) -> None:
    """Everything a bug report needs: versions, and where code, station file and store were found.

    Touches no instrument.

    Example: ringtrue checkup
    """
    found = _findings(station, store)
    if json:
        print_json_line(found)
        return
    from rich.table import Table
    from rich.text import Text

    from harness.report.words import visible

    table = Table.grid(padding=(0, 2))
    for key, value in found.items():
        text = ", ".join(f"{name} {version}" for name, version in value.items()) if isinstance(value, dict) else value
        table.add_row(key, Text(visible(str(text))))
    console().print(table)


def _findings(station: str | None, store: str | None) -> dict[str, Any]:
    import platform
    import sys

    from harness import __version__
    from harness.store import sqlite_version

    return {
        "ringtrue": __version__,
        "harness": _place("harness"),
        "drivers": _place("drivers"),
        "sim_instruments": _place("sim_instruments"),
        "python": f"{platform.python_implementation()} {platform.python_version()} ({sys.executable})",
        "platform": platform.platform(),
        "sqlite": sqlite_version(),
        "libraries": _versions(),
        "station": _station(station),
        "store": _store(store),
    }


def _place(package: str) -> str:
    """Where a package would be loaded from, without importing it."""
    from importlib.util import find_spec

    spec = find_spec(package)
    return str(Path(spec.origin).parent) if spec and spec.origin else "not found"


def _station(option: str | None) -> str:
    from harness.cli.output import read_text
    from harness.station import parse_station, station_path

    try:
        path = station_path(option, environment())
        spec = parse_station(read_text(path), str(path))
    except RingtrueError as error:
        return error.sentence()
    return f"{spec.name} ({path}), meter {spec.devices.meter.resource} as {spec.devices.meter.dialect}"


def _store(option: str | None) -> str:
    from harness.station import store_url
    from harness.store import open_store

    url = store_url(option, environment())
    try:
        with open_store(url, mode="read", now=clock()) as store:
            count = len(store.lots())
            return f"{url}: {count} {'lot' if count == 1 else 'lots'}"
    except RingtrueError as error:
        return error.sentence()


def _versions() -> dict[str, str]:
    from importlib import metadata

    out = {}
    for name in _LIBRARIES:
        try:
            out[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            out[name] = "not installed"
    return out
