"""Panels of classes, critical loads and first lakes: bars are as long as the counts, marks stand at their loads."""

import sys
from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from made_survey import BANDS, bars, clouds, lines, survey, title, words

from aquabuf.report import lake_class_panels
from aquabuf.report.lake_class_panels import FIRST_LAKES, GROUP_BARS, has_loads, plot_classes, plot_first, plot_loads
from aquabuf.report.lake_marks import FEW_LAKES


@pytest.fixture
def ax():
    """Axes of a page's panel that no window shows."""
    return Figure(figsize=(11.0, 8.0)).subplots(2, 2)[0, 0]


def test_classes_by_group(ax):
    """Segments as long as the counts, worst class first; the group most at risk on top; numbers and words say the same."""
    table = survey([-5.0, 10.0, 20.0, 300.0, 60.0, 70.0, 80.0, 10.0], region=["a"] * 4 + ["b"] * 4)
    plot_classes(table, BANDS, ax=ax)
    assert bars(ax) == {"a": [1, 2, 1], "b": [1, 3]}
    assert [p.get_x() for p in ax.patches] == [0, 1, 0, 1, 3]  # end to end
    assert [t.get_text() for t in ax.get_yticklabels()] == ["b", "a"]  # from below
    assert words(ax) == ["1", "3", "1 of 4 at risk", "1", "2", "1", "3 of 4 at risk"]
    assert ax.get_xlabel() == "Lakes sampled (counts, no shares of a population)"
    assert title(ax) == "Classes by region"


def test_classes_by_survey_weight(ax):
    """Sums of weights and shares at risk by weight; how many were sampled is still said."""
    table = survey([-5.0, 60.0, 60.0], region=["a", "a", "b"], survey_weight=[30.0, 10.0, 7.0])
    plot_classes(table, BANDS, ax=ax)
    assert bars(ax) == {"b": [7.0], "a": [30.0, 10.0]}
    assert [w for w in words(ax) if "risk" in w] == ["0% at risk (1 sampled)", "75% at risk (2 sampled)"]
    assert ax.get_xlabel() == "Lakes of the population, by survey weight"


def test_lakes_without_class_are_shown_and_not_counted_as_safe(ax):
    """A segment of their own; the share at risk is of the lakes that have a class."""
    table = survey([-5.0, np.nan, np.nan, 300.0])
    plot_classes(table, BANDS, ax=ax)
    assert bars(ax) == {"all lakes": [1, 1, 2]}
    assert "1 of 2 at risk" in words(ax)
    assert title(ax) == "Classes"
    ax.clear()
    plot_classes(table.assign(survey_weight=7.0), BANDS, ax=ax)
    assert "50% at risk (4 sampled)" in words(ax)


def test_groups_beyond_the_largest_are_counted(ax):
    """Twelve bars; the title says how many groups have none."""
    regions = [f"g{k:02d}" for k in range(GROUP_BARS + 3) for _ in range(k + 1)]
    plot_classes(survey(np.linspace(-10.0, 300.0, len(regions)), region=regions), BANDS, ax=ax)
    assert sorted(bars(ax)) == [f"g{k:02d}" for k in range(3, 15)]
    assert title(ax) == "Classes by region (3 small groups left out)"


@pytest.mark.parametrize("group", ["water_kind", "region"])
def test_any_group_can_be_asked_for(ax, group):
    """A column that is not there, or one with words."""
    table = survey([-5.0, 300.0], **({"water_kind": ["lake", "stream"]} if group == "water_kind" else {})).drop(columns="region")
    plot_classes(table, BANDS, ax=ax, group=group)
    assert title(ax) == ("Classes by water kind" if group == "water_kind" else "Classes")


# ------------------------------------------------------------------ critical loads


def test_loads_stand_against_deposition(ax):
    """Deposition is critical load plus exceedance; the line 1:1; how many are on each side."""
    table = survey([-50.0, 10.0, 40.0, 60.0, np.nan])
    plot_loads(table, BANDS, ax=ax)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("Sulfur deposition and leached nitrate [meq/m²/yr]", "Critical load [meq/m²/yr]")
    drawn = np.hstack(list(clouds(ax).values()))
    assert_allclose(drawn, [[40.0, 41.0, 42.0, 43.0], [15.0, 33.0, 42.0, 48.0]])
    (line,) = lines(ax, "_one_to_one")
    assert_array_equal(line[0], line[1])
    assert words(ax) == ["1 : 1", "exceeded: 2 of 4 lakes", "not exceeded: 2"]
    shade = next(c for c in ax.collections if c.get_label() not in ("_interval", *(c.get_label() for c in ax.collections if "(" in c.get_label())))
    assert shade.get_paths()[0].contains_point((40.0, 20.0))
    assert not shade.get_paths()[0].contains_point((40.0, 60.0))


@pytest.mark.parametrize(("count", "shown"), [(FEW_LAKES, True), (FEW_LAKES + 1, False)])
def test_loads_of_few_lakes_have_intervals(ax, count, shown):
    """From the low to the high end of each; said in the title."""
    table = survey(np.linspace(0.0, 100.0, count))
    plot_loads(table, BANDS, ax=ax)
    found = [c for c in ax.collections if c.get_label() == "_interval"]
    assert len(found) == int(shown)
    assert title(ax) == "Critical load and acid deposition" + (" (line: 90% interval)" if shown else "")
    if shown:
        segments = np.array(found[0].get_segments())
        assert_allclose(segments[:, :, 1], table[["critical_load_meq_m2_yr_low", "critical_load_meq_m2_yr_high"]])
        assert ax.get_ylim()[0] < segments.min()
        assert ax.get_ylim()[1] > segments[:, :, 1].max()


def test_loads_far_above_the_deposition_are_counted_not_drawn(ax):
    """The axis ends near twice the deposition of many lakes: the rest is told."""
    table = survey(np.concatenate([np.linspace(0.0, 100.0, 70), [3000.0, 5000.0]]))
    plot_loads(table, BANDS, ax=ax)
    assert sum(c.shape[1] for c in clouds(ax).values()) == 70
    assert ax.get_ylim()[1] < 120.0
    assert words(ax)[-1].endswith(", 2 of them beyond the axis")


def test_axis_of_loads(ax):
    """Of few lakes up to four times the deposition; down to as much below zero, and what lies deeper is counted as exceeded."""
    table = survey([10.0, 20.0, 30.0, 40.0], critical_load_meq_m2_yr=[30.0, 150.0, 900.0, -700.0],
                   critical_load_meq_m2_yr_low=np.nan, critical_load_meq_m2_yr_high=np.nan)
    table["exceedance_meq_m2_yr"] = 40.0 - table["critical_load_meq_m2_yr"]
    plot_loads(table, BANDS, ax=ax)
    low, high = ax.get_ylim()
    assert 150.0 < high < 200.0
    assert -60.0 < low < -40.0
    assert words(ax)[1:] == ["exceeded: 2 of 4 lakes, 1 of them beyond the axis", "not exceeded: 2, 1 of them beyond the axis"]


def test_which_panel_of_loads():
    """Load and deposition of one lake at least, in the same lake."""
    assert has_loads(survey([10.0, 20.0]))
    assert not has_loads(survey([10.0, 20.0], loads=False))
    assert not has_loads(survey([10.0, 20.0], exceedance_meq_m2_yr=np.nan))


def test_first_lakes(ax):
    """Without critical loads: acid to pH 6 of the lakes in the order to look at them, worst on top, with intervals."""
    table = survey(np.linspace(300.0, -30.0, 20), loads=False, site=[f"Lake {k}" for k in range(20)])
    plot_first(table, BANDS, ax=ax)
    assert ax.get_xlabel() == "Acid to pH 6, open to air [µeq/L]; negative: below it"
    assert title(ax) == "First lakes to look at (line: 90% interval)"
    place = dict(zip([t.get_text() for t in ax.get_yticklabels()], ax.get_yticks(), strict=True))
    assert sorted(place, key=place.get, reverse=True) == [f"Lake {k}" for k in range(19, 19 - FIRST_LAKES, -1)]
    worst = max(ax.patches, key=lambda p: p.get_y())
    assert worst.get_width() == pytest.approx(-35.0)
    segments = np.array(next(c for c in ax.collections if c.get_label() == "_interval").get_segments())
    assert_allclose(segments[0, :, 0], [-42.0, -28.0])


@pytest.mark.parametrize(("missing", "label"), [
    ([], "Critical load [meq/m²/yr]; deposition not known"),
    (["critical_load_meq_m2_yr"], "Acid to pH 6, open to air [µeq/L]"),
    (["critical_load_meq_m2_yr", "acid_to_ph_6_0_open_ueq_l"], "ANC above the limit [µeq/L]")])
def test_first_lakes_by_what_is_known(ax, missing, label):
    """Critical load, else acid to pH 6, else ANC above the limit."""
    plot_first(survey([30.0, 60.0], **dict.fromkeys(missing, np.nan)), BANDS, ax=ax)
    assert ax.get_xlabel() == label


def test_lakes_are_named_so_that_they_can_be_told_apart(ax):
    """Site where all differ; else the sample; else the sample with its row; never more than a label's length."""
    plot_first(survey([30.0, 60.0], site=["A", "A"]), BANDS, ax=ax)
    assert [t.get_text() for t in ax.get_yticklabels()] == ["s0", "s1"]
    ax.clear()
    plot_first(survey([30.0, 60.0], sample_id=["x" * 40 + "1", "x" * 40 + "2"]), BANDS, ax=ax)
    assert [t.get_text() for t in ax.get_yticklabels()] == ["x" * 14 + " (row 2)", "x" * 14 + " (row 3)"]


def test_every_public_plot_is_tested():
    """What the module offers is drawn above."""
    assert {n for n in lake_class_panels.__all__ if n.startswith("plot")} == {"plot_classes", "plot_loads", "plot_first"}
