"""Where to measure: both strategies, every family of part, and parts that are none."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from conftest import ROOT

from harness.fitting.single import Choice, fit_one
from harness.judging import parse_limits
from harness.planning import locate, resolve
from harness.records import FitStatus, LimitSet
from sim_instruments.physics import lots, noise

FILES = {
    "MD-1650": "limits/mist-discs/MD-1650.toml",
    "MR-113": "limits/mesh-rings/MR-113.toml",
    "BD-40": "limits/bolt-clamped/BD-40.toml",
}
NOISE = 0.0015


def limits_of(family: str, strategy: str = "two-pass", points: int = 401) -> LimitSet:
    """The family's own limit file with another strategy and number of points."""
    path = Path(ROOT / FILES[family])
    limits = parse_limits(path.read_text(encoding="utf-8"), str(path))
    return replace(limits, measurement=replace(limits.measurement, strategy=strategy, points=points))


def part_of(family: str, defect: str = "sound") -> lots.Part:
    """One simulated part."""
    return lots.made([lots.Order("X-0001", family, defect)], 3)[0]


@pytest.mark.parametrize("family", list(FILES))
@pytest.mark.parametrize(("strategy", "share"), [("two-pass", 0.5), ("uniform", 1.0)])
def test_locating_pass_walks_the_whole_window(family: str, strategy: str, share: float) -> None:
    """The first pass goes evenly from end to end of the search window, with half the points or all of them."""
    limits = limits_of(family, strategy)
    plan = locate(limits)
    low, high = limits.mode.search_hz
    assert plan.f_hz[0] == low
    assert plan.f_hz[-1] == high
    assert plan.f_hz.size == int(401 * share)
    np.testing.assert_allclose(np.diff(plan.f_hz), (high - low) / (plan.f_hz.size - 1), rtol=1e-9)
    assert plan.drive_v == limits.measurement.drive_v
    assert plan.purpose == "locate"


@pytest.mark.parametrize("family", list(FILES))
@pytest.mark.parametrize("defect", ["sound", "poor-bond", "wrong-thickness", "weak-poling", "crack"])
def test_resolving_pass_lies_across_the_resonance(family: str, defect: str, rng: np.random.Generator) -> None:
    """The second pass stays inside the window, within the budget, and covers fs and its bandwidth."""
    limits, part = limits_of(family), part_of(family, defect)
    first = locate(limits)
    z = noise.noisy(part.impedance(first.f_hz), NOISE, rng)
    plan = resolve(first.f_hz, z, limits)
    assert plan is not None
    low, high = limits.mode.search_hz
    assert low <= plan.f_hz[0]
    assert plan.f_hz[-1] <= high
    assert first.f_hz.size + plan.f_hz.size <= limits.measurement.points
    assert (np.diff(plan.f_hz) > 0).all()
    fit = fit_one(*both(first.f_hz, z, plan.f_hz, part, rng), Choice(limits.mode.search_hz))
    assert fit.status is FitStatus.OK
    fs, q = np.exp(fit.parameters[2]), np.exp(fit.parameters[3])
    assert plan.f_hz[0] < fs * (1 - 1 / q)
    assert plan.f_hz[-1] > fs * (1 + 1 / q)


def both(
    f_first: np.ndarray, z_first: np.ndarray, f_second: np.ndarray, part: lots.Part, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """The sweep of both passes."""
    z_second = noise.noisy(part.impedance(f_second), NOISE, rng)
    return np.concatenate([f_first, f_second]), np.concatenate([z_first, z_second])


@pytest.mark.parametrize("family", list(FILES))
def test_second_pass_is_worth_its_points(family: str, rng: np.random.Generator) -> None:
    """Two passes tell fs, R1 and Q at least a third better than as many points spread evenly."""
    limits, part = limits_of(family, points=201), part_of(family)
    first = locate(limits)
    z = noise.noisy(part.impedance(first.f_hz), NOISE, rng)
    plan = resolve(first.f_hz, z, limits)
    assert plan is not None
    two = fit_one(*both(first.f_hz, z, plan.f_hz, part, rng), Choice(limits.mode.search_hz))
    even = locate(replace(limits, measurement=replace(limits.measurement, strategy="uniform")))
    one = fit_one(even.f_hz, noise.noisy(part.impedance(even.f_hz), NOISE, rng), Choice(limits.mode.search_hz))
    assert two.status is one.status is FitStatus.OK
    gain = np.sqrt(np.diag(one.covariance)[2:5] / np.diag(two.covariance)[2:5])
    assert (gain > 1.33).all()


def test_resonance_seen_on_too_few_points_is_resolved_then(rng: np.random.Generator) -> None:
    """A first pass that sees the resonance but cannot resolve it sends the second one there."""
    limits, part = limits_of("BD-40", points=120), part_of("BD-40")
    first = locate(limits)
    z = noise.noisy(part.impedance(first.f_hz), NOISE, rng)
    assert fit_one(first.f_hz, z, Choice(limits.mode.search_hz)).status is FitStatus.NOT_RESOLVED
    plan = resolve(first.f_hz, z, limits)
    assert plan is not None
    fit = fit_one(*both(first.f_hz, z, plan.f_hz, part, rng), Choice(limits.mode.search_hz))
    assert fit.status is FitStatus.OK


@pytest.mark.parametrize("family", list(FILES))
@pytest.mark.parametrize("defect", ["open-lead", "short", "no-part"])
def test_nothing_to_resolve(family: str, defect: str, rng: np.random.Generator) -> None:
    """Where the first pass saw no resonance there is no second."""
    limits, part = limits_of(family), part_of(family, defect)
    f = locate(limits).f_hz
    assert resolve(f, noise.noisy(part.impedance(f), NOISE, rng), limits) is None


def test_uniform_strategy_has_one_pass(rng: np.random.Generator) -> None:
    """With the uniform strategy the first pass is all."""
    limits, part = limits_of("MD-1650", "uniform"), part_of("MD-1650")
    f = locate(limits).f_hz
    assert resolve(f, noise.noisy(part.impedance(f), NOISE, rng), limits) is None
