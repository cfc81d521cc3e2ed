"""A record as a document and a sweep as bytes: exact both ways, canonical, and refused where JSON cannot say it."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from store_examples import bits, make_opening, make_record

from harness.records import (
    Caveat,
    Conditions,
    Correction,
    Fit,
    FitStatus,
    Instrument,
    Judgement,
    Mode,
    Opening,
    Reading,
    Reason,
    Record,
    Residual,
    Sweep,
    Value,
    Verdict,
)
from harness.store import canonical, sweep_codec

FIRST = Path(__file__).with_name("record_format_1.json")
LINK = canonical.Link("chain-1", 7, "ab" * 32, 9, "C", "2026-03-02T08:00:00.000000Z", "operator 3")


def there_and_back(record: Record) -> Record:
    sha256, numbers = None, None
    if record.sweep is not None:
        sha256, blob = sweep_codec.encode(record.sweep.f_hz, record.sweep.z_ohm)
        numbers = sweep_codec.decode(blob, len(record.sweep.f_hz), sha256)
    document = canonical.document_of(record, LINK, sha256)
    found = canonical.parse_document(document)
    assert canonical.link_of(found) == LINK
    assert canonical.canonical_json(found) == document
    back = canonical.record_from(found, numbers)
    assert canonical.document_of(back, LINK, sha256) == document
    return back


# ── documents ────────────────────────────────────────────────────────────────────────────────

number = st.floats(allow_nan=False, allow_infinity=False)
maybe = st.none() | number
word = st.text(st.characters(codec="utf-8"), max_size=8)
whole = st.integers(-(2**53), 2**53)
jsonish = st.recursive(
    st.none() | st.booleans() | whole | number | word,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(word, inner, max_size=3),
    max_leaves=6,
)
SCALARS: dict[str, Any] = {
    "str": word,
    "float": number,
    "float | None": maybe,
    "int": whole,
    "str | None": st.none() | word,
}


def flat(kind: type, **more: Any) -> st.SearchStrategy[Any]:
    """Instances of a dataclass whose plain fields are drawn by their written type."""
    fields = {name: SCALARS[written] for name, written in kind.__annotations__.items() if written in SCALARS}
    return st.builds(kind, **(fields | more))


readings = flat(Reading, z_ohm=st.builds(complex, number, number))
conditions = flat(Conditions)
values = st.dictionaries(word, flat(Value), max_size=3)
caveats = st.lists(flat(Caveat), max_size=2).map(tuple)


@st.composite
def sweeps(draw: st.DrawFn) -> Sweep:
    size = draw(st.integers(0, 5))
    some = st.lists(st.floats(), min_size=size, max_size=size)
    z_ohm = np.array(draw(some)) + 0j
    z_ohm.imag = draw(some)
    near = tuple(draw(st.lists(readings, max_size=2)))
    accuracy = (draw(maybe), draw(number), draw(number))
    return Sweep(np.array(draw(some)), z_ohm, draw(conditions), near, *accuracy, draw(st.booleans()))


fits = flat(
    Fit,
    status=st.sampled_from(FitStatus),
    values=values,
    modes=st.lists(flat(Mode, wanted=st.booleans()), max_size=2).map(tuple),
    residual=flat(Residual),
    caveats=caveats,
    budget=st.dictionaries(word, st.dictionaries(word, number, max_size=2), max_size=2),
    span_hz=st.none() | st.tuples(number, number),
)
judgements = flat(
    Judgement,
    verdict=st.sampled_from(Verdict),
    reasons=st.lists(flat(Reason), max_size=2).map(tuple),
    values=values,
    caveats=caveats,
)
records = flat(
    Record,
    opening=flat(Opening, plan=st.dictionaries(word, jsonish, max_size=3)),
    sweep=st.none() | sweeps(),
    fit=st.none() | fits,
    judgement=judgements,
    correction=flat(Correction),
    instruments=st.lists(flat(Instrument), max_size=2).map(tuple),
    software=st.dictionaries(word, word, max_size=2),
    final=st.booleans(),
)


@given(records)
def test_any_record_comes_back_to_the_last_bit(record: Record) -> None:
    """Document and blob together lose nothing, whatever the fields hold, signs of zero and a sweep's NaN included."""
    back = there_and_back(record)
    assert bits(back) == bits(record)


def test_the_example_comes_back() -> None:
    """The example with everything filled in, and the one with nothing, both come back."""
    for record in (make_record(), make_record(sweep=None, fit=None)):
        assert bits(there_and_back(record)) == bits(record)


def test_a_document_of_format_1_reads_for_ever() -> None:
    """A document written by the first release, kept beside this test and never made again, still gives its record."""
    document = FIRST.read_text(encoding="utf-8").rstrip("\n")
    assert canonical.hash_of(document) == "4a8dc31741ee110db3dd322bb861bbca7c3cac629a282769112f3b61b2f3f247"
    found = canonical.parse_document(document)
    assert canonical.canonical_json(found) == document
    sweep = Sweep(np.array([1e6, 1.25e6]), np.array([10 - 2.5j, 3 + 0.125j]))
    back = canonical.record_from(found, (sweep.f_hz, sweep.z_ohm))
    assert bits(back) == bits(make_record(sweep=sweep))
    assert canonical.link_of(found) == LINK


KEYS = {
    "document": {
        *("format", "chain", "seq", "prev", "attempt", "identity", "lot", "limits", "opening", "conditions"),
        *("instruments", "correction", "sweep", "fit", "judgement", "software", "final", "at"),
    },
    "fit": {"status", "message", "values", "modes", "residual", "warnings", "budget", "span_hz"},
    "judgement": {"verdict", "grade", "reasons", "values", "warnings"},
}


def test_the_document_says_what_it_should() -> None:
    """The keys an outsider would look for are there, sorted, without spaces, and complex numbers are pairs."""
    record = make_record()
    document = canonical.document_of(record, LINK, "cd" * 32)
    found = json.loads(document)
    assert list(found) == sorted(KEYS["document"])
    assert found["format"] == 1
    assert (found["chain"], found["seq"], found["prev"]) == ("chain-1", 7, "ab" * 32)
    assert found["limits"] == {"part_number": "MD-1650", "revision": "C", "sha256": record.opening.limits_sha256}
    assert found["sweep"]["readings"][0]["z_ohm"] == [12.5, -88417.25]
    assert found["sweep"]["points"] == 401
    assert list(found["fit"]) == sorted(KEYS["fit"])
    assert list(found["judgement"]) == sorted(KEYS["judgement"])
    assert '": ' not in document
    assert canonical.hash_of(document) == hashlib.sha256(document.encode()).hexdigest()


@pytest.mark.parametrize("bad", [float("nan"), float("inf"), -float("inf"), np.float64("nan")])
def test_a_number_that_is_none_is_refused(bad: float) -> None:
    """NaN and Infinity never reach a document: whoever made them has to say None."""
    with pytest.raises(ValueError, match="cannot be kept"):
        canonical.document_of(make_record(correction=Correction("clip", rs_ohm=bad)), LINK, "cd" * 32)


@pytest.mark.parametrize("bad", ["\ud800", object(), b"raw", {1j}])
def test_what_json_cannot_say_is_refused(bad: Any) -> None:
    """Half characters and foreign objects in a plan are refused, not rounded to something near."""
    with pytest.raises(ValueError, match="cannot be kept"):
        canonical.document_of(make_record(make_opening(plan={"x": bad})), LINK, "cd" * 32)


def test_numpy_scalars_are_plain_numbers() -> None:
    """NumPy's scalars in a plan write the same text as Python's."""
    assert canonical.canonical_json({"a": np.int64(3), "b": np.float64(0.1), "c": np.bool_(True)}) == (
        '{"a":3,"b":0.1,"c":true}'
    )


@pytest.mark.parametrize(
    ("document", "clause"),
    [("", "is not JSON"), ("[1]", "is not of format 1"), ('{"format":2}', "is not of format 1"), ("{", "is not JSON")],
)
def test_a_foreign_document_is_refused(document: str, clause: str) -> None:
    """What is not a document of a known format says so."""
    with pytest.raises(canonical.DocumentError, match=clause):
        canonical.parse_document(document)


@pytest.mark.parametrize("key", sorted(json.loads(canonical.document_of(make_record(), LINK, "cd" * 32))))
def test_a_document_without_a_key_is_refused(key: str) -> None:
    """Each key of a document is needed: without it there is no half record, but one error."""
    found = json.loads(canonical.document_of(make_record(), LINK, "cd" * 32))
    del found[key]
    with pytest.raises(canonical.DocumentError):
        there(json.dumps(found))


def there(document: str) -> Record:
    found = canonical.parse_document(document)
    canonical.link_of(found)
    return canonical.record_from(found, (np.zeros(1), np.zeros(1) + 0j))


# ── sweeps ───────────────────────────────────────────────────────────────────────────────────


@given(sweeps())
def test_a_sweep_comes_back_to_the_last_bit(sweep: Sweep) -> None:
    """NaN payloads, infinities, subnormals and minus zero survive."""
    sha256, blob = sweep_codec.encode(sweep.f_hz, sweep.z_ohm)
    f_hz, z_ohm = sweep_codec.decode(blob, len(sweep.f_hz), sha256)
    assert f_hz.tobytes() == sweep.f_hz.tobytes()
    assert z_ohm.tobytes() == sweep.z_ohm.tobytes()
    assert sha256 == hashlib.sha256(f_hz.astype("<f8").tobytes() + z_ohm.astype("<c16").tobytes()).hexdigest()


@given(st.data())
def test_an_edited_blob_is_never_another_sweep(data: st.DataObject) -> None:
    """Any changed, cut or lengthened blob is refused."""
    sha256, blob = sweep_codec.encode(np.arange(5.0), np.arange(5.0) * (1 + 2j))
    at = data.draw(st.integers(0, len(blob) - 1))
    flipped = bytearray(blob)
    flipped[at] ^= data.draw(st.integers(1, 255))
    for bad in (bytes(flipped), blob[:at], blob + b"x"):
        try:
            f_hz, _ = sweep_codec.decode(bad, 5, sha256)
        except sweep_codec.BlobError:
            continue
        assert f_hz.tobytes() == np.arange(5.0).tobytes()  # a bit of zlib's header that changes nothing


def test_a_blob_of_another_length_is_refused() -> None:
    """A blob that unpacks to more or fewer points than stated is refused before its hash is asked."""
    sha256, blob = sweep_codec.encode(np.arange(5.0), np.arange(5.0) + 0j)
    for points in (0, 4, 6):
        with pytest.raises(sweep_codec.BlobError, match="points it should have"):
            sweep_codec.decode(blob, points, sha256)
