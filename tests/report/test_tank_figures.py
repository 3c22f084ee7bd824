"""The figures of a neutralization: panels show the figures of the design, windows stand at their pH, words keep apart."""

import sys
import warnings
from dataclasses import replace
from pathlib import Path

import matplotlib
import numpy as np
import pytest
from matplotlib.patches import Rectangle
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from drawn_page import boxes, lines, overlaps, panel, patches, said
from made_designs import LONG, NAMES, POINTS, SIMULATED, STRONGER, WINDOW, axis, design_of, page_of, texts

from aquabuf.report.dose_page import PAGE_STYLE
from aquabuf.report.tank_figures import design_figure, save_design, save_simulation, simulation_figure
from aquabuf.report.tank_labels import side_labels, spread
from aquabuf.report.tank_panels import demand_groups, plot_equalization, plot_titration, sample_band
from aquabuf.report.tank_scheme import feed_words, plot_train

KINDS = ("png", "svg")


@pytest.fixture(autouse=True)
def _style():
    """Panels drawn alone look as on the page."""
    with matplotlib.rc_context(PAGE_STYLE):
        yield


@pytest.fixture(scope="module")
def page():
    """The page of a made design, drawn once."""
    return lambda name: page_of(design_figure, name)


@pytest.fixture(scope="module")
def run():
    """The page of its simulation, drawn once."""
    return lambda name: page_of(simulation_figure, name)


# ---------------------------------------------------------------- curves


@pytest.mark.parametrize("name", NAMES)
def test_titration_curve_is_that_of_the_design(page, name):
    """Every row of the table, reagent across and pH up; the waste itself where nothing is added."""
    ax, buffer = panel(page(name), "Titration curve")[0], page(name).axes[1]
    curve = design_of(name).curve
    assert_array_equal(lines(ax, "_curve")[0], [curve["reagent_eq_l"], curve["ph"]])
    assert_array_equal(lines(buffer, "_buffer")[0], [curve["buffer_eq_l_ph"], curve["ph"]])
    x, ph = lines(ax, "_raw")[0][:, 0]
    assert x == 0.0
    assert ph == pytest.approx(np.interp(0.0, curve["reagent_eq_l"], curve["ph"]), abs=0.02)
    assert (ax.get_ylabel(), buffer.get_xlabel()) == ("pH", "buffer intensity [eq/L per pH]")
    assert ax.get_xlabel().endswith("added [eq/L of waste]")
    assert ax.get_ylim() == buffer.get_ylim()


@pytest.mark.parametrize("name", NAMES)
def test_window_is_shaded_at_its_ph_in_every_panel(page, name):
    """6 to 9, as the streams have it."""
    for ax in page(name).axes[:2]:
        assert_allclose([p[2:] for p in patches(ax, "_window")], [WINDOW])


@pytest.mark.parametrize("name", NAMES)
def test_set_points_are_dots_on_the_curve_with_their_words(page, name):
    """At the pH of each stage, on the curve of the mean waste; the last is the aim."""
    ax, found = page(name).axes[0], design_of(name)
    dots = [x[:, 0] for x in lines(ax, "_setpoint")]
    assert [ph for _, ph in dots] == [s.setpoint_ph for s in found.layout.stages]
    assert dots[-1][1] == found.basis.aim_ph
    for x, ph in dots:
        assert x == pytest.approx(np.interp(ph, found.curve["ph"], found.curve["reagent_eq_l"]), rel=2e-3)
    words = " ".join(texts(ax))
    assert all(f"{s.name}: pH" in words for s in found.layout.stages)
    assert ("the aim" in words) == (len(dots) > 1)


def test_tolerance_is_written_at_the_window(page):
    """What the curve takes from one end of the window to the other, and as a share of the demand."""
    curve = design_of("two").curve
    low, aim, high = np.interp([6.0, design_of("two").basis.aim_ph, 9.0], curve["ph"], curve["reagent_eq_l"])
    (words,) = [t for t in texts(page("two").axes[0]) if t.startswith("window")]
    told = words.replace("\n", " ").split()
    assert float(told[1]) == pytest.approx(high - low, rel=6e-3)
    assert float(told[4]) == pytest.approx(100.0 * (high - low) / aim, rel=1e-2)


def test_steepest_point_is_where_the_buffer_is_least(page):
    """Among the pH of the window; its gain in words is one over it."""
    ax, curve = page("two").axes[1], design_of("two").curve
    inside = curve[(curve["ph"] >= 6.0) & (curve["ph"] <= 9.0)]
    row = inside.loc[inside["buffer_eq_l_ph"].idxmin()]
    x, ph = lines(ax, "_steepest")[0][:, 0]
    assert ph == pytest.approx(row["ph"], abs=0.05)
    assert x == pytest.approx(row["buffer_eq_l_ph"], rel=0.02)
    (words,) = [t for t in texts(ax) if t.startswith("steepest")]
    assert float(words.split("\n")[1].split()[0].replace(",", "")) == pytest.approx(1.0 / x, rel=6e-3)
    assert ax.get_xscale() == "log"


def test_second_scale_is_one_over_the_first():
    """1e-3 eq/L per pH stands under 1000 pH per eq/L."""
    ax = design_figure(design_of("two")).axes[1]
    (gain,) = ax.child_axes
    ax.figure.canvas.draw()
    for intensity in (1e-3, 0.2):
        across = ax.transData.transform((intensity, 7.0))[0]
        assert gain.transData.transform((1.0 / intensity, 0.0))[0] == pytest.approx(across, abs=1e-6)
    assert gain.get_xlabel() == "process gain [pH per eq/L]"


def test_samples_make_a_band():
    """The second sample, a fifth stronger, is as much wider at every pH as it was made."""
    found = design_of("sampled")
    ph, low, high = sample_band(found)
    share = found.basis.mean.amounts[0]
    for at, base in POINTS[1:-1]:
        k = int(np.argmin(np.abs(ph - at)))
        assert high[k] - low[k] == pytest.approx(share * (STRONGER - 1.0) * 1e-3 * base, rel=1e-6)
        assert low[k] - 1e-9 <= found.curve["reagent_eq_l"][k] <= high[k] + 1e-9
    ax = plot_titration(found, ax=axis())
    assert [c.get_label() for c in ax.collections] == ["_samples"]
    assert "samples" in ax.get_title(loc="left")
    assert sample_band(design_of("two")) is None


# ---------------------------------------------------------------- equalization, train


def test_equalization_shows_the_table_and_the_volume_chosen(page):
    """Percent of the swings against volume; the dot lies on the line."""
    ax, _ = panel(page("two"), "Equalization")
    eq = design_of("two").layout.equalization
    x, y = lines(ax, "_left")[0]
    assert_array_equal(x, eq.table["volume_m3"])
    assert_allclose(y, 100.0 * eq.table["sd_share"])
    at, left = lines(ax, "_chosen")[0][:, 0]
    assert at == eq.content_m3
    assert left == pytest.approx(np.interp(at, x, y))
    assert f"chosen: {at:.1f} m³" in texts(ax)[0].replace("\n", " ")
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("volume always full [m³]", "left of their standard\ndeviation [%]")


def test_a_tank_that_is_not_built_is_told(page):
    """Set to zero by the file: words alone; not worth it: the curve with its reason and no dot."""
    ax, _ = panel(page("one"), "Equalization")
    assert texts(ax)[0].replace("\n", " ") == "No equalization tank: as the file sets it."
    found = design_of("two")
    eq = replace(found.layout.equalization, content_m3=0.0, flow_m3=0.0, words="none for the strength: too large")
    ax = plot_equalization(replace(found, layout=replace(found.layout, equalization=eq)), ax=axis())
    assert texts(ax) == ["None is built: too large"]
    assert lines(ax, "_chosen") == []


@pytest.mark.parametrize("name", NAMES)
def test_train_has_every_tank_with_its_figures(page, name):
    """One vessel for each, its set point in it, volume, size and feeds in words."""
    found = design_of(name)
    ax = next(ax for ax in page(name).axes if lines(ax, "_source"))
    built = found.layout.equalization.volume_m3 > 0.0
    assert len([x for x in ax.lines if x.get_label() == "_vessel"]) == len(found.layout.stages) + built
    assert bool(patches(ax, "_content_part")) == built
    words = " ".join(texts(ax)).replace("Ø ", "Ø")
    for s in found.layout.stages:
        assert f"{s.name}: {s.volume_m3:#.3g}".rstrip(".") in words
        assert f"Ø{s.vessel.diameter_m:#.3g} m" in words
    assert sum(t.startswith("pH ") for t in texts(ax)) == len(found.layout.stages)
    assert "out: pH 6 to 9" in words
    arrows = [t for t in ax.texts if not t.get_text()]
    feeds = sum(len(s.feeds) for s in found.layout.stages)
    assert len(arrows) == feeds + len(found.layout.stages) + built + 1  # pipes between, and those in and out


def test_equalization_tank_is_filled_as_its_parts():
    """The part always full has its share of the height of both."""
    found = design_of("four")
    ax = plot_train(found, ax=axis(7.5, 2.5))
    eq = found.layout.equalization
    (whole,), (full,) = patches(ax, "_flow_part"), patches(ax, "_content_part")
    assert (full[3] - full[2]) / (whole[3] - whole[2]) == pytest.approx(eq.content_m3 / eq.volume_m3)


def test_feeds_are_told_in_the_unit_that_is_pumped():
    """Equivalents over normality in L/h; a gas in kg/h: 44.01 g of carbon dioxide an equivalent at 99.9 %."""
    base = design_of("two").layout.stages[0].feeds["base"]
    least, most = (v / base.reagent.reacting_eq_l for v in (base.need.least_eq_h, base.need.largest_eq_h))
    assert [float(w) for w in feed_words(base).replace(" L/h", "").split(" to ")] == pytest.approx([least, most], rel=6e-3)
    gas = design_of("gas").layout.stages[0].feeds["acid"]
    told = [float(w) for w in feed_words(gas).replace(" kg/h", "").split(" to ")]
    per_eq = 0.04401 / 0.999 / gas.reagent.efficiency
    assert told == pytest.approx([per_eq * gas.need.least_eq_h, per_eq * gas.need.largest_eq_h], rel=1e-2)
    trims = [f for s in design_of("two").layout.stages for f in s.feeds.values() if f.trim]
    assert trims
    assert all(feed_words(f).endswith("to correct") for f in trims)


# ---------------------------------------------------------------- demand, sensitivity


def test_demand_is_that_of_the_table_of_the_design(page):
    """Least, mean and most at the set point, as it comes; the same behind the equalization tank, no wider."""
    ax, _ = panel(page("two"), "Reagent to pH")
    found = design_of("two")
    told = [d.product_kg_h for d in found.basis.demands if d.aim.name == "set point" and d.reagent.name == "caustic"]
    marks = [[float(x[0, 0]) for x in lines(ax, f"_{name}")] for name in ("least", "mean", "most")]
    behind, before = zip(*marks, strict=True)  # from below
    assert_allclose(before, told, rtol=1e-9)
    assert behind[2] - behind[0] < before[2] - before[0]
    assert behind[2] < before[2]
    assert ax.get_xlabel() == "product as delivered [kg/h]"
    words = " ".join(texts(ax))
    assert "caustic, as it comes" in words
    assert "caustic, behind equalization" in words
    assert " – ".join(f"{v:#.3g}" for v in told) in words


def test_demand_without_equalization_has_one_row_a_reagent():
    """As it comes."""
    assert [g.place for g in demand_groups(design_of("one"))] == ["as it comes"]


def test_tornado_shows_the_table_of_sensitivities(page):
    """Bars are ratios less one in percent, the row of the largest change on top, both panels in one order."""
    demand, tolerance = panel(page("two"), "Demand")
    table = design_of("two").sensitivity.set_index("change")
    names = [t.get_text() for t in demand.get_yticklabels()]
    assert sorted(names) == sorted(table.index)
    for ax, column in ((demand, "demand_ratio"), (tolerance, "tolerance_ratio")):
        assert_allclose([p.get_width() for p in ax.patches], 100.0 * (table.loc[names, column] - 1.0), atol=1e-9)
        assert ax.get_xlabel() == "change [%]"
    largest = (table[["demand_ratio", "tolerance_ratio"]] - 1.0).abs().max(axis=1)
    assert names[-1] == largest.idxmax()


# ---------------------------------------------------------------- the pages


@pytest.mark.parametrize("name", NAMES)
def test_no_words_lie_on_others_or_leave_the_page(page, run, name):
    """One tank to four, long names, a stop, a band; the design on A4, the simulation as long as it must be."""
    figures = [page(name)] + ([run(name)] if name in SIMULATED else [])
    for figure in figures:
        assert overlaps(figure) == []
        wide, high = figure.bbox.width, figure.bbox.height
        assert [w for w, b in boxes(figure) if b.x0 < 0 or b.y0 < 0 or b.x1 > wide or b.y1 > high] == []
        assert figure.get_size_inches()[0] == 8.27
    assert page(name).get_size_inches()[1] == 11.69


@pytest.mark.parametrize("name", ["four", "gas"])
def test_type_has_every_letter(page, run, name, tmp_path):
    """No word of ours needs a letter that the type lacks: saving warns of nothing."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        for figure in (page(name), run(name)):
            figure.savefig(tmp_path / "a.pdf")


def test_same_design_same_bytes(tmp_path):
    """All formats, no date and no program name."""
    for folder in ("a", "b"):
        (tmp_path / folder).mkdir()
        save_design(design_of("one"), {kind: tmp_path / folder / f"design.{kind}" for kind in KINDS})
        save_simulation(design_of("one"), {"svg": tmp_path / folder / "simulation.svg"})
    for path in sorted((tmp_path / "a").iterdir()):
        first, second = path.read_bytes(), (tmp_path / "b" / path.name).read_bytes()
        assert first == second
        assert len(first) > 10_000
        assert not any(word in first for word in (b"CreationDate", b"dc:date", b"Matplotlib v", b"/Producer"))
    assert len(list((tmp_path / "a").iterdir())) == 3


def test_head_says_what_is_known(page):
    """Name, verdict, window and aim; a stop in a box with its whole reason."""
    words = said(page("two"))
    assert design_of("two").verdict in words
    assert "Window pH 6 to 9 (permit of the example)" in words
    assert "Do not build this: cyanide" in said(page("stopped"))
    boxed = {name: sum(isinstance(a, Rectangle) and a is not page(name).patch for a in page(name).get_children())
             for name in ("stopped", "four")}
    assert boxed == {"stopped": 1, "four": 0}  # the four tanks hold
    assert LONG[:20] in " ".join(t for ax in page("four").axes for t in texts(ax)).replace("\n", " ")


# ---------------------------------------------------------------- labels


def test_spread_keeps_its_distance_and_order():
    """Alone as wanted; close ones around their middle; inside the ends."""
    assert spread([5.0], 1.0, 0.0, 10.0) == [5.0]
    assert spread([5.0, 5.0], 1.0, 0.0, 10.0) == [4.5, 5.5]
    assert spread([2.0, 7.0], 1.0, 0.0, 10.0) == [2.0, 7.0]
    assert spread([9.9, 9.8, 9.7], 1.0, 0.0, 10.0) == pytest.approx([10.0, 9.0, 8.0])
    found = spread([1.0, 1.6, 2.2, 2.3, 8.0], 0.8, 0.0, 10.0)
    assert np.diff(found).min() >= 0.8 - 1e-9


def test_labels_without_room_at_their_side_stand_at_the_edge():
    """Above their point, inside the axes."""
    ax = axis()
    ax.set(xlim=(0.0, 1.0), ylim=(0.0, 14.0))
    free, cut = side_labels(ax, [(0.9, 7.0, "a label"), (0.02, 2.0, "another label")], left=True)
    assert free == 7.0
    assert cut > 2.0
    ax.figure.canvas.draw()
    assert all(t.get_window_extent().x0 >= ax.get_window_extent().x0 for t in ax.texts)
