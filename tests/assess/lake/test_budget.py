"""Which ANC a lake has: a printed lake, its differences, missing ions, and what a Gran line leaves out."""

from itertools import combinations

import numpy as np
import pytest
from made_lakes import HAWK_POND, budget_of, ions, lakes_of
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.assess.lake.budget import GRAN_PH, NEEDED, anc_kinds, gran_leaves_out, left_out_by_gran, missing_ions
from aquabuf.chem.organic import organic_models
from aquabuf.readings.schema import quantities

# Equivalent conductivities of the US lake surveys, recovered from 1798 lakes [µS/cm per meq/L, 25 °C]
LAMBDA = {"calcium": 59.47, "magnesium": 53.0, "sodium": 50.08, "potassium": 73.48, "ammonium": 73.5, "sulfate": 80.0,
          "nitrate": 71.42, "chloride": 76.31, "fluoride": 55.41, "hydrogen": 349.65, "bicarbonate": 44.5}
SIGN = {"calcium": 1, "magnesium": 1, "sodium": 1, "potassium": 1, "ammonium": 1, "sulfate": -1, "nitrate": -1, "chloride": -1}


def ueq(value):
    """µeq/L of the first lake."""
    return float(1e6 * value[0, 0])


HAWK = ions(**HAWK_POND) | {"anc_eq_l": -21.7e-6, "doc_mg_l": 3.0, "aluminum_mol_l": 4e-6}


def test_hawk_pond_as_printed():
    """Lake 1A1-003, EPA Eastern Lake Survey: sums of its ions and their difference, 0.01 µeq/L."""
    b = budget_of(lakes_of(HAWK))
    assert_allclose(ueq(b.base_cations), 99.396, rtol=0, atol=0.005)
    assert_allclose(ueq(b.strong_anions), 150.272, rtol=0, atol=0.005)
    assert_allclose(ueq(b.charge_bare), -50.876, rtol=0, atol=0.005)
    assert_allclose(ueq(b.charge), -50.876 + 5.156, rtol=0, atol=0.005)
    assert b.with_ammonium.all()
    # the agency's sums: H+ 16.2181 among the cations; fluoride and bicarbonate among the anions
    assert_allclose(ueq(b.base_cations) + 5.156 + 16.2181, 120.77, rtol=0, atol=0.01)
    assert_allclose(ueq(b.strong_anions) + 2.853 + 0.882, 154.01, rtol=0, atol=0.01)


def test_differences_of_hawk_pond():
    """Gran -21.7: the gap, a third of 10.2 µeq/mg taken off, and the strong organic anion of the base-cation surplus.

    The charge balance leaves out 2.853 µeq/L of fluoride, which is a part of the gap.
    """
    b = budget_of(lakes_of(HAWK, model="hruska"))
    assert_allclose(ueq(b.gran), -21.7, rtol=1e-12)
    assert_allclose(ueq(b.gap), -45.720 + 21.7, rtol=0, atol=0.005)
    assert_allclose(ueq(b.organic_corrected), -45.720 - 3.4 * 3.0, rtol=0, atol=0.005)
    assert_allclose(ueq(b.surplus), -50.876 - (0.071 * 3000.0 / 12.011 - 2.1), rtol=0, atol=0.005)
    assert_allclose(b.gap_rest, b.gap - b.gap_organic - b.gap_aluminum - 2.853e-6, rtol=1e-12)


def test_ammonium_counts_only_where_asked_and_measured():
    """With it, without it, and where it was not measured: said in `with_ammonium`."""
    without = HAWK | {"ammonium_mol_l": np.nan}
    b = budget_of(lakes_of(HAWK, without))
    assert_array_equal(b.with_ammonium[:, 0], [True, False])
    assert_allclose(1e6 * b.charge[:, 0], [-45.720, -50.876], rtol=0, atol=0.005)
    bare = budget_of(lakes_of(HAWK, without), ammonium=False)
    assert not bare.with_ammonium.any()
    assert_allclose(1e6 * bare.charge[:, 0], [-50.876, -50.876], rtol=0, atol=0.005)
    assert_array_equal(bare.charge, bare.charge_bare)


@pytest.mark.parametrize("ion", NEEDED)
def test_a_missing_ion_is_never_zero(ion):
    """No charge balance without it, nor anything made from it; the other lake keeps its own."""
    b = budget_of(lakes_of(HAWK, HAWK | {f"{ion}_mol_l": np.nan}))
    for name in ("charge", "charge_bare", "organic_corrected", "surplus", "gap", "gap_rest"):
        assert_array_equal(np.isnan(getattr(b, name))[:, 0], [False, True], err_msg=name)
    assert np.isfinite(b.gran).all()
    side = {1: b.strong_anions, -1: b.base_cations}[SIGN[ion]]
    assert np.isfinite(side).all()  # the other sum is whole


def test_every_anc_keeps_the_name_of_its_definition():
    """A Gran ANC, an end-point ANC, one worked out elsewhere and an alkalinity never stand in for each other."""
    both = HAWK | {"alkalinity_eq_l": -9e-6}
    b = budget_of(lakes_of(HAWK, HAWK, both, HAWK), ["gran", "end_point", "", "charge_balance"])
    assert_allclose(1e6 * b.gran[:, 0], [-21.7, np.nan, -21.7, np.nan])
    assert_allclose(1e6 * b.end_point[:, 0], [np.nan, -21.7, np.nan, np.nan])
    assert_allclose(1e6 * b.alkalinity[:, 0], [np.nan, np.nan, -9.0, np.nan])
    assert_allclose(1e6 * b.charge[:, 0], -45.720, rtol=0, atol=0.005)  # the ions outrank the one worked out elsewhere
    assert_array_equal(np.isnan(b.gap)[:, 0], [False, True, False, True])


def test_a_charge_balance_of_others_counts_where_the_ions_are_missing():
    """Only where it is said to be one; the sums of ions themselves stay missing."""
    part = HAWK | {"sulfate_mol_l": np.nan}
    b = budget_of(lakes_of(part, part, part), ["charge_balance", "gran", "end_point"])
    assert_allclose(1e6 * b.charge[:, 0], [-21.7, np.nan, np.nan])
    assert np.isnan(b.charge_bare).all()
    assert np.isnan(b.gap).all()


@pytest.mark.parametrize(("word", "kind"), [
    ("", "is_gran"), ("gran", "is_gran"), ("curve_fit", "is_gran"), ("inflection", "is_gran"), ("two_end_points", "is_gran"),
    ("end_point", "is_end_point"), ("charge_balance", "is_computed"),
])  # fmt: skip
def test_kinds_of_anc(word, kind):
    """Each word of the column means one kind; the methods that agree with Gran count as Gran, and so does none."""
    kinds = anc_kinds(np.array(["end_point", word, "charge_balance"], dtype=object))
    assert {n for n in kinds.__dataclass_fields__ if getattr(kinds, n)[1, 0]} == {kind}
    assert kinds.is_gran.shape == (3, 1)
    assert_array_equal(kinds.take(np.array([2, 0])).is_end_point, [[False], [True]])


def test_every_word_of_the_column_has_a_kind():
    """The schema's own list of words."""
    words = {word for _, word in quantities()["anc_method"].choices}
    assert words == {"gran", "curve_fit", "inflection", "two_end_points", "end_point", "charge_balance"}


def test_organic_carbon_that_was_not_measured_explains_nothing():
    """The organic part of the gap is unknown then, and so are corrected ANC and surplus; aluminum counts as none."""
    b = budget_of(lakes_of(HAWK | {"doc_mg_l": np.nan, "aluminum_mol_l": np.nan}))
    for name in ("gap_organic", "gap_rest", "organic_corrected", "surplus"):
        assert np.isnan(getattr(b, name)).all(), name
    assert_array_equal(b.gap_aluminum, 0.0)
    assert np.isfinite(b.gap).all()


# ------------------------------------------------------------------ what a Gran line leaves out


OH_LEFT = 7e-10  # eq/L: twice the OH- at GRAN_PH, which the titration holds and the relation leaves out


class AcidLake:
    """Charge balance of an acid lake without carbon, written apart from the engine; all activity coefficients are 1."""

    def __init__(self, strong, doc, aluminum, pk=(3.04, 4.42, 6.70), sites=10.2e-6):
        self.strong, self.doc, self.aluminum, self.pk, self.sites = strong, doc, aluminum, pk, sites

    def organic(self, h):
        """Charge of organic anions."""
        k = np.cumprod(10.0 ** -np.array(self.pk))
        w = np.array([1.0, k[0] / h, k[1] / h**2, k[2] / h**3])
        return self.doc * self.sites * (w[1] + 2 * w[2] + 3 * w[3]) / w.sum() / 3.0

    def charge_of_aluminum(self, h):
        """Charge of aluminum and its hydroxides."""
        w = np.array([1.0, 10.0**-5.0 / h, 10.0**-10.1 / h**2, 10.0**-16.9 / h**3, 10.0**-22.7 / h**4])
        return self.aluminum * (3 * w[0] + 2 * w[1] + w[2] - w[4]) / w.sum()

    def h_after(self, acid):
        """H+ after strong acid [eq per liter of sample; its volume does not count]."""
        def excess(log_h):
            h = 10.0**log_h
            return self.strong - acid - (self.organic(h) - self.charge_of_aluminum(h) + 1e-14 / h - h)
        return 10.0 ** brentq(excess, -13.0, 0.0, xtol=1e-15, rtol=1e-15)

    def gran_at(self, ph, apart=2e-9):
        """Acid at which a straight line through two readings near `ph` meets H+ = 0."""
        middle = brentq(lambda acid: -np.log10(self.h_after(acid)) - ph, -1e-3, 1e-2, xtol=1e-15)
        first, second = middle - apart, middle + apart
        h1, h2 = self.h_after(first), self.h_after(second)
        return first - h1 * (second - first) / (h2 - h1)


@pytest.mark.parametrize(("strong", "doc", "aluminum"), [
    (0.0, 0.0, 0.0), (60e-6, 8.0, 0.0), (-20e-6, 0.0, 15e-6), (15e-6, 12.0, 6e-6), (-45e-6, 3.0, 9e-6), (150e-6, 25.0, 2e-6),
])  # fmt: skip
def test_the_root_of_a_titrated_lake(strong, doc, aluminum):
    """A lake titrated step by step, two readings at GRAN_PH: the root is ANC less the anions, plus the aluminum, left out."""
    root = AcidLake(strong, doc, aluminum).gran_at(GRAN_PH)
    organic, metal = gran_leaves_out(lakes_of({"doc_mg_l": doc, "aluminum_mol_l": aluminum}))
    assert_allclose(strong - float(organic[0, 0]) + float(metal[0, 0]), root, rtol=0, atol=OH_LEFT)


@pytest.mark.parametrize("name", [name for name, model in organic_models().items() if model.pk])
def test_each_triprotic_model_leaves_out_its_own(name):
    """The same with the constants of every shipped model, 10 mg/L of carbon."""
    model = organic_models()[name]
    root = AcidLake(40e-6, 10.0, 0.0, model.pk, model.sites_eq_mg).gran_at(GRAN_PH)
    organic, _ = gran_leaves_out(lakes_of({"doc_mg_l": 10.0}, model=name))
    assert_allclose(40e-6 - float(organic[0, 0]), root, rtol=0, atol=OH_LEFT)


def test_a_lake_without_organic_acids_has_no_gap_to_explain():
    """Nothing measured, nothing left out; the drawn error multiplies the organic part alone."""
    for part in gran_leaves_out(lakes_of({})):
        assert_array_equal(part, 0.0)
    organic, metal = gran_leaves_out(lakes_of({"doc_mg_l": 5.0, "aluminum_mol_l": 1e-6}, error=[[1.0, 1.2]]))
    assert_allclose(organic[:, 1], 1.2 * organic[:, 0], rtol=1e-14)
    assert metal.shape == (1, 1)
    direct = left_out_by_gran(organic_models()["hruska_b"], np.array([[5.0, 6.0]]), np.array([[1e-6]]))
    assert_allclose(direct[0], organic, rtol=1e-14)
    assert_allclose(direct[1], metal, rtol=1e-14)


def test_gap_of_a_lake_made_whole():
    """Ions and titration of one made-up lake agree: organic anions and aluminum explain the gap, nothing rests."""
    lake = AcidLake(-30e-6, 9.0, 8e-6)
    strong = ions(calcium=60.0, magnesium=20.0, sodium=25.0, potassium=5.0, sulfate=115.0, nitrate=5.0, chloride=20.0)
    readings = strong | {"doc_mg_l": 9.0, "aluminum_mol_l": 8e-6, "anc_eq_l": lake.gran_at(GRAN_PH)}
    b = budget_of(lakes_of(readings))
    assert_allclose(ueq(b.charge), -30.0, rtol=1e-9)
    assert_allclose(ueq(b.gap_rest), 0.0, rtol=0, atol=1e6 * OH_LEFT)
    assert ueq(b.gap_organic) > 0.0 > ueq(b.gap_aluminum)


# ------------------------------------------------------------------ missing ions

TRUE = {"calcium": 85.0, "magnesium": 32.0, "sodium": 41.0, "potassium": 6.0, "ammonium": 2.0, "sulfate": 70.0, "nitrate": 9.0,
        "chloride": 24.0}  # [µeq/L], with bicarbonate for the rest
ANC = 85.0 + 32.0 + 41.0 + 6.0 + 2.0 - 70.0 - 9.0 - 24.0
GONE = [gone for size in (1, 2, 3, len(NEEDED)) for gone in combinations(NEEDED, size)]


def slowed(mol_l):
    """What ions conduct over infinite dilution: the square of the activity coefficient of one charge (Davies equation
    with 0.3 I and A = 0.5, as Standard Methods 2510 has it; recalled)."""
    root = np.sqrt(mol_l)
    return 10.0 ** (-2.0 * 0.5 * (root / (1.0 + root) - 0.3 * mol_l))


def room(gone, lakes, extra=0.0):
    """Conductivity that the known ions and bicarbonate do not explain, by the listed conductivities. [µS/cm]"""
    factor = slowed(lakes.setting.lake.ionic_strength_mol_l[0, 0])
    return np.array([[1e-3 * factor * sum(LAMBDA[ion] * TRUE[ion] for ion in gone) + extra]])


def missing(gone, extra=0.0):
    """What is said of a lake whose ions `gone` were not measured."""
    known = {ion: value for ion, value in TRUE.items() if ion not in gone}
    lakes = lakes_of(ions(**known))
    return missing_ions(lakes, room(gone, lakes, extra))


@pytest.mark.parametrize("gone", GONE, ids="; ".join)
def test_bounds_hold_the_truth(gone):
    """Named in order, each no more than `most`, and the true ANC within the bounds."""
    found = missing(gone)
    assert found.names.tolist() == ["; ".join(gone)]
    assert max(TRUE[ion] for ion in gone) <= ueq(found.most) + 1e-9
    assert ueq(found.low) - 1e-9 <= ANC <= ueq(found.high) + 1e-9
    known = ANC - sum(SIGN[ion] * TRUE[ion] for ion in gone)
    kinds = {SIGN[ion] for ion in gone}
    assert_allclose(ueq(found.high), known + (ueq(found.most) if 1 in kinds else 0.0), rtol=1e-9)
    assert_allclose(ueq(found.low), known - (ueq(found.most) if -1 in kinds else 0.0), rtol=1e-9)


@pytest.mark.parametrize("ion", NEEDED)
def test_one_missing_ion_is_told_by_conductivity(ion):
    """By hand: the room over its equivalent conductivity is the ion itself."""
    found = missing((ion,))
    assert_allclose(ueq(found.most), TRUE[ion], rtol=1e-9)
    assert_allclose(ueq(found.high if SIGN[ion] == 1 else found.low), ANC, rtol=1e-9)
    wider = missing((ion,), extra=0.5)
    assert_allclose(ueq(wider.most) - TRUE[ion], 500.0 / LAMBDA[ion], rtol=0.02)  # ions so few slow each other 1 %
    assert ueq(wider.most) - TRUE[ion] > 500.0 / LAMBDA[ion]


def test_the_slowest_ion_sets_the_most():
    """Sodium carries the least of those missing: 1 µS/cm may be 1000 / 50.08 µeq/L of it, and more where ions slow."""
    lakes = lakes_of(ions(calcium=85.0, magnesium=32.0, sulfate=70.0, nitrate=9.0, chloride=24.0))
    factor = slowed(lakes.setting.lake.ionic_strength_mol_l[0, 0])
    assert_allclose(ueq(missing_ions(lakes, np.array([[1.0]])).most), 1000.0 / 50.08 / factor, rtol=1e-9)


def test_no_conductivity_no_bounds():
    """The names remain; a lake with all its ions has neither; more conductivity of ions than measured leaves no room."""
    lakes = lakes_of(ions(**TRUE), ions(**TRUE) | {"chloride_mol_l": np.nan}, ions(**TRUE) | {"calcium_mol_l": np.nan})
    found = missing_ions(lakes, np.array([[4.0], [np.nan], [-2.0]]))
    assert found.names.tolist() == ["", "chloride", "calcium"]
    assert_allclose(1e6 * found.most[:, 0], [np.nan, np.nan, 0.0])
    for bound in (found.low, found.high):
        assert_allclose(1e6 * bound[:, 0], [np.nan, np.nan, ANC - 85.0], rtol=1e-9)
