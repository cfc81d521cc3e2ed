"""Where the bench's parts come from: a lot of the physics room, laid out in the fixture.

PURE. The only module outside ``physics`` that knows how parts are made.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from sim_instruments.bench import Complexes, Floats, Impedance, Specimen
from sim_instruments.physics.defects import empty_fixture
from sim_instruments.physics.fixture import Fixture, embed
from sim_instruments.physics.materials import REFERENCE_DEGC
from sim_instruments.physics.parts import Part
from sim_instruments.physics.truth import characteristics
from sim_instruments.station_file import FixtureValues

# The analyser's preset: what is true of a part is told for this drive.
TRUTH_AT_V = 1.0


@dataclass(frozen=True, slots=True)
class Tray:
    """The parts in order, what the meter sees of the open fixture, and the fixture itself."""

    lot: Sequence[Specimen]
    empty: Impedance
    fixture: FixtureValues


def tray_of(parts: Sequence[Part], fixture: Fixture | None = None, temperature_degc: float = REFERENCE_DEGC) -> Tray:
    """Lay a lot out: each part as it looks from the terminals of ``fixture``, at one temperature."""
    fixture = fixture or Fixture()

    def at_terminals(part: Part) -> Impedance:
        def impedance(f_hz: Floats, drive_v: float) -> Complexes:
            return embed(part.impedance(f_hz, temperature_degc, drive_v), f_hz, fixture)

        return impedance

    return Tray(
        [_specimen(part, at_terminals(part), temperature_degc) for part in parts],
        at_terminals(empty_fixture(parts[0].family)),
        FixtureValues(fixture.rs_ohm, fixture.ls_h, fixture.cp_f, temperature_degc),
    )


def _specimen(part: Part, impedance: Impedance, temperature_degc: float) -> Specimen:
    known: dict[str, object] = {}

    def truth() -> Mapping[str, object]:
        if not known:  # found by searching the curve: worth doing once, and only when asked
            values = characteristics(part, temperature_degc, TRUTH_AT_V)
            known.update(defect=part.defect, family=part.family, values=values)
        return known

    return Specimen(part.serial, impedance, truth)
