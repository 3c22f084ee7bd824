"""The step that doses: fixed doses, doses to targets, rows that cannot, and the words it leaves."""

import numpy as np
import pytest
from made_streams import random_streams, soft, stocked, stream, target
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.adjust import Adjust, Dose
from aquabuf.assess.plant.targets import all_met
from aquabuf.chem.products import products
from aquabuf.errors import AquabufError, InputError

LIME, CO2, CAUSTIC = stocked("hydrated lime", 0.2), stocked("carbon dioxide", 0.4), stocked("caustic soda", 0.9)


def adjust(stock, *wants, **options):
    """A step called final."""
    return Adjust(name="final", products=tuple(stock), targets=wants, **options)


def test_fixed_doses():
    """10 mg/L of a lime of 90 % and 5 mg/L CO2, one for all rows and one per row: alkalinity and carbon by hand."""
    lime = stocked("hydrated lime", strength=0.9)
    step = Dose(name="lime", products=(lime, CO2), mol_l=(float(lime.mol_l(10.0)), CO2.mol_l([5.0, 0.0])))
    out = step.run(soft(2))
    assert_allclose(out.stream.alkalinity_eq_l, 4e-4 + 2 * 10e-3 * 0.9 / 74.092, rtol=1e-5)
    assert_allclose(out.stream.carbon_mol_l, [5e-4 + 5e-3 / 44.009, 5e-4], rtol=1e-5)
    assert_allclose(out.doses[0].product.mg_l_product(out.doses[0].mol_l), [10.0, 10.0])
    assert step.kind == "dose"


def test_solids_of_a_fixed_dose():
    """30 mg/L FeCl3 make 0.659 mg Fe(OH)3 per mg (computed by IUPAC masses)."""
    iron = stocked("ferric chloride")
    out = Dose(name="floc", products=(iron,), mol_l=(iron.mol_l(30.0),)).run(soft())
    assert_allclose(out.stream.solids["Fe(OH)3"] * 106.866e3, 30.0 * 0.659, rtol=1e-3)


def test_exact_targets():
    """As many values as products: solved, nothing to report, targets met when the water is computed again."""
    wants = (target("ph", 8.3), target("alkalinity", 60.0))
    out = adjust((LIME, CO2), *wants).run(soft(2))
    assert all_met(out.stream.replaced(), wants).all()
    assert out.findings == ()
    assert [d.product.name for d in out.doses] == ["hydrated lime", "carbon dioxide"]


def test_cheapest_says_what_binds():
    """A note with the end that holds, by cost or, without every price, by mass."""
    wants = (target("ph", 7.5, 8.5), target("alkalinity", 40.0, 60.0))
    (note,) = adjust((LIME, CO2), *wants).run(soft()).findings
    assert note.severity == "note"
    assert note.words.startswith("least cost: held by ")
    assert "alkalinity 40.0 mg/L as CaCO3 (low end)" in note.words
    (note,) = adjust((stocked("hydrated lime"), CO2), *wants).run(soft()).findings
    assert note.words.startswith("least mass of product (give every product a price for least cost): held by ")


def test_rows_that_cannot():
    """They keep their water and have no dose; the finding marks them and explains the first; the others are met."""
    raw = stream([4e-4, 4e-4, np.nan], [5e-4, 3.8e-4, 5e-4], t_c=10.0, strength=1e-3)
    out = adjust((CAUSTIC,), target("ph", 8.3)).run(raw)
    assert_array_equal(np.isnan(out.doses[0].mol_l), [False, True, True])
    assert_array_equal(out.stream.alkalinity_eq_l[1:], raw.alkalinity_eq_l[1:])
    assert_allclose(out.stream.water().ph[0], 8.3, rtol=0, atol=1e-6)
    (stop,) = out.findings
    assert stop.severity == "stop"
    assert_array_equal(stop.where, [False, True, True])
    assert stop.words.startswith("pH 8.30 cannot be met with caustic soda: it would need")
    assert stop.rule == "pH 8.30"
    assert adjust((CAUSTIC,), target("ph", 8.3), explain=False).run(raw).findings == ()


def test_held_gives_the_doses_again():
    """Whatever water comes, under the same name and kind."""
    step = adjust((LIME, CO2), target("ph", 8.3), target("alkalinity", 60.0))
    out = step.run(soft())
    held = step.held(out.doses)
    assert (held.name, held.kind) == ("final", "adjust")
    again = held.run(stream(1e-3, 1e-3))
    assert_allclose([d.mol_l for d in again.doses], [d.mol_l for d in out.doses])
    assert_allclose(again.stream.alkalinity_eq_l, 1e-3 + 2 * out.doses[0].mol_l)


def test_air_of_the_step():
    """pH at air counts the air that the step is given."""
    one, two = (adjust((CAUSTIC,), target("ph_at_air", 8.3), air_co2_ppm=ppm).run(soft()) for ppm in (400.0, 800.0))
    assert_allclose(one.stream.water().at_air(400.0).ph, 8.3, rtol=0, atol=1e-6)
    assert two.doses[0].mol_l[0] > one.doses[0].mol_l[0]
    window = adjust((CAUSTIC,), target("ph_at_air", 8.3, 8.6), air_co2_ppm=800.0).run(soft())
    assert_allclose(window.doses[0].mol_l, two.doses[0].mol_l, rtol=1e-6)


def test_two_values_that_bend():
    """Said, not called infeasible."""
    with pytest.raises(InputError, match="only one of saturation index, precipitation potential and buffer intensity"):
        adjust((LIME, CO2), target("si_calcite", 0.1), target("ccpp", 3.0)).run(soft())


@pytest.mark.parametrize("seed", range(3))
def test_fuzz(seed):
    """Random waters, products and targets: no error but our own, no warning, no dose below zero, and feasible means met."""
    rng = np.random.default_rng(seed)
    wanted = {"ph": (5, 10), "ph_at_air": (6.5, 9), "alkalinity": (0, 200), "dic": (0.1, 4), "calcium": (0, 100), "hardness": (0, 300),
              "larson_ratio": (0.1, 3), "chloride_sulfate_ratio": (0.1, 4), "si_calcite": (-2, 1), "buffer_intensity": (0.05, 0.8), "fluoride": (0, 2)}
    stock = [p for p in products().values() if "basicity" not in p.groups]
    feasible = 0
    for turn in range(40):
        raw = random_streams(3, seed=100 * seed + turn)
        names = [stock[k].name for k in rng.choice(len(stock), int(rng.integers(1, 3)), replace=False)]
        wants = []
        for name in rng.choice(list(wanted), int(rng.integers(1, 3)), replace=False):
            low, high = wanted[name]
            start = rng.uniform(low, high)
            wants.append(target(str(name), start, start if rng.random() < 0.4 else start + rng.uniform(0.0, 0.4) * (high - low)))
        try:
            out = adjust([stocked(n, 0.5) for n in names], *wants, explain=turn % 8 == 0).run(raw)
        except AquabufError:
            continue
        x = np.array([d.mol_l for d in out.doses])
        good = np.isfinite(x).all(axis=0)
        feasible += good.sum()
        assert (x[:, good] >= 0.0).all()
        assert all_met(out.stream.replaced(), tuple(wants))[good].all(), (names, [w.words for w in wants])
        assert_array_equal(out.stream.alkalinity_eq_l[~good], raw.alkalinity_eq_l[~good])
    assert feasible > 5
