"""Where files lie when nobody says, and how a station is put together."""

from __future__ import annotations

import socket
from pathlib import Path

import platformdirs
import pytest

from harness.errors import SetupError, StationError
from harness.judging.limit_file import parse_limits
from harness.records import Conditions
from harness.station import find_limits, open_station, parse_station, station_path, store_url

NOW = "2026-03-02T08:00:00.000000Z"
STATION = """\
format = 1
[identity]
station = "bay 2"
[bench.meter]
resource = "{resource}"
dialect = "scpi-analyser"
timeout = "2 s"
"""


@pytest.fixture
def folders(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The user's data and configuration folders, under ``tmp_path``."""
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "data"))
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    return tmp_path


@pytest.mark.parametrize(
    ("option", "variable", "station", "found"),
    [
        ("o.db", "v.db", "s.db", "o.db"),
        (None, "v.db", "s.db", "v.db"),
        (None, None, "s.db", "s.db"),
        (None, "", "s.db", "s.db"),
        ("o.db", None, None, "o.db"),
        (None, "v.db", None, "v.db"),
    ],
)
def test_store_by_precedence(option: str | None, variable: str | None, station: str | None, found: str) -> None:
    """The option, then RINGTRUE_STORE, then the station file."""
    environment = {} if variable is None else {"RINGTRUE_STORE": variable}
    assert store_url(option, environment, station) == found


def test_store_of_the_user(folders: Path) -> None:
    """Nothing said: the user's data folder, which asking does not make."""
    assert store_url(None, {}) == str(platformdirs.user_data_path("ringtrue") / "ringtrue.db")
    assert store_url(None, {}) == str(folders / "data" / "ringtrue" / "ringtrue.db")
    assert list(folders.iterdir()) == []


def test_station_by_precedence(folders: Path) -> None:
    """The option, then RINGTRUE_STATION, then the user's configuration folder."""
    paths = {name: folders / name for name in ("option.toml", "variable.toml")}
    default = folders / "config" / "ringtrue" / "station.toml"
    default.parent.mkdir(parents=True)
    for path in (*paths.values(), default):
        path.touch()
    environment = {"RINGTRUE_STATION": str(paths["variable.toml"])}
    assert station_path(str(paths["option.toml"]), environment) == paths["option.toml"]
    assert station_path(None, environment) == paths["variable.toml"]
    assert station_path(None, {}) == default


@pytest.mark.parametrize("option", [None, "nowhere.toml", "."])
def test_no_station_file_is_a_set_up_error(folders: Path, option: str | None) -> None:
    """Exit code 2, the place that was looked at, and how to get one. A named file is not replaced by another."""
    with pytest.raises(SetupError, match="there is no station file here") as caught:
        station_path(option, {})
    assert caught.value.exit_code == 2
    assert caught.value.place == (option or str(folders / "config" / "ringtrue" / "station.toml"))
    assert "RINGTRUE_STATION" in caught.value.remedy


@pytest.mark.parametrize("name", ["mist-discs/MD-1650.toml", "mesh-rings/MR-113.toml", "bolt-clamped/BD-40.toml"])
def test_limit_files_that_come_along(name: str) -> None:
    """Each is found and is a limit file of the part number it is named for."""
    path = find_limits(name)
    assert parse_limits(path.read_text(encoding="utf-8"), name).part_number == path.stem


def test_limit_file_that_does_not_come_along() -> None:
    """Named, with the remedy."""
    with pytest.raises(SetupError, match=r"'no/such\.toml' is not installed"):
        find_limits("no/such.toml")


def test_station_opens_lock_then_store_then_bench(tmp_path: Path) -> None:
    """Nobody answers at the meter: StationError; the store made for it is taken back, the lock is free again."""
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        path = tmp_path / "station.toml"
        path.write_text(STATION.format(resource=f"TCPIP::127.0.0.1::{taken.getsockname()[1]}::SOCKET"))
        spec = parse_station(path.read_text(), str(path))
        for _ in range(2):
            with pytest.raises(StationError, match=r"127\.0\.0\.1"):
                open_station(spec, path, str(tmp_path / "s.db"), "test", NOW, "ringtrue test")
    assert not (tmp_path / "s.db").exists()


def test_station_file_that_names_what_cannot_be_writes_nothing(tmp_path: Path) -> None:
    """A wrong resource is found before lock and store: exit code 2, and only the station file lies there."""
    path = tmp_path / "station.toml"
    path.write_text(STATION.format(resource="COM1"))
    spec = parse_station(path.read_text(), str(path))
    with pytest.raises(SetupError, match="COM1"):
        open_station(spec, path, str(tmp_path / "s.db"), "test", NOW, "ringtrue test")
    assert list(tmp_path.iterdir()) == [path]


def test_store_that_is_not_ours_comes_before_the_bench(tmp_path: Path) -> None:
    """A file that is no store: SetupError, left as it is; no instrument was looked for; the lock is free again."""
    path, foreign = tmp_path / "station.toml", tmp_path / "notes.txt"
    path.write_text(STATION.format(resource="TCPIP::127.0.0.1::1::SOCKET"))
    foreign.write_text("shopping list")
    spec = parse_station(path.read_text(), str(path))
    for _ in range(2):
        with pytest.raises(SetupError, match="not a ringtrue store"):
            open_station(spec, path, str(foreign), "test", NOW, "ringtrue test")
    assert foreign.read_text() == "shopping list"


def test_conditions_of_a_station(tmp_path: Path) -> None:
    """The station file's temperature and its u, the lot's age; drive comes with the sweep."""
    from harness.station.opened import Station

    text = (
        STATION.format(resource="TCPIP::h::1::SOCKET")
        + '[conditions]\ntemperature = "21 degC"\nu_temperature = "1 K"\n'
    )
    station = Station(parse_station(text, "station.toml"), None, None, None)  # type: ignore[arg-type]
    assert station.name == "bay 2"
    assert station.conditions(48.0) == Conditions(None, 21.0, 1.0, 48.0)
    assert station.conditions(None).age_h is None
