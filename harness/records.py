"""The values that flow through the house: Plan, Sweep, Correction, Fit, LimitSet, Judgement, Record.

TYPES. Frozen, SI units, no behaviour beyond what construction checks; arrays are NumPy, one
dimension, and read-only. One way: Plan → Sweep → Fit → Judgement → Record.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


# ── measuring ────────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """What to measure in one go: frequencies in hertz in the order wanted, and the drive in volts."""

    f_hz: Floats
    drive_v: float
    purpose: str  # "locate", "resolve", "contact"
    element: int = 1


@dataclass(frozen=True, slots=True)
class Instrument:
    """One instrument as it named itself, with the accuracy its dialect states.

    ``u_z_relative`` and ``u_f_relative`` are standard uncertainties (1) of |Z| and of frequency;
    ``noise_relative`` is the standard deviation of one reading's real and of its imaginary part, over |Z|.
    """

    role: str
    resource: str
    dialect: str
    maker: str
    model: str
    serial: str
    firmware: str
    u_z_relative: float = 0.0
    u_f_relative: float = 0.0
    noise_relative: float = 0.0


@dataclass(frozen=True, slots=True)
class Correction:
    """What the fixture adds between the instrument's terminals and the part's electrodes.

    A series arm (``rs_ohm``, ``ls_h``) and a stray ``cp_f`` across the part's contacts, each with its
    standard uncertainty. The default is "no fixture", exactly.
    """

    fixture: str = "none"
    rs_ohm: float = 0.0
    ls_h: float = 0.0
    cp_f: float = 0.0
    u_rs_ohm: float = 0.0
    u_ls_h: float = 0.0
    u_cp_f: float = 0.0


@dataclass(frozen=True, slots=True)
class Conditions:
    """Under what a sweep was taken. None: not known. ``age_h`` is hours since poling."""

    drive_v: float | None = None
    temperature_degc: float | None = None
    u_temperature_k: float = 0.5
    age_h: float | None = None
    element: int = 1


@dataclass(frozen=True, slots=True)
class Reading:
    """One impedance at one frequency, taken beside the sweep (contact check, first frequency again).

    ``stage`` is "contact before", "contact after", "low-frequency" or "repeat".
    """

    stage: str
    f_hz: float
    z_ohm: complex


@dataclass(frozen=True, slots=True, eq=False)
class Sweep:
    """Frequencies ``(N,)`` in hertz and complex impedances ``(N,)`` in ohm, as the instrument gave them.

    Uncorrected: the fixture's part is taken off in ``analysis``. ``absolute`` is False where only the shape
    of Z is known (transmission without a usable level). ``noise_relative`` is the instrument's standard
    deviation of the real and of the imaginary part over |Z|; None: not known, estimated from the fit.
    """

    f_hz: Floats
    z_ohm: Complexes
    conditions: Conditions = field(default_factory=Conditions)
    readings: tuple[Reading, ...] = ()
    noise_relative: float | None = None
    u_z_relative: float = 0.0
    u_f_relative: float = 0.0
    absolute: bool = True

    def __post_init__(self) -> None:
        f, z = np.asarray(self.f_hz, dtype=np.float64), np.asarray(self.z_ohm, dtype=np.complex128)
        if f.ndim != 1 or f.shape != z.shape:
            raise ValueError(f"a sweep needs as many impedances as frequencies, got {f.shape} and {z.shape}")
        f, z = f.copy(), z.copy()
        f.flags.writeable = z.flags.writeable = False
        object.__setattr__(self, "f_hz", f)
        object.__setattr__(self, "z_ohm", z)


# ── the numbers ──────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True, slots=True)
class Value:
    """A characteristic's value and its standard uncertainty, both in ``unit`` (SI).

    ``value`` None: the part does not have it (fr, fa at low M), or the sweep did not reach it; a warning says which.
    ``u`` None: not known.
    """

    value: float | None
    u: float | None
    unit: str


@dataclass(frozen=True, slots=True)
class Mode:
    """One resonance of the fitted circuit: frequency (Hz), Q, peak conductance (S); is it the wanted one?"""

    f_hz: float
    q: float
    g_s: float
    wanted: bool


@dataclass(frozen=True, slots=True)
class Residual:
    """Misfit √mean(|ΔZ|²/|Z|²), and degrees of freedom (real numbers minus parameters).

    Of a sweep without a resonance: the misfit that the best plain element (R, L, lossy C) leaves.
    """

    relative_rms: float | None
    dof: int


@dataclass(frozen=True, slots=True)
class Caveat:
    """A warning that travels with the numbers: code, the characteristic it touches or None, a sentence."""

    code: str
    characteristic: str | None
    text: str


class FitStatus(StrEnum):
    OK = "ok"
    NO_RESONANCE = "no-resonance"
    NOT_RESOLVED = "not-resolved"
    BAD_DATA = "bad-data"


@dataclass(frozen=True, slots=True)
class Fit:
    """What one sweep says: status with a sentence, every characteristic by id, modes, misfit, caveats.

    ``values`` is empty unless the status is ok. ``budget`` holds per characteristic the contributions to its
    standard uncertainty by name ("fit", "model", "instrument", "frequency", "correction rs", …). What referring to the
    reference temperature and age adds is in the judgement's values, not here.
    """

    status: FitStatus
    message: str
    values: Mapping[str, Value] = field(default_factory=dict)
    modes: tuple[Mode, ...] = ()
    residual: Residual = Residual(None, 0)
    caveats: tuple[Caveat, ...] = ()
    budget: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    span_hz: tuple[float, float] | None = None


# ── limits ───────────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True, slots=True)
class Requirement:
    """One characteristic with its limits (SI, None: no limit on that side) and how to decide.

    ``rule`` is "simple" or "guarded"; ``max_false_accept`` the one-sided risk of the guarded rule;
    ``between`` ("fail" or "hold") what a value too close to its limit comes to; ``action`` what the operator reads;
    ``at_hz`` the frequency of a low-frequency characteristic (c_at, tan_delta_at), else None.
    ``unit`` is the unit as written in the file, for showing; the numbers are SI.
    """

    characteristic: str
    min: float | None
    max: float | None
    unit: str
    rule: str = "guarded"
    max_false_accept: float = 0.05
    u_max: float | None = None
    between: str = "fail"
    action: str = ""
    element: int = 1
    at_hz: float | None = None


@dataclass(frozen=True, slots=True)
class Grade:
    """A passing part whose ``characteristic`` lies in [min, max) (the last grade: [min, max]) is sorted here."""

    name: str
    characteristic: str
    min: float
    max: float
    unit: str


@dataclass(frozen=True, slots=True)
class ModeSpec:
    """The wanted mode: its kind, where to look for it, and the circuit that fits this part number.

    ``kind``: "thickness", "radial", "length", "length-33", "ring", "stack". ``branches``: motional branches in the fit;
    ``span``: half-width of the fit's window as a share of fs, None for the whole search window.
    ``poisson``: the disc's planar Poisson's ratio for kp, None where it does not apply.
    """

    kind: str
    search_hz: tuple[float, float]
    branches: int = 1
    span: float | None = None
    poisson: float | None = None


@dataclass(frozen=True, slots=True)
class ContactWindow:
    """Where a well-contacted part's low-frequency capacitance (F) and loss (1) lie, and the frequency to look at."""

    f_hz: float
    min_f: float
    max_f: float
    max_tan_delta: float


@dataclass(frozen=True, slots=True)
class MeasurementSpec:
    """Drive in volts, tries a part gets, points of the locating and resolving pass, contact window."""

    drive_v: float = 1.0
    attempts: int = 2
    strategy: str = "two-pass"  # or "uniform"
    points: int = 401
    contact: ContactWindow | None = None


@dataclass(frozen=True, slots=True)
class ConditionSpec:
    """What the part must be measured under, and how fs and C0 are referred to reference temperature and age.

    Temperature coefficients in 1/K, ageing rates as relative change per decade of time, each with its u.
    """

    loading: str = "air"
    clamping: str = "free"
    min_degc: float | None = None
    max_degc: float | None = None
    reference_degc: float | None = None
    fs_per_k: float = 0.0
    u_fs_per_k: float = 0.0
    c0_per_k: float = 0.0
    u_c0_per_k: float = 0.0
    min_age_h: float | None = None
    reference_age_h: float | None = None
    fs_per_decade: float = 0.0
    u_fs_per_decade: float = 0.0
    c0_per_decade: float = 0.0
    u_c0_per_decade: float = 0.0


@dataclass(frozen=True, slots=True)
class LotSpec:
    """When to hold a lot: so many of the same fail reason, or of no verdicts, in a row (None: never); least yield."""

    stop_same_reason: int | None = None
    stop_no_verdict: int | None = None
    min_yield: float | None = None


@dataclass(frozen=True, slots=True)
class ApplicationSpec:
    """The board that will drive the part, and the liquid, for the application figures.

    ``board_hz`` with its relative ``board_tolerance``; ``loaded_q``, ``loaded_shift`` (relative) under the real load;
    ``mesh`` True: droplets are set by the aperture, not by frequency.
    """

    board_hz: float | None = None
    board_tolerance: float = 0.0
    loaded_q: float | None = None
    loaded_shift: float = 0.0
    surface_tension_n_per_m: float | None = None
    density_kg_per_m3: float | None = None
    mesh: bool = False


@dataclass(frozen=True, slots=True)
class LimitSet:
    """A limit file, read: what a part number must meet. ``text`` is the file itself, ``sha256`` its hash (hex)."""

    part_number: str
    revision: str
    description: str
    mode: ModeSpec
    measurement: MeasurementSpec
    conditions: ConditionSpec
    requirements: tuple[Requirement, ...]
    grades: tuple[Grade, ...]
    lot: LotSpec
    application: ApplicationSpec
    text: str
    sha256: str
    serial_pattern: str | None = None


# ── judging ──────────────────────────────────────────────────────────────────────────────────


class Verdict(StrEnum):
    PASS = "pass"
    FAIL = "fail"
    NONE = "no verdict"


@dataclass(frozen=True, slots=True)
class Reason:
    """Why: a code, the characteristic or None, its value and the limit it met (SI), and a sentence to read aloud."""

    code: str
    characteristic: str | None
    value: float | None
    limit: float | None
    text: str


@dataclass(frozen=True, slots=True)
class Judgement:
    """The verdict on one sweep; ``values`` are referred to reference temperature and age, as judged."""

    verdict: Verdict
    grade: str | None
    reasons: tuple[Reason, ...]
    values: Mapping[str, Value]
    caveats: tuple[Caveat, ...] = ()


# ── evidence ─────────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True, slots=True)
class Opening:
    """What is known before the first instrument command of an attempt; committed first.

    ``identity``: how the serial was made: "scanned", "typed", "file" or "auto". ``number`` counts the tries at this
    serial in this lot from 1. ``at`` is UTC, ISO 8601 with microseconds and Z.
    """

    serial: str
    identity: str
    lot: str
    part_number: str
    limits_sha256: str
    operator: str
    number: int
    element: int
    plan: Mapping[str, Any]
    at: str


@dataclass(frozen=True, slots=True)
class Record:
    """The evidence of one attempt. ``sweep`` None: the bench gave none; ``final`` False: another try follows."""

    opening: Opening
    sweep: Sweep | None
    fit: Fit | None
    judgement: Judgement
    correction: Correction
    instruments: tuple[Instrument, ...]
    software: Mapping[str, str]
    final: bool
    at: str
