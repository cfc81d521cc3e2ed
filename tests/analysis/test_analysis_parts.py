"""Parts made from first principles, apart from the fit's own equations, through the one path of analysis."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from conftest import ROOT

from harness.analysis import analyse
from harness.judging import parse_limits
from harness.records import Conditions, Correction, Fit, FitStatus, LimitSet, Reading, Sweep, Verdict
from sim_instruments.physics import lots, noise, truth
from sim_instruments.physics.parts import Part

FILES = {
    "MD-1650": "limits/mist-discs/MD-1650.toml",
    "MR-113": "limits/mesh-rings/MR-113.toml",
    "BD-40": "limits/bolt-clamped/BD-40.toml",
}
NOISE = 0.0015
AT_REFERENCE = Conditions(temperature_degc=23.0, age_h=240.0)


def limits_of(family: str) -> LimitSet:
    path = Path(ROOT / FILES[family])
    return parse_limits(path.read_text(encoding="utf-8"), str(path))


def swept(part: Part, limits: LimitSet, rng: np.random.Generator, points: int = 401) -> Sweep:
    """The part's own impedance over the search window, with noise."""
    f = np.linspace(*limits.mode.search_hz, points)
    return Sweep(f, noise.noisy(part.impedance(f), NOISE, rng), AT_REFERENCE, noise_relative=NOISE)


def normal_errors(fit: Fit, true: truth.Values, keys: tuple[str, ...]) -> dict[str, float]:
    """Each characteristic's error over its standard uncertainty."""
    out = {}
    for key in keys:
        value, want = fit.values[key], true[key]
        assert value.value is not None
        assert value.u is not None
        assert want is not None
        out[key] = (value.value - want) / value.u
    return out


@pytest.mark.parametrize("family", list(FILES))
def test_error_is_within_the_expanded_uncertainty(family: str, rng: np.random.Generator) -> None:
    """fs, R1, Qm, C0, keff of 60 sound parts: error ≤ U (k = 2) in 95 % of all, each one in at least 88 %."""
    limits, keys = limits_of(family), ("fs", "r1", "qm", "c0", "keff")
    within = {key: [] for key in keys}
    for part in lots.make_lot(family, 60, 5, defects=()):
        fit, _ = analyse(swept(part, limits, rng), limits)
        assert fit.status is FitStatus.OK
        assert fit.values["unwanted_g"].value == 0.0
        for key, error in normal_errors(fit, truth.characteristics(part), keys).items():
            within[key].append(abs(error) <= 2)
    assert np.mean(list(within.values())) >= 0.95
    for key, inside in within.items():
        # 88 % of 60 is 2.7 standard deviations below 95.4 %
        assert np.mean(inside) >= 0.88, key


@pytest.mark.parametrize("family", list(FILES))
def test_whole_circuit_frequencies_too(family: str, rng: np.random.Generator) -> None:
    """fm, fn, fr, fa, fp, Zm, Zn of 20 sound parts: error ≤ U (k = 2) in 93 % of all, none beyond 4.5 u."""
    limits, keys = limits_of(family), ("fm", "fn", "fr", "fa", "fp", "zm", "zn")
    errors = []
    for part in lots.make_lot(family, 20, 9, defects=()):
        fit, _ = analyse(swept(part, limits, rng), limits)
        errors += normal_errors(fit, truth.characteristics(part), keys).values()
    assert np.mean(np.abs(errors) <= 2) >= 0.93
    assert np.max(np.abs(errors)) < 4.5


@pytest.mark.parametrize("family", list(FILES))
@pytest.mark.parametrize("defect", ["chip", "crack"])
def test_chips_and_cracks_show_their_second_mode(family: str, defect: str, rng: np.random.Generator) -> None:
    """The split mode of 6 damaged parts each is found, its conductance within 4 u of the truth."""
    limits = limits_of(family)
    for seed in range(6):
        part = lots.made([lots.Order("X-0001", family, defect)], seed)[0]
        fit, judgement = analyse(swept(part, limits, rng), limits)
        true = truth.characteristics(part)
        assert fit.status is FitStatus.OK
        error = normal_errors(fit, true, ("unwanted_g", "fs"))
        assert abs(error["unwanted_g"]) < 4
        assert fit.values["unwanted_f"].value == pytest.approx(true["unwanted_f"], rel=2e-3)
        assert judgement.verdict is not Verdict.PASS


@pytest.mark.parametrize("family", list(FILES))
@pytest.mark.parametrize("defect", ["open-lead", "short", "no-part"])
def test_what_is_no_part_never_passes_or_fails(family: str, defect: str, rng: np.random.Generator) -> None:
    """An open, a short and an empty fixture have no resonance; without a proven contact that is no verdict."""
    limits = limits_of(family)
    part = lots.made([lots.Order("X-0001", family, defect)], 1)[0]
    fit, judgement = analyse(swept(part, limits, rng), limits)
    assert fit.status is FitStatus.NO_RESONANCE
    assert fit.values == {}
    assert judgement.verdict is Verdict.NONE


def test_same_sweep_same_bits(rng: np.random.Generator) -> None:
    """The same sweep and limits give the same bits, values, budgets and caveats, every time."""
    limits = limits_of("MR-113")
    sweep = swept(lots.make_lot("MR-113", 1, 5, defects=())[0], limits, rng)
    assert analyse(sweep, limits) == analyse(sweep, limits)


def test_fixture_is_taken_off_and_its_doubt_added(rng: np.random.Generator) -> None:
    """Behind leads of 0.5 ohm and 100 nH the part comes out as itself; the leads' u stands in R1's and fs's budget."""
    from harness.correction import fixture

    limits = limits_of("MD-1650")
    part = lots.make_lot("MD-1650", 1, 5, defects=())[0]
    bare = swept(part, limits, rng)
    leads = Correction("leads", 0.5, 100e-9, 3e-12, u_rs_ohm=0.02, u_ls_h=2e-9, u_cp_f=0.1e-12)
    seen = Sweep(bare.f_hz, fixture.embed(bare.f_hz, bare.z_ohm, leads), AT_REFERENCE, noise_relative=NOISE)
    fit, _ = analyse(seen, limits, leads)
    true = truth.characteristics(part)
    assert fit.values["r1"].value == pytest.approx(true["r1"], rel=3e-3)
    assert fit.budget["r1"]["correction rs"] == pytest.approx(0.02, rel=0.02)
    # Δfs/fs = −Ls/(2 L1): what an error of Ls does to fs
    assert fit.budget["fs"]["correction ls"] == pytest.approx(
        fit.values["fs"].value * 2e-9 / (2 * true["l1"]), rel=0.05
    )
    assert fit.budget["c0"]["correction cp"] == pytest.approx(0.1e-12, rel=0.05)


def test_low_frequency_reading_becomes_a_characteristic(rng: np.random.Generator) -> None:
    """The reading at 1 kHz gives C and tan δ there, as a parallel capacitance."""
    limits = limits_of("MD-1650")
    part = lots.make_lot("MD-1650", 1, 5, defects=())[0]
    plain = swept(part, limits, rng)
    reading = Reading("contact before", 1e3, complex(part.impedance(np.array([1e3]))[0]))
    sweep = Sweep(plain.f_hz, plain.z_ohm, AT_REFERENCE, (reading,), NOISE)
    fit, _ = analyse(sweep, limits)
    true = truth.characteristics(part)
    assert fit.values["c_at"].value == pytest.approx(true["c_at"], rel=1e-9)
    assert fit.values["tan_delta_at"].value == pytest.approx(true["tan_delta_at"], rel=1e-9)


def test_broken_sweeps_end_in_a_status(rng: np.random.Generator) -> None:
    """No points, one point, all NaN: bad data with a sentence, no verdict, never an exception."""
    limits = limits_of("MD-1650")
    for f, z in (
        (np.empty(0), np.empty(0, dtype=complex)),
        (np.array([1.6e6]), np.array([50 + 0j])),
        (np.linspace(1.5e6, 1.9e6, 50), np.full(50, np.nan + 0j)),
        (np.full(50, 1.6e6), np.full(50, 50 + 0j)),
    ):
        fit, judgement = analyse(Sweep(f, z, AT_REFERENCE), limits)
        assert fit.status is FitStatus.BAD_DATA
        assert fit.message
        assert judgement.verdict is Verdict.NONE
