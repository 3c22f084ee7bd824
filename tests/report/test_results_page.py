"""The page of results and limits misses no column, file, limit or check, and lists none that is gone."""

import json
from pathlib import Path

import pandas as pd
import pytest
from run_table import TABLE

from aquabuf.assess.sample.curves import CURVE_COLUMNS
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.report.run import OUTPUT_FILES
from aquabuf.tables import read_table

PAGE = (Path(__file__).parents[2] / "docs" / "results.md").read_text(encoding="utf-8")
SECTIONS = {part.split("\n")[0]: part for part in PAGE.split("\n## ")[1:]}


def row(*cells):
    """A line of a table of the page."""
    return "| " + " | ".join(cells) + " |"


def table(section):
    """Cells of the first column of the table in a section."""
    lines = [line for line in SECTIONS[section].splitlines() if line.startswith("|")]
    return [line.strip("| ").split(" | ")[0].strip("`") for line in lines[2:]]


def test_files():
    """Every file that a run can write."""
    assert table("Files") == list(OUTPUT_FILES)


@pytest.mark.parametrize("column", read_table("results"), ids=lambda r: r["name"])
def test_result_column(column):
    """Name, unit, decimals, interval and meaning as in the shipped table."""
    assert row(f"`{column['name']}`", column["unit"], column["digits"], column["interval"], column["meaning"]) in SECTIONS["results.csv"].splitlines()


def test_no_result_column_that_is_gone():
    """In the same order."""
    assert table("results.csv") == [r["name"] for r in read_table("results")]


@pytest.mark.parametrize("limit", read_table("limits"), ids=lambda r: r["name"])
def test_limit(limit):
    """Rule, waters, words, next step and source as in the shipped table."""
    floor = f" (and at least {limit['lower']})" if limit["lower"] else ""
    recalled = " (recalled)" if limit["mark"] == "recalled" else ""
    expected = row(limit["name"], limit["group"], f"`{limit['quantity']} {limit['operator']} {limit['limit']}` {limit['unit']}{floor}",
                   limit["kinds"].replace(";", ", "), limit["regimes"].replace(";", ", "), limit["words"], limit["next_step"],
                   limit["source"] + recalled)
    assert expected in SECTIONS["Limits"].splitlines()


@pytest.mark.parametrize("check", read_table("checks"), ids=lambda r: r["name"])
def test_check(check):
    """Limit, remedy and source as in the shipped table."""
    expected = row(check["name"], check["unit"], check["limit_words"], check["low"], check["high"], check["remedy"], check["mark"], check["source"])
    assert expected in SECTIONS["Quality checks"].splitlines()


def test_no_limit_or_check_that_is_gone():
    """In the same order."""
    assert table("Limits") == [r["name"] for r in read_table("limits")]
    assert table("Quality checks") == [r["name"] for r in read_table("checks")]


def test_columns_of_the_other_files(run):
    """As a run writes them."""
    _, folder = run(TABLE)
    for name in ("verdicts.csv", "checks.csv", "curves.csv", "rejected.csv"):
        assert table(name) == pd.read_csv(folder / name, nrows=1).columns.tolist(), name
    assert table("curves.csv") == list(CURVE_COLUMNS)
    assert table("rejected.csv") == list(REJECTED_COLUMNS)


def test_keys_of_the_run_record(run):
    """As a run writes them."""
    _, folder = run(TABLE)
    assert table("run.json") == list(json.loads((folder / "run.json").read_text(encoding="utf-8")))
