"""Every defect is there to be seen, and no part gives out energy."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.physics.defects import DEFECTS, empty_fixture, make_part
from sim_instruments.physics.elements import Stray, Wire
from sim_instruments.physics.families import FAMILIES
from sim_instruments.physics.materials import State
from sim_instruments.physics.modes import modes
from sim_instruments.physics.parts import Part, nominal_part
from sim_instruments.physics.plate import Plate
from sim_instruments.physics.truth import Values, characteristics

MANY = 12


def drawn(family: str, defect: str, rng: np.random.Generator) -> list[Values]:
    return [characteristics(make_part(family, "x", rng, defect)) for _ in range(MANY)]


def column(values: list[Values], key: str) -> np.ndarray:
    found = [v[key] for v in values]
    assert None not in found, key
    return np.array(found, dtype=float)


@pytest.fixture(params=list(FAMILIES))
def family(request: pytest.FixtureRequest) -> str:
    return str(request.param)


def test_no_part_gives_out_energy(family: str, rng: np.random.Generator) -> None:
    """Re Y ≥ 0 from 1 kHz to 5 MHz, cold and hot, for sound parts and every defect."""
    f = np.geomspace(1e3, 5e6, 1500)
    low, high = FAMILIES[family].window_hz
    f = np.union1d(f, np.linspace(low, high, 500))
    for defect in ("sound", *DEFECTS):
        part = make_part(family, "x", rng, defect)
        for temperature in (5.0, 45.0):
            y = part.admittance(f, State(temperature))
            assert np.all(np.isfinite(y))
            assert np.all(y.real > 0), defect


def test_sound_parts_would_pass(family: str, rng: np.random.Generator) -> None:
    """fs within 1 % of nominal, Q within 25 %, keff within 6 %, R1 within 30 %, C0 within 10 %; nothing unwanted."""
    found, nominal = drawn(family, "sound", rng), characteristics(nominal_part(family))
    for key, tolerance in (("fs", 0.01), ("qm", 0.25), ("keff", 0.06), ("r1", 0.30), ("c0", 0.10)):
        assert np.abs(column(found, key) / nominal[key] - 1).max() < tolerance, key
    assert column(found, "unwanted_g").max() == 0
    assert column(found, "fs").std() / nominal["fs"] > 5e-4


def test_chip_splits_the_mode(family: str, rng: np.random.Generator) -> None:
    """A second mode 0.3 to 0.6 as strong within 3 % above fs, Q below 0.7 of nominal."""
    found, nominal = drawn(family, "chip", rng), characteristics(nominal_part(family))
    assert np.all((column(found, "unwanted_g") > 0.3) & (column(found, "unwanted_g") < 0.6))
    apart = column(found, "unwanted_f") / column(found, "fs") - 1
    assert np.all((apart > 0) & (apart < 0.03))
    assert column(found, "qm").max() < 0.7 * nominal["qm"]


def test_crack_shows_a_mode_apart(family: str, rng: np.random.Generator) -> None:
    """A second mode at least 0.35 as strong, 2.5 to 6 % above fs and over 1.5 bandwidths away, Q below 0.55."""
    found, nominal = drawn(family, "crack", rng), characteristics(nominal_part(family))
    assert column(found, "unwanted_g").min() > 0.35
    apart = column(found, "unwanted_f") - column(found, "fs")
    assert np.all(apart > 1.5 * column(found, "bandwidth"))
    assert np.all((apart / column(found, "fs") > 0.025) & (apart / column(found, "fs") < 0.06))
    assert column(found, "qm").max() < 0.55 * nominal["qm"]


def test_weak_poling_lowers_coupling(family: str, rng: np.random.Generator) -> None:
    """keff below 0.75 of nominal, R1 at least half again as high, Q as before."""
    found, nominal = drawn(family, "weak-poling", rng), characteristics(nominal_part(family))
    assert column(found, "keff").max() < 0.75 * nominal["keff"]
    assert column(found, "r1").min() > 1.5 * nominal["r1"]
    assert column(found, "qm").min() > 0.75 * nominal["qm"]


def test_poor_bond_lowers_q_alone(family: str, rng: np.random.Generator) -> None:
    """Q below 0.45 of nominal, R1 more than doubled, fs and keff as before."""
    found, nominal = drawn(family, "poor-bond", rng), characteristics(nominal_part(family))
    assert column(found, "qm").max() < 0.45 * nominal["qm"]
    assert column(found, "r1").min() > 2 * nominal["r1"]
    assert np.abs(column(found, "fs") / nominal["fs"] - 1).max() < 0.01
    assert np.abs(column(found, "keff") / nominal["keff"] - 1).max() < 0.06


def test_wrong_thickness_moves_fs(family: str, rng: np.random.Generator) -> None:
    """fs 1.2 to 7 % off, both ways seen among many, and still inside the search window."""
    found, nominal = drawn(family, "wrong-thickness", rng), characteristics(nominal_part(family))
    off = column(found, "fs") / nominal["fs"] - 1
    assert np.all((np.abs(off) > 0.012) & (np.abs(off) < 0.075))
    assert off.min() < 0 < off.max()


@pytest.mark.parametrize("defect", ["open-lead", "short", "no-part"])
def test_parts_that_do_not_resonate_have_no_characteristics(family: str, defect: str, rng: np.random.Generator) -> None:
    """Open, short and empty fixture: every characteristic is None."""
    values = characteristics(make_part(family, "x", rng, defect))
    assert set(values.values()) == {None}


def test_open_short_and_empty_look_as_they_should(family: str, rng: np.random.Generator) -> None:
    """A few picofarad; less than an ohm; less than a picofarad."""
    f = np.array([1e3, FAMILIES[family].nominal_hz])
    c_open = (1 / make_part(family, "x", rng, "open-lead").impedance(f)).imag / (2 * np.pi * f)
    assert np.all((c_open > 1e-12) & (c_open < 5e-12))
    assert np.all(np.abs(make_part(family, "x", rng, "short").impedance(f)) < 1.0)
    c_empty = (1 / empty_fixture(family).impedance(f)).imag / (2 * np.pi * f)
    assert np.all(c_empty < 1e-12)


def test_wrong_part_would_not_pass(family: str, rng: np.random.Generator) -> None:
    """Another family's part has no mode in the window, or one more than 5 % from the nominal frequency."""
    for values in drawn(family, "wrong-part", rng):
        assert values["c_at"] is not None
        assert values["fs"] is None or abs(values["fs"] / FAMILIES[family].nominal_hz - 1) > 0.05


def test_pieces_of_a_divided_part_keep_their_own_modes() -> None:
    """Two pieces of one plate: modes at f and f/size, conductances as the shares over the sizes."""
    whole = FAMILIES["MD-1650"].nominal()
    assert isinstance(whole, Plate)
    part = Part("x", "MD-1650", "crack", (whole.shared(0.6), whole.shared(0.4).scaled(0.96)))
    strong, weak = modes(part, State())
    assert weak.f_hz / strong.f_hz == pytest.approx(1 / 0.96, rel=1e-9)
    # G = ωC1Q, with C1 ∝ area/size and ω ∝ 1/size
    assert weak.g_s / strong.g_s == pytest.approx(0.4 / 0.6 / 0.96**2, rel=1e-9)


def test_elements_that_do_not_resonate_keep_out_of_changes() -> None:
    """Stray and wire ignore size, loss and poling; a share of a stray is a share of its capacitance."""
    stray, wire = Stray(2e-12), Wire(0.3, 5e-9)
    assert stray.scaled(2).lossier(2).repoled(2) == stray
    assert wire.scaled(2).lossier(2).repoled(2).shared(0.5) == wire
    assert stray.shared(0.5).c_f == 1e-12
    assert not stray.resonates
    assert not wire.resonates


def test_frequency_zero_is_refused() -> None:
    """Impedance at 0 Hz is not defined."""
    with pytest.raises(ValueError, match="above zero"):
        nominal_part("MD-1650").impedance(np.array([0.0, 1e3]))


def test_temperature_may_change_over_a_sweep(family: str) -> None:
    """An array of temperatures gives, point by point, what each temperature alone gives."""
    part = nominal_part(family)
    f = FAMILIES[family].nominal_hz * np.array([0.99, 1.0, 1.01])
    t = np.array([23.0, 25.0, 31.0])
    each = [part.impedance(f[k : k + 1], float(t[k]))[0] for k in range(3)]
    assert np.allclose(part.impedance(f, t), each, rtol=1e-12)
