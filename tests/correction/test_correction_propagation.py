"""Propagation of uncertainty against JCGM 100 H.2, Monte Carlo, and itself backwards."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harness.correction.propagation import (
    correlation,
    inverse_u,
    mean_and_covariance,
    polar_to_rectangular_u,
    propagate,
    propagate_analytic,
    rectangular_to_polar_u,
    standard_uncertainties,
)

# JCGM 100:2008, table H.2: V in volt, I in ampere, phase in radian.
H2 = np.array(
    [
        [5.007, 19.663e-3, 1.0456],
        [4.994, 19.639e-3, 1.0438],
        [5.005, 19.640e-3, 1.0468],
        [4.990, 19.685e-3, 1.0428],
        [4.999, 19.678e-3, 1.0433],
    ]
)


def _rxz(v: np.ndarray, i: np.ndarray, phase: np.ndarray) -> np.ndarray:
    return np.stack([v / i * np.cos(phase), v / i * np.sin(phase), v / i], axis=-1)


def _jacobian(v: float, i: float, phase: float) -> np.ndarray:
    z, c, s = v / i, np.cos(phase), np.sin(phase)
    return np.array([[c / i, -z * c / i, -z * s], [s / i, -z * s / i, z * c], [1 / i, -z / i, 0.0]])


def test_h2_inputs() -> None:
    """Means, uncertainties and correlations of the readings are those of JCGM 100 table H.2."""
    mean, covariance = mean_and_covariance(H2)
    assert mean == pytest.approx([4.9990, 0.0196610, 1.04446], rel=1e-12)
    # printed 0.0032, 0.0095e-3, 0.00075 and −0.36, 0.86, −0.65; more digits recomputed from the readings
    assert standard_uncertainties(covariance) == pytest.approx([0.00320936, 9.471008e-6, 0.000752064], rel=1e-6)
    r = correlation(covariance)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx([-0.355311, 0.857624, -0.645111], abs=1e-6)


def test_h2_approach_1() -> None:
    """R, X and |Z| by propagation: JCGM 100 table H.3 and H.4 (printed 127.732/.071, 219.847/.295, 254.260/.236).

    The printed u(X) = 0.295 is 0.2956 unrounded.
    """
    mean, covariance = mean_and_covariance(H2)
    result = propagate(_jacobian(*mean), covariance)
    assert _rxz(*mean) == pytest.approx([127.732170, 219.846512, 254.259702], abs=1e-6)
    assert standard_uncertainties(result) == pytest.approx([0.0710714, 0.2955817, 0.2363361], abs=1e-7)
    r = correlation(result)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx([-0.588430, -0.485259, 0.992512], abs=1e-6)


def test_h2_approach_2() -> None:
    """The same from each set's own R, X and |Z|: JCGM 100 table H.4."""
    mean, covariance = mean_and_covariance(_rxz(*H2.T))
    assert mean == pytest.approx([127.731630, 219.846895, 254.260050], abs=1e-6)
    assert standard_uncertainties(covariance) == pytest.approx([0.0712735, 0.2954891, 0.2362475], abs=1e-7)
    r = correlation(covariance)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx([-0.588277, -0.485065, 0.992508], abs=1e-6)


def test_h2_without_correlation_is_wrong() -> None:
    """Ignoring correlation gives .195, .201, .204 (JCGM 100 H.2.4, printed figures from memory): not the same."""
    mean, covariance = mean_and_covariance(H2)
    result = propagate(_jacobian(*mean), np.diag(np.diag(covariance)))
    assert standard_uncertainties(result) == pytest.approx([0.194544, 0.200909, 0.204076], abs=1e-6)


def test_h2_by_polar_to_rectangular() -> None:
    """|Z| and phase with their covariance, turned into R and X, give the R and X of approach 1."""
    mean, covariance = mean_and_covariance(H2)
    v, i, phase = mean
    polar = propagate(np.array([[1 / i, -v / i**2, 0.0], [0.0, 0.0, 1.0]]), covariance)
    rectangular = polar_to_rectangular_u(v / i, phase, polar)
    assert standard_uncertainties(rectangular) == pytest.approx([0.0710714, 0.2955817], abs=1e-7)
    assert correlation(rectangular)[0, 1] == pytest.approx(-0.588430, abs=1e-6)


@given(st.floats(0.1, 1e4), st.floats(-3, 3), st.floats(1e-4, 0.1), st.floats(1e-4, 0.1), st.floats(-0.95, 0.95))
def test_polar_and_rectangular_are_mirrors(size: float, turn: float, u: float, u_turn: float, r: float) -> None:
    """Covariance to rectangular and back is the same covariance."""
    u = u * size
    covariance = np.array([[u * u, r * u * u_turn], [r * u * u_turn, u_turn * u_turn]])
    number = size * np.exp(1j * turn)
    back = rectangular_to_polar_u(number, polar_to_rectangular_u(size, turn, covariance))
    scale = np.outer([u, u_turn], [u, u_turn])
    np.testing.assert_allclose(
        back / scale, covariance / scale, atol=1e-9 * max(u / u_turn / size, u_turn * size / u) ** 2
    )


def test_inverse_agrees_with_monte_carlo(rng: np.random.Generator) -> None:
    """The covariance of 1/Z from propagation is that of a hundred thousand drawn ones."""
    z = 30 - 40j
    covariance = np.array([[0.04, 0.01], [0.01, 0.09]])
    drawn = rng.multivariate_normal([z.real, z.imag], covariance, size=100_000)
    y = 1 / (drawn[:, 0] + 1j * drawn[:, 1])
    expected = np.cov(y.real, y.imag)
    np.testing.assert_allclose(inverse_u(z, covariance), expected, rtol=0.03, atol=1e-3 * expected.max())


def test_analytic_is_the_two_by_two_jacobian() -> None:
    """A complex derivative carries a covariance as its Cauchy–Riemann matrix does, for stacks too."""
    derivative = np.array([2.0, 1j, 1 - 1j])
    covariance = np.broadcast_to(np.array([[4.0, 0.0], [0.0, 1.0]]), (3, 2, 2))
    result = propagate_analytic(derivative, covariance)
    np.testing.assert_allclose(result[0], [[16, 0], [0, 4]])
    np.testing.assert_allclose(result[1], [[1, 0], [0, 4]])
    np.testing.assert_allclose(result[2], [[5, -3], [-3, 5]])


def test_inverse_twice_is_nothing() -> None:
    """Impedance to admittance and back keeps the covariance."""
    z, covariance = 3 - 7j, np.array([[0.01, -0.004], [-0.004, 0.02]])
    np.testing.assert_allclose(inverse_u(1 / z, inverse_u(z, covariance)), covariance, rtol=1e-12)


@pytest.mark.parametrize("readings", [np.ones((1, 3)), np.ones(3)])
def test_one_reading_has_no_covariance(readings: np.ndarray) -> None:
    """One reading, or readings not in rows, are refused."""
    with pytest.raises(ValueError, match="two or more"):
        mean_and_covariance(readings)


def test_correlation_beside_zero_is_nan() -> None:
    """A quantity without uncertainty has no correlation, and says so without a warning."""
    assert np.isnan(correlation(np.array([[1.0, 0.0], [0.0, 0.0]]))[0, 1])
