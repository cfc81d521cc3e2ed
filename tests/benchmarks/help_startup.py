"""How much longer ``ringtrue --help`` takes than the smallest Typer program's: the ratio of medians.

    python tests/benchmarks/help_startup.py

Both start as processes of the same Python, in turn, so that whatever else the machine does meets both alike.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

RUNS = 25
TARGET = 1.3
SMALLEST = '''
import typer

app = typer.Typer(rich_markup_mode={markup!r})

@app.command()
def hello() -> None:
    """Nothing."""

app()
'''


def seconds(command: list[str]) -> float:
    """Wall time of one run."""
    before = time.perf_counter()
    subprocess.run(command, stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - before


def main() -> None:
    """Print the ratio to a Typer program as it comes, and to one with plain help."""
    with tempfile.TemporaryDirectory() as folder:
        commands = {"ringtrue": [str(Path(sys.executable).with_name("ringtrue")), "--help"]}
        for name, markup in (("plain", None), ("default", "rich")):
            script = Path(folder) / f"{name}.py"
            script.write_text(SMALLEST.format(markup=markup), encoding="utf-8")
            commands[name] = [sys.executable, str(script), "--help"]
        for command in commands.values():  # byte code and disk cache
            seconds(command)
        times = {name: [] for name in commands}
        for _ in range(RUNS):
            for name, command in commands.items():
                times[name].append(seconds(command))
    median = {name: statistics.median(found) for name, found in times.items()}
    print(f"ringtrue --help: {1e3 * median['ringtrue']:.0f} ms, the median of {RUNS}")
    ratio, plain = (median["ringtrue"] / median[name] for name in ("default", "plain"))
    word = "met" if ratio <= TARGET else "NOT met"
    print(
        f"smallest Typer program: {1e3 * median['default']:.0f} ms; ratio {ratio:.2f} (target at most {TARGET}: {word})"
    )
    print(f"the same with plain help, as ours is: {1e3 * median['plain']:.0f} ms; ratio {plain:.2f}, for information")


if __name__ == "__main__":
    main()
