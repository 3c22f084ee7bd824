"""`aquabuf tank`: exit codes, where text goes, the curve for the log, and stream files that cannot be used."""

import json
import re
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "report"))

from stream_files import BREAKS, CURVE, CYANIDE, HOLDS, MINIMAL, PH_ALONE, PROFILE, TITRATED


@pytest.fixture
def stream(table):
    """Write a stream file with its tables and return its name."""
    def write(text=MINIMAL):
        table(CURVE, "w.csv")
        table(PROFILE, "p.csv")
        return table(text, "stream.toml")
    return write


@pytest.fixture
def run(call, stream):
    """Design without figures."""
    def go(text=MINIMAL, *words, out="o"):
        return call("tank", stream(text), "--out", out, "--no-figure", "--jobs", "1", *words)
    return go


def record():
    """The design as it was written."""
    return json.loads(Path("o/design.json").read_text(encoding="utf-8"))


# ------------------------------------------------------------------ the run

def test_accepted(run):
    """The report to standard output, nothing to standard error, exit code 0."""
    done = run(HOLDS)
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("Invented rinse")
    assert "\nVERDICT: ACCEPTED\n" in done.stdout
    assert "Written to o: report.txt, design.json" in done.stdout
    assert record()["accepted"] is True


def test_the_command_may_be_named(call, stream, run):
    """`aquabuf tank run ...` does the same."""
    named = call("tank", "run", stream(), "--out", "o", "--no-figure", "--no-simulation")
    assert named.stdout == run(MINIMAL, "--no-simulation", "--force").stdout


def test_a_design_that_does_not_hold_is_noticed_by_a_script(run):
    """Exit code 1 and the reason in one line on standard error, once everything is written."""
    done = run(BREAKS)
    assert done.exit_code == 1
    assert re.fullmatch(r"Error: the design is not accepted\. The design does not hold: only 0 % of 2 simulated cases .*\n", done.stderr)
    assert "\nVERDICT: NOT ACCEPTED\n" in done.stdout
    assert record()["simulation"]["probability_of_meeting_rule"] == 0.0


def test_acid_to_cyanide_is_stopped(run):
    """The stop on top, exit code 1, nothing simulated; the results are written all the same."""
    done = run(CYANIDE)
    assert done.exit_code == 1
    assert re.fullmatch(r"Error: the design is not accepted\. Do not build this: cyanide, .*hydrogen cyanide.*\n", done.stderr)
    assert done.stdout.index("STOP: NOTHING IS TO BE BUILT") < done.stdout.index("STREAM")
    assert record()["simulation"] is None
    assert record()["stops"]


@pytest.mark.parametrize("words", [("--no-simulation",), ("--cases", "0")])
def test_not_proven_is_no_failure(run, words):
    """Left out by the user: exit code 0 and the words."""
    done = run(HOLDS, *words)
    assert (done.exit_code, done.stderr) == (0, "")
    assert "\nVERDICT: NOT PROVEN\n" in done.stdout
    assert not Path("o/cases.csv").exists()
    assert Path("o/simulation.csv").exists() == (words[0] == "--cases")


def test_cases_replace_those_of_the_file(run):
    """Three rows, and the probability of three."""
    run(HOLDS, "--cases", "3")
    assert record()["simulation"]["cases"] == 3
    assert len(Path("o/cases.csv").read_text(encoding="utf-8").splitlines()) == 4


def test_overwriting_needs_force(run):
    """An earlier result is refused, named, and left as it is."""
    run(MINIMAL, "--no-simulation")
    before = Path("o/report.txt").read_bytes()
    done = run(TITRATED, "--no-simulation")
    assert (done.exit_code, done.stdout) == (1, "")
    assert "o/report.txt exists already and is not overwritten" in done.stderr
    assert Path("o/report.txt").read_bytes() == before
    assert run(TITRATED, "--no-simulation", "--force").exit_code == 0
    assert Path("o/report.txt").read_bytes() != before


def test_ph_alone_is_refused(run):
    """One line that says what to measure; nothing is written."""
    done = run(PH_ALONE)
    assert (done.exit_code, done.stdout) == (1, "")
    assert re.search(r"stream\.toml, line 7, .*found its pH alone\. .*Titrate a liter of it", done.stderr)
    assert done.stderr.count("\n") == 1
    assert not Path("o").exists()


@pytest.mark.parametrize(("text", "old", "new", "message"), [
    (MINIMAL, "flow =", "flwo =", r"stream\.toml, line 8, \[wastes\.w\]: flwo is not a key here\. The nearest is flow\."),
    (MINIMAL, '"6 m3/h"', '"6 furlongs"', r"line 8, \[wastes\.w\].*'furlongs'"),
    (MINIMAL, "[6.0, 9.0]", "[9.0, 6.0]", r"\[window\]: ph must .*found \[9.*6"),
    (MINIMAL, "[window]", "[window", r"stream\.toml is not valid TOML"),
    (MINIMAL, '[reagents.caustic]\nis = "caustic soda"\nstrength = "25 %"', "", r"needs one reagent or more in \[reagents\]"),
    (TITRATED, '"w.csv"', '"none.csv"', r"titration must be a table beside the stream file; found no file 'none\.csv'"),
    (TITRATED, '"p.csv"', '"none.csv"', r"file must be a table beside the stream file; found no file 'none\.csv'"),
], ids=["unknown key", "unknown unit", "window upside down", "no TOML", "no reagent", "no titration", "no profile"])
def test_a_bad_stream_is_told_in_one_line(run, text, old, new, message):
    """File, line, what is wrong; nothing is written."""
    assert old in text
    done = run(text.replace(old, new, 1))
    assert (done.exit_code, done.stdout) == (1, "")
    assert re.search(message, done.stderr), done.stderr
    assert done.stderr.count("\n") == 1
    assert not Path("o").exists()


@pytest.mark.parametrize(("name", "content", "message"), [
    ("p.csv", PROFILE.replace("\n5,7,", "\n5,-7,"), r"p\.csv.*row 7.*-7"),
    ("p.csv", PROFILE.replace("\n5,7,1.1", "").replace("\n6,5,1.0", "").replace("\n6,5,1", ""), r"p\.csv, row \d+.*(gap|follow)"),
    ("w.csv", CURVE.replace("a,9,4.0", "a,9,2.0"), r"w\.csv.*row 5.*"),
], ids=["negative flow", "gap", "falling curve"])
def test_a_bad_table_is_told_with_its_row(call, stream, table, name, content, message):
    """The row of the table beside the stream file, in one line."""
    file = stream(TITRATED)
    table(content, name)
    done = call("tank", file, "--out", "o", "--no-figure")
    assert done.exit_code == 1
    assert re.search(message, done.stderr), done.stderr
    assert done.stderr.count("\n") == 1
    assert not Path("o").exists()


def test_a_missing_stream(call, tmp_path):
    """One line, without the folders of this machine."""
    done = call("tank", tmp_path / "none.toml", "--out", "o")
    assert done.exit_code == 1
    assert "the stream file none.toml cannot be read" in done.stderr
    assert str(tmp_path) not in done.stderr


def test_wrong_usage(call, stream):
    """No folder, no stream, cases without simulation, no jobs: exit code 2."""
    file = stream()
    assert call("tank", file).exit_code == 2
    assert call("tank", "--out", "o").exit_code == 2
    assert call("tank", file, "--out", "o", "--jobs", "0").exit_code == 2
    assert call("tank", file, "--out", "o", "--cases", "-1").exit_code == 2
    both = call("tank", file, "--out", "o", "--no-simulation", "--cases", "5")
    assert both.exit_code == 2
    assert "--cases needs the simulation" in both.stderr


def test_help_names_both_ways_and_the_exit_codes(call):
    """What a script must know."""
    assert "STREAM.toml --out FOLDER [OPTIONS] | COMMAND [ARGS]..." in call("tank", "--help").stdout
    text = " ".join(call("tank", "run", "--help").stdout.split())
    assert "Exit code 0: the design is accepted, or it is not proven" in text


# ------------------------------------------------------------------ the curve

def test_curve_is_printed(call, stream):
    """A table for the log, nothing written."""
    done = call("tank", "curve", stream())
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("Least: titration curve of the mean waste")
    assert re.search(r"(?m)^  \*\s+7\.00\s+10\.01", done.stdout)  # 0.365 g/L of HCl
    assert not Path("o").exists()


def test_curve_of_ph_alone_is_refused(call, stream):
    """As the design is."""
    done = call("tank", "curve", stream(PH_ALONE))
    assert (done.exit_code, done.stdout) == (1, "")
    assert "found its pH alone" in done.stderr
