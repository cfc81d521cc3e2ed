"""What the terminal shows: contents, marks without colour, and text from outside that stays text."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from report_examples import LIMITS, attempt, lot, sound_values, with_least_yield
from rich.console import Console

from harness.records import (
    Caveat,
    Correction,
    Fit,
    FitStatus,
    Judgement,
    Mode,
    Opening,
    Reason,
    Record,
    Residual,
    Sweep,
    Value,
    Verdict,
)
from harness.report import terminal
from harness.report.words import lot_mark, lot_sentence, percent, phrase, visible
from harness.statistics import summarise


def printed(renderable, width: int = 150) -> str:
    """As a plain terminal without colour shows it."""
    console = Console(width=width, no_color=True, highlight=False)
    with console.capture() as capture:
        console.print(renderable)
    return capture.get()


@pytest.mark.parametrize(("verdict", "text"), [("pass", "● PASS"), ("fail", "■ FAIL"), ("no verdict", "▲ NO VERDICT")])
def test_a_verdict_is_word_and_shape_without_colour(verdict, text):
    """Without colour, word and shape remain, and shapes differ."""
    assert printed(terminal.verdict_text(verdict)).strip() == text


def test_verdicts_have_colours_and_do_not_blink():
    """With colour, each verdict has its own, and none blinks."""
    styles = [str(terminal.verdict_text(verdict).style) for verdict in ("pass", "fail", "no verdict")]
    assert styles == ["bold green", "bold red", "bold yellow"]


# ── a lot ────────────────────────────────────────────────────────────────────────────────────


def test_a_lots_summary_has_its_counts_yields_reasons_and_capabilities():
    """Counts, yields with limits and definitions, ranked reasons, characteristics with their units and limits."""
    statistics = summarise(lot(), LIMITS)
    text = printed(terminal.lot_summary(statistics, "LOT-7", LIMITS))
    for wanted in (
        "35 of 40 parts passed; 4 failed: fs above the highest allowed; 1 has no verdict.",
        "■ YIELD TOO LOW",
        "● PASS 35   ■ FAIL 4   ▲ NO VERDICT 1",
        percent(statistics.yields.first_pass.value),
        "parts whose first attempt passed, over all parts; no verdict counts as not passed",
        "1 638 to 1 662",
        f"{statistics.characteristics['fs'].ppk.value:.2f}",
        f"({statistics.characteristics['qm'].ppk.low:.2f} to {statistics.characteristics['qm'].ppk.high:.2f})",
        "C at 1 kHz",
        "first valid attempt of 39 of 40 parts, failed parts included; left out: 1 without a valid attempt",
    ):
        assert wanted in text, wanted


@pytest.mark.parametrize("attempts", [[], lot(1), lot(2), [attempt("A", "no verdict", final=False)]])
def test_small_lots_have_a_summary(attempts):
    """Lots of no part, one, two, or one that waits are shown without trouble."""
    assert "Lot LOT-7" in printed(terminal.lot_summary(summarise(attempts, LIMITS), "LOT-7", LIMITS))


def test_a_lots_sentence_counts_right():
    """One and many, one reason, several, and a tie, in words."""
    fail = {"reasons": (("below-min", "qm"),)}
    cases = {
        "No part of this lot has been screened.": [],
        "1 of 1 part passed.": [attempt("A")],
        "0 of 2 parts passed; 1 failed: Qm below the lowest allowed; 1 has no verdict.": [
            attempt("A", "fail", **fail),
            attempt("B", "no verdict"),
        ],
        "0 of 2 parts passed; 2 failed, for 2 reasons.": [attempt("A", "fail", **fail), attempt("B", "fail")],
        "0 of 3 parts passed; 3 failed, most often: fs above the highest allowed.": [
            attempt("A", "fail", **fail),
            attempt("B", "fail"),
            attempt("C", "fail"),
        ],
    }
    for sentence, attempts in cases.items():
        assert lot_sentence(summarise(attempts, LIMITS).yields) == sentence


def test_a_lot_is_held_against_its_least_yield():
    """Exactly the least yield meets it; without one, or without a final verdict, no mark is given away."""
    yields = summarise([attempt(str(k)) for k in range(9)] + [attempt("9", "fail")], LIMITS).yields
    assert lot_mark(yields, with_least_yield(0.9))[0] == "pass"
    assert lot_mark(yields, with_least_yield(0.91))[0] == "fail"
    assert lot_mark(yields, with_least_yield(None))[0] == ""
    waiting = summarise([attempt("A", "no verdict", final=False)], LIMITS).yields
    assert lot_mark(waiting, LIMITS) == (
        "no verdict",
        "No part has a final verdict yet. 1 part waits for another try.",
    )
    assert "too small to be sure" in lot_mark(yields, with_least_yield(0.9))[1]


@pytest.mark.parametrize(
    ("value", "text"), [(0.0, "0.0 %"), (1.0, "100.0 %"), (0.9996, "> 99.9 %"), (0.0004, "< 0.1 %"), (None, "–")]
)
def test_a_percentage_is_never_rounded_to_all_or_none(value, text):
    """One failed part in ten thousand is not 100.0 %."""
    assert percent(value) == text


# ── a part ───────────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True)
class Stored:
    """A record with its place, as the store gives it."""

    record: Record
    chain: str = "7f3a"
    seq: int = 12
    hash: str = "9d0c5b1e2a44" + "0" * 52
    revision: str = "C"


def stored(serial: str, verdict: Verdict, number: int, *, final: bool = True, text: str = "") -> Stored:
    opening = Opening(
        serial, "scanned", "LOT-7", "MD-1650", "0f" * 32, "invented", number, 1, {}, "2026-11-20T06:12:00.000000Z"
    )
    reasons = (Reason("above-max", "fs", 1.0, 2.0, text),) if text else ()
    sweep = Sweep(np.array([1.0]), np.array([1.0 + 0j]))
    judgement = Judgement(verdict, "M" if verdict is Verdict.PASS else None, reasons, {})
    at = "2026-11-20T06:12:09.123456Z"
    return Stored(Record(opening, sweep, None, judgement, Correction(), (), {}, final, at))


def test_a_history_has_a_line_an_attempt():
    """Each attempt with its time, lot, limits, try, verdict, reason and hash, in the order given."""
    found = [
        stored("MD-0007", Verdict.NONE, 1, final=False, text="the contact is unstable"),
        stored("MD-0007", Verdict.PASS, 2),
    ]
    text = printed(terminal.history_table("MD-0007", found))
    assert "MD-0007: 2 attempts" in text
    first, second = text.splitlines()[2:4]
    assert "2026-11-20 06:12:09 UTC" in first
    assert "▲ NO VERDICT" in first
    assert "the contact is unstable" in first
    assert "● PASS  grade M" in second
    assert "9d0c5b1e2a44" in second


ODD = ["[bold red]x[/]", "A\x1b[31m", "<b>", "[/nothing]", "back\x08space", "\u202egnp"]


@pytest.mark.parametrize("serial", ODD)
def test_odd_serials_are_neither_markup_nor_control(serial):
    """A serial with markup or escape codes is shown as it is, control characters as pictures."""
    found = [stored(serial, Verdict.FAIL, 1, text=f"{serial} is odd")]
    text = printed(terminal.history_table(serial, found))
    assert visible(serial) in text
    assert not set("\x1b\x08\u202e") & set(text)


FIT = Fit(
    FitStatus.OK,
    "",
    {
        "fs": Value(1650210.4, 170.0, "Hz"),
        "qm": Value(200.4, 1.1, "1"),
        "fr": Value(None, None, "Hz"),
    },
    (Mode(1650210.4, 200.4, 0.8, True), Mode(1712e3, 90.0, 0.02, False)),
    Residual(0.0031, 795),
    (Caveat("absent", "fr", "the phase never crosses zero"),),
)


def test_a_fit_shows_values_with_their_uncertainty_and_what_to_keep_in_mind():
    """Sign, value ± U with k stated, the misfit, other modes, and warnings; a missing value is a dash."""
    text = printed(terminal.fit_table("disc[1].csv", FIT))
    lines = text.splitlines()
    assert lines[0] == "disc[1].csv"
    assert "value ± U (k = 2)" in text
    assert any(line.startswith("fs") and "1 650.21 ± 0.34 kHz" in line for line in lines)
    assert any(line.startswith("Qm") and "200.4 ± 2.2" in line for line in lines)
    assert any(line.startswith("fr") and "–" in line for line in lines)
    assert "0.31 %" in text
    assert "1.712 MHz" in text
    assert "! fr: the phase never crosses zero" in text


def test_a_fit_that_is_not_ok_shows_its_status_and_message_alone():
    """No numbers where there are none to vouch for."""
    text = printed(terminal.fit_table("x.csv", Fit(FitStatus.NO_RESONANCE, "nothing rises above the noise")))
    assert text.split("\n")[1].startswith("▲ no-resonance  nothing rises above the noise")


# ── limits and the store ─────────────────────────────────────────────────────────────────────


def test_limits_are_explained_by_section():
    """Each section has a head, each requirement a line with its limits and action."""
    text = printed(terminal.limits_table(LIMITS))
    for wanted in ("Part", "Requirements", "Grades", "1 638 kHz", "Yellow tray.", "C at 1 kHz"):
        assert wanted in text


@dataclass(frozen=True)
class Chain:
    chain: str = "7f3a"
    records: int = 40
    head: str | None = "9d0c5b1e2a44ffff"
    anchored_to: int | None = 40


@dataclass(frozen=True)
class Finding:
    kind: str = "changed"
    chain: str | None = "7f3a"
    seq: int | None = 17
    serial: str | None = "MD-[0]\x1b"
    text: str = "its document does not match its hash"


@dataclass(frozen=True)
class Soundness:
    sound: bool
    chains: tuple[Chain, ...] = (Chain(), Chain("empty", 0, None, None))
    findings: tuple[Finding, ...] = ()


def test_a_sound_store_says_up_to_where():
    """Sound: word, shape, how many records, how far an anchor vouches for each chain."""
    text = printed(terminal.soundness(Soundness(True)))
    assert text.startswith("● SOUND  40 records")
    assert "an anchor vouches up to record 40" in text
    assert "no anchor vouches for it" in text


def test_findings_are_listed():
    """Unsound: word, shape, and each finding with kind, record, serial and sentence."""
    text = printed(
        terminal.soundness(Soundness(False, findings=(Finding(), Finding("tail-cut", None, None, None, "cut"))))
    )
    assert text.startswith("■ UNSOUND  2 findings in 40 records.")
    assert "changed" in text
    assert "MD-[0]␛" in text
    assert "tail-cut" in text


def test_phrases_cover_codes_that_are_not_known():
    """A code of a later version still reads as words."""
    assert phrase("too-close", "tan_delta") == "tan δ too close to its limit to prove"
    assert phrase("not-yet-invented", "nothing_known") == "not yet invented"
    assert phrase("above-max", None) == "the value above the highest allowed"


def test_a_summary_of_values_needs_no_other_libraries():
    """The terminal's tables do not wait for the page's template engine."""
    import subprocess
    import sys

    code = "import sys, harness.report.terminal; print('jinja2' in sys.modules, 'scipy.stats' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == (
        "False False\n"
    )


def test_values_of_a_part_are_those_of_its_last_attempt():
    """The rows of tables show how a part stands now."""
    from harness.report.part_rows import part_rows

    first, second = sound_values(1), sound_values(2)
    rows = part_rows(
        [attempt("A", "no verdict", values=first, final=False), attempt("A", values=second, number=2, grade="L")]
    )
    assert (rows[0].attempts, rows[0].verdict, rows[0].grade, rows[0].reason) == (2, "pass", "L", "")
    assert rows[0].values["fs"] == second["fs"]
