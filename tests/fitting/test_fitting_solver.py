"""The solver against NIST's Statistical Reference Datasets for nonlinear regression (public domain).

Data and certified values: lmfit-py NIST_STRD/*.dat at fe389bbb, which are NIST's own files
(https://www.itl.nist.gov/div898/strd/).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from harness.fitting import solver

Array = NDArray[np.complex128]


@dataclass(frozen=True)
class Reference:
    """One data set: y, x, the model, certified values with their standard deviations, residual sum, and starts."""

    x: list[float]
    y: list[float]
    model: Callable[[Array, NDArray[np.float64]], Array]
    b: list[float]
    sd: list[float]
    rss: float
    starts: list[list[float]]


def gauss(b: Array, x: NDArray[np.float64]) -> Array:
    peak = b[2] * np.exp(-((x - b[3]) ** 2) / b[4] ** 2) + b[5] * np.exp(-((x - b[6]) ** 2) / b[7] ** 2)
    return b[0] * np.exp(-b[1] * x) + peak


GAUSS1 = [float(y) for y in (Path(__file__).parent / "strd_gauss1.txt").read_text().replace("\n", "").split(",")]

REFERENCES = {
    "Misra1a": Reference(
        [77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0],
        [10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.4, 75.47, 81.78],
        lambda b, x: b[0] * (1 - np.exp(-b[1] * x)),
        [238.94212918, 5.5015643181e-4],
        [2.7070075241, 7.2668688436e-6],
        0.12455138894,
        [[500, 1e-4], [250, 5e-4]],
    ),
    "MGH09": Reference(
        [4.0, 2.0, 1.0, 0.5, 0.25, 0.167, 0.125, 0.1, 0.0833, 0.0714, 0.0625],
        [0.1957, 0.1947, 0.1735, 0.16, 0.0844, 0.0627, 0.0456, 0.0342, 0.0323, 0.0235, 0.0246],
        lambda b, x: b[0] * (x**2 + b[1] * x) / (x**2 + b[2] * x + b[3]),
        [0.19280693458, 0.19128232873, 0.12305650693, 0.13606233068],
        [0.011435312227, 0.19633220911, 0.080842031232, 0.090025542308],
        3.0750560385e-4,
        [[0.25, 0.39, 0.415, 0.39]],
    ),
    "Eckerle4": Reference(
        [400.0, 405.0, 410.0, 415.0, 420.0, 425.0, 430.0, 435.0, 436.5, 438.0, 439.5, 441.0, 442.5, 444.0, 445.5, 447.0,
         448.5, 450.0, 451.5, 453.0, 454.5, 456.0, 457.5, 459.0, 460.5, 462.0, 463.5, 465.0, 470.0, 475.0, 480.0, 485.0,
         490.0, 495.0, 500.0],
        [0.0001575, 0.0001699, 0.000235, 0.0003102, 0.0004917, 0.000871, 0.0017418, 0.00464, 0.0065895, 0.0097302,
         0.0149002, 0.023731, 0.0401683, 0.0712559, 0.1264458, 0.2073413, 0.2902366, 0.3445623, 0.3698049, 0.3668534,
         0.3106727, 0.2078154, 0.1164354, 0.0616764, 0.03372, 0.0194023, 0.0117831, 0.0074357, 0.0022732, 0.00088,
         0.0004579, 0.0002345, 0.0001586, 0.0001143, 7.1e-05],
        lambda b, x: b[0] / b[1] * np.exp(-0.5 * ((x - b[2]) / b[1]) ** 2),
        [1.5543827178, 4.0888321754, 451.54121844],
        [0.015408051163, 0.046803020753, 0.046800518816],
        1.4635887487e-3,
        [[1.5, 5, 450]],
    ),
    "Roszman1": Reference(
        [-4868.68, -4868.09, -4867.41, -3375.19, -3373.14, -3372.03, -2473.74, -2472.35, -2469.45, -1894.65, -1893.4,
         -1497.24, -1495.85, -1493.41, -1208.68, -1206.18, -1206.04, -997.92, -996.61, -996.31, -834.94, -834.66,
         -710.03, -530.16, -464.17],
        [0.252429, 0.252141, 0.251809, 0.297989, 0.296257, 0.295319, 0.339603, 0.337731, 0.33382, 0.38951, 0.386998,
         0.438864, 0.434887, 0.427893, 0.471568, 0.461699, 0.461144, 0.513532, 0.506641, 0.505062, 0.535648, 0.533726,
         0.568064, 0.612886, 0.624169],
        lambda b, x: b[0] - b[1] * x - np.arctan(b[2] / (x - b[3])) / np.pi,
        [0.20196866396, -6.1953516256e-6, 1204.4556708, -181.34269537],
        [0.019172666023, 3.2058931691e-6, 74.050983057, 49.573513849],
        4.9484847331e-4,
        [[0.1, -1e-5, 1000, -100], [0.2, -5e-6, 1200, -150]],
    ),
    "Gauss1": Reference(
        list(range(1, 251)),
        GAUSS1,
        gauss,
        [98.778210871, 0.010497276517, 100.48990633, 67.481111276, 23.129773360, 71.994503004, 178.99805021,
         18.389389025],
        [0.57527312730, 1.1406289017e-4, 0.58831775752, 0.10460593412, 0.17439951146, 0.62622793913, 0.12436988217,
         0.20134312832],
        1315.8222432,
        [[97, 0.009, 100, 65, 20, 70, 178, 16.5], [94, 0.0105, 99, 63, 25, 71, 180, 20]],
    ),
}  # fmt: skip


def evaluator(reference: Reference, signs: NDArray[np.float64]) -> solver.Evaluate:
    """Misfit and complex-step slopes by the logarithms of the parameters, as the solver is used here."""
    x, y = np.array(reference.x, dtype=float), np.array(reference.y)

    def evaluate(p: NDArray[np.float64], rows: solver.Index):
        value = np.stack([(reference.model(signs * np.exp(row.astype(complex)), x)).real - y for row in p])
        slopes = []
        for k in range(p.shape[1]):
            moved = p.astype(complex)
            moved[:, k] += 1e-30j
            slopes.append(np.stack([reference.model(signs * np.exp(row), x).imag / 1e-30 for row in moved]))
        return value, slopes, np.ones_like(value)

    return evaluate


@pytest.mark.parametrize("name", list(REFERENCES))
def test_certified_values_of_nist_sets(name: str) -> None:
    """From every start given: parameters within 1e-4 sd, their sd to 4 digits, the residual sum to 9."""
    reference = REFERENCES[name]
    signs = np.sign(reference.b)
    begin = np.log(np.abs(np.array(reference.starts, dtype=float)))
    n = len(reference.b)
    with np.errstate(over="ignore"):
        found = solver.solve(evaluator(reference, signs), begin, tuple(range(n)), iterations=400)
    assert found.converged.all()
    b = signs * np.exp(found.parameters)
    degrees = len(reference.x) - n
    covariance = solver.covariance(found.normal) * (found.cost / degrees)[:, None, None]
    sd = np.abs(b) * np.sqrt(np.einsum("bii->bi", covariance))
    for row in range(len(begin)):
        np.testing.assert_array_less(np.abs(b[row] - reference.b), 1e-4 * np.array(reference.sd))
        np.testing.assert_allclose(sd[row], reference.sd, rtol=1e-4)
        assert found.cost[row] == pytest.approx(reference.rss, rel=1e-8)


def test_rows_do_not_depend_on_their_neighbours() -> None:
    """Two starts solved together give the bits each gives alone."""
    reference = REFERENCES["Gauss1"]
    begin = np.log(np.array(reference.starts, dtype=float))
    together = solver.solve(evaluator(reference, np.ones(8)), begin, tuple(range(8)))
    for row in range(2):
        alone = solver.solve(evaluator(reference, np.ones(8)), begin[row : row + 1], tuple(range(8)))
        np.testing.assert_array_equal(together.parameters[row], alone.parameters[0])
        np.testing.assert_array_equal(together.normal[row], alone.normal[0])


def test_nothing_to_solve() -> None:
    """No rows give no rows."""
    found = solver.solve(evaluator(REFERENCES["Misra1a"], np.ones(2)), np.empty((0, 2)), (0, 1))
    assert found.parameters.shape == (0, 2)
    assert found.normal.shape == (0, 2, 2)


def test_singular_normal_matrix_has_no_covariance() -> None:
    """Two parameters that do the same thing leave a covariance of NaN, not of rounding noise."""
    normal = np.array([[[4.0, 2.0], [2.0, 1.0]], [[4.0, 0.0], [0.0, 1.0]], [[np.nan, 0.0], [0.0, 1.0]]])
    got = solver.covariance(normal)
    assert np.isnan(got[0]).all()
    np.testing.assert_allclose(got[1], [[0.25, 0.0], [0.0, 1.0]])
    assert np.isnan(got[2]).all()
