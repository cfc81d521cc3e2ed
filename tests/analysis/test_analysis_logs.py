"""Lone logs: every measured file gives sane results or an honest refusal."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from harness.analysis import fit_log
from harness.logs import read_log
from harness.records import Fit, FitStatus, Sweep

PEAKS = {"a100_25c": 6_269_781, "b300_45c": 10_959_730, "c300_25c": 10_003_990, "c300_65c": 10_003_840}


def fitted(path: Path, fixture: str | None = None, search_hz: tuple[float, float] | None = None) -> Fit:
    return fit_log(read_log(path.read_bytes(), str(path), fixture=fixture), search_hz)


def value(fit: Fit, key: str) -> float:
    got = fit.values[key].value
    assert got is not None
    return got


def codes(fit: Fit) -> set[str]:
    return {caveat.code for caveat in fit.caveats}


def test_every_measured_log_gives_sane_results(measured: Path) -> None:
    """Every value that comes out is finite, has an uncertainty that is, and the physical ones are positive."""
    for path in sorted(measured.glob("*/*.csv")):
        if path.name == "reference.csv":
            continue
        fit = fitted(path)
        assert fit.message
        assert (fit.status is FitStatus.OK) == bool(fit.values), path.name
        for key, one in fit.values.items():
            if one.value is not None:
                assert np.isfinite(one.value), (path.name, key)
                assert one.u is None or (np.isfinite(one.u) and one.u >= 0), (path.name, key)
                if key not in ("tan_delta", "phase_max", "unwanted_g"):
                    assert one.value > 0, (path.name, key)


def test_misfit_of_real_parts_is_told(measured: Path) -> None:
    """Air transducers, disc and bar are not quite circuits: each says that its uncertainties are widened."""
    for path in (
        measured / "air_transducer_40khz" / "unit_01.csv",
        measured / "disc_35mm_radial" / "first_radial_mode.csv",
        measured / "bar_12mm_length" / "length_mode.csv",
    ):
        fit = fitted(path)
        assert fit.status is FitStatus.OK
        assert codes(fit) & {"model", "correlated"}


def test_disc_with_its_leads(measured: Path) -> None:
    """The log alone shows the series resistance: fs ≈ 55.60 kHz, fp ≈ 69.01 kHz, C0 ≈ 5.1 nF, and R1 without it."""
    fit = fitted(measured / "disc_35mm_radial" / "first_radial_mode.csv")
    assert value(fit, "fs") == pytest.approx(55.60e3, abs=10)
    assert value(fit, "fp") == pytest.approx(69.01e3, abs=20)
    assert value(fit, "c0") == pytest.approx(5.1e-9, rel=0.03)
    assert "series-resistance" in codes(fit)
    assert value(fit, "r1") == pytest.approx(6.6, abs=1.0)


def test_unit_four_shows_its_unwanted_mode(measured: Path) -> None:
    """Unit 4: an unwanted mode at 32.75 kHz; unit 1: none, with the floor below which one could hide."""
    four = fitted(measured / "air_transducer_40khz" / "unit_04.csv")
    assert value(four, "unwanted_f") == pytest.approx(32.75e3, rel=0.005)
    one = fitted(measured / "air_transducer_40khz" / "unit_01.csv")
    assert value(one, "unwanted_g") == 0.0
    assert one.values["unwanted_g"].u is not None
    assert "floor" in codes(one)


@pytest.mark.parametrize("name", ["inductor_150u_25khz_50khz", "inductor_330u_1khz_200khz"])
def test_coils_are_refused(measured: Path, name: str) -> None:
    """A coil's log has no resonance, and the sentence says what it looks like."""
    fit = fitted(measured / "inductors" / f"{name}.csv")
    assert fit.status is FitStatus.NO_RESONANCE
    assert "coil" in fit.message


@pytest.mark.parametrize("fixture", [None, "series"])
@pytest.mark.parametrize("name", list(PEAKS))
def test_ringing_crystals_are_not_resolved(measured: Path, name: str, fixture: str | None) -> None:
    """Swept fast enough to ring: not resolved, never a confident number; the sentence names the published peak."""
    path = measured / "crystal_transmission" / f"{name}.csv"
    fit = fitted(path, fixture)
    assert fit.status is FitStatus.NOT_RESOLVED
    assert f"{PEAKS[name]}" in fit.message


def test_crystal_message_says_what_to_do(measured: Path) -> None:
    """The refusal asks for a slower sweep."""
    assert "slowly" in fitted(measured / "crystal_transmission" / "c300_25c.csv").message


def relative(f: np.ndarray, q: float, rng: np.random.Generator) -> Sweep:
    """A slow transmission log of a crystal, level unknown: as the log reader hands it on. Invented."""
    s21 = 0.6 / (1 + 1j * q * (f / 1e7 - 1e7 / f)) + 0.002j
    s21 = s21 + 2e-4 * (rng.standard_normal(f.size) + 1j * rng.standard_normal(f.size))
    return Sweep(f, 100 * (1 / s21 - 1), absolute=False)


def test_slow_transmission_gives_frequency_and_bandwidth_only(rng: np.random.Generator) -> None:
    """Without a level there are fs, bandwidth and Q as loaded, nothing in ohm or farad, and the log says so."""
    fit = fit_log(relative(np.linspace(9.998e6, 10.002e6, 801), 2e4, rng))
    assert fit.status is FitStatus.OK
    assert set(fit.values) == {"fs", "qm", "bandwidth"}
    assert value(fit, "fs") == pytest.approx(1e7, abs=5)
    assert value(fit, "bandwidth") == pytest.approx(500, rel=0.02)
    assert "no-level" in codes(fit)


def test_search_window_moves_the_choice(measured: Path) -> None:
    """With a window around unit 4's unwanted mode, that is the mode reported, or refused, never the main one."""
    fit = fitted(measured / "air_transducer_40khz" / "unit_04.csv", search_hz=(31e3, 35e3))
    if fit.status is FitStatus.OK:
        assert value(fit, "fs") == pytest.approx(32.75e3, rel=0.01)


def test_broken_logs_are_bad_data() -> None:
    """Nothing, or NaN only, is bad data with a sentence."""
    for z in (np.empty(0, dtype=complex), np.full(30, np.nan + 0j)):
        fit = fit_log(Sweep(np.linspace(1e6, 2e6, z.size), z))
        assert fit.status is FitStatus.BAD_DATA
        assert fit.message
