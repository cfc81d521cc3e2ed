"""Lots: deterministic by seed, mixed as asked, and strict about their description."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.physics.defects import DEFECTS
from sim_instruments.physics.families import FAMILIES
from sim_instruments.physics.lots import DEFAULT_DEFECTS, LotError, make_lot, read_lot
from sim_instruments.physics.truth import characteristics, fs_hz

DESCRIPTION = """
family = "MD-1650"
seed = 7
serial_prefix = "MD-"

[[part]]
defect = "crack"
count = 2

[[part]]
near = { fs_hz = 1670000.0, offset_hz = -200.0 }
count = 2

[[part]]
serial = "MD-X1"
defect = "short"

[[part]]
family = "BD-40"
near = { fs_hz = 40400 }
"""


@pytest.mark.parametrize("family", FAMILIES)
def test_a_part_does_not_depend_on_the_lot_size(family: str) -> None:
    """The first five of forty parts are the five parts of a lot of five; another seed gives others."""
    five, forty, other = make_lot(family, 5, 3), make_lot(family, 40, 3), make_lot(family, 5, 4)
    assert five == forty[:5]
    assert all(a.elements != b.elements for a, b in zip(five[:3], other[:3], strict=True))


def test_default_mix() -> None:
    """Of 32 parts 24 are sound, the other 8 hold each defect once; serials run."""
    lot = make_lot("MR-113", 32, 1)
    bad = [part.defect for part in lot if part.defect != "sound"]
    assert bad == list(DEFAULT_DEFECTS)
    assert set(bad) == set(DEFECTS) - {"no-part"}
    assert [part.serial for part in lot[:2]] == ["MR-0001", "MR-0002"]
    assert len({part.serial for part in lot}) == 32


def test_lots_of_one_kind() -> None:
    """``defects=()`` makes all sound; a single defect comes every fourth time; a prefix replaces the family's."""
    assert {part.defect for part in make_lot("BD-40", 9, 1, defects=())} == {"sound"}
    lot = make_lot("BD-40", 8, 1, defects=("crack",), serial_prefix="Q")
    assert [part.defect for part in lot].count("crack") == 2
    assert lot[0].serial == "Q0001"


def test_near_limit_parts_sit_where_asked() -> None:
    """The first sound parts are placed on the wanted frequencies, the next falls where it falls."""
    lot = make_lot("MD-1650", 3, 2, near_limit_hz=(1669.8e3, 1630.3e3))
    assert [fs_hz(part) for part in lot[:2]] == pytest.approx([1669.8e3, 1630.3e3], rel=1e-9)
    assert fs_hz(lot[2]) != pytest.approx(1630.3e3, rel=1e-6)


def test_batches_differ_more_than_chance() -> None:
    """All parts of a lot share its batch: lots' means scatter beyond the parts' own spread over √n."""
    means = [
        np.mean([characteristics(part)["c_at"] for part in make_lot("BD-40", 16, seed, defects=())])
        for seed in range(12)
    ]
    own = np.std([characteristics(part)["c_at"] for part in make_lot("BD-40", 16, 0, defects=())], ddof=1)
    assert np.std(means, ddof=1) > 1.5 * own / 4


def test_description_is_followed() -> None:
    """Counts, defects, places, serials and a second family come out as written."""
    lot = read_lot(DESCRIPTION)
    assert [part.serial for part in lot] == ["MD-0001", "MD-0002", "MD-0003", "MD-0004", "MD-X1", "MD-0006"]
    assert [part.defect for part in lot] == ["crack", "crack", "sound", "sound", "short", "sound"]
    assert [part.family for part in lot] == ["MD-1650"] * 5 + ["BD-40"]
    assert [fs_hz(lot[k]) for k in (2, 3, 5)] == pytest.approx([1669.8e3, 1669.8e3, 40.4e3], rel=1e-9)
    assert lot[2].elements != lot[3].elements
    assert read_lot(DESCRIPTION) == lot


def test_family_prefixes_apply_where_none_is_given() -> None:
    """Without ``serial_prefix`` each part's serial starts with its family's prefix."""
    lot = read_lot('family = "MD-1650"\nseed = 1\n[[part]]\n[[part]]\nfamily = "MR-113"\n')
    assert [part.serial for part in lot] == ["MD-0001", "MR-0002"]


GOOD = 'family = "MD-1650"\nseed = 1\n'
BAD = [
    ("family = ", "not valid TOML"),
    ('seed = 1\n[[part]]\n[[part]]\nfamily = "BD-40"\n', "key 'family' is missing; it must be one of MD-1650"),
    ('family = "MD-1650"\n[[part]]\n', "key 'seed' is missing"),
    (GOOD, "key 'part' is missing; it must be one or more [[part]] tables"),
    (GOOD + "part = 3\n", "key 'part' is 3"),
    ('family = "MD-1650"\nseed = -1\n[[part]]\n', "key 'seed' is -1; it must be a whole number"),
    ('family = "MD-1650"\nseed = true\n[[part]]\n', "key 'seed' is True"),
    ('family = "MD-1650"\nseed = 1.5\n[[part]]\n', "key 'seed' is 1.5"),
    (GOOD + "colour = 1\n[[part]]\n", "key 'colour' is not known; known are family, seed"),
    (GOOD + "[[part]]\n[[part]]\ndefetc = 'crack'\n", "part 2: key 'defetc' is not known"),
    (GOOD + "[[part]]\ndefect = 'cracked'\n", "part 1: key 'defect' is 'cracked'; it must be one of sound, chip"),
    (GOOD + "[[part]]\ncount = 0\n", "part 1: key 'count' is 0"),
    (GOOD + "[[part]]\ncount = 10000000\n", "more than 100000 parts"),
    (GOOD + "[[part]]\ncount = 2\nserial = 'A'\n", "part 1: key 'serial' names one part, but 'count' is 2"),
    (GOOD + "[[part]]\nserial = 'A'\n[[part]]\nserial = 'A'\n", "serial 'A' comes twice"),
    (GOOD + '[[part]]\nserial = "A\\n"\n', "key 'serial' is 'A\\n'; it must be printable text"),
    (GOOD + "[[part]]\nnear = 5\n", "part 1: key 'near' is 5; it must be a table"),
    (GOOD + "[[part]]\nnear = { offset_hz = 5 }\n", "part 1: near: key 'fs_hz' is missing"),
    (GOOD + "[[part]]\nnear = { fs_hz = nan }\n", "part 1: near: key 'fs_hz' is nan; it must be a number of hertz"),
    (GOOD + "[[part]]\nnear = { fs_hz = 2e6 }\n", "part MD-0001: near: 2e+06 Hz is outside the search window"),
    (GOOD + "[[part]]\ndefect = 'short'\nnear = { fs_hz = 1.65e6 }\n", "has no mode to place"),
    (GOOD + "[[part]]\nnear = { fs_hz = 1" + "0" * 400 + " }\n", "it must be a number of hertz"),
]


@pytest.mark.parametrize(("text", "said"), BAD, ids=range(len(BAD)))
def test_a_bad_description_gets_one_sentence(text: str, said: str) -> None:
    """Each mistake is named with its file, part and key, in one line."""
    with pytest.raises(LotError) as caught:
        read_lot(text, "line.toml")
    message = str(caught.value)
    assert message.startswith("line.toml: ")
    assert said in message
    assert "\n" not in message


def test_unknown_names_are_refused_with_the_known_ones() -> None:
    """A family or defect that does not exist names those that do."""
    with pytest.raises(LotError, match="family 'MD-9' is not known; known are MD-1650, MR-113, BD-40"):
        make_lot("MD-9", 1, 1)
    with pytest.raises(LotError, match="defect 'rust' is not known"):
        make_lot("BD-40", 1, 1, defects=("rust",))
