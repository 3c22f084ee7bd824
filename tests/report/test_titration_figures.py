"""The figure of one titration: axes say quantity and unit, what is drawn is what was read or found, words keep their place."""

import sys
from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.text import Annotation, Text
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent.parent))

from invented_titrations import WATERS, assessed, fresh

from aquabuf.assess.titration.smooth import fitted_curve
from aquabuf.report import titration_figures
from aquabuf.report.labels import SIZE
from aquabuf.report.titration_figures import (
    plot_curve,
    plot_derivative,
    plot_gran,
    plot_residuals,
    save_titration,
    titration_figure,
)
from aquabuf.report.titration_view import finding_lines, title_line

PANELS = {"curve": plot_curve, "gran": plot_gran, "slope": plot_derivative, "rest": plot_residuals}


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    """All invented waters, assessed once."""
    return assessed(tmp_path_factory.mktemp("waters"), WATERS)


@pytest.fixture
def draw(result):
    """Draw a panel of a water on an axis that no window shows; returns the axis, the result and the water's number."""
    def go(panel, water):
        i = list(result.solved.curves.names).index(water)
        ax = Figure().subplots()
        assert PANELS[panel](result, i, ax=ax) is ax
        return ax, result, i
    return go


def lines(ax):
    """Drawn lines by label: x and y; counts in brackets are cut off."""
    out = {}
    for line in ax.lines:
        out.setdefault(line.get_label().partition(" (")[0], []).append(np.array(line.get_data(), dtype=float))
    return out


def words(ax):
    """All that is written inside an axis."""
    return "\n".join(t.get_text() for t in ax.texts)


def readings(water):
    """Titrant and pH of an invented water, as written to the file; of repeated volumes the last."""
    added, ph = list(WATERS[water][0].values())
    keep = np.append(np.diff(added) > 0.0, True)
    return added[keep], ph[keep]


@pytest.mark.parametrize(("water", "titrant", "slope", "gran"), [
    ("Dilute lake", "Acid added [mL]", "Fall of pH [per mL]", "First Gran function [µmol/L]"),
    ("Sea water", "Acid added [g]", "Fall of pH [per g]", "First Gran function [µmol/kg]"),
    ("Mine water", "Base added [mL]", "Rise of pH [per mL]", "First Gran function [µmol/L]")])
def test_axes_name_quantity_and_unit(draw, water, titrant, slope, gran):
    """Every axis of every panel, by volume, by mass and with base."""
    for panel, quantity in (("curve", "pH"), ("gran", gran), ("slope", slope), ("rest", "Reading less fitted curve [pH]")):
        ax, *_ = draw(panel, water)
        assert (ax.get_xlabel(), ax.get_ylabel()) == (titrant, quantity)


def test_curve_shows_readings_and_the_fit(draw):
    """Points are the readings of the file; the line is the fit, and it passes the points that noise has hardly moved."""
    ax, result, i = draw("curve", "Hard water")
    drawn = lines(ax)
    assert_allclose(drawn["in the fit"][0], readings("Hard water"), rtol=0, atol=1e-12)
    acid, ph = fitted_curve(result.solved, i)
    assert_allclose(drawn["_fit"][0], [acid * 100.0 / 0.05, ph], rtol=0, atol=1e-12)
    assert_allclose(np.interp(drawn["in the fit"][0][0], *drawn["_fit"][0]), drawn["in the fit"][0][1], rtol=0, atol=0.02)
    assert ax.get_title(loc="left") + ax.get_title() == "Titration curve (line: fit)"


def test_points_left_out_are_hollow_and_counted(draw):
    """Of swept sea water only the acid end enters the fit, and the line ends where the fit does."""
    ax, *_ = draw("curve", "Swept sea water")
    added, ph = readings("Swept sea water")
    used = (ph >= 2.9) & (ph <= 3.6)
    drawn = lines(ax)
    assert_array_equal(drawn["in the fit"][0], [added[used], ph[used]])
    assert_array_equal(drawn["left out"][0], [added[~used], ph[~used]])
    assert [t.get_text() for t in ax.get_legend().get_texts()] == [f"in the fit ({used.sum()})", f"left out ({(~used).sum()})"]
    assert {line.get_markerfacecolor() for line in ax.lines if line.get_label().startswith("left out")} == {"white"}
    assert_allclose(drawn["_fit"][0][0][[0, -1]], added[used][[0, -1]], rtol=1e-12)


def test_end_points_are_marked_and_labeled(draw):
    """Each mark stands at its volume and, for a fixed end point, at its pH; the label says the volume; one is recommended."""
    ax, result, i = draw("curve", "Carbonate water")
    s, per_ml = result.solved, 0.05 / 100.0
    marks = np.hstack(lines(ax)["_mark"]).T
    for x, y in [(-s.acidity[8.3].value[i], 8.3), (s.crossings[4.5].acid[i], 4.5), (s.level.acid[i], s.level_ph[i])]:
        assert np.isclose(marks, [x / per_ml, y], rtol=0, atol=1e-9).all(axis=1).any()
    for x in (s.gran.acid[i], s.inflection.acid[i], s.fit.fit.alkalinity[i]):
        here = marks[np.isclose(marks[:, 0], x / per_ml, rtol=0, atol=1e-9)]
        assert len(here) == 1
        assert here[0, 1] == pytest.approx(np.interp(x, *fitted_curve(s, i)), abs=1e-9)
    said = [t.get_text() for t in ax.texts]
    assert f"pH 8.3: {-s.acidity[8.3].value[i] / per_ml:.3f} mL" in said
    assert f"Gran line: {s.gran.acid[i] / per_ml:.3f} mL" in said
    assert [t.get_text() for t in ax.texts if t.get_fontweight() == "bold"] == [
        f"Fit: {s.fit.fit.alkalinity[i] / per_ml:.3f} mL, recommended"]
    assert sum(line.get_markerfacecolor() == "#222222" for line in ax.lines if line.get_label() == "_mark") == 1


def test_base_titration_shows_the_acidity_end_points(draw):
    """3.7, 4.5 and 8.3 with base added and acidity; at 8.3 it is the mineral acid and one base per CO2."""
    ax, result, i = draw("curve", "Mine water")
    marks = np.hstack(lines(ax)["_mark"])
    for end in (3.7, 4.5, 8.3):
        acidity = result.solved.acidity[end].value[i]
        assert f"pH {end:g}: {acidity * 2000.0:.3f} mL, acidity {acidity * 1e6:,.0f} µeq/L" in words(ax)
        assert_allclose(marks[0][marks[1] == end], acidity * 2000.0, rtol=1e-12)
    assert_allclose(marks[0][marks[1] == 8.3], (2e-3 + 1e-3) * 2000.0, rtol=0.01)


def test_a_root_before_the_start_is_told_without_a_mark(draw):
    """An acid lake has no end point on its curve: words, and no diamond left of nothing added."""
    ax, result, i = draw("curve", "Acid lake")
    assert f"Gran line: −{-result.solved.gran.acid[i] * 5000.0:.3f} mL, recommended" in words(ax)
    assert len([t for t in ax.texts if isinstance(t, Annotation)]) == len([t for t in ax.texts if "pH" in t.get_text()])
    assert np.hstack(lines(ax)["_mark"])[0].min() > 0.0


def test_a_root_beyond_the_last_reading_is_told_without_a_mark(draw):
    """Base that stops before the mineral acid is used up: words, no diamond beyond the curve, and the root in the Gran panel."""
    ax, result, i = draw("curve", "Mine water begun")
    root = -result.solved.gran.acid[i] * 2000.0
    assert f"Gran line: {root:.3f} mL, recommended for alkalinity (not reached)" in words(ax)
    assert "_mark" not in lines(ax)
    assert draw("gran", "Mine water begun")[0].get_xlim()[1] > root


@pytest.mark.parametrize(("water", "strength", "mass"), [("Dilute lake", 0.02, 100.0), ("Mine water", -0.05, 100.0),
                                                         ("Sea water", 0.1, 120.0)])
def test_gran_panel(draw, water, strength, mass):
    """(V0 + V)/V0 10^-pH of every reading; the least-squares line of the chosen ones runs down to its root."""
    ax, result, i = draw("gran", water)
    added, ph = readings(water)
    f = (mass + added) / mass * 10.0**-ph * 1e6
    drawn, g = lines(ax), result.solved.gran
    chosen = np.arange(added.size)[g.first[i]:g.last[i] + 1]
    assert_allclose(drawn["on the line"][0], [added[chosen], f[chosen]], rtol=1e-9)
    assert drawn["left out"][0].shape[1] + chosen.size == added.size
    slope, cut = np.polyfit(added[chosen], f[chosen], 1)
    (x0, x1), (y0, y1) = drawn["_line"][0]
    assert (x0, y0) == (pytest.approx(-cut / slope, rel=1e-6), 0.0)
    assert (y1 - y0) / (x1 - x0) == pytest.approx(slope, rel=1e-6)
    assert_allclose(drawn["_root"][0], [[x0], [0.0]], rtol=0, atol=1e-9)
    assert np.sign(slope) == np.sign(strength)
    assert min(ax.get_xlim()) < x0 < max(ax.get_xlim())
    unit, digits = ("g", 4) if water == "Sea water" else ("mL", 3)
    assert f"Root {x0:.{digits}f} {unit}\n".replace("-", "−") in words(ax)


def test_gran_panel_shows_the_slope_of_theory(draw):
    """One equivalent of free acid per equivalent added: strength over sample, times the activity coefficient of about 0.976."""
    ax, result, i = draw("gran", "Dilute lake")
    (x0, x1), (y0, y1) = lines(ax)["_theory"][0]
    assert (y1 - y0) / (x1 - x0) == pytest.approx(0.02 / 100.0 * 1e6 * 0.976, rel=0.005)  # a little bicarbonate is left on it
    assert f"slope {result.solved.gran.slope_ratio[i]:.2f} of theory" in words(ax)
    assert f"alkalinity {result.choice.value[i] * 1e6:.1f} ± {1.645 * result.choice.u[i] * 1e6:.1f} µeq/L" in words(ax)


def test_gran_root_of_an_acid_lake_is_seen(draw):
    """The axis reaches back to a root before the start."""
    ax, result, i = draw("gran", "Acid lake")
    assert ax.get_xlim()[0] < result.solved.gran.acid[i] * 5000.0 < 0.0


@pytest.mark.parametrize(("water", "sign"), [("Hard water", -1.0), ("Mine water", 1.0)])
def test_slope_panel(draw, water, sign):
    """Change of pH over each step, in the middle of it; falling for acid, rising for base."""
    ax, *_ = draw("slope", water)
    added, ph = readings(water)
    middle = 0.5 * (added[1:] + added[:-1])
    assert_allclose(lines(ax)["_slope"][0], [middle, sign * np.diff(ph) / np.diff(added)], rtol=1e-6)


def test_slope_panel_shows_the_inflection_with_its_step(draw):
    """The line stands at the inflection, the band is as wide as the step it is known to."""
    ax, result, i = draw("slope", "Hard water")
    b = result.solved.inflection
    at, width = b.acid[i] * 2000.0, b.resolution[i] * 2000.0
    upright = [line.get_xdata() for line in ax.lines if list(line.get_ydata()) == [0, 1]]
    assert_allclose(upright, [[at, at]], rtol=1e-12)
    band = ax.patches[0].get_extents().transformed(ax.transData.inverted())
    assert_allclose([band.x0, band.x1], [at - 0.5 * width, at + 0.5 * width], rtol=1e-9)
    assert f"Inflection {at:.3f} mL" in words(ax)
    assert f"slopes over {width:.3f} mL (band)" in words(ax)


@pytest.mark.parametrize(("water", "said"), [("Acid lake", "No inflection: "), ("Mine water", "No inflection is sought")])
def test_slope_panel_without_inflection_says_so(draw, water, said):
    """No line, no band, but words."""
    ax, *_ = draw("slope", water)
    assert said in words(ax)
    assert len(ax.patches) == 0


def test_residual_panel(draw):
    """Reading less curve at every fitted point, and the scatter expected: of pH alone where the curve is flat, more where steep."""
    ax, result, i = draw("rest", "Carbonate water")
    s = result.solved
    acid, ph = fitted_curve(s, i)
    added, read = readings("Carbonate water")
    drawn = lines(ax)["in the fit"][0]
    assert_allclose(drawn, [added, read - np.interp(added * 5e-4, acid, ph)], rtol=0, atol=1e-9)
    band = ax.collections[0].get_paths()[0].vertices
    x, height = band[band[:, 1] > 0.0].T
    assert height.min() == pytest.approx(0.01, abs=2e-4)
    steepest = np.max(-np.diff(ph) / np.diff(acid)) * s.curves.u_acid[i]
    assert height.max() == pytest.approx(np.hypot(0.01, steepest), rel=0.02)
    assert x[height.argmax()] == pytest.approx(-s.acidity[8.3].value[i] / 5e-4, rel=0.02)
    assert f"{added.size} points" in words(ax)


def test_residual_panel_names_the_rows_of_odd_points(draw):
    """Two swapped readings are triangles with their line in the file of points."""
    ax, result, i = draw("rest", "Swapped")
    added, _ = readings("Swapped")
    assert_allclose(lines(ax)["named in a finding"][0][0], added[20:22], rtol=1e-12)
    rows = result.solved.curves.row[i, 20:22]
    assert {t.get_text() for t in ax.texts if t.get_text().startswith("row")} == {f"row {row}" for row in rows}


@pytest.mark.parametrize("water", ["Acid lake", "Mine water", "Three points", "Stops too soon", "One point left"])
def test_residual_panel_without_fit_says_why(draw, water):
    """The reason of the fit itself, in the panel."""
    ax, result, i = draw("rest", water)
    why = result.solved.fit.why_not[i]
    assert len(why) > 10
    assert words(ax).replace("\n", " ") == f"No fit: {why}"
    assert list(ax.get_yticks()) == []


def test_readings_without_ph_are_told(draw):
    """An electrode that cannot be: empty panels with words, no error."""
    assert "No reading could be brought to pH" in words(draw("curve", "Millivolts turned")[0])
    assert "No line" in words(draw("gran", "Millivolts turned")[0])


def boxes(ax, renderer):
    """Places of all that is written inside an axis, in pixels."""
    return {t.get_text(): Text.get_window_extent(t, renderer) for t in ax.texts if t.get_text()}


@pytest.mark.parametrize("water", list(WATERS))
def test_words_stay_inside_and_clear_of_each_other_and_of_the_readings(result, water):
    """On the finished page no words leave their panel, overlap, or hide a reading of the curve."""
    figure = titration_figure(result, list(result.solved.curves.names).index(water))
    figure.draw_without_rendering()
    renderer = figure.canvas.get_renderer()
    for ax in figure.axes:
        frame, placed = ax.get_window_extent(renderer), boxes(ax, renderer)
        for text, box in placed.items():
            assert frame.x0 <= box.x0 < box.x1 <= frame.x1 + 1.0, text
            assert frame.y0 <= box.y0 < box.y1 <= frame.y1 + 1.0, text
        all_boxes = list(placed.values())
        assert not any(a.overlaps(b) for k, a in enumerate(all_boxes) for b in all_boxes[:k])
    curve = figure.axes[0]
    shown = [points for label, drawn in lines(curve).items() if not label.startswith("_") for points in drawn]
    pixels = curve.transData.transform(np.hstack([*shown, np.zeros((2, 0))]).T)
    assert not any(box.count_contains(pixels) for box in boxes(curve, renderer).values())


def test_page(result):
    """Four panels in reading order under the title and the findings; the title and the lines fit the width."""
    i = list(result.solved.curves.names).index("Swapped")
    figure = titration_figure(result, i)
    assert [ax.get_title(loc="left") for ax in figure.axes] == [
        "Titration curve (line: fit)", "Gran line", "Where pH changes fastest", "What the fit leaves"]
    assert figure.get_suptitle() == title_line(result, i)
    assert figure.texts[1].get_text().split("\n") == finding_lines(result, i)
    assert tuple(figure.get_size_inches()) == (11.0, 8.0)
    figure.draw_without_rendering()
    top = figure.axes[0].title.get_window_extent().y1
    assert figure.texts[1].get_window_extent().y0 > top
    for text in figure.texts:
        box = text.get_window_extent()
        assert (box.x0 >= 0.0, box.x1 <= figure.bbox.x1) == (True, True)


@pytest.mark.parametrize("water", [
    "Acid lake", "Three points", "One point left", "Equal volumes", "Strong water", "Many points", "Millivolts turned"])
def test_odd_waters_are_drawn_without_a_warning(result, tmp_path, water):
    """Negative, few, repeated, strong or no readings: warnings are errors here."""
    path = tmp_path / "t.png"
    save_titration(result, list(result.solved.curves.names).index(water), path)
    assert path.read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"


@pytest.mark.parametrize("name", ["a $\\frac{$ b", "_hidden", "湖水", "x" * 80])
def test_any_name_is_drawn(tmp_path, name):
    """Dollar signs, a leading underscore, another script, a long one: no warning, no error, no more than a label's length."""
    result = assessed(tmp_path, {name: WATERS["Three points"]})
    save_titration(result, 0, tmp_path / "t.png")
    assert titration_figure(result, 0).get_suptitle().startswith(f"{name[:22]}: ")


def test_same_titration_same_bytes(result, tmp_path):
    """No date, no program name: two files of one titration are equal, those of two are not."""
    for number, name in ((0, "a"), (0, "b"), (1, "c")):
        save_titration(result, number, tmp_path / f"{name}.png")
    a, b, c = ((tmp_path / f"{name}.png").read_bytes() for name in "abc")
    assert a == b != c
    assert b"tEXt" not in a
    assert b"tIME" not in a


def test_weak_acid_of_the_fit_is_in_its_curve(tmp_path):
    """With one more acid sought the drawn line still passes the readings."""
    water = fresh(np.arange(0.0, 9.0, 0.2), strength=0.05, alkalinity=3e-3, carbon=2e-3, acids={"acetate": 1e-3})
    result = assessed(tmp_path, {"w": water}, weak_acid=True)
    ax = Figure().subplots()
    plot_residuals(result, 0, ax=ax)
    assert result.solved.fit.fit.acid_total[0] == pytest.approx(1e-3, rel=0.1)
    assert np.abs(lines(ax)["in the fit"][0][1]).max() < 0.02


def test_every_public_plot_is_tested():
    """What the module offers stands in the list of panels."""
    assert {n for n in titration_figures.__all__ if n.startswith("plot")} == {f.__name__ for f in PANELS.values()}
    assert 6.0 <= SIZE <= 9.0  # small, but legible in print
