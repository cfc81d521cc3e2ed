"""Events and judgements as a person at the station reads them: verdict first, reason second, everything else quiet."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence

from rich.console import Group, RenderableType
from rich.text import Text

from harness.records import Judgement, LimitSet, Record
from harness.replay import Replayed
from harness.report.terminal import verdict_text
from harness.run import events as e

_FINAL_HOLD = "Set the part on hold for a person to decide."
_AGAIN = "Lift the part, seat it again; it is measured once more."


def event_text(event: e.Event) -> str:
    """One sentence for everything that is not a verdict; "" for what needs no words."""
    say: Mapping[type, Callable[..., str]] = {
        e.Ready: lambda x: _ready(x),
        e.Interrupted: lambda x: (
            f"An attempt of an earlier run was interrupted; recorded as no verdict (record {x.written.seq})."
        ),
        e.Waiting: lambda x: x.text,
        e.Refused: lambda x: f"Not measured: {x.serial or 'a part without a code'}: {x.text}",
        e.BenchTrouble: lambda x: f"Bench: {x.text}",
        e.Held: lambda x: f"LOT HELD. {x.text}",
        e.Ended: lambda x: _ended(x),
    }
    return say[type(event)](event) if type(event) in say else ""


def _ready(event: e.Ready) -> str:
    before = f" It goes on after {event.continued} records." if event.continued else ""
    return f"Station {event.station} ready for lot {event.lot}.{before} {event.waits_for}"


def _ended(event: e.Ended) -> str:
    refused = f", {event.refused} not measured" if event.refused else ""
    note = f" {event.note}" if event.note else ""
    return f"End: {event.judged} parts judged{refused}.{note}"


def attempt_block(record: Record, limits: LimitSet) -> RenderableType:
    """The verdict of one attempt, its plain reasons, and what to do."""
    judgement, opening = record.judgement, record.opening
    head = Text.assemble((f"{opening.serial:<16} ", "bold"), verdict_text(judgement.verdict))
    if judgement.grade:
        head.append(f"  grade {judgement.grade}")
    if opening.number > 1:
        head.append(f"  (try {opening.number})", style="dim")
    lines = [Text(f"{'':17}{reason.text}") for reason in judgement.reasons[:3]]
    action = action_for(judgement, limits, record.final)
    if action:
        lines.append(Text(f"{'':17}→ {action}", style="italic"))
    return Group(head, *lines)


def action_for(judgement: Judgement, limits: LimitSet, final: bool) -> str:
    """What the operator does now: the limit file's words for the first reason, or the house's for no verdict."""
    if judgement.verdict.value == "no verdict":
        return _FINAL_HOLD if final else _AGAIN
    if judgement.verdict.value == "pass" or not judgement.reasons:
        return ""
    first = judgement.reasons[0].characteristic
    actions = [r.action for r in limits.requirements if r.characteristic == first and r.action]
    return actions[0] if actions else ""


def judgement_line(result: Replayed) -> RenderableType:
    """One sweep judged again, and what it was before where that differs."""
    judgement = result.judgement
    line = Text.assemble((f"{result.serial:<16} ", "bold"), verdict_text(judgement.verdict, judgement.grade))
    if result.original is not None and result.original.record.judgement.verdict is not judgement.verdict:
        line.append(f"  (was {result.original.record.judgement.verdict.value})", style="bold")
    if judgement.reasons:
        line.append(f"  {judgement.reasons[0].text}", style="not bold")
    return line


def replay_summary(results: Sequence[Replayed]) -> str:
    """How many sweeps came out how, and how many changed."""
    counts = Counter(result.judgement.verdict.value for result in results)
    told = ", ".join(f"{counts[verdict]} {verdict}" for verdict in ("pass", "fail", "no verdict") if counts[verdict])
    stored = [r for r in results if r.original is not None]
    changed = sum(r.original.record.judgement.verdict is not r.judgement.verdict for r in stored if r.original)
    was = f" {changed} of {len(stored)} differ from the verdict on record, which stays." if stored else ""
    return f"{len(results)} sweeps: {told or 'nothing'}.{was}"
