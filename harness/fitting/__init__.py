"""Sweeps → circuits with uncertainties, one at a time and in batches.

PURE: arrays in, arrays out. May import circuits, correction, records, characteristics, quantities, errors and
NumPy; never scipy.optimize (half a second of import for what ``solver`` does in a hundred lines, batched).
``model`` is the residual and its exact derivatives, ``start`` finds where to begin, ``solver`` is the damped
Gauss–Newton, ``trial`` tries one circuit (``bounce`` finds wild points), ``batch`` fits thousands at once, ``single``
fits one sweep with care (``growth`` and ``modes`` add what the data ask for), ``values`` turns a fitted circuit into
characteristics, ``peak`` reads a transmission log without a level. To add a parameter: ``model``, ``start``, and the
complex-step test.
"""

from harness.fitting.batch import BatchFit, fit_batch

__all__ = ["BatchFit", "fit_batch"]
