"""Guard rails at their edge, and pumps at full stroke or standing still; strong base by hand."""

import numpy as np
import pytest
from made_streams import soft, stocked, target
from numpy.testing import assert_allclose, assert_array_equal
from works import CAUSTIC, CO2, LIME, adjusted, bare, caustic_by_hand, dosing, ph, ph_by_hand

from aquabuf.assess.plant.faults import FULL, STOPPED, Guards, full_stroke, guard, ph_levels
from aquabuf.assess.plant.train import run_train
from aquabuf.errors import InputError
from aquabuf.tables import read_table

RAW = 4e-4  # alkalinity [eq/L]


def dosed(mol_l, product=CAUSTIC, raw_ph=6.5, **more):
    """One fixed dose into bare water, and its carbon."""
    raw, dic = bare(RAW, raw_ph)
    return run_train(raw, [dosing((product,), (mol_l,), **more)]), dic[0]


# ---------------------------------------------------------------- guard rails


@pytest.mark.parametrize(("goal", "stops"), [(9.4, 0), (9.6, 1)])
def test_rail_on_ph(goal, stops):
    """Caustic to just below and just above 9.5 by hand; the overdose rail is taken away."""
    dose = caustic_by_hand(RAW, bare(RAW, 6.5)[1][0], goal)
    found = guard(dosed(dose)[0], Guards(over_ph=14.0))
    assert len(found) == stops
    assert all(f.severity == "stop" and f"behind step 'dose' pH is {goal:.2f}, above the guard rail of 9.5" in f.words for f in found)


@pytest.mark.parametrize(("goal", "stops"), [(9.97, 0), (10.03, 1)])
def test_rail_on_a_fifth_more(goal, stops):
    """1.2 times the dose comes to just below and just above pH 10 by hand, the dose itself being safe."""
    dose = caustic_by_hand(RAW, bare(RAW, 6.5)[1][0], goal) / 1.2
    run, dic = dosed(dose)
    now = ph_by_hand(RAW, dic, dose)
    found = guard(run, Guards(ph_high=14.0))
    assert len(found) == stops
    assert all(f"1.2 times the dose of caustic soda brings pH behind step 'dose' from {now:.2f} to {goal:.2f}, above the guard rail of 10"
               in f.words and f.severity == "stop" for f in found)


def test_rail_on_acid():
    """Acid takes the water below 6; the rule says that it is practice."""
    found = guard(dosed(3.9e-4, stocked("hydrochloric acid"))[0])
    assert [f.severity for f in found] == ["stop"]
    assert "below the guard rail of 6:" not in found[0].words
    assert "below the guard rail of 6" in found[0].words
    assert found[0].rule.endswith("(practice)")
    assert found[0].next_step


def test_rows_and_middle_steps():
    """Only the rows that pass a rail are named; a dosing step in the middle counts, one that does not dose does not."""
    raw, dic = bare(RAW, np.array([6.5, 6.5]))
    high = caustic_by_hand(RAW, dic[0], 9.8)
    run = run_train(raw, [dosing((CAUSTIC,), (np.array([1e-5, high]),), name="before"), dosing((CO2,), (5e-4,), name="after")])
    found = guard(run, Guards(over_ph=14.0))
    assert len(found) == 1
    assert "'before'" in found[0].words
    assert found[0].severity == "warning"  # a later step doses
    assert "within the works" in found[0].words
    assert_array_equal(found[0].where, [False, True])
    assert guard(run_train(raw, [])) == ()


def test_softening_is_meant_to_be_high():
    """Within the works it is a note; as the last step it stops."""
    raw, dic = bare(RAW, 6.5)
    step = dosing((CAUSTIC,), (caustic_by_hand(RAW, dic[0], 10.8),), name="basin", kind="soften")
    inner = guard(run_train(raw, [step, dosing((CO2,), (1.2e-3,), name="recarbonate")]))
    assert {f.severity for f in inner} == {"note"}
    assert all("meant to" in f.words for f in inner)
    assert {f.severity for f in guard(run_train(raw, [step]))} == {"stop"}


def test_own_rails_and_wrong_ones():
    """A plan's own rails count and say so."""
    run, _ = dosed(caustic_by_hand(RAW, bare(RAW, 6.5)[1][0], 8.6))
    assert guard(run, Guards(over_dose=1.0)) == ()
    found = guard(run, Guards(ph_high=8.5, over_dose=1.0))
    assert found[0].rule == "set in the plan"
    table = {r["name"]: float(r["value"]) for r in read_table("guard_rails")}
    assert (table["ph_low"], table["ph_high"], table["over_dose"], table["over_ph"]) == (6.0, 9.5, 1.2, 10.0)
    with pytest.raises(InputError, match=r"guard rails must go from low to high within 0 to 14; found 9 to 6"):
        Guards(ph_low=9.0, ph_high=6.0)
    with pytest.raises(InputError, match=r"overdose rail must be at least 1 times the dose and a pH up to 14; found 0.5 times"):
        Guards(over_dose=0.5)


# ---------------------------------------------------------------- pumps


def test_full_stroke_by_hand():
    """Caustic at 20 times the dose: pH by hand, water that passes, product that is too much."""
    run, dic = dosed(2e-4)
    full, stopped = full_stroke(run, "caustic soda", factor=20.0, flow_m3_d=2400.0)
    assert_allclose(full.ph_behind, ph_by_hand(RAW, dic, 4e-3), rtol=0, atol=3e-3)
    assert_allclose(full.volume_m3, 100.0)
    assert_allclose(full.excess_kg, 19.0 * 2e-4 * 39.997e3 * 100.0 / 1e3, rtol=1e-5)
    assert_allclose(stopped.ph_behind, 6.5, rtol=0, atol=5e-4)
    assert_allclose(stopped.ph_behind, run.raw.water().ph, rtol=0, atol=1e-12)
    assert_allclose(stopped.excess_kg, -2e-4 * 39.997e3 * 100.0 / 1e3, rtol=1e-5)
    assert (full.case, stopped.case) == (FULL, STOPPED)
    assert_allclose(full.ph_wanted, ph_by_hand(RAW, dic, 2e-4), rtol=0, atol=2e-3)
    long = full_stroke(run, "caustic soda", most_mol_l=4e-3, hours=3.0, flow_m3_d=2400.0)[0]
    assert_allclose(long.ph_behind, full.ph_behind)
    assert_allclose(long.volume_m3, 300.0)


def test_levels_of_harm():
    """pH 11 and 12 by the dose that a strong base needs; sources are named."""
    run, _ = dosed(2e-4)
    for most, names in ((1e-3, []), (4e-3, ["irritates"]), (2e-2, ["irritates", "burns"])):
        full = full_stroke(run, "caustic soda", most_mol_l=most, flow_m3_d=2400.0)[0]
        assert [level.name for level in full.levels()] == names
    words = " ".join(full.words())
    assert "irritates eyes and skin (pH above 11; WHO" in words
    assert "do not flush this water into the works" in words
    assert "tell the health authority" in words
    assert {(v.name, v.side, v.ph) for v in ph_levels()} == {("used up", "low", 4.5), ("irritates", "high", 11.0), ("burns", "high", 12.0)}
    acid, _ = dosed(1e-4, stocked("hydrochloric acid"))
    full, stopped = full_stroke(acid, "hydrochloric acid", factor=10.0, flow_m3_d=2400.0)
    assert [level.name for level in full.levels()] == ["used up"]
    assert any("may leave scale" in w for w in stopped.words())


def test_words_fit_the_case():
    """A mild fault, a feed that pH does not tell, a stopped base."""
    run, _ = dosed(2e-4)
    mild, stopped = full_stroke(run, "caustic soda", factor=1.5, flow_m3_d=2400.0)
    assert mild.words()[-1].startswith("stop the feed, hold the water back")
    assert "attacks pipes" in stopped.words()[-1]
    salt = full_stroke(dosed(1e-6)[0], "caustic soda", factor=1.0, flow_m3_d=2400.0)[0]
    assert salt.words()[-1].startswith("pH does not tell this fault")
    assert full_stroke(adjusted(soft(), ph(5.0)), "caustic soda", factor=2.0, flow_m3_d=1.0)[0].words() == (
        "pump of caustic soda stuck at full stroke: not known, the doses or the water were not found",)


def test_other_doses_are_held():
    """Partner and later steps go on as they were found."""
    run = run_train(soft(), [*[p.step for p in adjusted(soft(), ph(8.3), target("alkalinity", 50.0), products=(LIME, CO2)).passed],
                             dosing((CAUSTIC,), (1e-5,), name="after")])
    lime, gas = (d.mol_l for d in run.passed[0].outcome.doses)
    full = full_stroke(run, "hydrated lime", factor=3.0, flow_m3_d=24.0)[0]
    behind = soft().added(LIME.product.adds, 3.0 * lime).added(CO2.product.adds, gas)
    assert_allclose(full.ph_behind, behind.water().ph, rtol=0, atol=1e-9)
    assert_allclose(full.ph_final, behind.added(CAUSTIC.product.adds, 1e-5).water().ph, rtol=0, atol=1e-9)


def test_rows_do_not_see_each_other():
    """A row of many is as alone."""
    raw, _ = bare(np.array([3e-4, 6e-4]), np.array([6.3, 7.0]))
    many = full_stroke(adjusted(raw, ph(8.3)), "caustic soda", factor=[5.0, 9.0], flow_m3_d=[100.0, 200.0])[0]
    one = full_stroke(adjusted(raw.take(np.array([1])), ph(8.3)), "caustic soda", factor=9.0, flow_m3_d=200.0)[0]
    assert_allclose([many.ph_behind[1], many.volume_m3[1]], [one.ph_behind[0], one.volume_m3[0]], rtol=1e-12)


def test_what_is_refused():
    """Which pump, how much, how long."""
    run, _ = dosed(2e-4)
    with pytest.raises(InputError, match=r"no step doses 'lime'"):
        full_stroke(run, "lime", factor=2.0, flow_m3_d=1.0)
    with pytest.raises(InputError, match=r"needs either its most dose or its factor on the dose; none is given. Give one"):
        full_stroke(run, "caustic soda", flow_m3_d=1.0)
    with pytest.raises(InputError, match=r"both are given. Give one"):
        full_stroke(run, "caustic soda", factor=2.0, most_mol_l=1e-3, flow_m3_d=1.0)
    with pytest.raises(InputError, match=r"must give at least the wanted dose at full stroke; found 4 of 8 mg/L. Take a larger pump"):
        full_stroke(run, "caustic soda", factor=0.5, flow_m3_d=1.0)
    with pytest.raises(InputError, match=r"hours of a fault must be 0 or more; found -1"):
        full_stroke(run, "caustic soda", factor=2.0, flow_m3_d=1.0, hours=-1.0)
    twice = run_train(soft(), [dosing((CAUSTIC,), (1e-4,), name="first"), dosing((CAUSTIC,), (1e-4,), name="second")])
    with pytest.raises(InputError, match=r"'caustic soda' goes in at 'first', 'second'; step is not given. Name one"):
        full_stroke(twice, "caustic soda", factor=2.0, flow_m3_d=1.0)
    assert full_stroke(twice, "caustic soda", factor=2.0, flow_m3_d=1.0, step="second")[0].step == "second"
