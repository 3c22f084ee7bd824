"""`aquabuf titration`: exit codes, where text goes, options, wrong usage, and files that nobody foresaw."""

import csv
import io
import json
import re
import tempfile
from pathlib import Path

import pytest
from click.testing import CliRunner
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

import aquabuf
from aquabuf.assess.titration.options import END_POINTS, TitrationOptions
from aquabuf.cli.main import main
from aquabuf.report.starters import TITRATION_KINDS, starter
from aquabuf.tables import read_table

ROOT = Path(aquabuf.__file__).parents[1]
MANY = settings(max_examples=40, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck), phases=(Phase.explicit, Phase.generate))


@pytest.fixture
def starters(table):
    """The two starter files: names of points and samples."""
    return table(starter("titration_points"), "points.csv"), table(starter("titration_samples"), "samples.csv")


@pytest.fixture
def run(call, starters):
    """Assess the starter files without figures."""
    def go(*words, out="o"):
        points, samples = starters
        return call("titration", points, "--samples", samples, "--out", out, "--figures", "0", *words)
    return go


def rows(folder="o", name="alkalinity.csv"):
    """A table of the run."""
    with Path(folder, name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def record(folder="o"):
    """The run record."""
    return json.loads(Path(folder, "run.json").read_text(encoding="utf-8"))


# ------------------------------------------------------------------ done is 0

def test_done(run):
    """Text to standard output, nothing to standard error, exit code 0; `titration FILE` and `titration run FILE` are one."""
    done = run()
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("points.csv: 2 titrations, 2 with a result (0 of them with a warning), 0 without, 0 refused.")
    assert [r["sample_id"] for r in rows()] == ["P1", "P2"]


def test_the_command_may_be_named(call, starters, run):
    """`aquabuf titration run ...` does the same."""
    points, samples = starters
    named = call("titration", "run", points, "--samples", samples, "--out", "named", "--figures", "0")
    assert named.stdout == run().stdout


def test_options_may_stand_before_the_file(call, starters):
    """As everywhere else on a command line."""
    points, samples = starters
    done = call("titration", "--out", "o", "--samples", samples, "--figures", "0", points)
    assert done.exit_code == 0, done.stderr


def test_options_reach_the_run(run):
    """Each stands in the record, and in the table."""
    done = run("--end-points", "4.2, 5.0,4.2", "--weak-acid", "--convert", "henriksen_1982")
    assert done.exit_code == 0, done.stderr
    assert record()["options"] == {"end_points": [5.0, 4.5, 4.2], "weak_acid": True, "conversion": "henriksen_1982"}
    assert {"fixed_5_0_ueq_l", "fixed_4_2_ueq_l"} <= set(rows()[0])
    assert "fixed_8_3_ueq_l" not in rows()[0]
    assert {r["converted_to"] for r in rows()} == {"henriksen_1982"}


def test_defaults_are_those_of_the_options(run):
    """No second set of defaults; the help text names those end points."""
    run()
    assert record()["options"] == {"end_points": list(TitrationOptions().end_points), "weak_acid": False, "conversion": "none"}
    text = " ".join(CliRunner().invoke(main, ["titration", "run", "--help"]).output.split())
    assert f"[default: {','.join(f'{e:g}' for e in END_POINTS)}]" in text


@pytest.mark.parametrize(("figures", "count"), [("0", 0), ("1", 1), ("all", 2), ("ALL", 2), ("50", 2)])
def test_figures(call, starters, monkeypatch, figures, count):
    """A number, or all."""
    monkeypatch.setattr("aquabuf.report.titration_figures.save_titration", lambda result, i, path: path.write_bytes(b"drawn"))
    points, samples = starters
    assert call("titration", points, "--samples", samples, "--out", "o", "--figures", figures).exit_code == 0
    assert len(list(Path("o").glob("titration_*.png"))) == count


def test_no_drawing_without_figures(call, starters, tmp_path):
    """Drawing is slow to load; `--figures 0` does not load it."""
    import subprocess
    import sys

    words = ["titration", *(str(tmp_path / starters[0]), "--samples", str(tmp_path / starters[1]), "--out", str(tmp_path / "o"), "--figures", "0")]
    code = f"import sys; sys.argv = ['aquabuf', *{words!r}]\ntry:\n    from aquabuf.cli.main import main; main()\nexcept SystemExit: pass\nprint(*sys.modules, file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=False)
    assert "2 titrations" in done.stdout
    assert "matplotlib" not in done.stderr.split()


def test_notice_of_a_long_drawing_goes_to_standard_error(call, starters, monkeypatch):
    """Standard output stays the text."""
    monkeypatch.setattr("aquabuf.report.titration_run.SLOW_FROM", 1)
    monkeypatch.setattr("aquabuf.report.titration_figures.save_titration", lambda result, i, path: path.write_bytes(b"drawn"))
    points, samples = starters
    done = call("titration", points, "--samples", samples, "--out", "o")
    assert "--figures 0 leaves them out" in done.stderr
    assert done.stdout.startswith("points.csv: ")


def test_maps_of_both_files(call, table):
    """Somebody else's headers."""
    points = starter("titration_points").replace("sample_id,titrant_ml,ph", "Flask;Added;Probe").replace(",", ";")
    samples = "Flask,Vol,N\nP1,100,0.05\nP2,100,0.05\n"
    table(points, "p.csv")
    table(samples, "s.csv")
    table('[columns]\n"Flask" = "sample_id"\n"Added" = "titrant (mL)"\n"Probe" = "ph"\n', "pm.toml")
    table('[columns]\n"Flask" = "sample_id"\n"Vol" = "sample volume (mL)"\n"N" = "titrant strength (eq/L)"\n', "sm.toml")
    done = call("titration", "p.csv", "--samples", "s.csv", "--map", "pm.toml", "--samples-map", "sm.toml", "--out", "o", "--figures", "0")
    assert done.exit_code == 0, done.stderr
    assert set(record()["sha256"]) == {"points", "samples", "points_map", "samples_map"}


def test_into_an_assessment(call, starters, table):
    """`assess --titrations` takes the results; its maps and samples need it."""
    points, samples = starters
    table("sample_id,temperature_c,ph\nP1,15,6.7\nP2,15,7.4\n", "r.csv")
    done = call("assess", "r.csv", "--titrations", points, "--titration-samples", samples, "--out", "o", "--draws", "0", "--no-figure")
    assert done.exit_code == 0, done.stderr
    assert [r["alkalinity_from"] for r in rows("o", "results.csv")] == ["anc by titration (gran)", "alkalinity by titration (fit)"]
    alone = call("assess", "r.csv", "--titration-samples", samples, "--out", "o2")
    assert (alone.exit_code, alone.stdout) == (2, "")
    assert "--titration-samples and the titration maps need --titrations. Name the file of points." in alone.stderr


# ------------------------------------------------------------------ plan, columns, templates

def test_plan(call):
    """Text to standard output; the unit of the alkalinity as asked for."""
    done = call("titration", "plan", "--alkalinity", "100", "--unit", "mg/L as CaCO3", "--ph", "7.6")
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("Plan for 1,998 µeq/L (100 mg/L as CaCO3), first pH about 7.60:\n100 mL of sample, 0.02 eq/L hydrochloric acid, burette, 20 °C.")


def test_options_of_the_plan(call):
    """Each of them."""
    done = call("titration", "plan", "--alkalinity", "1", "--unit", "meq/L", "--sample-ml", "50", "--strength", "0.16", "--device", "counts", "--temperature", "8",
                "--sulfuric")
    assert done.stdout.splitlines()[1] == "50 mL of sample, 0.16 eq/L sulfuric acid, counts, 8 °C."


def test_columns_of_titrations(call):
    """All, one, and those of the result; they are those of the tables."""
    everything = call("columns", "--titration").stdout
    assert all(row["name"] in everything for row in read_table("titration_columns"))
    assert "cartridge" in call("columns", "--titration", "cartridge_factor").stdout
    found = call("columns", "--titration", "--results")
    assert (found.exit_code, found.stderr) == (0, "")
    assert all(row["name"] in found.stdout for row in read_table("titration_results"))
    assert max(map(len, found.stdout.splitlines())) <= 120
    assert call("columns", "--results").stdout != found.stdout


@pytest.mark.parametrize("kind", TITRATION_KINDS)
def test_templates(call, kind):
    """Listed, printed, and nothing else."""
    done = call("template", kind)
    assert (done.exit_code, done.stderr, done.stdout) == (0, "", starter(kind))
    assert kind in call("template").stdout.split()


def test_help(call):
    """Every option, in each of the commands; the way in is told at the top."""
    top = " ".join(call("titration", "--help").stdout.split())
    assert top.startswith("Usage: aquabuf titration POINTS --out FOLDER [OPTIONS] | COMMAND [ARGS]...")
    text = " ".join(call("titration", "run", "--help").stdout.split())
    assert all(option in text for option in ("--out", "--samples", "--map", "--samples-map", "--end-points", "--weak-acid", "--convert", "--figures", "--force"))
    text = " ".join(call("titration", "plan", "--help").stdout.split())
    assert all(option in text for option in ("--alkalinity", "--unit", "--sample-ml", "--strength", "--device", "--ph", "--temperature", "--sulfuric"))


# ------------------------------------------------------------------ wrong usage is 2

RUN, PLAN = ("titration", "points.csv", "--out", "o"), ("titration", "plan", "--alkalinity", "50")
WRONG = [
    (("titration",), "Usage: aquabuf titration POINTS --out FOLDER"), (("titration", "points.csv"), "Missing option '--out'"),
    (("titration", "run"), "Missing argument 'POINTS'"), ((*RUN, "--wide"), "No such option"),
    ((*RUN, "--figures", "many"), "must be a whole number or the word all; found 'many'"), ((*RUN, "--figures", "-1"), "must be a whole number"),
    ((*RUN, "--figures", "²"), "must be a whole number"),
    ((*RUN, "--end-points", "4.5;8"), "must be pH values with commas between, such as 4.5,8.3; found '4.5;8'"),
    ((*RUN, "--end-points", "1"), "an end point must be from pH 2.5 to 11; found 1. Correct the list."),
    ((*RUN, "--end-points", "nan"), "an end point must be from pH 2.5 to 11; found nan"),
    ((*RUN, "--convert", "best"), "a conversion must be one of none, proton_balance, henriksen_1982, charge_balance; found 'best'"),
    (("titration", "plan"), "Missing option '--alkalinity'"), (("titration", "plan", "--alkalinity", "much"), "'much' is not a valid float"),
    ((*PLAN, "--unit", "stones"), "'stones' is not a unit of alkalinity"), ((*PLAN, "--device", "spoon"), "found 'spoon'"),
    ((*PLAN, "--sample-ml", "0"), "the sample volume must be 1 to 5000 mL; found 0"), ((*PLAN, "--strength", "-1"), "the strength must be 0.0001 to 20 eq/L"),
    ((*PLAN, "--temperature", "99"), "the temperature must be 0 to 50 °C; found 99"), ((*PLAN, "--ph", "1"), "the expected pH must be 3 to 12; found 1"),
    ((*PLAN, "--ph", "11.5"), "no water has an alkalinity of 50 µeq/L at pH 11.5"), (("titration", "plan", "--alkalinity", "nan"), "found nan"),
    (("template", "titrate"), "no starter file is named 'titrate'. Did you mean 'titration'? Use one of: lake"), (("columns", "--titration", "nosuch"), "no column is named 'nosuch'"),
    (("titraton", "x"), "No such command 'titraton'. Did you mean 'titration'?"),
]


@pytest.mark.parametrize(("words", "message"), WRONG, ids=[" ".join(w) for w, _ in WRONG])
def test_wrong_usage(call, starters, words, message):
    """Exit code 2, the message to standard error, no folder made."""
    done = call(*words)
    assert (done.exit_code, done.stdout) == (2, "")
    assert message in done.stderr
    assert not Path("o").exists()


# ------------------------------------------------------------------ what cannot be assessed is 1

CANNOT = [
    ("no file", None, "points.csv cannot be read: no such file or directory"), ("empty", "", "points.csv"), ("header only", "sample_id,titrant_ml,ph\n", "points.csv"),
    ("no titrant", "sample_id,ph\na,7\n", "no column gives the titrant added"), ("no reading", "sample_id,titrant_ml\na,7\n", "no column gives the pH or potential read"),
    ("unknown header", "sample_id,titrant_ml,ph,foo\na,0,7,1\n", "foo"), ("no sample_id", "titrant_ml,ph\n0,7\n", "sample_id"),
    ("nothing known of the samples", "sample_id,titrant_ml,ph\na,0,7\na,1,4\n", "no titration of points.csv can be used; 1 was refused, mostly for sample_volume_ml"),
]


@pytest.mark.parametrize(("content", "message"), [c[1:] for c in CANNOT], ids=[c[0] for c in CANNOT])
def test_what_cannot_be_assessed(call, table, content, message):
    """Exit code 1, nothing on standard output, one message on standard error."""
    if content is not None:
        table(content, "points.csv")
    done = call("titration", "points.csv", "--out", "o")
    assert (done.exit_code, done.stdout) == (1, "")
    assert done.stderr.startswith("Error: ")
    assert message in done.stderr
    assert not Path("o/alkalinity.csv").exists()


def test_an_earlier_result_is_kept(run):
    """Refused without --force, replaced with it."""
    run()
    before = Path("o/run.json").read_bytes()
    done = run("--weak-acid")
    assert done.exit_code == 1
    assert "o/alkalinity.csv exists already and is not overwritten" in done.stderr
    assert Path("o/run.json").read_bytes() == before
    assert run("--weak-acid", "--force").exit_code == 0
    assert Path("o/run.json").read_bytes() != before


# ------------------------------------------------------------------ whatever comes in

CELLS = ["", " ", "nan", "inf", "-inf", "1e308", "1e999", "1e-320", "0", "-0", "-1", "<", "<0", "<0.1", ">5", "٣", "−5", "1,5", '"', "=1+1", "\x00", "7.0 ?", "n/a",
         "-999", "1e5", "15", "50", "0.0001", "100", "a" * 300, "yes", "base", "purged", "P1", "4.5", "fixed_4_5", "35"]


def outcome(points, samples=None):
    """Run on these bytes in a folder of their own; raises what should not have come up."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        words = ["titration", folder / "p.csv", "--out", folder / "o", "--figures", "0"]
        for file, content in (("p.csv", points), ("s.csv", samples)):
            if content is not None:
                (folder / file).write_bytes(content)
        if samples is not None:
            words += ["--samples", folder / "s.csv"]
        done = CliRunner(env={"AQUABUF_TRACEBACK": "1"}).invoke(main, [str(w) for w in words])
        if done.exception is not None and not isinstance(done.exception, SystemExit):
            raise done.exception
        counted = len(rows(folder / "o")) if done.exit_code == 0 else None
    assert done.exit_code in (0, 1)
    assert done.exit_code == 0 or (done.stderr.startswith("Error: ") and done.stdout == "")
    return done, counted


@MANY
@given(st.binary(max_size=300))
def test_random_bytes(content):
    """Any bytes at all, as either file."""
    outcome(content)
    outcome(starter("titration_points").encode(), content)


@MANY
@given(st.text(alphabet="ab,;\n\t\"'#.0123456789-", max_size=200))
def test_random_text_under_a_good_header(text):
    """Letters, digits and delimiters in any order."""
    outcome(("sample_id,titrant_ml,ph,sample_volume_ml,titrant_eq_l\n" + text).encode())


@MANY
@given(data=st.data())
def test_garbled_cells(data):
    """Good files with cells replaced: each titration is in the table, assessed or refused, and none is lost."""
    tables = []
    for kind in TITRATION_KINDS:
        lines = [r for r in csv.reader(io.StringIO(starter(kind))) if r and not r[0].startswith("#")]
        for _ in range(data.draw(st.integers(0, 3))):
            at = data.draw(st.integers(1, len(lines) - 1))
            lines[at][data.draw(st.integers(1, len(lines[0]) - 1))] = data.draw(st.sampled_from(CELLS))
        stream = io.StringIO()
        csv.writer(stream).writerows(lines)
        tables.append(stream.getvalue().encode())
    done, counted = outcome(*tables)
    if done.exit_code == 0:
        assert counted == 2
        seen = re.match(r"p.csv: 2 titrations, (\d) with a result \(\d of them with a warning\), (\d) without, (\d) refused", done.stdout)
        assert sum(map(int, seen.groups())) == 2


@pytest.mark.parametrize("one", [
    "a,0,7\na,0,7\n", "a,0,7\na,0,4\na,0,3\n", "a,0,3\na,1,3\na,2,3\n", "a,1,14\na,2,0\n", "a,0,0\na,1e5,0\n", "a,0,14\na,1e-9,14\n", "a,5,4.5\na,6,4.5\n",
    "a,0,4.5\na,1,4.2\n", "a,0,3\na,1,5\na,2,7\na,3,9\n", "a,0,7\n" + "".join(f"a,{i},{4 - i / 1000:.3f}\n" for i in range(1, 200))],
    ids=["two alike", "no titrant", "level", "slip", "zero", "base", "at the end point", "two past it", "rising", "long tail"])
def test_curves_that_make_no_sense(call, table, one):
    """No curve of numbers within their ranges brings the program down; each has a row, and what it assumes is told."""
    for more in ("", ",100,0.05,base", ",100,40,acid"):
        header = "sample_id,titrant_ml,ph" + (",sample_volume_ml,titrant_eq_l,titrant_kind\n" if more else "\n")
        text = header + "".join(f"{line}{more}\n" for line in one.split())
        table(text, "points.csv")
        table("sample_id,sample_volume_ml,titrant_eq_l\na,100,0.05\n", "samples.csv")
        done = call("titration", "points.csv", *(() if more else ("--samples", "samples.csv")), "--out", "o", "--force", "--weak-acid", "--convert", "proton_balance")
        assert done.exit_code == 0, done.stderr
        assert len(rows()) == 1
