"""Colors of classes: apart in gray print and to color-blind eyes."""

import itertools

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from aquabuf.report import style

FULL = np.eye(3)
BLIND = {  # linear RGB as seen without red, green or blue cones: Machado, Oliveira & Fernandes 2009 (recalled)
    "protan": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "deutan": [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]],
    "tritan": [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]}


def lab(color, seen=FULL):
    """CIE L*a*b* of a color under D65."""
    rgb = np.array(to_rgb(color))
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    xyz = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]) @ np.clip(np.array(seen) @ linear, 0, 1)
    f = np.cbrt(np.maximum(xyz / [0.9505, 1.0, 1.089], 1e-4))
    return np.array([116.0 * f[1] - 16.0, 500.0 * (f[0] - f[1]), 200.0 * (f[1] - f[2])])


@pytest.mark.parametrize("count", range(2, 7))
def test_class_colors_can_be_told_apart(count):
    """Lighter by 8 at least from step to step (gray print), apart to every kind of eye, a marker each."""
    styles = style.class_styles(count)
    assert len(styles) == count
    assert len({marker for _, marker in styles}) == count
    light = [lab(color)[0] for color, _ in styles]
    assert (np.diff(light) > 8.0).all()
    for seen in (FULL, *BLIND.values()):
        for a, b in itertools.combinations(styles, 2):
            assert np.linalg.norm(lab(a[0], seen) - lab(b[0], seen)) > 10.0


def test_a_scheme_of_many_classes_still_has_a_color_each():
    """Nine of the user's own: nine colors, lighter and lighter."""
    colors = [color for color, _ in style.class_styles(9)]
    assert len(set(colors)) == 9
    assert (np.diff([lab(color)[0] for color in colors]) > 0.0).all()
    assert (colors[0], colors[-1]) == (style.CLASS_COLORS[0], style.CLASS_COLORS[-1])
