"""How far a dose may go: linear windows exactly, pH by hand, open ends, what ends the range."""

import numpy as np
import pytest
from made_streams import MG_CACO3, target
from numpy.testing import assert_allclose, assert_array_equal
from works import CAUSTIC, CO2, LIME, adjusted, bare, caustic_by_hand, dosing, ph

from aquabuf.assess.plant.ranges import control_range
from aquabuf.assess.plant.train import run_train
from aquabuf.errors import InputError

RAW = 4e-4  # alkalinity [eq/L]


def test_alkalinity_window_is_exact():
    """Alkalinity is linear in the dose: both ends by division; one end per row."""
    alkalinity = np.array([3e-4, 4e-4, 6e-4])
    run = run_train(bare(alkalinity, 6.5)[0], [dosing((CAUSTIC,), (5e-4,))])
    found = control_range(run, "caustic soda", (target("alkalinity", 35.0, 60.0),))
    low, high = 35.0 / MG_CACO3, 60.0 / MG_CACO3
    good = alkalinity + 5e-4 <= high
    assert_allclose(found.least[good], ((low - alkalinity) / 5e-4)[good], rtol=0, atol=1e-6)
    assert_allclose(found.most[good], ((high - alkalinity) / 5e-4)[good], rtol=0, atol=1e-6)
    table = found.table()
    assert_allclose(table["most_mg_l_product"][good], 39.997e3 * (high - alkalinity)[good], rtol=1e-5)
    assert_allclose(table["most_percent"], 100.0 * found.most)
    assert np.isfinite(found.most).tolist() == good.tolist()


def test_fixed_ph_with_its_band_by_hand():
    """pH 8.3 stands for 8.2 to 8.4: doses of caustic solved by hand."""
    raw, dic = bare(RAW, 6.5)
    found = control_range(adjusted(raw, ph(8.3)), "caustic soda")
    dose = caustic_by_hand(RAW, dic[0], 8.3)
    assert_allclose([found.least[0], found.most[0]], [caustic_by_hand(RAW, dic[0], p) / dose for p in (8.2, 8.4)], rtol=0, atol=1e-4)
    assert (found.ends_low[0], found.ends_high[0]) == ("pH 8.20 to 8.40", "pH 8.20 to 8.40")
    assert found.words().startswith(f"caustic soda: from {dose * found.least[0] * 39.997e3:.3g} mg/L (-")


def test_what_ends_the_range():
    """Of two windows the one that is left first counts, at either end."""
    raw, dic = bare(RAW, 6.5)
    run = run_train(raw, [dosing((CAUSTIC,), (3e-4,))])
    goals = (target("alkalinity", 30.0, 36.0), target("ph", 6.0, 9.8))
    found = control_range(run, "caustic soda", goals)
    assert_allclose(found.most, (36.0 / MG_CACO3 - RAW) / 3e-4, atol=1e-6)
    assert found.ends_high[0] == "alkalinity 30.0 to 36.0 mg/L as CaCO3"
    found = control_range(run, "caustic soda", (target("alkalinity", 25.0, 70.0), target("ph", 6.0, 9.0)))
    assert_allclose(found.most, caustic_by_hand(RAW, dic[0], 9.0) / 3e-4, rtol=5e-4)
    assert found.ends_high[0] == "pH 6.00 to 9.00"
    assert found.ends_low[0] == "alkalinity 25.0 to 70.0 mg/L as CaCO3"


def test_open_ends_and_none():
    """Nothing needed, any amount allowed, nothing dosed, windows missed."""
    run = run_train(bare(RAW, np.array([6.5, 6.5]))[0], [dosing((CAUSTIC, CO2, LIME), (1e-4, 1e-4, np.array([0.0, 1e-5])))])
    found = control_range(run, "carbon dioxide", (target("alkalinity", 20.0, 60.0),))
    assert_array_equal(found.least, 0.0)
    assert_array_equal(found.most, np.inf)
    assert found.words() == "carbon dioxide: from nothing to more than 10 times as much keeps every window"
    lime = control_range(run, "hydrated lime", (target("alkalinity", 20.0, 60.0),))
    assert np.isnan(lime.least).tolist() == [True, False]
    assert "no range" in lime.words()
    missed = control_range(run, "caustic soda", (target("alkalinity", 100.0, 120.0),))
    assert np.isnan(missed.least).all()
    assert np.isnan(missed.most).all()


def test_dose_at_the_end_of_a_window():
    """The cheapest dose sits at an end and has no room there; above it the window has."""
    found = control_range(adjusted(bare(RAW, 6.5)[0], ph(8.2, 8.6)), "caustic soda")
    assert_allclose(found.least, 1.0, rtol=0, atol=1e-5)
    assert found.most > 1.005
    assert "no room: the dose sits at the end of a window" in found.words()


def test_rows_do_not_see_each_other():
    """A row of many is as alone."""
    raw, _ = bare(np.array([3e-4, 4e-4, 7e-4]), np.array([6.2, 6.6, 7.1]))
    many = control_range(adjusted(raw, ph(8.3)), "caustic soda")
    for k in range(3):
        one = control_range(adjusted(raw.take(np.array([k])), ph(8.3)), "caustic soda")
        assert_allclose([many.least[k], many.most[k]], [one.least[0], one.most[0]], rtol=0, atol=1e-7)


def test_what_is_refused():
    """A product that is not dosed; nothing to keep."""
    run = run_train(bare(RAW, 6.5)[0], [dosing((CAUSTIC,), (1e-4,))])
    with pytest.raises(InputError, match=r"no step doses 'lime'; dosed are caustic soda"):
        control_range(run, "lime", (ph(8.0, 9.0),))
    with pytest.raises(InputError, match=r"control range of 'caustic soda' needs a target; none is set. Give a step targets"):
        control_range(run, "caustic soda")
