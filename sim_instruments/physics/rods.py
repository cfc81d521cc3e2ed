"""The length mode of a bolt-clamped drive: a chain of rods and piezo rings, plane waves, free at both ends.

In each piece u = a cos kx + b sin kx, and displacement u and force F (tension) are continuous at the joints. A metal
rod of stiffness κ = AEk passes (u, F) on by the usual transfer matrix. In a piezo ring (33 mode,
field along the rod, D uniform) with g = d33/ε33T, s^D = s33 − g d33, h = g/s^D, β = 1/ε33T + g²/s^D:

    T = u′/s^D − hD,   E = −hu′ + βD,   κ = Ak/s^D
    u₂ = u₁ cos kl + (F₁ + hq) sin kl / κ
    F₂ = −κ u₁ sin kl + (F₁ + hq) cos kl − hq
    V  = −h(u₂ − u₁) + βl q/A

q = AD the charge. All rings see the same V, each along its own poling, so the charges add. With no force at the
first end the rest is linear in (u₀, V); no force at the last end gives u₀/V, and Y = jω Σq/V. The bolt is counted
with the masses and otherwise left out; lateral contraction too.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Self

import numpy as np

from sim_instruments.physics.materials import Complexes, Floats, Material, Metal, State


@dataclass(frozen=True, slots=True)
class Rod:
    """A passive section."""

    metal: Metal
    length_m: float
    area_m2: float


@dataclass(frozen=True, slots=True)
class Stack:
    """``count`` piezo rings, each ``length_m`` long, mechanically in series and electrically in parallel."""

    material: Material
    count: int
    length_m: float
    area_m2: float


@dataclass(frozen=True, slots=True, eq=False)
class _Wave:
    """Displacement and force at a joint and the charge so far, each per unit of one cause (u₀ or V)."""

    u: Complexes
    force: Complexes
    charge: Complexes


@dataclass(frozen=True, slots=True)
class Chain:
    """Sections from one free end to the other."""

    sections: tuple[Rod | Stack, ...]

    @property
    def resonates(self) -> bool:
        return True

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        """Admittance in siemens; ``f_hz`` real or complex, any shape."""
        omega = 2 * np.pi * np.asarray(f_hz, dtype=np.complex128)
        omega = omega + 0 * np.asarray(state.temperature_degc)
        one, zero = np.ones_like(omega), np.zeros_like(omega)
        pushed, driven = self._free_end(omega, one, zero, state), self._free_end(omega, zero, one, state)
        charge = driven.charge - pushed.charge * driven.force / pushed.force
        return np.asarray(1j * omega * charge)

    def _free_end(self, omega: Complexes, u: Complexes, volts: Complexes, state: State) -> _Wave:
        """The far end's wave when the near end moves by ``u`` under no force and the rings see ``volts``."""
        zero = np.zeros_like(omega)
        wave = _Wave(u, zero, zero)
        for section in self.sections:
            if isinstance(section, Rod):
                wave = _through_rod(section, wave, omega, state)
            else:
                wave = _through_stack(section, wave, omega, volts, state)
        return wave

    def scaled(self, factor: float) -> Self:
        return replace(self, sections=tuple(replace(s, length_m=s.length_m * factor) for s in self.sections))

    def shared(self, fraction: float) -> Self:
        return replace(self, sections=tuple(replace(s, area_m2=s.area_m2 * fraction) for s in self.sections))

    def lossier(self, factor: float) -> Self:
        return replace(self, sections=tuple(_lossier(s, factor) for s in self.sections))

    def repoled(self, factor: float) -> Self:
        return replace(
            self,
            sections=tuple(
                replace(s, material=s.material.repoled(factor)) if isinstance(s, Stack) else s for s in self.sections
            ),
        )


def _lossier(section: Rod | Stack, factor: float) -> Rod | Stack:
    if isinstance(section, Rod):
        return replace(section, metal=section.metal.lossier(factor))
    return replace(section, material=section.material.lossier(factor))


def _through_rod(rod: Rod, wave: _Wave, omega: Complexes, state: State) -> _Wave:
    young = rod.metal.young(state)
    k = omega * np.sqrt(rod.metal.density_kg_m3 / young)
    kappa, kl = rod.area_m2 * young * k, k * rod.length_m
    cos, sin = np.cos(kl), np.sin(kl)
    return _Wave(wave.u * cos + wave.force * sin / kappa, wave.force * cos - kappa * wave.u * sin, wave.charge)


def _through_stack(stack: Stack, wave: _Wave, omega: Complexes, volts: Complexes, state: State) -> _Wave:
    c = stack.material.at(state)
    g = c.d33 / c.eps33t
    s_d = c.s33 - g * c.d33
    h, beta = g / s_d, 1 / c.eps33t + g**2 / s_d
    k = omega * np.sqrt(c.density_kg_m3 * s_d)
    kappa, kl = stack.area_m2 * k / s_d, k * stack.length_m
    cos, sin = np.cos(kl), np.sin(kl)
    elastance = beta * stack.length_m / stack.area_m2 - h**2 * sin / kappa
    for _ in range(stack.count):
        charge = (volts + h * (cos - 1) * wave.u + h * sin / kappa * wave.force) / elastance
        pulled = wave.force + h * charge
        wave = _Wave(
            wave.u * cos + pulled * sin / kappa,
            pulled * cos - kappa * wave.u * sin - h * charge,
            wave.charge + charge,
        )
    return wave
