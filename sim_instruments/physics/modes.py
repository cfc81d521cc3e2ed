"""The modes of a part as what they are: poles of its admittance in the complex frequency plane.

Near a pole f_p an element's admittance is Y = A/(1 + jQ(f/f₀ − f₀/f)) + a smooth rest. The branch's own pole gives
f₀ = |f_p| and Q = |f_p|/(2 Im f_p) (e^{+jωt}: a decaying mode has Im f_p > 0), and its residue there is
A/(jQ(1/f₀ + f₀/f_p²)), which gives the complex A. Nothing is fitted: the pole is found by interpolation that closes
in on it, the residue by a contour integral. Elements lie in parallel, so each has its own poles, and a divided part
is as exact as a whole one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sim_instruments.physics.elements import Element
from sim_instruments.physics.materials import Complexes, State
from sim_instruments.physics.parts import Part

_GRID = 601
_SHRINK = (1.0, 1e-1, 1e-2, 1e-3, 1e-4, 1e-4)
_TRIANGLE = np.exp(2j * np.pi * np.arange(3) / 3)
_CONTOUR = np.exp(2j * np.pi * np.arange(16) / 16)


@dataclass(frozen=True, slots=True)
class Mode:
    """One pole: ``pole_hz`` complex, ``amplitude_s`` the branch's A in siemens; ``lossless_hz`` where the same
    element, losses removed, has its pole."""

    pole_hz: complex
    amplitude_s: complex
    lossless_hz: float

    @property
    def f_hz(self) -> float:
        return abs(self.pole_hz)

    @property
    def q(self) -> float:
        return abs(self.pole_hz) / (2 * self.pole_hz.imag)

    @property
    def g_s(self) -> float:
        """Size of the branch's peak."""
        return abs(self.amplitude_s)

    def branch(self, f_hz: complex) -> complex:
        """The branch's admittance at ``f_hz``, siemens."""
        return self.amplitude_s / (1 + 1j * self.q * (f_hz / self.f_hz - self.f_hz / f_hz))


def modes(part: Part, state: State) -> tuple[Mode, ...]:
    """The modes inside the family's search window, strongest first; ``state`` with one temperature."""
    found = [mode for element in part.elements if element.resonates for mode in _modes_of(element, part, state)]
    return tuple(sorted(found, key=lambda mode: -mode.g_s))


def _modes_of(element: Element, part: Part, state: State) -> list[Mode]:
    low, high = part.made_as.window_hz
    # a margin, so that a peak whose pole lies just inside the window is seen
    f = np.linspace(0.98 * low, 1.02 * high, _GRID)
    y = element.admittance(f, state)
    g = y.real
    peaks = np.flatnonzero((g[1:-1] > g[:-2]) & (g[1:-1] >= g[2:])) + 1
    starts = [f[k] + _pole_through((f - f[k])[k - 1 : k + 2].astype(complex), (y / f)[k - 1 : k + 2]) for k in peaks]
    poles = [_refined(element, start, 0.1 * start.imag, state) for start in starts if start.imag > 0]
    return [_mode(element, pole, state) for pole in poles if low <= abs(pole) <= high and pole.imag > 0]


def _mode(element: Element, pole: complex, state: State) -> Mode:
    radius = 0.4 * pole.imag
    around = element.admittance(pole + radius * _CONTOUR, state)
    residue = complex(np.mean(around * radius * _CONTOUR))
    f0, q = abs(pole), abs(pole) / (2 * pole.imag)
    amplitude = residue * 1j * q * (1 / f0 + f0 / pole**2)
    # losses move a pole off the real axis, and along it by O(1/Q²) only
    bare = _refined(element, complex(f0), radius, State(state.temperature_degc, lossless=True))
    return Mode(complex(pole), complex(amplitude), float(bare.real))


def _refined(element: Element, start: complex, radius_hz: float, state: State) -> complex:
    """The pole next to ``start``: the pole of c + r/(f − p) through three points around it, ever closer.

    Taken of Y/f, a capacitance, whose rest is nearly constant.
    """
    pole = start
    for shrink in _SHRINK:
        f = pole + _TRIANGLE * (radius_hz * shrink)
        pole += _pole_through(f - pole, element.admittance(f, state) / f)
    return pole


def _pole_through(f: Complexes, y: Complexes) -> complex:
    """p of y = c + r/(f − p) through three points: linear in (p, c, r − cp), y f = p y + c f + (r − cp)."""
    y = y - y.mean()  # a large constant would hide a weak mode
    a = np.stack([y, f, np.ones_like(y)], axis=1)
    scale = np.abs(a).max(axis=0)
    return complex(np.linalg.solve(a / scale, y * f)[0] / scale[0])
