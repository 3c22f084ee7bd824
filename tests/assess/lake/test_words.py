"""Words beside the numbers: each missing reading leaves out just what needs it; what explains a gap."""

import numpy as np
import pytest
from assessed_lakes import FULL, LAND, WATER, result, results, without
from numpy.testing import assert_array_equal

from aquabuf.assess.lake.budget import NEEDED
from aquabuf.assess.lake.words import gap_words
from aquabuf.readings.schema import quantities

ROW = FULL | {"anc_eq_l": 10e-6}  # below the ANC limit, so that lime has a time to last
LOADS = {"critical_load_meq_m2_yr", "critical_load_lowest_meq_m2_yr", "critical_load_highest_meq_m2_yr",
         "exceedance_meq_m2_yr",
         "base_cations_original_ueq_l", "simple_lake_exceeded", "simple_lake_sulfur_cut_meq_m2_yr"}
SIMPLE = {"simple_lake_exceeded", "simple_lake_sulfur_cut_meq_m2_yr"}
SUMS = {"ion_balance_percent", "ion_balance_organic_percent", "conductivity_calculated_us_cm", "conductivity_percent"}
CHARGE = {"anc_charge_ueq_l", "anc_gran_of_ions_ueq_l", "anc_charge_form", "anc_charge_bare_ueq_l",
          "anc_organic_corrected_ueq_l",
          "anc_less_organic_ueq_l",
          "base_cation_surplus_ueq_l", "anc_gap_ueq_l", "anc_gap_rest_ueq_l", "anc_gap_u_ueq_l", "anc_gap_words"} | SUMS
WHOLE_LAKE = {"lake_volume_m3", "volume_from", "acid_to_anc_limit_keq", "acid_to_anc_limit_h2so4_kg",
              "acid_to_ph_6_0_open_keq",
              "lime_t", "lime_least_t", "lime_most_t"}
YEARS = {"years_to_anc_limit", "years_to_anc_limit_surface"}
PRESSURE = {"pco2_uatm", "pco2_air_ratio", "pco2_neal_uatm", "co2_flux_mmol_m2_d"}
EPISODE = {"episode_anc_ueq_l", "episode_ph", "episode_ph_closed", "episode_class", "event_fraction",
           "event_fraction_to_limit",
           "event_from"}
SOLVED = PRESSURE | {"pco2_from", "gas_transfer_m_d", "ph_at_air", "buffer_closed_ueq_l_ph", "buffer_open_ueq_l_ph",
                     "episode_ph",
                     "episode_ph_closed", "lime_ph_closed", "lime_ph_at_air", "acid_to_ph_6_0_open_keq",
                     *(f"acid_to_ph_{ph}{kind}_ueq_l" for ph in ("6_0", "5_5", "5_0") for kind in ("", "_open"))}
# Never told of a whole lake: only said where there is something to say
SPOKEN = {"warnings", "failed_checks", "class_conflicts", "left_out", "lime_warning", "class_also", "missing_ions",
          "sea_salt_negative",
          "critical_load_notes"}
CASES = [  # readings gone, answers that go with them beside the reading itself, words
    (("runoff_m_yr",), LOADS | {"f_factor", "lime_stream_t_yr"}, "critical load (give runoff)"),
    (("lake_volume_m3", "residence_time_yr"), WHOLE_LAKE | YEARS | {"reacidify_yr"},
     "the whole lake's figures (give lake_volume or mean_depth or residence_time); "
     "years (give residence_time or lake_volume); re-acidification (give residence_time or lake_volume)"),
    (("sulfur_deposition_eq_m2_yr",),
     YEARS | SIMPLE | {"exceedance_meq_m2_yr", "net_acid_deposition_meq_m2_yr", "net_acid_from"},
     "exceedance (give sulfur_deposition); years (give sulfur_deposition)"),
    (("precipitation_m_yr",), EPISODE, "episode (give precipitation)"),
    (("wind_speed_m_s",), {"gas_transfer_m_d", "co2_flux_mmol_m2_d"}, "CO2 flux (give wind_speed)"),
    (("temperature_c",), SOLVED | SUMS | {"temperature_c"},
     "closed tolerance (give temperature); pH at air (give temperature)"),
    (("doc_mg_l",),
     {"doc_mg_l", "organic_anion_ueq_l", "organic_density_ueq_mg", "anc_less_organic_ueq_l", "anc_gap_organic_ueq_l",
                     "anc_organic_corrected_ueq_l", "base_cation_surplus_ueq_l", "anc_gap_rest_ueq_l",
                     "anc_gran_of_ions_ueq_l"},
                     "organic anions (give doc)"),
    (("sodium_mol_l",), CHARGE | LOADS | {"sodium_ueq_l", "base_cations_ueq_l", "base_cations_star_ueq_l", "f_factor"},
     "charge-balance ANC (give sodium); critical load (give sodium)"),
    (("sulfate_mol_l",), CHARGE | LOADS | {"sulfate_ueq_l", "sulfate_star_ueq_l"},
     "charge-balance ANC (give sulfate); critical load (give sulfate)"),
    (("ph",), {"pco2_neal_uatm"} | SUMS, ""),  # carbon and ANC give it, which tells nothing of the ions
    (("aluminum_mol_l",), {"aluminum_umol_l"}, ""),
    (("ammonium_mol_l",), {"ammonium_ueq_l"}, ""),
    (("nitrate_deposition_eq_m2_yr",), set(), ""),  # the free acid gives the episode, the other loads the net acid
    (("nitrogen_sink_eq_m2_yr",), SIMPLE, ""),
    (("conductivity_us_cm",), {"conductivity_us_cm", "conductivity_percent"}, ""),
]


def empty(row):
    """Columns of a result without a value, those left out that speak only now and then."""
    return {name for name, v in row.items() if (v == "" if isinstance(v, str) else np.isnan(v))} - SPOKEN


@pytest.mark.parametrize(("gone", "answers", "words"), CASES, ids=lambda v: v[0] if isinstance(v, tuple) else "")
def test_a_missing_reading_leaves_out_what_needs_it(gone, answers, words):
    """These answers and no others; the column that would bring them is named."""
    found = results(ROW, without(ROW, *gone) | dict.fromkeys(gone, np.nan))
    newly = empty(found.loc["s1"]) - empty(found.loc["s0"])
    missing = {"missing_most_ueq_l", "anc_charge_bound_low_ueq_l", "anc_charge_bound_high_ueq_l"}
    assert newly - missing == answers
    assert list(found["left_out"]) == ["", words]


def test_a_whole_lake_leaves_nothing_out():
    """All that needs a reading is there; those that were never given stay out of the table or empty."""
    row = result(ROW)
    assert (row["left_out"], row["status"]) == ("", "ok")
    assert empty(row) == {"alkalinity_ueq_l", "anc_end_point_ueq_l", "missing_most_ueq_l", "anc_charge_bound_low_ueq_l",
                          "anc_charge_bound_high_ueq_l", "ph_at_air_measured", "class_probability",
                          "exceedance_probability"}


def test_everything_missing_names_every_column():
    """A lake of pH alone; each column named is one that a table of readings can have."""
    words = result({"ph": 6.0})["left_out"]
    ions = ", ".join(NEEDED)
    for part in ("class (give anc or alkalinity or all major ions)", f"charge-balance ANC (give {ions})",
                 "organic anions (give doc)",
                 "closed tolerance (give temperature, anc or alkalinity or dic)",
                 "pH at air (give temperature, anc or alkalinity or all major ions)",
                 f"critical load (give runoff, {ions})",
                 "exceedance (give sulfur_deposition)"):
        assert part in words.split("; "), part
    named = {name for part in words.split("; ") for need in part.partition("(give ")[2].rstrip(")").split(", ")
             for way in need.split(" or ") for name in way.split(" and ")} - {"all major ions"}
    bases = {q.base for q in quantities().values()}
    assert named <= bases, named - bases
    assert {"sulfur_deposition", "precipitation", "residence_time", "watershed_area", "lake_volume",
            "wind_speed"} <= named
    assert len(named) > 15


def test_partial_lakes_say_so():
    """Without temperature pH and tolerance are missing; the class is not."""
    row = result(without(ROW, "temperature_c"))
    assert (row["status"], row["class"]) == ("partial", "prone to turn acid")


NAMED = {  # readings gone (or in their place) for which an answer is left out
    "event water without ammonium and free acid": (without(ROW, "ammonium_deposition_eq_m2_yr",
                                                           "hydrogen_deposition_eq_m2_yr"),
                                                   "episode_anc_ueq_l", "episode", "ammonium_deposition"),
    "outflow without a catchment": (without(ROW, "watershed_area_m2", "residence_time_yr"), "years_to_anc_limit",
                                    "years",
                                    "watershed_area"),
    "depth without an area": (without(ROW, "lake_area_m2", "lake_volume_m3",
                                      "residence_time_yr") | {"mean_depth_m": 4.0},
                              "lake_volume_m3", "the whole lake's figures", "lake_area"),
    "time without a catchment": (without(ROW, "lake_volume_m3", "watershed_area_m2"), "lake_volume_m3",
                                 "the whole lake's figures",
                                 "watershed_area"),
    "time without runoff": (without(ROW, "lake_volume_m3", "runoff_m_yr"), "lake_volume_m3", "the whole lake's figures",
                            "runoff"),
    "volume without an outflow": (without(ROW, "watershed_area_m2", "residence_time_yr"), "reacidify_yr",
                                  "re-acidification",
                                  "residence_time"),
    "an end point alone": ({"anc_eq_l": 5e-5, "anc_method": "end_point", "temperature_c": 10.0, "ph": 6.0},
                           "anc_used_ueq_l", "class",
                           "alkalinity"),
}


@pytest.mark.parametrize("case", NAMED)
def test_whatever_is_left_out_is_told(case):
    """An answer that is empty is named, with a reading that would bring it."""
    row, column, label, reading = NAMED[case]
    found = result(row)
    assert np.isnan(found[column])
    told = [part for part in found["left_out"].split("; ") if part.startswith(f"{label} (give ")]
    assert any(reading in part for part in told), found["left_out"]


def test_event_of_a_file_needs_no_deposition(tmp_path):
    """Its water is known: nothing is said of an episode."""
    path = tmp_path / "melt.toml"
    path.write_text('[event]\nname = "melt"\nfraction = 0.3\n[water]\ntemperature_c = 1.0\nph = 5.0\n',
                    encoding="utf-8")
    found = results(WATER, without(WATER, "anc_eq_l", "sodium_mol_l"), event=path)
    assert_array_equal(np.isnan(found["episode_anc_ueq_l"]), [False, True])  # the second has no ANC to mix
    assert not found["left_out"].str.contains("episode").any()
    assert found["event_from"].iloc[0].startswith("melt: ANC from pH")


# ------------------------------------------------------------------ what the answers rest on


@pytest.mark.parametrize(("row", "words"), [
    ({}, "Gran ANC"), ({"anc_method": ""}, "Gran ANC (method unstated)"),
    ({"anc_method": "curve_fit"}, "titrated ANC (curve_fit)"),
    ({"anc_method": "inflection"}, "titrated ANC (inflection)"),
    ({"anc_eq_l": np.nan, "alkalinity_eq_l": 3e-5}, "alkalinity"),
    ({"anc_eq_l": np.nan}, "Gran ANC of the ions"), ({"anc_method": "end_point"}, "Gran ANC of the ions"),
    ({"anc_eq_l": np.nan, "doc_mg_l": np.nan}, "charge balance"),
    ({"anc_method": "end_point", "titrated_by": "gran"}, "Gran ANC"),
    ({"anc_eq_l": np.nan, "sodium_mol_l": np.nan}, ""),
])
def test_which_anc_is_used(row, words):
    """Titrated before computed from the ions; one of a fixed end point never."""
    assert result(WATER | row)["anc_used_from"] == words


@pytest.mark.parametrize(("row", "options", "words"), [
    ({}, {}, "with ammonium"), ({}, {"ammonium": False}, "without ammonium"),
    ({"ammonium_mol_l": np.nan}, {}, "without ammonium"),
    ({"sodium_mol_l": np.nan}, {}, ""), ({"sodium_mol_l": np.nan, "anc_method": "charge_balance"}, {}, "as given"),
    ({"anc_method": "charge_balance"}, {}, "with ammonium"),
])
def test_form_of_the_charge_balance(row, options, words):
    """Whether ammonium counts is always said; a sum that came from elsewhere is no sum of ours."""
    assert result(WATER | row, **options)["anc_charge_form"] == words


@pytest.mark.parametrize(("row", "words"), [
    ({}, "carbon"), ({"dic_mol_l": np.nan, "pco2_atm": 6e-4}, "CO2 pressure"),
    ({"dic_mol_l": np.nan, "anc_eq_l": 4e-4, "ph": 7.2, "doc_mg_l": 0.5}, "pH and ANC"),
])
def test_what_the_carbon_rests_on(row, words):
    """Measured carbon before CO2 before pH and ANC."""
    assert result(WATER | row)["pco2_from"] == words


def test_words_of_net_acid_and_volume():
    """As the figures were made."""
    row = result(FULL)
    assert (row["volume_from"], row["net_acid_from"]) == ("given", "sulfur + nitrate + ammonium - base cations")
    assert result(WATER | without(LAND, "lake_volume_m3"))["volume_from"] == "runoff and residence time"


# ------------------------------------------------------------------ the gap


NOT_EXPLAINED = "not explained by organic anions and aluminum: error or an ion not measured"
NO_DOC = "organic carbon not given: organic anions cannot be told from error"


@pytest.mark.parametrize(("gap", "organic", "aluminum", "other", "u", "words"), [
    (60.0, 55.0, -2.0, 0.0, 10.0, "mostly organic anions"),
    (-60.0, 2.0, -55.0, 0.0, 10.0, "mostly aluminum"),
    (60.0, 10.0, -2.0, 40.0, 10.0, "mostly fluoride or ammonium"),
    (60.0, 20.0, -2.0, 5.0, 10.0, NOT_EXPLAINED),
    (-60.0, 20.0, -2.0, 0.0, 10.0, NOT_EXPLAINED),
    (19.9, 5.0, 0.0, 0.0, 10.0, "within error"),
    (-19.9, -5.0, 0.0, 0.0, 10.0, "within error"),
    (-19.9, 5.0, 0.0, 0.0, 10.0, NOT_EXPLAINED),  # organic anions make it more than error
    (20.1, 5.0, 0.0, 0.0, 10.0, "mostly organic anions"),
    (60.0, np.nan, -2.0, 0.0, 10.0, NO_DOC),
    (10.0, np.nan, -2.0, 0.0, 10.0, "within error"),
    (np.nan, 20.0, -2.0, 0.0, np.nan, ""),
])
def test_what_explains_a_gap(gap, organic, aluminum, other, u, words):
    """Within two standard uncertainties of what is explained: of none too, or mostly by the largest part."""
    rest = gap - organic - aluminum - other
    columns = {f"anc_gap{part}_ueq_l": np.array([v, 0.0]) for part, v in (
        ("", gap), ("_organic", organic), ("_aluminum", aluminum), ("_other", other), ("_rest", rest), ("_u", u))}
    assert_array_equal(gap_words(columns)[0], words)


def test_gap_of_a_lake():
    """Charge balance 62, Gran 40 µeq/L and 3 mg/L of carbon: 22 within twice 12; of an acid titration it is not."""
    rows = results(WATER, WATER | {"anc_eq_l": -80e-6})
    assert list(rows["anc_gap_words"]) == ["within error", NOT_EXPLAINED]
