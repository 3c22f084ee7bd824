"""Intervals: against quantiles known otherwise, against the truth, and the same whatever else is in the table."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from sample_tables import assessed, results
from scipy.stats import norm

from aquabuf import Water
from aquabuf.assess.uncertainty import BLOCK_STATES, drawn, interval, row_blocks, share

W = {"temperature_c": 15.0, "ph": 7.4, "alkalinity_eq_l": 4e-4, "sample_id": "w"}
U_ALK = 2e-6 + 0.02 * 4e-4  # default of the column table [eq/L]


def test_interval_is_the_percentile_of_numpy():
    """5th and 95th percentile by linear interpolation, missing draws left out (numpy.nanpercentile)."""
    many = np.random.default_rng(7).gamma(2.0, size=(20, 137))
    many[3, ::2], many[5, 1:] = np.nan, np.nan
    many[7] = np.nan
    low, high = interval(many)
    rows = [i for i in range(20) if i not in (5, 7)]
    assert_allclose(low[rows], np.nanpercentile(many[rows], 5.0, axis=1), rtol=1e-12)
    assert_allclose(high[rows], np.nanpercentile(many[rows], 95.0, axis=1), rtol=1e-12)
    assert np.isnan([low[5], low[7], high[5], high[7]]).all()  # one draw or none is no interval


def test_share_leaves_missing_draws_out():
    """Three of four valid; nothing valid is unknown."""
    met = np.array([[True, True, True, False, True], [True] * 5])
    valid = np.array([[True, True, True, True, False], [False] * 5])
    assert_array_equal(share(met, valid), [0.75, np.nan])


def test_blocks_cover_each_row_once():
    """Memory is bounded; nothing is lost."""
    rows = np.arange(3, 200)
    blocks = list(row_blocks(rows, 1000))
    assert_array_equal(np.concatenate(blocks), rows)
    assert max(b.size for b in blocks) * 1000 <= BLOCK_STATES
    assert [b.size for b in row_blocks(rows[:2], 100_000)] == [1, 1]


@pytest.mark.parametrize("draws", [1000, 20000])
def test_interval_of_a_normal_reading_is_exact(draws):
    """Alkalinity as read is normal: ends at ± 1.6449 standard uncertainties (exact quantile), within Monte-Carlo error.

    Standard error of a 5 % quantile: sqrt(0.05 * 0.95 / n) / density = 2.11 / sqrt(n) standard uncertainties; four of them.
    """
    row = results(W, draws=draws).loc["w"]
    z = norm.ppf(0.95)
    ends = np.array([row["alkalinity_meq_l_low"], row["alkalinity_meq_l_high"]])
    assert_allclose(ends, 0.4 + np.array([-z, z]) * U_ALK * 1e3, rtol=0, atol=4.0 * 2.11 / np.sqrt(draws) * U_ALK * 1e3)
    assert_allclose((ends[1] - ends[0]) / 2.0, z * U_ALK * 1e3, rtol=4.0 * 1.5 / np.sqrt(draws))


def test_own_uncertainty_moves_the_interval():
    """A tenth of the uncertainty, a tenth of the width; none, no width."""
    def width(u):
        row = results(W | {"alkalinity_u_eq_l": u, "ph_u": 0.05}, draws=1000).loc["w"]
        return row["alkalinity_meq_l_high"] - row["alkalinity_meq_l_low"]
    assert_allclose(width(1e-6), 0.1 * width(1e-5), rtol=1e-6)
    assert width(0.0) == 0.0


def test_interval_of_carbon_dioxide_follows_from_ph():
    """log10 pCO2 falls by 1 per pH at fixed alkalinity (HCO3- / H+), so u(pH) = 0.05 alone gives ± 1.645 x 0.05 decades."""
    exact = {"alkalinity_u_eq_l": 0.0, "temperature_u_c": 0.0, "ionic_strength_mol_l": 1e-3, "ionic_strength_u_mol_l": 0.0}
    row = results(W | exact, draws=20000).loc["w"]
    decades = np.log10(row["pco2_uatm_high"] / row["pco2_uatm_low"])
    assert_allclose(decades, 2.0 * norm.ppf(0.95) * 0.05, rtol=0.03)


def test_amounts_are_not_drawn_below_zero():
    """pH and alkalinity keep their sign; a concentration is cut at zero."""
    values = {"dic_mol_l": np.array([1e-6]), "alkalinity_eq_l": np.array([1e-6])}
    many = drawn(values, {"dic_mol_l": np.array([5e-6]), "alkalinity_eq_l": np.array([5e-6])}, 500, 1, values)
    assert many["dic_mol_l"].min() == 0.0
    assert many["alkalinity_eq_l"].min() < -5e-6
    assert 0.3 < np.mean(many["dic_mol_l"] == 0.0) < 0.55  # P(z < -0.2) = 0.42


def test_quantities_are_drawn_independently():
    """One stream per quantity: no correlation between pH and alkalinity beyond 4 / sqrt(n)."""
    values = {"ph": np.array([7.0]), "alkalinity_eq_l": np.array([1e-3])}
    many = drawn(values, {"ph": np.array([0.05]), "alkalinity_eq_l": np.array([1e-5])}, 10000, 1, values)
    assert abs(np.corrcoef(many["ph"], many["alkalinity_eq_l"])[0, 1]) < 0.04
    assert_allclose([many["ph"].mean(), many["ph"].std()], [7.0, 0.05], rtol=0, atol=4 * 0.05 / 100)


OTHERS = [{"sample_id": f"o{i}", "temperature_c": 5.0 + i, "ph": 6.5 + 0.1 * i, "alkalinity_eq_l": 2e-4 * (i + 1),
           "calcium_mol_l": 1e-4, "conductivity_us_cm": 40.0 + i} for i in range(12)]


@pytest.mark.parametrize("table", [[W, *OTHERS], [*OTHERS, W], [*OTHERS[:5], W, *OTHERS[5:]]], ids=["first", "last", "amid"])
def test_interval_does_not_depend_on_other_rows_or_columns(table):
    """The same ends, to the bit of what is written, alone and among others with more columns."""
    alone, beside = (results(*rows, draws=200).loc["w"].drop("row") for rows in ([W], table))
    ends = [name for name in alone.index if name.endswith(("_low", "_high"))]
    assert len(ends) > 40
    assert_allclose(beside[ends].astype(float), alone[ends].astype(float), rtol=1e-12)


def test_seed_decides_the_draws():
    """Same seed, same figures; another seed, others."""
    first, again, other = (results(W, draws=200, seed=seed).loc["w", "ph_at_air_low"] for seed in (1, 1, 2))
    assert first == again
    assert first != other


@pytest.mark.parametrize(("distance", "expected"), [(0.0, 0.5), (1.0, norm.cdf(1.0)), (-2.0, norm.cdf(-2.0))])
def test_probability_of_a_warning(distance, expected):
    """A normal reading so many standard uncertainties below the limit of 0.2 meq/L: the normal distribution function."""
    u = 4e-6
    row = W | {"alkalinity_eq_l": 2e-4 - distance * u - 1e-12, "alkalinity_u_eq_l": u}
    found = assessed(row, draws=20000, limits=None)
    lines = found.verdicts.set_index("warning")
    if distance < 0:
        assert "sensitive to acid" not in lines.index
        return
    assert_allclose(lines.loc["sensitive to acid", "probability"], expected, rtol=0, atol=0.015)


def test_share_of_draws_that_have_a_solution():
    """Carbonate of one and a half standard uncertainties: P(z > -1.5) of the draws leave it above zero (OH- is fixed here)."""
    oh = Water.from_ph_dic(ph=9.0, dic_mol_l=0.0, t_c=15.0, ionic_strength_mol_l=1e-4).alkalinity_eq_l
    row = {"temperature_c": 15.0, "temperature_u_c": 0.0, "ph": 9.0, "ph_u": 0.0, "alkalinity_eq_l": float(oh) + 6e-6,
           "alkalinity_u_eq_l": 4e-6, "ionic_strength_mol_l": 1e-4, "ionic_strength_u_mol_l": 0.0, "sample_id": "w"}
    assert_allclose(results(row, draws=20000).loc["w", "draws_solved"], norm.cdf(1.5), rtol=0, atol=0.01)


def test_assumed_carbon_has_no_interval():
    """An acid water whose carbon is that of air: an assumption has no interval; what rests on its H+ has that of the pH.

    Acid to pH 6 is nearly the H+ of the water, so its 90 % width is h (10^d - 10^-d) with d = 1.645 x 0.05 pH.
    """
    row = results({"sample_id": "w", "temperature_c": 10.0, "ph": 4.9, "alkalinity_eq_l": -1.5e-5}, draws=2000).loc["w"]
    assert row["status"] == "carbon from air"
    of_carbon = ("dic_mmol_l", "co2_mmol_l", "pco2_uatm", "pco2_air_ratio", "ph_at_air", "si_calcite", "ccpp_mg_l")
    assert all(np.isnan(row[f"{name}_{end}"]) for name in of_carbon for end in ("low", "high"))
    d = 1.645 * 0.05
    width = 1e3 * 10.0**-4.9 * (10.0**d - 10.0**-d)
    assert_allclose(row["acid_to_ph_6_0_meq_l_high"] - row["acid_to_ph_6_0_meq_l_low"], width, rtol=0.08)


def test_no_draws_no_intervals():
    """And nothing that depends on them."""
    found = assessed(W | {"alkalinity_eq_l": 1e-4}, draws=0)
    assert [c for c in found.results.columns if c.endswith(("_low", "_high"))] == []
    assert found.verdicts[["low", "high", "probability"]].isna().all().all()
    assert found.made["draws"] == 0


def test_intervals_hold_the_truth_as_often_as_they_say():
    """400 invented waters of known pH and alkalinity, read with noise of the default uncertainties: the 90 % interval of
    each figure holds the truth in 85 to 95 % (binomial error 1.5 %)."""
    rng = np.random.default_rng(20240)
    n = 400
    ph, alk = rng.uniform(6.3, 8.3, n), 10.0 ** rng.uniform(-3.7, -2.5, n)
    truth = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=alk, t_c=12.0, ionic_strength_mol_l=2e-3)
    read = {"ph": ph + 0.05 * rng.standard_normal(n), "alkalinity_eq_l": alk + (2e-6 + 0.02 * alk) * rng.standard_normal(n),
            "temperature_c": 12.0 + 0.2 * rng.standard_normal(n)}
    rows = [{"sample_id": f"s{i}", "ionic_strength_mol_l": 2e-3, "ionic_strength_u_mol_l": 0.0} | {k: v[i] for k, v in read.items()}
            for i in range(n)]
    table = results(*rows, draws=300)
    exact = {"ph": truth.ph, "alkalinity_meq_l": 1e3 * truth.alkalinity_eq_l, "dic_mmol_l": 1e3 * truth.dic_mol_l,
             "pco2_uatm": 1e6 * truth.pco2_atm, "buffer_closed_meq_l_ph": 1e3 * truth.buffer_intensity_eq_l(),
             "acid_to_ph_6_0_meq_l": 1e3 * truth.acid_to_ph_eq_l(6.0)}
    held = {name: np.mean((table[f"{name}_low"] <= v) & (v <= table[f"{name}_high"])) for name, v in exact.items()}
    assert all(0.85 <= part <= 0.95 for part in held.values()), held


def test_draws_that_no_water_can_have_stay_out():
    """At pH 5, 3 mmol/L of alkalinity ask for some 1.7 atm of CO2: many draws pass the 2 atm at which readings are
    refused. They count as not solved, enter no interval, and leave the interval of the reading itself whole."""
    row = results({"sample_id": "w", "temperature_c": 10.0, "ph": 5.0, "ph_u": 0.1, "alkalinity_eq_l": 3e-3,
                   "alkalinity_u_eq_l": 1e-4}, draws=2000).loc["w"]
    assert 1.4e6 < row["pco2_uatm"] < 2e6
    assert row["pco2_uatm"] < row["pco2_uatm_high"] <= 2e6
    assert 0.5 < row["draws_solved"] < 0.95
    z = norm.ppf(0.95)
    assert_allclose([row["alkalinity_meq_l_low"], row["alkalinity_meq_l_high"]], [3.0 - 0.1 * z, 3.0 + 0.1 * z], rtol=0, atol=0.02)
