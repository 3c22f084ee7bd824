"""The page on long tables keeps its word: its example is read as it says, and its lists are those of the program."""

import re
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

from aquabuf.readings.long.characteristics import _KEYS
from aquabuf.readings.long.mapping import _SECTIONS, CONDITIONS, ROLES, read_long_map
from aquabuf.readings.long.shipped import shipped_names
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import open_any

PAGE = (Path(__file__).parents[3] / "docs" / "long_tables.md").read_text(encoding="utf-8")


def blocks(kind):
    """Code blocks of one kind."""
    return re.findall(rf"```{kind}\n(.*?)```", PAGE, flags=re.S)


def test_the_example_is_read(table):
    """One sample with what the table says; the blank is left out."""
    readings = join_readings(open_any(table(blocks("csv")[0], "t.csv"), table(blocks("toml")[0], "m.toml")))
    assert readings.rejected.empty
    row = readings.frame.iloc[0]
    assert (len(readings.frame), row["sample_id"], row["water_kind"]) == (1, "Raven Tarn_2024-09-10", "lake")
    found = row[["temperature_c", "ph", "calcium_mol_l", "nitrate_mol_l"]].astype(float)
    assert_allclose(found, [10.8, 4.74, 320e-6 / 40.078, 0.01e-3 / 14.007], rtol=1e-12)
    assert readings.notes[0] == "1 rows left out by Kind: field blank (1)"


def test_the_change_of_a_shipped_map(table):
    """The second map is valid and does what its remarks say."""
    found = read_long_map(table(blocks("toml")[1], "m.toml"))
    assert found.forms["alkalinity, total"][0].basis == "CaCO3"
    assert found.forms["ph"] == ()


@pytest.mark.parametrize("word", [*shipped_names(), *_KEYS, *CONDITIONS, *ROLES, "sample_id", "may_lack", "base"])
def test_every_key_is_on_the_page(word):
    """Names of maps and keys."""
    assert f"`{word}`" in PAGE


@pytest.mark.parametrize("section", [name for name in _SECTIONS if name != "acids"])
def test_every_section_is_on_the_page(section):
    """Sections of a map."""
    assert f"`[{section}]`" in PAGE
