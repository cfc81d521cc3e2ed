"""Sweeps judged again: the same bits as at the station, and the records left as they are.

The records are those of a real lot: screened on the simulated bench through sockets and pseudo-terminals.
"""

from __future__ import annotations

import hashlib
import json
import socket
import subprocess
import sys
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from harness.analysis import analyse
from harness.demo import simulated_bench
from harness.errors import SetupError
from harness.judging.limit_file import parse_limits
from harness.records import Fit, Judgement, LimitSet, Verdict
from harness.replay import Replayed, replay_lot
from harness.run.events import Event, Recorded
from harness.run.lot import screen_lot
from harness.run.part import Job
from harness.run.serials import FromScanner
from harness.station import find_limits, open_station, parse_station
from harness.store import Store, StoredRecord, open_store, verify

NOW = "2026-03-02T08:00:00.000000Z"
LOT = "L-7"
FAULTY = "MD-0002"
OTHER_PROCESS = """\
import sys
from pathlib import Path
from harness.judging.limit_file import parse_limits
from harness.replay import replay_lot
from harness.store import open_store
store, limits = Path(sys.argv[1]), Path(sys.argv[2])
with open_store(str(store), mode="read", now="2026-03-02T08:00:00.000000Z") as opened:
    for one in replay_lot(opened, "L-7", parse_limits(limits.read_text(encoding="utf-8"), "limits")):
        print(repr((one.serial, one.judgement, one.fit)))
"""


@dataclass(frozen=True)
class Lot:
    """A screened lot: its closed store, its limits, and the events of its screening."""

    path: Path
    limits: LimitSet
    events: list[Event]

    def opened(self) -> Store:
        return open_store(str(self.path), mode="read", now=NOW)

    def records(self) -> list[StoredRecord]:
        with self.opened() as store:
            return list(store.records_of_lot(LOT))

    def replayed(self, limits: LimitSet | None = None) -> list[Replayed]:
        with self.opened() as store:
            return list(replay_lot(store, LOT, limits or self.limits))


def control(at: Mapping[str, Any], **order: object) -> None:
    host, port = at["control"].split(":")
    with socket.create_connection((host, int(port)), 10) as line, line.makefile("rw") as text:
        text.write(json.dumps(order) + "\n")
        text.flush()
        assert json.loads(text.readline())["ok"]


def limits_text() -> str:
    return find_limits("mist-discs/MD-1650.toml").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def lot(tmp_path_factory: pytest.TempPathFactory) -> Lot:
    """Eight parts, one in four or so defective; the second part's first attempt ends in a fault, without a sweep."""
    folder = tmp_path_factory.mktemp("lot")
    limits = parse_limits(limits_text().replace("points = 401", "points = 201"), "MD-1650.toml")
    (folder / "bench").mkdir()
    with simulated_bench(8, 7, folder) as at:
        control(at, command="fault", name="nan", when="sweep 8")
        path = Path(at["station"])
        spec = parse_station(path.read_text(encoding="utf-8"), str(path))
        with open_station(spec, path, str(folder / "ringtrue.db"), "test", NOW, "ringtrue test") as station:
            job = Job(LOT, limits, station.correction, station.conditions(None), "test", {}, lambda: NOW)
            events = list(screen_lot(station, job, FromScanner(station.bench)))
    return Lot(folder / "ringtrue.db", limits, events)


def bits(of: Fit | Judgement | None) -> str:
    """Everything in it as text that differs with any bit: also -0.0 from 0.0, and 1 from 1.0."""
    return json.dumps(None if of is None else asdict(of), sort_keys=True)


def with_sweep(records: list[StoredRecord]) -> list[StoredRecord]:
    return [stored for stored in records if stored.record.sweep is not None]


def test_the_lot_has_something_of_everything(lot: Lot) -> None:
    """Passes, a fail, and a fault's no verdict; what was shown is what was stored."""
    verdicts = {stored.record.judgement.verdict for stored in lot.records()}
    assert verdicts == set(Verdict)
    shown = [event.record.judgement for event in lot.events if isinstance(event, Recorded)]
    assert [bits(stored.record.judgement) for stored in lot.records()] == [bits(one) for one in shown]


def test_every_attempt_comes_out_in_the_same_bits(lot: Lot) -> None:
    """Judgement and fit equal to the last bit of every number, in the records' order; source and original named."""
    records, again = lot.records(), lot.replayed()
    assert [one.source for one in again] == [f"{LOT}/{stored.seq}" for stored in records]
    for stored, one in zip(records, again, strict=True):
        assert one.serial == stored.record.opening.serial
        assert one.original is not None
        assert (one.original.seq, one.original.hash) == (stored.seq, stored.hash)
        if stored.record.sweep is not None:
            assert one.judgement == stored.record.judgement
            assert one.fit == stored.record.fit
            assert bits(one.judgement) == bits(stored.record.judgement)
            assert bits(one.fit) == bits(stored.record.fit)


def test_alone_and_in_any_order_the_bits_are_the_same(lot: Lot, rng: np.random.Generator) -> None:
    """Each attempt by itself, twice, in a shuffled order: what came before does not matter."""
    records = with_sweep(lot.records())
    for k in rng.permutation(np.repeat(np.arange(len(records)), 2)):
        record = records[k].record
        assert record.sweep is not None
        fit, judgement = analyse(record.sweep, lot.limits, record.correction)
        assert bits(judgement) == bits(record.judgement)
        assert bits(fit) == bits(record.fit)


def test_history_gives_the_same_sweeps_as_the_lot(lot: Lot) -> None:
    """A part's own history brings the same bits of its sweep: replay does not depend on the road."""
    with lot.opened() as store:
        for stored in with_sweep(lot.records()):
            same = [one for one in store.history(stored.record.opening.serial) if one.seq == stored.seq]
            sweep, other = stored.record.sweep, same[0].record.sweep
            assert sweep is not None
            assert other is not None
            assert sweep.f_hz.tobytes() == other.f_hz.tobytes()
            assert sweep.z_ohm.tobytes() == other.z_ohm.tobytes()
            assert sweep.readings == other.readings


def test_another_process_gets_the_same_bits(lot: Lot, tmp_path: Path) -> None:
    """A fresh interpreter, with the limit file as the store kept it."""
    kept = tmp_path / "kept.toml"
    with lot.opened() as store:
        kept.write_text(store.limits_text(lot.limits.sha256), encoding="utf-8", newline="")
    command = [sys.executable, "-c", OTHER_PROCESS, str(lot.path), str(kept)]
    said = subprocess.run(command, capture_output=True, text=True, timeout=60, check=True).stdout
    assert said.splitlines() == [repr((one.serial, one.judgement, one.fit)) for one in lot.replayed()]


def test_attempt_without_a_sweep_is_no_verdict(lot: Lot) -> None:
    """A fault left no sweep: judged again it is no verdict, said so, beside an original that keeps its own reason."""
    bare = [one for one in lot.replayed() if one.original is not None and one.original.record.sweep is None]
    assert [one.serial for one in bare] == [FAULTY]
    (one,) = bare
    assert one.judgement.verdict is Verdict.NONE
    assert [reason.code for reason in one.judgement.reasons] == ["no-sweep"]
    assert one.fit is None
    assert one.original is not None
    assert [reason.code for reason in one.original.record.judgement.reasons] == ["not-usable"]


def test_other_limits_change_the_judgement_and_never_the_record(lot: Lot) -> None:
    """Nothing can have a Qm above a thousand: every pass fails; the store's bytes, records and soundness stay."""
    strict = parse_limits(lot.limits.text.replace("min = 140\nu_max = 7", "min = 1000"), "strict.toml")
    before, originals = hashlib.sha256(lot.path.read_bytes()).hexdigest(), [repr(one) for one in lot.records()]
    again = lot.replayed(strict)
    passed = [one for one in again if one.original and one.original.record.judgement.verdict is Verdict.PASS]
    assert passed
    assert all(one.judgement.verdict is Verdict.FAIL for one in passed)
    assert all(one.judgement.reasons[0].characteristic == "qm" for one in passed)
    assert hashlib.sha256(lot.path.read_bytes()).hexdigest() == before
    assert [repr(one) for one in lot.records()] == originals
    with lot.opened() as store:
        assert verify(store).sound


def test_unknown_lot_is_a_set_up_error(lot: Lot) -> None:
    """Exit code 2, and the lot that may have been meant."""
    with lot.opened() as store, pytest.raises(SetupError, match="L-7"):
        list(replay_lot(store, "L-8", lot.limits))
