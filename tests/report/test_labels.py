"""Labels beside a curve: apart from each other, beside the curve and not on it, tied to their places."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from matplotlib.figure import Figure
from matplotlib.text import Annotation, Text
from numpy.testing import assert_allclose

from aquabuf.report.labels import Label, label_column, spread_out

X = np.linspace(0.0, 10.0, 200)
FALLING = 7.0 - 4.0 / (1.0 + np.exp(-2.0 * (X - 6.0)))


@given(st.lists(st.floats(0.0, 1.0), max_size=12), st.floats(0.0, 0.4), st.floats(0.6, 1.0))
def test_spread_out_keeps_order_gap_and_bounds(wanted, low, high):
    """Whatever is wanted: from the top down, a gap apart (less only where there is no room), and inside."""
    out = spread_out(sorted(wanted, reverse=True), gap=0.1, low=low, high=high)
    assert len(out) == len(wanted)
    room = (high - low) / max(len(out) - 1, 1)
    assert all(a - b >= min(0.1, room) - 1e-9 for a, b in pairwise(out))
    assert all(low - 1e-9 <= y <= high + 1e-9 for y in out)


def test_spread_out_leaves_alone_what_is_apart():
    """Heights that are apart already stay, and close ones move no farther than they must."""
    assert spread_out([0.9, 0.5, 0.2], gap=0.1, low=0.0, high=1.0) == [0.9, 0.5, 0.2]
    assert_allclose(spread_out([0.9, 0.5, 0.48], gap=0.1, low=0.0, high=1.0), [0.9, 0.5, 0.4], rtol=0, atol=1e-12)
    assert_allclose(spread_out([0.05, 0.04], gap=0.1, low=0.0, high=1.0), [0.1, 0.0], rtol=0, atol=1e-12)


def labeled(y, labels):
    """An axis with a curve and its labels, drawn; and the boxes of the labels in shares of the axis."""
    figure = Figure(figsize=(5.0, 4.0))
    ax = figure.subplots()
    ax.set(xlim=(0.0, 10.0), ylim=(2.0, 8.0))
    label_column(ax, labels, X, y)
    figure.draw_without_rendering()
    inverse = ax.transAxes.inverted()
    return ax, {t.get_text(): Text.get_window_extent(t).transformed(inverse) for t in ax.texts}


@pytest.mark.parametrize("rising", [False, True])
def test_column_stands_right_of_its_places_and_clear_of_the_curve(rising):
    """Above a falling curve, below a rising one; the axis is stretched until the column is right of all places."""
    y = 10.0 - FALLING if rising else FALLING
    marks = [Label(f"place {at:g}", at, float(np.interp(at, X, y))) for at in (5.0, 6.0, 6.2, 9.5)]
    ax, boxes = labeled(y, marks)
    assert ax.get_xlim()[0] == 0.0
    assert ax.get_xlim()[1] > 10.0
    curve = ax.transAxes.inverted().transform(ax.transData.transform(np.column_stack([X, y])))
    for box in boxes.values():
        assert 0.0 <= box.x0 < box.x1 <= 1.0
        assert box.count_contains(curve) == 0
        assert box.x0 > ax.transLimits.transform((9.5, 0.0))[0]
    tops = [boxes[m.words].y0 for m in sorted(marks, key=lambda m: -m.y)]
    assert all(a > b for a, b in pairwise(tops))
    assert {t.xy for t in ax.texts} == {(m.x, m.y) for m in marks}


def test_no_stretch_where_there_is_room():
    """Places far left leave the axis as it is."""
    ax, _ = labeled(FALLING, [Label("early", 1.0, 6.9)])
    assert ax.get_xlim() == (0.0, 10.0)


def test_words_without_a_place_have_no_line():
    """A place that is not in the plot: words at the top or the bottom of the column, led to nowhere."""
    nan = float("nan")
    ax, boxes = labeled(FALLING, [Label("on", 6.0, 5.0), Label("before", nan, nan, on_top=True), Label("after", nan, nan)])
    assert [t.get_text() for t in ax.texts if isinstance(t, Annotation)] == ["on"]
    assert boxes["before"].y0 > boxes["on"].y0 > boxes["after"].y0


def test_nothing_to_label():
    """No labels, no change."""
    ax, boxes = labeled(FALLING, [])
    assert (ax.get_xlim(), boxes) == ((0.0, 10.0), {})
