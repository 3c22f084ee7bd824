"""The page of stream files: it repeats the shipped list of keys, and its examples are read."""

import csv
import re
from itertools import pairwise
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.job_file import SECTIONS, read_stream
from aquabuf.assess.tank.waste import chemistry
from aquabuf.report.starters import starter_kinds

ROOT = Path(__file__).parents[1]
PAGE = ROOT / "docs" / "tank_stream.md"
OWN = {"wastes": "`[wastes.NAME]`", "acids": "`[acids.NAME]`", "reagents": "`[reagents.NAME]`", "wastes.strength": "`strength`",
       "wastes.daily": "`daily`", "wastes.batch": "`batch`"}


def shipped():
    """The list of keys, read with the csv module alone."""
    with (ROOT / "aquabuf" / "data" / "stream_keys.csv").open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def cells(line):
    """Cells of a row of a table of the page."""
    return [cell.strip().replace("\\|", "|") for cell in re.split(r"(?<!\\)\|", line.strip().removeprefix("|").removesuffix("|"))]


def tables():
    """Every table of the page: the paragraph above it, its head, its rows."""
    found = []
    blocks = PAGE.read_text(encoding="utf-8").split("\n\n")
    for above, block in pairwise(blocks):
        lines = block.splitlines()
        if len(lines) > 2 and lines[1].startswith("|---"):
            found.append((above, cells(lines[0]), [cells(line) for line in lines[2:]]))
    return found


@pytest.mark.parametrize("section", dict.fromkeys(row["section"] for row in shipped()))
def test_every_key_of_a_stream(section):
    """Key, words, example and default of each row of its section, in order."""
    mark = OWN.get(section) or f"(`[{section}]`)"
    (rows,) = [rows for above, head, rows in tables() if head[0] == "key" and above.startswith("**") and mark in above.split(":")[0]]
    wanted = [row for row in shipped() if row["section"] == section]
    assert rows == [[f"`{w['key']}`", w["words"], f"`{w['example']}`", "needed" if w["needed"] == "yes" else
                     f"`{w['default']}`" if w["default"] else ""] for w in wanted]


def test_no_other_table_of_keys():
    """The page tells no section that there is not."""
    assert len([1 for _, head, _ in tables() if head[0] == "key"]) == len({row["section"] for row in shipped()})
    assert {row["section"].partition(".")[0] for row in shipped()} == set(SECTIONS)


def written(tmp_path, text):
    """The stream of a text, read."""
    path = tmp_path / "s.toml"
    path.write_text(text, encoding="utf-8")
    return read_stream(path)


def test_the_stream_of_the_page_is_read(tmp_path):
    """As it stands."""
    (block,) = re.findall(r"```toml\n(.*?)```", PAGE.read_text(encoding="utf-8"), flags=re.S)
    job = written(tmp_path, block)
    assert_allclose(chemistry(job.wastes).base_eq_l, [-2 * 0.5 / 98.079], rtol=1e-4)


def examples():
    """Example of each way to name what a waste holds."""
    (rows,) = [rows for _, head, rows in tables() if head[0] == "name"]
    return [(row[0], example) for row in rows for example in re.findall(r"`([^`]+)`", row[1])]


@pytest.mark.parametrize(("name", "example"), examples())
def test_every_way_to_hold_something(tmp_path, name, example):
    """Each example of the page can be read beside a pH and another acid."""
    (block,) = re.findall(r"```toml\n(.*?)```", PAGE.read_text(encoding="utf-8"), flags=re.S)
    text = re.sub(r"holds = .*", f"holds = {{ lactate = \"1 mmol/L\", {example} }}\nph = 5.0", block)
    assert chemistry(written(tmp_path, text).wastes).readout.carriers == 2, name


def test_examples_of_keys_are_read(tmp_path):
    """Every example of the list of wastes, window, site and simulation that needs no table of its own."""
    (block,) = re.findall(r"```toml\n(.*?)```", PAGE.read_text(encoding="utf-8"), flags=re.S)
    for section in ("site", "simulate", "layout"):
        keys = [row for row in shipped() if row["section"] == section]
        block += f"[{section}]\n" + "".join(f"{row['key']} = {row['example']}\n" for row in keys)
    job = written(tmp_path, block.replace("ph = [6.0, 9.0]", "".join(
        f"{row['key']} = {row['example']}\n" for row in shipped() if row["section"] == "window")))
    assert job.window.aim == job.wishes.set_points[-1]


def test_the_starter_is_offered():
    """The page names its kind."""
    kind = re.search(r"`aquabuf template (\w+)`", PAGE.read_text(encoding="utf-8"))[1]
    assert kind in starter_kinds()
