"""``ringtrue limits``: limit files."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from harness.cli.options import JsonOption
from harness.cli.output import console, print_error, print_json_line, read_limits
from harness.errors import FileMistakes

if TYPE_CHECKING:
    from collections.abc import Sequence

    from rich.console import Console

    from harness.records import LimitSet

app = typer.Typer(help="Limit files: check them, have them explained.", no_args_is_help=True, rich_markup_mode=None)


@app.command("check")
def check(
    files: Annotated[list[Path], typer.Argument(metavar="FILE...", help="Limit files.")], json: JsonOption = False
) -> None:
    """Check limit files: every mistake in one go, by line.

    Exit code 2 when there is one. A line with ! is valid, but a careful reader would question it.

    Example: ringtrue limits check limits/mist-discs/MD-1650.toml
    """
    from harness.judging.explaining import check_sentences
    from harness.report import json_form

    troubles: list[FileMistakes] = []
    forms = []
    out = console()
    for path in files:
        try:
            limits = read_limits(path)
        except FileMistakes as trouble:
            troubles.append(trouble)
            mistakes = [{"line": m.line, "key": m.key, "text": m.text, "remedy": m.remedy} for m in trouble.mistakes]
            forms.append({"file": str(path), "sound": False, "limits": None, "mistakes": mistakes, "warnings": []})
            continue
        doubts = check_sentences(limits, str(path))
        forms.append(
            {
                "file": str(path),
                "sound": True,
                "limits": json_form.limit_set_form(limits),
                "mistakes": [],
                "warnings": doubts,
            }
        )
        if not json:
            _say_sound(out, path, limits, doubts)
    if json:
        print_json_line(forms)
    else:
        for each in troubles:
            print_error(each)
    if troubles:
        raise typer.Exit(2)


@app.command("explain")
def explain(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Limit file.")], json: JsonOption = False
) -> None:
    """Say in plain words what a limit file asks for.

    Example: ringtrue limits explain limits/mist-discs/MD-1650.toml
    """
    from harness.judging.explaining import explain as sentences
    from harness.report import json_form, terminal

    limits = read_limits(file)
    if json:
        print_json_line({"file": str(file), "limits": json_form.limit_set_form(limits), "sentences": sentences(limits)})
    else:
        console().print(terminal.limits_table(limits))


def _say_sound(out: Console, path: Path, limits: LimitSet, doubts: Sequence[str]) -> None:
    from rich.text import Text

    from harness.report.hanging import Hanging
    from harness.report.words import counted, visible

    head = Text("● SOUND", style="bold green").append(visible(f"  {path}"), style="not bold default")
    count = counted(len(limits.requirements), "requirement", "requirements")
    out.print(Hanging(head.append("  "), f"{limits.part_number} revision {limits.revision}, {count}", indent=9))
    for doubt in doubts:
        out.print(Hanging(Text("! ", style="bold yellow"), doubt))
