"""Damped Gauss–Newton (Levenberg–Marquardt) for many small least-squares problems at once.

Rows are independent: sums run over the last axis only and rows that have converged leave, so that a row's
bits do not depend on the rows beside it. K. Levenberg (1944), D. Marquardt (1963); damping raised and lowered
by the gain ratio.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harness.records import Floats

Index = NDArray[np.intp]
Evaluate = Callable[[Floats, Index], tuple[Floats, list[Floats], Floats]]
"""(parameters (b, P), row numbers (b,)) → misfit (b, K), its derivative by each free parameter, each (b, K), and the
weights (b, K) that are in both: they may depend on the parameters, and are held within a step."""

_STEP_LIMIT = 1.0  # in natural units: no parameter moves by more than a factor e at once
_POLISH = 3  # undamped steps at the most at the end, onto the root of the likelihood's own equation
_MEANT = 1e-4  # of the standard uncertainty: a smaller step is not worth another look


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """``parameters`` (B, P), ``cost`` (B,) = Σ misfit², ``normal`` (B, F, F) = JᵀJ at the end, ``converged`` (B,)."""

    parameters: Floats
    cost: Floats
    normal: Floats
    converged: NDArray[np.bool_]


def solve(
    evaluate: Evaluate,
    start: Floats,
    free: tuple[int, ...],
    *,
    iterations: int = 60,
    tolerance: float = 1e-3,
) -> Solution:
    """Least squares over the parameters ``free`` of every row of ``start`` (B, P).

    A row has converged when a step changes no parameter by more than ``tolerance`` of its standard uncertainty
    (or by 1e-10). ``evaluate`` is called with the rows still at work.
    """
    p = start.copy()
    columns = list(free)
    damping = np.full(len(p), 1e-3)
    converged = np.zeros(len(p), dtype=bool)
    rows: Index = np.arange(len(p))
    if rows.size == 0:
        return Solution(p, np.zeros(0), np.zeros((0, len(free), len(free))), converged)
    value, slopes, held = evaluate(p, rows)
    cost, gradient, normal = _normal(value, slopes)
    for _ in range(iterations):
        if rows.size == 0:
            break
        step = _step(normal, gradient, damping[rows])
        trial = p[rows]
        trial[:, columns] += step
        value, slopes, weight = evaluate(trial, rows)
        # judged under the weights the step was made for, or a step could look bad for changing them
        better = _cost(value * _ratio(held, weight)) <= cost * (1 + 1e-12)
        small = _is_small(step, cost, normal, tolerance)
        p[rows[better]] = trial[better]
        damping[rows] = np.where(better, damping[rows] * 0.2, damping[rows] * 8)
        fresh = (*_normal(value, slopes), weight)
        cost, gradient, normal, held = (
            np.where(_like(better, old), new, old)
            for new, old in zip(fresh, (cost, gradient, normal, held), strict=True)
        )
        # a step that is tiny and does not help is the floor of rounding: as good as converged
        done = small & (better | (damping[rows] > 1e6))
        converged[rows[done]] = True
        keep = ~done & (damping[rows] < 1e12)
        rows = rows[keep]
        cost, gradient, normal, held = cost[keep], gradient[keep], normal[keep], held[keep]
    return _polish(evaluate, p, columns, converged)


def _polish(evaluate: Evaluate, p: Floats, columns: list[int], converged: NDArray[np.bool_]) -> Solution:
    rows: Index = np.arange(len(p))
    cost, gradient, normal = _normal(*evaluate(p, rows)[:2])
    for _ in range(_POLISH):
        step = _step(normal[rows], gradient[rows], np.zeros(len(rows)))
        # only a row that sits on its root already may be moved undamped, and only while moving it means anything
        calm = converged[rows] & _is_small(step, cost[rows], normal[rows], 1.0)
        move = calm & ~_is_small(step, cost[rows], normal[rows], _MEANT)
        rows = rows[move]
        if rows.size == 0:
            break
        moved = p[rows]
        moved[:, columns] += step[move]
        p[rows] = moved
        cost[rows], gradient[rows], normal[rows] = _normal(*evaluate(p[rows], rows)[:2])
    return Solution(p, cost, normal, converged & np.isfinite(cost))


def covariance(normal: Floats) -> Floats:
    """Inverse of JᵀJ ``(B, F, F)``, scaled first so that badly scaled parameters do not hurt; NaN where singular."""
    scale = np.sqrt(np.einsum("bii->bi", normal))
    scale = np.where(scale > 0, scale, 1.0)
    scaled = normal / (scale[:, :, None] * scale[:, None, :])
    out = np.full_like(normal, np.nan)
    sound = np.isfinite(scaled).all(axis=(1, 2))
    sound[sound] = np.linalg.eigvalsh(scaled[sound])[:, 0] > 1e-13
    out[sound] = np.linalg.inv(scaled[sound])
    return np.asarray(out / (scale[:, :, None] * scale[:, None, :]))


def inverse_normal(slopes: list[Floats]) -> Floats:
    """The inverse of JᵀJ ``(B, F, F)``."""
    return covariance(_normal(np.zeros_like(slopes[0]), slopes)[2])


def full_step(value: Floats, slopes: list[Floats]) -> tuple[Floats, Floats]:
    """The undamped Gauss–Newton step ``(B, F)``, of any length, and the inverse of JᵀJ ``(B, F, F)``."""
    _, gradient, normal = _normal(value, slopes)
    return _step(normal, gradient, np.zeros(len(value)), limit=np.inf), covariance(normal)


def _normal(value: Floats, slopes: list[Floats]) -> tuple[Floats, Floats, Floats]:
    """Cost, gradient and JᵀJ by sums over the last axis, pair by pair."""
    with np.errstate(over="ignore", invalid="ignore"):
        gradient = np.stack([(s * value).sum(axis=-1) for s in slopes], axis=-1)
        normal = np.empty((len(value), len(slopes), len(slopes)))
        for i, one in enumerate(slopes):
            for j in range(i + 1):
                normal[:, i, j] = normal[:, j, i] = (one * slopes[j]).sum(axis=-1)
    return _cost(value), gradient, normal


def _cost(value: Floats) -> Floats:
    with np.errstate(over="ignore", invalid="ignore"):
        cost = (value * value).sum(axis=-1)
    return np.asarray(np.where(np.isfinite(cost), cost, np.inf))


def _ratio(held: Floats, weight: Floats) -> Floats:
    return np.asarray(np.where(weight > 0, held / np.where(weight > 0, weight, 1.0), 1.0))


def _step(normal: Floats, gradient: Floats, damping: Floats, limit: float = _STEP_LIMIT) -> Floats:
    diagonal = np.einsum("bii->bi", normal)
    scale = np.sqrt(np.where(diagonal > 0, diagonal, 1.0))
    scaled = normal / (scale[:, :, None] * scale[:, None, :])
    scaled = scaled + damping[:, None, None] * np.eye(normal.shape[-1]) + 1e-14 * np.eye(normal.shape[-1])
    sound = np.isfinite(scaled).all(axis=(1, 2)) & np.isfinite(gradient).all(axis=1)
    scaled = np.where(sound[:, None, None], scaled, np.eye(normal.shape[-1]))
    right = np.where(sound[:, None], gradient / scale, 0.0)
    step = -np.linalg.solve(scaled, right[:, :, None])[:, :, 0] / scale
    longest = np.abs(step).max(axis=1, keepdims=True)
    return np.asarray(step * np.minimum(1.0, limit / np.where(longest > 0, longest, 1.0)))


def _is_small(step: Floats, cost: Floats, normal: Floats, tolerance: float) -> NDArray[np.bool_]:
    """Is the step well inside the uncertainty that the misfit itself implies? (‖J·step‖² against cost per freedom.)"""
    with np.errstate(over="ignore", invalid="ignore"):
        moved = np.einsum("bi,bij,bj->b", step, normal, step)
    return np.asarray((moved <= tolerance**2 * cost / 100) | (np.abs(step).max(axis=1) < 1e-10))


def _like(mask: NDArray[np.bool_], array: Floats) -> NDArray[np.bool_]:
    return mask.reshape(mask.shape + (1,) * (array.ndim - 1))
