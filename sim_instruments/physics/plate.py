"""The thickness mode: a plate wide against its thickness, one dimension, lossy.

With T₃ = c^D u′ − hD, E = −hu′ + D/ε^S, ρü = T₃′, D uniform and both faces free, the voltage over the thickness
divided by the current gives

    Z = (1 − k_t² tan X / X) / (jω C^S),   X = ωt / (2v),   v = √(c33D/ρ),   C^S = ε33S A/t

every constant complex. At low frequency the capacitance is C^S/(1 − k_t²): free along the thickness, held across.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Self

import numpy as np

from sim_instruments.physics.materials import Complexes, Floats, Material, State


@dataclass(frozen=True, slots=True)
class Plate:
    """A plate poled through its thickness, electrodes of ``area_m2`` on both faces."""

    material: Material
    thickness_m: float
    area_m2: float

    @property
    def resonates(self) -> bool:
        return True

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        """Admittance in siemens; ``f_hz`` real or complex, any shape."""
        c = self.material.at(state)
        omega = 2 * np.pi * np.asarray(f_hz)
        x = 0.5 * omega * self.thickness_m * np.sqrt(c.density_kg_m3 / c.c33d)
        clamped_f = c.eps33s * (self.area_m2 / self.thickness_m)
        return np.asarray(1j * omega * clamped_f / (1 - c.kt2 * np.tan(x) / x))

    def scaled(self, factor: float) -> Self:
        return replace(self, thickness_m=self.thickness_m * factor)

    def shared(self, fraction: float) -> Self:
        return replace(self, area_m2=self.area_m2 * fraction)

    def lossier(self, factor: float) -> Self:
        return replace(self, material=self.material.lossier(factor))

    def repoled(self, factor: float) -> Self:
        return replace(self, material=self.material.repoled(factor))
