"""``ringtrue history``: every attempt at a part."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any

import typer

from harness.cli.options import JsonOption, StoreOption
from harness.cli.output import console, open_reading, print_json_line

if TYPE_CHECKING:
    from harness.store import StoredRecord


def history(
    serial: Annotated[str, typer.Argument(metavar="SERIAL", help="The part's serial.")],
    store: StoreOption = None,
    json: JsonOption = False,
) -> None:
    """Every attempt at a part, oldest first.

    Example: ringtrue history MD-0007
    """
    from harness.report import terminal

    with open_reading(store) as opened:
        found = opened.history(serial)
    if json:
        print_json_line([_form(stored) for stored in found])
    else:
        console().print(terminal.history_table(serial, found))


def _form(stored: StoredRecord) -> dict[str, Any]:
    from harness.report import json_form

    record = stored.record
    opening = record.opening
    return {
        **json_form.judgement_form(opening.serial, f"{opening.lot}/{stored.seq}", record.judgement),
        "record": f"{stored.chain}/{stored.seq}",
        "attempt": opening.number,
        "final": record.final,
        "element": opening.element,
        "lot": opening.lot,
        "identity": opening.identity,
        "operator": opening.operator,
        "limits": json_form.limits_form(opening.part_number, stored.revision, opening.limits_sha256),
        "instruments": json_form.instruments_form(record.instruments),
        "correction": json_form.correction_form(record.correction),
        "software": dict(record.software),
        "at": record.at,
        "hash": stored.hash,
        "points": stored.points,
    }
