"""What one key of a limit file means to another: units and dimensions, limits, windows, grades, prerequisites.

Each check takes the readable part of the raw tables and yields findings; none needs the others to have passed.
To add a check: a generator here and a place in ``CHECKS``.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Iterator, Mapping
from itertools import pairwise
from typing import Any

from harness.characteristics import CHARACTERISTICS
from harness.quantities import QuantityError, group, parse, scale, unit_factor
from harness.toml.findings import Finding, table, tables
from harness.toml.positions import Path

Tables = Mapping[str, Any]
FREQUENCIES = ("fs", "fp", "fm", "fn", "fr", "fa")
LOW_FREQUENCY = ("c_at", "tan_delta_at")
COUPLING_KIND = {"kp": "radial", "kt": "thickness", "k31": "length", "k33": "length-33"}
LIQUIDS = {"water": (0.0728, 998.2)}  # N/m and kg/m³ at 20 °C


def check_tables(kept: Tables) -> Iterator[Finding]:
    """Every mistake between keys."""
    for check in CHECKS:
        yield from check(kept)


def search_window(kept: Tables) -> tuple[tuple[float, float] | None, list[Finding]]:
    """The search window in hertz, None where it cannot be read, with what is wrong with it."""
    mode = table(kept, "mode")
    ends = mode.get("search")
    if not isinstance(ends, list) or len(ends) != 2:
        return None, []
    found: list[float] = []
    wrong: list[Finding] = []
    for index, end in enumerate(ends):
        try:
            found.append(_hertz(end, mode.get("unit")))
        except QuantityError as exc:
            wrong.append(Finding(("mode", "search", index), f"{exc}.", 'Write ["1.50 MHz", "1.90 MHz"].'))
    if wrong:
        return None, wrong
    if not 0 < found[0] < found[1] < 1e11:
        return None, [Finding(("mode", "search"), "does not rise from a lower to a higher frequency.")]
    return (found[0], found[1]), []


def _hertz(end: float | str, unit: str | None) -> float:
    if isinstance(end, str):
        return parse(end, "Hz")
    if unit is None:
        raise QuantityError(f"{end:g} has no unit; expected Hz, kHz or MHz, in quotes or as unit beside search")
    return scale(end, unit, "Hz")


def limits_si(block: Tables, *keys: str) -> list[float | None]:
    """The named numbers of a requirement, grade or contact table in SI; None where absent or unreadable."""
    dimension = _dimension(block)
    unit = block.get("unit", "1")
    try:
        return [None if block.get(key) is None else scale(float(block[key]), unit, dimension) for key in keys]
    except QuantityError:
        return [None for _ in keys]


def _dimension(block: Tables) -> str:
    return CHARACTERISTICS[block["characteristic"]].unit if "characteristic" in block else "F"


def _search(kept: Tables) -> Iterator[Finding]:
    yield from search_window(kept)[1]


def _units(kept: Tables) -> Iterator[Finding]:
    for name in ("require", "grade"):
        for path, block in tables(kept, name):
            if "characteristic" in block:
                yield from _unit(path, block)
    contact = table(kept, "measurement", "contact")
    if "unit" in contact:
        yield from _unit(("measurement", "contact"), contact)


def _unit(path: Path, block: Tables) -> Iterator[Finding]:
    try:
        unit_factor(block.get("unit", "1"), _dimension(block))
    except QuantityError as exc:
        missing = "unit" not in block
        text = "is missing" if missing else str(exc)
        remedy = (
            f"Write one that measures {block.get('characteristic', 'capacitance')}: {_tail(exc)}." if missing else ""
        )
        yield Finding((*path, "unit"), f"{text}.", remedy)
        return
    for key, value in zip(("min", "max", "u_max"), limits_si(block, "min", "max", "u_max"), strict=True):
        if value is not None and not math.isfinite(value):
            yield Finding((*path, key), "is too large a number.")


def _tail(exc: QuantityError) -> str:
    return str(exc).rpartition("expected ")[2]


def _min_max(kept: Tables) -> Iterator[Finding]:
    blocks = [*tables(kept, "require"), *tables(kept, "grade")]
    blocks.append((("measurement", "contact"), table(kept, "measurement", "contact")))
    for path, block in blocks:
        if "min" in block and "max" in block and block["min"] > block["max"]:
            yield Finding((*path, "max"), f"{block['max']:g} is below min {block['min']:g}.", "Swap or correct them.")
        elif "min" in block and "max" in block and block["min"] == block["max"] and path[0] != "require":
            yield Finding((*path, "max"), f"{block['max']:g} is also min: nothing lies between.", "Correct them.")


def _coupling_at_most_one(kept: Tables) -> Iterator[Finding]:
    """A coupling factor is a number below one: 38 is meant as a per cent."""
    for path, block in tables(kept, "require"):
        if block.get("characteristic") in ("keff", *COUPLING_KIND):
            for key, value in zip(("min", "max"), limits_si(block, "min", "max"), strict=True):
                if value is not None and value > 1:
                    text = f"{block[key]:g} is more than a coupling factor can be."
                    yield Finding((*path, key), text, f'Write {block[key] / 100:g}, or add unit = "%".')


def _no_limit(kept: Tables) -> Iterator[Finding]:
    for path, block in tables(kept, "require"):
        if "min" not in block and "max" not in block:
            name = block.get("characteristic", "the characteristic")
            yield Finding(path, f"{name} has neither min nor max.", "Write at least one of them.", (path,))


def _twice(kept: Tables) -> Iterator[Finding]:
    seen: dict[tuple[Any, ...], int] = {}
    for path, block in tables(kept, "require"):
        if "characteristic" not in block:
            continue
        key = (block["characteristic"], block.get("element", 1), block.get("at"))
        if key in seen:
            text = f"{key[0]} is required twice, here and in [[require]] number {seen[key] + 1}."
            yield Finding((*path, "characteristic"), text, "Put min and max into one.")
        seen.setdefault(key, int(path[1]))


def _one_frequency(kept: Tables) -> Iterator[Finding]:
    """A part has one low-frequency capacitance in its record, so one frequency an element."""
    first: dict[Any, Any] = {}
    for path, block in tables(kept, "require"):
        if block.get("characteristic") in LOW_FREQUENCY and "at" in block:
            at = first.setdefault(block.get("element", 1), block["at"])
            if _comparable(at) != _comparable(block["at"]):
                text = f"'{block['at']}' is another frequency than '{at}' above."
                yield Finding((*path, "at"), text, "Use one frequency for c_at and tan_delta_at.")


def _comparable(at: Any) -> Any:
    try:
        return parse(at, "Hz") if isinstance(at, str) else at
    except QuantityError:
        return at


def _information_only(kept: Tables) -> Iterator[Finding]:
    """What is told for information cannot carry a verdict: it has no uncertainty of its own."""
    for path, block in tables(kept, "require"):
        if block.get("characteristic") == "droplet":
            text = "droplet is told for information; it has no uncertainty and cannot be required."
            yield Finding((*path, "characteristic"), text, "Require fs or drive_share.")


def _at(kept: Tables) -> Iterator[Finding]:
    for path, block in tables(kept, "require"):
        name = block.get("characteristic")
        if name in LOW_FREQUENCY and "at" not in block:
            yield Finding(
                (*path, "characteristic"),
                f"{name} needs 'at', the frequency it is measured at.",
                'Such as at = "1 kHz".',
            )
        elif name is not None and name not in LOW_FREQUENCY and "at" in block:
            yield Finding((*path, "at"), f"{name} is not taken at a stated frequency.", "Leave 'at' out.")


def _kind(kept: Tables) -> Iterator[Finding]:
    mode = table(kept, "mode")
    for path, block in tables(kept, "require"):
        name = block.get("characteristic")
        wanted = COUPLING_KIND.get(str(name))
        where = (*path, "characteristic")
        if wanted and "kind" in mode and mode["kind"] != wanted:
            yield Finding(where, f"{name} is defined for mode kind '{wanted}', not '{mode['kind']}'.", "Require keff.")
        elif name == "kp" and mode.get("kind") == "radial" and "poisson" not in mode:
            remedy = "Write poisson in [mode], such as 0.31."
            yield Finding(where, "kp needs Poisson's ratio of the disc.", remedy, (("mode",),))
    if "poisson" in mode and mode.get("kind", "radial") != "radial":
        yield Finding(("mode", "poisson"), f"does not apply to mode kind '{mode['kind']}'.", "Leave it out.")


def _limits_in_window(kept: Tables) -> Iterator[Finding]:
    window = search_window(kept)[0]
    if window is None:
        return
    for path, block in tables(kept, "require"):
        if block.get("characteristic") not in FREQUENCIES:
            continue
        for key, value in zip(("min", "max"), limits_si(block, "min", "max"), strict=True):
            if value is not None and math.isfinite(value) and not window[0] < value < window[1]:
                text = f"{group(f'{block[key]:g}')} {block['unit']} is not inside the search window of [mode]."
                yield Finding((*path, key), text, "A part just outside its limits must still be found: widen search.")


def _grades(kept: Tables) -> Iterator[Finding]:
    by_characteristic: dict[str, list[tuple[Path, Tables]]] = defaultdict(list)
    names: dict[str, int] = {}
    for path, block in tables(kept, "grade"):
        if block.get("name") in names:
            yield Finding((*path, "name"), f"grade '{block['name']}' is there twice.", "Give each grade its own name.")
        if "name" in block:
            names[block["name"]] = int(path[1])
        if {"characteristic", "min", "max"} <= block.keys():
            by_characteristic[block["characteristic"]].append((path, block))
    if len(by_characteristic) > 1:
        path = list(by_characteristic.values())[1][0][0]
        text = f"grades are sorted by {' and by '.join(by_characteristic)}."
        yield Finding((*path, "characteristic"), text, "Sort all grades by the same characteristic.")
    for blocks in by_characteristic.values():
        yield from _seams(blocks)


def _seams(blocks: list[tuple[Path, Tables]]) -> Iterator[Finding]:
    """Gaps and overlaps between neighbouring grades."""
    ranged = [(limits_si(block, "min", "max"), path, block) for path, block in blocks]
    ordered = sorted(
        ((low, high, path, block) for (low, high), path, block in ranged if low is not None and high is not None),
        key=lambda item: (item[0], item[1]),
    )
    for (_, high, _, before), (low, _, path, block) in pairwise(ordered):
        names = f"grades '{before.get('name')}' and '{block.get('name')}'"
        if low > high:
            text = f"{names} leave a gap from {before['max']:g} to {block['min']:g}."
            yield Finding((*path, "min"), text, "Let one begin where the other ends.")
        elif low < high:
            text = f"{names} overlap from {block['min']:g} to {before['max']:g}."
            yield Finding((*path, "min"), text, "Let one begin where the other ends.")


def _conditions(kept: Tables) -> Iterator[Finding]:
    block = table(kept, "conditions")
    span = [parse(end, "degC") for end in block.get("temperature", [])]
    if len(span) == 2 and not span[0] < span[1]:
        yield Finding(("conditions", "temperature"), "does not rise from a lower to a higher temperature.")
    needs = {
        "reference_temperature": ("fs_per_k", "c0_per_k", "u_fs_per_k", "u_c0_per_k"),
        "reference_age_h": ("fs_per_decade", "c0_per_decade", "u_fs_per_decade", "u_c0_per_decade"),
    }
    for reference, keys in needs.items():
        for key in keys:
            if key in block and reference not in block:
                text = f"says nothing without {reference}."
                yield Finding(("conditions", key), text, f"Write {reference} in [conditions].", (("conditions",),))
                break


def _application(kept: Tables) -> Iterator[Finding]:
    block = table(kept, "application")
    here: tuple[Path, ...] = (("application",),)
    liquid = block.get("liquid")
    figures = {"surface_tension_n_per_m", "density_kg_per_m3"} <= block.keys()
    if liquid is not None and liquid not in LIQUIDS and not figures:
        text = f"the figures of '{liquid}' are not known here."
        yield Finding(("application", "liquid"), text, "Write surface_tension_n_per_m and density_kg_per_m3.", here)
    for path, requirement in tables(kept, "require"):
        where, name = (*path, "characteristic"), requirement.get("characteristic")
        if name == "drive_share" and not {"board", "loaded_q"} <= block.keys():
            remedy = "Write board and loaded_q in [application]."
            yield Finding(where, "drive_share needs the board and the loaded Q.", remedy, here)


CHECKS: tuple[Callable[[Tables], Iterator[Finding]], ...] = (
    _search,
    _units,
    _min_max,
    _no_limit,
    _twice,
    _one_frequency,
    _coupling_at_most_one,
    _information_only,
    _at,
    _kind,
    _limits_in_window,
    _grades,
    _conditions,
    _application,
)
