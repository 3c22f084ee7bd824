"""A lake of a run explained: its numbers are those of results.csv, its verdicts and loads those of their tables."""

import csv
from pathlib import Path

import numpy as np
import pytest
from lake_tables import SURVEY

from aquabuf.assess.lake.chain_results import column_label, title_of
from aquabuf.assess.lake.columns import AS_GIVEN, lake_columns
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.errors import FileError, InputError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.explain import WIDTH, chain_text
from aquabuf.report.explain_run import chains_of_run, explain
from aquabuf.report.lake_run import LakeFiles, assess_survey

DATA = Path(__file__).parents[2] / "field_data"


@pytest.fixture
def lakes(table, tmp_path):
    """Assess the lakes of a text into a folder."""
    def go(text=SURVEY, **options):
        assess_survey(LakeFiles(survey=table(text, "lakes.csv")), tmp_path / "out", LakeOptions(**({"draws": 0} | options)), figure=False)
        return tmp_path / "out"
    return go


def written(folder, name="results.csv"):
    """Rows of a table of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def part_of(chain, title):
    """Steps of one part, by label."""
    return {step.label: step for part in chain.parts if part.title == title for step in part.steps}


def assert_same_numbers(chain, row, options):
    """Every number of the line stands under its title with its interval, with as many decimals as its column has."""
    count = 0
    for column in lake_columns(options.thresholds):
        if not column.unit or column.name in AS_GIVEN or not row[column.name] or not title_of(column.name):
            continue
        step = [s for p in chain.parts if p.title == title_of(column.name) for s in p.steps if s.label == column_label(column)[0]]
        ends = [row.get(f"{column.name}_{end}", "") for end in ("low", "high")]
        expected = [row[column.name], *(ends if all(ends) else [])]
        texts = [f"{float(v):.{column.digits}f}" if np.isfinite(float(v)) else f"{float(v)}" for v in expected]
        value = texts[0] + (f" ({texts[1]} to {texts[2]})" if len(texts) > 1 else "")
        assert value in [s.value for s in step], column.name
        count += 1
    assert count > 3


@pytest.mark.parametrize(("table", "mapping", "event", "options"), [
    ("lake_survey.csv", None, "lake_event.toml", {"schemes": ("survey_bands", str(DATA / "lake_scheme.toml")), "critical_load": "flux original"}),
    ("lake_survey.csv", None, None, {"draws": 0, "anc_limit": "variable", "thresholds": (5.2,), "lime_ph": 6.5}),
    ("lake_results_long.csv", "wqx", None, {"seed": 5}),
], ids=["survey", "variable", "long"])
def test_every_demo_lake_has_the_numbers_of_its_results(tmp_path, table, mapping, event, options):
    """All lakes of the demo tables, with the options of their run."""
    chosen = LakeOptions(**({"draws": 100} | options))
    files = LakeFiles(survey=DATA / table, mapping=mapping, event=None if event is None else DATA / event)
    assess_survey(files, tmp_path / "out", chosen, figure=False)
    rows = written(tmp_path / "out")
    assert len(rows) > 9
    for row in rows:
        chain = next(c for c in chains_of_run(tmp_path / "out", row["sample_id"], given=DATA / table) if not c.refused)
        assert (chain.sample_id, str(chain.row)) == (row["sample_id"], row["row"])
        assert_same_numbers(chain, row, chosen)
        assert all(len(line) <= WIDTH for line in chain_text(chain).splitlines())
        if not row["pco2_uatm"] and row["pco2_from"]:
            assert part_of(chain, "Carbon dioxide")["CO2 pressure"].words == row["pco2_from"].removeprefix("not stated: ")


def test_samples_of_a_long_series(tmp_path):
    """The check against a lake's own history needs its other samples; the first and the last of each lake."""
    assess_survey(LakeFiles(survey=DATA / "lake_history.csv"), tmp_path / "out", LakeOptions(draws=0), figure=False)
    rows = written(tmp_path / "out")
    ends = {row["site"]: row for row in rows} | {row["site"] + "first": row for row in reversed(rows)}
    assert len(ends) > 5
    with_history = 0
    for row in ends.values():
        chain = next(c for c in chains_of_run(tmp_path / "out", row["sample_id"], given=DATA / "lake_history.csv") if not c.refused)
        assert_same_numbers(chain, row, LakeOptions(draws=0))
        has_history = sum(other["site"] == row["site"] for other in rows) >= 8  # samples that the check asks for
        assert ("own history" in part_of(chain, "Quality checks")) == has_history
        with_history += has_history
    assert with_history > 3


def test_every_column_has_a_place():
    """A title, or a part of its own."""
    for column in lake_columns((6.0, 5.5, 5.0)):
        assert column.name in AS_GIVEN or title_of(column.name) or not column.unit or column.name == "class_probability", column.name


def test_verdicts_checks_classes_and_loads_are_those_of_the_tables(tmp_path):
    """Each row of verdicts.csv, checks.csv, classes.csv and critical_loads.csv stands in the chain of its lake."""
    assess_survey(LakeFiles(survey=DATA / "lake_survey.csv", event=DATA / "lake_event.toml"), tmp_path / "out", LakeOptions(draws=100), figure=False)
    chains = {}
    tables = {name: written(tmp_path / "out", name) for name in ("verdicts.csv", "checks.csv", "classes.csv", "critical_loads.csv")}
    for row in tables["verdicts.csv"]:
        if row["sample_id"] not in chains:
            chains[row["sample_id"]] = next(c for c in chains_of_run(tmp_path / "out", row["sample_id"], given=DATA / "lake_survey.csv") if not c.refused)
        step = part_of(chains[row["sample_id"]], "Verdicts")[row["verdict"]]
        assert (step.source, step.sign in ("BROKEN", "AT RISK")) == (row["source"], row["warned"] == "yes")
        assert row["next_step"] in step.words
        assert not row["probability"] or f"in {100 * float(row['probability']):.0f} % of the draws" in step.words
    for row in tables["checks.csv"]:
        if not row["row"]:  # of the whole file
            continue
        step = part_of(chains[row["sample_id"]], "Quality checks")[row["check"]]
        assert float(step.value) == pytest.approx(float(row["value"]), rel=1e-5, abs=1e-12)
        assert step.sign == ("met" if row["met"] == "yes" else "NOT MET")
    for row in tables["classes.csv"]:
        if row["in_use"] == "yes":
            step = part_of(chains[row["sample_id"]], "Class")[f"{row['scheme']}: {row['class']}"]
            assert (step.value, step.words, step.sign == "used") == (
                f"probability {float(row['probability']):.3f}", row["rule"], row["is_class_of_value"] == "yes")
    for row in tables["critical_loads.csv"]:
        step = part_of(chains[row["sample_id"]], "Critical load")[row["variant"]]
        assert step.value == f"{float(row['critical_load_meq_m2_yr']):.2f}"


def test_a_lake_with_its_titration(table, tmp_path):
    """The ANC is the result of its titration, and its files are found beside the survey."""
    from titration_tables import POINTS, SAMPLES
    survey = table("sample_id,temperature_c,ph,anc_ueq_l,sample_filtered\nsoft,12,6.8,70,no\n", "lakes.csv")
    files = TitrationFiles(table(POINTS, "points.csv"), table(SAMPLES, "samples.csv"))
    assess_survey(LakeFiles(survey=survey, titrations=files), tmp_path / "out", LakeOptions(draws=100), figure=False)
    chain, = chains_of_run(tmp_path / "out", "soft")
    assert_same_numbers(chain, written(tmp_path / "out")[0], LakeOptions(draws=100))
    text = " ".join(chain_text(chain).split())
    assert "a titration takes its place" in text
    assert "recommended result of its titration (gran)." in text


def test_a_titration_is_taken_as_what_it_is(lakes):
    """An alkalinity of a whole sample is an ANC."""
    folder = lakes("sample_id,temperature_c,ph,alkalinity_ueq_l,filtered\na,12,6.8,70,no\n")
    step = part_of(*chains_of_run(folder, "a"), "Which ANC this is, and its parts")["titration taken as"]
    assert (step.value, step.words) == ("ANC", "the titration of a whole sample, so it is an ANC")


def test_what_is_left_out_and_refused(lakes):
    """Which readings would bring it; a row with nothing to go by has its reason."""
    folder = lakes("sample_id,temperature_c,ph,anc_ueq_l\na,12,6.8,70\nb,12,,\n")
    first, = chains_of_run(folder, "a")
    row, = written(folder)
    assert {f"{s.label} ({s.words})" for s in part_of(first, "What is left out").values()} == set(row["left_out"].split("; "))
    text = " ".join(explain(folder, "b").split())
    assert "b (lakes.csv, row 3): refused: it was not assessed" in text
    assert "a lake needs ANC, alkalinity, all of the major ions, or pH; to do: titrate the sample" in text


def test_the_same_text_twice_and_near_names(lakes):
    """Draws have a seed; a name that is not known gets its neighbors."""
    folder = lakes("sample_id,temperature_c,ph,anc_ueq_l\nhill,12,6.8,70\n", draws=100)
    assert explain(folder, "hill") == explain(folder, "hill", row=2)
    with pytest.raises(InputError, match=r"no row of lakes\.csv has the sample_id 'hil'\. The nearest names are 'hill'"):
        explain(folder, "hil")


def test_results_of_another_making_are_refused(lakes):
    """A number that was changed by hand."""
    folder = lakes("sample_id,temperature_c,ph,anc_ueq_l\nhill,12,6.8,70\n")
    results = folder / "results.csv"
    results.write_text(results.read_text(encoding="utf-8").replace(",6.8,", ",6.7,"), encoding="utf-8")
    with pytest.raises(FileError, match=r"results\.csv in out has ph = '6\.7' for 'hill'; worked out again it is '6\.8'\."):
        explain(folder, "hill")
