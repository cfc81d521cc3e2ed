"""What statistics need of one attempt at one part. TYPES."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Attempt:
    """One try at one element of a part.

    ``number`` counts the tries at this serial from 1; ``verdict`` is "pass", "fail" or "no verdict"; ``final`` False:
    another try follows; ``at`` is ISO 8601. ``reasons`` are (code, characteristic or None), the first one first.
    ``values`` are (value, standard uncertainty) by characteristic id, SI, as judged; None where it does not exist.
    """

    serial: str
    number: int
    element: int
    verdict: str
    grade: str | None
    final: bool
    at: str
    reasons: tuple[tuple[str, str | None], ...]
    values: Mapping[str, tuple[float | None, float | None]]
