"""The station's terminal: a quiet line while the meter works, then the verdict in its place."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

from rich.console import Console, RenderableType
from rich.control import Control
from rich.segment import ControlType
from rich.text import Text

from harness.cli.showing import attempt_block, event_block
from harness.records import LimitSet
from harness.report.words import visible
from harness.run import events as e

_STAGES = {
    "contact": "checking contact",
    "locate": "looking for its resonance",
    "resolve": "measuring its resonance",
    "repeat": "measuring the first frequency again",
}
_CLEAR = Control((ControlType.CARRIAGE_RETURN,), (ControlType.ERASE_IN_LINE, 2))


def shower(limits: LimitSet, out: Console) -> Callable[[e.Event], None]:
    """Prints events for a person; a verdict only once its record is durable."""
    return _Watching(limits, out).show


class _Watching:
    """What stands on the terminal now, and how many parts came out how."""

    def __init__(self, limits: LimitSet, out: Console) -> None:
        self._limits, self._out = limits, out
        self._passing = False
        self._prompted = ""
        self._measuring = False
        self._later: list[e.Event] = []
        self._counts: Counter[str] = Counter()

    def show(self, event: e.Event) -> None:
        if isinstance(event, e.Waiting) and event.text == self._prompted:
            return  # said a moment ago, when the station was ready
        self._prompted = event.waits_for if isinstance(event, e.Ready) else ""
        if isinstance(event, e.Opened):
            self._measuring = True
        elif isinstance(event, e.Measuring):
            self._pass_by(f"… {event.serial}  {_STAGES.get(event.stage, event.stage)}")
        elif isinstance(event, e.Recorded):
            self._recorded(event)
        elif self._measuring:
            self._later.append(event)  # the verdict first
        elif (block := event_block(event, self._counts)) is not None:
            self._print(block)

    def _recorded(self, event: e.Recorded) -> None:
        """The verdict, then what happened meanwhile; a fault that is the verdict's own reason is not said twice."""
        judgement = event.record.judgement
        if event.record.final:
            self._counts[judgement.verdict.value] += 1
        self._print(attempt_block(event.record, self._limits))
        self._measuring, later, self._later = False, self._later, []
        for one in later:
            if not (isinstance(one, e.BenchTrouble) and one.text in {reason.text for reason in judgement.reasons}):
                self.show(one)

    def _pass_by(self, text: str) -> None:
        """A line that the next one replaces; only where somebody looks."""
        if self._out.is_terminal:
            self._wipe()
            self._out.print(Text(visible(text), style="dim"), end="", no_wrap=True, overflow="ellipsis")
            self._passing = True

    def _print(self, block: RenderableType) -> None:
        self._wipe()
        self._out.print(block)

    def _wipe(self) -> None:
        if self._passing:
            self._out.control(_CLEAR)
            self._passing = False
