"""Which two readings a sample is solved from, what happens when they contradict, and pH read elsewhere."""

import numpy as np
import pytest
from carbonate_by_hand import TABLE, BareWater
from numpy.testing import assert_allclose
from sample_tables import assessed, readings, results

from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.assess.sample.closure import closure
from aquabuf.assess.sample.inputs import uncertainties, values_of
from aquabuf.readings.reader import read_readings

T = {"temperature_c": 25.0}
PH, ALK = 7.5, 1e-3
HAND = BareWater(25.0, ALK)
DIC = HAND.dic(PH, ALK)
CO2 = HAND.shares(PH)[0] * DIC
MEMBERS = {"ph": PH, "alkalinity_eq_l": ALK, "dic_mol_l": DIC, "pco2_atm": CO2 / HAND.k0}

PAIRS = [
    ("pH and alkalinity", ("ph", "alkalinity_eq_l")), ("pH and carbon", ("ph", "dic_mol_l")),
    ("alkalinity and carbon", ("alkalinity_eq_l", "dic_mol_l")), ("alkalinity and pCO2", ("alkalinity_eq_l", "pco2_atm")),
    ("pH and pCO2", ("ph", "pco2_atm")), ("carbon and pCO2", ("dic_mol_l", "pco2_atm"))]


@pytest.mark.parametrize(("pair", "names"), PAIRS, ids=[p for p, _ in PAIRS])
def test_every_pair_finds_the_same_water(pair, names):
    """Any two of the four give the sodium bicarbonate water worked out by hand (printed constants, 0.004)."""
    row = results(T | {n: MEMBERS[n] for n in names} | {"ionic_strength_mol_l": ALK}).iloc[0]
    assert row["pair"] == pair
    assert_allclose(row["ph"], PH, rtol=0, atol=0.004)
    assert_allclose([row["alkalinity_meq_l"], row["dic_mmol_l"], row["pco2_uatm"]],
                    [1e3 * ALK, 1e3 * DIC, 1e6 * MEMBERS["pco2_atm"]], rtol=0.012)
    assert row["alkalinity_from"] == ("alkalinity" if "alkalinity" in pair else "computed")


def test_fresh_water_prefers_ph_and_alkalinity():
    """With all four measured and carbon no better than usual."""
    assert results(T | MEMBERS).iloc[0]["pair"] == "pH and alkalinity"


def test_salt_water_prefers_alkalinity_and_carbon():
    """Where the two tell the pH better than the meter: sea water buffers about 0.5 meq/L per pH, so 0.02 of pH is 10 µeq/L.

    Readings of 3 µmol/L each (4.5 together) are better than that, the defaults of 48 and 62 µmol/L are worse.
    """
    sea = T | {"salinity": 35.0, "ph_total": 8.05, "alkalinity_eq_l": 2.3e-3}
    sharp = {"dic_mol_l": 2.0e-3, "alkalinity_u_eq_l": 3e-6, "dic_u_mol_l": 3e-6}
    table = results(sea | sharp | {"sample_id": "sharp"}, sea | {"sample_id": "blunt", "dic_mol_l": 2.0e-3}, sea | {"sample_id": "two"},
                    {k: v for k, v in (sea | sharp).items() if k != "ph_total"} | {"sample_id": "no pH"})
    assert table["pair"].tolist() == ["alkalinity and carbon", "pH and alkalinity", "pH and alkalinity", "alkalinity and carbon"]


def test_carbon_comes_first_where_it_is_much_better():
    """At pH 6 the carbon that alkalinity implies is alkalinity over the HCO3- share (0.31): its uncertainty is that much
    larger than 2 µeq/L + 2 %; carbon known to 1 µmol/L is then better by more than a factor of two."""
    water = T | {"ph": 6.0, "alkalinity_eq_l": 2e-4, "ionic_strength_mol_l": 2e-4}
    dic = BareWater(25.0, 2e-4).dic(6.0, 2e-4)
    table = results(water | {"sample_id": "sharp", "dic_mol_l": dic, "dic_u_mol_l": 1e-6},
                    water | {"sample_id": "blunt", "dic_mol_l": dic, "dic_u_mol_l": 5e-5})
    assert table["pair"].tolist() == ["pH and carbon", "pH and alkalinity"]


@pytest.mark.parametrize(("ratio", "pair"), [(1.9, "pH and alkalinity"), (2.1, "pH and carbon")])
def test_how_much_better_carbon_must_be(ratio, pair):
    """Twice: the implied carbon has the spread of carbonate over the charge per mole; by hand at pH 6, carbon read with a
    spread 1.9 or 2.1 times smaller."""
    hand = BareWater(25.0, 2e-4)
    _, a1, a2 = hand.shares(6.0)
    spread = np.hypot(2e-6 + 0.02 * 2e-4, np.log(10.0) * hand.c_h * 1e-6 * 0.05) / (a1 + 2.0 * a2)
    row = T | {"ph": 6.0, "alkalinity_eq_l": 2e-4, "ionic_strength_mol_l": 2e-4, "dic_mol_l": hand.dic(6.0, 2e-4), "dic_u_mol_l": spread / ratio}
    assert results(row).iloc[0]["pair"] == pair


def test_which_ph_counts_where_two_were_read():
    """Salt water rests on the total scale, fresh water on the meter."""
    both = T | {"ph": 8.3, "ph_total": 8.0, "alkalinity_eq_l": 2.2e-3}
    salt, fresh = (results(both | {"salinity": s}).iloc[0] for s in (35.0, 0.0))
    assert_allclose(salt["ph_total"], 8.0, rtol=0, atol=1e-9)
    assert_allclose(fresh["ph"], 8.3, rtol=0, atol=1e-9)


@pytest.mark.parametrize(("extra", "most"), [({}, 0.0), ({"doc_mg_l": 5.0}, 50e-6), ({"aluminum_mol_l": 1e-5}, 30e-6)], ids=["bare", "doc", "aluminum"])
@pytest.mark.parametrize(("part", "accepted"), [(0.97, True), (1.03, False)])
def test_how_far_below_zero_carbonate_may_be(extra, most, part, accepted):
    """Twice its uncertainty, 10 µeq per mg of organic carbon (Oliver et al. 1983) and three charges per aluminum; beyond, the row is refused."""
    hand = BareWater(25.0, 1e-3)
    h = hand.c_h * 1e-5
    target = -2.0 * np.hypot(2e-6 + 0.02 * 8e-5, np.log(10.0) * h * 0.05) - most
    alkalinity = -h + part * target
    u = {"alkalinity_u_eq_l": 2e-6 + 0.02 * 8e-5, "ionic_strength_mol_l": 1e-3}
    found = assessed(T | {"ph": 5.0, "alkalinity_eq_l": alkalinity} | extra | u)
    assert found.results["status"].tolist() == (["carbon from air"] if accepted else [])
    assert len(found.rejected) == (0 if accepted else 1)


@pytest.mark.parametrize(("ph", "pair"), [(5.3, "pH and air"), (5.5, "pH and alkalinity")])
def test_where_a_little_carbonate_cannot_tell_the_carbon(ph, pair):
    """Below a tenth of a charge per mole of carbon, at pH pK1 - log10 9 = 5.4: there carbonate of one standard uncertainty
    would be blown up tenfold, above it is used as it is."""
    hand = BareWater(25.0, 1e-4)
    h = hand.c_h * 10.0**-ph
    row = T | {"ph": ph, "alkalinity_eq_l": np.hypot(2e-6, np.log(10.0) * h * 0.05) - h, "alkalinity_u_eq_l": 2e-6, "ionic_strength_mol_l": 1e-4}
    assert results(row).iloc[0]["pair"] == pair


def gap(**row):
    """Closure of one sample."""
    values = values_of(readings(T | row).frame)
    return closure(values, uncertainties(values), (), Options())


def test_carbonate_that_ph_and_alkalinity_leave():
    """Alkalinity less OH- plus H+: at pH 5 and -5 µeq/L by hand, with gamma of the given strength; its uncertainty too.

    Spread: 2.1 µeq/L of alkalinity (2 µeq/L + 2 %) and ln 10 times H+ times 0.05 of pH, in quadrature.
    """
    hand = BareWater(25.0, 1e-3)
    h = hand.c_h * 1e-5
    found = gap(ph=5.0, alkalinity_eq_l=-5e-6, ionic_strength_mol_l=1e-3)
    assert_allclose(found.carbonate, h - 5e-6 - hand.c_oh * 1e5, rtol=2e-3)
    assert_allclose(found.carbonate_u, np.hypot(2.1e-6, np.log(10.0) * h * 0.05), rtol=2e-3)


def test_closure_of_three_readings():
    """Titrated less computed alkalinity: zero for the water by hand, and just what was added to the titration."""
    for added in (0.0, 4e-5):
        found = gap(ph=PH, alkalinity_eq_l=ALK + added, dic_mol_l=DIC, ionic_strength_mol_l=ALK)
        assert_allclose(found.carbon_meq_l, 1e3 * added, rtol=0, atol=0.004)
    spread = np.sqrt((2e-6 + 0.02 * (ALK + 4e-5)) ** 2 + (0.93 * (2e-6 + 0.03 * DIC)) ** 2 + (HAND.buffer(PH, DIC) * 0.05) ** 2)
    assert_allclose(found.carbon_u_meq_l, 1e3 * spread, rtol=0.01)  # share of HCO3- at pH 7.5: 0.93


def test_acid_water_takes_its_carbon_from_air():
    """pH 4.9 and -15 µeq/L: H+ alone is 13 µeq/L, so carbonate is zero within uncertainty; pH stays, CO2 is that of air."""
    row = results(T | {"ph": 4.9, "alkalinity_eq_l": -1.5e-5}).iloc[0]
    assert (row["pair"], row["status"]) == ("pH and air", "carbon from air")
    assert "cannot tell its carbon" in row["status_reason"]
    assert_allclose([row["ph"], row["pco2_air_ratio"], row["alkalinity_meq_l"]], [4.9, 1.0, -0.015], rtol=1e-9)


def test_measured_carbon_comes_before_air():
    """The same acid water with carbon measured needs no stand-in."""
    row = results(T | {"ph": 4.9, "alkalinity_eq_l": -1.5e-5, "dic_mol_l": 3e-5}).iloc[0]
    assert (row["pair"], row["status"]) == ("pH and carbon", "ok")


def test_a_pair_that_contradicts_itself_gives_way_to_the_next():
    """pH 10 with 0.05 meq/L asks for negative carbonate (OH- alone is 0.1); pH and carbon are then used."""
    row = results(T | {"ph": 10.0, "alkalinity_eq_l": 5e-5, "dic_mol_l": 4e-4}).iloc[0]
    assert row["pair"] == "pH and carbon"
    hand = BareWater(25.0, 5e-5)
    assert_allclose(row["co2_mmol_l"], 1e3 * 4e-4 * hand.shares(10.0)[0], rtol=0.05)


def test_a_pair_that_contradicts_itself_is_refused_alone():
    """Without a third reading the row is refused with both values; its neighbors stay as they are."""
    bad = T | {"sample_id": "bad", "ph": 10.0, "alkalinity_eq_l": 5e-5}
    good = T | {"sample_id": "good", "ph": 7.5, "alkalinity_eq_l": 1e-3}
    found = assessed(bad, good)
    line = found.rejected.iloc[0]
    assert (line["row"], line["sample_id"], line["column"]) == (2, "bad", "ph, alkalinity_eq_l")
    assert line["value"] == "ph = 10; alkalinity_eq_l = 50 µeq/L"
    assert line["rule"].startswith("alkalinity must leave carbonate above zero at this pH")
    assert "check pH and titration" in line["remedy"]
    assert found.results["sample_id"].tolist() == ["good"]
    assert found.results.drop(columns="row").equals(assessed(good).results.drop(columns="row"))


REFUSED = [
    ("no temperature", {"ph": 7.0, "alkalinity_eq_l": 1e-3}, "temperature_c", "missing", "every sample needs a water temperature",
     r"a value for rows without one under \[fill\]"),
    ("alkalinity alone", T | {"alkalinity_eq_l": 1e-3}, "ph, alkalinity, dic, pco2", "only alkalinity",
     "two of pH, alkalinity, carbon and CO2 pressure make a known pair", "or run with --exchange open"),
    ("pH alone", T | {"ph": 7.0}, "ph, alkalinity, dic, pco2", "only pH", "two of pH", "^give a second one$"),
    ("nothing", T, "ph, alkalinity, dic, pco2", "none", "two of pH", "^give a second one$"),
    ("gas beyond carbon", T | {"dic_mol_l": 1e-5, "pco2_atm": 0.01}, "dic_mol_l, pco2_atm", "dic_mol_l = 10 µmol/L; pco2_atm = 1e+04 µatm",
     "total carbon must be more than the CO2 that this pressure dissolves", "check both readings"),
    ("alkalinity beyond any pH", T | {"alkalinity_eq_l": 15.0, "dic_mol_l": 1e-3, "ionic_strength_mol_l": 0.01}, "alkalinity_eq_l, dic_mol_l",
     "alkalinity_eq_l = 1.5e+07 µeq/L; dic_mol_l = 1000 µmol/L", "no water has these values", "check both readings and their units"),
    ("thick brine without salinity", T | {"ph": 7.0, "alkalinity_eq_l": 1e-3, "ionic_strength_mol_l": 2.0}, "ionic_strength_mol_l",
     "ionic strength 2 mol/L from given", "ionic strength of fresh water must be at most 0.5 mol/L", "give salinity if this is salt water"),
    ("alkalinity of a brine", {"temperature_c": 10.0, "ph": 12.0, "alkalinity_eq_l": 0.9}, "alkalinity_eq_l",
     "ionic strength 0.9 mol/L from alkalinity", "ionic strength of fresh water must be at most 0.5 mol/L", "give salinity"),
    ("Lueker in brackish water", T | {"salinity": 5.0, "ph_total": 8.0, "alkalinity_eq_l": 2e-3}, "salinity, temperature_c", "5; 25 °C",
     "the lueker constants reach salinity 19 to 43 at 2 to 35 °C", "use --marine-constants millero"),
    ("thin air", T | {"ph": 7.0, "alkalinity_eq_l": 1e-3, "air_pressure_atm": 0.1}, "air_pressure_atm", "0.1",
     "air_pressure_atm must be 0.2 to 2 atm", "correct the value or its unit"),
    ("hot", {"temperature_c": 70.0, "ph": 7.0, "alkalinity_eq_l": 1e-3}, "temperature_c", "70", "temperature_c must be -2 to 60 °C", "correct the value"),
]


@pytest.mark.parametrize("case", REFUSED, ids=[c[0] for c in REFUSED])
def test_refusal_says_column_value_rule_and_remedy(case):
    """Each way to be refused, in the words of rejected.csv."""
    name, row, column, value, rule, remedy = case
    line = assessed(row, carbonic="lueker" if name.startswith("Lueker") else "millero").rejected.iloc[0]
    assert (line["column"], line["value"]) == (column, value)
    assert line["rule"].startswith(rule)
    with pytest.raises(ValueError, match=remedy):
        raise ValueError(line["remedy"])


def test_refusal_names_the_headers_of_the_file(tmp_path):
    """The user looks for the column under the name it has in the file."""
    path = tmp_path / "t.csv"
    path.write_text("sample_id,Water temperature (°C),Field pH,ANC (µeq/L)\nx,25,10,50\n", encoding="utf-8")
    line = assess(read_readings(path), Options(draws=0), ()).rejected.iloc[0]
    assert line["column"] == "Field pH, ANC (µeq/L)"


def test_open_exchange_needs_alkalinity_only():
    """Air is the second known: the bicarbonate water by hand at 425 ppm, alone and beside rows with a pair."""
    lone = T | {"sample_id": "lone", "alkalinity_eq_l": ALK}
    table = results(lone, T | {"sample_id": "pair", "ph": 6.5, "alkalinity_eq_l": ALK}, exchange="open")
    assert table["pair"].tolist() == ["alkalinity and air", "pH and alkalinity"]
    by_hand = HAND.ph_at_co2(ALK, HAND.k0 * 425e-6 * (1.0 - 0.031256))
    assert_allclose(table["ph"], by_hand, rtol=0, atol=0.002)


def test_a_lone_alkalinity_that_cannot_be_solved_is_not_told_to_run_open():
    """Refused in an open run for its ionic strength, so that is what the line must say."""
    line = assessed(T | {"alkalinity_eq_l": 1e-3, "ionic_strength_mol_l": 2.0}, exchange="open").rejected.iloc[0]
    assert "--exchange open" not in line["remedy"]
    assert line["rule"].startswith("ionic strength of fresh water must be at most 0.5 mol/L")


def test_ph_read_in_the_laboratory_is_carried_to_the_water():
    """Closed bottle: alkalinity and carbon per kilogram stay. At 25 °C in the laboratory pH gives the carbon, at 10 °C in
    the lake the same carbon gives pH; both by hand with the printed constants of either temperature."""
    lab_ph, alk = 7.0, 1e-3
    dic = HAND.dic(lab_ph, alk)
    to_lake = TABLE[10.0][5] / TABLE[25.0][5]
    in_lake = BareWater(10.0, alk * to_lake).ph(alk * to_lake, dic * to_lake)
    row = results({"temperature_c": 10.0, "ph_temperature_c": 25.0, "ph": lab_ph, "alkalinity_eq_l": alk}).iloc[0]
    assert_allclose(row["ph"], in_lake, rtol=0, atol=0.003)
    assert abs(in_lake - lab_ph) > 0.03  # the step is real
    assert row["temperature_c"] == 10.0
    assert_allclose(row["dic_mmol_l"], 1e3 * dic * to_lake, rtol=0.004)


def test_laboratory_temperature_counts_row_by_row():
    """A row without one is read in place."""
    water = {"temperature_c": 10.0, "ph": 7.0, "alkalinity_eq_l": 1e-3}
    table = results(water | {"sample_id": "lab", "ph_temperature_c": 25.0}, water | {"sample_id": "place"})
    assert_allclose(table.loc["place", "ph"], 7.0, rtol=0, atol=1e-12)
    assert_allclose(table.loc["lab", "ph"], results(water | {"ph_temperature_c": 25.0}).iloc[0]["ph"], rtol=1e-12)


KINDS = [
    T | {"sample_id": "a", "ph": 7.5, "alkalinity_eq_l": 1e-3}, T | {"sample_id": "b", "ph": 4.9, "alkalinity_eq_l": -1.5e-5},
    T | {"sample_id": "c", "salinity": 35.0, "ph_total": 8.05, "alkalinity_eq_l": 2.3e-3}, T | {"sample_id": "d", "ph": 7.0},
    T | {"sample_id": "e", "ph": 7.2, "dic_mol_l": 2e-3}, T | {"sample_id": "f", "alkalinity_eq_l": 2e-3, "dic_mol_l": 2.1e-3},
    T | {"sample_id": "g", "ph": 10.0, "alkalinity_eq_l": 5e-5, "dic_mol_l": 4e-4}, {"sample_id": "h", "ph": 7.0, "alkalinity_eq_l": 1e-3},
    T | {"sample_id": "i", "ph": 6.0, "pco2_atm": 5e-3}, T | {"sample_id": "j", "dic_mol_l": 2e-3, "pco2_atm": 2e-3},
    T | {"sample_id": "k", "salinity": 12.0, "alkalinity_eq_l": 2e-3, "dic_mol_l": 1.9e-3}]


@pytest.mark.parametrize("order", [KINDS, KINDS[::-1]], ids=["as listed", "reversed"])
def test_rows_of_all_kinds_come_out_in_input_order(order):
    """Every accepted row once, in place; refused rows in file order too."""
    found = assessed(*order)
    names = [row["sample_id"] for row in order]
    assert found.results["sample_id"].tolist() == [n for n in names if n not in "dh"]
    assert found.results["row"].tolist() == [2 + i for i, n in enumerate(names) if n not in "dh"]
    assert found.rejected["sample_id"].tolist() == [n for n in names if n in "dh"]


@pytest.mark.parametrize("row", KINDS, ids=lambda r: r["sample_id"])
def test_a_row_is_assessed_as_if_alone(row):
    """Whatever else is in the table, the same figures, words, warnings and intervals."""
    alone, beside = assessed(row, draws=100), assessed(*KINDS, draws=100)
    if not len(alone.results):
        assert row["sample_id"] in beside.rejected["sample_id"].tolist()
        return
    there = beside.results[beside.results["sample_id"] == row["sample_id"]].iloc[0]
    for name, value in alone.results.iloc[0].drop("row").items():
        if isinstance(value, str):
            assert there[name] == value, name
        else:
            assert_allclose(there[name], value, rtol=1e-9, atol=1e-12, err_msg=name)


def test_ph_columns_may_differ_from_row_to_row():
    """The acid water of above on the total scale beside a meter reading: still carbon from air, as when alone."""
    row = T | {"sample_id": "x", "ph_total": 4.9, "alkalinity_eq_l": -1.5e-5}
    assert results(row).loc["x", "status"] == "carbon from air"
    beside = results(row, T | {"sample_id": "y", "ph": 7.0, "alkalinity_eq_l": 1e-3})
    assert beside.loc["x", "status"] == "carbon from air"


def test_status_outside_range():
    """Beyond 50 °C the constants are stretched: the row is kept and says so."""
    row = results({"temperature_c": 55.0, "ph": 7.5, "alkalinity_eq_l": 1e-3}).iloc[0]
    assert row["status"] == "outside range"
    assert "the range of the constants" in row["status_reason"]


def test_more_carbon_dioxide_than_a_surface_holds_is_refused():
    """pH 4 with 4 meq/L: CO2 = alkalinity h / K1 = 4e-3 x 1e-4 / 10^-6.46 = 1.2 mol/L, over K0 0.054 some 21 atm."""
    line = assessed({"temperature_c": 10.0, "ph": 4.0, "alkalinity_eq_l": 4e-3}).rejected.iloc[0]
    assert "must be at most 2 atm" in line["rule"]
    assert 18.0 < float(line["rule"].split("implies, ")[1].split(" atm")[0]) < 25.0
    assert "check both readings" in line["remedy"]


def test_alkalinity_that_the_answer_rests_on_is_told():
    """Where pH and carbon were used, the solved alkalinity stands beside the titrated one."""
    row = results({"sample_id": "w", "temperature_c": 15.0, "ph": 5.2, "anc_eq_l": 4e-5, "dic_mol_l": 1e-4}).loc["w"]
    assert row["pair"] == "pH and carbon"
    assert row["alkalinity_meq_l"] == 0.04
    k1 = 10.0**-6.419  # Plummer & Busenberg 1982 at 15 °C
    by_hand = 1e-4 * k1 / (k1 + 10.0**-5.2) - 10.0**-5.2
    np.testing.assert_allclose(row["alkalinity_used_meq_l"], 1e3 * by_hand, atol=2e-4)


def test_half_limits_are_named_on_the_row(tmp_path):
    """A row that holds half a detection limit says of which column."""
    path = tmp_path / "t.csv"
    path.write_text("sample_id,temperature_c,ph,alkalinity_meq_l,sulfate_mg_l\na,10,7,1,<0.2\nb,10,7,1,4\n", encoding="utf-8")
    found = assess(read_readings(path), Options(draws=0), ())
    assert found.results["below_detection"].tolist() == ["sulfate_mol_l", ""]
