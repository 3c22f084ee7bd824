"""Readings of lakes as the questions want them: charges, what counts as none, constants of lake and meter, air."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_lakes import AIR_PPM, VALENCE, columns, ions, lakes_of
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.inputs import IONS, Lakes, setting_of

VAPOR_ATM = {10.0: 1.2281 / 101.325, 25.0: 3.1690 / 101.325}  # of water, printed steam tables [kPa]


def test_charges_and_gaps():
    """Amount times valence, always positive; a column or a cell that is missing is nan, never zero."""
    lakes = lakes_of(ions(**dict.fromkeys(IONS, 30.0)), ions(calcium=8.0), {})
    for ion in IONS:
        assert_allclose(lakes.charge(ion)[0], 30e-6, rtol=1e-12)
        assert np.isnan(lakes.charge(ion)[2]).all()
    assert_allclose(lakes.charge("calcium")[1], 8e-6, rtol=1e-12)
    assert_allclose(lakes.get("sulfate_mol_l")[0], 15e-6, rtol=1e-12)
    assert lakes.get("dic_mol_l").shape == (3, 1)
    assert np.isnan(lakes.get("dic_mol_l")).all()
    assert {ion for ion in IONS if lakes.charge(ion)[0, 0] != lakes.get(f"{ion}_mol_l")[0, 0]} == set(VALENCE)


def test_acids_that_were_not_measured_count_as_none():
    """Only in the balance: `get` still says they are missing. The drawn error multiplies organic carbon alone."""
    lakes = lakes_of({"doc_mg_l": 4.0, "aluminum_mol_l": 3e-6}, {"doc_mg_l": np.nan}, error=[[1.0, 0.8, 1.25]])
    assert_allclose(lakes.doc_mg_l, [[4.0, 3.2, 5.0], [0.0, 0.0, 0.0]], rtol=1e-15)
    assert_array_equal(lakes.aluminum_mol_l, [[3e-6], [0.0]])
    assert_array_equal(np.isnan(lakes.get("doc_mg_l")), [[False], [True]])
    water = lakes.balance()
    assert_allclose(water.doc_mg_l, lakes.doc_mg_l)
    assert water.anc(np.array([[6.0]]), dic=np.array([[1e-4]])).shape == (2, 3)
    assert_array_equal(lakes_of({}, {}).aluminum_mol_l, [[0.0], [0.0]])


@pytest.mark.parametrize("t_c", [10.0, 25.0])
def test_constants_are_the_printed_ones(t_c):
    """Plummer & Busenberg 1982 and Davies 1962 at the ionic strength given.

    Water itself within 2 %: Marshall & Franck 1981 and the IAPWS release differ by up to 0.006 in pKw.
    """
    c = lakes_of({"temperature_c": t_c, "ionic_strength_mol_l": 4e-4}).setting.lake
    hand = BareWater(t_c, 4e-4)
    for name, rtol in (("k1", 3e-4), ("k2", 3e-4), ("c_h", 1e-4), ("c_oh", 0.02), ("k0", 1e-3)):
        assert_allclose(getattr(c, name), [[getattr(hand, name)]], rtol=rtol, err_msg=name)


@pytest.mark.parametrize("t_c", [10.0, 25.0])
@pytest.mark.parametrize("pressure", [1.0, 0.78])
def test_air_over_the_lake(t_c, pressure):
    """CO2 of dry air times what vapor leaves of the air pressure; dissolved by Henry's law."""
    setting = lakes_of({"temperature_c": t_c, "air_pressure_atm": pressure, "ionic_strength_mol_l": 4e-4}).setting
    by_hand = AIR_PPM * 1e-6 * (pressure - VAPOR_ATM[t_c])
    assert_allclose(setting.air_pco2_atm, [[by_hand]], rtol=1e-4)
    assert_allclose(setting.air_co2_mol_l, [[by_hand * BareWater(t_c, 4e-4).k0]], rtol=2e-3)


def test_elevation_stands_in_for_air_pressure():
    """At 2000 m the standard atmosphere has 0.785 atm (printed: 795.0 hPa)."""
    setting = lakes_of({"elevation_m": 2000.0, "temperature_c": 25.0}).setting
    assert_allclose(setting.lake.pressure_atm, [[795.0 / 1013.25]], rtol=1e-3)


def test_ionic_strength_from_what_there_is():
    """Given; Russell's 1.6e-5 per µS/cm; else the size of the titrated charge, at least 2e-5 mol/L."""
    lakes = lakes_of({"ionic_strength_mol_l": 7e-4, "conductivity_us_cm": 20.0}, {"conductivity_us_cm": 20.0},
                     {"anc_eq_l": -9e-5}, {"anc_eq_l": 3e-5, "alkalinity_eq_l": 6e-5}, {"anc_eq_l": 1e-6}, {})
    assert_allclose(lakes.setting.lake.ionic_strength_mol_l[:, 0], [7e-4, 3.2e-4, 9e-5, 6e-5, 2e-5, 2e-5], rtol=1e-12)


def test_salt_water_takes_the_marine_constants():
    """From salinity 1 on; the set of carbonic constants is passed through."""
    lakes = lakes_of({}, {"salinity": 35.0, "temperature_c": 25.0})
    assert_array_equal(lakes.setting.lake.is_marine[:, 0], [False, True])
    assert_allclose(-np.log10(lakes.setting.lake.k1[1]), 5.8401, rtol=0, atol=1e-4)  # Millero et al. 2006, printed check
    lueker = lakes_of({"salinity": 35.0, "temperature_c": 25.0}, carbonic="lueker").setting.lake
    total = -np.log10(lueker.k1 * lueker.total_per_h)
    assert_allclose(total, 5.8472, rtol=0, atol=1e-4)  # Lueker et al. 2000, printed check, total scale


def test_ph_read_at_another_temperature():
    """Constants of the meter differ where pH was read elsewhere; the same temperature or none is no other."""
    lakes = lakes_of({"ph_temperature_c": 25.0}, {"ph_temperature_c": 10.0}, {}, {"ph_temperature_c": 25.0, "temperature_c": np.nan})
    assert_array_equal(lakes.setting.moved[:3, 0], [True, False, False])
    assert_allclose(lakes.setting.at_meter.t_c[:3, 0], [25.0, 10.0, 10.0])
    assert_allclose(lakes.setting.lake.t_c[:3, 0], 10.0)
    assert_array_equal(lakes.balance(at_meter=True).conditions.t_c, lakes.setting.at_meter.t_c)
    assert_array_equal(lakes.balance().conditions.t_c, lakes.setting.lake.t_c)
    nowhere = lakes_of({}, {})
    assert nowhere.setting.at_meter is nowhere.setting.lake


def test_a_lake_without_temperature_is_nan_alone():
    """No constants, no air; the neighbors keep theirs."""
    setting = lakes_of({}, {"temperature_c": np.nan}, {}).setting
    for name in ("k0", "k1", "k2", "c_h", "c_oh"):
        assert_array_equal(np.isnan(getattr(setting.lake, name))[:, 0], [False, True, False])
    assert_array_equal(np.isnan(setting.air_co2_mol_l)[:, 0], [False, True, False])
    assert_allclose(setting.lake.k1[[0, 2]], np.repeat(lakes_of({}).setting.lake.k1, 2, axis=0), rtol=0)


def test_some_of_the_lakes():
    """A part of the setting is the setting of that part."""
    rows = [{"temperature_c": t, "ph_temperature_c": 20.0, "salinity": s} for t, s in ((5.0, 0.0), (20.0, 10.0), (15.0, 0.0))]
    whole, part = lakes_of(*rows).setting.take(np.array([2, 1])), lakes_of(rows[2], rows[1]).setting
    for side in ("lake", "at_meter"):
        for name in ("k0", "k1", "k2", "c_h", "c_oh", "t_c", "status", "is_marine"):
            assert_allclose(getattr(getattr(whole, side), name), getattr(getattr(part, side), name), rtol=1e-14)
    assert_array_equal(whole.moved, part.moved)
    assert_allclose(whole.air_pco2_atm, part.air_pco2_atm, rtol=1e-14)
    assert_allclose(whole.air_co2_mol_l, part.air_co2_mol_l, rtol=1e-14)


def test_draws_share_the_setting():
    """Values of shape (lakes, draws) against constants of shape (lakes, 1)."""
    single = lakes_of({"doc_mg_l": 4.0}, {"doc_mg_l": 9.0})
    values = {"doc_mg_l": np.array([[4.0, 4.1, 3.9], [9.0, 9.2, 8.8]])}
    drawn = Lakes(values, single.setting, single.organic, np.ones((1, 3)))
    ph = np.array([[5.0], [6.0]])
    assert drawn.balance().without_carbon(ph).shape == (2, 3)
    assert_allclose(drawn.balance().without_carbon(ph)[:, :1], single.balance().without_carbon(ph), rtol=1e-15)
    assert drawn.get("ph").shape == (2, 1)


def test_settings_need_one_dimension_only():
    """`setting_of` takes the columns as they are read and answers with columns of lakes."""
    setting = setting_of(columns({}, {}, {}), AIR_PPM)
    assert setting.moved.shape == setting.lake.k1.shape == setting.air_co2_mol_l.shape == (3, 1)
