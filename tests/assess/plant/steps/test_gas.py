"""Stripping and taking up carbon dioxide: equilibrium by hand, closed forms, and a general integrator of scipy."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, water_of, words
from numpy.testing import assert_allclose, assert_array_equal
from scipy.integrate import solve_ivp

from aquabuf import Water
from aquabuf.assess.plant.steps.gas import FARTHEST, Aerate, Saturate, co2_per_carbon, excess_left
from aquabuf.errors import InputError

VAPOR_25 = 23.756 / 760.0  # pressure of water vapor at 25 °C, handbook [atm]
AIR = 425e-6 * (1.0 - VAPOR_25)
HANDS = BareWater(25.0, 0.003)


def co2(stream):
    """Dissolved CO2. [mol/L]"""
    return stream.water().species_mol_l["CO2"]


@pytest.mark.parametrize(("ph", "alk"), [(6.5, 40.0), (7.2, 200.0), (8.9, 60.0)])
def test_equilibrium_with_air_as_by_hand(ph, alk):
    """Carbon in excess leaves, carbon that is missing comes; alkalinity stays."""
    raw = water_of(ph, alk)
    out = Aerate(name="cascade").run(raw)
    by_hand = HANDS.ph_at_co2(alk * EQ_PER_MG_CACO3, HANDS.k0 * AIR)
    assert_allclose(out.figures["ph_after"], by_hand, atol=0.004)
    assert_allclose(out.stream.carbon_mol_l, HANDS.dic(by_hand, alk * EQ_PER_MG_CACO3), rtol=0.004)
    assert_array_equal(out.stream.alkalinity_eq_l, raw.alkalinity_eq_l)
    assert_allclose(out.stream.water().pco2_atm, AIR, rtol=1e-3)


@pytest.mark.parametrize("share", [0.0, 0.3, 0.9, 1.0])
def test_efficiency_is_a_share_of_dissolved_co2_above_equilibrium(share):
    """CO2 after = equilibrium + (1 - share) x (CO2 before - equilibrium), by printed constants."""
    raw = water_of(6.6, 80.0)
    out = Aerate(name="tower", efficiency=share).run(raw)
    start = float(raw.carbon_mol_l[0]) * HANDS.shares(6.6)[0]
    wanted = HANDS.k0 * AIR + (1.0 - share) * (start - HANDS.k0 * AIR)
    assert_allclose(co2(out.stream), wanted, rtol=0.004)
    assert_allclose(out.figures["co2_after_mg_l"], 44009.0 * wanted, rtol=0.004)
    assert_allclose(out.figures["ph_after"], HANDS.ph_at_co2(80.0 * EQ_PER_MG_CACO3, wanted), atol=0.004)


def test_carbon_is_accounted_for():
    """What leaves is what the water lost, as CO2 (44.009 g/mol); more than the fall of CO2 itself."""
    raw = water_of(6.6, 80.0)
    out = Aerate(name="tower", efficiency=0.8).run(raw)
    figures = out.figures
    assert_allclose(figures["carbon_removed_mg_l_co2"], 44009.0 * (raw.carbon_mol_l - out.stream.carbon_mol_l), rtol=1e-9)
    assert figures["carbon_removed_mg_l_co2"] > figures["co2_before_mg_l"] - figures["co2_after_mg_l"]


# ---------------------------------------------------------------- by transfer coefficient


def engine_co2(stream, carbon):
    """The engine's CO2 at other carbons, for an integrator of its own. [mol/L]"""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=stream.alkalinity_eq_l, dic_mol_l=carbon, **stream.keywords())
    return water.species_mol_l["CO2"]


@pytest.mark.parametrize(("ph", "alk", "totals"), [
    (6.3, 150.0, {}), (7.6, 60.0, {}), (9.3, 60.0, {}), (9.8, 250.0, {}), (10.9, 120.0, {}), (7.3, 100.0, {"ammonium": 2e-3, "phosphate": 2e-4}),
])
@pytest.mark.parametrize("kla_time", [0.05, 3.0, 40.0])
def test_transfer_against_a_general_integrator(ph, alk, totals, kla_time):
    """dC/dt = -kLa (CO2 - CO2 at equilibrium) by scipy's implicit Runge-Kutta at tight tolerance."""
    raw = water_of(ph, alk, **totals)
    hours = 0.5
    out = Aerate(name="basin", kla_per_h=kla_time / hours, time_h=hours).run(raw)
    equilibrium = co2(Aerate(name="air").run(raw).stream)
    run = solve_ivp(lambda _, c: -kla_time / hours * (engine_co2(raw, c) - equilibrium), (0.0, hours), raw.carbon_mol_l,
                    method="LSODA", rtol=1e-10, atol=1e-14)
    lost = run.y[:, -1] - raw.carbon_mol_l
    assert_allclose(out.stream.carbon_mol_l - raw.carbon_mol_l, lost, rtol=1e-4, atol=1e-9)


def test_transfer_by_printed_constants():
    """The same rate law with carbonate worked out by hand; constants agree to about 0.3 %."""
    raw = water_of(6.5, 100.0)
    alkalinity, at_air = 100.0 * EQ_PER_MG_CACO3, HANDS.k0 * AIR
    run = solve_ivp(lambda _, c: [-8.0 * (c[0] * HANDS.shares(HANDS.ph(alkalinity, c[0]))[0] - at_air)], (0.0, 0.25),
                    [HANDS.dic(6.5, alkalinity)], rtol=1e-9, atol=1e-12)
    out = Aerate(name="basin", kla_per_h=8.0, time_h=0.25).run(raw)
    assert_allclose(out.stream.carbon_mol_l, run.y[0, -1], rtol=0.002)


def test_acid_water_decays_as_an_exponential():
    """Without bicarbonate all carbon is CO2, and its excess falls by exp(-kLa t) exactly."""
    raw = water_of(7.0, 100.0).replaced(alkalinity_eq_l=np.array([-2e-2]), carbon_mol_l=np.array([1e-3]))
    assert_allclose(excess_left(raw.water(), 0.0, 2.5), np.exp(-2.5), rtol=1e-4)
    assert_allclose(co2_per_carbon(raw.water()), 1.0, atol=1e-4)


@pytest.mark.parametrize("ph", [6.0, 7.5, 8.3, 9.5])
def test_co2_per_carbon_as_by_hand(ph):
    """Slope of dissolved CO2 against carbon at constant alkalinity, by differences of a water worked out by hand."""
    alkalinity = 100.0 * EQ_PER_MG_CACO3
    carbon = HANDS.dic(ph, alkalinity)

    def at(c):
        return c * HANDS.shares(HANDS.ph(alkalinity, c))[0]

    slope = (at(carbon * 1.0005) - at(carbon * 0.9995)) / (0.001 * carbon)
    assert_allclose(co2_per_carbon(water_of(ph, 100.0).water()), slope, rtol=0.006)


def test_long_transfer_is_equilibrium_and_none_changes_nothing():
    """The two limits."""
    raw = water_of(6.5, 100.0)
    end, start = (Aerate(name="basin", kla_per_h=k, time_h=1.0).run(raw).stream for k in (1e4, 0.0))
    assert_allclose(end.carbon_mol_l, Aerate(name="air").run(raw).stream.carbon_mol_l, rtol=1e-8)
    assert_allclose(start.carbon_mol_l, raw.carbon_mol_l, rtol=1e-12)


@pytest.mark.parametrize("whole", [3.0, FARTHEST - 1.0, FARTHEST + 1.0])
def test_two_halves_are_one_whole(whole):
    """Passing two basins in turn is one of the time of both; also where the reach of the nodes ends."""
    raw = water_of(9.4, 150.0)
    once = Aerate(name="basin", kla_per_h=whole, time_h=1.0).run(raw).stream
    half = Aerate(name="basin", kla_per_h=whole, time_h=0.5)
    twice = half.run(half.run(raw).stream).stream
    assert_allclose(twice.carbon_mol_l, once.carbon_mol_l, rtol=1e-6)


# ---------------------------------------------------------------- another gas, words, bad input


def test_digester_gas():
    """Settled: 35 °C, I 0.15, 2000 mg/L under 35 % CO2 has pH 6.8 (computed in the fact sheet apart from this code)."""
    out = Saturate(name="digester", pco2_atm=0.35).run(water_of(7.3, 2000.0, t_c=35.0, strength=0.15))
    assert_allclose(out.figures["ph_after"], 6.8, atol=0.06)
    assert_allclose(out.stream.water().pco2_atm, 0.35, rtol=1e-9)
    half = Saturate(name="digester", pco2_atm=0.35, efficiency=0.5)
    raw = water_of(7.3, 2000.0, t_c=35.0, strength=0.15)
    assert_allclose(half.run(raw).stream.water().pco2_atm, 0.5 * (raw.water().pco2_atm + 0.35), rtol=1e-9)


def test_assumptions_are_said():
    """CO2 of the air with its year, or of the plan; the definition of efficiency."""
    said = words(Aerate(name="a", efficiency=0.5).run(water_of()))
    assert "425 ppm of CO2, about the mean of 2025 (recalled)" in said
    assert "share of dissolved CO2 above equilibrium" in said
    assert "600 ppm of CO2, set in the plan" in words(Aerate(name="a", co2_ppm=600.0).run(water_of()))
    assert "0.3500 atm of CO2" in words(Saturate(name="s", pco2_atm=0.35).run(water_of()))


def test_deposits_and_corrosion_are_said():
    """Hard water deposits in the aerator, soft water stays one that dissolves."""
    hard, soft = (Aerate(name="a").run(water_of(7.0, alk, calcium=ca)) for alk, ca in ((250.0, 3e-3), (35.0, 2e-4)))
    assert "may deposit in the aerator" in words(hard)
    assert "still dissolves" in words(soft)
    assert "may deposit" not in words(soft)


@pytest.mark.parametrize(("settings", "message"), [
    ({"kla_per_h": 5.0}, "needs kla_per_h and time_h together; found kla_per_h alone. Add time_h"),
    ({"time_h": 5.0}, "needs kla_per_h and time_h together; found time_h alone. Add kla_per_h"),
    ({"kla_per_h": 5.0, "time_h": 1.0, "efficiency": 0.5}, "either efficiency or kla_per_h with time_h; found both"),
])
def test_settings_that_do_not_go_together(settings, message):
    """Half a pair, or two ways at once."""
    with pytest.raises(InputError, match=message):
        Aerate(name="a", **settings)


@pytest.mark.parametrize(("step", "message"), [
    (Aerate(name="a", efficiency=70.0), "efficiency of step 'a' must be 0 to 1; found 70"),
    (Aerate(name="a", kla_per_h=-1.0, time_h=1.0), "kla_per_h of step 'a' must be at least 0; found -1"),
    (Aerate(name="a", kla_per_h=1.0, time_h=-1.0), "time_h of step 'a' must be at least 0; found -1"),
    (Aerate(name="a", co2_ppm=-4.0), "co2_ppm of step 'a' must be at least 0; found -4"),
    (Saturate(name="a", pco2_atm=-4.0), "pco2_atm of step 'a' must be at least 0; found -4"),
    (Saturate(name="a", pco2_atm=0.1, efficiency=2.0), "efficiency of step 'a' must be 0 to 1; found 2"),
])
def test_settings_out_of_range(step, message):
    """Each names the setting, the rule and the value."""
    with pytest.raises(InputError, match=message):
        step.run(water_of())
