"""The long tables: every row re-worked here from the results, and sums that must close."""

import operator
import re
from dataclasses import replace

import numpy as np
import pytest
from assessed_lakes import FULL, HAWK, assessed, options_of, without
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.critical_variants import one_at_a_time
from aquabuf.assess.lake.tables import (
    LEAST_SHOWN,
    class_table,
    deposition_table,
    episode_table,
    liming_table,
    load_table,
    verdict_table,
)
from aquabuf.assess.limits import shipped_limits

OPERATORS = {"<": operator.lt, "<=": operator.le, ">": operator.gt, ">=": operator.ge}
LIMITS = shipped_limits("lake_limits")
LAKES = [
    FULL | {"sample_id": "full"},
    FULL | {"sample_id": "acid", "anc_eq_l": -60e-6, "ph": 4.6, "aluminum_mol_l": 9e-6},
    HAWK | {"sample_id": "hawk"},
    without(FULL, "anc_eq_l") | {"sample_id": "ions only"},
    FULL | {"sample_id": "end point", "anc_method": "end_point"},
    {"sample_id": "ph only", "ph": 5.4},
]


@pytest.fixture(scope="module")
def survey():
    """All lakes by two schemes of two definitions each, with draws."""
    return assessed(*LAKES, draws=1000, schemes=("survey_bands", "norway_20"))


def by_lake(table, name):
    """Rows of one lake, numbered anew."""
    return table[table["sample_id"] == name].reset_index(drop=True)


def holds(rule, value):
    """Whether a rule in words, such as "pH > 5 and <= 6", holds for a value."""
    found = re.findall(r"(<=|>=|<|>) (-?[\d.e+-]+)", rule)
    assert found, rule
    return all(OPERATORS[sign](value, float(limit)) for sign, limit in found)


# ------------------------------------------------------------------ classes


def test_probabilities_of_the_classes_add_up(survey):
    """Of each lake, scheme and definition one row per class at most; together one, but for those too rare to show."""
    table = class_table(survey)
    groups = table.groupby(["sample_id", "scheme", "definition"])
    assert not table.duplicated(["sample_id", "scheme", "definition", "class"]).any()
    total = groups["probability"].sum()
    assert ((total <= 1.0 + 1e-9) & (total >= 1.0 - 3 * LEAST_SHOWN)).all()
    assert (groups["is_class_of_value"].apply(lambda v: (v == "yes").sum()) == 1).all()
    assert (table.loc[table["is_class_of_value"] == "no", "probability"] >= LEAST_SHOWN).all()
    assert len(table) > len(groups)


def test_classes_of_each_definition(survey):
    """Gran ANC, alkalinity and charge balance side by side, the one in use marked; its class is that of the results."""
    table = class_table(survey)
    full = by_lake(table, "full")
    assert set(zip(full["scheme"], full["definition"], full["in_use"], strict=True)) == {
        ("survey_bands", "Gran ANC", "yes"), ("survey_bands", "charge balance", "no"),
        ("survey_bands", "Gran ANC of the ions", "no"),
        ("norway_20", "charge balance", "yes"), ("norway_20", "Gran ANC", "no")}
    end = by_lake(table, "end point")
    assert set(zip(end["scheme"], end["definition"], end["in_use"], strict=True)) == {
        ("survey_bands", "Gran ANC of the ions", "yes"), ("survey_bands", "charge balance", "no"),
        ("norway_20", "charge balance", "yes")}
    assert by_lake(table, "ph only").empty
    used = table[(table["scheme"] == "survey_bands") & (table["in_use"] == "yes")]
    used = used[used["is_class_of_value"] == "yes"]
    results = survey.results.set_index("sample_id")
    assert len(used) == 5
    for row in used.to_dict("records"):
        assert results.loc[row["sample_id"], "class"] == row["class"]
        assert_allclose(row["probability"], results.loc[row["sample_id"], "class_probability"], rtol=1e-12)


def test_rules_of_the_classes_hold_for_the_value(survey):
    """The rule of the class found holds, those of the others do not."""
    columns = {"Gran ANC": "anc_gran_ueq_l", "charge balance": "anc_charge_ueq_l",
               "Gran ANC of the ions": "anc_gran_of_ions_ueq_l"}
    values = survey.results.set_index("sample_id")
    table = class_table(survey)
    for row in table.to_dict("records"):
        value = values.loc[row["sample_id"], columns[row["definition"]]]
        assert row["rule"].startswith(row["definition"])
        assert holds(row["rule"].removeprefix(row["definition"]), value) == (row["is_class_of_value"] == "yes"), row
        assert row["source"]


def test_rare_classes_are_left_out():
    """40 and 14 µeq/L: 24 % above 50 and 0.2 % at or below 0 (normal law); half a percent is needed to be shown."""
    table = class_table(assessed(FULL | {"anc_u_eq_l": 14e-6}, draws=20_000))
    shown = table[(table["scheme"] == "survey_bands") & (table["definition"] == "Gran ANC")]
    assert list(shown["class"]) == ["prone to turn acid", "sensitive"]
    table = class_table(assessed(FULL | {"anc_u_eq_l": 19e-6}, draws=20_000))  # 1.8 % at or below 0
    shown = table[(table["scheme"] == "survey_bands") & (table["definition"] == "Gran ANC")]
    assert list(shown["class"]) == ["chronically acidic", "prone to turn acid", "sensitive"]


def test_classes_without_draws():
    """One row for each definition; no probability."""
    table = class_table(assessed(FULL))
    assert list(table["is_class_of_value"]) == ["yes"] * 3
    assert table["probability"].isna().all()


def test_rows_stand_lake_by_lake(survey):
    """In the order of the readings, with the line of the file."""
    for table in (class_table(survey), verdict_table(survey, LIMITS), load_table(survey), episode_table(survey),
                  deposition_table(survey, options_of()), liming_table(survey, options_of())):
        assert list(table["row"]) == sorted(table["row"])
        lines = dict(zip(survey.results["sample_id"], survey.results["row"], strict=True))
        assert [lines[name] for name in table["sample_id"]] == list(table["row"])


# ------------------------------------------------------------------ verdicts


def test_each_verdict_tells_its_rule_and_truth(survey):
    """Value, operator and limit worked out again; its value and interval are those of the results."""
    table = verdict_table(survey, LIMITS)
    results = survey.results.set_index("sample_id")
    limits = {limit.name: limit for limit in LIMITS}
    checked = set()
    for row in table[table["verdict"].isin(limits)].to_dict("records"):
        limit, lake = limits[row["verdict"]], results.loc[row["sample_id"]]
        assert row["value"] == lake[row["quantity"]]
        assert row["rule"].split(" ")[0] == row["quantity"] == limit.quantity
        assert row["rule"].endswith(f" {limit.unit}" if limit.unit != "-" else f"{limit.limit:g}")
        assert (row["warned"] == "yes") == holds(row["rule"], row["value"]), row
        assert (row["words"],
                row["next_step"]) == ((limit.words, limit.next_step) if row["warned"] == "yes" else ("", ""))
        if f"{row['quantity']}_low" in results:
            ends = [lake[f"{row['quantity']}_low"], lake[f"{row['quantity']}_high"]]
            assert_array_equal([row["low"], row["high"]], ends)
        assert (row["verdict"] in lake["warnings"].split("; ")) == (row["warned"] == "yes")
        checked.add((row["verdict"], row["warned"]))
    assert {name for name, _ in checked} == set(limits)
    assert {("below pH 6", "yes"), ("below pH 6", "no"), ("critical load exceeded", "yes"),
            ("critical load exceeded", "no"),
            ("episode to zero", "yes"), ("aluminum", "yes"), ("base cations used up", "no")} <= checked


def test_a_limit_is_tested_where_its_figure_is_known(survey):
    """And nowhere else: one row per lake and limit."""
    table = verdict_table(survey, LIMITS)
    for limit in LIMITS:
        known = survey.results.loc[survey.results[limit.quantity].notna(), "sample_id"]
        assert list(table.loc[table["verdict"] == limit.name, "sample_id"]) == list(known)


def test_verdict_of_the_class(survey):
    """By each scheme on the definition in use: value, rule, chance, and whether the class is at risk."""
    table = verdict_table(survey, LIMITS)
    results = survey.results.set_index("sample_id")
    classes = table[table["verdict"].str.startswith("class by ")].to_dict("records")
    assert len(classes) == 2 * 5  # two schemes, five lakes with an ANC
    for row in classes:
        assert row["value"] == results.loc[row["sample_id"], row["quantity"]]
        assert holds(row["rule"].partition(" ")[2], row["value"]), row
        assert row["unit"] == "µeq/L"
        scheme, _, name = row["verdict"].removeprefix("class by ").partition(": ")
        if scheme == "survey_bands":
            lake = results.loc[row["sample_id"]]
            assert (name, row["rests_on"]) == (lake["class"], lake["class_on"])
            assert row["probability"] == lake["class_probability"]
            assert (row["warned"] == "yes") == (row["value"] <= 50.0) == (name in lake["warnings"])
        else:
            assert row["quantity"] == "anc_charge_ueq_l"
            assert (row["warned"] == "yes") == (row["value"] < 20.0)


def test_verdict_by_a_ph_scheme():
    """In pH, with the chance of the draws; 5.6 itself is in the worst Swedish class (printed table)."""
    found = assessed(FULL | {"ph": 5.6, "ph_u": 0.05}, draws=20_000, schemes=("sweden_ph",))
    row = verdict_table(found, LIMITS).iloc[0]
    assert (row["verdict"], row["quantity"], row["unit"],
            row["value"]) == ("class by sweden_ph: class 5, strongly acid", "ph", "-", 5.6)
    assert (row["rule"], row["warned"]) == ("pH <= 5.6", "yes")
    assert_allclose(row["probability"], 0.5, rtol=0, atol=4 * 0.5 / np.sqrt(20_000))
    assert [row["low"], row["high"]] == found.results[["ph_low", "ph_high"]].iloc[0].tolist()


def test_a_value_beside_its_limit_does_not_contradict_its_rule():
    """pH 5.996 is below 6, and 0.04 µeq/L above 0: whatever figures are shown, the rule must hold for them."""
    table = verdict_table(assessed(FULL | {"anc_eq_l": 0.04e-6, "ph": 5.996}), LIMITS).set_index("verdict")
    for verdict in ("below pH 6", "class by survey_bands: prone to turn acid"):
        assert holds(table.loc[verdict, "rule"].partition(" ")[2], table.loc[verdict, "value"]), verdict


@pytest.mark.parametrize(("verdict", "words"), [
    ("critical load exceeded", "variant concentration today norway; ANC limit 20 µeq/L"),
    ("episode to zero", "deposition over precipitation; ANC is minus the free acid"),
    ("dose would over-lime", "limestone, target of the run"), ("below pH 6", "readings"),
])
def test_what_a_verdict_rests_on(survey, verdict, words):
    """The variant, the event water, the product; else the readings."""
    table = by_lake(verdict_table(survey, LIMITS), "acid").set_index("verdict")
    assert table.loc[verdict, "rests_on"].startswith(words)


def test_a_limit_on_something_that_is_no_result(survey):
    """Is left out, as one that was never asked for."""
    table = verdict_table(survey, (replace(LIMITS[0], quantity="color"), LIMITS[1]))
    assert set(table["verdict"]) & {limit.name for limit in LIMITS} == {LIMITS[1].name}


# ------------------------------------------------------------------ critical loads


def test_chosen_load_is_that_of_the_results(survey):
    """First of its lake, without a change; only lakes with runoff and ions have any."""
    table = load_table(survey)
    results = survey.results.set_index("sample_id")
    chosen = table[table["variant"] == "as chosen"]
    assert list(chosen["sample_id"]) == list(results.index[results["critical_load_meq_m2_yr"].notna()])
    for row in chosen.to_dict("records"):
        lake = results.loc[row["sample_id"]]
        assert_allclose(row["critical_load_meq_m2_yr"], lake["critical_load_meq_m2_yr"], rtol=1e-12)
        assert_allclose(row["exceedance_meq_m2_yr"], lake["exceedance_meq_m2_yr"], rtol=1e-12)
        assert row["change_percent"] == 0.0
        assert by_lake(table, row["sample_id"]).loc[0, "variant"] == "as chosen"


def test_variants_of_hawk_pond(survey):
    """Worked out apart: 24.03 as chosen, 32.80 with F at the original base cations; 30 µeq/L cost 0.762 x 30."""
    table = by_lake(load_table(survey), "hawk").set_index("variant")
    assert len(table) == len(list(one_at_a_time(survey.rules.critical)))
    loads = table["critical_load_meq_m2_yr"]
    assert_allclose([loads["as chosen"], loads["F at the original base cations"]], [24.03, 32.80], rtol=0, atol=0.01)
    assert_allclose([loads["ANC limit 0 µeq/L"], loads["ANC limit 50 µeq/L"]], 24.03 + 0.762 * np.array([20.0, -30.0]),
                    rtol=0, atol=0.01)
    assert_allclose(table["change_percent"], 100.0 * (loads / loads["as chosen"] - 1.0), rtol=0, atol=1e-9)
    # sulfur and leached nitrate are the same in all that take the same sulfur
    total = table["exceedance_meq_m2_yr"] + loads
    assert_allclose(total, 43.72 + 0.762 * 9.775, rtol=0, atol=0.01)
    lake = survey.results.set_index("sample_id").loc["hawk"]
    assert lake["critical_load_lowest_meq_m2_yr"] <= loads["as chosen"] <= lake["critical_load_highest_meq_m2_yr"]
    assert lake["critical_load_highest_meq_m2_yr"] > 40.34  # original base cations, variable limit: 40.35


def test_tables_of_lakes_without_answers():
    """No row, but all columns: a lake of pH alone."""
    bare = assessed({"ph": 5.4})
    for table in (class_table(bare), load_table(bare), episode_table(bare), deposition_table(bare, options_of()),
                  liming_table(bare, options_of())):
        assert len(table) == 0
        assert {"row", "sample_id"} < set(table.columns)
    assert list(verdict_table(bare, LIMITS)["verdict"]) == ["below pH 6"]
