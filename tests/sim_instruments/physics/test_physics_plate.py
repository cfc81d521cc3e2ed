"""The thickness plate against closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import optimize

from sim_instruments.physics.materials import INVENTED_SOFT, PZT_5A, PZT_5H, Material, State
from sim_instruments.physics.plate import Plate

LOSSLESS = State(lossless=True)


def plate(material: Material) -> Plate:
    return Plate(material, 1.2e-3, 2e-4)


@pytest.mark.parametrize("material", [PZT_5A, PZT_5H], ids=lambda m: m.name)
def test_resonances_obey_the_thickness_coupling_relation(material: Material) -> None:
    """kt² = (π/2)(fs/fp) tan((π/2)(fp − fs)/fp) (IEEE Std 176, from memory) and fp·t is the published constant."""
    part = plate(material)
    fp = {"PZT-5A": 2162.03, "PZT-5H": 2309.32}[material.name] / part.thickness_m  # references §1.8

    def reactance(f: float) -> float:
        return float((1 / part.admittance(np.asarray(f), LOSSLESS)).imag)

    fs = optimize.brentq(reactance, 0.75 * fp, 0.999 * fp)
    kt2 = np.pi / 2 * fs / fp * np.tan(np.pi / 2 * (fp - fs) / fp)
    assert np.sqrt(kt2) == pytest.approx({"PZT-5A": 0.484667, "PZT-5H": 0.515726}[material.name], rel=1e-4)
    # just below and above fp the reactance changes through the pole
    assert reactance(fp * (1 - 2e-4)) > 0 > reactance(fp * (1 + 2e-4))


def test_low_frequency_capacitance_is_clamped_over_one_minus_kt2() -> None:
    """At 1 kHz C = ε33S A / (t (1 − kt²)), with that ratio's own loss."""
    part = plate(INVENTED_SOFT)
    c = INVENTED_SOFT.at(State())
    want = complex(c.eps33s / (1 - c.kt2)) * part.area_m2 / part.thickness_m
    y = complex(part.admittance(np.asarray(1e3), State()))
    assert y / (2j * np.pi * 1e3) == pytest.approx(want, rel=1e-6)


def test_loss_of_an_uncoupled_plate_is_its_stiffness_loss() -> None:
    """With coupling gone to a thousandth, the half-power width of the conductance peak is fs times the loss tangent."""
    material = replace(PZT_5A.repoled(1e-3), tan_mechanical=5e-3)
    part = plate(material)
    f0 = float(np.sqrt(material.at(LOSSLESS).c33d / material.density_kg_m3).real) / (2 * part.thickness_m)
    f = f0 * (1 + np.linspace(-8e-3, 8e-3, 40001))
    g = part.admittance(f, State()).real
    above = f[g > 0.5 * g.max()]
    assert (above[-1] - above[0]) / f0 == pytest.approx(5e-3, rel=2e-3)


def test_admittance_is_analytic() -> None:
    """The derivative along the real and along the imaginary frequency axis is the same (Cauchy–Riemann)."""
    part, f, h = plate(INVENTED_SOFT), 1.63e6 * (1 + 0.01j), 1.0
    along = (part.admittance(np.asarray(f + h), State()) - part.admittance(np.asarray(f - h), State())) / (2 * h)
    across = (part.admittance(np.asarray(f + 1j * h), State()) - part.admittance(np.asarray(f - 1j * h), State())) / (
        2j * h
    )
    assert complex(along) == pytest.approx(complex(across), rel=1e-6)


def test_area_shares_add_up() -> None:
    """Two pieces of one plate, unchanged, are the plate."""
    part, f = plate(INVENTED_SOFT), np.linspace(1e6, 2e6, 50)
    pieces = part.shared(0.3).admittance(f, State()) + part.shared(0.7).admittance(f, State())
    assert np.allclose(pieces, part.admittance(f, State()), rtol=1e-12)
