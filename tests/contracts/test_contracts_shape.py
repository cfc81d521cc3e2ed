"""The shape of the house: sizes, names, docstrings, and nothing lying about."""

from __future__ import annotations

import ast
import fnmatch
import io
import math
import re
import tokenize
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest
from conftest import ROOT

PACKAGES = ("harness", "drivers", "sim_instruments")
TOP = {"README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "pyproject.toml", *PACKAGES, "limits", "tests"}
LONGEST_MODULE, LONGEST_FUNCTION, P90_FUNCTION, LONGEST_CLASS = 400, 100, 25, 250
ATTICS = {"utils", "util", "common", "helpers", "helper", "misc", "base"}
MODULES = sorted(path for package in PACKAGES for path in (ROOT / package).rglob("*.py"))
ROOMS = sorted(path for path in MODULES if path.name == "__init__.py")
_SILENT = {
    *(tokenize.COMMENT, tokenize.NL, tokenize.NEWLINE, tokenize.INDENT, tokenize.DEDENT),
    *(tokenize.ENCODING, tokenize.ENDMARKER),
}


def name(path: Path) -> str:
    return str(path.relative_to(ROOT))


@cache
def tree_of(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


@cache
def code_lines(path: Path) -> frozenset[int]:
    """Numbers of the lines that are not blank, comment or docstring."""
    text = path.read_text(encoding="utf-8")
    lines = {
        line
        for token in tokenize.generate_tokens(io.StringIO(text).readline)
        if token.type not in _SILENT
        for line in range(token.start[0], token.end[0] + 1)
    }
    for node in ast.walk(tree_of(path)):
        body = getattr(node, "body", None)
        first = body[0] if isinstance(body, list) and body else None
        if isinstance(first, ast.Expr) and isinstance(first.value, ast.Constant) and isinstance(first.value.value, str):
            lines -= set(range(first.lineno, (first.end_lineno or first.lineno) + 1))
    return frozenset(lines)


def sizes(*kinds: type[ast.AST]) -> Iterator[tuple[int, str]]:
    """(lines of code, place) of every function or class."""
    for path in MODULES:
        for node in ast.walk(tree_of(path)):
            if isinstance(node, kinds):
                assert isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef)
                own = range(node.lineno, (node.end_lineno or node.lineno) + 1)
                yield len(code_lines(path).intersection(own)), f"{name(path)}:{node.lineno} {node.name}"


def test_lines_of_code_are_counted_without_blanks_comments_and_docstrings(tmp_path: Path) -> None:
    """The measure itself: code, a docstring, a comment, a blank line, a statement over two lines."""
    path = tmp_path / "m.py"
    path.write_text(
        '"""Doc."""\n\nx = 1  # why\n# only a comment\ndef f():\n    """Doc\n    more."""\n    return (\n        x)\n'
    )
    assert code_lines(path) == {3, 5, 8, 9}


@pytest.mark.parametrize("path", MODULES, ids=name)
def test_modules_are_small(path: Path) -> None:
    """At most 400 lines of code."""
    assert len(code_lines(path)) <= LONGEST_MODULE


def test_functions_are_small() -> None:
    """None above 100 lines of code, nine of ten at most 25."""
    found = sorted(sizes(ast.FunctionDef, ast.AsyncFunctionDef))
    assert len(found) > 500
    assert found[-1][0] <= LONGEST_FUNCTION, found[-3:]
    assert found[math.ceil(0.9 * len(found)) - 1][0] <= P90_FUNCTION


def test_classes_are_small() -> None:
    """None above 250 lines of code."""
    largest = max(sizes(ast.ClassDef))
    assert largest[0] <= LONGEST_CLASS, largest


@pytest.mark.parametrize("path", MODULES, ids=name)
def test_no_module_is_an_attic(path: Path) -> None:
    """A name says what is in a module; utils, common, helpers, misc and base say nothing."""
    assert not ATTICS & {part.strip("_") for part in path.relative_to(ROOT).with_suffix("").parts}


@pytest.mark.parametrize("path", MODULES, ids=name)
def test_every_module_says_what_it_is_for(path: Path) -> None:
    """A docstring at its top."""
    assert (ast.get_docstring(tree_of(path)) or "").strip()


@pytest.mark.parametrize("path", [path for path in ROOMS if path.parent.parent.name == "harness"], ids=name)
def test_every_room_says_what_it_may_import(path: Path) -> None:
    """Purpose, its kind, what it may import, and how to add to it."""
    words = ast.get_docstring(tree_of(path)) or ""
    assert len(words) > 100
    assert re.search(r"\bPURE\b|\bSHELL\b|\bdoor\b", words, re.IGNORECASE)
    assert re.search(r"import", words)


def test_package_roots_import_nothing() -> None:
    """A package's root costs nothing and closes no circle."""
    for package in PACKAGES:
        found = [
            node
            for node in tree_of(ROOT / package / "__init__.py").body
            if isinstance(node, ast.Import | ast.ImportFrom)
        ]
        assert [node for node in found if getattr(node, "module", "") != "__future__"] == []


# ── files ────────────────────────────────────────────────────────────────────────────────────


@cache
def ignored_patterns() -> tuple[str, ...]:
    lines = (ROOT / ".gitignore").read_text(encoding="utf-8").splitlines()
    return (".git", *(line.strip().rstrip("/") for line in lines if line.strip() and not line.startswith("#")))


def is_ignored(entry: str) -> bool:
    return any(fnmatch.fnmatch(entry, pattern) for pattern in ignored_patterns())


def own_files(folder: Path = ROOT) -> Iterator[Path]:
    """Every file that is not ignored by git."""
    for entry in sorted(folder.iterdir()):
        if is_ignored(entry.name):
            continue
        if entry.is_dir():
            yield from own_files(entry)
        else:
            yield entry


def test_nothing_else_lies_at_the_top() -> None:
    """README, DEVELOPERS, CHANGELOG, LICENSE, pyproject, the packages, limits, tests, and dot-files."""
    found = {entry.name for entry in ROOT.iterdir() if not entry.name.startswith(".") and not is_ignored(entry.name)}
    assert found <= TOP
    assert found >= TOP


def test_limits_are_data() -> None:
    """No Python in the data folder."""
    assert {path.suffix for path in own_files(ROOT / "limits")} <= {".toml", ".md", ".json"}


# written in pieces, so that this file does not hold what it forbids
FORBIDDEN = {
    "a registry's address": r"https?://[^\s\"')]+/" + r"simple\b",
    "unfinished work": r"\b(?:" + "|".join(("TO" + "DO", "FIX" + "ME", "X" + "XX")) + r")\b",
    "a stub": "NotImplemented" + "Error",
    "a paper outside the repository": "DESIGN" + r"\.md",
}


@pytest.mark.parametrize("what", FORBIDDEN)
def test_forbidden_words_are_nowhere(what: str) -> None:
    """In no file that is ours."""
    pattern = re.compile(FORBIDDEN[what])
    found = []
    for path in own_files():
        text = path.read_bytes().decode("utf-8", "replace")
        found += [f"{name(path)}:{text[: hit.start()].count(chr(10)) + 1}" for hit in pattern.finditer(text)]
    assert found == []


def test_tests_have_a_sentence_each() -> None:
    """Every test function says in its docstring what it shows."""
    silent = []
    for path in sorted((ROOT / "tests").rglob("test_*.py")):
        for node in ast.walk(tree_of(path)):
            if isinstance(node, ast.FunctionDef) and node.name.startswith("test_") and not ast.get_docstring(node):
                silent.append(f"{name(path)}:{node.lineno}")
    assert silent == []


def test_names_of_test_files_are_their_own() -> None:
    """No two files below tests/ share a name: they are imported without packages."""
    names = [path.name for path in (ROOT / "tests").rglob("*.py")]
    assert sorted(names) == sorted(set(names))
