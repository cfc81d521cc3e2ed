"""Characteristics of fitted circuits against published parts, and their uncertainty budgets."""

from __future__ import annotations

import numpy as np
import pytest
from fitting_sweeps import one_branch, with_modes

from harness.characteristics import CHARACTERISTICS
from harness.circuits.resonator import Circuit, from_elements
from harness.fitting import model, values
from harness.fitting.values import Shifts, Wanted, with_uncertainty

# elements (R1, L1, C1, C0) and what follows, solved with 40 digits; sources of the elements: open data of seven
# transducers, github TUDA-MUST, transducers.json, MIT, doi:10.1109/OJUFFC.2026.3673287
PUBLISHED = {
    "bolt-clamped 40 kHz": (
        (21.05, 0.03515, 4.4862e-10, 4.07569e-9),
        {"fs": 40079.11761, "fp": 42227.34309, "qm": 420.5050822, "m": 46.2859025, "keff": 0.3148930955,
         "fm": 40078.08858, "fr": 40080.14773, "fa": 42226.25778, "fn": 42228.31974, "zm": 21.04018417,
         "zn": 40644.52302, "bandwidth": 95.3118506994, "q_half_power": 420.505, "r1": 21.05, "c0": 4.07569e-9},
    ),
    "air transducer 40 kHz": (
        (643.186339335, 0.0688719499245, 2.30489066295e-10, 2.401881144e-9),
        {"fs": 39946.04416, "fp": 41818.79409, "qm": 26.87566465, "m": 2.579039711, "keff": 0.2959045755,
         "fm": 39697.28227, "fr": 40306.01001, "fa": 41445.31784, "fn": 42054.98352, "zm": 568.5677911,
         "zn": 4418.578753},
    ),
}  # fmt: skip


def stacked(circuit: Circuit) -> Circuit:
    """One circuit as an array of one."""
    return Circuit(*(np.asarray(getattr(circuit, name))[None] for name in Circuit.__slots__))


@pytest.mark.parametrize("name", list(PUBLISHED))
def test_characteristics_of_published_parts(name: str) -> None:
    """Every characteristic equals the 40-digit solution."""
    elements, want = PUBLISHED[name]
    found = values.characteristics(stacked(from_elements(*elements)), Wanted())
    for key, value in want.items():
        assert float(found[key][0]) == pytest.approx(value, rel=1e-6 if key == "q_half_power" else 2e-9), key


def test_every_characteristic_has_a_name_and_a_unit() -> None:
    """Whatever comes out is in the table of characteristics, for each kind of mode with its own coupling factor."""
    circuit = stacked(one_branch())
    kinds = {"thickness": "kt", "length": "k31", "length-33": "k33", "ring": None, "stack": None, None: None}
    for kind, own in kinds.items():
        found = values.characteristics(circuit, Wanted(kind))
        assert set(found) <= set(CHARACTERISTICS)
        assert {"kp", "kt", "k31", "k33"} & set(found) == ({own} if own else set())
    assert "kp" not in values.characteristics(circuit, Wanted("radial"))
    assert "kp" in values.characteristics(circuit, Wanted("radial", 0.31))


def test_series_resistance_is_not_the_parts() -> None:
    """A series resistance changes no characteristic: it belongs to the leads."""
    plain = one_branch()
    leads = Circuit(*(getattr(plain, n) for n in Circuit.__slots__[:-1]), np.asarray(3.0))
    one, other = (values.characteristics(stacked(c), Wanted()) for c in (plain, leads))
    for key, value in one.items():
        np.testing.assert_array_equal(value, other[key])


def budgeted(covariance_scale: float = 1e-8, **shifts: np.ndarray) -> tuple[dict, dict]:
    """Values and budgets of an example under a diagonal covariance."""
    p = model.parameters_of(one_branch())
    free = (0, 1, 2, 3, 4, 5)
    return with_uncertainty(p, free, covariance_scale * np.eye(6), Wanted(), Shifts(shifts), 1e-3, 1e-6)


def test_uncertainty_of_the_parameters_is_propagated() -> None:
    """r1 follows ln G, qm ln Q, fs ln f one to one, l1 three of them in quadrature (JCGM 100, 5.1.2)."""
    found, budget = budgeted()
    assert budget["r1"]["fit"] == pytest.approx(1e-4 * found["r1"].value, rel=1e-6)
    assert budget["qm"]["fit"] == pytest.approx(1e-4 * found["qm"].value, rel=1e-6)
    assert budget["fs"]["fit"] == pytest.approx(1e-4 * found["fs"].value, rel=1e-6)
    assert budget["l1"]["fit"] == pytest.approx(np.sqrt(3) * 1e-4 * found["l1"].value, rel=1e-6)


def test_propagation_equals_drawing_at_random(rng: np.random.Generator) -> None:
    """For every characteristic the propagated u equals the spread under random draws (JCGM 101)."""
    p = model.parameters_of(one_branch())
    free = (0, 1, 2, 3, 4, 5)
    scale = np.array([1e-4, 1e-4, 1e-6, 1e-4, 1e-4, 1e-4])
    draws = np.repeat(p[None, :], 2000, axis=0)
    draws[:, :6] += scale * rng.standard_normal((2000, 6))
    drawn = values.characteristics(model.circuit_of(draws), Wanted("thickness"))
    found, budget = with_uncertainty(p, free, np.diag(scale**2), Wanted("thickness"), Shifts({}), 0.0, 0.0)
    for key, column in drawn.items():
        if found[key].value is not None:
            assert budget[key]["fit"] == pytest.approx(float(column.std()), rel=0.07), key


def test_accuracy_of_the_instrument_enters_by_dimension() -> None:
    """0.1 % of |Z| moves R1 by 0.1 % and C0 by 0.1 %, leaves Q and fs; 1e-6 of frequency moves fs by that."""
    found, budget = budgeted()
    assert budget["r1"]["instrument"] == pytest.approx(1e-3 * found["r1"].value)
    assert budget["c0"]["instrument"] == pytest.approx(1e-3 * found["c0"].value)
    assert "instrument" not in budget["qm"]
    assert "instrument" not in budget["fs"]
    assert budget["fs"]["frequency"] == pytest.approx(1e-6 * found["fs"].value)


def test_shifts_have_their_names_in_the_budget() -> None:
    """A refit under a moved correction counts in full under its name; the model's own as a rectangle under "model"."""
    p = model.parameters_of(one_branch())
    moved = p.copy()
    moved[4] += 1e-3
    found, budget = budgeted(**{"correction rs": moved, "span": moved})
    assert budget["r1"]["correction rs"] == pytest.approx(1e-3 * found["r1"].value, rel=1e-3)
    assert budget["r1"]["model"] == pytest.approx(1e-3 / np.sqrt(3) * found["r1"].value, rel=1e-3)
    parts = budget["r1"].values()
    assert found["r1"].u == pytest.approx(np.sqrt(sum(part**2 for part in parts)))


def test_shift_of_a_larger_circuit_is_welcome() -> None:
    """A refit with one branch more than the fit has counts like any other."""
    larger = model.parameters_of(with_modes(one_branch(), (4e6, 200.0, 0.01)))
    _, budget = budgeted(background=larger)
    assert budget["c0"]["model"] > 0


def test_losses_leave_the_definition_of_fp_open() -> None:
    """fp and keff carry what "losses removed" leaves open; fs and fn, which need no such thing, do not."""
    _, budget = budgeted(1e-30)
    assert budget["fp"]["model"] == pytest.approx(1.8e6 * (200.0**-2 + 0.015**2) / (4 * np.sqrt(3)), rel=0.1)
    assert budget["keff"]["model"] > 0
    assert "model" not in budget["fs"]
    assert "model" not in budget["fn"]


def test_what_a_part_does_not_have_is_absent_and_said() -> None:
    """At low M there is no fr and no fa: None, with a sentence for each."""
    p = model.parameters_of(from_elements(1200.0, 0.0688719499245, 2.30489066295e-10, 2.401881144e-9))
    found, _ = with_uncertainty(p, (0, 1, 2, 3, 4), 1e-8 * np.eye(5), Wanted(), Shifts({}), 0.0, 0.0)
    assert found["fr"].value is None
    assert found["fa"].value is None
    told = {caveat.characteristic: caveat.code for caveat in values.absent(found)}
    assert told == {"fr": "absent", "fa": "absent"}


def test_what_the_sweep_did_not_reach_is_not_told_and_said() -> None:
    """With C0 open by half its size, C0 and what hangs on it are None, and the reason is not that the part lacks it."""
    p = model.parameters_of(one_branch())
    covariance = np.diag([0.25, 1e-8, 1e-12, 1e-8, 1e-8])
    found, _ = with_uncertainty(p, (0, 1, 2, 3, 4), covariance, Wanted("thickness"), Shifts({}), 0.0, 0.0)
    for key in ("c0", "fp", "keff", "kt", "tan_delta", "m", "fn", "zn", "fa"):
        assert found[key].value is None, key
    for key in ("fs", "r1", "qm", "l1", "c1", "bandwidth"):
        assert found[key].value is not None, key
    assert {caveat.code for caveat in values.absent(found)} == {"not-reached"}
