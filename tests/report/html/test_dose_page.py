"""The page of a plan: the verdict first, figures of the answer, hostile names as text, links to what was written."""

import csv
import hashlib
import re
import sys
import time
from dataclasses import replace
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))
sys.path.insert(0, str(Path(__file__).parents[2]))

from dosing_plans import PLANS, answer_of
from invented_plans import write_plan

from aquabuf.report.dose_run import OUTPUT_FILES, dose_plan
from aquabuf.report.html.dose_page import dose_page
from aquabuf.report.html.parts import TONES
from aquabuf.tables import read_table

ROOT = Path(__file__).parents[3]
DEMOS = ("plan_upland.toml", "plan_river.toml", "plan_wells.toml", "plan_effluent.toml")
RECORD = {"version": "0", "files": {"plan": "plan.toml"}, "sha256": {"plan": "00"}, "options": {"draws": 0}, "constants": []}
HOSTILE = ('<script>alert("x")</script>', '" onmouseover="x', "\u202egnihton", "y" * 5000, "${style}")
VOID = {"meta", "br", "img", "input", "hr", "link"}


class Reader(HTMLParser):
    """Tags in order and their text; fails on tags that are not closed in order."""

    def __init__(self):
        super().__init__()
        self.open, self.tags, self.attributes, self.text = [], [], [], []

    def handle_starttag(self, tag, attrs):
        """Note a tag."""
        self.tags.append(tag)
        self.attributes += attrs
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        """Close the innermost tag, which must be the same."""
        assert self.open.pop() == tag

    def handle_data(self, data):
        """Note text that a person sees."""
        if not {"script", "style"} & set(self.open) and data.strip():
            self.text.append(data.strip())


def read(page):
    """A page that was read to its end."""
    reader = Reader()
    reader.feed(page)
    reader.close()
    assert reader.open == []
    return reader


@cache
def page(name, figure=False):
    """The page of an invented plan."""
    return dose_page(answer_of(name), RECORD, figure=figure)


def said(name):
    """All words of a page."""
    return " ".join(read(page(name)).text)


def cards(text):
    """Tone of each card in order, with its text."""
    return [(tone, re.sub(r"<[^>]+>", " ", inner)) for tone, inner in re.findall(r'<div class="card (\w+)">(.*?)</div>', text, flags=re.S)]


# ---------------------------------------------------------------- verdict


@pytest.mark.parametrize(("name", "tone"), [
    ("upland", "good"), ("minimal", "good"), ("no dose", "good"), ("infeasible", "stop"), ("guarded", "stop"), ("many", "warn"),
    ("many, stopped", "stop"), ("many, no dose", "stop")])
def test_the_first_card_is_the_verdict(name, tone):
    """Its sign in words as in color: OK, a warning where a machine cannot give its dose, STOP where the plan does not hold."""
    answer = answer_of(name)
    first, words = cards(page(name))[0]
    assert first == tone
    assert TONES[tone] in words
    assert (first == "stop") == (not answer.feasible)
    if any(line.out_of_reach for line in answer.feeds) and answer.feasible:
        assert "cannot give its dose: alum" in words


def test_a_plan_that_does_not_hold_says_why_and_forbids_its_feeds():
    """Reason, rule and next step ahead of the feeds, and each of them is marked."""
    text, answer = page("guarded"), answer_of("guarded")
    assert text.index("Why it does not hold") < text.index("Not to be set")
    (_, stop), *_ = answer.stops
    assert stop.words[1:] in said("guarded")  # it begins a sentence there
    assert stop.rule in said("guarded")
    feeds = [c for c in cards(text) if "DO NOT SET" in c[1]]
    assert len(feeds) == len(answer.feeds)
    assert {tone for tone, _ in feeds} == {"stop"}
    assert "DO NOT SET" not in said("upland")


def test_the_verdict_has_number_rule_next_step():
    """pH of the final water, the targets, what to do."""
    answer = answer_of("upland")
    words = cards(page("upland"))[0][1]
    assert f"pH {answer.train.final.water().ph[0]:.2f}" in words
    assert "pH 8.40; alkalinity 55.0 mg/L as CaCO3" in words
    assert "Next:" in words
    assert "behind final pH" in words


def test_interval_of_ph_and_the_window_left_most_often(tmp_path):
    """Of the run's draws: the figures of errors.csv."""
    dose_plan(write_plan(tmp_path, "upland"), tmp_path / "o", figure=False)
    with (tmp_path / "o" / "errors.csv").open(encoding="utf-8", newline="") as stream:
        rows = [r for r in csv.DictReader(stream) if (r["table"], r["erring"], r["quantity"]) == ("window", "readings", "pH")]
    words = cards((tmp_path / "o" / "report.html").read_text(encoding="utf-8"))[0][1]
    assert f"from {float(rows[-1]['value_low']):.2f} to {float(rows[-1]['value_high']):.2f} in 90 % of draws" in words
    assert "Readings err: pH leaves 8.30 to 8.50 in" in words


# ---------------------------------------------------------------- settings and tables


def test_settings_are_large_and_in_both_units():
    """Setting, metric and US rate of each feed, by exact factors."""
    answer, text = answer_of("upland"), page("upland")
    lime, gas = answer.feeds
    large = re.findall(r'<p class="large">(.*?)</p>', text)
    assert large == [f"speed {float(lime.setting.setting_pct[0]):.1f} %", f"setting {float(gas.setting.setting_pct[0]):.1f} %"]
    l_h, kg_h = float(lime.rate.l_h[0]), float(gas.rate.product_kg_h[0])
    assert f"{l_h:.0f} L/h = {l_h / 3.785411784:.1f} gal/h" in text
    assert f"{kg_h:.2f} kg/h = {kg_h / 0.45359237:.1f} lb/h" in text


def test_water_after_every_step():
    """A row for the raw water and each step, pH and alkalinity as solved."""
    answer, words = answer_of("many"), said("many")
    for passed in answer.train.passed:
        assert passed.step.name in words
        assert f"{passed.after.water().ph[0]:.2f}" in words
        assert f"{passed.after.alkalinity_eq_l[0] * 50_043.0:.1f}" in words


def test_targets_that_are_not_met_come_first():
    """And say so in words."""
    answer = answer_of("upland")
    missed = replace(answer, targets=(answer.targets[0], replace(answer.targets[1], reached=1e-3)))
    text = dose_page(missed, RECORD, figure=False)
    part = text[text.index('id="targets"'):]
    rows = re.findall(r"<tr.*?</tr>", part[:part.index("</table>")], flags=re.S)[1:]
    assert ["NOT MET" in row for row in rows] == [True, False]
    assert rows[0].startswith('<tr class="stop">')
    assert cards(text)[0][0] == "stop"


def test_faults_the_farthest_off_first():
    """Those that pass a level of harm, then by how far pH goes; whatever their order in the answer."""
    answer = answer_of("many")
    burns = replace(answer.faults[3], ph_behind=np.array([12.5]))  # above pH 12 skin and eyes burn (guard_rails.csv)
    faults = (*answer.faults[:3], burns, *answer.faults[4:])
    text = dose_page(replace(answer, faults=faults), RECORD, figure=False)
    part = text[text.index('id="faults"'):]
    rows = re.findall(r"<tr[^>]*><th scope=\"row\">(.*?)</th>(.*?)</tr>", part[:part.index("</table>")])
    harms = [">none</td>" not in row[1] for row in rows]
    assert harms == [True] + [False] * (len(answer.faults) - 1)
    assert ">12.50</td>" in rows[0][1]
    rest = sorted((abs(float(f.ph_behind[0] - f.ph_wanted[0])) for f in faults if f is not burns), reverse=True)
    first = next(f for f in faults if f is not burns and abs(float(f.ph_behind[0] - f.ph_wanted[0])) == rest[0])
    assert f">{float(first.ph_behind[0]):.2f}</td>" in rows[1][1]


def test_rules_have_value_source_and_next_step():
    """Each broken rule of the answer."""
    answer, words = answer_of("upland"), said("upland").replace("&#x27;", "'")
    broken = [j for j in answer.limits if j.broken]
    assert broken
    for j in broken:
        assert j.limit.source in words
        assert j.limit.next_step in words


def test_every_assumption_and_caution_is_told():
    """None is left out."""
    for name in ("upland", "many"):
        words = said(name)
        for caution in answer_of(name).cautions:
            assert caution in words
        assert "carbonate constants of Plummer" in words


def test_season_and_blend():
    """The season in words and doses, the blend as a drawing."""
    words = said("season")
    for sentence in answer_of("season").season.words():
        assert sentence[1:] in words
    assert 'id="blend-1-' in page("blend", figure=True)


# ---------------------------------------------------------------- figures


def test_figures_say_what_they_show():
    """Each drawing has a text with its figures; ids do not meet; none without figures."""
    text, answer = page("upland", figure=True), answer_of("upland")
    labels = re.findall(r'<svg [^>]*role="img" aria-label="([^"]*)"', text)
    assert len(labels) == 4
    assert f"{answer.curves[0].wanted_ph:.2f} with the" in " ".join(labels)
    ids = re.findall(r'\bid="([^"]+)"', text)
    assert len(ids) == len(set(ids))
    assert "<svg" not in page("upland")


@pytest.mark.parametrize("name", PLANS)
def test_every_plan_has_a_page(name):
    """Tags closed, headings without gaps, below 5 MB, no request leaves it."""
    text = page(name, figure=name not in ("ten feeds", "many, stopped"))
    found = read(text)
    assert found.tags.count("h1") == 1
    assert len(text.encode()) < 5e6
    assert not {"link", "img", "iframe", "object"} & set(found.tags)
    assert not [v for n, v in found.attributes if n in ("src", "srcset", "action")]
    assert not re.search(r"@import|url\((?!#)|https?://(?!www\.w3\.org/)", text)


# ---------------------------------------------------------------- names, links, bytes


@pytest.mark.parametrize("words", HOSTILE, ids=range(len(HOSTILE)))
def test_names_stay_text(words):
    """The same tags and attributes as with a calm name."""
    answer = answer_of("minimal")
    passed = tuple(replace(p, step=replace(p.step, name=words)) for p in answer.train.passed)
    odd = replace(answer, plan=replace(answer.plan, name=words, note=words), train=replace(answer.train, passed=passed),
                  targets=tuple(replace(t, step=words) for t in answer.targets))
    calm = replace(answer, plan=replace(answer.plan, note="calm"))
    text = dose_page(odd, RECORD, figure=False)
    found, plain = read(text), read(dose_page(calm, RECORD, figure=False))
    assert found.tags == plain.tags
    assert [n for n, _ in found.attributes] == [n for n, _ in plain.attributes]
    assert "\u202e" not in text


def test_links_lead_to_what_was_written(tmp_path):
    """Every file of the run is linked, and nothing that is not there."""
    dose_plan(write_plan(tmp_path, "upland"), tmp_path / "o", figure=False)
    found = read((tmp_path / "o" / "report.html").read_text(encoding="utf-8"))
    links = {v for n, v in found.attributes if n == "href" and not v.startswith("#")}
    assert links == {p.name for p in (tmp_path / "o").iterdir()} - {"report.html"}


def test_every_file_has_words():
    """The list of files on the page knows all that a run can write."""
    assert sorted(r["file"] for r in read_table("page_files") if r["command"] == "dose") == sorted(OUTPUT_FILES)


def test_provenance(tmp_path):
    """Hash of the plan, version, draws; no path."""
    plan = write_plan(tmp_path, "upland")
    dose_plan(plan, tmp_path / "o", figure=False)
    text = (tmp_path / "o" / "report.html").read_text(encoding="utf-8")
    assert hashlib.sha256(plan.read_bytes()).hexdigest() in text
    assert str(tmp_path) not in text


def test_same_answer_same_bytes():
    """With figures."""
    assert dose_page(answer_of("blend"), RECORD) == dose_page(answer_of("blend"), RECORD)


def test_many_feeds_stay_small_and_quick():
    """Ten feeds with ten sliders and twenty faults: without figures in 2 s, below 1 MB."""
    start = time.perf_counter()
    text = dose_page(answer_of("ten feeds"), RECORD, figure=False)
    assert time.perf_counter() - start < 2.0
    assert len(text) < 1e6


@pytest.mark.parametrize("name", DEMOS)
def test_demo_plans(tmp_path, name):
    """They hold, and their page says so; figures, sliders and files are there."""
    done = dose_plan(ROOT / "field_data" / name, tmp_path / "o", draws=100)
    text = (tmp_path / "o" / "report.html").read_text(encoding="utf-8")
    found = read(text)
    assert done.reason == ""
    assert cards(text)[0][0] == "good"
    assert text.count("data-whatif hidden") >= 1
    assert found.tags.count("svg") >= 4
    assert len(text.encode()) < 2e6
