"""A season: doses by hand, rows apart, what cannot be met, ranges and turndown, what a dose follows."""

import time

import numpy as np
import pytest
from made_streams import stream, target
from numpy.testing import assert_allclose, assert_array_equal
from scipy.stats import spearmanr
from works import CAUSTIC, CO2, LIME, bare, caustic_by_hand, dosing, ph

from aquabuf.assess.plant.season import MET, MISSED, UNREAD, rank_correlation, season
from aquabuf.assess.plant.steps.adjust import Adjust
from aquabuf.assess.plant.steps.coagulate import Coagulate
from aquabuf.assess.plant.store import Stocked
from aquabuf.chem.products import find_product
from aquabuf.errors import InputError

DOSE = "final_caustic_soda_mg_l_product"


def to_ph(value):
    """A works of one step."""
    return [Adjust(name="final", products=(CAUSTIC,), targets=(ph(value),))]


def readings(rows, seed=3):
    """Soft raw water of a year."""
    rng = np.random.default_rng(seed)
    return {"temperature_c": rng.uniform(2.0, 20.0, rows), "ph": rng.uniform(6.2, 7.4, rows),
            "alkalinity_eq_l": rng.uniform(2e-4, 8e-4, rows), "calcium_mol_l": rng.uniform(1e-4, 3e-4, rows)}


def test_doses_by_hand():
    """Caustic to pH 8.3 in eight waters, and the water that leaves."""
    raw, dic = bare(np.linspace(2e-4, 9e-4, 8), np.linspace(7.2, 6.2, 8))
    found = season(raw, to_ph(8.3))
    expected = [caustic_by_hand(a, c, 8.3) for a, c in zip(raw.alkalinity_eq_l, dic, strict=True)]
    assert_allclose(found.table[DOSE], np.array(expected) * 39.997e3, rtol=2e-3)
    assert_allclose(found.table["final_ph"], 8.3, rtol=0, atol=1e-6)
    assert_array_equal(found.status, MET)
    assert found.share_missed == 0.0
    assert found.first_reason == ""
    assert "100 % of 8 rows meet every target" in found.words()


def test_rows_do_not_see_each_other():
    """A day alone has the dose it has within the season."""
    values = readings(40)
    whole = season(values, to_ph(8.4)).table
    for k in (0, 17, 39):
        alone = season({n: v[k:k + 1] for n, v in values.items()}, to_ph(8.4)).table
        assert_allclose(alone.iloc[0][[DOSE, "final_ph", "raw_dic_mmol_l"]].astype(float),
                        whole.iloc[k][[DOSE, "final_ph", "raw_dic_mmol_l"]].astype(float), rtol=1e-9)


def test_a_row_without_reading_is_left_out():
    """It has no dose, no verdict, and no share in the sums."""
    values = readings(20)
    values["ph"][[0, 7]] = np.nan
    found = season(values, to_ph(8.3))
    assert_array_equal(np.flatnonzero(found.status == UNREAD), [0, 7])
    assert found.table.loc[[0, 7], [DOSE, "final_ph"]].isna().all(axis=None)
    kept = {n: np.delete(v, [0, 7]) for n, v in values.items()}
    other = season(kept, to_ph(8.3))
    assert_allclose(np.delete(found.table[DOSE].to_numpy(), [0, 7]), other.table[DOSE], rtol=1e-12)
    assert_allclose(found.doses.iloc[0]["rank_correlation"], other.doses.iloc[0]["rank_correlation"], rtol=1e-12)
    assert "2 of 20 rows left out: raw water not solved" in found.words()


def test_rows_that_cannot_be_met():
    """Caustic does not lower pH: rows above the target are missed, and the first reason names what is missing."""
    raw, _ = bare(5e-4, np.array([6.5, 7.0, 7.6, 7.2, 8.0]))
    found = season(raw, to_ph(7.4))
    assert_array_equal(found.status, [MET, MET, MISSED, MET, MISSED])
    assert_allclose(found.share_missed, 0.4)
    assert_allclose(found.targets["met_percent"], 60.0)
    assert "pH 7.40 cannot be met with caustic soda" in found.first_reason
    assert any(w.startswith("40 % cannot be met, the first in row 3: pH 7.40") for w in found.words())
    assert found.table[DOSE].isna().tolist() == [False, False, True, False, True]


def test_first_reason_is_that_of_the_first_row():
    """Two steps miss different rows: the earlier row counts, not the earlier step."""
    raw, _ = bare(np.array([4e-4, 4e-4, 9e-4, 4e-4]), np.array([6.5, 6.5, 6.5, 7.7]))
    steps = [*to_ph(7.5), Adjust(name="second", products=(LIME,), targets=(target("alkalinity", 40.0),))]
    found = season(raw, steps)
    assert_array_equal(found.status, [MET, MET, MISSED, MISSED])
    assert found.first_reason.startswith("alkalinity 40.0")
    assert found.targets["met_percent"].tolist() == [75.0, 75.0]


def test_range_and_turndown_of_a_feed():
    """Quantiles and ratios of doses set by hand; with flow the feed counts; rows without dose are apart."""
    raw, _ = bare(5e-4, np.full(21, 7.0))
    mg_l = np.append(np.linspace(1.0, 20.0, 20), 0.0)
    flow = np.append(np.linspace(200.0, 10.0, 20), 100.0)
    row = season(raw, [dosing((CAUSTIC,), (mg_l / 39.997e3,))], flow_m3_d=flow).doses.iloc[0]
    assert_allclose([row["least_mg_l_product"], row["most_mg_l_product"]], [0.0, 20.0], atol=1e-3)
    assert_allclose([row["low_mg_l_product"], row["high_mg_l_product"]], np.quantile(mg_l, [0.05, 0.95]), rtol=1e-4)
    assert_allclose(row["not_dosed_percent"], 100.0 / 21.0)
    feed = (mg_l * flow)[:20]
    assert_allclose(row["turndown_ends"], feed.max() / feed.min(), rtol=1e-9)
    assert_allclose(row["turndown"], np.divide(*np.quantile(feed, [0.95, 0.05])), rtol=1e-9)
    without = season(raw, [dosing((CAUSTIC,), (mg_l / 39.997e3,))]).doses.iloc[0]
    assert_allclose(without["turndown_ends"], 20.0, rtol=1e-9)


def test_what_a_dose_follows():
    """At one alkalinity caustic follows pH; at one pH it follows alkalinity; a fixed dose follows nothing."""
    rng = np.random.default_rng(5)
    by_ph = season({"temperature_c": rng.uniform(9.9, 10.1, 60), "ph": rng.uniform(6.2, 7.4, 60), "alkalinity_eq_l": np.full(60, 5e-4)},
                   to_ph(8.3))
    by_alkalinity = season({"temperature_c": np.full(60, 10.0), "ph": np.full(60, 6.8),
                            "alkalinity_eq_l": rng.uniform(2e-4, 9e-4, 60)}, to_ph(8.3))
    assert (by_ph.doses.iloc[0]["follows"], by_alkalinity.doses.iloc[0]["follows"]) == ("pH", "alkalinity")
    assert_allclose([by_ph.doses.iloc[0]["rank_correlation"], by_alkalinity.doses.iloc[0]["rank_correlation"]], [-1.0, 1.0], atol=0.01)
    assert by_ph.words()[-1].endswith("it follows pH of the raw water most: less of it where pH is high (rank correlation -1.00)")
    fixed = season(readings(30), [dosing((CAUSTIC,), (1e-4,))])
    assert fixed.words()[-1] == "caustic soda in dose: 4 mg/L of product throughout"


def test_a_dose_that_follows_nothing():
    """Noise is told as such."""
    rng = np.random.default_rng(8)
    raw, _ = bare(5e-4, rng.uniform(6.5, 7.5, 200))
    found = season(raw, [dosing((CAUSTIC,), (rng.uniform(1e-5, 1e-4, 200),))])
    assert "it follows no single reading" in found.words()[-1]


def test_rank_correlation_is_spearmans():
    """Ties, missing rows, and too little to tell."""
    rng = np.random.default_rng(2)
    a, b = rng.integers(0, 6, 50).astype(float), rng.normal(size=50)
    b += a
    assert_allclose(rank_correlation(a, b), spearmanr(a, b).statistic, rtol=1e-12)
    holes = np.where(np.arange(50) % 7 == 0, np.nan, b)
    there = np.isfinite(holes)
    assert_allclose(rank_correlation(a, holes), spearmanr(a[there], b[there]).statistic, rtol=1e-12)
    assert np.isnan(rank_correlation(a[:9], b[:9]))
    assert np.isnan(rank_correlation(np.ones(50), b))


def test_a_year_of_hours_is_quick():
    """8,760 rows, four steps, two targets: at most 10 s (it takes a fraction of one)."""
    chloride = Stocked(name="iron", product=find_product("ferric chloride"), strength=0.4)
    steps = [Coagulate(name="coagulate", product=chloride, dose_mol_l=5e-5), dosing((CAUSTIC,), (1e-4,), name="before"),
             Adjust(name="final", products=(LIME, CO2), targets=(ph(8.3), target("alkalinity", 50.0))),
             dosing((CAUSTIC,), (1e-6,), name="after")]
    start = time.perf_counter()
    found = season(readings(8760), steps)
    assert time.perf_counter() - start < 10.0
    good = found.status == MET
    assert good.sum() > 5000
    assert_allclose(found.table["final_alkalinity_mg_l_caco3"][good], 50.0, rtol=0, atol=1e-6)
    assert_allclose(found.table["final_ph"][good].min(), 8.3, atol=0.05)


def test_what_is_no_season():
    """No water that can be solved, or flow that fits no row."""
    with pytest.raises(InputError, match=r"needs rows of raw water that can be solved; none of 2 can. Check pH"):
        season(stream([np.nan, np.nan], 1e-3), to_ph(8.3))
    with pytest.raises(InputError, match=r"flow_m3_d must be one value or one per row of water \(3\).* found 2 values"):
        season(bare(5e-4, np.full(3, 7.0))[0], to_ph(8.3), flow_m3_d=[1.0, 2.0])
