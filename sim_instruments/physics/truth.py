"""What is true of a part: its characteristics, found on its noiseless curve and at its poles, without any fit.

Definitions (part only, no fixture):

- fs, qm: the wanted mode's pole, fs = |f_p|, Q = |f_p|/(2 Im f_p); r1 = 1/|A| of its branch (``modes``).
- Wanted is the mode of largest branch conductance inside the family's search window.
- c0 = Im(Y − Y_w)/ω and tan_delta = Re/Im of the same, at fs: everything but the wanted branch.
- fp: next zero of Im Y above fs with all losses removed; keff² = (fp² − fs²)/fp².
- c1 = 1/(2π fs r1 Q), l1 = Q r1/(2π fs), m = 1/(2π fs c0 r1), bandwidth = fs/Q.
- fm, zm: the least |Z| next to fs; fn, zn: the next greatest |Z| above it; fr, fa: the first and the last zero of
  Im Z around them (none at low m). All on the lossy curve.
- c_at, tan_delta_at: at 1 kHz.
- unwanted_g, unwanted_f: the next strongest mode inside the window; 0 and None when there is none.

An open lead, a short or an empty fixture has none of these; a part without a mode in its window has c_at only.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy import optimize

from sim_instruments.physics.materials import REFERENCE_DEGC, Floats, State
from sim_instruments.physics.modes import Mode, modes
from sim_instruments.physics.parts import Part

IDS = (
    "fs", "fp", "fm", "fn", "fr", "fa", "r1", "zm", "zn", "l1", "c0", "c1", "c_at", "qm", "keff", "m", "tan_delta",
    "tan_delta_at", "bandwidth", "unwanted_g", "unwanted_f",
)  # fmt: skip
Values = dict[str, float | None]

_AT_HZ = 1e3
_FINE = 401


def characteristics(part: Part, temperature_degc: float = REFERENCE_DEGC, drive_v: float = 0.0) -> Values:
    """Every id of ``IDS`` → its true value in SI units, None where the part does not have it."""
    values: Values = dict.fromkeys(IDS)
    if not any(element.resonates for element in part.elements):
        return values
    state = State(temperature_degc, drive_v)
    values |= _low_frequency(part, state)
    found = modes(part, state)
    if not found:
        return values
    wanted = found[0]
    values |= _branch(part, wanted, state)
    values |= _parallel(part, found, state)
    values |= _extremes(part, wanted, values["fp"], state)
    values |= _unwanted(found)
    return values


def fs_hz(part: Part, temperature_degc: float = REFERENCE_DEGC) -> float | None:
    """Series resonance of the wanted mode alone, hertz; None where there is none."""
    found = modes(part, State(temperature_degc))
    return found[0].f_hz if found else None


def placed(part: Part, wanted_hz: float, temperature_degc: float = REFERENCE_DEGC) -> Part:
    """The part with its lengths along the wave scaled so that its fs lands on ``wanted_hz``, to 1e-9.

    Resonances go as 1/length exactly, so that one step would do; it is repeated for the rounding. Raises ValueError
    when the part has no mode to place or the place is outside its search window.
    """
    low, high = part.made_as.window_hz
    if not low < wanted_hz < high:
        raise ValueError(f"{wanted_hz:g} Hz is outside the search window of {part.family}, {low:g} to {high:g} Hz")
    for _ in range(3):
        found = fs_hz(part, temperature_degc)
        if found is None:
            raise ValueError(f"a part with the defect {part.defect} has no mode to place")
        part = part.scaled(found / wanted_hz)
    return part


def _low_frequency(part: Part, state: State) -> Values:
    y = complex(part.admittance(np.asarray(_AT_HZ), state))
    return {"c_at": y.imag / (2 * np.pi * _AT_HZ), "tan_delta_at": y.real / y.imag}


def _branch(part: Part, wanted: Mode, state: State) -> Values:
    """What the wanted pole and the rest of Y at fs give."""
    fs, q, r1 = wanted.f_hz, wanted.q, 1 / wanted.g_s
    rest = complex(part.admittance(np.asarray(fs), state)) - wanted.branch(fs)
    omega = 2 * np.pi * fs
    c0 = rest.imag / omega
    return {
        "fs": fs, "qm": q, "r1": r1, "bandwidth": fs / q, "c0": c0, "tan_delta": rest.real / rest.imag,
        "c1": 1 / (omega * r1 * q), "l1": q * r1 / omega, "m": 1 / (omega * c0 * r1),
    }  # fmt: skip


def _parallel(part: Part, found: Sequence[Mode], state: State) -> Values:
    """fp between the lossless wanted pole and the next one above it, and keff."""
    bare = State(state.temperature_degc, lossless=True)
    wanted = found[0]
    above = [mode.lossless_hz for mode in found if mode.lossless_hz > wanted.lossless_hz * (1 + 1e-9)]
    low, high = wanted.lossless_hz * (1 + 1e-9), min(above, default=np.inf) * (1 - 1e-9)

    def susceptance(f: float) -> float:
        return float(part.admittance(np.asarray(f), bare).imag)

    # without a mode above in the window, the first change of sign from − to + on a grid is the zero
    grid = np.linspace(low, min(high, 1.5 * low), 4 * _FINE)
    b = part.admittance(grid, bare).imag
    rises = np.flatnonzero((b[:-1] < 0) & (b[1:] >= 0))
    if rises.size == 0:
        return {}
    fp = float(optimize.brentq(susceptance, grid[rises[0]], grid[rises[0] + 1], xtol=1e-9 * low, rtol=1e-14))
    return {"fp": fp, "keff": float(np.sqrt((fp - wanted.f_hz) * (fp + wanted.f_hz)) / fp)}


def _extremes(part: Part, wanted: Mode, fp: float | None, state: State) -> Values:
    """fm, fn and the zero-phase frequencies on the lossy curve around the wanted mode."""
    fs, width = wanted.f_hz, wanted.f_hz / wanted.q
    top = (fp or fs * 1.1) + 4 * width
    f = np.union1d(np.linspace(fs - 4 * width, top, _FINE), np.linspace(fs - 2 * width, fs + 2 * width, _FINE))
    z = 1 / part.admittance(f, state)

    def level(x: float) -> float:
        return float(abs(1 / part.admittance(np.asarray(x), state)))

    size = np.abs(z)
    dips = np.flatnonzero((size[1:-1] < size[:-2]) & (size[1:-1] <= size[2:])) + 1
    if dips.size == 0:
        return {}
    dip = int(dips[np.argmin(np.abs(f[dips] - fs))])
    tops = np.flatnonzero((size[1:-1] > size[:-2]) & (size[1:-1] >= size[2:])) + 1
    tops = tops[tops > dip]
    fm = _extremum(level, f, dip)
    values: Values = {"fm": fm, "zm": level(fm)}
    if tops.size:
        fn = _extremum(lambda x: -level(x), f, int(tops[0]))
        values |= {"fn": fn, "zn": level(fn)}
    return values | _zero_phase(part, f, z.imag, state)


def _extremum(level: Callable[[float], float], f: Floats, k: int) -> float:
    bracket = (float(f[k - 1]), float(f[k + 1]))
    found = optimize.minimize_scalar(level, bounds=bracket, method="bounded", options={"xatol": 1e-9 * f[k]})
    return float(found.x)


def _zero_phase(part: Part, f: Floats, x_ohm: Floats, state: State) -> Values:
    def reactance(g: float) -> float:
        return float((1 / part.admittance(np.asarray(g), state)).imag)

    crossings = np.flatnonzero(np.sign(x_ohm[:-1]) * np.sign(x_ohm[1:]) < 0)
    if crossings.size < 2:
        return {}
    ends = (int(crossings[0]), int(crossings[-1]))
    fr, fa = (float(optimize.brentq(reactance, f[k], f[k + 1], xtol=1e-9 * f[k], rtol=1e-14)) for k in ends)
    return {"fr": fr, "fa": fa}


def _unwanted(found: Sequence[Mode]) -> Values:
    if len(found) < 2:
        return {"unwanted_g": 0.0, "unwanted_f": None}
    return {"unwanted_g": found[1].g_s / found[0].g_s, "unwanted_f": found[1].f_hz}
