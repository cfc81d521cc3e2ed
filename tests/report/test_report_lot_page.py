"""A lot's page: every number on it equals the statistics, nothing in it reaches out, odd input stays text."""

from __future__ import annotations

import re
from html.parser import HTMLParser

import pytest
from report_examples import LIMITS, TRACEABILITY, attempt, lot, sound_values, with_least_yield

from harness.report.amounts import scale_for
from harness.report.lot_page import lot_page, render
from harness.report.words import CAUTIONS, MARKS, UNSEEN
from harness.statistics import to_json
from harness.statistics.lot import requirements_by_key

VOID = {"meta", "br", "link", "img", "hr", "input"}


class Page(HTMLParser):
    """The page as read: numbers by key, text, tags and attributes; raises where tags do not nest."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.numbers: dict[str, tuple[str, str]] = {}
        self.plain_numbers: list[tuple[str, str]] = []
        self.tags: list[str] = []
        self.attributes: list[tuple[str, str, str | None]] = []
        self.text = ""
        self._open: list[str] = []
        self._data: dict[str, str | None] | None = None
        self.feed(html)
        self.close()
        assert self._open == []

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += [(tag, name, value) for name, value in attrs]
        if tag not in VOID:
            self._open.append(tag)
        if tag == "data":
            self._data = dict(attrs)

    def handle_startendtag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += [(tag, name, value) for name, value in attrs]

    def handle_endtag(self, tag):
        assert self._open.pop() == tag
        self._data = None if tag == "data" else self._data

    def handle_data(self, data):
        self.text += data
        if self._data is None:
            return
        found = (self._data["value"] or "", data)
        if "data-key" in self._data:
            key = self._data["data-key"]
            assert self.numbers.get(key, found) == found
            self.numbers[key] = found
        else:
            self.plain_numbers.append(found)


def page_of(attempts, limits=LIMITS, sentences=None, traceability=TRACEABILITY):
    model = lot_page("LOT-7", limits, attempts, traceability, sentences)
    return model, render(model)


def leaves(form, path=""):
    """Every number and null of ``lot --json`` by its path."""
    items = form.items() if isinstance(form, dict) else enumerate(form)
    for name, value in items:
        where = f"{path}.{name}" if path else str(name)
        if isinstance(value, dict | list):
            yield from leaves(value, where)
        elif value is None or isinstance(value, int | float):
            yield where, value


LOTS = {
    "usual": lot(),
    "empty": [],
    "one": [attempt("MD-0001", values=sound_values(1), grade="L")],
    "two": [attempt(f"MD-000{k}", values=sound_values(k), grade="L") for k in (1, 2)],
    "equal": [attempt(f"MD-000{k}", values=sound_values(1), grade="L") for k in range(5)],
    "all failed": [attempt(f"MD-000{k}", "fail", values=sound_values(k)) for k in range(5)],
    "no verdicts": [attempt(f"MD-000{k}", "no verdict") for k in range(3)],
    "waiting": [attempt("MD-0001", "no verdict", final=False)],
    "no resonance": [attempt("MD-0001", "fail", reasons=(("no-resonance", "fs"),))],
    "several elements": [attempt("MD-0001", values=sound_values(k), element=k) for k in (1, 2)],
}


def expected_numbers(model):
    """``lot --json``'s numbers but those a page leaves out: indices without limits, and limits of what has no value."""
    form = to_json(model.statistics, "LOT-7", LIMITS)
    required = requirements_by_key(LIMITS)
    for key, one in form["characteristics"].items():
        for name in ("unit", "population", "note", *([] if key in required else [n for n in one if n[:2] == "pp"])):
            del one[name]
    form["fail_reasons"] = {str(reason["characteristic"]): reason["codes"] for reason in form["fail_reasons"]}
    return {key: value for key, value in leaves(form) if value is not None or not key.endswith(("low", "high"))}


@pytest.mark.parametrize("name", LOTS)
def test_every_number_of_the_statistics_is_on_the_page_exactly(name):
    """The numbers of ``lot --json`` stand on the page, machine-readable, bit for bit, and no others do."""
    model, html = page_of(LOTS[name])
    found = {key: exact for key, (exact, _) in Page(html).numbers.items()}
    assert found == {key: "" if value is None else repr(value) for key, value in expected_numbers(model).items()}


@pytest.mark.parametrize("name", LOTS)
def test_what_is_shown_is_the_exact_number_rounded(name):
    """The text of every number is its exact value in the unit shown, rounded; a missing one is a dash."""
    model, html = page_of(LOTS[name])
    required = requirements_by_key(LIMITS)
    for key, (exact, text) in Page(html).numbers.items():
        if not exact:
            assert text == "–"
            continue
        value = float(exact)
        if "yield" in key:
            if not text.startswith(("<", ">")):
                assert float(text.removesuffix(" %")) == pytest.approx(100 * value, abs=0.0501)
            continue
        if key.startswith("characteristics.") and not re.search(r"\.(n|ppk?(_low|_high)?)$", key):
            one = model.statistics.characteristics[key.split(".")[1]]
            scale = scale_for(one.characteristic, required.get(key.split(".")[1]), one.values)
            value = scale.of(value)
        shown = float(text.replace(" ", ""))
        decimals = len(text.partition(".")[2])
        assert shown == pytest.approx(value, abs=0.5001 * 10.0**-decimals)


def test_values_of_every_part_are_on_the_page():
    """The table of all parts holds the last attempt's value of each required characteristic, exactly."""
    model, html = page_of(LOTS["usual"])
    exact = [value for value, _ in Page(html).plain_numbers]
    keys = list(requirements_by_key(LIMITS))
    wanted = [row.values.get(key) for row in model.rows for key in keys]
    assert exact == ["" if value is None else repr(value) for value in wanted]


def test_the_same_input_gives_the_same_bytes():
    """Rendering twice, from models built twice, gives one text."""
    assert page_of(lot())[1] == page_of(lot())[1]


def test_nothing_on_the_page_reaches_out():
    """No script, no frame, no source, no style sheet or font of another host, no event handler, no style import."""
    page = Page(page_of(lot(), traceability={"station": "https://elsewhere.invalid/x.js"})[1])
    assert not {"script", "link", "iframe", "img", "object", "embed", "form", "base", "use", "image"} & set(page.tags)
    for _, name, value in page.attributes:
        assert not name.startswith("on")
        assert name not in ("src", "href", "xlink:href", "action")
        assert "//" not in (value or "") or (name, value) == ("xmlns", "http://www.w3.org/2000/svg")
    style = re.search(r"<style>(.*?)</style>", page_of(lot())[1], re.S).group(1)
    assert "url(" not in style
    assert "@import" not in style
    assert "animation" not in style  # nothing flashes


ODD = [
    "<b>",
    '"><script>alert(1)</script>',
    "&amp;",
    "{{ lot }}",
    "A\x1b[2J\x07",
    "مرحبا\u202e",
    "x" * 300,
    "'",
    "\ud800",
]


@pytest.mark.parametrize("serial", ODD)
def test_odd_serials_stay_text(serial):
    """Whatever a scanner reads, the page shows it as text and stays whole and printable."""
    attempts = [*lot(5), attempt(serial, "fail", values=sound_values(3))]
    _, html = page_of(attempts, sentences={serial: f"{serial} failed"})
    html.encode("utf-8")
    page = Page(html)
    assert not {"script", "b1"} & set(page.tags)
    assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f\u202a-\u202e]", html)
    plain = re.sub(r"[^\w<>&;{}'\"()/ ]", "", serial)
    assert plain[:4] in re.sub(r"[^\w<>&;{}'\"()/ ]", "", page.text)


def test_odd_texts_from_everywhere_else_stay_text():
    """Lot id, grades, sentences and traceability are escaped too."""
    odd = "<i>odd</i>"
    attempts = [attempt("A", grade=odd, values=sound_values(1)), attempt("B", "fail", reasons=((odd, odd),))]
    model = lot_page(odd, LIMITS, attempts, {odd: odd}, {"B": odd})
    page = Page(render(model))
    assert "i" not in page.tags
    assert page.text.count(odd) >= 6


def test_the_verdict_comes_first_and_the_reason_second():
    """The lot's sentence stands before everything else, the ranked reasons before the characteristics."""
    text = Page(page_of(lot())[1]).text
    order = ["YIELD TOO LOW", "35 of 40 parts passed; 4 failed: fs above the highest allowed; 1 has no verdict."]
    order += ["Why parts fail", "Parts that did not pass", "Characteristics against their limits", "Traceability"]
    places = [text.rindex(word) for word in order]
    assert places == sorted(places)


@pytest.mark.parametrize(
    ("least", "word", "paint"), [(0.8, "YIELD MET", "pass"), (0.95, "YIELD TOO LOW", "fail"), (None, "", None)]
)
def test_the_lots_mark_is_word_shape_and_colour(least, word, paint):
    """A lot against its least yield bears all three together; without a least yield it bears none."""
    html = page_of(lot(), with_least_yield(least))[1]
    header = html[html.index("<header") : html.index("</header>")]
    assert (f"background: {MARKS[paint].paint}" in header) if paint else ("background" not in header)
    assert ("<svg" in header) == bool(paint)
    assert word in header


def test_every_part_that_did_not_pass_has_its_reason():
    """Failed parts and those without a verdict are listed with the recorded sentence, else the reason in short."""
    sentence = "fs 1 672.1 kHz is 10.1 kHz above the highest allowed 1 662.0 kHz"
    text = " ".join(Page(page_of(lot(), sentences={"MD-0010": sentence})[1]).text.split())
    assert re.search(rf"MD-0010 ?FAIL ?FAIL ?{re.escape(sentence)}", text)  # the shape's word, the word, the reason
    assert text.count("fs above the highest allowed") >= 3
    assert "poor contact" in text


def test_the_population_and_missing_numbers_are_said():
    """Each characteristic names its population, and says in a sentence why a number is missing."""
    text = Page(page_of(lot())[1]).text
    assert "first valid attempt of 39 of 40 parts, failed parts included; left out: 1 without a valid attempt" in text
    assert "Only a lowest allowed value is set" in text


def test_traceability_and_cautions_are_on_every_page():
    """Limit file, revision, hash, what the caller names, the cautions, and what impedance cannot see."""
    for attempts in (lot(), []):
        text = Page(page_of(attempts)[1]).text
        for wanted in ("MD-1650, revision C", LIMITS.sha256, *TRACEABILITY, *TRACEABILITY.values(), *CAUTIONS, UNSEEN):
            assert wanted in text


def test_an_empty_lot_has_a_page():
    """A lot without parts says so, draws nothing and lists nothing."""
    page = Page(page_of([])[1])
    assert "No part of this lot has been screened." in page.text
    assert "Histogram" not in page.text
    assert "Why parts fail" not in page.text
    assert "All parts" not in page.text


def test_one_histogram_for_each_required_characteristic_with_values():
    """Each limited characteristic is drawn, in the file's unit; others are only listed."""
    html = page_of(lot())[1]
    assert [sign for sign in ("fs", "Qm", "C at 1 kHz", "tan δ") if f"<title>Histogram of {sign}:" in html] == [
        "fs",
        "Qm",
        "C at 1 kHz",
        "tan δ",
    ]
    assert "Histogram of L1" not in html
    assert "fs / kHz" in html
    assert "tan δ / %" in html
