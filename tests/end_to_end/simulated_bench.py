"""A simulated bench as a process, and the command line run against it."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any


@contextmanager
def served(*options: str) -> Iterator[Mapping[str, Any]]:
    """The ready line of ``python -m sim_instruments serve``; the process ends with the block."""
    command = [sys.executable, "-m", "sim_instruments", "serve", "--ms-per-point", "0", *options]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True)
    assert process.stdout is not None
    try:
        yield json.loads(process.stdout.readline())
    finally:
        process.terminate()
        assert process.wait(20) == 0
        process.stdout.close()


def told(control: str, **order: object) -> dict[str, Any]:
    """Send one order to the bench's control port; its answer."""
    host, port = control.split(":")
    with socket.create_connection((host, int(port)), timeout=60) as line, line.makefile("rw") as text:
        text.write(json.dumps(order) + "\n")
        text.flush()
        answer: dict[str, Any] = json.loads(text.readline())
        return answer


def ringtrue(*arguments: str | Path, store: Path | None = None, code: int = 0) -> str:
    """Run the command as a user would, expect its exit code, and return what it printed."""
    environment = dict(os.environ)
    if store is not None:
        environment["RINGTRUE_STORE"] = str(store)
    command = [str(Path(sys.executable).with_name("ringtrue")), *map(str, arguments)]
    done = subprocess.run(command, capture_output=True, text=True, env=environment, timeout=300, check=False)
    assert done.returncode == code, (done.returncode, done.stdout[-2000:], done.stderr[-2000:])
    return done.stdout


def lines(text: str) -> list[dict[str, Any]]:
    """JSON lines."""
    return [json.loads(line) for line in text.splitlines()]
