"""Where files lie when nobody says: the store, the station file, the limit files that come along."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import platformdirs

from harness.errors import SetupError


def store_url(option: str | None, environment: Mapping[str, str], station: str | None = None) -> str:
    """The store: ``--store``, then RINGTRUE_STORE, the station file, the user's data folder."""
    default = platformdirs.user_data_path("ringtrue") / "ringtrue.db"
    return option or environment.get("RINGTRUE_STORE") or station or str(default)


def station_path(option: str | None, environment: Mapping[str, str]) -> Path:
    """The station file: ``--station``, then RINGTRUE_STATION, the user's configuration folder. Raises SetupError."""
    default = platformdirs.user_config_path("ringtrue") / "station.toml"
    path = Path(option or environment.get("RINGTRUE_STATION") or default)
    if not path.is_file():
        raise SetupError(
            "there is no station file here.",
            place=str(path),
            remedy="Give one with --station, or set RINGTRUE_STATION. "
            "'python -m sim_instruments serve' starts a simulated bench and writes one.",
        )
    return path


def find_limits(name: str) -> Path:
    """A limit file that comes along, by its path below ``limits/``: in the wheel, else in the checkout."""
    package = Path(__file__).resolve().parents[1]
    for folder in (package / "_limits", package.parent / "limits"):
        if (folder / name).is_file():
            return folder / name
    raise SetupError(f"the limit file '{name}' is not installed.", place=str(package), remedy="Reinstall ringtrue.")
