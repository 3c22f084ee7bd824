"""Intervals and probabilities of lakes against the normal law, and the same whatever else is in the table."""

import numpy as np
import pytest
from assessed_lakes import FULL, HAWK, assessed, options_of, readings, result, results, without
from made_lakes import ions
from numpy.testing import assert_allclose, assert_array_equal
from scipy.stats import norm

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.draws import DRAWN, spread
from aquabuf.assess.lake.inputs import IONS, ORGANIC_U_REL
from aquabuf.assess.lake.options import rules_of
from aquabuf.assess.limits import shipped_limits
from aquabuf.readings.schema import quantities

DRAWS = 20_000
Z = norm.ppf(0.95)
END = 2.11 / np.sqrt(DRAWS)  # standard error of a 5 % quantile in standard uncertainties: sqrt(0.05 0.95 / n) / density


def u_name(column):
    """Column of the standard uncertainty of a reading."""
    return quantities()[column].u_name


def exact(row, *inexact):
    """The same lake with every reading exact but those named."""
    return row | {u_name(name): 0.0 for name in row if name in DRAWN and name not in inexact}


def share_error(p):
    """Four standard errors of a share of the draws."""
    return 4.0 * np.sqrt(max(p * (1.0 - p), 1.0 / DRAWS) / DRAWS)


# ------------------------------------------------------------------ against the normal law


@pytest.mark.parametrize(("value", "u"), [(40.0, 4.0), (-21.7, 7.0)])
def test_interval_of_a_gran_anc(value, u):
    """Value and 1.645 standard uncertainties to either side, so for what an exact limit or share makes of it."""
    row = FULL | {"anc_eq_l": value * 1e-6, "anc_u_eq_l": u * 1e-6}
    found = result(exact(row, "anc_eq_l"), draws=DRAWS)
    # 0.6 of the lake's ANC and 0.4 of -30 µeq/L; dose to 100
    for name, middle, width in (("anc_gran_ueq_l", value, u), ("anc_used_ueq_l", value, u),
                                ("acid_to_anc_limit_ueq_l", value - 20.0, u),
                                ("episode_anc_ueq_l", 0.6 * value - 12.0, 0.6 * u),
                                ("lime_dose_ueq_l", 100.0 - value, u),
                                ("acid_to_anc_limit_keq", 0.96 * (value - 20.0), 0.96 * u)):
        ends = [found[f"{name}_low"], found[f"{name}_high"]]
        assert_allclose(ends, middle + width * np.array([-Z, Z]), rtol=0, atol=4.0 * END * width, err_msg=name)


def test_default_uncertainty_of_a_gran_anc():
    """5 µeq/L and 5 % of the value, as the table of columns says: 7 at 40 µeq/L."""
    found = result(FULL, draws=DRAWS)
    assert_allclose(found["anc_gran_ueq_l_high"] - found["anc_gran_ueq_l_low"], 2.0 * Z * 7.0, rtol=0,
                    atol=6.0 * END * 7.0)


def test_interval_of_a_charge_balance():
    """Independent ions: the root of the sum of squares of their charges' uncertainties."""
    u = {"calcium": 3.0, "sodium": 2.0, "sulfate": 6.0, "chloride": 1.0}
    row = exact(without(FULL, "anc_eq_l", "doc_mg_l")) | {u_name(name): v for name, v in ions(**u).items()}
    found = result(row, draws=DRAWS)
    total = np.sqrt(sum(v**2 for v in u.values()))
    assert_allclose([found["anc_used_ueq_l_low"], found["anc_used_ueq_l_high"]], 62.0 + total * np.array([-Z, Z]),
                    rtol=0,
                    atol=4.0 * END * total)


@pytest.mark.parametrize(("value", "u"), [(40.0, 20.0), (0.0, 10.0), (50.0, 4.0), (190.0, 30.0), (-30.0, 5.0)])
def test_probability_of_each_class(value, u):
    """Normal law between the limits 0, 50 and 200 µeq/L (Driscoll et al. 2003; US lake surveys)."""
    row = FULL | {"anc_eq_l": value * 1e-6, "anc_u_eq_l": u * 1e-6}
    found = assessed(row, draws=DRAWS)
    below = norm.cdf((np.array([0.0, 50.0, 200.0]) - value) / u)
    expected = np.diff([0.0, *below, 1.0])
    for definition in ("anc_gran", ""):
        chance = found.spread.classes["survey_bands", definition][0]
        assert_allclose(chance.sum(), 1.0, rtol=1e-12)
        for p, law in zip(chance, expected, strict=True):
            assert abs(p - law) <= share_error(law)
    own = int(np.searchsorted([0.0, 50.0, 200.0], value, side="left"))  # limits count to the worse class
    assert_allclose(found.results["class_probability"], expected[own], rtol=0, atol=share_error(expected[own]))


def test_second_class_is_told_with_its_chance():
    """40 and 20 µeq/L: 31 % above 50 (normal law), 2 % at or below 0."""
    row = exact(FULL | {"anc_u_eq_l": 20e-6}, "anc_eq_l")
    name, _, percent = result(row, draws=DRAWS)["class_also"].rpartition(" (")
    assert name == "sensitive"
    assert abs(float(percent.rstrip(" %)")) - 100.0 * norm.sf(0.5)) < 1.5


def test_probability_of_an_exceedance():
    """Only sulfur deposition uncertain: the exceedance is as normal as it is. 27.14 and 20 meq/m2/yr."""
    row = exact(HAWK) | {u_name("sulfur_deposition_eq_m2_yr"): 0.020}
    found = assessed(row, draws=DRAWS)
    expected = norm.cdf(27.14 / 20.0)  # deposition is cut at none in 1.4 % of the draws: below 0 anyway
    assert_allclose(found.results["exceedance_probability"], expected, rtol=0, atol=share_error(expected))
    assert_allclose(found.spread.limits["critical load exceeded"], expected, rtol=0, atol=share_error(expected))


def test_probability_of_a_ph_limit():
    """pH 6.05 and 0.05: below 6 with the chance of one standard uncertainty."""
    found = assessed(FULL | {"ph": 6.05, "ph_u": 0.05}, draws=DRAWS)
    assert_allclose(found.spread.limits["below pH 6"], norm.cdf(-1.0), rtol=0, atol=share_error(0.16))


def test_organic_anions_have_their_own_error():
    """One factor for all lakes and all draws of a lake: 15 % of the charge, beside exact readings."""
    found = result(exact(FULL), draws=DRAWS)
    middle = found["organic_anion_ueq_l"]
    assert ORGANIC_U_REL == 0.15
    assert_allclose([found["organic_anion_ueq_l_low"], found["organic_anion_ueq_l_high"]],
                    middle * (1.0 + 0.15 * np.array([-Z, Z])), rtol=0, atol=4.0 * END * 0.15 * middle)


def test_exact_readings_leave_no_width():
    """Without organic carbon nothing else is drawn; temperature never is."""
    row = exact(without(FULL, "doc_mg_l")) | {"temperature_u_c": 3.0}
    found = result(row, draws=200)
    ends = [name.removesuffix("_low") for name in found.index if name.endswith("_low")]
    checked = 0
    for name in ends:
        if np.isfinite(found[name]):
            assert_allclose([found[f"{name}_low"], found[f"{name}_high"]], found[name], rtol=1e-9, atol=1e-9,
                            err_msg=name)
            checked += 1
    assert checked > 25


def test_drawn_readings_are_readings():
    """Each is a column of readings with an uncertainty; all ions are among them."""
    for name in DRAWN:
        quantity = quantities()[name]
        assert quantity.default_u + quantity.default_u_rel > 0.0, name
    assert {f"{ion}_mol_l" for ion in IONS} < set(DRAWN)
    assert len(set(DRAWN)) == len(DRAWN)
    assert "temperature_c" not in DRAWN


MOVES = {  # an answer that each drawn reading moves
    "ph": "ph", "anc_eq_l": "anc_gran_ueq_l", "alkalinity_eq_l": "alkalinity_ueq_l", "dic_mol_l": "dic_umol_l",
    "pco2_atm": "pco2_uatm",
    **{f"{ion}_mol_l": "anc_charge_ueq_l" for ion in IONS if ion != "fluoride"}, "fluoride_mol_l": "ph_at_air",
    "doc_mg_l": "organic_anion_ueq_l", "aluminum_mol_l": "ph_at_air", "runoff_m_yr": "critical_load_meq_m2_yr",
    "precipitation_m_yr": "episode_anc_ueq_l", "residence_time_yr": "reacidify_yr",
    "lake_volume_m3": "acid_to_anc_limit_keq",
    "mean_depth_m": "acid_to_anc_limit_keq", "lake_area_m2": "reacidify_yr", "watershed_area_m2": "reacidify_yr",
    "wind_speed_m_s": "co2_flux_mmol_m2_d", "sulfur_deposition_eq_m2_yr": "exceedance_meq_m2_yr",
    "nitrate_deposition_eq_m2_yr": "years_to_anc_limit", "ammonium_deposition_eq_m2_yr": "years_to_anc_limit",
    "chloride_deposition_eq_m2_yr": "exceedance_meq_m2_yr", "base_cation_deposition_eq_m2_yr": "years_to_anc_limit",
    "hydrogen_deposition_eq_m2_yr": "episode_anc_ueq_l",
}
IN_PLACE_OF = {"pco2_atm": ("dic_mol_l",), "alkalinity_eq_l": ("anc_eq_l",),
               "fluoride_mol_l": ("anc_eq_l", "alkalinity_eq_l"),
               "mean_depth_m": ("lake_volume_m3",), "lake_area_m2": ("residence_time_yr",),
               "watershed_area_m2": ("residence_time_yr",)}
GIVEN = FULL | {"dic_mol_l": 200e-6, "pco2_atm": 8e-4, "alkalinity_eq_l": 3e-5, "mean_depth_m": 4.0,
                "fluoride_mol_l": 2e-6}


@pytest.mark.parametrize("name", DRAWN)
def test_each_drawn_reading_moves_its_answer(name):
    """Uncertain by a tenth beside exact readings; those it does not go into stay as they are."""
    column = MOVES[name]
    row = exact(without(GIVEN, *IN_PLACE_OF.get(name, ()))) | {u_name(name): 0.1 * GIVEN[name]}
    if column == "reacidify_yr":
        row |= {"anc_eq_l": 10e-6}  # below the limit, so that the limed lake falls back to it
    found = result(without(row, *(() if name == "doc_mg_l" else ("doc_mg_l",))), draws=200)
    assert found[f"{column}_high"] - found[f"{column}_low"] > 1e-6 * abs(found[column])
    if name != "ph":
        assert_allclose(found["ph_high"], found["ph_low"], rtol=1e-12)
    if name not in ("runoff_m_yr", *(f"{ion}_mol_l" for ion in IONS)):
        assert_allclose(found["critical_load_meq_m2_yr_high"], found["critical_load_meq_m2_yr_low"], rtol=1e-12)


# ------------------------------------------------------------------ draws or none


def test_no_draws_no_intervals():
    """Neither ends nor probabilities; everything else is the same to the last digit."""
    bare, drawn = results(FULL, HAWK), results(FULL, HAWK, draws=100)
    assert not [name for name in bare.columns if name.endswith(("_low", "_high"))]
    for name in ("class_probability", "exceedance_probability"):
        assert bare[name].isna().all()
        assert drawn[name].notna().all()
    for name in bare.columns:
        if name not in ("class_probability", "exceedance_probability", "class_also", "pco2_from", "pco2_uatm",
                        "pco2_air_ratio",
                        "pco2_neal_uatm", "co2_flux_mmol_m2_d"):  # a wide interval takes a pressure away
            assert_array_equal(bare[name].to_numpy(), drawn[name].to_numpy(), err_msg=name)


def test_no_draws_no_work():
    """Nothing is stored, nor for a table without rows."""
    found = assessed(FULL)
    assert (found.spread.low, found.spread.high, found.spread.classes, found.spread.limits) == ({}, {}, {}, {})
    options = options_of(draws=100)
    nothing = spread({"temperature_c": np.zeros(0)}, {}, found.lakes.setting, found.plan, rules_of(options), options,
                     (), {})
    assert (nothing.low, nothing.classes) == ({}, {})


def test_the_value_lies_within_its_interval():
    """Of nearly linear answers, in two very different lakes."""
    found = results(FULL, FULL | {"anc_eq_l": -40e-6, "ph": 4.8}, draws=1000)
    for name in ("anc_used_ueq_l", "anc_charge_ueq_l", "ph", "ph_at_air", "buffer_closed_ueq_l_ph",
                 "critical_load_meq_m2_yr",
                 "exceedance_meq_m2_yr", "episode_anc_ueq_l", "lime_dose_ueq_l", "acid_to_ph_5_0_open_ueq_l"):
        assert (found[f"{name}_low"] < found[name]).all(), name
        assert (found[name] < found[f"{name}_high"]).all(), name


def test_missing_answers_have_no_interval():
    """nan ends beside a nan value; the lake beside has both."""
    found = assessed(FULL, FULL | {"runoff_m_yr": np.nan}, draws=100)
    ends = found.results[["critical_load_meq_m2_yr_low", "critical_load_meq_m2_yr_high"]]
    assert_array_equal(ends.isna().to_numpy(), [[False, False], [True, True]])
    for chance in (found.results["exceedance_probability"], found.spread.limits["critical load exceeded"]):
        assert_array_equal(np.isnan(chance), [False, True])


# ------------------------------------------------------------------ rows


LAKES = [
    FULL, HAWK, FULL | {"anc_eq_l": -60e-6, "ph": 4.6, "dic_mol_l": np.nan}, without(FULL, "anc_eq_l"),
    without(FULL, "temperature_c"),
    without(FULL, "sodium_mol_l", "doc_mg_l"), FULL | {"anc_method": "end_point"}, FULL | {"ph_temperature_c": 22.0},
    without(FULL, "ph", "dic_mol_l"), FULL | {"alkalinity_eq_l": 3e-4, "anc_eq_l": np.nan, "salinity": 3.0},
    {"ph": 5.0},
    FULL | {"doc_mg_l": 14.0, "conductivity_us_cm": np.nan, "aluminum_mol_l": 9e-6},
]
LAKES = [row | {"sample_id": f"lake {k}"} for k, row in enumerate(LAKES)]


def same(one, other, context):
    """Two rows of results: words alike, numbers to 1e-9."""
    for name in set(one.index) & set(other.index) - {"row"}:
        if isinstance(one[name], str):
            assert one[name] == other[name], (context, name)
        else:
            assert_allclose(other[name], one[name], rtol=1e-9, atol=1e-12, err_msg=f"{context} {name}")


@pytest.fixture(scope="module")
def together():
    """All lakes in one table; 3000 draws make two blocks of it."""
    return results(*LAKES, draws=3000)


@pytest.mark.parametrize("k", range(len(LAKES)))
def test_a_lake_alone_is_the_lake_in_its_table(together, k):
    """Values, intervals and probabilities: no row sees another, nor the block it is drawn in."""
    same(together.loc[f"lake {k}"], result(LAKES[k], draws=3000), LAKES[k]["sample_id"])


def test_lakes_in_another_order(together):
    """Each row as before."""
    order = np.random.default_rng(5).permutation(len(LAKES))
    shuffled = results(*(LAKES[k] for k in order), draws=3000)
    assert list(shuffled.index) == [f"lake {k}" for k in order]
    for k in range(len(LAKES)):
        same(together.loc[f"lake {k}"], shuffled.loc[f"lake {k}"], f"lake {k}")


def test_the_same_bytes_twice():
    """Same readings, same seed, same file; another seed moves intervals and nothing else."""
    def once(seed):
        options = options_of(draws=500, seed=seed)
        return assess_lakes(readings(*LAKES), rules_of(options), options, shipped_limits("lake_limits")).results

    first = once(1)
    assert first.to_csv().encode() == once(1).to_csv().encode()
    other = once(2)
    assert (first["anc_used_ueq_l_low"].dropna() != other["anc_used_ueq_l_low"].dropna()).all()
    assert_array_equal(first["anc_used_ueq_l"], other["anc_used_ueq_l"])


def test_drawn_lakes_share_one_error_of_the_organic_model():
    """Two like lakes have the same draws, so that their difference does not grow with their number."""
    found = results(FULL, FULL, draws=300)
    for name in found.columns:
        if name.endswith(("_low", "_high")) and found[name].notna().all():
            assert found[name].iloc[0] == found[name].iloc[1], name
