"""``ringtrue record``: the store's soundness."""

from __future__ import annotations

import typer

from harness.cli.options import JsonOption, StoreOption
from harness.cli.output import busy, clock, console, print_json_line, store_place

app = typer.Typer(help="The store: is its evidence sound?", no_args_is_help=True, rich_markup_mode=None)


@app.callback()
def _record() -> None:
    """The store: is its evidence sound?"""


@app.command("verify")
def verify(store: StoreOption = None, json: JsonOption = False) -> None:
    """Check every record against its hash, its neighbours and what is shown of it. Exit code 4 when unsound.

    Example: ringtrue record verify --store line-3.db
    """
    from harness.report import terminal
    from harness.store import verify_at

    with busy("Checking every record …"):
        found = verify_at(store_place(store), now=clock())
    if json:
        print_json_line(
            {
                "sound": found.sound,
                "chains": [
                    {"chain": c.chain, "records": c.records, "head": c.head, "anchored_to": c.anchored_to}
                    for c in found.chains
                ],
                "findings": [
                    {"kind": f.kind, "chain": f.chain, "seq": f.seq, "serial": f.serial, "text": f.text}
                    for f in found.findings
                ],
            }
        )
    else:
        console().print(terminal.soundness(found))
    if not found.sound:
        raise typer.Exit(4)
