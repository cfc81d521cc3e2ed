"""Everything wired: lock, store and bench of one station, opened in that order and closed in the other."""

from __future__ import annotations

from contextlib import ExitStack
from pathlib import Path

from harness.bench import Bench, check
from harness.errors import SetupError, StationError
from harness.records import Conditions, Correction
from harness.station.file import StationSpec
from harness.station.lock import StationLock
from harness.store import Store, open_store


class Station:
    """An opened station. Use it as a context."""

    def __init__(self, spec: StationSpec, bench: Bench, store: Store, closing: ExitStack) -> None:
        self.spec = spec
        self.bench = bench
        self.store = store
        self._closing = closing

    @property
    def name(self) -> str:
        return self.spec.name

    @property
    def correction(self) -> Correction:
        return self.spec.correction

    def conditions(self, age_h: float | None) -> Conditions:
        """What parts are measured under here; ``age_h`` hours since poling, where known."""
        return Conditions(
            temperature_degc=self.spec.temperature_degc, u_temperature_k=self.spec.u_temperature_k, age_h=age_h
        )

    def __enter__(self) -> Station:
        return self

    def __exit__(self, *_: object) -> None:
        self._closing.close()


def open_station(spec: StationSpec, path: Path, store_url: str, command: str, now: str, made_by: str) -> Station:
    """Take the station's lock, open its store for writing and its bench. Raises SetupError or StationError.

    The store comes before the bench: nothing may be measured that could not be recorded. A station file that names
    what cannot be is refused before either, and a store that was made for a bench that then does not answer is taken
    back, so that a start that fails writes nothing.
    """
    check(spec.devices)
    with ExitStack() as stack:
        lock = StationLock(path, command, now)
        stack.callback(lock.release)
        new = not Path(store_url).exists()
        store = open_store(store_url, mode="write", now=now, made_by=made_by)
        stack.callback(store.close)
        try:
            bench = stack.enter_context(Bench(spec.devices))
        except (SetupError, StationError):
            if new and not store.lots():
                stack.close()
                _take_back(Path(store.place))
            raise
        return Station(spec, bench, store, stack.pop_all())
    raise AssertionError("unreachable")


def _take_back(store: Path) -> None:
    """Remove a store that this very start made and nothing was written to, with its log."""
    for path in (store, store.with_name(store.name + "-wal"), store.with_name(store.name + "-shm")):
        path.unlink(missing_ok=True)
