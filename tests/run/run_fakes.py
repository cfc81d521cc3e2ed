"""A bench that is a small object, with parts of known circuits. All values are invented.

bench = FakeBench(parts=["MD-0001", "MD-0002"], handler=True)
bench.is_part("MD-0002", fs_hz=1.68e6)           # fails
bench.fails_at_sweep(3, "no-answer")             # the third list measured
events = list(screen_lot(FakeStation(store, bench), job(), FromScanner(bench)))
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from harness.bench import BenchFault
from harness.errors import SetupError
from harness.judging.limit_file import parse_limits
from harness.records import Conditions, Correction, Instrument, LimitSet, Plan, Reading
from harness.run.part import Job
from harness.store import Store, open_store

LIMITS = Path(__file__).resolve().parents[2] / "limits" / "mist-discs" / "MD-1650.toml"
SWEEPS_A_PART = 5  # contact, locate, resolve, repeat, contact
OPEN_F = 5e-12
C0_F, C1_F, FS_HZ, Q = 1.55e-9, 0.32e-9, 1.650e6, 200.0


def limits(points: int = 81, **replacing: str) -> LimitSet:
    """The mist disc's limits with fewer points; ``replacing`` swaps whole lines, found by the key they begin with."""
    lines = LIMITS.read_text(encoding="utf-8").splitlines()
    wanted = {"points": str(points), **replacing}
    text = "".join(_swapped(line, wanted) + "\n" for line in lines)
    return parse_limits(text, "MD-1650.toml")


def _swapped(line: str, wanted: dict[str, str]) -> str:
    key = line.partition(" = ")[0]
    return f"{key} = {wanted[key]}" if key in wanted and " = " in line else line


class Ticking:
    """A clock that moves on by a second a look."""

    def __init__(self) -> None:
        self.looked = 0

    def __call__(self) -> str:
        self.looked += 1
        return f"2026-03-02T08:{self.looked // 60:02d}:{self.looked % 60:02d}.000000Z"


def job(limit_set: LimitSet | None = None, lot: str = "L-7", **changes: Any) -> Job:
    """A lot's job under the mist disc's limits."""
    made = Job(
        lot=lot,
        limits=limit_set or limits(),
        correction=Correction(),
        conditions=Conditions(temperature_degc=23.0, age_h=240.0),
        operator="operator 3",
        software={"ringtrue": "test"},
        clock=Ticking(),
    )
    return replace(made, **changes)


def new_store(folder: Path) -> Store:
    return open_store(str(folder / "ringtrue.db"), mode="write", now="2026-03-02T08:00:00.000000Z")


def disc(fs_hz: float = FS_HZ, q: float = Q) -> Callable[[np.ndarray], np.ndarray]:
    """Impedance of a lossless capacitance beside one motional branch."""

    def z_ohm(f_hz: np.ndarray) -> np.ndarray:
        g = 2 * np.pi * fs_hz * C1_F * q
        return 1 / (2j * np.pi * f_hz * C0_F + g / (1 + 1j * q * (f_hz / fs_hz - fs_hz / f_hz)))

    return z_ohm


def lifted(f_hz: np.ndarray) -> np.ndarray:
    """Nothing between the contacts but a stray capacitance."""
    return 1 / (2j * np.pi * f_hz * OPEN_F)


def fault(code: str) -> BenchFault:
    return BenchFault(code, f"invented trouble of the kind {code}.", place="fake meter")


@dataclass
class FakeBench:
    """What ``screen_lot`` asks of a bench. ``did`` lists everything it was asked to do, in order.

    With a handler the parts of the tray come one by one; without, ``put`` names the part in the fixture. The scanner
    gives what is in ``codes``: a text, a BenchFault to raise, or None for a turn without a code.
    """

    parts: Sequence[str] = ()
    handler: bool = False
    scanner: bool = True
    codes: list[str | BenchFault | None] = field(default_factory=list)
    did: list[tuple[Any, ...]] = field(default_factory=list)
    on_sweep: Callable[[], None] = lambda: None
    instrument: Instrument = field(
        default_factory=lambda: Instrument(
            "meter", "fake", "fake", "Invented", "F1", "1", "1.0", u_z_relative=1e-3, u_f_relative=1e-6,
            noise_relative=1e-3,
        )
    )  # fmt: skip

    def __post_init__(self) -> None:
        self._tray = list(self.parts)
        self._circuits: dict[str, Callable[[np.ndarray], np.ndarray]] = {}
        self._faults: dict[int, BenchFault] = {}
        self._chance = np.random.default_rng(1)
        self.signal_fault: BenchFault | None = None
        self.silent_turns = 0
        self.reopen_faults: list[BenchFault] = []
        self.sweeps = 0
        self.put = ""

    # ── scripting ────────────────────────────────────────────────────────────────────────────

    def is_part(self, serial: str, **circuit: float) -> None:
        self._circuits[serial] = disc(**circuit)

    def is_open(self, serial: str) -> None:
        self._circuits[serial] = lifted

    def fails_at_sweep(self, number: int, code: str) -> None:
        self._faults[number] = fault(code)

    def told(self) -> list[tuple[str, str | None]]:
        """The outcomes signalled, with their grades."""
        return [(one[1], one[2]) for one in self.did if one[0] == "signal"]

    # ── what the run room uses ───────────────────────────────────────────────────────────────

    @property
    def has_handler(self) -> bool:
        return self.handler

    @property
    def has_scanner(self) -> bool:
        return self.scanner

    def sweep(self, plan: Plan) -> tuple[np.ndarray, np.ndarray]:
        self.on_sweep()
        self.sweeps += 1
        self.did.append(("sweep", plan.purpose))
        if self.sweeps in self._faults:
            raise self._faults[self.sweeps]
        z_ohm = self._circuits.get(self.put, disc())(plan.f_hz)
        noise = self._chance.standard_normal((2, z_ohm.size))
        return plan.f_hz, z_ohm + 1e-3 * abs(z_ohm) * (noise[0] + 1j * noise[1])

    def reading(self, stage: str, f_hz: float, drive_v: float) -> Reading:
        f, z = self.sweep(Plan(np.array([f_hz]), drive_v, stage))
        return Reading(stage, float(f[0]), complex(z[0]))

    def reopen(self) -> None:
        self.did.append(("reopen",))
        if self.reopen_faults:
            raise self.reopen_faults.pop(0)

    def scan(self, timeout_s: float) -> str | None:
        code = self.codes.pop(0) if self.codes else None
        if isinstance(code, BenchFault):
            raise code
        if code is not None and not self.handler:
            self.put = code
        return code

    def early_codes(self) -> tuple[str, ...]:
        found = []
        while self.codes and isinstance(self.codes[0], str) and self.codes[0].startswith("early "):
            found.append(self.codes.pop(0).removeprefix("early "))  # type: ignore[union-attr]
        return tuple(found)

    def refuse_untellable(self, grades: Iterable[str]) -> None:
        for grade in grades:
            if self.handler and not grade.isascii():
                raise SetupError(f"grade '{grade}' cannot be told.")

    def next_part(self, timeout_s: float) -> bool | None:
        self.did.append(("next",))
        if self.silent_turns:
            self.silent_turns -= 1
            return None
        if not self.put and self._tray:
            self.put = self._tray.pop(0)
        return bool(self.put)

    def signal(self, outcome: str, grade: str | None) -> None:
        self.did.append(("signal", outcome, grade))
        if self.signal_fault is not None:
            raise self.signal_fault
        if outcome != "again" and self.handler:
            self.put = ""


@dataclass
class FakeStation:
    """A store and a bench under a name."""

    store: Store
    bench: FakeBench
    name: str = "station 1"


class Turns:
    """``stopping`` that says so from the n-th look on."""

    def __init__(self, after: int) -> None:
        self._left = after

    def __call__(self) -> bool:
        self._left -= 1
        return self._left < 0


def sha256(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()
