"""A run over titrations: files, what is never written over, the same bytes again and in pieces, names, and figures."""

import csv
import hashlib
import json
from functools import partial

import pytest
from numpy.testing import assert_allclose
from titration_tables import ACID, BROKEN, FACTS, HARD, HEADER, POINTS, SAMPLES, SOFT, facts, points

import aquabuf
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.errors import FileError, InputError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report import titration_run
from aquabuf.report.titration_run import ALL_FIGURES, titrate_file

TABLES = ("alkalinity.csv", "findings.csv", "rejected.csv", "report.html", "run.json")


@pytest.fixture
def titrate(table, tmp_path):
    """Write both files, run, and return the text and the folder."""
    def go(text=POINTS, samples=SAMPLES, *, out="out", figures=0, force=False, notify=lambda text: None, **options):
        files = TitrationFiles(table(text, "points.csv"), None if samples is None else table(samples, "samples.csv"))
        return titrate_file(files, tmp_path / out, TitrationOptions(**options), force=force, figures=figures, notify=notify), tmp_path / out
    return go


@pytest.fixture
def quick_pen(monkeypatch):
    """Drawing takes long: a few bytes stand for each figure."""
    monkeypatch.setattr("aquabuf.report.titration_figures.save_titration", lambda result, i, path: path.write_bytes(b"drawn"))


def read(folder, name):
    """A table of the run as text cells."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def names(folder):
    """Everything in the folder, hidden files too."""
    return sorted(path.name for path in folder.iterdir())


def contents(folder):
    """All bytes by name."""
    return {path.name: path.read_bytes() for path in folder.iterdir()}


# ------------------------------------------------------------------ files

def test_files_of_a_run(titrate):
    """The three tables, the page and run.json; rejected.csv only where something was refused; figures only where asked for."""
    assert names(titrate()[1]) == sorted(TABLES)
    assert names(titrate(POINTS.replace(BROKEN, ""), SAMPLES.replace(facts("broken"), ""), out="clean")[1]) == ["alkalinity.csv", "findings.csv", "report.html", "run.json"]


def test_results_give_the_waters_back(titrate):
    """100, 2000 and -50 µeq/L went in; each comes out within its 90 % interval, in the order of the file."""
    rows = read(titrate()[1], "alkalinity.csv")
    assert [r["sample_id"] for r in rows] == ["soft", "hard", "broken", "acid"]
    for r, truth in zip((rows[0], rows[1], rows[3]), (100.0, 2000.0, -50.0), strict=True):
        assert_allclose(float(r["recommended_ueq_l"]), truth, rtol=0, atol=1.645 * float(r["recommended_u_ueq_l"]))
    assert [r["status"] for r in rows] == ["ok", "ok", "refused", "ok"]
    assert [r["row"] for r in rows] == ["2", "27", "52", "54"]


def test_numbers_are_rounded_as_the_table_of_facts_says(titrate):
    """Two decimals of µeq/L, four of mL, three of the slope; counts and rows are whole."""
    r = read(titrate()[1], "alkalinity.csv")[0]
    assert all(len(r[name].partition(".")[2]) <= n for name, n in (("gran_ueq_l", 2), ("gran_volume_ml", 4), ("gran_slope_ratio", 3), ("fit_offset_ph", 4)))
    assert r["gran_points"].isdecimal()


def test_refused_titrations_are_told_why(titrate):
    """File, row, column, value, rule and remedy."""
    (line,) = read(titrate()[1], "rejected.csv")
    assert (line["file"], line["row"], line["sample_id"], line["column"], line["value"], line["rule"]) == ("points", "53", "broken", "ph", "44", "must be 0 to 14")
    assert line["remedy"]


def test_run_record(titrate, tmp_path):
    """Version, names and hashes of the files, options, counts, methods, assumptions; no clock and no path."""
    _, folder = titrate(end_points=(4.5, 4.2), conversion="proton_balance")
    text = (folder / "run.json").read_text(encoding="utf-8")
    record = json.loads(text)
    assert (record["program"], record["version"], record["command"]) == ("aquabuf", aquabuf.__version__, "titration")
    assert record["files"] == {"points": "points.csv", "samples": "samples.csv"}
    assert record["sha256"]["points"] == hashlib.sha256(POINTS.encode()).hexdigest()
    assert record["options"] == {"end_points": [4.5, 4.2], "weak_acid": False, "conversion": "proton_balance"}
    assert record["titrations"] == {"seen": 4, "ok": 3, "refused": 1}
    assert record["methods"] == {"fit": 1, "gran": 2}
    assert record["assumed"]["uncertainty of the strength not stated: default"] == 3
    assert str(tmp_path) not in text


def test_everything_in_one_file(titrate):
    """Facts may stand with the points; then there is no file of samples."""
    lines = [line + (",100,0.02" if line.startswith("soft,0,") else ",,") for line in SOFT.splitlines()]
    _, folder = titrate("sample_id,titrant_ml,ph,sample_volume_ml,titrant_eq_l\n" + "\n".join(lines) + "\n", None)
    assert json.loads((folder / "run.json").read_text())["files"] == {"points": "points.csv"}
    assert read(folder, "alkalinity.csv")[0]["recommended_method"] == "gran"


# ------------------------------------------------------------------ never written over

def test_an_earlier_result_is_kept(titrate):
    """Folder, file and both ways out in the message; not a byte changes."""
    _, folder = titrate()
    before = contents(folder)
    with pytest.raises(FileError, match=r"^out/alkalinity.csv exists already and is not overwritten. Choose another folder with --out, or replace it with --force.$"):
        titrate(weak_acid=True)
    assert contents(folder) == before


def test_figures_alone_are_an_earlier_result_too(titrate, tmp_path):
    """A folder that holds one of our figures is not written into."""
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "titration_00007.png").write_bytes(b"old")
    with pytest.raises(FileError, match=r"out/titration_00007.png exists already"):
        titrate()


def test_force_takes_old_figures_away(titrate, quick_pen):
    """Three figures, then one: the folder never mixes two runs. Files of other names stay."""
    _, folder = titrate(figures=ALL_FIGURES)
    (folder / "notes.txt").write_text("mine")
    assert sum(name.startswith("titration_") for name in names(folder)) == 3
    titrate(figures=1, force=True)
    assert names(folder) == sorted([*TABLES, "notes.txt", "titration_00001.png"])
    titrate(POINTS.replace(BROKEN, ""), SAMPLES.replace(facts("broken"), ""), force=True)
    assert names(folder) == ["alkalinity.csv", "findings.csv", "notes.txt", "report.html", "run.json"]


NOTHING = (f"{HEADER}\n{BROKEN}", f"{FACTS}\n{facts('broken')}")


def test_a_failed_run_keeps_the_earlier_result(titrate):
    """Even with force: no usable titration is no reason to lose a good result."""
    _, folder = titrate(figures=1)
    before = contents(folder)
    with pytest.raises(InputError, match=r"no titration of points.csv can be used; 1 was refused, mostly for ph: must be 0 to 14 \(1 x\). "
                                         r"The earlier result is untouched; use another --out to see the reasons"):
        titrate(*NOTHING, force=True)
    assert contents(folder) == before


def test_no_usable_titration(titrate, tmp_path):
    """The reasons are written, nothing else; a corrected table may follow without force."""
    with pytest.raises(InputError, match=r"no titration of points.csv can be used; 1 was refused, mostly for ph: must be 0 to 14 \(1 x\). "
                                         r"rejected.csv in out names each with its remedy"):
        titrate(*NOTHING)
    assert names(tmp_path / "out") == ["rejected.csv"]
    assert names(titrate()[1]) == sorted(TABLES)


def test_strength_missing_throughout_is_said(titrate):
    """The points without their samples: the usual slip. The count is that of titrations, not of lines."""
    with pytest.raises(InputError, match=r"no titration of points.csv can be used; 4 were refused, mostly for sample_volume_ml"):
        titrate(POINTS, None)


@pytest.mark.parametrize(("change", "message"), [
    (lambda f: f.points.unlink(), r"points.csv cannot be read: no such file or directory. Check the path and its permissions"),
    (lambda f: f.samples.unlink(), r"samples.csv cannot be read: no such file or directory"),
    (lambda f: f.points.write_text(""), r"points.csv"), (lambda f: f.points.write_text("sample_id,ph\na,7\n"), r"points.csv: no column gives the titrant added"),
    (lambda f: f.samples.write_text(POINTS), r"samples.csv: a file of samples has a row per sample.*Are the two files exchanged")])
def test_files_that_cannot_be_used(table, tmp_path, change, message):
    """Which file, and what to do; no folder is made for it."""
    files = TitrationFiles(table(POINTS, "points.csv"), table(SAMPLES, "samples.csv"))
    change(files)
    with pytest.raises((FileError, InputError), match=message):
        titrate_file(files, tmp_path / "out", TitrationOptions())
    assert not (tmp_path / "out").exists()


# ------------------------------------------------------------------ the same bytes

def test_same_input_same_bytes(titrate):
    """Tables, record and figures of two runs, and the text."""
    first, second = titrate(out="a", figures=2), titrate(out="b", figures=2)
    assert first[0] == second[0]
    assert contents(first[1]) == contents(second[1])
    assert "titration_00002.png" in names(first[1])


LONG = points("long", 1e-3, strength=0.05, count=90)
MANY = f"{HEADER}\n" + BROKEN + "".join(points(f"s{i}", a) for i, a in enumerate((3e-5, 1e-4, 2.5e-4))) + LONG + BROKEN.replace("broken", "broken2") + ACID + SOFT
MANY_SAMPLES = (f"{FACTS}\n" + "".join(facts(f"s{i}") for i in range(3)) + facts("long", strength="0.05") + facts("broken") + facts("broken2") + facts("acid")
                + facts("soft", conductivity="<20") + facts("without points"))


@pytest.mark.parametrize("size", [1, 2, 3])
def test_pieces_make_no_difference(titrate, monkeypatch, size):
    """A file read in pieces, some of which hold refused titrations alone, gives the same bytes: tables, figures, record, text."""
    whole = titrate(MANY, MANY_SAMPLES, out="whole", figures=1)
    monkeypatch.setattr(titration_run, "iter_titrations", partial(titration_run.iter_titrations, chunk_samples=size))
    pieces = titrate(MANY, MANY_SAMPLES, out="pieces", figures=1)
    assert pieces[0] == whole[0]
    assert contents(pieces[1]).keys() == contents(whole[1]).keys()
    for name, data in contents(whole[1]).items():
        assert (pieces[1] / name).read_bytes() == data, name


# ------------------------------------------------------------------ names and figures

NAMES = ["../../out of here", "/etc/passwd", "C:\\temp\\x", "CON", "a*b?", "титр", ".hidden", "x" * 300, "=1+1", "titration_00009.png"]


def test_names_of_samples_never_become_file_names(titrate, tmp_path, quick_pen):
    """Figures are numbered by the place in alkalinity.csv, whatever samples are called; the table says which is which."""
    text = f"{HEADER}\n" + "".join(points(name, 1e-4, count=12) for name in NAMES)
    _, folder = titrate(text, f"{FACTS}\n" + "".join(facts(name) for name in NAMES), figures=ALL_FIGURES)
    figures = [f"titration_{i:05d}.png" for i in range(1, len(NAMES) + 1)]
    assert [name for name in names(folder) if name.endswith(".png")] == figures
    rows = read(folder, "alkalinity.csv")
    assert [r["sample_id"] for r in rows] == NAMES
    assert [r["figure"] for r in rows] == figures
    assert names(tmp_path) == ["out", "points.csv", "samples.csv"]


@pytest.mark.parametrize(("figures", "expected"), [(0, []), (1, ["00001"]), (2, ["00001", "00002"]), (ALL_FIGURES, ["00001", "00002", "00004"])])
def test_number_of_figures(titrate, figures, expected):
    """The first ones that could be assessed, by their place in the table; a refused one has none."""
    _, folder = titrate(figures=figures)
    assert [name[10:15] for name in names(folder) if name.endswith(".png")] == expected
    assert [r["figure"] for r in read(folder, "alkalinity.csv") if r["figure"]] == [f"titration_{n}.png" for n in expected]
    assert all((folder / f"titration_{n}.png").read_bytes().startswith(b"\x89PNG") for n in expected)


def test_notice_when_drawing_takes_long(titrate, monkeypatch, quick_pen):
    """Told once, when so many have been drawn, with the way out."""
    monkeypatch.setattr(titration_run, "SLOW_FROM", 2)
    told = []
    titrate(figures=1, notify=told.append, out="a")
    assert told == []
    titrate(figures=3, notify=told.append, out="b")
    assert len(told) == 1
    assert "--figures 0 leaves them out" in told[0]


def test_units_of_the_table_follow_the_files(titrate):
    """Per liter where volumes were given, per kilogram where masses, both where both."""
    weighed = ("sample_id,sample_mass_g,titrant_eq_l\n" + "hard,100,0.05\n")
    _, folder = titrate(f"{HEADER}\n{HARD}", weighed, out="mass")
    header = read(folder, "alkalinity.csv")[0]
    assert "recommended_umol_kg" in header
    assert "recommended_ueq_l" not in header
    both = "sample_id,sample_mass_g,sample_volume_ml,titrant_eq_l\nhard,100,,0.05\nsoft,,100,0.02\n"
    rows = read(titrate(f"{HEADER}\n{HARD}{SOFT}", both, out="both")[1], "alkalinity.csv")
    assert [bool(r["recommended_umol_kg"]) for r in rows] == [True, False]
    assert [bool(r["recommended_ueq_l"]) for r in rows] == [False, True]
