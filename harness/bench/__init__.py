"""The bench: what the station file names, opened through ``drivers`` and spoken to in the harness's own words.

SHELL, and the only importer of ``drivers``. Every DriverError ends here: at start-up as a SetupError or
StationError, during a part as a BenchFault, which is that part's no verdict. To add a role: its part of the
station file in ``station``, its opening here.
"""

from harness.bench.bench import Bench, BenchFault, check
from harness.bench.devices import Device, Devices

__all__ = ["Bench", "BenchFault", "Device", "Devices", "check"]
