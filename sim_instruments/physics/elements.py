"""What a part is made of, electrically in parallel: the element's contract, and the ones that do not resonate."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol, Self

import numpy as np

from sim_instruments.physics.materials import Complexes, Floats, State


class Element(Protocol):
    """One electromechanical piece between the electrodes; frozen.

    ``admittance`` in siemens is analytic in ``f_hz``: it accepts complex frequencies, any shape; a state with an
    array of temperatures must broadcast with them. The other four return a changed copy.
    """

    @property
    def resonates(self) -> bool:
        """Does it have a mode at all?"""
        ...

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes: ...

    def scaled(self, factor: float) -> Self:
        """Every length along the wave multiplied: all its resonances move by 1/factor exactly."""
        ...

    def shared(self, fraction: float) -> Self:
        """A fraction of its area, vibrating on its own."""
        ...

    def lossier(self, factor: float) -> Self:
        """Its mechanical loss multiplied."""
        ...

    def repoled(self, factor: float) -> Self:
        """Its piezo constants multiplied."""
        ...


@dataclass(frozen=True, slots=True)
class Stray:
    """A small capacitance that does not move, farad, with its loss tangent."""

    c_f: float
    tan_delta: float = 0.01

    @property
    def resonates(self) -> bool:
        return False

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        loss = 1 - 1j * state.dielectric_loss(self.tan_delta)
        return np.asarray(2j * np.pi * f_hz * self.c_f * loss + 0 * np.asarray(state.temperature_degc))

    def scaled(self, factor: float) -> Self:
        return self

    def shared(self, fraction: float) -> Self:
        return replace(self, c_f=self.c_f * fraction)

    def lossier(self, factor: float) -> Self:
        return self

    def repoled(self, factor: float) -> Self:
        return self


@dataclass(frozen=True, slots=True)
class Wire:
    """A conductor across the electrodes: resistance in ohm, inductance in henry."""

    r_ohm: float
    l_h: float = 0.0

    @property
    def resonates(self) -> bool:
        return False

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        return np.asarray(1 / (self.r_ohm + 2j * np.pi * f_hz * self.l_h + 0 * np.asarray(state.temperature_degc)))

    def scaled(self, factor: float) -> Self:
        return self

    def shared(self, fraction: float) -> Self:
        return self

    def lossier(self, factor: float) -> Self:
        return self

    def repoled(self, factor: float) -> Self:
        return self
