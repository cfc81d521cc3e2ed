"""Lots of parts: drawn from a seed, or as a lot description asks.

A lot description is TOML text; every key but ``family`` and ``seed`` may be left out::

    family = "MD-1650"              # a name of families.FAMILIES; for parts that do not say otherwise
    seed = 7                        # whole number from 0
    serial_prefix = "MD-"           # and four digits counted over the lot; the family's own prefix when absent

    [[part]]
    defect = "crack"                # "sound" when absent
    count = 2                       # 1 when absent

    [[part]]
    near = { fs_hz = 1670000.0, offset_hz = -200.0 }   # fs placed at fs_hz + offset_hz, at 23 °C; no offset when absent
    count = 2

    [[part]]
    family = "BD-40"                # so that one lot can be mixed
    serial = "BD-X1"                # only where count is 1
    defect = "short"

Numbers are plain, in the unit the key names. Unknown keys and wrong values are refused in one sentence that names
the part and key. Part k of a seed is the same whatever comes after it: each has its own child of the seed.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from sim_instruments.physics.defects import DEFECTS, make_part
from sim_instruments.physics.families import FAMILIES, Batch
from sim_instruments.physics.parts import SOUND, Part
from sim_instruments.physics.truth import placed

# One of each in turn; an empty fixture is no part.
DEFAULT_DEFECTS = tuple(defect for defect in DEFECTS if defect != "no-part")
_ONE_IN = 4
_MOST = 100_000
_TOO_MANY = 2**63
_HIGHEST_HZ = 1e12
# The child of a lot's seed that its batches are drawn from; parts use (k,).
_BATCH_KEY = 2**31


class LotError(ValueError):
    """A lot description that cannot be followed; the message is one sentence with the place."""


@dataclass(frozen=True, slots=True)
class Order:
    """One part to be made: ``place_hz`` is where its fs shall lie, None where it falls."""

    serial: str
    family: str
    defect: str = SOUND
    place_hz: float | None = None


def make_lot(
    family: str,
    n: int,
    seed: int,
    *,
    defects: Sequence[str] = DEFAULT_DEFECTS,
    near_limit_hz: Sequence[float] = (),
    serial_prefix: str | None = None,
) -> tuple[Part, ...]:
    """``n`` parts of one family: three sound, then one with the next defect of ``defects``, in turn.

    The first sound parts are placed with their fs at ``near_limit_hz``, one each. ``defects=()`` makes all sound.
    Part k does not depend on ``n``. Raises LotError for a family or defect that does not exist.
    """
    _known("family", family, FAMILIES)
    for defect in defects:
        _known("defect", defect, {SOUND: None, **DEFECTS})
    places, orders = list(near_limit_hz), []
    for k in range(n):
        turn, place = divmod(k, _ONE_IN)
        bad = bool(defects) and place == _ONE_IN - 1
        defect = defects[turn % len(defects)] if bad else SOUND
        at = places.pop(0) if defect == SOUND and places else None
        orders.append(Order(_serial(family, serial_prefix, k), family, defect, at))
    return made(orders, seed)


def made(orders: Sequence[Order], seed: int) -> tuple[Part, ...]:
    """The parts of a list of orders; deterministic, each from its own child of ``seed``."""
    families = list(FAMILIES)
    batches = {name: Batch.drawn(_rng(seed, _BATCH_KEY, families.index(name))) for name in families}
    return tuple(_one(order, _rng(seed, k), batches[order.family]) for k, order in enumerate(orders))


def read_lot(text: str, name: str = "lot") -> tuple[Part, ...]:
    """The parts that a lot description asks for (format: the module's docstring); ``name`` is named in errors."""
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as mistake:
        raise LotError(f"{name}: not valid TOML: {mistake}.") from mistake
    try:
        top = _Table("", table, ("family", "seed", "serial_prefix", "part"))
        seed = top.whole("seed", least=0)
        top.choice("family", FAMILIES)
        return made(_orders(top), seed)
    except LotError as mistake:
        raise LotError(f"{name}: {mistake}") from None


# ── making ───────────────────────────────────────────────────────────────────────────────────


def _rng(seed: int, *key: int) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=key)))


def _one(order: Order, rng: np.random.Generator, batch: Batch) -> Part:
    part = make_part(order.family, order.serial, rng, order.defect, batch)
    if order.place_hz is None:
        return part
    try:
        return placed(part, order.place_hz)
    except ValueError as mistake:
        raise LotError(f"part {order.serial}: near: {mistake}.") from mistake


def _serial(family: str, prefix: str | None, k: int) -> str:
    return f"{FAMILIES[family].prefix if prefix is None else prefix}{k + 1:04d}"


# ── reading ──────────────────────────────────────────────────────────────────────────────────


@dataclass(frozen=True, slots=True)
class _Table:
    """One table of the description: strict look-ups that raise LotError with ``place``."""

    place: str
    items: Mapping[str, Any]
    keys: tuple[str, ...]

    def __post_init__(self) -> None:
        for key in self.items:
            if key not in self.keys:
                raise LotError(f"{self.place}key '{key}' is not known; known are {', '.join(self.keys)}.")

    def refuse(self, key: str, wanted: str) -> LotError:
        if key not in self.items:
            return LotError(f"{self.place}key '{key}' is missing; it must be {wanted}.")
        return LotError(f"{self.place}key '{key}' is {self.items[key]!r}; it must be {wanted}.")

    def choice(self, key: str, known: Mapping[str, Any], default: str | None = None) -> str:
        value = self.items.get(key, default)
        if not isinstance(value, str) or value not in known:
            raise self.refuse(key, f"one of {', '.join(known)}")
        return value

    def text(self, key: str) -> str | None:
        value = self.items.get(key)
        if value is None:
            return None
        # a serial travels in one line of a scanner
        if not isinstance(value, str) or not value or not value.isprintable() or value != value.strip():
            raise self.refuse(key, "printable text on one line, without blanks around it")
        return value

    def whole(self, key: str, least: int, default: int | None = None) -> int:
        value = self.items.get(key, default)
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value < _TOO_MANY:
            raise self.refuse(key, f"a whole number from {least} to {_TOO_MANY - 1}")
        return value

    def hertz(self, key: str, default: float | None = None) -> float:
        value = self.items.get(key, default)
        if isinstance(value, bool) or not isinstance(value, int | float) or not abs(value) <= _HIGHEST_HZ:
            raise self.refuse(key, "a number of hertz")
        return float(value)

    def tables(self, key: str) -> Sequence[Mapping[str, Any]]:
        value = self.items.get(key)
        if not isinstance(value, list) or not value or not all(isinstance(item, dict) for item in value):
            raise self.refuse(key, "one or more [[part]] tables")
        return value


def _orders(top: _Table) -> list[Order]:
    prefix, orders = top.text("serial_prefix"), list[Order]()
    for position, item in enumerate(top.tables("part"), start=1):
        keys = ("family", "serial", "defect", "count", "near")
        entry = _Table(f"part {position}: ", item, keys)
        orders += _expanded(entry, top.choice("family", FAMILIES), prefix, len(orders))
        if len(orders) > _MOST:
            raise LotError(f"part {position}: the lot would have more than {_MOST} parts.")
    _each_once(order.serial for order in orders)
    return orders


def _expanded(entry: _Table, family: str, prefix: str | None, first: int) -> list[Order]:
    """The orders of one [[part]] table."""
    family = entry.choice("family", FAMILIES, default=family)
    defect = entry.choice("defect", {SOUND: None, **DEFECTS}, default=SOUND)
    count = entry.whole("count", least=1, default=1)
    serial, place_hz = entry.text("serial"), _place_hz(entry)
    if serial is not None and count != 1:
        raise LotError(f"{entry.place}key 'serial' names one part, but 'count' is {count}.")
    numbers = range(first, first + min(count, _MOST + 1))
    return [Order(serial or _serial(family, prefix, k), family, defect, place_hz) for k in numbers]


def _place_hz(entry: _Table) -> float | None:
    if "near" not in entry.items:
        return None
    near = entry.items["near"]
    if not isinstance(near, dict):
        raise entry.refuse("near", "a table such as { fs_hz = 1670000.0, offset_hz = -200.0 }")
    table = _Table(f"{entry.place}near: ", near, ("fs_hz", "offset_hz"))
    return table.hertz("fs_hz") + table.hertz("offset_hz", default=0.0)


def _each_once(serials: Iterable[str]) -> None:
    seen = set[str]()
    for serial in serials:
        if serial in seen:
            raise LotError(f"serial '{serial}' comes twice.")
        seen.add(serial)


def _known(what: str, name: str, known: Mapping[str, Any]) -> None:
    if name not in known:
        raise LotError(f"{what} '{name}' is not known; known are {', '.join(known)}.")
