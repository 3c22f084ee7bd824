"""Results of titrations as readings: values, uncertainties, which column they go into, and what is counted."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from sample_tables import readings

from aquabuf.assess.sample.titrated import Titrated, titrated_by
from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.reader import read_titrations

# Free acid alone, ideal: water of -0.3 meq/L takes 0.02 eq/L of strong acid, 100 mL of sample
FREE = "".join(f"a,{v},{-np.log10((3e-4 + 0.02 * v / 100.0) / (1.0 + v / 100.0)):.3f}\n" for v in range(6))


@pytest.fixture
def files(tmp_path):
    """The two files of titrations, given as text."""
    def write(points, samples):
        for name, text in (("p.csv", points), ("s.csv", samples)):
            (tmp_path / name).write_text(text, encoding="utf-8")
        return TitrationFiles(tmp_path / "p.csv", tmp_path / "s.csv")
    return write


def titrated(**results):
    """Results by name: value, uncertainty, method, whether an ANC."""
    return Titrated(results=results)


@pytest.mark.parametrize(("size", "unit", "per_liter"), [("sample_mass_g", "umol_kg", 1.02334), ("sample_volume_ml", "ueq_l", 1.0)])
def test_value_and_uncertainty_come_to_liters_alike(files, size, unit, per_liter):
    """By mass in sea water (35, 25 °C: 1.02334 kg/L) both are 2.3 % more per liter than per kilogram; by volume they are as they are."""
    both = files(f"sample_id,titrant_ml,ph\n{FREE}", f"sample_id,{size},titrant_eq_l,temperature_c,salinity\na,100,0.02,25,35\n")
    r = assess_titrations(read_titrations(both.points, both.samples), TitrationOptions(), by_liter=True, by_kilogram=True).results.iloc[0]
    value, u, method, is_anc = titrated_by(both).results["a"]
    assert_allclose([value, u], 1e-6 * per_liter * np.array([r[f"recommended_{unit}"], r[f"recommended_u_{unit}"]]), rtol=1e-5)
    assert value < -2e-4
    assert (method, is_anc) == (r["recommended_method"], False)


def test_alkalinity_and_anc_go_into_their_own_columns():
    """Value, uncertainty and method; the other column of that sample is emptied, those of other samples are kept."""
    frame = readings({"sample_id": "a", "alkalinity_eq_l": 1.0, "anc_eq_l": 2.0}, {"sample_id": "b", "anc_eq_l": 3.0, "anc_u_eq_l": 0.1},
                     {"sample_id": "c", "alkalinity_eq_l": 4.0})
    t = titrated(a=(0.5, 0.01, "fit", False), c=(0.6, 0.02, "gran", True))
    out = t.put_into(frame).frame
    assert_array_equal(out["alkalinity_eq_l"], [0.5, np.nan, np.nan])
    assert_array_equal(out["alkalinity_u_eq_l"], [0.01, np.nan, np.nan])
    assert_array_equal(out["anc_eq_l"], [np.nan, 3.0, 0.6])
    assert_array_equal(out["anc_u_eq_l"], [np.nan, 0.1, 0.02])
    assert out["titrated_by"].tolist() == ["fit", "", "gran"]
    assert (t.replaced, dict(t.used)) == (2, {"fit": 1, "gran": 1})


def test_columns_that_the_table_lacks_are_made():
    """Readings without any alkalinity get both columns; nothing is counted as replaced, and the readings given are not changed."""
    before = readings({"sample_id": "a", "ph": 7.0}, {"sample_id": "b", "ph": 7.0})
    t = titrated(b=(0.5, 0.01, "fit", False))
    out = t.put_into(before).frame
    assert_array_equal(out["alkalinity_eq_l"], [np.nan, 0.5])
    assert_array_equal(out["anc_eq_l"], [np.nan, np.nan])
    assert t.replaced == 0
    assert "alkalinity_eq_l" not in before.frame


def test_pieces_add_up():
    """Counts run over all pieces of the readings."""
    t = titrated(a=(0.5, 0.01, "fit", False), b=(0.5, 0.01, "fit", False), z=(0.5, 0.01, "gran", False))
    for name in "ab":
        t.put_into(readings({"sample_id": name, "alkalinity_eq_l": 1.0}))
    assert (t.replaced, dict(t.used)) == (2, {"fit": 2})
    assert t.in_words("p.csv") == [
        "Alkalinity of 2 samples is the recommended result of their titration in p.csv (fit 2); in 2 of them it took the place of the alkalinity in the readings.",
        "Without an accepted sample of their name in the readings: 1 titration with a result."]


def test_what_gives_nothing_is_counted_by_kind(files):
    """Refused, without result, and acidity alone: none is taken for an alkalinity, none is lost, and only results carry warnings."""
    base = "".join(f"base,{v},{ph}\n" for v, ph in enumerate((6.6, 7.2, 7.9, 8.6)))
    found = titrated_by(files(f"sample_id,titrant_ml,ph\n{FREE}{base}two,0,7\ntwo,1,6\nbad,0,7\nbad,1,77\n",
                              "sample_id,sample_volume_ml,titrant_eq_l,titrant_kind\na,100,0.02,\nbase,100,0.01,base\ntwo,100,0.1,\nbad,100,0.1,\n"))
    assert list(found.results) == ["a"]
    assert dict(found.without) == {"acidity only": 1, "no result": 1, "refused": 1}
    assert found.warned == 1  # "a" has no temperature
