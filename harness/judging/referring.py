"""Values referred to the reference temperature and age of a limit file, with the uncertainty that adds.

y_ref = y / (1 + a·ΔT) / (1 + b·log₁₀(t/t_ref)), ΔT = T − T_ref. Relative contributions, in quadrature (JCGM 100 §5.1):
a·u(T), u(a)·ΔT, u(b)·log₁₀(t/t_ref). A temperature that is not known, under a stated window, counts as anywhere in it
(rectangular, JCGM 100 §4.3.7): no shift, but its uncertainty.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

from harness.records import Caveat, Conditions, ConditionSpec, Value

FREQUENCIES = ("fs", "fp", "fm", "fn", "fr", "fa")
CAPACITANCES = ("c0", "c_at")


@dataclass(frozen=True, slots=True)
class _Shift:
    """A factor to divide by, and relative standard uncertainties by name."""

    divisor: float = 1.0
    temperature: float = 0.0
    ageing: float = 0.0


def referred(
    values: Mapping[str, Value], conditions: Conditions, spec: ConditionSpec
) -> tuple[dict[str, Value], tuple[Caveat, ...]]:
    """All ``values``, the frequencies and capacitances among them referred; and what could not be referred."""
    result = dict(values)
    families = (
        (FREQUENCIES, spec.fs_per_k, spec.u_fs_per_k, spec.fs_per_decade, spec.u_fs_per_decade),
        (CAPACITANCES, spec.c0_per_k, spec.u_c0_per_k, spec.c0_per_decade, spec.u_c0_per_decade),
    )
    for ids, per_k, u_per_k, per_decade, u_per_decade in families:
        shift = _shift(conditions, spec, (per_k, u_per_k), (per_decade, u_per_decade))
        for name in ids:
            if name in result:
                result[name] = _apply(result[name], shift)
    return result, _caveats(conditions, spec)


def added_u(conditions: Conditions, spec: ConditionSpec, characteristic: str) -> dict[str, float]:
    """Relative standard uncertainty that referring adds to a characteristic, by source: "temperature", "ageing"."""
    if characteristic in FREQUENCIES:
        pairs = (spec.fs_per_k, spec.u_fs_per_k), (spec.fs_per_decade, spec.u_fs_per_decade)
    elif characteristic in CAPACITANCES:
        pairs = (spec.c0_per_k, spec.u_c0_per_k), (spec.c0_per_decade, spec.u_c0_per_decade)
    else:
        return {}
    shift = _shift(conditions, spec, *pairs)
    return {"temperature": shift.temperature, "ageing": shift.ageing}


def _shift(
    conditions: Conditions, spec: ConditionSpec, per_k: tuple[float, float], per_decade: tuple[float, float]
) -> _Shift:
    away_k, u_k = _temperature(conditions, spec)
    decades = _decades(conditions, spec)
    return _Shift(
        (1.0 + per_k[0] * away_k) * (1.0 + per_decade[0] * decades),
        math.hypot(per_k[0] * u_k, per_k[1] * away_k),
        abs(per_decade[1] * decades),
    )


def _temperature(conditions: Conditions, spec: ConditionSpec) -> tuple[float, float]:
    """ΔT and its standard uncertainty, in kelvin."""
    if spec.reference_degc is None:
        return 0.0, 0.0
    if conditions.temperature_degc is not None:
        return conditions.temperature_degc - spec.reference_degc, conditions.u_temperature_k
    if spec.min_degc is None or spec.max_degc is None:
        return 0.0, 0.0
    farthest = max(abs(spec.min_degc - spec.reference_degc), abs(spec.max_degc - spec.reference_degc))
    return 0.0, farthest / math.sqrt(3.0)


def _decades(conditions: Conditions, spec: ConditionSpec) -> float:
    if spec.reference_age_h is None or conditions.age_h is None or conditions.age_h <= 0:
        return 0.0
    return math.log10(conditions.age_h / spec.reference_age_h)


def _apply(value: Value, shift: _Shift) -> Value:
    if value.value is None:
        return value
    divisor = shift.divisor if shift.divisor > 0 else math.nan
    number = value.value / divisor
    if value.u is None:
        return replace(value, value=number)
    return replace(
        value, value=number, u=math.hypot(value.u / divisor, number * shift.temperature, number * shift.ageing)
    )


def _caveats(conditions: Conditions, spec: ConditionSpec) -> tuple[Caveat, ...]:
    found = []
    by_temperature = any((spec.fs_per_k, spec.c0_per_k, spec.u_fs_per_k, spec.u_c0_per_k))
    windowed = spec.min_degc is not None
    if conditions.temperature_degc is None and (by_temperature or windowed):
        counted = ", counted as anywhere in the allowed range" if windowed and by_temperature else ""
        found.append(Caveat("temperature-unknown", None, f"the temperature is not known{counted}"))
    by_age = any((spec.fs_per_decade, spec.c0_per_decade, spec.u_fs_per_decade, spec.u_c0_per_decade))
    if conditions.age_h is None and (by_age or spec.min_age_h is not None):
        found.append(Caveat("age-unknown", None, "the age since poling is not known, so nothing is referred to it"))
    return tuple(found)
