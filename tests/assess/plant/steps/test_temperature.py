"""Temperature on the way against closed water worked out by hand."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, water_of, words
from numpy.testing import assert_allclose

from aquabuf.assess.plant.steps.temperature import ChangeTemperature
from aquabuf.errors import InputError


@pytest.mark.parametrize(("start", "end"), [(10.0, 25.0), (25.0, 10.0)])
@pytest.mark.parametrize(("ph", "alk"), [(7.2, 200.0), (9.0, 40.0)])
def test_ph_as_by_hand(start, end, ph, alk):
    """Alkalinity and carbon per kilogram stay: pH from printed constants of the other temperature."""
    raw = water_of(ph, alk, t_c=start)
    out = ChangeTemperature(name="tap", t_c=end).run(raw)
    before, after = BareWater(start, 0.003), BareWater(end, 0.003)
    ratio = after.rho / before.rho
    alkalinity = alk * EQ_PER_MG_CACO3
    assert_allclose(out.figures["ph_after"], after.ph(alkalinity * ratio, before.dic(ph, alkalinity) * ratio), atol=0.006)
    assert_allclose(out.stream.alkalinity_eq_l, alkalinity * ratio, rtol=3e-5)


def test_amounts_per_kilogram_stay():
    """Everything dissolved shrinks by one ratio of densities (handbook: 0.99970 at 10 °C, 0.99705 at 25 °C)."""
    raw = water_of(7.6, 150.0, t_c=10.0, calcium=1e-3, chloride=2e-3).replaced(solids={"CaCO3": np.array([1e-4])})
    out = ChangeTemperature(name="tap", t_c=25.0).run(raw).stream
    ratio = 0.99705 / 0.99970
    for now, then in ((out.total("calcium"), 1e-3), (out.total("chloride"), 2e-3), (out.solids["CaCO3"], 1e-4),
                      (out.ionic_strength_mol_l, 0.003), (out.carbon_mol_l, raw.carbon_mol_l)):
        assert_allclose(now, then * ratio, rtol=3e-5)
    assert_allclose(out.t_c, 25.0)


def test_there_and_back_is_the_same_water():
    """A closed sample comes back to its pH."""
    raw = water_of(7.6, 150.0, t_c=12.0, calcium=1e-3)
    back = ChangeTemperature(name="b", t_c=12.0).run(ChangeTemperature(name="a", t_c=48.0).run(raw).stream).stream
    assert_allclose(back.water().ph, 7.6, atol=1e-9)
    assert_allclose(back.total("calcium"), 1e-3, rtol=1e-12)


def test_warming_deposits_and_cooling_dissolves():
    """Calcite is less soluble in warm water (Plummer & Busenberg 1982): near saturation the sign turns, and it is said."""
    cold = water_of(7.6, 150.0, t_c=8.0, calcium=1.5e-3)
    warm = ChangeTemperature(name="heater", t_c=45.0).run(cold)
    assert warm.figures["si_calcite_before"][0] < 0.0 < warm.figures["si_calcite_after"][0]
    assert "at 45.0 °C the water turns to depositing" in words(warm, "warning")
    again = ChangeTemperature(name="main", t_c=8.0).run(warm.stream)
    assert "at 8.0 °C the water turns to dissolving" in words(again, "warning")
    assert not words(ChangeTemperature(name="main", t_c=5.0).run(cold), "warning")
    assert not words(ChangeTemperature(name="main", t_c=48.0).run(warm.stream), "warning")


def test_ph_by_temperature_alone_is_said():
    """A note, unless nothing changes."""
    raw = water_of(7.6, 150.0, t_c=10.0)
    assert "by temperature alone" in words(ChangeTemperature(name="t", t_c=20.0).run(raw))
    assert "by temperature alone" not in words(ChangeTemperature(name="t", t_c=10.0).run(raw))


@pytest.mark.parametrize("t_c", [-1.0, 68.0])
def test_out_of_range(t_c):
    """°F in place of °C is the likely slip."""
    with pytest.raises(InputError, match=f"t_c of step 'tap', in °C, must be 0 to 50; found {t_c:g}"):
        ChangeTemperature(name="tap", t_c=t_c).run(water_of())
