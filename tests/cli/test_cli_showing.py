"""What the operator sees: verdict first, reason second, everything else quiet; on any width of terminal."""

from __future__ import annotations

import io
import os
import pty
import re
import select
import signal
import subprocess
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from cli_desk import COMMAND, LIMITS, LOT, Screened, log_text, run, served
from rich.console import Console

from harness.cli import output, watching
from harness.cli.showing import action_for, event_text, told
from harness.cli.typing_in import TypedLines
from harness.judging.limit_file import parse_limits
from harness.records import Correction, Judgement, LimitSet, Opening, Reason, Record, Verdict
from harness.report.hanging import wrapped
from harness.run import events as e
from harness.store import Written

pytest_plugins = ["cli_fixtures"]

TOO_HIGH = "fs 1 671.2 kHz is 1.2 kHz above the highest allowed 1 670.0 kHz"
ABOVE = Reason("above-max", "fs", 1671200.0, 1670000.0, TOO_HIGH)
FAULT = Reason("no-answer", None, None, None, "meter: no answer came within 5 s.")


@pytest.fixture
def limits() -> LimitSet:
    return parse_limits(LIMITS.read_text(encoding="utf-8"), str(LIMITS))


def written(seq: int) -> Written:
    return Written("c", seq, "0" * 64, record_id=seq)


def recorded(
    verdict: Verdict, *reasons: Reason, number: int = 1, final: bool = True, serial: str = "MD-0001"
) -> e.Recorded:
    """An attempt on record (invented)."""
    opening = Opening(serial, "scanned", "L-7", "MD-1650", "0" * 64, "x", number, 1, {}, "2026-03-02T08:00:00.000000Z")
    judgement = Judgement(verdict, "M" if verdict is Verdict.PASS else None, reasons, {})
    record = Record(opening, None, None, judgement, Correction(), (), {}, final, "2026-03-02T08:00:01.000000Z")
    return e.Recorded(record, written(1))


def shown(limits: LimitSet, *events: e.Event, width: int = 80, terminal: bool = False) -> str:
    """What stands on a terminal after these events, without colour."""
    out = io.StringIO()
    console = Console(file=out, width=width, no_color=True, highlight=False, force_terminal=terminal)
    show = watching.shower(limits, console)
    for event in events:
        show(event)
    return out.getvalue()


@pytest.mark.parametrize(
    ("event", "first"),
    [
        (recorded(Verdict.PASS), "● PASS          MD-0001  grade M"),
        (recorded(Verdict.FAIL, ABOVE), "■ FAIL          MD-0001"),
        (recorded(Verdict.NONE, FAULT), "▲ NO VERDICT    MD-0001"),
        (recorded(Verdict.NONE, FAULT, number=2), "▲ NO VERDICT    MD-0001  try 2"),
    ],
)
def test_the_verdict_comes_first(event: e.Recorded, first: str, limits: LimitSet) -> None:
    """Shape and word at the left edge, serials in one column whatever the verdict."""
    assert shown(limits, event).splitlines()[0].rstrip() == first


def test_the_reason_comes_second_and_then_what_to_do(limits: LimitSet) -> None:
    """Two or three lines; the limit file's own words for the operator."""
    lines = shown(limits, recorded(Verdict.FAIL, ABOVE), width=120).splitlines()
    assert lines[1].strip() == ABOVE.text
    assert lines[2].strip() == "→ Yellow tray. Tell the lapping shop: thickness."
    assert len(lines) == 3


def test_many_reasons_are_counted(limits: LimitSet) -> None:
    """Three are shown, of the others how many there are."""
    reasons = [replace(ABOVE, text=f"reason {k}") for k in range(6)]
    text = shown(limits, recorded(Verdict.FAIL, *reasons))
    assert "reason 2" in text
    assert "reason 3" not in text
    assert "and 3 more reasons" in text


def test_no_verdict_says_whether_it_is_measured_again(limits: LimitSet) -> None:
    """Not final: once more. Final: hold. A pass asks for nothing."""
    again, hold = (recorded(Verdict.NONE, FAULT, final=final).record for final in (False, True))
    assert action_for(again.judgement, limits, again.final) == "It is measured once more."
    assert action_for(hold.judgement, limits, hold.final) == "Set the part on hold for a person to decide."
    assert action_for(recorded(Verdict.PASS).record.judgement, limits, True) == ""


def test_a_fault_that_is_the_reason_is_said_once_and_after_the_verdict(limits: LimitSet) -> None:
    """Trouble during a part waits for its verdict; the verdict's own reason is not repeated, another is."""
    other = e.BenchTrouble("scanner: the port is gone.")
    text = shown(limits, e.Opened("MD-0001", 1), e.BenchTrouble(FAULT.text), other, recorded(Verdict.NONE, FAULT))
    assert text.startswith("▲ NO VERDICT")
    assert text.count("no answer came") == 1
    assert text.index("scanner") > text.index("no answer came")


def test_what_asks_for_a_person_is_loud(limits: LimitSet) -> None:
    """Refused parts and a held lot stand where verdicts stand, with a word and a shape."""
    text = shown(
        limits,
        e.Refused("MD-0007", "already judged in this lot: pass at 2026-03-02T08:00:01.000000Z. A verdict stands."),
        e.Held("3 parts in a row without a verdict."),
    )
    lines = [line.rstrip() for line in text.splitlines()]
    assert lines[0] == "▲ NOT MEASURED  MD-0007"
    assert lines[1] == f"{'':16}Already judged in this lot: pass at 2026-03-02 08:00:01 UTC. A"
    assert "▲ LOT HELD" in lines


def test_the_end_counts_the_parts_of_this_run(limits: LimitSet) -> None:
    """Final records by verdict; a try that is repeated does not count."""
    text = shown(
        limits,
        recorded(Verdict.PASS),
        recorded(Verdict.NONE, FAULT, final=False),
        recorded(Verdict.NONE, FAULT, number=2),
        e.Ended(2, 1, ""),
    )
    assert text.splitlines()[-1] == "End: 2 parts judged (1 pass, 1 no verdict), 1 not measured."
    assert told({}) == ""


def test_the_line_of_what_happens_now_is_for_terminals_alone(limits: LimitSet) -> None:
    """On a terminal a quiet line that the verdict replaces; in a log nothing."""
    events = (e.Opened("MD-0001", 1), e.Measuring("MD-0001", "locate"), recorded(Verdict.PASS))
    assert "looking for its resonance" not in shown(limits, *events)
    text = shown(limits, *events, terminal=True)
    assert "MD-0001  looking for its resonance" in text
    assert text.index("\r") < text.index("● PASS")


def test_a_prompt_is_not_said_twice(limits: LimitSet) -> None:
    """What the station waits for stands in its greeting; the next time it is said again."""
    prompt = "Load a part."
    text = shown(limits, e.Ready("s", "L", 0, prompt), e.Waiting(prompt), recorded(Verdict.PASS), e.Waiting(prompt))
    assert text.count(prompt) == 2


def test_text_from_outside_moves_no_cursor(limits: LimitSet) -> None:
    """Control characters in serials and sentences are shown, not obeyed."""
    evil = "\x1b[2J\r"
    reason = replace(FAULT, text=f"answer {evil}")
    text = shown(
        limits, recorded(Verdict.NONE, reason, serial=evil), e.Refused(evil, f"no {evil}"), e.BenchTrouble(evil)
    )
    assert "\x1b" not in text
    assert "\r" not in text
    assert "\x1b" not in event_text(e.Refused(evil, evil))


def test_every_event_has_words_or_needs_none(limits: LimitSet) -> None:
    """One sentence for each; silence for what is shown otherwise."""
    silent = (e.Opened("s", 1), e.Measuring("s", "locate"), recorded(Verdict.PASS))
    spoken = (
        e.Ready("s", "L", 2, "Load."),
        e.Interrupted(written(9)),
        e.Waiting("Load."),
        e.Refused("", "no code."),
        e.BenchTrouble("gone."),
        e.Held("3 parts."),
        e.Ended(1, 0, "short."),
    )
    assert [event_text(event) for event in silent] == ["", "", ""]
    assert all(event_text(event).endswith(".") for event in spoken)
    assert "after 2 records" in event_text(spoken[0])
    assert "record 9" in event_text(spoken[1])
    assert "a part without a code" in event_text(spoken[3])


# ── widths ───────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("width", range(24, 90, 7))
def test_numbers_are_not_torn_from_their_units(width: int) -> None:
    """At any width a number stays with its thousands and its unit, and no word is lost."""
    text = "fs 1 662.049 kHz is 0.049 kHz above the highest allowed 1 662.000 kHz, too close to prove (u 0.18 kHz)"
    lines = wrapped(text, width)
    assert " ".join(lines) == text
    assert max(map(len, lines)) <= width
    assert not any(re.search(r"[0-9]$", line) for line in lines)


@pytest.mark.parametrize("width", [60, 80, 100, 200])
def test_nothing_runs_past_the_edge(width: int, limits: LimitSet) -> None:
    """Every line of a failed and a refused part fits the terminal, and begins under its verdict."""
    text = shown(
        limits, recorded(Verdict.FAIL, ABOVE, ABOVE), e.Refused("X" * 30, "no " * 60), e.Held("so " * 60), width=width
    )
    lines = [line.rstrip() for line in text.splitlines()]
    assert max(map(len, lines)) <= width
    assert all(line.startswith(("■", "▲", " " * 16)) for line in lines)


TABLES = (
    ("lot", LOT),
    ("history", "MD-0003"),
    ("replay", LOT, "--limits", str(LIMITS)),
    ("fit", "a.csv"),
    ("record", "verify"),
    ("limits", "explain", str(LIMITS)),
    ("limits", "check", str(LIMITS)),
)


@pytest.mark.parametrize("width", [80, 120, 200])
@pytest.mark.parametrize("command", TABLES, ids=lambda words: " ".join(words[:2]))
def test_tables_do_not_fall_apart(
    command: tuple[str, ...], width: int, screened: Screened, desk: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """On a terminal of that width no line is longer, and no number of a table is broken over two lines."""
    (desk / "a.csv").write_text(log_text(), encoding="utf-8")
    monkeypatch.setenv("RINGTRUE_STORE", str(screened.store))

    def terminal(*, err: bool = False) -> Console:
        import sys

        return Console(file=sys.stderr if err else sys.stdout, width=width, no_color=True, highlight=False)

    for module in ("lot", "history", "replay", "fit", "record", "limits"):
        monkeypatch.setattr(f"harness.cli.{module}.console", terminal)
    ran = run(*command)
    assert ran.code == 0, ran.err
    lines = [line.rstrip() for line in ran.out.splitlines()]
    assert max(map(len, lines)) <= width
    # a cell that was folded leaves a line that holds nothing but a piece of a number
    assert not [line for line in lines if re.fullmatch(r"\s*[0-9. ]+\)?", line) and line.strip()]
    if command[0] == "history":
        assert ran.out.count("▲ NO VERDICT") == 2


# ── at a terminal ────────────────────────────────────────────────────────────────────────────


class Terminal:
    """A command at a pseudo-terminal of 80 columns."""

    def __init__(self, *arguments: object, cwd: Path) -> None:
        self.ours, theirs = pty.openpty()
        environment = {**os.environ, "TERM": "xterm", "COLUMNS": "80", "NO_COLOR": "1"}
        self.process = subprocess.Popen(
            [COMMAND, *map(str, arguments)], stdin=theirs, stdout=theirs, stderr=theirs, cwd=cwd, env=environment,
            start_new_session=True,
        )  # fmt: skip
        os.close(theirs)
        self.seen = ""

    def until(self, text: str, times: int = 1, timeout_s: float = 30) -> None:
        """Read until ``text`` stands there so many times."""
        deadline = time.monotonic() + timeout_s
        while self.seen.count(text) < times:
            ready, _, _ = select.select([self.ours], [], [], max(0.0, deadline - time.monotonic()))
            assert ready, f"{text!r} did not come: {self.seen}"
            self.seen += os.read(self.ours, 65536).decode()

    def type(self, text: str) -> None:
        os.write(self.ours, text.encode())

    def end(self) -> int:
        code = self.process.wait(30)
        os.close(self.ours)
        return code


@pytest.fixture
def at_a_bench(desk: Path) -> Callable[..., Terminal]:
    """Start a screening by hand at a simulated bench without scanner and handler."""
    (desk / "bench").mkdir()
    with served(desk / "bench", "--parts", "3", "--seed", "2") as at:
        station = Path(at["station"]).read_text(encoding="utf-8").split("[bench.scanner]")
        (desk / "s.toml").write_text(station[0] + "[fixture]" + station[1].split("[fixture]")[1], encoding="utf-8")
        started: list[Terminal] = []

        def start(*options: object) -> Terminal:
            common = ("--limits", LIMITS, "--station", "s.toml", "--store", "s.db")
            started.append(Terminal("screen", "L-1", *common, *options, cwd=desk))
            return started[-1]

        yield start
        for one in started:
            one.process.kill()
            one.process.wait()


def test_ctrl_c_at_the_prompt_ends_the_lot(at_a_bench: Callable[..., Terminal]) -> None:
    """Nothing in hand: one Ctrl-C ends at once and cleanly, exit 0."""
    station = at_a_bench()
    station.until("Serial: ")
    station.process.send_signal(signal.SIGINT)
    station.until("End: 0 parts judged.")
    assert station.end() == 0


def test_ctrl_d_at_the_prompt_ends_the_lot(at_a_bench: Callable[..., Terminal]) -> None:
    """A typed serial is measured; Ctrl-D is the end, on a line of its own."""
    station = at_a_bench()
    station.until("Serial: ")
    station.type("MD-0001\n")
    station.until("try 2")
    station.until("Serial: ", times=2)
    station.type("\x04")
    station.until("\r\nEnd: 1 part judged (1 no verdict)")
    assert station.end() == 0


def test_a_list_by_hand_waits_for_each_part(at_a_bench: Callable[..., Terminal], desk: Path) -> None:
    """Without a handler a person says when each part of a list is in place."""
    (desk / "l.txt").write_text("MD-0001\nMD-0002\n", encoding="utf-8")
    station = at_a_bench("--serials", "l.txt")
    station.until("Load part MD-0001")
    station.until("In place? Enter: ")
    assert "NO VERDICT" not in station.seen
    station.type("\n")
    station.until("Load part MD-0002")
    station.process.send_signal(signal.SIGINT)
    station.until("End: 1 part judged")
    assert station.end() == 0


def test_typed_lines_come_whole_and_end(tmp_path: Path) -> None:
    """Two lines in one piece, one in two pieces, a last one without its end, then the end; a stop ends as well."""
    ours, theirs = os.pipe()
    with os.fdopen(ours, encoding="utf-8") as stream:
        lines = TypedLines(stream, lambda: False, "? ")
        os.write(theirs, b"MD-1\nMD-2\nMD")
        assert [lines(), lines()] == ["MD-1\n", "MD-2\n"]
        os.write(theirs, b"-3\nM\xc3\xbcller")
        os.close(theirs)
        assert [lines(), lines(), lines()] == ["MD-3\n", "Müller", ""]
    ours, theirs = os.pipe()
    with os.fdopen(ours, encoding="utf-8") as stream, os.fdopen(theirs, "w"):
        assert TypedLines(stream, lambda: True, "? ")() == ""
    assert TypedLines(io.StringIO("MD-4\n"), lambda: False, "? ")() == "MD-4\n"


# ── sentences ────────────────────────────────────────────────────────────────────────────────


def test_times_are_shown_to_the_second() -> None:
    """A record's own time, as people read it; other text stays."""
    text = "since 2026-11-20T06:12:09.123456Z, and 2026-11-20T06:12:09Z; at 12:09"
    assert output.plain_times(text) == "since 2026-11-20 06:12:09 UTC, and 2026-11-20 06:12:09 UTC; at 12:09"


def test_errors_wrap_between_words_on_a_terminal(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """In a log one line; on a terminal broken between words, never inside a path."""
    import sys

    sentence = "/a/very/long/path/of-some-file.toml: " + "word " * 30
    output.say(sentence)
    assert len(capsys.readouterr().err.splitlines()) == 1
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True)
    monkeypatch.setenv("COLUMNS", "60")
    output.say(sentence)
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) > 2
    assert max(map(len, lines)) <= 60
    assert all(line.startswith(("ringtrue: ", "  ")) for line in lines)
