"""Every way a command can be refused: its exit code, one clear message with its place, and nothing written."""

from __future__ import annotations

import os
import shutil
import socket
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import pytest
from cli_desk import LIMITS, LOT, Screened, log_text, run, run_process, served, tree
from conftest import ROOT

pytest_plugins = ["cli_fixtures"]

OTHER_LIMITS = ROOT / "limits" / "mesh-rings" / "MR-113.toml"
HEAD = "frequency_hz,impedance_ohm,phase_deg\n"
STATION = """\
format = 1
[identity]
station = "invented-1"
[bench.meter]
resource = "{resource}"
dialect = "{dialect}"
timeout = "500 ms"
"""
REFUSED = STATION.format(resource="TCPIP::127.0.0.1::1::SOCKET", dialect="scpi-analyser")


@dataclass(frozen=True)
class Case:
    """A command, the files it meets, its exit code, what its message says and on how many lines."""

    arguments: tuple[str, ...]
    says: tuple[str, ...]
    code: int = 2
    lines: int = 1
    files: Mapping[str, str | bytes] = field(default_factory=dict)


def logs(name: str, content: str | bytes, *says: str, lines: int = 1) -> Case:
    """A log that cannot be fitted."""
    return Case(("fit", name), (name, *says), files={name: content}, lines=lines)


LOGS = {
    "missing column": logs("a.csv", "frequency_hz,loudness\n1e6,3\n", "impedance_ohm"),
    "no frequency": logs("a.csv", "resistance_ohm,reactance_ohm\n1,3\n", "frequency_hz"),
    "non-numeric cell": logs("a.csv", HEAD + "1e6,12,-80\n2e6,twelve,-80\n", "a.csv:3", "twelve"),
    "NaN cell": logs("a.csv", HEAD + "1e6,12,-80\n2e6,nan,-80\n", "a.csv:3"),
    "unsorted": logs("a.csv", HEAD + "2e6,12,-80\n1e6,12,-80\n3e6,12,-80\n", "a.csv:3"),
    "repeated": logs("a.csv", HEAD + "1e6,12,-80\n1e6,12,-80\n3e6,12,-80\n", "a.csv:3"),
    "one point": logs("a.csv", HEAD + "1e6,12,-80\n", "point"),
    "names only": logs("a.csv", HEAD),
    "empty": logs("a.csv", "", "empty"),
    "Latin-1": logs("a.csv", "# Prüfling 7\n".encode("latin-1") + HEAD.encode() + b"1e6,12,-80\n", "UTF-8"),
    "UTF-16": logs("a.csv", (HEAD + "1e6,12,-80\n").encode("utf-16"), "UTF-8"),
    "decimal commas": logs("a.csv", "frequency_hz;impedance_ohm;phase_deg\n1000000,5;12,3;-80,1\n", "comma"),
    "two columns without names": logs("a.csv", "1000000,12\n1000100,13\n1000200,14\n", "frequency_hz"),
    "binary": logs("a.csv", bytes(range(256)) * 4),
    "bad Touchstone": logs("a.s1p", "# MHz S RI R 50\n1.0 0.5\n"),
    "missing": Case(("fit", "gone.csv"), ("gone.csv", "cannot be read")),
    "a folder": Case(("fit", "."), ("cannot be read",)),
    "window the wrong way round": Case(
        ("fit", "a.csv", "--search", "2MHz", "1MHz"), ("--search", "lower frequency first"), files={"a.csv": log_text()}
    ),
    "window in farad": Case(("fit", "a.csv", "--search", "1pF", "2pF"), ("--search",), files={"a.csv": log_text()}),
    "unknown fixture": Case(("fit", "a.csv", "--fixture", "bridge"), ("--fixture", "series or shunt")),
}

GOOD = LIMITS.read_text(encoding="utf-8")
LIMIT_FILES = {
    "not TOML": Case(("limits", "check", "x.toml"), ("x.toml:2",), files={"x.toml": "format = 1\nmode = @\n"}),
    "empty": Case(("limits", "check", "x.toml"), ("x.toml",), lines=0, files={"x.toml": ""}),
    "every mistake at once": Case(
        ("limits", "check", "x.toml"),
        ("serial_patern", "attempts", "max"),
        lines=3,
        files={
            "x.toml": GOOD.replace("serial_pattern", "serial_patern")
            .replace("attempts = 2", "attempts = 0")
            .replace("max = 1662.0\nu_max", "max = 1600.0\nu_max")
        },
    ),
    "wrong dimension": Case(
        ("limits", "check", "x.toml"),
        ("x.toml:", "nF"),
        files={"x.toml": GOOD.replace('drive = "1 V"', 'drive = "1 nF"')},
    ),
    "not UTF-8": Case(("limits", "check", "x.toml"), ("x.toml:1", "UTF-8"), files={"x.toml": b"# \xfc\n"}),
    "missing": Case(("limits", "check", "gone.toml"), ("gone.toml", "cannot be read")),
    "explain a missing one": Case(("limits", "explain", "gone.toml"), ("gone.toml",)),
    "replay under a missing one": Case(("replay", "a.csv", "--limits", "gone.toml"), ("gone.toml",)),
    "screen under a missing one": Case(("screen", "L", "--limits", "gone.toml"), ("gone.toml",)),
}


def screens(*options: str, says: tuple[str, ...], code: int = 2, lines: int = 1, **files: str | bytes) -> Case:
    """A screening that is refused before anything is measured."""
    named = {name.replace("_", "."): content for name, content in {"s_toml": REFUSED, **files}.items()}
    return Case(("screen", "L-1", "--limits", str(LIMITS), "--station", "s.toml", *options), says, code, lines, named)


SCREENINGS = {
    "no station": Case(("screen", "L-1", "--limits", str(LIMITS)), ("station.toml", "--station", "no station file")),
    "station not there": screens("--station", "gone.toml", says=("gone.toml", "--station")),
    "station with many mistakes": screens(
        says=("station", "timeout", "ports"),
        lines=3,
        s_toml=REFUSED.replace('station = "invented-1"\n', "").replace("500 ms", "5 nF")
        + '[bench.scanner]\nports = "/dev/x"\nport = "/dev/y"\n',
    ),
    "station not TOML": screens(says=("s.toml:1",), s_toml="format = \n"),
    "station not UTF-8": screens(says=("s.toml:1", "UTF-8"), s_toml=b"\xff\xfe"),
    "dialect unknown": screens(
        says=("no-such-words",), s_toml=STATION.format(resource="TCPIP::127.0.0.1::1::SOCKET", dialect="no-such-words")
    ),
    "resource not understood": screens(
        says=("WIRELESS",), s_toml=STATION.format(resource="WIRELESS::7", dialect="scpi-analyser")
    ),
    "serials not there": screens("--serials", "gone.txt", says=("gone.txt", "cannot be read")),
    "serials against the pattern": screens(
        "--serials", "l.txt", says=("l.txt:2", "l.txt:4", "MD-"), lines=2, l_txt="MD-0001\nbanana\nMD-0002\nMD-3\n"
    ),
    "a serial twice": screens(
        "--serials", "l.txt", says=("l.txt:3", "line 1", "once"), l_txt="MD-0001\n# tray 2\nMD-0001\n"
    ),
    "no serial": screens("--serials", "l.txt", says=("l.txt", "no serial"), l_txt="# none\n\n"),
    "serials not UTF-8": screens("--serials", "l.txt", says=("l.txt:2", "UTF-8"), l_txt=b"MD-0001\n\xff\n"),
    "poled in no time": screens("--poled", "yesterday", says=("--poled", "yesterday")),
    "poled in the future": screens("--poled", "2999-01-01T00:00Z", says=("--poled", "future")),
    "store of another kind": screens("--store", "mysql://h/d", says=("mysql", "sqlite")),
    "store in PostgreSQL": screens("--store", "postgresql://h/d", says=("PostgreSQL", "path")),
    "store not ours": screens("--store", "notes.txt", says=("notes.txt", "--store"), notes_txt="not a store\n"),
    "store is a folder": screens("--store", ".", says=("folder",)),
    "lot without a name": Case(
        ("screen", " ", "--limits", str(LIMITS), "--station", "s.toml"), ("LOT",), files={"s.toml": REFUSED}
    ),
    "limits under another name": Case(("screen", "L-1", "--station", "s.toml"), ("--limits",), lines=0),
}

READERS = (
    ("lot", "L-1"),
    ("history", "MD-0001"),
    ("record", "verify"),
    ("replay", "L-1", "--limits", str(LIMITS)),
)
READINGS = {
    f"{command[0]}: {name}": Case((*command, *store), says, files=files)
    for command in READERS
    for name, store, says, files in (
        ("no store", (), ("ringtrue.db", "no store"), {}),
        ("store not there", ("--store", "gone.db"), ("gone.db", "no store", "--store"), {}),
        ("store not ours", ("--store", "n.txt"), ("n.txt", "not a ringtrue store"), {"n.txt": "hello, world\n" * 9}),
        ("a folder", ("--store", "."), ("folder",), {}),
        ("another kind", ("--store", "mysql://h/d"), ("mysql",), {}),
        ("in memory", ("--store", "sqlite://"), ("memory",), {}),
    )
}  # fmt: skip

CASES = {**{f"log {k}": v for k, v in LOGS.items()}, **{f"limits {k}": v for k, v in LIMIT_FILES.items()},
         **{f"screen {k}": v for k, v in SCREENINGS.items()}, **READINGS}  # fmt: skip


def message_of(err: str) -> list[str]:
    """The lines of one clear message: each says whose it is; no traceback and nothing else."""
    lines = err.splitlines()
    assert all(line.startswith("ringtrue: ") for line in lines), err
    assert len(set(lines)) == len(lines), "said twice"
    return lines


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_bad_input_is_one_clear_message_and_nothing_written(case: Case, desk: Path) -> None:
    """The exit code, one message that names the place, nothing on standard output, no file made or changed."""
    for name, content in case.files.items():
        (desk / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    before = tree(desk)
    ran = run(*case.arguments)
    after = tree(desk)
    after.pop("s.toml.lock", None)
    assert ran.code == case.code, ran
    assert ran.out == ""
    for text in case.says:
        assert text in ran.err
    if case.lines:
        assert len(message_of(ran.err)) == case.lines, ran.err
    assert after == before


@pytest.mark.parametrize(
    "name", [name for name in LOGS if LOGS[name].files and "--" not in " ".join(LOGS[name].arguments)]
)
def test_a_bad_log_is_bad_data_in_json_and_no_verdict_in_replay(name: str, desk: Path) -> None:
    """fit --json says bad-data, replay --json no verdict; both exit 2 and name the file once on standard error."""
    case = LOGS[name]
    for file, content in case.files.items():
        (desk / file).write_bytes(content if isinstance(content, bytes) else content.encode())
    (desk / "good.csv").write_text(log_text(), encoding="utf-8")
    file = case.arguments[1]
    ran = run("fit", file, "good.csv", "--json")
    assert ran.code == 2
    assert [one["status"] for one in ran.json()] == ["bad-data", "ok"]
    assert file in ran.json()[0]["message"]
    message_of(ran.err)
    again = run("replay", file, "good.csv", "--limits", LIMITS, "--json")
    assert again.code == 2
    bad, good = again.lines()
    assert (bad["verdict"], bad["reasons"][0]["code"]) == ("no verdict", "bad-data")
    assert good["reasons"] == [] or good["reasons"][0]["code"] != "bad-data"
    assert again.err == ran.err


def test_good_files_are_fitted_beside_a_bad_one(desk: Path) -> None:
    """The table of the good one is printed, the bad one's sentence stands on standard error; exit 2."""
    (desk / "good.csv").write_text(log_text(), encoding="utf-8")
    (desk / "bad.csv").write_text(HEAD, encoding="utf-8")
    ran = run("fit", "bad.csv", "good.csv")
    assert ran.code == 2
    assert "series resonance" in ran.out
    assert "bad.csv" not in ran.out
    assert len(message_of(ran.err)) == 1


USAGE = {
    "unknown command": ("mend",),
    "unknown option": ("lot", "L-1", "--colour"),
    "lot missing": ("screen",),
    "limits missing": ("replay", "L-1"),
    "file missing": ("fit",),
    "serial missing": ("history",),
    "no such sub-command": ("record", "polish"),
    "tray of nothing": ("screen", "L", "--limits", "x", "--tray", "0"),
    "no parts": ("demo", "--parts", "0"),
    "half a window": ("fit", "a.csv", "--search", "1MHz"),
}


@pytest.mark.parametrize("arguments", USAGE.values(), ids=USAGE)
def test_wrong_usage_exits_2(arguments: tuple[str, ...], desk: Path) -> None:
    """Usage, one error, exit 2, nothing written."""
    ran = run(*arguments)
    assert ran.code == 2
    assert ran.out == ""
    assert ran.err.count("Error: ") == 1
    assert "Traceback" not in ran.err
    assert tree(desk) == {}


@pytest.mark.parametrize("arguments", [(), ("limits",), ("record",)])
def test_a_command_without_its_sub_command_shows_its_help(arguments: tuple[str, ...], desk: Path) -> None:
    """Nothing asked for: what there is to ask for, and exit 2."""
    ran = run(*arguments)
    assert ran.code == 2
    assert "Commands:" in ran.out + ran.err


# ── stores ───────────────────────────────────────────────────────────────────────────────────


@pytest.fixture
def foreign(desk: Path) -> Path:
    """An SQLite file of somebody else's."""
    path = desk / "theirs.db"
    with sqlite3.connect(path) as made:
        made.execute("CREATE TABLE records (serial TEXT)")
    made.close()
    return path


@pytest.mark.parametrize(
    "command", [*READERS, ("screen", "L-1", "--limits", str(LIMITS), "--station", "s.toml")], ids=lambda c: c[0]
)
def test_an_sqlite_file_of_somebody_elses_is_left_alone(command: tuple[str, ...], foreign: Path, desk: Path) -> None:
    """Exit 2, named, not a byte of it changed."""
    (desk / "s.toml").write_text(REFUSED, encoding="utf-8")
    before = foreign.read_bytes()
    ran = run(*command, "--store", foreign)
    assert ran.code == 2
    assert "theirs.db" in message_of(ran.err)[0]
    assert "not a ringtrue store" in ran.err
    assert foreign.read_bytes() == before


@pytest.mark.parametrize(
    ("command", "says"),
    [
        (("lot", "L-99"), "no lot 'L-99'"),
        (("history", "MD-9999"), "no serial 'MD-9999'"),
        (("replay", "L-99", "--limits", str(LIMITS)), "no lot 'L-99'"),
        (("replay", LOT, "L-99", "--limits", str(LIMITS)), "no lot 'L-99'"),
        (("lot", LOT, "--html", "gone/x.html"), "gone/x.html"),
        (("lot", LOT, "--csv", "gone/x.csv"), "gone/x.csv"),
    ],
)
@pytest.mark.parametrize("json", [False, True])
def test_unknown_lots_and_serials_exit_2(
    command: tuple[str, ...], says: str, json: bool, screened: Screened, desk: Path
) -> None:
    """One sentence, with --json too, and nothing half done on standard output."""
    ran = run(*command, "--store", screened.store, *(["--json"] if json else []))
    assert ran.code == 2
    assert says in message_of(ran.err)[0]
    assert len(ran.err.splitlines()) == 1
    assert ran.out == ""
    assert tree(desk) == {}


def test_the_store_may_come_from_the_environment_or_the_station_file(
    screened: Screened, desk: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """--store, then RINGTRUE_STORE, then the station file's, then the user's data folder."""
    (desk / "config" / "ringtrue").mkdir(parents=True)
    (desk / "config" / "ringtrue" / "station.toml").write_text(
        REFUSED + f'[store]\nurl = "{screened.store}"\n', encoding="utf-8"
    )
    assert run("lot", LOT).code == 0
    monkeypatch.setenv("RINGTRUE_STORE", "env.db")
    assert "env.db" in run("lot", LOT).err
    assert run("lot", LOT, "--store", screened.store).code == 0
    monkeypatch.delenv("RINGTRUE_STORE")
    (desk / "data" / "ringtrue").mkdir(parents=True)
    (desk / "config" / "ringtrue" / "station.toml").unlink()
    for end in ("", "-wal"):
        if Path(f"{screened.store}{end}").exists():
            shutil.copy(f"{screened.store}{end}", desk / "data" / "ringtrue" / f"ringtrue.db{end}")
    assert run("lot", LOT).code == 0


def test_a_changed_record_is_unsound_and_exits_4(screened: Screened, desk: Path) -> None:
    """A verdict changed behind the store's back: found, exit 4, in text and in JSON."""
    for end in ("", "-wal"):
        if Path(f"{screened.store}{end}").exists():
            shutil.copy(f"{screened.store}{end}", desk / f"copy.db{end}")
    assert run("record", "verify", "--store", "copy.db").code == 0
    with sqlite3.connect("copy.db") as made:
        triggers = [name for (name,) in made.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")]
        for name in triggers:
            made.execute(f'DROP TRIGGER "{name}"')
        changed = made.execute("UPDATE record SET document = replace(document, '\"fail\"', '\"pass\"')").rowcount
    made.close()
    assert changed
    ran = run("record", "verify", "--store", "copy.db")
    assert ran.code == 4
    assert ran.out.startswith("■ UNSOUND")
    found = run("record", "verify", "--store", "copy.db", "--json")
    assert found.code == 4
    assert found.json()["sound"] is False
    assert "changed" in {one["kind"] for one in found.json()["findings"]}


# ── the station ──────────────────────────────────────────────────────────────────────────────


def closed_port() -> int:
    """A port that nobody listens on."""
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1])


@pytest.mark.parametrize("resource", ["TCPIP::127.0.0.1::{port}::SOCKET", "TCPIP::127.0.0.1::hislip0,{port}::INSTR"])
def test_a_refused_connection_exits_3(resource: str, desk: Path) -> None:
    """Nobody listens: station trouble, named; nothing is written."""
    at = resource.format(port=closed_port())
    (desk / "s.toml").write_text(STATION.format(resource=at, dialect="scpi-analyser"), encoding="utf-8")
    ran = run("screen", "L-1", "--limits", LIMITS, "--station", "s.toml", "--store", "s.db", "--operator", "x")
    assert ran.code == 3
    assert len(message_of(ran.err)) == 1
    assert at in ran.err
    assert not (desk / "s.db").exists()


def test_a_silent_instrument_exits_3(desk: Path) -> None:
    """Something listens and never answers: no answer in time, exit 3."""
    with socket.create_server(("127.0.0.1", 0)) as silent:
        at = f"TCPIP::127.0.0.1::{silent.getsockname()[1]}::SOCKET"
        (desk / "s.toml").write_text(STATION.format(resource=at, dialect="scpi-analyser"), encoding="utf-8")
        ran = run("screen", "L-1", "--limits", LIMITS, "--station", "s.toml", "--store", "s.db")
    assert ran.code == 3
    assert at in message_of(ran.err)[0]


@pytest.mark.skipif(os.geteuid() != 0, reason="/proc refuses root as well")
def test_a_store_that_cannot_be_made_exits_3(desk: Path) -> None:
    """A folder that cannot be made is station trouble for whoever must write."""
    (desk / "s.toml").write_text(REFUSED, encoding="utf-8")
    ran = run("screen", "L-1", "--limits", LIMITS, "--station", "s.toml", "--store", "/proc/none/s.db")
    assert ran.code == 3
    assert "/proc/none" in message_of(ran.err)[0]


def test_a_served_station_refuses_other_limits_and_a_second_owner(desk: Path, screened: Screened) -> None:
    """Real processes: a lot under other limits exits 2; a station in use exits 3 and names its owner; 0 when done."""
    with served(desk, "--parts", "2", "--seed", "4") as at:
        common = ("--station", at["station"], "--store", desk / "s.db")
        first = run_process("screen", "L-1", "--limits", LIMITS, *common)
        assert first.code == 0, first.err
        assert first.out.count("● PASS") == 2
        other = run_process("screen", "L-1", "--limits", OTHER_LIMITS, *common)
        assert other.code == 2
        assert "L-1" in message_of(other.err)[0]
        assert "MR-113" in other.err
        from harness.station.lock import StationLock

        lock = StationLock(Path(at["station"]), "ringtrue screen L-9", "2026-03-02T08:00:00.000000Z")
        try:
            second = run_process("screen", "L-1", "--limits", LIMITS, *common)
        finally:
            lock.release()
        assert second.code == 3
        assert "ringtrue screen L-9" in message_of(second.err)[0]
        assert f"process {os.getpid()}" in second.err
        assert "since 2026-03-02 08:00:00 UTC" in second.err
    assert len(run("lot", "L-1", "--store", "s.db", "--json").json()["characteristics"])


def test_a_process_that_cannot_write_to_a_closed_pipe_says_nothing(desk: Path) -> None:
    """`ringtrue … | head` ends quietly."""
    import subprocess

    from cli_desk import COMMAND

    script = f"{COMMAND} limits explain {LIMITS} | true"
    done = subprocess.run(["bash", "-c", script], capture_output=True, text=True, timeout=60, check=False)
    assert (done.stdout, done.stderr) == ("", "")


def test_a_demo_does_not_write_over_an_earlier_one(desk: Path) -> None:
    """A folder that holds a store is refused by name, and stays as it is."""
    (desk / "d").mkdir()
    (desk / "d" / "ringtrue.db").write_text("precious", encoding="utf-8")
    ran = run("demo", "--out", "d", "--parts", "1")
    assert ran.code == 2
    assert message_of(ran.err)[0].startswith("ringtrue: d: ")
    assert tree(desk) == {"d": "", "d/ringtrue.db": tree(desk)["d/ringtrue.db"]}


def test_the_version_is_printed() -> None:
    """--version prints one line and exits 0."""
    ran = run("--version")
    assert ran.code == 0
    assert ran.out.startswith("ringtrue ")
