"""A lot of 40 parts of three families, described for the simulated bench; all of it invented.

Every defect twice or more, 20 sound parts, and 6 whose fs lies within three standard uncertainties of a limit.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Lot:
    """One family's share: its limit file, and (defect, count) and (fs limit, offset) of its parts in hertz."""

    family: str
    limits: str
    seed: int
    parts: tuple[tuple[str, int], ...]
    near: tuple[tuple[float, float], ...]

    def toml(self) -> str:
        """The lot description."""
        lines = [f'family = "{self.family}"', f"seed = {self.seed}"]
        for defect, count in self.parts:
            lines += ["[[part]]", f'defect = "{defect}"', f"count = {count}"]
        for limit, offset in self.near:
            lines += ["[[part]]", f"near = {{ fs_hz = {limit}, offset_hz = {offset} }}"]
        return "\n".join(lines) + "\n"


# sound parts stand between the faulty ones, or the station would rightly hold the lot
LOTS = (
    Lot(
        "MD-1650",
        "mist-discs/MD-1650.toml",
        11,
        (
            ("sound", 2), ("chip", 1), ("sound", 1), ("open-lead", 1), ("crack", 1), ("sound", 2), ("short", 1),
            ("poor-bond", 1), ("sound", 1), ("wrong-part", 1), ("wrong-thickness", 1), ("sound", 1), ("weak-poling", 1),
        ),
        ((1662000.0, -200.0), (1638000.0, 150.0)),
    ),
    Lot(
        "MR-113",
        "mesh-rings/MR-113.toml",
        12,
        (
            ("sound", 1), ("crack", 1), ("sound", 1), ("short", 1), ("chip", 1), ("sound", 2), ("weak-poling", 1),
            ("wrong-part", 1), ("sound", 2),
        ),
        ((114000.0, -8.0), (112000.0, 6.0)),
    ),
    Lot(
        "BD-40",
        "bolt-clamped/BD-40.toml",
        13,
        (
            ("sound", 2), ("poor-bond", 1), ("sound", 1), ("open-lead", 1), ("wrong-thickness", 1), ("sound", 2),
        ),
        ((40350.0, -5.0), (39650.0, -4.0)),
    ),
)  # fmt: skip
