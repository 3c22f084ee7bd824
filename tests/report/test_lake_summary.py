"""What `lake` prints and its report: counts that equal the tables, every assumption, rules with sources, cautions, next steps.

The demo survey and series are read: 31 invented lakes that differ in what they have, and four that were sampled for years.
"""

import csv
import json
import re
import textwrap
from collections import Counter
from pathlib import Path

import numpy as np
import pytest
from lake_tables import ALDER, BIRCH, CEDAR, DOCK, EVENT, HAWK, SCHEME, SURVEY, ions, series, table_of
from numpy.testing import assert_allclose

import aquabuf
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.assess.sample.quality import check_facts
from aquabuf.chem.transfer import transfer_relations
from aquabuf.report.lake_run import LakeFiles, assess_survey
from aquabuf.report.summary import WIDTH
from aquabuf.tables import read_table

DEMO = Path(aquabuf.__file__).parents[1] / "field_data"
SCHEME_NAMES = tuple(shipped_schemes())


class Told:
    """Summary and report of a run, each in one line too, and its tables."""

    def __init__(self, summary, folder):
        self.summary, self.folder = summary, folder
        self.report = (folder / "report.txt").read_text(encoding="utf-8")
        self.flat, self.flat_report = " ".join(summary.split()), " ".join(self.report.split())

    def rows(self, name="results.csv"):
        """A table of the run as text cells."""
        with (self.folder / name).open(encoding="utf-8", newline="") as stream:
            return list(csv.DictReader(stream))

    def numbers(self, name):
        """A column of the results; nan for blanks."""
        return np.array([float(r[name] or "nan") for r in self.rows()])

    def block(self, title, text=None):
        """Lines of the block that begins so, each list item in one line."""
        body = next(b for b in (text or self.summary).split("\n\n") if b.startswith(title)).splitlines()
        out = []
        for line in body[1:]:
            out.append(line.strip()[2:]) if line.startswith("  - ") else out.append(f"{out.pop()} {line.strip()}")
        return out


@pytest.fixture
def told(table, tmp_path):
    """Run over a small survey, by default without draws."""
    def go(text=SURVEY, *, event=None, **options):
        files = LakeFiles(survey=table(text, "lakes.csv"), event=event)
        return Told(assess_survey(files, tmp_path / "out", LakeOptions(**({"draws": 0} | options)), force=True, figure=False), tmp_path / "out")
    return go


@pytest.fixture(scope="module")
def survey(tmp_path_factory):
    """The demo survey by two schemes, with draws."""
    folder = tmp_path_factory.mktemp("demo") / "out"
    options = LakeOptions(draws=200, schemes=("survey_bands", "norway_20"))
    return Told(assess_survey(LakeFiles(survey=DEMO / "lake_survey.csv"), folder, options, figure=False), folder)


@pytest.fixture(scope="module")
def history(tmp_path_factory):
    """The demo series."""
    folder = tmp_path_factory.mktemp("demo") / "out"
    return Told(assess_survey(LakeFiles(survey=DEMO / "lake_history.csv"), folder, LakeOptions(draws=0), figure=False), folder)


def found(pattern, text):
    """Numbers that a pattern picks out of a text; fails where it is not there."""
    match = re.search(pattern, text)
    assert match, pattern
    return [float(x.replace(",", "")) for x in match.groups()]


# ------------------------------------------------------------------ counts are those of the tables

def test_first_line(survey):
    """Lakes, those with a warning, and refused rows."""
    warned = sum(r["warnings"] != "" for r in survey.rows())
    refused = len({r["row"] for r in survey.rows("rejected.csv")})
    for text in (survey.summary, survey.report):
        assert text.splitlines()[0] == f"lake_survey.csv: {len(survey.rows())} lakes assessed, {warned} with a warning, {refused} rows refused."


def test_first_line_of_series(history):
    """Lakes are those sites, samples their rows; only the latest sample of a lake can warn here."""
    latest = {r["site"]: r for r in sorted(history.rows(), key=lambda r: r["date"])}
    warned = sum(r["warnings"] != "" for r in latest.values())
    assert history.summary.startswith(f"lake_history.csv: 4 lakes from {len(history.rows())} samples assessed, {warned} with a warning, 0 rows refused.\n")


def test_counts_by_class(survey):
    """Each class as often as in results.csv; what is expected is the sum of its probabilities; the other scheme beside it."""
    lines, results = survey.block("Sensitivity class by survey_bands"), survey.rows()
    classes, chance = Counter(r["class"] for r in results), Counter()
    for r in survey.rows("classes.csv"):
        if (r["scheme"], r["in_use"]) == ("survey_bands", "yes"):
            chance[r["class"]] += float(r["probability"])
    for line, one in zip(lines, shipped_schemes()["survey_bands"].classes, strict=False):
        count, expected = found(rf"^(\d+) x {one.name} \((\d+\.\d) expected with the readings' errors\): {one.words} \[", line)
        assert count == classes[one.name]
        assert_allclose(expected, chance[one.name], rtol=0, atol=0.05 + 0.005 * len(results))
    norway = Counter(r["class"] for r in survey.rows("classes.csv") if (r["scheme"], r["in_use"], r["is_class_of_value"]) == ("norway_20", "yes", "yes"))
    assert found(r"By norway_20 .*: (\d+) below the limit, (\d+) at the limit or above\.", survey.flat) == [norway["below the limit"], norway["at the limit or above"]]


def test_counts_by_definition(survey):
    """As in classes.csv, and the lakes that change class between definitions."""
    table = [r for r in survey.rows("classes.csv") if (r["scheme"], r["is_class_of_value"]) == ("survey_bands", "yes")]
    by_lake = {}
    for r in table:
        by_lake.setdefault(r["sample_id"], {})[r["definition"]] = r["class"]
    for definition in ("Gran ANC", "alkalinity", "charge balance"):
        of = Counter(classes[definition] for classes in by_lake.values() if definition in classes)
        counts = found(rf"By {definition} \((\d+) lakes?\): (\d+) chronically acidic, (\d+) prone to turn acid, (\d+) sensitive, (\d+) not sensitive\.", survey.flat)
        assert counts == [of.total(), *(of[c.name] for c in shipped_schemes()["survey_bands"].classes)]
    several = [set(c.values()) for c in by_lake.values() if len(c) > 1]
    assert found(r"(\d+) of (\d+) lakes with more than one definition of ANC change class", survey.flat) == [sum(len(s) > 1 for s in several), len(several)]


def test_first_to_look_at(survey):
    """The first eight of priorities.csv with their class, figures and reason, in their order."""
    first = survey.rows("priorities.csv")[:8]
    by_row = {r["row"]: r for r in survey.rows()}
    text = " ".join(next(b for b in survey.summary.split("\n\n") if b.startswith("Look at these first (of 31")).split())
    at = [text.index(f" {p['rank']}. {p['site']} ({p['region']}, ") for p in first]
    assert at == sorted(at)
    for p, start, end in zip(first, at, [*at[1:], len(text)], strict=True):
        part, r = text[start:end], by_row[p["row"]]
        assert f": {p['class']} (probability {float(p['class_probability']):.2f})" in part
        assert f"pH {float(p['ph']):.2f}" in part
        assert_allclose(found(r"ANC (-?\d+) \((-?\d+) to (-?\d+)\) µeq/L", part), [float(r[f"anc_used_ueq_l{e}"]) for e in ("", "_low", "_high")], rtol=0, atol=0.56)
        assert p["reason"][1:] in part
    assert text.count("next: ") == min(3, len({p["next_step"] for p in first}))


def test_tolerance(survey):
    """Median acid to each pH at air, lakes below it already, and years against deposition."""
    for ph in ("6", "5.5", "5"):
        column = survey.numbers(f"acid_to_ph_{float(ph):.1f}_open_ueq_l".replace(".", "_"))
        median, below, of = found(rf"Acid to pH {re.escape(ph)} at equilibrium with air: median (-?\d+) µeq/L; below that pH already: (\d+) of (\d+) lakes", survey.flat)
        assert_allclose(median, np.nanmedian(column), rtol=0, atol=0.56)
        assert (below, of) == ((column < 0).sum(), np.isfinite(column).sum())
    years, above = survey.numbers("years_to_anc_limit"), survey.numbers("acid_to_anc_limit_ueq_l")
    lasts, count = found(r"lasts ([\d.]+) years \(median of the (\d+) lakes? above", survey.flat)
    assert_allclose(lasts, np.median(years[years > 0]), rtol=0, atol=0.056)
    assert count == (years > 0).sum()
    assert found(r"Below the ANC limit already: (\d+) of (\d+) lakes", survey.flat) == [(years == 0).sum(), np.isfinite(years).sum()]
    assert (years == 0).sum() == (above[np.isfinite(years)] <= 0).sum()


def test_critical_loads(survey):
    """Median, exceeded lakes, those surely so, and the same by each variant in the report."""
    load, over, chance = (survey.numbers(n) for n in ("critical_load_meq_m2_yr", "exceedance_meq_m2_yr", "exceedance_probability"))
    assert_allclose(found(r"Critical load: median (\d+) meq", survey.flat)[0], np.nanmedian(load), rtol=0, atol=0.51)
    assert found(r"Exceeded in (\d+) of (\d+) lakes by the chosen variant, with a probability above 0\.95 in (\d+); in (\d+) by .*? and in (\d+) by", survey.flat) == [
        (over > 0).sum(), np.isfinite(over).sum(), (chance > 0.95).sum(),
        *((over + load - survey.numbers(f"critical_load_{end}_meq_m2_yr") > 0).sum() for end in ("highest", "lowest"))]
    assert found(r"(\d+) lakes?: F reached 1", survey.flat)[0] == (survey.numbers("f_factor") == 1.0).sum()
    part = {}
    for r in survey.rows("critical_loads.csv"):
        part.setdefault(r["variant"], []).append(float(r["exceedance_meq_m2_yr"] or "nan"))
    assert len(part) > 10
    for words, exceeded in part.items():
        assert found(rf"{re.escape(words)}: median load -?\d+ meq/m²/yr, exceeded in (\d+) of (\d+) lakes", survey.flat_report) == [
            sum(x > 0 for x in exceeded), sum(x == x for x in exceeded)]
    assert "ANC limits tried: 0, 20, 50, variable µeq/L" in survey.flat_report


def test_episode_carbon_and_lime(survey):
    """Lakes at or below zero and the limit before and after; lakes whose CO2 is stated; lakes to lime and what they take."""
    now, then, limit, pco2, dose, tons = (survey.numbers(n) for n in ("anc_used_ueq_l", "episode_anc_ueq_l", "anc_limit_ueq_l", "pco2_uatm",
                                                                       "lime_dose_ueq_l", "lime_t"))
    known = np.isfinite(then)
    assert found(r"At or below 0 then: (\d+) of (\d+) lakes \((\d+) today\); below the ANC limit then: (\d+) \((\d+) today\)", survey.flat) == [
        (then <= 0).sum(), known.sum(), (now[known] <= 0).sum(), (then < limit).sum(), (now < limit)[known].sum()]
    assert found(r"limit is crossed: median [\d.]+ of the (\d+) lakes", survey.flat)[0] == (survey.numbers("event_fraction_to_limit") > 0).sum()
    assert found(r"CO2 pressure is stated for (\d+) lakes?: median \d+ µatm; more than air holds: (\d+)\.", survey.flat) == [
        np.isfinite(pco2).sum(), (survey.numbers("pco2_air_ratio") > 1).sum()]
    refused = sum(r["pco2_from"].startswith("not stated") for r in survey.rows())
    assert sum(float(n) for n in re.findall(r"Not stated for (\d+) lakes?: ", survey.flat)) == refused > 0
    assert found(r"Below an ANC of 100 µeq/L: (\d+) lakes", survey.flat)[0] == (dose > 0).sum()
    assert_allclose(found(r"with a volume: ([\d.]+) t in all", survey.flat)[0], tons[dose > 0][np.isfinite(tons[dose > 0])].sum(), rtol=0, atol=0.51)


def test_quality(survey):
    """Failed and made checks as in checks.csv, with the remedy; ions that are missing; refused rows by reason."""
    checks, lines = survey.rows("checks.csv"), survey.block("Quality")
    made, failed = (Counter(r["check"] for r in checks if r["sample_id"] != "(all rows)" and r["met"] in met) for met in (("yes", "no"), ("no",)))
    for name, count in failed.items():
        assert any(line.startswith(f"{count} of {made[name]} fail {name} (") and check_facts()[name]["remedy"] in line for line in lines), name
    assert sum(" fail " in line and line[0].isdigit() for line in lines) == len(failed)
    assert "potassium; nitrate (1 lake" in " ".join(lines)
    reasons = Counter((r["column"], r["rule"].split(" in row")[0]) for r in survey.rows("rejected.csv"))
    assert Counter(survey.block("Refused: 6 rows")) == Counter(f"{n} x {column}: {rule}" for (column, rule), n in reasons.items())


BROWN = {"temperature_c": 25, "ph": 5.5, "anc_ueq_l": 20, **ions(80, 30, 40, 10, 5, 40, 2, 25), "doc_mg_l": 14}
SLIPPED = {"sample_id": "s", "temperature_c": 25, "ph": 5.5, "anc_ueq_l": 5, **ions(50, 20, 40, 10, 5, 90, 2, 25), "doc_mg_l": 11}


def test_what_organic_anions_explain_is_counted_by_lake(told):
    """Two brown lakes pass once they are counted; a third that fails by them alone takes nothing off that number."""
    run = told(table_of({"sample_id": "a", **BROWN}, {"sample_id": "b", **BROWN}, SLIPPED))
    failed = {name: {r["sample_id"] for r in run.rows("checks.csv") if (r["check"], r["met"]) == (name, "no")}
              for name in ("ion balance", "ion balance with organic anions")}
    assert failed == {"ion balance": {"a", "b"}, "ion balance with organic anions": {"s"}}
    assert found(r"Of the (\d+) that fail the ion balance, (\d+) pass", run.flat) == [2, 2]


def test_words_on_the_gap_agree_with_its_check(told):
    """A lake whose ANCs differ within error does not fail the check of their difference."""
    for r in told(table_of(HAWK)).rows():
        assert (r["anc_gap_words"] == "within error") <= ("ANC by charge against titration" not in r["failed_checks"])


def test_trends(history):
    """Verdicts of recovery.csv by count and lake, in words."""
    recovery, lines = history.rows("recovery.csv"), history.block("Trends")
    counts = Counter(r["recovering"] for r in recovery)
    assert lines[0] == f"4 lakes sampled in several years. Recovering from acid: {', '.join(f'{w} {n}' for w, n in counts.most_common())}."
    assert lines[1:] == [f"{r['site']}: {' '.join(r['words'].split())}" for r in recovery]


def test_many_series_are_cut_short(told):
    """Twelve lakes by name, and how many more."""
    text = table_of(*(row for i in range(15) for row in series(f"Tarn {i:02d}", (10, 12, 14), (50, 48, 46))))
    lines = told(text).block("Trends")
    assert [line.split(":")[0] for line in lines[1:13]] == [f"Tarn {i:02d}" for i in range(12)]
    assert lines[13:] == ["and 3 more in recovery.csv"]


# ------------------------------------------------------------------ what the answers rest on

def test_every_assumption_is_told(told, table):
    """Air and its year, organic acids and source, each line of the variant, ANC limit, lime, wind, event, draws and seed; in both texts."""
    run = told(table_of(ALDER, {**BIRCH, "anc_ueq_l": 90}, CEDAR), draws=100, seed=5, event=table(EVENT, "melt.toml"), lime="quicklime", anc_limit="trout_1995",
               organic="fakhraei", critical_load="flux original sweden", air_co2_ppm=410.0, ammonium=False, wind_relation="vachon_prairie")
    record = json.loads((run.folder / "run.json").read_text(encoding="utf-8"))
    lime = next(r for r in read_table("lime_products") if r["name"] == "quicklime")
    organic = next(r for r in read_table("organic_acids") if r["name"] == "fakhraei")
    rests = [
        "Air: 410 ppm CO2 in dry air; pressure by elevation, 1 atm where neither is given.", "Organic anions by fakhraei: ", organic["source"],
        *(f"Critical load: {line}." for line in record["critical_load"]), "base cations that run off per area and year, S 400", "sulfate before acid deposition 5 µeq/L + 0.05 BC*",
        "ANC limit 67 µeq/L (brown trout, Hesthagen et al. 2008, abstract)", "Liming: quicklime (CaO) to ANC 100 µeq/L", lime["source"],
        f"Gas transfer: vachon_prairie, {transfer_relations()['vachon_prairie'].source}", *(f"Event water, {line}." for line in record["event"]), "90% intervals and probabilities from 100 seeded draws (seed 5)",
        "Charge balance: calcium, magnesium, sodium, potassium less sulfate", "A missing one of these ions is never taken as zero: there is no charge balance then.",
        "Counted as none in pH, tolerance and lime, because not measured: aluminum in 2 lakes.",
        "An ANC or alkalinity whose method is not given counts as Gran: 1 lake", "temperature and constants are taken as exact"]
    for text in (run.flat, run.flat_report):
        for words in rests:
            assert words in text, words


def test_defaults_are_told_as_such(told):
    """425 ppm of the mean of 2025 (recalled); ammonium counted; no draws, no intervals; to a pH where that was asked for."""
    flat = told(lime_ph=6.3).flat
    assert "425 ppm CO2 in dry air (default: about the global mean of 2025, recalled)" in flat
    assert "potassium and ammonium less sulfate" in flat
    assert "No intervals (--draws 0)." in flat
    assert "to pH 6.3 at equilibrium with air" in flat
    assert "Below pH 6.3 at air: 1 lake." in flat


def test_nothing_is_said_of_probability_without_draws(told):
    """No share of draws, no expected counts, no interval."""
    flat = told(table_of(ALDER, {**CEDAR, "sulfur_deposition_meq_m2_yr": 90})).flat
    assert "expected with" not in flat
    assert not re.search(r"\(probability|probability above 0\.95|-?\d+ \(-?\d+ to -?\d+\) µeq/L", flat)


def test_what_is_weighted_is_told(told):
    """Counts of the table, or shares by design weights."""
    assert "These are counts of the lakes in this table, not shares of a population." in told().flat
    assert "Shares in groups.csv are weighted by the survey's design weights." in told(table_of({**ALDER, "survey_weight": 3}, CEDAR)).flat


def test_cells_below_detection_are_told(told):
    """Count and column."""
    run = told(table_of({**ALDER, "ammonium_ueq_l": "<1"}, {**CEDAR, "ammonium_ueq_l": "<2"}))
    assert any(line.startswith("2 x below detection, half the limit used: ammonium") for line in run.block("Readings"))


def test_a_lake_with_nothing_but_ph_is_told_as_it_is(told):
    """It has a pH: no text may say that it has none, and no list is left empty."""
    flat = told("sample_id,ph\na,5.2\n").flat
    assert "pH 5.20" in flat
    assert not re.search(r"neither ANC nor pH|[Nn]o ANC or pH", flat)
    assert not re.search(r": ?\.( |$)|\(\)|; ;", flat)


def test_no_median_of_nothing(told):
    """No lake above the limit: no years to tell, and no dash in their place."""
    assert " - years" not in told(table_of(CEDAR)).flat


# ------------------------------------------------------------------ rules, cautions, next steps, layout

@pytest.mark.parametrize("name", SCHEME_NAMES)
def test_report_holds_every_rule_of_the_scheme(told, name):
    """Each class with rule and source, beside those of a scheme of one's own."""
    run = told(schemes=("uk_0", name))
    scheme = shipped_schemes()[name]
    for k, one in enumerate(scheme.classes):
        assert f"{name}, {one.name}: {scheme.rule(k)} ({one.source})" in run.flat_report
    assert f"{name}: {scheme.words} ({scheme.source})" in run.flat_report


def test_report_holds_rules_of_a_scheme_of_your_own(told, table):
    """From its file."""
    run = told(schemes=(str(table(SCHEME, "own.toml")),))
    assert "two_steps, poor: Gran ANC <= 30 µeq/L (invented)" in run.flat_report
    assert "two_steps, sound: Gran ANC > 30 µeq/L (invented)" in run.flat_report


def test_report_holds_every_limit_and_check(survey):
    """Limits of the shipped table with words and source; checks that were made, with what is allowed and who says so."""
    for r in read_table("lake_limits"):
        unit = "" if r["unit"] == "-" else f" {r['unit']}"
        assert f"{r['name']}: {r['quantity']} {r['operator']} {r['limit']}{unit}: {r['words']} ({r['source']}" in survey.flat_report
    made = {r["check"] for r in survey.rows("checks.csv") if r["sample_id"] != "(all rows)"}
    for name in made:
        assert re.search(rf"- {re.escape(name)}: .*?\({re.escape(check_facts()[name]['source'])}\)", survey.flat_report), name


def test_cautions(survey):
    """Those of this command, all of them, in both texts; no other."""
    for row in read_table("cautions"):
        assert (row["words"] in survey.flat) == (row["words"] in survey.flat_report) == (row["command"] == "lake"), row["words"]


def test_next_steps_and_files(told):
    """What broken limits ask for, once each; what was left out; and exactly the files that are there."""
    run = told()
    lines = run.block("Next")
    broken = {name for r in run.rows() for name in r["warnings"].split("; ")}
    steps = {r["next_step"] for r in read_table("lake_limits") if r["name"] in broken}
    assert steps
    for step in {r["next_step"] for r in read_table("lake_limits")}:
        assert lines.count(f"{step[0].upper()}{step[1:]}.") == (step in steps), step
    left = Counter(part.split(" (")[0] for r in run.rows() for part in r["left_out"].split("; ") if part)
    for name, count in left.items():
        assert re.search(rf"{re.escape(name)} \({count} lakes?\)", run.flat)
    written = lines[-1].removeprefix("Written: ").removesuffix(".").split(", ")
    assert sorted(written) == sorted(p.name for p in run.folder.iterdir())


@pytest.mark.parametrize("name", SCHEME_NAMES)
@pytest.mark.parametrize("by", ["region", "site"])
def test_lines_fit_a_screen(told, name, by):
    """No line of either text is longer than the width all texts keep, whatever names and classes are called."""
    long_names = tuple({**row, "region": f"{row.get('region', '')} of the long and winding name {k}"} for k, row in enumerate((ALDER, BIRCH, CEDAR, DOCK)))
    run = told(table_of(*long_names), schemes=(name, "aquatic_status"), group=by)
    assert [line for line in (*run.summary.splitlines(), *run.report.splitlines()) if len(line) > WIDTH] == []


def test_summary_and_report_share_their_blocks(survey):
    """Whatever stands in the summary, but for next steps, stands in the report word for word."""
    shared = [b for b in survey.summary.split("\n\n") if not b.startswith("Next")]
    assert [b for b in shared if b.strip() not in survey.report] == []
    assert textwrap.shorten(survey.report, 60).startswith("lake_survey.csv: ")


@pytest.mark.parametrize("text", [table_of(CEDAR), table_of(ALDER), "sample_id,anc_ueq_l\na,5\n"], ids=["acid", "clear", "bare"])
def test_one_lake_is_no_lakes(told, text):
    """Counts and their nouns agree."""
    assert re.findall(r"\b1 (?:lakes|rows|samples|titrations)\b.{0,30}", told(text).flat) == []
