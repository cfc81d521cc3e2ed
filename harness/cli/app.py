"""The command line: sub-commands, and one place where errors become words and exit codes."""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from harness import __version__
from harness.cli import checkup, demo, fit, history, limits, lot, record, replay, screen
from harness.cli.output import print_error, say
from harness.errors import RingtrueError

_STOPPED = 130  # as shells count a SIGINT

_SETTINGS = {"help_option_names": ["-h", "--help"]}

app = typer.Typer(
    name="ringtrue",
    help="The end-of-line station for piezoelectric transducers: sweep, judge, record, replay.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings=_SETTINGS,
)


def _version(wanted: bool) -> None:
    if wanted:
        print(f"ringtrue {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """The end-of-line station for piezoelectric transducers: sweep, judge, record, replay."""


app.command("demo", short_help="The whole job on a simulated bench.")(demo.demo)
app.command("screen", short_help="Screen parts at the station.")(screen.screen)
app.command("fit", short_help="Characteristics of logged sweeps.")(fit.fit)
app.command("replay", short_help="Judge logged sweeps again: lots or files.")(replay.replay)
app.command("lot", short_help="A lot's yield, fail reasons and capability.")(lot.lot)
app.add_typer(limits.app, name="limits")
app.command("history", short_help="Every attempt at a part.")(history.history)
app.add_typer(record.app, name="record")
app.command("checkup", short_help="What a bug report needs: versions and places.")(checkup.checkup)


def main() -> None:
    """Run, and turn every error made on purpose into one clear message and its exit code."""
    try:
        app()
    except RingtrueError as error:
        print_error(error)
        sys.exit(error.exit_code)
    except SystemExit as end:
        if end.code == _STOPPED:
            say("stopped.")
        raise
