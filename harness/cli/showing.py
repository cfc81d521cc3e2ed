"""Events and judgements as a person at the station reads them: verdict first, reason second, everything else quiet."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence

from rich.console import Group, RenderableType
from rich.text import Text

from harness.cli.output import plain_times
from harness.judging.wording import action_for as action_of
from harness.records import Judgement, LimitSet, Record
from harness.replay import Replayed
from harness.report.hanging import Hanging, Under
from harness.report.terminal import verdict_text
from harness.report.words import counted, visible
from harness.run import events as e

_HOLD = "Set the part on hold for a person to decide."
_AGAIN = "It is measured once more."
_MOST_REASONS = 3


# ── events in words ──────────────────────────────────────────────────────────────────────────


def event_text(event: e.Event) -> str:
    """One sentence for everything that is not a verdict; "" for what needs no words."""
    say: Mapping[type, Callable[..., str]] = {
        e.Ready: lambda x: _ready(x),
        e.Interrupted: lambda x: (
            f"An attempt of an earlier run was interrupted; recorded as no verdict (record {x.written.seq})."
        ),
        e.Waiting: lambda x: x.text,
        e.Refused: lambda x: f"Not measured: {_who(x)}: {_sentence(x.text)}",
        e.BenchTrouble: lambda x: f"Bench: {x.text}",
        e.Held: lambda x: f"LOT HELD. {x.text}",
        e.Ended: lambda x: _ended(x),
    }
    return visible(plain_times(say[type(event)](event))) if type(event) in say else ""


def _ready(event: e.Ready) -> str:
    before = f" It goes on after {counted(event.continued, 'record', 'records')}." if event.continued else ""
    return f"Station {event.station} ready for lot {event.lot}.{before} {event.waits_for}"


def _who(event: e.Refused) -> str:
    return event.serial or "a part without a code"


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:]


def _ended(event: e.Ended, counts: Mapping[str, int] | None = None) -> str:
    verdicts = f" ({told(counts)})" if counts and event.judged else ""
    refused = f", {event.refused} not measured" if event.refused else ""
    note = f" {_sentence(event.note)}" if event.note else ""
    return f"End: {counted(event.judged, 'part', 'parts')} judged{verdicts}{refused}.{note}"


def event_block(event: e.Event, counts: Mapping[str, int]) -> RenderableType | None:
    """The same for the station's terminal: loud what asks for a person, quiet what does not.

    ``counts``: how many parts of this run came to which verdict.
    """
    if isinstance(event, e.Refused):
        head = Text("▲ NOT MEASURED  ", style="bold yellow").append(visible(_who(event)), style="not yellow")
        return Group(head, Under(plain_times(_sentence(event.text))))
    if isinstance(event, e.Held):
        return Group(Text("▲ LOT HELD", style="bold yellow"), Under(event.text))
    if isinstance(event, e.Ended):
        return Text(_ended(event, counts))
    text = event_text(event)
    if isinstance(event, e.BenchTrouble):
        return Hanging(Text("! ", style="bold yellow"), text)
    return Text(text, style="dim") if text else None


# ── verdicts ─────────────────────────────────────────────────────────────────────────────────


def attempt_block(record: Record, limits: LimitSet) -> RenderableType:
    """The verdict of one attempt, its plain reasons, and what to do."""
    judgement, opening = record.judgement, record.opening
    head = _head(opening.serial, judgement)
    if opening.number > 1:
        head.append(f"  try {opening.number}", style="dim")
    first, rest = judgement.reasons[:1], judgement.reasons[1:]
    lines = [Under(reason.text) for reason in first]
    lines += [Under(reason.text, "dim") for reason in rest[: _MOST_REASONS - 1]]
    if len(rest) >= _MOST_REASONS:
        lines.append(Under(f"and {counted(len(rest) - _MOST_REASONS + 1, 'more reason', 'more reasons')}", "dim"))
    action = action_for(judgement, limits, record.final, opening.element)
    if action:
        lines.append(Under(f"→ {action}"))
    return Group(head, *lines)


def _head(serial: str, judgement: Judgement) -> Text:
    """Verdict, serial, grade; the verdict as wide as the widest."""
    verdict = verdict_text(judgement.verdict)
    head = Text(f"{verdict.plain:<14}  ", style=verdict.style).append(visible(serial), style="bold default")
    return head.append(f"  grade {visible(judgement.grade)}", style="not bold default") if judgement.grade else head


def action_for(judgement: Judgement, limits: LimitSet, final: bool, element: int = 1) -> str:
    """What the operator does now: the limit file's words for the first reason, or the house's for no verdict."""
    if judgement.verdict.value == "no verdict":
        return _HOLD if final else _AGAIN
    if judgement.verdict.value == "pass" or not judgement.reasons:
        return ""
    return action_of(judgement.reasons[0], limits, element)


# ── judged again ─────────────────────────────────────────────────────────────────────────────


def judgement_line(result: Replayed) -> RenderableType:
    """One sweep judged again, and what it was before where that differs."""
    judgement = result.judgement
    line = _head(result.serial, judgement)
    if result.original is not None and result.original.record.judgement.verdict is not judgement.verdict:
        line.append(f"  was {result.original.record.judgement.verdict.value}", style="bold default")
    return Hanging(line.append("  "), judgement.reasons[0].text) if judgement.reasons else line


def replay_summary(results: Sequence[Replayed]) -> str:
    """How many sweeps came out how, and how many changed."""
    counts = Counter(result.judgement.verdict.value for result in results)
    stored = [r for r in results if r.original is not None]
    changed = sum(r.original.record.judgement.verdict is not r.judgement.verdict for r in stored if r.original)
    differ = "differs" if changed == 1 else "differ"
    was = f" {changed} of {len(stored)} {differ} from the verdict on record, which stays." if stored else ""
    empty = sum(any(reason.code == "no-sweep" for reason in r.judgement.reasons) for r in results)
    without = f" {counted(empty, 'attempt', 'attempts')} had no sweep to judge." if empty else ""
    return f"{counted(len(results), 'attempt', 'attempts')}: {told(counts) or 'nothing'}.{without}{was}"


def told(counts: Mapping[str, int]) -> str:
    """Counts of verdicts in words: "5 pass, 1 fail, 2 no verdict"."""
    return ", ".join(
        f"{counts[verdict]} {verdict}" for verdict in ("pass", "fail", "no verdict") if counts.get(verdict)
    )
