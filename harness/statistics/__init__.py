"""Attempts → what can be said of a lot: yields, why parts fail, how capable each characteristic is.

PURE: numbers in, numbers out; no clock, file, wire or chance. May import judging, records, characteristics,
quantities, errors, NumPy and scipy.special; never scipy.stats (a second of import) nor anything that draws.

- ``attempts`` is what a lot is made of, ``parts`` puts the attempts at one part together;
- ``yields`` counts, ``capability`` speaks of one characteristic, ``lot`` is the door to both.

A statistic that cannot be given is None with a sentence, never a warning or NaN. To add one: a module with its
formula and source in the docstring, its published check in ``tests/statistics``, a field of ``LotStatistics`` and its
key in ``lot.to_json``.
"""

from harness.statistics.attempts import Attempt
from harness.statistics.lot import LotStatistics, summarise, to_json

__all__ = ["Attempt", "LotStatistics", "summarise", "to_json"]
