"""Piezoceramics and metals as lossy linear materials.

A piezoceramic poled along 3 obeys, for stress T and field E₃ along the axes used here (strain S, displacement D₃),

    S = s^E T + d E,   D = d T + ε^T E

with complex constants: s = s′(1 − j tan_m), ε = ε′(1 − j tan_d), d = d′(1 − j tan_p), the same tangent for all of a
kind. Everything else (c^D, e, ε^S, coupling) follows from these by algebra, and is therefore passive whenever these
are: the imaginary part of [[s, d], [d, ε]] is definite when tan_p² k² ≤ tan_m tan_d with k² = d s⁻¹ dᵀ/ε.

Temperature acts on s, ε and d linearly about 23 °C; thermal expansion is left out, being a hundred times less.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

Floats: TypeAlias = NDArray[np.float64]
Complexes: TypeAlias = NDArray[np.complex128]

EPSILON_0 = 8.8541878128e-12  # F/m, CODATA 2018
REFERENCE_DEGC = 23.0
# Mechanical loss doubles at this drive; invented, so that small-signal readings (1 V) are linear to 0.1 %.
_LOSS_DOUBLES_AT_V = 30.0


@dataclass(frozen=True, slots=True, eq=False)
class State:
    """What a part is measured under: temperature (a number, or one a frequency), drive in volts, losses on or off."""

    temperature_degc: float | Floats = REFERENCE_DEGC
    drive_v: float = 0.0
    lossless: bool = False

    def factor(self, per_k: float) -> Floats:
        """1 + coefficient × (T − 23 °C)."""
        return np.asarray(1.0 + per_k * (np.asarray(self.temperature_degc, dtype=np.float64) - REFERENCE_DEGC))

    def mechanical_loss(self, tangent: float) -> float:
        """The loss tangent of elasticity at this drive."""
        return self.dielectric_loss(tangent) * (1.0 + (self.drive_v / _LOSS_DOUBLES_AT_V) ** 2)

    def dielectric_loss(self, tangent: float) -> float:
        """A loss tangent that drive leaves alone."""
        return 0.0 if self.lossless else tangent


@dataclass(frozen=True, slots=True, eq=False)
class Constants:
    """Complex constants of a piezoceramic in one state; SI units; shape of the state's temperature."""

    density_kg_m3: float
    s11: Complexes
    s12: Complexes
    s13: Complexes
    s33: Complexes
    d31: Complexes
    d33: Complexes
    eps33t: Complexes

    @property
    def poisson(self) -> Complexes:
        """Planar Poisson's ratio −s12/s11."""
        return np.asarray(-self.s12 / self.s11)

    @property
    def kp2(self) -> Complexes:
        """Planar coupling squared, 2 d31²/(ε33T (s11 + s12))."""
        return np.asarray(2 * self.d31**2 / (self.eps33t * (self.s11 + self.s12)))

    @property
    def k31_2(self) -> Complexes:
        return np.asarray(self.d31**2 / (self.eps33t * self.s11))

    @property
    def k33_2(self) -> Complexes:
        return np.asarray(self.d33**2 / (self.eps33t * self.s33))

    @property
    def _determinant(self) -> Complexes:
        return np.asarray(self.s33 * (self.s11 + self.s12) - 2 * self.s13**2)

    @property
    def c33e(self) -> Complexes:
        """Stiffness along 3, strain zero across, at constant field: from inverting s^E."""
        return np.asarray((self.s11 + self.s12) / self._determinant)

    @property
    def e33(self) -> Complexes:
        """Stress constant 2 d31 c13 + d33 c33."""
        return np.asarray((self.d33 * (self.s11 + self.s12) - 2 * self.d31 * self.s13) / self._determinant)

    @property
    def e31(self) -> Complexes:
        """Stress constant d31 (c11 + c12) + d33 c13."""
        return np.asarray((self.d31 * self.s33 - self.d33 * self.s13) / self._determinant)

    @property
    def eps33s(self) -> Complexes:
        """Permittivity with all strains zero."""
        return np.asarray(self.eps33t - 2 * self.d31 * self.e31 - self.d33 * self.e33)

    @property
    def c33d(self) -> Complexes:
        """Stiffness along 3 at constant displacement."""
        return np.asarray(self.c33e + self.e33**2 / self.eps33s)

    @property
    def kt2(self) -> Complexes:
        """Thickness coupling squared, e33²/(c33D ε33S)."""
        return np.asarray(self.e33**2 / (self.c33d * self.eps33s))


@dataclass(frozen=True, slots=True)
class Material:
    """A piezoceramic. Compliances m²/N at constant field, piezo constants C/N, permittivity relative to ε0 at constant
    stress; ``tan_*`` loss tangents, mechanical, dielectric, piezoelectric; ``*_per_k`` relative change a kelvin.

    Raises ValueError when the loss tangents would make the material give out energy.
    """

    name: str
    source: str
    density_kg_m3: float
    s11: float
    s12: float
    s13: float
    s33: float
    d31: float
    d33: float
    eps33t_relative: float
    tan_mechanical: float = 0.0
    tan_dielectric: float = 0.0
    tan_piezo: float = 0.0
    s_per_k: float = 0.0
    d_per_k: float = 0.0
    eps_per_k: float = 0.0

    def __post_init__(self) -> None:
        real = self.at(State(lossless=True))
        k2 = float((1 - real.eps33s / real.eps33t).real)
        if not 0 <= k2 < 1:
            raise ValueError(f"{self.name}: coupling {k2:.3f} squared lies outside 0 to 1")
        if self.tan_piezo**2 * k2 > self.tan_mechanical * self.tan_dielectric * (1 + 1e-12):
            raise ValueError(f"{self.name}: tan_piezo² k² exceeds tan_mechanical × tan_dielectric: not passive")

    def at(self, state: State) -> Constants:
        """The complex constants in a state."""
        elastic = _complex(state.factor(self.s_per_k), state.mechanical_loss(self.tan_mechanical))
        piezo = _complex(state.factor(self.d_per_k), state.dielectric_loss(self.tan_piezo))
        dielectric = _complex(state.factor(self.eps_per_k), state.dielectric_loss(self.tan_dielectric))
        s11, s12, s13, s33 = (np.asarray(s * elastic) for s in (self.s11, self.s12, self.s13, self.s33))
        d31, d33 = np.asarray(self.d31 * piezo), np.asarray(self.d33 * piezo)
        eps33t = np.asarray(self.eps33t_relative * EPSILON_0 * dielectric)
        return Constants(self.density_kg_m3, s11, s12, s13, s33, d31, d33, eps33t)

    def lossier(self, factor: float) -> Material:
        """The same with its mechanical loss multiplied (factor ≥ 1 keeps it passive)."""
        return replace(self, tan_mechanical=self.tan_mechanical * factor)

    def repoled(self, factor: float) -> Material:
        """The same with its piezo constants multiplied, as by incomplete poling."""
        return replace(self, d31=self.d31 * factor, d33=self.d33 * factor)

    def varied(self, stiffness: float, permittivity: float, poling: float) -> Material:
        """The same with compliances divided and permittivity and piezo constants multiplied: one batch to another."""
        return replace(
            self,
            s11=self.s11 / stiffness,
            s12=self.s12 / stiffness,
            s13=self.s13 / stiffness,
            s33=self.s33 / stiffness,
            eps33t_relative=self.eps33t_relative * permittivity,
        ).repoled(poling)


@dataclass(frozen=True, slots=True)
class Metal:
    """A rod's material: density, Young's modulus in pascal, loss tangent, relative change of the modulus a kelvin."""

    name: str
    density_kg_m3: float
    young_pa: float
    tan_mechanical: float = 0.0
    young_per_k: float = 0.0

    def young(self, state: State) -> Complexes:
        """Complex modulus E(1 + j tan)."""
        loss = 1 + 1j * state.mechanical_loss(self.tan_mechanical)
        return np.asarray(self.young_pa * state.factor(self.young_per_k) * loss)

    def lossier(self, factor: float) -> Metal:
        return replace(self, tan_mechanical=self.tan_mechanical * factor)


def _complex(factor: Floats, tangent: float) -> Complexes:
    """factor × (1 − j tangent)."""
    return np.asarray(factor * (1 - 1j * tangent), dtype=np.complex128)


# Published real constants, as quoted: Erturk & Inman, Piezoelectric Energy Harvesting (2011), appendix E.
PZT_5A = Material("PZT-5A", "Erturk & Inman 2011, app. E", 7750.0, 16.4e-12, -5.74e-12, -7.22e-12, 18.8e-12,
                  -171e-12, 374e-12, 1700.0)  # fmt: skip
PZT_5H = Material("PZT-5H", "Erturk & Inman 2011, app. E", 7500.0, 16.5e-12, -4.78e-12, -8.45e-12, 20.7e-12,
                  -274e-12, 593e-12, 3400.0)  # fmt: skip

# Invented sets, plausible for their kind; the loss tangents include what mounting adds.
INVENTED_HARD = Material(
    "hard (invented)", "invented", 7650.0, 11.8e-12, -3.8e-12, -4.9e-12, 14.2e-12, -95e-12, 235e-12, 1200.0,
    tan_mechanical=2.2e-3, tan_dielectric=4e-3, tan_piezo=2e-3, s_per_k=1.6e-4, d_per_k=1.4e-3, eps_per_k=2.8e-3,
)  # fmt: skip
INVENTED_SOFT = Material(
    "soft (invented)", "invented", 7600.0, 15.2e-12, -5.1e-12, -6.6e-12, 17.6e-12, -160e-12, 350e-12, 1700.0,
    tan_mechanical=4.5e-3, tan_dielectric=1.1e-2, tan_piezo=4e-3, s_per_k=1.9e-4, d_per_k=1.9e-3, eps_per_k=3.8e-3,
)  # fmt: skip
# Moduli of common engineering metals, rounded (common practice, no source); tangents include the joints' losses.
STEEL = Metal("steel", 7850.0, 205e9, tan_mechanical=1.7e-3, young_per_k=-2.6e-4)
ALUMINIUM = Metal("aluminium", 2710.0, 70e9, tan_mechanical=1.7e-3, young_per_k=-4.4e-4)
