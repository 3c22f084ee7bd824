"""Agency tables read as they are by the maps in docs/maps; the files stay outside the project (AQUABUF_OPEN_DATA)."""

import csv
import os
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

from aquabuf.readings.mapping import read_map
from aquabuf.readings.reader import read_readings
from aquabuf.readings.schema import titration_quantities

MAPS = Path(__file__).parents[2] / "docs" / "maps"
DATA = os.environ.get("AQUABUF_OPEN_DATA", "")
needs_data = pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")


def read(table, map_name):
    """Readings of an agency table by a shipped map."""
    return read_readings(Path(DATA) / f"{table}.csv", MAPS / f"{map_name}.toml")


def raw_rows(table):
    """The file as plain text, by the csv module alone."""
    with (Path(DATA) / f"{table}.csv").open(newline="") as stream:
        return list(csv.DictReader(stream))


@pytest.mark.parametrize("path", sorted(MAPS.glob("*.toml")), ids=lambda path: path.stem)
def test_every_shipped_map_is_valid(path):
    """Units and quantities are known; needs no data."""
    schema = titration_quantities() if path.stem.startswith("titrations") else None
    assert read_map(path, schema).columns


@needs_data
@pytest.mark.open_data
def test_eastern_lake_survey():
    """905 lakes, none rejected; each value is the agency's, ions converted by their charge."""
    readings = read("nsws_lakes_1984", "nsws_lakes_1984")
    rows = raw_rows("nsws_lakes_1984")
    assert (len(readings.frame), len(readings.rejected), len(rows)) == (905, 0, 905)
    frame = readings.frame
    assert frame["date_parsed"].dt.year.unique().tolist() == [1984]
    for header, column, factor in [
        ("Ca_ueq_L", "calcium_mol_l", 0.5e-6), ("SO4_ueq_L", "sulfate_mol_l", 0.5e-6), ("Cl_ueq_L", "chloride_mol_l", 1e-6),
        ("anc_ueq_L_revised", "anc_eq_l", 1e-6), ("dic_closed_mgC_L", "dic_mol_l", 1e-3 / 12.011), ("pH_closed_lab", "ph", 1.0),
        ("Al_extractable_ug_L", "aluminum_mol_l", 1e-6 / 26.982), ("doc_mgC_L", "doc_mg_l", 1.0),
    ]:  # fmt: skip
        assert_allclose(frame[column], [float(row[header]) * factor for row in rows], rtol=1e-9)
    assert frame["temperature_c"].isna().sum() == sum(not row["temp_surface_C"] for row in rows)


@needs_data
@pytest.mark.open_data
def test_national_lakes_assessment():
    """1230 visits: the one with 273 °C is rejected by its row, all others stay."""
    readings = read("nla_lakes_2012", "nla_lakes_2012")
    assert (len(readings.frame), len(readings.rejected)) == (1229, 1)
    line = readings.rejected.iloc[0]
    assert (line["row"], line["sample_id"], line["column"], line["value"]) == (446, "6929", "temp_surface_C", "273")
    assert readings.frame["date_parsed"].dt.month.between(5, 10).all()  # the survey's summer season
    kept = [row for row in raw_rows("nla_lakes_2012") if row["uid"] != "6929"]
    assert_allclose(
        readings.frame["nitrate_mol_l"].dropna() * 14.007e3,
        [float(r["NO3NO2_mgN_L"]) for r in kept if r["NO3NO2_mgN_L"]],
        rtol=1e-9,
        atol=1e-12,
    )


@needs_data
@pytest.mark.open_data
def test_long_term_monitoring():
    """2246 samples with composed names; 48 ammonium readings below zero are noted."""
    readings = read("ltm_adirondack_1982_2020", "ltm_adirondack")
    assert (len(readings.frame), len(readings.rejected)) == (2246, 0)
    assert readings.frame["sample_id"][0] == "040576_EPI_1992-06-16"
    assert any(note.startswith("48 x below zero, set to zero in ammonium_mol_l") for note in readings.notes)
    assert readings.frame["ammonium_mol_l"].min() == 0.0
