"""Help and README say what the command line does: every example parses, every command shown runs."""

from __future__ import annotations

import re
import shlex
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import typer
from cli_desk import LIMITS, LOT, Screened, log_text, run, run_process, served
from conftest import ROOT

from harness.cli.app import app
from harness.station import parse_station

pytest_plugins = ["cli_fixtures"]

README = (ROOT / "README.md").read_text(encoding="utf-8")
GROUP: Any = typer.main.get_command(app)


def leaves(group: Any = GROUP, path: tuple[str, ...] = ()) -> Iterator[tuple[str, Any]]:
    """Every command that does something, by its words."""
    for name, command in group.commands.items():
        if hasattr(command, "commands"):
            yield from leaves(command, (*path, name))
        else:
            yield " ".join((*path, name)), command


COMMANDS = dict(leaves())


def options_of(command: Any) -> set[str]:
    return {word for parameter in command.params for word in parameter.opts if word.startswith("-")} | {"--help", "-h"}


def parse(arguments: list[str]) -> str:
    """Parse a command line without running it; the words of the command it means. Raises what a wrong one raises."""
    command, context, name, rest = GROUP, None, "ringtrue", arguments
    words = []
    while True:
        context = command.make_context(name, list(rest), parent=context)
        if not hasattr(command, "commands"):
            return " ".join(words)
        name, command, rest = command.resolve_command(context, rest)
        words.append(name)


# ── help ─────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("words", COMMANDS)
def test_every_command_has_help_with_an_example_that_parses(words: str) -> None:
    """--help exits 0, says what the command does, and its example is a command line of this very command."""
    ran = run(*words.split(), "--help")
    assert ran.code == 0
    assert ran.err == ""
    example = re.search(r"Example: ringtrue ([^\n]*(?:\n +\S[^\n]*)?)\n\n", ran.out)
    assert example, ran.out
    assert parse(shlex.split(" ".join(example[1].split()))) == words


@pytest.mark.parametrize("words", COMMANDS)
def test_every_option_has_help(words: str) -> None:
    """No option and no argument without a word about it."""
    for parameter in COMMANDS[words].params:
        assert getattr(parameter, "help", None), (words, parameter.name)


REPORTING = (
    *("fit", "replay", "screen", "history", "lot", "record verify"),
    *("limits check", "limits explain", "checkup", "demo"),
)


@pytest.mark.parametrize("words", REPORTING)
def test_every_command_that_reports_has_json(words: str) -> None:
    """--json wherever something is reported; and no command is left out of this list."""
    assert "--json" in options_of(COMMANDS[words])
    assert set(REPORTING) == set(COMMANDS)


def test_help_is_short_on_a_narrow_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """The list of commands fits 80 columns, a line each."""
    monkeypatch.setenv("COLUMNS", "80")
    ran = run("--help")
    assert max(len(line) for line in ran.out.splitlines()) <= 80
    listed = ran.out.split("Commands:")[1].strip("\n").splitlines()
    assert {line.split()[0] for line in listed} == set(GROUP.commands)
    assert all(line.endswith((".", "?")) and not line.endswith("...") for line in listed)


# ── README ───────────────────────────────────────────────────────────────────────────────────


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```", README, re.DOTALL | re.MULTILINE)


def shown_lines(start: str) -> list[str]:
    """Lines of README's shell blocks that begin with a word, without their comments."""
    lines = [line.split(" #")[0].strip() for block in blocks("sh") for line in block.splitlines()]
    return [line for line in lines if line.startswith(start)]


def reference() -> dict[str, str]:
    """README's table of commands: the command's words → its cell."""
    table = README.split("## Reference")[1].split("\n\n")[1]
    found = {}
    for cell in re.findall(r"^\| `(.*?)` \|", table, re.MULTILINE):
        head, _, rest = cell.replace("\\|", "|").partition(" ")
        subs = rest.split(" ")[0].split("|") if head in ("limits", "record") else [""]
        found |= {f"{head} {sub}".strip(): cell for sub in subs}
    return found


def test_readme_lists_every_command_and_no_other() -> None:
    """The reference table and the command line have the same commands."""
    assert set(reference()) == set(COMMANDS)


@pytest.mark.parametrize("words", COMMANDS)
def test_options_in_the_reference_exist(words: str) -> None:
    """Every option that a row names is one of that command's."""
    assert set(re.findall(r"--[a-z-]+", reference()[words])) <= options_of(COMMANDS[words])


def test_every_option_in_readme_exists() -> None:
    """In prose and in blocks alike: ours, or the simulated bench's."""
    ours = set().union(*map(options_of, COMMANDS.values()))
    theirs = set(re.findall(r"--[a-z-]+", served_help()))
    assert set(re.findall(r"(?<![\w-])--[a-z][a-z-]*", README)) <= ours | theirs


def served_help() -> str:
    done = subprocess.run(
        [sys.executable, "-m", "sim_instruments", "serve", "--help"], capture_output=True, text=True, timeout=60
    )
    assert (done.returncode, done.stderr) == (0, "")
    return done.stdout


def test_readme_line_that_serves_a_bench_is_understood() -> None:
    """Its options are those of the command, whose help has an example and shows the ready line."""
    (line,) = shown_lines("python -m sim_instruments")
    text = served_help()
    assert set(re.findall(r"--[a-z-]+", line)) <= set(re.findall(r"--[a-z-]+", text))
    assert "example:" in text
    assert '"ready": true' in text


@pytest.fixture
def shop(desk: Path, screened: Screened, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The files that README's lines name: limits, a new limit file, a logged sweep, and the store of LOT-7."""
    shutil.copytree(ROOT / "limits", desk / "limits")
    shutil.copy(LIMITS, desk / "new.toml")
    (desk / "disc.csv").write_text(log_text(), encoding="utf-8")
    monkeypatch.setenv("RINGTRUE_STORE", str(screened.store))
    return desk


@pytest.mark.parametrize("line", [line for line in shown_lines("ringtrue ") if " screen " not in line])
def test_readme_line_runs(line: str, shop: Path) -> None:
    """As written, with the files it names: exit 0, something to read, and the file it says it writes."""
    ran = run(*shlex.split(line)[1:])
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.strip()
    for option, file in re.findall(r"--(html|csv) (\S+)", line):
        assert (shop / file).stat().st_size > 0, option


def test_readme_screens_at_a_station(shop: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """README's line at a simulated station found by RINGTRUE_STATION, with a store of its own."""
    (line,) = [line for line in shown_lines("ringtrue ") if " screen " in line]
    monkeypatch.setenv("RINGTRUE_STORE", str(shop / "line-3.db"))
    (shop / "bench").mkdir()
    with served(shop / "bench", "--parts", "2", "--seed", "3") as at:
        monkeypatch.setenv("RINGTRUE_STATION", at["station"])
        ran = run_process(*shlex.split(line)[1:])
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.count("● PASS") == 2
    assert run("lot", LOT).code == 0


def test_readme_shows_at_least_what_each_person_needs() -> None:
    """Operator, quality engineer, test engineer: lines for each; nothing was lost by a change of layout."""
    shown = {parse(shlex.split(line)[1:]) for line in shown_lines("ringtrue ")}
    assert {"screen", "lot", "history", "replay", "record verify", "limits check", "fit", "checkup"} <= shown


def test_readme_station_file_parses() -> None:
    """The example is a whole station file."""
    (text,) = blocks("toml")
    spec = parse_station(text, "README.md")
    assert spec.name == "line-3"
    assert spec.devices.scanner is not None
    assert spec.store


def test_readme_set_up_lines_are_those_of_ci() -> None:
    """Both lines do all their own set-up, and .ci/run installs and tests by README's own words."""
    lines = shown_lines("python3 -m venv")
    assert [line.rsplit("&& ", 1)[1] for line in lines] == [".venv/bin/ringtrue demo", ".venv/bin/pytest"]
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    assert 'install -q ".[test]"' in script
    assert ".venv/bin/pytest" in script
