"""Characteristics found at the poles and on the noiseless curve: consistent, and true where closed forms exist."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from sim_instruments.physics.defects import make_part
from sim_instruments.physics.families import FAMILIES
from sim_instruments.physics.materials import PZT_5A, State
from sim_instruments.physics.modes import modes
from sim_instruments.physics.parts import Part, nominal_part
from sim_instruments.physics.plate import Plate
from sim_instruments.physics.truth import IDS, characteristics, fs_hz, placed

NOMINAL_Q = {"MD-1650": (150, 400), "MR-113": (200, 600), "BD-40": (400, 800)}
NOMINAL_C0 = {"MD-1650": (1.5e-9, 3e-9), "MR-113": (1e-9, 5e-9), "BD-40": (3.5e-9, 4.5e-9)}
NOMINAL_KEFF = {"MD-1650": (0.40, 0.46), "MR-113": (0.2, 0.3), "BD-40": (0.22, 0.29)}


def true(part: Part, **conditions: float) -> dict[str, float]:
    """The characteristics that exist, as numbers."""
    return {k: v for k, v in characteristics(part, **conditions).items() if v is not None}


@pytest.mark.parametrize("family", FAMILIES)
def test_nominal_parts_are_what_the_drawing_says(family: str) -> None:
    """fs lies within 20 ppm of nominal; Q, C0 and coupling in the family's usual range; no unwanted mode."""
    t = true(nominal_part(family))
    assert t["fs"] == pytest.approx(FAMILIES[family].nominal_hz, rel=2e-5)
    for key, ranges in (("qm", NOMINAL_Q), ("c0", NOMINAL_C0), ("keff", NOMINAL_KEFF)):
        low, high = ranges[family]
        assert low < t[key] < high, key
    assert t["unwanted_g"] == 0
    assert characteristics(nominal_part(family))["unwanted_f"] is None
    assert {type(value) for value in t.values()} == {float}  # plain, so that they go into JSON


@pytest.mark.parametrize("family", FAMILIES)
def test_branch_and_background_rebuild_the_admittance(family: str, rng: np.random.Generator) -> None:
    """One branch and C0(1 − j tan δ) made of the reported values give Y to 0.2 % over two bandwidths either side."""
    part = make_part(family, "x", rng)
    t = true(part)
    f = t["fs"] + t["bandwidth"] * np.linspace(-2, 2, 201)
    (mode,) = modes(part, State())
    theta = np.angle(mode.amplitude_s)
    branch = np.exp(1j * theta) / t["r1"] / (1 + 1j * t["qm"] * (f / t["fs"] - t["fs"] / f))
    background = 2j * np.pi * f * t["c0"] * (1 - 1j * t["tan_delta"])
    y = part.admittance(f, State())
    assert np.abs((branch + background) / y - 1).max() < 2e-3


@pytest.mark.parametrize("family", FAMILIES)
def test_pole_is_a_pole(family: str, rng: np.random.Generator) -> None:
    """Z vanishes at the found pole, and Y near it falls off as the residue says."""
    part = make_part(family, "x", rng)
    (mode,) = modes(part, State())
    at = 1 / complex(part.admittance(np.asarray(mode.pole_hz * (1 + 1e-10)), State()))
    assert abs(at) < 1e-6 / mode.g_s
    near = mode.pole_hz + 1e-3 * mode.pole_hz.imag
    y = complex(part.admittance(np.asarray(near), State()))
    assert y == pytest.approx(mode.branch(near), rel=3e-3)


def test_pole_of_a_plate_with_one_loss_is_known_in_closed_form() -> None:
    """With coupling gone, f_p = √(c(1 + j tan)/ρ)/(2t): fs and Q of the plate follow by hand."""
    material = replace(PZT_5A.repoled(1e-4), tan_mechanical=4e-3)
    part = Part("x", "MD-1650", "sound", (Plate(material, 1.15e-3, 2e-4),))
    c = complex(material.at(State(lossless=True)).c33d) * (1 / (1 - 4e-3j))
    pole = np.sqrt(c / material.density_kg_m3) / (2 * 1.15e-3)
    t = true(part)
    assert t["fs"] == pytest.approx(abs(pole), rel=1e-8)
    assert t["qm"] == pytest.approx(abs(pole) / (2 * pole.imag), rel=1e-5)


@pytest.mark.parametrize("family", FAMILIES)
def test_characteristics_belong_together(family: str, rng: np.random.Generator) -> None:
    """fs, R1, L1, C1, Q, bandwidth, M and keff obey their definitions, and fm < fs < fr, fa < fp < fn."""
    t = true(make_part(family, "x", rng))
    omega = 2 * np.pi * t["fs"]
    assert set(IDS) - {"unwanted_f"} == set(t)
    assert omega**2 * t["l1"] * t["c1"] == pytest.approx(1)
    assert omega * t["l1"] / t["r1"] == pytest.approx(t["qm"])
    assert t["bandwidth"] * t["qm"] == pytest.approx(t["fs"])
    assert t["m"] * omega * t["c0"] * t["r1"] == pytest.approx(1)
    assert t["keff"] ** 2 == pytest.approx(1 - (t["fs"] / t["fp"]) ** 2)
    assert t["fm"] < t["fs"] < t["fr"]
    assert t["fa"] < t["fp"] < t["fn"]
    # large-M approximations of IEEE Std 177 (from memory): fm = fs(1 − r/2Q²), Zm = R1(1 − 1/M²)
    r = t["c0"] / t["c1"]
    assert (t["fs"] - t["fm"]) / t["fs"] == pytest.approx(r / (2 * t["qm"] ** 2), rel=0.25)
    assert t["zm"] == pytest.approx(t["r1"], rel=2.5e-3)
    assert t["zn"] > 100 * t["zm"]


@pytest.mark.parametrize("family", FAMILIES)
def test_extremes_are_where_a_dense_sweep_has_them(family: str, rng: np.random.Generator) -> None:
    """fm, fn, fr and fa agree with a sweep of a hundred points a bandwidth."""
    part = make_part(family, "x", rng)
    t = true(part)
    step = t["bandwidth"] / 100
    f = np.arange(t["fs"] - 3 * t["bandwidth"], t["fp"] + 5 * t["bandwidth"], step)
    z = part.impedance(f)
    assert abs(f[np.argmin(np.abs(z))] - t["fm"]) <= step
    assert abs(f[np.argmax(np.abs(z))] - t["fn"]) <= step
    crossings = f[np.flatnonzero(np.diff(np.sign(z.imag)))]
    assert abs(crossings[0] - t["fr"]) <= step
    assert abs(crossings[-1] - t["fa"]) <= step


@pytest.mark.parametrize("family", FAMILIES)
def test_fs_falls_and_capacitance_rises_with_temperature(family: str) -> None:
    """Ten kelvin warmer: fs lower by 0.05 to 0.3 %, C0 and C higher by 2 to 5 %."""
    cold, warm = (true(nominal_part(family), temperature_degc=t) for t in (23.0, 33.0))
    assert 5e-4 < 1 - warm["fs"] / cold["fs"] < 3e-3
    assert 0.02 < warm["c0"] / cold["c0"] - 1 < 0.05
    assert 0.02 < warm["c_at"] / cold["c_at"] - 1 < 0.05


@pytest.mark.parametrize("family", FAMILIES)
def test_drive_lowers_q(family: str) -> None:
    """At 30 V Q is less than 0.65 of the small-signal value; at 1 V the same to 0.2 %."""
    part = nominal_part(family)
    small, one, thirty = (true(part, drive_v=v)["qm"] for v in (0.0, 1.0, 30.0))
    assert thirty < 0.65 * small
    assert one == pytest.approx(small, rel=2e-3)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("defect", ["sound", "chip", "crack"])
def test_a_part_is_placed_on_a_wanted_frequency(family: str, defect: str, rng: np.random.Generator) -> None:
    """The wanted mode, found anew, lies within a ppb of the place; Q is unchanged by it."""
    part = make_part(family, "x", rng, defect)
    wanted = FAMILIES[family].nominal_hz * 1.0123
    moved = placed(part, wanted)
    assert fs_hz(moved) == pytest.approx(wanted, rel=1e-9)
    assert true(moved)["qm"] == pytest.approx(true(part)["qm"], rel=1e-6)


def test_what_cannot_be_placed_is_refused(rng: np.random.Generator) -> None:
    """A short has no mode to place, and a place outside the search window is no place."""
    with pytest.raises(ValueError, match="no mode"):
        placed(make_part("BD-40", "x", rng, "short"), 40e3)
    with pytest.raises(ValueError, match="outside the search window"):
        placed(nominal_part("BD-40"), 50e3)


@pytest.mark.parametrize("family", FAMILIES)
def test_fp_is_where_the_lossless_part_has_no_current(family: str, rng: np.random.Generator) -> None:
    """Without loss the susceptance changes sign at fp and nowhere between fs and fp."""
    part = make_part(family, "x", rng)
    t = true(part)
    f = np.linspace(t["fs"] * (1 + 1e-3), t["fp"] * (1 + 1e-6), 500)
    b = part.admittance(f, State(lossless=True)).imag
    assert np.all(b[:-1] < 0)
    assert b[-1] > 0
