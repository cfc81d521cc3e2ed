"""The station: its file, its lock, its store and its opened bench. The composition root.

SHELL. May import bench, store and everything pure. ``file`` reads the station file, ``lock`` lets one process own a
station, ``places`` knows where files lie when nobody says, ``opened`` puts it all together.
To add a role on the bench: its table in ``file``, its opening in ``bench``.
"""

from harness.station.file import StationSpec, parse_station
from harness.station.opened import Station, open_station
from harness.station.places import find_limits, station_path, store_url

__all__ = ["Station", "StationSpec", "find_limits", "open_station", "parse_station", "station_path", "store_url"]
