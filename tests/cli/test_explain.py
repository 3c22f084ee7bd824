"""`aquabuf explain`: the chain to standard output; what cannot be explained is 1, wrong usage 2."""

import re
from pathlib import Path

import pytest

QUICK = ("--draws", "0", "--no-figure")


def test_done(call, table):
    """From the readings to the rules, in this order, and nothing else."""
    assert call("assess", table(), "--out", "o", *QUICK).exit_code == 0
    done = call("explain", "o", "b")
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("b (t.csv, row 3): ")
    titles = ["1. Readings as entered (t.csv, row 3)", "2. In the units of the work", "3. Standard uncertainty", "4. What the answer rests on",
              "5. Conditions", "6. Constants", "7. The balance", "8. Results", "9. Quality checks", "10. Rules"]
    places = [done.stdout.index(f"\n{title}") for title in titles]
    assert places == sorted(places)
    assert "sensitive to acid" in done.stdout
    assert "[BROKEN]" in done.stdout


def test_options_of_the_run_are_used(call, table):
    """Open water, its own CO2 and thresholds; they are not given again."""
    call("assess", table(), "--out", "o", "--exchange", "open", "--air-co2-ppm", "500", "--thresholds", "5.3", "--draws", "100", "--seed", "9", "--no-figure")
    done = call("explain", "o", "a")
    assert done.exit_code == 0, done.stderr
    text = " ".join(done.stdout.split())
    assert "acid to pH 5.3, open to air" in text
    assert "500 µmol/mol of dry air" in text
    assert "100 draws, seed 9" in text


def test_input_and_row(call, table, tmp_path):
    """Readings elsewhere by --input; a row by --row."""
    (tmp_path / "far").mkdir()
    table("sample_id,temperature_c,ph,alkalinity_meq_l\na,10,7.6,2\na,10,6.5,0.03\n", "far/t.csv")
    call("assess", "far/t.csv", "--out", "o", *QUICK)
    missing = call("explain", "o", "a")
    assert (missing.exit_code, missing.stdout) == (1, "")
    assert "Error: t.csv, the readings of this run, is neither beside o nor in the current folder. Name it with --input." in missing.stderr
    both = call("explain", "o", "a", "--input", "far/t.csv").stdout
    assert "row 2): " in both
    assert "row 3): refused" in both
    one = call("explain", "o", "a", "--input", "far/t.csv", "--row", "3").stdout
    assert one.startswith("a (t.csv, row 3): refused: it was not assessed")


def test_unknown_sample(call, table):
    """The nearest names."""
    call("assess", table("sample_id,temperature_c,ph,alkalinity_meq_l\nhill,10,7.6,2\n"), "--out", "o", *QUICK)
    done = call("explain", "o", "hil")
    assert done.exit_code == 1
    assert "no row of t.csv has the sample_id 'hil'. The nearest names are 'hill'." in done.stderr


def test_help_has_two_examples(call):
    """Lines of examples stand as they are."""
    text = call("explain", "--help").stdout
    assert text.count("aquabuf explain result") == 2
    assert "RESULTS_DIR SAMPLE_ID" in text


def test_wrong_usage(call):
    """A name is needed."""
    assert call("explain", "o").exit_code == 2


@pytest.mark.parametrize(("heading", "name", "given", "least", "command"), [
    ("# Why this verdict?", "UT-base", "stream_survey.csv", 30, ("assess", "stream_survey.csv", "--no-figure")),
    ("## A titration", "CS-melt", "titration_points.csv", 10,
     ("titration", "titration_points.csv", "--samples", "titration_samples.csv", "--figures", "0")),
    ("## A lake", "DU-24", "lake_survey.csv", 10, ("lake", "lake_survey.csv", "--no-figure")),
], ids=["sample", "titration", "lake"])
def test_the_page_shows_what_is_printed(call, heading, name, given, least, command):
    """Every line of the examples in docs/explain.md is printed for that sample, in this order."""
    root = Path(__file__).parents[2]
    data = root / "field_data"
    call(*(data / word if word.endswith(".csv") else word for word in command), "--out", "result")
    done = call("explain", "result", name, "--input", data / given)
    printed = done.stdout.splitlines()
    page = (root / "docs" / "explain.md").read_text(encoding="utf-8")
    section = re.split(r"^#+ ", page.split(f"{heading}\n")[1], maxsplit=1, flags=re.M)[0]
    lines = [line for block in re.findall(r"```text\n(.*?)```", section, flags=re.S) for line in block.splitlines()]
    assert len(lines) > least
    at = -1
    for line in lines:
        at = printed.index(line, at + 1)
