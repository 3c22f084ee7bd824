"""pH read from tables against the solver, against a direct root, and its behavior at edges and in rows."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.chem.acids import acid_table
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.conditions import conditions
from aquabuf.engine.readout import GRID_PH, MetalTable, Readout
from aquabuf.engine.solve import solve_h
from aquabuf.engine.state import Dissolved, families_of
from aquabuf.errors import InputError

KW = 1e-14
ACIDS = ("phosphate", "acetate", "citrate", "ammonium", "sulfate")
NO_CARRIER = np.zeros((0, GRID_PH.size))


def monoprotic(pk):
    """Base that one mole of a weak acid has taken up, counted from the acid itself: the definition of its constant."""
    return 1.0 / (1.0 + 10.0 ** (pk - GRID_PH))


def bare_ph(base):
    """pH of strong acid or base in water, Kw = 1e-14: the positive root of h^2 + base h - Kw."""
    root = np.sqrt(base**2 + 4.0 * KW)
    h = np.where(base > 0.0, 2.0 * KW / (np.abs(base) + root), 0.5 * (np.abs(base) + root))
    return -np.log10(h)


@pytest.fixture(scope="module")
def waters():
    """Readout of carbonate and five acids, random waters of both signs, and their pH by the solver of the engine."""
    rng = np.random.default_rng(3)
    n = 3000
    c = conditions(np.full(n, 18.0), 0.0, np.full(n, 0.02))
    size = 10.0 ** rng.uniform(-7, -0.7, n)
    base = np.where(rng.random(n) < 0.5, -size, size)
    totals = 10.0 ** rng.uniform(-7, -1, (1 + len(ACIDS), n)) * (rng.random((1 + len(ACIDS), n)) < 0.7)
    dissolved = tuple(Dissolved(acid_table()[name], t) for name, t in zip(ACIDS, totals[1:], strict=True))
    system = System(base, c.c_h, c.c_oh, c.k1, c.k2, dic=totals[0], families=families_of(c, dissolved))
    result = solve_h(system)

    one = System(np.zeros(GRID_PH.size), *(np.full(GRID_PH.size, float(v[0])) for v in (c.c_h, c.c_oh, c.k1, c.k2)),
                 dic=np.zeros(GRID_PH.size))
    h = 10.0**-GRID_PH
    water = alkalinity_at(one, h)
    held = [_held_by_carbon(one, h) - water]
    grid = conditions(np.full(GRID_PH.size, 18.0), 0.0, np.full(GRID_PH.size, 0.02))
    for name in ACIDS:
        family = families_of(grid, (Dissolved(acid_table()[name], np.ones(GRID_PH.size)),))
        with_one = System(one.alkalinity, one.c_h, one.c_oh, one.k1, one.k2, dic=one.dic, families=family)
        held.append(alkalinity_at(with_one, h) - water)
    readout = Readout(float(c.c_h[0]), float(c.c_oh[0]), np.array(held))
    solved = result.status == 0
    assert np.count_nonzero(solved) > 2900
    return readout, base[solved], totals[:, solved], -np.log10(result.h[solved]) * np.ones(1)


def _held_by_carbon(one, h):
    return alkalinity_at(System(one.alkalinity, one.c_h, one.c_oh, one.k1, one.k2, dic=np.ones(h.size)), h)


def test_ph_agrees_with_the_solver_from_a_cold_start(waters):
    """Carbonate and five acids, 1e-7 to 0.2 eq/L of either sign."""
    readout, base, totals, ph = waters
    assert_allclose(readout.ph(base, totals), ph, rtol=0, atol=1e-4)


@pytest.mark.parametrize("off", [-8.0, -0.3, -0.003, 0.003, 0.3, 8.0])
def test_ph_agrees_with_the_solver_from_a_warm_start(waters, off):
    """The start must not matter."""
    readout, base, totals, ph = waters
    assert_allclose(readout.ph(base, totals, start=ph + off), ph, rtol=0, atol=1e-4)


def test_follower_keeps_up_with_waters_that_change(waters):
    """Base wanders by up to a twentieth of itself per call; the pH stays that of the solver's tables."""
    readout, base, totals, ph = waters
    follower = readout.follower(base.shape, ph)
    rng = np.random.default_rng(0)
    now = base.copy()
    for _ in range(20):
        now = now * rng.uniform(0.95, 1.05, now.size)
        found = follower.follow(now, totals).copy()
        assert_allclose(found, readout.ph(now, totals), rtol=0, atol=2e-4)


def test_follower_survives_a_leap():
    """From strong acid to strong base in one call, with and without buffer; closed form without."""
    readout = Readout(1.0, KW, monoprotic(7.0)[None])
    base = np.array([-0.1, 0.0, 0.1])
    follower = readout.follower(base.shape, 7.0)
    for turn in (1.0, -1.0, 1e-6):
        found = follower.follow(turn * base, np.zeros((1, 3)))
        assert_allclose(found, bare_ph(turn * base), rtol=0, atol=2e-4)


def test_follower_holds_the_edge_where_nothing_fits():
    """Base that would need a pH outside -1 to 15 leaves the pH at the edge."""
    follower = Readout(1.0, KW, NO_CARRIER).follower((2,), 7.0)
    assert_allclose(follower.follow(np.array([-50.0, 50.0]), np.zeros((0, 2))), [-1.0, 15.0], rtol=0, atol=1e-6)


def test_bare_water_is_the_closed_form():
    """Strong acid and base alone: root of h^2 + base h - Kw."""
    base = np.concatenate([-(10.0 ** np.linspace(-12, 0.5, 60)), [0.0], 10.0 ** np.linspace(-12, 0.5, 60)])
    found = Readout(1.0, KW, NO_CARRIER).ph(base, np.zeros((0, base.size)))
    assert_allclose(found, bare_ph(base), rtol=0, atol=2e-6)


def iron_and_zinc():
    """Two metals with solubility as plain powers of [H+]; the constants only need to be of the usual size."""
    h = 10.0**-GRID_PH
    return (MetalTable("iron(III)", 3, 0, 10.0**3.2 * h**3, np.zeros(GRID_PH.size), np.array([0.002, 0.0])),
            MetalTable("zinc", 2, 3, 10.0**11.0 * h**2, 10.0**-17.0 / h, np.array([0.0, 0.01])))


def metal_base(x, iron, zinc, acid):
    """The balance of the module written again with exact functions: water, one acid of pK 5, two metals."""
    h = 10.0**-x
    total = KW / h - h + acid / (1.0 + 10.0 ** (5.0 - x))
    total += 3.0 * max(iron - 10.0**3.2 * h**3, 0.0)
    free, bound = 10.0**11.0 * h**2, 10.0**-17.0 / h
    dissolved = min(zinc, free + bound)
    return total + 2.0 * (zinc - dissolved) + 3.0 * dissolved * bound / (free + bound)


def metal_waters(n=400):
    """Readout with two metals, and random mixtures; every seventh has none."""
    rng = np.random.default_rng(8)
    amounts = np.array([rng.uniform(0, 5, n), rng.uniform(0, 5, n)])
    amounts[:, ::7] = 0.0
    base = rng.uniform(-0.05, 0.15, n) * 10.0 ** rng.uniform(-4, 0, n)
    held = np.array([monoprotic(5.0) * 0.003, np.zeros(GRID_PH.size)])
    return Readout(1.0, KW, held, iron_and_zinc()), base, amounts


@pytest.mark.parametrize("start", [None, -1.0, 3.0, 9.0, 15.0])
def test_metals_agree_with_a_direct_root(start):
    """scipy's brentq on the balance written in this file; onset of each hydroxide among the waters."""
    readout, base, amounts = metal_waters()
    expected = [brentq(lambda x, b=b, f=f, z=z: metal_base(x, 0.002 * f, 0.01 * z, 0.003 * f) - b, -1, 15, xtol=1e-12)
                for b, f, z in zip(base, *amounts, strict=True)]
    assert_allclose(readout.ph(base, amounts, start=start), expected, rtol=0, atol=1e-4)


def test_follower_with_metals_agrees_with_a_direct_root():
    """Titration of metals step by step through both onsets."""
    readout, _, _ = metal_waters()
    follower = readout.follower((1,), 2.0)
    for base in np.linspace(-0.02, 0.06, 200):
        found = follower.follow(np.array([base]), np.array([[2.0], [1.0]]))
        direct = brentq(lambda x, b=base: metal_base(x, 0.004, 0.01, 0.006) - b, -1, 15, xtol=1e-12)
        assert_allclose(found, direct, rtol=0, atol=1e-4)


def test_solids_are_what_exceeds_solubility():
    """At pH 7 iron is over its solubility 10^3.2 h^3 and zinc, 10^11 h^2 + 10^-17/h, is not."""
    readout, _, _ = metal_waters(1)
    solids = readout.solids_at(7.0, [1.0, 0.01])
    assert_allclose(solids["iron(III)"], 0.002 - 10.0**-17.8, rtol=1e-9)
    assert_array_equal(solids["zinc"], 0.0)


def test_base_and_buffer_at_a_ph_are_the_closed_forms():
    """One weak acid: w + C/(1 + 10^(pK - pH)) and 2.303 (h + OH + C K h/(K + h)^2) (Van Slyke 1922)."""
    readout = Readout(1.0, KW, monoprotic(6.5)[None])
    ph, total = np.array([3.0, 6.5, 7.001, 11.0]), 0.02
    h, k = 10.0**-ph, 10.0**-6.5
    assert_allclose(readout.base_at(ph, [total]), KW / h - h + total * k / (k + h), rtol=2e-5)
    beta = np.log(10.0) * (h + KW / h + total * k * h / (k + h) ** 2)
    assert_allclose(readout.buffer_at(ph, [total]), beta, rtol=5e-3)


def test_a_row_does_not_see_the_others(waters):
    """The same bits alone, among others, and beside rows that cannot be solved."""
    readout, base, totals, _ = waters
    together = readout.ph(base[:40], totals[:, :40])
    spoiled_base = np.concatenate([base[:40], [np.nan, 30.0, -1e-3]])
    spoiled = readout.ph(spoiled_base, np.concatenate([totals[:, :40], np.full((6, 3), np.nan)], axis=1))
    alone = [readout.ph(base[i], totals[:, i]) for i in range(40)]
    assert_array_equal(together, alone)
    assert_array_equal(together, spoiled[:40])
    assert_array_equal(spoiled[40:], np.nan)


def test_what_cannot_be_is_nan():
    """Not finite, or beyond pH -1 and 15 (10 mol/L of strong acid or base in ideal water)."""
    readout = Readout(1.0, KW, monoprotic(7.0)[None])
    found = readout.ph([np.nan, np.inf, 10.01, -10.01, 9.99, 0.5], [[0.0, 0.0, 0.0, 0.0, 0.0, np.nan]])
    assert_array_equal(np.isnan(found), [True, True, True, True, False, True])
    assert_array_equal(np.isnan(readout.base_at([-1.01, -1.0, 15.0, 15.01], [1.0])), [True, False, False, True])


def test_shapes_broadcast():
    """Base (4, 1), amounts (J, 3), start scalar: pH (4, 3)."""
    readout = Readout(1.0, KW, np.array([monoprotic(5.0), monoprotic(8.0)]))
    base, amounts = np.linspace(-0.01, 0.02, 4)[:, None], np.array([[0.0, 0.01, 0.02], [0.01, 0.0, 0.0]])
    found = readout.ph(base, amounts, start=6.0)
    assert found.shape == (4, 3)
    assert_allclose(readout.base_at(found, amounts), np.broadcast_to(base, (4, 3)), rtol=0, atol=1e-6)
    assert readout.ph(0.01, [0.0, 0.02]).shape == ()


@pytest.mark.parametrize(("held", "message"), [
    (np.zeros((1, 10)), r"one table of 4001 values per carrier; found shape \(1, 10\). Work it out on GRID_PH"),
    (np.stack([monoprotic(7.0), -monoprotic(7.0)]), "must rise with pH; carrier 2 falls at pH .* Correct its curve"),
])
def test_tables_that_cannot_be_are_refused(held, message):
    """Wrong grid, and a curve that falls."""
    with pytest.raises(InputError, match=message):
        Readout(1.0, KW, held)


def test_amounts_without_an_axis_of_carriers_are_refused():
    """One row per carrier."""
    readout = Readout(1.0, KW, np.stack([monoprotic(5.0), monoprotic(8.0)]))
    with pytest.raises(InputError, match=r"one row per carrier \(2\); found shape \(3,\). Put carriers on the first axis"):
        readout.ph(0.0, np.zeros(3))
