"""Consumer's and producer's risk of a lot, and the conformance probability of one value (JCGM 106:2012).

A measured value y is the true value η plus a normal error of standard deviation u; it is accepted inside the
acceptance limits A, and conforms inside the tolerance limits T. Global risks (JCGM 106:2012 §9.5, joint probabilities):

    consumer  R_C = ∫ outside T  g(η) P(accept | η) dη        producer  R_P = ∫ inside T  g(η) P(reject | η) dη

with the process's density g. Limits are pairs, ±∞ for a side without one. Integration is Gauss–Legendre between
breakpoints at every limit and where either density turns, so limits may lie anywhere and u be small.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr

from harness.records import Floats

Limits = tuple[ArrayLike, ArrayLike]
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)
_ERROR_BREAKS = np.array([-8.0, -4.0, -2.0, 0.0, 2.0, 4.0, 8.0])
_SPAN = 9.0  # standard deviations of a normal process beyond which nothing is left
_PROCESS_BREAKS = np.array([-6.0, -4.0, -2.0, 0.0, 2.0, 4.0, 6.0])


@dataclass(frozen=True, slots=True, eq=False)
class Risks:
    """Shares (1) of all parts: accepted though outside tolerance, rejected though inside; arrays alike."""

    consumer: Floats
    producer: Floats


def conformance_probability(value: ArrayLike, u: ArrayLike, tolerance: Limits) -> Floats:
    """Probability that the true value lies within ``tolerance``, given a measured ``value`` (normal, standard u).

    JCGM 106:2012 §7: p_C = Φ((T_U − y)/u) − Φ((T_L − y)/u); u = 0 is certainty, a value on its limit inside.
    """
    y, spread, low, high = np.broadcast_arrays(*(np.asarray(x, float) for x in (value, u, *tolerance)))
    certain = ((low <= y) & (y <= high)).astype(float)
    known = np.where(spread > 0, spread, 1.0)
    return np.where(spread > 0, _between((low - y) / known, (high - y) / known), certain)


def _between(low: Floats, high: Floats) -> Floats:
    """Φ(high) − Φ(low), from the tail that keeps its digits."""
    right = low > 0
    return np.where(right, ndtr(-low) - ndtr(-high), ndtr(high) - ndtr(low))


def global_risk_normal(mean: ArrayLike, sd: ArrayLike, u: ArrayLike, tolerance: Limits, acceptance: Limits) -> Risks:
    """Global risks of a normal process ``mean``, ``sd`` under measurement ``u``; everything broadcasts together."""
    mu, s, spread, *limits = np.broadcast_arrays(
        *(np.asarray(x, float) for x in (mean, sd, u, *tolerance, *acceptance))
    )
    tol, acc = (limits[0], limits[1]), (limits[2], limits[3])

    def density(eta: Floats) -> Floats:
        z = (eta - mu[..., None]) / s[..., None]
        return np.asarray(np.exp(-0.5 * z * z) / (np.sqrt(2 * np.pi) * s[..., None]))

    breaks = mu[..., None] + s[..., None] * _PROCESS_BREAKS
    return _risks(density, (mu - _SPAN * s, mu + _SPAN * s), breaks, spread, tol, acc)


def global_risk(
    density: Callable[[Floats], Floats],
    support: tuple[float, float],
    u: float,
    tolerance: tuple[float, float],
    acceptance: tuple[float, float],
) -> Risks:
    """Global risks of a process with any smooth ``density`` g(η), vectorised, on a finite ``support``."""
    breaks = np.linspace(support[0], support[1], 33)
    ends = np.asarray(support[0], float), np.asarray(support[1], float)
    pairs = [np.asarray(x, float) for x in (*tolerance, *acceptance)]
    return _risks(density, ends, breaks, np.asarray(u, float), (pairs[0], pairs[1]), (pairs[2], pairs[3]))


def _risks(
    density: Callable[[Floats], Floats],
    support: tuple[Floats, Floats],
    breaks: Floats,
    u: Floats,
    tolerance: tuple[Floats, Floats],
    acceptance: tuple[Floats, Floats],
) -> Risks:
    low, high = (np.clip(limit, *support) for limit in tolerance)
    turns = [a[..., None] + u[..., None] * _ERROR_BREAKS for a in acceptance]
    points = np.concatenate([np.broadcast_to(breaks, (*u.shape, breaks.shape[-1])), *turns], axis=-1)

    def integral(start: Floats, end: Floats, *, accepted: bool) -> Floats:
        eta, weight = _nodes(start, end, points)
        chance = _chance(eta, u[..., None], acceptance, accepted=accepted)
        return np.asarray((density(eta) * chance * weight).sum(axis=-1))

    outside = integral(support[0], low, accepted=True) + integral(high, support[1], accepted=True)
    return Risks(outside, integral(low, high, accepted=False))


def _chance(eta: Floats, u: Floats, acceptance: tuple[Floats, Floats], *, accepted: bool) -> Floats:
    """P(accept | η) or P(reject | η); without measurement error, certainty."""
    below, above = acceptance[0][..., None] - eta, acceptance[1][..., None] - eta
    scale = np.where(u > 0, u, np.finfo(float).tiny)
    with np.errstate(over="ignore"):  # a step when u is zero
        low, high = below / scale, above / scale
    return _between(low, high) if accepted else ndtr(low) + ndtr(-high)


def _nodes(start: Floats, end: Floats, points: Floats) -> tuple[Floats, Floats]:
    """Gauss–Legendre nodes and weights of [start, end] cut at ``points``: both ``(..., segments · nodes)``."""
    finite = np.where(np.isfinite(points), points, start[..., None])
    inner = np.clip(finite, start[..., None], end[..., None])
    edges = np.sort(np.concatenate([start[..., None], inner, end[..., None]], axis=-1), axis=-1)
    half, middle = np.diff(edges, axis=-1) / 2, (edges[..., 1:] + edges[..., :-1]) / 2
    eta = middle[..., None] + half[..., None] * _NODES
    weight = half[..., None] * _WEIGHTS
    shape = (*eta.shape[:-2], -1)
    return eta.reshape(shape), weight.reshape(shape)
