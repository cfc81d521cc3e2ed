"""How a log's noise grows with its impedance, told from what a first fit left over.

An instrument that states its noise needs none of this. A log may come from an analyser whose noise is constant in the
reflection coefficient, from an ammeter's with an additive floor, or from one that errs by a share of |Z|; weighted by
the wrong one, a fit is neither the best nor honest about its uncertainty.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from harness.records import Complexes, Floats

_REFERENCE_OHM = 50.0  # of a reflection measurement, common practice
_CLEARLY = 0.25  # fall of the variance of ln|ΔZ|²/s² that a shape must bring over a share of |Z|
_LEAST_POINTS = 40
_HALF = np.log(2)  # median of |ΔZ|²/(2σ²), which is exponentially distributed

# standard deviation of Z by its size, up to a factor: dZ for equal noise in ln Z, in Z, in Y = 1/Z, in S11
_SHAPES: dict[str, Callable[[Complexes], Floats]] = {
    "share": lambda z: np.abs(z),
    "additive": lambda z: np.ones(z.shape),
    "admittance": lambda z: np.abs(z) ** 2,
    "reflection": lambda z: np.abs(z + _REFERENCE_OHM) ** 2,
}


def sigma_of(z_fitted_ohm: Complexes, z_ohm: Complexes) -> Floats | None:
    """Standard deviation ``(N,)`` of R and of X, ohm, where the leftovers clearly follow another law than a share of
    |Z|; None where they do not.

    For the right shape s the spread of ln(|ΔZ|²/s²) is least, which a few wild points do not change.
    """
    left = np.abs(z_ohm - z_fitted_ohm) ** 2
    good = np.isfinite(left) & (left > 0) & np.isfinite(z_fitted_ohm)
    if good.sum() < _LEAST_POINTS:
        return None
    spreads = {
        name: float(np.var(np.log(left[good]) - 2 * np.log(shape(z_fitted_ohm[good]))))
        for name, shape in _SHAPES.items()
    }
    best = min(spreads, key=lambda name: spreads[name])
    if spreads["share"] - spreads[best] < _CLEARLY:
        return None
    shape = _SHAPES[best](z_fitted_ohm)
    size = np.sqrt(np.median(left[good] / shape[good] ** 2) / (2 * _HALF))
    return np.asarray(size * shape)
