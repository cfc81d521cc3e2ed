"""A bench worked by hand while the station screens, a wrong instrument, and parts far outside the window."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT
from simulated_bench import ringtrue, served, told

from harness.analysis import analyse
from harness.correction import embed
from harness.judging import parse_limits
from harness.planning import locate
from harness.records import Conditions, Correction, LimitSet, Reading, Sweep, Verdict
from sim_instruments.physics.parts import nominal_part

LIMITS = ROOT / "limits" / "mist-discs" / "MD-1650.toml"


@pytest.mark.parametrize("order", [("MD-0001", "MD-0002", "MD-0003"), ("MD-0003", "MD-0001", "MD-0002")])
def test_parts_presented_one_by_one(order: tuple[str, ...], tmp_path: Path) -> None:
    """The station says ready, a hand presents parts in any order, each line is the part that was presented."""
    command = [str(Path(sys.executable).with_name("ringtrue")), "screen", "L1", "--limits", str(LIMITS), "--json"]
    environment = dict(os.environ, RINGTRUE_STORE=str(tmp_path / "s.db"))
    with (
        served("--parts", "3", "--seed", "4", "--dir", str(tmp_path), "--by-hand") as bench,
        subprocess.Popen(
            [*command, "--station", bench["station"]],
            stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=environment,
        ) as screen,
    ):  # fmt: skip
        assert screen.stdout is not None
        assert screen.stderr is not None
        while "ready" not in screen.stderr.readline().lower():
            assert screen.poll() is None
        for serial in order:
            assert told(bench["control"], present=serial)["ok"] is True
            line = json.loads(screen.stdout.readline())
            assert line["serial"] == serial
            assert line["final"] is True
        assert screen.wait(30) == 0


def test_presenting_in_order_works_with_the_handler_feeding(tmp_path: Path) -> None:
    """The handler may be quicker than the hand: a part it has brought already is not asked for twice."""
    with served("--parts", "3", "--seed", "4", "--dir", str(tmp_path)) as bench:
        done = ringtrue("screen", "L1", "--limits", LIMITS, "--station", bench["station"], store=tmp_path / "s.db")
        assert "MD-0003" in done
        assert told(bench["control"], present="MD-0001")["ok"] is True
        assert told(bench["control"], command="status")["fixture"] is None


def test_another_instrument_is_refused_at_the_start(tmp_path: Path) -> None:
    """The station file says who the meter is; another one is exit 3, and nothing is written."""
    with served("--parts", "1", "--dir", str(tmp_path)) as bench:
        text = Path(bench["station"]).read_text().replace("ZA-12", "ZB-99")
        (tmp_path / "other.toml").write_text(text)
        arguments = ("screen", "L1", "--limits", LIMITS, "--station", tmp_path / "other.toml")
        ringtrue(*arguments, store=tmp_path / "s.db", code=3)
    assert not (tmp_path / "s.db").exists()


@pytest.mark.parametrize("fs_hz", [1.30e6, 1.495e6, 1.91e6, 2.10e6])
def test_resonance_outside_the_window_fails(fs_hz: float, rng) -> None:
    """A disc far too thick or thin, well contacted, is a fail by a real sweep, and no loose contact."""
    limits: LimitSet = parse_limits(LIMITS.read_text(), "MD-1650.toml")
    part, fixture = nominal_part("MD-1650").scaled(1.65e6 / fs_hz), Correction("nest", 0.15, 60e-9, 4e-12)

    def read(f_hz):
        z = embed(f_hz, part.impedance(f_hz, 23.0, 1.0), fixture)
        return z * (1 + 0.0015 * (rng.standard_normal(f_hz.size) + 1j * rng.standard_normal(f_hz.size)))

    f = locate(limits).f_hz
    contacts = tuple(Reading(s, 1e3, complex(read(f[:1] * 0 + 1e3)[0])) for s in ("contact before", "contact after"))
    sweep = Sweep(f, read(f), Conditions(1.0, 23.0), contacts, 0.0015, 1e-3, 2e-6)
    _, judgement = analyse(sweep, limits, fixture)
    assert judgement.verdict is Verdict.FAIL
    assert judgement.reasons[0].code == "no-resonance"
