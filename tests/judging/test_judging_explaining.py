"""Limits in plain words, and the doubts of a careful reader."""

from __future__ import annotations

from conftest import ROOT

from harness.judging.explaining import check_sentences, explain, explanation, requirement_sentence
from harness.judging.limit_file import parse_limits
from harness.records import Requirement

DISC = parse_limits((ROOT / "limits/mist-discs/MD-1650.toml").read_text(encoding="utf-8"), "MD-1650.toml")
RING = parse_limits((ROOT / "limits/mesh-rings/MR-113.toml").read_text(encoding="utf-8"), "MR-113.toml")
DOUBTFUL = """\
format = 1
part_number = "X"
revision = "A"
[mode]
kind = "thickness"
search = ["1.60 MHz", "1.70 MHz"]
[[require]]
characteristic = "fs"
unit = "kHz"
min = 1610
max = 1690
u_max = 30
[[grade]]
name = "A"
characteristic = "fs"
unit = "kHz"
min = 1600
max = 1650
"""


def test_every_requirement_grade_and_rule_is_explained() -> None:
    """Each requirement has its sentence with limits, rule, zone and action; sections come in the file's order."""
    rows = explanation(DISC)
    requirements = [row for row in rows if row.section == "requirements"]
    assert len(requirements) == len(DISC.requirements)
    for row, requirement in zip(requirements, DISC.requirements, strict=True):
        assert requirement.action in row.text
    assert list(dict.fromkeys(row.section for row in rows)) == [
        "part", "measuring", "conditions", "requirements", "grades", "lot", "application",
    ]  # fmt: skip
    assert "fs (series resonance): from 1 638 kHz to 1 662 kHz" in "\n".join(explain(DISC))


def test_the_acceptance_zone_is_stated_at_u_max() -> None:
    """The zone at u_max is printed with the digits that matter."""
    requirement = Requirement("fs", 1630e3, 1670e3, "kHz", u_max=500.0, between="hold")
    sentence = requirement_sentence(requirement)
    assert "guarded by 1.64 u (at most 5 % false accept); too close to prove is held without a verdict" in sentence
    assert "at that uncertainty accepted from 1 630.82 kHz to 1 669.18 kHz" in sentence
    assert "accepted as measured" in requirement_sentence(Requirement("qm", 100.0, None, "1", rule="simple"))


def test_droplets_are_labelled_or_left_to_the_mesh() -> None:
    """A mist disc's droplets are extrapolated and information only; a mesh ring has none to state."""
    disc, ring = "\n".join(explain(DISC)), "\n".join(explain(RING))
    assert "extrapolated beyond its 10 kHz to 800 kHz; information only" in disc
    assert "set by the mesh's apertures" in ring
    assert "Lang" not in ring


def test_doubts_have_a_line_and_a_remedy() -> None:
    """No contact window, no action, an empty zone, a narrow search, grades that miss or overshoot: each once."""
    sentences = check_sentences(parse_limits(DOUBTFUL, "x.toml"), "x.toml")
    wanted = [
        "No contact window", "fs has no action", "fs accepts nothing at its u_max. A u_max below 24 kHz would do",
        "The search window ends close to the limits of fs", "Grade A reaches beyond the required limits",
        "The grades leave out part of what is accepted",
    ]  # fmt: skip
    assert len(sentences) == len(wanted)
    for sentence, words in zip(sentences, wanted, strict=True):
        assert words in sentence
    assert [sentence.split(" ")[0] for sentence in sentences] == [
        "x.toml:", "x.toml:7:", "x.toml:7:", "x.toml:7:", "x.toml:13:", "x.toml:13:",
    ]  # fmt: skip
