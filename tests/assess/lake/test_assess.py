"""A survey through the whole path: a printed lake from a file, classes by hand, what is refused or not stated."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from assessed_lakes import FULL, HAWK, LAND, WATER, assessed, options_of, readings, result, results, without
from carbonate_by_hand import BareWater
from made_lakes import ions
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.options import rules_of
from aquabuf.assess.limits import shipped_limits
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.readings.reader import read_readings
from aquabuf.readings.result import REJECTED_COLUMNS

STRENGTH = 3e-4
HAND = BareWater(10.0, STRENGTH)
LIMITS = shipped_limits("lake_limits")
# Lake 1A1-003 of the Eastern Lake Survey 1984 (US EPA) as the agency prints it
HAWK_CSV = """\
Sample,Lake,Region,Date,Water temp (°C),pH,ANC (µeq/L),ANC method,Calcium (µeq/L),Magnesium (µeq/L),Sodium (µeq/L),\
Potassium (µeq/L),Ammonium (µeq/L),Sulfate (µeq/L),Nitrate (µeq/L),Chloride (µeq/L),Fluoride (µeq/L),\
Runoff (m/yr),Sulfur deposition (g/m²/yr as SO4)
1A1-003,HAWK POND,1A,1984-10-16,10,4.79,-21.7,gran,59.281,16.287,17.487,6.341,5.156,132.457,9.775,8.040,2.853,0.762,2.10
"""
HAWK_STRENGTH = 2.4e-4  # half of charge squared times concentration over its ions [mol/L]
PRESSURES = ("pco2_uatm", "pco2_air_ratio", "pco2_neal_uatm", "co2_flux_mmol_m2_d")


def air_carbon(water, ph):
    """Carbon of water at 10 °C that holds the CO2 of air at this pH; vapor of the printed steam tables. [mol/L]"""
    return AIR_CO2_PPM * 1e-6 * (1.0 - 1.2281 / 101.325) * water.k0 / water.shares(ph)[0]


# ------------------------------------------------------------------ from a file


def test_hawk_pond_from_a_file(tmp_path):
    """One row as it comes from a survey: critical load 24.03, exceedance 27.14 meq/m2/yr, ANC and class.

    Loads worked out apart from the code with a and b recalled; sums as the agency prints them.
    """
    path = tmp_path / "hawk.csv"
    path.write_text(HAWK_CSV, encoding="utf-8")
    options = options_of()
    row = assess_lakes(read_readings(path), rules_of(options), options, LIMITS).results.iloc[0]
    for name, expected in (("critical_load_meq_m2_yr", 24.03), ("exceedance_meq_m2_yr", 27.14),
                           ("base_cations_star_ueq_l", 90.472),
                           ("sulfate_star_ueq_l", 131.629), ("anc_gran_ueq_l", -21.7),
                           ("anc_charge_bare_ueq_l", -50.876),
                           ("anc_charge_ueq_l", -45.720), ("base_cations_ueq_l", 99.396), ("anc_gap_ueq_l", -24.020)):
        assert_allclose(row[name], expected, rtol=0, atol=0.015, err_msg=name)
    assert (row["row"], row["site"], row["region"], row["class"]) == (2, "HAWK POND", "1A", "chronically acidic")
    assert row["warnings"].startswith("chronically acidic; below pH 6; critical load exceeded")
    # no bicarbonate is left by pH and ANC, so that of air is there; H+ by the pH and a Davies coefficient
    water = BareWater(10.0, HAWK_STRENGTH)
    anions = 154.01 - 0.882 + 1e6 * air_carbon(water, 4.79) * water.shares(4.79)[1]
    cations = 120.77 - 16.2181 + 1e6 * water.c_h * 10.0**-4.79
    assert_allclose(row["ion_balance_percent"], 100.0 * (anions - cations) / (anions + cations), rtol=0, atol=0.02)


# ------------------------------------------------------------------ rows


def test_rows_stay_in_order_and_bad_ones_are_told():
    """A lake without any ANC, its ions or a pH cannot be assessed; it is named with rule and remedy."""
    nothing = {"temperature_c": 8.0, "calcium_mol_l": 3e-5, "sample_id": "nothing"}
    found = assessed(FULL | {"sample_id": "b"}, nothing, FULL | {"sample_id": "a"})
    assert list(found.results["sample_id"]) == list(found.frame["sample_id"]) == ["b", "a"]
    assert list(found.results["row"]) == [2, 4]
    assert list(found.rejected.columns) == list(REJECTED_COLUMNS)
    told = found.rejected.iloc[0]
    assert (len(found.rejected), told["row"], told["sample_id"]) == (1, 3, "nothing")
    assert (told["value"], told["rule"]) == ("no ANC, alkalinity, complete major ions or pH",
                                             "a lake needs ANC, alkalinity, all of the major ions, or pH")
    assert told["remedy"] == "titrate the sample, or give the ions that are missing"


def test_refused_by_the_reader_and_here_in_file_order():
    """Both kinds in one table."""
    given = readings({"temperature_c": 8.0}, FULL)
    early = pd.DataFrame([(1, "x", "ph", "99", "rule", "remedy")], columns=list(REJECTED_COLUMNS))
    late = pd.DataFrame([(9, "y", "ph", "99", "rule", "remedy")], columns=list(REJECTED_COLUMNS))
    options = options_of()
    found = assess_lakes(replace(given, rejected=pd.concat([late, early])), rules_of(options), options, LIMITS)
    assert list(found.rejected["row"]) == [1, 2, 9]


def test_a_table_without_any_lake():
    """Empty results with all columns; every row is refused."""
    found = assessed({"temperature_c": 8.0}, {"temperature_c": 9.0}, draws=100)
    assert (len(found.results), len(found.rejected)) == (0, 2)
    assert {"class", "anc_used_ueq_l_low"} <= set(found.results.columns)


@pytest.mark.parametrize("row", [
    {"ph": 6.0}, {"anc_eq_l": 4e-5}, {"alkalinity_eq_l": 4e-5}, {"anc_eq_l": 4e-5, "anc_method": "end_point"},
    ions(calcium=50.0, magnesium=20.0, sodium=20.0, potassium=5.0, sulfate=60.0, nitrate=1.0, chloride=20.0),
])
def test_the_least_a_lake_needs(row):
    """Any one of these is enough to be in the table, also where no lake has a temperature."""
    found = assessed(row)
    assert (len(found.results), len(found.rejected)) == (1, 0)
    assert found.results["status"].item() == "partial"


@pytest.mark.parametrize(("row", "status"), [
    (FULL, "ok"), (WATER, "ok"), (without(FULL, "runoff_m_yr"), "ok"), (FULL | {"temperature_c": np.nan}, "partial"),
    (without(WATER, "ph", "dic_mol_l"), "partial"), ({"ph": 6.5, "temperature_c": 10.0}, "partial"),
    (FULL | {"temperature_c": 59.0}, "outside range"),
])
def test_status(row, status):
    """Class, pH at air and tolerance are there; one of them is missing; a constant is used outside its range."""
    assert result(row)["status"] == status


# ------------------------------------------------------------------ classes


@pytest.mark.parametrize(("anc", "name"), [
    (-108.0, "chronically acidic"), (0.0, "chronically acidic"), (0.01, "prone to turn acid"),
    (50.0, "prone to turn acid"),
    (50.01, "sensitive"), (200.0, "sensitive"), (200.01, "not sensitive"), (2000.0, "not sensitive"),
])
def test_class_by_the_bands_of_the_surveys(anc, name):
    """At or below 0, to 50, to 200 µeq/L, above: Driscoll et al. 2003 and the US surveys. At risk: the first two."""
    row = result(FULL | {"anc_eq_l": anc * 1e-6})
    assert (row["class"], row["scheme"], row["class_on"]) == (name, "survey_bands", "Gran ANC")
    assert (name in row["warnings"].split("; ")) == (anc <= 50.0)


def test_first_scheme_gives_the_class():
    """The others stand in its conflicts: 62 by charge balance, 10 by Gran."""
    row = result(FULL | {"anc_eq_l": 10e-6}, schemes=("norway_20", "survey_bands"))
    assert (row["scheme"], row["class"], row["class_on"]) == ("norway_20", "at the limit or above", "charge balance")
    assert row["class_conflicts"] == (
        "norway_20 (charge balance: at the limit or above; Gran ANC: below the limit); survey_bands (Gran ANC: prone "
        "to turn acid; Gran ANC of the ions: prone to turn acid; charge balance: sensitive); at risk by survey_bands (Gran ANC) but not by norway_20 "
        "(charge balance)")


@pytest.mark.parametrize(("ph", "name"),
                         [(5.6, "class 5, strongly acid"), (5.61, "class 4, acid"), (6.9, "class 1, near neutral")])
def test_class_by_ph(ph, name):
    """Swedish EPA, Table 16: at or below 5.6 class 5; above 6.8 class 1. After an event by as much less as the pH at air."""
    row = result(FULL | {"ph": ph, "dic_mol_l": 60e-6}, schemes=("sweden_ph",))
    assert (row["class"], row["class_on"]) == (name, "pH")
    cuts = [5.6, 6.2, 6.5, 6.8]
    then = ph + row["episode_ph"] - row["ph_at_air"]
    assert row["episode_class"].startswith(f"class {5 - int(np.searchsorted(cuts, then))}")


def test_no_class_without_an_anc():
    """Nor its scheme, its chance or a warning of it."""
    row = result({"ph": 6.5, "temperature_c": 10.0}, draws=100)
    assert (row["class"], row["scheme"], row["class_on"], row["class_also"], row["warnings"]) == ("", "", "", "", "")
    assert np.isnan(row["class_probability"])


def test_warnings_are_class_and_limits():
    """In that order, each once; limits for the kind of water they are made for."""
    row = FULL | {"anc_eq_l": -60e-6, "ph": 4.6, "aluminum_mol_l": 9e-6}
    assert result(row)["warnings"] == "chronically acidic; below pH 6; aluminum; episode to zero"
    for_streams = replace(LIMITS[0], kinds=("stream",))
    found = assessed(row | {"water_kind": "lake"}, row | {"water_kind": "stream"},
                     limits=(for_streams,)).results["warnings"]
    assert list(found) == ["chronically acidic", "chronically acidic; below pH 6"]


def test_probability_of_an_exceedance_is_not_that_of_a_limit():
    """Share of the draws above 0, whatever limits the user has; Hawk Pond lies 27 meq/m2/yr above its critical load."""
    higher = tuple(replace(limit,
                           limit=1000.0) if limit.name == "critical load exceeded" else limit for limit in LIMITS)
    for limits in (LIMITS, higher, ()):
        assert assessed(HAWK, draws=200, limits=limits).results["exceedance_probability"].item() > 0.9


# ------------------------------------------------------------------ CO2


NOT_STATED = {
    "organic anions": (without(FULL, "dic_mol_l") | {"doc_mg_l": 9.0},
                       r"not stated: organic anions that a titration counts are \d+(\.\d+)? % of the carbonate"),
    "no carbonate": (without(FULL, "dic_mol_l") | {"anc_eq_l": -60e-6, "ph": 4.6},
                     "not stated: pH and ANC leave no carbonate"),
    "organic carbon unknown": (without(FULL, "dic_mol_l", "doc_mg_l") | {"ph": 5.3, "anc_eq_l": 60e-6},
                               r"not stated: pH is 5\.3, below 5\.5, and organic carbon was not measured"),
    "wide interval": (FULL | {"ph_u": 0.4}, "not stated: the upper end of its interval is"),
}


@pytest.mark.parametrize("case", NOT_STATED)
def test_a_pressure_that_cannot_be_stated_takes_all_with_it(case):
    """Ratio, flux, the check by Neal et al., every interval are empty too; words say why; the neighbor has all."""
    row, words = NOT_STATED[case]
    found = results(row, FULL | {"ph_u": 0.05}, draws=400)
    names = [f"{name}{end}" for name in PRESSURES for end in ("", "_low", "_high") if f"{name}{end}" in found]
    assert len(names) == 4 + 2 * 3
    assert found.loc["s0", names].isna().all()
    assert found.loc["s1", names].notna().all()
    assert pd.Series([found.loc["s0", "pco2_from"]]).str.match(words).all()
    assert found.loc["s1", "pco2_from"] == "carbon"
    assert found["gas_transfer_m_d"].notna().all()  # wind alone tells it


def test_carbon_that_cannot_be_told_is_that_of_air():
    """pH 4.79 and Gran ANC of -21.7 µeq/L leave no bicarbonate: no pressure is stated; closed answers take air's."""
    row = result(HAWK | {"ph": 4.79})
    assert row["pco2_from"].startswith("not stated: pH and ANC leave no carbonate")
    assert_allclose(row["dic_umol_l"], 1e6 * air_carbon(BareWater(10.0, HAWK_STRENGTH), 4.79), rtol=5e-3)


def test_no_pressure_and_no_words():
    """Nothing to go by is not the same as a figure that cannot be stated."""
    row = result(without(FULL, "ph", "dic_mol_l"))
    assert row["pco2_from"] == ""
    assert row[list(PRESSURES)].isna().all()


def test_a_measured_pressure_is_stated_in_brown_water():
    """Organic anions do not touch carbon or CO2 that were measured."""
    for row in (FULL | {"doc_mg_l": 20.0}, without(FULL, "dic_mol_l") | {"doc_mg_l": 20.0, "pco2_atm": 9e-4}):
        assert result(row)["pco2_uatm"] > 0.0


def test_neal_beside_ours():
    """(0.95 Alk + 10^(6-pH)) 10^(6-pH) / (6.46 - 0.0636 t) times 10^-3.5 atm (Neal, House & Down 1998)."""
    row = result(FULL | {"anc_eq_l": 100e-6, "ph": 6.5})
    assert_allclose(row["pco2_neal_uatm"], 5.1754 * 10.0**2.5, rtol=2e-4)


# ------------------------------------------------------------------ what is worked out beside


def test_uncertainty_of_the_gap():
    """Squares of all ions, of the titration, of 15 % of the organic anions and of three charges per aluminum."""
    u = {"calcium": 3.0, "magnesium": 2.0, "sodium": 1.0, "potassium": 0.5, "ammonium": 0.4, "sulfate": 6.0,
         "nitrate": 0.3, "chloride": 2.0}
    row = WATER | {name.replace("_mol_l", "_u_mol_l"): v for name, v in ions(**u).items()} | {
        "anc_u_eq_l": 4e-6, "aluminum_u_mol_l": 0.5e-6}
    row |= {"fluoride_mol_l": 2e-6, "fluoride_u_mol_l": 9e-6}  # is in no charge balance
    found = result(row)
    total = sum(v**2 for v in u.values()) + 4.0**2 + (0.15 * found["anc_gap_organic_ueq_l"]) ** 2 + 1.5**2
    assert_allclose(found["anc_gap_u_ueq_l"], np.sqrt(total), rtol=1e-9)
    assert np.isnan(result(without(row, "anc_eq_l"))["anc_gap_u_ueq_l"])


def test_missing_sodium_is_bounded_by_conductivity():
    """What 22 µS/cm and 2 % of the meter leave beside the other ions, at 50.08 µS/cm per meq/L; never taken as none.

    Other ions at infinite dilution (US lake surveys), H+ and HCO3- by printed constants, Davies coefficient squared.
    """
    row = without(FULL, "sodium_mol_l") | {"ionic_strength_mol_l": STRENGTH}
    known = 1e-3 * (59.47 * 80 + 53.0 * 30 + 73.48 * 5 + 73.5 * 2 + 80.0 * 65 + 71.42 * 5 + 76.31 * 25)
    known += 1e3 * (349.65 * HAND.c_h * 10.0**-6.5 + 44.5 * 80e-6 * HAND.shares(6.5)[1])
    s = np.sqrt(STRENGTH)
    slowed = 10.0 ** -(s / (1.0 + s) - 0.3 * STRENGTH)
    most = 1e3 * (1.02 * 22.0 - known * slowed) / (50.08 * slowed)
    found = result(row)
    assert found["missing_ions"] == "sodium"
    assert np.isnan(found["anc_charge_ueq_l"])
    assert_allclose(found["missing_most_ueq_l"], most, rtol=0, atol=0.2)
    assert_allclose(found["anc_charge_bound_low_ueq_l"], 62.0 - 40.0, rtol=1e-9)
    assert_allclose(found["anc_charge_bound_high_ueq_l"], 62.0 - 40.0 + most, rtol=0, atol=0.2)


NOTES = {  # what a lake has to be told of its load, and a lake of which it holds
    "": FULL,
    "the relation gives more sulfate before acid deposition than there is today":
        FULL | ions(sulfate=30.0),  # 15 + 0.16 x 127
    "F reached 1: the soil answers all acid": FULL | ions(calcium=800.0, sulfate=400.0),
    "the ANC limit lies above what the lake had without acid deposition: the load is negative":
        FULL | ions(calcium=10.0, magnesium=6.0, sodium=24.0, sulfate=40.0),
}


@pytest.mark.parametrize("words", NOTES)
def test_notes_on_a_critical_load(words):
    """Each by itself; nothing where there is no load."""
    row = NOTES[words]
    found = results(row, without(row, "runoff_m_yr"))
    assert list(found["critical_load_notes"]) == [words, ""]


def test_a_ph_after_bubbling_is_never_that_of_the_lake():
    """Neither alone nor beside a column of its own; ANC and carbon tell the pH of the lake then."""
    bubbled = FULL | {"ph": 7.2, "ph_kind": "air_equilibrated"}
    found = results(bubbled, bubbled | {"ph_air_equilibrated": 7.2})
    assert_allclose(found["ph_at_air_measured"], 7.2)
    assert (found["ph"] < 6.5).all()


@pytest.mark.parametrize(("above", "words"), [(-20.0, "no"), (0.0, "only with slow nitrogen uptake"), (20.0, "yes")])
def test_simple_lake_form(above, words):
    """(1 - rho_S) S + (1 - rho_N) max(N - sink, 0) against the load; rho = s / (s + Q/r).

    s of sulfur 0.5, of nitrogen 5 to 6.5 m/yr (recalled); r is 0.1, Q 0.6 m/yr, nitrogen 35 less a sink of 10
    meq/m2/yr. Sulfur is set so that it lies `above` the load with the mean of the two nitrogen velocities.
    """
    row = without(FULL, "chloride_deposition_eq_m2_yr")
    load = result(row)["critical_load_meq_m2_yr"]
    of_sulfur, *of_nitrogen = (s / (s + 0.6 / 0.1) for s in (0.5, 5.0, 6.5))
    nitrogen = [(1.0 - rho) * 25.0 for rho in of_nitrogen]
    sulfur = (load + above - 0.5 * sum(nitrogen)) / (1.0 - of_sulfur)
    excess = [(1.0 - of_sulfur) * sulfur + n - load for n in nitrogen]
    found = result(row | {"sulfur_deposition_eq_m2_yr": 1e-3 * sulfur})
    assert [v > 0.0 for v in excess] == {"no": [False, False], "yes": [True, True]}.get(words, [True, False])
    assert found["simple_lake_exceeded"] == words
    assert_allclose(found["simple_lake_sulfur_cut_meq_m2_yr"], max(excess[0], 0.0) / (1.0 - of_sulfur), rtol=1e-6,
                    atol=1e-9)


def test_over_liming_is_told():
    """Hydrated lime takes a clear lake past pH 9 in the first days, limestone to 100 µeq/L does not; by hand."""
    row = without(FULL, "doc_mg_l", "aluminum_mol_l") | {"ionic_strength_mol_l": STRENGTH}
    mild, much = result(row), result(row, lime="hydrated lime", lime_anc_ueq_l=150.0)
    assert mild["lime_warning"] == ""
    assert much["lime_ph_closed"] > 9.0
    assert_allclose(much["lime_ph_closed"], HAND.ph(HAND.alkalinity(6.5, 80e-6) + 110e-6, 80e-6), rtol=0, atol=0.02)
    assert much["lime_warning"].startswith("pH above 9 in the first days: hydrated lime")
    assert "dose would over-lime" in much["warnings"].split("; ")


def test_ions_below_zero_are_named():
    """Chloride of road salt: 0.859 and 0.196 of it are more than the sodium and magnesium there are."""
    found = results(FULL, FULL | ions(chloride=200.0))
    assert found.loc["s0", "sea_salt_negative"] == ""
    assert set(found.loc["s1", "sea_salt_negative"].split("; ")) == {"sodium", "magnesium"}


def test_readings_are_repeated_as_they_were():
    """Temperature, carbon, aluminum, conductivity and a bubbled pH in their units."""
    row = result(FULL | {"ph_air_equilibrated": 6.7, "equilibration_co2_ppm": 300.0})
    expected = {"temperature_c": 10.0, "doc_mg_l": 3.0, "aluminum_umol_l": 1.0, "conductivity_us_cm": 22.0,
                "ph_at_air_measured": 6.7,
                "ph": 6.5}
    assert_allclose([row[name] for name in expected], list(expected.values()), rtol=1e-12)


def test_made_and_unmet_count_the_checks():
    """Of three lakes one has no conductivity and one breaks it."""
    found = assessed(FULL, without(FULL, "conductivity_us_cm"), FULL | {"conductivity_us_cm": 60.0})
    assert (found.made["conductivity"], found.unmet["conductivity"]) == (2, 1)
    assert (found.made["temperature"], found.unmet["temperature"]) == (3, 0)


def test_one_lake_at_each_end_of_the_world():
    """Soda lake, mine lake, sea water and rain: no number is infinite, no row disturbs another."""
    rows = [FULL | {"anc_eq_l": 0.5, "ph": 10.0, "dic_mol_l": 0.4}, FULL | {"anc_eq_l": -5e-3, "ph": 2.4},
            FULL | {"salinity": 35.0, "ph": 8.1},
            WATER | LAND | ions(calcium=1.0, magnesium=0.5, sodium=2.0, potassium=0.1, sulfate=4.0, nitrate=3.0,
                                chloride=2.0), FULL]
    found = results(*rows, draws=100)
    numbers = found.select_dtypes("number").to_numpy()
    assert not np.isinf(numbers).any()
    alone = result(FULL, draws=100)
    for name in alone.index.drop("row"):
        assert_array_equal(found.loc["s4", name], alone[name], err_msg=name)
