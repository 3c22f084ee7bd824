"""The cheapest mix against linear programming, a fine grid of doses and hand figures."""

import numpy as np
import pytest
from made_streams import MG_CACO3, random_streams, soft, stocked, stream, target
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import linprog

from aquabuf.assess.plant.choose import MOST_PRODUCTS, MOST_TARGETS, cheapest, cost_per_mol
from aquabuf.assess.plant.dose import dosed
from aquabuf.assess.plant.targets import all_met
from aquabuf.errors import InputError

#            eq, mol C, mol Ca per mole, g/mol: from the formulas
LINEAR = {"hydrated lime": (2, 0, 1, 74.092), "caustic soda": (1, 0, 0, 39.997), "soda ash": (2, 1, 0, 105.988),
          "carbon dioxide": (0, 1, 0, 44.009), "sulfuric acid": (-2, 0, 0, 98.072), "calcium chloride": (0, 0, 1, 110.98)}


def on_grid(water, stock, targets, most=1.5e-3, points=201):
    """Least cost per liter over a square grid of two doses, inf if none meets the targets."""
    axis = np.linspace(0.0, most, points)
    x = np.array([v.ravel() for v in np.meshgrid(axis, axis)])
    after = dosed(water.take(np.zeros(x.shape[1], dtype=int)), [s.product for s in stock], x)
    return float(np.where(all_met(after, tuple(targets)), cost_per_mol(stock)[0] @ x, np.inf).min())


@pytest.mark.parametrize("seed", range(8))
def test_linear_case_against_linear_programming(seed):
    """Windows of alkalinity, carbon and calcium: scipy's linprog on hand stoichiometry gives the same cost, or none too."""
    rng = np.random.default_rng(seed)
    names = list(rng.choice(list(LINEAR)[:5], 3, replace=False))
    low = np.array([rng.uniform(30, 90), rng.uniform(0.5, 1.5), rng.uniform(10, 25)])
    high = low * rng.uniform(1.05, 1.6, 3)
    prices = rng.uniform(0.1, 1.0, 3)
    found = cheapest(soft(), [stocked(n, p) for n, p in zip(names, prices, strict=True)],
                     [target(q, *ends) for q, *ends in zip(("alkalinity", "dic", "calcium"), low, high, strict=True)])
    adds = np.array([LINEAR[n][:3] for n in names]).T
    raw, unit = np.array([4e-4, 5e-4, 3e-4]), np.array([MG_CACO3, 1e3, 40.078e3])
    cost = [p * LINEAR[n][3] * 1e-3 for n, p in zip(names, prices, strict=True)]
    best = linprog(np.array(cost) * 1e3, A_ub=np.concatenate([adds, -adds]),  # doses in mmol/L
                   b_ub=1e3 * np.concatenate([high / unit - raw, raw - low / unit]))
    assert bool(found.feasible[0]) == (best.status == 0)
    if best.status == 0:
        assert_allclose(found.cost[0], best.fun * 1e-6, rtol=1e-6)
        assert (found.mol_l >= 0.0).all()


def test_both_outcomes_are_in_the_linear_cases():
    """Among the seeds above are feasible and infeasible ones."""
    feasible = []
    for seed in range(8):
        rng = np.random.default_rng(seed)
        names = list(rng.choice(list(LINEAR)[:5], 3, replace=False))
        low = np.array([rng.uniform(30, 90), rng.uniform(0.5, 1.5), rng.uniform(10, 25)])
        wants = [target(q, *ends) for q, *ends in zip(("alkalinity", "dic", "calcium"), low, low * 1.05, strict=True)]
        feasible.append(bool(cheapest(soft(), [stocked(n) for n in names], wants).feasible[0]))
    wide = cheapest(soft(), [stocked(n) for n in LINEAR if n != "sulfuric acid"], wants)
    assert not all(feasible)
    assert wide.feasible.all()


@pytest.mark.parametrize(("names", "prices", "wants"), [
    (("hydrated lime", "carbon dioxide"), (0.2, 0.4), [("ph", 7.8, 8.6), ("alkalinity", 40.0, 60.0)]),
    (("caustic soda", "sodium bicarbonate"), (0.9, 0.3), [("ph", 8.0, 8.5), ("alkalinity", 30.0, np.inf)]),
    (("hydrated lime", "carbon dioxide"), (0.2, 0.4), [("ph", 7.8, 8.8), ("si_calcite", -0.3, 0.3)]),
    (("soda ash", "hydrated lime"), (0.5, 0.2), [("ccpp", -4.0, 2.0), ("ph", -np.inf, 9.4)]),
    (("hydrated lime", "carbon dioxide"), (0.2, 0.4), [("si_calcite", 0.1, 0.4), ("ccpp", 2.0, 6.0)])])
def test_curved_case_against_a_grid(names, prices, wants):
    """Feasible, and never dearer than the best of 40,000 pairs of doses."""
    stock = [stocked(n, p) for n, p in zip(names, prices, strict=True)]
    targets = [target(*w) for w in wants]
    found, best = cheapest(soft(), stock, targets), on_grid(soft(), stock, targets)
    assert found.feasible[0]
    assert all_met(found.stream, tuple(targets))[0]
    assert found.cost[0] <= best * (1.0 + 1e-9)
    assert np.isfinite(best)


def test_two_windows_that_bend():
    """Less potential at an index than lime alone gives takes carbon dioxide beside it, as the grid of doses shows."""
    water = stream(4e-4, 4.5e-4, t_c=20.0, strength=2e-3, calcium=2e-4)
    stock = [stocked("hydrated lime", 0.2), stocked("carbon dioxide", 0.4)]
    for si, ccpp in (((0.5, 0.6), (4.5, 6.5)), ((0.6, 0.7), (6.0, 8.9))):
        targets = [target("si_calcite", *si), target("ccpp", *ccpp)]
        assert np.isfinite(on_grid(water, stock, targets, most=6e-4, points=241))
        assert cheapest(water, stock, targets).feasible[0]
        assert not cheapest(water, stock[:1], targets).feasible[0]


def test_the_binding_end():
    """What holds the doses up: the low end of alkalinity with bicarbonate dear; the pH with lime dear; nothing if all is met."""
    lime = stocked("hydrated lime", 0.2)
    found = cheapest(soft(), [lime], [target("alkalinity", 40.0, 60.0)])
    assert list(found.binding) == ["alkalinity 40.0 mg/L as CaCO3 (low end)"]
    assert_allclose(found.mol_l, (40.0 / MG_CACO3 - 4e-4) / 2, rtol=1e-9)
    found = cheapest(soft(), [stocked("sulfuric acid")], [target("alkalinity", 5.0, 10.0)])
    assert list(found.binding) == ["alkalinity 10.0 mg/L as CaCO3 (high end)"]
    found = cheapest(soft(), [lime, stocked("carbon dioxide")], [target("ph", 8.2), target("alkalinity", 40.0, 60.0)])
    assert list(found.binding) == ["pH 8.20 and alkalinity 40.0 mg/L as CaCO3 (low end)"]
    found = cheapest(soft(), [lime], [target("alkalinity", 10.0, 60.0)])
    assert list(found.binding) == ["nothing to add"]
    assert_array_equal(found.mol_l, 0.0)
    assert_array_equal(found.cost, 0.0)


def test_price_decides():
    """Equal equivalents of lime and caustic: the cheaper per equivalent alone, by hand 0.5 x 74.092 and 39.997 g."""
    for lime, caustic, used in ((0.3, 0.2, 1), (0.3, 0.3, 0)):
        stock = [stocked("hydrated lime", lime), stocked("caustic soda", caustic)]
        found = cheapest(soft(), stock, [target("alkalinity", 40.0, 60.0)])
        assert found.mol_l[used, 0] > 0.0
        assert found.mol_l[1 - used, 0] == 0.0
        per_eq = (lime * 74.092 / 2, caustic * 39.997)[used] * 1e-3
        assert_allclose(found.cost, per_eq * (40.0 / MG_CACO3 - 4e-4), rtol=1e-4)


def test_cost_per_mole():
    """Kilograms of product as delivered, times the price where every product has one."""
    stock = [stocked("hydrated lime", 0.25, strength=0.9), stocked("caustic soda 50 %", 0.4, strength=0.5)]
    cost, by = cost_per_mol(stock)
    assert by == "price"
    assert_allclose(cost, [0.25 * 0.074092 / 0.9, 0.4 * 0.039997 / 0.5], rtol=1e-4)
    cost, by = cost_per_mol([stock[0], stocked("caustic soda 50 %", strength=0.5)])
    assert by == "mass of product"
    assert_allclose(cost, [0.074092 / 0.9, 0.039997 / 0.5], rtol=1e-4)


def test_rows_alone_and_together():
    """Each row as if alone; rows that cannot, and a broken one, are nan and leave the others as they are."""
    rows = random_streams(10, seed=3)
    alkalinity = rows.alkalinity_eq_l.copy()
    alkalinity[4] = np.nan
    rows = rows.replaced(alkalinity_eq_l=alkalinity)
    stock = [stocked("hydrated lime", 0.2), stocked("carbon dioxide", 0.3)]
    targets = [target("ph", 7.5, 8.5), target("alkalinity", 60.0, np.inf)]
    whole = cheapest(rows, stock, targets)
    assert not whole.feasible[4]
    assert whole.feasible.sum() > 2
    for row in range(rows.rows):
        alone = cheapest(rows.take(np.array([row])), stock, targets)
        assert_allclose(alone.mol_l[:, 0], whole.mol_l[:, row], rtol=1e-9, atol=1e-14)
        assert alone.binding[0] == whole.binding[row]


def test_numbers_that_are_too_many():
    """Rule, number and remedy; and two fixed values that bend."""
    lime, want = stocked("hydrated lime"), target("ph", 8.0)
    with pytest.raises(InputError, match=rf"takes 1 to {MOST_PRODUCTS} products; found {MOST_PRODUCTS + 1}\. Split it"):
        cheapest(soft(), [lime] * (MOST_PRODUCTS + 1), [want])
    with pytest.raises(InputError, match=rf"takes 1 to {MOST_TARGETS} targets; found {MOST_TARGETS + 1}\. Split it"):
        cheapest(soft(), [lime], [want] * (MOST_TARGETS + 1))
    with pytest.raises(InputError, match="takes 1 to 6 products; found 0"):
        cheapest(soft(), [], [want])
    with pytest.raises(InputError, match=r"only one of .* found saturation index and precipitation potential\. Give windows instead"):
        cheapest(soft(), [lime], [target("si_calcite", 0.1), target("ccpp", 3.0)])
