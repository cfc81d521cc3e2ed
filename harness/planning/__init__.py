"""Where to measure: limits and what is known so far → the next frequencies.

PURE. May import fitting, analysis, judging, circuits, records. ``two_pass`` first walks the whole search window,
then puts as many points again across the resonance it saw. To add a strategy: a function here, its name in the
limit files' schema, a row in the tests that try every strategy on every kind of part.
"""

from harness.planning.passes import locate, resolve

__all__ = ["locate", "resolve"]
