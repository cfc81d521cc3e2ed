"""From a fitted circuit to the characteristics, with standard uncertainties and a budget of what they come from.

Every characteristic is a function of the circuit's parameters; its uncertainty from the fit is propagated with
central differences (JCGM 100, 5.1.3 and 5.2.2). What a refit moves it by, instrument accuracy and frequency
reference are added in quadrature, each under its own name in the budget.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from harness.characteristics import CHARACTERISTICS
from harness.circuits import coupling, frequencies, resonator
from harness.circuits.resonator import Circuit
from harness.fitting import model
from harness.fitting.trial import LEAST_KNOWN_C0
from harness.records import Caveat, Floats, Value

_STEP = 1e-5
# fr and fa exist where M ≥ 1 + √(1 + C1/C0) if nothing else is lossy; with other losses, only somewhat above that
_SURELY_TWO_ROOTS = 1.5

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
    """Refitted parameters by the name of what was changed, e.g. {"span": …, "correction rs": …}.

    The model's are "span" (other points) and "place" (the background's slope from elsewhere), each shift taken as the
    half-width of a rectangle, and "background" (under a slope of one standard uncertainty, which cannot be negative:
    the standard deviation of half a normal distribution).
    """

    by_name: Mapping[str, Floats]


_MODEL_SHARES = {"span": 1 / np.sqrt(3), "place": 1 / np.sqrt(3), "background": np.sqrt(1 - 2 / np.pi)}
_BESIDE = ("fp", "fn", "fa", "zn", "c0", "tan_delta", "m", "keff", "kp", "kt", "k31", "k33", "phase_max")


_COUPLINGS: dict[str, dict[str, Callable[[Floats, Floats], Floats]]] = {
    "thickness": {"kt": coupling.kt},
    "length": {"k31": coupling.k31},
    "length-33": {"k33": coupling.k33},
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
    return out | {name: formula(fs, fp) for name, formula in _formulas(wanted).items()}


def _formulas(wanted: Wanted) -> dict[str, Callable[[Floats, Floats], Floats]]:
    """The coupling factors that belong to the mode, by id."""
    if wanted.kind == "radial" and wanted.poisson is not None:
        return {"kp": partial(coupling.kp, poisson=wanted.poisson)}
    return _COUPLINGS.get(wanted.kind or "", {})


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
    steps = np.array([_step_of(parameters, k) for k in free])
    found = characteristics(model.circuit_of(_moved(parameters, free, steps)), wanted)
    shifted = _shifted(parameters.size, shifts, wanted)
    definition = _definition(found, wanted)
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
        for name, other in shifted.items():
            shift = abs(other[key] - value)
            part = "model" if name in _MODEL_SHARES else name
            budget[part] = float(np.hypot(budget.get(part, 0.0), shift * _MODEL_SHARES.get(name, 1.0)))
        budget["model"] = float(np.hypot(budget.get("model", 0.0), definition.get(key, 0.0)))
        budget |= accuracy(key, value, u_z_relative, u_f_relative)
        budgets[key] = {name: part for name, part in budget.items() if part > 0}
        total = float(np.sqrt(sum(part**2 for part in budget.values())))
        values[key] = Value(value, total if np.isfinite(total) else None, unit)
    return _reached(values), budgets


def _moved(parameters: Floats, free: Sequence[int], steps: Floats) -> Floats:
    """The parameters, then with each free one a step up, then each a step down: ``(1 + 2F, P)``."""
    up = [_bump(parameters, k, s) for k, s in zip(free, steps, strict=True)]
    down = [_bump(parameters, k, -s) for k, s in zip(free, steps, strict=True)]
    return np.stack([parameters, *up, *down])


def _shifted(size: int, shifts: Shifts, wanted: Wanted) -> dict[str, dict[str, float]]:
    """Characteristics under each shift; circuits of one size are done in one go."""
    out: dict[str, dict[str, float]] = {}
    for alike in (True, False):
        names = [name for name, p in shifts.by_name.items() if (p.size == size) is alike]
        if names:
            rows = np.stack([shifts.by_name[name] for name in names])
            columns = characteristics(model.circuit_of(rows), wanted)
            out |= {name: {key: float(c[k]) for key, c in columns.items()} for k, name in enumerate(names)}
    return out


def _reached(values: dict[str, Value]) -> dict[str, Value]:
    """The values without those that hang on a capacitance which the sweep does not tell."""
    c0 = values["c0"]
    if c0.value is not None and c0.u is not None and c0.u < LEAST_KNOWN_C0 * abs(c0.value):
        return values
    return {key: Value(None, None, value.unit) if key in _BESIDE else value for key, value in values.items()}


def _definition(found: Mapping[str, Floats], wanted: Wanted) -> dict[str, float]:
    """What "with losses removed" leaves open of fp and of the coupling: standard uncertainties by characteristic.

    A pole at |f| = f₀ has its lossless frequency within f₀/(4Q²), by where the loss sits (|1 + j/Q|^½ ≈ 1 + 1/(4Q²));
    likewise with tan δ. Taken as the half-width of a rectangle.
    """
    fs, fp = found["fs"][:1], found["fp"][:1]
    open_share = (found["qm"][:1] ** -2 + found["tan_delta"][:1] ** 2) / (4 * np.sqrt(3))
    moved = fp * (1 + open_share)
    out = {"fp": moved - fp, "keff": coupling.keff(fs, moved) - coupling.keff(fs, fp)}
    for name, formula in _formulas(wanted).items():
        out[name] = formula(fs, moved) - formula(fs, fp)
    return {name: abs(float(part[0])) for name, part in out.items() if np.isfinite(part[0])}


def accuracy(key: str, value: float, u_z_relative: float, u_f_relative: float) -> dict[str, float]:
    """What the instrument's accuracy of |Z| and of frequency adds to a characteristic of this value."""
    power_z, power_f = _SCALING.get(key, (0, 0))
    # an error of Z as large across as along it turns the phase by as much (radian)
    turned = {"tan_delta": u_z_relative, "phase_max": float(np.degrees(u_z_relative))}.get(key, 0.0)
    return {
        "instrument": abs(power_z * value) * u_z_relative + turned,
        "frequency": abs(power_f * value) * u_f_relative,
    }


def absent(values: Mapping[str, Value]) -> list[Caveat]:
    """A caveat for each characteristic that the part does not have or that the sweep does not tell."""
    if values["c0"].value is None:
        text = "the points stay too near the resonance to tell the capacitance beside it, and what hangs on it"
        return [Caveat("not-reached", key, text) for key in _BESIDE if key in values]
    return [_missing(key, values) for key, value in values.items() if value.value is None]


def _missing(key: str, values: Mapping[str, Value]) -> Caveat:
    """fr and fa do not exist at a low figure of merit; anything else that has no value was not found."""
    m, c0, c1 = (values[name].value for name in ("m", "c0", "c1"))
    if key in ("fr", "fa") and m is not None and c0 and c1 and m < _SURELY_TWO_ROOTS * (1 + np.sqrt(1 + c1 / c0)):
        text = f"the phase never reaches zero at this figure of merit, so there is no {key}"
        return Caveat("absent", key, text)
    return Caveat("not-reached", key, f"{CHARACTERISTICS[key].sign} could not be found on the fitted curve")


def _step_of(parameters: Floats, k: int) -> float:
    """A step small against the resonance's width for a frequency, small against one for the rest."""
    branch, kind = divmod(k - model.FIRST_BRANCH, model.BRANCH)
    if model.FIRST_BRANCH <= k < parameters.size - 1 and kind == model.LN_F:
        return float(_STEP * np.exp(-parameters[model.FIRST_BRANCH + branch * model.BRANCH + model.LN_Q]))
    return _STEP


def _bump(parameters: Floats, k: int, step: float) -> Floats:
    out = parameters.copy()
    out[k] += step
    return out
