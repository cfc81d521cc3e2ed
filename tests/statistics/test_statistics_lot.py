"""A whole lot: what is looked at, in which order, and what ``lot --json`` prints of it."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest

from harness.records import (
    ApplicationSpec,
    ConditionSpec,
    Grade,
    LimitSet,
    LotSpec,
    MeasurementSpec,
    ModeSpec,
    Requirement,
)
from harness.statistics import Attempt, summarise, to_json
from harness.statistics.lot import key, requirements_by_key

REQUIREMENTS = (
    Requirement("qm", 140.0, None, "1"),
    Requirement("fs", 1638e3, 1662e3, "kHz"),
    Requirement("c_at", 1.65e-9, 2.15e-9, "nF", at_hz=1e3),
    Requirement("fs", 1600e3, 1700e3, "kHz", element=2),
)


def limits(requirements=REQUIREMENTS) -> LimitSet:
    """Invented limits of an invented mist disc."""
    return LimitSet(
        "MD-1650",
        "C",
        "",
        ModeSpec("thickness", (1.5e6, 1.9e6)),
        MeasurementSpec(),
        ConditionSpec(),
        requirements,
        (Grade("M", "fs", 1638e3, 1662e3, "kHz"),),
        LotSpec(),
        ApplicationSpec(),
        "",
        "0f" * 32,
    )


def attempt(serial: str, values, verdict: str = "pass", element: int = 1) -> Attempt:
    reasons = () if verdict == "pass" else (("above-max", "fs"),)
    grade = "M" if verdict == "pass" else None
    pairs = {name: (value, None) for name, value in values.items()}
    return Attempt(serial, 1, element, verdict, grade, True, "", reasons, pairs)


LOT = [
    attempt("MD-0001", {"fs": 1650e3, "qm": 200.0, "l1": 1e-3}),
    attempt("MD-0002", {"fs": 1652e3, "qm": 210.0, "r1": None}),
    attempt("MD-0003", {"fs": 1671e3, "qm": 190.0, "an_older_one": 3.0}, "fail"),
]


def test_required_characteristics_come_first_as_the_file_orders_them():
    """Required ones in the file's order, with or without values; then those that only have values."""
    found = summarise(LOT, limits())
    assert list(found.characteristics) == ["qm", "fs", "c_at", "fs@2", "l1"]
    assert found.characteristics["c_at"].note == "No part has a value."


def test_limits_reach_the_capability_of_their_own_element():
    """Each characteristic is held against the requirement of its element."""
    found = summarise([*LOT, attempt("MD-0001", {"fs": 1640e3}, element=2)], limits())
    assert (found.characteristics["fs"].least, found.characteristics["fs"].greatest) == (1638e3, 1662e3)
    assert (found.characteristics["fs@2"].least, found.characteristics["fs@2"].n) == (1600e3, 1)


def test_of_several_requirements_on_one_characteristic_the_first_counts():
    """Two frequencies of one low-frequency characteristic share its key; the first is kept."""
    twice = (Requirement("c_at", 1.0, 2.0, "F", at_hz=1e3), Requirement("c_at", 3.0, 4.0, "F", at_hz=1e4))
    assert requirements_by_key(limits(twice))["c_at"].min == 1.0


def test_keys_of_elements():
    """Element 1 has the plain id, so that lots of one element read as the contract says."""
    assert [key("qm", 1), key("qm", 3)] == ["qm", "qm@3"]


def test_json_has_exactly_the_contracts_keys():
    """Names and nesting of ``lot --json``."""
    form = to_json(summarise(LOT, limits()), "LOT-7", limits())
    assert list(form) == [
        "lot",
        "limits",
        "parts",
        "pass",
        "fail",
        "no_verdict",
        "first_pass_yield",
        "final_yield",
        "fail_reasons",
        "grades",
        "characteristics",
    ]
    assert form["limits"] == {"part_number": "MD-1650", "revision": "C", "sha256": "0f" * 32}
    assert list(form["first_pass_yield"]) == list(form["final_yield"]) == ["value", "low", "high"]
    assert list(form["characteristics"]["fs"]) == (
        [
            "n",
            "mean",
            "sd",
            "min",
            "max",
            "median",
            "unit",
            "pp",
            "pp_low",
            "pp_high",
            "ppk",
            "ppk_low",
            "ppk_high",
            "population",
            "note",
        ]
    )


def test_json_gives_the_lots_numbers():
    """Counts, reasons, grades and moments of a lot of three, reckoned by hand."""
    form = to_json(summarise(LOT, limits()), "LOT-7", limits())
    assert (form["parts"], form["pass"], form["fail"], form["no_verdict"]) == (3, 2, 1, 0)
    assert form["fail_reasons"] == [{"characteristic": "fs", "count": 1, "codes": {"above-max": 1}}]
    assert form["grades"] == {"M": 2}
    qm = form["characteristics"]["qm"]
    assert (qm["n"], qm["mean"], qm["sd"], qm["min"], qm["max"], qm["median"]) == (3, 200.0, 10.0, 190.0, 210.0, 200.0)
    assert qm["ppk"] == pytest.approx(2.0)
    assert (qm["pp"], qm["unit"]) == (None, "1")


def test_json_of_an_empty_lot_is_json():
    """A lot without an attempt prints zeros and nulls, never NaN."""
    form = to_json(summarise([], limits()), "LOT-7", limits())
    assert json.loads(json.dumps(form, allow_nan=False)) == form
    assert form["first_pass_yield"] == {"value": None, "low": None, "high": None}
    assert form["characteristics"]["fs"]["note"] == "No part has a value."


def test_the_confidence_asked_for_is_the_one_used():
    """A lower confidence gives narrower limits, and the statistics say which it was."""
    wide, narrow = summarise(LOT, limits()), summarise(LOT, limits(), 0.8)
    assert (wide.confidence, narrow.confidence) == (0.95, 0.8)
    assert narrow.yields.final.low > wide.yields.final.low
    assert narrow.characteristics["fs"].ppk.low > wide.characteristics["fs"].ppk.low


def test_statistics_do_not_import_the_slow_library():
    """Importing the room stays quick: no scipy.stats, scipy.optimize or scipy.signal."""
    code = "import sys, harness.statistics; print([m for m in sys.modules if m in "
    code += "('scipy.stats', 'scipy.optimize', 'scipy.signal')])"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "[]\n"
