"""What a run shows: quiet, summary for programs, color and progress. Counts come from the tables that the run wrote."""

import csv
import json
import re
import sys
from functools import cache
from pathlib import Path

import pytest
from click.testing import CliRunner

from aquabuf.cli.main import main

sys.path.insert(0, str(Path(__file__).parent))
sys.path.insert(0, str(Path(__file__).parents[1]))
sys.path.insert(0, str(Path(__file__).parents[1] / "report"))

from invented_plans import IMPOSSIBLE
from on_a_terminal import AT_ONCE, ROOT
from on_a_terminal import run as on_terminal
from stream_files import BREAKS, MINIMAL

DATA = ROOT / "field_data"
QUICK = {"assess": ("--draws", "0", "--no-figure"), "titration": ("--figures", "0"), "lake": ("--draws", "0", "--no-figure"),
         "dose": ("--draws", "0", "--no-figure"), "tank": ("--no-simulation", "--no-figure")}
INPUT = {"assess": ("stream_survey.csv",), "titration": ("titration_points.csv", "--samples", DATA / "titration_samples.csv"),
         "lake": ("lake_survey.csv",), "dose": ("plan_upland.toml",), "tank": ("stream_seep.toml",)}
COMMANDS = list(INPUT)
unix = pytest.mark.skipif(sys.platform == "win32", reason="terminals of Unix")


def words_of(command, out, *more):
    """A quick run of the command on its demo file."""
    first, *rest = INPUT[command]
    return [command, DATA / first, *rest, "--out", out, *QUICK[command], *more]


@pytest.fixture(scope="module")
def done(tmp_path_factory):
    """A command run once with these options; returns what it gave and its folder."""
    @cache
    def go(command, *more):
        out = tmp_path_factory.mktemp("screen") / "o"
        return CliRunner().invoke(main, [str(w) for w in words_of(command, out, *more)]), out
    return go


def table(path):
    """The rows of a CSV file by column."""
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


# ------------------------------------------------------------------ quiet

@pytest.mark.parametrize("command", COMMANDS)
def test_quiet_prints_nothing_and_writes_everything(done, command):
    """Both streams are empty; the files are those of a run that talks."""
    quiet, folder = done(command, "--quiet")
    loud, other = done(command)
    assert (quiet.exit_code, quiet.stdout, quiet.stderr) == (0, "", "")
    assert loud.stdout
    assert sorted(p.name for p in folder.iterdir()) == sorted(p.name for p in other.iterdir())


def test_quiet_leaves_errors(call, table):
    """An error is said, and the code is the same."""
    plan = table(IMPOSSIBLE, "plan.toml")
    found = call("dose", plan, "--out", "o", "--no-figure", "--quiet")
    assert (found.exit_code, found.stdout) == (1, "")
    assert found.stderr.startswith("Error: the plan does not hold.")
    missing = call("assess", "none.csv", "--out", "p", "--quiet")
    assert (missing.exit_code, missing.stdout) == (1, "")
    assert "none.csv cannot be read" in missing.stderr


def test_quiet_leaves_notes_out(call, table, monkeypatch):
    """The notice that many rows take long is a note; without --quiet it stands on standard error."""
    monkeypatch.setattr("aquabuf.report.run.ALL_CHECKS_UP_TO", 1)
    name = table()
    assert "--draws 0 leaves the intervals out" in call("assess", name, "--out", "a", "--draws", "100", "--no-figure").stderr
    for more in (("--quiet",), ("--quiet", "--json")):
        assert call("assess", name, "--out", "".join(more), "--draws", "100", "--no-figure", *more).stderr == ""


# ------------------------------------------------------------------ the summary for programs

KEYS = ["program", "version", "command", "inputs", "counts", "verdict", "reason", "headline", "written"]


@pytest.mark.parametrize("command", COMMANDS)
def test_json_is_one_object_with_the_same_keys(done, command):
    """Nothing else on either stream; files told are files there; the record of dose and tank is that of their file."""
    found, folder = done(command, "--json")
    assert (found.exit_code, found.stderr) == (0, "")
    summary = json.loads(found.stdout, parse_constant=pytest.fail)  # no NaN, no Infinity
    record = {"dose": "answer", "tank": "design"}.get(command)
    assert list(summary) == KEYS + ([record] if record else [])
    assert summary["command"] == command
    assert INPUT[command][0] in summary["inputs"].values()
    assert summary["written"] == sorted(p.name for p in folder.iterdir())
    if record:
        assert summary[record] == json.loads((folder / f"{record}.json").read_text(encoding="utf-8"))


@pytest.mark.parametrize("command", COMMANDS)
def test_json_is_the_same_twice(done, command):
    """Same input, same bytes."""
    assert done(command, "--json")[0].stdout == done(command, "--json", "--quiet")[0].stdout


def test_json_of_assess(done):
    """Counts and figures are those of results.csv."""
    found, folder = done("assess", "--json")
    summary, rows = json.loads(found.stdout), table(folder / "results.csv")
    warned = [r for r in rows if r["warnings"]]
    assert summary["counts"] == {"assessed": len(rows), "warned": len(warned),
                                 "refused_rows": len({r["row"] for r in table(folder / "rejected.csv")})}
    assert summary["verdict"] == "warnings"
    counted = [w for r in warned for w in r["warnings"].split("; ")]
    assert summary["headline"]["warnings"] == {w: counted.count(w) for w in sorted(set(counted))}
    worst = summary["headline"]["worst_buffered"]
    least = sorted(rows, key=lambda r: float(r["acid_to_ph_6_0_meq_l"]))[:20]
    assert [r["sample_id"] for r in worst] == [r["sample_id"] for r in least]
    for told, row in zip(worst, least, strict=True):
        assert (told["row"], told["ph"]) == (int(row["row"]), float(row["ph"]))
        assert told["acid_to_ph_6_0_meq_l"] == float(row["acid_to_ph_6_0_meq_l"])
        assert told["acid_to_ph_6_0_meq_l_low"] is None  # no draws
        assert told["warnings"] == [w for w in row["warnings"].split("; ") if w]


def test_json_of_titration(done):
    """Counts and results are those of alkalinity.csv, findings those of findings.csv."""
    found, folder = done("titration", "--json")
    summary, rows = json.loads(found.stdout), table(folder / "alkalinity.csv")
    status = [r["status"] for r in rows]
    assert summary["counts"] == {"titrations": len(rows), "ok": status.count("ok"), "warned": status.count("warned"),
                                 "no_result": status.count("no result"), "refused": status.count("refused")}
    assert summary["verdict"] == "warnings"
    names = [r["finding"] for r in table(folder / "findings.csv")]
    assert summary["headline"]["findings"] == {n: names.count(n) for n in sorted(set(names))}
    for told, row in zip(summary["headline"]["results"], rows, strict=True):
        assert (told["sample_id"], told["row"], told["status"]) == (row["sample_id"], int(row["row"]), row["status"])
        assert told["recommended_ueq_l"] == (float(row["recommended_ueq_l"]) if row["recommended_ueq_l"] else None)
        assert told["recommended_umol_kg"] is None


def test_json_of_weighed_titrations(call):
    """Samples by mass have their result per kilogram, as their table has."""
    found = call("titration", DATA / "sea_titration_points.csv", "--samples", DATA / "sea_titration_samples.csv", "--out", "o",
                 "--figures", "0", "--json")
    told = json.loads(found.stdout)["headline"]["results"]
    assert [r["recommended_umol_kg"] for r in told] == [float(r["recommended_umol_kg"]) for r in table(Path("o/alkalinity.csv"))]
    assert all(r["recommended_ueq_l"] is None for r in told)


def test_json_of_lake(done):
    """Classes are those of the latest sample of each lake; the first to look at are those of priorities.csv."""
    found, folder = done("lake", "--json")
    summary, first = json.loads(found.stdout), table(folder / "priorities.csv")
    assert summary["counts"]["lakes"] == len(first)
    assert summary["counts"]["rows"] == len(table(folder / "results.csv"))
    classes = [r["class"] for r in first]
    assert summary["headline"]["classes"] == {c: classes.count(c) for c in summary["headline"]["classes"]}
    assert sum(summary["headline"]["classes"].values()) + summary["headline"]["no_class"] == len(first)
    for told, row in zip(summary["headline"]["first_to_look_at"], first[:20], strict=True):
        assert (told["rank"], told["sample_id"], told["class"]) == (int(row["rank"]), row["sample_id"], row["class"])
        for name in ("anc_used_ueq_l", "exceedance_meq_m2_yr", "episode_anc_ueq_l", "ph"):
            assert told[name] == (float(row[name]) if row[name] else None), name


def test_json_of_lake_counts_lakes_and_not_samples(call):
    """Of a series of samples only the latest of each lake is counted in a class."""
    found = call("lake", DATA / "lake_history.csv", "--out", "o", *QUICK["lake"], "--json")
    summary, sites = json.loads(found.stdout), {r["site"] for r in table(Path("o/results.csv"))}
    assert summary["counts"]["lakes"] == len(sites) < summary["counts"]["rows"]
    assert sum(summary["headline"]["classes"].values()) + summary["headline"]["no_class"] == len(sites)


def test_json_of_dose(done):
    """Counts and doses are those of the tables; the plan of High Tops holds."""
    found, folder = done("dose", "--json")
    summary, doses = json.loads(found.stdout), table(folder / "doses.csv")
    assert (summary["verdict"], summary["reason"]) == ("holds", "")
    assert summary["counts"]["doses"] == len(doses)
    assert summary["counts"]["targets_met"] == summary["counts"]["targets"] > 0
    assert summary["counts"]["limits_broken"] == sum(r["broken"] == "True" for r in table(folder / "limits.csv"))
    assert [d["product"] for d in summary["headline"]["doses"]] == [r["product"] for r in doses]
    last = table(folder / "steps.csv")[-1]
    assert summary["headline"]["finished_ph"] == pytest.approx(float(last["ph"]), abs=0.005)


def test_json_of_tank(done):
    """Not simulated, so neither refuted nor proven; the tanks are those of stages.csv."""
    found, folder = done("tank", "--json")
    summary, stages = json.loads(found.stdout), table(folder / "stages.csv")
    assert (summary["verdict"], summary["counts"]["tanks"]) == ("not proven", len(stages))
    assert summary["headline"]["tank_volumes_m3"] == pytest.approx([float(r["volume_m3"]) for r in stages], rel=1e-3)
    assert summary["headline"]["keeps_rule"] is summary["headline"]["probability_of_meeting_rule"] is None


def test_json_of_what_does_not_hold(call, table):
    """The object is printed all the same, with the reason; the code is 1 and the error stands on standard error."""
    found = call("dose", table(IMPOSSIBLE, "plan.toml"), "--out", "o", "--no-figure", "--json")
    summary = json.loads(found.stdout)
    assert (found.exit_code, summary["verdict"]) == (1, "does not hold")
    assert len(summary["reason"]) > 20
    assert summary["reason"] in " ".join(found.stderr.split())
    tank = call("tank", table(BREAKS, "s.toml"), "--out", "t", "--no-figure", "--cases", "0", "--json")
    assert (tank.exit_code, json.loads(tank.stdout)["verdict"]) == (1, "not accepted")


def test_json_of_what_cannot_be_worked_out(call, table):
    """Nothing on standard output, so that no program takes half an answer for one."""
    found = call("assess", table("sample_id,temperature_c,ph,alkalinity_meq_l\na,10,77,2\n"), "--out", "o", "--json")
    assert (found.exit_code, found.stdout) == (1, "")
    assert "no row of t.csv can be assessed" in found.stderr


# ------------------------------------------------------------------ color

DESIGN = ("s.toml", "--out", "o", "--no-figure", "--no-simulation")


@unix
@pytest.mark.parametrize(("out_tty", "more", "environment", "colored"), [
    (True, (), {}, True), (False, (), {}, False), (True, (), {"NO_COLOR": "1"}, False), (True, (), {"TERM": "dumb"}, False),
    (True, ("--json",), {}, False)], ids=["terminal", "pipe", "NO_COLOR", "dumb", "json"])
def test_color_on_a_terminal_only(tmp_path, out_tty, more, environment, colored):
    """The verdict is in color on a terminal, and plain everywhere else; files never have color."""
    (tmp_path / "s.toml").write_text(MINIMAL, encoding="utf-8")
    code, out, _ = on_terminal(["tank", *DESIGN, *more], tmp_path, out_tty=out_tty, **environment)
    assert code == 0
    assert "not proven" in out.lower()
    assert ("\x1b[1;33mNOT PROVEN\x1b[0m" in out) is colored
    assert ("\x1b" in out) is colored
    assert b"\x1b" not in (tmp_path / "o" / "report.txt").read_bytes()


# ------------------------------------------------------------------ progress

CLEAR = "\r\x1b[2K"
READINGS = "sample_id,temperature_c,ph,alkalinity_meq_l\na,10,7.6,2\nb,10,6.5,0.03\n"


@unix
@pytest.mark.parametrize(("err_tty", "more", "shown"), [(True, (), True), (False, (), False), (True, ("--quiet",), False),
                                                        (True, ("--json",), True)],
                         ids=["terminal", "pipe", "quiet", "json"])
def test_progress_on_a_terminal_only(tmp_path, err_tty, more, shown):
    """Shown from the first moment on here; it goes to standard error, is wiped at the end, and never enters the results."""
    (tmp_path / "t.csv").write_text(READINGS, encoding="utf-8")
    words = ["assess", "t.csv", "--out", "o", "--draws", "0", "--no-figure", *more]
    code, out, err = on_terminal(words, tmp_path, err_tty=err_tty, code=AT_ONCE)
    assert code == 0
    assert "\x1b" not in out
    if not shown:
        assert err == ""
        return
    lines = err.split(CLEAR)
    assert lines[0] == lines[-1] == ""
    assert all(line.startswith("aquabuf assess: ") for line in lines[1:-1] if line)
    assert not any(b"aquabuf assess: " in p.read_bytes() for p in (tmp_path / "o").iterdir() if p.suffix == ".csv")


@unix
def test_an_error_stands_alone(tmp_path):
    """The line is wiped before the error is printed."""
    (tmp_path / "t.csv").write_text(READINGS.replace("7.6", "76").replace("6.5", "65"), encoding="utf-8")
    code, _, err = on_terminal(["assess", "t.csv", "--out", "o"], tmp_path, err_tty=True, code=AT_ONCE)
    assert code == 1
    assert re.search(rf"{re.escape(CLEAR)}Error: no row of t.csv can be assessed", err)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_run_tells_its_steps(monkeypatch, tmp_path, command):
    """Each run says what it is at, in words that name no function; a share never falls and never passes 1."""
    told = []
    monkeypatch.setattr("aquabuf.report.terminal.Progress.step", lambda _, words, share=None: told.append((words, share)))
    assert CliRunner().invoke(main, [str(w) for w in words_of(command, tmp_path / "o")]).exit_code == 0
    assert len(told) >= 2
    assert all(words and "_" not in words for words, _ in told)
    shares = [share for _, share in told if share is not None]
    assert shares == sorted(shares)
    assert all(0 < share <= 1 for share in shares)
    assert bool(shares) == (command == "assess")


def test_the_sheet_is_shown_once(tmp_path):
    """It comes ahead of figures and page; what follows at the end does not repeat it."""
    done = CliRunner().invoke(main, ["dose", str(DATA / "plan_upland.toml"), "--draws", "0", "--no-figure", "--out",
                                     str(tmp_path / "out")])
    assert done.exit_code == 0
    sheet = (tmp_path / "out" / "sheet.txt").read_text(encoding="utf-8")
    assert done.stdout.startswith(sheet)
    assert done.stdout[len(sheet):].strip().startswith("Written to out: ")
    assert done.stdout.count("SET THE FEEDS") == 1
