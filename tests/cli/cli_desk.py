"""The command line, run in this process or in one of its own; and what it is given to read."""

from __future__ import annotations

import contextlib
import hashlib
import io
import json
import subprocess
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from unittest import mock

import numpy as np
from conftest import ROOT

from harness.cli.app import main

LIMITS = ROOT / "limits" / "mist-discs" / "MD-1650.toml"
COMMAND = Path(sys.executable).with_name("ringtrue")
LOT = "LOT-7"
# invented: seven parts, four of them with something a line really sees
DEFECTS = ("sound", "crack", "open-lead", "short", "sound", "weak-poling", "sound")
LOT_FILE = 'family = "MD-1650"\nseed = 3\n' + "".join(f'[[part]]\ndefect = "{defect}"\n' for defect in DEFECTS)


@dataclass(frozen=True)
class Ran:
    """What a command came to."""

    code: int
    out: str
    err: str

    def json(self) -> Any:
        """Its one JSON document."""
        return strict_json(self.out)

    def lines(self) -> list[Any]:
        """Its JSON lines."""
        return [strict_json(line) for line in self.out.splitlines()]


def strict_json(text: str) -> Any:
    """JSON without NaN and infinity, which Python would read."""

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)


def run(*arguments: object, typed: str = "") -> Ran:
    """Run the command line in this process, as its script does; ``typed`` stands on standard input."""
    out, err = io.StringIO(), io.StringIO()
    code: object = None
    with (
        mock.patch.object(sys, "argv", ["ringtrue", *map(str, arguments)]),
        mock.patch.object(sys, "stdin", io.StringIO(typed)),
        contextlib.redirect_stdout(out),
        contextlib.redirect_stderr(err),
    ):
        try:
            main()
        except SystemExit as end:
            code = end.code
    assert code is None or isinstance(code, int), code
    return Ran(code or 0, out.getvalue(), err.getvalue())


def run_process(*arguments: object, typed: str = "", timeout_s: float = 120) -> Ran:
    """Run the installed command as a process of its own."""
    command = [str(COMMAND), *map(str, arguments)]
    done = subprocess.run(command, input=typed, capture_output=True, text=True, timeout=timeout_s, check=False)
    return Ran(done.returncode, done.stdout, done.stderr)


@contextmanager
def served(folder: Path, *options: str) -> Iterator[Mapping[str, Any]]:
    """The ready line of a simulated bench, which ends with the block; its station file lies in ``folder``."""
    command = [sys.executable, "-m", "sim_instruments", "serve", "--ms-per-point", "0", "--dir", str(folder), *options]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True)
    assert process.stdout is not None
    try:
        yield json.loads(process.stdout.readline())
    finally:
        process.terminate()
        process.wait(20)
        process.stdout.close()


@dataclass(frozen=True)
class Screened:
    """The store of a lot screened once, and what ``screen --json`` printed while it was."""

    store: Path
    printed: str

    def attempts(self) -> list[dict[str, Any]]:
        return [strict_json(line) for line in self.printed.splitlines()]


def tree(folder: Path) -> dict[str, str]:
    """Every file below a folder with the hash of its bytes; folders with nothing in them count too."""
    return {
        str(path.relative_to(folder)): hashlib.sha256(path.read_bytes()).hexdigest() if path.is_file() else ""
        for path in sorted(folder.rglob("*"))
        if not path.name.endswith(("-shm", "-wal"))  # a reader's own, empty
    }


def log_text(fs_hz: float = 1.65e6, points: int = 201) -> str:
    """A logged sweep of one resonance (invented: R1 1.5 Ω, Q 170, C0 1.5 nF), as CSV."""
    r1, q, c0 = 1.5, 170.0, 1.5e-9
    f = np.linspace(0.97 * fs_hz, 1.03 * fs_hz, points)
    y = 2j * np.pi * f * c0 * (1 - 0.01j) + 1 / (r1 * (1 + 1j * q * (f / fs_hz - fs_hz / f)))
    rows = [f"{one:.3f},{z.real:.9g},{z.imag:.9g}" for one, z in zip(f, 1 / y, strict=True)]
    return "\n".join(["frequency_hz,resistance_ohm,reactance_ohm", *rows]) + "\n"
