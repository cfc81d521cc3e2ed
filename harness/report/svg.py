"""Small drawings as SVG text: the histogram of a characteristic, a lot's share of verdicts, a bar, a verdict's shape.

Each stands alone: presentation attributes only, no style sheet, font, script or link of its own. Every text is
escaped; widths of text are reckoned, so labels keep clear of each other and of the edges.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from markupsafe import Markup, escape

from harness.quantities import group
from harness.report.histogram import Bar, Histogram, histogram, ticks
from harness.report.words import MARKS

INK, QUIET, RULE, INSIDE, BAND = "#14181d", "#5a6470", "#c4ccd4", "#274b6d", "#e2efe7"
OUTSIDE = MARKS["fail"].paint
LIMIT = MARKS["pass"].paint
_LETTER = 6.3  # width of a digit at 11 units, on the safe side
_WIDTH, _HEIGHT = 360.0, 190.0
_LEFT, _RIGHT, _TOP, _BOTTOM = 30.0, 352.0, 34.0, 152.0


def number(value: float) -> str:
    """A coordinate: two decimals at most, so that the same drawing has the same bytes."""
    return f"{value:.2f}".rstrip("0").rstrip(".")


def tag(name: str, text: str | None = None, **attributes: str | float) -> Markup:
    """An SVG element; ``_`` in attribute names stands for ``-``, numbers are coordinates."""
    written = "".join(
        f' {key.rstrip("_").replace("_", "-")}="{escape(value if isinstance(value, str) else number(value))}"'
        for key, value in attributes.items()
    )
    return Markup(f"<{name}{written}/>") if text is None else Markup(f"<{name}{written}>{escape(text)}</{name}>")


def drawing(across: float, down: float, title: str, parts: Sequence[Markup], **attributes: str) -> Markup:
    """The whole SVG element; ``title`` says in words what it shows, for who cannot see it."""
    box = f"0 0 {number(across)} {number(down)}"
    more = "".join(f' {key}="{escape(value)}"' for key, value in attributes.items())
    head = Markup(f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="{box}" role="img"{more}>')
    return head + tag("title", title) + Markup("").join(parts) + Markup("</svg>")


# ── histogram ────────────────────────────────────────────────────────────────────────────────


def histogram_svg(
    values: Sequence[float], *, sign: str, unit: str, least: float | None, greatest: float | None, mean: float
) -> Markup:
    """Parts as bars, the limits as a band, the mean as a broken line. ``values`` not empty, all in ``unit``."""
    found = histogram(values, least, greatest)

    def x(value: float) -> float:
        return _LEFT + (_RIGHT - _LEFT) * (value - found.low) / (found.high - found.low)

    most = _round_up(max(bar.count for bar in found.bars))
    parts = [_band(x, found, least, greatest), *_count_axis(most)]
    parts += [_bar(x, bar, most) for bar in found.bars]
    parts += _axis(x, found, sign, unit)
    parts += _limit_lines(x, least, greatest)
    parts += _mean_line(x, mean, found)
    parts += _beyond(found)
    return drawing(_WIDTH, _HEIGHT, _in_words(values, sign, unit, least, greatest), parts)


def _in_words(values: Sequence[float], sign: str, unit: str, least: float | None, greatest: float | None) -> str:
    outside = sum((least is not None and v < least) or (greatest is not None and v > greatest) for v in values)
    span = f"{min(values):.6g} to {max(values):.6g} {unit}".rstrip()
    return f"Histogram of {sign}: {len(values)} parts from {span}, {outside} outside the limits"


def _band(x: Callable[[float], float], found: Histogram, least: float | None, greatest: float | None) -> Markup:
    if least is None and greatest is None:
        return Markup("")
    start = x(found.low if least is None else least)
    stop = x(found.high if greatest is None else greatest)
    return tag("rect", x=start, y=_TOP, width=max(stop - start, 0.0), height=_BOTTOM - _TOP, fill=BAND)


def _round_up(count: int) -> int:
    """A round number for the top of the count axis: even, so that its half is whole too."""
    power = int(10.0 ** math.floor(math.log10(count)))
    return next(top for m in (1, 2, 4, 6, 8, 10, 20) if (top := m * power) >= count and top % 2 == 0)


def _count_axis(most: int) -> list[Markup]:
    parts = []
    for count in (most // 2, most):
        y = _BOTTOM - (_BOTTOM - _TOP) * count / most
        parts.append(tag("line", x1=_LEFT, y1=y, x2=_RIGHT, y2=y, stroke=RULE, stroke_width=0.6))
        parts.append(_label(_LEFT - 4, y + 3.5, str(count), "end", QUIET))
    parts.append(_label(_LEFT - 4, _BOTTOM + 3.5, "0", "end", QUIET))
    return parts


def _bar(x: Callable[[float], float], bar: Bar, most: int) -> Markup:
    left, right = x(bar.start), x(bar.stop)
    height = (_BOTTOM - _TOP) * bar.count / most
    gap = min(0.6, 0.1 * (right - left))
    fill = INSIDE if bar.inside else OUTSIDE
    return tag("rect", x=left + gap, y=_BOTTOM - height, width=right - left - 2 * gap, height=height, fill=fill)


def _axis(x: Callable[[float], float], found: Histogram, sign: str, unit: str) -> list[Markup]:
    parts = [tag("line", x1=_LEFT, y1=_BOTTOM, x2=_RIGHT, y2=_BOTTOM, stroke=INK, stroke_width=1.0)]
    for value, text in _tick_labels(found):
        parts.append(tag("line", x1=x(value), y1=_BOTTOM, x2=x(value), y2=_BOTTOM + 4, stroke=INK, stroke_width=1.0))
        parts.append(_label(_kept_in(x(value), text), _BOTTOM + 15, text, "middle", INK))
    title = f"{sign} / {unit}" if unit else sign
    parts.append(_label((_LEFT + _RIGHT) / 2, _BOTTOM + 31, title, "middle", INK, font_weight="600"))
    return parts


def _tick_labels(found: Histogram) -> list[tuple[float, str]]:
    """Ticks as many as have room for their labels."""
    for about in (6, 5, 4, 3, 2):
        values = ticks(found.low, found.high, about)
        step = values[1] - values[0] if len(values) > 1 else abs(values[0]) or 1.0
        labels = [(value, _tick_text(value, step)) for value in values]
        room = (_RIGHT - _LEFT) * step / (found.high - found.low)
        if all(_LETTER * len(text) + 6 <= room for _, text in labels):
            break
    return labels


def _tick_text(value: float, step: float) -> str:
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    return group(f"{value:.{decimals}f}") if decimals <= 6 else f"{value:g}"


def _limit_lines(x: Callable[[float], float], least: float | None, greatest: float | None) -> list[Markup]:
    parts = []
    texts = [("min", least), ("max", greatest)]
    at = [x(limit) for _, limit in texts if limit is not None]
    close = len(at) == 2 and at[1] - at[0] < 2 * _LETTER * 4
    for name, limit in texts:
        if limit is not None:
            parts.append(tag("line", x1=x(limit), y1=_TOP - 4, x2=x(limit), y2=_BOTTOM, stroke=LIMIT, stroke_width=2.0))
            anchor = "middle" if not close else "end" if name == "min" else "start"
            where = _kept_in(x(limit), name) if not close else x(limit) + (2 if name == "max" else -2)
            parts.append(_label(where, _TOP - 9, name, anchor, LIMIT, font_weight="600"))
    return parts


def _mean_line(x: Callable[[float], float], mean: float, found: Histogram) -> list[Markup]:
    if not found.low <= mean <= found.high:
        return []
    line = tag(
        "line", x1=x(mean), y1=_TOP - 16, x2=x(mean), y2=_BOTTOM, stroke=INK, stroke_width=1.2, stroke_dasharray="4 3"
    )
    return [line, _label(_kept_in(x(mean), "mean"), _TOP - 21, "mean", "middle", INK)]


def _beyond(found: Histogram) -> list[Markup]:
    parts = []
    if found.below:
        parts.append(_label(_LEFT, _BOTTOM + 31, f"◂ {found.below} further below", "start", OUTSIDE))
    if found.above:
        parts.append(_label(_RIGHT, _BOTTOM + 31, f"{found.above} further above ▸", "end", OUTSIDE))
    return parts


def _kept_in(x: float, text: str) -> float:
    """Where the middle of a label goes so that none of it is cut off."""
    half = _LETTER * len(text) / 2
    return min(max(x, half), _WIDTH - half)


def _label(x: float, y: float, text: str, anchor: str, fill: str, **more: str) -> Markup:
    return tag("text", text, x=x, y=y, text_anchor=anchor, fill=fill, font_size="11", **more)


# ── verdicts and bars ────────────────────────────────────────────────────────────────────────


def shape(verdict: str, size: float = 24.0, fill: str | None = None) -> Markup:
    """A verdict's shape: disc, square or triangle."""
    fill = MARKS[verdict].paint if fill is None else fill
    shapes = {
        "pass": tag("circle", cx=12.0, cy=12.0, r=10.0, fill=fill),
        "fail": tag("rect", x=2.5, y=2.5, width=19.0, height=19.0, fill=fill),
        "no verdict": tag("path", d="M12 2.5 22 21.5H2Z", fill=fill, stroke=INK, stroke_width=1.2),  # yellow on white
    }
    return drawing(24, 24, MARKS[verdict].word, [shapes[verdict]], width=number(size), height=number(size))


def stripe(counts: Sequence[tuple[str, int]]) -> Markup:
    """The lot as one bar: each verdict's share, in its colour and with its own hatching. Counts are not all zero."""
    total, start = sum(count for _, count in counts), 0.0
    parts = []
    for verdict, count in counts:
        width = 720.0 * count / total
        if count:
            parts.append(tag("rect", x=start, y=0.0, width=width, height=22.0, fill=MARKS[verdict].paint))
            parts += _hatching(verdict, start, start + width)
            if start:
                parts.append(tag("line", x1=start, y1=0.0, x2=start, y2=22.0, stroke="#ffffff", stroke_width=2.0))
        start += width
    title = ", ".join(f"{count} {verdict}" for verdict, count in counts)
    return drawing(720, 22, title, parts, preserveAspectRatio="none")


def _hatching(verdict: str, start: float, stop: float) -> list[Markup]:
    """Strokes for fail, upright lines for no verdict, none for pass."""
    slant = {"fail": 22.0, "no verdict": 0.0}.get(verdict)
    if slant is None:
        return []
    lines = []
    x = start + 6.0
    while x + slant < stop:
        ink = MARKS[verdict].ink
        lines.append(tag("line", x1=x, y1=22.0, x2=x + slant, y2=0.0, stroke=ink, stroke_width=1.2, opacity="0.55"))
        x += 9.0
    return lines


def bar(share: float, title: str) -> Markup:
    """A lying bar that fills ``share`` (0 to 1) of its width."""
    parts = [
        tag("rect", x=0.0, y=0.0, width=200.0, height=12.0, fill="#eef1f4"),
        tag("rect", x=0.0, y=0.0, width=200.0 * share, height=12.0, fill=OUTSIDE),
    ]
    return drawing(200, 12, title, parts, preserveAspectRatio="none")
