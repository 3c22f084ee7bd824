"""Tables of what may become of each lake: shares of event water, other deposition, lime; re-worked here."""

import numpy as np
import pytest
from assessed_lakes import FULL, HAWK, assessed, gran_leaves, options_of, without
from carbonate_by_hand import BareWater
from made_lakes import ions
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.episode import CHANGES, WEAK_CHANGES
from aquabuf.assess.lake.liming import DEMANDS
from aquabuf.assess.lake.tables import SHARES, deposition_table, episode_table, liming_table

HAND = BareWater(10.0, 3e-4)
CLEAR = without(FULL, "doc_mg_l", "aluminum_mol_l") | {"ionic_strength_mol_l": 3e-4}
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
    """All lakes without draws."""
    return assessed(*LAKES)


def by_lake(table, name):
    """Rows of one lake, numbered anew."""
    return table[table["sample_id"] == name].reset_index(drop=True)


# ------------------------------------------------------------------ episodes


def test_anc_of_each_share(survey):
    """(1 - f) ANC + f event: the event of the full lake is minus 0.03 eq/m2 over 1.0 m; the limit is 20 µeq/L."""
    table = episode_table(survey)
    for name, anc in (("full", 40.0), ("acid", -60.0), ("ions only", 62.0 - 1e6 * gran_leaves(3.0, 1e-6))):
        rows = by_lake(table, name)
        f = np.array(SHARES)
        assert_allclose(rows["event_fraction"], f)
        by_hand = (1.0 - f) * anc + f * -30.0
        assert_allclose(rows["anc_ueq_l"], by_hand, rtol=1e-6, atol=1e-6)
        assert list(rows["below_anc_limit"]) == ["yes" if v < 20.0 else "no" for v in by_hand]
        classes = np.array(["chronically acidic", "prone to turn acid", "sensitive"])
        assert list(rows["class"]) == list(classes[np.searchsorted([0.0, 50.0], by_hand, side="left")])
    assert set(table["sample_id"]) == {"full", "acid", "ions only", "end point"}  # the others have no event water


def test_the_share_of_the_results_is_among_them(survey):
    """0.4 of event water: ANC, pH and class as in the results."""
    rows = episode_table(survey).query("event_fraction == 0.4").set_index("sample_id")
    results = survey.results.set_index("sample_id").loc[rows.index]
    for ours, theirs in (("anc_ueq_l", "episode_anc_ueq_l"), ("ph_at_air", "episode_ph"),
                         ("ph_closed", "episode_ph_closed")):
        assert_allclose(rows[ours], results[theirs], rtol=1e-6)
    assert list(rows["class"]) == list(results["episode_class"])


@pytest.mark.parametrize("row", [CLEAR, CLEAR | ions(ammonium=12.0, sodium=50.0, chloride=35.0)])
def test_parts_add_up_to_the_change(row):
    """Clear water: what took the ANC is the change of ANC from the lake's own, at every share."""
    table = episode_table(assessed(row))
    parts = sum(table[f"change_{name}_ueq_l"] for name in CHANGES)
    assert_allclose(parts, table["anc_ueq_l"] - 40.0, rtol=0, atol=1e-9)
    assert_allclose(table[[f"change_{name}_ueq_l" for name in WEAK_CHANGES]], 0.0, atol=1e-12)


def test_parts_with_organic_acids():
    """They are those of the charge-balance ANC: Gran ANC with the organic anions that its tangent at pH 4.5 leaves out.

    Hruska et al. 2003, second set of pK (recalled), 3 mg/L of carbon, slope by differences; no aluminum.
    """
    def organic(ph):
        h = 10.0**-ph
        w = np.array([1.0, 10.0**-3.04 / h, 10.0**-7.46 / h**2, 10.0**-14.16 / h**3])
        return 3.0 * 3.4 * (w @ np.arange(4)) / w.sum()

    h, d = 10.0**-4.5, 1e-9
    left_out = organic(4.5) - h * (organic(-np.log10(h + d)) - organic(-np.log10(h - d))) / (2.0 * d)
    table = episode_table(assessed(without(FULL, "aluminum_mol_l")))
    parts = sum(table[f"change_{name}_ueq_l"] for name in CHANGES)
    assert_allclose(parts, table["event_fraction"] * (-30.0 - (40.0 + left_out)), rtol=0, atol=0.01)
    assert (table["change_organic_ueq_l"] > 0.0).all()  # fewer organic anions: more of the ANC holds pH up


def test_parts_by_hand():
    """Half of the lake gives way to rain of 40, 20, 15, 20 and 10 meq/m2/yr in 1.0 m: S, NO3, NH4, Cl, other cations.

    Sea salt of 25 µeq/L of chloride in the lake: 21.475 Na, 4.9 Mg, 0.925 Ca, 0.45 K, 2.575 SO4 (ICP Waters ratios).
    """
    row = episode_table(assessed(CLEAR)).query("event_fraction == 0.5").iloc[0]
    salt = 0.859 + 0.196 + 0.037 + 0.018
    lake = {"base_cations": 155.0 - 25.0 * salt, "ammonium": 2.0, "sulfate": 2.575 - 65.0, "nitrate": -5.0,
            "sea_salt": 25.0 * (salt - 0.103) - 25.0}
    rain = {"base_cations": 10.0, "ammonium": 15.0, "sulfate": 2.06 - 40.0, "nitrate": -20.0,
            "sea_salt": 20.0 * (salt - 0.103) - 20.0}
    for name in lake:
        assert_allclose(row[f"change_{name}_ueq_l"], 0.5 * (rain[name] - lake[name]), rtol=1e-9, err_msg=name)
    # what the ions do not tell: the lake's ANC of 40 against 62 by its ions, the rain's of -30 against its own sum
    told = sum(rain.values()), sum(lake.values())
    assert_allclose(row["change_rest_ueq_l"], 0.5 * ((-30.0 - told[0]) - (40.0 - told[1])), rtol=1e-9)


def test_ph_of_each_share():
    """Clear water by printed constants: ANC of the mixture in the air of 420 ppm."""
    table = episode_table(assessed(CLEAR, air_co2_ppm=420.0))
    co2 = 420e-6 * (1.0 - 1.2281 / 101.325) * HAND.k0
    assert_allclose(table["ph_at_air"], [HAND.ph_at_co2(v * 1e-6, co2) for v in table["anc_ueq_l"]], rtol=0, atol=5e-3)


def test_shares_of_a_file(tmp_path):
    """Those of the file, rising."""
    path = tmp_path / "melt.toml"
    path.write_text('[event]\nname = "melt"\nfraction = [0.5, 0.25]\n[water]\ntemperature_c = 1.0\nph = 5.0\n',
                    encoding="utf-8")
    table = episode_table(assessed(FULL, HAWK, event=path))
    assert list(table["event_fraction"]) == [0.25, 0.5] * 2
    assert table[[f"change_{name}_ueq_l" for name in ("sulfate",
                                                      "nitrate")]].isna().all(axis=None)  # its ions are not known


@pytest.mark.parametrize("table", [lambda a: episode_table(a).query("event_fraction == 0.1"),
                                   lambda a: deposition_table(a, options_of())])
def test_class_of_the_definition_of_the_scheme(table):
    """Gran ANC 10, charge balance 62 µeq/L: by the charge balance the lake stays far above 20."""
    found = assessed(FULL | {"anc_eq_l": 10e-6}, schemes=("norway_20",))
    assert found.results["class"].iloc[0] == "at the limit or above"
    assert table(found)["class"].iloc[0] == "at the limit or above"


# ------------------------------------------------------------------ deposition


def test_no_change_of_deposition_is_today(survey):
    """ANC, class, pH, exceedance and years of the results."""
    options = options_of(deposition_changes=(0.0, -50.0))
    table = deposition_table(survey, options)
    today = table[table["sulfur_deposition_change_percent"] == 0.0].set_index("sample_id")
    results = survey.results.set_index("sample_id").loc[today.index]
    assert len(table) == 2 * len(today)
    assert_array_equal(today["anc_change_ueq_l"], 0.0)
    for ours, theirs in (("anc_ueq_l", "anc_used_ueq_l"), ("ph_at_air", "ph_at_air"),
                         ("exceedance_meq_m2_yr", "exceedance_meq_m2_yr"),
                         ("years_to_anc_limit", "years_to_anc_limit")):
        assert_allclose(today[ours], results[theirs], rtol=1e-9, err_msg=ours)
    assert list(today["class"]) == list(results["class"])


def test_less_and_more_sulfur(survey):
    """Exceedance falls with what no longer falls; years with the net acid; ANC rises when less falls."""
    table = by_lake(deposition_table(survey, options_of(deposition_changes=(-100.0, -50.0, 50.0))), "full")
    table = table.set_index("sulfur_deposition_change_percent")
    assert list(table.index) == [0.0, -100.0, -50.0, 50.0]
    sulfur, net = 40.0 - 0.103 * 20.0, 62.94
    change = table.index.to_numpy() / 100.0
    assert_allclose(table["exceedance_meq_m2_yr"], table.loc[0.0, "exceedance_meq_m2_yr"] + change * sulfur, rtol=1e-9)
    assert_allclose(table["years_to_anc_limit"], table.loc[0.0, "years_to_anc_limit"] * net / (net + change * sulfur),
                    rtol=1e-9)
    anc = table["anc_ueq_l"]
    assert anc[-100.0] > anc[-50.0] > anc[0.0] > anc[50.0]
    assert_allclose(anc - 40.0, table["anc_change_ueq_l"], rtol=0, atol=1e-9)
    assert table.loc[-100.0, "ph_at_air"] > table.loc[0.0, "ph_at_air"] > table.loc[50.0, "ph_at_air"]


def test_half_of_the_sulfur_gone_from_hawk_pond(survey):
    """Sulfate beyond 29.48 halves: it falls by 51.07; soil answers F of it at the mean base cations."""
    table = by_lake(deposition_table(survey, options_of(deposition_changes=(-50.0,))), "hawk")
    fall = 0.5 * (131.629 - (15.0 + 0.16 * 90.472))
    mean = 90.472
    for _ in range(100):  # m = BC - F(m) fall / 2, a contraction
        mean = 90.472 - np.sin(np.pi / 2 * mean / 400.0) * fall / 2.0
    expected = (1.0 - np.sin(np.pi / 2 * mean / 400.0)) * fall
    assert_allclose(table["anc_change_ueq_l"], [0.0, expected], rtol=0, atol=0.01)
    assert_allclose(table["anc_ueq_l"], [-21.7, -21.7 + expected], rtol=0, atol=0.01)


def test_no_years_where_no_net_acid_is_left():
    """Base cations outweigh what still falls."""
    row = FULL | {"base_cation_deposition_eq_m2_yr": 0.060, "nitrate_deposition_eq_m2_yr": 0.020,
                  "ammonium_deposition_eq_m2_yr": 0.010}
    table = deposition_table(assessed(row), options_of(deposition_changes=(-50.0,)))
    assert_array_equal(np.isnan(table["years_to_anc_limit"]), [False, True])


# ------------------------------------------------------------------ lime


def test_demands_add_up_to_the_dose(survey):
    """What takes the base up, whatever the lake holds; a row for each lake below the target."""
    table = liming_table(survey, options_of())
    low = survey.results["lime_dose_ueq_l"] > 0.0
    assert list(table["sample_id"]) == list(survey.results.loc[low, "sample_id"])
    known = table[table["taken_by_acid_ueq_l"].notna()]
    assert {"full", "acid"} <= set(known["sample_id"])
    assert_allclose(sum(known[f"taken_by_{name}_ueq_l"] for name in DEMANDS), known["lime_dose_ueq_l"], rtol=1e-6)
    acid = known.set_index("sample_id").loc["acid"]
    assert acid["taken_by_aluminum_ueq_l"] > 5.0  # 9 µmol/L with about two charges each at pH 4.6
    assert acid["taken_by_acid_ueq_l"] == pytest.approx(1e6 * 10.0**-4.6, rel=0.05)


def test_figures_of_the_lime_table_are_those_of_the_results(survey):
    """Repeated lake by lake, with product, target and hazard in words."""
    table = liming_table(survey, options_of()).set_index("sample_id")
    results = survey.results.set_index("sample_id").loc[table.index]
    for name in ("lime_dose_ueq_l", "lime_g_m3", "lime_t", "lime_least_t", "lime_most_t", "lime_stream_t_yr",
                 "lime_ph_closed",
                 "lime_ph_at_air", "reacidify_yr"):
        assert_array_equal(table[name], results[name], err_msg=name)
    assert set(table["product"]) == {"limestone"}
    assert set(table["target"]) == {"ANC 100 µeq/L"}
    assert set(table["hazard"]) == {survey.rules.lime.hazard}


@pytest.mark.parametrize(("options", "target"), [({}, "ANC 100 µeq/L"), ({"lime_anc_ueq_l": 75.5}, "ANC 75.5 µeq/L"),
                                                 ({"lime_ph": 6.5}, "pH 6.5 at air")])
def test_target_in_words(options, target):
    """As it was asked for."""
    found = assessed(FULL | {"anc_eq_l": -20e-6}, lime="hydrated lime", **options)
    table = liming_table(found, options_of(lime="hydrated lime", **options))
    assert (table["target"].item(), table["product"].item()) == (target, "hydrated lime")


def test_the_next_liming():
    """From the limit of 20 back to 100 µeq/L: 80 as CaCO3, 70 % dissolved; on the day 0.8 ln 9 years later."""
    rows = [FULL | {"anc_eq_l": 10e-6}, FULL,
            without(FULL, "residence_time_yr", "lake_volume_m3") | {"anc_eq_l": 10e-6}]
    table = liming_table(assessed(*rows), options_of(lime_date="2026-05-01"))
    day = np.datetime64("2026-05-01") + np.timedelta64(round(0.8 * np.log(9.0) * 365.25), "D")
    assert list(table["reacidify_date"]) == [str(day), "", ""]
    assert_allclose(table["repeat_dose_ueq_l"], [80.0, np.nan, np.nan], rtol=1e-9)
    assert_allclose(table["repeat_g_m3"], [80e-6 * 50.04e3 / 0.7, np.nan, np.nan], rtol=1e-4)
    assert set(liming_table(assessed(*rows), options_of())["reacidify_date"]) == {""}


def test_how_long_lime_lasts_in_words():
    """A plain time; never, where the inflow stays above the limit; not known without a residence time."""
    rows = [FULL | {"anc_eq_l": 10e-6}, FULL,
            without(FULL, "residence_time_yr", "lake_volume_m3") | {"anc_eq_l": 10e-6}]
    table = liming_table(assessed(*rows), options_of())
    assert list(table["reacidify_words"]) == ["", "never by flushing: the inflow stays at or above the limit",
                                              "cannot be told"]
    table = liming_table(assessed(rows[0], lime_anc_ueq_l=15.0), options_of(lime_anc_ueq_l=15.0))
    assert list(table["reacidify_words"]) == ["at or below the limit from the start"]
