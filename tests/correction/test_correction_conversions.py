"""Instrument quantities ⇄ impedance: mirrors, published values, the independent reference, and the edges."""

from __future__ import annotations

import doctest
from collections.abc import Callable

import numpy as np
import pytest
import skrf
from hypothesis import given
from hypothesis import strategies as st

from harness.correction import conversions as c
from harness.records import Complexes

F_HZ = 113e3
Z0 = 50.0
Pair = tuple[Callable[..., Complexes], Callable[[Complexes], object]]


def _two(convert: Callable[..., Complexes]) -> Callable[..., Complexes]:
    return lambda pair: convert(*pair)


# to impedance, from impedance; each mirror takes what the other returns
MIRRORS: dict[str, Pair] = {
    "ztheta": (_two(c.ztheta_to_z), c.z_to_ztheta),
    "rx": (_two(c.rx_to_z), c.z_to_rx),
    "gb": (_two(c.gb_to_z), c.z_to_gb),
    "ytheta": (_two(c.ytheta_to_z), c.z_to_ytheta),
    "cpd": (lambda pair: c.cpd_to_z(F_HZ, *pair), lambda z: c.z_to_cpd(F_HZ, z)),
    "csd": (lambda pair: c.csd_to_z(F_HZ, *pair), lambda z: c.z_to_csd(F_HZ, z)),
    "s11": (lambda s: c.s11_to_z(s, Z0), lambda z: c.z_to_s11(z, Z0)),
    "s21_series": (lambda s: c.s21_series_to_z(s, Z0), lambda z: c.z_to_s21_series(z, Z0)),
    "s21_shunt": (lambda s: c.s21_shunt_to_z(s, Z0), lambda z: c.z_to_s21_shunt(z, Z0)),
    "divider": (lambda k: c.divider_to_z(k, 100.0), lambda z: c.z_to_divider(z, 100.0)),
}


def test_every_conversion_is_mirrored() -> None:
    """Each ``a_to_z`` has its ``z_to_a`` and a row in the table of mirrors here."""
    public = {name for name in vars(c) if not name.startswith("_")}
    to_z = {name.removesuffix("_to_z") for name in public if name.endswith("_to_z")}
    from_z = {name.removeprefix("z_to_") for name in public if name.startswith("z_to_")}
    assert to_z == from_z == set(MIRRORS)


@pytest.mark.parametrize("name", MIRRORS)
@given(
    r_ohm=st.floats(1e-2, 1e5),
    x_ohm=st.floats(1e-2, 1e5) | st.floats(-1e5, -1e-2),
)
def test_there_and_back(name: str, r_ohm: float, x_ohm: float) -> None:
    """Impedance → quantity → impedance is the same impedance, for every quantity."""
    to_z, from_z = MIRRORS[name]
    z = np.array([r_ohm + 1j * x_ohm])
    back = to_z(from_z(z))
    # Reflection and transmission crowd together far from their reference: there only so many digits are left.
    lost = 1 + max(abs(z[0]) / Z0, Z0 / abs(z[0]))
    assert abs(back[0] - z[0]) <= 1e-14 * lost * abs(z[0])


def test_plain_values() -> None:
    """Textbook values of each definition, worked by hand."""
    assert c.ztheta_to_z(2.0, -90.0) == pytest.approx(-2j, abs=1e-15)
    assert c.rx_to_z(3.0, -4.0) == 3 - 4j
    assert c.gb_to_z(0.0, 0.01) == pytest.approx(-100j)
    assert c.ytheta_to_z(0.01, 90.0) == pytest.approx(-100j)
    capacitor = 1 / (2j * np.pi * 1e3 * 1e-9)
    assert c.cpd_to_z(1e3, 1e-9, 0.0) == pytest.approx(capacitor)
    assert c.csd_to_z(1e3, 1e-9, 0.02) == pytest.approx(capacitor * (1 + 0.02j))
    assert c.cpd_to_z(1e3, 1e-9, 0.02) == pytest.approx(capacitor / (1 - 0.02j))
    assert c.s11_to_z(1 / 3, 50.0) == pytest.approx(100.0)
    assert c.s21_series_to_z(0.5, 50.0) == pytest.approx(100.0)
    assert c.s21_shunt_to_z(0.5, 50.0) == pytest.approx(25.0)
    assert c.divider_to_z(0.25, 100.0) == pytest.approx(300.0)
    assert c.db_deg_to_complex(-20.0, 180.0) == pytest.approx(-0.1)


def test_reflection_of_the_specification_example() -> None:
    """Touchstone 2.0 specification example 8 (S 0.894 ∠ −12.136° at 50 Ω, 2 MHz): its impedance and parallel model.

    Values computed from the printed S: Z = 196.0762 − j367.1192 Ω, Rp 883.44 Ω, Cp 168.653 pF.
    """
    z = c.s11_to_z(c.ztheta_to_z(0.894, -12.136), 50.0)
    assert z == pytest.approx(196.0762 - 367.1192j, abs=1e-4)
    cp_f, d = c.z_to_cpd(2e6, z)
    assert cp_f == pytest.approx(168.653e-12, abs=1e-15)
    assert 1 / (d * 2 * np.pi * 2e6 * cp_f) == pytest.approx(883.44, abs=0.01)


def test_transmission_agrees_with_scikit_rf() -> None:
    """scikit-rf's own series and shunt networks, terminated at 50 Ω, have the S21 and S11 of these formulas."""
    frequency = skrf.Frequency(1, 2, 5, unit="MHz")
    media = skrf.media.DefinedGammaZ0(frequency, z0=Z0)
    z = 1 / (2j * np.pi * frequency.f * 1.2e-9) + 12.0
    part = media.resistor(12.0) ** media.capacitor(1.2e-9)
    np.testing.assert_allclose(part.s[:, 1, 0], c.z_to_s21_series(z, Z0), rtol=1e-12)
    shunt = media.shunt(part ** media.short())
    np.testing.assert_allclose(shunt.s[:, 1, 0], c.z_to_s21_shunt(z, Z0), rtol=1e-12)
    one_port = part ** media.short()
    np.testing.assert_allclose(one_port.s[:, 0, 0], c.z_to_s11(z, Z0), rtol=1e-12)
    np.testing.assert_allclose(c.s11_to_z(one_port.s[:, 0, 0], Z0), one_port.z[:, 0, 0], rtol=1e-9)


OPENS = [
    ("s11", 1.0),
    ("s21_series", 0.0),
    ("s21_shunt", 1.0),
    ("divider", 0.0),
    ("gb", (0.0, 0.0)),
    ("ytheta", (0.0, 30.0)),
]


@pytest.mark.parametrize(("name", "quantity"), OPENS)
def test_an_open_is_infinite_without_a_warning(name: str, quantity: object) -> None:
    """What stands for an open comes out as inf + 0j, and its mirror gives the quantity back."""
    to_z, from_z = MIRRORS[name]
    z = to_z(quantity)
    assert complex(z) == complex(np.inf, 0.0)
    back = from_z(z)
    expected = quantity if not isinstance(quantity, tuple) else (0.0, 0.0)
    assert np.all(np.asarray(back) == np.asarray(expected))


@pytest.mark.parametrize("name", MIRRORS)
def test_edges_neither_warn_nor_raise(name: str) -> None:
    """Zero, infinity and NaN go through every conversion both ways; NaN stays NaN."""
    to_z, from_z = MIRRORS[name]
    for z in (0j, complex(np.inf, 0), complex(0, np.inf), complex(np.nan, 1), 1e308 + 1e308j, 5e-324 + 0j):
        from_z(np.array([z]))
    edges = (0.0, 1.0, np.inf, -np.inf, np.nan, 1e308, 5e-324)
    if name in ("s11", "s21_series", "s21_shunt", "divider"):
        results = [to_z(np.array([edge + 0j])) for edge in edges]
        assert np.isnan(results[4]).all()
    else:
        for a in edges:
            for b in edges:
                assert to_z((np.array([a]), np.array([b]))).shape == (1,)
        assert np.isnan(to_z((np.array([np.nan]), np.array([1.0])))).all()


def test_shapes_broadcast() -> None:
    """Arrays broadcast against numbers, and the result has their common shape."""
    assert c.cpd_to_z(np.full((3, 1), 1e3), np.full(4, 1e-9), 0.01).shape == (3, 4)
    assert c.csd_to_z(1e3, np.full(4, 1e-9), 0.01).shape == (4,)
    assert c.rx_to_z(np.ones(5), 0.0).shape == (5,)


def test_resistance_and_reactance_keep_their_bits() -> None:
    """R and X go in and come out bit for bit, the sign of zero too."""
    r, x = np.array([0.1, -0.0, 5e-324]), np.array([-0.0, 1 / 3, np.nan])
    again = c.z_to_rx(c.rx_to_z(r, x))
    assert again[0].tobytes() == r.tobytes()
    assert again[1].tobytes() == x.tobytes()


@given(st.floats(-200, 20), st.floats(-179, 179))
def test_decibels_there_and_back(level_db: float, phase_deg: float) -> None:
    """Level and phase → number → level and phase."""
    level, phase = c.complex_to_db_deg(c.db_deg_to_complex(level_db, phase_deg))
    assert level == pytest.approx(level_db, abs=1e-11)
    assert phase == pytest.approx(phase_deg, abs=1e-11)


def test_docstring_examples_of_conversions() -> None:
    """The examples in the module are what it does."""
    result = doctest.testmod(c)
    assert result.failed == 0
    assert result.attempted > 0
