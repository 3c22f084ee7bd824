"""Figures: axes say quantity and unit, what is drawn is what was handed in, odd inputs do not break them."""

import numpy as np
import pandas as pd
import pytest
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.readings.reader import read_readings
from aquabuf.report import figures
from aquabuf.report.figures import (
    plot_alkalinity,
    plot_buffering,
    plot_curves,
    plot_worst,
    sample_figure,
    save_samples,
)
from aquabuf.report.tally import Tally

PH = np.array([5.5, 6.5, 7.5, 8.5])
ALK = np.array([-0.02, 0.1, 1.0, 30.0])
WARNED = np.array([True, True, False, False])


@pytest.fixture
def ax():
    """Axes of a figure that no window shows."""
    return Figure().subplots()


def points(axes):
    """Drawn points by label: x and y."""
    return {c.get_label(): np.asarray(c.get_offsets()).T for c in axes.collections if c.get_label()[0] != "_"}


def tally_of(table, text=None, **options):
    """What a run adds up to, and its curves."""
    chosen, tally = Options(**({"draws": 0} | options)), Tally()
    tally.add(assess(read_readings(table(text) if text else table()), chosen, shipped_limits()))
    return tally, tally.curves(chosen)


def test_alkalinity_panel(ax):
    """Both quantities with unit; warned and calm samples apart, counted, each at its place."""
    assert plot_alkalinity(PH, ALK, WARNED, ax=ax) is ax
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("Alkalinity [meq/L]", "pH")
    drawn = points(ax)
    assert set(drawn) == {"no warning (2)", "warning (2)"}
    assert_array_equal(drawn["warning (2)"], [ALK[WARNED], PH[WARNED]])
    assert_array_equal(drawn["no warning (2)"], [ALK[~WARNED], PH[~WARNED]])
    assert ax.get_xscale() == "symlog"
    assert [t.get_text() for t in ax.get_xticklabels()] == ["0", "0.1", "1", "10"]  # powers of ten about the samples


@pytest.mark.parametrize("alkalinity", [
    [-0.5, -0.02], [-3.0], [0.0], [0.001], [250.0], [0.02, 0.03]], ids=str)
def test_alkalinity_ticks_reach_the_samples(ax, alkalinity):
    """All negative, one sample, zero or large: ticks are there and rise; the zero line only where samples lie on both sides."""
    a = np.array(alkalinity)
    plot_alkalinity(np.full(a.size, 6.0), a, np.zeros(a.size, dtype=bool), ax=ax)
    ticks = ax.get_xticks()
    assert len(ticks) >= 1
    assert (np.diff(ticks) > 0).all()
    assert len(ax.lines) == int(a.min() <= 0.0 <= a.max())
    assert [t.get_text() for t in ax.get_legend().get_texts()] == [f"no warning ({a.size})"]


def test_buffering_panel(ax):
    """Closed buffer intensity against pH on a logarithmic axis with plain numbers."""
    beta = np.array([0.01, 0.1, 0.05, 2.0])
    plot_buffering(PH, beta, WARNED, ax=ax)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("pH", "Buffer intensity, closed [meq/L per pH]")
    assert ax.get_yscale() == "log"
    assert ax.yaxis.get_major_formatter()(0.01, 0) == "0.01"
    assert_array_equal(points(ax)["warning (2)"], [PH[WARNED], beta[WARNED]])


@pytest.mark.parametrize(("count", "many"), [(3000, False), (3001, True)])
def test_many_points_are_drawn_as_pixels(ax, count, many):
    """A vector file does not grow with the table; every point is still there."""
    x = np.linspace(6.0, 8.0, count)
    plot_buffering(x, x, np.zeros(count, dtype=bool), ax=ax)
    cloud = ax.collections[0]
    assert bool(cloud.get_rasterized()) == many
    assert len(cloud.get_offsets()) == count


def worst_table(values, *, ends=False, names=None):
    """The columns that bars and curves need."""
    n = len(values)
    table = pd.DataFrame({"row": np.arange(2, n + 2), "sample_id": names or [f"s{i}" for i in range(n)], "ph": 6.5, "alkalinity_meq_l": 0.1,
                          "acid_to_ph_6_0_meq_l": values, "warnings": ["x"] + [""] * (n - 1)})
    if ends:
        table["acid_to_ph_6_0_meq_l_low"], table["acid_to_ph_6_0_meq_l_high"] = np.array(values) - 0.01, np.array(values) + 0.02
    return table


def test_worst_panel(ax):
    """Worst on top; bars as long as the figure, warned ones colored; no interval was drawn, so none is spoken of."""
    plot_worst(worst_table([0.01, 0.05, 0.3]), ax=ax)
    assert ax.get_xlabel() == "Strong acid to pH 6, closed [meq/L]"
    assert ax.get_title(loc="left") + ax.get_title() == "Worst buffered first"
    assert_allclose([b.get_width() for b in ax.patches], [0.01, 0.05, 0.3], rtol=1e-12)
    place = dict(zip([t.get_text() for t in ax.get_yticklabels()], ax.get_yticks(), strict=True))
    assert place["s0"] > place["s1"] > place["s2"]
    colors = [to_hex(b.get_facecolor()) for b in ax.patches]
    assert colors[0] != colors[1] == colors[2]
    assert len(ax.collections) == 0


def test_worst_panel_with_intervals_and_negative_values(ax):
    """The interval is a line from low to high; the label tells what negative means; long names are cut, the table too."""
    plot_worst(worst_table(np.linspace(-0.1, 0.3, 15), ends=True, names=["a" * 40, *(f"s{i}" for i in range(14))]), ax=ax)
    assert "negative: below it already" in ax.get_xlabel()
    assert "(line: 90% interval)" in ax.get_title(loc="left") + ax.get_title()
    assert len(ax.patches) == 12
    segments = np.array(ax.collections[0].get_segments())
    assert_allclose(segments[:, :, 0], np.linspace(-0.1, 0.3, 15)[:12, None] + np.array([-0.01, 0.02]), rtol=0, atol=1e-12)
    assert ax.get_yticklabels()[0].get_text() == "a" * 22


def test_curve_panel(ax, table):
    """Curves are the table's own; a dot marks each sample at no acid; axes say which side is base."""
    tally, curves = tally_of(table)
    plot_curves(curves, tally.worst, ax=ax)
    assert ax.get_xlabel() == "Strong acid added [meq/L]  (left of 0: base)"
    assert ax.get_ylabel() == "pH"
    lines = {line.get_label(): line for line in ax.lines if line.get_label()[0] != "_"}
    assert list(lines) == tally.worst["sample_id"].tolist()
    for name, line in lines.items():
        own = curves[curves["sample_id"] == name]
        assert_array_equal(line.get_xdata(), own["acid_added_meq_l"])
        assert_array_equal(line.get_ydata(), own["ph"])
    dots = [line for line in ax.lines if line.get_marker() == "o"]
    assert_array_equal([d.get_ydata()[0] for d in dots], tally.worst["ph"])
    assert_array_equal([d.get_xdata()[0] for d in dots], 0.0)


def test_curve_panel_without_curves(ax):
    """Nothing to draw is no error."""
    empty = pd.DataFrame(columns=["row", "sample_id", "ph", "acid_added_meq_l"])
    plot_curves(empty, worst_table([0.1]).head(0), ax=ax)
    assert ax.get_xlabel().startswith("Strong acid added")


def test_whole_figure(table):
    """Four panels, the samples of the run in them, and the source in the title."""
    tally, curves = tally_of(table)
    figure = sample_figure(tally, curves, source="waters.csv")
    assert [a.get_title(loc="left") for a in figure.axes] == [
        "What the samples are", "Worst buffered first", "How strongly they resist pH change", "What acid or base does to them"]
    assert figure.get_suptitle() == "waters.csv: 4 samples, 3 with a warning"
    drawn = np.hstack(list(points(figure.axes[0]).values()))
    assert_allclose(np.sort(drawn[1]), [6.6, 6.9, 7.8, 8.2], rtol=1e-6)
    assert_allclose(np.sort(drawn[0]), [0.03, 0.12, 1.1, 1.5], rtol=1e-6)


@pytest.mark.parametrize("text", [
    "sample_id,temperature_c,ph,alkalinity_meq_l\nonly,10,7,1\n", "sample_id,temperature_c,ph,dic_mmol_l\na,10,3.5,0.1\nb,10,3.9,0.2\n",
    "sample_id,temperature_c,salinity,alkalinity_umol_kg,dic_umol_kg\n<&>$x_1$,15,35,2300,2000\n"], ids=["one sample", "all negative", "markup name"])
def test_odd_tables_are_drawn(table, tmp_path, text):
    """A single sample, only acid waters, a name with markup signs: both files appear and hold something."""
    tally, curves = tally_of(table, text)
    paths = {kind: tmp_path / f"f.{kind}" for kind in ("png", "svg")}
    save_samples(tally, curves, paths, source="a_b$c$.csv")
    assert paths["png"].read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    assert "</svg>" in paths["svg"].read_text(encoding="utf-8")


@pytest.mark.parametrize(("where", "name"), [("sample", "a $\\frac{$ b"), ("file", "a $\\frac{$ b"), ("sample", "_hidden"), ("sample", "湖水")])
def test_any_name_can_be_drawn(table, tmp_path, name, where):
    """Dollar signs, a leading underscore, another script: drawn as they are, or as well as the font can, without a warning."""
    tally, curves = tally_of(table, f'sample_id,temperature_c,ph,alkalinity_meq_l\n"{name if where == "sample" else "plain"}",10,7,1\n')
    save_samples(tally, curves, {"svg": tmp_path / "f.svg"}, source=name if where == "file" else "plain")
    svg = (tmp_path / "f.svg").read_text(encoding="utf-8")
    assert name in svg


def test_figure_files_have_no_date_and_no_program(table, tmp_path):
    """Two files of the same data are the same bytes; text in the vector file stays text."""
    tally, curves = tally_of(table)
    kept = []
    for name in ("a", "b"):
        paths = {kind: tmp_path / f"{name}.{kind}" for kind in ("png", "svg")}
        save_samples(tally, curves, paths, source="waters.csv")
        kept.append([p.read_bytes() for p in paths.values()])
    assert kept[0] == kept[1]
    png, svg = kept[0]
    assert b"tEXt" not in png
    assert b"<dc:date>" not in svg
    assert b"<dc:creator>" not in svg
    assert b"Alkalinity [meq/L]" in svg


def test_every_public_plot_is_named():
    """What the module offers is tested above."""
    assert {n for n in figures.__all__ if n.startswith("plot")} == {"plot_alkalinity", "plot_buffering", "plot_curves", "plot_worst"}
