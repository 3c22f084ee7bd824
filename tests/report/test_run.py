"""A whole run: files, run.json, determinism, pieces, and what happens when no row is accepted."""

import csv
import hashlib
import json
import re

import pandas as pd
import pytest
from numpy.testing import assert_allclose
from run_table import TABLE, TORN

import aquabuf
from aquabuf.assess.options import Options
from aquabuf.errors import FileError, InputError
from aquabuf.report import run as run_module
from aquabuf.report.run import OUTPUT_FILES, assess_file


def read(folder, name):
    """A table of the run as text cells."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def test_all_files_of_a_run(run):
    """Every row stands in results or in rejected; nothing else is left in the folder."""
    words, folder = run(figure=True)
    assert sorted(p.name for p in folder.iterdir()) == sorted(OUTPUT_FILES)
    assert [r["sample_id"] for r in read(folder, "results.csv")] == ["hill", "moor", "vale", "main"]
    assert [(r["row"], r["sample_id"]) for r in read(folder, "rejected.csv")] == [("5", "torn")]
    assert words.startswith("waters.csv: 4 samples assessed, ")
    assert words.rstrip().endswith("samples.svg.")


def test_no_file_without_content(run):
    """No rejected rows, no rejected.csv; no figure asked for, none drawn."""
    words, folder = run(TABLE.replace(TORN, ""))
    assert {p.name for p in folder.iterdir()} == set(OUTPUT_FILES) - {"rejected.csv", "samples.png", "samples.svg"}
    assert "rejected.csv" not in words


def test_readings_of_the_file_come_back_in_its_numbers(run):
    """pH, temperature and alkalinity as given; 0.03 meq/L is 1.50 mg/L as CaCO3 (50.04 g per equivalent)."""
    first = read(run()[1], "results.csv")[0]
    assert [first[k] for k in ("row", "ph", "temperature_c", "alkalinity_meq_l", "alkalinity_mg_l_caco3")] == ["2", "6.6", "8.0", "0.03", "1.5"]


def test_checks_of_the_whole_table_stand_below_the_samples(run):
    """One line for duplicate names, belonging to no row."""
    lines = [r for r in read(run()[1], "checks.csv") if r["sample_id"] == "(all rows)"]
    assert [(r["check"], r["row"], r["met"]) for r in lines] == [("duplicate names", "", "yes")]


def test_duplicate_names_are_counted(run):
    """The later row is refused and the check says so."""
    _, folder = run(TABLE + "moor,lake,9,6.9,0.12,4\n")
    line = next(r for r in read(folder, "checks.csv") if r["check"] == "duplicate names")
    assert (float(line["value"]), line["met"]) == (1.0, "no")
    assert "7" in [r["row"] for r in read(folder, "rejected.csv")]


def test_two_runs_have_the_same_bytes(run):
    """Same input, same options, same files to the byte, figures included; the folder's name is nowhere in them."""
    (words, first), (again, second) = (run(out=name, figure=True, draws=100) for name in ("one", "two"))
    assert words == again
    for name in OUTPUT_FILES:
        assert (first / name).read_bytes() == (second / name).read_bytes(), name


def test_no_clock_and_no_paths(run, tmp_path):
    """Neither today's date nor a path of the machine is written anywhere."""
    _, folder = run(figure=True)
    for path in folder.iterdir():
        content = path.read_bytes()
        assert str(tmp_path).encode() not in content
        assert b"/site-packages" not in content
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert not re.search(r"\d{4}-\d{2}-\d{2}|\d{2}:\d{2}", json.dumps({k: v for k, v in record.items() if k not in ("constants", "limits")}))
    assert record["input"] == "waters.csv"
    assert not [v for v in (record["input"], record["command"], record["version"]) if "/" in v]


def test_run_record(run, tmp_path):
    """What the run rests on: version, options, hashes (hashlib over the files), constants, limits, counts."""
    limits = tmp_path / "own.toml"
    limits.write_text('remove = ["acidic"]\n')
    _, folder = run(limits=limits, seed=7, air_co2_ppm=410.0)
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert (record["program"], record["version"]) == ("aquabuf", aquabuf.__version__)
    assert (record["options"]["seed"], record["options"]["air_co2_ppm"], record["options"]["draws"]) == (7, 410.0, 0)
    assert record["sha256"] == {"readings": hashlib.sha256(TABLE.encode()).hexdigest(),
                                "limits": hashlib.sha256(limits.read_bytes()).hexdigest()}
    assert record["samples"] == {"assessed": 4, "warned": 3, "refused_rows": 1}
    assert record["known_pairs"] == {"pH and alkalinity": 4}
    assert record["ionic_strength_from"] == {"alkalinity": 4}
    names = [x["name"] for x in record["limits"]]
    assert "acidic" not in names
    assert "alkalinity_meq_l < 0.05 meq/L" in [x["rule"] for x in record["limits"]]
    assert {row["regime"] for row in record["constants"]} == {"fresh", "both"}
    assert any("below detection" in note and "sulfate_mol_l" in note for note in record["notes"])
    assert record["checks_listed"] == "all"


def test_constants_of_the_regimes_that_were_met(run):
    """Salt constants are listed only where there is salt water, and then fresh ones need not be."""
    _, folder = run("sample_id,temperature_c,salinity,alkalinity_umol_kg,dic_umol_kg\nsea,15,35,2300,2000\n")
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert {row["regime"] for row in record["constants"]} == {"salt", "both"}
    assert any("Millero" in row["source"] for row in record["constants"])


def test_map_is_hashed_and_used(run, tmp_path):
    """A map file stands in the record too."""
    path = tmp_path / "map.toml"
    path.write_text('[columns]\n"name" = "sample_id"\n"T" = "temperature (°C)"\n"acid reading" = "ph"\n"A" = "alkalinity (meq/L)"\n')
    _, folder = run("name,T,acid reading,A\nx,10,7,1\n", mapping=path)
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert record["sha256"]["map"] == hashlib.sha256(path.read_bytes()).hexdigest()


# ------------------------------------------------------------------ pieces

MANY = "sample_id,temperature_c,ph,alkalinity_meq_l,conductivity_us_cm,dic_mmol_l\n" + "".join(
    f"s{i},{5 + i % 20},{6.3 + 0.1 * (i % 19):.2f},{0.02 + 0.031 * i:.3f},{'' if i % 3 else 30 + i},{'' if i % 7 else 0.5}\n" for i in range(26))
BAD = "".join(f"bad{i},,7,1,50,\n" for i in range(10))
HEADER, _, BODY = MANY.partition("\n")


@pytest.mark.parametrize("text", [MANY, f"{HEADER}\n{BAD}{BODY}", f"{MANY}{BAD}", f"{MANY}s3,5,7,1,20,\n"],
                         ids=["plain", "first piece refused", "last piece refused", "name again"])
@pytest.mark.parametrize("size", [3, 10])
def test_pieces_make_no_difference(run, monkeypatch, text, size):
    """A file read in pieces gives the files and the summary that it gives in one piece."""
    whole = run(text, out="whole", draws=100)
    monkeypatch.setattr(run_module, "CHUNK_ROWS", size)
    pieces = run(text, out="pieces", draws=100)
    assert pieces[0] == whole[0]
    for name in ("results.csv", "verdicts.csv", "checks.csv", "rejected.csv", "curves.csv", "run.json"):
        assert (pieces[1] / name).exists() == (whole[1] / name).exists()
        if (whole[1] / name).exists():
            assert (pieces[1] / name).read_text() == (whole[1] / name).read_text(), name


def test_notes_on_cells_are_counted_over_all_pieces(run, monkeypatch):
    """Three values below detection are three, however the file is cut."""
    text = "sample_id,temperature_c,ph,alkalinity_meq_l,sulfate_mg_l\n" + "".join(f"s{i},10,7,1,<0.{i + 1}\n" for i in range(3))
    monkeypatch.setattr(run_module, "CHUNK_ROWS", 1)
    _, folder = run(text)
    notes = json.loads((folder / "run.json").read_text(encoding="utf-8"))["notes"]
    assert len(notes) == 1
    assert notes[0].startswith("3 x below detection")
    assert notes[0].endswith(": sulfate_mol_l")


def test_long_tables_list_unmet_checks_only(run, monkeypatch):
    """Beyond a number of samples checks.csv holds what needs attention, and run.json says so."""
    monkeypatch.setattr(run_module, "ALL_CHECKS_UP_TO", 3)
    _, folder = run()
    sample_lines = [r for r in read(folder, "checks.csv") if r["sample_id"] != "(all rows)"]
    assert {r["met"] for r in sample_lines} <= {"no"}
    assert json.loads((folder / "run.json").read_text())["checks_listed"] == "unmet only"


def test_notice_before_a_long_run(table, tmp_path, monkeypatch):
    """Many rows with draws are announced; without draws, or few rows, there is no notice."""
    told = []
    for rows, draws, expected in ((3, 100, 1), (3, 0, 0), (100, 100, 0)):
        monkeypatch.setattr(run_module, "ALL_CHECKS_UP_TO", rows)
        told.clear()
        assess_file(table(TABLE), tmp_path / f"o{rows}{draws}", Options(draws=draws), figure=False, notify=told.append)
        assert len(told) == expected
    monkeypatch.setattr(run_module, "ALL_CHECKS_UP_TO", 3)
    assess_file(table(TABLE), tmp_path / "again", Options(draws=100), figure=False, notify=told.append)
    assert "--draws 0 leaves the intervals out" in told[0]


# ------------------------------------------------------------------ what cannot be assessed

def test_no_row_accepted(run, tmp_path):
    """The error counts and names the rule; rejected.csv and run.json are written, no empty tables."""
    with pytest.raises(InputError, match=r"no row of waters.csv can be assessed; 2 were refused, mostly for temperature_c: every sample needs a water "
                                         r"temperature \(2 x\). rejected.csv in out names each"):
        run("sample_id,temperature_c,ph,alkalinity_meq_l\na,,7,1\nb,,7,1\n")
    assert sorted(p.name for p in (tmp_path / "out").iterdir()) == ["rejected.csv", "run.json"]
    assert [r["row"] for r in read(tmp_path / "out", "rejected.csv")] == ["2", "3"]


def test_results_that_exist_are_kept(run):
    """Without force nothing is overwritten; with it, the files of the earlier run go."""
    _, folder = run()
    before = (folder / "results.csv").read_bytes()
    with pytest.raises(FileError, match=r"out/results.csv exists already .* --force"):
        run(seed=2)
    assert (folder / "results.csv").read_bytes() == before
    run(TABLE.replace(TORN, ""), force=True)
    assert not (folder / "rejected.csv").exists()


def test_a_file_that_is_not_there(tmp_path):
    """And no folder is made for it."""
    with pytest.raises(FileError, match=r"none.csv cannot be read: no such file or directory. Check the path and its permissions"):
        assess_file(tmp_path / "none.csv", tmp_path / "out", Options())
    assert not (tmp_path / "out").exists()


def test_worst_samples_of_all_pieces_get_their_curves(run, monkeypatch):
    """The twenty with least acid to pH 6 in the whole file, worst first, though each piece holds a few."""
    monkeypatch.setattr(run_module, "CHUNK_ROWS", 4)
    _, folder = run(MANY)
    results = pd.read_csv(folder / "results.csv")
    expected = results.sort_values("acid_to_ph_6_0_meq_l", kind="stable")["sample_id"].head(20)
    curves = pd.read_csv(folder / "curves.csv")
    assert curves["sample_id"].drop_duplicates().tolist() == expected.tolist()
    at_six = curves[curves["ph"] == 6.0].set_index("sample_id")["acid_added_meq_l"]
    merged = results.set_index("sample_id")["acid_to_ph_6_0_meq_l"].loc[at_six.index]
    assert_allclose(at_six, merged, rtol=0, atol=6e-5)


def test_a_run_that_fails_leaves_the_earlier_result_alone(tmp_path):
    """Even with force: a table without one usable row is no reason to lose a good result."""
    good, bad, out = tmp_path / "good.csv", tmp_path / "bad.csv", tmp_path / "out"
    good.write_text("sample_id,temperature_c,ph,alkalinity_meq_l\na,10,7,1\n", encoding="utf-8")
    bad.write_text("sample_id,temperature_c,ph\na,10,7\n", encoding="utf-8")
    assess_file(good, out, Options(draws=0), figure=False)
    before = {path.name: path.read_bytes() for path in out.iterdir()}
    with pytest.raises(InputError, match="earlier result is untouched"):
        assess_file(bad, out, Options(draws=0), figure=False, force=True)
    assert {path.name: path.read_bytes() for path in out.iterdir()} == before


def test_a_corrected_table_may_follow_a_failed_run(tmp_path):
    """What a failed run left is no result, so the next run needs no force."""
    table, out = tmp_path / "t.csv", tmp_path / "out"
    table.write_text("sample_id,temperature_c,ph\na,10,7\n", encoding="utf-8")
    with pytest.raises(InputError, match=r"rejected\.csv"):
        assess_file(table, out, Options(draws=0), figure=False)
    assert sorted(path.name for path in out.iterdir()) == ["rejected.csv", "run.json"]
    table.write_text("sample_id,temperature_c,ph,alkalinity_meq_l\na,10,7,1\n", encoding="utf-8")
    assess_file(table, out, Options(draws=0), figure=False)
    assert "rejected.csv" not in {path.name for path in out.iterdir()}
