"""The command line: exit codes, where text goes, wrong usage, and what it loads before it answers."""

import subprocess
import sys
from pathlib import Path

import pytest

import aquabuf
from aquabuf.readings.template import template_kinds

ROOT = Path(aquabuf.__file__).parents[1]
QUICK = ("--draws", "0", "--no-figure")


def python(code, **more):
    """Run code in a fresh interpreter that finds this aquabuf."""
    return subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, **more)


# ------------------------------------------------------------------ what it loads

START = "import sys; sys.argv = ['aquabuf', {words}]\ntry:\n    from aquabuf.cli.main import main; main()\nexcept SystemExit: pass\nprint(*sys.modules, file=sys.stderr)"


@pytest.mark.parametrize("words", ["'--help'", "'--version'", "'assess', '--help'", "'asess'", "'titration', '--help'", "'titration', 'run', '--help'",
                                   "'titration', 'plan', '--help'", "'titration', 'x.csv'", "'titration', 'plan'", "'titration'"])
def test_help_loads_nothing_heavy(words):
    """Help, version and a slip of the pen are answered without numpy, scipy, pandas or matplotlib."""
    done = python(START.format(words=words))
    loaded = set(done.stderr.split())
    assert "click" in loaded
    assert not loaded & {"numpy", "scipy", "pandas", "matplotlib"}


def test_assessment_without_figure_does_not_load_matplotlib(table, tmp_path):
    """Drawing is slow to load."""
    words = f"'assess', {str(tmp_path / table())!r}, '--out', {str(tmp_path / 'o')!r}, '--draws', '0', '--no-figure'"
    done = python(START.format(words=words))
    assert "1 sample" in done.stdout or "2 samples" in done.stdout
    assert "matplotlib" not in done.stderr.split()


def test_installed_command_is_this_one():
    """The entry point of the package metadata."""
    text = (ROOT / "pyproject.toml").read_text(encoding="utf-8")
    assert 'aquabuf = "aquabuf.cli.main:main"' in text


@pytest.mark.skipif(sys.platform == "win32", reason="pipes of Unix")
def test_a_reader_that_goes_away_is_no_traceback():
    """`aquabuf columns | head` ends quietly."""
    code = "from aquabuf.cli.main import main; main(['columns', '--results'])"
    done = subprocess.run(f"{sys.executable} -c \"{code}\" | true", shell=True, capture_output=True, text=True, cwd=ROOT, check=False)
    assert "Traceback" not in done.stderr


# ------------------------------------------------------------------ help, columns, templates

def test_version_and_help(call):
    """Exit code 0, text to standard output."""
    assert call("--version").stdout == f"aquabuf, version {aquabuf.__version__}\n"
    for words in (("--help",), ("-h",), ("assess", "--help"), ("columns", "-h"), ("template", "-h")):
        done = call(*words)
        assert (done.exit_code, done.stderr) == (0, "")
        assert done.stdout.startswith("Usage: aquabuf")
    text = " ".join(call("assess", "--help").stdout.split())
    for option in ("--out", "--map", "--limits", "--exchange", "--air-co2-ppm", "--thresholds", "--base-thresholds", "--draws", "--seed",
                   "--marine-constants", "--figure / --no-figure", "--force"):
        assert option in text


@pytest.mark.parametrize("kind", [*template_kinds(), "limits"])
def test_template(call, kind):
    """Every kind prints a starter file and nothing else; tables can be assessed as they are."""
    done = call("template", kind)
    assert (done.exit_code, done.stderr) == (0, "")
    if kind in ("map", "limits"):
        return
    Path("starter.csv").write_text(done.stdout, encoding="utf-8")
    assert call("assess", "starter.csv", "--out", "o", *QUICK).exit_code == 0


def test_columns(call):
    """All columns, one column, and those of the result."""
    everything = call("columns").stdout
    assert "alkalinity" in everything
    assert "mg/L as CaCO3" in call("columns", "alkalinity_eq_l").stdout
    found = call("columns", "--results")
    assert (found.exit_code, found.stderr) == (0, "")
    assert "acid_to_ph_*_meq_l" in found.stdout
    assert max(map(len, found.stdout.splitlines())) <= 120


# ------------------------------------------------------------------ wrong usage is 2

WRONG = [
    ((), "Usage: aquabuf"), (("asess",), "No such command 'asess'. Did you mean 'assess'? Commands: assess, columns, completion, dose, explain, lake, tank, template, titration."),
    (("xyz",), "No such command 'xyz'. Commands: assess"), (("assess",), "Missing argument 'READINGS'"),
    (("assess", "t.csv"), "Missing option '--out'"), (("assess", "t.csv", "--out", "o", "--wide"), "No such option"),
    (("assess", "t.csv", "--out", "o", "--exchange", "ajar"), "'ajar' is not one of 'closed', 'open'"),
    (("assess", "t.csv", "--out", "o", "--marine-constants", "best"), "'best' is not one of 'millero', 'lueker'"),
    (("assess", "t.csv", "--out", "o", "--draws", "many"), "'many' is not a valid integer"),
    (("assess", "t.csv", "--out", "o", "--air-co2-ppm", "fresh"), "'fresh' is not a valid float"),
    (("assess", "t.csv", "--out", "o", "--thresholds", "6;5"), "must be pH values with commas between, such as 6.5,6.0; found '6;5'"),
    (("assess", "t.csv", "--out", "o", "--base-thresholds", "high"), "found 'high'"),
]


@pytest.mark.parametrize(("words", "message"), WRONG, ids=[" ".join(w) or "nothing" for w, _ in WRONG])
def test_wrong_usage(call, table, words, message):
    """Exit code 2, the message to standard error, no folder made."""
    table()
    done = call(*words)
    assert (done.exit_code, done.stdout) == (2, "")
    assert message in done.stderr
    assert not Path("o").exists()


NO_SENSE = [
    (("--draws", "5"), "draws must be 0 or from 100 to 100000; found 5"), (("--air-co2-ppm", "-1"), "air CO2 must be above 0"),
    (("--air-co2-ppm", "nan"), "air CO2 must be above 0"), (("--thresholds", "99"), "a pH threshold must be from 2 to 12; found 99"),
    (("--base-thresholds", "nan"), "a pH threshold must be from 2 to 12; found nan")]


@pytest.mark.parametrize(("words", "message"), NO_SENSE, ids=[" ".join(w) for w, _ in NO_SENSE])
def test_option_that_makes_no_sense(call, table, words, message):
    """One line that says what is allowed; nothing is written."""
    done = call("assess", table(), "--out", "o", *words)
    assert done.exit_code != 0
    assert message in done.stderr
    assert len(done.stderr.strip().splitlines()) <= 4
    assert not Path("o").exists()


@pytest.mark.parametrize("words", [("assess", "t.csv", "--out", "o", *w) for w, _ in NO_SENSE] + [("template", "pond"), ("columns", "nosuch")],
                         ids=" ".join)
def test_value_that_an_option_cannot_have_is_wrong_usage(call, table, words):
    """Exit code 2: the readings have nothing to do with it."""
    table()
    assert call(*words).exit_code == 2


def test_seed_below_zero(call, table):
    """Said in a line."""
    done = call("assess", table(), "--out", "o", "--seed", "-1", "--no-figure")
    assert done.exit_code != 0
    assert "seed" in done.stderr


@pytest.mark.parametrize(("words", "message"), [
    (("template", "pond"), "no starter file is named 'pond'. Use one of: lake"), (("columns", "nosuch"), "no column is named 'nosuch'")])
def test_names_that_do_not_exist(call, words, message):
    """A remedy in the message."""
    done = call(*words)
    assert done.exit_code != 0
    assert done.stdout == ""
    assert message in done.stderr


def test_a_defect_is_told_without_a_traceback(call, table, monkeypatch):
    """What nobody foresaw becomes one line that asks for a report, and exit code 1; the traceback comes on demand."""
    def fail(*_, **__):
        raise ZeroDivisionError("boom")

    monkeypatch.setattr("aquabuf.report.run.assess", fail)
    with pytest.raises(ZeroDivisionError):
        call("assess", table(), "--out", "o", *QUICK)
    monkeypatch.delenv("AQUABUF_TRACEBACK")
    done = call("assess", table(), "--out", "o", *QUICK)
    assert done.exit_code == 1
    assert "(ZeroDivisionError: boom)" in done.stderr
    assert "AQUABUF_TRACEBACK=1" in done.stderr
    assert not Path("o").exists()


def test_template_without_a_kind_lists_the_kinds(call):
    """Each of the kinds listed gives a file."""
    kinds = call("template").stdout.split()
    assert {"stream", "lake", "plant", "estuary", "map", "limits"} <= set(kinds)
    assert all(call("template", kind).exit_code == 0 for kind in kinds)
