"""What every ``--json`` prints, key by key: names, types, units, and nothing that is no number."""

from __future__ import annotations

import json
import signal
import subprocess
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import pytest
from cli_desk import COMMAND, DEFECTS, LIMITS, LOT, Screened, log_text, run, served, strict_json

import drivers
import harness
from harness.characteristics import CHARACTERISTICS

pytest_plugins = ["cli_fixtures"]

# by unit, as every place that names characteristics has them
IDS = {
    "Hz": ("fs", "fp", "fm", "fn", "fr", "fa", "bandwidth", "unwanted_f"),
    "ohm": ("r1", "zm", "zn"),
    "H": ("l1",),
    "F": ("c0", "c1", "c_at"),
    "1": (
        *("qm", "q_half_power", "keff", "kp", "kt", "k31", "k33", "m"),
        *("tan_delta", "tan_delta_at", "drive_share", "unwanted_g"),
    ),
    "deg": ("phase_max",),
    "m": ("droplet",),
}
UNIT_OF = {name: unit for unit, names in IDS.items() for name in names}
Check = Callable[[Any], bool]


def text(value: Any) -> bool:
    return isinstance(value, str)


def number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def whole(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool)


def or_null(check: Check) -> Check:
    return lambda value: value is None or check(value)


def each(check: Check) -> Check:
    return lambda value: isinstance(value, list) and all(check(one) for one in value)


def form(**keys: Check) -> Check:
    """An object with exactly these keys, each as its check says."""

    def check(value: Any) -> bool:
        assert isinstance(value, dict), value
        assert set(value) == set(keys), set(value) ^ set(keys)
        for key, one in keys.items():
            assert one(value[key]), (key, value[key])
        return True

    return check


def values(value: Any) -> bool:
    """Characteristics by id, each in its own SI unit."""
    assert isinstance(value, dict)
    for name, one in value.items():
        assert form(value=or_null(number), u=or_null(number), unit=text)(one)
        assert one["unit"] == UNIT_OF[name], name
        assert one["u"] is None or one["u"] >= 0
    return True


WARNINGS = each(form(code=text, characteristic=or_null(text), text=text))
REASONS = each(form(code=text, characteristic=or_null(text), value=or_null(number), limit=or_null(number), text=text))
FIT = form(
    file=text,
    status=lambda v: v in ("ok", "no-resonance", "not-resolved", "bad-data"),
    message=text,
    values=values,
    modes=each(form(f=number, q=number, g=number, wanted=lambda v: isinstance(v, bool))),
    residual=form(relative_rms=or_null(number), dof=whole),
    warnings=WARNINGS,
)
JUDGED: Mapping[str, Check] = {
    "serial": text,
    "source": text,
    "verdict": lambda v: v in ("pass", "fail", "no verdict"),
    "grade": or_null(text),
    "reasons": REASONS,
    "values": values,
    "warnings": WARNINGS,
}
ATTEMPT = {**JUDGED, "record": text, "attempt": whole, "final": lambda v: isinstance(v, bool)}
LIMIT_SET = form(part_number=text, revision=text, sha256=lambda v: len(v) == 64)
HISTORY = {
    **ATTEMPT,
    "element": whole,
    "lot": text,
    "identity": lambda v: v in ("scanned", "typed", "file", "auto"),
    "operator": text,
    "limits": LIMIT_SET,
    "instruments": each(
        form(role=text, resource=text, dialect=text, maker=text, model=text, serial=text, firmware=text)
    ),
    "correction": form(
        fixture=text, rs_ohm=number, ls_h=number, cp_f=number, u_rs_ohm=number, u_ls_h=number, u_cp_f=number
    ),
    "software": lambda v: {"ringtrue", "python", "numpy"} <= set(v),
    "at": lambda v: v.endswith("Z") and "T" in v,
    "hash": lambda v: len(v) == 64,
    "points": or_null(whole),
}
SHARE = form(value=or_null(number), low=or_null(number), high=or_null(number))


def test_the_ids_are_those_of_the_contract() -> None:
    """Characteristic ids and their SI units are the same everywhere."""
    assert {name: one.unit for name, one in CHARACTERISTICS.items()} == UNIT_OF


# ── fit ──────────────────────────────────────────────────────────────────────────────────────


def capacitor() -> str:
    """A part without a resonance (invented: 1 nF)."""
    rows = [f"{1e6 + k * 1e3},{1 / (2 * 3.141592653589793 * (1e6 + k * 1e3) * 1e-9):.6f},-90" for k in range(101)]
    return "\n".join(["frequency_hz,impedance_ohm,phase_deg", *rows]) + "\n"


def test_fit_is_one_array_of_every_status(desk: Path) -> None:
    """One object a file in the order given; all four statuses; values only where the status is ok."""
    files = {"ok.csv": log_text(), "flat.csv": capacitor(), "few.csv": log_text(points=11), "bad.csv": "a,b\n1,2\n"}
    for name, content in files.items():
        (desk / name).write_text(content, encoding="utf-8")
    ran = run("fit", *files, "--json")
    assert ran.code == 2
    assert len(ran.out.splitlines()) == 1
    found = ran.json()
    assert all(FIT(one) for one in found)
    assert [one["file"] for one in found] == list(files)
    assert [one["status"] for one in found] == ["ok", "no-resonance", "not-resolved", "bad-data"]
    assert [bool(one["values"]) for one in found] == [True, False, False, False]
    assert all(one["message"] for one in found[1:])


def test_fit_says_what_was_put_in(desk: Path) -> None:
    """The invented part's own values come back within four standard uncertainties and 0.1 %; one mode is wanted."""
    (desk / "ok.csv").write_text(log_text(), encoding="utf-8")
    (one,) = run("fit", "ok.csv", "--search", "1.6 MHz", "1.7 MHz", "--json").json()
    for name, true in {"fs": 1.65e6, "r1": 1.5, "qm": 170.0, "c0": 1.5e-9, "tan_delta": 0.01}.items():
        assert one["values"][name]["value"] == pytest.approx(true, rel=1e-3), name
    assert [mode["wanted"] for mode in one["modes"]].count(True) == 1
    assert one["residual"]["relative_rms"] < 1e-6


def test_a_value_that_does_not_exist_is_null_and_a_warning_says_why(desk: Path) -> None:
    """At low figure of merit there is no fr and no fa: null, and a warning for each."""
    # invented: Q 8 and much C0, so that the phase never reaches zero
    import numpy as np

    f = np.linspace(30e3, 50e3, 401)
    y = 2j * np.pi * f * 5e-9 + 1 / (1e3 * (1 + 8j * (f / 4e4 - 4e4 / f)))
    rows = [f"{one:.3f},{z.real:.9g},{z.imag:.9g}" for one, z in zip(f, 1 / y, strict=True)]
    (desk / "low.csv").write_text("\n".join(["frequency_hz,resistance_ohm,reactance_ohm", *rows]) + "\n")
    (one,) = run("fit", "low.csv", "--json").json()
    assert FIT(one)
    assert one["status"] == "ok"
    assert one["values"]["fr"]["value"] is None
    assert one["values"]["fa"]["value"] is None
    assert {"fr", "fa"} <= {warning["characteristic"] for warning in one["warnings"]}


# ── a screened lot ───────────────────────────────────────────────────────────────────────────


def test_screen_prints_one_line_an_attempt(screened: Screened) -> None:
    """Every attempt in order, no verdicts twice; the verdicts are those the defects must have."""
    found = screened.attempts()
    assert all(form(**ATTEMPT)(one) for one in found)
    expected = {
        "sound": "pass",
        "crack": "fail",
        "weak-poling": "fail",
        "open-lead": "no verdict",
        "short": "no verdict",
    }
    finals = {one["serial"]: one["verdict"] for one in found if one["final"]}
    assert finals == {f"MD-{k + 1:04d}": expected[defect] for k, defect in enumerate(DEFECTS)}
    tries = [(one["serial"], one["attempt"], one["final"]) for one in found if one["verdict"] == "no verdict"]
    assert tries == [("MD-0003", 1, False), ("MD-0003", 2, True), ("MD-0004", 1, False), ("MD-0004", 2, True)]
    assert all(one["reasons"] for one in found if one["verdict"] != "pass")
    assert all(one["grade"] in ("L", "M", "H") for one in found if one["verdict"] == "pass")
    assert [one["source"] for one in found] == [f"{LOT}/{one['record'].rpartition('/')[2]}" for one in found]


def test_replay_says_the_same_again(screened: Screened) -> None:
    """Under the same limits every line is the screening's own, value for value."""
    found = run("replay", LOT, "--limits", LIMITS, "--store", screened.store, "--json")
    assert found.code == 0
    assert all(form(**JUDGED)(one) for one in found.lines())
    assert found.lines() == [{key: one[key] for key in JUDGED} for one in screened.attempts()]


def test_history_is_every_attempt_oldest_first(screened: Screened) -> None:
    """One array; what screening printed, and what stands behind it."""
    ran = run("history", "MD-0003", "--store", screened.store, "--json")
    assert ran.code == 0
    found = ran.json()
    assert all(form(**HISTORY)(one) for one in found)
    printed = [one for one in screened.attempts() if one["serial"] == "MD-0003"]
    assert [{key: one[key] for key in ATTEMPT} for one in found] == printed
    assert [one["attempt"] for one in found] == [1, 2]
    assert found == sorted(found, key=lambda one: one["at"])
    assert found[0]["limits"]["part_number"] == "MD-1650"
    assert found[0]["operator"] == "invented"
    assert found[0]["points"] > 100


def test_lot_adds_up(screened: Screened) -> None:
    """Counts, yields, ranked fail reasons and characteristics of the screened lot."""
    ran = run("lot", LOT, "--store", screened.store, "--json")
    assert ran.code == 0
    found = ran.json()
    capability = form(
        n=whole, unit=text, population=text, note=or_null(text),
        **dict.fromkeys(("mean", "sd", "min", "max", "median", "pp", "ppk"), or_null(number)),
        **dict.fromkeys(("pp_low", "pp_high", "ppk_low", "ppk_high"), or_null(number)),
    )  # fmt: skip
    assert form(
        lot=text, limits=LIMIT_SET, parts=whole, **{"pass": whole}, fail=whole, no_verdict=whole, grades=dict.copy,
        first_pass_yield=SHARE, final_yield=SHARE,
        fail_reasons=each(lambda v: {"characteristic", "count"} <= set(v)),
        characteristics=lambda v: all(capability(one) for one in v.values()),
    )(found)  # fmt: skip
    assert (found["parts"], found["pass"], found["fail"], found["no_verdict"]) == (7, 3, 2, 2)
    assert found["first_pass_yield"]["value"] == pytest.approx(3 / 7)
    assert found["final_yield"]["low"] < 3 / 7 < found["final_yield"]["high"]
    counts = [one["count"] for one in found["fail_reasons"]]
    assert counts == sorted(counts, reverse=True)
    assert sum(counts) == 2
    assert {name: one["unit"] for name, one in found["characteristics"].items()} == {
        name: UNIT_OF[name] for name in found["characteristics"]
    }
    assert found["characteristics"]["fs"]["n"] == 5
    # one-sided: no Pp
    assert found["characteristics"]["qm"]["pp"] is None
    assert found["characteristics"]["fs"]["pp"] is not None


def test_record_verify_says_sound_and_how_far(screened: Screened) -> None:
    """Sound, one chain, as many records as attempts, its head the last hash."""
    ran = run("record", "verify", "--store", screened.store, "--json")
    assert ran.code == 0
    found = ran.json()
    assert form(
        sound=lambda v: v is True,
        chains=each(form(chain=text, records=whole, head=or_null(text), anchored_to=or_null(whole))),
        findings=each(form(kind=text, chain=or_null(text), seq=or_null(whole), serial=or_null(text), text=text)),
    )(found)
    assert found["findings"] == []
    (chain,) = found["chains"]
    assert chain["records"] == len(screened.attempts())
    last = screened.attempts()[-1]
    assert last["record"] == f"{chain['chain']}/{chain['records']}"
    assert chain["head"] == run("history", last["serial"], "--store", screened.store, "--json").json()[-1]["hash"]


# ── the rest ─────────────────────────────────────────────────────────────────────────────────


def test_limits_check_lists_every_mistake_with_its_line(desk: Path) -> None:
    """A sound file and a bad one: both in one array, the bad one's mistakes by line; exit 2."""
    good = LIMITS.read_text(encoding="utf-8")
    (desk / "bad.toml").write_text(good.replace("attempts = 2", "attempts = 0"), encoding="utf-8")
    ran = run("limits", "check", LIMITS, "bad.toml", "--json")
    assert ran.code == 2
    check = form(
        file=text, sound=lambda v: isinstance(v, bool), limits=or_null(LIMIT_SET), warnings=each(text),
        mistakes=each(form(line=or_null(whole), key=text, text=text, remedy=text)),
    )  # fmt: skip
    sound, bad = ran.json()
    assert check(sound)
    assert check(bad)
    assert (sound["sound"], sound["mistakes"]) == (True, [])
    assert bad["sound"] is False
    assert bad["limits"] is None
    (mistake,) = bad["mistakes"]
    assert mistake["line"] == good.splitlines().index("attempts = 2") + 1
    assert "attempts" in mistake["key"]


def test_limits_explain_and_checkup_and_demo_speak_json_too(desk: Path) -> None:
    """explain: the sentences; checkup: versions and places, the same of any machine; each one document."""
    explained = run("limits", "explain", LIMITS, "--json").json()
    assert set(explained) == {"file", "limits", "sentences"}
    assert any("Yellow tray" in sentence for sentence in explained["sentences"])
    found = run("checkup", "--json").json()
    # from the checkout, or installed from it
    assert found["harness"] == str(Path(harness.__file__).parent)
    assert found["drivers"] == str(Path(drivers.__file__).parent)
    assert {"numpy", "pyvisa", "sqlalchemy"} <= set(found["libraries"])
    assert "no store" in found["store"]
    assert "no station file" in found["station"]
    assert [path.name for path in desk.iterdir()] == []


def test_screen_flushes_each_line_after_its_commit(desk: Path) -> None:
    """A line can be read while the station is at work, its record is in the store by then; SIGTERM ends gently."""
    (desk / "bench").mkdir()
    with served(desk / "bench", "--parts", "3", "--seed", "2") as at:
        station = Path(at["station"]).read_text(encoding="utf-8").split("[bench.scanner]")[0]
        (desk / "s.toml").write_text(station, encoding="utf-8")  # a meter alone: serials are typed
        process = subprocess.Popen(
            [COMMAND, "screen", "L-1", "--limits", LIMITS, "--station", "s.toml", "--store", "s.db", "--json"],
            stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=desk,
        )  # fmt: skip
        assert process.stdin is not None
        assert process.stdout is not None
        for number in (1, 2):
            process.stdin.write(f"MD-000{number}\n")
            process.stdin.flush()
            line = strict_json(process.stdout.readline())
            while not line["final"]:
                line = strict_json(process.stdout.readline())
            assert line["serial"] == f"MD-000{number}"
            stored = run("history", f"MD-000{number}", "--store", "s.db", "--json").json()
            assert stored[-1]["record"] == line["record"]
        process.send_signal(signal.SIGTERM)
        out, err = process.communicate(timeout=30)
    assert process.returncode == 0, err
    assert out == ""
    assert "stopping after the part in hand" in err
    assert "End: 2 parts judged" in err
    assert "Traceback" not in err


def test_json_and_people_do_not_mix(screened: Screened) -> None:
    """With --json standard output is JSON from the first byte to the last, and standard error is silent."""
    for command in (
        ("lot", LOT, "--store", screened.store),
        ("history", "MD-0001", "--store", screened.store),
        ("record", "verify", "--store", screened.store),
        ("limits", "check", LIMITS),
    ):
        ran = run(*command, "--json")
        assert ran.err == ""
        json.loads(ran.out)
        assert ran.out.endswith("\n")
