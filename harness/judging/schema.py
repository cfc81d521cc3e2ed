"""The limit file's tables and keys, as pydantic models: what an editor completes and the loader accepts.

Each key's description is its documentation in the JSON Schema. What one key means to another (units, limits
against the search window, grades) is checked in ``limit_checks``.
"""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field

from harness.toml import readers as r
from harness.toml.document import Block
from harness.toml.findings import tables_of

KINDS = ("thickness", "radial", "length", "length-33", "ring", "stack")

Text = Annotated[str, r.text()]
Name = Annotated[str, r.text(empty=False)]
Pattern = Annotated[str, r.pattern()]
Characteristic = Annotated[str, r.characteristic()]
Number = Annotated[float, r.number()]
Positive = Annotated[float, r.number(above=0.0)]
Small = Annotated[float, r.ratio(above=0.0, below=1.0)]
Share = Annotated[float, r.ratio(least=0.0, below=1.0)]
Risk = Annotated[float, r.ratio(above=0.0, below=0.5)]
Relative = Annotated[float, r.ratio(least=-0.5, below=0.5)]
RelativeU = Annotated[float, r.ratio(least=0.0, below=0.5)]
PerKelvin = Annotated[float, r.ratio(dimension="1/K", least=-0.1, below=0.1)]
PerKelvinU = Annotated[float, r.ratio(dimension="1/K", least=0.0, below=0.1)]
Celsius = Annotated[float, r.quantity("degC", least=-273.15, below=1500.0)]
Frequency = Annotated[float, r.quantity("Hz", above=0.0, below=1e11)]


class Mode(Block):
    """The wanted mode, where to look for it, and the circuit that fits it."""

    kind: Annotated[str, r.choice(*KINDS)] = Field(
        description="Kind of the wanted mode; decides which coupling factor exists."
    )
    search: Annotated[list[Annotated[float | str, r.number_or_quantity()]], Field(min_length=2, max_length=2)] = Field(
        description='Where to look for the resonance: ["1.50 MHz", "1.90 MHz"], or numbers with unit beside them.'
    )
    unit: Name | None = Field(default=None, description="Unit of search, when its numbers stand without one.")
    branches: Annotated[int, r.whole(1, 8)] = Field(default=1, description="Motional branches in the fitted circuit.")
    span: Small | None = Field(
        default=None, description="Half-width of the fit's window as a share of fs; left out: the whole search window."
    )
    poisson: Annotated[float, r.number(above=0.0, below=0.5)] | None = Field(
        default=None, description="Planar Poisson's ratio of a plain disc, for kp."
    )


class Contact(Block):
    """Where a well-contacted part's capacitance and loss lie, far below resonance."""

    frequency: Frequency = Field(description='Where to look, such as "1 kHz".')
    min: Positive = Field(description="Least capacitance, in unit.")
    max: Positive = Field(description="Greatest capacitance, in unit.")
    unit: Name = Field(description='Unit of min and max, such as "nF".')
    max_tan_delta: Annotated[float, r.ratio(above=0.0)] = Field(description="Greatest dielectric loss tan δ.")


class Measurement(Block):
    """How the part is measured."""

    drive: Annotated[float, r.quantity("V", above=0.0, below=1e4)] = Field(
        default=1.0, description='Drive across the part, such as "1 V".'
    )
    attempts: Annotated[int, r.whole(1, 9)] = Field(
        default=2, description="Tries before a part without a verdict goes to hold."
    )
    strategy: Annotated[str, r.choice("two-pass", "uniform")] = Field(
        default="two-pass", description="Locate then resolve, or one even sweep of the window."
    )
    points: Annotated[int, r.whole(21, 20001)] = Field(
        default=401, description="Points of a sweep of the search window."
    )
    contact: Contact | None = Field(default=None, description="Contact check before and after the sweep.")


class Conditions(Block):
    """What the part is measured under, and how fs and C0 are referred to one temperature and age."""

    loading: Text = Field(default="air", description="What the part works into while measured: air, or a liquid.")
    clamping: Text = Field(default="free", description="How the fixture holds the part.")
    temperature: Annotated[list[Celsius], Field(min_length=2, max_length=2)] | None = Field(
        default=None, description='Allowed range, such as ["18 degC", "28 degC"]; outside there is no verdict.'
    )
    reference_temperature: Celsius | None = Field(
        default=None, description="Temperature that fs and C0 are referred to."
    )
    fs_per_k: PerKelvin = Field(default=0.0, description='Relative change of fs per kelvin, such as "-40 ppm/K".')
    u_fs_per_k: PerKelvinU = Field(default=0.0, description="Standard uncertainty of fs_per_k.")
    c0_per_k: PerKelvin = Field(default=0.0, description="Relative change of capacitance per kelvin.")
    u_c0_per_k: PerKelvinU = Field(default=0.0, description="Standard uncertainty of c0_per_k.")
    min_age_h: Annotated[float, r.number(least=0.0)] | None = Field(
        default=None, description="Least hours since poling; younger parts get no verdict."
    )
    reference_age_h: Positive | None = Field(
        default=None, description="Hours since poling that fs and C0 are referred to."
    )
    fs_per_decade: Relative = Field(default=0.0, description="Relative change of fs per tenfold age.")
    u_fs_per_decade: RelativeU = Field(default=0.0, description="Standard uncertainty of fs_per_decade.")
    c0_per_decade: Relative = Field(default=0.0, description="Relative change of capacitance per tenfold age.")
    u_c0_per_decade: RelativeU = Field(default=0.0, description="Standard uncertainty of c0_per_decade.")


class Require(Block):
    """One requirement: a characteristic, its limits, and how to decide."""

    characteristic: Characteristic = Field(description="What is limited: fs, r1, qm, c0, keff and the like.")
    unit: Name = Field("1", description="Unit of min, max and u_max; may be left out for plain ratios.")
    min: Number | None = Field(default=None, description="Lowest allowed value, in unit; equal is inside.")
    max: Number | None = Field(default=None, description="Highest allowed value, in unit; equal is inside.")
    rule: Annotated[str, r.choice("simple", "guarded")] = Field(
        default="guarded", description="guarded: proven inside; simple: inside as measured."
    )
    max_false_accept: Risk = Field(
        default=0.05, description="Greatest probability that a part accepted at the edge is outside (one-sided)."
    )
    u_max: Positive | None = Field(
        default=None, description="Greatest standard uncertainty that may carry a verdict, in unit."
    )
    between: Annotated[str, r.choice("fail", "hold")] = Field(
        default="fail", description="What a value too close to its limit to prove comes to: fail, or hold (no verdict)."
    )
    action: Text = Field("", description="What the operator reads and does when this requirement is not met.")
    element: Annotated[int, r.whole(1, 64)] = Field(default=1, description="Which electrode pair of the part.")
    at: Frequency | None = Field(default=None, description='Frequency of c_at and tan_delta_at, such as "1 kHz".')


class Grade(Block):
    """A class that passing parts are sorted into: min ≤ value < max, the topmost up to and including its max."""

    name: Name = Field(description="What stands on the tray.")
    characteristic: Characteristic = Field(description="What is sorted by; the same for all grades.")
    unit: Name = Field("1", description="Unit of min and max.")
    min: Number = Field(description="From this value on.")
    max: Number = Field(description="Up to this value.")


class Lot(Block):
    """When a lot is held for a person to look at."""

    stop_same_reason: Annotated[int, r.whole(2, 1000)] | None = Field(
        default=None, description="Hold after so many fails in a row for the same reason."
    )
    stop_no_verdict: Annotated[int, r.whole(2, 1000)] | None = Field(
        default=None, description="Hold after so many parts in a row without a verdict."
    )
    min_yield: Share | None = Field(default=None, description="Least share of passing parts.")


class Application(Block):
    """The board and the liquid, for the application figures."""

    board: Frequency | None = Field(default=None, description="Frequency at which the board drives the part.")
    board_tolerance: Share = Field(default=0.0, description="Greatest relative deviation of the board's frequency.")
    loaded_q: Annotated[float, r.number(above=0.0, below=1e9)] | None = Field(
        default=None, description="Quality factor of the part under its real load."
    )
    loaded_shift: Relative = Field(
        default=0.0, description="Relative change of fs from the measuring loading to the real load."
    )
    liquid: Name | None = Field(
        default=None, description="Name of the liquid; for water the two figures below are known."
    )
    surface_tension_n_per_m: Annotated[float, r.number(above=0.0, below=10.0)] | None = Field(
        default=None, description="Surface tension of the liquid, N/m."
    )
    density_kg_per_m3: Annotated[float, r.number(least=1.0, below=1e5)] | None = Field(
        default=None, description="Density of the liquid, kg/m³."
    )
    mesh: Annotated[bool, r.switch()] = Field(
        default=False, description="true: the mesh's apertures set the droplet size."
    )


class LimitFile(Block):
    """What a part number must meet."""

    format: Annotated[int, r.whole(1, 1)] = Field(description="Version of this file format: 1.")
    part_number: Name = Field(description="The part number these limits are for.")
    revision: Name = Field(description="Revision of these limits, as on the drawing.")
    description: Text = Field("", description="The part in a few words.")
    serial_pattern: Pattern | None = Field(
        default=None, description="Regular expression that a whole serial must match."
    )
    mode: Mode
    measurement: Measurement = Field(default_factory=Measurement)
    conditions: Conditions = Field(default_factory=Conditions)
    require: Annotated[list[Require], Field(min_length=1)] = Field(description="The requirements, one table each.")
    grade: list[Grade] = Field(default_factory=list, description="Classes of passing parts.")
    lot: Lot = Field(default_factory=Lot)
    application: Application = Field(default_factory=Application)


# Where each table stands, for the checks and the documentation test.
TABLES = tables_of(LimitFile)


def limits_schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of a limit file, for editors."""
    schema = _without_null(LimitFile.model_json_schema())
    assert isinstance(schema, dict)
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema, "title": "Limit file"}


def _without_null(node: Any) -> Any:
    """TOML has no null: a key is there or not, so the schema need not offer it; nor titles that repeat the key."""
    if isinstance(node, list):
        return [_without_null(item) for item in node]
    if not isinstance(node, dict):
        return node
    kept = {key: _without_null(item) for key, item in node.items() if not (key == "title" and isinstance(item, str))}
    if "default" in kept and kept["default"] is None:
        del kept["default"]
    choices = [item for item in kept.get("anyOf", []) if item != {"type": "null"}]
    if len(choices) == 1:
        del kept["anyOf"]
        kept = {**choices[0], **kept}
    return kept
