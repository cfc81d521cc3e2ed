"""A part: its serial, what it is, what is wrong with it, and its impedance at the electrodes."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from sim_instruments.physics.elements import Element
from sim_instruments.physics.families import FAMILIES, Family
from sim_instruments.physics.materials import REFERENCE_DEGC, Complexes, Floats, State

SOUND = "sound"


@dataclass(frozen=True, slots=True)
class Part:
    """``family`` is the part number it goes by (a wrong part goes by another's), ``defect`` an id of
    ``defects.DEFECTS`` or "sound", ``elements`` what lies electrically in parallel between its electrodes."""

    serial: str
    family: str
    defect: str
    elements: tuple[Element, ...]

    @property
    def made_as(self) -> Family:
        """The family it is judged as."""
        return FAMILIES[self.family]

    def admittance(self, f_hz: Floats | Complexes, state: State) -> Complexes:
        """Admittance at the electrodes, siemens; ``f_hz`` real or complex, any shape."""
        parts = [element.admittance(f_hz, state) for element in self.elements]
        return np.asarray(np.sum(parts, axis=0), dtype=np.complex128)

    def impedance(
        self, f_hz: Floats, temperature_degc: float | Floats = REFERENCE_DEGC, drive_v: float = 0.0
    ) -> Complexes:
        """Impedance at the electrodes, ohm, shape ``(N,)``.

        ``f_hz`` real, ``(N,)``, above zero; ``temperature_degc`` a number, or ``(N,)`` when the part warms or cools
        during the sweep. Small-signal below about 1 V; mechanical loss rises with the square of ``drive_v``.
        """
        f = np.asarray(f_hz, dtype=np.float64)
        if np.any(f <= 0):
            raise ValueError("frequencies must be above zero")
        return np.asarray(1 / self.admittance(f, State(temperature_degc, drive_v)))

    def scaled(self, factor: float) -> Part:
        """The same with every length along the wave multiplied: its resonances move by 1/factor."""
        return replace(self, elements=tuple(element.scaled(factor) for element in self.elements))


def nominal_part(family: str, serial: str = "nominal") -> Part:
    """The part as drawn, without spread."""
    return Part(serial, family, SOUND, (FAMILIES[family].nominal(),))
