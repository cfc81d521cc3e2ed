"""``ringtrue fit``: characteristics of logged sweeps."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from harness.cli.options import FixtureOption, JsonOption
from harness.cli.output import console, print_error, print_json_line
from harness.errors import FileMistakes, Mistake, SetupError


def fit(
    files: Annotated[list[Path], typer.Argument(metavar="FILE...", help="Logged sweeps: CSV or Touchstone.")],
    search: Annotated[
        tuple[str, str] | None,
        typer.Option("--search", metavar="LO HI", help="Look for the wanted mode here only, e.g. 1.6MHz 1.7MHz."),
    ] = None,
    fixture: FixtureOption = None,
    json: JsonOption = False,
) -> None:
    """Characteristics of logged sweeps, with uncertainties; no limits needed.

    The wanted mode is the one of largest conductance. Files that cannot be read are reported as bad-data, the
    others are still fitted, and the exit code is 2.

    Example: ringtrue fit disc-07.csv --search 1.5MHz 1.9MHz
    """
    from harness.analysis import fit_log
    from harness.records import FitStatus
    from harness.replay import read_file
    from harness.report import json_form, terminal

    _check_fixture(fixture)
    window = None if search is None else _window(*search)
    troubles: list[FileMistakes] = []
    forms = []
    out = console()
    for path in files:
        try:
            found = fit_log(read_file(path, fixture), window)
        except FileMistakes as trouble:
            troubles.append(trouble)
            forms.append(json_form.bad_file_form(str(path), trouble.mistakes[0].sentence()))
            continue
        if found.status is FitStatus.BAD_DATA:
            troubles.append(FileMistakes([Mistake(str(path), None, "", f"{found.message}.")]))
        forms.append(json_form.fit_form(str(path), found))
        if not json:
            out.print(terminal.fit_table(str(path), found))
    if json:
        print_json_line(forms)
    for each in troubles:
        print_error(each)
    if troubles:
        raise typer.Exit(2)


def _check_fixture(fixture: str | None) -> None:
    if fixture not in (None, "series", "shunt"):
        raise SetupError(f"'{fixture}' is not a fixture.", place="--fixture", remedy="Say series or shunt.")


def _window(low: str, high: str) -> tuple[float, float]:
    """The search window in hertz; bare numbers are hertz."""
    from harness.quantities import QuantityError, parse

    ends = []
    for text in (low, high):
        try:
            ends.append(float(text))
        except ValueError:
            try:
                ends.append(parse(text, "Hz"))
            except QuantityError as exc:
                raise SetupError(f"{exc}.", place="--search") from exc
    if not 0 < ends[0] < ends[1] < float("inf"):
        raise SetupError(
            f"{low} to {high} is not a range.", place="--search", remedy="Give the lower frequency first, above zero."
        )
    return ends[0], ends[1]
