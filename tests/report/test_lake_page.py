"""The pages on lakes repeat the shipped tables, name every file and column, and tell numbers that a run gives."""

import json
import os
import re
from dataclasses import replace
from functools import cache
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner
from lake_tables import organic_left_by_gran
from numpy.testing import assert_allclose

from aquabuf.assess.lake import quality, survey, trend, trend_words, trends, words
from aquabuf.assess.lake.budget import GRAN_PH, NEEDED, anc_kinds, budget, left_out_by_gran
from aquabuf.assess.lake.chemistry import chemistry, choose_sources
from aquabuf.assess.lake.classes import SECOND_SHARE
from aquabuf.assess.lake.co2 import co2_tests
from aquabuf.assess.lake.critical_choice import (
    BASE_CATIONS_AT,
    EXCESS,
    FORMS,
    CriticalLoadChoice,
    _words,
    sulfate_backgrounds,
)
from aquabuf.assess.lake.critical_variants import full_factorial
from aquabuf.assess.lake.episode import CHANGES, WEAK_CHANGES
from aquabuf.assess.lake.inputs import ORGANIC_U_REL, Lakes, setting_of
from aquabuf.assess.lake.liming import DEMANDS, lime_products
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.recovery import VERDICTS
from aquabuf.assess.lake.schemes import QUANTITIES, shipped_schemes
from aquabuf.assess.lake.simple_lake import NITROGEN_VELOCITIES_M_YR, SULFUR_VELOCITY_M_YR
from aquabuf.assess.sample.inputs import values_of
from aquabuf.chem.organic import organic_models
from aquabuf.chem.transfer import transfer_relations
from aquabuf.cli.main import main
from aquabuf.readings.reader import read_readings
from aquabuf.report import lake_run
from aquabuf.report.lake_run import OUTPUT_FILES, LakeFiles, assess_survey
from aquabuf.tables import read_table
from aquabuf.units import key

ROOT = Path(__file__).parents[2]
GUIDE, COLUMNS = ((ROOT / "docs" / f"{name}.md").read_text(encoding="utf-8") for name in ("lake", "lake_results"))
FLAT = " ".join(GUIDE.split())
SECTIONS = {part.split("\n")[0]: part for page in (GUIDE, COLUMNS) for part in page.split("\n## ")[1:]}


def cells(line):
    """Cells of a line of a table."""
    return [cell.strip() for cell in line[1:-1].split(" | ")] if line.startswith("|") else []


def rows(section, head):
    """Rows of the table of a section that has this first header, without it and its rule."""
    lines = SECTIONS[section].splitlines()
    start = next(i for i, line in enumerate(lines) if cells(line)[:1] == [head])
    end = next((i for i in range(start, len(lines)) if not lines[i].startswith("|")), len(lines))
    return [cells(line) for line in lines[start + 2:end]]


def code(name):
    """A name as the pages set it."""
    return f"`{name}`"


def recalled(row):
    """The word behind a source that was not read again."""
    return " (recalled)" if row["mark"] == "recalled" else ""


# ------------------------------------------------------------------ tables


def expected_needs():
    """Answers with the readings that each needs; all major ions in one word."""
    ions = [(ion,) for ion in NEEDED]
    for answer in words._ANSWERS:
        needs = [" or ".join(w if w == "all major ions" else code(w) for w in need) for need in answer.needs if need not in ions]
        needs += ["all major ions"] if all(ion in answer.needs for ion in ions) else []
        yield [answer.label, code(answer.column), "; ".join(needs)]


def expected_schemes():
    """Schemes with the rule of each class; * where it is at risk."""
    for s in shipped_schemes().values():
        rules = [s.rule(i).removeprefix(QUANTITIES[s.quantity]).removesuffix(" µeq/L").strip() for i in range(len(s.classes))]
        classes = "; ".join(f"{c.name}{'*' * c.at_risk} {rule}" for c, rule in zip(s.classes, rules, strict=True))
        yield [code(s.name), QUANTITIES[s.quantity], ", ".join(QUANTITIES[d] for d in s.stand_ins), classes, s.source]


def expected_words():
    """Words of the critical load that have a fact behind them."""
    for name, f in FORMS.items():
        yield name, f"F by {f.words}, S = {f.s_scale * f.units:g} {f.unit} ({f.source})"
    yield from ((name, f"F {said}") for name, said in BASE_CATIONS_AT.items())
    yield from ((name, f"sulfate before acid deposition {b.in_words()}") for name, b in sulfate_backgrounds().items())
    yield from ((name, f"that sulfate is {said}") for name, said in EXCESS.items())


TABLES = {
    ("What each answer needs", "answer"): list(expected_needs()),
    ("Which ANC is which", "model"): [
        [code(r["name"]), r["sites_ueq_mg"], r["pk"].replace(";", ", ") or "rises with pH", r["words"], r["mark"], r["source"]]
        for r in read_table("organic_acids")],
    ("Sensitivity classes", "scheme"): list(expected_schemes()),
    ("Critical load", "name"): [
        [code(r["name"]), r["limit_ueq_l"] or "0 to 50", r["organism"], r["words"], r["source"]] for r in read_table("anc_limits")],
    ("Episodes", "column"): [[code(f"change_{name}_ueq_l"), said] for name, said in {**CHANGES, **WEAK_CHANGES}.items()],
    ("Liming", "product"): [
        [code(p.name), f"{p.neutralizing_value_pct:.1f}", f"{p.dissolved_low:g}, {p.dissolved_usual:g}, {p.dissolved_high:g}",
         p.words, p.hazard, p.source] for p in lime_products().values()],
    ("Liming", "column"): [[code(f"taken_by_{name}_ueq_l"), said] for name, said in DEMANDS.items()],
    ("Trends and recovery", "verdict"): [list(pair) for pair in VERDICTS.items()],
    ("Quality checks", "check"): [
        [r["name"], r["unit"], r["limit_words"] + (f": at most {r['high']}" if r["high"] else ""), r["remedy"], r["mark"], r["source"]]
        for r in read_table("lake_checks")],
    ("Limits", "name"): [
        [r["name"], f"`{r['quantity']} {r['operator']} {r['limit']}` {r['unit']}", r["words"], r["next_step"], r["source"] + recalled(r)]
        for r in read_table("lake_limits")],
    ("results.csv", "column"): [
        [code(r["name"]), r["unit"], r["digits"], r["interval"], r["meaning"]] for r in read_table("lake_results")],
    ("trends.csv", "column"): [[code(r["name"]), r["unit"], r["digits"], r["meaning"]] for r in read_table("trend_columns")],
}


@pytest.mark.parametrize("place", TABLES, ids=": ".join)
def test_table(place):
    """Row by row as in the shipped table, nothing missing, nothing that is gone."""
    found = rows(*place)
    for mine, shipped in zip(found, TABLES[place], strict=False):
        assert mine == shipped
    assert len(found) == len(TABLES[place])


def test_words_of_the_critical_load():
    """Every word of the option, the facts behind it, and which are the default."""
    found = rows("Critical load", "word")
    usual = CriticalLoadChoice()
    default = {usual.form, usual.base_cations, usual.sulfate_background, usual.excess_background, usual.tracer}
    named = {cell.split("`")[1]: (cell.endswith("(default)"), said) for cell, said in found}
    assert len(named) == len(found)
    assert {name: said for name, (_, said) in named.items() if name not in ("chloride", "sodium", "no_sea_salt")} == dict(expected_words())
    assert {name for name, (is_default, _) in named.items() if is_default} == default
    assert set(named) == set(_words())


def test_files():
    """Every file that a run can write."""
    assert [row[0] for row in rows("From a survey to a report", "file")] == [code(name) for name in OUTPUT_FILES]


def test_every_definition_of_anc_is_a_column():
    """What the guide tells apart, the results tell apart."""
    names = {code(r["name"]) for r in read_table("lake_results")}
    listed = {row[1] for row in rows("Which ANC is which", "ANC")}
    assert listed < names
    of_anc = {name for name in names if re.match(r"`(anc_(gran|charge|organic|less|end)|alkalinity|base_cation_surplus)\w*`", name)}
    others = {"`anc_charge_form`", "`anc_charge_bare_ueq_l`", "`anc_charge_bound_low_ueq_l`", "`anc_charge_bound_high_ueq_l`"}
    assert of_anc - others == listed


# ------------------------------------------------------------------ numbers in the text


def spoken():
    """Phrases of the guide with the number of the program in them."""
    organic, aluminum = left_out_by_gran(organic_models()[LakeOptions().organic], np.ones(1), np.ones(1))
    tests = {t.name: t.limit for t in co2_tests()}
    area = transfer_relations()["vachon_prairie"].ranges["lake_area_m2"]
    wind = transfer_relations()["cole_caraco"].ranges["wind_m_s"]
    options = LakeOptions()
    yield f"Taken at pH {GRAN_PH:g} that is {1e6 * organic[0]:.1f} µeq of anions per mg of organic carbon, and {aluminum[0]:.1f} µeq per µmol"
    yield f"from {100 * SECOND_SHARE:g} % on stands in `class_also`"
    yield f"exceed {tests['organic anions']:g} % of it, below pH {tests['organic carbon unknown']:g} without organic carbon"
    yield f"spans more than a factor of {tests['wide interval']:g}"
    yield f"(to {wind[1]:g} m/s)"
    yield f"({area[0] / 1e6:g} to {area[1] / 1e6:g} km²)"
    yield f"span the {len(list(full_factorial(CriticalLoadChoice())))} combinations"
    yield (f"(sulfur at {SULFUR_VELOCITY_M_YR:g} m/yr, nitrate at {NITROGEN_VELOCITIES_M_YR[0]:g} to "
           f"{NITROGEN_VELOCITIES_M_YR[1]:g} m/yr, recalled)")
    yield f"{100 * options.event_fraction:g} % of it (`--event-fraction`)"
    yield f"`--lime-anc` (default {options.lime_anc_ueq_l:g} µeq/L)"
    yield f"above {next(float(r['limit']) for r in read_table('lake_limits') if r['name'] == 'dose would over-lime'):g} the dose would over-lime"
    yield f"sampled in {lake_run.TREND_YEARS} or more years"
    yield f"told from {trend.MIN_YEARS} years and {trend.MIN_PAIRS} pairs on"
    yield f"its {100 * trend.CONFIDENCE:g} % interval"
    yield f"have {trends.MONTHLY_MONTHS} months or more and there are more than {trend.CORRECTED_YEARS} years"
    yield f"years with {trends.FULL_YEAR} samples or more"
    yield f"up to {trend.CORRECTED_YEARS} years it cannot be told"
    yield f"*Sure* is below {trend_words.SURE:.2f}, *likely* below {trend_words.LIKELY:.2f}"
    yield f"more than {survey.FAR_DEGREES:g}° apart"
    yield f"drawn {options.draws} times"
    yield f"drawn with {100 * ORGANIC_U_REL:g} %"
    yield f"beyond {lake_run.ALL_CHECKS_UP_TO:,} samples"
    yield f"`{options.organic}`. Median error"


@pytest.mark.parametrize("phrase", list(spoken()))
def test_number_in_the_text(phrase):
    """The guide and the program have one number."""
    assert phrase in FLAT


def test_number_in_the_check_of_the_own_history():
    """Words of the shipped table and constants of the check."""
    check = next(row for row in rows("Quality checks", "check") if row[0] == "own history")
    assert f"more than {quality.HISTORY_FAR:g} robust" in check[2]
    assert f"of {quality.HISTORY_LEAST} or more samples" in check[2]


# ------------------------------------------------------------------ what a run writes


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    """Folder with the results of the demo survey and, without draws, of its history, by name; no figures."""
    folder = tmp_path_factory.mktemp("lakes")
    for name, options in (("lake_survey", LakeOptions()), ("lake_history", LakeOptions(draws=0))):
        assess_survey(LakeFiles(survey=ROOT / "field_data" / f"{name}.csv"), folder / name, options, figure=False)
    return folder


def test_columns_of_the_other_files(demo):
    """As a run writes them; the names of classes stand as *."""
    classes = "|".join(key(c.name) for c in shipped_schemes()["survey_bands"].classes)
    found = {}
    for name in OUTPUT_FILES:
        if name.endswith(".csv") and name not in ("results.csv", "trends.csv"):
            path = next(p for run in ("lake_survey", "lake_history") if (p := demo / run / name).exists())
            columns = [re.sub(rf"^(lakes|share)_({classes})$", r"\1_*", c) for c in pd.read_csv(path, nrows=1).columns]
            found[code(name)] = ", ".join(code(c) for c in dict.fromkeys(columns))
    assert dict(rows("Other files", "file")) == found


def test_keys_of_the_run_record(demo):
    """As a run writes them; what lakes lean on is among the constants."""
    record = json.loads((demo / "lake_survey" / "run.json").read_text(encoding="utf-8"))
    assert [row[0] for row in rows("run.json", "key")] == [code(name) for name in record]
    assert {"fresh", "lake"} <= {row["regime"] for row in record["constants"]}


def test_every_check_is_named(demo):
    """The checks of samples that are made of lakes too stand in the text, those of lakes alone in the table."""
    text = " ".join(SECTIONS["Quality checks"].split())
    made = pd.read_csv(demo / "lake_survey" / "checks.csv")
    made = made["check"][made["sample_id"] != "(all rows)"].unique()
    assert len(made) > 8
    for name in made:
        assert name in text or name.capitalize() in text, name


def test_what_is_said_of_the_demo(demo):
    """Lakes, bad rows, and classes that depend on the definition."""
    found = pd.read_csv(demo / "lake_survey" / "results.csv", keep_default_na=False)
    refused = pd.read_csv(demo / "lake_survey" / "rejected.csv")["row"].nunique()
    assert f"These are {len(found)} invented lakes and {refused} bad rows." in FLAT
    count = {8: "Eight"}[int((found["class_conflicts"] != "").sum())]
    assert f"{count} of the {len(found)} do." in FLAT


def test_what_the_first_hour_says_of_the_demo(demo):
    """Probabilities, conflicts, exceedances and verdicts that the walk-through tells."""
    text = " ".join((ROOT / "docs" / "first_hour.md").read_text(encoding="utf-8").split())
    t = pd.read_csv(demo / "lake_survey" / "results.csv", keep_default_na=False).set_index("sample_id")
    assert f"Pellin Tarn is {t.loc['PE-24', 'class']} with a probability of {t.loc['PE-24', 'class_probability']:.2f}" in text
    assert f'"could be {t.loc["PE-24", "class_also"]}"' in text
    quagmoor = t.loc["QU-24"]
    on_gran_scale = float(quagmoor["anc_charge_ueq_l"]) - organic_left_by_gran(float(quagmoor["doc_mg_l"]))
    assert on_gran_scale + 3.0 * float(quagmoor["aluminum_umol_l"]) < 0.0  # acid by its ions too, were all its aluminum Al3+
    assert quagmoor["class_conflicts"] == ("Gran ANC: chronically acidic; Gran ANC of the ions: chronically acidic; "
                                           "charge balance: sensitive")
    known = pd.read_csv(demo / "lake_survey" / "results.csv").dropna(subset="exceedance_meq_m2_yr")
    load, over = known["critical_load_meq_m2_yr"], known["exceedance_meq_m2_yr"]
    counts = [int((over + load - known[f"critical_load{name}_meq_m2_yr"] > 0.0).sum()) for name in ("", "_highest", "_lowest")]
    assert f"{counts[0]} of {len(known)} lakes get more acid than their load by the usual variant, {counts[1]} to {counts[2]} by the others" in text
    assert t.loc["KT-24", ["anc_used_from", "anc_gran_ueq_l"]].tolist() == ["Gran ANC of the ions", ""]
    assert t.loc["KT-24", "anc_end_point_ueq_l"] != ""
    assert (t.loc["FE-24", "missing_ions"], t.loc["FE-24", "anc_charge_ueq_l"]) == ("potassium; nitrate", "")
    history = pd.read_csv(demo / "lake_history" / "recovery.csv").set_index("site")
    assert history["recovering"].to_dict() == {"Ormsel Water": "yes", "Corriden Water": "not shown", "Lantry Tarn": "not shown", "Threlsby Lough": "unknown"}
    assert "ph" not in history.loc["Lantry Tarn", "anc_quantity"]
    assert history.loc["Lantry Tarn", "rising"] == "pH"
    trend_rows = pd.read_csv(demo / "lake_history" / "trends.csv").set_index(["site", "quantity"])
    step = trend_rows.loc[("Corriden Water", "anc_gran_ueq_l")]
    assert (int(step["step_year"]), step["step"] > 0.0, step["step_p"] < 0.05) == (2010, True, True)


def test_commands_run(tmp_path, monkeypatch):
    """Every command of the guide ends well."""
    monkeypatch.chdir(ROOT)
    commands = [block.replace("\\\n", " ").split() for block in re.findall(r"```sh\n(.*?)```", GUIDE, flags=re.S)]
    assert len(commands) == 2
    for command, *rest in commands:
        assert command == "aquabuf"
        rest[rest.index("--out") + 1] = str(tmp_path / rest[rest.index("--out") + 1])
        done = CliRunner().invoke(main, [*rest, "--draws", "0", "--no-figure"])
        assert done.exit_code == 0, done.output


# ------------------------------------------------------------------ figures from open data

FOLDER = os.environ.get("AQUABUF_OPEN_DATA", "")
BOUNDS = (0.0, 5.0, 6.0, 6.7, 7.5, 14.0)
open_data = pytest.mark.skipif(not FOLDER, reason="AQUABUF_OPEN_DATA names no folder")


@cache
def open_survey():
    """Readings of the Eastern Lake Survey at 25 °C, and the pH measured after bubbling."""
    frame = read_readings(Path(FOLDER) / "nsws_lakes_1984.csv", ROOT / "docs" / "maps" / "nsws_lakes_1984.toml").frame
    values = values_of(frame) | {"temperature_c": np.full(len(frame), 25.0)}
    return values, values["ph_air_equilibrated"]


def ph_errors(model, *, bare=False):
    """Computed less measured pH at 350 µatm of CO2; `bare` without organic carbon and aluminum."""
    values, measured = open_survey()
    setting = setting_of(values, 400.0)
    setting = replace(setting, air_pco2_atm=np.full((measured.size, 1), 350e-6), air_co2_mol_l=350e-6 * setting.lake.k0)
    none = {"doc_mg_l": np.zeros(measured.size), "aluminum_mol_l": np.zeros(measured.size)} if bare else {}
    lakes = Lakes({name: v[:, None] for name, v in (values | none).items()}, setting, organic_models()[model], np.ones((1, 1)))
    b = budget(lakes, anc_kinds(np.full(measured.size, "gran", dtype=object)))
    return chemistry(lakes, b, choose_sources(lakes, b), ()).ph_at_air[:, 0] - measured


def rms(error):
    """Root mean square."""
    return np.sqrt(np.mean(error**2))


@pytest.mark.open_data
@open_data
def test_errors_of_ph_at_air():
    """The table of the guide, to its last digit."""
    measured = open_survey()[1]
    both = [ph_errors(LakeOptions().organic), ph_errors(LakeOptions().organic, bare=True)]
    listed = rows("Which ANC is which", "measured pH")
    assert len(listed) == len(BOUNDS) - 1
    for row, (low, high) in zip(listed, pairwise(BOUNDS), strict=True):
        at = (measured >= low) & (measured < high)
        assert int(row[1]) == at.sum()
        for cell, error in zip(row[2:], both, strict=True):
            assert_allclose([float(x) for x in cell.split(" / ")], [np.median(error[at]), rms(error[at])], rtol=0, atol=6e-4)


@pytest.mark.open_data
@open_data
def test_errors_of_the_organic_models():
    """Between pH 5 and 6.7 the default is the best of the shipped ones, by as much as the guide says."""
    measured = open_survey()[1]
    at = (measured >= 5.0) & (measured < 6.7)
    found = {name: rms(ph_errors(name)[at]) for name in organic_models()}
    default = found.pop(LakeOptions().organic)
    assert default < min(found.values())
    assert f"{default:.2f}, against {min(found.values()):.2f} to {max(found.values()):.2f}." in FLAT


@pytest.mark.open_data
@open_data
def test_counts_of_the_open_survey(tmp_path):
    """Samples whose class depends on the definition, exceedances by variant, and how far the variants lie apart."""
    files = LakeFiles(survey=Path(FOLDER) / "nsws_lakes_1984.csv", mapping=str(ROOT / "docs" / "maps" / "nsws_lakes_1984.toml"))
    assess_survey(files, tmp_path / "o", LakeOptions(draws=0), figure=False)
    t = pd.read_csv(tmp_path / "o" / "results.csv")
    load, over = t["critical_load_meq_m2_yr"], t["exceedance_meq_m2_yr"]
    counts = [int((over + load - t[f"critical_load{name}_meq_m2_yr"] > 0.0).sum()) for name in ("", "_highest", "_lowest")]
    classes = [dict(part.split(": ") for part in words.split("; ")) for words in t["class_conflicts"].dropna()]
    apart = sum(c["Gran ANC"] != c["charge balance"] for c in classes)
    assert (f"In {apart} of the {len(t)} samples of the survey above Gran ANC and charge balance lead to different classes of "
            f"`survey_bands`; in {len(classes)} any two of Gran ANC, Gran ANC of the ions and charge balance do.") in FLAT
    assert (f"Of those {len(t)} samples {counts[0]} exceed it by the default, {counts[1]} by the variant with the highest load, "
            f"{counts[2]} by the one with the lowest.") in FLAT
    span = ((t["critical_load_highest_meq_m2_yr"] - t["critical_load_lowest_meq_m2_yr"]) / load).quantile([0.5, 0.9])
    assert_allclose(span, [0.25, 0.75], rtol=0, atol=0.03)
    assert "spans a quarter of itself (median of the 905 samples above), in one of ten three quarters" in FLAT
