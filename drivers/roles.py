"""What each instrument on a bench is for: at most four methods a role.

TYPES. A driver for a new family fulfils one of these; ``harness.bench`` asks for nothing else.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Identity:
    """An instrument as it named itself (IEEE 488.2 ``*IDN?``), its resource and dialect.

    ``u_z_relative``, ``u_f_relative``: standard uncertainties (1) its dialect states for |Z| and frequency;
    ``noise_relative``: standard deviation of a reading's real and of its imaginary part, over |Z|.
    """

    resource: str
    dialect: str
    maker: str
    model: str
    serial: str
    firmware: str
    u_z_relative: float
    u_f_relative: float
    noise_relative: float


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """Frequencies ``(N,)`` in hertz as read back, impedances ``(N,)`` in ohm, in the order asked."""

    f_hz: NDArray[np.float64]
    z_ohm: NDArray[np.complex128]


class Meter(Protocol):
    """Measures impedance. ``sweep`` raises DriverError rather than return a number it cannot vouch for."""

    def identify(self) -> Identity: ...

    def sweep(self, f_hz: Sequence[float] | NDArray[np.float64], drive_v: float) -> Trace: ...

    def reopen(self) -> None:
        """Close, connect again and identify; after any WireError the old connection is not to be trusted."""
        ...

    def close(self) -> None: ...


class Scanner(Protocol):
    """Reads serials. ``read`` returns the next whole line without its end, or None when none came in time."""

    def read(self, timeout_s: float) -> str | None: ...

    def close(self) -> None: ...


class Handler(Protocol):
    """Moves parts. ``next_part`` asks for one: True when it sits in the fixture, False when there is no more,
    None when nothing was said in time. ``signal`` tells the verdict and returns once acknowledged."""

    def next_part(self, timeout_s: float) -> bool | None: ...

    def signal(self, outcome: str, grade: str | None) -> None: ...

    def close(self) -> None: ...
