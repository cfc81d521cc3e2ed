"""Fixtures of the command line's tests: a desk, and one small lot screened on the simulated bench for all of them."""

from __future__ import annotations

import fcntl
import os
from pathlib import Path

import pytest
from cli_desk import LIMITS, LOT, LOT_FILE, Screened, run_process, served


@pytest.fixture(scope="session")
def screened(tmp_path_factory: pytest.TempPathFactory) -> Screened:
    """A small lot, screened once for the whole run, whatever the number of test processes."""
    folder = tmp_path_factory.getbasetemp()
    if "PYTEST_XDIST_WORKER" in os.environ:
        folder = folder.parent
    made = Screened(folder / "screened.db", "")
    printed = folder / "screened.json"
    with (folder / "screened.lock").open("w") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        if not printed.exists():
            printed.write_text(_screen(folder, made.store), encoding="utf-8")
    return Screened(made.store, printed.read_text(encoding="utf-8"))


def _screen(folder: Path, store: Path) -> str:
    (folder / "lot.toml").write_text(LOT_FILE, encoding="utf-8")
    (folder / "bench").mkdir()
    with served(folder / "bench", "--lot", str(folder / "lot.toml")) as at:
        ran = run_process(
            "screen", LOT, "--limits", LIMITS, "--station", at["station"], "--store", store, "--json",
            "--operator", "invented",
        )  # fmt: skip
    assert ran.code == 0, ran.err
    return ran.out


@pytest.fixture
def desk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty folder to work in; nothing of this machine's own station, store or settings is seen."""
    monkeypatch.chdir(tmp_path)
    for name in ("RINGTRUE_STORE", "RINGTRUE_STATION"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "data"))
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    return tmp_path
