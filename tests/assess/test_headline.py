"""Figures of results.csv against a sodium bicarbonate water worked out by hand from printed constants."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose
from sample_tables import assessed, results

from aquabuf import Water
from aquabuf.assess.options import ACID_THRESHOLDS, BASE_THRESHOLDS, Options
from aquabuf.assess.sample.columns import result_columns
from aquabuf.assess.sample.headline import ccpp_in_words, threshold_column

PH, ALK = 7.5, 1e-3
WATER = {"sample_id": "w", "ph": PH, "alkalinity_eq_l": ALK, "temperature_c": 25.0}
HAND = BareWater(25.0, ALK)  # sodium bicarbonate: ionic strength equals alkalinity
DIC = HAND.dic(PH, ALK)
AIR = 425e-6 * (1.0 - 0.031256)  # atm; 23.756 mmHg of water vapor at 25 °C, CRC Handbook
PRINTED = 0.004  # relative: three printed decimals of log K leave 0.001 in each
IN_PH = 0.002


@pytest.fixture(scope="module")
def row():
    """The one row of results."""
    return results(WATER).loc["w"]


@pytest.mark.parametrize(("column", "by_hand"), [
    ("dic_mmol_l", DIC * 1e3),
    ("co2_mmol_l", HAND.shares(PH)[0] * DIC * 1e3),
    ("bicarbonate_mmol_l", HAND.shares(PH)[1] * DIC * 1e3),
    ("carbonate_mmol_l", HAND.shares(PH)[2] * DIC * 1e3),
    ("pco2_uatm", HAND.shares(PH)[0] * DIC / HAND.k0 * 1e6),
    ("pco2_air_ratio", HAND.shares(PH)[0] * DIC / HAND.k0 / AIR),
    ("buffer_closed_meq_l_ph", HAND.buffer(PH, DIC) * 1e3),
    ("buffer_open_meq_l_ph", HAND.buffer(PH, DIC, "open") * 1e3),
    ("carrier_base_acid_ratio", HAND.k1 / 10.0**-PH),
    ("ph_drop_test_acid", PH - HAND.ph(ALK - 5e-5, DIC)),
    ("carrier_acid_left_meq_l", 1e3 * (ALK - HAND.alkalinity(-np.log10(HAND.k1) - 1.0, DIC))),
    ("carrier_base_left_meq_l", 1e3 * (HAND.alkalinity(-np.log10(HAND.k1) + 1.0, DIC) - ALK)),
    *((threshold_column("acid", ph, "closed"), 1e3 * (ALK - HAND.alkalinity(ph, DIC))) for ph in ACID_THRESHOLDS),
    *((threshold_column("acid", ph, "open"), 1e3 * (ALK - HAND.alkalinity_at_co2(ph, HAND.k0 * AIR))) for ph in ACID_THRESHOLDS),
    *((threshold_column("base", ph, "closed"), 1e3 * (HAND.alkalinity(ph, DIC) - ALK)) for ph in BASE_THRESHOLDS),
    *((threshold_column("base", ph, "open"), 1e3 * (HAND.alkalinity_at_co2(ph, HAND.k0 * AIR) - ALK)) for ph in BASE_THRESHOLDS),
])
def test_figure_by_hand(row, column, by_hand):
    """Each figure within what the printed digits of the constants leave; small differences on the scale of alkalinity."""
    assert_allclose(row[column], by_hand, rtol=PRINTED, atol=0.002)


def test_ph_figures_by_hand(row):
    """pH as given, pH at equilibrium with air, and the pKa on the meter scale."""
    assert_allclose(row["ph"], PH, rtol=0, atol=1e-12)
    assert_allclose(row["ph_at_air"], HAND.ph_at_co2(ALK, HAND.k0 * AIR), rtol=0, atol=IN_PH)
    assert_allclose(row["carrier_pka"], -np.log10(HAND.k1), rtol=0, atol=IN_PH)


def test_weakest_buffering_lies_halfway_between_the_pks(row):
    """Closed buffer intensity of a carbonate water is least near (pK1 + pK2)/2 (textbook; water itself shifts it a little)."""
    halfway = -0.5 * np.log10(HAND.k1 * HAND.k2)
    assert_allclose(row["weakest_ph"], halfway, rtol=0, atol=0.06)
    assert_allclose(row["weakest_distance_ph"], row["weakest_ph"] - PH, rtol=0, atol=1e-9)
    assert_allclose(row["weakest_buffer_meq_l_ph"], 1e3 * HAND.buffer(row["weakest_ph"], DIC), rtol=PRINTED)


def test_amounts_per_kilogram(row):
    """1 mmol/L over 0.99705 kg/L (density of water at 25 °C, handbook) is 1002.96 µmol/kg."""
    assert_allclose(row["alkalinity_umol_kg"], 1e3 / 0.99705, rtol=1e-5)
    assert_allclose(row["dic_umol_kg"], row["dic_mmol_l"] * 1e3 / 0.99705, rtol=1e-5)


def test_ph_at_saturation_lies_on_the_right_side():
    """Water that deposits calcite loses alkalinity and pH, water that dissolves it gains both."""
    hard = WATER | {"alkalinity_eq_l": 4e-3, "calcium_mol_l": 2e-3, "ionic_strength_mol_l": 8e-3}
    table = results(hard | {"sample_id": "over", "ph": 8.2}, hard | {"sample_id": "under", "ph": 6.8})
    assert table.loc["over", "si_calcite"] > 0.0 > table.loc["under", "si_calcite"]
    assert table.loc["under", "ph_at_saturation"] > 6.8
    assert table.loc["over", "ph_at_saturation"] < 8.2


def test_alkalinity_in_both_units(row):
    """1 meq/L is 50.04 mg/L as CaCO3: half of 100.087 g/mol (IUPAC)."""
    assert_allclose([row["alkalinity_meq_l"], row["alkalinity_mg_l_caco3"]], [1.0, 50.043], rtol=2e-5)


def test_words_of_the_row(row):
    """What is not a number: regime, carrier, where things come from, no calcium and so no calcite words."""
    words = ("status", "status_reason", "pair", "regime", "carrier", "carrier_in_range", "pairs_in_range",
             "ionic_strength_from", "alkalinity_from", "ccpp_words", "warnings")
    assert [row[w] for w in words] == [
        "ok", "", "pH and alkalinity", "fresh", "CO2/HCO3-", "no", "", "alkalinity", "alkalinity", "", ""]
    assert np.isnan([row["si_calcite"], row["ccpp_mg_l"], row["ph_total"], row["draws_solved"]]).all()


def test_carrier_range_is_one_unit_of_the_pka():
    """pKa ± 1: at pK1 (meter scale) + 0.99 the pair still acts, at + 1.01 it does not."""
    pka = -np.log10(HAND.k1)
    found = results(*(WATER | {"sample_id": s, "ph": pka + d} for s, d in (("in", 0.99), ("out", 1.01))))
    assert found["carrier_in_range"].tolist() == ["yes", "no"]
    assert found["pairs_in_range"].tolist() == ["CO2/HCO3-", ""]


def test_calcite_index_and_ratio():
    """Saturation index of Ca 1 mmol/L, HCO3 2 meq/L at pH 8, 25 °C: Langelier with the pairs left out, by hand.

    log Ksp -8.4798 (Plummer & Busenberg 1982); pairs lower it, by less than 0.08 at this strength (CaHCO3+ 10^1.1057,
    CaCO3 10^3.2241, CaSO4 none).
    """
    strength = 4e-3
    hand = BareWater(25.0, strength)
    g2 = (10.0 ** (-0.5092 * (np.sqrt(strength) / (1 + np.sqrt(strength)) - 0.3 * strength))) ** 4
    carbonate = hand.shares(8.0)[2] * hand.dic(8.0, 2e-3) / hand.rho
    bare = np.log10(1e-3 / hand.rho * carbonate * g2**2) + 8.4798
    row = results(WATER | {"ph": 8.0, "alkalinity_eq_l": 2e-3, "calcium_mol_l": 1e-3, "ionic_strength_mol_l": strength}).iloc[0]
    assert bare - 0.08 < row["si_calcite"] < bare - 0.01
    assert_allclose(row["saturation_ratio_calcite"], 10.0 ** row["si_calcite"], rtol=1e-9)
    assert_allclose(row["si_calcite"] - row["si_aragonite"], 8.4798 - 8.3361, rtol=0, atol=2e-4)
    assert 0.0 < row["ccpp_mg_l"] < 100.0
    assert row["ccpp_words"] == "would deposit calcium carbonate"


def test_precipitation_potential_is_mass_of_calcium_carbonate():
    """The potential of the engine (checked there) in mg/L: 100.087 g of calcium carbonate per mole (IUPAC)."""
    water = Water.from_ph_alkalinity(ph=7.2, alkalinity_eq_l=3e-3, t_c=25.0, calcium_mol_l=1e-3, ionic_strength_mol_l=6e-3)
    row = results(WATER | {"ph": 7.2, "alkalinity_eq_l": 3e-3, "calcium_mol_l": 1e-3, "ionic_strength_mol_l": 6e-3}).iloc[0]
    assert_allclose(row["ccpp_mg_l"], 100.087e3 * water.precipitation_potential_mol_l(), rtol=2e-5)
    assert row["ccpp_words"] == "would dissolve calcium carbonate"


def test_words_for_calcium_carbonate():
    """Within 1 mg/L it is called balanced, the limit included; unknown stays empty."""
    words = ccpp_in_words(np.array([1.01, 1.0, 0.0, -1.0, -1.01, np.nan]))
    rest = "close to balance with calcite"
    assert words.tolist() == ["would deposit calcium carbonate", rest, rest, rest, "would dissolve calcium carbonate", ""]


@pytest.mark.parametrize(("kind", "ph", "exchange", "name"), [
    ("acid", 6.0, "closed", "acid_to_ph_6_0_meq_l"), ("acid", 6.0, "open", "acid_to_ph_6_0_open_meq_l"),
    ("base", 8.5, "closed", "base_to_ph_8_5_meq_l"), ("acid", 5.25, "closed", "acid_to_ph_5_25_meq_l"),
    ("base", 10.0, "open", "base_to_ph_10_0_open_meq_l")])
def test_threshold_columns_are_named_by_ph(kind, ph, exchange, name):
    """Names that a reader can guess."""
    assert threshold_column(kind, ph, exchange) == name


AS_GIVEN = ("site", "region", "date", "time", "depth_m", "water_kind")  # come only if the readings had them
CONTRACT = ["sample_id", "status", "regime", "ph", "temperature_c", "salinity", "ionic_strength_mol_l", "alkalinity_meq_l", "alkalinity_mg_l_caco3", "dic_mmol_l", "co2_mmol_l", "bicarbonate_mmol_l", "carbonate_mmol_l", "pco2_uatm", "pco2_air_ratio", "ph_at_air", "buffer_closed_meq_l_ph", "buffer_open_meq_l_ph", "carrier", "carrier_base_acid_ratio", "acid_to_ph_6_0_meq_l", "acid_to_ph_6_0_open_meq_l", "acid_to_ph_6_5_meq_l", "acid_to_ph_5_5_meq_l", "acid_to_ph_5_0_meq_l", "acid_to_ph_4_5_meq_l", "base_to_ph_8_5_meq_l", "base_to_ph_9_0_meq_l", "base_to_ph_9_5_meq_l", "si_calcite", "ccpp_mg_l", "warnings", "ph_total"]
WITH_INTERVAL = ["ph", "alkalinity_meq_l", "dic_mmol_l", "pco2_uatm", "ph_at_air", "buffer_closed_meq_l_ph", "buffer_open_meq_l_ph", "acid_to_ph_6_0_meq_l", "acid_to_ph_6_0_open_meq_l", "base_to_ph_8_5_meq_l", "si_calcite", "ccpp_mg_l"]


def test_contract_columns():
    """The columns that users' own scripts rely on, and their interval ends; dropping one is a decision."""
    there = set(assessed(WATER, draws=100).results.columns)
    assert set(CONTRACT) - there == set()
    assert {f"{c}_{end}" for c in WITH_INTERVAL for end in ("low", "high")} - there == set()


def test_columns_come_in_the_order_of_the_table():
    """Result columns follow the shipped table; each interval stands behind its figure; without draws there is none."""
    order = [c.name for c in result_columns(Options()) if c.name not in AS_GIVEN]
    assert assessed(WATER).results.columns.tolist() == order
    with_ends = assessed(WATER, draws=100).results.columns.tolist()
    assert [c for c in with_ends if not c.endswith(("_low", "_high"))] == order
    at = with_ends.index("dic_mmol_l")
    assert with_ends[at:at + 3] == ["dic_mmol_l", "dic_mmol_l_low", "dic_mmol_l_high"]


def test_site_and_kind_are_repeated_only_where_given():
    """What only tells samples apart comes back as it was."""
    given = {"site": "Upper weir", "region": "north", "date": "2.5.2024", "time": "06:00", "depth_m": 1.5, "water_kind": "stream"}
    table = assessed(WATER | given).results
    assert table.loc[0, list(given)].tolist() == list(given.values())


def test_thresholds_of_the_users_own():
    """One column per pH asked for, and always the tolerance to pH 6."""
    columns = assessed(WATER, acid_thresholds=(5.3,), base_thresholds=(10.0,)).results.columns
    acid = [c for c in columns if c.startswith(("acid_to", "base_to")) and "open" not in c]
    assert acid == ["acid_to_ph_6_0_meq_l", "acid_to_ph_5_3_meq_l", "base_to_ph_10_0_meq_l"]
    assert_allclose(results(WATER, acid_thresholds=(5.3,)).iloc[0]["acid_to_ph_5_3_meq_l"],
                    1e3 * (ALK - HAND.alkalinity(5.3, DIC)), rtol=PRINTED)


def test_tolerance_is_signed():
    """A water below the threshold needs base: the figure is negative, by the same closed form."""
    dic = HAND.dic(5.5, ALK)
    row = results(WATER | {"ph": 5.5}).iloc[0]
    assert_allclose(row["acid_to_ph_6_0_meq_l"], 1e3 * (ALK - HAND.alkalinity(6.0, dic)), rtol=PRINTED)
    assert row["acid_to_ph_6_0_meq_l"] < 0.0 < row["acid_to_ph_5_0_meq_l"]


@pytest.mark.parametrize(("salinity", "regime"), [
    (0.0, "fresh"), (0.999, "fresh"), (1.0, "brackish"), (29.9, "brackish"), (30.0, "marine"), (35.0, "marine")])
def test_regime_by_salinity(salinity, regime):
    """Fresh below 1, marine from 30 on (Venice system 1958, recalled); total-scale pH only from 1 on."""
    row = results(WATER | {"salinity": salinity, "alkalinity_eq_l": 2e-3, "ph": 8.0}).iloc[0]
    assert row["regime"] == regime
    assert np.isfinite(row["ph_total"]) == (regime != "fresh")


def test_sea_water_total_scale_ph_is_returned():
    """A total-scale pH that was given comes back as such; at S 35 and 25 °C a standard-buffer meter reads higher.

    NBS minus total is near 0.13 to 0.14 there (Millero 1995 and Takahashi et al. 1982, recalled from memory).
    """
    row = results({"ph_total": 8.05, "alkalinity_eq_l": 2.3e-3, "temperature_c": 25.0, "salinity": 35.0}).iloc[0]
    assert_allclose(row["ph_total"], 8.05, rtol=0, atol=1e-9)
    assert_allclose(row["ph"] - row["ph_total"], 0.135, rtol=0, atol=0.03)


def test_open_water_is_at_air():
    """With exchange open the sample is described at the CO2 pressure of air, alkalinity kept."""
    row = results(WATER, exchange="open").iloc[0]
    assert_allclose([row["pco2_air_ratio"], row["alkalinity_meq_l"]], [1.0, 1.0], rtol=1e-9)
    assert_allclose(row["ph"], HAND.ph_at_co2(ALK, HAND.k0 * AIR), rtol=0, atol=IN_PH)
    assert row["ph_at_air"] == row["ph"]


def test_air_may_hold_more_carbon_dioxide():
    """Open pH falls by log10 2 where CO2 doubles and bicarbonate stays (hydroxide and carbonate shave a little)."""
    now, later = (results(WATER, exchange="open", air_co2_ppm=ppm).iloc[0]["ph"] for ppm in (425.0, 850.0))
    assert_allclose(now - later, np.log10(2.0), rtol=0, atol=0.01)


def test_marine_constants_can_be_chosen():
    """Lueker and Millero differ in pK1 at S 35, 25 °C by 5.8472 (total) against 5.8401 (seawater, 0.0108 lower): 0.004.

    Total and seawater pH differ by log10(1 + F/K_F ...) of about 0.011 there (recalled from memory).
    """
    sea = {"alkalinity_eq_l": 2.3e-3, "dic_mol_l": 2.0e-3, "temperature_c": 25.0, "salinity": 35.0}
    millero, lueker = (results(sea, carbonic=name).iloc[0]["pco2_uatm"] for name in ("millero", "lueker"))
    assert 0.002 < abs(np.log10(millero / lueker)) < 0.03


def test_alkalinity_per_kilogram_is_the_one_that_was_read():
    """Acid water whose ANC and pH disagree: all alkalinity columns follow the titration, and 0.9997 kg is a liter at 10 °C."""
    table = assessed({"ph": 4.74, "anc_eq_l": -35e-6, "temperature_c": 10.0}).results
    assert_allclose(table["alkalinity_umol_kg"], -35.0 / 0.9997, rtol=1e-3)
    assert_allclose(table["alkalinity_meq_l"], -0.035, rtol=1e-9)
