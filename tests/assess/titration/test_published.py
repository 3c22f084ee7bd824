"""Methods against published and independently worked titrations: `tests/published/titration.csv`."""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from published_rows import read_rows
from simulated import bisected

from aquabuf import Water
from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.endpoints import alkalinity_two_points, crossing
from aquabuf.assess.titration.gran import first_gran, line_root
from aquabuf.assess.titration.inflection import inflection
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.reader import read_titrations

ROWS = read_rows("titration")
K1, K2, KW = 10.0**-6.352, 10.0**-10.329, 10.0**-13.995  # no activity
OPEN_DATA = os.environ.get("AQUABUF_OPEN_DATA")
MAP = Path(__file__).parents[3] / "docs" / "maps" / "titrations_gran_points.toml"


def rows_of(what):
    """Rows of one kind with readable names."""
    rows = [r for r in ROWS if r["what"] == what]
    return pytest.mark.parametrize("row", rows, ids=lambda r: f"{r['alkalinity_ueq_l']} {r['quantity']}")


def worked(alkalinity, co2, *, step_ml=0.02, strength=0.02, sample_ml=100.0):
    """Acid per liter of sample, pH and dilution of the closed titration that the table tells of."""
    carbon = _carbon(alkalinity, co2)
    added = np.arange(0.0, (alkalinity + 1.2e-3) * sample_ml / strength, step_ml)
    acid, dilution = strength * added / sample_ml, sample_ml / (sample_ml + added)

    def short(ph):
        h = 10.0**-ph
        carbonate = carbon * (K1 * h + 2.0 * K1 * K2) / (h * h + K1 * h + K1 * K2)
        return alkalinity - acid - carbonate - (KW / h - h) / dilution
    return acid[None], bisected(short, 1.0, 13.0, acid.shape)[None], dilution[None]


def _carbon(alkalinity, co2):
    """Carbon of water with so much alkalinity and free CO2."""
    h = 10.0 ** -bisected(lambda ph: alkalinity - co2 * K1 * 10.0**ph * (1.0 + 2.0 * K2 * 10.0**ph)
                          - KW * 10.0**ph + 10.0**-ph, 1.0, 13.0, ())
    return float(co2 * (1.0 + K1 / h + K1 * K2 / h**2))


def found(quantity, acid, ph, dilution):
    """What the code makes of the curve, in the unit of the table."""
    if quantity == "start_ph":
        return ph[0, 0]
    if quantity.startswith("gran"):
        high, low = (float(x) for x in quantity.split("_")[1:])
        f = first_gran(ph, dilution)
        return line_root(acid, f, (ph <= high) & (ph >= low), np.full(f.shape, 1e-9)).root[0] * 1e6
    if quantity == "fixed_4.5":
        return crossing(acid, ph, 4.5).acid[0] * 1e6
    if quantity == "two_point":
        return alkalinity_two_points(crossing(acid, ph, 4.5).acid, crossing(acid, ph, 4.2).acid)[0] * 1e6
    return inflection(acid, ph, np.array([1e-4]), np.array([1e-8])).acid[0] * 1e6


@rows_of("water")
def test_table_of_synthetic_waters(row):
    """Every method on three waters whose titration was worked out apart from the code."""
    curve = worked(float(row["alkalinity_ueq_l"]) * 1e-6, float(row["co2_umol_l"]) * 1e-6)
    assert_allclose(found(row["quantity"], *curve), float(row["expected"]), rtol=0, atol=float(row["atol"]))


@pytest.mark.parametrize(("alkalinity", "co2"), [(50e-6, 20e-6), (2e-4, 3e-5), (5e-4, 4e-5), (2e-3, 1e-4)])
def test_inflection_is_where_the_second_derivative_vanishes(alkalinity, co2):
    """Closed form below pH 7: x = A + h - C K1/(K1 + h) bends where 1 = C K1 (h - K1)/(h + K1)^3."""
    carbon = _carbon(alkalinity, co2)
    h = 10.0 ** -bisected(lambda ph: 1.0 - carbon * K1 * (10.0**-ph - K1) / (10.0**-ph + K1) ** 3, 4.0, 5.7, ())
    exact = alkalinity + h - carbon * K1 / (K1 + h)
    acid, ph, _ = worked(alkalinity, co2, step_ml=0.004)
    ours = inflection(acid, ph, np.array([1e-4]), np.array([1e-8])).acid[0]
    assert_allclose(ours, exact, rtol=0, atol=0.2 * h)


def test_an_end_point_at_4_5_calls_an_acid_lake_alkaline():
    """The trap itself: 20 µeq/L of free acid read as alkalinity, while the Gran line has the right sign."""
    curve = worked(-20e-6, 30e-6)
    assert found("fixed_4.5", *curve) > 10.0
    assert found("gran_4.0_3.3", *curve) < -19.0


@rows_of("equivalence")
def test_equivalence_point_of_closed_water(row):
    """pH at which no alkalinity is left, by the carbon kept in."""
    carbon = float(row["alkalinity_ueq_l"]) * 1e-6
    water = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=carbon, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(float(water.ph), float(row["expected"]), rtol=0, atol=float(row["atol"]))


@rows_of("equivalence_open")
def test_equivalence_point_under_air(row):
    """pH of water without alkalinity in balance with air."""
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=0.0, pco2_atm=420e-6, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(float(water.ph), float(row["expected"]), rtol=0, atol=float(row["atol"]))


@pytest.fixture(scope="module")
def measured():
    """The two measured titrations, assessed as a user would."""
    if not OPEN_DATA:
        pytest.skip("AQUABUF_OPEN_DATA is not set")
    t = read_titrations(Path(OPEN_DATA) / "titrations_gran.csv", points_map=MAP)
    return assess_titrations(t, TitrationOptions(), by_liter=True, by_kilogram=False)


def raw_slope(result, i):
    """Slope of the chosen line per acid, without activity: (V0 + V)/V0 10^-pH against N V/V0."""
    s, first, last = result.solved, result.solved.gran.first[i], result.solved.gran.last[i] + 1
    f = 10.0 ** -s.ph[i, first:last] / s.curves.dilution[i, first:last]
    return np.polyfit(s.curves.acid[i, first:last], f, 1)[0]


@pytest.mark.open_data
@rows_of("measured")
def test_measured_sets_with_their_reported_results(measured, row):
    """The automatic choice of points lands on the reported result; the slopes are as far off as the data say."""
    table = measured.results.set_index("sample_id")
    i = list(table.index).index(row["alkalinity_ueq_l"])
    value = {"volume_ml": table["gran_volume_ml"].iloc[i], "alkalinity_ueq_l": table["gran_ueq_l"].iloc[i],
             "r": table["gran_r"].iloc[i], "slope_over_strength": raw_slope(measured, i)}[row["quantity"]]
    assert_allclose(value, float(row["expected"]), rtol=0, atol=float(row["atol"]))


@pytest.mark.open_data
def test_measured_sets_get_the_slope_warning(measured):
    """A correlation of 0.9999 does not hide that strength or electrode is off, and the interval says so."""
    table = measured.results.set_index("sample_id")
    for name, ratio in (("A_Gran", 2.27), ("B_Lab4_Sample1_t0", 0.735)):
        assert table.loc[name, "gran_r"] > 0.9997
        assert "Gran slope" in table.loc[name, "warnings"].split("; ")
        error = abs(ratio - 1.0) / np.sqrt(3.0) * table.loc[name, "recommended_ueq_l"]
        assert table.loc[name, "recommended_u_ueq_l"] > 0.8 * error


@pytest.mark.open_data
def test_choice_of_points_alone_moves_a_gran_result():
    """Set A with 3, 4 and 5 points gives 425, 407 and 300 µeq/L (worked out apart from the code): pH decides, not r."""
    if not OPEN_DATA:
        pytest.skip("AQUABUF_OPEN_DATA is not set")
    data = pd.read_csv(Path(OPEN_DATA) / "titrations_gran.csv")
    a = data[data["set_id"] == "A_Gran"]
    acid, dilution = (0.1 * a["acid_mL"] / 50.0).to_numpy()[None], (50.0 / (50.0 + a["acid_mL"])).to_numpy()[None]
    f = first_gran(a["pH"].to_numpy()[None], dilution)
    for count, expected in ((3, 425.4), (4, 407.0), (5, 300.0)):
        use = np.arange(len(a))[None] >= len(a) - count
        assert_allclose(line_root(acid, f, use, np.full(f.shape, 1e-6)).root * 1e6, [expected], rtol=0, atol=0.5)
