"""``ringtrue limits``: limit files."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from harness.cli.options import JsonOption
from harness.cli.output import console, print_error, print_json_line, read_limits
from harness.errors import FileMistakes

app = typer.Typer(help="Limit files: check them, have them explained.", no_args_is_help=True, rich_markup_mode=None)


@app.command("check")
def check(
    files: Annotated[list[Path], typer.Argument(metavar="FILE...", help="Limit files.")], json: JsonOption = False
) -> None:
    """Check limit files: every mistake in one go, by line. Exit code 2 when there is one.

    Example: ringtrue limits check limits/mist-discs/MD-1650.toml
    """
    from harness.report import json_form

    troubles: list[FileMistakes] = []
    forms = []
    for path in files:
        try:
            limits = read_limits(path)
        except FileMistakes as trouble:
            troubles.append(trouble)
            mistakes = [{"line": m.line, "key": m.key, "text": m.text, "remedy": m.remedy} for m in trouble.mistakes]
            forms.append({"file": str(path), "sound": False, "mistakes": mistakes})
            continue
        forms.append({"file": str(path), "sound": True, "limits": json_form.limit_set_form(limits), "mistakes": []})
        if not json:
            count = len(limits.requirements)
            print(f"{path}: sound. {limits.part_number} revision {limits.revision}, {count} requirements.")
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
    from harness.report import json_form

    limits = read_limits(file)
    lines = sentences(limits)
    if json:
        print_json_line({"file": str(file), "limits": json_form.limit_set_form(limits), "sentences": lines})
        return
    out = console()
    for line in lines:
        out.print(line, markup=False)
