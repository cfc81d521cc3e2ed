"""``ringtrue demo``: the whole job on a simulated bench."""

from __future__ import annotations

import sys
from pathlib import Path
from shutil import which
from typing import TYPE_CHECKING, Annotated

import typer

from harness.cli.options import JsonOption
from harness.cli.output import clock, console, print_json_line, software

if TYPE_CHECKING:
    from rich.console import Console

    from harness.demo import Changed, Files


def demo(
    parts: Annotated[int, typer.Option("--parts", min=1, max=5000, help="Parts in the lot.")] = 16,
    seed: Annotated[int, typer.Option("--seed", min=0, help="Another seed, another lot.")] = 7,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="Where to write. Else ./ringtrue-demo, or the next free."),
    ] = None,
    json: JsonOption = False,
) -> None:
    """The whole job on a simulated bench: screen a lot, judge it again under tighter limits, report it.

    Everything is real but the parts: network and serial connections, store, verdicts. Nothing is needed but this
    package.

    Example: ringtrue demo --parts 30 --seed 3
    """
    from harness.cli.watching import shower
    from harness.demo import LIMITS, LOT, Changed, Told, demonstrate, new_folder
    from harness.judging.limit_file import parse_limits
    from harness.station import find_limits

    path = find_limits(LIMITS)
    files = new_folder(out)
    out_ = console(err=json)
    show = shower(parse_limits(path.read_text(encoding="utf-8"), str(path)), out_)
    changed = 0
    for event in demonstrate(files, parts, seed, clock, software()):
        if isinstance(event, Told):
            out_.print(event.text, markup=False)
        elif isinstance(event, Changed):
            changed = len(event.parts)
            _show_changed(out_, event)
        else:
            show(event)
    if json:
        print_json_line(
            {"store": str(files.store), "lot": LOT, "report": str(files.report), "limits": str(path),
             "tighter_limits": str(files.tighter), "changed": changed}
        )  # fmt: skip
    else:
        _what_next(out_, files, LOT, path)


def _show_changed(out: Console, event: Changed) -> None:
    out.print(
        f"{len(event.parts)} of {event.of} sweeps come out differently:"
        if event.parts
        else "None comes out differently."
    )
    for serial, before, after in event.parts:
        out.print(f"  {serial}: {before} → {after}", markup=False)


def _what_next(out: Console, files: Files, lot: str, limits: Path) -> None:
    from rich.text import Text

    store = f"--store {files.store}"
    ringtrue = "ringtrue" if which("ringtrue") else sys.argv[0]
    lines = [
        f"Store:          {files.store}",
        f"Report:         {files.report}   (open it in a browser)",
        f"Limits used:    {limits}",
        f"Tighter limits: {files.tighter}",
        "",
        "Try next:",
        f"  {ringtrue} lot {lot} {store}",
        f"  {ringtrue} history MD-0001 {store}",
        f"  {ringtrue} replay {lot} --limits {files.tighter} {store}",
        f"  {ringtrue} record verify {store}",
        f"  {ringtrue} limits explain {limits}",
    ]
    out.print(Text("\n".join(["", *lines])), soft_wrap=True)
