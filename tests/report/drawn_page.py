"""What a drawn page shows: its panels, lines, boxes and words, for the tests of figures."""

import itertools

import numpy as np


def panel(figure, title):
    """The axis whose title starts so, and the one drawn after it."""
    k = next(i for i, ax in enumerate(figure.axes) if ax.get_title(loc="left").startswith(title))
    return figure.axes[k], (figure.axes[k + 1] if k + 1 < len(figure.axes) else None)


def lines(ax, label):
    """Data of the lines with a label, one array of shape (lines, 2, points) where they are alike."""
    return [np.array(line.get_data(), dtype=float) for line in ax.lines if line.get_label() == label]


def patches(ax, label):
    """Left, right, bottom and top of the rectangles with a label, in the coordinates they were drawn in."""
    return [(*p.get_bbox().intervalx, *p.get_bbox().intervaly) for p in ax.patches if p.get_label() == label]


def said(figure):
    """All words of the page outside the panels, lines joined."""
    return " ".join(t.get_text() for t in figure.texts)


def boxes(figure):
    """Box of every text that is drawn, by its words."""
    texts = [*figure.texts]
    for ax in figure.axes:
        texts += [*ax.texts, ax.title, ax._left_title, ax.xaxis.label, ax.yaxis.label, *ax.get_yticklabels()]
        texts += [t for t in ax.get_xticklabels() if ax.xaxis.get_tick_params().get("labelbottom", True)]
        low, high = ax.get_ylim()
        texts = [t for t in texts if t not in ax.get_yticklabels() or low <= t.get_position()[1] <= high]
        left, right = ax.get_xlim()
        texts = [t for t in texts if t not in ax.get_xticklabels() or left <= t.get_position()[0] <= right]
    return [(t.get_text(), t.get_window_extent()) for t in texts if t.get_text().strip() and t.get_visible()]


def overlaps(figure, slack=1.0):
    """Pairs of words that lie on each other by more than `slack` points both ways."""
    figure.canvas.draw()
    slack *= figure.dpi / 72.0
    return [(a, b) for (a, p), (b, q) in itertools.combinations(boxes(figure), 2)
            if min(p.x1, q.x1) - max(p.x0, q.x0) > slack and min(p.y1, q.y1) - max(p.y0, q.y0) > slack]
