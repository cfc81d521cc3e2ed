"""The three part numbers of Fenwick Hollow Works, as built: nominal geometry, search window, spread.

All invented. Each nominal is dimensioned so that its mode's pole lies at the nominal frequency at 23 °C.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sim_instruments.physics.elements import Element
from sim_instruments.physics.materials import ALUMINIUM, INVENTED_HARD, INVENTED_SOFT, STEEL, Material
from sim_instruments.physics.plate import Plate
from sim_instruments.physics.radial import Ring
from sim_instruments.physics.rods import Chain, Rod, Stack

# A draw beyond this many standard deviations does not leave the part maker's own inspection.
_TRUNCATED_AT = 2.0


@dataclass(frozen=True, slots=True)
class Spread:
    """Relative standard deviations from part to part: size along the wave, stiffness, permittivity, poling, loss."""

    size: float
    stiffness: float
    permittivity: float
    poling: float
    loss: float


@dataclass(frozen=True, slots=True)
class Batch:
    """What all parts of a lot have in common: factors on stiffness and permittivity."""

    stiffness: float = 1.0
    permittivity: float = 1.0

    @classmethod
    def drawn(cls, rng: np.random.Generator) -> Batch:
        """A batch of powder and one firing: 0.15 % on stiffness, 1 % on permittivity."""
        return cls(1 + 0.0015 * _normal(rng), 1 + 0.01 * _normal(rng))


@dataclass(frozen=True, slots=True)
class Family:
    """One part number: nominal series resonance, the window it is searched in, material, and the part made of it."""

    name: str
    prefix: str
    nominal_hz: float
    window_hz: tuple[float, float]
    material: Material
    build: Callable[[Material], Element]
    spread: Spread

    def nominal(self) -> Element:
        """The part as drawn, without spread."""
        return self.build(self.material)

    def sound(self, rng: np.random.Generator, batch: Batch | None = None) -> Element:
        """A sound part drawn from the spread; five draws from ``rng``."""
        batch, spread = batch or Batch(), self.spread
        size, stiffness, permittivity, poling, loss = (_normal(rng) for _ in range(5))
        material = self.material.varied(
            batch.stiffness * (1 + spread.stiffness * stiffness),
            batch.permittivity * (1 + spread.permittivity * permittivity),
            1 + spread.poling * poling,
        )
        return self.build(material).scaled(1 + spread.size * size).lossier(math.exp(spread.loss * loss))


def _normal(rng: np.random.Generator) -> float:
    """A standard normal draw, truncated by drawing again."""
    while True:
        draw = float(rng.standard_normal())
        if abs(draw) <= _TRUNCATED_AT:
            return draw


def _mist_disc(material: Material) -> Element:
    """Ø20 mm disc, electrodes Ø17 mm, thickness mode."""
    return Plate(material, thickness_m=1.18513e-3, area_m2=math.pi * 8.5e-3**2)


def _mesh_ring(material: Material) -> Element:
    """Ring Ø13.9 / Ø6.0 × 0.5 mm, radial mode."""
    return Ring(material, inner_m=2.98240e-3, outer_m=6.95893e-3, thickness_m=0.5e-3)


def _bolt_clamped(material: Material) -> Element:
    """Steel back mass, two rings Ø25 / Ø10 × 2 mm, aluminium front mass, half a wavelength in all."""
    rings, mass = math.pi / 4 * (25e-3**2 - 10e-3**2), math.pi / 4 * 25e-3**2
    return Chain(
        (Rod(STEEL, 23.9162e-3, mass), Stack(material, 2, 1.99301e-3, rings), Rod(ALUMINIUM, 29.8952e-3, mass))
    )


FAMILIES: dict[str, Family] = {
    family.name: family
    for family in (
        Family("MD-1650", "MD-", 1.65e6, (1.50e6, 1.90e6), INVENTED_SOFT, _mist_disc,
               Spread(0.0026, 0.0020, 0.015, 0.008, 0.08)),
        Family("MR-113", "MR-", 113e3, (100e3, 130e3), INVENTED_HARD, _mesh_ring,
               Spread(0.0025, 0.0025, 0.020, 0.012, 0.08)),
        Family("BD-40", "BD-", 40e3, (36e3, 45e3), INVENTED_HARD, _bolt_clamped,
               Spread(0.0027, 0.0030, 0.020, 0.012, 0.10)),
    )
}  # fmt: skip
