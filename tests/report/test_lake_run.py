"""A run over a survey of lakes: its files and columns, its rows, its figures by hand, and tables that agree."""

import csv
import json
import math
import re

import pytest
from lake_tables import ALDER, BIRCH, CEDAR, DEPOSITION, DOCK, HAWK, QA_SERIES, SURVEY, series, table_of
from numpy.testing import assert_allclose

from aquabuf.assess.lake.options import LakeOptions
from aquabuf.report.lake_run import OUTPUT_FILES, LakeFiles, assess_survey
from aquabuf.tables import read_table

WITHOUT_SERIES = {"results.csv", "priorities.csv", "classes.csv", "verdicts.csv", "groups.csv", "critical_loads.csv",
                  "episodes.csv", "deposition.csv", "liming.csv", "checks.csv", "rejected.csv", "report.html", "report.txt",
                  "run.json"}
# What users of the results may rely on
CONTRACT = ("sample_id", "status", "anc_gran_ueq_l", "anc_charge_ueq_l", "organic_anion_ueq_l", "anc_organic_corrected_ueq_l",
            "ion_balance_percent", "conductivity_calculated_us_cm", "scheme", "class", "class_probability", "acid_to_ph_6_0_ueq_l",
            "acid_to_ph_5_5_ueq_l", "acid_to_ph_5_0_ueq_l", "ph_at_air", "pco2_uatm", "critical_load_meq_m2_yr",
            "exceedance_meq_m2_yr", "warnings")
TREND_CONTRACT = ("site", "quantity", "n", "s", "z", "p", "p_corrected", "sen_slope", "sen_low", "sen_high")
REPEATED = ("site", "region", "date", "depth_m", "water_kind", "survey_weight", "anc_method", "filtered", "ph_kind")


@pytest.fixture
def lakes(table, tmp_path):
    """Assess a survey into a folder; returns the summary and the folder."""
    def go(text=SURVEY, *, out="out", name="lakes.csv", force=False, notify=lambda text: None, event=None, limits=None, **options):
        files = LakeFiles(survey=table(text, name), event=event, limits=limits)
        chosen = LakeOptions(**({"draws": 0} | options))
        return assess_survey(files, tmp_path / out, chosen, force=force, figure=False, notify=notify), tmp_path / out
    return go


def read(folder, name="results.csv"):
    """A table of the run as text cells."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def contents(folder):
    """All bytes by name, hidden files too."""
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def number(row, name):
    """A cell as a number."""
    return float(row[name])


def columns_of_results(thresholds, draws, given):
    """Header of results.csv by the shipped table, worked out apart."""
    out = []
    for row in read_table("lake_results"):
        if row["name"] in REPEATED and row["name"] not in given:
            continue
        names = [row["name"].replace("*", f"{ph:.1f}".replace(".", "_")) for ph in thresholds] if "*" in row["name"] else [row["name"]]
        ends = ("", "_low", "_high") if draws and row["interval"] == "yes" else ("",)
        out += [name + end for name in names for end in ends]
    return out


# ------------------------------------------------------------------ files and columns

def test_files_of_a_survey(lakes):
    """Everything a survey without series gives, under its own name, and nothing else, hidden files included."""
    words, folder = lakes()
    assert set(contents(folder)) == WITHOUT_SERIES <= set(OUTPUT_FILES)
    assert words.startswith("lakes.csv: 4 lakes assessed, ")


def test_files_of_a_series(lakes):
    """Dated samples of three years bring trends and recovery; two years do not."""
    three = table_of(*series("Fir", (10, 20, 30), (50, 40, 30)))
    assert {"trends.csv", "recovery.csv"} <= set(contents(lakes(three)[1]))
    two = table_of(*series("Fir", (10, 20), (50, 40)), {**ALDER, "date": ""})
    assert not {"trends.csv", "recovery.csv"} & set(contents(lakes(two, out="two")[1]))


def test_tables_with_nothing_to_say_are_not_written(lakes):
    """One lake with an ANC above every target: no load, no episode, no deposition, no lime, nothing refused."""
    _, folder = lakes("sample_id,anc_ueq_l\na,500\n")
    assert set(contents(folder)) == {"results.csv", "priorities.csv", "classes.csv", "verdicts.csv", "groups.csv", "checks.csv", "report.html", "report.txt", "run.json"}


@pytest.mark.parametrize("draws", [0, 100])
@pytest.mark.parametrize("thresholds", [(), (4.7, 5.5)])
def test_columns_of_results(lakes, draws, thresholds):
    """Those of lake_results.csv in its order, intervals right behind their figure; 6.0, 5.5 and 5.0 are always there."""
    _, folder = lakes(draws=draws, thresholds=thresholds)
    with (folder / "results.csv").open(encoding="utf-8", newline="") as stream:
        header = next(csv.reader(stream))
    assert header == columns_of_results((6.0, 5.5, 5.0, *(p for p in thresholds if p != 5.5)), draws,
                                        ("site", "region", "date", "anc_method", "filtered"))
    assert set(CONTRACT) <= set(header)


def test_columns_that_are_only_repeated_stand_where_they_were_given(lakes):
    """As they were written, formats of dates included; none is invented."""
    row = {"sample_id": "a", "anc_ueq_l": 40, "depth_m": 1.5, "water_kind": "lake", "survey_weight": 3.25, "date": "1 Oct 2024"}
    first = read(lakes(table_of(row))[1])[0]
    assert [first[k] for k in ("depth_m", "water_kind", "survey_weight", "date", "row")] == ["1.5", "lake", "3.25", "1 Oct 2024", "2"]
    assert not {"site", "region", "ph_kind", "filtered", "anc_method"} & set(first)


def test_columns_of_trends(lakes):
    """Those of trend_columns.csv in its order, and what the contract asks for."""
    header = list(read(lakes(table_of(*series("Fir", QA_SERIES, [50] * 11)))[1], "trends.csv")[0])
    assert header == [r["name"] for r in read_table("trend_columns")]
    assert set(TREND_CONTRACT) <= set(header)


def test_decimals_of_results(lakes):
    """No figure stands with more decimals than its column of the shipped table grants, ends of intervals included."""
    digits = {name: int(c["digits"]) for c in read_table("lake_results") if c["digits"] for name in columns_of_results((6.0, 5.5, 5.0), 1, REPEATED)
              if re.fullmatch(re.escape(c["name"]).replace(r"\*", r"\d+_\d") + "(_low|_high)?", name)}
    seen = set()
    for row in read(lakes(table_of(ALDER, CEDAR, HAWK), draws=100)[1]):
        for name in digits.keys() & {n for n, cell in row.items() if cell}:
            decimals = row[name].partition(".")[2].rstrip("0")
            assert len(decimals) <= digits[name], (name, row[name])
            seen |= {name} if len(decimals) == digits[name] else set()
    assert len(seen) > 60  # of the columns most show as many as they may


# ------------------------------------------------------------------ rows

def test_a_row_for_each_accepted_lake_in_input_order(lakes):
    """And the others in rejected.csv with row, column, value, rule and remedy; none is lost."""
    _, folder = lakes()
    assert [(r["row"], r["sample_id"]) for r in read(folder)] == [("2", "A-24"), ("3", "B-24"), ("5", "C-24"), ("7", "D-24")]
    torn, empty = read(folder, "rejected.csv")
    assert (torn["row"], torn["sample_id"], torn["column"], torn["value"], torn["rule"]) == ("4", "T-24", "ph", "66", "must be -1 to 15")
    assert (empty["row"], empty["sample_id"], empty["rule"]) == ("6", "E-24", "a lake needs ANC, alkalinity, all of the major ions, or pH")
    assert all(r["remedy"] for r in (torn, empty))


def test_order_of_results_is_that_of_the_file_not_of_dates_or_names(lakes):
    """Turned around, the rows come out turned around and the figures of each stay."""
    rows = (ALDER, BIRCH, CEDAR, DOCK)
    forward, back = (read(lakes(table_of(*r), out=name)[1]) for r, name in ((rows, "f"), (rows[::-1], "b")))
    assert [r["sample_id"] for r in back] == [r["sample_id"] for r in forward][::-1]
    for a, b in zip(forward, back[::-1], strict=True):
        assert {k: v for k, v in a.items() if k != "row"} == {k: b[k] for k in a if k != "row"}


def test_a_lake_alone_comes_out_as_among_others(lakes):
    """Draws, class and every other figure: rows do not see each other."""
    _, folder = lakes(draws=100)
    among = {r["sample_id"]: r for r in read(folder)}
    for row in (ALDER, CEDAR, DOCK):
        (alone,) = read(lakes(table_of(row), out=row["sample_id"], draws=100)[1])
        assert {k: v for k, v in alone.items() if k != "row"} == {k: among[row["sample_id"]][k] for k in alone if k != "row"}


def test_a_name_used_twice(lakes):
    """The first row stands; the second is refused, counted by the check, and told of."""
    words, folder = lakes(table_of(ALDER, {**CEDAR, "sample_id": "A-24"}, DOCK))
    assert [r["row"] for r in read(folder)] == ["2", "4"]
    (line,) = read(folder, "rejected.csv")
    assert (line["row"], line["column"], line["rule"]) == ("3", "sample_id", "sample_id is already used in row 2")
    check = next(r for r in read(folder, "checks.csv") if r["check"] == "duplicate names")
    assert (float(check["value"]), check["met"], check["sample_id"]) == (1.0, "no", "(all rows)")
    assert "duplicate names: 1 " in words


def test_two_faults_in_one_row_are_one_row(lakes):
    """Two lines in rejected.csv, one row in the counts; lines in the order of the file, whoever refused them."""
    words, folder = lakes(table_of({"sample_id": "nothing"}, {**ALDER, "ph": 77, "temperature_c": 99}, DOCK))
    refused = [(r["row"], r["column"]) for r in read(folder, "rejected.csv")]
    assert ([row for row, _ in refused], {column for _, column in refused[1:]}) == (["2", "3", "3"], {"ph", "temperature_c"})
    assert ", 2 rows refused." in words.splitlines()[0]
    assert json.loads((folder / "run.json").read_text())["lakes"]["refused_rows"] == 2


# ------------------------------------------------------------------ figures against values from elsewhere

def test_hawk_pond(lakes):
    """Lake 1A1-003: sums and organic anion as printed by the US EPA; loads and lime worked out apart from equations in print.

    SSWC in the concentration form with today's base cations, S 400, SO4 before 15 + 0.16 BC*, limit 20; organic anion by
    Oliver et al. 1983; lime 0.05004 g CaCO3 per meq at 70 %; time back to the limit tau ln(121.7 / 41.7).
    """
    r = read(lakes(table_of(HAWK), organic="oliver")[1])[0]
    expected = {"anc_charge_bare_ueq_l": (-50.876, 0.05), "anc_charge_ueq_l": (-45.72, 0.05), "base_cations_ueq_l": (99.396, 0.05),
                "anc_gran_ueq_l": (-21.7, 0.0), "organic_anion_ueq_l": (11.33052, 0.005), "base_cations_star_ueq_l": (90.472, 0.05),
                "sulfate_star_ueq_l": (131.629, 0.05), "f_factor": (0.34785, 5e-4), "base_cations_original_ueq_l": (51.54, 0.05),
                "critical_load_meq_m2_yr": (24.03, 0.01), "exceedance_meq_m2_yr": (27.14, 0.01), "lime_dose_ueq_l": (121.7, 0.0),
                "lime_t": (3.776, 0.002), "reacidify_yr": (0.578 * math.log(121.7 / 41.7), 0.005)}
    for name, (value, off) in expected.items():
        assert_allclose(number(r, name), value, rtol=0, atol=off + 1e-9, err_msg=name)
    assert (r["class"], r["scheme"], r["class_on"]) == ("chronically acidic", "survey_bands", "Gran ANC")
    assert (r["status"], r["pco2_uatm"], r["pco2_from"][:12]) == ("ok", "", "not stated: ")


def test_ion_sums_of_hawk_pond(lakes):
    """Ion balance and conductivity of the agency: 12.10 % with its 0.88 of bicarbonate; 23.886 µS/cm at infinite dilution.

    Here bicarbonate is that of air, 0.4, as pH and ANC leave none: 11.8 %, and H+ a little more by its activity. Conductivity is
    that times the square of the coefficient of one charge at 0.24 mmol/L (Debye-Hückel, 0.5091; Standard Methods 2510).
    """
    r = read(lakes(table_of(HAWK))[1])[0]
    h = 10.0 ** (6 - 4.79) / 0.982  # to concentration
    cations, anions = 99.396 + 5.156 + h, 150.272 + 2.853 + 1e6 * 10.0 ** (4.79 - 1.468 - 6.352) * 425e-6 * (1.0 - 0.0313)
    assert_allclose(number(r, "ion_balance_percent"), 100.0 * (anions - cations) / (anions + cations), rtol=0, atol=0.1)
    strength = 0.5e-6 * (2 * (59.281 + 16.287 + 132.457) + 17.487 + 6.341 + 5.156 + 16.22 + 9.775 + 8.04 + 2.853)
    gamma = 10.0 ** (-0.5091 * math.sqrt(strength))
    assert_allclose(number(r, "conductivity_calculated_us_cm"), 23.886 * gamma**2, rtol=5e-3)


def test_clear_water_at_air_by_hand(lakes):
    """Without organic acids the ANC at air is K0 K1 pCO2 / h - h: pH at air, acid to each pH, buffer intensity.

    At 25 °C pK0 1.468 and pK1 6.352 (Harned & Davis 1943, as in Plummer & Busenberg 1982); 425 ppm of dry air at 1 atm with
    0.0313 atm of vapor.
    """
    r = read(lakes("sample_id,temperature_c,ph,anc_ueq_l,doc_mg_l\na,25,7,100,0\n")[1])[0]
    both = 10.0 ** (-1.468 - 6.352) * 425e-6 * (1.0 - 0.0313)
    h = (-1e-4 + math.sqrt(1e-8 + 4.0 * both)) / 2.0
    assert_allclose(number(r, "ph_at_air"), -math.log10(h), rtol=0, atol=0.012)
    for ph in (6.0, 5.5, 5.0):
        left = 1e6 * (both / 10.0**-ph - 10.0**-ph)
        column = f"acid_to_ph_{str(ph).replace('.', '_')}_open_ueq_l"
        assert_allclose(number(r, column), 100.0 - left, rtol=0, atol=0.35, err_msg=column)
    assert_allclose(number(r, "buffer_open_ueq_l_ph"), 1e6 * math.log(10.0) * (both / h + h), rtol=0.01)


def test_whole_lake_and_lime_by_hand(lakes):
    """Alder: 4 m of 10 ha are 4e5 m3; 40 µeq/L above the limit are 16 keq, 784.6 kg of acid; 75 meq fall on 200 ha a year."""
    r = read(lakes(table_of(ALDER))[1])[0]
    assert number(r, "lake_volume_m3") == 4e5
    assert number(r, "acid_to_anc_limit_keq") == 16.0
    assert_allclose(number(r, "acid_to_anc_limit_h2so4_kg"), 16.0 * 98.079 / 2.0, rtol=0, atol=0.6)
    assert number(r, "net_acid_deposition_meq_m2_yr") == sum(DEPOSITION.values())
    assert_allclose(number(r, "years_to_anc_limit"), 16e3 / (0.075 * 2e6), rtol=0, atol=0.005)
    assert_allclose(number(r, "lime_t"), 40.0 * 0.0500435 / 0.7 * 0.4, rtol=0, atol=0.001)
    assert r["reacidify_yr"] == ""  # its inflow keeps it above the limit
    assert_allclose(number(r, "gas_transfer_m_d"), 0.24 * 2.637, rtol=0, atol=0.002)  # k at 10 °C and 3 m/s, Cole & Caraco 1998


def test_trend_of_the_agency_series(lakes):
    """EPA QA/G-9S: S 22, z 1.685 with its ties; Sen slope 1 (worked out apart). A value each September."""
    table = read(lakes(table_of(*series("Fir", QA_SERIES, [50] * 11)))[1], "trends.csv")
    r = next(r for r in table if r["quantity"] == "anc_gran_ueq_l")
    assert (r["site"], r["status"], r["n"], r["s"]) == ("Fir", "ok", "11", "22")
    assert_allclose(number(r, "z"), 1.68495, rtol=0, atol=5e-4)
    assert number(r, "sen_slope") == 1.0
    assert number(r, "sen_low") <= 1.0 <= number(r, "sen_high")
    assert not r["p_corrected"] or number(r, "p_corrected") >= number(r, "p")


def test_a_lake_that_recovers(lakes):
    """Sulfate 2 µeq/L less and ANC 1 more each year, exactly: S is plus or minus all 66 pairs, and the lake recovers."""
    _, folder = lakes(table_of(*series("Fir", range(10, 22), range(80, 56, -2)), *series("Gorse", [100] * 12, range(56, 80, 2))))
    found = {(r["site"], r["quantity"]): r for r in read(folder, "trends.csv")}
    up, down = found["Fir", "anc_gran_ueq_l"], found["Fir", "sulfate_ueq_l"]
    assert [(number(r, "s"), number(r, "sen_slope")) for r in (up, down)] == [(66, 1), (-66, -2)]
    assert [(r["site"], r["recovering"]) for r in read(folder, "recovery.csv")] == [("Fir", "yes"), ("Gorse", "not shown")]


# ------------------------------------------------------------------ the tables of one run agree

def test_tables_agree_on_the_class(lakes):
    """results, classes, verdicts, priorities and groups tell the same class; probabilities of a definition add up to 1."""
    _, folder = lakes(draws=200, schemes=("aquatic_status", "norway_20"))
    results, listed = read(folder), read(folder, "classes.csv")
    by_name = {r["sample_id"]: r["class"] for r in results}
    in_use = {r["sample_id"]: r["class"] for r in listed if (r["scheme"], r["in_use"], r["is_class_of_value"]) == ("aquatic_status", "yes", "yes")}
    told = {r["sample_id"]: r["verdict"].removeprefix("class by aquatic_status: ") for r in read(folder, "verdicts.csv")
            if r["verdict"].startswith("class by aquatic_status")}
    first = {r["sample_id"]: r["class"] for r in read(folder, "priorities.csv")}
    assert by_name == in_use == told == first
    assert {r["scheme"] for r in listed} == {"aquatic_status", "norway_20"}
    sums = {}
    for r in listed:
        key = (r["sample_id"], r["scheme"], r["definition"])
        sums[key] = sums.get(key, 0.0) + number(r, "probability")
    assert_allclose(list(sums.values()), 1.0, rtol=0, atol=0.02)  # classes below 0.005 have no row
    whole = read(folder, "groups.csv")[0]
    assert (whole["group"], whole["lakes"]) == ("(all)", "4")
    assert int(whole["lakes_acute_concern"]) == list(by_name.values()).count("acute concern") == 1


def test_every_warning_has_its_verdict(lakes):
    """Names in the column of warnings are those of verdicts.csv that warn, each with rule and source; no other."""
    _, folder = lakes()
    verdicts, results = read(folder, "verdicts.csv"), read(folder)
    assert all(r["rule"] and r["source"] and r["quantity"] for r in verdicts)
    for r in results:
        warned = {v["verdict"].split(": ")[-1] for v in verdicts if v["sample_id"] == r["sample_id"] and v["warned"] == "yes"}
        assert set(filter(None, r["warnings"].split("; "))) == warned
    assert results[2]["warnings"].startswith("chronically acidic; below pH 6")


def test_failed_checks_are_those_of_the_table_of_checks(lakes):
    """By name, lake for lake."""
    _, folder = lakes(table_of(ALDER, {**CEDAR, "sulfate_ueq_l": 400}, DOCK))
    unmet = {(r["sample_id"], r["check"]) for r in read(folder, "checks.csv") if r["met"] == "no"}
    named = {(r["sample_id"], name) for r in read(folder) for name in r["failed_checks"].split("; ") if name}
    assert named == unmet
    assert ("C-24", "ion balance with organic anions") in named


def test_loads_episodes_and_deposition_follow_their_laws(lakes):
    """First variant is the chosen one; ANC of mixtures lies on a line to that of the rain, -45 µeq/L; no change changes nothing."""
    _, folder = lakes(deposition_changes=(-30.0,))
    results = {r["sample_id"]: r for r in read(folder)}
    loads = read(folder, "critical_loads.csv")
    assert "D-24" not in {r["sample_id"] for r in loads}
    for name in ("A-24", "B-24", "C-24"):
        own = [r for r in loads if r["sample_id"] == name]
        assert_allclose(number(own[0], "critical_load_meq_m2_yr"), number(results[name], "critical_load_meq_m2_yr"), rtol=0, atol=0.006)
        of_method = [number(r, "critical_load_meq_m2_yr") for r in own if r["variant"].startswith(("as chosen", "F ", "original", "variable"))]
        low, high = (number(results[name], f"critical_load_{end}_meq_m2_yr") for end in ("lowest", "highest"))
        assert len(of_method) >= 7
        assert low - 0.006 <= min(of_method) < max(of_method) <= high + 0.006
    for r in read(folder, "episodes.csv"):
        share, used = number(r, "event_fraction"), number(results[r["sample_id"]], "anc_used_ueq_l")
        assert_allclose(number(r, "anc_ueq_l"), (1.0 - share) * used + share * (15 - 40 - 20) / 1.0, rtol=0, atol=1e-3)
    assert number(results["A-24"], "episode_anc_ueq_l") == 0.6 * 60 - 0.4 * 45
    changes = read(folder, "deposition.csv")
    assert {r["sulfur_deposition_change_percent"] for r in changes} == {"0.0", "-30.0"}
    for r in changes:
        of = results[r["sample_id"]]
        less = number(r, "sulfur_deposition_change_percent") / 100.0 * 40.0
        assert_allclose(number(r, "exceedance_meq_m2_yr"), number(of, "exceedance_meq_m2_yr") + less, rtol=0, atol=0.006)
        if of["sample_id"] == "A-24":  # its sulfate lies above the one before acid rain
            assert (number(r, "anc_change_ueq_l") > 0.0) == (less < 0.0)


def test_liming_has_a_row_for_each_lake_below_the_target(lakes):
    """What takes up the dose adds up to it, and the hazard stands beside it."""
    _, folder = lakes()
    limed = read(folder, "liming.csv")
    below = [r["sample_id"] for r in read(folder) if number(r, "anc_used_ueq_l") < 100.0]
    assert [r["sample_id"] for r in limed] == below == ["A-24", "C-24", "D-24"]
    for r in limed:
        assert r["hazard"] == "dust irritates eyes and airways"
        parts = [number(r, name) for name in r if name.startswith("taken_by_") and r[name]]
        assert not parts or abs(sum(parts) - number(r, "lime_dose_ueq_l")) < 0.06


def test_the_latest_sample_stands_for_its_lake(lakes):
    """Each sample has its row in results.csv; priorities and groups count a lake once, by its latest date, not its last row."""
    old, new = {**ALDER, "sample_id": "old", "date": "2019-06-01", "anc_ueq_l": -5}, {**ALDER, "sample_id": "new", "date": "2023-06-01"}
    words, folder = lakes(table_of(new, old, CEDAR))
    assert len(read(folder)) == 3
    assert [r["sample_id"] for r in read(folder, "priorities.csv")] == ["C-24", "new"]
    assert read(folder, "groups.csv")[0]["lakes"] == "2"
    assert words.startswith("lakes.csv: 2 lakes from 3 samples assessed, ")


def test_a_change_of_method_is_no_trend(lakes):
    """Twenty more from the year another laboratory took over: told as a step, and the trend is of either method alone."""
    rows = series("Fir", [10] * 6 + [30] * 6, [50] * 12)
    for k, row in enumerate(rows):
        row["analysis_method"] = "county" if k < 6 else "board"
    r = next(r for r in read(lakes(table_of(*rows))[1], "trends.csv") if r["quantity"] == "anc_gran_ueq_l")
    assert (number(r, "s"), number(r, "sen_slope"), r["step_from"], r["step_to"], number(r, "step")) == (0, 0, "county", "board", 20)


def test_long_tables_list_unmet_checks_only(lakes, monkeypatch):
    """Beyond a number of lakes checks.csv holds what needs attention; up to it, everything."""
    text = table_of(ALDER, {**CEDAR, "sulfate_ueq_l": 400}, DOCK)
    assert {r["met"] for r in read(lakes(text)[1], "checks.csv") if r["row"]} == {"yes", "no"}
    monkeypatch.setattr("aquabuf.report.lake_run.ALL_CHECKS_UP_TO", 2)
    assert {r["met"] for r in read(lakes(text, out="few")[1], "checks.csv") if r["row"]} == {"no"}


# ------------------------------------------------------------------ figures

def test_figures_of_a_run(table, tmp_path):
    """Survey and trends as PNG and SVG, the same bytes again, without path or date; none where --no-figure was said."""
    text = table_of(ALDER, CEDAR, *series("Fir", QA_SERIES, range(80, 58, -2)))
    files = LakeFiles(survey=table(text, "lakes.csv"))
    drawn = []
    for name in ("a", "b"):
        words = assess_survey(files, tmp_path / name, LakeOptions(draws=0))
        drawn.append({n: b for n, b in contents(tmp_path / name).items() if n.endswith((".png", ".svg"))})
    assert set(drawn[0]) == {"lakes.png", "lakes.svg", "trends.png", "trends.svg"}
    assert "lakes.png, lakes.svg, trends" in " ".join(words.split())
    assert drawn[0] == drawn[1]
    for name, content in drawn[0].items():
        assert content.startswith(b"\x89PNG") if name.endswith("png") else b"<svg" in content
        assert str(tmp_path).encode() not in content
        assert b"dc:date" not in content
    assess_survey(files, tmp_path / "a", LakeOptions(draws=0), force=True, figure=False)
    assert not {p.suffix for p in (tmp_path / "a").iterdir()} & {".png", ".svg"}
