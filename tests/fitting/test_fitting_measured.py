"""Real parts, measured by others, within the tolerances that the data's own README states."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from harness.circuits import resonator
from harness.circuits.resonator import from_elements
from harness.fitting import fit_batch, model
from harness.fitting.single import Choice, fit_one
from harness.logs import read_log
from harness.records import FitStatus, Sweep

UNITS = [f"{k:02d}" for k in range(1, 11)]


def log(path: Path) -> Sweep:
    return read_log(path.read_bytes(), str(path))


def elements(path: Path) -> list[dict[str, float | str]]:
    """Rows of a table of circuit elements."""
    lines = [line for line in path.read_text(encoding="utf-8").splitlines() if not line.startswith("#")]
    return [
        {key: value if key in ("unit", "kind") else float(value) for key, value in row.items()}
        for row in csv.DictReader(lines)
    ]


def reference(measured: Path, unit: str) -> dict[str, float]:
    """What the measuring analyser's own fit of this unit says."""
    row = next(r for r in elements(measured / "air_transducer_40khz" / "reference.csv") if r["unit"] == unit)
    r1, l1, c1, c0 = (float(row[key]) for key in ("r1_ohm", "l1_h", "c1_f", "c0_f"))
    fs = 1 / (2 * np.pi * np.sqrt(l1 * c1))
    return {"fs": fs, "fp": fs * np.sqrt(1 + c1 / c0), "c0": c0, "r1": r1, "q": np.sqrt(l1 / c1) / r1}


@pytest.mark.parametrize("unit", UNITS)
def test_air_transducers_agree_with_the_analyser(measured: Path, unit: str) -> None:
    """One branch over ±6 % of fs, relative weights: fs ±0.2 %, fp ±0.3 %, C0 ±7 %, R1 ±15 %, Q ±25 %."""
    want = reference(measured, unit)
    sweep = log(measured / "air_transducer_40khz" / f"unit_{unit}.csv")
    near = np.abs(sweep.f_hz / want["fs"] - 1) <= 0.06
    got = fit_batch(sweep.f_hz[near], sweep.z_ohm[near])
    assert got.status[0] == "ok"
    assert got.fs_hz[0] == pytest.approx(want["fs"], rel=0.002)
    assert got.fp_hz[0] == pytest.approx(want["fp"], rel=0.003)
    assert got.c0_f[0] == pytest.approx(want["c0"], rel=0.07)
    assert got.r1_ohm[0] == pytest.approx(want["r1"], rel=0.15)
    assert got.q[0] == pytest.approx(want["q"], rel=0.25)


@pytest.mark.parametrize("unit", UNITS)
def test_second_mode_of_air_transducers(measured: Path, unit: str) -> None:
    """Over the full span a further mode near 52 kHz is found; what is left is below 2 % (3–5 % without phases).

    Unit 4's unwanted mode is found besides.
    """
    want = reference(measured, unit)
    sweep = log(measured / "air_transducer_40khz" / f"unit_{unit}.csv")
    fit = fit_one(sweep.f_hz, sweep.z_ohm, Choice((25e3, 50e3)))
    assert fit.status is FitStatus.OK
    circuit = model.circuit_of(fit.parameters)
    assert any(51e3 < f < 54e3 for f in circuit.f_hz[1:])
    assert fit.relative_rms < 0.02
    assert float(circuit.fs_hz) == pytest.approx(want["fs"], rel=0.003)
    assert float(resonator.c0_f(circuit)) == pytest.approx(want["c0"], rel=0.07)
    # unit 4 alone has an unwanted mode at 32.75 kHz
    low = [f for f in circuit.f_hz[1:] if 32e3 < f < 33.5e3]
    assert low == ([pytest.approx(32.75e3, rel=0.005)] if unit == "04" else [])
    assert fit.lag_one > 0.3  # what is left is not noise, and the uncertainty says so


@pytest.mark.parametrize("unit", UNITS)
def test_c0_and_fp_stay_when_the_second_mode_is_fitted(measured: Path, unit: str) -> None:
    """C0 is everything but the wanted branch at fs: over ±6 % and over the full span it agrees within 6 %."""
    sweep = log(measured / "air_transducer_40khz" / f"unit_{unit}.csv")
    narrow = fit_one(sweep.f_hz, sweep.z_ohm, Choice((25e3, 50e3), span=0.06, most_branches=1))
    wide = fit_one(sweep.f_hz, sweep.z_ohm, Choice((25e3, 50e3)))
    one, other = (model.circuit_of(fit.parameters) for fit in (narrow, wide))
    assert float(resonator.c0_f(one)) == pytest.approx(float(resonator.c0_f(other)), rel=0.06)
    assert float(one.fs_hz) == pytest.approx(float(other.fs_hz), rel=0.001)


def test_disc_of_35_mm(measured: Path) -> None:
    """With a series resistance: fs ≈ 55.60 kHz, fp ≈ 69.01 kHz, C0 ≈ 5.1 nF, Rs near 6 ohm."""
    sweep = log(measured / "disc_35mm_radial" / "first_radial_mode.csv")
    got = fit_batch(sweep.f_hz, sweep.z_ohm, series_resistance=True)
    assert got.status[0] == "ok"
    assert got.fs_hz[0] == pytest.approx(55.60e3, abs=10)
    assert got.fp_hz[0] == pytest.approx(69.01e3, abs=20)
    assert got.c0_f[0] == pytest.approx(5.1e-9, rel=0.02)
    assert got.relative_rms[0] < 0.01
    chosen = fit_one(sweep.f_hz, sweep.z_ohm, Choice((50e3, 72e3), choose_series_resistance=True))
    assert float(model.circuit_of(chosen.parameters).rs_ohm) == pytest.approx(6.0, abs=0.5)


def test_bar_of_12_mm(measured: Path) -> None:
    """A digitised figure of three digits: fs ≈ 128.15 kHz, fp ≈ 134.55 kHz, Q ≈ 90, C0 ≈ 375 pF."""
    sweep = log(measured / "bar_12mm_length" / "length_mode.csv")
    got = fit_batch(sweep.f_hz, sweep.z_ohm)
    assert got.status[0] == "ok"
    assert got.fs_hz[0] == pytest.approx(128.15e3, abs=30)
    assert got.fp_hz[0] == pytest.approx(134.55e3, abs=60)
    assert got.q[0] == pytest.approx(90, rel=0.05)
    assert got.c0_f[0] == pytest.approx(375e-12, rel=0.02)


@pytest.mark.parametrize("name", ["inductor_150u_25khz_50khz", "inductor_330u_1khz_200khz"])
def test_coils_are_no_transducers(measured: Path, name: str) -> None:
    """Real coils never come out as transducers, whatever is freed and wherever one looks."""
    sweep = log(measured / "inductors" / f"{name}.csv")
    low, high = float(sweep.f_hz[0]), float(sweep.f_hz[-1])
    for options in ({}, {"series_resistance": True}, {"motional_phase": True}, {"search_hz": (low, (low + high) / 2)}):
        assert fit_batch(sweep.f_hz, sweep.z_ohm, **options).status[0] == "no-resonance"
    fit = fit_one(sweep.f_hz, sweep.z_ohm, Choice((low, high)))
    assert fit.status is FitStatus.NO_RESONANCE
    assert "a coil" in fit.message


def test_published_elements_come_back(measured: Path, rng: np.random.Generator) -> None:
    """Sweeps made from the measured elements of seven real transducers give those elements back within 4 u."""
    rows = elements(measured / "bvd_parameters.csv")
    assert len(rows) == 7
    for row in rows:
        r1, l1, c1, c0 = (float(row[key]) for key in ("r1_ohm", "l1_h", "c1_f", "c0_f"))
        circuit = from_elements(r1, l1, c1, c0)
        fs = float(circuit.fs_hz)
        f = np.linspace(0.9 * fs, 1.15 * fs, 1201)
        z = resonator.impedance(circuit, f)
        noise = 0.002 * np.abs(z) * (rng.standard_normal(1201) + 1j * rng.standard_normal(1201))
        got = fit_batch(f, z + noise)
        assert got.status[0] == "ok", row["kind"]
        for name, want in (("r1_ohm", r1), ("l1_h", l1), ("c1_f", c1), ("c0_f", c0)):
            assert abs(getattr(got, name)[0] - want) < 4 * getattr(got, "u_" + name)[0], (row["kind"], name)
