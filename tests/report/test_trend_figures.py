"""The figure of trends: values as sampled, the line of the slope told, words in place, a line where the method changes."""

import itertools

import numpy as np
import pandas as pd
import pytest
from matplotlib.figure import Figure
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.trends import trend_table
from aquabuf.report import trend_figures
from aquabuf.report.trend_figures import PANELS, main_quantities, plot_trend, save_trends, sites_on_page, trend_figure

MAIN = ["anc_gran_ueq_l", "sulfate_ueq_l", "nitrate_ueq_l", "base_cations_ueq_l"]
HARD_NAME = "_lake $\\frac{$ 湖 of a name that goes on and on to sixty letters"


def samples(site="Pond", first=1990, last=2009, *, slope=-2.0, step=None, seed=1, names=MAIN):
    """Two samples a year, falling in a line with a little noise; a step where a later method begins."""
    dates = pd.DatetimeIndex([f"{y}-{m}-15" for y in range(first, last + 1) for m in ("05", "09")])
    years = dates.year.to_numpy() + np.where(dates.month == 5, 0.37, 0.71)
    rng = np.random.default_rng(seed)
    frame = pd.DataFrame({"site": site, "date": dates, "method": ""})
    for k, name in enumerate(names):
        frame[name] = 100.0 + 10.0 * k + slope * (years - 2000.0) + rng.normal(0.0, 1.0, years.size)
    if step:
        year, size = step
        late = dates.year.to_numpy() >= year
        frame["method"] = np.where(late, "ICP", "AAS")
        frame.loc[late, names] += size
    return frame


@pytest.fixture
def ax():
    """Axes that no window shows."""
    return Figure(figsize=(11.0, 8.0)).subplots(2, 2)[0, 0]


def row(frame, name="sulfate_ueq_l", **changed):
    """The trend of one quantity."""
    table = trend_table(frame)
    return table[table["quantity"] == name].iloc[0].copy() if not changed else pd.Series(
        table[table["quantity"] == name].iloc[0].to_dict() | changed)


def drawn(axes, label):
    """Lines whose label begins so."""
    return [np.array(line.get_data(), dtype=float) for line in axes.lines if line.get_label().startswith(label)]


def words(axes):
    """What is written above the panel, in one line."""
    return axes.texts[-1].get_text().replace("\n", " ")


def title(axes):
    """Heading, in one line."""
    return (axes.get_title(loc="left") + axes.get_title()).replace("\n", " ")


def test_values_stand_at_their_dates(ax):
    """Decimal years, each in the middle of its day; unit on the axis; undated and missing values are not drawn."""
    frame = samples()
    frame.loc[3, "sulfate_ueq_l"] = np.nan
    frame.loc[5, "date"] = pd.NaT
    assert plot_trend(frame, row(frame), ax=ax) is ax
    (points,) = drawn(ax, "_values")
    own = frame.drop(index=[3, 5])
    assert_array_equal(points[1], own["sulfate_ueq_l"])
    day = own["date"].dt.day_of_year + 0.0
    assert_allclose(points[0], own["date"].dt.year + (day - 0.5) / np.where(own["date"].dt.is_leap_year, 366.0, 365.0), rtol=1e-12)
    assert (ax.get_ylabel(), title(ax)) == ("µeq/L", "Sulfate, Pond")


def test_many_values_are_drawn_small(ax):
    """Up to sixty stand large."""
    sizes = []
    for last in (2019, 2020):
        frame = samples(last=last)
        plot_trend(frame, row(frame), ax=ax)
        sizes.append(next(line for line in reversed(ax.lines) if line.get_label().startswith("_values")).get_markersize())
    assert sizes[0] > sizes[1]


def test_only_the_site_s_own_values(ax):
    """Another lake in the table is not in the panel."""
    both = pd.concat([samples("Pond"), samples("Tarn", slope=5.0)])
    plot_trend(both, row(samples("Pond")), ax=ax)
    assert drawn(ax, "_values")[0].shape == (2, 40)


def test_line_has_the_slope_that_is_told(ax):
    """Sen slope through the middle: half of the values lie above; the band between the ends of the interval meets it there."""
    frame = samples()
    trend = row(frame)
    plot_trend(frame, trend, ax=ax)
    (points,), (line,) = drawn(ax, "_values"), drawn(ax, "_sen")
    assert_allclose(np.diff(line[1]) / np.diff(line[0]), trend["sen_slope"], rtol=1e-9)
    assert_allclose(line[0], [points[0].min(), points[0].max()])
    above = points[1] - np.interp(points[0], *line)
    assert (above > 0.0).sum() == (above < 0.0).sum()
    band = next(c for c in ax.collections if c.get_label() == "_band").get_paths()[0].vertices
    middle = np.median(points[0])
    for end, name in ((line[0][0], "start"), (line[0][1], "end")):
        y = np.sort(band[np.isclose(band[:, 0], end), 1])
        level = np.interp(middle, *line)
        expected = level + np.sort(np.array([trend["sen_low"], trend["sen_high"]]) * (end - middle))
        assert_allclose(y[[0, -1]], expected, rtol=1e-9, err_msg=name)
    assert_allclose(band[np.isclose(band[:, 0], middle), 1], np.interp(middle, *line), rtol=1e-9)


def test_words_are_those_of_the_table(ax):
    """Direction, slope and how sure, and whether that is recovery; no second wording."""
    frame = samples()
    trend = row(frame)
    plot_trend(frame, trend, ax=ax)
    assert words(ax) == f"{trend['words'].split('; ')[0]}: recovery"
    assert words(ax).startswith("falls by 2.0")


@pytest.mark.parametrize(("changed", "color", "dashed"), [
    ({"toward": "harm"}, trend_figures.WARNED, False), ({"toward": "recovery"}, trend_figures.RECOVERY, False),
    ({"toward": "", "direction": "no sure trend"}, trend_figures.INK, True)])
def test_look_of_the_line_tells_harm_recovery_and_doubt(ax, changed, color, dashed):
    """Color by what the direction means; dashed where there is none for sure."""
    frame = samples()
    plot_trend(frame, row(frame, **changed), ax=ax)
    line = next(line for line in ax.lines if line.get_label() == "_sen")
    assert line.get_color() == color
    assert (line.get_linestyle() == "--") == dashed


def test_interval_without_bounds_has_no_band(ax):
    """The line stands alone."""
    frame = samples()
    plot_trend(frame, row(frame, sen_high=np.nan), ax=ax)
    assert len(ax.collections) == 0
    assert len(drawn(ax, "_sen")) == 1


def test_too_few_years_have_values_and_words_only(ax):
    """No line; the words say what is missing."""
    frame = samples(last=1994)
    plot_trend(frame, row(frame), ax=ax)
    assert drawn(ax, "_sen") == []
    assert drawn(ax, "_values")[0].shape == (2, 10)
    assert words(ax) == "no trend can be told: 5 years with a value, 8 are needed"


def test_a_change_of_method_is_marked(ax):
    """A line at the first sample of the later method, both names, a mark of its own for each, and a level for each side."""
    frame = samples(step=(2000, 12.0))
    trend = row(frame)
    plot_trend(frame, trend, ax=ax)
    (change,) = drawn(ax, "_change")
    assert change[0][0] == pytest.approx(2000.0 + 135.5 / 366.0)  # 15 May of a leap year
    assert [t.get_text() for t in ax.texts][:2] == ["AAS", "ICP"]
    marks = {line.get_marker() + line.get_markerfacecolor() for line in ax.lines if line.get_label().startswith("_values")}
    assert len(marks) == 2
    early, late = drawn(ax, "_sen")
    assert_allclose([np.diff(line[1])[0] / np.diff(line[0])[0] for line in (early, late)], trend["sen_slope"], rtol=1e-9)
    extended = early[1][0] + trend["sen_slope"] * (late[0][0] - early[0][0])
    assert late[1][0] - extended == pytest.approx(12.0, abs=1.5)
    assert early[0][1] < change[0][0] <= late[0][0]


def test_three_methods_are_named_once_each(ax):
    """The first on the left of the first line, every later one on the right of its own."""
    frame = samples(step=(2000, 5.0))
    frame.loc[frame["date"].dt.year >= 2005, "method"] = "IC"
    plot_trend(frame, row(frame), ax=ax)
    assert [t.get_text() for t in ax.texts[:-1] if t.get_text()] == ["AAS", "ICP", "IC"]
    assert len(drawn(ax, "_sen")) == 3


def test_unknown_method_is_called_so(ax):
    """An empty name on one side."""
    frame = samples(step=(2000, 0.0)).replace({"method": {"AAS": ""}})
    plot_trend(frame, row(frame), ax=ax)
    assert [t.get_text() for t in ax.texts][:2] == ["unknown method", "ICP"]


def test_without_a_column_of_methods(ax):
    """All values count as one method."""
    frame = samples().drop(columns="method")
    plot_trend(frame, row(frame), ax=ax)
    assert drawn(ax, "_change") == []


def test_zero_is_marked_where_values_cross_it(ax):
    """ANC on both sides of zero; not where all are above."""
    frame = samples(names=["anc_gran_ueq_l"])
    frame["anc_gran_ueq_l"] -= 100.0
    plot_trend(frame, row(frame, "anc_gran_ueq_l"), ax=ax)
    assert any(list(line.get_ydata()) == [0.0, 0.0] for line in ax.lines)
    ax.clear()
    plot_trend(samples(), row(samples()), ax=ax)
    assert not any(list(line.get_ydata()) == [0.0, 0.0] for line in ax.lines)


def test_ph_has_no_unit(ax):
    """Its name stands on the axis instead."""
    frame = samples(names=["ph"])
    plot_trend(frame, row(frame, "ph"), ax=ax)
    assert ax.get_ylabel() == "pH"


# ------------------------------------------------------------------ the page


def test_main_quantities():
    """ANC, what drives it, what answers; the second definition where the first cannot be told; the rest where there is no main one."""
    assert main_quantities(trend_table(samples(names=[*MAIN, "ph", "doc_mg_l"])), "Pond") == MAIN
    frame = samples(names=["anc_gran_ueq_l", "anc_charge_ueq_l", "calcium_ueq_l"])
    assert main_quantities(trend_table(frame), "Pond") == ["anc_gran_ueq_l"]
    frame.loc[6:, "anc_gran_ueq_l"] = np.nan
    assert main_quantities(trend_table(frame), "Pond") == ["anc_charge_ueq_l"]
    assert main_quantities(trend_table(samples(names=["doc_mg_l", "ph"])), "Pond") == ["ph", "doc_mg_l"]


@pytest.mark.parametrize(("names", "per_page"), [(MAIN, 3), (MAIN[:3], 4), (MAIN[:2], 6), (MAIN[:1], 12)])
def test_sites_to_a_page(names, per_page):
    """Up to twelve panels, no site torn apart."""
    table = trend_table(pd.concat([samples(f"s{k:02d}", last=1998, names=names) for k in range(13)]))
    pages = sites_on_page(table)
    assert PANELS == 12
    assert [len(page) for page in pages[:-1]] == [per_page] * (len(pages) - 1)
    assert list(itertools.chain(*pages)) == [f"s{k:02d}" for k in range(13)]


@pytest.mark.parametrize(("sites", "names", "grid"), [
    (1, MAIN, (2, 2)), (1, MAIN[:1], (1, 1)), (1, MAIN[:3], (2, 2)), (2, MAIN, (2, 4)), (3, MAIN, (3, 4)), (4, MAIN[:3], (4, 3)),
    (2, MAIN[:1], (1, 2)), (6, MAIN[:2], (3, 4)), (12, MAIN[:1], (3, 4))])
def test_panels_of_a_page(sites, names, grid):
    """A panel for each site and quantity, site after site; all on one span of years; no empty frames."""
    frame = pd.concat([samples(f"s{k:02d}", first=1990 + k, names=names) for k in range(sites)])
    figure = trend_figure(frame, trend_table(frame), source="lakes.csv")
    assert len(figure.axes) == sites * len(names)
    shape = figure.axes[0].get_gridspec()
    assert (shape.nrows, shape.ncols) == grid
    assert [title(ax).rpartition(", ")[2] for ax in figure.axes] == [f"s{k:02d}" for k in range(sites) for _ in names]
    assert len({ax.get_xlim() for ax in figure.axes}) == 1
    assert figure.get_suptitle() == f"lakes.csv: trends of {sites} site{'s' if sites > 1 else ''}"


def test_page_asked_for():
    """Only the sites named, in that order; the title says that there are more."""
    frame = pd.concat([samples(f"s{k}") for k in range(5)])
    figure = trend_figure(frame, trend_table(frame), source="lakes.csv", sites=["s4", "s3"])
    assert [title(ax).rpartition(", ")[2] for ax in figure.axes] == ["s4"] * 4 + ["s3"] * 4
    assert figure.get_suptitle() == "lakes.csv: trends of 2 of 5 sites"
    assert len(trend_figure(frame, trend_table(frame)).axes) == 12


PAGES = {
    "three sites": pd.concat([samples(name) for name in ("Pond", "Tarn", HARD_NAME)]),
    "one site": samples(HARD_NAME),
    "one panel": samples(names=["doc_mg_l"]),
    "twelve sites": pd.concat([samples(f"{k} {HARD_NAME}", names=["doc_mg_l"], slope=0.0) for k in range(12)]),
    "four by three": pd.concat([samples(f"{k} a lake of long name", names=MAIN[:3]) for k in range(4)]),
    "methods": samples(step=(2000, 30.0)).replace({"method": {"ICP": HARD_NAME}}),
    "too few": samples(last=1992),
}  # fmt: skip


@pytest.mark.filterwarnings("ignore:Glyph")
@pytest.mark.parametrize("name", PAGES)
def test_words_keep_their_place(name):
    """On the finished page no words leave it, and none touch: headings, words, ticks, labels of axes, title and foot."""
    frame = PAGES[name]
    figure = trend_figure(frame, trend_table(frame), source=f"{HARD_NAME}.csv")
    figure.draw_without_rendering()
    told = [*figure.texts]
    for ax in figure.axes:
        for axis in (ax.xaxis, ax.yaxis):
            low, high = sorted(axis.get_view_interval())
            told += [t for at, t in zip(axis.get_majorticklocs(), axis.get_ticklabels(), strict=True) if low <= at <= high]
        told += [ax.title, ax._left_title, ax.yaxis.label, ax.texts[-1]]
    boxes = [(t.get_text(), t.get_window_extent()) for t in told if t.get_text()]
    for text, box in boxes:
        assert figure.bbox.x0 <= box.x0 < box.x1 <= figure.bbox.x1, text
        assert figure.bbox.y0 <= box.y0 < box.y1 <= figure.bbox.y1, text
    for (a, box), (b, other) in itertools.combinations(boxes, 2):
        assert not box.overlaps(other), (a, b)
    for ax in figure.axes:
        for text in ax.texts[:-1]:
            box, frame_box = text.get_window_extent(), ax.get_window_extent()
            assert frame_box.y0 <= box.y0 < box.y1 <= frame_box.y1, text.get_text()


def test_wide_words_do_not_narrow_the_panels():
    """Letters wider than the usual: the panels still reach the edge of the page."""
    frame = samples()
    figure = trend_figure(frame, trend_table(frame).assign(words="WWWW MMMM " * 9))
    figure.draw_without_rendering()
    assert max(ax.get_position().x1 for ax in figure.axes) > 0.98


def saved(folder, frame, name):
    """Bytes of both formats."""
    paths = {kind: folder / f"{name}.{kind}" for kind in ("png", "svg")}
    save_trends(frame, trend_table(frame), paths, source="a $b$ 湖.csv")
    return [path.read_bytes() for path in paths.values()]


def test_same_samples_same_bytes(tmp_path):
    """No date, no program name; names stay text as they are."""
    png, svg = first = saved(tmp_path, samples(HARD_NAME), "a")
    assert saved(tmp_path, samples(HARD_NAME), "b") == first
    assert saved(tmp_path, samples(HARD_NAME, seed=2), "c") != first
    assert b"tEXt" not in png
    assert b"tIME" not in png
    assert b"<dc:date>" not in svg
    assert b"<dc:creator>" not in svg
    assert HARD_NAME[:21] in svg.decode("utf-8")
    assert "a $b$ 湖.csv: trends of 1 site" in svg.decode("utf-8")


def test_every_public_plot_is_tested():
    """What the module offers is drawn above."""
    assert {n for n in trend_figures.__all__ if n.startswith("plot")} == {"plot_trend"}
