"""Tables that drive the lake results: columns, figures that can be limited, the shipped limits and the user's own."""

import re

import numpy as np
import pytest
from assessed_lakes import FULL, assessed

from aquabuf.assess.lake.columns import AS_GIVEN, TO_PH_6, acid_column, lake_columns, lake_quantities
from aquabuf.assess.lake.options import ALWAYS_THRESHOLDS
from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import limit_quantities, result_columns, table_columns
from aquabuf.errors import InputError
from aquabuf.readings.schema import quantities
from aquabuf.tables import read_table

COLUMNS = list(lake_columns(ALWAYS_THRESHOLDS))
QUANTITIES = lake_quantities(ALWAYS_THRESHOLDS)
SHIPPED = {limit.name: limit for limit in shipped_limits("lake_limits")}
UP, DOWN = 1.0, -1.0

# name: quantity, boundary, side that is warned, whether the boundary itself is.
# Driscoll et al. 2003: at or below 0 acidic; Erstad et al. 2001: harm above pH 9; Lawrence et al. 2007: aluminum below
# a base-cation surplus of 0; pH 6.0 and 2 µmol/L of aluminum recalled; an exceedance is one above 0.
EXPECTED = {
    "below pH 6": ("ph", 6.0, DOWN, False),
    "aluminum": ("aluminum_umol_l", 2.0, UP, False),
    "base cations used up": ("base_cation_surplus_ueq_l", 0.0, DOWN, False),
    "critical load exceeded": ("exceedance_meq_m2_yr", 0.0, UP, False),
    "episode to zero": ("episode_anc_ueq_l", 0.0, DOWN, True),
    "dose would over-lime": ("lime_ph_closed", 9.0, UP, False),
}


# ------------------------------------------------------------------ columns


def test_stars_become_thresholds():
    """Closed and open columns for each pH, where the table has its star; all other names as they stand."""
    names = [c.name for c in lake_columns((6.0, 5.25))]
    start = names.index("acid_to_ph_6_0_ueq_l")
    assert names[start:start + 4] == ["acid_to_ph_6_0_ueq_l", "acid_to_ph_5_25_ueq_l", "acid_to_ph_6_0_open_ueq_l",
                                      "acid_to_ph_5_25_open_ueq_l"]
    plain = [row["name"] for row in read_table("lake_results") if "*" not in row["name"]]
    assert [name for name in names if name in plain] == plain
    assert len(names) == len(set(names)) == len(plain) + 4


@pytest.mark.parametrize(("ph", "exchange", "name"), [
    (6.0, "closed", "acid_to_ph_6_0_ueq_l"), (5.5, "open", "acid_to_ph_5_5_open_ueq_l"),
    (5.25, "closed", "acid_to_ph_5_25_ueq_l"),
    (4.0, "open", "acid_to_ph_4_0_open_ueq_l"),
])
def test_name_of_a_threshold(ph, exchange, name):
    """pH with an underscore for its point."""
    assert acid_column(ph, exchange) == name


def test_named_threshold():
    """The open tolerance to pH 6 is always among the columns."""
    assert TO_PH_6 == "acid_to_ph_6_0_open_ueq_l"
    assert TO_PH_6 in QUANTITIES


def test_each_column_tells_itself():
    """A meaning for all; a unit, and figures after the point, for numbers."""
    assert all(c.meaning.strip() for c in COLUMNS)
    for column in COLUMNS:
        assert (column.digits is not None) == bool(column.unit), column.name
        assert not column.interval or column.unit, column.name


def test_columns_as_given_are_those_of_readings():
    """Each is a column that a table of readings can have, and none can be limited."""
    assert set(AS_GIVEN) <= set(quantities()) | {"row"}
    assert not set(AS_GIVEN) & set(QUANTITIES)
    assert set(AS_GIVEN) <= {c.name for c in COLUMNS}


def test_units_of_names():
    """What a name ends in is the unit of its column."""
    endings = {"_ueq_l": "µeq/L", "_umol_l": "µmol/L", "_uatm": "µatm", "_keq": "keq", "_meq_m2_yr": "meq/m²/yr",
               "_percent": "%",
               "_us_cm": "µS/cm", "_kg": "kg", "_m3": "m³", "_mg_l": "mg/L", "_umol_m2_d": "µmol/m²/d",
               "_mmol_m2_d": "mmol/m²/d",
               "_m_d": "m/d", "_ueq_l_ph": "µeq/L per pH", "_t": "t", "_t_yr": "t/yr", "_g_m3": "g/m³",
               "_ueq_mg": "µeq/mg",
               "_yr": "yr"}
    checked = 0
    for column in COLUMNS:
        fits = [e for e in endings if column.name.endswith(e)]
        if column.unit and fits and column.name not in AS_GIVEN:
            assert column.unit == endings[max(fits, key=len)], column.name
            checked += 1
    assert checked > 60


def test_the_result_has_the_columns_of_the_table():
    """All in their order, ends of an interval behind those that have one, those only repeated where they were given."""
    for draws, ends in ((0, ()), (100, ("_low", "_high"))):
        found = list(assessed(FULL | {"site": "Tarn", "date": "2001-05-01", "survey_weight": 4.0},
                              draws=draws).results.columns)
        given = {"sample_id", "row", "site", "date", "anc_method", "survey_weight"}
        expected = [name for c in COLUMNS if c.name not in AS_GIVEN or c.name in given
                    for name in (c.name, *(c.name + end for end in ends if c.interval))]
        assert found == expected


def test_both_tables_of_results_are_read_alike():
    """The results of samples through the same function: their own names, none of the lakes' stars."""
    names = [c.name for c in result_columns(Options())]
    assert names == [c.name for c in table_columns("results", lambda star: [n for n in names if re.fullmatch(
        re.escape(star).replace(r"\*", r"\d+_\d+"), n)])]
    assert set(limit_quantities(Options())) < set(names)
    assert "critical_load_meq_m2_yr" not in names


# ------------------------------------------------------------------ limits


def test_every_shipped_limit_is_expected_here():
    """A new limit needs a row above; each is set on a figure of the results, in its unit."""
    assert list(EXPECTED) == list(SHIPPED)
    for limit in SHIPPED.values():
        assert QUANTITIES[limit.quantity] == limit.unit
        assert limit.words.strip()
        assert limit.next_step.strip()
        assert limit.source.strip()


@pytest.mark.parametrize("name", EXPECTED)
def test_limit_on_both_sides(name):
    """Warned beyond its boundary, not before it; on it as its source says; never where nothing is known."""
    quantity, boundary, side, at = EXPECTED[name]
    limit = SHIPPED[name]
    assert limit.quantity == quantity
    values = np.array([boundary + 1e-6 * side, boundary - 1e-6 * side, boundary, np.nan])
    assert list(limit.met(values)) == [True, False, at, False]
    assert limit.applies("", "fresh")


def test_lakes_and_samples_have_limits_of_their_own():
    """The table is named; samples are the default."""
    samples = [limit.name for limit in shipped_limits()]
    assert samples == [limit.name for limit in shipped_limits("limits")]
    assert samples == [row["name"] for row in read_table("limits")]
    assert list(SHIPPED) == [row["name"] for row in read_table("lake_limits")]
    assert not set(samples) & (set(SHIPPED) - {"below pH 6"})


def test_a_recalled_source_says_so():
    """As the mark in the table tells."""
    marks = {row["name"]: row["mark"] for row in read_table("lake_limits")}
    for name, limit in SHIPPED.items():
        assert limit.source.endswith(" (recalled)") == (marks[name] == "recalled")


def limits_of(tmp_path, text, table="lake_limits"):
    """Limits by name with the user's file of this text."""
    path = tmp_path / "mine.toml"
    path.write_text(text, encoding="utf-8")
    return {limit.name: limit
            for limit in read_limits(path, QUANTITIES if table == "lake_limits" else limit_quantities(Options()),
                                                       table)}


OWN = '[limits."{}"]\nquantity = "{}"\noperator = "<"\nlimit = {}\nwords = "is low"\nsource = "own rule"\n'


def test_without_a_file_the_shipped_ones():
    """Of the table that is named."""
    assert read_limits(None, QUANTITIES, "lake_limits") == shipped_limits("lake_limits")
    assert read_limits(None, limit_quantities(Options())) == shipped_limits()


def test_own_limits_of_lakes(tmp_path):
    """A new one leads, one of a shipped name takes its place, a removed one is gone."""
    found = limits_of(tmp_path, 'remove = ["aluminum"]\n' + OWN.format("poor", "anc_used_ueq_l",
                                                                       35) + OWN.format("below pH 6", "ph", 6.4))
    assert list(found) == ["poor", *(name for name in SHIPPED if name != "aluminum")]
    assert (found["below pH 6"].limit, found["below pH 6"].source) == (6.4, "own rule")
    warned = assessed(FULL | {"ph": 6.3, "anc_eq_l": 30e-6}, FULL | {"ph": 6.5},
                      limits=tuple(found.values())).results["warnings"]
    assert [w.split("; ")[1:] for w in warned] == [["poor", "below pH 6"], []]


def test_only_own_limits(tmp_path):
    """None of the shipped ones is left."""
    assert list(limits_of(tmp_path, "only_mine = true\n" + OWN.format("poor", "anc_used_ueq_l", 35))) == ["poor"]


@pytest.mark.parametrize(("text", "table", "message"), [
    ('remove = ["acidic"]\n', "lake_limits",
     r"^mine\.toml: remove names a limit that is not there: 'acidic'; there are below pH 6, "
     r"aluminum, base cations used up, critical load exceeded, episode to zero, dose would over-lime\. Correct the name\.$"),
    ('remove = ["dose would over-lime"]\n', "limits",
     "remove names a limit that is not there: 'dose would over-lime'; there are acidic, "),
    (OWN.format("x", "alkalinity_meq_l", 1), "lake_limits",
     r"limit 'x': quantity must be a figure of results\.csv; found "
     r"'alkalinity_meq_l'\. Choose from .*anc_used_ueq_l, .*acid_to_ph_6_0_open_ueq_l, .*critical_load_meq_m2_yr"),
    (OWN.format("x", "anc_used_ueq_l", 1), "limits", "quantity must be a figure .* found 'anc_used_ueq_l'"),
    (OWN.format("x", "anc_used_ueq_l", 1) + 'unit = "meq/L"\n', "lake_limits",
     r"limit 'x': anc_used_ueq_l is in µeq/L; found unit 'meq/L'\. Convert the limit\.$"),
])
def test_refusals_name_the_limits_of_their_table(tmp_path, text, table, message):
    """What is wrong, and the names or figures that there are for lakes or for samples."""
    with pytest.raises(InputError, match=message):
        limits_of(tmp_path, text, table)
