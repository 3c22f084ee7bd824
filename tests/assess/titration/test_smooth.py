"""The fitted curve between the points: the engine's own, through the points, as far as the fit goes."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_titrations import WATERS, assessed, curve, fresh

from aquabuf.assess.titration.smooth import fit_of, fitted_curve

COARSE = np.array([0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 5.5, 6.0, 6.5, 7.0, 8.0])
HARD = {"strength": 0.05, "alkalinity": 3e-3, "carbon": 3.3e-3}


def solved(folder, **waters):
    """What is found of some waters."""
    return assessed(folder, waters).solved


@pytest.mark.parametrize("acid", ["hydrochloric", "sulfuric"])
def test_curve_is_the_engines_between_coarse_points(tmp_path, acid):
    """Points a milliliter apart and without scatter: between them the curve is the one the engine gives there."""
    s = solved(tmp_path, w=fresh(COARSE, scatter=0.0, conductivity=5e-3 / 1.6e-5, titrant_acid=acid, **HARD))
    x, ph = fitted_curve(s, 0)
    truth = curve(x * 2000.0, sample=100.0, sulfuric=acid == "sulfuric", **HARD)
    assert_allclose(ph, truth, rtol=0, atol=0.015)
    assert x.size > 400


def test_curve_ends_at_the_points_and_meets_each(tmp_path):
    """Every fitted point is a point of the curve, in order; the residual is what is left of it there."""
    s = solved(tmp_path, w=fresh(COARSE, **HARD))
    x, ph = fitted_curve(s, 0)
    assert (np.diff(x) > 0.0).all()
    assert_array_equal(x[[0, -1]], s.curves.acid[0, [0, -1]])
    at = np.flatnonzero(np.isin(x, s.curves.acid[0]))
    assert at.size == COARSE.size
    assert_allclose(s.ph[0] - ph[at], s.fit.fit.residual_ph[0], rtol=0, atol=5e-4)


def test_curve_reads_as_the_electrode_does(tmp_path):
    """An electrode that reads 0.1 too high: the curve lies where the readings are."""
    points, known = fresh(np.arange(0.0, 8.0, 0.2), scatter=0.0, **HARD)
    s = solved(tmp_path, w=({"titrant_ml": points["titrant_ml"], "ph": points["ph"] + 0.1}, known))
    x, ph = fitted_curve(s, 0)
    assert s.fit.fit.offset_ph[0] == pytest.approx(0.1, abs=0.01)
    assert_allclose(np.interp(points["titrant_ml"] * 5e-4, x, ph), points["ph"] + 0.1, rtol=0, atol=0.01)


def test_swept_water_has_the_fit_of_its_acid_end(tmp_path):
    """CO2 swept out: only the points of that fit, and no carbon."""
    s = solved(tmp_path, **{"a": WATERS["Swept sea water"], "b": WATERS["Sea water"]})
    assert fit_of(s, 0) is s.excess
    assert fit_of(s, 1) is s.fit
    x, ph = fitted_curve(s, 0)
    assert (ph.min() > 2.9 - 0.01, ph.max() < 3.6 + 0.01) == (True, True)
    used = np.isfinite(s.excess.fit.residual_ph[0])
    assert_array_equal(x[[0, -1]], s.curves.acid[0, used][[0, -1]])


def test_weak_acid_of_the_fit_takes_part(tmp_path):
    """With acetate sought as an unknown acid the curve passes the readings, which it misses without."""
    water = fresh(np.arange(0.0, 9.0, 0.2), scatter=0.0, strength=0.05, alkalinity=3e-3, carbon=3e-3, acids={"acetate": 2e-4})
    off = []
    for sought in (True, False):
        s = assessed(tmp_path, {"w": water}, weak_acid=sought).solved
        x, ph = fitted_curve(s, 0)
        off.append(np.abs(s.ph[0] - np.interp(s.curves.acid[0], x, ph)).max())
    assert off[0] < 0.01
    assert off[1] > 0.03


@pytest.mark.parametrize("water", ["Acid lake", "Three points", "One point left", "Mine water", "Millivolts turned"])
def test_no_fit_no_curve(tmp_path, water):
    """Nothing is drawn where nothing could be fitted."""
    x, ph = fitted_curve(solved(tmp_path, **{"other": WATERS["Hard water"], water: WATERS[water]}), 1)
    assert (x.size, ph.size) == (0, 0)


def test_titrations_do_not_see_each_other(tmp_path):
    """The curve of a short titration beside a long one is the curve it has alone."""
    alone = fitted_curve(solved(tmp_path, a=WATERS["Hard water"]), 0)
    both = fitted_curve(solved(tmp_path, b=WATERS["Many points"], a=WATERS["Hard water"]), 1)
    assert_allclose(alone, both, rtol=0, atol=1e-9)
