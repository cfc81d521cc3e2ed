"""Two passes: across the search window, then across the resonance."""

from __future__ import annotations

import numpy as np

from harness.fitting import model, single, start
from harness.fitting.single import Choice
from harness.records import Complexes, FitStatus, Floats, LimitSet, Plan

_REACH = 6.0  # half-power half-widths to either side that the second pass covers
_LEAST = 10


def locate(limits: LimitSet) -> Plan:
    """The first pass: the whole search window, evenly, with half the points (all of them if ``uniform``)."""
    spec = limits.measurement
    n = spec.points if spec.strategy == "uniform" else max(spec.points // 2, _LEAST)
    return Plan(np.linspace(*limits.mode.search_hz, n), spec.drive_v, "locate")


def resolve(f_hz: Floats, z_ohm: Complexes, limits: LimitSet) -> Plan | None:
    """The second pass, from what the first one saw (``(N,)`` hertz, corrected ohm); None where it saw nothing.

    Evenly in the detuning Q(f/fs − fs/f), where a resonance is the same curve whatever its Q. Points stay inside
    the search window.
    """
    spec = limits.measurement
    if spec.strategy == "uniform":
        return None
    window = limits.mode.search_hz
    found = single.fit_one(f_hz, z_ohm, Choice(window, branches=1, most_branches=2, span=limits.mode.span))
    if found.status is FitStatus.OK:
        fs, q = float(np.exp(found.parameters[2])), float(np.exp(found.parameters[3]))
    elif found.status is FitStatus.NOT_RESOLVED:
        fs, q = _peak(f_hz, z_ohm, window)
    else:
        return None
    n = spec.points - max(spec.points // 2, _LEAST)
    half = np.linspace(-_REACH, _REACH, n) / (2 * q)
    f = fs * (half + np.sqrt(1 + half**2))
    return Plan(np.unique(np.clip(f, *window)), spec.drive_v, "resolve")


def _peak(f_hz: Floats, z_ohm: Complexes, window: tuple[float, float]) -> tuple[float, float]:
    """Peak and Q as they look, the width taken no smaller than the spacing: the peak lies within."""
    order = np.argsort(f_hz)
    data = model.data_of(f_hz[order][None, :], z_ohm[order][None, :], np.ones((1, f_hz.size)))
    begin = start.single_branch(data, window)[0]
    return float(np.exp(begin[2])), float(np.exp(begin[3]))
