"""`aquabuf lake`: exit codes and where text goes, what each option does, the record, and the same bytes again."""

import csv
import hashlib
import json
import math
import os
import re
import subprocess
import sys
from dataclasses import asdict
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

import aquabuf
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.tables import read_table

sys.path.insert(0, str(Path(__file__).parents[1] / "report"))

from lake_tables import (
    ALDER,
    CEDAR,
    DOCK,
    EMPTY,
    EVENT,
    EVENT_ANC,
    HAWK,
    QA_SERIES,
    SCHEME,
    SURVEY,
    SURVEY_ROWS,
    charge,
    organic_left_by_gran,
    series,
    table_of,
)

DEMO = Path(aquabuf.__file__).parents[1] / "field_data"
QUICK = ("--draws", "0", "--no-figure")


@pytest.fixture
def lake(call, table):
    """Run `aquabuf lake` on a survey, by default without draws and figures, into the folder `o`."""
    def go(*words, text=SURVEY, name="t.csv", out="o"):
        return call("lake", table(text, name), "--out", out, *QUICK, *words)
    return go


def rows(name="results.csv", folder="o"):
    """A table of the run as text cells."""
    with (Path(folder) / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def by_name(name="results.csv", folder="o"):
    """The rows of a table by sample."""
    return {r["sample_id"]: r for r in rows(name, folder)}


def record(folder="o"):
    """The run record."""
    return json.loads((Path(folder) / "run.json").read_text(encoding="utf-8"))


def contents(folder="o"):
    """All bytes by name, hidden files too."""
    return {path.name: path.read_bytes() for path in Path(folder).iterdir()}


# ------------------------------------------------------------------ exit codes and streams

def test_done(lake):
    """Summary to standard output, nothing to standard error, exit code 0, in a folder that is made for it."""
    done = lake(out="deep/o")
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("t.csv: 4 lakes assessed, ")
    assert [r["sample_id"] for r in rows(folder="deep/o")] == ["A-24", "B-24", "C-24", "D-24"]


def test_notice_of_a_long_run_goes_to_standard_error(call, table, monkeypatch):
    """With draws and many lakes alone, with the way out; standard output stays the summary."""
    monkeypatch.setattr("aquabuf.report.lake_run.NOTICE_FROM", 3)
    done = call("lake", table(SURVEY), "--out", "a", "--draws", "100", "--no-figure")
    assert done.stderr.startswith("100 draws for each of 5 lakes")
    assert "--draws 0 leaves intervals and probabilities out" in " ".join(done.stderr.split())
    assert done.stdout.startswith("t.csv: 4 lakes")
    assert call("lake", "t.csv", "--out", "b", *QUICK).stderr == ""
    monkeypatch.setattr("aquabuf.report.lake_run.NOTICE_FROM", 5)
    assert call("lake", "t.csv", "--out", "c", "--draws", "100", "--no-figure").stderr == ""


WRONG = [
    (("--draws", "5"), "draws must be 0 or from 100 to 100000; found 5. Use 1000"), (("--draws", "many"), "'many' is not a valid integer"),
    (("--seed", "-1"), "seed must be 0 or more; found -1"), (("--air-co2-ppm", "0"), "air CO2 must be from 1 to 1e+06; found 0"),
    (("--event-fraction", "40"), "share of event water must be from 0 to 1; found 40. Give 40 % as 0.4"),
    (("--lime-anc", "nan"), "liming target must be from -1000 to 10000; found nan"),
    (("--lime-ph", "12"), "liming target pH must be from 4 to 9; found 12. Planning takes 6.0 to 6.5"),
    (("--deposition-change", "-200"), "change of deposition must be from -100 to 1000; found -200. Give percent"),
    (("--deposition-change", "half"), "must be numbers with commas between, such as 6.0,5.5; found 'half'"),
    (("--thresholds", "99"), "pH threshold must be from 2 to 12; found 99"), (("--thresholds", "5;6"), "must be numbers with commas between"),
    (("--by", "county"), "group must be one of region, site, water_kind; found 'county'"),
    (("--wind-relation", "gale"), "wind relation must be one of cole_caraco, vachon_prairie; found 'gale'"),
    (("--marine-constants", "x"), "'x' is not one of 'millero', 'lueker'"),
    (("--titration-samples", "s.csv"), "need --titrations. Name the file of points"),
    (("--titration-map", "m.toml"), "need --titrations"), (("--nonsense",), "No such option"),
    (("--scheme", "survey_band"), "a scheme must be one of survey_bands, aquatic_status,"), (("--scheme", "survey_band"), "Did you mean survey_bands?"),
    (("--organic", "peat"), "organic acid model must be one of oliver, hruska, hruska_b, hruska_czech, fakhraei, or SITES:PK,PK,PK"),
    (("--organic", "10:6,4,3"), "pK rising; found '10:6,4,3'. Write for example 10.2:3.04,4.51,6.46"),
    (("--critical-load", "flux gale"), "words of a critical load must be among concentration, flux,"),
    (("--critical-load", "norway sweden"), "a critical load takes one; found 'norway' and 'sweden'. Drop one"),
    (("--critical-load", "s=much"), "must hold a number; found s=much"),
    (("--anc-limit", "much"), "ANC limit must be a number of µeq/L within 1000 of zero or one of uk_0, norway_20,"),
    (("--anc-limit", "nan"), "found 'nan'. Write for example 20"), (("--anc-limit", "5000"), "found '5000'"),
    (("--lime", "chalk"), "liming product must be one of limestone, dolomite,"),
]


@pytest.mark.parametrize(("words", "message"), WRONG, ids=[" ".join(w) + str(k) for k, (w, _) in enumerate(WRONG)])
def test_wrong_usage(lake, words, message):
    """A value that no option takes: exit code 2, rule, value and remedy in the message, and no folder."""
    done = lake(*words)
    assert (done.exit_code, done.stdout) == (2, "")
    assert message in done.stderr
    assert not Path("o").exists()


def test_help_names_every_default(call):
    """Defaults in the help are those of the options: no second truth."""
    text = " ".join(call("lake", "--help").stdout.split())
    options = LakeOptions()
    for option, value in (("--organic", options.organic), ("--anc-limit", options.anc_limit), ("--event-fraction", f"{options.event_fraction:g}"),
                          ("--lime", options.lime), ("--lime-anc", f"{options.lime_anc_ueq_l:g}"), ("--draws", options.draws), ("--seed", options.seed),
                          ("--by", options.group), ("--wind-relation", options.wind_relation), ("--scheme", options.schemes[0]),
                          ("--deposition-change", ",".join(f"{c:g}" for c in options.deposition_changes))):
        assert re.search(rf"{option} [A-Z](?:(?! --).)*\[default: {re.escape(str(value))}\]", text), option


def test_defaults_of_the_command_are_those_of_the_options(call, table):
    """No second set of defaults."""
    call("lake", table(), "--out", "o", "--no-figure")
    assert record()["options"] == json.loads(json.dumps(asdict(LakeOptions())))


# ------------------------------------------------------------------ what each option does

def test_ammonium_moves_the_charge_balance_by_itself(lake):
    """Left out, each charge-balance ANC falls by exactly the ammonium; what was titrated, or is on that scale, and pH stay."""
    bare_dock = {k: v for k, v in DOCK.items() if k != "doc_mg_l"} | {"sample_id": "N-24", "site": "Nook Water"}
    text = table_of(*SURVEY_ROWS, bare_dock)
    lake(text=text, out="with")
    lake("--no-ammonium", text=text, out="without")
    counted, bare = by_name(folder="with"), by_name(folder="without")
    for name, r in counted.items():
        assert_allclose(float(r["anc_charge_ueq_l"]) - float(bare[name]["anc_charge_ueq_l"]), float(r["ammonium_ueq_l"]), rtol=0, atol=1e-9)
        assert (r["anc_charge_form"], bare[name]["anc_charge_form"]) == ("with ammonium", "without ammonium")
        for column in ("anc_gran_ueq_l", "alkalinity_ueq_l", "anc_gran_of_ions_ueq_l", "ph", "ph_at_air"):
            assert r[column] == bare[name][column], (name, column)
    assert counted["D-24"]["anc_used_ueq_l"] == bare["D-24"]["anc_used_ueq_l"] == f"{charge(DOCK) - organic_left_by_gran(1):.1f}"
    assert counted["N-24"]["anc_used_ueq_l"] == f"{charge(DOCK):.1f}"
    assert bare["N-24"]["anc_used_ueq_l"] == f"{charge(DOCK, ammonium=False):.1f}"


@pytest.mark.parametrize(("text", "limit"), [("39", 39.0), ("norway_20", 20.0), ("trout_1995", 67.0), ("-5", -5.0), ("uk_0", 0.0)])
def test_anc_limit(lake, text, limit):
    """A number or a name of the shipped table; ANC above it; and the critical load falls by runoff times the limit."""
    lake("--anc-limit", text)
    lake(out="usual")
    r, usual = by_name()["A-24"], by_name(folder="usual")["A-24"]
    assert float(r["anc_limit_ueq_l"]) == limit
    assert float(r["acid_to_anc_limit_ueq_l"]) == 60.0 - limit
    assert_allclose(float(r["critical_load_meq_m2_yr"]) - float(usual["critical_load_meq_m2_yr"]), 0.7 * (20.0 - limit), rtol=0, atol=0.011)
    assert record()["anc_limit"].startswith(f"ANC limit {limit:g} µeq/L (")


def test_variable_anc_limit(lake):
    """A quarter of the critical load, at most 50: Henriksen et al. 1995. Runoff times original base cations stays the sum."""
    lake("--anc-limit", "variable")
    for name in ("A-24", "B-24", "C-24"):
        r = by_name()[name]
        load, limit = float(r["critical_load_meq_m2_yr"]), float(r["anc_limit_ueq_l"])
        assert_allclose(limit, min(0.25 * load, 50.0), rtol=0, atol=0.06)
        assert_allclose(load, 0.7 * (float(r["base_cations_original_ueq_l"]) - limit), rtol=0, atol=0.08)
    assert "variable ANC limit" in " ".join(Path("o/report.txt").read_text(encoding="utf-8").split())


@pytest.mark.parametrize(("words", "load"), [("", 24.03), ("original", 32.80), ("flux original", 36.49), ("original sweden", 30.32),
                                             ("sweden, original", 30.32)])
def test_words_of_the_critical_load(lake, words, load):
    """Hawk Pond by each variant: worked out apart from equations in print."""
    lake("--critical-load", words, text=table_of(HAWK))
    assert_allclose(float(rows()[0]["critical_load_meq_m2_yr"]), load, rtol=0, atol=0.02)
    assert_allclose(float(rows()[0]["exceedance_meq_m2_yr"]), 43.72 + 0.762 * 9.775 - load, rtol=0, atol=0.02)


def test_organic_acids_of_your_own(lake):
    """One acid whose three pK lie together at 3 is all anion at pH 6.5: 9 µeq per mg of carbon; the third of Oliver's 10 is 3.33."""
    lake("--organic", "9:1,2,3")
    lake("--organic", "oliver", out="oliver")
    r = by_name()["A-24"]
    assert_allclose(float(r["organic_anion_ueq_l"]), 2 * 9.0, rtol=0, atol=0.03)
    assert_allclose(float(r["anc_organic_corrected_ueq_l"]), charge(ALDER) - 2 * 9.0 / 3.0, rtol=0, atol=1e-9)
    ph = 6.5
    share = 1.0 / (1.0 + 10.0 ** (0.96 + 0.90 * ph - 0.039 * ph**2 - ph))  # Oliver et al. 1983
    assert_allclose(float(by_name(folder="oliver")["A-24"]["organic_anion_ueq_l"]), 20.0 * share, rtol=0, atol=0.01)
    assert "organic anions by own: 9 µeq" in " ".join(Path("o/report.txt").read_text(encoding="utf-8").split()).replace("Organic", "organic")


@pytest.mark.parametrize("product", read_table("lime_products"), ids=lambda p: p["name"])
def test_lime_products(lake, product):
    """Dose of 40 µeq/L by molar mass over the acid bound (IUPAC masses), and the share that dissolves."""
    grams, bound = {"limestone": (100.086, 2), "dolomite": (184.399, 4), "magnesium carbonate": (84.313, 2),
                    "half-burnt dolomite": (140.390, 4), "magnesium oxide": (40.304, 2), "hydrated lime": (74.092, 2),
                    "quicklime": (56.077, 2), "sodium bicarbonate": (84.006, 1), "soda ash": (105.988, 2)}[product["name"]]
    lake("--lime", product["name"])
    assert_allclose(float(by_name()["A-24"]["lime_g_m3"]), 40e-3 * grams / bound / float(product["dissolved_usual"]), rtol=0, atol=0.006)
    limed = by_name("liming.csv")["A-24"]
    assert (limed["product"], limed["hazard"]) == (product["name"], product["hazard"])


def test_lime_to_a_ph(lake):
    """Clear water to pH 6.5 at air: K0 K1 pCO2 / h - h is the ANC to reach, 19.5 µeq/L at 25 °C (pK0 1.468, pK1 6.352, vapor 0.0313 atm)."""
    lake("--lime-ph", "6.5", text="sample_id,temperature_c,ph,anc_ueq_l,doc_mg_l\na,25,4.9,-10,0\nb,25,7,300,0\n")
    both = 10.0 ** (-1.468 - 6.352) * 425e-6 * (1.0 - 0.0313)
    assert_allclose(float(by_name()["a"]["lime_dose_ueq_l"]), 1e6 * (both / 10**-6.5 - 10**-6.5) + 10.0, rtol=0, atol=0.6)
    assert list(by_name("liming.csv")) == ["a"]
    assert float(by_name("liming.csv")["a"]["lime_ph_at_air"]) == 6.5
    assert by_name("liming.csv")["a"]["target"] == "pH 6.5 at air"


def test_event_water(lake, table):
    """The largest share of the file: half the lake's ANC and half of -30; shares of the file in episodes.csv; all of it told."""
    table(EVENT, "melt.toml")
    done = lake("--event", "melt.toml")
    for name, anc in (("A-24", 60.0), ("C-24", -20.0), ("D-24", charge(DOCK) - organic_left_by_gran(1))):
        assert_allclose(float(by_name()[name]["episode_anc_ueq_l"]), 0.5 * anc + 0.5 * EVENT_ANC, rtol=0, atol=0.05)
    assert {r["event_fraction"] for r in rows("episodes.csv")} == {"0.2", "0.5"}
    assert "Episode: 50 % of event water mixed in" in done.stdout
    assert "first melt" in done.stdout
    assert record()["sha256"]["event"] == hashlib.sha256(EVENT.encode()).hexdigest()


def test_event_fraction_and_deposition_change(lake):
    """A quarter of rain of -45 µeq/L; the changes asked for, and none first."""
    lake("--event-fraction", "0.25", "--deposition-change", "-80, 10")
    assert_allclose(float(by_name()["A-24"]["episode_anc_ueq_l"]), 0.75 * 60 - 0.25 * 45, rtol=0, atol=0.051)
    assert list(dict.fromkeys(float(r["sulfur_deposition_change_percent"]) for r in rows("deposition.csv"))) == [0.0, -80.0, 10.0]


def test_schemes(lake, table):
    """Your own first gives the class and its rule; a shipped one stands beside it."""
    table(SCHEME, "own.toml")
    lake("--scheme", "own.toml", "--scheme", "sweden_alkalinity")
    assert {n: r["class"] for n, r in by_name().items()} == {"A-24": "sound", "B-24": "sound", "C-24": "poor", "D-24": "sound"}
    assert {r["scheme"] for r in rows()} == {"two_steps"}
    own = next(r for r in rows("verdicts.csv") if (r["sample_id"], r["verdict"]) == ("C-24", "class by two_steps: poor"))
    assert (own["rule"], own["source"], own["warned"], own["next_step"]) == ("Gran ANC <= 30 µeq/L", "invented", "yes", "sample the melt")
    assert {r["scheme"] for r in rows("classes.csv")} == {"two_steps", "sweden_alkalinity"}


@pytest.mark.parametrize(("by", "groups"), [("region", ["(all)", "north", "south"]), ("water_kind", ["(all)"]),
                                            ("site", ["(all)", "Alder Tarn", "Birch Mere", "Cedar Pool", "Dock Water"])])
def test_groups(lake, by, groups):
    """A row for all lakes and one for each word of the column; counts add up."""
    lake("--by", by)
    table = rows("groups.csv")
    assert [r["group"] for r in table] == groups
    assert {r["grouped_by"] for r in table} == {by}
    assert sum(int(r["lakes"]) for r in table[1:]) in (0, int(table[0]["lakes"]))


def test_thresholds_seed_air_and_wind_reach_the_answers(lake):
    """Columns for the pH asked for beside the three; other air, other pH at air; another relation, another velocity."""
    lake("--thresholds", "4.7, 6", "--air-co2-ppm", "850", "--wind-relation", "vachon_prairie", "--seed", "9", "--marine-constants", "lueker")
    lake(out="usual")
    r, usual = by_name()["A-24"], by_name(folder="usual")["A-24"]
    assert "acid_to_ph_4_7_open_ueq_l" in r
    assert_allclose(float(usual["ph_at_air"]) - float(r["ph_at_air"]), math.log10(2.0), rtol=0, atol=0.04)  # about log 2 where bicarbonate carries
    assert record()["options"] | {"thresholds": 0} == json.loads(json.dumps(asdict(LakeOptions(draws=0, air_co2_ppm=850.0, seed=9, carbonic="lueker",
                                                                                             wind_relation="vachon_prairie")))) | {"thresholds": 0}
    k600 = 2.51 + 1.48 * 3.0 + 0.39 * 3.0 * math.log10(0.1)  # cm/h, Vachon & Prairie 2013, of 10 ha
    assert_allclose(float(r["gas_transfer_m_d"]), 0.24 * k600 * math.sqrt(600.0 / 1033.95), rtol=0, atol=0.002)  # Schmidt number at 10 °C


# ------------------------------------------------------------------ other files that may come along

def test_titrations_give_the_anc(call, table):
    """Two tarns of the demo: what the readings said is gone, the Gran result stands with its error."""
    text = "sample_id,temperature_c,ph,anc_ueq_l\nUT-base,10,6.7,500\nCS-melt,1,5,\nelsewhere,10,6.5,30\n"
    done = call("lake", table(text), "--out", "o", "--draws", "400", "--no-figure", "--titrations", DEMO / "titration_points.csv",
                "--titration-samples", DEMO / "titration_samples.csv")
    assert done.exit_code == 0, done.stderr
    found = by_name()
    # README of the demo: an ANC of exactly 50 went into UT-base; CS-melt is acid
    assert float(found["UT-base"]["anc_gran_ueq_l_low"]) < 50.0 < float(found["UT-base"]["anc_gran_ueq_l_high"])
    assert_allclose(float(found["UT-base"]["anc_gran_ueq_l"]), 50.0, rtol=0, atol=5.0)
    assert float(found["CS-melt"]["anc_gran_ueq_l"]) < 0.0
    assert found["elsewhere"]["anc_gran_ueq_l"] == "30.0"
    assert [found[n]["anc_used_from"] for n in ("UT-base", "CS-melt")] == ["Gran ANC", "Gran ANC"]
    assert found["elsewhere"]["anc_used_from"] == "Gran ANC (method unstated)"
    told = " ".join(done.stdout.split())
    assert "2 samples is the recommended result of their titration in titration_points.csv (gran 2); in 1 of them it took the place" in told
    assert set(record()["sha256"]) == {"readings", "titration points", "titration samples"}
    assert record()["sha256"]["titration points"] == hashlib.sha256((DEMO / "titration_points.csv").read_bytes()).hexdigest()


def test_long_table_of_the_exchange(call):
    """The shipped map reads it, blanks and replicates left out; refused results keep their lake; none of the twelve is lost."""
    done = call("lake", DEMO / "lake_results_long.csv", "--map", "wqx", "--out", "o", *QUICK)
    assert done.exit_code == 0, done.stderr
    with (DEMO / "lake_results_long.csv").open(encoding="utf-8", newline="") as stream:
        names = list(dict.fromkeys(r["ActivityIdentifier"] for r in csv.DictReader(line for line in stream if not line.startswith("#"))
                                   if r["ActivityTypeCode"] == "Sample-Routine"))
    assert [r["sample_id"].removeprefix("AMBREL_") for r in rows()] == names
    assert len(names) == 12
    assert len({r["row"] for r in rows("rejected.csv")}) == 4  # its second line: four results are wrong on purpose
    assert "map" in record()["sha256"]


def test_map_limits_and_own_scheme_are_told(lake, table):
    """Someone else's headers, and the user's own rule among the warnings with its source."""
    table('[columns]\n"Station" = "sample_id"\n"Gran" = "anc (µeq/L)"\n', "m.toml")
    table('only_mine = true\n[limits."house rule"]\nquantity = "anc_used_ueq_l"\noperator = "<"\nlimit = 70\nwords = "below our line"\n'
          'source = "board"\n', "l.toml")
    done = lake("--map", "m.toml", "--limits", "l.toml", text="Station;Gran\nx;60,5\ny;90,5\n")
    assert done.exit_code == 0, done.stderr
    assert [r["warnings"] for r in rows()] == ["house rule", ""]
    verdict = next(r for r in rows("verdicts.csv") if r["verdict"] == "house rule")
    assert (verdict["rule"], verdict["value"], verdict["warned"], verdict["source"]) == ("anc_used_ueq_l < 70 µeq/L", "60.5", "yes", "board")
    assert set(record()["sha256"]) == {"readings", "map", "limits"}


# ------------------------------------------------------------------ the record, and the same bytes again

def test_run_record(lake, table):
    """Version, files by name and hash (hashlib over the bytes), options, counts, rules in words; no date, no clock."""
    table(SCHEME, "own.toml")
    lake("--scheme", "own.toml", "--scheme", "uk_0", "--seed", "7")
    found = record()
    assert (found["program"], found["version"], found["command"]) == ("aquabuf", aquabuf.__version__, "lake")
    assert found["lakes"] == {"rows": 4, "lakes": 4, "warned": sum(r["warnings"] != "" for r in rows()), "refused_rows": 2}
    assert (found["files"]["readings"], found["sha256"]["readings"]) == ("t.csv", hashlib.sha256(SURVEY.encode()).hexdigest())
    assert (found["options"]["seed"], found["options"]["draws"]) == (7, 0)
    assert sum(found["status"].values()) == 4
    assert found["anc_from"] == {"Gran ANC": 2, "alkalinity (method unstated)": 1, "Gran ANC of the ions": 1}
    assert [s["name"] for s in found["schemes"]] == ["two_steps", "uk_0"]
    assert found["schemes"][0]["classes"] == ["Gran ANC <= 30 µeq/L", "Gran ANC > 30 µeq/L"]
    assert {x["name"] for x in found["limits"]} == {r["name"] for r in read_table("lake_limits")}
    assert found["constants"] == [dict(r) for r in read_table("constants") if r["regime"] != "salt"]
    assert not re.search(r"20\d\d-\d\d-\d\d|(?<!\d)\d\d:\d\d(?!\d)", json.dumps({k: v for k, v in found.items() if k not in ("constants", "limits")}))


def test_no_path_in_any_file(lake, table, tmp_path):
    """A scheme and an event of one's own are named by their files, wherever these lie."""
    table(SCHEME, "own.toml")
    table(EVENT, "melt.toml")
    done = lake("--scheme", tmp_path / "own.toml", "--event", tmp_path / "melt.toml")
    assert str(tmp_path) not in done.stdout
    assert [name for name, content in contents().items() if str(tmp_path).encode() in content] == []


def test_a_scheme_of_your_own_is_hashed(lake, table):
    """The classes rest on that file as on any other input."""
    table(SCHEME, "own.toml")
    lake("--scheme", "own.toml")
    assert hashlib.sha256(SCHEME.encode()).hexdigest() in record()["sha256"].values()


def test_same_input_same_bytes(tmp_path, table):
    """Two processes whose hashes of text differ write the same bytes and print the same text; another seed does not."""
    text = table_of(ALDER, CEDAR, DOCK, EMPTY, *series("Fir", QA_SERIES, range(80, 58, -2)), *series("Elm", range(11), range(80, 58, -2)))
    (tmp_path / table(text)).touch()

    def run(out, seed, salt):
        done = subprocess.run([sys.executable, "-c", "from aquabuf.cli.main import main; main()", "lake", "t.csv", "--out", out, "--draws", "100",
                               "--seed", seed, "--no-figure", "--scheme", "survey_bands", "--scheme", "uk_0"],
                              cwd=tmp_path, env={**os.environ, "PYTHONHASHSEED": salt}, capture_output=True, check=True)
        return done.stdout, contents(tmp_path / out)

    first, again, other = run("a", "1", "1"), run("b", "1", "4242"), run("c", "2", "1")
    assert first == again
    assert {"trends.csv", "recovery.csv", "rejected.csv", "run.json"} <= set(first[1])
    assert first[1]["results.csv"] != other[1]["results.csv"]
