"""From a fitted circuit to the characteristics, with standard uncertainties and a budget of what they come from.

Every characteristic is a function of the circuit's parameters; its uncertainty from the fit is propagated with
central differences (JCGM 100, 5.1.3 and 5.2.2). What a refit moves it by, instrument accuracy and frequency
reference are added in quadrature, each under its own name in the budget.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from harness.characteristics import CHARACTERISTICS
from harness.circuits import coupling, frequencies, resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model
from harness.records import Caveat, Floats, Value

_STEP = 1e-5

# how each characteristic scales with an error of |Z| (power of Z) and of frequency (power of f)
_SCALING: dict[str, tuple[float, float]] = {
    "fs": (0, 1), "fp": (0, 1), "fm": (0, 1), "fn": (0, 1), "fr": (0, 1), "fa": (0, 1), "bandwidth": (0, 1),
    "unwanted_f": (0, 1), "r1": (1, 0), "zm": (1, 0), "zn": (1, 0), "l1": (1, -1), "c0": (-1, -1), "c1": (-1, -1),
    "c_at": (-1, -1),
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Wanted:
    """Which coupling formula belongs to the mode (None: keff only), and the disc's planar Poisson's ratio for kp."""

    kind: str | None = None
    poisson: float | None = None


@dataclass(frozen=True, slots=True)
class Shifts:
    """Refitted parameters by the name of what was changed, e.g. {"model": …, "correction rs": …}."""

    by_name: Mapping[str, Floats]
    model_share: float = 1 / np.sqrt(3)  # a refit's shift taken as the half-width of a rectangle


_COUPLINGS: dict[str, tuple[str, Callable[[Floats, Floats], Floats]]] = {
    "thickness": ("kt", coupling.kt),
    "length": ("k31", coupling.k31),
    "length-33": ("k33", coupling.k33),
}


def characteristics(circuit: Circuit, wanted: Wanted) -> dict[str, Floats]:
    """Every characteristic of an array of circuits ``(K,)``: id → ``(K,)``, NaN where a circuit does not have it."""
    element = Circuit(
        circuit.c_f, circuit.tan_delta, circuit.f_hz, circuit.q, circuit.g_s, circuit.theta_rad, 0 * circuit.rs_ohm
    )
    fs, q = element.fs_hz, element.q[..., 0]
    fp = frequencies.fp_hz(element)
    peak, below, above = frequencies.half_power_hz(element)
    out = {
        "fs": fs,
        "fp": fp,
        "r1": resonator.r1_ohm(element),
        "qm": q,
        "bandwidth": fs / q,
        "q_half_power": peak / (above - below),
        "l1": resonator.l1_h(element),
        "c1": resonator.c1_f(element),
        "c0": resonator.c0_f(element),
        "tan_delta": resonator.tan_delta_at_fs(element),
        "m": frequencies.figure_of_merit(element),
        "keff": coupling.keff(fs, fp),
    }
    out |= _extremes(element, fs, fp, q)
    if wanted.kind in _COUPLINGS:
        name, formula = _COUPLINGS[wanted.kind]
        out[name] = formula(fs, fp)
    if wanted.kind == "radial" and wanted.poisson is not None:
        out["kp"] = coupling.kp(fs, fp, wanted.poisson)
    return out


def _extremes(element: Circuit, fs: Floats, fp: Floats, q: Floats) -> dict[str, Floats]:
    """fm, fn, fr, fa and what |Z| and phase reach, from the whole circuit near its resonance and antiresonance."""
    f0, f1 = float(fs.flat[0]), float(fp.flat[0])
    width = f0 / float(q.flat[0])
    none = np.full(fs.shape, np.nan)
    if not np.isfinite(f1):
        return dict.fromkeys(("fm", "fn", "fr", "fa", "zm", "zn", "phase_max"), none)
    least = frequencies.extremum_hz(element, max(f0 - 2 * width, 0.5 * f0), f0 + 2 * width, greatest=False)
    most = frequencies.extremum_hz(element, max(f1 - 2 * width, f0), f1 + 2 * width, greatest=True)
    return {
        "fm": least,
        "fn": most,
        "fr": frequencies.zero_phase_hz(element, f0 - 0.5 * width, f1 + width, last=False),
        "fa": frequencies.zero_phase_hz(element, f0 - 0.5 * width, f1 + width, last=True),
        "zm": frequencies.level_ohm(element, least),
        "zn": frequencies.level_ohm(element, most),
        "phase_max": frequencies.phase_max_deg(element, f0, f1),
    }


def with_uncertainty(
    parameters: Floats,
    free: Sequence[int],
    covariance: Floats,
    wanted: Wanted,
    shifts: Shifts,
    u_z_relative: float,
    u_f_relative: float,
) -> tuple[dict[str, Value], dict[str, dict[str, float]]]:
    """Values and budgets of one fitted circuit: ``parameters`` ``(P,)``, ``covariance`` of the ``free`` ones."""
    names = list(shifts.by_name)
    steps = np.array([_step_of(parameters, k) for k in free])
    moved = np.concatenate(
        [
            parameters[None, :],
            np.stack([_bump(parameters, k, s) for k, s in zip(free, steps, strict=True)]),
            np.stack([_bump(parameters, k, -s) for k, s in zip(free, steps, strict=True)]),
        ]
    )
    found = characteristics(model.circuit_of(moved), wanted)
    shifted = [characteristics(model.circuit_of(shifts.by_name[n][None, :]), wanted) for n in names]
    n = len(free)
    values: dict[str, Value] = {}
    budgets: dict[str, dict[str, float]] = {}
    for key, column in found.items():
        unit, value = CHARACTERISTICS[key].unit, float(column[0])
        if not np.isfinite(value):
            values[key] = Value(None, None, unit)
            continue
        slope = (column[1 : n + 1] - column[n + 1 :]) / (2 * steps)
        budget = {"fit": float(np.sqrt(max(slope @ covariance @ slope, 0.0))) if np.isfinite(slope).all() else np.nan}
        for name, other in zip(names, shifted, strict=True):
            share = shifts.model_share if name == "model" else 1.0
            budget[name] = abs(float(other[key][0]) - value) * share
        budget |= accuracy(key, value, u_z_relative, u_f_relative)
        budgets[key] = {name: part for name, part in budget.items() if part > 0}
        total = float(np.sqrt(sum(part**2 for part in budget.values())))
        values[key] = Value(value, total if np.isfinite(total) else None, unit)
    return values, budgets


def accuracy(key: str, value: float, u_z_relative: float, u_f_relative: float) -> dict[str, float]:
    """What the instrument's accuracy of |Z| and of frequency adds to a characteristic of this value."""
    power_z, power_f = _SCALING.get(key, (0, 0))
    return {"instrument": abs(power_z * value) * u_z_relative, "frequency": abs(power_f * value) * u_f_relative}


def absent(values: Mapping[str, Value]) -> list[Caveat]:
    """A caveat for each characteristic that the part does not have."""
    texts = {
        "fr": "the phase never reaches zero at this figure of merit, so there is no fr",
        "fa": "the phase never reaches zero at this figure of merit, so there is no fa",
    }
    return [
        Caveat("absent", key, texts.get(key, f"{CHARACTERISTICS[key].sign} does not exist for this circuit"))
        for key, value in values.items()
        if value.value is None
    ]


def _step_of(parameters: Floats, k: int) -> float:
    """A step small against the resonance's width for a frequency, small against one for the rest."""
    if k == parameters.size - 1:
        return float(_STEP * np.exp(-parameters[model.FIRST_BRANCH + model.LN_G]))
    branch, kind = divmod(k - model.FIRST_BRANCH, model.BRANCH)
    if k >= model.FIRST_BRANCH and kind == model.LN_F:
        return float(_STEP * np.exp(-parameters[model.FIRST_BRANCH + branch * model.BRANCH + model.LN_Q]))
    return _STEP


def _bump(parameters: Floats, k: int, step: float) -> Floats:
    out = parameters.copy()
    out[k] += step
    return out
