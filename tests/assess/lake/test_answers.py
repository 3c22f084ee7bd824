"""Numbers of each lake by closed forms written here: which ANC counts, acid of the whole lake, episode, lime, gas."""

import numpy as np
import pytest
from assessed_lakes import FALL, FULL, HAWK, LAND, WATER, assessed, gran_leaves, options_of, result, results, without
from carbonate_by_hand import BareWater
from critical_lakes import bracketed_original
from made_lakes import HAWK_POND, ions, lakes_of
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.answers import ANC_KINDS, answers, plan_of, with_carbon
from aquabuf.assess.lake.beside import closed_lake
from aquabuf.assess.lake.budget import NEEDED, anc_kinds
from aquabuf.assess.lake.options import rules_of

STRENGTH = 3e-4
HAND = BareWater(10.0, STRENGTH)
CLEAR = without(FULL, "doc_mg_l", "aluminum_mol_l") | {"ionic_strength_mol_l": STRENGTH}
AIR_PPM = 420.0
AIR_CO2 = AIR_PPM * 1e-6 * (1.0 - 1.2281 / 101.325) * HAND.k0  # vapor of the printed steam tables


def answered(*rows, method="gran", **options):
    """Answers and plan of lakes; `method` as of the column of ANC, one word or one for each."""
    chosen = options_of(**options)
    rules = rules_of(chosen)
    lakes = lakes_of(*rows, model=chosen.organic)
    kinds = anc_kinds(np.broadcast_to(np.array(method, dtype=object), (len(rows),)))
    plan = plan_of(lakes, kinds, chosen)
    return answers(lakes, plan, rules, chosen), plan, lakes


# ------------------------------------------------------------------ which ANC counts


@pytest.mark.parametrize(("row", "method", "kind"), [
    ({"anc_eq_l": 4e-5, "alkalinity_eq_l": 3e-5}, "gran", "Gran ANC"),
    ({"alkalinity_eq_l": 3e-5}, "gran", "alkalinity"),
    ({"anc_eq_l": 4e-5}, "end_point", "Gran ANC of the ions"),
    ({"anc_eq_l": 4e-5}, "charge_balance", "Gran ANC of the ions"), ({}, "", "Gran ANC of the ions"),
    ({"anc_eq_l": 4e-5, "alkalinity_eq_l": 3e-5}, "end_point", "alkalinity"),
    ({"alkalinity_eq_l": 3e-5}, "end_point", "Gran ANC of the ions"), ({"doc_mg_l": np.nan}, "", "charge balance"),
])
def test_which_anc_counts(row, method, kind):
    """Titrated by Gran before alkalinity before the ions; a fixed end point is none of them."""
    found, plan, _ = answered(without(WATER, "anc_eq_l", "anc_method") | row, method=method)
    assert ANC_KINDS[plan.used[0]] == kind
    expected = {"Gran ANC": 40.0, "alkalinity": 30.0, "charge balance": 62.0,  # of the ions with ammonium
                "Gran ANC of the ions": 62.0 - 1e6 * gran_leaves(3.0, 1e-6)}[kind]
    assert_allclose(found.columns["anc_used_ueq_l"], expected, rtol=1e-6)


def test_a_plan_of_some_lakes():
    """Rows of the plan are those of the lakes."""
    rows = [WATER, without(WATER, "anc_eq_l"), WATER | {"anc_method": "x"}]
    _, plan, _ = answered(*(without(r, "anc_method") for r in rows), method=["gran", "gran", "end_point"])
    part = plan.take(np.array([2, 0]))
    assert_array_equal(part.used, [2, 0])
    assert_array_equal(part.kinds.is_end_point[:, 0], [True, False])
    assert_array_equal(part.sources[0], plan.sources[0][[2, 0]])


@pytest.mark.parametrize("titrated", [{"anc_eq_l": 5e-5}, {"anc_eq_l": 5e-5, "filtered": "no"},
                                      {"alkalinity_eq_l": 5e-5, "filtered": "no"}])
def test_a_fixed_end_point_never_becomes_gran_anc_nor_a_class(titrated):
    """It keeps a column of its own; without ions there is no class, with them the class is theirs."""
    row = result(titrated | {"anc_method": "end_point", "temperature_c": 10.0, "ph": 6.0} | LAND | FALL)
    assert row["anc_end_point_ueq_l"] == pytest.approx(50.0)
    assert (row["class"], row["anc_used_from"], row["status"]) == ("", "", "partial")
    for name in ("anc_gran_ueq_l", "alkalinity_ueq_l", "anc_used_ueq_l", "acid_to_anc_limit_ueq_l", "anc_limit_ueq_l",
                 "episode_anc_ueq_l", "lime_dose_ueq_l", "pco2_uatm", "anc_gap_ueq_l"):
        assert np.isnan(row[name]), name
    row = result(without(WATER, "anc_eq_l") | titrated | {"anc_method": "end_point"})
    assert (row["class"], row["class_on"]) == ("prone to turn acid", "Gran ANC of the ions, standing in for Gran ANC")
    assert row["anc_used_ueq_l"] == pytest.approx(62.0 - 1e6 * gran_leaves(3.0, 1e-6), rel=1e-6)
    row = result(without(WATER, "anc_eq_l", "doc_mg_l") | titrated | {"anc_method": "end_point"})
    assert (row["class"], row["class_on"]) == ("sensitive", "charge balance, standing in for Gran ANC")


@pytest.mark.parametrize("row", [
    {"anc_eq_l": 5e-5, "filtered": "yes"}, {"alkalinity_eq_l": 5e-5, "filtered": "yes"}, {"alkalinity_eq_l": 5e-5},
])
def test_a_fixed_end_point_of_a_filtered_sample_is_no_class_either(row):
    """The bias of about 32 µeq/L in dilute water does not go away with a filter or in another column."""
    found = result(row | {"anc_method": "end_point", "temperature_c": 10.0, "ph": 6.0})
    assert found["class"] == ""
    assert np.isnan(found["anc_used_ueq_l"])


def test_a_charge_balance_of_a_filtered_sample_is_no_titration():
    """Ions are measured in filtered samples as a rule."""
    found = result({"anc_eq_l": 5e-5, "anc_method": "charge_balance", "filtered": "yes", "temperature_c": 10.0,
                    "ph": 6.0})
    assert found["anc_charge_ueq_l"] == pytest.approx(50.0)
    assert np.isnan(found["alkalinity_ueq_l"])


@pytest.mark.parametrize("ion", NEEDED)
def test_the_charge_balance_never_fills_in(ion):
    """Without one of its ions there is none, nor a class on it."""
    row = result(without(WATER, "anc_eq_l", f"{ion}_mol_l"))
    assert np.isnan(row["anc_charge_ueq_l"])
    assert (row["class"], row["missing_ions"]) == ("", ion)


def test_forms_with_and_without_ammonium():
    """62 with its 2 µeq/L, 60 without; class, episode and dose follow the form in use."""
    bare = without(FULL, "anc_eq_l", "doc_mg_l")
    with_it, without_it = (result(bare, ammonium=on) for on in (True, False))
    assert [row["anc_used_ueq_l"] for row in (with_it, without_it)] == pytest.approx([62.0, 60.0])
    assert [row["anc_charge_bare_ueq_l"] for row in (with_it, without_it)] == pytest.approx([60.0, 60.0])
    assert [row["lime_dose_ueq_l"] for row in (with_it, without_it)] == pytest.approx([38.0, 40.0])


def test_each_anc_in_its_column():
    """Hawk Pond as the agency prints it, with a third of 10.2 µeq/mg of acid sites taken off for 2 mg/L of carbon."""
    row = result(HAWK | {"doc_mg_l": 2.0, "alkalinity_eq_l": -30e-6})
    expected = {"anc_gran": -21.7, "alkalinity": -30.0, "anc_charge": -45.720, "anc_charge_bare": -50.876,
                "base_cations": 99.396,
                "anc_organic_corrected": -45.720 - 6.8, "anc_gap": -24.020,
                "base_cation_surplus": -50.876 - (0.071 * 2000 / 12.011 - 2.1),
                **{ion: v for ion, v in HAWK_POND.items() if ion != "fluoride"}}
    for name, value in expected.items():
        assert_allclose(row[f"{name}_ueq_l"], value, rtol=0, atol=0.01, err_msg=name)


# ------------------------------------------------------------------ acid of the whole lake


def test_acid_of_the_whole_lake():
    """40 less 20 µeq/L in 9.6e5 m3: 19.2 keq or 19.2 x 98.07/2 kg of H2SO4; years by 62.94 meq/m2/yr."""
    row = result(FULL)
    assert_allclose(row["acid_to_anc_limit_ueq_l"], 20.0, rtol=1e-9)
    assert_allclose(row["acid_to_anc_limit_keq"], 19.2, rtol=1e-9)
    assert_allclose(row["acid_to_anc_limit_h2so4_kg"], 19.2 * 98.07 / 2.0, rtol=1e-4)
    net = 0.040 - 0.103 * 0.020 + 0.020 + 0.015 - 0.010
    assert_allclose(row["net_acid_deposition_meq_m2_yr"], 1e3 * net, rtol=1e-9)
    assert_allclose(row["years_to_anc_limit"], 19.2e3 / (net * 2e6), rtol=1e-9)
    assert_allclose(row["years_to_anc_limit_surface"], 19.2e3 / (net * 2e5), rtol=1e-9)
    assert_allclose(row["acid_to_ph_6_0_open_keq"], row["acid_to_ph_6_0_open_ueq_l"] * 1e-6 * 9.6e5, rtol=1e-9)


@pytest.mark.parametrize(("anc", "limit"), [(40.0, "0"), (40.0, "39"), (-10.0, "20"), (40.0, "-50")])
def test_distance_to_any_limit(anc, limit):
    """Signed: negative once the limit is passed, and then no years are left."""
    row = result(FULL | {"anc_eq_l": anc * 1e-6}, anc_limit=limit)
    assert_allclose([row["anc_limit_ueq_l"], row["acid_to_anc_limit_ueq_l"]], [float(limit), anc - float(limit)],
                    rtol=1e-9)
    assert (row["years_to_anc_limit"] == 0.0) == (anc < float(limit))


def test_limit_that_varies_with_the_load():
    """k Q BC0 / (1 + k Q), k = 0.25 yr/m (Henriksen et al. 1995), BC0 of Hawk Pond by a bracketed root: 10.09 µeq/L."""
    row = result(HAWK, anc_limit="variable", critical_load="original")
    acid = 131.629 + 9.775 - (15.0 + 0.16 * 90.472)
    bc = bracketed_original(90.472, acid, 400.0)
    part = 0.25 * 0.762
    assert_allclose(row["anc_limit_ueq_l"], part * bc / (1.0 + part), rtol=0, atol=0.01)
    assert_allclose(row["anc_limit_ueq_l"], 10.09, rtol=0, atol=0.01)
    assert_allclose(row["critical_load_meq_m2_yr"], 40.35, rtol=0, atol=0.02)


def test_critical_load_of_hawk_pond():
    """Concentration form at today's base cations with 15 + 0.16 BC*: 24.03, and 27.14 meq/m2/yr above it."""
    row = result(HAWK)
    expected = {"base_cations_star_ueq_l": 90.472, "sulfate_star_ueq_l": 131.629, "f_factor": 0.34785,
                "base_cations_original_ueq_l": 51.54, "critical_load_meq_m2_yr": 24.03, "exceedance_meq_m2_yr": 27.14}
    for name, value in expected.items():
        assert_allclose(row[name], value, rtol=0, atol=0.01, err_msg=name)


def test_sulfur_keeps_its_sea_salt_where_the_water_does():
    """Net acid and exceedance take the same sulfur as the critical load."""
    row = HAWK | {"chloride_deposition_eq_m2_yr": 0.010}
    taken, kept = result(row), result(row, critical_load="no_sea_salt")
    sulfur = 1e3 * HAWK["sulfur_deposition_eq_m2_yr"]
    assert_allclose([taken["net_acid_deposition_meq_m2_yr"], kept["net_acid_deposition_meq_m2_yr"]],
                    [sulfur - 1.03, sulfur], rtol=1e-6)
    assert_allclose(taken["exceedance_meq_m2_yr"], 27.14 - 1.03, rtol=0, atol=0.02)


# ------------------------------------------------------------------ episode


def test_episode_by_deposition():
    """0.6 x 40 + 0.4 x (-0.03 eq/m2 over 1.0 m of precipitation): 12 µeq/L; limit 20 at 20/70 of event water."""
    row = result(FULL)
    assert_allclose(row["episode_anc_ueq_l"], 0.6 * 40.0 + 0.4 * -30.0, rtol=1e-9)
    assert_allclose(row["event_fraction_to_limit"], (40.0 - 20.0) / (40.0 + 30.0), rtol=1e-9)
    assert (row["event_fraction"], row["episode_class"]) == (0.4, "prone to turn acid")
    assert result(FULL, event_fraction=1.0)["episode_anc_ueq_l"] == pytest.approx(-30.0)


def test_event_water_that_never_crosses():
    """No share where even event water alone stays above; none needed where the lake is below already."""
    row = result(FULL | {"hydrogen_deposition_eq_m2_yr": 0.0}, anc_limit="-10")
    assert np.isnan(row["event_fraction_to_limit"])
    assert result(FULL | {"anc_eq_l": 10e-6})["event_fraction_to_limit"] == 0.0


def test_ph_of_an_episode():
    """Clear water: ANC of the mixture at equilibrium with air, and closed with the carbon of both."""
    row = result(CLEAR, air_co2_ppm=AIR_PPM)
    assert_allclose(row["episode_ph"], HAND.ph_at_co2(12e-6, AIR_CO2), rtol=0, atol=3e-3)
    event_ph = HAND.ph_at_co2(-30e-6, AIR_CO2)
    carbon = 0.6 * 80e-6 + 0.4 * AIR_CO2 / HAND.shares(event_ph)[0]
    closed_anc = 0.6 * HAND.alkalinity(6.5, 80e-6) + 0.4 * -30e-6
    assert_allclose(row["episode_ph_closed"], HAND.ph(closed_anc, carbon), rtol=0, atol=3e-3)


def test_event_water_of_a_file_in_the_definition_of_the_lake(tmp_path):
    """A Gran ANC of the event mixes with a Gran ANC of the lake as it stands, whatever organic acids either has.

    The largest share of the file is the one of the results.
    """
    path = tmp_path / "melt.toml"
    path.write_text('[event]\nname = "melt"\nfraction = [0.25, 0.5]\n[water]\ntemperature_c = 1.0\n'
                    'anc_method = "gran"\n'
                    '"anc (µeq/L)" = -16\n"doc (mg/L)" = 9\n"aluminum (µmol/L)" = 4\n', encoding="utf-8")
    row = results(WATER, event=path).iloc[0]
    assert_allclose(row["episode_anc_ueq_l"], 0.5 * 40.0 + 0.5 * -16.0, rtol=1e-9)
    assert row["event_fraction"] == 0.5
    assert_allclose(row["event_fraction_to_limit"], 20.0 / 56.0, rtol=1e-9)


def test_class_after_an_event_by_the_definition_of_its_scheme(tmp_path):
    """Charge balance of the lake 62, of the event -30 by Gran: above 20 with what Gran leaves out.

    9 mg/L of carbon hold 55 µeq/L more by charge balance (6.17 per mg, see the parts of an episode).
    """
    path = tmp_path / "melt.toml"
    path.write_text('[event]\nname = "melt"\nfraction = 0.5\n[water]\ntemperature_c = 1.0\nanc_method = "gran"\n'
                    '"anc (µeq/L)" = -30\n"doc (mg/L)" = 9\n', encoding="utf-8")
    row = results(WATER, event=path, schemes=("norway_20",)).iloc[0]
    assert 0.5 * 62.0 - 0.5 * 30.0 < 20.0 < 0.5 * 62.0 + 0.5 * (-30.0 + 55.0)
    assert (row["class_on"], row["episode_class"]) == ("charge balance", "at the limit or above")


def test_waters_of_an_episode():
    """The closed lake has the ANC of its pH and carbon; event water gets the carbon of air unless it has its own."""
    found, _, lakes = answered(CLEAR, air_co2_ppm=AIR_PPM)
    assert_allclose(closed_lake(lakes, found, {"pco2_uatm": np.array([500.0])})["anc_eq_l"],
                    HAND.alkalinity(6.5, 80e-6), rtol=2e-3)
    assert_allclose(found.episode.lake["anc_eq_l"], 40e-6, rtol=1e-12)
    event = with_carbon(lakes, found.episode.event)
    co2 = 400e-6 * (1.0 - 1.2281 / 101.325) * HAND.k0  # the air of `lakes_of`
    assert_allclose(event["dic_mol_l"], co2 / HAND.shares(HAND.ph_at_co2(-30e-6, co2))[0], rtol=2e-3)
    assert with_carbon(lakes, event) is event


# ------------------------------------------------------------------ lime


def test_lime_to_an_anc():
    """100 less 10 µeq/L as CaCO3 (50.04 g/eq), 70 % dissolved (60 to 80); 9.6e5 m3; 1.28e6 m3/yr run through."""
    row = result(FULL | {"anc_eq_l": 10e-6})
    grams = 90e-6 * 50.04e3 / 0.7
    assert_allclose(row["lime_dose_ueq_l"], 90.0, rtol=1e-9)
    assert_allclose(row["lime_g_m3"], grams, rtol=1e-4)
    assert_allclose([row["lime_t"], row["lime_least_t"], row["lime_most_t"]],
                    np.array([1.0, 7 / 8, 7 / 6]) * grams * 9.6e5 * 1e-6, rtol=1e-4)
    assert_allclose(row["lime_stream_t_yr"], grams * 1.28e6 * 1e-6, rtol=1e-4)
    assert_allclose(row["reacidify_yr"], 0.8 * np.log(90.0 / 10.0), rtol=1e-9)  # (100 - 10) / (20 - 10)


def test_no_lime_where_none_is_needed():
    """At the target nothing is spread, so that nothing lasts; an inflow above the limit never brings it back."""
    row = result(FULL | {"anc_eq_l": 150e-6})
    assert row[["lime_dose_ueq_l", "lime_g_m3", "lime_t", "lime_stream_t_yr"]].tolist() == [0.0] * 4
    assert np.isnan(row[["reacidify_yr", "lime_ph_closed", "lime_ph_at_air"]].astype(float)).all()
    assert np.isnan(result(FULL)["reacidify_yr"])


def test_lime_to_a_ph():
    """Clear water: the ANC that stands at pH 6.8 with the CO2 of air, less what is there; printed constants."""
    row = result(CLEAR, lime_ph=6.8, air_co2_ppm=AIR_PPM)
    assert_allclose(row["lime_dose_ueq_l"], 1e6 * HAND.alkalinity_at_co2(6.8, AIR_CO2) - 40.0, rtol=0, atol=0.3)
    assert_allclose(row["lime_ph_at_air"], 6.8, rtol=0, atol=1e-6)


def test_ph_after_liming_with_the_carbon_kept_in():
    """Limestone brings half a mole of carbon with each equivalent; the closed lake starts from its pH and carbon."""
    row = result(CLEAR | {"anc_eq_l": 10e-6}, air_co2_ppm=AIR_PPM)
    closed = HAND.ph(HAND.alkalinity(6.5, 80e-6) + 90e-6, 80e-6 + 45e-6)
    assert_allclose(row["lime_ph_closed"], closed, rtol=0, atol=5e-3)
    assert_allclose(row["lime_ph_at_air"], HAND.ph_at_co2(100e-6, AIR_CO2), rtol=0, atol=3e-3)


def test_first_days_of_a_lake_whose_carbon_cannot_be_told():
    """Hawk Pond, pH 4.79 without bicarbonate: it starts from the CO2 of air at that pH; printed constants."""
    water = BareWater(10.0, 2.4e-4)  # half of charge squared times concentration over its ions
    row = result(HAWK | {"ph": 4.79}, air_co2_ppm=AIR_PPM)
    carbon = AIR_PPM * 1e-6 * (1.0 - 1.2281 / 101.325) * water.k0 / water.shares(4.79)[0]
    dose = 121.7e-6
    by_hand = water.ph(water.alkalinity(4.79, carbon) + dose, carbon + dose / 2.0)
    assert_allclose(row["lime_ph_closed"], by_hand, rtol=0, atol=0.02)


def test_first_days_of_a_lake_whose_pressure_is_not_stated():
    """Acid clear water of unknown organic carbon: its own is not believed, the CO2 of air is taken."""
    acid = without(CLEAR, "dic_mol_l") | {"ph": 5.3, "anc_eq_l": 60e-6}
    row = result(acid, air_co2_ppm=AIR_PPM)
    assert row["pco2_from"].startswith("not stated")
    assert row["dic_umol_l"] > 500.0  # pH 5.3 with 60 µeq/L of bicarbonate
    carbon = AIR_CO2 / HAND.shares(5.3)[0]
    by_hand = HAND.ph(HAND.alkalinity(5.3, carbon) + 40e-6, carbon + 20e-6)
    assert_allclose(row["lime_ph_closed"], by_hand, rtol=0, atol=0.02)


# ------------------------------------------------------------------ water and gas


def test_ph_buffering_and_tolerance_of_clear_water():
    """Closed from pH 6.5 and 80 µmol/L of carbon, open from a Gran ANC of 40 µeq/L; Van Slyke's sums."""
    row = result(CLEAR, air_co2_ppm=AIR_PPM, thresholds=(5.25,))
    start = HAND.alkalinity(6.5, 80e-6)
    at_air = HAND.ph_at_co2(40e-6, AIR_CO2)
    assert_allclose([row["ph"], row["ph_at_air"]], [6.5, at_air], rtol=0, atol=3e-3)
    assert_allclose(row["buffer_closed_ueq_l_ph"], 1e6 * HAND.buffer(6.5, 80e-6), rtol=5e-3)
    assert_allclose(row["buffer_open_ueq_l_ph"], 1e6 * HAND.buffer(at_air, AIR_CO2 / HAND.shares(at_air)[0], "open"),
                    rtol=1e-2)
    for ph in (6.0, 5.5, 5.0, 5.25):
        word = f"{ph:g}".replace(".", "_") if ph != int(ph) else f"{ph:.0f}_0"
        assert_allclose(row[f"acid_to_ph_{word}_ueq_l"], 1e6 * (start - HAND.alkalinity(ph, 80e-6)), rtol=0, atol=0.1)
        assert_allclose(row[f"acid_to_ph_{word}_open_ueq_l"], 40.0 - 1e6 * HAND.alkalinity_at_co2(ph, AIR_CO2), rtol=0,
                        atol=0.1)


def test_pressure_and_flux():
    """Cole & Caraco 1998 at 3 m/s: 36.68 mmol/m2/d from 1500 into air of 420 µatm at 10 °C (check value)."""
    ppm = 420.0 / (1.0 - 1.2281 / 101.325)
    row = result(without(CLEAR, "dic_mol_l") | {"pco2_atm": 1500e-6}, air_co2_ppm=ppm)
    assert_allclose(row["pco2_uatm"], 1500.0, rtol=2e-3)
    assert_allclose(row["pco2_air_ratio"], 1500.0 / 420.0, rtol=2e-3)
    assert_allclose(row["co2_flux_mmol_m2_d"], 36.68, rtol=5e-3)
    assert_allclose(row["gas_transfer_m_d"], 0.24 * 2.637, rtol=2e-3)  # k of 2.637 cm/h


def test_pressure_of_carbon_and_ph():
    """CO2 of 80 µmol/L at pH 6.5 over Henry's constant, whatever the ANC says."""
    for anc in (40e-6, 45e-6):
        row = result(CLEAR | {"anc_eq_l": anc})
        assert_allclose(row["pco2_uatm"], 1e6 * 80e-6 * HAND.shares(6.5)[0] / HAND.k0, rtol=5e-3)


@pytest.mark.parametrize("shape", [1, 3])
def test_answers_keep_the_shape_of_their_lakes(shape):
    """One column per answer, each (lakes, 1)."""
    found, _, _ = answered(*([without(FULL, "anc_method")] * shape))
    for name, column in found.columns.items():
        assert np.broadcast_shapes(column.shape, (shape, 1)) == (shape, 1), name
    assert found.anc_used.shape == (shape, 1)


def test_all_columns_with_an_interval_are_answers():
    """What is drawn again must be worked out by the same function: an acid lake has them all."""
    found = assessed(FULL | ions(sodium=10.0) | {"anc_eq_l": -30e-6, "alkalinity_eq_l": -30e-6}, draws=100)
    ends = [name.removesuffix("_low") for name in found.results.columns if name.endswith("_low")
            and name.removesuffix("_low") in
            found.results.columns]
    assert len(ends) > 30
    assert set(ends) <= set(found.answers.columns)
