"""``ringtrue lot``: lot statistics."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from harness.cli.options import JsonOption, StoreOption
from harness.cli.output import busy, console, open_reading, print_json_line, write_text


def lot(
    lot: Annotated[str, typer.Argument(metavar="LOT", help="The lot's id.")],
    html: Annotated[
        Path | None, typer.Option("--html", metavar="FILE", help="Write a page that stands by itself.")
    ] = None,
    csv: Annotated[Path | None, typer.Option("--csv", metavar="FILE", help="Write one row a part.")] = None,
    store: StoreOption = None,
    json: JsonOption = False,
) -> None:
    """A lot's counts, yields, fail reasons, and the spread and capability of each characteristic.

    Example: ringtrue lot LOT-7 --html lot-7.html
    """
    from harness import desk
    from harness.report import terminal
    from harness.statistics.lot import to_json

    with busy("Reading the lot …"), open_reading(store) as opened:
        statistics, limits = desk.lot_statistics(opened, lot)
        if html is not None:
            write_text(html, desk.lot_html(opened, lot))
        if csv is not None:
            write_text(csv, desk.lot_csv(opened, lot))
    if json:
        print_json_line(to_json(statistics, lot, limits))
    else:
        console().print(terminal.lot_summary(statistics, lot, limits))
        for path in (html, csv):
            if path is not None:
                print(f"Written: {path}")
