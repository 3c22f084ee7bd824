"""A survey as a whole: order of the lakes, names of places, one sample for each lake, weighted shares, all by hand."""

import os
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from assessed_lakes import FULL, assessed, options_of
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.options import rules_of
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.assess.lake.survey import (
    ALL_LAKES,
    PRIORITY_COLUMNS,
    group_table,
    latest_of_site,
    priorities,
    site_keys,
    weighted_quantile,
)
from aquabuf.assess.limits import shipped_limits
from aquabuf.readings.reader import read_readings

BANDS = shipped_schemes()["survey_bands"]
ACID, PRONE, SENSITIVE, SAFE = (c.name for c in BANDS.classes)
NO_DATE = "NaT"
DATA = os.environ.get("AQUABUF_OPEN_DATA", "")
MAP = Path(__file__).parents[3] / "docs" / "maps" / "nsws_lakes_1984.toml"


def frame(**columns):
    """A table of readings from lists; text stays text."""
    return pd.DataFrame({name: pd.Series(v, dtype="str" if isinstance(v[0], str) else float) for name,
                         v in columns.items()})


def table(*rows):
    """Results with what this module looks at; unclassed, without ANC and without warnings unless said."""
    plain = {"class": "", "anc_used_ueq_l": np.nan, "ph": np.nan, "critical_load_meq_m2_yr": np.nan,
             "exceedance_meq_m2_yr": np.nan,
             "exceedance_probability": np.nan, "warnings": "", "region": ""}
    return pd.DataFrame([{"sample_id": f"s{k}", "row": k + 2, **plain, **row} for k, row in enumerate(rows)])


# ------------------------------------------------------------------ order


def test_worst_class_then_surest_exceedance_then_lowest_anc():
    """Lakes without a class last, however acid; an unknown exceedance counts as none, an unknown ANC comes last."""
    rows = [
        {"class": SAFE, "anc_used_ueq_l": 300.0, "exceedance_probability": 1.0},          # s0
        {"class": PRONE, "anc_used_ueq_l": 30.0, "exceedance_probability": 0.2},          # s1
        {"class": PRONE, "anc_used_ueq_l": 10.0, "exceedance_probability": 0.2},          # s2
        {"class": PRONE, "anc_used_ueq_l": 45.0, "exceedance_probability": 0.9},          # s3
        {"class": ACID, "anc_used_ueq_l": -5.0, "exceedance_probability": 0.0},           # s4
        {"class": "", "anc_used_ueq_l": np.nan, "exceedance_probability": 1.0},           # s5
        {"class": PRONE, "anc_used_ueq_l": 20.0},                                         # s6: not known, so none
        {"class": ACID, "anc_used_ueq_l": np.nan, "exceedance_probability": 0.0},         # s7
    ]
    found = priorities(table(*rows), BANDS)
    assert list(found["sample_id"]) == ["s4", "s7", "s3", "s2", "s1", "s6", "s0", "s5"]
    assert list(found["rank"]) == list(range(1, 9))


def test_ties_keep_the_order_of_the_table():
    """The same run gives the same order."""
    rows = [{"class": ACID, "anc_used_ueq_l": -5.0, "exceedance_probability": 0.5}] * 4
    assert list(priorities(table(*rows), BANDS)["sample_id"]) == ["s0", "s1", "s2", "s3"]


def test_reason_and_next_step():
    """Words of the class, exceedance when it is more likely than not, other warnings once; the class's next step."""
    rows = [
        {"class": ACID, "exceedance_probability": 0.97, "warnings": f"{ACID}; below pH 6; critical load exceeded"},
        {"class": SAFE, "exceedance_probability": 0.5, "warnings": ""},
        {"class": "", "exceedance_probability": np.nan, "warnings": "below pH 6"},
    ]
    found = priorities(table(*rows), BANDS)
    acid, safe = BANDS.classes[0], BANDS.classes[-1]
    assert list(found["reason"]) == [f"{acid.words}; critical load exceeded (probability 0.97); below pH 6", safe.words,
                                     "nothing to class it by: survey_bands needs Gran ANC or alkalinity or Gran ANC of "
                                     "the ions or charge balance; below pH 6"]
    assert list(found["next_step"]) == [acid.next_step, safe.next_step, "titrate it, or have its ions measured"]


def test_columns_of_the_list():
    """Those that the results have, in order, with rank before and reason and step behind."""
    found = priorities(table({"class": ACID, "site": "Tarn"}), BANDS)
    kept = [name for name in PRIORITY_COLUMNS if name in ("sample_id", "row", "site", "region", "class",
                                                          "anc_used_ueq_l", "ph",
                                                          "exceedance_meq_m2_yr", "exceedance_probability", "warnings")]
    assert list(found.columns) == ["rank", *kept, "reason", "next_step"]


def test_an_exceedance_counts_without_draws():
    """Two lakes of one class: the one above its critical load first, and the reason says so."""
    rows = [FULL | {"sample_id": "below"},
            FULL | {"sample_id": "above", "anc_eq_l": 45e-6, "sulfur_deposition_eq_m2_yr": 0.2}]
    found = priorities(assessed(*rows).results, BANDS)
    assert list(found["sample_id"]) == ["above", "below"]
    assert "critical load exceeded" in found["reason"][0]


def test_order_of_assessed_lakes():
    """The whole path with draws: class, exceedance and ANC of three lakes known to lie in that order."""
    rows = [FULL | {"sample_id": "mild"},
            FULL | {"sample_id": "polluted", "anc_eq_l": 45e-6, "sulfur_deposition_eq_m2_yr": 0.2},
            FULL | {"sample_id": "acid", "anc_eq_l": -60e-6}]
    found = priorities(assessed(*rows, draws=400).results, BANDS)
    assert list(found["sample_id"]) == ["acid", "polluted", "mild"]
    assert "critical load exceeded (probability 1.00)" in found["reason"][1]
    assert "critical load" not in found["reason"][2]


# ------------------------------------------------------------------ names of places


def test_one_name_in_one_place():
    """The site alone, also with samples a few hundred meters apart; empty where none is given."""
    assert list(site_keys(frame(site=["Tarn", "Tarn", "", "Mere"]))) == ["Tarn", "Tarn", "", "Mere"]
    near = frame(site=["Tarn", "Tarn"], region=["A", "A"], latitude=[43.100, 43.104], longitude=[-74.0, -74.003])
    assert list(site_keys(near)) == ["Tarn", "Tarn"]
    assert list(site_keys(frame(region=["A", "B"]))) == ["", ""]


def test_one_name_in_several_regions():
    """The region goes into the name of those alone."""
    keys = site_keys(frame(site=["Mud Lake", "Mud Lake", "Tarn", "", ""], region=["A", "B", "A", "A", "B"]))
    assert list(keys) == ["Mud Lake (A)", "Mud Lake (B)", "Tarn", "", ""]


def test_one_name_far_apart():
    """More than 0.02 degrees one way or the other: a number goes into the name where coordinates are known."""
    for north, east in ((0.03, 0.0), (0.0, -0.03)):
        found = frame(site=["Mud Lake"] * 4 + ["Tarn"], latitude=[43.0, 43.0 + north, np.nan, 43.001, 44.0],
                      longitude=[-74.0, -74.0 + east, np.nan, -74.001, -75.0])
        assert list(site_keys(found)) == ["Mud Lake (1)", "Mud Lake (2)", "Mud Lake", "Mud Lake (1)", "Tarn"]


@pytest.mark.parametrize("name", ["(NO NAME)", "No name", "unnamed", "Unnamed Lake", "unknown", "n/a", ""])
def test_words_that_are_no_name(name):
    """Each row then stands for itself; a lake that is called something like it keeps its name."""
    keys = site_keys(frame(site=[name, name, "Nameless Tarn"]))
    assert list(keys) == ["", "", "Nameless Tarn"]
    assert latest_of_site(keys, np.full(3, NO_DATE, dtype="datetime64[D]")).all()


def test_a_region_left_out_once_is_no_other_lake():
    """One lake, its region written in only one of its rows."""
    keys = site_keys(frame(site=["Tarn", "Tarn"], region=["A", ""]))
    assert keys[0] == keys[1]


def test_one_lake_keeps_one_name_where_its_name_is_not_unique():
    """Two samples 20 m apart, and a lake of the same name in another region."""
    keys = site_keys(frame(site=["Mud Lake"] * 3, region=["A", "A", "B"], latitude=[43.0049, 43.0051, 50.0],
                           longitude=[-74.0, -74.0, -80.0]))
    assert keys[0] == keys[1] != keys[2]


def test_latest_sample_stands_for_its_lake():
    """By date, not by place in the table; a row without a lake stands for itself; undated ones first; ties by place."""
    keys = np.array(["a", "b", "a", "", "b", "", "c", "c", "d", "d"], dtype=object)
    days = ["2001-05-01", "2003-01-01", "2000-05-01", "1990-01-01", NO_DATE, NO_DATE, NO_DATE, NO_DATE, "2001-01-01",
            "2001-01-01"]
    keep = latest_of_site(keys, np.array(days, dtype="datetime64[D]"))
    assert_array_equal(keep, [True, True, False, True, False, True, False, True, False, True])


def test_dates_of_an_assessment():
    """As read; not-a-time where there is none, and everywhere without the column."""
    found = assessed(FULL | {"date": "2001-05-01"}, FULL | {"date": ""})
    assert_array_equal(found.dates, np.array(["2001-05-01", NO_DATE], dtype="datetime64[D]"))
    assert np.isnat(assessed(FULL).dates).all()


# ------------------------------------------------------------------ quantiles and groups


@pytest.mark.parametrize(("values", "weight", "quantile", "expected"), [
    ([3.0, 1.0, 2.0, 4.0], [1.0, 1.0, 1.0, 1.0], 0.5, 2.0),      # cumulative 1, 2, 3, 4 of 4: 2 reaches half
    ([3.0, 1.0, 2.0, 4.0], [1.0, 1.0, 1.0, 1.0], 0.51, 3.0),
    ([1.0, 2.0, 3.0], [1.0, 1.0, 8.0], 0.1, 1.0),                # 1 of 10
    ([1.0, 2.0, 3.0], [1.0, 1.0, 8.0], 0.2, 2.0),                # 2 of 10
    ([1.0, 2.0, 3.0], [1.0, 1.0, 8.0], 0.21, 3.0),
    ([1.0, 2.0, 3.0], [1.0, 0.0, 1.0], 0.5, 1.0),                # a weight of none does not count
    ([1.0, np.nan, 3.0], [1.0, 50.0, 1.0], 0.9, 3.0),            # nor does a missing value
    ([5.0], [0.3], 0.1, 5.0), ([5.0], [0.3], 0.9, 5.0),
    ([1.0, 2.0], [0.1, 0.2], 1.0, 2.0),                          # rounding of the sum does not run off the end
])
def test_weighted_quantiles(values, weight, quantile, expected):
    """Smallest value up to which the weights reach that part of all."""
    assert weighted_quantile(np.array(values), np.array(weight), quantile) == expected


@pytest.mark.parametrize(("values", "weight"), [([np.nan], [1.0]), ([1.0], [0.0]), ([], [])])
def test_quantile_of_nothing(values, weight):
    """Nothing known, nothing told."""
    assert np.isnan(weighted_quantile(np.array(values), np.array(weight), 0.5))


def test_parts_of_equal_weights():
    """Each part of equal weights is reached by its own value, whatever their sums are in binary."""
    for n, one in ((10, 0.1), (5, 0.3), (8, 0.7)):
        values, weight = np.arange(1.0, n + 1.0), np.full(n, one)
        assert [weighted_quantile(values, weight, k / n) for k in range(1, n + 1)] == list(values)


GROUPS = table(
    {"region": "N", "class": ACID, "anc_used_ueq_l": -10.0, "exceedance_meq_m2_yr": 5.0, "survey_weight": 10.0},
    {"region": "N", "class": PRONE, "anc_used_ueq_l": 30.0, "exceedance_meq_m2_yr": -5.0, "survey_weight": 30.0},
    {"region": "N", "class": "", "anc_used_ueq_l": np.nan, "exceedance_meq_m2_yr": np.nan, "survey_weight": 60.0},
    {"region": "S", "class": PRONE, "anc_used_ueq_l": 40.0, "exceedance_meq_m2_yr": 0.0, "survey_weight": 20.0},
    {"region": "", "class": SAFE, "anc_used_ueq_l": 400.0, "exceedance_meq_m2_yr": 1.0, "survey_weight": np.nan},
    {"region": "N", "class": ACID, "anc_used_ueq_l": -99.0, "exceedance_meq_m2_yr": 99.0, "survey_weight": 99.0},
)
LATEST = np.array([True] * 5 + [False])  # the last row is an earlier sample


def test_groups_by_hand_with_weights():
    """Lakes are counted, shares are weighted: in N 10 to 30; a lake without a weight stands for none."""
    found = group_table(GROUPS, BANDS, "region", LATEST).set_index("group")
    assert list(found.index) == [ALL_LAKES, "N", "S"]
    assert list(found["lakes"]) == [5, 3, 1]
    assert list(found["classed"]) == [4, 2, 1]
    assert set(found["weighted"]) == {"yes"}
    assert list(found["lakes_stood_for"]) == [120.0, 100.0, 20.0]
    assert list(found["lakes_chronically_acidic"]) == [1, 1, 0]
    assert list(found["lakes_prone_to_turn_acid"]) == [2, 1, 1]
    assert list(found["lakes_not_sensitive"]) == [1, 0, 0]
    assert_allclose(found["share_chronically_acidic"], [10 / 60, 10 / 40, 0.0])
    assert_allclose(found["share_prone_to_turn_acid"], [50 / 60, 30 / 40, 1.0])
    assert_allclose(found["share_not_sensitive"], 0.0)
    assert list(found["exceeded"]) == [2, 1, 0]  # above 0, not at it
    assert list(found["with_critical_load"]) == [4, 2, 1]
    # ANC -10, 30 and 40 with weights 10, 30 and 20: 30 reaches half of 60, 40 nine tenths
    assert list(found.loc[ALL_LAKES, [f"anc_used_ueq_l_{q}" for q in ("low", "median", "high")]]) == [-10.0, 30.0, 40.0]


def test_groups_by_hand_without_weights():
    """Each lake counts once; no figure of a population."""
    found = group_table(GROUPS.drop(columns="survey_weight"), BANDS, "region", LATEST).set_index("group")
    assert set(found["weighted"]) == {"no"}
    assert found["lakes_stood_for"].isna().all()
    assert_allclose(found["share_chronically_acidic"], [1 / 4, 1 / 2, 0.0])
    assert_allclose(found["share_not_sensitive"], [1 / 4, 0.0, 0.0])
    assert found.loc[ALL_LAKES, "anc_used_ueq_l_median"] == 30.0  # second of -10, 30, 40, 400


def test_shares_of_each_group_add_up():
    """To one where any lake has a class, and to nothing known where none has."""
    found = group_table(GROUPS, BANDS, "region", LATEST)
    shares = found[[name for name in found.columns if name.startswith("share_")]]
    assert_allclose(shares.sum(axis=1), 1.0)
    bare = group_table(table({"region": "N"}), BANDS, "region", np.array([True]))
    assert bare[[name for name in bare.columns if name.startswith("share_")]].isna().all(axis=None)


def test_group_that_is_not_in_the_table():
    """All lakes in one row."""
    found = group_table(GROUPS, BANDS, "water_kind", LATEST)
    assert list(found["group"]) == [ALL_LAKES]
    assert set(found["grouped_by"]) == {"water_kind"}


# ------------------------------------------------------------------ a real survey


@cache
def eastern_lakes():
    """The Eastern Lake Survey 1984, all that this file has of it, by the shipped map."""
    options = options_of()
    return assess_lakes(read_readings(Path(DATA) / "nsws_lakes_1984.csv", MAP), rules_of(options), options,
                        shipped_limits("lake_limits"))


@pytest.mark.open_data
@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
def test_classes_of_the_eastern_lake_survey():
    """Counted from the agency's own column of revised Gran ANC with a text tool."""
    found = eastern_lakes()
    counts = found.results["class"].value_counts()
    assert [counts[c.name] for c in BANDS.classes] == [96, 185, 328, 296]
    everything = group_table(found.results, BANDS, "region", np.ones(905, dtype=bool))
    names = [f"lakes_{n}" for n in ("chronically_acidic", "prone_to_turn_acid", "sensitive", "not_sensitive")]
    assert list(everything.loc[0, names]) == [96, 185, 328, 296]
    assert (everything.loc[1:, names].sum() == everything.loc[0, names]).all()
    assert everything.loc[1:, "lakes"].sum() == everything.loc[0, "lakes"] == 905


@pytest.mark.open_data
@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
def test_each_lake_of_the_survey_has_its_own_key():
    """It sampled 905 lakes, each once."""
    found = eastern_lakes()
    assert latest_of_site(site_keys(found.frame), found.dates).sum() == 905
