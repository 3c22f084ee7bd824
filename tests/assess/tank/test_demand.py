"""Demand and window against worked tables of ideal streams, closed forms with dilution and metals, mass balances."""

import numpy as np
import pytest
from ideal_wastes import NOTHING, PK_CARBONIC, diluted_caustic, ideal, protons_lost, reagent
from numpy.testing import assert_allclose

from aquabuf.assess.tank.demand import (
    Aim,
    Load,
    aims_of,
    demand_eq_l,
    demands,
    loads_of,
    mixed,
    ph_after,
    reagent_gain,
    window_fit,
)
from aquabuf.engine.readout import GRID_PH, MetalTable, Readout
from aquabuf.errors import InputError

WATER, CARBON = ideal(NOTHING), 1
NONE = np.array([1.0, 0.0])
CAUSTIC = reagent("caustic soda 50 %", 0.5)
SULFURIC = reagent("sulfuric acid 93 %", 0.93)
SODA = reagent("soda ash", 0.98, dry=True)
BICARBONATE = reagent("sodium bicarbonate", dry=True)
GAS = reagent("carbon dioxide")

# streams: readout, base, amounts
STREAMS = {
    "HCl 0.1 N": (WATER, -0.1, NONE), "HCl 0.01 N": (WATER, -0.01, NONE),
    "HCl 0.01 N, 1 mmol/L carbon": (WATER, -0.01, np.array([1.0, 1e-3])),
    "H2SO4 0.05 M": (ideal(0.05 * (protons_lost([1.99]) - 1.0)), -0.1, NONE),
    "acetic 0.1 M": (ideal(0.1 * protons_lost([4.756])), 0.0, NONE),
    "phosphoric 0.0333 M": (ideal((protons_lost([2.148, 7.198, 12.35]) - 1.0) / 30.0), -1.0 / 30.0, NONE),
    "citric 0.0333 M": (ideal(protons_lost([3.128, 4.761, 6.396]) / 30.0), 0.0, NONE),
}


@pytest.mark.parametrize(("stream", "ph0", "to_6", "to_7", "to_8", "to_9", "beta", "window", "share", "low", "high"), [
    ("HCl 0.1 N", 1.000, 0.099999, 0.100000, 0.100001, 0.100010, 4.605e-7, 1.099e-5, 0.011, 0.001, 0.010),
    ("HCl 0.01 N", 2.000, 0.009999, 0.010000, 0.010001, 0.010010, 4.605e-7, 1.099e-5, 0.110, 0.010, 0.100),
    ("HCl 0.01 N, 1 mmol/L carbon", 2.000, 0.010307, 0.010817, 0.010984, 0.011053, 3.467e-4, 7.457e-4, 6.89, 4.72, 2.18),
    ("H2SO4 0.05 M", 1.240, 0.099994, 0.100000, 0.100001, 0.100010, 1.59e-6, 1.59e-5, 0.016, 0.005, 0.011),
    ("acetic 0.1 M", 2.881, 0.094605, 0.099433, 0.099944, 0.100004, 1.298e-3, 5.40e-3, 5.43, 4.86, 0.57)])
def test_window_of_typical_streams(stream, ph0, to_6, to_7, to_8, to_9, beta, window, share, low, high):
    """Worked table, ideal, undiluted, closed to CO2; slopes to their digits (0.3 %) and half a step of the grid (2.3 x 0.002)."""
    readout, base, amounts = STREAMS[stream]
    fit = window_fit(readout, base, amounts, 6.0, 9.0, 7.0)

    assert_allclose(readout.ph(base, amounts), ph0, atol=6e-4)
    assert_allclose([readout.base_at(ph, amounts) - base for ph in (6.0, 7.0, 8.0, 9.0)], [to_6, to_7, to_8, to_9], atol=7e-7)
    assert_allclose(fit.demand_eq_l, to_7, atol=7e-7)
    assert_allclose(fit.buffer_eq_l_ph, beta, rtol=8e-3)
    assert_allclose(fit.gain_ph_per_eq_l, 1.0 / beta, rtol=8e-3)
    assert_allclose(fit.tolerance_eq_l, window, rtol=3e-3)
    assert_allclose([100 * fit.share_of_demand, 100 * fit.low_share, 100 * fit.high_share], [share, low, high],
                    atol=6e-3 if share > 1 else 6e-4)


@pytest.mark.parametrize(("stream", "times", "atol"), [
    ("HCl 0.1 N", 1.00, 5e-3), ("H2SO4 0.05 M", 1.74, 6e-3), ("phosphoric 0.0333 M", 3.78, 0.02), ("citric 0.0333 M", 20.1, 0.06),
    ("acetic 0.1 M", 75.6, 0.1)])
def test_ph_alone_misstates_the_demand(stream, times, atol):
    """Worked figures: true demand to pH 7 over 10^-pH."""
    readout, base, amounts = STREAMS[stream]

    assert_allclose(window_fit(readout, base, amounts, 6.0, 9.0, 7.0).demand_over_ph, times, atol=atol)


def test_unbuffered_water_is_steepest_at_neutral():
    """2.17e6 pH per eq/L at pH 7 (worked); half of the tolerance lies below pH 8.65, since 9 has ten times the base of 6."""
    fit = window_fit(WATER, -0.01, NONE, 6.0, 9.0, 8.0)
    half = 0.5 * ((1e-5 - 1e-9) + (1e-8 - 1e-6))

    assert_allclose(fit.steepest_ph, 7.0, atol=0.004)
    assert_allclose(fit.steepest_gain_ph_per_eq_l, 2.17e6, rtol=2e-3)
    assert_allclose(fit.gain_ph_per_eq_l, 1.0 / (np.log(10) * (1e-8 + 1e-6)), rtol=2e-3)
    assert_allclose(10.0 ** (fit.halving_ph - 14) - 10.0**-fit.halving_ph, half, rtol=1e-4)


def test_steepest_part_of_a_buffered_window_is_its_edge():
    """Acetate: its buffer has run out at the alkaline end; carbon at 1 mmol/L is weakest near pH 8.3 (derivative zero)."""
    readout, base, amounts = STREAMS["acetic 0.1 M"]
    fit = window_fit(WATER, -0.01, [1.0, 1e-3], 6.0, 9.0, 7.0)

    assert window_fit(readout, base, amounts, 4.5, 7.0, 5.0).steepest_ph == 7.0
    assert_allclose(fit.steepest_ph, 0.5 * sum(PK_CARBONIC), atol=0.05)


def test_alkaline_waste_has_a_negative_demand():
    """NaOH 0.02 N to pH 7: 0.02 eq/L of acid, and pH tells all of it."""
    fit = window_fit(WATER, 0.02, NONE, 6.0, 9.0, 7.0)

    assert_allclose([fit.demand_eq_l, fit.demand_over_ph], [-0.02, 1.0], rtol=1e-4)
    assert_allclose(fit.share_of_demand, 1.099e-5 / 0.02, rtol=1e-3)


def test_window_of_many_loads():
    """Rows do not see each other; what needs nothing has no share."""
    amounts = np.array([[1.0, 1.0, 1.0], [0.0, 1e-3, 0.0]])
    fit = window_fit(WATER, [-0.1, -0.01, np.nan], amounts, 6.0, 9.0, 7.0)
    one = window_fit(WATER, -0.01, amounts[:, 1], 6.0, 9.0, 7.0)
    calm = window_fit(WATER, WATER.base_at(7.0, NONE), NONE, 6.0, 9.0, 7.0)

    assert_allclose(fit.share_of_demand[:2], [1.099e-4, one.share_of_demand], rtol=1e-3)
    assert np.isnan(fit.share_of_demand[2])
    assert np.isnan(calm.share_of_demand)
    assert_allclose(fit.steepest_ph[1], one.steepest_ph)


# the reagent's own water and carbon


@pytest.mark.parametrize(("f2", "ph"), [(45, 3.037), (49, 3.740), (49.9, 4.740), (49.99, 5.739), (50, 7.0), (50.01, 8.261),
                                        (50.1, 9.260), (51, 10.259), (55, 10.955)])
def test_strong_acid_and_base_in_a_tank(f2, ph):
    """500 L/min of 0.01 M HCl with 0.1 M NaOH: printed set-up, worked answers."""
    weak = diluted_caustic(0.1)

    assert_allclose(ph_after(WATER, -0.01, NONE, weak, 0.1 * f2 / 500.0), ph, atol=0.002)


@pytest.mark.parametrize(("ph", "f2"), [(6.0, 49.99456), (7.0, 50.0), (9.0, 50.05500)])
def test_demand_counts_the_water_of_the_reagent(ph, f2):
    """The same tank the other way round: 0.12 % of the flow between pH 6 and 9 (worked)."""
    weak = diluted_caustic(0.1)

    assert_allclose(500.0 * demand_eq_l(WATER, -0.01, NONE, ph, weak) / weak.reacting_eq_l, f2, atol=5e-5)


def test_dilution_by_the_closed_form():
    """(1 + d/N)(OH - H) = Y + d at pH 11 with 0.5 N: d = (w - Y)/(1 - w/N)."""
    w = 1e-3 - 1e-11

    assert_allclose(demand_eq_l(WATER, -0.1, NONE, 11.0, diluted_caustic(0.5)), (w + 0.1) / (1.0 - w / 0.5), rtol=1e-4)


def test_a_reagent_weaker_than_the_aim_cannot_reach_it():
    """0.001 N caustic stands at pH 11 itself; carbon of bicarbonate ends at 8.34."""
    assert np.isnan(demand_eq_l(WATER, -0.1, NONE, 11.1, diluted_caustic(1e-3)))
    assert np.isnan(demand_eq_l(WATER, -0.01, NONE, 9.0, BICARBONATE, carbon_carrier=CARBON))


@pytest.mark.parametrize("ph", [6.0, 7.0, 8.2])
@pytest.mark.parametrize(("base", "carbon_per_eq"), [(SODA, 0.5), (BICARBONATE, 1.0)])
def test_carbonates_hold_some_back(base, carbon_per_eq, ph):
    """d (1 - c n(pH)) = w - Y, n protons lost by carbonic acid, in closed form."""
    h, (k1, k2) = 10.0**-ph, (10.0**-pk for pk in PK_CARBONIC)
    lost = (k1 * h + 2 * k1 * k2) / (h * h + k1 * h + k1 * k2)
    expected = (1e-14 / h - h + 0.01) / (1.0 - carbon_per_eq * lost)

    assert_allclose(demand_eq_l(WATER, -0.01, NONE, ph, base, carbon_carrier=CARBON), expected, rtol=1e-3)
    assert_allclose(demand_eq_l(WATER, -0.01, NONE, ph, base, carbon_carrier=CARBON, stripped=1.0), 1e-14 / h - h + 0.01,
                    rtol=1e-4)


@pytest.mark.parametrize("normality", [0.01, 0.5])
@pytest.mark.parametrize(("ratio", "ph"), [(0.9, 9.42), (1.0, 8.34), (1.1, 7.35), (1.5, 6.65), (2.0, 6.35)])
def test_carbon_dioxide_on_caustic(normality, ratio, ph):
    """Worked end points by mole ratio; the same for both strengths."""
    assert_allclose(ph_after(WATER, normality, NONE, GAS, ratio * normality, carbon_carrier=CARBON), ph, atol=0.02)


def test_half_a_mole_of_carbon_dioxide_leaves_carbonate():
    """Worked end points 10.97 and 11.86; the dose for pH 8.34 is one mole, in both directions."""
    ends = [ph_after(WATER, n, NONE, GAS, 0.5 * n, carbon_carrier=CARBON) for n in (0.01, 0.5)]

    assert_allclose(ends, [10.97, 11.86], atol=0.02)
    assert_allclose(demand_eq_l(WATER, 0.5, NONE, 8.3405, GAS, carbon_carrier=CARBON), 0.5, rtol=1e-3)


def test_acids_for_two_percent_caustic():
    """0.500 N: H2SO4 24.5, HCl 18.2, CO2 22.0 kg/m3, the last to bicarbonate (worked)."""
    hydrochloric = reagent("hydrochloric acid", 0.37)
    acid = [1e3 * demand_eq_l(WATER, 0.5, NONE, 7.0, r) * r.kg_per_eq * r.stock.strength for r in (SULFURIC, hydrochloric)]
    gas = demand_eq_l(WATER, 0.5, NONE, 8.34, GAS, carbon_carrier=CARBON)

    assert_allclose([*acid, 1e3 * gas * GAS.kg_per_eq], [24.5, 18.2, 22.0], rtol=3e-3)


def test_sign_decides_which_reagent_works():
    """Base on an alkaline waste and acid on an acid one move away from the aim; at the aim nothing is needed."""
    assert np.isnan(demand_eq_l(WATER, 0.01, NONE, 7.0, CAUSTIC))
    assert np.isnan(demand_eq_l(WATER, -0.01, NONE, 7.0, SULFURIC))
    assert_allclose(demand_eq_l(WATER, 0.01, NONE, 7.0, SULFURIC), 0.01, rtol=1e-4)
    assert demand_eq_l(WATER, WATER.base_at(7.0, NONE), NONE, 7.0, CAUSTIC) == 0.0


def test_ceiling_of_a_slurry():
    """Magnesium hydroxide stops at 9 in practice."""
    magnesia = reagent("magnesium hydroxide", 0.6)

    assert_allclose(demand_eq_l(WATER, -0.01, NONE, [8.5, 9.5], magnesia), [0.010003, np.nan], rtol=1e-4)


def with_metal(c_total, log_s):
    """A divalent metal whose solubility falls a hundredfold per pH, as free ion only."""
    free = 10.0 ** (log_s - 2.0 * GRID_PH)
    metal = MetalTable("metal", 2, 0, free, np.zeros_like(free) + 1e-300, np.array([c_total, 0.0]))
    return Readout(1.0, 1e-14, WATER.held, (metal,))


def test_metals_that_fall_out_take_their_charge():
    """v (OH - H) + 2 (C - v s) = Y + d, v = 1 + d/N: a straight line in d."""
    c, n, ph, y = 0.01, 0.5, 9.0, -0.02
    s, w = 10.0 ** (14.0 - 2.0 * ph), 1e-5 - 1e-9
    expected = (w + 2.0 * c - 2.0 * s - y) / (1.0 - w / n + 2.0 * s / n)

    assert_allclose(demand_eq_l(with_metal(c, 14.0), y, NONE, ph, diluted_caustic(n)), expected, rtol=1e-5)


def test_a_metal_that_the_feed_keeps_in_solution():
    """Just saturated: the water of a weak feed dissolves it all, and its hydroxide is not asked for."""
    c, n, ph = 0.0101, 0.05, 8.0
    s, w = 10.0 ** (14.0 - 2.0 * ph), 1e-6 - 1e-8
    d = (w + 0.02) / (1.0 - w / n)
    assert c > s > c / (1.0 + d / n)  # solid before the feed, none after

    assert_allclose(demand_eq_l(with_metal(c, 14.0), -0.02, NONE, ph, diluted_caustic(n)), d, rtol=1e-6)


def test_demand_leads_to_its_ph():
    """Any stream and reagent: the mixture has the pH asked for, and base and carbon are conserved."""
    readout, base, amounts = STREAMS["citric 0.0333 M"]
    for r in (CAUSTIC, diluted_caustic(0.5), SODA):
        dose = demand_eq_l(readout, base, amounts, [5.0, 7.0, 8.0], r, carbon_carrier=CARBON)
        y, c, volume = mixed(base, amounts, r, dose, carbon_carrier=CARBON)

        assert_allclose(ph_after(readout, base, amounts, r, dose, carbon_carrier=CARBON), [5.0, 7.0, 8.0], atol=2e-4)
        assert_allclose(y * volume, base + r.base_per_eq * dose, rtol=1e-12)
        assert_allclose(c[CARBON] * volume, r.carbon_per_eq * dose, atol=1e-15)


def test_gain_is_the_slope_of_ph_after():
    """By a small step of the dose, for reagents that bring carbon as well."""
    for r in (CAUSTIC, SODA):
        dose = demand_eq_l(WATER, -0.01, [1.0, 1e-3], 7.0, r, carbon_carrier=CARBON)
        step = np.array([-1e-4, 1e-4]) * dose
        ends = ph_after(WATER, -0.01, [1.0, 1e-3], r, dose + step, carbon_carrier=CARBON)
        gain = reagent_gain(WATER, -0.01, [1.0, 1e-3], 7.0, r, dose, carbon_carrier=CARBON)

        assert_allclose(gain, np.diff(ends)[0] / np.diff(step)[0], rtol=0.01)


def test_demand_of_rows():
    """nan costs its own row; shapes broadcast."""
    found = demand_eq_l(WATER, [-0.01, np.nan, 0.01], NONE[:, None], [[7.0], [8.0]], CAUSTIC)

    assert np.isfinite(found).tolist() == [[True, False, False]] * 2
    assert_allclose(found[0, 0], 0.01, rtol=1e-4)


# rows for the sheet


def test_rows_of_demand():
    """30 m3/h of 0.02 N acid with 50 % caustic: 600 eq/h, 48.0 kg/h, 31.5 L/h, 1,152 kg/d at 0.40 a kilogram (by hand)."""
    caustic = reagent("caustic soda 50 %", 0.5, price_per_kg=0.4)
    load = Load(name="mean", flow_m3_h=30.0, base_eq_l=-0.02, amounts=NONE)
    row, = demands(WATER, [load], [Aim(name="set point", ph=7.0)], [caustic, SULFURIC])

    assert (row.reagent, row.words) == (caustic, "")
    assert_allclose([row.eq_l, row.strong_eq_l], 0.02, rtol=1e-4)
    assert_allclose([row.product_kg_h, row.fed_l_h, row.kg_d, row.cost_d],
                    [600 * 39.997e-3 / 0.5, 600 / 19.03, 1151.9, 460.8], rtol=1e-3)


def test_sign_of_the_load_picks_the_reagents():
    """Acid for the alkaline load; a sentence where no reagent of the kind is named or none of it gets there."""
    load = Load(name="wash", flow_m3_h=10.0, base_eq_l=0.02, amounts=NONE)
    aims = aims_of(6.0, 7.0, 9.0)

    assert {row.reagent for row in demands(WATER, [load], aims, [CAUSTIC, SULFURIC])} == {SULFURIC}
    assert demands(WATER, [load], aims, [CAUSTIC])[0].words == "pH 7 asks for acid here, and no acid is named"
    poor = demands(WATER, [load], [Aim(name="low", ph=5.0)], [GAS], carbon_carrier=CARBON)[0]
    assert poor.words == "carbon dioxide does not bring this waste to pH 5"
    assert np.isnan([poor.kg_d, poor.cost_d, poor.fed_l_h]).all()


def test_nine_loads():
    """Strength scales base and amounts, and so the demand; flow scales the mass only."""
    loads = loads_of((5.0, 10.0, 20.0), (0.5, 1.0, 3.0), -0.01, [1.0, 1e-3])
    rows = {row.load.name: row for row in demands(WATER, loads, [Aim(name="set point", ph=7.0)], [CAUSTIC])}

    assert len(rows) == 9
    mean, most = rows["mean flow, mean strength"], rows["most flow, most strength"]
    assert_allclose([most.eq_l, most.kg_d], [3.0 * mean.eq_l, 6.0 * mean.kg_d], rtol=1e-4)
    assert_allclose(rows["least flow, mean strength"].kg_d, 0.5 * mean.kg_d, rtol=1e-12)
    assert_allclose(mean.load.amounts, [1.0, 1e-3])


def test_a_window_that_is_none():
    """Ends that do not rise; a set point outside."""
    for low, at, high in ((9.0, 7.0, 6.0), (6.0, 9.5, 9.0), (6.0, np.nan, 9.0)):
        with pytest.raises(InputError, match=r"set point must lie inside its window; found .* Correct the window"):
            window_fit(WATER, -0.01, NONE, low, high, at)


@pytest.mark.parametrize(("flows", "strengths", "what"), [((1.0, 2.0), (1, 1, 1), "flows"), ((1, 2, 3), (2, 1, 3), "strengths"),
                                                         ((-1, 2, 3), (1, 1, 1), "flows")])
def test_loads_that_do_not_rise(flows, strengths, what):
    """Two of three, mixed up, below zero."""
    with pytest.raises(InputError, match=rf"{what} must be three numbers that rise .* Repeat the mean"):
        loads_of(flows, strengths, -0.01, NONE)


def test_carbon_without_a_carrier():
    """Soda ash where the caller names none."""
    with pytest.raises(InputError, match="needs a carrier of its own"):
        demand_eq_l(WATER, -0.01, NONE, 7.0, SODA)
