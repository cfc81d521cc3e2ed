"""The pairs of columns a CSV log may carry beside ``frequency_hz``, and what to make of a header that has none.

PAIRS is the table: to add a pair, add a row with its two names and how they become one complex quantity.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import NoReturn

from numpy.typing import ArrayLike

from harness.correction import conversions
from harness.logs.mistakes import Mistakes
from harness.records import Complexes

FREQUENCY = "frequency_hz"


@dataclass(frozen=True, slots=True)
class Pair:
    """Two columns that make one quantity: ``kind`` "z", "s11" or "s21", and how.

    ``magnitude``: the first column cannot be below zero.
    """

    first: str
    second: str
    kind: str
    combine: Callable[[ArrayLike, ArrayLike], Complexes]
    magnitude: bool = False


PAIRS = (
    Pair("impedance_ohm", "phase_deg", "z", conversions.ztheta_to_z, magnitude=True),
    Pair("resistance_ohm", "reactance_ohm", "z", conversions.rx_to_z),
    Pair("conductance_s", "susceptance_s", "z", conversions.gb_to_z),
    Pair("admittance_s", "phase_deg", "z", conversions.ytheta_to_z, magnitude=True),
    Pair("s11_db", "s11_deg", "s11", conversions.db_deg_to_complex),
    Pair("s21_db", "s21_deg", "s21", conversions.db_deg_to_complex),
)
NAMES = tuple(dict.fromkeys([FREQUENCY, *(name for pair in PAIRS for name in (pair.first, pair.second))]))
_ANY_PAIR = "pair of columns for an impedance"
_EXAMPLE = f"'{FREQUENCY},impedance_ohm,phase_deg'"
# What exporters write instead, letters and digits only.
_ALIASES = {
    "f": FREQUENCY, "hz": FREQUENCY, "freq": FREQUENCY, "frequency": FREQUENCY, "frequencyhz": FREQUENCY,
    "freqhz": FREQUENCY, "fhz": FREQUENCY, "z": "impedance_ohm", "absz": "impedance_ohm", "magz": "impedance_ohm",
    "impedance": "impedance_ohm", "zohm": "impedance_ohm", "phase": "phase_deg", "theta": "phase_deg",
    "angle": "phase_deg", "r": "resistance_ohm", "rs": "resistance_ohm", "resistance": "resistance_ohm",
    "x": "reactance_ohm", "xs": "reactance_ohm", "reactance": "reactance_ohm", "g": "conductance_s",
    "conductance": "conductance_s", "b": "susceptance_s", "susceptance": "susceptance_s", "y": "admittance_s",
    "admittance": "admittance_s",
}  # fmt: skip


def choose_pair(header: list[str], line: int, mistakes: Mistakes) -> Pair:
    """The one pair whose columns the header names; raises FileMistakes when there is none, or two."""
    for name in dict.fromkeys(header):
        if name in NAMES and header.count(name) > 1:
            mistakes.add(line, name, "the column is named twice.", "Keep one of them.")
    complete = [pair for pair in PAIRS if pair.first in header and pair.second in header]
    if len(complete) > 1:
        both = " and ".join(f"{pair.first},{pair.second}" for pair in complete)
        mistakes.add(line, "", f"the file gives the same thing more than once: {both}.", "Keep one pair of columns.")
    missing = [] if FREQUENCY in header else [FREQUENCY]
    missing += [] if complete else _missing_of_pair(header)
    if missing:
        mistakes.add(line, "", _missing_sentence(missing, header), _remedy(missing, header))
    mistakes.stop_if_any()
    return complete[0]


def _missing_of_pair(header: list[str]) -> list[str]:
    """The names that would complete the pair begun, or a description of any pair where none was begun."""
    begun = [pair for pair in PAIRS if pair.first in header or pair.second in header]
    if len(begun) == 1:
        return [name for name in (begun[0].first, begun[0].second) if name not in header]
    return [_ANY_PAIR]


def _missing_sentence(missing: list[str], header: list[str]) -> str:
    found = ", ".join(f"'{name}'" for name in header[:8]) + (", …" if len(header) > 8 else "")
    return f"the file has no {' and no '.join(missing)}; its first line names {found or 'nothing'}."


def _remedy(missing: list[str], header: list[str]) -> str:
    guesses = [(name, guess) for name in header if name not in NAMES and (guess := near_name(name))]
    wanted = [(name, guess) for name, guess in guesses if guess not in header]
    if wanted:
        return " ".join(f"Did you mean '{guess}' by '{name}'?" for name, guess in dict(wanted).items())
    if _ANY_PAIR not in missing:
        return f"Add the column {' and the column '.join(missing)}."
    pairs = " · ".join(f"{pair.first},{pair.second}" for pair in PAIRS)
    return f"Name {FREQUENCY} and one pair of {pairs}."


def near_name(name: str) -> str | None:
    """The column name most likely meant, or None."""
    plain = re.sub(r"[^a-z0-9]", "", re.sub(r"[\[(].*", "", name.lower()))
    if plain in _ALIASES:
        return _ALIASES[plain]
    tidy = re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_")
    close = difflib.get_close_matches(tidy, NAMES, n=1, cutoff=0.75)
    return close[0] if close else None


def no_names(cells: list[str], line: int, commented: bool, mistakes: Mistakes) -> NoReturn:
    """The first row is numbers: say what is missing, and that two columns cannot be an impedance."""
    if commented:
        text = "the column names stand in a comment."
        mistakes.stop(line, "", text, f"Remove the '#' before {FREQUENCY}.")
    text = f"the first row is {len(cells)} numbers, so the columns have no names."
    if len(cells) == 2:
        text = "the file is two columns of numbers without names; an impedance takes two columns beside the frequency."
    elif len(cells) == 1:
        text = "the file is one column of numbers without a name."
    mistakes.stop(line, "", text, f"Put the names in the first line, such as {_EXAMPLE}.")
