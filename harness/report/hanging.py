"""Sentences beneath or beside a verdict: wrapped at their own indent, numbers kept with their units.

A terminal's own wrapping would begin again at the left edge and tear "1 662.0 kHz" apart. Where nothing wraps (a
file, a pipe) a sentence stays on one line.
"""

from __future__ import annotations

import re
import textwrap
from collections.abc import Iterator
from dataclasses import dataclass

from rich.console import Console, ConsoleOptions, RenderableType, RenderResult
from rich.text import Text

from harness.report.words import visible

INDENT = 16
_LEAST_WIDTH = 20
_NO_BREAK = "\u00a0"
# between thousands, between a number and its unit, around ± and before a closing "% …"
_TOGETHER = re.compile(r"(?<=[0-9±]) (?=[0-9]{3}(?![0-9])|±|[0-9.]+ ?(?:%|$)|(?:[a-zµΩ°%A-Z]{1,3})(?![\w]))")


def wrapped(text: str, width: int) -> list[str]:
    """``text`` in lines of at most ``width`` characters; a number stays with its thousands and its unit.

    >>> wrapped("fs 1 662.049 kHz is above the highest allowed 1 662.000 kHz", 40)
    ['fs 1 662.049 kHz is above the highest', 'allowed 1 662.000 kHz']
    """
    glued = _TOGETHER.sub(_NO_BREAK, text)
    lines = textwrap.wrap(glued, max(width, _LEAST_WIDTH), break_on_hyphens=False)
    return [line.replace(_NO_BREAK, " ") for line in lines]


@dataclass(frozen=True, slots=True)
class Under:
    """A sentence on lines of its own, beneath a verdict."""

    text: str
    style: str = ""
    indent: int = INDENT

    def __rich_console__(self, console: Console, options: ConsoleOptions) -> RenderResult:
        for line in _lines(self.text, options, self.indent):
            yield Text(" " * self.indent + line, style=self.style, no_wrap=True)


@dataclass(frozen=True, slots=True)
class Hanging:
    """A head and a sentence: on one line where they fit, else the sentence beneath."""

    head: Text
    text: str
    indent: int = INDENT

    def __rich_console__(self, console: Console, options: ConsoleOptions) -> RenderResult:
        if options.no_wrap or self.head.cell_len + len(self.text) <= options.max_width:
            yield self.head.copy().append(visible(self.text), style="not bold default")
            return
        if self.head.cell_len > self.indent // 2:
            head = self.head.copy()
            head.rstrip()
            yield head
            yield Under(self.text, indent=self.indent)
            return
        first, *rest = _lines(self.text, options, self.head.cell_len)
        yield self.head.copy().append(first, style="not bold default")
        for line in rest:
            yield Text(" " * self.head.cell_len + line, no_wrap=True)


@dataclass(frozen=True, slots=True)
class ByWidth:
    """``wide`` where there are ``least`` columns, else ``narrow``: a table that has to fold its numbers is no table."""

    wide: RenderableType
    narrow: RenderableType
    least: int

    def __rich_console__(self, console: Console, options: ConsoleOptions) -> RenderResult:
        yield self.wide if options.max_width >= self.least else self.narrow


def _lines(text: str, options: ConsoleOptions, indent: int) -> Iterator[str]:
    text = visible(text)
    yield from [text] if options.no_wrap else wrapped(text, options.max_width - indent)
