"""The least uncertainty a station can have for each requirement, before anything is measured."""

from __future__ import annotations

import math

from harness.fitting.values import accuracy
from harness.judging.referring import added_u
from harness.records import Conditions, Instrument, LimitSet, Requirement


def least_u(limits: LimitSet, instrument: Instrument, conditions: Conditions) -> dict[str, float]:
    """Standard uncertainty (SI) by characteristic from instrument accuracy, frequency reference, temperature and age.

    Noise and model error come on top, so a requirement that is empty at this u is empty for every part.
    """
    found = {}
    for requirement in limits.requirements:
        key, middle = requirement.characteristic, _middle(requirement)
        parts = list(accuracy(key, middle, instrument.u_z_relative, instrument.u_f_relative).values())
        parts += [abs(middle) * share for share in added_u(conditions, limits.conditions, key).values()]
        found[key] = math.sqrt(sum(part**2 for part in parts))
    return found


def _middle(requirement: Requirement) -> float:
    """The middle of the limits, or the one limit there is."""
    sides = [side for side in (requirement.min, requirement.max) if side is not None]
    return sum(sides) / len(sides)
