"""The radial mode of a thin disc or ring poled through its thickness, electrodes on both faces.

Plane stress, axial symmetry, σ = −s12/s11, Y = 1/(s11(1 − σ²)), v² = Y/ρ, k = ω/v:

    T_r = Y[u′ + σu/r − (1 + σ) d31 E],   D = d31(T_r + T_θ) + ε33T E,   u = A J₁(kr) + B Y₁(kr)

T_r = 0 on each edge fixes A and B (B = 0 without a hole), and since (ru)′ = kr(A J₀ + B Y₀) the charge is

    Q = area · ε33T (1 − k_p²) E + 2π d31 Y (1 + σ) [r u(r)] between the edges.

For the disc this is the resonance condition x J₀(x) = (1 − σ) J₁(x), x = ka.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, Self

import numpy as np
from scipy import special

from sim_instruments.physics.materials import Complexes, Constants, Floats, Material, State


@dataclass(frozen=True, slots=True)
class Ring:
    """A thin annulus; ``inner_m`` 0 is a full disc. ``sector`` is the share of the circle that takes part."""

    material: Material
    inner_m: float
    outer_m: float
    thickness_m: float
    sector: float = 1.0

    @property
    def resonates(self) -> bool:
        return True

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        """Admittance in siemens; ``f_hz`` real or complex, any shape."""
        c = self.material.at(state)
        omega = 2 * np.pi * np.asarray(f_hz)
        plane = 1 / (c.s11 * (1 - c.poisson**2))
        k = np.asarray(omega * np.sqrt(c.density_kg_m3 / plane), dtype=np.complex128)
        swept = self._disc(k, c) if self.inner_m == 0 else self._ring(k, c)
        area = np.pi * (self.outer_m**2 - self.inner_m**2)
        moving = 2 * np.pi * c.d31**2 * plane * (1 + c.poisson) ** 2 * swept
        held = area * c.eps33t * (1 - c.kp2)
        return np.asarray(1j * omega * self.sector * (held + moving) / self.thickness_m)

    def _disc(self, k: Complexes, c: Constants) -> Complexes:
        """a·u(a) for a unit edge strain (1 + σ) d31 E, m²."""
        x = k * self.outer_m
        j1 = _bessel(special.j1, 1, x)
        return np.asarray(self.outer_m**2 * j1 / (x * _bessel(special.j0, 0, x) - (1 - c.poisson) * j1))

    def _ring(self, k: Complexes, c: Constants) -> Complexes:
        """a·u(a) − b·u(b) for a unit edge strain, m²: the 2 × 2 edge conditions by Cramer's rule."""
        outer, inner = _Edge.at(self.outer_m, k, c), _Edge.at(self.inner_m, k, c)
        determinant = outer.strain_j * inner.strain_y - outer.strain_y * inner.strain_j
        a = (inner.strain_y - outer.strain_y) / determinant
        b = (outer.strain_j - inner.strain_j) / determinant
        at_outer = self.outer_m * (a * outer.j1 + b * outer.y1)
        at_inner = self.inner_m * (a * inner.j1 + b * inner.y1)
        return np.asarray(at_outer - at_inner)

    def scaled(self, factor: float) -> Self:
        return replace(self, inner_m=self.inner_m * factor, outer_m=self.outer_m * factor)

    def shared(self, fraction: float) -> Self:
        return replace(self, sector=self.sector * fraction)

    def lossier(self, factor: float) -> Self:
        return replace(self, material=self.material.lossier(factor))

    def repoled(self, factor: float) -> Self:
        return replace(self, material=self.material.repoled(factor))


@dataclass(frozen=True, slots=True, eq=False)
class _Edge:
    """At one radius: J₁, Y₁, and the radial stress over Y of each, k[C₀ − (1 − σ) C₁/(kr)]."""

    j1: Complexes
    y1: Complexes
    strain_j: Complexes
    strain_y: Complexes

    @classmethod
    def at(cls, radius_m: float, k: Complexes, c: Constants) -> _Edge:
        x = k * radius_m
        j1, y1 = _bessel(special.j1, 1, x), _neumann(special.y1, 1, x)
        held = (1 - c.poisson) / x
        strain_j = k * (_bessel(special.j0, 0, x) - held * j1)
        strain_y = k * (_neumann(special.y0, 0, x) - held * y1)
        return cls(j1, y1, np.asarray(strain_j), np.asarray(strain_y))


def _bessel(real: Callable[[Any], Any], order: int, x: Complexes) -> Complexes:
    """J of integer order; the quick real routine where there is no imaginary part."""
    return np.asarray(real(x.real) if not np.any(x.imag) else special.jv(order, x), dtype=np.complex128)


def _neumann(real: Callable[[Any], Any], order: int, x: Complexes) -> Complexes:
    """Y of integer order, likewise."""
    return np.asarray(real(x.real) if not np.any(x.imag) else special.yv(order, x), dtype=np.complex128)
