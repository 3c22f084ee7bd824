"""CO2 of lakes: flux, the independent excess of Neal et al., and when a pressure is not stated."""

import os
from dataclasses import FrozenInstanceError, replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf import Water
from aquabuf.assess.lake.co2 import (
    NEAL_AIR_ATM,
    co2_tests,
    flux_mol_m2_d,
    neal_excess_simple,
    neal_excess_temperature,
    neal_left_out_share,
    stateable,
    supersaturation,
)
from aquabuf.chem.organic import organic_anion_oliver
from aquabuf.chem.transfer import transfer_velocity_m_d
from aquabuf.tables import read_table

FOLDER = os.environ.get("AQUABUF_OPEN_DATA", "")
CHECKS = {row["name"]: row for row in read_table("checks")}


def k0_weiss(t_c):
    """Solubility of CO2 in fresh water [mol/L/atm]: Weiss 1974, salinity 0 (coefficients recalled)."""
    x = (t_c + 273.15) / 100.0
    return np.exp(-58.0931 + 90.5069 / x + 22.2940 * np.log(x))


# --- flux ---

@pytest.mark.parametrize(("t_c", "expected"), [(10.0, 36.68), (20.0, 35.10)])
def test_flux_of_a_worked_case(t_c, expected):
    """1500 over 420 µatm at 3 m/s in mmol/m2/d: printed equations worked out apart from the code, solubility recalled."""
    k = transfer_velocity_m_d(3.0, t_c, "cole_caraco", schmidt="wanninkhof_1992")
    found = 1e3 * flux_mol_m2_d(1500e-6, 420e-6, k0_weiss(t_c), k)
    assert_allclose(found, expected, rtol=0, atol=0.05)


def test_flux_by_units_and_sign():
    """1 m/d through 1 m2 renews 1000 L a day: 0.04 mol/L/atm at 1e-3 atm of excess carries 0.04 mol. Uptake is minus that."""
    found = flux_mol_m2_d([1.4e-3, 4e-4, 4e-4, np.nan], [4e-4, 1.4e-3, 4e-4, 4e-4], 0.04, 1.0)
    assert_allclose(found, [0.04, -0.04, 0.0, np.nan], rtol=1e-12, atol=1e-18)


def test_supersaturation():
    """Pressure over that of air; no air, no ratio."""
    assert_allclose(supersaturation([840e-6, 210e-6, np.nan, 1e-3], [420e-6, 420e-6, 420e-6, 0.0]), [2.0, 0.5, np.nan, np.nan])


# --- Neal, House & Down 1998 ---

CASES = [(100e-6, 6.5, 10.0, 5.2871, 5.1754), (50e-6, 5.8, 5.0, 13.6261, 12.6660)]


@pytest.mark.parametrize(("gran", "ph", "t_c", "simple", "with_t"), CASES)
def test_excess_of_neal_house_and_down(gran, ph, t_c, simple, with_t):
    """Both printed equations (abstract), worked out apart from the code."""
    assert_allclose(neal_excess_simple(gran, ph), simple, rtol=0, atol=5e-4)
    assert_allclose(neal_excess_temperature(gran, ph, t_c), with_t, rtol=0, atol=5e-4)


@pytest.mark.parametrize("t_c", [0.0, 7.0, 15.0, 25.0])
@pytest.mark.parametrize(("ph", "gran"), [(5.5, 30e-6), (6.5, 100e-6), (7.5, 800e-6)])
def test_engine_agrees_with_neal_in_clear_water(t_c, ph, gran):
    """Two ways apart from each other: within 3 %, at the ionic strength whose activity coefficient is their 0.95."""
    water = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=gran, t_c=t_c, ionic_strength_mol_l=0.0024)
    assert_allclose(water.pco2_atm, neal_excess_temperature(gran, ph, t_c) * NEAL_AIR_ATM, rtol=0.03)


def test_simple_form_is_the_other_at_its_temperature():
    """Both denominators are 6.0 at t = 0.46/0.0636 °C; in acid water, where activity does not count, they give the same."""
    assert_allclose(neal_excess_temperature(0.0, 5.0, 0.46 / 0.0636), neal_excess_simple(0.0, 5.0), rtol=1e-12)
    assert_allclose(neal_excess_simple(0.0, 5.0), 100.0 / 6.0, rtol=1e-12)


def test_no_bicarbonate_no_excess():
    """At pH 5 free acid is 10 µeq/L: below ANC -10 there is no bicarbonate; missing readings stay missing."""
    gran = np.array([-10.5e-6, -9.5e-6, np.nan])
    assert_allclose(neal_excess_simple(gran, 5.0), [np.nan, 5.0 / 6.0, np.nan], rtol=1e-9)
    assert_array_equal(np.isnan(neal_excess_temperature([-11e-6, -9.5e-6, 1e-4], [5.0, 5.0, np.nan], 10.0)), [True, False, True])
    assert_array_equal(np.isnan(neal_left_out_share([-11e-6, -9.5e-6], 5.0, 10.0)), [True, False])


def test_what_neal_leaves_out():
    """Handbook constants at 10 °C, pKw 14.535 and pK2 10.49: much alkalinity leaves carbonate, little leaves hydroxide."""
    carbonate = neal_left_out_share(1.0, 8.5, 10.0)
    assert_allclose(np.log10(carbonate / 2.0), 8.5 - 10.49, rtol=0, atol=0.02)
    hydroxide = neal_left_out_share(1e-9, 7.0, 10.0) - 2.0 * 10.0 ** (7.0 - 10.49)
    assert_allclose(np.log10(hydroxide * 1.01e-7), 7.0 - 14.535, rtol=0, atol=0.02)


def test_simple_forms_are_good_below_ph_8():
    """1 % of a water of 200 µeq/L at pH 8 and 10 °C, a tenth of that at pH 7: carbonate and hydroxide both go by 10^pH."""
    share = neal_left_out_share(200e-6, np.array([7.0, 8.0]), 10.0)
    assert 0.005 < share[1] < 0.015
    assert_allclose(share[1] / share[0], 10.0, rtol=1e-3)


# --- whether a pressure can be stated ---

SOUND = {"of_titration": True, "ph": 6.8, "carbonate_eq_l": 100e-6, "organic_eq_l": 5e-6, "low_atm": 0.8e-3, "high_atm": 1.3e-3}


def asked(pco2_atm=1e-3, **changed):
    """The verdict on a sound clear-water lake, changed by name."""
    return stateable(pco2_atm, **(SOUND | changed))


def test_clear_water_is_stated():
    """Nothing speaks against it."""
    found = asked()
    assert (bool(found.mask), found.words.item(), found.test.item()) == (True, "", "")
    assert np.isnan(found.value)


def test_organic_anions_above_the_shipped_limit():
    """45 of 100: told with value, limit and what to do; the limit is the one of the shipped check."""
    found = asked(organic_eq_l=45e-6)
    assert not found.mask
    assert found.words.item() == ("not stated: organic anions that a titration counts are 45 % of the carbonate alkalinity "
                                  "(limit 20 %); measure carbon or CO2 directly")
    assert_allclose(found.value, 45.0, rtol=1e-12)
    limit = {t.name: t for t in co2_tests()}["organic anions"]
    check = CHECKS["CO2 in brown acid water"]
    assert (limit.limit, limit.unit, limit.source) == (float(check["high"]), check["unit"], check["source"])


def test_the_limit_itself_is_allowed():
    """Twenty of a hundred in any unit of charge; a hair above is not."""
    carbonate = np.array([1e-6, 3e-6, 50e-6, 1e-3])
    assert asked(organic_eq_l=0.2 * carbonate, carbonate_eq_l=carbonate).mask.all()
    assert not asked(organic_eq_l=0.2001 * carbonate, carbonate_eq_l=carbonate).mask.any()


def test_measured_carbon_passes_the_tests_of_titrations():
    """Organic anions, unknown or many, and an ANC without carbonate do not touch measured carbon with pH."""
    readings = {"ph": [4.8, 4.8, 4.8], "organic_eq_l": [90e-6, np.nan, 5e-6], "carbonate_eq_l": [1e-6, 1e-6, -5e-6]}
    assert asked(of_titration=False, **readings).mask.all()
    assert asked(of_titration=True, **readings).test.tolist() == ["organic anions", "organic carbon unknown", "no carbonate"]


def test_acid_water_of_unknown_organic_carbon():
    """Below pH 5.5 organic carbon must be known; above, or where it is known to be little, the pressure is stated."""
    found = asked(ph=[5.3, 5.5, 5.3, np.nan], organic_eq_l=[np.nan, np.nan, 1e-6, np.nan])
    assert found.mask.tolist() == [False, True, True, True]
    assert found.words[0] == ("not stated: pH is 5.3, below 5.5, and organic carbon was not measured; "
                              "measure carbon or organic carbon")
    assert {t.name: t for t in co2_tests()}["organic carbon unknown"].limit == float(CHECKS["CO2 in acid water"]["low"])


def test_no_carbonate_left():
    """A water whose ANC is all organic or all acid gives a pressure of zero, which is no pressure."""
    found = asked(pco2_atm=[0.0, 0.0, 1e-3], carbonate_eq_l=[0.0, -8e-6, 1e-4])
    assert found.mask.tolist() == [False, False, True]
    assert found.words[1] == ("not stated: pH and ANC leave no carbonate alkalinity to tell carbon by; "
                              "measure carbon or CO2 directly")
    assert_allclose(found.value[1], -8.0, rtol=1e-12)


def test_wide_interval_counts_for_measured_carbon_too():
    """Upper over lower end against the limit of the table; an end at zero is wide, none at all is not asked."""
    limit = {t.name: t for t in co2_tests()}["wide interval"].limit
    low = np.array([1e-3, 1e-3, 0.0, np.nan, 1e-3])
    high = np.array([limit * 1e-3, 1.01 * limit * 1e-3, 1e-3, 1e-3, np.nan])
    found = asked(of_titration=False, low_atm=low, high_atm=high)
    assert found.mask.tolist() == [True, False, False, True, True]
    assert found.words[1] == ("not stated: the upper end of its interval is 4.04 times the lower end (limit 4); "
                              "read pH more closely, or measure carbon or CO2 directly")
    assert "is more than 1000 times the lower end" in found.words[2]


def test_no_pressure_has_no_reason():
    """Where nothing was worked out there is nothing to withhold, whatever the other readings say."""
    found = asked(pco2_atm=[np.nan, 1e-3], organic_eq_l=90e-6)
    assert found.mask.tolist() == [False, False]
    assert found.test.tolist() == ["", "organic anions"]


@pytest.mark.parametrize("shape", [(), (4,), (4, 1), (2, 2)])
def test_rows_do_not_see_each_other(shape):
    """Arrays of any shape are answered as their values one by one."""
    organic = np.resize([5e-6, 45e-6, np.nan, 312.4e-6], shape)
    ph = np.resize([6.8, 6.1, 5.0, 5.9], shape)
    whole = asked(organic_eq_l=organic, ph=ph)
    assert whole.mask.shape == whole.words.shape == whole.test.shape == shape
    single = [asked(organic_eq_l=o, ph=p) for o, p in zip(np.ravel(organic), np.ravel(ph), strict=True)]
    assert np.ravel(whole.words).tolist() == [s.words.item() for s in single]
    assert np.ravel(whole.mask).tolist() == [bool(s.mask) for s in single]


def test_large_shares_are_told_without_powers_of_ten():
    """Three digits below a hundred, whole numbers above, and an end to it."""
    words = asked(organic_eq_l=[20.46e-6, 312.4e-6, 9e-3]).words
    assert "are 20.5 % of" in words[0]
    assert "are 312 % of" in words[1]
    assert "are more than 1000 % of" in words[2]


def test_limits_can_be_replaced():
    """A user's own limit outranks the shipped one."""
    own = [replace(t, limit=60.0) if t.name == "organic anions" else t for t in co2_tests()]
    found = asked(organic_eq_l=[45e-6, 65e-6], tests=own)
    assert found.mask.tolist() == [True, False]
    assert "(limit 60 %)" in found.words[1]


def test_result_is_frozen():
    """What was decided stays decided."""
    with pytest.raises(FrozenInstanceError, match="mask"):
        asked().mask = True


def test_every_test_has_source_and_unit_and_states_its_rule():
    """Its own, or those of the check it names."""
    rows = {row["name"]: row for row in read_table("co2_tests")}
    for test in co2_tests():
        row = rows[test.name]
        assert bool(row["check"]) != bool(row["limit"] and row["source"] and row["mark"])
        assert len(test.source) > 10
        assert test.unit
        assert test.next_step
        assert f"{test.operator} {test.limit:g}" in test.rule()


@pytest.mark.open_data
@pytest.mark.skipif(not FOLDER, reason="AQUABUF_OPEN_DATA does not name the folder of agency files")
def test_survey_lakes_that_are_stated_agree_with_measured_carbon():
    """Eastern Lake Survey 1984: pressure by pH and Gran ANC less organic anions against pH and measured carbon.

    Nine of ten that are stated lie within a quarter; of the others that have a pressure fewer than half do.
    """
    lakes = pd.read_csv(Path(FOLDER) / "nsws_lakes_1984.csv").dropna(
        subset=["pH_closed_lab", "anc_ueq_L_revised", "doc_mgC_L", "dic_closed_mgC_L", "cond_uS_cm_25C"])
    ph, doc = lakes["pH_closed_lab"].to_numpy(), lakes["doc_mgC_L"].to_numpy()
    organic = np.maximum(organic_anion_oliver(doc, ph) - organic_anion_oliver(doc, 4.0), 0.0)
    anc = lakes["anc_ueq_L_revised"].to_numpy() * 1e-6 - organic
    where = {"ph": ph, "t_c": 25.0, "ionic_strength_mol_l": 1.6e-5 * lakes["cond_uS_cm_25C"].to_numpy()}
    measured = Water.from_ph_dic(dic_mol_l=lakes["dic_closed_mgC_L"].to_numpy() / 12011.0, **where).pco2_atm
    computed = np.nan_to_num(Water.from_ph_alkalinity(alkalinity_eq_l=anc, **where).pco2_atm)
    stated = stateable(computed, of_titration=True, ph=ph, carbonate_eq_l=anc + 10.0**-ph, organic_eq_l=organic).mask
    near = np.abs(computed / measured - 1.0) < 0.25

    assert stated.sum() > 350
    assert near[stated].mean() >= 0.9
    assert near[~stated & (computed > 0.0)].mean() < 0.5
