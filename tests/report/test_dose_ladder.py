"""The way of the water in the plane of carbon and alkalinity: legs by mass balance, lines of equal pH by closed forms."""

import sys
from pathlib import Path

import matplotlib
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parent))

from dosing_plans import answer_of

from aquabuf.report.dose_ladder import Leg, _against, ladder_key, ladder_points, legs_of, ph_line, plot_ladder

MG_CACO3_PER_EQ = 1e3 * 100.086 / 2.0  # IUPAC masses


def drawn(name):
    """The figure of a plan."""
    figure = Figure(figsize=(6.0, 5.0))
    FigureCanvasAgg(figure)
    with matplotlib.rc_context({"svg.fonttype": "none"}):
        ax = plot_ladder(answer_of(name), ax=figure.subplots())
        figure.canvas.draw()
    return ax


def test_line_where_carbonate_equals_carbon_dioxide():
    """At pH (pK1 + pK2) / 2 alkalinity is carbon and hydroxide less acid; pK of Plummer & Busenberg 1982 at 10 °C, 6.464
    and 10.490 (recalled), Davies activities."""
    stream = answer_of("minimal").train.raw
    i = float(stream.ionic_strength_mol_l[0])
    log_g = -0.4976 * (np.sqrt(i) / (1.0 + np.sqrt(i)) - 0.3 * i)  # A of Davies at 10 °C, 0.498
    ph = 0.5 * (6.464 + 10.490 + 4.0 * log_g)
    carbon = np.array([0.2e-3, 1e-3, 4e-3])
    found = ph_line(stream, ph, carbon)
    assert np.polyfit(carbon, found, 1)[0] == pytest.approx(1.0, abs=2e-3)
    hydroxide = 10.0 ** (ph - 14.535 - log_g)  # pKw 14.535 at 10 °C (recalled)
    assert (found - carbon)[0] == pytest.approx(hydroxide, rel=0.03)


def test_lines_rise_with_ph_and_are_straight():
    """More alkalinity at a higher pH; no bend along carbon."""
    stream = answer_of("upland").train.final
    carbon = np.linspace(0.1e-3, 3e-3, 5)
    lines = np.array([ph_line(stream, ph, carbon) for ph in (6.0, 7.0, 8.0, 9.0, 10.0)])
    assert (np.diff(lines, axis=0) > 0.0).all()
    assert_allclose(np.diff(lines, 2, axis=1), 0.0, atol=1e-12)


def test_a_water_lies_on_the_line_of_its_own_ph():
    """The final water, whose temperature and ions the lines have."""
    for name in ("upland", "many", "nitrify"):
        final = answer_of(name).train.final
        found = ph_line(final, float(final.water().ph[0]), final.carbon_mol_l)
        assert_allclose(found, final.alkalinity_eq_l, rtol=1e-6)


def test_legs_of_two_products():
    """Lime goes straight up by two equivalents a mole, carbon dioxide straight to the right by one mole."""
    answer = answer_of("upland")
    lime, gas = (d.mol_l[0] for _, d in answer.train.doses())
    first, second, warm = legs_of(answer)
    assert (first.words, second.words) == ("lime", "gas")
    assert_allclose(np.subtract(first.end, first.start), (0.0, 2.0 * lime), atol=1e-15)
    assert_allclose(np.subtract(second.end, second.start), (gas, 0.0), atol=1e-15)
    assert second.end == pytest.approx(tuple(ladder_points(answer)[1]), abs=1e-12)
    assert warm.number == 2


def test_a_step_that_does_more_than_its_products_is_one_leg():
    """Nitrification takes alkalinity without a product."""
    legs = legs_of(answer_of("nitrify"))
    assert [leg.words for leg in legs] == ["aeration tanks", "soda"]
    assert legs[0].end[1] < legs[0].start[1]
    assert legs[0].moves


def test_legs_that_hide_each_other():
    """The same line the other way is told from one that goes on, lies beside, or crosses."""
    up = Leg(1, "up", (1.0, 1.0), (1.0, 3.0))
    assert _against(up, Leg(2, "down", (1.0, 3.0), (1.0, 0.0)))
    assert not _against(up, Leg(2, "on", (1.0, 3.0), (1.0, 5.0)))
    assert not _against(up, Leg(2, "same way", (1.0, 1.5), (1.0, 2.5)))
    assert not _against(up, Leg(2, "beside", (1.1, 3.0), (1.1, 0.0)))
    assert not _against(up, Leg(2, "across", (0.0, 2.0), (2.0, 2.0)))
    assert not _against(up, Leg(2, "below", (1.0, 0.5), (1.0, 0.0)))


def test_what_is_drawn():
    """Units on the axes, a sign per water at its place, products beside their legs, lines that hold their pH."""
    answer, ax = answer_of("upland"), drawn("upland")
    assert ax.get_xlabel() == "inorganic carbon [mmol/L]"
    assert ax.get_ylabel() == "alkalinity [mg/L as CaCO3]"
    waters = [line for line in ax.lines if line.get_label() == "_water"]
    points = ladder_points(answer) * (1e3, MG_CACO3_PER_EQ)
    assert_allclose([[w.get_xdata()[0], w.get_ydata()[0]] for w in waters], points, rtol=1e-4)
    words = [t.get_text() for t in ax.texts]
    assert {"lime", "gas", "0", "1, 2"} <= set(words)
    lines = {float(line.get_label().removeprefix("_pH ")): line for line in ax.lines if line.get_label().startswith("_pH")}
    assert len(lines) >= 6
    assert all(f"{ph:g}" in words for ph in lines)
    x, y = points[-1]
    below = max(ph for ph, line in lines.items() if np.interp(x, line.get_xdata(), line.get_ydata()) < y)
    above = min(ph for ph, line in lines.items() if np.interp(x, line.get_xdata(), line.get_ydata()) > y)
    assert below < answer.train.final.water().ph[0] < above


@pytest.mark.parametrize("name", ["no dose", "infeasible", "many", "blend", "ten feeds"])
def test_every_kind_of_plan_is_drawn(name):
    """All waters within the axes."""
    ax = drawn(name)
    points = ladder_points(answer_of(name)) * (1e3, MG_CACO3_PER_EQ)
    for value, (low, high) in ((points[:, 0], ax.get_xlim()), (points[:, 1], ax.get_ylim())):
        assert (value > low - 1e-9).all()
        assert (value < high).all()


def test_key_names_every_number():
    """With the pH of each water, and the water of the lines."""
    key = ladder_key(answer_of("upland"))
    assert key.startswith("0 raw water (pH 6.50); 1 final pH (pH 8.40); 2 tap in summer (pH ")
    assert key.endswith("those of the final water at 18.0 °C.")
