"""Options and arguments that several commands share, once each."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

StoreOption = Annotated[
    str | None,
    typer.Option(
        "--store",
        metavar="URL",
        help="The store: a path or database URL. Else RINGTRUE_STORE, the station file, the user's data folder.",
        show_default=False,
    ),
]
JsonOption = Annotated[bool, typer.Option("--json", help="Print JSON in SI units instead of text.")]
LimitsOption = Annotated[
    Path, typer.Option("--limits", metavar="FILE", help="Limit file to judge by.", show_default=False)
]
StationOption = Annotated[
    str | None,
    typer.Option(
        "--station",
        metavar="FILE",
        help="Station file. Else RINGTRUE_STATION, the user's configuration folder.",
        show_default=False,
    ),
]
FixtureOption = Annotated[
    str | None,
    typer.Option(
        "--fixture",
        metavar="series|shunt",
        help="How the part sat in a transmission measurement (S21). Without it: frequencies and bandwidths only.",
        show_default=False,
    ),
]
