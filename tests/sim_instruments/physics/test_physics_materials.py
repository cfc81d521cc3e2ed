"""Material algebra against published constants, and what keeps a material passive."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from sim_instruments.physics.materials import (
    ALUMINIUM,
    EPSILON_0,
    INVENTED_HARD,
    INVENTED_SOFT,
    PZT_5A,
    PZT_5H,
    STEEL,
    Material,
    State,
)

LOSSLESS = State(lossless=True)
# Erturk & Inman 2011, app. E, and what follows from it (references §1.8, ε0 = 8.854e-12).
DERIVED = {
    "k31": (0.344176, 0.388776),
    "k33": (0.703070, 0.751208),
    "sigma": (0.350000, 0.289697),
    "kp": (0.603724, 0.652368),
    "kt": (0.484667, 0.515726),
    "nt_hz_m": (2162.03, 2309.32),
}


@pytest.mark.parametrize(("column", "material"), [(0, PZT_5A), (1, PZT_5H)])
def test_couplings_of_published_sets(column: int, material: Material) -> None:
    """k31, k33, kp, kt, σ and the thickness frequency constant follow from the published compliances."""
    c = material.at(LOSSLESS)
    found = {
        "k31": np.sqrt(c.k31_2),
        "k33": np.sqrt(c.k33_2),
        "sigma": c.poisson,
        "kp": np.sqrt(c.kp2),
        "kt": np.sqrt(c.kt2),
        "nt_hz_m": np.sqrt(c.c33d / c.density_kg_m3) / 2,
    }
    for name, value in found.items():
        assert complex(value).real == pytest.approx(DERIVED[name][column], rel=3e-5), name
        assert abs(complex(value).imag) < 1e-12


@pytest.mark.parametrize("material", [PZT_5A, INVENTED_HARD, INVENTED_SOFT], ids=lambda m: m.name)
def test_derived_constants_agree_with_full_matrices(material: Material) -> None:
    """e, c^E and ε^S written out by hand equal those of the inverted 3 × 3 compliance."""
    c = material.at(State())
    s = np.array([[c.s11, c.s12, c.s13], [c.s12, c.s11, c.s13], [c.s13, c.s13, c.s33]])
    d = np.array([c.d31, c.d31, c.d33])
    stiffness = np.linalg.inv(s)
    e = d @ stiffness
    assert np.allclose([c.e31, c.e33], e[[0, 2]], rtol=1e-12)
    assert np.isclose(c.c33e, stiffness[2, 2], rtol=1e-12)
    assert np.isclose(c.eps33s, c.eps33t - e @ d, rtol=1e-12)


@pytest.mark.parametrize("material", [INVENTED_HARD, INVENTED_SOFT], ids=lambda m: m.name)
def test_invented_sets_absorb_energy(material: Material) -> None:
    """The imaginary part of the constitutive matrix is negative definite: no state of stress and field gives energy."""
    c = material.at(State())
    d = [c.d31, c.d31, c.d33]
    matrix = np.array(
        [
            [c.s11, c.s12, c.s13, d[0]],
            [c.s12, c.s11, c.s13, d[1]],
            [c.s13, c.s13, c.s33, d[2]],
            [d[0], d[1], d[2], c.eps33t],
        ]
    )
    scale = np.diag(1 / np.sqrt(np.abs(np.diag(matrix))))
    assert np.linalg.eigvalsh((scale @ matrix @ scale).imag).max() < 0


def test_losses_that_would_give_energy_are_refused() -> None:
    """A piezoelectric loss larger than the other two allow is refused by name."""
    with pytest.raises(ValueError, match="not passive"):
        replace(INVENTED_HARD, tan_piezo=0.02)
    with pytest.raises(ValueError, match="coupling"):
        replace(INVENTED_HARD, d33=600e-12)


def test_complex_constants_have_the_stated_tangents() -> None:
    """s, ε and d lag by their own tangent, and a lossless state has none."""
    c = INVENTED_SOFT.at(State())
    assert complex(c.s11).imag / complex(c.s11).real == pytest.approx(-INVENTED_SOFT.tan_mechanical)
    assert complex(c.eps33t).imag / complex(c.eps33t).real == pytest.approx(-INVENTED_SOFT.tan_dielectric)
    assert complex(c.d33).imag / complex(c.d33).real == pytest.approx(-INVENTED_SOFT.tan_piezo)
    assert complex(INVENTED_SOFT.at(LOSSLESS).s11).imag == 0
    assert complex(c.eps33t).real == pytest.approx(1700 * EPSILON_0)


def test_temperature_acts_by_its_coefficient() -> None:
    """Ten kelvin change compliance, permittivity and Young's modulus by ten coefficients; arrays work alike."""
    warm, cold = INVENTED_HARD.at(State(33.0)), INVENTED_HARD.at(State(23.0))
    assert complex(warm.s33 / cold.s33).real == pytest.approx(1 + 10 * INVENTED_HARD.s_per_k)
    assert complex(warm.eps33t / cold.eps33t).real == pytest.approx(1 + 10 * INVENTED_HARD.eps_per_k)
    assert complex(STEEL.young(State(33.0)) / STEEL.young(State(23.0))).real == pytest.approx(1 - 2.6e-3)
    both = ALUMINIUM.young(State(np.array([23.0, 33.0])))
    assert both.shape == (2,)
    assert both[1] == ALUMINIUM.young(State(33.0))


def test_drive_adds_mechanical_loss_only() -> None:
    """At 30 V the mechanical loss has doubled, at 1 V it has moved by about a tenth of a percent, ε not at all."""
    small, one, thirty = (INVENTED_HARD.at(State(drive_v=v)) for v in (0.0, 1.0, 30.0))
    assert complex(thirty.s11).imag == pytest.approx(2 * complex(small.s11).imag)
    assert complex(one.s11).imag == pytest.approx(complex(small.s11).imag, rel=2e-3)
    assert thirty.eps33t == small.eps33t
