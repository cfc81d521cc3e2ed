"""The drivers' room keeps its walls: who may know sockets and foreign libraries, and what an import costs."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import drivers.roles

ROOM = Path(drivers.roles.__file__).parent
FOREIGN = {"pyvisa", "pyvisa_py", "serial", "socket"}
MODULES = sorted(ROOM.rglob("*.py"))


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(ROOM)))
def test_only_the_wires_know_foreign_libraries(path: Path) -> None:
    """No module outside drivers/wire imports PyVISA, pyserial or sockets, and none imports harness or simulators."""
    imported = {name.split(".")[0] for name in _imports(path)}
    assert not imported & {"harness", "sim_instruments"}
    if path.parent.name != "wire":
        assert not imported & FOREIGN


def test_importing_the_drivers_loads_no_foreign_library() -> None:
    """Meter, scanner and handler are imported without loading PyVISA, pyserial or the harness."""
    code = (
        "import sys, drivers.meter, drivers.scanner, drivers.handler;"
        "print(sorted({'pyvisa', 'serial', 'harness', 'sim_instruments'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert done.stdout.strip() == "[]"


def _imports(path: Path) -> set[str]:
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            found.add(node.module or "")
    return found
