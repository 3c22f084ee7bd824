"""Mixing, warming, airing: what is conserved, and the direction of what is not."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from aquabuf import Acid, Water, mix


def river(n=3):
    """Fresh waters with acids and hardness."""
    return Water.from_alkalinity_dic(alkalinity_eq_l=np.linspace(-5e-4, 3e-3, n), dic_mol_l=np.linspace(1e-4, 3.1e-3, n),
                                     t_c=np.linspace(2, 25, n), phosphate_mol_l=2e-4, calcium_mol_l=1e-3,
                                     ionic_strength_mol_l=0.004)


def ocean(n=3):
    """Sea waters with ammonium."""
    return Water.from_alkalinity_dic(alkalinity_eq_l=2.35e-3, dic_mol_l=2.05e-3, t_c=np.linspace(5, 18, n), salinity=35.0,
                                     ammonium_mol_l=1e-4)


volumes = st.tuples(st.floats(0.01, 100.0), st.floats(0.01, 100.0))


@settings(max_examples=25, deadline=None)
@given(volumes)
def test_amounts_per_mass_and_heat_are_conserved(v):
    """Amount = concentration times volume, mass = density times volume: both sides of the mixing agree for every quantity."""
    waters = [river(), ocean()]
    mixed = mix(waters, v)
    mass = [x * w.density_kg_l for x, w in zip(v, waters, strict=True)]
    volume = sum(mass) / mixed.density_kg_l
    for of in ("alkalinity_eq_l", "dic_mol_l"):
        assert_allclose(getattr(mixed, of) * volume, sum(x * getattr(w, of) for x, w in zip(v, waters, strict=True)),
                        rtol=1e-12, atol=1e-18)
    for name in ("phosphate", "ammonium", "boron", "sulfate", "fluoride", "calcium"):
        assert_allclose(mixed.total_mol_l(name) * volume, sum(x * w.total_mol_l(name) for x, w in zip(v, waters, strict=True)),
                        rtol=1e-12)
    for of in ("t_c", "salinity"):
        assert_allclose(getattr(mixed, of) * sum(mass), sum(m * getattr(w, of) for m, w in zip(mass, waters, strict=True)),
                        rtol=1e-12)
    assert (mixed.status == 0).all()


def test_mixing_by_hand():
    """1 L at 0.01 eq/L and 3 L at 0 in equal water: 0.0025 eq/L, carbon likewise, temperature (1 x 20 + 3 x 10)/4 = 12.5.

    Density differs by 0.15 % between 10 and 20 °C, hence the tolerance.
    """
    a = Water.from_alkalinity_dic(alkalinity_eq_l=0.01, dic_mol_l=0.01, t_c=[20.0], phosphate_mol_l=1e-3)
    b = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=[10.0])
    mixed = mix([a, b], [1.0, 3.0])
    assert_allclose([mixed.alkalinity_eq_l[0], mixed.dic_mol_l[0], mixed.total_mol_l("phosphate")[0], mixed.t_c[0]],
                    [2.5e-3, 2.5e-3, 2.5e-4, 12.5], rtol=2e-3)


def test_mixing_a_water_with_itself_changes_nothing():
    """Identity, whatever the volumes, fresh and marine."""
    for water in (river(), ocean()):
        mixed = mix([water, water], [1.0, 7.0])
        for of in ("ph", "alkalinity_eq_l", "dic_mol_l", "t_c", "salinity", "pco2_atm", "ionic_strength_mol_l"):
            assert_allclose(getattr(mixed, of), getattr(water, of), rtol=1e-12, atol=1e-15, err_msg=of)


def test_order_does_not_matter():
    """Two waters either way round, and three at once or one after the other."""
    a, b = river(), ocean()
    assert_allclose(mix([a, b], [1.0, 2.0]).ph, mix([b, a], [2.0, 1.0]).ph, rtol=0, atol=1e-12)
    c = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1e-3, t_c=[10.0, 10.0, 10.0])
    at_once = mix([a, b, c], [1.0, 2.0, 3.0])
    first = mix([a, b], [1.0, 2.0])
    mass = a.density_kg_l + 2.0 * b.density_kg_l
    stepwise = mix([first, c], [mass / first.density_kg_l, 3.0])
    assert_allclose(stepwise.ph, at_once.ph, rtol=0, atol=1e-9)
    assert_allclose(stepwise.alkalinity_eq_l, at_once.alkalinity_eq_l, rtol=1e-12)


def test_ph_is_not_averaged():
    """1 mmol/L acid (pH 3.0) and as much base (pH 11.0) give pure water; half the base (pH 10.7) leaves 0.25 mmol/L of acid,
    pH 3.60, where the mean of the two pH would be 6.8 (hand-worked at I = 0)."""
    acid = Water.from_alkalinity_dic(alkalinity_eq_l=-1e-3, dic_mol_l=0.0, t_c=[25.0, 25.0], ionic_strength_mol_l=0.0)
    base = Water.from_alkalinity_dic(alkalinity_eq_l=[1e-3, 5e-4], dic_mol_l=0.0, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(mix([acid, base], [1.0, 1.0]).ph, [6.997, -np.log10(2.5e-4 / 0.99705)], rtol=0, atol=0.001)


def test_own_acid_travels_with_its_water():
    """A user's acid is in the mixture at its diluted total."""
    own = Acid(name="humic", pk=(4.2,))
    a = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=[20.0], acids=[own], humic_mol_l=1e-3)
    b = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=[20.0])
    for order in ([a, b], [b, a]):
        assert_allclose(mix(order, [1.0, 1.0]).total_mol_l("humic"), 5e-4, rtol=1e-12)


@pytest.mark.parametrize("salinity", [0.0, 30.0])
def test_single_waters_mix(salinity):
    """Waters of one value (no array) mix like rows."""
    single, row = (Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=t, salinity=salinity)
                   for t in (10.0, [10.0]))
    other = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=2e-3, t_c=20.0, salinity=salinity)
    assert_allclose(mix([single, other], [1.0, 1.0]).ph, mix([row, other], [1.0, 1.0]).ph[0], rtol=0, atol=1e-12)


# ---- temperature
@pytest.mark.parametrize("water", [river(), ocean()], ids=["fresh", "marine"])
def test_warming_and_back(water):
    """A closed sample warmed and cooled again is the same; per kilogram nothing changed in between (conservation)."""
    warm = water.at_temperature(30.0)
    assert_allclose(warm.alkalinity_eq_l / warm.density_kg_l, water.alkalinity_eq_l / water.density_kg_l, rtol=1e-13)
    assert_allclose(warm.dic_mol_l / warm.density_kg_l, water.dic_mol_l / water.density_kg_l, rtol=1e-13)
    assert_allclose(warm.total_mol_l("calcium") / warm.density_kg_l, water.total_mol_l("calcium") / water.density_kg_l, rtol=1e-13)
    back = warm.at_temperature(water.t_c)
    assert_allclose(back.ph, water.ph, rtol=0, atol=1e-10)
    assert_allclose(back.pco2_atm, water.pco2_atm, rtol=1e-9)


def test_direction_of_warming():
    """pH of pure water falls from 7.47 to 6.63 (half of pKw 14.946 and 13.264, CRC Handbook), CO2 pressure of a closed
    sample rises by about 4 % per °C in sea water (Takahashi 1993, recalled)."""
    pure = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=0.0)
    assert_allclose([pure.ph, pure.at_temperature(50.0).ph], [7.473, 6.632], rtol=0, atol=0.002)
    sea = ocean()
    assert (sea.at_temperature(sea.t_c + 1.0).pco2_atm / sea.pco2_atm > 1.03).all()


def test_warming_to_several_temperatures():
    """One water at several temperatures is several waters, as with `after_acid`."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=20.0)
    assert_allclose(water.at_temperature([5.0, 30.0]).ph, [water.at_temperature(5.0).ph, water.at_temperature(30.0).ph])


def test_several_airs():
    """One water under several airs is several waters, as with `at_pco2`."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=20.0)
    assert_allclose(water.at_air([300.0, 400.0]).ph, [water.at_air(300.0).ph, water.at_air(400.0).ph])


def test_gas_exchange_leaves_alkalinity():
    """CO2 in or out changes carbon and pH, never alkalinity; losing CO2 raises pH."""
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=2e-3, pco2_atm=[1e-2, 1e-4], t_c=12.0)
    aired = water.at_pco2(4e-4)
    assert_allclose(aired.alkalinity_eq_l, 2e-3, rtol=1e-15)
    assert_allclose(aired.pco2_atm, 4e-4, rtol=1e-12)
    assert_allclose(aired.ph[0], aired.ph[1], rtol=0, atol=1e-12)
    assert water.ph[0] < aired.ph[0]
    assert water.ph[1] > aired.ph[1]


def test_changed_water_keeps_what_it_was_made_with():
    """Pressure, ions, acids, constant sets and ionic strength go along with every change."""
    own = Acid(name="humic", pk=(4.2,))
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=[20.0], salinity=30.0, pressure_atm=0.9,
                                      acids=[own], humic_mol_l=1e-4, magnesium_mol_l=1e-3, carbonic="lueker", boron_ratio="lee")
    for changed in (water.after_acid(1e-4), water.at_pco2(4e-4), water.at_air(), water.at_temperature(20.0)):
        assert changed.options == water.options
        assert set(changed.total_names) == set(water.total_names)
        assert_allclose(changed.pressure_atm, 0.9)
        for name in water.total_names:
            assert_allclose(changed.total_mol_l(name), water.total_mol_l(name), rtol=1e-14)
