"""Help of every command, near misses, completion and starter files. Expected words come from the commands themselves."""

import os
import re
import shlex
import shutil
import statistics
import subprocess
import sys
import time
from pathlib import Path

import click
import pytest
from click.testing import CliRunner

from aquabuf.cli.command import HeadedOption
from aquabuf.cli.main import main
from aquabuf.report.starters import COMMANDS, starter_kinds

ROOT = Path(__file__).parents[2]


def commands(group=main, path=()):
    """Every command that runs something, with the words that call it."""
    for name, command in group.commands.items():
        if isinstance(command, click.Group):
            yield from commands(command, (*path, name))
        else:
            yield (*path, name), command


ALL = dict(commands())
GROUPS = [("titration",), ("dose",), ("tank",)]
EXAMPLES = [(path, example) for path, command in ALL.items() for example in command.examples]


# ------------------------------------------------------------------ help

@pytest.mark.parametrize("path", ALL, ids=" ".join)
def test_options_stand_under_headings(call, path):
    """Every option is in the help once, under the heading that it names; --help stands last, then the examples."""
    command, text = ALL[path], call(*path, "--help").stdout
    sections = dict(re.findall(r"(?ms)^([A-Z][\w, ]+):\n(.*?)(?=^\S|\Z)", text))
    for param in command.params:
        if isinstance(param, click.Argument):
            continue
        assert isinstance(param, HeadedOption), param.name
        for name in (*param.opts, *param.secondary_opts):
            assert [h for h, body in sections.items() if h != "Examples" and re.search(rf"(?m)^  (?:.*, |.* / )?{name}\b(?!-)", body)] \
                == [param.heading], name
    assert list(sections)[-2:] == ["Help", "Examples"]


@pytest.mark.parametrize("path", ALL, ids=" ".join)
def test_two_examples_each(call, path):
    """Two, each on a line of its own, each a call of this very command."""
    shown = call(*path, "--help").stdout.split("\nExamples:\n")[1].splitlines()
    assert [line.strip() for line in shown] == list(ALL[path].examples)
    assert len(shown) == 2
    short = " ".join(["aquabuf", *(w for w in path if w != "run")])
    assert all(re.search(rf"\b{short}\b", line) for line in shown)


@pytest.mark.parametrize("path", [(), *GROUPS], ids=" ".join)
def test_groups_have_examples_too(call, path):
    """What is read first shows how to begin."""
    shown = call(*path, "--help").stdout.split("\nExamples:\n")[1].splitlines()
    assert len(shown) == 2
    assert all(line.startswith(f"  {' '.join(['aquabuf', *path])} ") for line in shown)


QUICK = {"assess": ["--draws", "0", "--no-figure"], "lake": ["--draws", "0", "--no-figure"], "titration": ["--figures", "0"],
         "dose": ["--draws", "0", "--no-figure"], "tank": ["--no-simulation", "--no-figure"]}
RUNS = [e for p, e in EXAMPLES if p[-1] not in ("explain", "completion")]


@pytest.mark.parametrize("example", RUNS)
def test_examples_run(example, tmp_path, monkeypatch):
    """Each ends well, quickly run; results go elsewhere."""
    monkeypatch.chdir(ROOT)
    words = shlex.split(re.split(r" [>|] ", example)[0])[1:]
    if "--out" in words:
        at = words.index("--out") + 1
        more = [] if words[0] == "template" else QUICK[words[0]]
        words[at:at + 1] = [str(tmp_path / words[at]), *more]
    done = CliRunner().invoke(main, words)
    assert done.exit_code == 0, done.output
    assert done.output or words[0] == "template"


def test_examples_of_explain_run(tmp_path, monkeypatch):
    """They explain the run that the first example of assess makes."""
    monkeypatch.chdir(ROOT)
    folder = str(tmp_path / "result")
    CliRunner().invoke(main, ["assess", "field_data/stream_survey.csv", "--out", folder, *QUICK["assess"]])
    for example in ALL[("explain",)].examples:
        words = example.split(" | ")[0].split()[1:]
        assert words[1] == "result"
        done = CliRunner().invoke(main, [words[0], folder, *words[2:]])
        assert done.exit_code == 0, done.output
        assert words[2] in done.output


# ------------------------------------------------------------------ near misses

@pytest.mark.parametrize(("words", "message"), [
    (("assess", "t.csv", "--out", "o", "--drws", "0"), "Did you mean '--draws'?"), (("asess",), "Did you mean 'assess'?"),
    (("dose", "p.toml", "--out", "o", "--figur"), "--figure"), (("dose", "shet"), "No such command or file 'shet'. Did you mean 'sheet'? Commands: run, sheet."),
    (("titration", "plann"), "Did you mean 'plan'?"), (("tank", "curv", "s.toml"), "Did you mean 'curve'?"),
    (("template", "tanks"), "no starter file is named 'tanks'. Did you mean 'tank'?"), (("completion", "bsh"), "'bsh' is not one of 'bash', 'zsh', 'fish'")])
def test_a_slip_is_answered_with_the_nearest_name(call, words, message):
    """Exit code 2, nothing to standard output."""
    done = call(*words)
    assert (done.exit_code, done.stdout) == (2, "")
    assert message in done.stderr


@pytest.mark.parametrize("name", ["curv", "curve.toml", "far_away"])
def test_a_file_is_no_slip(call, table, name):
    """A file that is there, a name with an ending, and a word that is near nothing are files."""
    if name == "curv":
        table("[x]", name)
    done = call("tank", name)
    assert "Missing option '--out'" in done.stderr
    assert "Did you mean" not in done.stderr


# ------------------------------------------------------------------ completion

@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_the_script_calls_this_program(call, shell):
    """The script asks `aquabuf` with the variable that it listens to."""
    done = call("completion", shell)
    assert done.exit_code == 0
    assert f"_AQUABUF_COMPLETE={shell}_complete" in done.stdout
    assert re.search(r"\baquabuf\b", done.stdout)


@pytest.mark.skipif(shutil.which("bash") is None, reason="no bash here")
def test_bash_takes_the_script(call):
    """The shell reads it and then knows how to complete the command."""
    script = call("completion", "bash").stdout
    done = subprocess.run(["bash", "--norc", "-c", f"{script}\ncomplete -p aquabuf"], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert "_aquabuf_completion aquabuf" in done.stdout


def completed(*words):
    """What the program offers for the last of these words, as bash asks for it."""
    env = os.environ | {"_AQUABUF_COMPLETE": "bash_complete", "COMP_WORDS": shlex.join(["aquabuf", *words[:-1]]) + f" {words[-1]}",
                        "COMP_CWORD": str(len(words)), "PYTHONPATH": str(ROOT)}
    code = "from aquabuf.cli.main import main; main(prog_name='aquabuf')"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, env=env, check=False)
    assert done.stderr == ""
    return [line.partition(",")[::2] for line in done.stdout.splitlines() if line]


@pytest.mark.parametrize(("words", "expected"), [
    (("",), [("plain", name) for name in sorted(main.commands)]), (("la",), [("plain", "lake")]),
    (("assess", "--thr"), [("plain", "--thresholds")]), (("assess", "x.csv", "--exchange", "o"), [("plain", "open")]),
    (("assess", "x"), [("file", "x")]), (("dose", "sh"), [("plain", "sheet"), ("file", "sh")]),
    (("dose", "--qu"), [("plain", "--quiet")]), (("dose", "p.toml", "--js"), [("plain", "--json")]),
    (("tank", "run", "s.toml", "--jo"), [("plain", "--jobs")]), (("completion", "z"), [("plain", "zsh")]),
    (("template", "titration_"), [("plain", "titration_points"), ("plain", "titration_samples")]), (("nosuch", "x"), [])],
    ids=lambda v: " ".join(v) if isinstance(v[0] if v else "", str) else "")
def test_what_is_offered(words, expected):
    """Commands, options, choices, kinds and files; a group offers what its default command takes; a slip offers nothing."""
    assert completed(*words) == expected


# ------------------------------------------------------------------ starter files

RUN_AS_IT_STANDS = {"assess": ("2 samples assessed", "0 rows refused"), "titration": ("2 titrations, 2 with a result (0 of them with a warning)",),
                    "lake": ("2 lakes assessed", "0 rows refused"), "dose": ("SET THE FEEDS",), "tank": ("VERDICT: NOT PROVEN",)}


@pytest.mark.parametrize("kind", COMMANDS)
def test_starter_runs_as_it_stands(call, kind):
    """Written to a file, it goes through the command of its name; nothing is refused and no plan fails."""
    made = call("template", kind, "--out", "mine.txt")
    assert (made.exit_code, made.output) == (0, "")
    assert Path("mine.txt").read_text(encoding="utf-8") == call("template", kind).stdout
    done = call(kind, "mine.txt", "--out", "o", *QUICK[kind])
    assert (done.exit_code, done.stderr) == (0, "")
    assert all(words in done.stdout for words in RUN_AS_IT_STANDS[kind])


@pytest.mark.parametrize("kind", COMMANDS)
def test_starter_is_commented(call, kind):
    """The first line says which command it is for; remarks stand before the numbers."""
    lines = call("template", kind).stdout.splitlines()
    assert lines[0] == f"# Made for `aquabuf {kind} FILE --out FOLDER`; it runs as it stands."
    assert sum(line.startswith("#") for line in lines) >= 4


def test_there_is_a_starter_for_every_command_that_writes_a_folder(call):
    """A new command must bring one; each is among the kinds that are listed."""
    writing = {path[0] for path, command in ALL.items() if any(p.name == "folder" for p in command.params)}
    assert writing == set(COMMANDS)
    assert set(COMMANDS) < set(call("template").stdout.split())
    assert len(starter_kinds()) == len(set(starter_kinds()))


def test_starter_is_never_written_over(call):
    """Unless it is asked for; a folder that is not there is said; a file needs a kind."""
    Path("mine.toml").write_text("my work", encoding="utf-8")
    done = call("template", "dose", "--out", "mine.toml")
    assert (done.exit_code, Path("mine.toml").read_text(encoding="utf-8")) == (1, "my work")
    assert "mine.toml exists already and is not overwritten. Choose another name with --out, or replace it with --force." in done.stderr
    assert call("template", "dose", "--out", "mine.toml", "--force").exit_code == 0
    assert Path("mine.toml").read_text(encoding="utf-8").startswith("# Made for `aquabuf dose")
    lost = call("template", "dose", "--out", "nowhere/mine.toml")
    assert (lost.exit_code, "mine.toml cannot be written: no such file or directory." in lost.stderr) == (1, True)
    assert (call("template", "--out", "x").exit_code, "--out needs a KIND" in call("template", "--out", "x").stderr) == (2, True)


def test_an_unknown_kind_leaves_no_file(call):
    """Exit code 2, nothing written."""
    assert call("template", "pond", "--out", "pond.csv").exit_code == 2
    assert not Path("pond.csv").exists()


# ------------------------------------------------------------------ how fast it answers

TIMES, RUNS_EACH = 3.0, 7


def test_help_comes_at_once():
    """`aquabuf --help` takes at most three times as long as importing click, medians of runs in turn."""
    took = {"import click": [], "from aquabuf.cli.main import main; main(['--help'])": []}
    for _ in range(RUNS_EACH):
        for code, seconds in took.items():
            start = time.perf_counter()
            subprocess.run([sys.executable, "-c", code], capture_output=True, check=True, cwd=ROOT)
            seconds.append(time.perf_counter() - start)
    click_s, help_s = (statistics.median(seconds) for seconds in took.values())
    assert help_s <= TIMES * click_s
