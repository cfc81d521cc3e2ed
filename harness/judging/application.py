"""What a board and a liquid make of a part: the share of power the board delivers, and the droplet size."""

from __future__ import annotations

import math
from collections.abc import Mapping

from harness.records import ApplicationSpec, Caveat, Value

_LANG_RANGE_HZ = (10e3, 800e3)
# How many standard uncertainties of fs the worst case allows for.
_WORST_U = 2.0


def power_share(board_hz: float, resonance_hz: float, q: float) -> float:
    """Motional power at ``board_hz`` over that at resonance, equal voltage: 1/(1 + Q²(f/f₀ − f₀/f)²).

    The series branch's own resonance curve. At 0.5 % off, Q 300 leaves a tenth and Q 30 nine tenths:

    >>> [round(power_share(1.005, 1.0, q), 2) for q in (300.0, 30.0)]
    [0.1, 0.92]
    """
    detuning = q * (board_hz / resonance_hz - resonance_hz / board_hz)
    return 1.0 / (1.0 + detuning * detuning)


def drive_share(fs_hz: float, u_fs_hz: float, spec: ApplicationSpec) -> float | None:
    """The least share of peak motional power over the board's tolerance and ±2 u(fs); None without board or loaded Q.

    The loaded resonance is fs(1 + shift). The share falls with the distance of the two frequencies on either side, so
    the worst case is at a corner. Uncertainty is inside the worst case: the share carries none of its own.
    """
    if spec.board_hz is None or spec.loaded_q is None:
        return None
    boards = (spec.board_hz * (1 - spec.board_tolerance), spec.board_hz * (1 + spec.board_tolerance))
    parts = tuple((fs_hz + sign * _WORST_U * u_fs_hz) * (1 + spec.loaded_shift) for sign in (-1, 1))
    if min(parts) <= 0:
        return None
    return min(power_share(board, part, spec.loaded_q) for board in boards for part in parts)


def droplet_m(board_hz: float, surface_tension_n_per_m: float, density_kg_per_m3: float) -> float:
    """Number-median droplet diameter D = 0.34 (8πσ/(ρF²))^⅓ in metres, F the drive frequency (Lang, JASA 34, 1962).

    >>> round(droplet_m(1.65e6, 0.0728, 998.2) * 1e6, 4)
    2.9799
    """
    wavelength = float((8 * math.pi * surface_tension_n_per_m / (density_kg_per_m3 * board_hz**2)) ** (1 / 3))
    return 0.34 * wavelength


def figures(values: Mapping[str, Value], spec: ApplicationSpec) -> tuple[dict[str, Value], tuple[Caveat, ...]]:
    """``drive_share`` and ``droplet`` where the limit file gives what they need, with their caveats."""
    found: dict[str, Value] = {}
    caveats: list[Caveat] = []
    fs = values.get("fs")
    if fs is not None and fs.value is not None and fs.u is not None:
        share = drive_share(fs.value, fs.u, spec)
        if share is not None and math.isfinite(share):
            found["drive_share"] = Value(share, 0.0, "1")
    if not spec.mesh and spec.board_hz and spec.surface_tension_n_per_m and spec.density_kg_per_m3:
        size = droplet_m(spec.board_hz, spec.surface_tension_n_per_m, spec.density_kg_per_m3)
        found["droplet"] = Value(size, None, "m")
        if not _LANG_RANGE_HZ[0] <= spec.board_hz <= _LANG_RANGE_HZ[1]:
            text = "Lang's formula was measured from 10 kHz to 800 kHz; this droplet size is extrapolated"
            caveats.append(Caveat("outside-formula", "droplet", text))
    return found, tuple(caveats)
