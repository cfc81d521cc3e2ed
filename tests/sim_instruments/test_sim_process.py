"""``python -m sim_instruments serve`` as a process: ready line, station file, real parts, clean ends, bad options."""

from __future__ import annotations

import json
import re
import signal
import socket
import subprocess
import sys
import tomllib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import serial

from sim_instruments.faults import TARGETS
from sim_instruments.physics.fixture import Fixture, embed
from sim_instruments.physics.lots import make_lot
from sim_instruments.tray import tray_of

Start = Callable[..., tuple[subprocess.Popen[str], dict[str, Any]]]


@pytest.fixture
def start() -> Iterator[Start]:
    """Start a bench process; its ready line. Told to end if the test did not end it."""
    running: list[subprocess.Popen[str]] = []

    def started(*arguments: str) -> tuple[subprocess.Popen[str], dict[str, Any]]:
        process = subprocess.Popen(
            [sys.executable, "-m", "sim_instruments", "serve", *arguments],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        running.append(process)
        return process, json.loads(process.stdout.readline())  # type: ignore[union-attr]

    yield started
    for process in running:
        process.terminate()
        process.communicate(timeout=10)


def run(*arguments: str) -> subprocess.CompletedProcess[str]:
    """Run the module to its end."""
    return subprocess.run(
        [sys.executable, "-m", "sim_instruments", *arguments], capture_output=True, text=True, timeout=20
    )


def refused(address: tuple[str, int]) -> bool:
    """Whether nobody listens there any more."""
    try:
        socket.create_connection(address, 1).close()
    except ConnectionRefusedError:
        return True
    return False


def test_ready_line_and_clean_end_on_sigterm(start: Start) -> None:
    """One line, every address alive, the station file as stated; SIGTERM: exit 0, silence, ports and file gone."""
    process, at = start("--parts", "2", "--seed", "5")
    assert list(at) == ["ready", "hislip", "socket", "scanner", "handler", "control", "station"]
    assert at["ready"] is True
    assert re.fullmatch(r"TCPIP::127\.0\.0\.1::hislip0,\d+::INSTR", at["hislip"])
    assert re.fullmatch(r"TCPIP::127\.0\.0\.1::\d+::SOCKET", at["socket"])
    station = Path(at["station"])
    document = tomllib.loads(station.read_text(encoding="utf-8"))
    assert document["bench"]["meter"]["resource"] == at["hislip"]
    assert document["bench"]["scanner"] == {"port": at["scanner"], "baud": 9600}
    assert document["bench"]["handler"] == {"port": at["handler"], "baud": 9600}
    ports = [int(at["hislip"].split(",")[1].split("::")[0]), int(at["socket"].split("::")[2])]
    ports.append(int(at["control"].split(":")[1]))
    clients = [socket.create_connection(("127.0.0.1", port), 5) for port in ports]
    process.send_signal(signal.SIGTERM)
    assert process.communicate(timeout=10) == ("", "")
    assert process.returncode == 0
    for client in clients:
        client.close()
    assert all(refused(("127.0.0.1", port)) for port in ports)
    assert not station.parent.exists()


def test_directory_is_kept_and_ctrl_c_is_clean(start: Start, tmp_path: Path) -> None:
    """With --dir the station file lies there and stays; SIGINT ends as SIGTERM does."""
    process, at = start("--dir", str(tmp_path))
    assert Path(at["station"]) == tmp_path / "station.toml"
    process.send_signal(signal.SIGINT)
    assert process.communicate(timeout=10) == ("", "")
    assert process.returncode == 0
    assert (tmp_path / "station.toml").is_file()


def test_bench_outlives_its_standard_input(start: Start) -> None:
    """Its standard input is closed from the start, and it serves."""
    _, at = start()
    with socket.create_connection(("127.0.0.1", int(at["socket"].split("::")[2])), 5) as line:
        line.sendall(b"*OPC?\n")
        assert line.recv(2) == b"1\n"


def test_part_measured_over_the_wire_is_the_part_of_the_lot(start: Start, tmp_path: Path) -> None:
    """From a lot file, through handler, scanner and TCP: the curve of that very part in that fixture; and its truth."""
    lot = tmp_path / "lot.toml"
    lot.write_text(
        'family = "MD-1650"\nseed = 11\n[[part]]\ncount = 1\n[[part]]\ndefect = "open-lead"\n', encoding="utf-8"
    )
    _, at = start("--lot", str(lot))
    with (
        serial.Serial(at["handler"], 9600, timeout=5) as handler,
        serial.Serial(at["scanner"], 9600, timeout=5) as scanner,
    ):
        handler.write(b"READY\n")
        assert handler.readline() == b"PRESENT\n"
        assert scanner.read_until(b"\r") == b"MD-0001\r"
    host, port = at["control"].split(":")
    with socket.create_connection((host, int(port)), 5) as control, control.makefile("rw") as asked:
        asked.write('{"truth": null}\n')
        asked.flush()
        truth = json.loads(asked.readline())["truth"]
    assert [truth[serial]["defect"] for serial in truth] == ["sound", "open-lead"]
    assert truth["MD-0002"]["values"]["fs"] is None
    fs = truth["MD-0001"]["values"]["fs"]
    f_hz = np.linspace(0.99 * fs, 1.01 * fs, 401)
    with (
        socket.create_connection(("127.0.0.1", int(at["socket"].split("::")[2])), 5) as line,
        line.makefile("rwb") as talk,
    ):
        talk.write(b"LIST:FREQ " + ",".join(map(repr, f_hz.tolist())).encode() + b";:AVER:COUN 100;:INIT;:TRAC? IMP\n")
        talk.flush()
        numbers = np.array([float(text) for text in talk.readline().split(b",")])
    z_ohm = numbers[::2] + 1j * numbers[1::2]
    document = tomllib.loads(Path(at["station"]).read_text(encoding="utf-8"))["fixture"]
    s = 2j * np.pi * f_hz
    taken_off = z_ohm - float(document["series_resistance"].split()[0])
    taken_off = taken_off - s * 1e-9 * float(document["series_inductance"].split()[0])
    y = 1 / taken_off - s * 1e-12 * float(document["stray_capacitance"].split()[0])
    # the conductance peak of one mode far from others lies at fs, its height is 1/R1
    assert f_hz[np.argmax(y.real)] == pytest.approx(fs, rel=3e-4)
    assert np.max(y.real) == pytest.approx(1 / truth["MD-0001"]["values"]["r1"], rel=0.01)


def test_tray_shows_each_part_through_the_fixture() -> None:
    """What the meter sees is the physics room's part in its fixture, with the drive handed on."""
    part, fixture, f_hz = make_lot("BD-40", 1, 3)[0], Fixture(0.2, 50e-9, 5e-12), np.linspace(38e3, 42e3, 11)
    tray = tray_of([part], fixture)
    for drive_v in (0.1, 20.0):
        expected = embed(part.impedance(f_hz, 23.0, drive_v), f_hz, fixture)
        assert np.array_equal(tray.lot[0].impedance(f_hz, drive_v), expected)
    assert not np.array_equal(tray.lot[0].impedance(f_hz, 0.1), tray.lot[0].impedance(f_hz, 20.0))
    assert tray.empty(np.array([1e6]), 1.0)[0].imag == pytest.approx(-1 / (2 * np.pi * 1e6 * 5.4e-12), rel=1e-3)
    assert (tray.fixture.rs_ohm, tray.fixture.ls_h, tray.fixture.cp_f) == (0.2, 50e-9, 5e-12)


def test_faults_file_is_armed(start: Start, tmp_path: Path) -> None:
    """What the file asks for strikes."""
    faults = tmp_path / "faults.toml"
    faults.write_text('[[fault]]\nname = "wrong-identity"\n', encoding="utf-8")
    _, at = start("--faults", str(faults))
    with socket.create_connection(("127.0.0.1", int(at["socket"].split("::")[2])), 5) as line:
        line.sendall(b"*IDN?\n")
        assert line.recv(100) == b"Ashgrove Test Works,PS-3,0,0.9\n"


@pytest.mark.parametrize(
    ("arguments", "text", "sentence"),
    [
        (["--lot", "{file}"], 'family = "XX-1"\nseed = 1\n[[part]]\n', "bad.toml: "),
        (["--lot", "{file}"], "family = ", "bad.toml: not valid TOML"),
        (["--faults", "{file}"], '[[fault]]\nname = "gremlin"\n', "bad.toml: there is no fault 'gremlin'"),
        (["--lot", "{file}.not"], "", "bad.toml.not: cannot be read"),
        (["--dir", "{file}.not"], "", "there is no such directory"),
        (["--parts", "0"], "", "'0' is not a whole number from 1 up"),
        (["--seed", "x"], "", "'x' is not a whole number"),
        (["--ms-per-point", "nan"], "", "'nan' is not a number of milliseconds"),
        (["--family", "XX-1"], "", "invalid choice: 'XX-1'"),
    ],
)
def test_wrong_option_or_file_is_one_sentence(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, arguments: list[str], text: str, sentence: str
) -> None:
    """Exit 2, the place and the trouble on standard error, no traceback."""
    from sim_instruments.__main__ import main

    bad = tmp_path / "bad.toml"
    bad.write_text(text, encoding="utf-8")
    try:
        code = main(["serve", *(argument.replace("{file}", str(bad)) for argument in arguments)])
    except SystemExit as end:  # argparse's own way out
        code = int(end.code or 0)
    captured = capsys.readouterr()
    assert code == 2
    assert sentence in captured.err
    assert captured.out == ""


def test_help_has_an_example_and_the_docs_name_every_fault() -> None:
    """--help shows how to start and what is printed; the faults' own page lists them all."""
    shown = run("serve", "--help")
    assert shown.returncode == 0
    assert "python -m sim_instruments serve --parts 12 --seed 7" in shown.stdout
    assert '"ready": true' in shown.stdout
    import sim_instruments.faults as faults

    assert all(name in (faults.__doc__ or "") for name in TARGETS)


def test_no_process_is_left_behind(start: Start) -> None:
    """The bench starts no children."""
    process, _ = start()
    assert Path(f"/proc/{process.pid}/task/{process.pid}/children").read_text() == ""
