"""The characteristics a part can be judged by: one table of ids, signs, SI units and meanings.

TYPES. The ids are the public surface: limit files, JSON, the store and reports use them alike.
To add one: a row here, its formula in ``circuits`` or ``fitting``, a line in METHODS.md.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Characteristic:
    """``unit`` is the SI unit (``1`` for ratios), ``sign`` what stands on paper, ``name`` in words."""

    id: str
    sign: str
    unit: str
    name: str


_ROWS = (
    ("fs", "fs", "Hz", "series resonance"),
    ("fp", "fp", "Hz", "parallel resonance"),
    ("fm", "fm", "Hz", "frequency of least impedance"),
    ("fn", "fn", "Hz", "frequency of greatest impedance"),
    ("fr", "fr", "Hz", "resonance at zero phase"),
    ("fa", "fa", "Hz", "antiresonance at zero phase"),
    ("bandwidth", "Δf", "Hz", "half-power bandwidth"),
    ("r1", "R1", "ohm", "motional resistance"),
    ("zm", "Zm", "ohm", "least impedance"),
    ("zn", "Zn", "ohm", "greatest impedance"),
    ("l1", "L1", "H", "motional inductance"),
    ("c0", "C0", "F", "capacitance beside the wanted mode"),
    ("c1", "C1", "F", "motional capacitance"),
    ("c_at", "C", "F", "low-frequency capacitance"),
    ("qm", "Qm", "1", "mechanical quality factor"),
    ("q_half_power", "Q", "1", "quality factor by half-power points"),
    ("keff", "keff", "1", "effective coupling factor"),
    ("kp", "kp", "1", "planar coupling factor"),
    ("kt", "kt", "1", "thickness coupling factor"),
    ("k31", "k31", "1", "transverse coupling factor"),
    ("k33", "k33", "1", "longitudinal coupling factor"),
    ("m", "M", "1", "figure of merit"),
    ("tan_delta", "tan δ", "1", "dielectric loss at resonance"),
    ("tan_delta_at", "tan δ", "1", "low-frequency dielectric loss"),
    ("drive_share", "drive share", "1", "share of the peak power that the board delivers"),
    ("unwanted_g", "unwanted mode", "1", "conductance of the strongest unwanted mode over the wanted one's"),
    ("phase_max", "phase", "deg", "greatest phase between resonances"),
    ("unwanted_f", "unwanted mode", "Hz", "frequency of the strongest unwanted mode"),
    ("droplet", "droplet", "m", "median droplet diameter (Lang)"),
)

CHARACTERISTICS: dict[str, Characteristic] = {row[0]: Characteristic(*row) for row in _ROWS}
