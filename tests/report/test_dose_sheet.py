"""The sheet for the wall: what stands on it, that its figures are those of the answer, and that nothing stands empty."""

import re
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[1]))

from invented_plans import PLANS, RIVER, TWO_STAGES, UPLAND, answered, write_plan

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.report.dose_blocks import _spreads, upset
from aquabuf.report.dose_lines import aligned, bullet, figure, sentence
from aquabuf.report.dose_panels import smooth_response
from aquabuf.report.dose_settings import control_words, setting_words
from aquabuf.report.dose_sheet import dose_sheet

PAGE_WIDTH = 100
TWO_PAGES = 160  # lines, of a plan with everything in it


def sheet(name="upland"):
    """The sheet of a plan."""
    return dose_sheet(answered(name)[0])


def joined(text):
    """Text without line breaks, as sentences go over them."""
    return " ".join(text.split())


def block(title, name="upland"):
    """One block of the sheet."""
    return next(b for b in sheet(name).split("\n\n") if b.startswith(title))


def titles(name):
    """First lines of all blocks."""
    return [b.splitlines()[0] for b in sheet(name).split("\n\n")]


@pytest.mark.parametrize("name", PLANS)
def test_it_fits_the_page(name):
    """No line is wider than the page, none ends in blanks, and two pages hold it."""
    lines = sheet(name).splitlines()
    assert [line for line in lines if len(line) > PAGE_WIDTH or line != line.rstrip()] == []
    assert len(lines) <= TWO_PAGES


@pytest.mark.parametrize("name", PLANS)
def test_nothing_stands_empty_or_raw(name):
    """No nan, None, empty list or double sign reaches the wall."""
    text = sheet(name)
    assert re.findall(r"(?m)\bnan\b|None|\[\]|unknown|endless|^  - *$|\.\.(?!\.)|; ;|\( ?\)", text) == []
    assert all(len(b.splitlines()) > 1 for b in text.strip().split("\n\n"))


def test_blocks_of_a_full_plan():
    """In the order that a shift needs them."""
    assert titles("upland") == [
        f"Ambrel Dam{' ' * 80}2026-10-14", "SET THE FEEDS", "WATER AFTER EVERY STEP", "TARGETS", "RULES AND WARNINGS",
        "MEASURE AND LOG THIS SHIFT", "WHAT WOULD UPSET IT", "STORE AND COST", "SCALE, CORROSION AND BUFFERING OF THE LAST WATER",
        "HOLDING THE pH", "WHAT IT RESTS ON", "CAUTIONS"]


def test_blocks_of_the_smallest_plan():
    """What the plan does not have is not there."""
    assert titles("smallest") == ["Look only", "SET THE FEEDS", "WATER AFTER EVERY STEP", "RULES AND WARNINGS", "WHAT WOULD UPSET IT",
                                  "SCALE, CORROSION AND BUFFERING OF THE LAST WATER", "WHAT IT RESTS ON", "CAUTIONS"]
    assert "Nothing is dosed in this plan." in sheet("smallest")
    assert re.search(r"Errors of the readings: pH of the final water from 6\.\d\d to [67]\.\d\d in 90 % of draws", joined(sheet("smallest")))


@pytest.mark.parametrize("name", [n for n in PLANS if n not in ("smallest", "blend", "impossible")])
def test_feeds_are_those_of_the_answer(name):
    """Every figure of the table, from the record, as people write it."""
    text = block("SET THE FEEDS", name)
    for d in answered(name)[1]["doses"]:
        feed = d["feed"]
        row = next(line for line in text.splitlines() if line.split()[:1] == [d["product"]])
        wanted = [d["dose_mg_l_product"], d["dose_mg_l_pure"], feed["product_kg_d"], feed["product_lb_d"],
                  *((feed["l_h"], feed["gal_h"]) if feed["l_h"] else (feed["product_kg_h"], feed["product_lb_h"]))]
        assert [shown(v) for v in wanted] == [x for x in row.split() if re.fullmatch(r"[\d.,]+", x)][:6]
        assert shown(feed["setting_percent"]) in row.split() if feed["setting_percent"] else feed["setting_status"] in row


def test_water_is_that_of_the_answer():
    """pH, alkalinity and saturation of every step; a word before every figure of deposits."""
    text = block("WATER AFTER EVERY STEP")
    for r in answered("upland")[1]["steps"]:
        row = next(line for line in text.splitlines() if line.strip().startswith(r["name"]))
        for value, digits in ((r["temperature_c"], 1), (r["ph"], 2), (r["alkalinity_mg_l_caco3"], 1), (r["calcium_mg_l"], 1)):
            assert figure(value, digits) in row.split()
        assert row.endswith(f"{'dissolves' if r['ccpp_mg_l'] < 0 else 'deposits'} {abs(r['ccpp_mg_l']):.1f}")


def test_targets_wanted_and_reached():
    """Both, and whether they are met."""
    assert "final pH  pH 8.40                        8.40                met" in block("TARGETS")
    assert block("TARGETS", "impossible").count("NOT MET") == 2


@pytest.mark.parametrize("name", PLANS)
def test_every_broken_rule_is_told_with_source_and_next_step(name):
    """Nothing is broken without a word on where the rule is from and what to do."""
    text = joined(sheet(name))
    for x in answered(name)[1]["limits"]:
        if x["broken"]:
            assert f"{sentence(x['words'])} Rule ({x['name']}, " in text
            assert joined(f"{x['source']}. Next: {x['next_step']}.") in text


def test_a_plan_that_does_not_hold_stops_first():
    """Right behind the head, with the reason and what would reach it."""
    text = sheet("impossible")
    assert titles("impossible")[1] == "STOP: DO NOT SET THESE FEEDS. This plan does not hold."
    assert joined(answered("impossible")[1]["reason"].split(": ", 1)[1]) in joined(text)
    assert "What would reach it: carbon dioxide" in joined(text)
    assert "no dose" in block("SET THE FEEDS", "impossible")
    assert "STOP" not in sheet("upland")


def test_a_guard_rail_stops_too():
    """With its rule, and doses that are not to be fed."""
    text = joined(block("STOP", "over rail"))
    assert "above the guard rail of 9.5" in text
    assert "Rule: guard rail of a dosing plan, not of a regulation" in text
    assert "they are not to be fed" in text


def test_what_would_upset_it():
    """The cost of 0.1 pH, the control range, both errors, and feeds at fault, with the figures of the answer."""
    text, r = joined(block("WHAT WOULD UPSET IT")), answered("upland")[1]
    for c in r["curves"]:
        assert f"{c['product']} in {c['step']}, {shown(c['wanted_mg_l'])} mg/L: {shown(abs(c['up_mg_l']))} mg/L" in text
    for words in (r["control_ranges"][0]["words"], r["error"]["of_readings"]["words"], r["error"]["of_feeds"]["words"]):
        assert joined(words) in text
    assert "Feeds that err by 5 % (one standard deviation)" in text
    for f in r["faults"]:
        assert re.search(rf"{f['product']} +{f['case']} .*{f['ph_behind']:.2f} +{f['ph_final']:.2f}", block("WHAT WOULD UPSET IT"))


def test_drawdown_gives_the_wanted_feed():
    """mL over seconds is the feed; 5 % by the rule on feeds."""
    text, feed = joined(block("MEASURE AND LOG")), answered("upland")[1]["doses"][0]["feed"]
    ml, seconds = (float(x.replace(",", "")) for x in re.search(r"lime: drawdown of ([\d,]+) mL in ([\d.]+) s", text).groups())
    assert ml / seconds * 60.0 == pytest.approx(feed["ml_min"], rel=0.005)
    assert "off by more than 5 % (New Jersey" in text
    assert "Behind final pH: pH 8.40, keep 8.30 to 8.50" in text


def test_what_it_rests_on():
    """The pair, the constants, ions counted as none, and what the plan does not say."""
    text = joined(block("WHAT IT RESTS ON", "fixed"))
    assert "Raw water solved from pH and alkalinity" in text
    assert "Plummer & Busenberg 1982 with Davies activities" in text
    assert "calcium, magnesium, sodium" in text
    assert "not given, what needs them is not judged" in text
    assert "[guards] ph = [6, 9.5]" in text


def test_strengths_are_told_from_certificate_or_table(tmp_path):
    """A default is named as such."""
    plan = UPLAND.replace("[[steps]]", '[products.ash]\nis = "soda ash"\n\n[[steps]]\ndo = "dose"\nname = "first"\n'
                                       'product = "ash"\ndose = "5 mg/L"\n\n[[steps]]', 1)
    text = joined(dose_sheet(solve_plan(read_plan(write_plan(tmp_path, text=plan)), draws=0)))
    assert "hydrated lime, Ca(OH)2, 92 % (certificate)" in text
    assert "soda ash, Na2CO3, 98 % (usual strength of the table)" in text
    assert "Errors of the readings" not in text


def test_season_block():
    """Told where the plan has one."""
    assert "rows meet every target" in joined(block("OVER THE SEASON", "season"))
    assert "OVER THE SEASON" not in sheet("upland")


def test_long_names_do_not_break_the_page(tmp_path):
    """They are cut in tables, and whole in the text."""
    plan = UPLAND.replace("final pH", "final adjustment of pH behind the second clear water tank of the east works")
    text = dose_sheet(solve_plan(read_plan(write_plan(tmp_path, text=plan)), draws=0))
    assert max(map(len, text.splitlines())) <= PAGE_WIDTH
    assert "second clear water tank" in joined(text)


# ------------------------------------------------------------------ lines

def test_table_leaves_out_what_no_row_has():
    """Columns line up; numbers end together."""
    assert aligned([["name", "mg/L", "none"]], [["a", "1.0", "-"], ["long", "10.0", ""]]) == "  name  mg/L\n  a      1.0\n  long  10.0"
    assert aligned([["name"]], []) == ""


def test_a_number_stays_with_its_unit():
    """A line breaks before the number, not behind it."""
    text = bullet(f"{'x' * 90} 12 mg/L")
    assert text.splitlines()[1].strip() == "12 mg/L"


@pytest.mark.parametrize(("text", "wanted"), [("the pump", "The pump."), ("pH is low", "pH is low."), ("Done.", "Done.")])
def test_sentences(text, wanted):
    """A capital and a full stop, but pH stays pH."""
    assert sentence(text) == wanted


@pytest.mark.parametrize(("value", "digits", "sign", "wanted"), [
    (1234.5, 1, "", "1,234.5"), (-0.001, 2, "+", "+0.00"), (float("nan"), 1, "", "-"), (None, 1, "", "-")])
def test_figures(value, digits, sign, wanted):
    """No negative zero; a dash for what is not known."""
    assert figure(value, digits, sign) == wanted


# ------------------------------------------------------------------ what an operator must not miss


@pytest.mark.parametrize("name", PLANS)
def test_every_warning_is_told(name):
    """Those of the guard rails too, with their next step."""
    text = joined(sheet(name))
    for f in answered(name)[1]["findings"]:
        assert sentence(f["words"]) in text
        assert f["severity"] == "note" or f"Next: {f['next_step']}." in text


def test_a_rail_passed_within_the_works(tmp_path):
    """Lime beyond pH 9.5 ahead of alum is no stop; it stands among the warnings."""
    first = '[[steps]]\ndo = "dose"\nname = "ahead"\nproduct = "lime"\ndose = "14 mg/L"\n\n'
    answer = solve_plan(read_plan(write_plan(tmp_path, text=RIVER.replace("[[steps]]", first + "[[steps]]", 1))), draws=0)
    ph = answer.train.passed[0].after.water().ph[0]
    assert ph > 9.5
    assert f"guard rails: Behind step 'ahead' pH is {ph:.2f}, above the guard rail of 9.5" in joined(dose_sheet(answer))


def test_lessons_name_their_feeds():
    """What to do at a fault says at which; each lesson stands once."""
    text = joined(block("WHAT WOULD UPSET IT"))
    answer = answered("upland")[0]
    for f in answer.faults:
        for words in f.words()[1:]:
            assert text.count(sentence(words)) == 1
            before = text[:text.index(sentence(words))]
            assert f"{f.product.name} {f.case}" in before[before.rindex(" - "):]


def test_a_dose_that_ph_hardly_follows():
    """A change of more than the dose itself is not offered as its price."""
    answer = answered("upland")[0]
    curve = answer.curves[0]
    slack = replace(curve, up_mg_l=21.6 * curve.wanted_mg_l, down_mg_l=float("nan"))
    with_price, without = (joined(upset(replace(answer, curves=(c,)))) for c in (curve, slack))
    assert "raises pH by 0.1 and" in with_price
    assert f"{curve.wanted_mg_l:.3g} mg/L: " in with_price
    assert "raises pH by 0.1" not in without


def test_costs_without_a_currency(tmp_path):
    """The head says per day, and no word stands in for the currency."""
    text = UPLAND.replace('currency = "EUR"\n', "")
    found = dose_sheet(solve_plan(read_plan(write_plan(tmp_path, text=text)), draws=0))
    store = next(b for b in found.split("\n\n") if b.startswith("STORE AND COST"))
    assert "per day" in store
    assert "currency" not in store


def test_a_setting_too_low_to_hold(tmp_path):
    """Below a tenth of the machine, unless the plan says what it can."""
    for largest, told in (("15 kg/h", False), ("150 kg/h", True)):
        text = UPLAND.replace('largest = "15 kg/h"', f'largest = "{largest}"')
        found = joined(dose_sheet(solve_plan(read_plan(write_plan(tmp_path, text=text)), draws=0)))
        assert ("Below 10 % few machines feed evenly" in found) is told


def test_doses_that_readings_leave_alone():
    """Draws that have no dose are counted; a dose of nothing throughout is not told."""
    doses = answered("upland")[0].readings_error.doses
    none = doses.assign(low_mg_l_product=0.0, high_mg_l_product=0.0)
    assert _spreads(none) == ""
    some = doses.assign(not_found_percent=[0.1, 0.0])
    assert _spreads(some).endswith("in 90 % of draws; 0.1 % of draws have no dose of lime.")


def test_units_are_of_the_columns_that_stand():
    """A column that is left out needs no unit."""
    full, few = joined(block("WATER AFTER", "upland")), joined(block("WATER AFTER", "fixed"))
    assert "Cl/SO4: by mass" in full
    assert "TDS" not in few
    assert "Alkalinity: mg/L as CaCO3" in few


def test_a_bed_has_nothing_to_set(tmp_path):
    """Limestone of a contactor: no setting, drawdown or jar on the sheet, no alarm on the page."""
    start = UPLAND[:UPLAND.index("[products.lime]")].replace('name = "Ambrel Dam"', 'name = "Bed"')
    stone = '[products.stone]\nis = "limestone"\nstrength = "98 %"\n[[steps]]\ndo = "contact"\nname = "contactor"\nproduct = "stone"\n'
    answer = solve_plan(read_plan(write_plan(tmp_path, text=start + stone)), draws=0)
    text = joined(dose_sheet(answer))
    assert "nothing to set; keep the bed filled" in text
    assert "stone: catch of one minute" not in text
    assert "mg of stone" not in text
    assert setting_words(answer.feeds[0], bed=True) == ("bed", "keep it filled")


def test_a_low_end_of_nothing_is_no_leave_to_stop(tmp_path):
    """Bleach whose windows hold without it may be "at most" so much, not "0 to" so much."""
    bleach = ('[products.bleach]\nis = "sodium hypochlorite"\nstrength = "12 %"\ndensity = "1.2 kg/L"\n[[steps]]\ndo = "chlorinate"\n'
              'name = "chlorine"\nproduct = "bleach"\ndose = "2 mg/L as Cl2"\n')
    text = RIVER.replace("[[steps]]", bleach + "[[steps]]", 1).replace("[products.bleach]", "\n[products.bleach]")
    answer = solve_plan(read_plan(write_plan(tmp_path, text=text.replace("ph = 8.2 }", "ph = [7.9, 8.3] }"))), draws=0)
    line = next(x for x in answer.feeds if x.product.name == "bleach")
    found = next(r for r in answer.ranges if r.product.name == "bleach")
    assert found.least[0] == 0.0
    assert control_words(answer, line).startswith("at most ")
    assert found.words().endswith("disinfection is no window here and sets its least dose")


def test_the_drawn_response_of_two_stages_is_that_of_the_table(tmp_path):
    """Gas that goes in twice in a step: the line moves the first feed alone, as the table does, and passes the dose."""
    answer = solve_plan(read_plan(write_plan(tmp_path, text=TWO_STAGES)), draws=0)
    curve = answer.curves[0]
    dose, ph, _ = smooth_response(answer, curve)
    at = np.searchsorted(dose, curve.table["dose_mg_l_product"])
    assert_allclose(ph[at], curve.table["ph"], atol=1e-9)
    assert_allclose(np.interp(curve.wanted_mg_l, dose, ph), curve.wanted_ph, atol=1e-6)
