"""The barcode scanner: the serial on the part's label and a carriage return.

PURE. It sends nothing by itself: ``due`` is asked after each change at the bench, ``scan`` when somebody pulls the
trigger.
"""

from __future__ import annotations

from sim_instruments.bench import Bench
from sim_instruments.faults import Event, FaultBook


class Scanner:
    """Shares the bench with the handler."""

    def __init__(self, bench: Bench, faults: FaultBook) -> None:
        self._bench = bench
        self._faults = faults

    def due(self) -> bytes:
        """The bytes of a scan that is due, or none."""
        return self.scan() if self._bench.scan_due else b""

    def scan(self) -> bytes:
        """Read the label of the part in the fixture; raises BenchRefusal when there is none."""
        serial = self._bench.read_label()
        if "scan-lost" in self._faults.strikes(Event(frozenset({"scan"}))):
            return b""
        return serial.encode("utf-8") + b"\r"
