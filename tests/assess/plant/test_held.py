"""What a water takes within a pH window: definition, washout against numerical integration, products, words."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.integrate import solve_ivp

from aquabuf import Water
from aquabuf.assess.plant.held import basin_hours, held_against, held_words, tolerated_dose_mol_l, tolerated_words
from aquabuf.errors import InputError

SOFT = {"t_c": 15.0, "ionic_strength_mol_l": 0.003, "phosphate_mol_l": 2e-5}
WINDOW = {"ph_low": 6.5, "ph_high": 8.5}


def soft(ph=7.5):
    """A soft water."""
    return Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=1e-3, **SOFT)


@pytest.mark.parametrize(("name", "exchange", "limit", "sign"), [
    ("acid_eq_l", "closed", 6.5, -1), ("base_eq_l", "closed", 8.5, 1), ("acid_open_eq_l", "open", 6.5, -1),
    ("base_open_eq_l", "open", 8.5, 1)])
def test_margins_lead_to_the_limits(name, exchange, limit, sign):
    """A water with that much less or more alkalinity, its carbon or its CO2 pressure kept, has the limit's pH."""
    water = soft()
    alkalinity = 1e-3 + sign * getattr(held_against(water, **WINDOW), name)
    if exchange == "closed":
        moved = Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=water.dic_mol_l, **SOFT)
    else:
        moved = Water.from_alkalinity_pco2(alkalinity_eq_l=alkalinity, pco2_atm=water.pco2_atm, **SOFT)
    assert_allclose(moved.ph, limit, rtol=0, atol=1e-9)


def test_textbook_example_that_would_destroy_all_alkalinity():
    """2.74 meq/L from pH 10 to 8.7 takes 0.70 to 0.76 meq/L of acid or 30 to 33 mg/L CO2, not 2.74 (facts W22, computed)."""
    water = Water.from_ph_alkalinity(ph=10.0, alkalinity_eq_l=2.74e-3, t_c=20.0, ionic_strength_mol_l=0.005)
    assert_allclose(held_against(water, ph_low=8.7, ph_high=10.5).acid_eq_l, 0.73e-3, rtol=0, atol=0.03e-3)
    co2 = tolerated_dose_mol_l(water, ph_low=8.7, ph_high=10.5, adds={"carbon": 1.0})
    assert_allclose(44.009e3 * co2, 31.5, rtol=0, atol=1.5)


@pytest.mark.parametrize(("fault", "flow"), [(2e-3, 240.0), (-4e-4, 240.0), (1.2e-3, 2400.0)])
def test_washout_against_numerical_integration(fault, flow):
    """Alkalinity of a mixed basin by Runge-Kutta with the pH solved at every step until it leaves the window."""
    water, volume = soft(), 50.0
    k = flow / 24.0 / volume

    def ph(alkalinity):
        return float(Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=water.dic_mol_l, **SOFT).ph)

    def leaves(_, y):
        return ph(y[0]) - (6.5 if fault > 0.0 else 8.5)

    leaves.terminal = True
    run = solve_ivp(lambda t, y: k * (1e-3 - fault - y), (0.0, 1e3), [1e-3], events=leaves, rtol=1e-9, atol=1e-15)
    held = held_against(water, **WINDOW, fault_eq_l=fault, volume_m3=volume, flow_m3_d=flow)
    assert_allclose(held.hours, run.t_events[0][0], rtol=1e-6)


def test_closed_forms_of_the_basin():
    """ln 2 residence times to half of the steady state; margin over fault without flow; never where washout keeps pace."""
    assert_allclose(basin_hours(1e-3, 2e-3 * 0.25, 0.25), np.log(2.0) / 0.25, rtol=1e-12)
    assert_allclose(basin_hours(1e-3, 2e-4), 5.0, rtol=1e-12)
    assert_allclose(basin_hours(1e-3, 2e-4, 1e-9), 5.0, rtol=1e-6)
    assert_array_equal(basin_hours([1e-3, 1e-3, -1e-3, np.nan, 1e-3], [1e-3, 0.0, 1e-3, 1e-3, np.nan], 1.0),
                       [np.inf, np.inf, 0.0, np.nan, np.nan])


def test_fault_per_hour_of_basin():
    """1 eq/m3 per hour into a basin without flow uses up the base margin evenly."""
    held = held_against(soft(), **WINDOW, fault_eq_l_h=-1e-3, volume_m3=10.0)
    assert_allclose(held.hours, held.base_eq_l / 1e-3, rtol=1e-12)
    flowing = held_against(soft(), **WINDOW, fault_eq_l_h=-1e-4, volume_m3=10.0, flow_m3_d=24.0)
    assert flowing.hours > held_against(soft(), **WINDOW, fault_eq_l_h=-1e-4, volume_m3=10.0).hours


def test_fault_in_flowing_water_acts_at_once():
    """The pH after it is that of a water with so much less alkalinity."""
    water = soft()
    held = held_against(water, **WINDOW, fault_eq_l=3e-4)
    after = Water.from_alkalinity_dic(alkalinity_eq_l=7e-4, dic_mol_l=water.dic_mol_l, **SOFT)
    assert_allclose(held.ph_after, after.ph, rtol=0, atol=1e-9)
    assert np.isnan(held.hours)


ADDS = {"caustic soda": ({"alkalinity": 1.0}, 8.5), "soda ash": ({"alkalinity": 2.0, "carbon": 1.0}, 8.5),
        "sulfuric acid": ({"alkalinity": -2.0, "sulfate": 1.0}, 6.5), "carbon dioxide": ({"carbon": 1.0}, 6.5),
        "phosphoric acid": ({"alkalinity": -1.0, "phosphate": 1.0}, 6.5),
        "ammonia": ({"alkalinity": 1.0, "ammonium": 1.0}, 8.5)}


@pytest.mark.parametrize("name", ADDS)
def test_tolerated_dose_leads_to_the_limit(name):
    """The water with the product in it, solved from its totals, has the limit's pH."""
    adds, limit = ADDS[name]
    water = soft()
    x = tolerated_dose_mol_l(water, **WINDOW, adds=adds)
    totals = {f"{n}_mol_l": v * x for n, v in adds.items() if n in ("sulfate", "ammonium")}
    totals["phosphate_mol_l"] = SOFT["phosphate_mol_l"] + x * adds.get("phosphate", 0.0)
    after = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3 + x * adds.get("alkalinity", 0.0),
                                      dic_mol_l=water.dic_mol_l + x * adds.get("carbon", 0.0), **(SOFT | totals))
    assert x > 0.0
    assert_allclose(after.ph, limit, rtol=0, atol=1e-9)


def test_bicarbonate_never_leaves_the_window():
    """Its own solution lies near pH 8.3, inside: no excess does harm to pH. Outside or unsolved waters have no room."""
    adds = {"alkalinity": 1.0, "carbon": 1.0}
    water = Water.from_ph_alkalinity(ph=[7.5, 6.0, np.nan], alkalinity_eq_l=1e-3, t_c=15.0)
    assert_array_equal(tolerated_dose_mol_l(water, **WINDOW, adds=adds), [np.inf, 0.0, np.nan])
    said = [tolerated_words(x, "sodium bicarbonate", 84.006) for x in (np.inf, 0.0, np.nan)]
    assert [w.split(" sodium")[0] for w in said] == [
        "no excess of", "no excess of", "the excess of"]
    assert "takes the water out" in said[0]
    assert "outside the window already" in said[1]


def test_tolerated_product_counts_its_strength():
    """1 mmol/L NaOH is 40.0 mg/L pure and 80.0 mg/L of a 50 % solution."""
    assert tolerated_words(1e-3, "caustic soda", 39.997, 0.5).startswith("up to 80 mg/L of caustic soda")


def test_words():
    """Window, margins, pH after the fault, and when the basin leaves; outside and unsolved waters say so."""
    water = Water.from_ph_alkalinity(ph=[7.5, 6.0, np.nan], alkalinity_eq_l=1e-3, t_c=15.0)
    held = held_against(water, **WINDOW, fault_eq_l=[1e-3, 1e-3, 1e-3], volume_m3=50.0, flow_m3_d=240.0)
    said = held_words(held)
    assert said.startswith(f"pH 6.50 to 8.50 holds until {1e3 * held.acid_eq_l[0]:.3g} meq/L of strong acid")
    assert f"takes flowing water to pH {held.ph_after[0]:.2f} at once" in said
    assert f"leaves the window after {held.hours[0]:.3g} h (closed)" in said
    assert held_words(held, 1) == "At pH 6.00 the water is outside pH 6.50 to 8.50 already."
    assert held.hours[1] == 0.0
    assert "not solved" in held_words(held, 2)
    never = held_against(water, **WINDOW, fault_eq_l=1e-6, volume_m3=50.0, flow_m3_d=240.0)
    assert "never, as its flow washes the fault out (closed)" in held_words(never)


@pytest.mark.parametrize(("wrong", "message"), [
    ({"ph_low": 9.0}, "ph_low must be below ph_high"),
    ({"fault_eq_l": 1e-3, "fault_eq_l_h": 1e-3}, "found both"),
    ({"fault_eq_l": [1e-3, 2e-3]}, "must have the shape of the water"),
    ({"ph_high": "high"}, "must be numbers that broadcast"),
])
def test_messages(wrong, message):
    """A window upside down, a fault stated twice, shapes and words that do not fit."""
    with pytest.raises(InputError, match=message):
        held_against(soft(), **(WINDOW | wrong))
