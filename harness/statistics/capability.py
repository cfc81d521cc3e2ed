"""How one characteristic spreads over a lot, and how that spread fits between its limits.

Pp = (max − min)/6s and Ppk = the least of (max − mean)/3s and (mean − min)/3s, with the overall standard deviation s
(n − 1): performance indices, because a lot screened in one go has no rational subgroups to take a within-group
deviation from. (NIST/SEMATECH e-Handbook of Statistical Methods, 6.1.6, gives the same two as Cp and Cpk.)
The confidence limits take the values as normally distributed.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.special import chdtri, ndtri

from harness.characteristics import CHARACTERISTICS
from harness.records import Floats
from harness.statistics.parts import Part, first_valid
from harness.statistics.yields import CONFIDENCE


class Index(NamedTuple):
    """A capability index with its confidence limits; all None where it cannot be stated."""

    value: float | None
    low: float | None
    high: float | None


NO_INDEX = Index(None, None, None)


@dataclass(frozen=True, slots=True)
class Capability:
    """One characteristic over a lot, in ``unit`` (SI). ``values`` are those it was made from, in the order of parts.

    ``least`` and ``greatest`` are the limits held against, None where there is none. ``population`` says over what it
    was taken; ``note`` what is missing and why, None when nothing is.
    """

    characteristic: str
    element: int
    unit: str
    least: float | None
    greatest: float | None
    values: tuple[float, ...]
    mean: float | None
    sd: float | None
    min: float | None
    max: float | None
    median: float | None
    pp: Index
    ppk: Index
    population: str
    note: str | None

    @property
    def n(self) -> int:
        return len(self.values)


def capability(
    characteristic: str,
    parts: Sequence[Part],
    least: float | None = None,
    greatest: float | None = None,
    *,
    element: int = 1,
    confidence: float = CONFIDENCE,
) -> Capability:
    """``characteristic`` over every part's first valid attempt (one that came to pass or fail), failed parts included.

    A part without a valid attempt, or whose first valid attempt has no such value, is not in the population, which
    says how many those are: a value from a later try would make the lot look better than it came. ``least`` and
    ``greatest`` are the limits in SI units.
    """
    valid = [attempt for part in parts if (attempt := first_valid(part, element)) is not None]
    found = [attempt.values.get(characteristic, (None, None))[0] for attempt in valid]
    values = np.array([value for value in found if value is not None and math.isfinite(value)], dtype=np.float64)
    mean, sd = _mean(values), _sd(values)
    pp, ppk = (
        _pp(values.size, sd, least, greatest, confidence),
        _ppk(values.size, mean, sd, least, greatest, confidence),
    )
    return Capability(
        characteristic=characteristic,
        element=element,
        unit=CHARACTERISTICS[characteristic].unit,
        least=least,
        greatest=greatest,
        values=tuple(values.tolist()),
        mean=mean,
        sd=sd,
        min=float(values.min()) if values.size else None,
        max=float(values.max()) if values.size else None,
        median=float(np.median(values)) if values.size else None,
        pp=pp,
        ppk=ppk,
        population=_population(len(parts), len(valid), int(values.size)),
        note=_note(values, sd, least, greatest, pp, ppk),
    )


# ── mean and spread ──────────────────────────────────────────────────────────────────────────


def _mean(values: Floats) -> float | None:
    """The mean, from deviations from the first value: equal values have exactly that mean."""
    return float(values[0] + np.mean(values - values[0])) if values.size else None


def _sd(values: Floats) -> float | None:
    """Standard deviation with n − 1, two passes; None for fewer than two values, exactly 0 when all are equal."""
    if values.size < 2:
        return None
    shifted = values - values[0]
    scale = float(np.abs(shifted).max())
    if scale == 0.0:
        return 0.0
    return scale * float(np.std(shifted / scale, ddof=1))  # scaled, so that squares neither vanish nor overflow


# ── indices ──────────────────────────────────────────────────────────────────────────────────


def pp_limits(pp: float, n: int, confidence: float = CONFIDENCE) -> tuple[float, float]:
    """Two-sided confidence limits of Pp from ``n`` normal values: Pp √(χ²(α/2 or 1 − α/2; n − 1)/(n − 1)).

    From the chi-square distribution of (n − 1)s²/σ²; the form is in D. C. Montgomery, Introduction to Statistical
    Quality Control, and on many public pages.

    >>> [round(limit, 4) for limit in pp_limits(2.285714, 20)]
    [1.5649, 3.0056]
    """
    alpha, dof = 1.0 - confidence, n - 1
    quantiles = (chdtri(dof, 1.0 - alpha / 2.0), chdtri(dof, alpha / 2.0))  # chdtri takes the upper tail
    low, high = (pp * math.sqrt(float(quantile) / dof) for quantile in quantiles)
    return low, high


def ppk_limits(ppk: float, n: int, confidence: float = CONFIDENCE) -> tuple[float, float]:
    """Two-sided approximate confidence limits of Ppk from ``n`` normal values: Ppk ± z √(1/9n + Ppk²/2(n − 1)).

    A. F. Bissell, "How reliable is your capability index?", Applied Statistics 39 (1990) 331–340.

    >>> [round(limit, 4) for limit in ppk_limits(0.625, 30)]
    [0.4248, 0.8252]
    """
    z = float(ndtri((1.0 + confidence) / 2.0))
    half = z * math.sqrt(1.0 / (9.0 * n) + ppk * ppk / (2.0 * (n - 1)))
    return ppk - half, ppk + half


def _pp(n: int, sd: float | None, least: float | None, greatest: float | None, confidence: float) -> Index:
    if not sd or least is None or greatest is None:
        return NO_INDEX
    value = (greatest - least) / (6.0 * sd)
    return _stated(value, pp_limits(value, n, confidence))


def _ppk(
    n: int, mean: float | None, sd: float | None, least: float | None, greatest: float | None, confidence: float
) -> Index:
    if mean is None or not sd:
        return NO_INDEX
    room = [greatest - mean] if greatest is not None else []
    room += [mean - least] if least is not None else []
    if not room:
        return NO_INDEX
    value = min(room) / (3.0 * sd)
    return _stated(value, ppk_limits(value, n, confidence))


def _stated(value: float, limits: tuple[float, float]) -> Index:
    """An index beyond what a float holds, from a spread next to nothing, is none."""
    return Index(value, *limits) if all(map(math.isfinite, (value, *limits))) else NO_INDEX


# ── in words ─────────────────────────────────────────────────────────────────────────────────


def _population(parts: int, valid: int, with_value: int) -> str:
    head = f"first valid attempt of {with_value} of {parts} parts, failed parts included"
    left_out = []
    if parts - valid:
        left_out.append(f"{parts - valid} without a valid attempt")
    if valid - with_value:
        left_out.append(f"{valid - with_value} without a value")
    return f"{head}; left out: {', '.join(left_out)}" if left_out else head


def _note(
    values: Floats, sd: float | None, least: float | None, greatest: float | None, pp: Index, ppk: Index
) -> str | None:
    """Why a number is missing, in a sentence."""
    if values.size == 0:
        return "No part has a value."
    if sd is None:
        return "One value has no spread, so there is no capability."
    if sd == 0.0:
        return f"All {values.size} values are equal, so no capability can be stated."
    if least is None and greatest is None:
        return "No limits are set, so there is no capability."
    two_sided = least is not None and greatest is not None
    if ppk.value is None or (two_sided and pp.value is None):
        return f"The {values.size} values differ by next to nothing, so no capability can be stated."
    if not two_sided:
        side = "highest" if least is None else "lowest"
        return f"Only a {side} allowed value is set: Ppk is of that side, Pp would need both."
    return None
