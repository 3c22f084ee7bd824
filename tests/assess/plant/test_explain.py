"""Why targets cannot be met: the cause is true, and the remedy named really works."""

import re

import numpy as np
import pytest
from made_streams import IONS, MG_CACO3, soft, stocked, stream, target

from aquabuf.assess.plant.choose import cheapest
from aquabuf.assess.plant.explain import STRIPPING, missing_ions, why_not
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.targets import all_met

BOTH = [target("ph", 8.3), target("alkalinity", 60.0)]
CASES = {
    "caustic": (["caustic soda"], [target("ph", 6.5)]), "bicarbonate": (["sodium bicarbonate"], [target("ph", 8.8)]),
    "two alike": (["hydrated lime", "caustic soda"], BOTH), "lime with acid": (["hydrated lime", "sulfuric acid"], BOTH),
    "one for two": (["hydrated lime"], BOTH), "too much carbon": (["soda ash", "carbon dioxide"], [target("ph", 8.8), target("alkalinity", 30.0)]),
    "no calcium": (["caustic soda", "carbon dioxide"], [target("ph", 8.3), target("calcium", 30.0)]),
    "window": (["caustic soda"], [target("ph", 7.5, 8.5), target("alkalinity", 50.0, np.inf)])}


@pytest.mark.parametrize("case", CASES)
def test_the_remedy_works(case):
    """Every product named, added to the stock, makes it feasible with the amount that is stated; before it was not."""
    names, targets = CASES[case]
    stock = [stocked(n) for n in names]
    assert not cheapest(soft(), stock, targets).feasible[0]
    words = why_not(soft(), stock, targets)
    assert words.startswith(" with ".join(t.words for t in targets) + " cannot be met with " + " and ".join(names))
    remedies = re.findall(r"(?:: |or )([a-z][a-z0-9 %.-]*), ([0-9.e+-]+) mg/L of pure", words.split("What would reach it")[1])
    assert remedies
    for product, amount in remedies:
        extra = stocked(product)
        found = cheapest(soft(), [*stock, extra], targets)
        assert found.feasible[0], product
        assert all_met(found.stream, tuple(targets))[0]
        assert float(extra.mg_l_pure(found.mol_l[-1, 0])) == pytest.approx(float(amount), rel=0.006)
    amounts = [float(a) for _, a in remedies]
    assert amounts == sorted(amounts)


@pytest.mark.parametrize(("case", "cause"), [
    ("caustic", r"it would need [\d.]+ mg/L of caustic soda taken out, which nothing does; acid or carbon dioxide works the other way"),
    ("bicarbonate", r"of sodium bicarbonate taken out, which nothing does; acid takes out its alkalinity and aeration its carbon"),
    ("two alike", "they move these targets together, not apart"), ("lime with acid", "they move these targets together, not apart"),
    ("one for two", "2 targets need as many products that work apart"), ("too much carbon", r"of (soda ash|carbon dioxide) taken out")])
def test_the_cause(case, cause):
    """In chemistry."""
    names, targets = CASES[case]
    assert re.search(cause, why_not(soft(), [stocked(n) for n in names], targets))


def test_amount_to_take_out():
    """Alkalinity 10 mg/L with caustic alone: the 20.02 - 10 mg/L too much are 8.0 mg/L of NaOH by hand, 16.0 of a 50 % product."""
    words = why_not(soft(), [stocked("caustic soda 50 %", strength=0.5)], [target("alkalinity", 10.0)])
    wanted = (4e-4 - 10.0 / MG_CACO3) * 39.997e3 / 0.5
    assert f"it would need {wanted:.3g} mg/L of caustic soda 50 % taken out" in words
    assert "a base works the other way" in why_not(soft(), [stocked("sulfuric acid")], [target("alkalinity", 40.0)])


def test_stripping_is_offered_and_works():
    """Water with much CO2 and only acid in the store: blowing out the stated CO2 reaches the pH."""
    water = stream(2e-3, 2.8e-3, calcium=5e-4)
    words = why_not(water, [stocked("sulfuric acid")], [target("ph", 7.6)])
    amount = float(re.search(r"strip ([\d.]+) mg/L of CO2 first \(aerate\)", words)[1])
    stripped = water.added(STRIPPING.adds, amount / 44.009e3)
    assert float(stripped.water().ph[0]) == pytest.approx(7.6, abs=0.01)
    more = why_not(stream(2e-4, 2.02e-4, calcium=5e-4), [stocked("sulfuric acid")], [target("ph", 9.5)])
    assert "strip" not in more  # more than all the CO2 there is


def test_unknown_ions():
    """What must be measured, and for which target."""
    bare = stream(4e-4, 5e-4)
    assert missing_ions(bare, [target("ccpp", 3.0), target("hardness", 50.0)]) == ["calcium", "magnesium"]
    assert missing_ions(soft(), [target("ccpp", 3.0), target("hardness", 50.0)]) == []
    words = why_not(bare, [stocked("hydrated lime")], [target("ccpp", 3.0)])
    assert re.search(r"^calcium of the raw water is not given, without which precipitation potential 3\.00 mg/L as CaCO3 cannot be judged\. Measure it", words)
    assert "calcium and magnesium of the raw water are not given" in why_not(bare, [stocked("hydrated lime")], [target("hardness", 50.0)])


def test_water_that_is_not_known():
    """A row without alkalinity, or far too hot, is told apart from chemistry."""
    for broken in (stream(np.nan, 5e-4, **IONS), stream(4e-4, 5e-4, t_c=95.0, **IONS)):
        words = why_not(broken, [stocked("caustic soda")], [target("ph", 8.0)])
        assert re.match(r"the water before these doses cannot be worked out: .+\. Check its readings and the steps before\.$", words)


def test_nothing_reaches_it():
    """pH 12 at alkalinity 5 mg/L is no water."""
    words = why_not(soft(), [stocked("caustic soda")], [target("ph", 12.0), target("alkalinity", 5.0)])
    assert words.endswith("No single further product of the shipped table reaches it: widen a window, or drop a target.")


def test_full_store():
    """With as many products as can be handled none more is suggested."""
    names = ["hydrated lime", "caustic soda", "caustic potash", "quicklime", "magnesium hydroxide", "magnesium oxide"]
    stock = [Stocked(name=n, product=stocked(n).product, strength=1.0) for n in names]
    assert "No single further product" in why_not(soft(), stock, [target("ph", 6.0)])
