"""Streams: stoichiometry worked by hand, conservation through additions and mixing, and what readings become."""

import carbonate_reference as reference
import mpmath as mp
import numpy as np
import pytest
from made_streams import IONS, random_streams, soft, stream
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.stream import ALKALINITY, CARBON, TOTALS, mixed, stream_of, strength_per_mol
from aquabuf.chem.products import find_product, products
from aquabuf.errors import InputError

# Half the sum of charge squared of what a mole brings, bicarbonate making up for the charge left: by hand
STRENGTH = {
    "hydrated lime": (4 + 2) / 2,          # Ca++ and 2 HCO3-
    "caustic soda": (1 + 1) / 2,           # Na+ and HCO3-
    "soda ash": (2 + 2) / 2,               # 2 Na+ and 2 HCO3-
    "sodium bicarbonate": (1 + 1) / 2,
    "carbon dioxide": 0.0,
    "sulfuric acid": (4 - 2) / 2,          # SO4-- in place of 2 HCO3-
    "hydrochloric acid": (1 - 1) / 2,      # Cl- in place of HCO3-
    "alum 14-water": (3 * 4 - 6) / 2,      # 3 SO4-- in place of 6 HCO3-
    "ferric chloride": (3 * 1 - 3) / 2,
    "limestone": (4 + 2) / 2,
    "dolomite": (4 + 4 + 4) / 2,           # Ca++, Mg++ and 4 HCO3-
}


@pytest.mark.parametrize("name", STRENGTH)
def test_ionic_strength_of_products(name):
    """By hand, per mole; and through `added` in proportion to the dose."""
    adds = find_product(name).adds
    assert_allclose(strength_per_mol(adds), STRENGTH[name], rtol=1e-14)
    after = stream(strength=5e-3, **IONS).added(adds, 2e-4)
    assert_allclose(after.ionic_strength_mol_l, 5e-3 + 2e-4 * STRENGTH[name], rtol=1e-14)


def test_ionic_strength_is_never_below_zero():
    """More taken out than the water held."""
    assert_array_equal(stream(strength=1e-4, **IONS).added({"calcium": 1.0, ALKALINITY: 2.0}, -1e-3).ionic_strength_mol_l, 0.0)


def test_alum_of_the_check_case():
    """40 mg/L alum of 14 waters on alkalinity 60 mg/L, pH 7.5, 15 °C, I 0.003: 39.8 mg/L and pH 6.60 (computed apart by a
    quartic; factor 0.5052 per mg by IUPAC masses)."""
    alkalinity = 60.0 / 50043.0
    carbon = float(reference.carbon_of(7.5, alkalinity, 15.0, 0.003))
    after = stream(alkalinity, carbon, strength=0.003).added(find_product("alum 14-water").adds, 40e-3 / 594.34)
    assert_allclose(after.alkalinity_eq_l * 50043.0, 39.8, rtol=0, atol=0.1)
    assert_allclose(after.alkalinity_eq_l * 50043.0, 60.0 - 40.0 * 0.5052, rtol=0, atol=0.002)
    assert_allclose(after.water().ph, 6.60, rtol=0, atol=0.03)


@pytest.mark.parametrize("name", [n for n, p in products().items() if "basicity" not in p.groups])
def test_additions_conserve(name):
    """What a product brings is in the water after it, and nothing else has moved; what was unknown stays unknown."""
    product, x = find_product(name), np.array([1e-4, 3e-4, -5e-5])
    before = random_streams(3, seed=5)
    after = before.added(product.adds, x, product.solids)
    assert_allclose(after.alkalinity_eq_l - before.alkalinity_eq_l, product.adds[ALKALINITY] * x, rtol=0, atol=1e-16)
    assert_allclose(after.carbon_mol_l - before.carbon_mol_l, product.adds[CARBON] * x, rtol=0, atol=1e-16)
    for total in TOTALS:
        assert_allclose(after.total(total), before.total(total) + product.adds.get(total, 0.0) * x, rtol=0, atol=1e-16)
    assert {s: list(v) for s, v in after.solids.items()} == {s: list(n * x) for s, n in product.solids.items()}
    assert_array_equal(after.t_c, before.t_c)


def test_solids_add_up():
    """40 then 20 mg/L alum of 14 waters make 0.2625 mg Al(OH)3 per mg (computed by IUPAC masses); the raw stream is as before."""
    alum, raw = find_product("alum 14-water"), soft()
    after = raw.added(alum.adds, 40e-3 / 594.34, alum.solids).added(alum.adds, 20e-3 / 594.34, alum.solids)
    assert_allclose(after.solids["Al(OH)3"] * 78.003e3, 60.0 * 0.2625, rtol=2e-4)
    assert not raw.solids
    assert after.solids["Al(OH)3"].shape == (1,)


def test_the_water_is_solved_anew_after_a_change():
    """A changed stream does not keep the solution of the one before; the same stream is solved once."""
    raw = soft()
    assert raw.water() is raw.water()
    assert raw.added({ALKALINITY: 1.0}, 1e-4).water().ph > raw.water().ph + 0.1
    assert raw.replaced(t_c=np.array([30.0])).water().t_c == 30.0


def test_unknown_totals_count_as_none_in_the_balance():
    """The pH with totals not known is that with none; saturation stays unknown without calcium."""
    unknown = stream(1e-3, 1e-3, **dict.fromkeys(TOTALS, np.nan))
    none = stream(1e-3, 1e-3, **dict.fromkeys(TOTALS, 0.0))
    assert_array_equal(unknown.water().ph, none.water().ph)
    assert_array_equal(stream(1e-3, 1e-3).water().ph, none.water().ph)
    assert np.isnan(unknown.water().saturation_index()).all()
    assert np.isnan(stream(1e-3, 1e-3).total("calcium")).all()


def test_ph_against_high_precision():
    """pH of random carbonate waters against the reference in 40 digits."""
    rng = np.random.default_rng(3)
    alkalinity, carbon = rng.uniform(-5e-4, 5e-3, 12), 10.0 ** rng.uniform(-4.0, -2.3, 12)
    t_c, strength = rng.uniform(0.0, 40.0, 12), 10.0 ** rng.uniform(-4.0, -1.5, 12)
    ph = stream(alkalinity, carbon, t_c=t_c, strength=strength).water().ph
    with mp.workdps(reference.DIGITS):
        expected = [float(reference.ph_of(*row)) for row in zip(alkalinity, carbon, t_c, strength, strict=True)]
    assert_allclose(ph, expected, rtol=0, atol=1e-11)


def test_rows_alone_and_together():
    """A row taken out of a stream is the row itself; a bad row does not disturb the others."""
    whole = random_streams(40, seed=8)
    ph = whole.water().ph
    for row in (0, 7, 39):
        assert_array_equal(whole.take(np.array([row])).water().ph, ph[[row]])
    alkalinity = whole.alkalinity_eq_l.copy()
    alkalinity[3] = np.nan
    broken = whole.replaced(alkalinity_eq_l=alkalinity).water().ph
    assert np.isnan(broken[3])
    assert_array_equal(np.delete(broken, 3), np.delete(ph, 3))


def test_repeated_rows():
    """Each row as often as asked, one after the other, with its solids."""
    doubled = stream([1e-3, 2e-3], 1e-3, calcium=[1e-4, 2e-4]).added({}, 1e-5, {"Al(OH)3": 2.0}).repeated(2)
    assert_array_equal(doubled.alkalinity_eq_l, [1e-3, 1e-3, 2e-3, 2e-3])
    assert_array_equal(doubled.total("calcium"), [1e-4, 1e-4, 2e-4, 2e-4])
    assert_allclose(doubled.solids["Al(OH)3"], 2e-5)


# ------------------------------------------------------------------ mixing


def test_mixing_conserves():
    """Alkalinity, carbon, every total, ionic strength and solids by volume; never the pH."""
    one = random_streams(6, seed=1).added({}, 3e-5, {"Fe(OH)3": 1.0})
    two, v = random_streams(6, seed=2), np.array([0.5, 1.0, 2.0, 3.0, 5.0, 8.0])
    mix = mixed([one, two], [v, 2.0])

    def share(a, b):
        return (v * a + 2.0 * b) / (v + 2.0)

    assert_allclose(mix.alkalinity_eq_l, share(one.alkalinity_eq_l, two.alkalinity_eq_l), rtol=1e-13)
    assert_allclose(mix.carbon_mol_l, share(one.carbon_mol_l, two.carbon_mol_l), rtol=1e-13)
    assert_allclose(mix.ionic_strength_mol_l, share(one.ionic_strength_mol_l, two.ionic_strength_mol_l), rtol=1e-13)
    for name in TOTALS:
        assert_allclose(mix.total(name), share(one.total(name), two.total(name)), rtol=1e-13)
    assert_allclose(mix.solids["Fe(OH)3"], v * 3e-5 / (v + 2.0), rtol=1e-13)
    assert_allclose(mix.t_c, share(one.t_c, two.t_c), rtol=0, atol=0.06)  # heat by mass; densities differ below 1 %


def test_mix_of_two_buffers_is_no_average():
    """Equal parts of pH 6 and pH 10 with one alkalinity: pH of the mean carbon by the reference, far from 8."""
    low, high = (float(reference.carbon_of(ph, 1e-3, 15.0, 3e-3)) for ph in (6.0, 10.0))
    mix = mixed([stream(1e-3, low), stream(1e-3, high)], [1.0, 1.0])
    assert_allclose(mix.water().ph, float(reference.ph_of(1e-3, (low + high) / 2.0, 15.0, 3e-3)), rtol=0, atol=1e-9)
    assert abs(float(mix.water().ph[0]) - 8.0) > 1.0


def test_a_stream_mixed_with_none_of_another_is_itself():
    """No volume of a water whose ions are not known leaves the other known; some volume does not."""
    one, unknown = soft(2), stream([1e-3, 1e-3], 1e-3, calcium=np.nan)
    mix = mixed([one, unknown], [1.0, np.array([0.0, 0.5])])
    assert_allclose(mix.total("calcium")[0], IONS["calcium"], rtol=1e-14)
    assert np.isnan(mix.total("calcium")[1])
    assert_allclose(mix.water().ph[0], one.water().ph[0], rtol=0, atol=1e-12)


@pytest.mark.parametrize(("volumes", "words"), [([1.0], "one volume per water"), ([1.0, -1.0], "must not be negative")])
def test_mixing_needs_volumes(volumes, words):
    """As the engine says it."""
    with pytest.raises(InputError, match=words):
        mixed([soft(), soft()], volumes)


# ------------------------------------------------------------------ readings


def readings(**values):
    """Readings of two rows at 15 °C."""
    return {"temperature_c": np.full(2, 15.0)} | {n: np.broadcast_to(np.asarray(v, dtype=float), (2,)) for n, v in values.items()}


@pytest.mark.parametrize("more", [{}, {"boron": 2e-4}, {"acetate": 3e-4}, {"phosphate": 1e-4, "ammonium": 2e-4}],
                         ids=lambda m: "_".join(m) or "bare")
def test_readings_keep_their_ph(more):
    """The stream's own pH is the reading, with every weak acid that the readings name and nothing that tells ionic strength."""
    made, pair = stream_of(readings(ph=[6.0, 9.0], alkalinity_eq_l=1e-3, **{f"{n}_mol_l": v for n, v in more.items()}))
    assert list(pair) == ["pH and alkalinity"] * 2
    assert_allclose(made.water().ph, [6.0, 9.0], rtol=0, atol=1e-9)
    for name, total in more.items():
        assert_array_equal(made.total(name), total)


def test_very_soft_readings_keep_their_ph():
    """Alkalinity of 1 mg/L: the ionic strength is that of the readings, so that pH comes back."""
    assert_allclose(stream_of(readings(ph=[5.8, 6.5], alkalinity_eq_l=2e-5))[0].water().ph, [5.8, 6.5], rtol=0, atol=1e-9)


def test_ionic_strength_of_readings():
    """Langelier 2.5e-5 per mg/L of dissolved solids, Russell 1.6e-5 per uS/cm, else a 1:1 salt of the alkalinity."""
    assert_allclose(stream_of(readings(ph=7.5, alkalinity_eq_l=1e-3, tds_mg_l=40.0))[0].ionic_strength_mol_l, 1e-3)
    assert_allclose(stream_of(readings(ph=7.5, alkalinity_eq_l=1e-3, conductivity_us_cm=200.0))[0].ionic_strength_mol_l, 3.2e-3)
    assert_allclose(stream_of(readings(ph=7.5, alkalinity_eq_l=1e-3))[0].ionic_strength_mol_l, 1e-3)


def test_magnesium_of_the_hardness():
    """Hardness less calcium where magnesium is not measured, never below zero; the measured one counts."""
    base = {"ph": 7.5, "alkalinity_eq_l": 1e-3, "calcium_mol_l": 1e-3}
    made, _ = stream_of(readings(total_hardness_mol_l=[1.5e-3, 0.9e-3], **base))
    assert_allclose(made.total("magnesium"), [0.5e-3, 0.0], rtol=1e-12)
    made, _ = stream_of(readings(total_hardness_mol_l=1.5e-3, magnesium_mol_l=2e-4, **base))
    assert_allclose(made.total("magnesium"), 2e-4)
    assert np.isnan(stream_of(readings(**base))[0].total("magnesium")).all()


def test_pressure_and_other_pairs():
    """Air pressure as read; a row without alkalinity is solved from its carbon; one without anything is left open."""
    values = readings(ph=7.5, alkalinity_eq_l=[1e-3, np.nan], dic_mol_l=[np.nan, 1.1e-3], air_pressure_atm=0.9)
    made, pair = stream_of(values)
    assert list(pair) == ["pH and alkalinity", "pH and carbon"]
    assert_array_equal(made.pressure_atm, 0.9)
    assert_array_equal(made.carbon_mol_l[1], 1.1e-3)
    with mp.workdps(reference.DIGITS):
        expected = float(reference.alkalinity(7.5, 1.1e-3, 15.0, float(made.ionic_strength_mol_l[1])))
    assert_allclose(made.alkalinity_eq_l[1], expected, rtol=1e-10)
    values["dic_mol_l"] = np.full(2, np.nan)
    made, pair = stream_of(values)
    assert list(pair) == ["pH and alkalinity", ""]
    assert np.isnan(made.alkalinity_eq_l[1])


def test_readings_without_a_pair():
    """What is there is named."""
    with pytest.raises(InputError, match=r"needs two of pH, alkalinity, carbon and pCO2 that fit together; found pH\. Add another"):
        stream_of(readings(ph=7.0))
    with pytest.raises(InputError, match="found none"):
        stream_of(readings(calcium_mol_l=1e-3))


def test_salt_water_is_refused():
    """Constants and counting of a works are those of fresh water."""
    values = {"temperature_c": np.array([10.0]), "ph": np.array([8.0]), "alkalinity_eq_l": np.array([2.3e-3]),
              "salinity": np.array([30.0])}
    with pytest.raises(InputError, match=r"treats fresh water, of a salinity below 1; found salt water\. Correct"):
        stream_of(values)
