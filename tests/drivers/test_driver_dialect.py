"""Dialects: the shipped ones load, a file of one's own too, and every mistake is told by its key."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

import pytest

from drivers.dialect import load_dialect, shipped_dialects
from drivers.errors import ResourceError

TEXT = resources.files("drivers").joinpath("dialects", "scpi-analyser.toml").read_text(encoding="utf-8")

# what is written → what is written instead → what the error says
MISTAKES = [
    ("format = 1", "format = 2", "format: has to be one of 1"),
    ("format = 1", "format = true", "format: has to be one of 1"),
    ('role = "meter"', 'role = "scanner"', "role: has to be one of 'meter'"),
    ('identify = "*IDN?"', 'identify = "*IDN"', "words.identify: has to be a question"),
    ('identify = "*IDN?"', "identify = 3", "words.identify: has to be one line"),
    ('identify = "*IDN?"', 'identfy = "*IDN?"', "words.identfy: unknown key, did you mean 'identify'?"),
    ('identify = "*IDN?"', 'identfy = "*IDN?"', "words.identify: this key is missing"),
    ('clear = "*CLS"', 'clear = ""', "words.clear: may not be empty"),
    ('clear = "*CLS"', 'clear = "*CLS\\n*RST"', "words.clear: has to be one line"),
    ("{drive}", "{voltage}", "words.settings: needs {frequencies} and {drive}, once each"),
    ('  "SOURce:VOLTage {drive}",', "", "words.settings: needs {frequencies} and {drive}, once each"),
    ('"SENSe:AVERage:COUNt 1"', "1", "words.settings: has to be a list of commands"),
    ('frequency = ".9E"', 'frequency = "%.9E"', "numbers.frequency: has to be a number format"),
    ('answer = "block"', 'answer = "binary"', "numbers.answer: has to be one of 'block', 'text'"),
    ('block_order = "big"', 'block_order = "middle"', "numbers.block_order: has to be one of 'big', 'little'"),
    ("infinity = 9.9e37", "infinity = inf", "numbers.infinity: has to be a number above 0"),
    ("min_f_hz = 20.0", "min_f_hz = 20.0e9", "limits.min_f_hz: 2e+10 is above max_f_hz 1e+07"),
    ("min_f_hz = 20.0", 'min_f_hz = "20 Hz"', "limits.min_f_hz: has to be a number above 0"),
    ("max_points = 4001", "max_points = 4001.0", "limits.max_points: has to be a whole number"),
    ("u_z_relative = 0.001", "u_z_relative = -0.001", "accuracy.u_z_relative: has to be a number of at least 0"),
    ("u_z_relative = 0.001", "u_z_relative = nan", "accuracy.u_z_relative: has to be a number of at least 0"),
    ("[timing]", "[timings]", "timings: unknown key, did you mean 'timing'?"),
    ("[timing]", "[timings]", "[timing]: this table is missing"),
    ("format = 1", "format = = 1", "not valid TOML"),
]


@pytest.mark.parametrize("name", shipped_dialects())
def test_every_shipped_dialect_loads(name: str) -> None:
    """Each file in drivers/dialects is a sound dialect under its own name, with its accuracy stated."""
    dialect = load_dialect(name)
    assert dialect.name == name
    assert dialect.u_z_relative > 0
    assert dialect.u_f_relative > 0
    assert dialect.noise_relative > 0


def test_the_shipped_ones_are_known() -> None:
    """Blocks and text are both there."""
    assert {load_dialect(name).answer for name in shipped_dialects()} == {"block", "text"}


@pytest.mark.parametrize(("written", "instead", "says"), MISTAKES)
def test_mistakes_by_key(tmp_path: Path, written: str, instead: str, says: str) -> None:
    """A mistake is told by its key, with what would do, and the file is named."""
    assert written in TEXT
    path = tmp_path / "own.toml"
    path.write_text(TEXT.replace(written, instead), encoding="utf-8")
    with pytest.raises(ResourceError) as caught:
        load_dialect(str(path))
    assert says in caught.value.text
    assert str(path) in caught.value.resource


def test_all_mistakes_in_one_go(tmp_path: Path) -> None:
    """Five mistakes are five complaints in one error."""
    path = tmp_path / "own.toml"
    broken = TEXT
    for written, instead, _ in (MISTAKES[0], MISTAKES[2], MISTAKES[7], MISTAKES[13], MISTAKES[18]):
        broken = broken.replace(written, instead)
    path.write_text(broken, encoding="utf-8")
    with pytest.raises(ResourceError) as caught:
        load_dialect(str(path))
    keys = ("format:", "role:", "words.clear:", "numbers.answer:", "limits.max_points:")
    assert all(key in caught.value.text for key in keys)


def test_an_own_file_is_as_good(tmp_path: Path) -> None:
    """A dialect in a file of one's own is loaded by its path."""
    path = tmp_path / "own.toml"
    path.write_text(TEXT.replace("noise_relative = 0.0015", "noise_relative = 0"), encoding="utf-8")
    assert load_dialect(str(path)).noise_relative == 0.0


def test_unknown_names_and_unreadable_files(tmp_path: Path) -> None:
    """A name that is not shipped gets the list; a path that cannot be read gets the reason."""
    with pytest.raises(ResourceError, match=r"no dialect 'scpi'.*scpi-analyser"):
        load_dialect("scpi")
    with pytest.raises(ResourceError, match="No such file"):
        load_dialect(str(tmp_path / "none.toml"))
    (tmp_path / "bad.toml").write_bytes(b"\xff\xfe")
    with pytest.raises(ResourceError, match="not UTF-8"):
        load_dialect(str(tmp_path / "bad.toml"))
    with pytest.raises(ResourceError, match="no dialect"):
        load_dialect("")


@pytest.mark.parametrize(
    "document", ["", "words = 3\nlimits = []", "[words]\n[limits]\n[numbers]\n[accuracy]\n[timing]"]
)
def test_hardly_a_dialect_at_all(tmp_path: Path, document: str) -> None:
    """Empty or misshapen files are refused by key as well."""
    path = tmp_path / "own.toml"
    path.write_text(document, encoding="utf-8")
    with pytest.raises(ResourceError, match="missing"):
        load_dialect(str(path))
