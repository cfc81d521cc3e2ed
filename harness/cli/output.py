"""What every command prints with, and what it needs from the outside: clock, environment, files."""

from __future__ import annotations

import os
import re
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from harness.errors import FileMistakes, Mistake, RingtrueError, SetupError

if TYPE_CHECKING:
    from rich.console import Console

    from harness.records import LimitSet
    from harness.store import Store


def clock() -> str:
    """Now: UTC, ISO 8601 with microseconds and Z."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def environment() -> Mapping[str, str]:
    return os.environ


def console(*, err: bool = False) -> Console:
    """A rich console on standard output (or error), plain where that is no terminal, wide enough for a log."""
    from rich.console import Console

    stream = sys.stderr if err else sys.stdout
    width = None if stream.isatty() else 160
    return Console(stderr=err, highlight=False, soft_wrap=not stream.isatty(), width=width)


def print_json_line(value: object) -> None:
    """One JSON document on a line of its own, flushed."""
    from harness.report.json_form import dumps

    print(dumps(value), flush=True)


def print_error(error: RingtrueError) -> None:
    """Every sentence of ``error`` on standard error: a line each in a log, wrapped between words on a terminal."""
    for line in str(error).splitlines():
        say(line)


def say(sentence: str) -> None:
    """A sentence of the program itself, on standard error."""
    text = f"ringtrue: {plain_times(sentence)}"
    if sys.stderr.isatty():
        import shutil
        import textwrap

        width = shutil.get_terminal_size().columns
        text = "\n".join(textwrap.wrap(text, width, subsequent_indent="  ", break_on_hyphens=False)) or text
    print(text, file=sys.stderr, flush=True)


def plain_times(text: str) -> str:
    """Times of records as people read them: to the second.

    >>> plain_times("since 2026-11-20T06:12:09.123456Z")
    'since 2026-11-20 06:12:09 UTC'
    """
    return re.sub(r"(\d{4}-\d\d-\d\d)T(\d\d:\d\d:\d\d)(?:\.\d+)?Z", r"\1 \2 UTC", text)


@contextmanager
def busy(text: str) -> Iterator[None]:
    """Something that may take a while: says so on a terminal, and takes it away again."""
    if not sys.stderr.isatty():
        yield
        return
    with console(err=True).status(text):
        yield


def read_text(path: Path) -> str:
    """A text file in UTF-8, newlines as they are. Raises FileMistakes."""
    try:
        return path.read_bytes().decode("utf-8")
    except UnicodeDecodeError as exc:
        line = exc.object[: exc.start].count(b"\n") + 1
        raise FileMistakes([Mistake(str(path), line, "", "the file is not UTF-8 text.", "Save it as UTF-8.")]) from exc
    except OSError as exc:
        text = f"the file cannot be read ({exc.strerror or exc})."
        raise FileMistakes([Mistake(str(path), None, "", text, "Check its name and its permissions.")]) from exc


def write_text(path: Path, text: str) -> None:
    """Write a file asked for on the command line. Raises SetupError."""
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as exc:
        raise SetupError(f"the file cannot be written ({exc.strerror or exc}).", place=str(path)) from exc


def read_limits(path: Path) -> LimitSet:
    from harness.judging.limit_file import parse_limits

    return parse_limits(read_text(path), str(path))


def open_reading(store: str | None) -> Store:
    """The store, read-only; never made by reading."""
    from harness.store import open_store

    return open_store(store_place(store), mode="read", now=clock())


def store_place(store: str | None) -> str:
    """Where the store is: the option, RINGTRUE_STORE, the default station file's, the user's data folder."""
    from harness.station.places import store_url

    named = store or environment().get("RINGTRUE_STORE")
    return named or store_url(None, environment(), _station_store())


def _station_store() -> str | None:
    """The store that the default station file names, where there is one."""
    from harness.station import parse_station, station_path

    try:
        path = station_path(None, environment())
    except SetupError:  # no station on this machine: reading needs none
        return None
    return parse_station(read_text(path), str(path)).store


def software() -> dict[str, str]:
    """What judged: versions that go into every record."""
    import platform

    import numpy

    from harness import __version__

    return {"ringtrue": __version__, "python": platform.python_version(), "numpy": numpy.__version__}
