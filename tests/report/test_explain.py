"""A sample of a run explained: the numbers are those of results.csv, the files those of the run, or it is refused."""

import csv
import json
import shutil
from pathlib import Path

import pytest
from titration_tables import POINTS, SAMPLES

from aquabuf.assess.options import Options
from aquabuf.assess.sample.chain_results import equation_of
from aquabuf.assess.sample.columns import AS_GIVEN, result_columns
from aquabuf.errors import FileError, InputError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.explain import WIDTH, chain_text, plain
from aquabuf.report.explain_run import chains_of_run, explain
from aquabuf.report.run import assess_file

DATA = Path(__file__).parents[2] / "field_data"
HEADER = "sample_id,temperature_c,ph,alkalinity_meq_l\n"


def written(folder, name="results.csv"):
    """Rows of a table of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def results_of(chain):
    """Value, low and high of every number of a chain, by label."""
    found = {}
    for step in next(p for p in chain.parts if p.title == "Results").steps:
        parts = step.value.replace("(", " ").replace(")", " ").replace(" to ", " ").split()
        found[step.label] = [p for p in parts if p.replace("-", "").replace(".", "").replace("e", "").isdigit() or p.lstrip("-") == "inf"]
    return found


def assert_same_numbers(chain, row, options):
    """Every number of the line of results.csv stands in the chain, interval and all, with the same digits."""
    found, count = results_of(chain), 0
    for column in result_columns(options):
        if not column.unit or column.name in AS_GIVEN or not row[column.name]:
            continue
        names = (column.name, f"{column.name}_low", f"{column.name}_high")
        expected = [row[n] for n in names if row.get(n)]
        assert [float(v) for v in found[equation_of(column.name).label]] == [float(v) for v in expected], column.name
        count += 1
    assert count > 25


# ---------------------------------------------------------------- the numbers


@pytest.mark.parametrize(("table", "mapping", "limits", "options"), [
    ("stream_survey.csv", None, None, {}),
    ("stream_survey.csv", None, None, {"exchange": "open", "acid_thresholds": (6.0, 5.2), "seed": 7}),
    ("plant_raw_water.csv", None, "plant_limits.toml", {"air_co2_ppm": 410.0}),
    ("estuary_profile.csv", "estuary_map.toml", None, {}),
    ("lake_results_long.csv", "wqx", None, {"draws": 0}),
], ids=["streams", "open", "plant", "estuary", "long"])
def test_every_demo_sample_has_the_numbers_of_its_results(tmp_path, table, mapping, limits, options):
    """All samples of the demo tables, with the options of their run."""
    chosen = Options(**({"draws": 100} | options))
    assess_file(DATA / table, tmp_path / "out", chosen, figure=False, limits=None if limits is None else DATA / limits,
                mapping=DATA / mapping if mapping and mapping.endswith("toml") else mapping)
    rows = written(tmp_path / "out")
    assert len(rows) > 9
    for row in rows:
        chain = next(c for c in chains_of_run(tmp_path / "out", row["sample_id"], given=DATA / table) if not c.refused)
        assert (chain.sample_id, str(chain.row)) == (row["sample_id"], row["row"])
        assert_same_numbers(chain, row, chosen)
        assert all(len(line) <= WIDTH for line in chain_text(chain).splitlines())


def test_every_refused_demo_row_has_its_reasons(tmp_path):
    """The words of rejected.csv."""
    assess_file(DATA / "stream_survey.csv", tmp_path / "out", Options(draws=0), figure=False)
    refused = written(tmp_path / "out", "rejected.csv")
    assert len(refused) == 9
    for line in refused:
        text = " ".join(explain(tmp_path / "out", line["sample_id"], given=DATA / "stream_survey.csv", row=int(line["row"])).split())
        assert f"row {line['row']}): refused: it was not assessed" in text
        assert f"{line['rule']}; to do: {line['remedy']}" in text


def test_the_chain_of_a_titrated_sample(table, tmp_path):
    """The alkalinity is the result of its titration, the cell is told to have given way, and all files are found."""
    path = table("sample_id,temperature_c,ph,alkalinity_meq_l\nsoft,12,6.8,\nhard,13,7.4,2.9\n")
    files = TitrationFiles(table(POINTS, "points.csv"), table(SAMPLES, "samples.csv"))
    assess_file(path, tmp_path / "out", Options(draws=100), titrations=files, figure=False)
    row = next(r for r in written(tmp_path / "out") if r["sample_id"] == "hard")
    chain, = chains_of_run(tmp_path / "out", "hard")
    assert_same_numbers(chain, row, Options(draws=100))
    text = " ".join(chain_text(chain).split())
    assert "2.9 meq/L column 'alkalinity_meq_l'; a titration takes its place." in text
    assert "recommended result of its titration (fit)." in text
    table(POINTS + " ", "points.csv")
    with pytest.raises(FileError, match=r"points\.csv, the titration points of this run, has changed since: its sha256 begins with"):
        chains_of_run(tmp_path / "out", "hard")


def test_a_reading_below_detection_and_its_uncertainty(run, tmp_path):
    """<0.5 mg/L of sulfate (96.056 g/mol): half of it, 2.60265 µmol/L, with 0.5 / (2 √3) mg/L, 1.50264 µmol/L."""
    run()
    text = explain(tmp_path / "out", "hill")
    lines = [" ".join(line.split()) for line in text.splitlines() if line.startswith("   sulfate  ")]
    assert lines[0].startswith("sulfate <0.5 mg/L")
    assert lines[1].startswith("sulfate 2.6026")
    assert lines[2].startswith("sulfate 1.5026")
    assert "× 1.04106e-05 (SO4: 96.056 g/mol); half the detection limit." in text


# ---------------------------------------------------------------- text


def test_hostile_names_stay_in_their_line(run, tmp_path):
    """Control and direction marks are replaced, long names cut, line breaks joined."""
    evil = "\x1b[2Jx\u202e" + "y" * 3000
    run(HEADER + f'"{evil}",10,7.6,2\n"two\nlines",11,7,1\n')
    text = explain(tmp_path / "out", evil)
    assert "\x1b" not in text and "\u202e" not in text  # noqa: PT018
    assert text.startswith("\N{REPLACEMENT CHARACTER}[2Jx\N{REPLACEMENT CHARACTER}yyy")
    assert all(len(line) <= WIDTH for line in text.splitlines())
    assert explain(tmp_path / "out", "two\nlines").startswith("two lines (waters.csv, row 3):")
    assert len(plain("z" * 900)) == 401


def test_the_same_text_twice(run, tmp_path):
    """Draws have a seed."""
    run(HEADER + "a,10,7.6,2\n", draws=100)
    assert explain(tmp_path / "out", "a") == explain(tmp_path / "out", "a")


# ---------------------------------------------------------------- names and rows


def test_an_unknown_name_gets_the_nearest(run, tmp_path):
    """Without regard to capitals; a name that is near none says so."""
    run(HEADER + "Hill-1,10,7.6,2\nHill-2,10,7.6,2\nmoor,10,7,1\n")
    with pytest.raises(InputError, match=r"no row of waters\.csv has the sample_id 'hill_1'\. The nearest names are 'Hill-1', 'Hill-2'\. Correct the name\."):
        explain(tmp_path / "out", "hill_1")
    with pytest.raises(InputError, match=r"'qqq'\. No name is near\. Correct the name\."):
        explain(tmp_path / "out", "qqq")


def test_a_name_used_twice(run, tmp_path):
    """All rows, the accepted and the refused; --row picks one; a row of another name is none."""
    run(HEADER + "a,10,7.6,2\nb,10,7.6,2\na,11,7.5,1\n")
    assert [(c.row, c.refused) for c in chains_of_run(tmp_path / "out", "a")] == [(2, False), (4, True)]
    assert [c.row for c in chains_of_run(tmp_path / "out", "a", row=4)] == [4]
    with pytest.raises(InputError, match=r"'a' stands in row 2, 4 of waters\.csv; found row 3\. Correct --row, or leave it out"):
        chains_of_run(tmp_path / "out", "a", row=3)


def test_a_result_refused_in_a_long_table(table, tmp_path):
    """The sample goes on without it."""
    mapping = table('[long]\nsample_id = "S"\ncharacteristic = "P"\nvalue = "V"\nunit = "U"\n[characteristics]\n"acidity" = "ph"\n"Alk" = "alkalinity"\n'
                    '"Ca" = "calcium"\n[values]\ntemperature_c = 12.0\n', "m.toml")
    path = table("S,P,V,U\na,acidity,7.1,\na,Alk,80,mg/l as CaCO3\na,Ca,much,mg/l\n")
    assess_file(path, tmp_path / "out", Options(draws=0), mapping=mapping, figure=False)
    whole, part = chains_of_run(tmp_path / "out", "a")
    assert not whole.refused
    assert (part.row, part.verdict) == (4, "refused: the sample was assessed without it")


# ---------------------------------------------------------------- files


def test_readings_are_found_beside_in_the_current_folder_or_by_name(run, tmp_path, monkeypatch):
    """In that order; a file of that name that is another does not hide the right one."""
    run(HEADER + "a,10,7.6,2\n")
    folder, path = tmp_path / "out", tmp_path / "waters.csv"
    assert explain(folder, "a")
    for place in ("here", "far"):
        (tmp_path / place).mkdir()
        shutil.copy(path, tmp_path / place / "waters.csv")
    path.write_text(HEADER + "a,10,7.6,3\n", encoding="utf-8")
    monkeypatch.chdir(tmp_path / "here")
    assert explain(folder, "a")
    (tmp_path / "here" / "waters.csv").unlink()
    path.unlink()
    with pytest.raises(FileError, match=r"waters\.csv, the readings of this run, is neither beside out nor in the current folder\. Name it with --input\."):
        explain(folder, "a")
    assert explain(folder, "a", given=tmp_path / "far" / "waters.csv")
    with pytest.raises(FileError, match=r"nowhere\.csv: no such file\. Check the name given with --input\."):
        explain(folder, "a", given=Path("nowhere.csv"))


def test_changed_readings_are_refused(run, tmp_path):
    """What changed, and what to do, whether found or named."""
    run(HEADER + "a,10,7.6,2\n")
    path = tmp_path / "waters.csv"
    path.write_text(HEADER + "a,10,7.6,3\n", encoding="utf-8")
    words = r"waters\.csv, the readings of this run, has changed since: its sha256 begins with [0-9a-f]{12}, that of the run with [0-9a-f]{12}\. Give back"
    for given in (None, path):
        with pytest.raises(FileError, match=words):
            explain(tmp_path / "out", "a", given=given)


def test_map_and_limits_are_those_of_the_run(table, run, tmp_path):
    """Found beside the readings; missing or changed ones are refused."""
    mapping = table('[columns]\n"x" = "alkalinity (meq/L)"\n', "m.toml")
    limits = table('only_mine = true\n[limits."house rule"]\nquantity = "ph"\noperator = "<"\nlimit = 8\nwords = "w"\nsource = "manual"\n', "l.toml")
    run("sample_id,temperature_c,ph,x\na,10,7.6,2\n", mapping=mapping, limits=limits)
    assert json.loads((tmp_path / "out" / "run.json").read_text(encoding="utf-8"))["files"] == {
        "readings": "waters.csv", "map": "m.toml", "limits": "l.toml"}
    assert "house rule" in explain(tmp_path / "out", "a")
    (tmp_path / "far").mkdir()
    for name in ("waters.csv", "m.toml", "l.toml"):
        shutil.move(tmp_path / name, tmp_path / "far" / name)
    assert explain(tmp_path / "out", "a", given=tmp_path / "far" / "waters.csv")
    (tmp_path / "far" / "l.toml").write_text("only_mine = true\n", encoding="utf-8")
    with pytest.raises(FileError, match=r"l\.toml, the limits of this run, has changed since"):
        explain(tmp_path / "out", "a", given=tmp_path / "far" / "waters.csv")
    (tmp_path / "far" / "l.toml").unlink()
    with pytest.raises(FileError, match=r"l\.toml, the limits of this run, is neither .*Put the limits file there, or beside the readings"):
        explain(tmp_path / "out", "a", given=tmp_path / "far" / "waters.csv")


# ---------------------------------------------------------------- the proof, and records that are none


def change(path, old, new):
    """Replace a text of a file once."""
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


def test_results_of_another_making_are_refused(run, tmp_path):
    """A number that was changed by hand; with another version it is named as well."""
    run(HEADER + "a,10,7.6,2\n")
    results, record = tmp_path / "out" / "results.csv", tmp_path / "out" / "run.json"
    change(results, ",7.6,", ",7.7,")
    with pytest.raises(FileError, match=r"results\.csv in out has ph = '7\.7' for 'a'; worked out again it is '7\.6'\. Run the assessment again"):
        explain(tmp_path / "out", "a")
    change(record, '"version": "', '"version": "0.0.')
    with pytest.raises(FileError, match=r"it is '7\.6'\. The run was made by version 0\.0\.\S+, this is \S+\. Run"):
        explain(tmp_path / "out", "a")


def test_a_sample_missing_from_the_results(run, tmp_path):
    """Its line was taken out, or the file."""
    run(HEADER + "a,10,7.6,2\n")
    results = tmp_path / "out" / "results.csv"
    results.write_text(results.read_text(encoding="utf-8").split("\n")[0] + "\n", encoding="utf-8")
    with pytest.raises(FileError, match=r"results\.csv in out has no line for 'a' of row 2, which the readings have\."):
        explain(tmp_path / "out", "a")
    results.unlink()
    with pytest.raises(FileError, match=r"out has no results\.csv that can be read\. Run the assessment again"):
        explain(tmp_path / "out", "a")


@pytest.mark.parametrize(("text", "words"), [
    (None, r"out has no run\.json, so it is no folder of results\. Name the folder that --out made\."),
    ("{", r"out/run\.json cannot be read as a run record\. Run the assessment again\."),
    ("[]", r"out/run\.json must have command, files, options, sha256; it lacks command"),
    ('{"command": "assess", "sha256": {}, "options": {}}', r"it lacks files\. It is of another version: run the assessment again with --force\."),
    ('{"command": "assess", "sha256": {}, "options": {}, "files": {}}', r"must name each file with its hash; it does not\."),
    ('{"command": "dose", "sha256": {}, "options": {}, "files": {}}', r"out holds results of `aquabuf dose`; only samples of `aquabuf assess`.* can be explained\."),
], ids=["none", "broken", "list", "old", "empty", "dose"])
def test_records_that_cannot_be_used(tmp_path, text, words):
    """Each says what is wrong and what to do."""
    (tmp_path / "out").mkdir()
    if text is not None:
        (tmp_path / "out" / "run.json").write_text(text, encoding="utf-8")
    with pytest.raises((FileError, InputError), match=words):
        explain(tmp_path / "out", "a")


def test_options_of_another_version(run, tmp_path):
    """An option that is not known."""
    run(HEADER + "a,10,7.6,2\n")
    change(tmp_path / "out" / "run.json", '"exchange"', '"exchanges"')
    with pytest.raises(InputError, match=r"run\.json has options that this version does not know \(.*exchanges.*\)\. Run the assessment again"):
        explain(tmp_path / "out", "a")


def test_no_folder(tmp_path):
    """The folder of --out is meant."""
    with pytest.raises(FileError, match=r"nothing: no such folder of results\. Name the folder that --out made\."):
        explain(tmp_path / "nothing", "a")
