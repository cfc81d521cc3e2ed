"""Limit files: what is read, what is refused, and how the refusal reads."""

from __future__ import annotations

import hashlib
import json
import re
import tomllib

import pytest
from conftest import ROOT
from hypothesis import example, given, settings
from hypothesis import strategies as st

from harness.errors import FileMistakes, Mistake
from harness.judging import limits_schema, parse_limits
from harness.judging.explaining import check_sentences, explain, explanation
from harness.judging.schema import TABLES
from harness.records import LimitSet

LIMITS = ROOT / "limits"
SHIPPED = sorted(LIMITS.rglob("*.toml"))
BASE = """\
format = 1
part_number = "MD-1650"
revision = "A"
[mode]
kind = "thickness"
search = ["1.50 MHz", "1.90 MHz"]
[[require]]
characteristic = "fs"
unit = "kHz"
min = 1630.0
max = 1670.1
action = "Yellow tray."
"""


def mistakes_of(text: str) -> tuple[Mistake, ...]:
    with pytest.raises(FileMistakes) as caught:
        parse_limits(text, "x.toml")
    return caught.value.mistakes


def only_mistake(text: str) -> Mistake:
    mistakes = mistakes_of(text)
    assert len(mistakes) == 1, [m.sentence() for m in mistakes]
    return mistakes[0]


def test_a_small_file_is_read_with_its_defaults() -> None:
    """Numbers come out in SI, rounded once; what is left out has its default; text and hash are the file's."""
    limits = parse_limits(BASE, "x.toml")
    assert limits.mode.search_hz == (1.5e6, 1.9e6)
    requirement = limits.requirements[0]
    assert (requirement.min, requirement.max, requirement.unit) == (1630000.0, 1670100.0, "kHz")
    assert (requirement.rule, requirement.max_false_accept, requirement.between) == ("guarded", 0.05, "fail")
    assert (limits.measurement.drive_v, limits.measurement.attempts, limits.measurement.points) == (1.0, 2, 401)
    assert limits.measurement.contact is None
    assert limits.grades == ()
    assert limits.text == BASE
    assert limits.sha256 == hashlib.sha256(BASE.encode()).hexdigest()


def test_every_key_is_read() -> None:
    """A file that uses every key gives every value, in SI."""
    text = BASE.replace('revision = "A"', 'revision = "A"\ndescription = "d"\nserial_pattern = \'MD-\\d{4}\'').replace(
        'search = ["1.50 MHz", "1.90 MHz"]', 'search = [1500, 1900.0]\nunit = "kHz"\nbranches = 2\nspan = "8 %"'
    )
    text += """
rule = "simple"
max_false_accept = "1 %"
u_max = 0.5
between = "hold"
element = 2
[[require]]
characteristic = "c_at"
unit = "nF"
max = 2.1
at = "1 kHz"
[[grade]]
name = "A"
characteristic = "fs"
unit = "kHz"
min = 1630
max = 1650
[measurement]
drive = "500 mV"
attempts = 3
strategy = "uniform"
points = 201
contact = {frequency = "1 kHz", min = 1.5, max = 3.2, unit = "nF", max_tan_delta = 0.05}
[conditions]
loading = "water"
clamping = "edge ring"
temperature = ["18 degC", "28 °C"]
reference_temperature = "23 degC"
fs_per_k = "-40 ppm/K"
u_fs_per_k = "10 ppm/K"
c0_per_k = 0.004
u_c0_per_k = "0.1 %/K"
min_age_h = 24
reference_age_h = 240
fs_per_decade = "0.05 %"
u_fs_per_decade = 0.0001
c0_per_decade = "-1 %"
u_c0_per_decade = "0.2 %"
[lot]
stop_same_reason = 5
stop_no_verdict = 3
min_yield = "80 %"
[application]
board = "1.65 MHz"
board_tolerance = "0.5 %"
loaded_q = 30
loaded_shift = "-0.3 %"
liquid = "alcohol"
surface_tension_n_per_m = 0.022
density_kg_per_m3 = 789
mesh = false
"""
    keys = {(*table, key) for table, model in TABLES.items() for key in model.model_fields}
    named = {re.sub(r"\[\d+\]", "", key) for key in _flat(tomllib.loads(text))}
    assert {".".join(key) for key in keys} <= named | {"mode.poisson"}
    limits = parse_limits(text, "x.toml")
    assert limits.serial_pattern == r"MD-\d{4}"
    assert (limits.mode.search_hz, limits.mode.branches, limits.mode.span) == ((1.5e6, 1.9e6), 2, 0.08)
    first, second = limits.requirements
    assert (first.rule, first.max_false_accept, first.u_max, first.between, first.element) == (
        "simple",
        0.01,
        500.0,
        "hold",
        2,
    )
    assert (second.characteristic, second.max, second.at_hz) == ("c_at", 2.1e-9, 1000.0)
    assert (limits.measurement.drive_v, limits.measurement.strategy, limits.measurement.points) == (0.5, "uniform", 201)
    contact = limits.measurement.contact
    assert contact is not None
    assert (contact.f_hz, contact.min_f, contact.max_f, contact.max_tan_delta) == (1000.0, 1.5e-9, 3.2e-9, 0.05)
    spec = limits.conditions
    assert (spec.min_degc, spec.max_degc, spec.reference_degc) == (18.0, 28.0, 23.0)
    assert (spec.fs_per_k, spec.u_fs_per_k, spec.c0_per_k, spec.u_c0_per_k) == (-4e-5, 1e-5, 0.004, 1e-3)
    assert (spec.min_age_h, spec.reference_age_h, spec.fs_per_decade) == (24.0, 240.0, 0.0005)
    assert (limits.lot.stop_same_reason, limits.lot.stop_no_verdict, limits.lot.min_yield) == (5, 3, 0.8)
    application = limits.application
    assert (application.board_hz, application.board_tolerance, application.loaded_shift) == (1.65e6, 0.005, -0.003)
    assert (application.surface_tension_n_per_m, application.density_kg_per_m3) == (0.022, 789.0)


def _flat(node: object, path: str = "") -> set[str]:
    if isinstance(node, dict):
        return {path} | {name for key, item in node.items() for name in _flat(item, f"{path}.{key}" if path else key)}
    if isinstance(node, list):
        return {path} | {name for index, item in enumerate(node) for name in _flat(item, f"{path}[{index}]")}
    return {path}


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_shipped_limit_files_load_without_a_doubt(path) -> None:
    """Every limit file here is read, named after its part number, free of warnings, and led by its schema."""
    text = path.read_bytes().decode("utf-8")
    limits = parse_limits(text, path.name)
    assert limits.part_number == path.stem
    assert check_sentences(limits, path.name) == []
    assert text.startswith("#:schema ../limits.schema.json\n")
    assert limits.measurement.contact is not None
    assert all(requirement.action for requirement in limits.requirements)
    assert explain(limits)


def test_the_three_part_numbers_are_there() -> None:
    """The scenario's three part numbers have their files where they belong."""
    assert [str(path.relative_to(LIMITS)) for path in SHIPPED] == [
        "bolt-clamped/BD-40.toml",
        "mesh-rings/MR-113.toml",
        "mist-discs/MD-1650.toml",
    ]


def test_the_schema_file_is_the_one_the_code_makes() -> None:
    """limits.schema.json is json.dumps(limits_schema(), indent=2, ensure_ascii=False) and a newline."""
    made = json.dumps(limits_schema(), indent=2, ensure_ascii=False) + "\n"
    assert (LIMITS / "limits.schema.json").read_text(encoding="utf-8") == made


def test_the_readme_documents_every_key_and_no_other() -> None:
    """Each table of the README lists the keys of its table in the file, in the same order."""
    headings = {"top of the file": (), **{".".join(table): table for table in TABLES if table}}
    found: dict[tuple[str, ...], list[str]] = {}
    section: tuple[str, ...] | None = None
    for line in (LIMITS / "README.md").read_text(encoding="utf-8").splitlines():
        if line.startswith("## "):
            section = headings.get(line[3:].strip("[]").lower())
        elif section is not None and (match := re.match(r"\| `(\w+)` \|", line)):
            found.setdefault(section, []).append(match.group(1))
    assert found == {table: list(model.model_fields) for table, model in TABLES.items()}


def test_editors_refuse_unknown_keys_by_the_schema() -> None:
    """Every table of the JSON Schema is closed, and each key has a description."""
    schema = limits_schema()
    tables = [schema, *schema["$defs"].values()]
    assert all(table["additionalProperties"] is False for table in tables)
    described = [key for table in tables for key, item in table["properties"].items() if "$ref" not in item]
    assert len(described) > 50
    assert all("description" in item for t in tables for item in t["properties"].values() if "$ref" not in item)


def test_crlf_and_byte_order_mark_are_fine_and_kept() -> None:
    """Windows line ends and a leading mark change nothing but the hash."""
    text = "\ufeff" + BASE.replace("\n", "\r\n")
    limits = parse_limits(text, "x.toml")
    assert limits.requirements == parse_limits(BASE, "x.toml").requirements
    assert limits.text == text
    assert limits.sha256 == hashlib.sha256(text.encode()).hexdigest()
    assert only_mistake(text.replace("min =", "mn =")).line == 10


# ── one mistake at a time ────────────────────────────────────────────────────────────────────

REQUIRE = '[[require]]\ncharacteristic = "{}"\nmin = 0.1\n'
GRADE = '[[grade]]\nname = "{}"\ncharacteristic = "fs"\nunit = "kHz"\nmin = {}\nmax = {}\n'
CONTACT = '[measurement.contact]\nfrequency = "1 kHz"\nmin = {}\nmax = {}\nunit = "{}"\nmax_tan_delta = 0.05\n'

ONE_MISTAKE = [
    # (what is replaced or None to append, by what, line, key, words of the sentence)
    ("max = 1670.1", "mx = 1670.1", 11, "require[1].mx", "not a key known here. Did you mean 'max'?"),
    ("max = 1670.1", "attempts = 3", 11, "require[1].attempts", "It belongs in [measurement]."),
    (
        'kind = "thickness"',
        'kind = "thicknes"',
        5,
        "mode.kind",
        "'thicknes' is not known here. Did you mean 'thickness'?",
    ),
    ('characteristic = "fs"', 'characteristic = "Fs"', 8, "require[1].characteristic", "Did you mean 'fs'?"),
    ('characteristic = "fs"', 'characteristic = "qqqq"', 8, "require[1].characteristic", "Known are fs, fp"),
    ('unit = "kHz"', 'unit = "nF"', 9, "require[1].unit", "unit 'nF' does not measure this; expected Hz, kHz or MHz."),
    ('unit = "kHz"', 'unit = "khz"', 9, "require[1].unit", "'khz' is not a unit known here; expected Hz, kHz or MHz."),
    ('unit = "kHz"\n', "", 7, "require[1].unit", "is missing. Write one that measures fs: Hz, kHz or MHz."),
    ("max = 1670.1", "max = 1620", 11, "require[1].max", "1620 is below min 1630."),
    ("min = 1630.0\nmax = 1670.1", "", 7, "require[1]", "fs has neither min nor max. Write at least one of them."),
    ("max = 1670.1", 'max = "1670,1"', 11, "require[1].max", "Write decimals with a point."),
    ("max = 1670.1", 'max = "1670 kHz"', 11, "require[1].max", "Write the number without quotes."),
    ("max = 1670.1", "max = nan", 11, "require[1].max", "nan is not a number to judge by."),
    ("max = 1670.1", "max = true", 11, "require[1].max", "'true' stands where a number belongs."),
    ("max = 1670.1", "max = 1" + "0" * 400, 11, "require[1].max", "too large a number"),
    ("max = 1670.1", "max = 1e306", 11, "require[1].max", "too large a number"),
    ("max = 1670.1", "max = 1670,1", 11, "max", "A number is written with a comma. Write decimals with a point"),
    ("max = 1670.1", "max = 1670.1.2", 11, "", "This is not TOML:"),
    ('action = "Yellow tray."', 'action = "Yellow tray.', 12, "", "Is a closing quote missing?"),
    ('action = "Yellow tray."', "action = Yellow", 12, "", "Put texts and numbers with units in quotes."),
    ("max = 1670.1", "max = 1670.1\nmax = 1", 12, "", "Is a key or a table written twice?"),
    ("max = 1670.1", "max = 1960", 11, "require[1].max", "1 960 kHz is not inside the search window"),
    ('"1.50 MHz", "1.90 MHz"', '"1.90 MHz", "1.50 MHz"', 6, "mode.search", "does not rise"),
    ('"1.50 MHz", "1.90 MHz"', '"1.50 MHz"', 6, "mode.search", "needs exactly two values"),
    ('"1.50 MHz", "1.90 MHz"', '"1.50 MHz", "1,90 MHz"', 6, "mode.search[2]", "'1,90 MHz'"),
    ('"1.50 MHz", "1.90 MHz"', '1.5, "1.90 MHz"', 6, "mode.search[1]", "1.5 has no unit"),
    ('"1.50 MHz", "1.90 MHz"', '"1.50 V", "1.90 MHz"', 6, "mode.search[1]", "unit 'V' does not measure this"),
    ('search = ["1.50 MHz", "1.90 MHz"]', "", 4, "mode.search", "is missing. Where to look for the resonance"),
    ("format = 1", "", None, "format", "is missing. Version of this file format: 1."),
    ("format = 1", "format = 2", 1, "format", "2 is not from 1 to 1."),
    ('revision = "A"', "revision = 3", 3, "revision", 'the number 3 stands where a text in quotes belongs. Write "3".'),
    ('part_number = "MD-1650"', 'part_number = " "', 2, "part_number", "is empty or has blanks around it"),
    ('revision = "A"', 'revision = "A"\nserial_pattern = "MD-("', 4, "serial_pattern", "is not a regular expression"),
    ("[[require]]", "[require]", 7, "require", "Write [[require]] with two brackets."),
    (
        'revision = "A"',
        'revision = "A"\nconditions = 3',
        4,
        "conditions",
        "is not a table. Write a table with its keys: [conditions].",
    ),
    (None, "element = 0\n", 13, "require[1].element", "0 is not from 1 to 64."),
    (None, "element = 1.0\n", 13, "require[1].element", "stands where a whole number belongs"),
    (None, "u_max = 0\n", 13, "require[1].u_max", "0 is not above 0."),
    (None, 'max_false_accept = "60 %"\n', 13, "require[1].max_false_accept", "0.6 is not below 0.5."),
    (None, 'at = "1 kHz"\n', 13, "require[1].at", "fs is not taken at a stated frequency."),
    (
        None,
        REQUIRE.format("fs").replace("0.1", '1640\nunit = "kHz"'),
        14,
        "require[2].characteristic",
        "required twice",
    ),
    (None, REQUIRE.format("tan_delta_at"), 14, "require[2].characteristic", "needs 'at', the frequency"),
    (
        None,
        REQUIRE.format("kp"),
        14,
        "require[2].characteristic",
        "kp is defined for mode kind 'radial', not 'thickness'",
    ),
    (None, REQUIRE.format("k31"), 14, "require[2].characteristic", "defined for mode kind 'length'"),
    (None, REQUIRE.format("k33"), 14, "require[2].characteristic", "defined for mode kind 'length-33'"),
    (None, REQUIRE.format("drive_share"), 14, "require[2].characteristic", "needs the board and the loaded Q"),
    (
        None,
        REQUIRE.format("droplet").replace("0.1", '1\nunit = "µm"') + "[application]\nmesh = true",
        14,
        "require[2].characteristic",
        "told for information",
    ),
    (
        None,
        REQUIRE.format("droplet").replace("0.1", '1\nunit = "µm"'),
        14,
        "require[2].characteristic",
        "told for information",
    ),
    (
        None,
        GRADE.format("A", 1630, 1640) + GRADE.format("B", 1645, 1670),
        23,
        "grade[2].min",
        "leave a gap from 1640 to 1645",
    ),
    (
        None,
        GRADE.format("A", 1630, 1650) + GRADE.format("B", 1640, 1670),
        23,
        "grade[2].min",
        "overlap from 1640 to 1650",
    ),
    (
        None,
        GRADE.format("A", 1630, 1640) + GRADE.format("A", 1640, 1670),
        20,
        "grade[2].name",
        "grade 'A' is there twice",
    ),
    (None, GRADE.format("A", 1640, 1630), 18, "grade[1].max", "1630 is below min 1640."),
    (None, GRADE.format("A", 1640, 1640), 18, "grade[1].max", "nothing lies between"),
    (None, CONTACT.format(3, 2, "nF"), 16, "measurement.contact.max", "2 is below min 3."),
    (
        None,
        CONTACT.format(1, 2, "kHz"),
        17,
        "measurement.contact.unit",
        "unit 'kHz' does not measure this; expected pF, nF or µF.",
    ),
    (None, '[conditions]\ntemperature = ["28 degC", "18 degC"]\n', 14, "conditions.temperature", "does not rise"),
    (
        None,
        '[conditions]\nfs_per_k = "-40 ppm/K"\n',
        14,
        "conditions.fs_per_k",
        "says nothing without reference_temperature.",
    ),
    (
        None,
        '[conditions]\nfs_per_decade = "1 %"\n',
        14,
        "conditions.fs_per_decade",
        "says nothing without reference_age_h.",
    ),
    (None, '[conditions]\nmin_age = "24 h"\n', 14, "conditions.min_age", "Did you mean 'min_age_h'?"),
    (None, '[application]\nliquid = "milk"\n', 14, "application.liquid", "figures of 'milk' are not known here"),
    (None, "[measurement]\ndrive = 1\n", 14, "measurement.drive", "'1' has no unit; expected mV or V."),
    (None, "[mode.x]\ny = 1\n", 13, "mode.x", "not a key known here"),
]


@pytest.mark.parametrize(("old", "new", "line", "key", "words"), ONE_MISTAKE)
def test_one_mistake_gives_one_sentence_at_its_line(
    old: str | None, new: str, line: int | None, key: str, words: str
) -> None:
    """Each mistake is reported once, at its line and key, with what to do."""
    assert old is None or old in BASE
    mistake = only_mistake(BASE + new if old is None else BASE.replace(old, new, 1))
    assert (mistake.file, mistake.line, mistake.key) == ("x.toml", line, key)
    assert words in f"{mistake.text} {mistake.remedy}"


def test_all_mistakes_come_in_one_go_by_line() -> None:
    """Typing errors, wrong units, reversed limits and gaps are all reported at once, sorted by line."""
    text = (
        BASE.replace('kind = "thickness"', 'kind = "thick"')
        .replace('unit = "kHz"', 'unit = "nF"')
        .replace("max = 1670.1", "max = 1.0\nmx = 3")
        + GRADE.format("A", 1630, 1640)
        + GRADE.format("B", 1645, 1670)
        + CONTACT.format(3, 2, "kHz")
    )
    found = [(mistake.line, mistake.key) for mistake in mistakes_of(text)]
    assert found == [
        (5, "mode.kind"),
        (9, "require[1].unit"),
        (11, "require[1].max"),
        (12, "require[1].mx"),
        (24, "grade[2].min"),
        (29, "measurement.contact.max"),
        (30, "measurement.contact.unit"),
    ]


def test_a_typing_error_is_not_reported_again_as_something_missing() -> None:
    """min misspelt is one mistake, not also "neither min nor max"."""
    text = BASE.replace("min = 1630.0\nmax = 1670.1", "mni = 1630.0")
    assert only_mistake(text).key == "require[1].mni"


def test_grades_by_two_characteristics_are_refused() -> None:
    """A part must have one grade, so all grades sort by one characteristic."""
    other = GRADE.format("B", 1, 2).replace('"fs"\nunit = "kHz"', '"qm"')
    mistake = only_mistake(BASE + GRADE.format("A", 1630, 1640) + other)
    assert (mistake.line, mistake.key) == (21, "grade[2].characteristic")


def test_kp_needs_poissons_ratio() -> None:
    """kp of a radial mode is refused without Poisson's ratio, read with it, and the ratio refused elsewhere."""
    radial = BASE.replace('"thickness"', '"radial"') + REQUIRE.format("kp")
    assert "kp needs Poisson's ratio" in only_mistake(radial).text
    assert parse_limits(radial.replace("[[require]]", "poisson = 0.31\n[[require]]", 1), "x").mode.poisson == 0.31
    elsewhere = BASE.replace('kind = "thickness"', 'kind = "thickness"\npoisson = 0.31')
    assert only_mistake(elsewhere).key == "mode.poisson"


@pytest.mark.parametrize(("text", "words"), [("a = " + "[" * 3000, "nested too deeply"), ("a = '\ud800'", "not UTF-8")])
def test_hostile_text_is_one_sentence(text: str, words: str) -> None:
    """Nesting without end and halves of characters are refused like any other mistake."""
    assert words in only_mistake(text).text


def test_numbers_of_thousands_of_digits_are_refused() -> None:
    """An integer beyond what Python converts is a mistake of the file."""
    assert mistakes_of(BASE.replace("1670.1", "1" * 5000))


# ── any text at all ──────────────────────────────────────────────────────────────────────────

pieces = st.sampled_from(
    [
        *BASE.splitlines(),
        *GRADE.splitlines(),
        *CONTACT.splitlines(),
        "[conditions]",
        "[lot]",
        "[application]",
        "[[mode]]",
        "mode = 3",
        "require = []",
        "require = [3]",
        "grade = [[1]]",
        "search = [[1], {a = 2}]",
        "min = 1979-05-27",
        "max = inf",
        'temperature = ["1 degC"]',
        'unit = ""',
        'unit = "µ"',
        "[require.x]",
        '"" = 1',
        "a.b.c = 1",
        "[measurement.contact.x]",
        "format = true",
        "span = -1",
        'kind = ["ring"]',
        "characteristic = {a = 1}",
    ]
)


@given(st.text() | st.lists(pieces, max_size=12).map("\n".join))
@example("\ufeff")
@example("")
@settings(max_examples=300, deadline=None)
def test_any_text_is_a_limit_set_or_mistakes(text: str) -> None:
    """Whatever the text, the answer is a LimitSet or sentences with a place; never another exception."""
    _read_or_refuse(text)


@given(st.data())
@settings(max_examples=200, deadline=None)
def test_any_edit_of_a_good_file_is_a_limit_set_or_mistakes(data: st.DataObject) -> None:
    """A good file with a stretch replaced by anything is read or refused, and what is read can be explained."""
    whole = SHIPPED[-1].read_text(encoding="utf-8")
    start = data.draw(st.integers(0, len(whole)))
    length = data.draw(st.integers(0, 30))
    put = data.draw(
        st.text(max_size=10) | st.sampled_from(["0", "1e308", "-1", '"', "5e-324", "[", "''", "\n[mode]\n"])
    )
    _read_or_refuse(whole[:start] + put + whole[start + length :])


def _read_or_refuse(text: str) -> None:
    limits = None
    try:
        limits = parse_limits(text, "x.toml")
    except FileMistakes as exc:
        refused = exc.mistakes
    else:
        assert isinstance(limits, LimitSet)
        assert limits.text == text
        assert explanation(limits)
        check_sentences(limits)
    if limits is None:
        assert refused
        for mistake in refused:
            assert mistake.sentence().startswith("x.toml")
            assert mistake.text
            assert mistake.line is None or 1 <= mistake.line <= text.count("\n") + 1
