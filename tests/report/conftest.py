"""Small tables and runs in a temporary folder. All waters are invented."""

import sys
from pathlib import Path

import pytest

from aquabuf.assess.options import Options
from aquabuf.report.run import assess_file

sys.path.insert(0, str(Path(__file__).parent))

from run_table import TABLE


@pytest.fixture
def table(tmp_path):
    """Write text as a file and return its path."""
    def write(text=TABLE, name="waters.csv"):
        path = tmp_path / name
        path.write_text(text, encoding="utf-8")
        return path
    return write


@pytest.fixture
def run(table, tmp_path):
    """Assess a table into a folder; returns the summary and the folder."""
    def go(text=TABLE, *, out="out", name="waters.csv", figure=False, force=False, mapping=None, limits=None, **options):
        folder = tmp_path / out
        chosen = Options(**({"draws": 0} | options))
        words = assess_file(table(text, name), folder, chosen, figure=figure, force=force, mapping=mapping, limits=limits)
        return words, folder
    return go
