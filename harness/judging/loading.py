"""A checked limit file's model → LimitSet, in SI units."""

from __future__ import annotations

import hashlib

from harness.characteristics import CHARACTERISTICS
from harness.judging import schema
from harness.judging.limit_checks import LIQUIDS
from harness.quantities import scale
from harness.records import (
    ApplicationSpec,
    ConditionSpec,
    ContactWindow,
    Grade,
    LimitSet,
    LotSpec,
    MeasurementSpec,
    ModeSpec,
    Requirement,
)


def limit_set(doc: schema.LimitFile, search_hz: tuple[float, float], text: str) -> LimitSet:
    """``doc`` must have passed every check; ``text`` is kept whole, its hash is of its UTF-8 bytes."""
    return LimitSet(
        part_number=doc.part_number,
        revision=doc.revision,
        description=doc.description,
        mode=ModeSpec(doc.mode.kind, search_hz, doc.mode.branches, doc.mode.span, doc.mode.poisson),
        measurement=_measurement(doc.measurement),
        conditions=_conditions(doc.conditions),
        requirements=tuple(_requirement(block) for block in doc.require),
        grades=tuple(_grade(block) for block in doc.grade),
        lot=LotSpec(doc.lot.stop_same_reason, doc.lot.stop_no_verdict, doc.lot.min_yield),
        application=_application(doc.application),
        text=text,
        sha256=hashlib.sha256(text.encode("utf-8")).hexdigest(),
        serial_pattern=doc.serial_pattern,
    )


def _measurement(block: schema.Measurement) -> MeasurementSpec:
    window = None if block.contact is None else _contact(block.contact)
    return MeasurementSpec(block.drive, block.attempts, block.strategy, block.points, window)


def _contact(block: schema.Contact) -> ContactWindow:
    low, high = scale(block.min, block.unit, "F"), scale(block.max, block.unit, "F")
    return ContactWindow(block.frequency, low, high, block.max_tan_delta)


def _conditions(block: schema.Conditions) -> ConditionSpec:
    low, high = block.temperature or (None, None)
    return ConditionSpec(
        min_degc=low,
        max_degc=high,
        reference_degc=block.reference_temperature,
        **block.model_dump(exclude={"temperature", "reference_temperature"}),
    )


def _requirement(block: schema.Require) -> Requirement:
    dimension = CHARACTERISTICS[block.characteristic].unit

    def si(value: float | None) -> float | None:
        return None if value is None else scale(value, block.unit, dimension)

    return Requirement(
        characteristic=block.characteristic,
        min=si(block.min),
        max=si(block.max),
        unit=block.unit,
        rule=block.rule,
        max_false_accept=block.max_false_accept,
        u_max=si(block.u_max),
        between=block.between,
        action=block.action,
        element=block.element,
        at_hz=block.at,
    )


def _grade(block: schema.Grade) -> Grade:
    dimension = CHARACTERISTICS[block.characteristic].unit
    low, high = scale(block.min, block.unit, dimension), scale(block.max, block.unit, dimension)
    return Grade(block.name, block.characteristic, low, high, block.unit)


def _application(block: schema.Application) -> ApplicationSpec:
    tension, density = LIQUIDS.get(block.liquid or "", (None, None))
    return ApplicationSpec(
        board_hz=block.board,
        board_tolerance=block.board_tolerance,
        loaded_q=block.loaded_q,
        loaded_shift=block.loaded_shift,
        surface_tension_n_per_m=block.surface_tension_n_per_m or tension,
        density_kg_per_m3=block.density_kg_per_m3 or density,
        mesh=block.mesh,
    )
