"""The nest: which part sits there, which come next, and what the station said of each.

PURE. The one seam to the physics: a ``Specimen`` brings its impedance at the meter's terminals, fixture included,
and its truth; where it comes from is ``tray``'s matter.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from sim_instruments.faults import Fault

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Impedance = Callable[[Floats, float], Complexes]  # frequencies in hertz, drive in volts → ohm

FINAL = ("PASS", "FAIL", "HOLD")
AGAIN = "AGAIN"

_BOUNCES = 3
_BOUNCE_SHARE = 1 / 60


class BenchRefusal(Exception):
    """Something the bench will not do; the message is a sentence."""


@dataclass(frozen=True, slots=True)
class Specimen:
    """One part of the lot: ``impedance`` at the terminals, fixture included; ``truth`` as the control port tells it."""

    serial: str
    impedance: Impedance
    truth: Callable[[], Mapping[str, object]]


@dataclass(frozen=True, slots=True)
class Verdict:
    """What the station signalled: PASS, FAIL, HOLD or AGAIN, and the grade of a PASS."""

    outcome: str
    grade: str | None


@dataclass(slots=True)
class _Nest:
    """The part in the fixture since it was put there."""

    specimen: Specimen
    scan_due: bool
    scanned: bool = False
    measured: bool = False  # since the last scan
    pulled: bool = False


@dataclass(slots=True)
class Bench:
    """``empty``: impedance of the open fixture. ``by_hand``: parts come through the control port, not by themselves.
    ``fed``: serials finally judged after the handler had brought them by itself.
    """

    lot: Sequence[Specimen]
    empty: Impedance
    by_hand: bool = False
    verdicts: dict[str, list[Verdict]] = field(default_factory=dict)
    fed: set[str] = field(default_factory=set)
    _nest: _Nest | None = None

    # ── the lot ──────────────────────────────────────────────────────────────────────────────

    @property
    def serial(self) -> str | None:
        """Serial of the part in the fixture, not yet finally judged."""
        return self._nest.specimen.serial if self._nest else None

    def find(self, serial: str) -> Specimen:
        for specimen in self.lot:
            if specimen.serial == serial:
                return specimen
        raise BenchRefusal(f"there is no part '{serial}' in this lot of {len(self.lot)}")

    def next_in_tray(self) -> Specimen | None:
        """The first part of the lot without a final verdict."""
        return next((specimen for specimen in self.lot if not self._is_judged(specimen.serial)), None)

    def _is_judged(self, serial: str) -> bool:
        return any(verdict.outcome in FINAL for verdict in self.verdicts.get(serial, ()))

    # ── in and out ───────────────────────────────────────────────────────────────────────────

    def place(self, specimen: Specimen, scan: bool) -> None:
        """Put a part into the empty fixture; the one that already sits there stays, and is scanned only once."""
        if self._nest is None:
            self._nest = _Nest(specimen, scan_due=scan)
        elif self._nest.specimen is not specimen:
            raise BenchRefusal(f"part {self.serial} sits in the fixture and waits for its verdict")
        else:
            self._nest.scan_due = scan and not self._nest.scanned
            self._nest.pulled = False

    def feed(self) -> None:
        """What the handler does by itself when asked: bring the next part, to be scanned."""
        specimen = None if self.by_hand or self._nest else self.next_in_tray()
        if specimen is not None:
            self.place(specimen, scan=True)

    def asked_again(self) -> None:
        """The station asks for a part while one sits there.

        Swept since its scan and yet without any verdict, it was forgotten by a station that started anew: its label
        is read once more.
        """
        if self._nest is not None:
            self._nest.pulled = False
            if self._nest.scanned and self._nest.measured:
                self._nest.scan_due = True

    def eject(self) -> str | None:
        """Take the part out unjudged; its serial, or None when the fixture was empty."""
        serial, self._nest = self.serial, None
        return serial

    def judge(self, verdict: Verdict) -> None:
        """Take the station's verdict on the part in the fixture; a final one sends it out."""
        if self._nest is None:
            raise BenchRefusal("there is no part in the fixture to judge")
        self.verdicts.setdefault(self._nest.specimen.serial, []).append(verdict)
        self._nest.pulled = self._nest.measured = False
        if verdict.outcome in FINAL:
            if not self.by_hand:
                self.fed.add(self._nest.specimen.serial)
            self._nest = None

    # ── the label ────────────────────────────────────────────────────────────────────────────

    @property
    def scan_due(self) -> bool:
        return self._nest is not None and self._nest.scan_due

    def read_label(self) -> str:
        """The serial, as the scanner reads it off the part."""
        if self._nest is None:
            raise BenchRefusal("there is no part in the fixture to scan")
        self._nest.scan_due, self._nest.scanned, self._nest.measured = False, True, False
        return self._nest.specimen.serial

    # ── the terminals ────────────────────────────────────────────────────────────────────────

    def impedance(
        self, f_hz: Floats, drive_v: float, disturbances: Mapping[str, Fault], chance: np.random.Generator
    ) -> Complexes:
        """Impedances ``(N,)`` in ohm at the terminals: the part in the fixture, or the open fixture."""
        lifted = self.empty(f_hz, drive_v)
        if self._nest is None:
            return lifted
        self._nest.measured = True
        if self._nest.pulled:
            return lifted
        z_ohm = self._nest.specimen.impedance(f_hz, drive_v).copy()
        if "contact-bounce" in disturbances:
            bounced = _bounces(len(f_hz), chance)
            z_ohm[bounced] = lifted[bounced]
        if "part-pulled-out" in disturbances:
            self._nest.pulled = True
            z_ohm[len(f_hz) // 2 :] = lifted[len(f_hz) // 2 :]
        return z_ohm


def _bounces(points: int, chance: np.random.Generator) -> NDArray[np.int64]:
    """Indices of the points at which the contact is open."""
    length = max(1, round(points * _BOUNCE_SHARE))
    starts = chance.integers(0, max(1, points - length + 1), size=_BOUNCES)
    return np.unique((starts[:, None] + np.arange(length)).ravel())
