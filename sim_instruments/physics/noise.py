"""What a meter adds to the truth: noise, resolution, gain and frequency error, contact bounce, a drifting part.

Every draw comes from a ``numpy.random.Generator`` that is handed in, and the number of draws depends on the number
of points alone, so that the same seed gives the same noise whatever the part.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from sim_instruments.physics.materials import Complexes, Floats

Impedance: TypeAlias = Callable[[Floats], Complexes]


@dataclass(frozen=True, slots=True)
class Flaws:
    """How a meter errs; the default errs not at all.

    ``noise_relative``: standard deviation of the real and of the imaginary part of one reading, over |Z|.
    ``gain_error``: Z is read (1 + gain_error) times too large, complex. ``frequency_error``: the true frequency is
    (1 + frequency_error) times the one set. ``digits``: significant digits of |Z|'s range that a reading keeps, None
    all. ``bounce_share``: how many readings in one meet a bad contact; it adds a resistance drawn evenly in its
    logarithm from ``bounce_ohm``.
    """

    noise_relative: float = 0.0
    gain_error: complex = 0.0
    frequency_error: float = 0.0
    digits: int | None = None
    bounce_share: float = 0.0
    bounce_ohm: tuple[float, float] = (30.0, 30e3)


def read(impedance: Impedance, f_hz: Floats, flaws: Flaws, rng: np.random.Generator) -> Complexes:
    """What the meter shows at the set frequencies ``f_hz`` ``(N,)``, ohm; ``impedance`` is true at its terminals."""
    f = np.asarray(f_hz, dtype=np.float64)
    z = np.asarray(impedance(f * (1 + flaws.frequency_error)), dtype=np.complex128)
    z = bounced(z, flaws, rng) * (1 + flaws.gain_error)
    return rounded(noisy(z, flaws.noise_relative, rng), flaws.digits)


def noisy(z_ohm: Complexes, noise_relative: float, rng: np.random.Generator) -> Complexes:
    """Complex Gaussian noise, σ|Z| on the real and on the imaginary part."""
    draw = rng.standard_normal((2, *z_ohm.shape))
    return np.asarray(z_ohm + noise_relative * np.abs(z_ohm) * (draw[0] + 1j * draw[1]))


def bounced(z_ohm: Complexes, flaws: Flaws, rng: np.random.Generator) -> Complexes:
    """Now and then a reading through a bad contact: a resistance in series."""
    chance, size = rng.random(z_ohm.shape), rng.random(z_ohm.shape)
    low, high = flaws.bounce_ohm
    return np.asarray(z_ohm + np.where(chance < flaws.bounce_share, low * (high / low) ** size, 0.0))


def rounded(z_ohm: Complexes, digits: int | None) -> Complexes:
    """Real and imaginary part rounded to the last of ``digits`` significant digits of |Z|'s decade."""
    if digits is None:
        return z_ohm
    level = np.maximum(np.abs(z_ohm), np.finfo(float).tiny)
    step = 10.0 ** (np.floor(np.log10(level)) - digits + 1)
    return np.asarray(np.round(z_ohm.real / step) * step + 1j * np.round(z_ohm.imag / step) * step)


def relaxing_degc(elapsed_s: Floats, start_degc: float, ambient_degc: float, tau_s: float) -> Floats:
    """Temperature of a part handled warm that goes to ambient, exponentially with ``tau_s``; shape of ``elapsed_s``."""
    return np.asarray(ambient_degc + (start_degc - ambient_degc) * np.exp(-np.asarray(elapsed_s) / tau_s))
