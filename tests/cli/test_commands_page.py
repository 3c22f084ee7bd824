"""docs/commands.md names every command, option, exit code and key, and none that is not there."""

import json
import re
from pathlib import Path

import click
import pytest
from click.testing import CliRunner

from aquabuf.cli.main import main

ROOT = Path(__file__).parents[2]
DATA = ROOT / "field_data"
PAGE = (ROOT / "docs" / "commands.md").read_text(encoding="utf-8")
QUICK = {"assess": ("stream_survey.csv", "--draws", "0", "--no-figure"), "lake": ("lake_survey.csv", "--draws", "0", "--no-figure"),
         "titration": ("titration_points.csv", "--samples", str(DATA / "titration_samples.csv"), "--figures", "0"),
         "dose": ("plan_upland.toml", "--draws", "0", "--no-figure"), "tank": ("stream_seep.toml", "--no-simulation", "--no-figure")}


def rows(head):
    """Cells of the table whose header begins like this."""
    body = re.search(rf"(?m)^\| {re.escape(head)}.*\n\|[-|]+\n((?:\|.*\n)+)", PAGE)[1]
    return [[cell.strip() for cell in line.strip("|").split(" | ")] for line in body.splitlines()]


def codes(cell):
    """Words in code marks."""
    return re.findall(r"`([^`]+)`", cell)


def options_of(path):
    """Every name of the options of a command, without --help."""
    command = main
    for word in path:
        command = command.commands[word]
    if isinstance(command, click.Group):
        command = command.commands[command.default]
    return {name for p in command.params if not isinstance(p, click.Argument) for name in (*p.opts, *p.secondary_opts)}


COMMON = {name for row in rows("option | what") for name in codes(row[0])}
OWN = {codes(row[0])[0]: set(codes(row[1])) for row in rows("command | options")}


def test_every_command_is_in_the_table():
    """Named as it is called."""
    told = {" ".join(codes(row[0])[0].split()[1:3]) for row in rows("command | takes")}
    for name, command in main.commands.items():
        others = set(command.commands) - {command.default} if isinstance(command, click.Group) else set()
        assert any(words.split()[0] == name for words in told), name
        assert all(f"{name} {other}" in told for other in others)
    assert {words.split()[0] for words in told} == set(main.commands)


@pytest.mark.parametrize("name", OWN)
def test_options_are_those_of_the_command(name):
    """The page has each, and no other."""
    path = name.split()
    writes = path[-1] == "run" or name in ("assess", "lake")
    common = {o for o in COMMON if name != "titration run" or "figure" not in o} if writes else set()
    assert OWN[name] | common == options_of(path)


def test_no_command_with_options_is_left_out():
    """`completion` and `tank curve` have none."""
    paths = {(name,) if not isinstance(c, click.Group) else (name, sub) for name, c in main.commands.items()
             for sub in (c.commands if isinstance(c, click.Group) else [""])}
    assert {" ".join(p) for p in paths if options_of(p)} == set(OWN)


@pytest.fixture(scope="module")
def summary(tmp_path_factory):
    """The summary of each command, on its demo file."""
    found = {}
    for command, (name, *more) in QUICK.items():
        out = tmp_path_factory.mktemp("page") / "o"
        done = CliRunner().invoke(main, [command, str(DATA / name), *more, "--out", str(out), "--json"])
        assert done.exit_code == 0, done.output
        found[command] = json.loads(done.stdout)
    return found


@pytest.mark.parametrize("command", QUICK)
def test_keys_are_those_of_the_page(summary, command):
    """Top keys, counts and headline figures, in the order of the page; the verdict is one of those named."""
    verdict, counts, headline = next(row[1:] for row in rows("command | `verdict`") if codes(row[0]) == [command])
    top = [key for row in rows("key | what") if "only:" not in row[1] or f"`{command}` only" in row[1] for key in codes(row[0])]
    assert list(summary[command]) == top
    assert summary[command]["verdict"] in codes(verdict)
    assert list(summary[command]["counts"]) == codes(counts)
    assert list(summary[command]["headline"]) == codes(headline)


def test_rows_have_the_keys_of_the_page(summary):
    """Each list of the headline, with at most as many rows as the page says."""
    told = {codes(row[0])[0]: codes(row[1]) for row in rows("list | keys of a row")}
    found = {name: rows for s in summary.values() for name, rows in s["headline"].items()
             if isinstance(rows, list) and rows and isinstance(rows[0], dict)}
    assert {name: list(rows[0]) for name, rows in found.items()} == told
    most = int(re.search(r"lists have at most (\d+) rows", PAGE)[1])
    assert all(len(rows) <= most for rows in found.values())
    assert max(map(len, found.values())) == most
