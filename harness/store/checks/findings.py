"""One thing found wrong in a store. TYPES."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Finding:
    """``kind``: "changed", "missing", "inserted", "reordered", "tail-cut", "schema" or "unreadable".

    ``chain``, ``seq`` and ``serial`` name the record where one is meant; ``text`` is a sentence.
    """

    kind: str
    chain: str | None
    seq: int | None
    serial: str | None
    text: str
