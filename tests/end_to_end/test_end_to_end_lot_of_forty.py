"""Forty parts of three families through the whole station, against the truth that the simulator holds."""

from __future__ import annotations

import json
from collections import Counter
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from conftest import ROOT
from lots_of_forty import LOTS, Lot
from simulated_bench import lines, ringtrue, served, told

from harness.judging.limit_file import parse_limits
from harness.judging.requirements import coverage
from harness.records import LimitSet, Requirement

_ROOM = 3.0  # standard uncertainties by which a measured value may be away from the truth


@dataclass(frozen=True)
class Screened:
    """What one family's lot came to: every JSON line, the truth by serial, its limits, its store."""

    lot: Lot
    attempts: list[dict[str, Any]]
    truth: dict[str, dict[str, Any]]
    limits: LimitSet
    store: Path

    @property
    def final(self) -> dict[str, dict[str, Any]]:
        return {line["serial"]: line for line in self.attempts if line["final"]}


def limit_path(lot: Lot) -> Path:
    return ROOT / "limits" / lot.limits


@pytest.fixture(scope="module")
def screened(tmp_path_factory: pytest.TempPathFactory) -> list[Screened]:
    """All three families screened, each on a bench of its own, into stores of their own."""
    return [screen(lot, tmp_path_factory.mktemp(lot.family)) for lot in LOTS]


def screen(lot: Lot, folder: Path) -> Screened:
    (folder / "lot.toml").write_text(lot.toml())
    store = folder / "ringtrue.db"
    with served("--lot", str(folder / "lot.toml"), "--dir", str(folder), "--seed", str(lot.seed)) as bench:
        printed = ringtrue(
            "screen", "L1", "--limits", limit_path(lot), "--station", bench["station"], "--json", store=store
        )
        truth = told(bench["control"], command="truth")["truth"]
    limits = parse_limits(limit_path(lot).read_text(), lot.limits)
    return Screened(lot, lines(printed), truth, limits, store)


def margin(requirement: Requirement, value: float) -> float:
    """How far inside its limits a value lies, SI; negative outside."""
    sides = []
    if requirement.min is not None:
        sides.append(value - requirement.min)
    if requirement.max is not None:
        sides.append(requirement.max - value)
    return min(sides)


def allowed(limits: LimitSet, truth: dict[str, Any], values: dict[str, Any]) -> set[str]:
    """The verdicts that the truth allows, given the uncertainty stated: one of them, but for parts near a limit."""
    if truth["defect"] in ("open-lead", "short"):
        return {"no verdict"}  # nothing in contact: neither a pass nor a fail
    if truth["defect"] == "wrong-part":
        return {"no verdict", "fail"}  # by the contact window, or by what it is
    found = {"pass"}
    for requirement in limits.requirements:
        true, u = truth["values"][requirement.characteristic], values[requirement.characteristic]["u"]
        inside = margin(requirement, true)
        if inside < -_ROOM * u:
            return {"fail"}
        if inside < (coverage(requirement) + _ROOM) * u:
            found = {"pass", "fail"}
    return found


def test_the_lot_is_what_it_should_be(screened: list[Screened]) -> None:
    """Forty parts: at least 2 of each defect, 16 sound ones, 4 within three u of a limit of fs."""
    defects = Counter(truth["defect"] for one in screened for truth in one.truth.values())
    assert sum(defects.values()) == 40
    assert defects.pop("sound") >= 16
    assert len(defects) == 8
    assert min(defects.values()) >= 2
    near = 0
    for one in screened:
        fs = next(r for r in one.limits.requirements if r.characteristic == "fs")
        for serial, line in one.final.items():
            true = one.truth[serial]["values"]["fs"]
            if one.truth[serial]["defect"] == "sound":
                near += abs(margin(fs, true)) <= _ROOM * line["values"]["fs"]["u"]
    assert near >= 4


def test_every_part_gets_the_verdict_that_its_truth_allows(screened: list[Screened]) -> None:
    """40 of 40: no faulty part passes, no sound one fails, and what has no contact gets no verdict."""
    wrong, certain = [], 0
    for one in screened:
        assert set(one.final) == set(one.truth)
        for serial, line in one.final.items():
            expected = allowed(one.limits, one.truth[serial], line["values"])
            certain += len(expected) == 1
            if line["verdict"] not in expected:
                wrong.append((serial, one.truth[serial]["defect"], line["verdict"], expected, line["reasons"]))
    assert wrong == []
    assert certain >= 30


def test_values_lie_within_their_stated_uncertainty(screened: list[Screened]) -> None:
    """Error at most U (k = 2) against the simulator's truth for at least 95 % of the sound parts' values."""
    inside = []
    for one in screened:
        for serial, line in one.final.items():
            if one.truth[serial]["defect"] != "sound":
                continue
            for key in ("fs", "fp", "r1", "qm", "c0", "keff", "c_at"):
                measured = line["values"][key]
                inside.append(abs(measured["value"] - one.truth[serial]["values"][key]) <= 2 * measured["u"])
    assert sum(inside) >= 0.95 * len(inside), f"{sum(inside)} of {len(inside)}"


def test_replay_gives_the_same_bits(screened: list[Screened]) -> None:
    """Replayed under its own limits every attempt gives the same line: verdict, reasons, and every digit."""
    keys = ("serial", "verdict", "grade", "reasons", "values")
    for one in screened:
        again = lines(ringtrue("replay", "L1", "--limits", limit_path(one.lot), "--json", store=one.store))
        assert [{k: line[k] for k in keys} for line in again] == [{k: line[k] for k in keys} for line in one.attempts]


def test_the_lot_adds_up(screened: list[Screened]) -> None:
    """Counts, yields and fail reasons of `lot` are those of the lines that `screen` printed."""
    for one in screened:
        lot = json.loads(ringtrue("lot", "L1", "--json", store=one.store))
        verdicts = Counter(line["verdict"] for line in one.final.values())
        assert (lot["parts"], lot["pass"], lot["fail"], lot["no_verdict"]) == (
            len(one.truth),
            verdicts["pass"],
            verdicts["fail"],
            verdicts["no verdict"],
        )
        firsts = {line["serial"]: line for line in reversed(one.attempts)}
        passed_first = sum(line["verdict"] == "pass" for line in firsts.values())
        assert lot["first_pass_yield"]["value"] == pytest.approx(passed_first / len(firsts))
        failed = [line for line in one.final.values() if line["verdict"] == "fail"]
        counted: Counter[str] = Counter()
        for reason in lot["fail_reasons"]:
            counted[reason["characteristic"]] += reason["count"]
        assert counted == Counter(line["reasons"][0]["characteristic"] for line in failed)


def test_the_store_is_sound_and_history_agrees(screened: list[Screened]) -> None:
    """`record verify` finds nothing, and `history` shows each part's attempts as they were printed."""
    for one in screened:
        assert json.loads(ringtrue("record", "verify", "--json", store=one.store))["sound"] is True
        serial = one.attempts[0]["serial"]
        history = json.loads(ringtrue("history", serial, "--json", store=one.store))
        printed = [line for line in one.attempts if line["serial"] == serial]
        assert [h["record"] for h in history] == [line["record"] for line in printed]
        assert [h["values"] for h in history] == [line["values"] for line in printed]
