"""``ringtrue replay``: logged sweeps judged again."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from harness.cli.fit import _check_fixture
from harness.cli.options import FixtureOption, JsonOption, LimitsOption, StoreOption
from harness.cli.output import console, open_reading, print_error, print_json_line, read_limits

if TYPE_CHECKING:
    from harness.records import LimitSet
    from harness.replay import Replayed


def replay(
    sources: Annotated[list[str], typer.Argument(metavar="SOURCE...", help="Lot ids in the store, or logged sweeps.")],
    limits: LimitsOption,
    fixture: FixtureOption = None,
    store: StoreOption = None,
    json: JsonOption = False,
) -> None:
    """Judge logged sweeps again: lots in the store, or files. Original records never change.

    Example: ringtrue replay LOT-7 --limits limits/mist-discs/MD-1650.toml
    """
    from harness.cli.showing import judgement_line, replay_summary
    from harness.report import json_form

    _check_fixture(fixture)
    limit_set = read_limits(limits)
    troubles = []
    out = console()
    shown: list[Replayed] = []
    for result in _replayed(sources, limit_set, fixture, store):
        if result.trouble is not None:
            troubles.append(result.trouble)
        if json:
            print_json_line(json_form.judgement_form(result.serial, result.source, result.judgement))
        else:
            shown.append(result)
            out.print(judgement_line(result))
    if not json:
        out.print(replay_summary(shown))
    for trouble in troubles:
        print_error(trouble)
    if troubles:
        raise typer.Exit(2)


def _replayed(sources: list[str], limits: LimitSet, fixture: str | None, store: str | None) -> Iterator[Replayed]:
    """Files are files; everything else is a lot. Every lot is looked up before the first sweep is judged."""
    from harness.replay import replay_file, replay_lot

    lots = [s for s in sources if not _is_file(s)]
    if not lots:
        yield from (replay_file(Path(s), limits, fixture) for s in sources)
        return
    with open_reading(store) as opened:
        for lot in lots:
            info = opened.lot_info(lot)
            if info.part_number != limits.part_number:
                told = f"lot '{lot}' is of part number {info.part_number}, these limits are for {limits.part_number}"
                print(f"ringtrue: {told}; judged all the same.", file=sys.stderr)
        for source in sources:
            if source in lots:
                yield from replay_lot(opened, source, limits)
            else:
                yield replay_file(Path(source), limits, fixture)


def _is_file(source: str) -> bool:
    """A path that exists, or that can only be meant as one (a folder in it, or a log's ending)."""
    path = Path(source)
    return path.exists() or "/" in source or path.suffix.lower() in (".csv", ".s1p", ".s2p", ".ts", ".txt")
