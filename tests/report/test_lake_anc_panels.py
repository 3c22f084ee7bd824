"""Panels about ANC: axes say quantity and unit, lakes stand at their values, curves are those handed in."""

import itertools
import sys
from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from made_survey import BANDS, MANY_ANC, NAMES, PH_SCHEME, RESPONSE, clouds, lines, steps, survey, title, upright, words

from aquabuf.assess.lake.response import response_curves
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.chem.organic import organic_models
from aquabuf.report import lake_anc_panels
from aquabuf.report.lake_anc_panels import GROUP_CURVES, GROUP_LAKES, plot_distribution, plot_response
from aquabuf.report.lake_marks import FEW_LAKES


@pytest.fixture
def ax():
    """Axes of a page's panel that no window shows."""
    return Figure(figsize=(11.0, 8.0)).subplots(2, 2)[0, 0]


def test_each_lake_stands_at_its_anc_and_ph(ax):
    """Axes with quantity and unit; a mark per lake, class by class, counted, the worse classes on top."""
    table = survey(MANY_ANC)
    assert plot_response(table, BANDS, None, ax=ax) is ax
    assert (ax.get_xlabel(), ax.get_ylabel(), title(ax)) == ("Gran ANC [µeq/L]", "pH", "pH and ANC")
    drawn = clouds(ax)
    assert list(drawn) == NAMES
    for name in NAMES:
        own = table[table["class"] == name]
        assert_array_equal(drawn[name], [own["anc_used_ueq_l"], own["ph"]])
    assert [c.get_label() for c in ax.collections] == [f"{n} ({(table['class'] == n).sum()})" for n in NAMES]
    order = [c.get_zorder() for c in ax.collections]
    assert order == sorted(order, reverse=True)
    assert len({c.get_paths()[0].vertices.shape for c in ax.collections}) > 2  # markers differ


def test_class_limits_and_anc_limit_are_marked(ax):
    """Lines at 0, 50 and 200 with their numbers above the lakes; a dashed one at the limit of critical loads, named."""
    table = survey(MANY_ANC)
    plot_response(table, BANDS, None, ax=ax, anc_limit_ueq_l=20.0)
    assert_allclose(upright(ax, "_class_limit"), [0.0, 50.0, 200.0])
    assert_allclose(upright(ax, "_anc_limit"), [20.0])
    assert words(ax) == ["0", "50", "200", "ANC limit 20"]
    number = next(t for t in ax.texts if t.get_text() == "200")
    assert number.xy[0] == pytest.approx(200.0)
    highest = ax.transData.transform((0.0, table["ph"].max()))[1]
    ax.figure.draw_without_rendering()
    assert number.get_window_extent().y0 > highest + 3.0


def test_limits_close_together_stand_in_two_rows(ax):
    """On an axis that a soda lake stretches, numbers that would touch are set below each other."""
    scheme = shipped_schemes()["aquatic_status"]
    plot_response(survey([-3000.0, 10.0, 2e5], scheme=scheme), scheme, None, ax=ax)
    assert len({t.xy[1] for t in ax.texts if t.get_text() in ("0", "20", "50", "100")}) > 1


def test_no_anc_limit_where_it_varies(ax):
    """Not a number: no line."""
    plot_response(survey(MANY_ANC), BANDS, None, ax=ax)
    assert upright(ax, "_anc_limit") == []


def test_curves_are_those_handed_in(ax):
    """Line at the CO2 of air, band to the last multiple, in clear and brown water; the axis stays that of the lakes."""
    table = survey(MANY_ANC)
    plot_response(table, BANDS, None, ax=ax)
    span = ax.get_xlim()
    plot_response(table, BANDS, RESPONSE, ax=ax)
    assert ax.get_xlim() == span
    for name, anc in (("clear", RESPONSE.clear_eq_l), ("brown", RESPONSE.brown_eq_l)):
        (line,) = lines(ax, f"_{name}")
        assert_array_equal(line, [1e6 * anc[0], RESPONSE.ph])
        band = next(c for c in ax.collections if c.get_label() == f"_{name}_band").get_paths()[0].vertices
        for k in (150, 200, 250):
            x = np.sort(band[np.isclose(band[:, 1], RESPONSE.ph[k]), 0])
            assert_allclose(x[[0, -1]], np.sort(1e6 * anc[:, k]), rtol=1e-9)
    legend = ax.get_legend()
    assert [t.get_text() for t in legend.get_texts()] == ["clear water: CO2 of air (line) to 4 times", "brown water, DOC 10 mg/L"]
    assert legend.get_title().get_text() == "At 12 °C, air of 400 ppm"


def test_curves_of_charge_balance_count_the_organic_anions(ax):
    """Where the ANC in use is the charge balance, brown water stands that much farther right; clear water does not move."""
    plot_response(survey(MANY_ANC, anc_used_from="charge balance"), BANDS, RESPONSE, ax=ax)
    assert ax.get_xlabel() == "charge balance [µeq/L]"
    assert_allclose(lines(ax, "_brown")[0][0], 1e6 * (RESPONSE.brown_eq_l[0] + RESPONSE.left_out_eq_l))
    assert_array_equal(lines(ax, "_clear")[0][0], 1e6 * RESPONSE.clear_eq_l[0])


def test_no_brown_curve_without_organic_carbon(ax):
    """Not measured in the survey: clear water alone, also in the legend."""
    plot_response(survey(MANY_ANC), BANDS, response_curves(12.0, 5e-4, 400.0, np.nan, organic_models()["oliver"]), ax=ax)
    assert lines(ax, "_brown") == []
    assert len(ax.get_legend().get_texts()) == 1


@pytest.mark.parametrize(("count", "shown"), [(FEW_LAKES, True), (FEW_LAKES + 1, False)])
def test_few_lakes_show_their_ph_at_air_too(ax, count, shown):
    """An open mark above each, tied to it; of many lakes it would be a thicket."""
    table = survey(np.linspace(-50.0, 250.0, count))
    plot_response(table, BANDS, None, ax=ax)
    assert len(lines(ax, "_at_air")) == int(shown)
    assert ("open marks: at equilibrium with air" in title(ax)) == shown
    if shown:
        assert_array_equal(lines(ax, "_at_air")[0], [table["anc_used_ueq_l"], table["ph_at_air"]])
        assert ax.get_ylim()[1] > table["ph_at_air"].max()


def test_lakes_without_ph_stand_at_their_ph_at_air(ax):
    """Said on the axis; all marks hollow."""
    table = survey(MANY_ANC, ph=np.nan)
    plot_response(table, BANDS, None, ax=ax)
    assert ax.get_ylabel() == "pH at equilibrium with air (none was read)"
    assert_allclose(np.hstack(list(clouds(ax).values()))[1].max(), table["ph_at_air"].max())
    assert all(len(c.get_facecolors()) == 0 for c in ax.collections)


def test_scheme_on_ph_has_level_lines(ax):
    """Limits of pH with their numbers; none of ANC."""
    table = survey(MANY_ANC, scheme=PH_SCHEME)
    plot_response(table, PH_SCHEME, None, ax=ax)
    levels = [line.get_ydata()[0] for line in ax.lines if line.get_label() == "_class_limit"]
    assert_allclose(levels, [5.6, 6.2, 6.5, 6.8])
    assert words(ax) == ["5.6", "6.2", "6.5", "6.8"]
    assert ax.get_xlabel() == "Gran ANC [µeq/L]"


def test_classes_on_another_anc_are_told(ax):
    """Colors that cross the lines need a word; several definitions of ANC too."""
    table = survey(MANY_ANC)
    table.loc[3, "class"] = NAMES[-1]
    table.loc[:5, "anc_used_from"] = "charge balance"
    plot_response(table, BANDS, None, ax=ax)
    assert ax.get_xlabel() == "ANC in use, mostly Gran ANC [µeq/L]; classes rest on another"


def test_lake_without_class_is_a_gray_cross(ax):
    """It has a pH and an ANC, and is drawn."""
    table = survey(MANY_ANC)
    table.loc[3, "class"] = ""
    plot_response(table, BANDS, None, ax=ax)
    assert clouds(ax)["no class"].shape == (2, 1)


@pytest.mark.parametrize("anc", [[5.0], [-20.0, 400.0], [0.0, 0.0]], ids=str)
def test_plain_axis(ax, anc):
    """Up to 500 µeq/L linear, with all lakes and limits in it."""
    plot_response(survey(anc), BANDS, None, ax=ax)
    assert ax.get_xscale() == "linear"
    low, high = ax.get_xlim()
    assert low < min(*anc, 0.0) <= max(*anc, 200.0) < high


@pytest.mark.parametrize("anc", [[-100.0, 4100.0], [-3361.0, 203857.0], [5.0, 501.0], [-9e4, -2.0]], ids=str)
def test_wide_axis(ax, anc):
    """Both ends in view, zero among the ticks, ticks rise and keep apart by more than their words."""
    plot_response(survey(anc), BANDS, None, ax=ax)
    low, high = ax.get_xlim()
    assert low < min(anc) < max(anc) < high
    assert ax.get_xscale() == "asinh"
    ticks = [t for t in ax.get_xticks() if low <= t <= high]
    assert 0.0 in ticks
    assert len(ticks) >= 4
    ax.figure.draw_without_rendering()
    boxes = [t.get_window_extent() for t in ax.get_xticklabels() if t.get_text()]
    assert all(a.x1 < b.x0 for a, b in itertools.pairwise(sorted(boxes, key=lambda box: box.x0)))


# ------------------------------------------------------------------ how ANC is spread


def test_shares_of_all_lakes(ax):
    """Sorted ANC against the share up to it; lakes without ANC do not count; axes say that lakes are counted once."""
    anc = np.array([40.0, -5.0, np.nan, 120.0, 40.0])
    plot_distribution(survey(anc), BANDS, ax=ax, anc_limit_ueq_l=20.0)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("Gran ANC [µeq/L]", "Share of the lakes sampled [%]")
    assert_allclose(steps(ax, "all lakes"), [[-5.0, 40.0, 40.0, 120.0], [25.0, 50.0, 75.0, 100.0]])
    line = next(line for line in ax.lines if line.get_label() == "all lakes")
    assert (line.get_drawstyle(), line.get_ydata()[0], line.get_ydata()[-1]) == ("steps-post", 0.0, 100.0)
    assert_allclose(upright(ax, "_class_limit") + upright(ax, "_anc_limit"), [0.0, 50.0, 200.0, 20.0])
    assert ax.get_legend() is None


def test_shares_by_survey_weight(ax):
    """A lake that stands for three weighs as three; without a weight it stands for none. The axis says so."""
    plot_distribution(survey([10.0, 20.0, 30.0], survey_weight=[3.0, np.nan, 1.0]), BANDS, ax=ax)
    assert ax.get_ylabel() == "Share of the population, by survey weight [%]"
    assert_allclose(steps(ax, "all lakes"), [[10.0, 30.0], [75.0, 100.0]])


def test_groups_apart_carry_their_names(ax):
    """Two groups far apart: names beside the curves, no legend, none on a curve."""
    table = survey([*np.linspace(-30, 10, 9), *np.linspace(150, 190, 9)], region=["low"] * 9 + ["high"] * 9)
    plot_distribution(table, BANDS, ax=ax)
    assert {"low", "high", "all lakes"} <= set(words(ax))
    assert ax.get_legend() is None
    assert_allclose(steps(ax, "high")[0], np.linspace(150, 190, 9))
    ax.figure.draw_without_rendering()
    boxes = {t.get_text(): t.get_window_extent() for t in ax.texts if t.get_text() in ("low", "high", "all lakes")}
    assert not any(a.overlaps(b) for a, b in itertools.combinations(boxes.values(), 2))
    for name, box in boxes.items():
        for line in (line for line in ax.lines if line.get_label() in boxes):
            x, y = np.array(line.get_data())
            corners = ax.transData.transform(np.column_stack([np.repeat(x, 2)[1:], np.repeat(y, 2)[:-1]]))
            dense = np.concatenate([np.linspace(a, b, 50) for a, b in itertools.pairwise(corners)])
            assert not box.count_contains(dense), (name, line.get_label())


def test_groups_alike_get_a_legend_by_median(ax):
    """Curves on top of each other: a legend, the lowest median first."""
    rng = np.random.default_rng(4)
    table = survey(rng.normal(100.0, 30.0, 200), region=rng.choice(list("abcde"), 200))
    plot_distribution(table, BANDS, ax=ax)
    told = [t.get_text() for t in ax.get_legend().get_texts()]
    medians = {name: np.sort(of)[(len(of) + 1) // 2 - 1] for name, of in table.groupby("region")["anc_used_ueq_l"]}
    medians["all lakes"] = np.sort(table["anc_used_ueq_l"])[99]
    assert told == sorted(medians, key=medians.get)


def test_only_the_largest_groups_have_a_curve(ax):
    """Six of eight by number of lakes; a group of few lakes makes no distribution; the title says how many are shown."""
    regions = [f"g{k}" for k in range(8) for _ in range(GROUP_LAKES + k)] + ["tiny"] * (GROUP_LAKES - 1)
    table = survey(np.linspace(0.0, 200.0, len(regions)), region=regions)
    plot_distribution(table, BANDS, ax=ax)
    shown = {line.get_label() for line in ax.lines if not line.get_label().startswith("_")}
    assert shown == {"all lakes", *(f"g{k}" for k in range(2, 8))}
    assert GROUP_CURVES == 6
    assert title(ax) == "How ANC is spread (6 of 9 groups)"


def test_a_group_just_large_enough_has_a_curve(ax):
    """Five lakes make a distribution, four do not."""
    table = survey(np.linspace(0.0, 200.0, 2 * GROUP_LAKES - 1), region=["b"] * GROUP_LAKES + ["a"] * (GROUP_LAKES - 1))
    plot_distribution(table, BANDS, ax=ax)
    assert {line.get_label() for line in ax.lines if not line.get_label().startswith("_")} == {"all lakes", "b"}
    assert title(ax) == "How ANC is spread (1 of 2 groups)"


def test_every_public_plot_is_tested():
    """What the module offers is drawn above."""
    assert {n for n in lake_anc_panels.__all__ if n.startswith("plot")} == {"plot_response", "plot_distribution"}
