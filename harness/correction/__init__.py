"""From what an instrument says to the part's own impedance, and how uncertainty follows.

PURE: numbers in, numbers out. May import circuits, records, characteristics, quantities, errors and
NumPy; nothing with a file, clock or wire. ``conversions`` turns every quantity that instruments report
into impedance and back, ``fixture`` takes the fixture off and puts it on, ``propagation`` carries
covariances along (JCGM 100). To add a quantity: a mirrored pair in ``conversions`` with the formula's
source, and its row in the enumerated round-trip test; a log column also needs its row in
``logs.columns``.
"""

from harness.correction.fixture import Sensitivity, correct, correction_sensitivity, embed, from_open_short

__all__ = ["Sensitivity", "correct", "correction_sensitivity", "embed", "from_open_short"]
