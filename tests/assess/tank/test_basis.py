"""What a design rests on: needs of a course by hand, the aim by closed form, reagents that serve and those that do not."""

import numpy as np
import pytest
from made_jobs import (
    ACID,
    CAUSTIC,
    GAS,
    LIMESTONE,
    MAGNESIA,
    SODA_ASH,
    acetic,
    batch,
    bicarbonate,
    course,
    job,
    steady,
    strong,
)
from numpy.testing import assert_allclose

from aquabuf.assess.tank.arrivals import Arrival
from aquabuf.assess.tank.basis import amounts_of, basis_of, needs_of
from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.waste import chemistry
from aquabuf.errors import InputError

STRONG = chemistry([strong()])


def needs(base, flow, dt=None, aim=7.0):
    """Needs of steps of strong acid and base; base at pH 7 is under 1e-6 eq/L."""
    base, flow = np.asarray(base, dtype=float), np.asarray(flow, dtype=float)
    dt = np.full(base.shape, 3600.0) if dt is None else np.asarray(dt, dtype=float)
    return needs_of(STRONG, aim, flow, base, amounts_of(np.ones((1, base.size))), dt)


def test_needs_of_steps_are_flow_times_lack():
    """Least, mean and most by hand: 20, 80 and 10 eq/h over 1, 1 and 2 h."""
    found = needs([-0.010, -0.020, -0.005], [2.0, 4.0, 2.0], [3600.0, 3600.0, 7200.0])
    assert set(found) == {"base"}
    n = found["base"]
    assert_allclose([n.least_eq_h, n.mean_eq_h, n.most_eq_h], [10.0, (20 + 80 + 2 * 10) / 4.0, 80.0], rtol=1e-3)
    assert_allclose([load.base_eq_l for load in n.loads], [-0.005, -120.0 / 10.0 / 1e3, -0.020], rtol=1e-3)
    assert_allclose(n.loads[1].flow_m3_h, 10.0 / 4.0)  # 10 m3 in 4 h


def test_mean_load_counts_only_what_asks_for_the_kind_and_spreads_it_over_all_time():
    """Two of four hours are acid at 3 m3/h: 1.5 m3/h of -0.02 eq/L, so that a day takes 24 times 30 eq."""
    found = needs([-0.02, 0.01, -0.02, 0.01], [3.0, 5.0, 3.0, 5.0])
    base, acid = found["base"], found["acid"]
    assert_allclose([base.loads[1].flow_m3_h, acid.loads[1].flow_m3_h], [1.5, 2.5])
    assert_allclose([base.loads[1].base_eq_l, acid.loads[1].base_eq_l], [-0.02, 0.01], rtol=1e-9)
    assert_allclose([base.mean_eq_h, acid.mean_eq_h], [30.0, 25.0], rtol=1e-3)
    for n in (base, acid):
        load = n.loads[1]
        assert_allclose(n.mean_eq_h, 1e3 * load.flow_m3_h * abs(load.base_eq_l), rtol=1e-3)


def test_steps_without_flow_and_rounding_ask_for_nothing():
    """A standing step is no least need, and a need of a millionth of the largest is none."""
    found = needs([-0.5, -0.01, 1e-8], [0.0, 2.0, 2.0])
    assert set(found) == {"base"}
    assert_allclose([found["base"].least_eq_h, found["base"].most_eq_h], 20.0, rtol=1e-3)
    assert needs([-0.01], [0.0]) == {}


def test_aim_of_strong_acid_keeps_its_distance_from_the_ends():
    """Half of the way is at pH 8.65: (10^-5 - 10^-6) / 2 = 4.5e-6 mol/L of hydroxide; a quarter of 3 pH is kept."""
    found = basis_of(job(steady(strong())))
    assert found.half_ph == pytest.approx(14.0 + np.log10(4.5e-6), abs=0.05)
    assert found.aim_ph == 8.2
    assert "kept 0.75 pH from both ends" in found.aim_why


def test_aim_of_a_buffered_waste_is_the_middle_on_the_axis_of_reagent():
    """Bicarbonate, pK 6.35: base at pH 6.33 over 6 to 9 is half way, by the closed form of ionization."""
    found = basis_of(job(steady(bicarbonate())))
    share = lambda ph: 1.0 / (1.0 + 10.0 ** (6.352 - ph) + 10.0 ** (ph - 10.329))  # noqa: E731
    held = lambda ph: share(ph) * (1.0 + 2.0 * 10.0 ** (ph - 10.329))  # noqa: E731
    grid = np.linspace(6.0, 9.0, 3001)
    half = grid[np.argmin(np.abs(held(grid) - 0.5 * (held(6.0) + held(9.0))))]
    assert found.half_ph == pytest.approx(half, abs=0.1)  # activities move pK1 by some 0.05
    assert found.aim_ph == 6.8
    assert "kept 0.75" in found.aim_why


@pytest.mark.parametrize("window", [(6.92, 6.98), (8.94, 8.98), (6.0, 6.06)])
def test_aim_of_a_narrow_window_lies_inside(window):
    """Rounding does not carry it out."""
    found = basis_of(job(steady(strong()), window=window))
    free = 0.25 * (window[1] - window[0])
    assert window[0] + free - 1e-9 <= found.aim_ph <= window[1] - free + 1e-9


def test_aim_that_the_file_sets():
    """By the window, or by the last set point."""
    assert basis_of(job(steady(strong()), aim=7.5)).aim_ph == 7.5
    found = basis_of(job(steady(strong()), wishes={"set_points": (4.0, 7.2)}))
    assert found.aim_ph == 7.2
    assert found.aim_why == "as the file sets it"


def test_demand_rows_by_hand():
    """Strong acid of 0.01 eq/L at 6 m3/h: 60 eq/h, 60 x 40 g / 0.25 = 9.6 kg/h of 25 % caustic."""
    found = basis_of(job(steady(strong())))
    mean = next(d for d in found.demands if d.load.name == "mean" and d.aim.name == "set point")
    assert mean.eq_l == pytest.approx(0.01, rel=1e-3)
    assert mean.product_kg_h == pytest.approx(60.0 * 39.997e-3 / 0.25, rel=2e-3)
    assert {(d.load.name, d.aim.name) for d in found.demands} == {
        (n, a) for n in ("least", "mean", "most") for a in ("set point", "low end", "high end")}


def test_measured_course():
    """Flow and strength of a profile; standing hours count in the mean of time but not of volume."""
    profile = course([2.0, 0.0, 4.0], strength=[1.0, 5.0, 2.0])
    found = basis_of(job(Arrival(waste=strong(), mean_m3_h=None), profile=profile))
    assert found.mean.flow_m3_h == pytest.approx(2.0)
    assert found.mean.base_eq_l == pytest.approx(-(2 * 0.01 + 4 * 0.02) / 6.0)
    assert found.needs["base"].most_eq_h == pytest.approx(80.0, rel=1e-3)


def test_waste_inside_its_window_is_refused():
    """Nothing is to be built."""
    with pytest.raises(InputError, match=r"must leave its window; found pH .* over the whole course, within 6 to 9. Noth"):
        basis_of(job(steady(bicarbonate(acid_eq_l=0.0))))


def test_alkaline_waste_with_carbon_dioxide_alone():
    """A mole of gas per equivalent where all of it becomes bicarbonate, pH 8.34 (facts: CO2/NaOH = 1 gives 8.34)."""
    found = basis_of(job(steady(strong(0.05)), reagents={"gas": GAS}, base=None, aim=8.34))
    assert found.chosen["acid"].name == "carbon dioxide"
    mean = next(d for d in found.demands if d.load.name == "mean" and d.aim.name == "set point")
    assert mean.eq_l == pytest.approx(0.05, rel=0.01)


def test_reagent_that_is_missing():
    """An alkaline waste needs acid; the file names none, or one that does not come so far down."""
    with pytest.raises(InputError, match=r"asks for acid to reach pH .*, 300 eq/h on average, .* the file names no acid. "
                                         r"Add a reagent"):
        basis_of(job(steady(strong(0.05)), reagents={"caustic": CAUSTIC}, aim=7.0))


def test_reagents_that_cannot_reach_the_window():
    """Limestone ends near pH 5.9 (facts 5.3): alone, and named; the words say what to do."""
    with pytest.raises(InputError, match=r"no reagent does it: limestone ends at pH 5\..*Strip it, then finish with"):
        basis_of(job(steady(strong()), reagents={"limestone": LIMESTONE}, base=None, aim=7.0))
    with pytest.raises(InputError, match=r"\[use\] names must bring the stream to the aim, pH 7; limestone does not: ends"):
        basis_of(job(steady(strong()), reagents={"limestone": LIMESTONE, "caustic soda": CAUSTIC}, base="limestone",
                     aim=7.0))
    with pytest.raises(InputError, match=r"the aim, pH 9.5; magnesium hydroxide does not: stops at pH 9.0"):
        basis_of(job(steady(strong()), reagents={"magnesium hydroxide": MAGNESIA}, base="magnesium hydroxide",
                     window=(6.0, 10.0), aim=9.5))
    with pytest.raises(InputError, match=r"the aim, pH 5.5; carbon dioxide does not: the gas brings .* pH 6.0"):
        basis_of(job(steady(strong(0.05)), reagents={"carbon dioxide": GAS}, base=None, acid="carbon dioxide",
                     window=(5.0, 9.0), aim=5.5))


def test_best_reagent_where_none_is_named():
    """By cost: soda ash at 0.4 a kg costs more than caustic soda at 0.3 for 25 %."""
    found = basis_of(job(steady(strong()), reagents={"caustic": CAUSTIC, "soda ash": SODA_ASH, "acid": ACID}, base=None,
                         aim=7.0))
    costs = {c.reagent.name: c.demand.cost_d for c in found.comparisons["base"].candidates if c.reaches}
    assert found.chosen["base"].name == min(costs, key=costs.get)
    assert "acid" not in found.chosen


def test_missing_reagent_is_left_to_the_equalized_stream():
    """Acid and alkaline batches: acid is asked for before they are mixed, and noted as lacking."""
    found = basis_of(job(batch(strong(-0.2, name="a"), 6.0, 6.0, 0.5), batch(strong(0.05, name="b"), 6.0, 6.0, 0.5, 3.0),
                         reagents={"caustic": CAUSTIC}))
    assert found.lacking == {"acid": "the file names no acid"}
    assert set(found.needs) == {"base", "acid"}


def test_samples_of_a_waste_are_told():
    """Two titrations of a waste: the band at the aim, by linear curves through (0, pH 3) and (x, pH 7)."""
    curves = tuple(MeasuredCurve(name, np.linspace(0.0, x, 9), np.linspace(3.0, 11.0, 9))
                   for name, x in (("a", 0.01), ("b", 0.02)))
    found = basis_of(job(steady(acetic(curve=curves[0], base_eq_l=None, name="w"), samples=curves), aim=7.0))
    assert found.sample_words == ("w: 2 samples ask for 5 to 10 meq/L of base to pH 7, the one designed for 5",)
