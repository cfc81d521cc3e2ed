"""One value against one requirement: the decision rules of JCGM 106 and ISO 14253-1.

Guarded, with guard band w = k·u and k = Φ⁻¹(1 − max_false_accept), one-sided: inside both limits by w is accepted,
beyond one of them by w is proven outside, anything between is too close to prove (JCGM 106:2012 §8.3; ISO 14253-1).
Values are judged unrounded; equal to a limit, or to the zone's edge, is inside.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

from scipy.special import ndtri

from harness.errors import SetupError
from harness.judging import wording
from harness.records import Caveat, LimitSet, Reason, Requirement, Value, Verdict

PASS, FAIL, NONE = Verdict.PASS, Verdict.FAIL, Verdict.NONE


@dataclass(frozen=True, slots=True)
class Decision:
    """What one requirement comes to. ``proven``: a fail beyond the guard band, or one that needs none."""

    verdict: Verdict
    reason: Reason | None = None
    proven: bool = False


def coverage(requirement: Requirement) -> float:
    """k = Φ⁻¹(1 − max_false_accept): how many standard uncertainties the guard band is wide.

    >>> round(coverage(Requirement("fs", None, 1.0, "Hz")), 6)
    1.644854
    """
    return float(-ndtri(requirement.max_false_accept))


def acceptance_zone(requirement: Requirement, u: float) -> tuple[float, float] | None:
    """Lowest and highest accepted value (±∞ where there is no limit) at standard uncertainty ``u``; None when empty."""
    guard = coverage(requirement) * u if requirement.rule == "guarded" else 0.0
    low = -math.inf if requirement.min is None else requirement.min + guard
    high = math.inf if requirement.max is None else requirement.max - guard
    return (low, high) if low <= high else None


def greatest_u(requirement: Requirement) -> float:
    """The greatest standard uncertainty (SI) at which something is still accepted; ∞ for a one-sided requirement."""
    if requirement.min is None or requirement.max is None or requirement.rule == "simple":
        return math.inf
    return (requirement.max - requirement.min) / (2.0 * coverage(requirement))


def refuse_empty_zones(limits: LimitSet, expected_u: Mapping[str, float]) -> None:
    """Raise SetupError when no part could pass a requirement at its expected standard uncertainty (SI, by id)."""
    sentences = []
    for requirement in limits.requirements:
        u = expected_u.get(requirement.characteristic)
        if u is not None and acceptance_zone(requirement, u) is None:
            sentences.append(_empty_sentence(requirement, u))
    if sentences:
        place = f"limits for {limits.part_number}, revision {limits.revision}"
        remedy = "Measure better, widen the limits, or accept more risk."
        raise SetupError(" ".join(sentences), place=place, remedy=remedy)


def _empty_sentence(requirement: Requirement, u: float) -> str:
    return (
        f"No part can pass {wording.label(requirement)}: at u {wording.amount(u, requirement)} nothing is left between "
        f"the guard bands; u below {wording.amount(greatest_u(requirement), requirement)} would do."
    )


def decide(requirement: Requirement, value: Value | None, caveats: tuple[Caveat, ...] = ()) -> Decision:
    """Judge one value; ``caveats`` tell a value that the part does not have from one that was not reached."""
    if value is None or value.value is None or not math.isfinite(value.value):
        return _missing(requirement, caveats)
    u = value.u if value.u is not None and math.isfinite(value.u) and value.u >= 0 else None
    if u is None:
        if requirement.rule == "guarded" or requirement.u_max is not None:
            text = f"the uncertainty of {wording.label(requirement)} is not known"
            return Decision(NONE, Reason("no-uncertainty", requirement.characteristic, value.value, None, text))
        u = 0.0
    if any(c.code == "extrapolated" and c.characteristic == requirement.characteristic for c in caveats):
        return _missing(requirement, caveats)
    floor = [c for c in caveats if c.code == "floor" and c.characteristic == requirement.characteristic]
    # an absence is a statement with a floor under any rule: what could not have been seen is not proven away
    decision = _rule(replace(requirement, rule="guarded") if floor else requirement, value.value, u)
    if floor and decision.reason is not None and decision.reason.code == "too-close":
        # nothing was seen: the sweep was too weak to show enough, which speaks of the sweep and not of the part
        text = f"the sweep cannot show {wording.label(requirement)} well enough: {floor[0].text}"
        return Decision(NONE, Reason("not-reached", requirement.characteristic, value.value, None, text))
    return decision


def _rule(requirement: Requirement, value: float, u: float) -> Decision:
    guard = coverage(requirement) * u
    past = _past(requirement, value)
    if past is not None and past[0] > guard:
        return Decision(FAIL, _past_reason(requirement, value, past), proven=True)
    if requirement.u_max is not None and u > requirement.u_max:
        return Decision(NONE, _u_reason(requirement, value, u))
    if requirement.rule == "simple":
        return Decision(PASS) if past is None else Decision(FAIL, _past_reason(requirement, value, past), proven=True)
    near = _nearest(requirement, value)
    if near[0] >= guard:
        return Decision(PASS)
    text = wording.too_close(requirement, value, near[1], u, above=near[2])
    reason = Reason("too-close", requirement.characteristic, value, near[1], text)
    return Decision(NONE if requirement.between == "hold" else FAIL, reason)


Side = tuple[float, float, bool]  # distance, limit, is it the upper one


def _past(requirement: Requirement, value: float) -> Side | None:
    """How far beyond which limit, None when inside."""
    if requirement.max is not None and value > requirement.max:
        return value - requirement.max, requirement.max, True
    if requirement.min is not None and value < requirement.min:
        return requirement.min - value, requirement.min, False
    return None


def _nearest(requirement: Requirement, value: float) -> Side:
    """The limit with the least distance inwards (negative: beyond it)."""
    sides: list[Side] = []
    if requirement.max is not None:
        sides.append((requirement.max - value, requirement.max, True))
    if requirement.min is not None:
        sides.append((value - requirement.min, requirement.min, False))
    return min(sides)


def _past_reason(requirement: Requirement, value: float, past: Side) -> Reason:
    _, limit, above = past
    text = wording.past_limit(requirement, value, limit, above=above)
    return Reason("above-max" if above else "below-min", requirement.characteristic, value, limit, text)


def _u_reason(requirement: Requirement, value: float, u: float) -> Reason:
    most = requirement.u_max or 0.0
    text = (
        f"the uncertainty of {wording.label(requirement)} is {wording.amount(u, requirement)}, "
        f"more than the {wording.stated(most, requirement)} that may carry a verdict"
    )
    return Reason("u-too-large", requirement.characteristic, value, most, text)


def _missing(requirement: Requirement, caveats: tuple[Caveat, ...]) -> Decision:
    said = [caveat for caveat in caveats if caveat.characteristic == requirement.characteristic]
    limit = requirement.min if requirement.min is not None else requirement.max
    for caveat in said:
        if caveat.code == "absent":
            text = f"the part has no {wording.label(requirement)}: {caveat.text}"
            return Decision(FAIL, Reason("absent", requirement.characteristic, None, limit, text), proven=True)
    why = f": {said[0].text}" if said else ""
    text = f"the sweep did not reach {wording.label(requirement)}{why}"
    return Decision(NONE, Reason("not-reached", requirement.characteristic, None, limit, text))
