"""The page on titrations misses no method, conversion, finding, file or column, and lists none that is gone."""

from pathlib import Path

import pytest

from aquabuf.report.titration_run import OUTPUT_FILES
from aquabuf.tables import read_table

PAGE = (Path(__file__).parents[2] / "docs" / "titration.md").read_text(encoding="utf-8")
LINES = PAGE.splitlines()
SECTIONS = {part.split("\n")[0]: part for part in PAGE.split("\n## ")[1:]}


def row(*cells):
    """A line of a table of the page."""
    return "| " + " | ".join(cells) + " |"


def first_cells(section):
    """First cells of all table rows of a section, headers and rules left out."""
    lines = [line for line in SECTIONS[section].splitlines() if line.startswith("| ")]
    return [line.strip("| ").split(" | ")[0].strip("`") for line in lines]


@pytest.mark.parametrize("fact", read_table("titration_methods"), ids=lambda r: f"{r['kind']} {r['name']}")
def test_method(fact):
    """Order, reason, mark and source as in the shipped table."""
    if fact["kind"] == "water":
        expected = row(f"{fact['name']}: {fact['words']}", fact["order"].replace(";", ", "), fact["why"], fact["mark"], fact["source"])
    else:
        expected = row(f"`{fact['name']}`", fact["words"], fact["why"], fact["mark"], fact["source"])
    assert expected in LINES


@pytest.mark.parametrize("fact", read_table("titration_findings"), ids=lambda r: r["name"])
def test_finding(fact):
    """Limits, words, remedy and source as in the shipped table."""
    assert row(*(fact[n] for n in ("name", "unit", "low", "high", "words", "remedy", "mark", "source"))) in LINES


@pytest.mark.parametrize("column", read_table("titration_results"), ids=lambda r: r["name"])
def test_column(column):
    """Unit, decimals and meaning as in the shipped table."""
    assert row(f"`{column['name']}`", column["unit"], column["digits"], column["meaning"]) in LINES


def test_nothing_that_is_gone():
    """In the same order, nothing more."""
    assert first_cells("alkalinity.csv")[1:] == [r["name"] for r in read_table("titration_results")]
    assert first_cells("Findings")[1:] == [r["name"] for r in read_table("titration_findings")]
    names = [f"{r['name']}: {r['words']}" if r["kind"] == "water" else r["name"] for r in read_table("titration_methods")]
    assert [c for c in first_cells("Methods") if c not in ("kind of water", "method", "--convert")] == names


def test_files():
    """Every file that a run can write."""
    listed = [c for c in first_cells("From a notebook page to a result") if "." in c]
    assert listed == list(OUTPUT_FILES)
