"""The figures of a plan: panels show the figures of the answer, windows stand at their pH, words keep their place."""

import sys
import warnings
from pathlib import Path

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from dosing_plans import LONG, PLANS, answer_of
from drawn_page import boxes, lines, overlaps, panel, patches, said

from aquabuf.assess.plant.answer_json import step_rows
from aquabuf.assess.plant.faults import FULL, STOPPED
from aquabuf.report.dose_figures import (
    save_sheet,
    sheet_figure,
)
from aquabuf.report.dose_page import block_of, stacked, text_width, wrapped
from aquabuf.report.dose_panels import fault_names, main_curve, train_labels
from aquabuf.report.dose_settings import rate_words, setting_words
from aquabuf.report.dose_sheet_words import LOG, fault_notes

KINDS = ("png", "svg", "pdf")
SEVERAL = ("upland", "minimal", "many", "guarded", "nitrify", "blend")  # plans whose doses were found
GALLONS_MGD = 3785.411784  # m3/d in a million US gallons a day: the gallon is 3.785411784 L by definition


@pytest.fixture(scope="module")
def page():
    """A drawn sheet by the name of its plan, drawn once."""
    drawn = {}

    def go(name):
        if name not in drawn:
            drawn[name] = sheet_figure(answer_of(name))
        return drawn[name]
    return go

# ---------------------------------------------------------------- dose and response


@pytest.mark.parametrize("name", SEVERAL)
def test_response_passes_every_dose_of_the_answer(page, name):
    """The smooth line goes through the round doses of the answer's curve; the dot and the upright line at the wanted."""
    ax, below = panel(page(name), "pH by dose of")
    curve = main_curve(answer_of(name))
    table = curve.table
    (dose, ph), = lines(ax, "_ph")
    (dose_below, intensity), = lines(below, "_intensity")
    assert dose.size > 200
    assert_array_equal(dose, dose_below)
    at = np.searchsorted(dose, table["dose_mg_l_product"])
    assert_array_equal(dose[at], table["dose_mg_l_product"])
    assert_allclose(ph[at], table["ph"], rtol=0, atol=1e-9)
    assert_allclose(intensity[at], table["buffer_intensity_meq_l_ph"], rtol=1e-9)
    assert_allclose(lines(ax, "_wanted")[0][:, 0], [curve.wanted_mg_l, curve.wanted_ph], rtol=1e-12)
    assert lines(below, "_wanted")[0][0, 0] == curve.wanted_mg_l
    assert (ax.get_ylabel(), below.get_ylabel(), below.get_xlabel()) == (
        "pH", "buffer\n[meq/L per pH]", "dose of product as delivered [mg/L]")


def test_response_starts_at_the_raw_water(page):
    """Without any of its one product, behind the one step, the water has the pH of the plan."""
    ax, _ = panel(page("minimal"), "pH by dose of soda")
    dose, ph = lines(ax, "_ph")[0][:, 0]
    assert (dose, ph) == (0.0, pytest.approx(6.8, abs=1e-6))


def test_main_curve_is_the_touchy_product_of_the_last_ph_target():
    """Lime, whose percent costs more pH than the gas'; not the alum of an earlier step, not a product without pH."""
    assert main_curve(answer_of("upland")).product == "lime"
    found = main_curve(answer_of("many"))
    assert (found.step, found.product) == ("final pH", LONG)
    assert main_curve(answer_of("infeasible")) is None


@pytest.mark.parametrize(("name", "low", "high"), [("upland", 8.3, 8.5), ("minimal", 7.5, 7.9), ("guarded", 9.7, 9.9)])
def test_window_is_shaded_at_its_ph(page, name, low, high):
    """A window at its ends; a fixed value with the 0.1 pH that the table of bands gives it, in both panels."""
    ax, _ = panel(page(name), "pH by dose of")
    assert_allclose([p[2:] for p in patches(ax, "_window")], [(low, high)], rtol=0, atol=1e-9)
    works, _ = panel(page(name), "Water through the works")
    (band,) = [c for c in works.collections if c.get_label() == "_window"]
    box = band.get_paths()[0].get_extents()
    assert_allclose([box.x0, box.x1, box.y0, box.y1], [0.6, 1.4, low, high], rtol=0, atol=1e-9)


def test_an_open_window_reaches_to_the_end_of_the_axis(page):
    """At least 7.8 is shaded from there up to the end."""
    ax, _ = panel(page("blend"), "pH by dose of")
    assert_allclose([p[2:] for p in patches(ax, "_window")], [(7.8, ax.get_ylim()[1])], rtol=1e-12)


def test_control_range_and_weak_zone_are_those_of_the_answer(page):
    """The upright band spans the least and most dose that keep every window, the hatched one the weak buffering."""
    answer = answer_of("upland")
    ax, below = panel(page("upland"), "pH by dose of lime")
    found = next(r for r in answer.ranges if r.product.name == "lime").table().iloc[0]
    assert_allclose([p[:2] for p in patches(ax, "_control")],
                    [(found["least_mg_l_product"], found["most_mg_l_product"])], rtol=1e-12)
    curve = main_curve(answer)
    assert_allclose([p[:2] for p in patches(below, "_weak")], [(curve.weakest_low_mg_l, curve.weakest_high_mg_l)])
    assert [p.get_hatch() for p in below.patches if p.get_label() == "_weak"] == ["////"]
    several, _ = panel(page("many"), "pH by dose of")
    assert patches(several, "_control") == []  # its range moves the lime of two steps together


# ---------------------------------------------------------------- works and faults


@pytest.mark.parametrize("name", PLANS)
def test_works_show_the_rows_of_the_answer(page, name):
    """pH as points, alkalinity as bars, a label for each water in order."""
    ax, below = panel(page(name), "Water through the works")
    rows = step_rows(answer_of(name))
    assert_array_equal(lines(ax, "_ph")[0], [np.arange(len(rows)), [r["ph"] for r in rows]])
    bars = [b.get_height() for b in below.patches]
    assert_array_equal(bars, [r["alkalinity_mg_l_caco3"] for r in rows])
    labels = [t.get_text().replace("\n", " ") for t in below.get_xticklabels()]
    assert len(labels) == len(rows)
    assert labels[0].startswith("raw water")
    assert [t.get_text() for t in ax.texts] == [f"{r['ph']:.2f}" for r in rows]
    assert [t.get_text() for t in below.texts] == [f"{r['alkalinity_mg_l_caco3']:z.1f}" for r in rows]
    assert (ax.get_ylabel(), below.get_ylabel()) == ("pH", "alkalinity [mg/L\nas CaCO3]")


def test_works_start_at_the_readings_and_end_at_the_target(page):
    """Raw pH 6.5 and 20 mg/L of the plan, 8.4 and 55 behind the step, and what each dissolves in words."""
    ax, below = panel(page("upland"), "Water through the works")
    assert_allclose(lines(ax, "_ph")[0][1][:2], [6.5, 8.4], rtol=0, atol=1e-6)
    assert_allclose([b.get_height() for b in below.patches][:2], [20.0, 55.0], rtol=0, atol=1e-6)
    for label, row in zip(train_labels(answer_of("upland"), 7.0), step_rows(answer_of("upland")), strict=True):
        name, does = label.split("\n")
        assert (name, does) == (row["name"], f"dissolves {-row['ccpp_mg_l']:.1f}")
    assert all(label.endswith("not known") for label in train_labels(answer_of("minimal"), 7.0))  # no calcium given


@pytest.mark.parametrize(("name", "rails"), [("upland", (6.0, 9.5, 10.0)), ("guarded", (6.2, 9.4, 9.9))])
def test_guard_rails_stand_at_their_ph(page, name, rails):
    """Shipped ones, and those that a plan sets."""
    ax, _ = panel(page(name), "A feed at fault (1 h)")
    assert_allclose([x[0, 0] for x in lines(ax, "_rail")], rails)
    assert ax.get_xlabel() == "pH right behind the step"
    assert f"Dashed: guard rails {rails[0]:g} and {rails[1]:g}; dotted: {rails[2]:g}, the most" in said(page(name))


@pytest.mark.parametrize("name", SEVERAL)
def test_faults_stand_where_the_answer_has_them(page, name):
    """Each feed stuck and stopped, its pH as planned as a ring, its figures at the right; outside the rails in bold."""
    ax, _ = panel(page(name), "A feed at fault")
    answer = answer_of(name)
    for label, case in (("_stuck", FULL), ("_stopped", STOPPED)):
        of = [f for f in answer.faults if f.case == case]
        assert_array_equal([x[0, 0] for x in lines(ax, label)], [f.ph_behind[0] for f in of])
    assert_array_equal([x[0, 0] for x in lines(ax, "_planned")], [f.ph_wanted[0] for f in answer.faults])
    words = {t.get_text(): t.get_fontweight() for t in ax.texts}
    for fault in answer.faults:
        (text,) = {w for w in words if w.startswith(f"{fault.ph_behind[0]:.2f}")}
        out = not answer.plan.guards.ph_low <= fault.ph_behind[0] <= answer.plan.guards.ph_high
        assert words[text] == ("bold" if out else "normal")
    assert [t.get_text() for t in ax.get_yticklabels()] == fault_names(answer)


def test_a_stopped_feed_of_the_only_step_leaves_the_raw_water(page):
    """pH of the plan's readings."""
    ax, _ = panel(page("minimal"), "A feed at fault")
    assert lines(ax, "_stopped")[0][0, 0] == pytest.approx(6.8, abs=1e-6)


def test_a_product_of_two_steps_is_told_apart():
    """Its rows name the step too."""
    assert len(set(fault_names(answer_of("many")))) == 7


# ---------------------------------------------------------------- words


def test_head_names_plan_day_and_flow_in_both_units(page):
    """9.6 ML/d as million gallons a day by the definition of the gallon."""
    words = said(page("upland"))
    assert "Ambrel Dam, 2026-10-14" in words
    assert f"Flow 9.60 ML/d ({9600.0 / GALLONS_MGD:.2f} MGD)" in words
    assert "Raw water: 8.0 °C, pH 6.50, alkalinity 20.0 mg/L as CaCO3, calcium 5.0 mg/L" in words
    assert "final pH: pH 8.40; reached 8.40: met" in words
    assert LOG.split(":")[0] in words


def test_feeds_follow_from_dose_and_flow():
    """kg/d = mg/L x ML/d; a 10 % slurry of 1.06 kg/L; the pump at 80 % stroke gives 200 L/h at full speed."""
    lime, gas = answer_of("upland").feeds
    l_h = lime.mg_l_product * 9.6 / 0.10 / 1.06 / 24.0
    assert rate_words(lime) == (f"{l_h:.0f} L/h", f"{l_h / 3.785411784:.1f} gal/h")
    assert setting_words(lime) == (f"speed {100.0 * l_h / 200.0:.1f} %", "pump 'lime'")
    kg_h = gas.mg_l_product * 9.6 / 24.0
    assert rate_words(gas) == (f"{kg_h:.2f} kg/h", f"{kg_h / 0.45359237:.1f} lb/h")
    assert setting_words(gas)[0] == f"setting {100.0 * kg_h / 15.0:.1f} %"


def test_table_of_feeds_is_on_the_page_in_large_letters(page):
    """Product, dose, rates and setting, larger than all else below the title."""
    figure = page("upland")
    size = {t.get_text(): t.get_fontsize() for t in figure.texts}
    lime = answer_of("upland").feeds[0]
    for words in ("lime", f"{lime.mg_l_product:.1f} mg/L", setting_words(lime)[0]):
        assert size[words] > 11.0
    for words in rate_words(lime):
        assert size[words] > 9.0
    assert f"{lime.mg_l_pure:.1f} mg/L pure" in size


def test_settings_that_cannot_be_made_are_told(page):
    """No pump; no dose; a machine too small."""
    assert setting_words(answer_of("minimal").feeds[0])[0] == "not known"
    assert "no pump or feeder in the plan" in said(page("minimal"))
    assert setting_words(answer_of("infeasible").feeds[0]) == ("none", "no dose found")
    small = answer_of("many").feeds[1]
    assert setting_words(small)[0] == "OUT OF REACH"
    assert f"{small.setting_words()}." in said(page("many"))
    assert ("The plan has no pump or feeder, so a stuck feed is taken as 2 times the dose: "
            f"{LONG}, FSA, phosphoric acid, gas.") in fault_notes(answer_of("many"))


@pytest.mark.parametrize("name", ["infeasible", "guarded"])
def test_stop_stands_on_a_plan_that_does_not_hold(page, name):
    """In a box, with the whole reason, and no word to set the feeds; not on a plan that holds."""
    words = said(page(name))
    assert "STOP: do not dose by this sheet" in words
    reason = " ".join(answer_of(name).reason.split())
    assert reason[1:] in words
    assert "Not to be set:" in words
    assert "Set the feeds" not in words
    assert "STOP" not in said(page("upland"))
    assert "Set the feeds" in said(page("upland"))


def test_without_doses_the_page_says_so(page):
    """Neither curve nor fault, but the works."""
    for name in ("infeasible", "no dose"):
        assert [ax.get_title(loc="left") for ax in page(name).axes if ax.get_title(loc="left")] == [
            "Water through the works"]
        assert "there is no curve to draw" in said(page(name))
    assert "No step of this plan doses a product." in said(page("no dose"))


def test_cautions_are_those_of_the_answer(page):
    """Every one of them, whole."""
    for name in ("upland", "many"):
        figure = page(name)
        words = " ".join(t.get_text() for t in figure.texts if t.get_text() != "–")
        for caution in answer_of(name).cautions:
            assert caution in words


def test_broken_rules_and_warnings_are_on_the_page(page):
    """A rule that the final water breaks, with its value."""
    broken = [j for j in answer_of("upland").limits if j.broken]
    assert broken
    assert all(j.limit.words[:40] in said(page("upland")).replace("– ", "") for j in broken)


# ---------------------------------------------------------------- the page


@pytest.mark.parametrize("name", PLANS)
def test_no_words_lie_on_others_or_leave_the_page(page, name):
    """From one product to six, with long names, stops and ten steps."""
    figure = page(name)
    assert overlaps(figure) == []
    wide, high = figure.bbox.width, figure.bbox.height
    assert [w for w, b in boxes(figure) if b.x0 < 0 or b.y0 < 0 or b.x1 > wide or b.y1 > high] == []
    assert tuple(figure.get_size_inches()) == (8.27, 11.69)

@pytest.mark.parametrize("name", PLANS)
def test_type_has_every_letter(page, name, tmp_path):
    """No word of ours needs a letter that the type lacks: saving warns of nothing."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        page(name).savefig(tmp_path / "a.png")
        page(name).savefig(tmp_path / "a.pdf")


@pytest.mark.parametrize("name", ["upland", "infeasible"])
def test_same_answer_same_bytes(tmp_path, name):
    """All formats, all files there, no date and no program name."""
    for folder in ("a", "b"):
        (tmp_path / folder).mkdir()
        save_sheet(answer_of(name), {kind: tmp_path / folder / f"dose.{kind}" for kind in KINDS})
    for kind in KINDS:
        first, second = ((tmp_path / folder / f"dose.{kind}").read_bytes() for folder in ("a", "b"))
        assert first == second
        assert len(first) > 10_000
        assert not any(word in first for word in (b"CreationDate", b"dc:date", b"Matplotlib v", b"/Producer"))

def test_names_in_other_letters_do_not_stop_the_page(tmp_path):
    """Boxes are drawn for what the type lacks, without a warning; a dollar is no formula."""
    from dataclasses import replace
    answer = answer_of("minimal")
    odd = replace(answer, plan=replace(answer.plan, name="水 $\\frac{1 works"))
    save_sheet(odd, {"png": tmp_path / "odd.png"})
    assert (tmp_path / "odd.png").stat().st_size > 10_000


def test_wrapped_lines_fit_and_lose_nothing():
    """Every line within its width, long words in pieces, all letters kept in order."""
    words = "a feed with a-name-that-is-much-longer-than-any-line-of-the-page and more"
    found = wrapped(words, 1.2, 8.0)
    assert max(text_width(line, 8.0) for line in found) <= 1.2
    assert "".join(found).replace(" ", "") == words.replace(" ", "")
    short = wrapped(words, 1.2, 8.0, most=2)
    assert len(short) == 2
    assert short[-1].endswith("…")
    assert text_width(short[-1], 8.0) <= 1.2


def test_text_width_is_that_of_the_page():
    """Against the renderer: never less, and not more than a twentieth over."""
    figure = Figure(dpi=300)
    canvas = FigureCanvasAgg(figure)
    for words in ("OUT OF REACH", "Setting of hydrated lime from the north silo: as largest rate x stroke x speed"):
        box = figure.text(0.0, 0.5, words, fontsize=9.0).get_window_extent(canvas.get_renderer())
        assert 1.0 <= text_width(words, 9.0) / (box.width / 300.0) < 1.05


def test_blocks_stack_by_their_heights():
    """Gaps between those that are not empty."""
    one, two, none = block_of(["a"], 3.0, 8.0), block_of(["b", "c"], 3.0, 8.0), block_of([], 3.0, 8.0)
    whole = stacked(one, none, two, gap=0.1)
    assert whole.height == pytest.approx(one.height + two.height + 0.1)
    assert [line.y for line in whole.lines] == pytest.approx([0.0, one.height + 0.1, 1.5 * two.height + 0.1 + one.height -
                                                               two.height])
