"""``ringtrue screen``: parts at the station."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from harness.cli.options import JsonOption, LimitsOption, StationOption, StoreOption
from harness.cli.output import clock, console, environment, print_json_line, read_limits, read_text, say, software
from harness.errors import SetupError

if TYPE_CHECKING:
    from harness.records import LimitSet
    from harness.run.events import Event
    from harness.run.part import Job
    from harness.run.serials import SerialSource
    from harness.station import Station


def screen(
    lot: Annotated[str, typer.Argument(metavar="LOT", help="The lot's id.")],
    limits: LimitsOption,
    station: StationOption = None,
    serials: Annotated[
        str | None,
        typer.Option(
            "--serials",
            metavar="FILE|-|auto",
            help="Serials from a file, standard input, or numbered by lot, tray and position. "
            "Else the scanner, else the keyboard.",
            show_default=False,
        ),
    ] = None,
    tray: Annotated[int, typer.Option("--tray", min=1, max=10_000, help="Places of a tray, for --serials auto.")] = 20,
    operator: Annotated[
        str | None, typer.Option("--operator", help="Who screens. Else the station file, the login name.")
    ] = None,
    poled: Annotated[
        str | None,
        typer.Option("--poled", metavar="TIME", help="When the lot was poled, ISO 8601, e.g. 2026-11-20T06:00Z."),
    ] = None,
    store: StoreOption = None,
    json: JsonOption = False,
) -> None:
    """Screen parts at the station: measure, judge, record, and only then show.

    An existing lot under the same limits goes on where it stopped. Ctrl-C ends after the part in hand.

    Discs hold charge and make it again when heated or flexed: short a part before you touch its electrodes.

    Example: ringtrue screen LOT-7 --limits limits/mist-discs/MD-1650.toml
    """
    from harness.cli.watching import shower
    from harness.run.events import Held
    from harness.run.lot import screen_lot
    from harness.run.part import Job
    from harness.station import open_station, parse_station, station_path, store_url

    _check_lot(lot)
    limit_set = read_limits(limits)
    age_h = None if poled is None else _age_h(poled)
    path = station_path(station, environment())
    spec = parse_station(read_text(path), str(path))
    listed = _listed(serials, limit_set)
    url = store_url(store, environment(), spec.store)
    who = operator or spec.operator or _login()
    with (
        _gentle_stop() as stopping,
        open_station(
            spec, path, url, f"ringtrue screen {lot}", clock(), f"ringtrue {software()['ringtrue']}"
        ) as opened,
    ):
        job = Job(lot, limit_set, opened.correction, opened.conditions(age_h), who, software(), clock)
        source = _source(opened, job, listed, serials == "auto", tray, stopping)
        _say_first(url, json)
        show = _show_json if json else shower(limit_set, console())
        held = False
        for event in screen_lot(opened, job, source, stopping):
            show(event)
            held = held or isinstance(event, Held)
    if held:
        raise typer.Exit(3)


def _check_lot(lot: str) -> None:
    if not lot.strip() or not lot.isprintable():
        raise SetupError(f"{lot!a} is not a lot's id.", place="LOT", remedy="Give it a name of printable characters.")


def _listed(serials: str | None, limits: LimitSet) -> tuple[str, ...] | None:
    """The serials of a list, checked whole before anything starts; None without a list."""
    from harness.run.serials import read_list

    if serials in (None, "auto"):
        return None
    if serials == "-":
        return read_list(sys.stdin.read(), "<stdin>", limits.serial_pattern)
    assert serials is not None
    return read_list(read_text(Path(serials)), serials, limits.serial_pattern)


def _source(
    station: Station,
    job: Job,
    listed: tuple[str, ...] | None,
    auto: bool,
    tray: int,
    stopping: Callable[[], bool],
) -> SerialSource:
    """Where serials come from. Without a handler a person says when the part is in place."""
    from harness.cli.typing_in import TypedLines
    from harness.run import serials as s

    confirm = None if station.bench.has_handler else TypedLines(sys.stdin, stopping, "In place? Enter: ")
    if listed is not None:
        # a list given by a script at a bench without a handler is measured as it comes
        return s.FromList(listed, confirm if sys.stdin.isatty() else None)
    if auto:
        return s.Numbered(job.lot, tray, s.auto_start(_serials_of(station, job.lot), job.lot, tray), confirm)
    if station.bench.has_scanner:
        return s.FromScanner(station.bench)
    return s.FromKeyboard(TypedLines(sys.stdin, stopping, "Serial: "))


def _say_first(store: str, json: bool) -> None:
    """Where records go, and the caution that belongs before every touch; quiet."""
    from harness.report.words import CAUTIONS

    out = console(err=json)
    out.print(CAUTIONS[0], style="dim")
    out.print(f"Records go to {store}.", style="dim", markup=False)


def _serials_of(station: Station, lot: str) -> list[str]:
    if lot not in {info.lot for info in station.store.lots()}:
        return []
    # an interrupted part is measured again under its own number
    return [summary.serial for summary in station.store.lot_summaries(lot) if summary.final]


def _age_h(poled: str) -> float:
    """Hours since poling. A time without a zone is local."""
    try:
        then = datetime.fromisoformat(poled).astimezone()
    except ValueError as exc:
        raise SetupError(
            f"'{poled}' is not a time.", place="--poled", remedy="Write it as 2026-11-20T06:00 or with a zone."
        ) from exc
    hours = (datetime.fromisoformat(clock()) - then).total_seconds() / 3600
    if hours < 0:
        raise SetupError(f"{poled} lies in the future.", place="--poled", remedy="Give the time of poling.")
    return hours


def _login() -> str:
    import getpass

    try:
        return getpass.getuser()
    except (KeyError, OSError):  # a container without a user name
        return "unknown"


@contextmanager
def _gentle_stop() -> Iterator[Callable[[], bool]]:
    """SIGINT and SIGTERM ask for a stop after the part in hand; a second one stops at once."""
    asked = 0

    def ask(*_: object) -> None:
        nonlocal asked
        asked += 1
        if asked > 1:
            raise KeyboardInterrupt
        if sys.stderr.isatty():
            print(file=sys.stderr)  # the terminal has just echoed ^C on this line
        say("stopping after the part in hand; once more stops at once.")

    before = {number: signal.signal(number, ask) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield lambda: asked > 0
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _show_json(event: Event) -> None:
    """A line an attempt on standard output; everything else for people on standard error."""
    from harness.cli.showing import event_text
    from harness.report import json_form
    from harness.run.events import Recorded

    if not isinstance(event, Recorded):
        if text := event_text(event):
            print(text, file=sys.stderr, flush=True)
        return
    record, opening = event.record, event.record.opening
    print_json_line(
        {
            **json_form.judgement_form(opening.serial, f"{opening.lot}/{event.written.seq}", record.judgement),
            "record": f"{event.written.chain}/{event.written.seq}",
            "attempt": opening.number,
            "final": record.final,
        }
    )
