"""Global risks against published numbers.

Sources as the references of this project quote them: the ball-bearing and resistor examples of JCGM 106:2012 (inputs
seen quoted in public code, results recomputed), Deaver (NCSL 1993/94), NCSLI RP-19 draft table (both seen quoted and
recomputed).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import gamma, ndtr, ndtri

from harness.judging.risk import conformance_probability, global_risk, global_risk_normal


def bearings(acceptance: float):
    """JCGM 106 ball bearings: prior gamma(4, 0.25 µm), T_U 2 µm, u 0.25 µm."""

    def density(eta: np.ndarray) -> np.ndarray:
        return eta**3 * np.exp(-eta / 0.25) / (gamma(4) * 0.25**4)

    return global_risk(density, (0.0, 15.0), 0.25, (0.0, 2.0), (-math.inf, acceptance))


@pytest.mark.parametrize(("acceptance", "consumer", "producer", "digits"), [
    (2.0, 0.008019, 0.017445, 1e-6), (1.67183, 0.001, 0.075494, 1e-6), (1.70, 0.001256, 0.06821, 5e-6),
])  # fmt: skip
def test_ball_bearings(acceptance: float, consumer: float, producer: float, digits: float) -> None:
    """JCGM 106:2012, 9.5.4: a gamma process with one tolerance limit, at three acceptance limits."""
    risks = bearings(acceptance)
    assert float(risks.consumer) == pytest.approx(consumer, abs=digits)
    assert float(risks.producer) == pytest.approx(producer, abs=digits)


@pytest.mark.parametrize(("acceptance", "consumer", "producer"), [
    ((1499.82, 1500.18), 0.009878292, 0.069026510), ((1499.8, 1500.2), 0.018942207, 0.037207800),
])  # fmt: skip
def test_resistors(acceptance: tuple[float, float], consumer: float, producer: float) -> None:
    """JCGM 106 resistors: process 1500 Ω, sd 0.12 Ω, u 0.04 Ω, tolerance ± 0.2 Ω, with and without guard band."""
    risks = global_risk_normal(1500.0, 0.12, 0.04, (1499.8, 1500.2), acceptance)
    assert float(risks.consumer) == pytest.approx(consumer, abs=1e-9)
    assert float(risks.producer) == pytest.approx(producer, abs=1e-9)


def test_resistors_conform_as_printed() -> None:
    """The same example: 90.4419 % of the process conforms; seen here as the value's own conformance probability."""
    assert float(conformance_probability(1500.0, 0.12, (1499.8, 1500.2))) == pytest.approx(0.904419, abs=1e-6)


def test_deaver_all_in_one_call() -> None:
    """Deaver (NCSL 1993/94): PFA and PFR for four limits, ratios and guard bands, as one vectorised call."""
    limit, ratio, guard, accept, reject = np.array([
        [2.0, 4.0, 1.0, 0.008006085, 0.014850884],
        [2.5, 4.0, 1.0, 0.002445349, 0.005319389],
        [2.5, 1.0, 1.0, 0.004723567, 0.069404108],
        [2.0, 2.0, 0.91, 0.008051609, 0.066106455],
    ]).T  # fmt: skip
    risks = global_risk_normal(0.0, 1.0, 1 / ratio, (-limit, limit), (-limit * guard, limit * guard))
    assert risks.consumer == pytest.approx(accept, abs=1e-9)
    # the last is 0.06610645216 by adaptive quadrature too: the quoted ninth digit is off
    assert risks.producer == pytest.approx(reject, abs=3e-9)


@pytest.mark.parametrize(("itp", "unconditional", "conditional"), [
    (0.60, 4.83860326, 8.26008199), (0.70, 3.92234109, 5.72322042), (0.80, 2.85583037, 3.63227145),
    (0.90, 1.59995312, 1.79880430), (0.95, 0.87100925, 0.92389664), (0.99, 0.19991684, 0.20243866),
])  # fmt: skip
def test_rp19_table(itp: float, unconditional: float, conditional: float) -> None:
    """NCSLI RP-19 draft table, test error a quarter of the process: false accepts of all, and of the accepted, in %."""
    limit = float(ndtri((1 + itp) / 2))
    risks = global_risk_normal(0.0, 1.0, 0.25, (-limit, limit), (-limit, limit))
    accepted = 2 * float(ndtr(limit / math.hypot(1, 0.25))) - 1
    assert 100 * float(risks.consumer) == pytest.approx(unconditional, abs=1e-6)
    assert 100 * float(risks.consumer) / accepted == pytest.approx(conditional, abs=1e-6)


def test_process_alone() -> None:
    """N(10, 0.4) against [9, 11]: 1.242 % outside (seen quoted); a perfect meter accepts none of them."""
    assert 1 - float(conformance_probability(10.0, 0.4, (9.0, 11.0))) == pytest.approx(0.01242, abs=1e-5)
    risks = global_risk_normal(10.0, 0.4, 0.0, (9.0, 11.0), (-math.inf, math.inf))
    assert float(risks.consumer) == pytest.approx(0.0124193, abs=1e-7)
    perfect = global_risk_normal(10.0, 0.4, 0.0, (9.0, 11.0), (9.0, 11.0))
    assert (float(perfect.consumer), float(perfect.producer)) == (0.0, 0.0)


def test_risks_and_truths_add_up(rng: np.random.Generator) -> None:
    """Consumer's risk + conforming − producer's risk is what is accepted, over many random processes at once."""
    n = 200
    mean, sd, u = rng.normal(0, 1, n), rng.uniform(0.1, 2, n), 10 ** rng.uniform(-3, 0.5, n)
    low, high = -rng.uniform(0.5, 2, n), rng.uniform(0.5, 2, n)
    risks = global_risk_normal(mean, sd, u, (low, high), (low + 0.1, high - 0.1))
    both = np.hypot(sd, u)
    accepted = ndtr((high - 0.1 - mean) / both) - ndtr((low + 0.1 - mean) / both)
    conforming = conformance_probability(mean, sd, (low, high))
    assert risks.consumer + conforming - risks.producer == pytest.approx(accepted, abs=1e-10)


def test_risks_agree_with_a_simulation(rng: np.random.Generator) -> None:
    """A million parts measured with error show the computed shares."""
    true = rng.normal(0.3, 1.0, 1_000_000)
    read = true + rng.normal(0.0, 0.3, true.size)
    conforms, accepted = np.abs(true) <= 1.5, np.abs(read) <= 1.3
    risks = global_risk_normal(0.3, 1.0, 0.3, (-1.5, 1.5), (-1.3, 1.3))
    assert float(np.mean(~conforms & accepted)) == pytest.approx(float(risks.consumer), abs=6e-4)
    assert float(np.mean(conforms & ~accepted)) == pytest.approx(float(risks.producer), abs=1.5e-3)


def test_one_sided_limits() -> None:
    """Infinite limits are sides without one."""
    risks = global_risk_normal(0.0, 1.0, 0.25, (-math.inf, 2.0), (-math.inf, 2.0))
    both = global_risk_normal(0.0, 1.0, 0.25, (-2.0, 2.0), (-2.0, 2.0))
    assert 2 * float(risks.consumer) == pytest.approx(float(both.consumer), abs=1e-12)


def test_conformance_keeps_its_digits_far_out() -> None:
    """Far beyond a limit the probability is small and positive, not zero or negative; without error it is certainty."""
    tiny = conformance_probability([12.0, -12.0], 1.0, (-1.0, 1.0))
    assert tiny == pytest.approx(float(ndtr(-11.0)), rel=1e-4)
    assert list(conformance_probability([1.0, 1.1], 0.0, (-1.0, 1.0))) == [1.0, 0.0]
