"""Long tables given as short rows, and what reading them gives."""

import sys
from pathlib import Path

import pytest

from aquabuf.readings.result import join_readings
from aquabuf.readings.source import open_any

sys.path.insert(0, str(Path(__file__).parent))

from wqx_rows import PH, as_text


@pytest.fixture
def long_table(table):
    """Write rows as a file and return its path."""
    return lambda rows, **more: table(as_text(rows, **more), "long.csv")


@pytest.fixture
def read(long_table, table):
    """Readings of some rows by a shipped map, or by a map given as text."""

    def read_rows(*rows, by="wqx", chunk_rows=50_000, **more):
        mapping = table(by, "own.toml") if "\n" in by else by
        return join_readings(open_any(long_table(rows, **more), mapping, chunk_rows))

    return read_rows


@pytest.fixture
def refused(read):
    """The one line of `rejected` that a single result gives, while its sample stays."""

    def line_of(row, **more):
        readings = read(PH, row, **more)
        assert readings.frame["sample_id"].tolist() == ["ORG_A"]
        assert readings.frame["ph"].tolist() == [7.1]
        assert len(readings.rejected) == 1, readings.rejected.to_string()
        line = readings.rejected.iloc[0]
        assert (line["row"], line["sample_id"], line["column"]) == (3, "ORG_A", row["what"])
        return line

    return line_of
