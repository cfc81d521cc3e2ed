"""The command line: sub-commands, and one place where errors become words and exit codes."""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from harness import __version__
from harness.cli import checkup, demo, fit, history, limits, lot, record, replay, screen
from harness.cli.output import print_error
from harness.errors import RingtrueError

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


app.command("demo")(demo.demo)
app.command("screen")(screen.screen)
app.command("fit")(fit.fit)
app.command("replay")(replay.replay)
app.command("lot")(lot.lot)
app.add_typer(limits.app, name="limits")
app.command("history")(history.history)
app.add_typer(record.app, name="record")
app.command("checkup")(checkup.checkup)


def main() -> None:
    """Run, and turn every error made on purpose into one clear message and its exit code."""
    try:
        app()
    except RingtrueError as error:
        print_error(error)
        sys.exit(error.exit_code)
    except KeyboardInterrupt:
        print("ringtrue: stopped.", file=sys.stderr)
        sys.exit(130)
    except BrokenPipeError:
        # whoever read our output has gone: nothing more to say, and Python must not try at exit
        sys.stdout = None
        sys.exit(0)
