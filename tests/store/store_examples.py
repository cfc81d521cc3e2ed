"""An example of everything the store keeps. All of it is invented: Fenwick Hollow Works, MD-1650."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from harness.records import (
    ApplicationSpec,
    Caveat,
    Conditions,
    ConditionSpec,
    Correction,
    Fit,
    FitStatus,
    Instrument,
    Judgement,
    LimitSet,
    LotSpec,
    MeasurementSpec,
    Mode,
    ModeSpec,
    Opening,
    Reading,
    Reason,
    Record,
    Residual,
    Sweep,
    Value,
    Verdict,
)
from harness.store import Store, Written, open_store

NOW = "2026-03-02T08:00:00.000000Z"
TEXT = 'format = 1\npart_number = "MD-1650"\nrevision = "C"\n# invented: Ø20 mm mist disc\n'


def make_limits(revision: str = "C") -> LimitSet:
    """A limit set as the loader would give it; its text differs by revision, and so does its hash."""
    text = TEXT.replace('"C"', f'"{revision}"')
    return LimitSet(
        part_number="MD-1650",
        revision=revision,
        description="1.65 MHz mist disc (invented)",
        mode=ModeSpec("thickness", (1.5e6, 1.8e6)),
        measurement=MeasurementSpec(),
        conditions=ConditionSpec(),
        requirements=(),
        grades=(),
        lot=LotSpec(),
        application=ApplicationSpec(),
        text=text,
        sha256=hashlib.sha256(text.encode()).hexdigest(),
    )


def make_opening(serial: str = "FH-0001", number: int = 1, lot: str = "L-0301", **changes: Any) -> Opening:
    """An opening of the example lot."""
    opening = Opening(
        serial=serial,
        identity="scanned",
        lot=lot,
        part_number="MD-1650",
        limits_sha256=make_limits().sha256,
        operator="operator 3",
        number=number,
        element=1,
        plan={"points": 401, "drive_v": 0.5, "window_hz": [1.5e6, 1.8e6]},
        at="2026-03-02T08:01:00.000000Z",
    )
    return replace(opening, **changes)


def make_sweep(seed: int = 1, points: int = 401) -> Sweep:
    """A resonance with noise; another seed is another sweep."""
    chance = np.random.default_rng(seed)
    f_hz = np.linspace(1.5e6, 1.8e6, points)
    branch = 1 / (20 * (1 + 1j * 80 * (f_hz / 1.65e6 - 1.65e6 / f_hz)))
    z_ohm = 1 / (2j * np.pi * f_hz * 1.8e-9 + branch)
    z_ohm = z_ohm * (1 + 1e-3 * (chance.standard_normal(points) + 1j * chance.standard_normal(points)))
    return Sweep(
        f_hz,
        z_ohm,
        conditions=Conditions(drive_v=0.5, temperature_degc=23.1, u_temperature_k=0.2, age_h=72.0),
        readings=(Reading("contact before", 1000.0, 12.5 - 88417.25j), Reading("repeat", 1.5e6, 3.25 - 58.5j)),
        noise_relative=1e-3,
        u_z_relative=5e-4,
        u_f_relative=2e-6,
    )


def make_record(opening: Opening | None = None, seed: int = 1, **changes: Any) -> Record:
    """A part that fails by its series resonance, with everything filled in."""
    values = {
        "fs": Value(1671200.0 + seed, 21.5, "Hz"),
        "r1": Value(20.04, 0.02, "ohm"),
        "c0": Value(1.8012e-9, 1.1e-12, "F"),
        "fa": Value(None, None, "Hz"),
    }
    record = Record(
        opening=opening or make_opening(),
        sweep=make_sweep(seed),
        fit=Fit(
            FitStatus.OK,
            "one branch fitted",
            values=values,
            modes=(Mode(1671200.0, 80.1, 0.0499, True), Mode(1.72e6, 120.0, 1e-4, False)),
            residual=Residual(0.00141, 797),
            caveats=(Caveat("not-reached", "fa", "fa lies beyond the sweep"),),
            budget={"fs": {"fit": 18.0, "frequency": 3.3}},
            span_hz=(1.5e6, 1.8e6),
        ),
        judgement=Judgement(
            Verdict.FAIL,
            None,
            (Reason("above", "fs", 1671200.0 + seed, 1670000.0, "fs 1 671.2 kHz is 1.2 kHz above 1 670.0 kHz"),),
            values,
            (Caveat("reference", None, "referred to 25 °C"),),
        ),
        correction=Correction("clip 2", 0.11, 2.1e-8, 1.5e-12, 0.01, 1e-9, 1e-13),
        instruments=(
            Instrument("meter", "TCPIP::127.0.0.1::INSTR", "scpi-lcr", "Invented", "Z1", "7", "1.0", 5e-4, 2e-6),
        ),
        software={"ringtrue": "0.1.0", "numpy": "2.4"},
        final=True,
        at="2026-03-02T08:01:04.250000Z",
    )
    return replace(record, **changes)


def screen(store: Store, serial: str = "FH-0001", number: int = 1, seed: int = 1, **changes: Any) -> Written:
    """Open an attempt and write its record."""
    opening = make_opening(serial, number)
    return store.write_record(make_record(opening, seed, **changes), store.open_attempt(opening))


def new_store(path: Path) -> Store:
    """A store at ``path``, open for writing, with the example lot."""
    store = open_store(str(path), mode="write", now=NOW)
    store.open_lot("L-0301", make_limits(), "operator 3", NOW)
    return store


def screened(folder: Path) -> Path:
    """A closed store with eight records: seven parts, the third tried twice. Up to 7, part n has record n."""
    path = folder / "ringtrue.db"
    with new_store(path) as store:
        for index in range(1, 8):
            screen(store, f"FH-{index:04d}", seed=index)
        screen(store, "FH-0003", 2, seed=8)
    return path


def bits(record: Record) -> tuple[Any, ...]:
    """A record as something that can be compared to the last bit; sweeps have no equality of their own."""
    s = record.sweep
    rest = replace(record, sweep=None)
    if s is None:
        return (rest,)
    about = (s.conditions, s.readings, s.noise_relative, s.u_z_relative, s.u_f_relative, s.absolute)
    return (rest, s.f_hz.tobytes(), s.z_ohm.tobytes(), *about)
