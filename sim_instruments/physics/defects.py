"""What a line really sees go wrong, as changes to a sound part.

Chip and crack assume that the damage divides the part into pieces that vibrate on their own, electrically in
parallel, each with its share of the area and its own effective size, with more loss where the surfaces rub. That is
exact for a part cut right through and a fair picture of one cracked nearly through; shear coupling between the
pieces is left out. How much of each is invented.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from sim_instruments.physics.elements import Element, Stray, Wire
from sim_instruments.physics.families import FAMILIES, Batch, Family
from sim_instruments.physics.parts import SOUND, Part

Elements: TypeAlias = tuple[Element, ...]
Damage: TypeAlias = Callable[[Family, Batch, np.random.Generator], Elements]

# Between the bare contact pins.
_NOTHING = Stray(0.4e-12)
# What sits in the fixture when the tray was mixed up.
_MISTAKEN_FOR = {"MD-1650": "MR-113", "MR-113": "BD-40", "BD-40": "MR-113"}


@dataclass(frozen=True, slots=True)
class Defect:
    """``what`` says in words what a person would find; ``make`` draws the elements of such a part."""

    id: str
    what: str
    make: Damage


def _sound(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    return (family.sound(rng, batch),)


def _chip(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    """A quarter to a third of the area about 1 % smaller: two modes less than three bandwidths apart."""
    share, size, loss = rng.uniform(0.25, 0.33), rng.uniform(0.988, 0.992), rng.uniform(2.2, 2.8)
    return _divided(family.sound(rng, batch), share, size, loss)


def _crack(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    """A third of the area 3 to 5 % smaller and heavy loss: a second mode above that stands apart."""
    share, size, loss = rng.uniform(0.30, 0.40), rng.uniform(0.95, 0.97), rng.uniform(2.5, 3.5)
    return _divided(family.sound(rng, batch), share, size, loss)


def _divided(element: Element, share: float, size: float, loss: float) -> Elements:
    rubbing = element.lossier(loss)
    return rubbing.shared(1 - share), rubbing.shared(share).scaled(size)


def _weak_poling(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    """Piezo constants at 55 to 70 %."""
    return (family.sound(rng, batch).repoled(rng.uniform(0.55, 0.70)),)


def _poor_bond(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    """Mechanical loss three to six times as high: electrode, mesh or joint."""
    return (family.sound(rng, batch).lossier(rng.uniform(3.0, 6.0)),)


def _wrong_thickness(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    """Size along the wave 2.5 to 6 % off, either way."""
    off = float(rng.choice([-1.0, 1.0]) * rng.uniform(0.025, 0.06))
    return (family.sound(rng, batch).scaled(1 + off),)


def _open_lead(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    return (Stray(rng.uniform(1.5e-12, 4e-12)),)


def _short(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    return (Wire(rng.uniform(0.1, 0.6), rng.uniform(2e-9, 8e-9)),)


def _wrong_part(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    return (FAMILIES[_MISTAKEN_FOR[family.name]].sound(rng, batch),)


def _no_part(family: Family, batch: Batch, rng: np.random.Generator) -> Elements:
    return (_NOTHING,)


DEFECTS: dict[str, Defect] = {
    defect.id: defect
    for defect in (
        Defect("chip", "a corner broken off: a split mode, lower Q", _chip),
        Defect("crack", "cracked through: a second mode near the wanted one, low Q", _crack),
        Defect("weak-poling", "poled too weakly: low coupling", _weak_poling),
        Defect("poor-bond", "electrode, mesh or joint badly bonded: low Q", _poor_bond),
        Defect("wrong-thickness", "ground to the wrong size: fs several percent off", _wrong_thickness),
        Defect("open-lead", "no connection to the ceramic: a few picofarad", _open_lead),
        Defect("short", "electrodes bridged: less than an ohm", _short),
        Defect("wrong-part", "another family's part in the fixture", _wrong_part),
        Defect("no-part", "an empty fixture", _no_part),
    )
}


def make_part(
    family: str, serial: str, rng: np.random.Generator, defect: str = SOUND, batch: Batch | None = None
) -> Part:
    """One part drawn from its family's spread, with a defect or sound.

    Raises KeyError for a family or defect that does not exist.
    """
    make = _sound if defect == SOUND else DEFECTS[defect].make
    return Part(serial, family, defect, make(FAMILIES[family], batch or Batch(), rng))


def empty_fixture(family: str) -> Part:
    """What the electrodes' place shows when nothing is there."""
    return Part("", family, "no-part", (_NOTHING,))
