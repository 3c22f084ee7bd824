"""Quality checks: each is met by one sample and broken by another, by sums and formulas written here."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sample_tables import assessed, readings

from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.sample.quality import file_check_rows, roundings, sample_checks
from aquabuf.readings.schema import quantities
from aquabuf.tables import read_table

T = {"temperature_c": 25.0}
FACTS = {row["name"]: row for row in read_table("checks")}

# Lake 1A1-003 of the EPA Eastern Lake Survey 1984, µeq/L: the agency's own sums and conductivity (open data)
LAKE = {"calcium": 59.281, "magnesium": 16.287, "sodium": 17.487, "potassium": 6.341, "ammonium": 5.156, "sulfate": 132.457,
        "nitrate": 9.775, "chloride": 8.040, "fluoride": 2.853}
LAKE_H, LAKE_HCO3 = 16.2181, 0.882
CHARGE = {"calcium": 2, "magnesium": 2, "sulfate": 2}


def one(value):
    """An array of one sample."""
    return np.array([float(value)])


NO_OTHER_IONS = {name: one(0.0) for name in ("weak_cations_meq_l", "weak_anions_meq_l", "hydrogen_meq_l", "hydroxide_meq_l")}


def lake_checks(strength=0.0, measured=23.7):
    """Checks of the lake, by name."""
    values = {f"{n}_mol_l": one(v * 1e-6 / CHARGE.get(n, 1)) for n, v in LAKE.items()}
    values |= {"conductivity_us_cm": one(measured), "temperature_c": one(10.0)}
    figures = {"ph": one(-np.log10(LAKE_H * 1e-6)), "bicarbonate_mmol_l": one(LAKE_HCO3 * 1e-3), "carbonate_mmol_l": one(0.0),
               "ionic_strength_mol_l": one(strength), "pco2_uatm": one(600.0), "draws_solved": one(np.nan), RANK_BY: one(-0.02)}
    weak = {"weak_cations_meq_l": one(LAKE["ammonium"] * 1e-3),  # all ammonium, sulfate and fluoride charged, as EPA did
            "weak_anions_meq_l": one((LAKE["sulfate"] + LAKE["fluoride"]) * 1e-3)}
    figures |= weak | {"hydrogen_meq_l": one(LAKE_H * 1e-3), "hydroxide_meq_l": one(0.0)}
    found = sample_checks(values, figures, np.array(["pH and carbon"]), one(np.nan), one(np.nan))
    return {c.name: c for c in found}


def test_ion_balance_of_a_survey_lake():
    """Cations 120.77, anions 154.01 µeq/L, %ID +12.10 (EPA survey sums; 100 (an - cat)/(an + cat))."""
    check = lake_checks()["ion balance"]
    assert_allclose(check.value, 12.10, rtol=0, atol=0.01)
    assert check.met.all()  # above 100 µeq/L: 15 %
    assert (check.low[0], check.high[0]) == (-15.0, 15.0)


def test_conductivity_of_a_survey_lake_at_infinite_dilution():
    """23.886 µS/cm (EPA, open data, reproduced with the listed equivalent conductivities) against 23.7 measured."""
    assert_allclose(lake_checks()["conductivity"].value, 100.0 * (23.886 / 23.7 - 1.0), rtol=0, atol=0.05)


def test_conductivity_falls_with_ionic_strength():
    """Square of a monovalent Davies coefficient, A = 0.5 (Standard Methods 2510, recalled): 10^-(s/(1+s) - 0.3 s²), s = sqrt(I)."""
    s = np.sqrt(0.05)
    expected = 23.886 * 10.0 ** -(s / (1.0 + s) - 0.3 * s * s)
    assert_allclose(lake_checks(strength=0.05)["conductivity"].value, 100.0 * (expected / 23.7 - 1.0), rtol=0, atol=0.05)


@pytest.mark.parametrize(("measured", "allowed"), [(4.99, 50.0), (5.0, 30.0), (30.0, 30.0), (30.01, 20.0)])
def test_conductivity_limits(measured, allowed):
    """EPA reanalysis table (recalled): 50, 30 and 20 % below 5, up to 30 and above 30 µS/cm."""
    check = lake_checks(measured=measured)["conductivity"]
    assert (check.low[0], check.high[0]) == (-allowed, allowed)


def test_conductivity_of_zero_is_no_check():
    """A meter that reads zero measured nothing."""
    assert np.isnan(lake_checks(measured=0.0)["conductivity"].value).all()


def salt(cations, anions):
    """A water of sodium, chloride and traces with these sums [eq/L], pH 7 and no carbonate."""
    names = ("calcium", "magnesium", "sulfate")
    values = {f"{n}_mol_l": one(0.0) for n in names} | {"sodium_mol_l": one(cations - 1e-7), "chloride_mol_l": one(anions - 1e-7)}
    figures = {"ph": one(7.0), "bicarbonate_mmol_l": one(0.0), "carbonate_mmol_l": one(0.0), "ionic_strength_mol_l": one(0.0),
               "pco2_uatm": one(400.0), "draws_solved": one(np.nan), RANK_BY: one(0.1)} | NO_OTHER_IONS
    figures |= {"hydrogen_meq_l": one(1e-4), "hydroxide_meq_l": one(1e-4)}  # of pH 7
    values["temperature_c"] = one(10.0)
    return {c.name: c for c in sample_checks(values, figures, np.array([""]), one(np.nan), one(np.nan))}["ion balance"]


@pytest.mark.parametrize(("total", "allowed"), [(49.0, 60.0), (51.0, 30.0), (99.9, 30.0), (101.0, 15.0)])
@pytest.mark.parametrize("sign", [1, -1])
def test_ion_balance_limits_by_dilution(total, allowed, sign):
    """60, 30 and 15 % up to 50, up to 100 and above 100 µeq/L (EPA reanalysis table, recalled), for either sign."""
    for imbalance, met in ((allowed - 0.5, True), (allowed + 0.5, False)):
        off = sign * imbalance / 100.0
        check = salt(total * 1e-6 * (1 - off) / 2, total * 1e-6 * (1 + off) / 2)
        assert_allclose(check.value, sign * imbalance, rtol=1e-9)
        assert check.met.all() == met


@pytest.mark.parametrize("missing", ["calcium", "magnesium", "sodium", "chloride", "sulfate"])
def test_balance_needs_the_major_ions(missing):
    """A sum that lacks one says nothing about the analysis."""
    ions = {f"{n}_mol_l": 1e-4 for n in ("calcium", "magnesium", "sodium", "chloride", "sulfate") if n != missing}
    made = assessed(T | {"ph": 7.5, "alkalinity_eq_l": 3e-4, "conductivity_us_cm": 60.0} | ions).made
    assert (made["ion balance"], made["conductivity"]) == (0, 0)


W = T | {"ph": 7.5, "alkalinity_eq_l": 1e-3}
CALCIUM = {"calcium_mol_l": 4e-4, "magnesium_mol_l": 1e-4}
BALANCED = {"calcium_mol_l": 3e-4, "magnesium_mol_l": 1e-4, "sodium_mol_l": 4e-4, "chloride_mol_l": 1e-4, "sulfate_mol_l": 5e-5}
CASES = {  # name: sample that meets the check, sample that breaks it
    "ion balance": (W | BALANCED, W | BALANCED | {"sodium_mol_l": 1e-3}),
    "conductivity": (W | BALANCED | {"conductivity_us_cm": 108.0}, W | BALANCED | {"conductivity_us_cm": 160.0}),
    "pH against alkalinity": (W, T | {"ph": 9.5, "alkalinity_eq_l": 1e-6, "dic_mol_l": 1e-4}),
    "alkalinity against pH and carbon": (W | {"dic_mol_l": 1.07e-3}, W | {"dic_mol_l": 2e-3}),
    "CO2 in brown acid water": (W | {"doc_mg_l": 2.0}, W | {"ph": 6.2, "alkalinity_eq_l": 1e-4, "doc_mg_l": 9.0}),
    "CO2 in acid water": (W | {"ph": 6.0, "alkalinity_eq_l": 1e-3}, W | {"ph": 5.3, "alkalinity_eq_l": 1e-3}),
    "acids not counted": (W | {"doc_mg_l": 2.0}, T | {"ph": 5.2, "alkalinity_eq_l": 2e-5, "aluminum_mol_l": 1e-5}),
    "CO2 pressure": (W, W | {"ph": 5.6, "alkalinity_eq_l": 3e-3}),
    "temperature": (W | {"temperature_c": 35.0}, W | {"temperature_c": 35.1}),
    "salinity": (W | {"conductivity_us_cm": 2000.0}, W | {"conductivity_us_cm": 2001.0}),
    "hardness": (W | CALCIUM | {"total_hardness_mol_l": 5.4e-4}, W | CALCIUM | {"total_hardness_mol_l": 6e-4}),
    "holding time": (W | {"holding_days": 14.0}, W | {"holding_days": 14.5}),
    "usual ranges": (W, W | {"turbidity_ntu": 1001.0}),
    "draws": (W, T | {"ph": 9.0, "alkalinity_eq_l": 1.3e-5, "alkalinity_u_eq_l": 3e-6}),
}
OF_FILE = {"whole numbers", "duplicate names"}


def test_every_shipped_check_has_a_case():
    """A check without a case that breaks it is not a check."""
    assert set(CASES) | OF_FILE == set(FACTS)


@pytest.mark.parametrize("name", CASES)
def test_check_is_met_by_one_and_broken_by_the_other(name):
    """And the line says limit, remedy and source from the table."""
    met, broken = (assessed(row, draws=200).checks.set_index("check").loc[[name]].iloc[0] for row in CASES[name])
    assert (met["met"], met["remedy"]) == ("yes", "")
    assert broken["met"] == "no"
    assert broken["remedy"].startswith(FACTS[name]["remedy"])
    assert broken["source"] == FACTS[name]["source"]
    assert any(word in broken["limit"] for word in ("at least", "at most", " to "))


@pytest.mark.parametrize(("ph", "met"), [(5.51, "yes"), (5.49, "no")])
def test_brown_water_without_organic_carbon(ph, met):
    """pH 5.5 decides where organic carbon was not measured; the value is a pH."""
    line = assessed(T | {"ph": ph, "alkalinity_eq_l": 1e-3}).checks.set_index("check").loc["CO2 in acid water"]
    assert (line["met"], line["limit"]) == (met, "at least 5.5")
    assert_allclose(line["value"], ph, rtol=1e-9)


def test_brown_water_without_organic_carbon_is_judged_by_a_ph():
    """The value is a pH, so its unit is not percent."""
    line = assessed(T | {"ph": 6.0, "alkalinity_eq_l": 1e-3}).checks.set_index("check").loc["CO2 in acid water"]
    assert line["unit"] != "%"


# Organic charge [µeq/L] of DOC [mg/L] at a pH: EPA Eastern Lake Survey (ORGION, open data), by Oliver et al. 1983
SURVEY_CHARGE = [(1.57, 4.79, 11.33052), (4.00, 6.61, 38.48538)]


def oliver(doc, ph):
    """10 µeq per mg C with pK = 0.96 + 0.90 pH - 0.039 pH² (Oliver, Thurman & Malcolm 1983). [µeq/L]"""
    return 10.0 * doc / (1.0 + 10.0 ** (0.96 + 0.90 * ph - 0.039 * ph * ph - ph))


def organic(doc, ph, carbonate_meq_l, acid_to_six_meq_l=0.1, aluminum=0.0, pair="pH and alkalinity"):
    """The two checks of organic charge for one sample."""
    values = {"doc_mg_l": one(doc), "temperature_c": one(10.0), "aluminum_mol_l": one(aluminum)}
    figures = {"ph": one(ph), "bicarbonate_mmol_l": one(carbonate_meq_l), "carbonate_mmol_l": one(0.0), "pco2_uatm": one(400.0),
               "ionic_strength_mol_l": one(0.0), "draws_solved": one(np.nan), RANK_BY: one(acid_to_six_meq_l)} | NO_OTHER_IONS
    found = sample_checks(values, figures, np.array([pair]), one(np.nan), one(np.nan))
    return {c.name: c for c in reversed(found)}


@pytest.mark.parametrize(("doc", "ph", "survey"), SURVEY_CHARGE)
def test_brown_water_by_its_organic_charge(doc, ph, survey):
    """What a titration to pH 4 counts (survey value less the same formula at pH 4) over carbonate alkalinity: 20 % is allowed."""
    assert_allclose(oliver(doc, ph), survey, rtol=1e-5)
    titrated = survey - oliver(doc, 4.0)
    for part, met in ((0.199, True), (0.201, False)):
        check = organic(doc, ph, 1e-3 * titrated / part)["CO2 in brown acid water"]
        assert_allclose(check.value, 100.0 * part, rtol=1e-4)
        assert check.met.all() == met


@pytest.mark.parametrize(("ph", "aluminum", "demand"), [
    (7.0, 0.0, oliver(5.0, 7.0) - oliver(5.0, 6.0)), (5.0, 0.0, oliver(5.0, 6.0) - oliver(5.0, 5.0)),
    (5.0, 1e-5, oliver(5.0, 6.0) - oliver(5.0, 5.0) + 30.0), (5.6, 1e-5, oliver(5.0, 6.0) - oliver(5.0, 5.6))])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_acids_that_the_tolerance_leaves_out(ph, aluminum, demand, sign):
    """Organic charge between the sample and pH 6, and three charges per aluminum below pH 5.5, over acid or base to pH 6."""
    for part, met in ((0.199, True), (0.201, False)):
        check = organic(5.0, ph, 0.1, sign * 1e-3 * demand / part, aluminum)["acids not counted"]
        assert_allclose(check.value, 100.0 * part, rtol=1e-6)
        assert check.met.all() == met


def test_acids_not_counted_need_a_reading_of_them():
    """Without organic carbon and aluminum nothing can be said."""
    assert assessed(W).made["acids not counted"] == 0


def test_failed_checks_stand_in_the_results():
    """By name, joined by semicolons; empty where all are met."""
    table = assessed(W | {"sample_id": "a"}, W | {"sample_id": "b", "holding_days": 20.0, "turbidity_ntu": 1001.0}).results
    assert table["failed_checks"].tolist() == ["", "holding time; usual ranges"]


@pytest.mark.parametrize(("pair", "made"), [("pH and alkalinity", True), ("pH and air", True), ("pH and carbon", False), ("carbon and pCO2", False)])
def test_brown_water_matters_where_alkalinity_speaks_for_carbon(pair, made):
    """And where it could not; not where carbon was measured."""
    assert np.isfinite(organic(5.0, 6.0, 0.1, pair=pair)["CO2 in brown acid water"].value[0]) == made


def test_brown_water_matters_only_for_ph_and_alkalinity():
    """Carbon that was measured does not suffer from organic charge."""
    made = assessed(T | {"ph": 6.2, "dic_mol_l": 3e-4, "doc_mg_l": 9.0}).made
    assert made["CO2 in brown acid water"] == 0


def test_carbon_dioxide_limits():
    """10 and 20 000 µatm, both allowed."""
    figures = {"pco2_uatm": np.array([9.9, 10.0, 20000.0, 20001.0]), "ph": np.full(4, 7.0), "bicarbonate_mmol_l": np.zeros(4),
               "carbonate_mmol_l": np.zeros(4), "ionic_strength_mol_l": np.zeros(4), "draws_solved": np.array([0.9, 0.89, 1.0, 0.0]), RANK_BY: np.ones(4)}
    figures |= {name: np.zeros(4) for name in NO_OTHER_IONS}
    nan = np.full(4, np.nan)
    checks = {c.name: c for c in sample_checks({"temperature_c": np.full(4, 10.0)}, figures, np.full(4, ""), nan, nan)}
    assert checks["CO2 pressure"].met.tolist() == [False, True, True, False]
    assert checks["draws"].met.tolist() == [True, False, True, False]


def test_salinity_is_asked_for_only_where_it_is_not_given():
    """A row with salinity may have any conductivity."""
    found = assessed(T | {"salinity": 20.0, "ph_total": 8.0, "alkalinity_eq_l": 2e-3, "conductivity_us_cm": 32000.0})
    assert found.made["salinity"] == 0


def test_usual_ranges_names_the_columns():
    """Which reading is unusual is part of the remedy."""
    line = assessed(W | {"turbidity_ntu": 1001.0, "elevation_m": 5001.0}).checks.set_index("check").loc["usual ranges"]
    assert line["value"] == 2.0
    assert line["remedy"].endswith(": turbidity_ntu, elevation_m")


def test_usual_ranges_are_those_of_the_column_table():
    """The limits of each number stand in one table."""
    q = quantities()["turbidity_ntu"]
    inside = assessed(W | {"turbidity_ntu": q.soft_high}).checks.set_index("check").loc["usual ranges"]
    assert inside["value"] == 0.0


def test_unmet_checks_only():
    """Long tables list the unmet ones; the counts stay."""
    found = assessed(W | {"holding_days": 14.0, "elevation_m": 5001.0})
    short = assess(readings(W | {"holding_days": 14.0, "elevation_m": 5001.0}), Options(draws=0), (), only_unmet_checks=True)
    assert short.checks["check"].tolist() == ["usual ranges"]
    assert short.made == found.made
    assert short.unmet["usual ranges"] == 1
    assert sum(short.unmet.values()) == 1


def test_checks_of_several_samples_stand_sample_by_sample():
    """In the order of the rows, each with its row and name."""
    table = assessed(W | {"sample_id": "a"}, W | {"sample_id": "b", "holding_days": 3.0}).checks
    assert table["sample_id"].tolist() == sorted(table["sample_id"])
    assert "holding time" not in table.loc[table["sample_id"] == "a", "check"].tolist()
    assert table.loc[table["check"] == "holding time", "row"].tolist() == [3]


# ------------------------------------------------------------------ checks of the table as a whole


def rounded(column, unit, in_house, u):
    """Rounding of one column with these values [house unit] and one standard uncertainty."""
    values = {column: np.array(in_house, dtype=float)}
    return roundings(values, {column: np.full(len(in_house), u)}, {"header": (column, unit)})[column]


@pytest.mark.parametrize(("column", "unit", "scale"), [
    ("ph", "-", 1.0), ("temperature_c", "°C", 1.0), ("alkalinity_eq_l", "µeq/L", 1e-6), ("anc_eq_l", "meq/L", 1e-3),
    ("alkalinity_eq_l", "mg/L as CaCO3", 1.0 / 50043.0), ("conductivity_us_cm", "mS/cm", 1e3), ("dic_mol_l", "µmol/L", 1e-6)])
def test_whole_numbers_are_counted_in_the_unit_of_the_file(column, unit, scale):
    """Three of four; rounding to whole numbers has a standard uncertainty of one over sqrt(12) (even spread, closed form)."""
    found = rounded(column, unit, np.array([5.0, 6.0, 7.4, np.nan, 12.0]) * scale, 0.1 * scale)
    assert (found.whole, found.size) == (3, 4)
    assert_allclose([found.error, found.stated], [scale / np.sqrt(12.0), 0.4 * scale], rtol=1e-4)


def test_whole_temperatures_in_fahrenheit():
    """59 and 68 °F are 15 and 20 °C; a step of 1 °F is 5/9 °C."""
    found = rounded("temperature_c", "°F", [15.0, 20.0, 15.3], 0.2)
    assert (found.whole, found.size) == (2, 3)
    assert_allclose(found.error, 5.0 / 9.0 / np.sqrt(12.0), rtol=1e-9)


@pytest.mark.parametrize(("whole", "size", "u", "met"), [
    (9, 10, 0.05, "no"), (8, 10, 0.05, "yes"), (9, 9, 0.05, None), (90, 100, 0.28, "no"), (90, 100, 0.29, "yes"), (89, 100, 0.05, "yes")])
def test_a_column_of_whole_numbers_was_rounded(whole, size, u, met):
    """From ten values on, 90 % whole is too many where rounding (0.2887) outweighs the uncertainty."""
    values = [7.0] * whole + [7.3] * (size - whole)
    table = file_check_rows({"ph": rounded("ph", "-", values, u)}, 0).set_index("check")
    if met is None:
        assert "whole numbers" not in table.index
        return
    line = table.loc["whole numbers"]
    assert (line["met"], line["unit"]) == (met, "%")
    assert line["limit"].startswith("below 90 in ph")
    assert_allclose(line["value"], 100.0 * whole / size, rtol=1e-12)
    assert line["remedy"] == ("" if met == "yes" else FACTS["whole numbers"]["remedy"] + ": ph")


def test_rounding_adds_up_over_pieces():
    """Two pieces of a column are one column."""
    a, b = rounded("ph", "-", [7.0, 8.0], 0.05), rounded("ph", "-", [7.2, 8.0, 6.0], 0.1)
    both = a.plus(b)
    assert (both.size, both.whole) == (5, 4)
    assert_allclose([both.error, both.stated], [1.0 / np.sqrt(12.0), 0.4], rtol=1e-12)


@pytest.mark.parametrize(("count", "met"), [(0, "yes"), (2, "no")])
def test_names_used_twice(count, met):
    """Rows refused for a name that was there before."""
    line = file_check_rows({}, count).iloc[0]
    assert (line["check"], line["value"], line["met"], line["sample_id"]) == ("duplicate names", count, met, "(all rows)")
    assert line["remedy"] == ("" if met == "yes" else FACTS["duplicate names"]["remedy"])


def test_columns_of_both_kinds_of_check_are_the_same():
    """They go into one file."""
    assert file_check_rows({}, 0).columns.tolist() == assessed(W).checks.columns.tolist()
