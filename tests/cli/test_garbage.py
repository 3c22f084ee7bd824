"""Whatever bytes come in: an exit code, a message, and never an exception that nobody meant."""

import csv
import io
import os
import tempfile
from pathlib import Path

import pytest
from click.testing import CliRunner
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from aquabuf.cli.main import main
from aquabuf.report.starters import starter

MANY = settings(max_examples=40, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck),
                phases=(Phase.explicit, Phase.generate))  # shrinking takes minutes; the first failure tells enough
CELLS = ["", " ", "NaN", "nan", "inf", "-inf", "1e308", "-1e308", "1e999", "1e-30", "0", "-0", "-1", "<", "<0", "<0.1", "<-1", ">5", "٣", "−5", "1,5", '"', "=1+1",
         "\x00", "7.0 ?", "n/a", "-999", "1e5", "15", "50", "0.0001", "100", "a" * 300, "±", "yes", "lake"]


def outcome(content, *options):
    """Exit code and streams of an assessment of these bytes; raises what should not have come up."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "t.csv"
        path.write_bytes(content)
        os.environ["AQUABUF_TRACEBACK"] = "1"
        try:
            done = CliRunner().invoke(main, ["assess", str(path), "--out", str(Path(folder) / "o"), "--no-figure", *options])
        finally:
            del os.environ["AQUABUF_TRACEBACK"]
        if done.exception is not None and not isinstance(done.exception, SystemExit):
            raise done.exception
        left = sorted(p.name for p in (Path(folder) / "o").glob("*")) if done.exit_code == 0 else []
        counted = None
        if done.exit_code == 0:
            with (Path(folder) / "o" / "results.csv").open(encoding="utf-8", newline="") as stream:
                counted = sum(1 for _ in csv.DictReader(stream))
        return done, left, counted


def check(done):
    """0 with a summary, or 1 with a message."""
    assert done.exit_code in (0, 1)
    if done.exit_code == 1:
        assert done.stderr.startswith("Error: ")
        assert done.stdout == ""


@MANY
@given(st.binary(max_size=400))
def test_random_bytes(content):
    """Any bytes at all."""
    check(outcome(content, "--draws", "0")[0])


@MANY
@given(st.text(alphabet="abc,;\n\t\"'#.0123456789- sample_idphtemperature_calkalinity_meq_l", max_size=200))
def test_random_text_that_looks_like_a_table(text):
    """Letters, digits and delimiters in any order, with a good header before."""
    check(outcome(("sample_id,temperature_c,ph,alkalinity_meq_l\n" + text).encode(), "--draws", "0")[0])


@pytest.mark.parametrize("kind", ["lake", "estuary", "wastewater"])
@MANY
@given(data=st.data())
def test_garbled_cells(kind, data):
    """A good table with cells replaced: rows are assessed or refused, none is lost."""
    rows = [r for r in csv.reader(io.StringIO(starter(kind))) if r and not r[0].startswith("#")]
    header, good = rows[0], rows[1:]
    lines = [[*r] for _ in range(2) for r in good]
    for i, line in enumerate(lines):
        line[header.index("sample_id")] = f"s{i}"
        for _ in range(data.draw(st.integers(0, 4))):
            line[data.draw(st.integers(1, len(header) - 1))] = data.draw(st.sampled_from(CELLS))
    stream = io.StringIO()
    csv.writer(stream).writerows([header, *lines])
    options = data.draw(st.sampled_from([("--draws", "0"), ("--draws", "100"), ("--draws", "0", "--exchange", "open")]))
    done, left, counted = outcome(stream.getvalue().encode(), *options)
    check(done)
    if done.exit_code == 0:
        refused = int(done.stdout.split(" with a warning, ")[1].split(" row")[0])
        assert counted + refused == len(lines)
        assert ("rejected.csv" in left) == (refused > 0)


@MANY
@given(data=st.data())
def test_columns_dropped_and_shuffled(data):
    """Any choice of columns in any order."""
    rows = [r for r in csv.reader(io.StringIO(starter("lake"))) if r and not r[0].startswith("#")]
    order = data.draw(st.permutations(range(len(rows[0]))))[: data.draw(st.integers(1, len(rows[0])))]
    stream = io.StringIO()
    csv.writer(stream).writerows([[r[i] for i in order] for r in rows])
    check(outcome(stream.getvalue().encode(), "--draws", "0")[0])


@pytest.mark.parametrize("column", ["conductivity_us_cm", "temperature_c"])
def test_the_smallest_numbers(column):
    """A number below 1e-308 is as good as zero: no warning of the machine."""
    header, first = (line.split(",") for line in [x for x in starter("lake").splitlines() if not x.startswith("#")][:2])
    first[header.index(column)] = "1e-320"
    check(outcome(f"{','.join(header)}\n{','.join(first)}\n".encode(), "--draws", "0")[0])
