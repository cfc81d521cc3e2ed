"""What lies between the part's electrodes and the meter's terminals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sim_instruments.physics.materials import Complexes, Floats


@dataclass(frozen=True, slots=True)
class Fixture:
    """Leads and contacts in series (``rs_ohm``, ``ls_h``), then a stray ``cp_f`` across the part's contacts."""

    rs_ohm: float = 0.15
    ls_h: float = 60e-9
    cp_f: float = 4e-12


NO_FIXTURE = Fixture(0.0, 0.0, 0.0)


def embed(z_part_ohm: Complexes, f_hz: Floats, fixture: Fixture) -> Complexes:
    """Impedance at the terminals, Rs + jωLs + 1/(1/Z + jωCp), ohm; arrays ``(N,)``."""
    s = 2j * np.pi * np.asarray(f_hz, dtype=np.float64)
    return np.asarray(fixture.rs_ohm + s * fixture.ls_h + 1 / (1 / z_part_ohm + s * fixture.cp_f))
