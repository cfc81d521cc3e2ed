"""Limit-file text → LimitSet; Fit × LimitSet → Judgement; risk; application figures.

PURE: text and numbers in, values out; time and files stay outside. May import circuits, correction, records,
characteristics, quantities, errors, toml, pydantic, NumPy and scipy.special; never a file, clock or wire.

- ``limit_file`` reads limits through ``harness.toml``: ``schema`` (keys and values), ``limit_checks`` (keys against
  each other), ``loading`` (→ LimitSet);
- ``judge`` decides: ``contact`` and ``referring`` before it, ``requirements`` one by one, ``wording`` for sentences;
- ``risk`` is for a lot, ``application`` for board and droplets, ``explaining`` for people who read limits.

To add a key: its model in ``schema``, its meaning in ``limit_checks`` and ``loading``, its row in ``limits/README.md``,
and ``limits/limits.schema.json`` made anew (a test says how). To add a reason: a code where it is decided, and what the
operator does about it in ``wording``.
"""

from harness.judging.judge import judge
from harness.judging.limit_file import limits_schema, parse_limits

__all__ = ["judge", "limits_schema", "parse_limits"]
