"""A run over a plan: its files, their content, the same bytes again, and what is never written over."""

import csv
import hashlib
import json
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))

from invented_plans import PLANS, UPLAND, answered, write_plan

import aquabuf
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.errors import FileError, InputError
from aquabuf.report import dose_run
from aquabuf.report.dose_run import dose_plan

ALWAYS = {"answer.json", "sheet.txt", "report.html", "steps.csv", "limits.csv", "run.json", "errors.csv"}
FED = ALWAYS | {"doses.csv", "curves.csv", "faults.csv"}
FILES = {"upland": FED | {"buffers.csv"}, "fixed": FED, "blend": ALWAYS | {"blend.csv"},
         "impossible": ALWAYS - {"errors.csv"} | {"doses.csv"}, "season": FED | {"buffers.csv", "season.csv", "season_doses.csv"}}


@pytest.fixture
def run(tmp_path):
    """Run a plan into a folder; returns what it says, and the folder."""
    def go(name="upland", *, text=None, out="out", figure=False, **options):
        folder = tmp_path / out
        return dose_plan(write_plan(tmp_path, name, text), folder, figure=figure, **options), folder
    return go


def contents(folder):
    """All bytes by name, hidden files too."""
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def rows(folder, name):
    """A table of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def read(folder, name):
    """A record of the run."""
    return json.loads((folder / name).read_text(encoding="utf-8"))


@pytest.mark.parametrize("name", FILES)
def test_files_of_a_run(run, name):
    """Those that have something to say, and no others."""
    assert set(contents(run(name)[1])) == FILES[name]


def test_text_is_the_sheet_and_what_was_written(run):
    """The sheet on the wall is what was printed."""
    done, folder = run()
    sheet = (folder / "sheet.txt").read_text(encoding="utf-8")
    assert done.text.startswith(sheet)
    assert "Written to out: answer.json, sheet.txt, doses.csv" in done.text
    assert done.reason == ""


@pytest.mark.parametrize("name", ["upland", "impossible", "smallest"])
def test_the_answer_is_the_record(run, name):
    """Key for key, figure for figure."""
    assert read(run(name)[1], "answer.json") == answered(name)[1]


def test_tables_have_the_figures_of_the_answer(run):
    """To the six figures that tables carry."""
    _, folder = run()
    r = read(folder, "answer.json")
    assert [float(x["dose_mg_l_product"]) for x in rows(folder, "doses.csv")] == pytest.approx([x["dose_mg_l_product"] for x in r["doses"]], rel=1e-5)
    assert [float(x["l_h"] or "nan") for x in rows(folder, "doses.csv")] == pytest.approx([r["doses"][0]["feed"]["l_h"], float("nan")], rel=1e-5, nan_ok=True)
    assert [float(x["ccpp_mg_l"]) for x in rows(folder, "steps.csv")] == pytest.approx([x["ccpp_mg_l"] for x in r["steps"]], rel=1e-5)
    assert [x["name"] for x in rows(folder, "limits.csv")] == [x["name"] for x in r["limits"]]
    assert {x["source"] != "" for x in rows(folder, "limits.csv")} == {True}
    assert [float(x["ph_behind"]) for x in rows(folder, "faults.csv")] == pytest.approx([x["ph_behind"] for x in r["faults"]], rel=1e-5)
    assert {(x["step"], x["product"]) for x in rows(folder, "curves.csv")} == {("final pH", "lime"), ("final pH", "gas")}


def test_errors_tell_readings_and_feeds_apart(run):
    """Windows of both, causes of both, doses of the readings."""
    found = rows(run()[1], "errors.csv")
    assert {(x["table"], x["erring"]) for x in found} == {("dose", "readings"), ("window", "readings"), ("cause", "readings"),
                                                         ("window", "feeds"), ("cause", "feeds")}
    assert {x["cause"] for x in found if (x["table"], x["erring"]) == ("window", "feeds")} == {"all together", "lime", "gas"}
    share = sum(float(x["variance_percent"]) for x in found
                if x["table"] == "cause" and x["erring"] == "readings" and x["quantity"] == "pH" and x["step"] == "final pH")
    assert share == pytest.approx(100.0, abs=0.01)


def test_sweep_of_a_blend(run):
    """From none to all of the permeate, alkalinity by mass balance at each share."""
    found = rows(run("blend")[1], "blend.csv")
    assert [float(x["share_percent"]) for x in found] == pytest.approx([5.0 * k for k in range(21)])
    assert [float(x["alkalinity_mg_l_caco3"]) for x in found] == pytest.approx([290.0 - 2.84 * 5.0 * k for k in range(21)], rel=1e-5)


def test_season_has_a_row_for_each_of_the_readings(run):
    """And a row of the doses for each product."""
    folder = run("season")[1]
    assert [int(x["row"]) for x in rows(folder, "season.csv")] == list(range(1, 25))
    assert [x["product"] for x in rows(folder, "season_doses.csv")] == ["lime", "gas"]


def test_what_the_run_rests_on(run, tmp_path):
    """Hashes of plan and season, version, constants, options; no clock, no paths."""
    _, folder = run("season", draws=200)
    record = read(folder, "run.json")
    assert (record["program"], record["version"], record["command"]) == ("aquabuf", aquabuf.__version__, "dose")
    assert record["files"] == {"plan": "plan.toml", "drift readings": "year.csv"}
    assert record["sha256"] == {name: hashlib.sha256((tmp_path / file).read_bytes()).hexdigest()
                                for name, file in record["files"].items()}
    assert record["options"] == {"draws": 200, "seed": 1}
    assert {row["regime"] for row in record["constants"]} <= {"fresh", "both"}
    assert record["constants"]


@pytest.mark.parametrize("name", PLANS)
def test_no_words_about_this_machine(run, tmp_path, name):
    """Nothing of the folders above ends in a file."""
    done, folder = run(name)
    assert [file for file, content in contents(folder).items() if str(tmp_path).encode() in content] == []
    assert str(tmp_path) not in done.text


def test_same_plan_same_bytes(run):
    """Twice over."""
    assert contents(run("season", out="a")[1]) == contents(run("season", out="b")[1])


def test_draws_none(run):
    """Nothing is told of errors."""
    _, folder = run(draws=0)
    assert "errors.csv" not in contents(folder)
    assert read(folder, "run.json")["options"]["draws"] == 0


def test_an_earlier_result_stays_without_force(run):
    """Told by its name; with force nothing of the earlier run is left."""
    _, folder = run()
    before = contents(folder)
    with pytest.raises(FileError, match=r"out/answer\.json exists already and is not overwritten.*--force"):
        run("smallest")
    assert contents(folder) == before
    run("smallest", force=True)
    assert set(contents(folder)) == ALWAYS


@pytest.mark.parametrize("error", [InputError("no"), RuntimeError("a defect")])
def test_a_failed_run_leaves_the_earlier_result(run, monkeypatch, error):
    """Whatever goes wrong after the first file is written."""
    _, folder = run()
    before = contents(folder)

    def fails(answer):
        raise error
    monkeypatch.setattr(dose_run, "dose_sheet", fails)
    with pytest.raises(type(error)):
        run("fixed", force=True)
    assert contents(folder) == before


def test_a_plan_that_cannot_be_worked_out_leaves_no_folder(run, tmp_path):
    """The folder goes with its parts."""
    with pytest.raises(InputError, match="unknown"):
        run(text=UPLAND.replace("strength = \"92 %\"", "unknown = 1"))
    assert not (tmp_path / "out").exists()


def test_a_plan_that_does_not_hold_is_written_all_the_same(run):
    """With its reason."""
    done, folder = run("impossible")
    assert done.reason == read(folder, "answer.json")["reason"] != ""
    assert "STOP" in (folder / "sheet.txt").read_text(encoding="utf-8")


def test_figures_are_drawn_where_there_is_something_to_draw(run, monkeypatch):
    """The page always, the season and the blend where the plan has them."""
    from aquabuf.report import dose_figures
    for name in ("save_sheet", "save_season", "save_blend"):
        monkeypatch.setattr(dose_figures, name, lambda answer, paths, name=name: [p.write_text(name) for p in paths.values()])
    drawn = {name: {f for f in contents(run(name, out=name, figure=True)[1]) if f.endswith((".png", ".svg"))}
             for name in ("fixed", "season", "blend")}
    page = {"dose.png", "dose.svg"}
    assert drawn == {"fixed": page, "season": page | {"season.png", "season.svg"}, "blend": page | {"blend.png", "blend.svg"}}


def test_the_record_is_the_same_twice():
    """No draw of luck in the words."""
    answer, record = answered("upland")
    assert answer_record(answer) == record


def test_the_sheet_is_there_before_figures_and_page(tmp_path):
    """An operator does not wait for drawings; the files appear only when all is done."""
    told = []

    def show(text):
        told.append(("sheet", text, (tmp_path / "out" / "sheet.txt").exists()))

    done = dose_plan(Path(__file__).parents[2] / "field_data" / "plan_upland.toml", tmp_path / "out", draws=0, figure=False,
                     step=lambda words, share=None: told.append((words,)), show=show)
    assert [one[0] for one in told] == ["the plan being solved", "sheet", "page"]
    assert done.text.startswith(told[1][1])
    assert told[1][2] is False
    assert (tmp_path / "out" / "sheet.txt").read_text(encoding="utf-8") == told[1][1]
