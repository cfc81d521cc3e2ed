"""Every scripted fault at every stage of a part, over HiSLIP and over a TCP socket: never a wrong verdict.

``pytest -n 0 -s tests/faults`` prints what was tried and how it ended.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import pytest
from faulty_bench import LOT, NOW, FaultyBench, Run, limits

from harness.errors import StationError
from harness.records import Verdict
from harness.store import open_store, verify

A, B, C, OPEN = "MD-0001", "MD-0002", "MD-0003", "MD-0004"
TRUTH = {A: {"pass"}, B: {"fail"}, C: {"pass"}}
WIRES = ("hislip", "socket")
STAGES = 5  # contact, locate, resolve, first frequency again, contact again

# What each fault of the meter is called in the record. Over the two wires trouble looks different: bytes that mean
# nothing may be a wrong answer, a wrong number of points, or a line that never ends.
NAMED: dict[str, set[str]] = {
    "silence": {"no-answer"},
    "late-answer": {"no-answer"},
    "half-block": {"no-answer"},
    "wrong-count": {"bad-answer"},
    "garbage": {"bad-answer", "no-answer", "connection-lost", "not-usable"},
    "nan": {"not-usable"},
    "infinity": {"not-usable"},
    "error-in-queue": {"instrument-error"},
    "frequency-not-accepted": {"not-usable"},
    "drop-connection": {"connection-lost"},
}
# What a fault of the part itself comes to: seen by the contact check, by the first frequency again, or in the fit.
SEEN = {"no-part", "poor-contact", "changed-during-sweep", "not-resolved", "disturbed", "u-too-large", "bad-data"}

table: list[tuple[str, str, int, int, str]] = []


@pytest.fixture(scope="module")
def rig(tmp_path_factory: pytest.TempPathFactory) -> Iterator[FaultyBench]:
    """One bench for all; every run leaves it without faults and with an empty fixture."""
    with FaultyBench(tmp_path_factory.mktemp("bench")) as made:
        yield made
    print("\nfault                     wire    attempts  struck  ended as")
    for name, wire, attempts, struck, ended in sorted(table):
        print(f"{name:<25} {wire:<7} {attempts:>8}  {struck:>6}  {ended}")


def note(name: str, wire: str, run: Run) -> None:
    ended = [*sorted(set(run.codes())), *(["true verdicts"] if run.verdicts() else [])]
    ended += [f"exit {run.error.exit_code}"] if run.error else []
    table.append((name, wire, len(run.records), len(run.codes()), ", ".join(ended)))


def arm_at_every_stage(rig: FaultyBench, name: str) -> None:
    """The k-th attempt meets the fault at its k-th stage: it ends there, so k(k + 1)/2 sweeps have gone by."""
    for k in range(1, STAGES + 1):
        nth = k * (k + 1) // 2
        of_list = name == "frequency-not-accepted"
        rig.arm(name, when=f"command SENSe:LIST:FREQuency {nth}" if of_list else f"sweep {nth}", seconds=3)


def store_is_whole(path: Path, run: Run) -> None:
    """No attempt is left open, every record shown is there, and the chain is sound."""
    with open_store(str(path), mode="read", now=NOW) as store:
        assert store.interrupted() == ()
        assert [one.seq for one in store.lot_summaries(LOT)] == list(range(1, len(run.records) + 1))
        assert verify(store).sound


@pytest.mark.parametrize("wire", WIRES)
def test_without_faults_the_verdicts_are_the_truth(rig: FaultyBench, wire: str, tmp_path: Path) -> None:
    """Sound parts pass, the wrong thickness fails, the open lead goes to hold after its tries."""
    assert [rig.truth(serial)["defect"] for serial in (A, B, C, OPEN)] == [
        "sound", "wrong-thickness", "sound", "open-lead",
    ]  # fmt: skip
    run = rig.screen(wire, [A, B, C, OPEN], tmp_path / "s.db")
    note("(none)", wire, run)
    assert run.error is None
    assert run.verdicts() == TRUTH
    assert run.codes() == ["no-part", "no-part"]
    assert run.trouble == []
    store_is_whole(tmp_path / "s.db", run)


@pytest.mark.parametrize("wire", WIRES)
@pytest.mark.parametrize("name", NAMED)
def test_fault_of_the_meter_at_every_stage(rig: FaultyBench, name: str, wire: str, tmp_path: Path) -> None:
    """Struck at each of the five stages in turn: five no verdicts with the fault's name, then the true verdict.

    No sweep of a struck attempt is kept; the bench is reopened after each; the next parts are judged as ever.
    """
    arm_at_every_stage(rig, name)
    run = rig.screen(wire, [A, B, C], tmp_path / "s.db", limits(attempts=9))
    note(name, wire, run)
    assert run.error is None
    assert run.verdicts() == TRUTH
    assert len(run.codes()) >= STAGES
    assert set(run.codes()) <= NAMED[name]
    struck = [record for record in run.records if record.judgement.verdict is Verdict.NONE]
    assert all(record.sweep is None and record.fit is None and not record.final for record in struck)
    assert run.trouble.count("The bench was reopened.") == len(struck)
    assert {record.opening.serial for record in run.records[:STAGES]} == {A}
    store_is_whole(tmp_path / "s.db", run)


@pytest.mark.parametrize("wire", WIRES)
@pytest.mark.parametrize("name", ["contact-bounce", "part-pulled-out"])
def test_fault_of_the_contact_at_every_stage(rig: FaultyBench, name: str, wire: str, tmp_path: Path) -> None:
    """A contact that bounces or opens, at each sweep of a part: no verdict or, where it did no harm, the true one."""
    for stage, serial in [(stage, A) for stage in range(1, STAGES + 1)] + [(2, B), (3, B)]:
        rig.arm(name, when=f"sweep {stage}")
        store = tmp_path / f"{stage}-{serial}.db"
        run = rig.screen(wire, [serial], store)
        note(f"{name}, sweep {stage}", wire, run)
        assert run.error is None
        assert run.verdicts() == {serial: TRUTH[serial]}
        assert set(run.codes()) <= SEEN
        store_is_whole(store, run)


@pytest.mark.parametrize("wire", WIRES)
def test_contact_lost_for_good_is_held(rig: FaultyBench, wire: str, tmp_path: Path) -> None:
    """The part is pulled out in every attempt: no verdict, hold, and the next part as ever."""
    rig.arm("part-pulled-out", when="sweep 2", times=1)
    rig.arm("part-pulled-out", when="sweep 7", times=1)
    before = len(rig.outcomes(A))
    run = rig.screen(wire, [A, C], tmp_path / "s.db")
    note("part-pulled-out, twice", wire, run)
    assert run.verdicts() == {C: {"pass"}}
    assert len(run.codes()) == 2
    assert set(run.codes()) <= SEEN
    assert rig.outcomes(A)[before:] == ["AGAIN", "HOLD"]


@pytest.mark.parametrize("wire", WIRES)
def test_meter_silent_for_good_ends_with_exit_3(rig: FaultyBench, wire: str, tmp_path: Path) -> None:
    """No answer at a part, nor at three reopenings: StationError; the part's record is there; no verdict signalled.

    The next start, on a sound bench, goes on with the same part.
    """
    rig.arm("silence", when="sweep 3", times=1000)
    before = rig.outcomes(A)
    run = rig.screen(wire, [A], tmp_path / "s.db")
    note("silence, for good", wire, run)
    assert isinstance(run.error, StationError)
    assert run.error.exit_code == 3
    assert "could not be reopened in 3 tries" in str(run.error)
    assert run.codes() == ["no-answer"]
    assert rig.outcomes(A) == before
    store_is_whole(tmp_path / "s.db", run)
    again = rig.screen(wire, [A, B], tmp_path / "s.db")
    assert again.verdicts() == {A: {"pass"}, B: {"fail"}}
    assert again.records[0].opening.number == 2


@pytest.mark.parametrize("wire", WIRES)
def test_another_instrument_at_the_reopening(rig: FaultyBench, wire: str, tmp_path: Path) -> None:
    """After a fault another instrument answers: that reopening counts as failed, the next finds the right one."""
    rig.arm("drop-connection", when="sweep 2")
    rig.arm("wrong-identity", when="sweep 2")
    run = rig.screen(wire, [A, B], tmp_path / "s.db")
    note("wrong-identity", wire, run)
    assert run.error is None
    assert run.verdicts() == {A: {"pass"}, B: {"fail"}}
    assert run.codes() == ["connection-lost"]
    assert any("answers here now" in text for text in run.trouble)
    assert len({json.dumps([i.maker, i.serial]) for record in run.records for i in record.instruments}) == 1


@pytest.mark.parametrize("wire", WIRES)
def test_another_instrument_for_good_ends_with_exit_3(rig: FaultyBench, wire: str, tmp_path: Path) -> None:
    """The other instrument stays: nothing is measured with it, exit code 3."""
    rig.arm("drop-connection", when="sweep 2")
    rig.arm("wrong-identity", when="sweep 2", times=1000)
    run = rig.screen(wire, [A], tmp_path / "s.db")
    note("wrong-identity, for good", wire, run)
    assert isinstance(run.error, StationError)
    assert "answers here now" in str(run.error)
    assert run.verdicts() == {}
    store_is_whole(tmp_path / "s.db", run)


@pytest.mark.parametrize("wire", WIRES)
@pytest.mark.parametrize("name", ["silence", "late-answer", "garbage", "drop-connection"])
def test_fault_at_start_up_ends_with_exit_3(rig: FaultyBench, name: str, wire: str, tmp_path: Path) -> None:
    """The meter fails when it is asked who it is: StationError, and no part was asked for."""
    rig.arm(name, when="command *IDN?", seconds=3)
    run = rig.screen(wire, [], tmp_path / "s.db")
    note(f"{name}, start-up", wire, run)
    assert type(run.error) is StationError
    assert run.error.exit_code == 3
    assert rig.at[wire] in str(run.error)
    assert run.events == []


def test_handler_stuck_on_a_request_is_asked_again(rig: FaultyBench, tmp_path: Path) -> None:
    """READY goes unanswered twice: it is sent again, and the parts are judged as ever."""
    rig.arm("handler-stuck", when="command READY", times=2)
    run = rig.screen("socket", [A, B], tmp_path / "s.db")
    note("handler-stuck, READY", "socket", run)
    assert run.error is None
    assert run.verdicts() == {A: {"pass"}, B: {"fail"}}


def test_handler_stuck_on_a_verdict_ends_with_exit_3(rig: FaultyBench, tmp_path: Path) -> None:
    """The verdict is durable and was shown; nothing else is measured; the next start finds the part judged."""
    rig.arm("handler-stuck", when="command VERDICT")
    run = rig.screen("socket", [B, A], tmp_path / "s.db")
    note("handler-stuck, VERDICT", "socket", run)
    assert isinstance(run.error, StationError)
    assert run.error.exit_code == 3
    assert "did not acknowledge" in str(run.error)
    assert run.verdicts() == {B: {"fail"}}
    store_is_whole(tmp_path / "s.db", run)
    before = len(rig.outcomes(B))
    again = rig.screen("socket", [B, A], tmp_path / "s.db")
    assert again.verdicts() == {A: {"pass"}}
    assert "already judged in this lot: fail" in again.refused[0]
    assert rig.outcomes(B)[before:] == ["HOLD"]


def test_lost_scan_sends_the_part_to_hold(rig: FaultyBench, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Nobody knows which part it is: not measured, on hold, no record; the next part is taken by its own code."""
    monkeypatch.setattr("harness.run.lot._SCAN_S", 2.0)
    rig.arm("scan-lost")
    before = len(rig.outcomes(A))
    run = rig.screen("socket", [A, B], tmp_path / "s.db")
    note("scan-lost", "socket", run)
    assert run.error is None
    assert run.refused == ["no code was read within 2 s; the part goes to hold."]
    assert rig.outcomes(A)[before:] == ["HOLD"]
    assert run.verdicts() == {B: {"fail"}}
    store_is_whole(tmp_path / "s.db", run)
