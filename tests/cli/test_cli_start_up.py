"""``ringtrue --help`` must not pay for what only a command needs."""

from __future__ import annotations

import subprocess
import sys

import pytest

LIBRARIES = (
    *("numpy", "scipy", "sqlalchemy", "pysqlite3", "pyvisa", "pyvisa_py", "serial", "matplotlib", "jinja2", "rich"),
    *("platformdirs", "drivers", "sim_instruments"),
)
ROOMS = (
    "records",
    "store",
    "station",
    "judging",
    "report",
    "run",
    "fitting",
    "analysis",
    "statistics",
    "bench",
    "desk",
)
HEAVY = {*LIBRARIES, *(f"harness.{room}" for room in ROOMS)}
SCRIPT = """
import sys
sys.argv = ["ringtrue", *{arguments!r}]
from harness.cli import main
try:
    main()
except SystemExit as end:
    print(end.code, file=sys.stderr)
print(*sys.modules, file=sys.stderr)
"""


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["screen", "--help"], ["limits", "check", "--help"]])
def test_help_imports_nothing_heavy(arguments: list[str]) -> None:
    """None of the numerical, database, instrument or drawing libraries, and none of our own rooms that use them."""
    script = SCRIPT.format(arguments=arguments)
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, timeout=60, check=True)
    code, loaded = done.stderr.splitlines()
    assert code in ("0", "None")
    assert HEAVY & set(loaded.split()) == set()
    if arguments[0].startswith("--"):  # for a command's own help Typer loads it, to know a number's range
        assert "pydantic" not in loaded.split()
    assert "harness.cli.app" in loaded.split()
