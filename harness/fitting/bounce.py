"""Lone wild points: a contact that bounced. Rows ``(B, N)`` with frequencies rising; dropped points have weight 0."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from harness.fitting import start
from harness.fitting.model import Data
from harness.records import Floats

WILD = 8.0  # a lone point this many times the typical misfit, and four times its neighbours', is a bounced contact
_ALONE = 4.0
_LEAST_POINTS = 8  # with fewer, no point can be called lone
_STEP_OVER_NEIGHBOURS = 1.3
_LEAST_STEP = 0.03  # in ln Z: a smaller step is no bounce


def lone_wild(value: Floats, weight: Floats) -> NDArray[np.bool_]:
    """Points far off while both neighbours are not: a misfit of the model itself is never alone.

    ``value`` is the misfit ``(B, 2N)``, real parts before imaginary ones.
    """
    n = weight.shape[-1]
    if n < _LEAST_POINTS:
        return np.zeros(weight.shape, dtype=bool)
    size = size_of(value)
    padded = np.pad(size, ((0, 0), (1, 1)))
    beside = np.maximum(padded[:, :-2], padded[:, 2:])
    return np.asarray((size > WILD * _typical(size, weight > 0)) & (size > _ALONE * beside) & (weight > 0))


def suspects(data: Data) -> tuple[NDArray[np.bool_], Floats]:
    """Points that step out of the line of their neighbours in ln Z, before any fit, and the sweep's typical step
    ``(B,)``: its noise, as far as it can be told without a fit. A sharp peak steps out too."""
    n = data.f_hz.shape[-1]
    if n < _LEAST_POINTS:
        return np.zeros(data.weight.shape, dtype=bool), np.full(len(data.weight), np.inf)
    square = data.r_ohm * data.r_ohm + data.x_ohm * data.x_ohm
    kept = (data.weight > 0) & (square > 0)
    level = 0.5 * np.log(np.where(kept, square, 1.0))
    phase = np.arctan2(data.x_ohm, data.r_ohm)
    bend = np.zeros(level.shape)
    # half the turn between two steps, by sine, so that a phase near ±π does no harm
    turn = np.sin(0.5 * (2 * phase[:, 1:-1] - phase[:, :-2] - phase[:, 2:]))
    bend[:, 1:-1] = np.hypot(level[:, 1:-1] - 0.5 * (level[:, :-2] + level[:, 2:]), turn)
    inner = kept.copy()
    inner[:, 0] = inner[:, -1] = False
    typical = _typical(bend, inner)
    padded = np.pad(bend, ((0, 0), (1, 1)))
    # a lone step bends its neighbours half as much; a peak that is more than one point bends them alike
    alone = bend > _STEP_OVER_NEIGHBOURS * np.maximum(padded[:, :-2], padded[:, 2:])
    found = inner & alone & (bend > WILD * typical) & (bend > _LEAST_STEP)
    few = found.sum(axis=-1) <= np.maximum(3, n // 50)
    return np.asarray(found & few[:, None]), typical[:, 0]


def stubborn(value: Floats, weight: Floats, doubtful: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Which of the ``doubtful`` points a fit made without them does not explain."""
    size = size_of(value)
    return np.asarray(doubtful & (size > WILD * _typical(size, (weight > 0) & ~doubtful)))


def size_of(value: Floats) -> Floats:
    """Size ``(B, N)`` of a misfit ``(B, 2N)``."""
    n = value.shape[-1] // 2
    return np.asarray(np.sqrt(value[:, :n] ** 2 + value[:, n:] ** 2))


def _typical(size: Floats, kept: NDArray[np.bool_]) -> Floats:
    return np.maximum(start.median(size, kept)[:, None], 1e-12)
