"""A run over a stream file: its files, their contract, the same bytes again, and what is never written over."""

import csv
import hashlib
import json
import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parent))

from stream_files import BREAKS, CYANIDE, HOLDS, MINIMAL, PH_ALONE, TITRATED, write_stream

import aquabuf
from aquabuf.errors import FileError, InputError
from aquabuf.report import tank_run
from aquabuf.report.tank_run import tank_stream

ALWAYS = {"report.txt", "design.json", "curve.csv", "demand.csv", "reagents.csv", "stages.csv", "feed.csv",
          "side_effects.csv", "sensitivity.csv", "storage.csv", "rules.csv", "run.json", "report.html"}
SIMULATED = ALWAYS | {"simulation.csv", "faults.csv"}
TEXTS = {"holds": HOLDS, "breaks": BREAKS, "minimal": MINIMAL, "cyanide": CYANIDE, "titrated": TITRATED}
CASES = SIMULATED | {"cases.csv", "alternatives.csv"}
FILES = {"holds": CASES | {"equalization.csv"}, "breaks": CASES, "minimal": SIMULATED,
         "cyanide": ALWAYS, "titrated": SIMULATED | {"equalization.csv"}}

NUMBER, TEXT, FLAG, TABLE, LIST, NONE = (int, float), str, bool, dict, list, type(None)
CONTRACT = {
    "name": TEXT, "accepted": FLAG, "verdict": TEXT, "stops": LIST, "stream": TABLE, "aim_ph": NUMBER, "demand": LIST,
    "reagents": TABLE, "window": TABLE, "equalization": TABLE, "stages": LIST, "feed": LIST, "simulation": (dict, NONE),
    "side_effects": LIST, "storage": TABLE, "batch": TABLE, "sensitivity": LIST, "assumptions": LIST, "warnings": LIST,
    "cautions": LIST}
INNER = {
    "demand": {"reagent": TEXT, "condition": TEXT, "aim": TEXT, "eq_l": NUMBER, "kg_h": NUMBER, "l_h": NUMBER},
    "window": {"tolerance_eq_l": NUMBER, "share_of_demand": NUMBER, "buffer_eq_l_ph": NUMBER, "gain_ph_per_eq_l": NUMBER},
    "equalization": {"volume_m3": NUMBER, "rule": TEXT},
    "stages": {"volume_m3": NUMBER, "residence_min": NUMBER, "setpoint_ph": NUMBER, "dead_time_s": NUMBER, "power_w": NUMBER},
    "feed": {"turndown": NUMBER, "resolution_needed": (int, float, NONE)},
    "simulation": {"minutes_outside": NUMBER, "percent_outside": NUMBER, "worst_ph": NUMBER,
                   "probability_of_meeting_rule": (int, float, NONE)}}


@pytest.fixture(scope="module")
def done(tmp_path_factory):
    """Each of the streams once: what it says, and the folder."""
    kept = {}

    def go(name):
        if name not in kept:
            folder = tmp_path_factory.mktemp(name)
            kept[name] = (tank_stream(write_stream(folder, TEXTS[name]), folder / "out", figure=False, jobs=1), folder / "out")
        return kept[name]
    return go


@pytest.fixture
def run(tmp_path):
    """Run a stream into a folder without simulation; returns what it says, and the folder."""
    def go(text=MINIMAL, *, out="out", **options):
        options = {"figure": False, "simulate": False, "jobs": 1} | options
        return tank_stream(write_stream(tmp_path, text), tmp_path / out, **options), tmp_path / out
    return go


def contents(folder):
    """All bytes by name, hidden files too."""
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def rows(folder, name):
    """A table of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def numbers(folder, name, column):
    """A column of numbers; nan where empty."""
    return [float(r[column] or "nan") for r in rows(folder, name)]


def read(folder, name="design.json"):
    """A record of the run."""
    return json.loads((folder / name).read_text(encoding="utf-8"))


# ------------------------------------------------------------------ files and contract

@pytest.mark.parametrize("name", FILES)
def test_files_of_a_run(done, name):
    """Those that have something to say, and no others."""
    assert set(contents(done(name)[1])) == FILES[name]


@pytest.mark.parametrize("name", FILES)
def test_keys_that_others_rely_on(done, name):
    """Present, of their type, whatever the design comes to."""
    r = read(done(name)[1])
    assert {key: type(r[key]).__name__ for key, kind in CONTRACT.items() if not isinstance(r[key], kind)} == {}
    for key, inner in INNER.items():
        for row in r[key] if isinstance(r[key], list) else [r[key]] if r[key] is not None else []:
            assert {k: row[k] for k, kind in inner.items() if not isinstance(row[k], kind) or isinstance(row[k], bool)} == {}, key
    assert len(r["demand"]) >= 9  # least, mean, most; set point, both ends
    assert r["assumptions"]
    assert r["cautions"]


def test_no_simulation_leaves_its_keys(run):
    """Null in their place, and no table of it."""
    found, folder = run()
    assert read(folder)["simulation"] is None
    assert read(folder)["accepted"] is False
    assert set(contents(folder)) == ALWAYS
    assert found.reason == ""
    assert "not proven" in read(folder)["verdict"].lower()


def test_what_stands_for_accepted(done):
    """A held rule is accepted; a broken one and a stop come with their reason."""
    assert {name: (read(done(name)[1])["accepted"], bool(done(name)[0].reason)) for name in ("holds", "breaks", "cyanide")} == {
        "holds": (True, False), "breaks": (False, True), "cyanide": (False, True)}
    assert done("cyanide")[0].reason.startswith("Do not build this: cyanide")
    assert read(done("cyanide")[1])["stops"]
    assert "only 0 % of 2 simulated cases" in done("breaks")[0].reason


def test_text_is_the_report_and_what_was_written(done):
    """What is printed is what is filed."""
    found, folder = done("holds")
    assert found.text.startswith((folder / "report.txt").read_text(encoding="utf-8"))
    tail = " ".join(found.text.rpartition("Written to out: ")[2].rstrip(".\n").split()).split(", ")
    assert set(tail) == FILES["holds"]


# ------------------------------------------------------------------ tables

def test_tables_have_the_figures_of_the_design(done):
    """To the six figures that tables carry."""
    _, folder = done("holds")
    r = read(folder)
    for name, key, columns in (("demand.csv", "demand", ("eq_l", "kg_h", "l_h", "cost_per_day")),
                               ("stages.csv", "stages", ("volume_m3", "setpoint_ph", "dead_time_s", "power_w")),
                               ("feed.csv", "feed", ("turndown", "size_l_h", "resolution_needed")),
                               ("sensitivity.csv", "sensitivity", ("demand_eq_l", "tolerance_ratio")),
                               ("side_effects.csv", "side_effects", ("value",))):
        for column in columns:
            wanted = [float("nan") if x[column] is None else x[column] for x in r[key]]
            assert numbers(folder, name, column) == pytest.approx(wanted, rel=1e-5, nan_ok=True), (name, column)
    assert numbers(folder, "equalization.csv", "sd_eq_l") == pytest.approx(
        [x["sd_eq_l"] for x in r["equalization"]["volumes"]], rel=1e-5)
    assert [x["kind"] for x in rows(folder, "faults.csv")] == [x["kind"] for x in r["simulation"]["faults"]]
    assert {x["reagent"] for x in rows(folder, "reagents.csv")} == {"caustic", "lime"}
    assert numbers(folder, "storage.csv", "volume_m3") == pytest.approx(
        [float("nan") if x["volume_m3"] is None else x["volume_m3"]
         for x in (*r["storage"]["stores"], *r["storage"]["containment"])], rel=1e-5, nan_ok=True)


def test_course_agrees_with_its_minutes(done):
    """Columns of each tank; pH of the last one stays between the worst of all steps, the inflow within its flows."""
    _, folder = done("holds")
    s, n = read(folder)["simulation"], len(read(folder)["stages"])
    head = list(rows(folder, "simulation.csv")[0])
    assert head == ["time_s", *(f"ph_{k + 1}" for k in range(n)), *(f"reagent_eq_h_{k + 1}" for k in range(n)), "flow_m3_h",
                    "base_eq_l"]
    time, last = numbers(folder, "simulation.csv", "time_s"), numbers(folder, "simulation.csv", f"ph_{n}")
    assert (time[0], time[-1]) == (0.0, s["days"] * 86400.0)
    assert s["lowest_ph"] - 1e-5 <= min(last[1:]) <= max(last[1:]) <= s["highest_ph"] + 1e-5
    assert max(numbers(folder, "simulation.csv", "flow_m3_h")) <= 8.0 + 1e-9  # most of the stream file
    assert max(numbers(folder, "simulation.csv", "base_eq_l")) < 0.0          # an acid waste


def test_reagent_of_the_course_adds_up(done):
    """Feed of the record times its interval is what the simulation counts, within what feeders change between records."""
    _, folder = done("minimal")
    s = read(folder)["simulation"]
    time = np.array(numbers(folder, "simulation.csv", "time_s"))
    fed = sum(np.array(numbers(folder, "simulation.csv", f"reagent_eq_h_{k + 1}")) for k in range(len(s["base_used_eq"])))
    counted = sum(s["base_used_eq"]) - sum(s["acid_used_eq"])
    assert float((fed[1:] * np.diff(time)).sum()) / 3600.0 == pytest.approx(counted, rel=0.02)


def test_curve_is_closed_form_for_strong_acid(done):
    """10 mmol/L of hydrochloric acid: base to pH 7 is the acid, 0.01 eq/L, and intensity near pH 2 is 2.303 [H+]."""
    _, folder = done("minimal")
    curve = {float(r["ph"]): r for r in rows(folder, "curve.csv")}
    acid = 0.365 / 36.458  # mol/L; molar mass of HCl by IUPAC
    assert float(curve[7.0]["reagent_eq_l"]) == pytest.approx(acid, rel=2e-3)
    gamma = 0.9  # activity coefficient of H+ near 0.01 mol/L, to one figure (Debye & Hueckel)
    assert float(curve[2.0]["buffer_eq_l_ph"]) == pytest.approx(np.log(10.0) * 0.01 / gamma, rel=0.05)


def test_cases_count_up_to_the_probability(done):
    """Those that meet over all; the quantiles of the record are those of the table."""
    for name in ("holds", "breaks"):
        _, folder = done(name)
        s, found = read(folder)["simulation"], rows(folder, "cases.csv")
        assert len(found) == s["cases"] == 2
        assert sum(r["meets"] == "True" for r in found) / 2.0 == s["probability_of_meeting_rule"]
        assert s["quantiles"]["outside_min"][-1] == pytest.approx(max(numbers(folder, "cases.csv", "outside_min")), rel=1e-5)
        assert s["quantiles"]["lowest_ph"][-1] == pytest.approx(min(numbers(folder, "cases.csv", "lowest_ph")), rel=1e-5)


def test_every_rule_has_words_and_a_source(done):
    """And those of the number of tanks say what they ask for."""
    found = rows(done("holds")[1], "rules.csv")
    assert [r for r in found if not (r["rule"] and r["says"] and r["source"])] == []
    tanks = {r["rule"]: r for r in found if r["about"] == "number of tanks"}
    assert tanks["continuous"]["says"].startswith("at least 2 tanks")
    assert tanks["continuous"]["keeps"] == "True"
    assert {"number of tanks", "acceptance", "containment", "storage", "batch instead", "places in a tank"} <= {r["about"] for r in found}


# ------------------------------------------------------------------ what it rests on

def test_what_the_run_rests_on(run, tmp_path):
    """Hashes of every file that was read, version, options; no clock, no paths."""
    _, folder = run(TITRATED, cases=3)
    r = read(folder, "run.json")
    assert (r["program"], r["version"], r["command"]) == ("aquabuf", aquabuf.__version__, "tank")
    assert r["files"] == {"stream": "stream.toml", "titration of w": "w.csv", "profile": "p.csv"}
    assert r["sha256"] == {name: hashlib.sha256((tmp_path / file).read_bytes()).hexdigest() for name, file in r["files"].items()}
    assert r["options"] == {"simulation": False, "cases": 3, "days": 0.1, "step_s": None, "seed": 1}
    assert [name for name, text in contents(folder).items() if str(tmp_path).encode() in text] == []


def test_same_stream_same_bytes_whatever_the_jobs(done, run):
    """Cases in one process and in two."""
    one, two = contents(done("holds")[1]), contents(run(HOLDS, simulate=True, jobs=2)[1])
    assert [name for name in one if one[name] != two[name]] == []
    assert one.keys() == two.keys()


def test_an_earlier_result_stays_without_force(run):
    """Told by its name; with force nothing of the earlier run is left."""
    _, folder = run(simulate=True)
    before = contents(folder)
    assert "simulation.csv" in before
    with pytest.raises(FileError, match=r"out/report\.txt exists already and is not overwritten.*--force"):
        run()
    assert contents(folder) == before
    run(force=True)
    assert set(contents(folder)) == ALWAYS


@pytest.mark.parametrize("error", [InputError("no"), RuntimeError("a defect")])
def test_a_failed_run_leaves_the_earlier_result(run, monkeypatch, error):
    """Whatever goes wrong after the first file is written."""
    _, folder = run()
    before = contents(folder)

    def fails(found, record):
        raise error
    monkeypatch.setattr(tank_run, "tank_tables", fails)
    with pytest.raises(type(error)):
        run(force=True)
    assert contents(folder) == before


def test_nothing_is_sized_by_ph_alone(run, tmp_path):
    """Refused with what to measure; no folder is left."""
    with pytest.raises(InputError, match=r"found its pH alone.*Titrate"):
        run(PH_ALONE)
    assert not (tmp_path / "out").exists()


def test_figures_are_drawn_where_there_is_something_to_draw(run, monkeypatch):
    """The design always, the simulation where there was one."""
    drawn = {}
    for name in ("save_design", "save_simulation"):
        def save(found, paths, name=name):
            drawn[name] = sorted(paths)
            for path in paths.values():
                path.write_text(name)
        monkeypatch.setattr(f"aquabuf.report.tank_figures.{name}", save)
    page = {"design.png", "design.svg"}
    assert {f for f in contents(run(figure=True, out="a")[1]) if f.endswith((".png", ".svg"))} == page
    assert drawn == {"save_design": ["png", "svg"]}
    both = contents(run(figure=True, simulate=True, out="b")[1])
    assert {f for f in both if f.endswith((".png", ".svg"))} == page | {"simulation.png", "simulation.svg"}
