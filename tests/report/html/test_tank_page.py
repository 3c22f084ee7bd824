"""The page of a neutralization: the verdict first, the report's words, figures of the tables, hostile names as text."""

import csv
import json
import re
import sys
from html import unescape
from html.parser import HTMLParser
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))

from stream_files import BREAKS, CYANIDE, HOLDS, MINIMAL, TITRATED, write_stream

from aquabuf.report.html.parts import TONES
from aquabuf.report.html.tank_page import tank_page
from aquabuf.report.html.tank_sections import failures_section
from aquabuf.report.tank_run import OUTPUT_FILES, tank_stream
from aquabuf.tables import read_table

TEXTS = {"holds": HOLDS, "breaks": BREAKS, "minimal": MINIMAL, "cyanide": CYANIDE, "titrated": TITRATED}
VOID = {"meta", "br", "img", "input", "hr", "link"}
MOST_BYTES = 1_500_000
HOSTILE = "<script>alert(1)</script>", '\\" onmouseover=\\"x', "\\u202egnihton", "y" * 5000, "${style}", "</svg>"


class Reader(HTMLParser):
    """Tags, text and tables of a page; fails on tags that are not closed in order."""

    def __init__(self):
        super().__init__()
        self.open, self.tags, self.attributes, self.text, self.tables = [], [], [], [], []

    def handle_starttag(self, tag, attrs):
        """Note a tag."""
        self.tags.append(tag)
        self.attributes += attrs
        if tag == "table":
            self.tables.append([])
        elif tag == "tr":
            self.tables[-1].append([])
        elif tag in ("td", "th"):
            self.tables[-1][-1].append("")
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        """Close the innermost tag, which must be the same."""
        assert self.open.pop() == tag

    def handle_data(self, data):
        """Note text that a person sees."""
        if {"script", "style"} & set(self.open):
            return
        if {"td", "th"} & set(self.open):
            self.tables[-1][-1][-1] += data
        if data.strip():
            self.text.append(data.strip())

    def table(self, *titles):
        """Rows of the first table whose head begins with these titles, by title."""
        found = next(t for t in self.tables if tuple(t[0][:len(titles)]) == titles)
        return [dict(zip(found[0], row, strict=True)) for row in found[1:]]


def read(page):
    """A page that was read to its end."""
    reader = Reader()
    reader.feed(page)
    reader.close()
    assert reader.open == []
    return reader


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """Results of each of the streams, made once, without figures."""
    kept = {}

    def go(name):
        if name not in kept:
            place = tmp_path_factory.mktemp(name)
            tank_stream(write_stream(place, TEXTS[name]), place / "out", figure=False, jobs=1)
            kept[name] = place / "out"
        return kept[name]
    return go


@pytest.fixture(scope="module")
def drawn(tmp_path_factory):
    """Results of a stream with figures, not simulated unless asked for; `run` tells apart those of the same stream."""
    kept = {}

    def go(text=HOLDS, *, simulate=False, run=1):
        if (text, simulate, run) not in kept:
            place = tmp_path_factory.mktemp("drawn")
            tank_stream(write_stream(place, text), place / "out", simulate=simulate, jobs=1)
            kept[text, simulate, run] = place / "out"
        return kept[text, simulate, run]
    return go


def page_of(place):
    """Text of the page of a folder."""
    return (place / "report.html").read_text(encoding="utf-8")


def rows(place, name):
    """A table of the run."""
    with (place / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def design_of(place):
    """The design as it was written."""
    return json.loads((place / "design.json").read_text(encoding="utf-8"))


def first_card(page):
    """Tone and words of the first card."""
    tone, inner = re.search(r'<div class="card (\w+)">(.*?)</div>', page, flags=re.S).groups()
    return tone, unescape(re.sub(r"<[^>]+>", " ", inner))


def squeezed(text):
    """Letters alone, so that line breaks and case do not matter."""
    return re.sub(r"\s+", "", text).casefold()


def same(cell, value):
    """Whether a cell shows the three figures of a value."""
    return float(cell.replace(",", "")) == pytest.approx(float(value), rel=6e-3)


# ---------------------------------------------------------------- verdict


@pytest.mark.parametrize(("name", "tone", "word"), [
    ("holds", "good", "Accepted"), ("breaks", "warn", "Not accepted"), ("minimal", "note", "Not proven"),
    ("cyanide", "stop", "Stop: nothing is to be built")])
def test_the_first_card_is_the_verdict(folder, name, tone, word):
    """Its sign in words as in color, ahead of every table."""
    page = page_of(folder(name))
    found, words = first_card(page)
    assert found == tone
    assert TONES[tone] in words
    assert re.search(rf"{TONES[tone]}\s+{word}\s", words)
    assert page.index('class="card') < page.index("<table")


@pytest.mark.parametrize("name", ["holds", "breaks"])
def test_the_verdict_has_number_interval_rule_and_next_step(folder, name):
    """Probability and interval of design.json, the time rule with its source, what to do, the caution."""
    s, (_, words) = design_of(folder(name))["simulation"], first_card(page_of(folder(name)))
    low, high = (100.0 * s[f"probability_{end}"] for end in ("low", "high"))
    assert f"{100.0 * s['probability_of_meeting_rule']:.0f} % of {s['cases']} simulated cases" in words
    assert f"95 % interval {low:.0f} to {high:.0f} %" in words
    assert squeezed(s["rule"]) in squeezed(words)
    assert "95 % of the simulated cases or more" in words
    assert "Next:" in words
    assert "Caution:" in words


def test_a_stop_builds_nothing(folder):
    """The reason and its rule in the card; no tanks, no feeds, no store."""
    page, record = page_of(folder("cyanide")), design_of(folder("cyanide"))
    _, words = first_card(page)
    assert squeezed(record["stops"][0]) in squeezed(words)
    (stop,) = [e for e in record["side_effects"] if e["severity"] == "stop"]
    assert stop["rule"] in words.replace("Stop from", "stop from")
    assert stop["source"] in words
    for name in ("train", "tanks", "feeds", "storage", "batch", "equalization"):
        assert f'id="{name}"' not in page
        assert f'id="{name}"' in page_of(folder("holds")), name


# ---------------------------------------------------------------- the report's words and figures


@pytest.mark.parametrize("name", TEXTS)
def test_every_item_of_the_report_is_on_the_page(folder, name):
    """In its words; side effects that warn and rules of thumb stand in tables, each part of them in a cell."""
    report = (folder(name) / "report.txt").read_text(encoding="utf-8")
    said = squeezed(" ".join(read(page_of(folder(name))).text))
    items = [squeezed(item) for item in re.findall(r"(?m)^  - (?=\S)(.*(?:\n    (?=\S).*)*)", report)]
    assert len(items) > 15
    record = design_of(folder(name))
    tabled = ("warning,", "stop,", *(squeezed(f"{o['rule']}:") for o in record["stage_choice"]["rules"]))
    missing = [i for i in items if i.removeprefix("timerule:") not in said and not i.startswith(tabled)]
    assert missing == []
    for e in record["side_effects"]:
        if e["severity"] != "note":
            for part in ("name", "words", "rule", "source"):
                assert squeezed(e[part]) in said


def test_the_train_in_one_table(folder):
    """Equalization, tanks, set points, feeds, and the window that it leaves by."""
    record = design_of(folder("holds"))
    found = {r["Tank"]: r for r in read(page_of(folder("holds"))).table("Tank", "Set point (pH)")}
    assert list(found) == ["equalization", *(s["name"] for s in record["stages"]), "leaves"]
    assert same(found["equalization"]["Liquid (m³)"], record["equalization"]["volume_m3"])
    for s in record["stages"]:
        row = found[s["name"]]
        assert float(row["Set point (pH)"]) == pytest.approx(s["setpoint_ph"], abs=6e-3)
        assert same(row["Liquid (m³)"], s["volume_m3"])
        fed = [f for f in record["feed"] if f["tank"] == s["name"]]
        assert all(f["reagent"] in row["Fed with"] for f in fed)
        assert row["Fed with"].count("to correct") == sum(f["trim_only"] for f in fed)
    assert found["leaves"]["Set point (pH)"] == "6 to 9"


def test_figures_are_those_of_the_tables(folder):
    """Demand, sensitivity and cases to the figures shown."""
    reader, place = read(page_of(folder("holds"))), folder("holds")
    for row, told in zip(reader.table("Reagent", "Stream"), rows(place, "demand.csv"), strict=True):
        assert (row["Reagent"], row["Stream"], row["Brought to"]) == (told["reagent"], told["condition"], told["aim"])
        assert same(row["Demand (eq/L)"], told["eq_l"])
        assert same(row["Product (kg/h)"], told["kg_h"])
        assert same(row["Cost (EUR per day)"], told["cost_per_day"])
    told = {r["change"]: r for r in rows(place, "sensitivity.csv")}
    for row in reader.table("One change"):
        assert same(row["Demand (meq/L)"], 1e3 * float(told[row["One change"]]["demand_eq_l"]))
    for row, told in zip(reader.table("Layout", "Tanks"), rows(place, "alternatives.csv"), strict=True):
        assert (row["Layout"], row["Tanks"], row["Cases"]) == (told["change"], told["tanks"], told["cases"])
        assert row["Keep the rule (%, 95 % interval)"].startswith(f"{100.0 * float(told['probability_of_meeting_rule']):.0f} (")
    *_, every = reader.table("No worse than, in")
    assert float(every["Outside (min)"]) == pytest.approx(
        max(float(r["outside_min"]) for r in rows(place, "cases.csv")), abs=0.06)


def test_worst_first(folder):
    """The failure that leaves soonest, the change that takes most of the tolerance, the gravest side effect."""
    place = folder("breaks")
    reader, record = read(page_of(place)), design_of(place)
    faults = [f | {"minutes_to_leave": m} for f, m in zip(record["simulation"]["faults"], (9.0, None, 2.0), strict=False)]
    section = failures_section({"simulation": {"faults": faults}}, {"FAILURES": ["Each lasts an hour."]}, frozenset())
    assert [r["Leaves the window after (min)"] for r in read(section).table("Tank", "Failure")] == ["2", "9", "stays in"]
    first = min((r for r in record["sensitivity"] if r["tolerance_ratio"] is not None), key=lambda r: r["tolerance_ratio"])
    assert reader.table("One change")[0]["One change"] == first["change"]
    gravest = read(page_of(folder("cyanide"))).table("Effect", "With")[0]
    assert gravest["Effect"].startswith("STOP: cyanide")
    assert gravest["Rule"].startswith("Stop from 0.2 mg/L")


def test_rules_of_thumb_stand_beside_the_simulated_answer(folder):
    """Each with what it asks for and its source; what was taken and how it did."""
    place = folder("breaks")
    reader, choice = read(page_of(place)), design_of(place)["stage_choice"]
    found = reader.table("Rule", "Asks for", "Because")
    assert [r["Rule"] for r in found] == [*(o["rule"] for o in choice["rules"]), "taken"]
    assert [r["Source"] for r in found[:-1]] == [o["source"] for o in choice["rules"]]
    assert all(squeezed(o["words"]) in squeezed(r["Because"]) for o, r in zip(choice["rules"], found, strict=False))
    assert found[-1]["Asks for"] == "1 tank"
    assert "0 % of the simulated cases keep the time rule" in " ".join(reader.text)


def test_a_block_without_a_place_is_told_all_the_same(folder):
    """So that the page never leaves out what the report says."""
    from aquabuf.assess.tank.design import design
    from aquabuf.assess.tank.design_json import design_record
    from aquabuf.assess.tank.job_file import read_stream
    from aquabuf.report.tank_report import tank_report

    place = folder("minimal")
    found = design(read_stream(place.parent / "stream.toml"), simulate=False)
    record = design_record(found)
    run = json.loads((place / "run.json").read_text(encoding="utf-8"))
    report = f"{tank_report(found, record)}\nSOMETHING NEW\n  - It is\n    said.\n"
    reader = read(tank_page(found, record, report=report, run=run, written=()))
    assert {"Something new", "It is said."} <= set(reader.text)


# ---------------------------------------------------------------- figures


def test_figures_say_what_they_show(drawn):
    """Each has a text with its figures; ids do not meet; small, and nothing is asked of a network."""
    place = drawn(simulate=True)
    page, record = page_of(place), design_of(place)
    labels = [unescape(x) for x in re.findall(r'<svg [^>]*role="img" aria-label="([^"]*)"', page)]
    assert len(labels) == 10
    assert all(re.search(r"\d", label) for label in labels)
    said = " ".join(labels)
    assert f"pH {record['stream']['mean_ph']:.2f} as it comes" in said
    assert f"{record['simulation']['faults'][0]['tank']}, {record['simulation']['faults'][0]['kind']}: " in said
    assert f"highest {record['simulation']['quantiles']['highest_ph'][-1]:.2f}" in said
    assert f"demand times {record['sensitivity'][0]['demand_ratio']:.3f}" in said
    ids = re.findall(r'\bid="([^"]+)"', page)
    assert len(ids) == len(set(ids))
    assert len(page.encode()) < MOST_BYTES
    reader = read(page)
    assert not {"link", "img", "iframe", "object"} & set(reader.tags)
    assert not [v for n, v in reader.attributes if n in ("src", "srcset", "action")]
    assert not re.search(r"@import|url\((?!#)|https?://(?!www\.w3\.org/)", page)


def test_figures_of_a_stop_show_the_waste_alone(drawn):
    """No train, no course."""
    page = page_of(drawn(CYANIDE))
    assert page.count('role="img"') == 3
    assert "The train:" not in page


def test_no_figures_where_none_are_wanted(folder):
    """With --no-figure."""
    assert "<svg" not in page_of(folder("holds"))


# ---------------------------------------------------------------- names, links, bytes


@pytest.mark.parametrize("words", HOSTILE, ids=range(len(HOSTILE)))
def test_names_stay_text(drawn, words):
    """Of stream, waste, reagent and permit: the same tags as with a calm name, outside the drawings."""
    def page(name):
        text = MINIMAL.replace('"Least"', f'"{name}"').replace("wastes.w", f'wastes."{name}"')
        text = text.replace("reagents.caustic", f'reagents."{name}"').replace("ph = [6.0, 9.0]", f'ph = [6.0, 9.0]\nsource = "{name}"')
        return page_of(drawn(text))

    odd, calm = page(words), page("calm")
    hostile, plain = (read(re.sub(r"<svg.*?</svg>", "", text, flags=re.S)) for text in (odd, calm))
    assert hostile.tags == plain.tags
    assert [n for n, _ in hostile.attributes] == [n for n, _ in plain.attributes]
    assert set(read(odd).tags) == set(read(calm).tags)
    assert "\u202e" not in odd
    assert len(odd.encode()) < MOST_BYTES


def test_links_lead_to_what_was_written(folder, drawn):
    """Every file of the run, and nothing that is not there."""
    for place in (*(folder(name) for name in TEXTS), drawn()):
        found = {v for n, v in read(page_of(place)).attributes if n == "href" and not v.startswith("#")}
        assert found == {p.name for p in place.iterdir()} - {"report.html"}


def test_every_file_has_words():
    """The list of files on the page knows all that a run can write."""
    assert [row["file"] for row in read_table("page_files") if row["command"] == "tank"] == list(OUTPUT_FILES)


def test_same_bytes_twice_and_no_path(drawn):
    """Figures included."""
    first, second = drawn(simulate=True), drawn(simulate=True, run=2)
    assert (first / "report.html").read_bytes() == (second / "report.html").read_bytes()
    assert str(first.parent) not in page_of(first)
    digest = json.loads((first / "run.json").read_text(encoding="utf-8"))["sha256"]["stream"]
    assert digest in page_of(first)
