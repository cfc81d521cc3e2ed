"""The methods page says what the code does: ids, modules, reasons, constants and worked numbers."""

from __future__ import annotations

import ast
import importlib
import re
from collections import Counter
from collections.abc import Iterator
from decimal import Decimal

import numpy as np
import pytest
from conftest import ROOT

from harness import analysis
from harness.characteristics import CHARACTERISTICS
from harness.circuits import coupling, frequencies, resonator
from harness.correction import conversions
from harness.judging import application, parse_limits, requirements, risk
from harness.records import Correction, FitStatus, Requirement, Sweep
from harness.statistics import Attempt, capability, yields
from harness.statistics.parts import parts_of

PAGE = (ROOT / "harness" / "METHODS.md").read_text(encoding="utf-8")
# Rooms whose every module holds formulas, so that every one must be named.
FORMULA_ROOMS = (
    "harness/circuits", "harness/correction", "harness/fitting", "harness/planning", "harness/statistics",
    "sim_instruments/physics",
)  # fmt: skip
NAMESPACE = {
    "frequencies": frequencies, "resonator": resonator, "coupling": coupling, "conversions": conversions,
    "requirements": requirements, "Requirement": Requirement, "risk": risk, "application": application,
    "yields": yields, "capability": capability,
    "B": resonator.from_elements(21.05, 0.03515, 4.4862e-10, 4.07569e-9),
}  # fmt: skip


def _rows(heading: str) -> list[list[str]]:
    """The cells of every table row below a heading whose title begins so."""
    sections = re.split(r"^## ", PAGE, flags=re.MULTILINE)
    body = next(section for section in sections if re.match(rf"\d+ {heading}", section))
    lines = [line for line in body.splitlines() if line.startswith("|") and not line.startswith("|---")]
    return [[cell.strip() for cell in line.strip("|").split(" | ")] for line in lines]


def _named_in_code(folder: str, pattern: str) -> Iterator[tuple[str, str]]:
    """What the first group of a pattern finds in a folder of the harness, with the file it stands in."""
    for path in sorted((ROOT / "harness" / folder).rglob("*.py")):
        for found in re.finditer(pattern, path.read_text(encoding="utf-8")):
            yield found.group(1), str(path.relative_to(ROOT))


def _constants() -> list[tuple[str, str, object]]:
    """(module, name, value as the page states it) of the constants table."""
    found = []
    for module, stated, *_ in _rows("Constants"):
        for name, literal in re.findall(r"`(\w+)` = (\([^)]*\)|[0-9.e+-]+)", stated):
            found.append((module.strip("`"), name, ast.literal_eval(literal)))
    return found


LIMITS = """
format = 1
part_number = "X-40"  # invented
revision = "A"
[mode]
kind = "stack"
search = ["39 kHz", "43 kHz"]
[[require]]
characteristic = "fs"
unit = "kHz"
min = 39.5
max = 40.5
"""
WORKED = [(row[0].strip("`"), row[1]) for row in _rows("Worked numbers")[1:]]


@pytest.mark.parametrize("name", CHARACTERISTICS)
def test_every_characteristic_has_one_row_with_its_sign_and_unit(name: str) -> None:
    """A definition for every id, once, with the sign and the unit that the code has."""
    rows = [row for row in _rows("Characteristics") if row[0] == f"`{name}`"]
    assert len(rows) == 1
    _, sign, unit, definition, source = rows[0]
    assert (sign, unit) == (CHARACTERISTICS[name].sign, CHARACTERISTICS[name].unit)
    assert definition
    assert source


def test_no_row_defines_what_is_no_characteristic() -> None:
    """An id that the code has lost may not stay on the page."""
    ids = [row[0].strip("`") for row in _rows("Characteristics") if row[0].startswith("`")]
    assert set(ids) == set(CHARACTERISTICS)


def test_every_module_the_page_names_exists() -> None:
    """Paths with a slash in code spans are files or folders of this house."""
    named = set(re.findall(r"`((?:harness|sim_instruments|drivers|limits|tests)/[\w./-]+)`", PAGE))
    assert len(named) > 40
    assert [path for path in sorted(named) if not (ROOT / path).exists()] == []


@pytest.mark.parametrize("room", FORMULA_ROOMS)
def test_every_module_with_formulas_is_named(room: str) -> None:
    """Whoever adds a module to a room of formulas says on the page what it computes."""
    modules = [path for path in (ROOT / room).glob("*.py") if path.name != "__init__.py"]
    assert modules
    assert [path.name for path in modules if f"`{room}/{path.name}`" not in PAGE] == []


@pytest.mark.parametrize(
    ("folder", "pattern"),
    [
        ("", r"Reason\(\s*\"([a-z-]+)\""),
        ("", r"Caveat\(\s*\"([a-z-]+)\""),
        ("bench", r"\(\w+, \"([a-z-]+)\"\),\n"),
    ],
    ids=["reasons", "warnings", "faults"],
)
def test_every_reason_and_warning_is_explained(folder: str, pattern: str) -> None:
    """Codes of verdicts, of warnings and of the bench's faults stand on the page."""
    codes = dict(_named_in_code(folder, pattern))
    assert len(codes) > 4
    assert {code: file for code, file in codes.items() if f"`{code}`" not in PAGE} == {}


@pytest.mark.parametrize("status", FitStatus)
def test_every_status_has_its_criteria(status: FitStatus) -> None:
    """Each word that a fit can come to has a row in the fit's section."""
    assert [row for row in _rows("The fit") if row[0] == f"`{status}`"]


def test_the_constants_are_those_of_the_code() -> None:
    """Each stated value is what the module holds now."""
    constants = _constants()
    assert len(constants) > 25
    assert {"WILD", "SIGNIFICANT", "CONFIDENCE"} <= {name for _, name, _ in constants}
    held = {(module, name): getattr(importlib.import_module(module), name) for module, name, _ in constants}
    assert {(module, name): value for module, name, value in constants} == held


def test_constants_in_the_text_are_those_of_the_table() -> None:
    """A constant quoted in a section has the table's value, and none is quoted that the table lacks."""
    text = PAGE.split("Constants on this page")[0]
    stated: dict[str, set[object]] = {}
    for _, name, value in _constants():
        stated.setdefault(name, set()).add(value)
    quoted = re.findall(r"`(_?[A-Z][A-Z0-9_]+)` = ([0-9][0-9.e+-]*[0-9]|[0-9])", text)
    assert len(quoted) > 15
    assert [(name, value) for name, value in quoted if float(value) not in stated.get(name, set())] == []


def test_numbers_inside_functions_still_stand_there() -> None:
    """Numbers without a name are quoted with the words they stand in, which the source still has."""
    quoted = [
        (row[0].strip("`"), words)
        for row in _rows("Constants")
        if row[0].endswith(".py`")
        for words in re.findall(r"`([^`]+)`", row[1])
    ]
    assert len(quoted) > 8
    gone = [(path, words) for path, words in quoted if words not in (ROOT / path).read_text(encoding="utf-8")]
    assert gone == []


@pytest.mark.parametrize(("expression", "printed"), WORKED, ids=[row[0] for row in WORKED])
def test_worked_numbers_come_out(expression: str, printed: str) -> None:
    """Every worked number is what the code gives, rounded to the digits printed."""
    values = np.atleast_1d(np.asarray(eval(expression, {"__builtins__": {}}, dict(NAMESPACE))))
    numbers = [Decimal(text) for text in re.findall(r"[0-9.]+(?:e-?[0-9]+)?", printed)]
    assert len(numbers) == values.size
    for value, number in zip(values.tolist(), numbers, strict=True):
        assert abs(Decimal(value) - number) <= Decimal("0.51").scaleb(int(number.as_tuple().exponent))


def test_capability_is_by_the_formulas_of_the_page(rng: np.random.Generator) -> None:
    """Pp = (max − min)/6s and Ppk = the least of (max − mean)/3s and (mean − min)/3s, s with n − 1."""
    values = rng.normal(10.0, 0.4, 50)
    attempts = [
        Attempt(f"S{k}", 1, 1, "pass", None, True, "2026-01-01T00:00:00.000000Z", (), {"fs": (float(value), None)})
        for k, value in enumerate(values)
    ]
    found = capability.capability("fs", parts_of(attempts), 9.0, 11.5)
    mean = values.sum() / 50
    s = np.sqrt(((values - mean) ** 2).sum() / 49)
    assert found.pp.value == pytest.approx((11.5 - 9.0) / (6 * s))
    assert found.ppk.value == pytest.approx(min(11.5 - mean, mean - 9.0) / (3 * s))


def test_budget_names_are_those_of_the_page(rng: np.random.Generator) -> None:
    """Whatever a fit's budget can hold by name has a row in the section on uncertainty."""
    circuit = resonator.from_elements(21.05, 0.03515, 4.4862e-10, 4.07569e-9, 0.004)
    f_hz = np.linspace(39e3, 43e3, 201)
    correction = Correction("nest", 0.1, 1e-7, 5e-12, 0.05, 5e-8, 2e-12)
    z_ohm = 1.0 / (1.0 / resonator.impedance(circuit, f_hz) + 2j * np.pi * f_hz * correction.cp_f)
    z_ohm = z_ohm + correction.rs_ohm + 2j * np.pi * f_hz * correction.ls_h
    z_ohm = z_ohm * (1 + 1e-3 * (rng.standard_normal(201) + 1j * rng.standard_normal(201)))
    sweep = Sweep(f_hz, z_ohm, noise_relative=1e-3, u_z_relative=1e-3, u_f_relative=1e-6)
    fit, _ = analysis.analyse(sweep, parse_limits(LIMITS, "methods.toml"), correction)
    names = {name for parts in fit.budget.values() for name in parts}
    assert {"fit", "instrument", "frequency", "correction rs", "correction cp"} <= names
    documented = {name for row in _rows("Uncertainty") for name in re.findall(r"`([^`]+)`", row[0])}
    assert names <= documented


def test_sections_are_numbered_in_order() -> None:
    """References by § lead somewhere: the sections count from 1 without gaps, and no reference exceeds them."""
    numbers = [int(n) for n in re.findall(r"^## (\d+) ", PAGE, flags=re.MULTILINE)]
    assert numbers == list(range(1, len(numbers) + 1))
    assert Counter(numbers).most_common(1)[0][1] == 1
    own = re.findall(r"(?<!JCGM 106 )(?<!and )§(\d+)", PAGE)
    assert max(int(n) for n in own) <= numbers[-1]
