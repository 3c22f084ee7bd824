"""Table alkalinity.csv: its columns, kinds of sample, refused ones in their place, and rows that do not see each other."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from titrations import acid_steps, assessed, dilute, hard, results, row, sample, steps

from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import column_facts, titration_digits
from aquabuf.errors import InputError
from aquabuf.tables import read_table

CONTRACT = ["sample_id", "status", "recommended_ueq_l", "recommended_u_ueq_l", "recommended_method", "recommended_reason", "gran_ueq_l", "gran_u_ueq_l",
            "gran_volume_ml", "gran_slope_ratio", "gran_points", "inflection_ueq_l", "fixed_4_5_ueq_l", "two_point_ueq_l", "fit_ueq_l", "fit_u_ueq_l",
            "fit_dic_umol_l", "fit_offset_ph", "warnings"]
REFUSED = {"refused": ("points", 9, "ph", "44", "must be 0 to 14", "correct it")}


def by_mass(one, density=1.0):
    """The same titration with sample and titrant weighed: numbers as they would be at this density of both."""
    rest = {name: value for name, value in one.items() if name not in ("sample_volume_ml", "titrant_strength_eq_l")}
    return rest | {"by": "mass", "added": one["added"] * density, "sample_mass_g": one["sample_volume_ml"] * density,
                   "titrant_strength_eq_kg": one["titrant_strength_eq_l"] / density}


def expected_columns(ends=("8_3", "5_4", "4_9", "4_6", "4_5", "4_3"), units=("l",)):
    """Names by the table of facts, written out here: a star is each end point, braces the unit of each kind of sample."""
    out = []
    for line in read_table("titration_results"):
        name = line["name"]
        names = [name.replace("*", end) for end in (ends if name.startswith("fixed") else ("3_7", "4_5", "8_3"))] if "*" in name else [name]
        for one in names:
            if "{" not in one:
                out.append(one)
            else:
                out += [one.replace("{eq}", {"l": "ueq_l", "kg": "umol_kg"}[u]).replace("{mol}", {"l": "umol_l", "kg": "umol_kg"}[u]) for u in units]
    return out


# ------------------------------------------------------------------ columns

@pytest.mark.parametrize(("flags", "units"), [({"by_kilogram": False}, ("l",)), ({"by_liter": False}, ("kg",)), ({}, ("l", "kg"))],
                         ids=["volume", "mass", "both"])
def test_columns_are_those_of_the_table_of_facts(flags, units):
    """For files of samples by volume, by mass, and of both; each once."""
    columns = list(assessed(hard(), **flags).results)
    assert columns == expected_columns(units=units)
    assert len(set(columns)) == len(columns)


def test_columns_of_the_contract():
    """Names that other programs rely on; their order is that of the table."""
    columns = list(assessed(hard(), by_kilogram=False).results)
    assert [c for c in columns if c in CONTRACT] == CONTRACT
    weighed = list(assessed(by_mass(hard()), by_liter=False).results)
    assert [c for c in weighed if c in {n.replace("_ueq_l", "_umol_kg").replace("_umol_l", "_umol_kg") for n in CONTRACT}]
    assert not [c for c in weighed if c.endswith(("_ueq_l", "_umol_l"))]


def test_every_column_is_filled_by_some_titration():
    """No column of the table of facts is without figures behind it (a missing key would leave it blank for ever)."""
    base = sample(np.linspace(0.0, 3.0, 25), alkalinity=-1e-3, carbon=3e-4, strength=-0.05, iron_2_mol_l=1e-4, site="A", date="2024-05-01")
    soda = sample(np.concatenate([np.linspace(0.0, 0.6, 12, endpoint=False), steps(4.0)[2:]]), alkalinity=2e-3, carbon=1.3e-3, doc_mg_l=1.0)
    swept = sample(acid_steps(1.5e-3, alkalinity=2e-3, strength=0.05), alkalinity=2e-3, carbon=0.0, exchange="purged")
    weak = sample(acid_steps(9e-4, alkalinity=6e-4, count=60), alkalinity=6e-4, carbon=5e-4, strength=0.02, acids=((2e-4, 5.5),))
    weak |= {"ph_scatter": 0.001, "titrant_scatter_ml": 1e-4}
    given = (hard(titrant_strength_eq_l=0.06), dilute(), base, soda, swept, weak, by_mass(hard()))
    table = assessed(*given, weak_acid=True, conversion="charge_balance").results
    blank = [name for name in table if table[name].isin([""]).all() or table[name].isna().all()]
    assert [name for name in blank if not name.endswith("_kg")] == ["figure"]  # its name comes with the drawing


def test_decimals_are_known_of_every_number():
    """Each numeric column has its decimals in the table of facts; counts and words have none."""
    digits = titration_digits(TitrationOptions())
    table = assessed(hard()).results
    floats = {name for name in table if table[name].dtype.kind == "f"}
    assert floats - set(digits) == set()
    assert digits["recommended_ueq_l"] == digits["recommended_umol_kg"] == 2
    assert "gran_points" not in digits


def test_end_points_of_the_user():
    """Each in the list, highest first and once; pH 4.5 is always there, since others rest on it."""
    table = assessed(hard(), end_points=(4.2, 8.1, 5.0, 4.2)).results
    assert [c for c in table if c.startswith("fixed_") and c.endswith("_ueq_l") and "_u_" not in c] == [
        "fixed_8_1_ueq_l", "fixed_5_0_ueq_l", "fixed_4_5_ueq_l", "fixed_4_2_ueq_l", "fixed_level_ueq_l"]
    assert table["fixed_4_2_ueq_l"].iloc[0] > table["fixed_5_0_ueq_l"].iloc[0] > 1000.0
    assert_array_equal(table["fixed_4_5_ueq_l"], assessed(hard()).results["fixed_4_5_ueq_l"])


@pytest.mark.parametrize("ph", [1.0, 2.4, 11.1, -3.0, float("nan"), float("inf")])
def test_end_points_that_make_no_sense(ph):
    """Range and value in the message."""
    with pytest.raises(InputError, match=rf"an end point must be from pH 2.5 to 11; found {ph:g}. Correct the list"):
        TitrationOptions(end_points=(4.5, ph))


def test_facts_can_be_asked_for_without_a_run():
    """Column, key and facts; both units by default."""
    names = [name for name, _, _ in column_facts(TitrationOptions())]
    assert names == expected_columns(units=("l", "kg"))


# ------------------------------------------------------------------ units

def test_by_mass_at_a_density_of_one():
    """Weighed with 1 g for each mL: the same number per kilogram, and the mg/L differ by the density of water alone (0.99705 at 25 °C)."""
    volume, weighed = results(hard(), by_mass(hard())).itertuples()
    assert_allclose(weighed.recommended_umol_kg, volume.recommended_ueq_l, rtol=2e-4)
    assert np.isnan([weighed.recommended_ueq_l, volume.recommended_umol_kg, weighed.gran_volume_ml, volume.gran_mass_g]).all()
    assert_allclose(weighed.recommended_mg_l_caco3 / weighed.recommended_umol_kg, 0.0500435 * 0.99705, rtol=1e-4)
    assert_allclose(volume.recommended_mg_l_caco3 / volume.recommended_ueq_l, 0.0500435, rtol=1e-5)
    assert_allclose(weighed.gran_mass_g, volume.gran_volume_ml, rtol=1e-3)


def test_gran_volume_times_strength_is_the_alkalinity():
    """By hand: mL at the root times eq/L over the sample."""
    r = row(hard())
    assert_allclose(r["gran_volume_ml"] * 0.05 / 100.0 * 1e6, r["gran_ueq_l"], rtol=1e-12)


def test_line_of_an_acid_water_may_begin_at_its_first_point():
    """Its pH stands in the table then too."""
    r = row(sample(np.linspace(0.0, 3.0, 20), alkalinity=-3e-4, carbon=3e-5, strength=0.02))
    assert (r["gran_ph_first"], r["gran_ph_last"]) == (r["first_ph"], r["lowest_ph"])


def test_counts_of_a_digital_titrator_are_brought_to_milliliters_before():
    """The points come in mL; the cartridge factor multiplies the strength, so twice 1.01 is 1 % more."""
    plain, corrected = results(hard(), hard(cartridge_factor=1.01)).itertuples()
    assert_allclose(corrected.fixed_4_5_ueq_l / plain.fixed_4_5_ueq_l, 1.01, rtol=1e-9)


@pytest.mark.parametrize(("filtered", "definition"), [("yes", "alkalinity"), ("no", "ANC"), ("", "alkalinity or ANC")])
def test_definition(filtered, definition):
    """By what was done to the sample."""
    assert row(hard(filtered=filtered))["definition"] == definition


# ------------------------------------------------------------------ refused ones, status, order

def test_refused_titrations_keep_their_place():
    """First, in between and last: name and status alone, the reason where others have theirs, all numbers blank."""
    given = [REFUSED | {"sample_id": "x"}, hard(sample_id="b"), REFUSED | {"sample_id": "y"}, dilute(sample_id="a"), REFUSED | {"sample_id": "z"}]
    table = assessed(*given).results
    assert table["sample_id"].tolist() == ["x", "b", "y", "a", "z"]
    assert table["status"].tolist() == ["refused", "ok", "refused", "ok", "refused"]
    refused = table[table["status"] == "refused"]
    assert set(refused["recommended_reason"]) == {"refused (points, row 9): ph: must be 0 to 14"}
    rest = refused.drop(columns=["sample_id", "row", "status", "recommended_reason"])
    assert ((rest == "") | rest.isna()).all(axis=None)
    assert table["row"].tolist() == [2, 3, 30, 31, 61]
    assert assessed(*given).at.tolist() == [1, 3]


def test_only_refused_titrations():
    """A piece without one usable titration has its rows all the same, and no findings."""
    a = assessed(REFUSED, REFUSED | {"sample_id": "other"})
    assert a.results["status"].tolist() == ["refused", "refused"]
    assert len(a.findings) == 0
    assert a.assumed == {}
    assert list(a.results) == list(assessed(hard()).results)


def test_status():
    """ok; warned, with the names of the findings; no result."""
    table = results(hard(sample_id="good"), hard(sample_id="late", minutes=np.linspace(0.0, 30.0, 27), temperature_c=np.nan),
                    sample([0.0, 0.5], alkalinity=1e-4, carbon=1.3e-4, strength=0.02, sample_id="two points"))
    assert table["status"].tolist() == ["ok", "warned", "no result"]
    assert table.loc["late", "warnings"] == "temperature missing; slow titration"
    assert table.loc["good", "warnings"] == ""


# ------------------------------------------------------------------ rows do not see each other

ALONE = {"hard": hard(scatter=0.01), "dilute": dilute(scatter=0.01), "acid": sample(acid_steps(6e-4, alkalinity=-5e-5), alkalinity=-5e-5, carbon=3e-5, strength=0.02),
         "base": sample(np.linspace(0.0, 3.0, 25), alkalinity=-1e-3, carbon=3e-4, strength=-0.05), "two points": sample([0.0, 0.5], alkalinity=1e-4, carbon=1.3e-4),
         "swept": sample(acid_steps(1.5e-3, alkalinity=2e-3, strength=0.05), alkalinity=2e-3, carbon=0.0, exchange="purged"), "turned": hard(scatter=0.08),
         "coarse": sample([0.0, 3.5, 3.9, 4.5, 5.0, 5.5], alkalinity=2e-3, carbon=2.2e-3), "last reading off": hard(scatter=0.01) | {"ph": np.append(hard()["ph"][:-1], 3.05)},
         "millivolts": {k: v for k, v in hard().items() if k != "ph"} | {"potential_mv": 400.0 - 59.0 * hard()["ph"]},
         "wrong strength": hard(titrant_strength_eq_l=0.5), "weighed": by_mass(hard())}
LONG = sample(np.linspace(0.0, 6.0, 150), alkalinity=2e-3, carbon=2.2e-3, scatter=0.02, site="A", doc_mg_l=3.0, salinity=0.2, sample_id="long")


@pytest.mark.parametrize("weak_acid", [False, True])
def test_rows_do_not_see_each_other(weak_acid):
    """A titration alone gives the row and the findings that it gives among others, longer ones too, and with refused ones between."""
    crowd = [x for name, one in ALONE.items() for x in (one | {"sample_id": name}, REFUSED | {"sample_id": f"no {name}"})]
    among = assessed(LONG, *crowd, weak_acid=weak_acid)
    rows = among.results.set_index("sample_id")
    for name, one in ALONE.items():
        alone = assessed(one | {"sample_id": name}, weak_acid=weak_acid)
        mine, there = alone.results.iloc[0], rows.loc[name]
        for column in alone.results.columns.drop(["sample_id", "row"]):
            a, b = mine[column], there[column]
            if isinstance(a, str):
                assert a == b, (name, column)
            else:
                assert_allclose(float(a), float(b), rtol=2e-6, atol=1e-7, err_msg=f"{name}: {column}")
        here = among.findings[among.findings["sample_id"] == name]
        assert here["finding"].tolist() == alone.findings["finding"].tolist(), name
        assert_allclose(here["value"].astype(float), alone.findings["value"].astype(float), rtol=1e-5, atol=1e-7)


def test_words_of_the_assumptions_are_counted_per_titration():
    """Two of three without a temperature, one without knowing whether CO2 stayed."""
    a = assessed(hard(), hard(temperature_c=np.nan), hard(temperature_c=np.nan, exchange=""))
    assert a.assumed["no temperature: 20 °C"] == 2
    assert a.assumed["CO2 in the vessel not stated: kept in (closed)"] == 1
    assert a.assumed["uncertainty of pH not stated: default"] == 3
    assert "filtered or not is not stated" not in a.assumed
