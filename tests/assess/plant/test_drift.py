"""Errors of readings and feeds: exact normal cases, a fifth for 0.1 pH, split of variance, words, rows and seeds."""

import numpy as np
import pytest
from made_streams import MG_CACO3, target
from numpy.testing import assert_allclose
from pandas.testing import assert_frame_equal
from scipy.stats import binomtest, norm
from works import CAUSTIC, CO2, LIME, STRENGTH, adjusted, bare, by_hand, caustic_by_hand, dosing, ph, ph_by_hand

from aquabuf.assess.plant.aims import aims_of, banded, column_of, share_interval
from aquabuf.assess.plant.drift import under_error, under_feed_error, worst_of
from aquabuf.assess.plant.quantities import find_quantity, plant_quantities
from aquabuf.assess.plant.steps.adjust import Adjust
from aquabuf.assess.plant.train import run_train
from aquabuf.errors import InputError
from aquabuf.tables import read_table

DRAWS = 20_000
RAW = 4e-4  # alkalinity of the raw water [eq/L]


def readings(alkalinity=RAW, raw_ph=6.5, rows=1):
    """Readings of carbonate water at 25 °C."""
    return {"temperature_c": np.full(rows, 25.0), "ph": np.full(rows, raw_ph), "alkalinity_eq_l": np.full(rows, alkalinity),
            "ionic_strength_mol_l": np.full(rows, STRENGTH)}


def errors(rows=1, **u):
    """Standard uncertainties of some readings."""
    return {name: np.full(rows, v) for name, v in u.items()}


def to(*targets, products=(CAUSTIC,)):
    """A works of one step."""
    return [Adjust(name="final", products=products, targets=targets)]


def of(table, quantity, step="final"):
    """The row of a quantity."""
    return table[(table["quantity"] == quantity) & (table["step"] == step)].iloc[0]


def near_share(percent, p, draws=DRAWS):
    """A share within four standard errors of its probability."""
    assert abs(percent / 100.0 - p) < 4.0 * np.sqrt(p * (1.0 - p) / draws)


# ---------------------------------------------------------------- feeds


def test_feed_error_of_one_base_is_normal():
    """Alkalinity is linear in the dose: left where the dose is off by more than a tenth of the alkalinity."""
    run = adjusted(bare(RAW, 6.5)[0], target("alkalinity", 60.0))
    found = under_feed_error(run, relative_u=0.1, draws=DRAWS)
    goal = 60.0 / MG_CACO3
    sigma = 0.1 * (goal - RAW)
    row = of(found.windows, "alkalinity")
    near_share(row["leaves_percent"], 2.0 * norm.sf(0.1 * goal / sigma))
    assert_allclose([row["value_low"], row["value_high"]], MG_CACO3 * (goal + np.array([-1.645, 1.645]) * sigma), rtol=3e-3)
    assert row["window"] == "54.0 to 66.0 mg/L as CaCO3"
    assert_allclose(row["value"], 60.0, rtol=1e-9)
    assert row["not_solved_percent"] == 0.0
    assert row["leaves_low_percent"] < row["leaves_percent"] < row["leaves_high_percent"]


def test_feeds_err_on_their_own():
    """Two bases: variances add, and their shares are those of the squared doses."""
    doses = (3e-4, 2e-4)
    run = run_train(bare(RAW, 6.5)[0], [dosing((CAUSTIC,), doses[:1], name="first"), dosing((LIME,), doses[1:], name="second")])
    goal = RAW + doses[0] + 2.0 * doses[1]
    aim = target("alkalinity", goal * 0.93 * MG_CACO3, goal * 1.07 * MG_CACO3)
    found = under_feed_error(run, relative_u=0.08, draws=DRAWS, targets=(aim,))
    parts = 0.08 * np.array([doses[0], 2.0 * doses[1]])
    near_share(of(found.windows, "alkalinity", "final water")["leaves_percent"],
               2.0 * norm.sf(0.07 * goal / np.sqrt((parts**2).sum())))
    for name, part in (("caustic soda", parts[0]), ("hydrated lime", parts[1])):
        alone = found.each[(found.each["cause"] == name) & (found.each["quantity"] == "alkalinity")].iloc[0]
        near_share(alone["leaves_percent"], 2.0 * norm.sf(0.07 * goal / part))
        cause = found.causes[(found.causes["cause"] == f"feed of {name}") & (found.causes["quantity"] == "alkalinity")].iloc[0]
        assert_allclose(cause["variance_percent"], 100.0 * part**2 / (parts**2).sum(), rtol=0.04)
        assert_allclose(cause["u_alone"], MG_CACO3 * part, rtol=0.03)


def test_feed_error_is_five_percent_unless_said():
    """As the rule on feed accuracy has it; errors may differ by product, and one without error does nothing."""
    run = run_train(bare(RAW, 6.5)[0], [dosing((CAUSTIC, LIME), (3e-4, 1e-4))])
    found = under_feed_error(run, draws=DRAWS)
    assert found.relative_u == {"caustic soda": 0.05, "hydrated lime": 0.05}
    one = under_feed_error(run, relative_u={"hydrated lime": 0.0}, draws=DRAWS)
    assert one.relative_u == {"caustic soda": 0.05, "hydrated lime": 0.0}
    assert set(one.causes["cause"]) == {"feed of caustic soda"}


def test_ph_where_a_feed_errs_is_that_of_the_hand_balance():
    """pH rises with the dose, so that its quantiles are those of the dose."""
    raw, dic = bare(RAW, 6.5)
    found = under_feed_error(adjusted(raw, ph(8.3)), relative_u=0.05, draws=DRAWS)
    dose = caustic_by_hand(RAW, dic[0], 8.3)
    ends = [ph_by_hand(RAW, dic[0], dose * (1.0 + z * 0.05)) for z in (-1.645, 1.645)]
    row = of(found.windows, "pH")
    assert_allclose([row["value_low"], row["value_high"]], ends, rtol=0, atol=0.02)
    inside = [(caustic_by_hand(RAW, dic[0], p) / dose - 1.0) / 0.05 for p in (8.2, 8.4)]
    near_share(row["leaves_percent"], 1.0 - (norm.cdf(inside[1]) - norm.cdf(inside[0])))


# ---------------------------------------------------------------- readings


def test_a_tenth_of_ph_moves_the_dose_by_a_fifth():
    """Soft acid water: caustic takes up the CO2, which is alkalinity times H over K1, so that 0.1 pH is 10^0.1."""
    found = under_error(readings(raw_ph=6.0), to(ph(8.3)), u=errors(ph=0.1), draws=DRAWS).doses.iloc[0]
    assert_allclose(found["u_mg_l_product"] / found["dose_mg_l_product"], 0.1 * np.log(10.0), rtol=0.05)
    up = under_error(readings(raw_ph=6.1), to(ph(8.3)), u=errors(ph=0.1), draws=100).doses.iloc[0]
    assert_allclose(1.0 - up["dose_mg_l_product"] / found["dose_mg_l_product"], 1.0 - 10.0**-0.1, rtol=0.03)  # 0.206
    ends = [caustic_by_hand(RAW, by_hand().dic(6.0 + z * 0.1, RAW), 8.3) * 39.997e3 for z in (1.645, -1.645)]
    assert_allclose([found["low_mg_l_product"], found["high_mg_l_product"]], ends, rtol=0.01)
    assert found["not_found_percent"] == 0.0


def test_held_dose_in_a_water_that_differs():
    """The alkalinity that the reading lacks is the alkalinity that the goal lacks."""
    u = 6e-5
    found = under_error(readings(), to(target("alkalinity", 60.0)), u=errors(alkalinity_eq_l=u), draws=DRAWS)
    goal, row = 60.0 / MG_CACO3, of(found.windows, "alkalinity")
    near_share(row["leaves_percent"], 2.0 * norm.sf(0.1 * goal / u))
    assert_allclose([row["value_low"], row["value_high"]], MG_CACO3 * (goal + np.array([-1.645, 1.645]) * u), rtol=3e-3)
    dose = found.doses.iloc[0]  # found anew it meets the goal and takes the error on itself
    assert_allclose(dose["u_mg_l_product"], u * 39.997e3, rtol=0.03)


def test_held_dose_and_ph():
    """The true pH is off by z: the water then holds other carbon, and the dose stays."""
    found = under_error(readings(), to(ph(8.2, 8.6)), u=errors(ph=0.02), draws=DRAWS)
    row = of(found.windows, "pH")
    dose = found.doses.iloc[0]["dose_mg_l_product"] / 39.997e3
    ends = [ph_by_hand(RAW, by_hand().dic(6.5 + z * 0.02, RAW), dose) for z in (-1.645, 1.645)]
    assert_allclose([row["value_low"], row["value_high"]], ends, rtol=0, atol=0.02)
    assert row["window"] == "8.20 to 8.60"
    assert 40.0 < row["leaves_percent"] < 60.0  # the cheapest dose sits at the low end of the window: half the draws leave


def test_split_of_variance():
    """Small errors: shares are those of squared slopes by hand; alkalinity knows nothing of pH."""
    u_ph, u_alkalinity = 0.004, 4e-6
    found = under_error(readings(), to(ph(8.3)), u=errors(ph=u_ph, alkalinity_eq_l=u_alkalinity), draws=DRAWS)
    dose = caustic_by_hand(RAW, by_hand().dic(6.5, RAW), 8.3)

    def final(raw_ph, alkalinity):
        return ph_by_hand(alkalinity, by_hand().dic(raw_ph, alkalinity), dose)

    parts = {"pH": 0.5 * (final(6.5 + u_ph, RAW) - final(6.5 - u_ph, RAW)),
             "alkalinity": 0.5 * (final(6.5, RAW + u_alkalinity) - final(6.5, RAW - u_alkalinity))}
    whole = sum(p**2 for p in parts.values())
    causes = found.causes[(found.causes["quantity"] == "pH") & (found.causes["step"] == "final")].set_index("cause")
    for name, part in parts.items():
        assert_allclose(causes.loc[name, "variance_percent"], 100.0 * part**2 / whole, rtol=0.05)
        assert_allclose(causes.loc[name, "u_alone"], abs(part), rtol=0.05)


def test_default_uncertainties_are_those_of_the_columns():
    """Those of columns.csv, absolute and relative together."""
    rows = {r["name"]: r for r in read_table("columns")}
    given = {n: float(rows[n]["default_u"]) + float(rows[n]["default_u_rel"] or 0.0) * v[0] for n, v in readings().items()
             if n in ("ph", "alkalinity_eq_l")}
    u = errors(ph=given["ph"], alkalinity_eq_l=given["alkalinity_eq_l"])
    given = under_error(readings(), to(ph(8.3)), u=u, draws=500)
    usual = under_error(readings(), to(ph(8.3)), draws=500)
    assert_allclose(usual.doses["u_mg_l_product"], given.doses["u_mg_l_product"], rtol=0.02)  # temperature adds a little
    assert {"pH", "alkalinity", "temperature"} <= set(usual.causes["cause"])


def test_rows_alone_and_seeds():
    """A row's answer depends on its own readings and the seed, on nothing else."""
    both = {n: np.array([v[0], w[0], np.nan if n == "ph" else v[0]]) for (n, v), w in
            zip(readings().items(), readings(5e-4, 7.0).values(), strict=True)}
    u, steps = errors(3, ph=0.05, alkalinity_eq_l=1e-5), to(ph(8.3))
    found = under_error(both, steps, u=u, draws=300)
    alone = under_error(readings(5e-4, 7.0), steps, u={n: v[:1] for n, v in u.items()}, draws=300)
    for name in ("doses", "windows", "causes"):
        table, one = getattr(found, name), getattr(alone, name)
        numbers = list(one.select_dtypes("number").columns.drop("row"))
        assert_frame_equal(table[table["row"] == 2][numbers].reset_index(drop=True), one[numbers], rtol=1e-9)
    assert found.windows[found.windows["row"] == 3]["value_low"].isna().all()
    assert (found.windows[found.windows["row"] == 3]["not_solved_percent"] == 100.0).all()
    assert worst_of(found, 3) == "no window can be judged: no target is set, or none could be computed"
    assert_frame_equal(under_error(both, steps, u=u, draws=300).windows, found.windows)
    other = under_error(both, steps, u=u, draws=300, seed=2).windows
    assert not np.allclose(other["value_low"][:2], found.windows["value_low"][:2], rtol=1e-9)
    run = run_train(bare(RAW, np.array([6.4, 6.9]))[0], to(ph(8.3)))
    feeds = under_feed_error(run, draws=300).windows
    one = under_feed_error(run_train(bare(RAW, 6.9)[0], to(ph(8.3))), draws=300).windows
    assert_allclose(feeds[feeds["row"] == 2]["value_low"], one["value_low"], rtol=1e-9)


def test_a_block_of_rows_without_reading():
    """So many draws that each row is worked alone, one of them unread."""
    two = {n: np.repeat(v, 2) for n, v in readings().items()}
    two["ph"][0] = np.nan
    found = under_error(two, to(target("alkalinity", 60.0)), u=errors(2, alkalinity_eq_l=1e-5), draws=DRAWS).doses
    assert np.isnan(found["low_mg_l_product"][0])
    assert_allclose(found["u_mg_l_product"][1], 1e-5 * 39.997e3, rtol=0.03)


# ---------------------------------------------------------------- words, bands, shares


def test_worst_in_words():
    """The window that is left most, how often, and the cause."""
    found = under_error(readings(), to(ph(8.3), target("alkalinity", 60.0), products=(LIME, CO2)), draws=2000)
    left = of(found.windows, "pH")["leaves_percent"]
    share = found.causes[(found.causes["quantity"] == "pH") & (found.causes["cause"] == "pH")]["variance_percent"].iloc[0]
    assert worst_of(found) == (f"pH leaves 8.20 to 8.40 in {left:.2g} % of draws; most of it is the pH reading "
                               f"({share:.0f} % of the variance)")
    feeds = under_feed_error(adjusted(bare(RAW, 6.5)[0], ph(8.3)), draws=500)
    assert worst_of(feeds).endswith("most of it is the feed of caustic soda (100 % of the variance)")
    safe = under_feed_error(adjusted(bare(RAW, 6.5)[0], target("alkalinity", 60.0)), relative_u=0.01, draws=500)
    assert "no window is left in any of 500 draws" in worst_of(safe)
    halves = run_train(bare(RAW, 6.5)[0], [dosing((CAUSTIC, LIME, CO2), (2e-4, 1e-4, 2e-4))])
    shared = under_feed_error(halves, relative_u=0.2, draws=2000, targets=(target("alkalinity", 38.0, 42.0),))
    assert worst_of(shared).startswith("alkalinity leaves 38.0 to 42.0 mg/L as CaCO3 in ")


def test_every_target_has_a_band():
    """The table of bands covers what can be aimed at, once each; windows stay as they are."""
    names = [r["quantity"] for r in read_table("target_bands")]
    assert sorted(names) == sorted(n for n, q in plant_quantities().items() if q.is_target)
    assert {r["mark"] for r in read_table("target_bands")} == {"practice"}
    band = banded(target("alkalinity", 80.0))
    assert_allclose([band.low * MG_CACO3, band.high * MG_CACO3], [72.0, 88.0], rtol=1e-6)
    band = banded(target("ccpp", 6.0))
    assert_allclose([band.low * 100.086e3, band.high * 100.086e3], [4.0, 8.0], rtol=1e-6)
    assert_allclose([banded(ph(8.3)).low, banded(ph(8.3)).high], [8.2, 8.4])
    assert banded(ph(8.0, 9.0)) == ph(8.0, 9.0)


def test_interval_of_a_share():
    """Wilson's, as scipy has it."""
    for k, n in ((0, 200), (7, 500), (300, 400), (1000, 1000)):
        low, high = share_interval(np.array([k / n]), np.array([n]))
        expected = binomtest(k, n).proportion_ci(confidence_level=0.90, method="wilson")
        assert_allclose([low[0], high[0]], [expected.low, expected.high], rtol=0, atol=2e-5)


def test_where_targets_are_judged():
    """On the water behind their step; those given apart, on the final water; pH is watched where nobody wants it."""
    run = run_train(bare(RAW, 6.5)[0], [*to(target("alkalinity", 60.0)), dosing((CAUSTIC,), (1e-4,), name="after")])
    aims = aims_of(run, watch_ph=True)
    assert [(a.step, a.place, a.watched) for a in aims] == [("final", 0, False), ("final water", None, True)]
    assert_allclose(aims[0].value(run) * MG_CACO3, 60.0, rtol=1e-9)
    last = aims_of(run, (target("alkalinity", 60.0),))[0]
    assert_allclose(last.value(run) * MG_CACO3, 60.0 + 1e-4 * MG_CACO3, rtol=1e-9)
    found = under_feed_error(run, draws=200).windows
    assert np.isnan(of(found, "pH", "final water")["leaves_percent"])
    assert column_of(find_quantity("buffer_intensity")) == "buffer_intensity_meq_l_ph"
    assert column_of(find_quantity("alkalinity")) == "alkalinity_mg_l_caco3"
    assert column_of(find_quantity("ph")) == "ph"


def test_what_is_refused():
    """Draws, seeds and errors out of range; products that nobody doses."""
    run = adjusted(bare(RAW, 6.5)[0], ph(8.3))
    with pytest.raises(InputError, match=r"draws must be from 100 to 100000; found 10. Use 1000"):
        under_error(readings(), to(ph(8.3)), draws=10)
    with pytest.raises(InputError, match=r"seed must be 0 or more; found -1"):
        under_feed_error(run, seed=-1)
    with pytest.raises(InputError, match=r"feed error of 'caustic soda' must be a share from 0 to 1; found 5. Give 5 % as 0.05"):
        under_feed_error(run, relative_u=5.0)
    with pytest.raises(InputError, match=r"no step doses 'lime'; dosed are caustic soda. Correct the name"):
        under_feed_error(run, relative_u={"lime": 0.1})
