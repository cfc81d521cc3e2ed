"""The scanner that tells the line of every key, against tomllib on random documents."""

from __future__ import annotations

import tomllib
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harness.toml.positions import Path, line_of, positions


def paths_of(node: Any, path: Path = ()) -> set[Path]:
    """Every key and element path of a parsed document."""
    items = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    found: set[Path] = set()
    for key, item in items:
        found |= {(*path, key), *paths_of(item, (*path, key))}
    return found


# ── random documents, written down by a writer that knows where it puts each key ─────────────

bare = st.text("abcxyz019_-", min_size=1, max_size=5)
odd = st.text(st.characters(exclude_categories=["Cs", "Cc"], exclude_characters="\x7f"), max_size=4)
blank = st.sampled_from(["", " ", "\t", "  "])
fill = st.sampled_from(["", " ", "\n", "\r\n", " # ]} \"'\n", "\n  # a = 1\n\n"])
SCALARS = [
    "1",
    "-2.5e3",
    "true",
    "nan",
    "+inf",
    "0x1F",
    "1979-05-27 07:32:00",
    "07:32:00",
    '"a#b"',
    "'c]d'",
    '"q\\"]"',
    '""',
    "''",
    '"""x"""',
    '"""one\ntwo # = [\n"""',
    "'''a'b''c\n= 1'''",
    '"""end\\""""',
    '"""two quotes"""""',
    "'''it''''",
    '"\\\\"',
]


def key_text(key: str, quoted: bool) -> str:
    if key and all(c in "abcxyz019_-" for c in key) and not quoted:
        return key
    escaped = "".join(f"\\U{ord(c):08x}" if c in '"\\' else c for c in key)
    return f'"{escaped}"'


@st.composite
def values(draw: st.DrawFn, depth: int = 2) -> str:
    kind = draw(st.sampled_from(["scalar", "scalar", "array", "table"] if depth else ["scalar"]))
    if kind == "array":
        items = draw(st.lists(values(depth=depth - 1), max_size=3))
        inner = "".join(f"{draw(fill)}{item}{draw(fill)}," for item in items)
        return f"[{inner}{draw(fill)}]"
    if kind == "table":
        keys = draw(st.lists(bare | odd, max_size=3, unique=True))
        pairs = [f"{key_text(k, draw(st.booleans()))}{draw(blank)}={draw(blank)}{draw(values(depth=0))}" for k in keys]
        return "{ " + ", ".join(pairs) + " }"
    return draw(st.sampled_from(SCALARS))


@st.composite
def bodies(draw: st.DrawFn) -> str:
    keys = draw(st.lists(st.lists(bare | odd, min_size=1, max_size=2).map(tuple), max_size=4, unique_by=lambda k: k[0]))
    lines = []
    for parts in keys:
        dot = f"{draw(blank)}.{draw(blank)}"
        name = dot.join(key_text(part, draw(st.booleans())) for part in parts)
        comment = draw(st.sampled_from(["", " # [no] = \"'"]))
        lines.append(f"{draw(blank)}{name}{draw(blank)}={draw(blank)}{draw(values())}{comment}\n")
    return "".join(lines)


@st.composite
def documents(draw: st.DrawFn) -> str:
    text = draw(bodies())
    for n in range(draw(st.integers(0, 4))):
        name = f"t{draw(st.integers(0, 2))}"
        style = draw(
            st.sampled_from(
                ["[[{0}]]", "[{0}{1}]", "[[{0}]]\n[{0}.sub]", "[[{0}]]\n[[{0}.in]]\n[[{0}.in]]", "[ {0}{1} . 'x y' ]"]
            )
        )
        text += style.format(name, f"_{n}") + draw(st.sampled_from(["", " # c"])) + "\n" + draw(bodies())
    return text.replace("\n", draw(st.sampled_from(["\n", "\r\n"]))) if "\r" not in text else text


@given(documents())
@settings(deadline=None)
def test_positions_agree_with_tomllib(text: str) -> None:
    """Every path that tomllib finds has a line, no other has, and the key's text stands on it."""
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    lines = positions(text.replace("\r\n", "\n"))
    rows = text.replace("\r\n", "\n").split("\n")
    assert set(lines) == paths_of(document)
    for path, line in lines.items():
        if isinstance(path[-1], str):
            row = rows[line - 1]
            assert path[-1] in row or key_text(path[-1], True) in row


def test_the_random_documents_are_mostly_valid() -> None:
    """The property above would prove nothing if the writer made rubbish."""
    valid = []

    @given(documents())
    @settings(deadline=None)
    def count(text: str) -> None:
        try:
            tomllib.loads(text)
            valid.append(bool(text.strip()))
        except tomllib.TOMLDecodeError:
            valid.append(False)

    count()
    assert sum(valid) > len(valid) / 2


@pytest.mark.parametrize(
    ("text", "path", "line"),
    [
        ("a = 1\n\nb = 2", ("b",), 3),
        ("[[r]]\nx = 1\n[[r]]\n# c\nx = 2", ("r", 1, "x"), 5),
        ("[[r]]\n[[r]]", ("r", 1), 2),
        ("[a.b]\nc.d = [\n1,\n  2]", ("a", "b", "c", "d", 1), 4),
        ("[[a]]\n[a.b]\nx = 1\n[[a]]\n[a.b]\nx = 1", ("a", 1, "b", "x"), 6),
        ('s = """\nx = 1\n"""\nx = 2', ("x",), 4),
        ("t = { u = 1, 'v w' = { x = 2 } }", ("t", "v w", "x"), 1),
        ('"\\u0061" = 1', ("a",), 1),
    ],
)
def test_known_places(text: str, path: Path, line: int) -> None:
    """Arrays of tables, dotted and quoted keys, multi-line strings: the line is the one where the key stands."""
    assert positions(text)[path] == line


def test_the_line_of_a_missing_key_is_its_table() -> None:
    """A key that is not there is reported at the nearest table that is."""
    lines = positions("a = 1\n[[r]]\nx = 1")
    assert line_of(lines, ("r", 0, "missing")) == 2
    assert line_of(lines, ("nowhere", "missing")) is None
