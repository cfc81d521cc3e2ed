"""What the terminal shows, as rich renderables. Nothing is printed here.

Text from outside (serials, sentences) goes in as plain text, never as markup, with its control characters visible.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Protocol

from rich.console import Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from harness.characteristics import CHARACTERISTICS
from harness.judging.explaining import explanation
from harness.judging.wording import label
from harness.records import Caveat, Fit, FitStatus, LimitSet, Record, Requirement, Value
from harness.report.amounts import NOTHING, Scale, scale_for, uncertain
from harness.report.hanging import ByWidth, Under
from harness.report.words import LOT_WORDS, MARKS, counted, lot_mark, lot_sentence, percent, phrase, visible
from harness.statistics.capability import Capability, Index
from harness.statistics.lot import LotStatistics, requirements_by_key
from harness.statistics.yields import FINAL, FIRST_PASS, Share, Yields

__all__ = ["fit_table", "history_table", "limits_table", "lot_summary", "soundness", "uncertain", "verdict_text"]

# columns from which the whole table stands without folding numbers
_CAPABILITIES_WIDE = 130
_HISTORY_WIDE = 120


def verdict_text(verdict: str, grade: str | None = None) -> Text:
    """A verdict as word, shape and colour: "● PASS", with the grade where there is one."""
    mark = MARKS[verdict]
    text = Text(f"{mark.shape} {mark.word}", style=f"bold {mark.colour}")
    return text.append(f"  grade {visible(grade)}", style="not bold") if grade else text


def _plain(text: str, style: str = "") -> Text:
    return Text(visible(text), style=style)


def _table(*columns: str, right: Sequence[str] = (), title: str | Text | None = None) -> Table:
    table = Table(title=title, title_justify="left", title_style="bold", header_style="dim", box=None, pad_edge=False)
    for column in columns:
        table.add_column(column, justify="right" if column in right else "left", overflow="fold")
    return table


# ── a lot ────────────────────────────────────────────────────────────────────────────────────


def lot_summary(statistics: LotStatistics, lot: str, limits: LimitSet) -> RenderableType:
    """A lot: how it stands, its yields, why parts fail, and its characteristics against their limits."""
    yields = statistics.yields
    mark, against = lot_mark(yields, limits)
    head = _plain(f"Lot {lot}", "bold")
    head.append(visible(f"  {limits.part_number}, limits revision {limits.revision}"), style="not bold dim")
    state = Text(f"{MARKS[mark].shape} {LOT_WORDS[mark]}  ", style=f"bold {MARKS[mark].colour}") if mark else Text()
    blocks: list[RenderableType] = [
        head,
        _plain(lot_sentence(yields), "bold"),
        state.append(against, "not bold"),
        Text(),
    ]
    blocks += [_counts(yields), Text(), _yields(yields, statistics.confidence)]
    if yields.fail_reasons:
        blocks += [Text(), _fail_reasons(yields)]
    if statistics.characteristics and yields.parts:
        blocks += [Text(), _capabilities(statistics, limits)]
    return Group(*blocks)


def _counts(yields: Yields) -> Text:
    numbers = {"pass": yields.passed, "fail": yields.failed, "no verdict": yields.no_verdict}
    text = Text(counted(yields.parts, "part", "parts"))
    for verdict, number in numbers.items():
        text.append("   ").append(verdict_text(verdict)).append(f" {number}")
    for grade, number in yields.grades.items():
        text.append(visible(f"   grade {grade}: {number}"), style="dim")
    return text


def _yields(yields: Yields, confidence: float) -> Table:
    table = _table("yield", "", f"{100 * confidence:g} % limits", "of", right=("",))
    for name, share, means in (
        ("first pass", yields.first_pass, FIRST_PASS),
        ("final", yields.final, FINAL),
    ):
        table.add_row(name, percent(share.value), _limits_of(share), _plain(means, "dim"))
    return table


def _limits_of(share: Share) -> str:
    return NOTHING if share.value is None else f"{percent(share.low)} to {percent(share.high)}"


def _fail_reasons(yields: Yields) -> Table:
    table = _table("parts", "failed first for", right=("parts",))
    for reason in yields.fail_reasons:
        table.add_row(str(reason.count), _plain(phrase(reason.code, reason.characteristic)))
    return table


def _capabilities(statistics: LotStatistics, limits: LimitSet) -> RenderableType:
    required = requirements_by_key(limits)
    shown = {key: one for key, one in statistics.characteristics.items() if key in required}
    tables = [_capability_table(shown, required, wide=wide) for wide in (True, False)]
    notes = [_plain(f"{_name(one, required[key])}: {one.note}", "dim") for key, one in shown.items() if one.note]
    others = len(statistics.characteristics) - len(shown)
    if others:
        notes.append(Text(f"{others} more characteristics without limits: see --json, --csv or --html.", style="dim"))
    notes += [_plain(f"Over: {one}.", "dim") for one in dict.fromkeys(one.population for one in shown.values())]
    confidence = f"Limits of Pp and Ppk at {100 * statistics.confidence:g} %, for normally distributed values."
    elsewhere = (
        "Pp and Ppk for normally distributed values; their confidence limits: see --json, --html or a wider window."
    )
    return Group(
        ByWidth(tables[0], tables[1], _CAPABILITIES_WIDE),
        *notes,
        ByWidth(Text(confidence, style="dim"), Text(elsewhere, style="dim"), _CAPABILITIES_WIDE),
    )


def _capability_table(shown: Mapping[str, Capability], required: Mapping[str, Requirement], *, wide: bool) -> Table:
    """All there is where it is ``wide``; else without the outer values and the limits of Pp and Ppk."""
    ends = ("least", "greatest") if wide else ()
    right = ("n", "mean", "sd", *ends)
    table = _table("", "unit", *right, "allowed", "Pp", "Ppk", right=right)
    for key, one in shown.items():
        needs = required[key]
        scale = scale_for(one.characteristic, needs, one.values)
        values = (one.mean, one.sd, one.min, one.max)[: 4 if wide else 2]
        cells = [scale.text(value, one.sd) for value in values]
        indices = [_index(index, limits=wide) for index in (one.pp, one.ppk)]
        table.add_row(_name(one, needs), scale.sign, str(one.n), *cells, _allowed(one, scale), *indices)
    return table


def _name(one: Capability, requirement: Requirement | None) -> str:
    sign = label(requirement) if requirement is not None else CHARACTERISTICS[one.characteristic].sign
    return sign if one.element == 1 else f"{sign}, element {one.element}"


def _allowed(one: Capability, scale: Scale) -> str:
    least, greatest = scale.exactly(one.least), scale.exactly(one.greatest)
    if one.least is None and one.greatest is None:
        return NOTHING
    if one.greatest is None:
        return f"≥ {least}"
    return f"≤ {greatest}" if one.least is None else f"{least} to {greatest}"


def _index(index: Index, *, limits: bool) -> str:
    if index.value is None:
        return NOTHING
    if not limits:
        return f"{index.value:.2f}"
    return f"{index.value:.2f} ({index.low:.2f} to {index.high:.2f})"


# ── a part ───────────────────────────────────────────────────────────────────────────────────


class StoredLike(Protocol):
    """A record with its place in the store."""

    @property
    def record(self) -> Record: ...
    @property
    def chain(self) -> str: ...
    @property
    def seq(self) -> int: ...
    @property
    def hash(self) -> str: ...
    @property
    def revision(self) -> str: ...


def history_table(serial: str, found: Sequence[StoredLike]) -> RenderableType:
    """Every attempt at a part, in the order given: as a table, or in blocks where that is too wide."""
    title = _plain(f"{serial}: {counted(len(found), 'attempt', 'attempts')}", "bold")
    blocks = [block for stored in found for block in _attempt_block(stored)]
    return ByWidth(_history_rows(title, found), Group(title, *blocks), _HISTORY_WIDE)


def _attempt_block(stored: StoredLike) -> list[RenderableType]:
    opening, judgement = stored.record.opening, stored.record.judgement
    verdict = verdict_text(judgement.verdict)
    line = Text(f"{verdict.plain:<14}  ", style=verdict.style)
    grade = f"grade {judgement.grade}  " if judgement.grade else ""
    tries = f"try {opening.number}" + ("" if stored.record.final else " …")
    where = f"{opening.lot}  {opening.part_number} {stored.revision}  {tries}  record {stored.seq}"
    line.append(visible(f"{grade}{short_time(stored.record.at)}  {where}"), style="not bold default")
    return [line, *[Under(reason.text) for reason in judgement.reasons[:1]]]


def _history_rows(title: Text, found: Sequence[StoredLike]) -> Table:
    table = _table("at", "lot", "limits", "try", "verdict", "reason", "record", "hash", right=("try",))
    table.title = title
    for stored in found:
        opening, judgement = stored.record.opening, stored.record.judgement
        table.add_row(
            short_time(stored.record.at),
            _plain(opening.lot),
            _plain(f"{opening.part_number} {stored.revision}"),
            f"{opening.number}" + ("" if stored.record.final else " …"),
            verdict_text(judgement.verdict, judgement.grade),
            _plain(judgement.reasons[0].text if judgement.reasons else ""),
            _plain(str(stored.seq)),
            Text(stored.hash[:12], style="dim"),
        )
    return table


def short_time(at: str) -> str:
    """ISO 8601 to the second, as read: "2026-11-20 06:12:09 UTC"."""
    date, _, rest = at.partition("T")
    zone = " UTC" if rest.endswith("Z") else ""
    return f"{date} {rest[:8]}{zone}".rstrip()


def fit_table(name: str, fit: Fit) -> RenderableType:
    """The characteristics of one fit, each with its expanded uncertainty, and what to keep in mind about them."""
    if fit.status is not FitStatus.OK:
        state = Text(f"{MARKS['no verdict'].shape} {fit.status.value}", style="bold yellow")
        return Group(_plain(name, "bold"), state.append(visible(f"  {fit.message}"), style="not bold"))
    return Group(_plain(name, "bold"), _values(fit.values), *_below(fit))


def _values(values: Mapping[str, Value]) -> Table:
    table = _table("", "value ± U (k = 2)", "")
    for key, known in CHARACTERISTICS.items():
        if key in values:
            value = values[key]
            table.add_row(known.sign, uncertain(value.value, value.u, value.unit), Text(known.name, style="dim"))
    return table


def _below(fit: Fit) -> list[RenderableType]:
    lines: list[RenderableType] = []
    if fit.residual.relative_rms is not None:
        misfit = f"Misfit {100 * fit.residual.relative_rms:.2g} % rms over {fit.residual.dof} degrees of freedom."
        lines.append(Text(misfit, style="dim"))
    others = [mode for mode in fit.modes if not mode.wanted]
    if others:
        found = ", ".join(f"{uncertain(mode.f_hz, None, 'Hz')} (Q {mode.q:.3g})" for mode in others)
        lines.append(Text(f"Other modes: {found}.", style="dim"))
    return lines + [_caveat(caveat) for caveat in fit.caveats]


def _caveat(caveat: Caveat) -> Text:
    known = CHARACTERISTICS.get(caveat.characteristic or "")
    about = f"{known.sign}: " if known is not None else ""
    return Text("! ", style="bold yellow").append(visible(about + caveat.text), style="not bold")


# ── limits and the store ─────────────────────────────────────────────────────────────────────


def limits_table(limits: LimitSet) -> RenderableType:
    """A limit file in plain words, by section."""
    blocks: list[RenderableType] = []
    table: Table | None = None
    section = ""
    for row in explanation(limits):
        if table is None or row.section != section:
            section, table = row.section, _table("topic", "text")
            table.show_header = False
            blocks += [_plain(section.capitalize(), "bold"), Padding(table, (0, 0, 1, 2))]
        table.add_row(_plain(row.topic, "dim"), _plain(row.text))
    return Group(*blocks)


class ChainLike(Protocol):
    """One chain of records."""

    @property
    def chain(self) -> str: ...
    @property
    def records(self) -> int: ...
    @property
    def head(self) -> str | None: ...
    @property
    def anchored_to(self) -> int | None: ...


class FindingLike(Protocol):
    """One thing found wrong."""

    @property
    def kind(self) -> str: ...
    @property
    def chain(self) -> str | None: ...
    @property
    def seq(self) -> int | None: ...
    @property
    def serial(self) -> str | None: ...
    @property
    def text(self) -> str: ...


class SoundnessLike(Protocol):
    """What a check of the store found."""

    @property
    def sound(self) -> bool: ...
    @property
    def chains(self) -> Sequence[ChainLike]: ...
    @property
    def findings(self) -> Sequence[FindingLike]: ...


def soundness(found: SoundnessLike) -> RenderableType:
    """The store's soundness: one line first, then how far each chain goes, then every finding."""
    records = counted(sum(chain.records for chain in found.chains), "record", "records")
    if found.sound:
        head = Text("● SOUND", style="bold green").append(f"  {records}, nothing found wrong.", "not bold")
    else:
        count = counted(len(found.findings), "finding", "findings")
        head = Text("■ UNSOUND", style="bold red").append(f"  {count} in {records}.", "not bold")
    blocks: list[RenderableType] = [head, *[_chain(chain) for chain in found.chains]]
    if found.findings:
        table = _table("kind", "record", "serial", "finding")
        for finding in found.findings:
            seq = "" if finding.seq is None else str(finding.seq)
            cells = (finding.kind, seq, finding.serial or "", finding.text)
            table.add_row(*[_plain(cell) for cell in cells])
        blocks += [Text(), table]
    return Group(*blocks)


def _chain(chain: ChainLike) -> Text:
    head = f", last hash {chain.head[:12]}" if chain.head else ""
    anchor = "no anchor vouches for it"
    if chain.anchored_to is not None:
        anchor = f"an anchor vouches up to record {chain.anchored_to}"
    return _plain(f"  chain {chain.chain}: {counted(chain.records, 'record', 'records')}{head}; {anchor}.", "dim")
