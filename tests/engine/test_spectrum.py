"""Buffers found in titration curves of known acids, whose curves are made here by a formula of their own."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf.engine.spectrum import fit_spectrum
from aquabuf.errors import InputError

# ideal constants of facts table 3.2 (25 °C, recalled there): Kw = 1e-14, carbonic 6.352/10.329
KW, PK_CARBONIC = 1e-14, [6.352, 10.329]
WATER = {"c_h": 1.0, "c_oh": KW, "k1": 10**-6.352, "k2": 10**-10.329}


def lost(ph, pks):
    """Mean protons lost per molecule, by the sums of h and cumulative constants."""
    h = 10.0 ** -np.asarray(ph, dtype=float)
    terms = [h**0] + [10.0 ** -np.sum(pks[:j]) / h**j for j in range(1, len(pks) + 1)]
    return sum(j * t for j, t in enumerate(terms)) / sum(terms)


def water_of(ph):
    """[OH-] - [H+]."""
    return KW * 10.0**ph - 10.0**-ph


WASTES = {  # strong acid [eq/L], acids as (mol/L, pK values)
    "HCl 0.01 N": (0.01, []),
    "HCl 0.01 N + 1 mmol/L CT": (0.01, [(1e-3, PK_CARBONIC)]),
    "acetic 0.1 M": (0.0, [(0.1, [4.756])]),
    "phosphoric 0.1 M": (0.0, [(0.1, [2.148, 7.198, 12.35])]),
    "citric 0.1 M": (0.0, [(0.1, [3.128, 4.761, 6.396])]),
    "acetic and carbonate": (0.0, [(0.05, [4.756]), (0.02, PK_CARBONIC)]),
    "two close acids": (0.0, [(0.05, [4.8]), (0.03, [5.3])]),
    "three acids": (0.0, [(0.02, [4.5]), (0.03, [6.5]), (0.025, [8.5])]),
}


def base_of(name, ph, share=1.0):
    """Base added per liter of raw waste at a pH, when the waste is this share of the mixture: charge balance."""
    strong, acids = WASTES[name]
    ph = np.asarray(ph, dtype=float)
    return strong + sum((c * lost(ph, pks) for c, pks in acids), 0.0 * ph) + (KW * 10.0**ph - 10.0**-ph) / share


def curve_of(name, count=40, top=12.0):
    """Readings from the raw waste to `top`, evenly spread over base and pH together."""
    raw = brentq(lambda p: float(base_of(name, p)), 0.0, 9.0)
    ph = np.linspace(raw, top, 2000)
    base = base_of(name, ph)
    ph = np.interp(np.linspace(0.0, 1.0, count), 0.5 * (base / base[-1] + (ph - raw) / (top - raw)), ph)
    return base_of(name, ph), ph


def fit(name, **options):
    """Spectrum of exact readings."""
    base, ph = curve_of(name)
    return fit_spectrum(base, ph, **WATER, **options)


def site_pks(pks):
    """pK of the single-step acids that together dissociate exactly as one of several steps: roots of its polynomial."""
    roots = np.roots([10.0 ** -np.sum(pks[:j]) for j in range(len(pks), -1, -1)])
    assert np.isreal(roots).all()
    return np.sort(np.log10(-1.0 / np.real(roots)) * -1.0)


@pytest.mark.parametrize("name", ["acetic 0.1 M", "phosphoric 0.1 M", "citric 0.1 M", "two close acids", "three acids"])
def test_known_acids_are_found(name):
    """Strength within 3 % and pK within 0.1, one buffer per step, no carbon where there is none."""
    found = fit(name)
    pks = np.sort(np.concatenate([site_pks(pks) for _, pks in WASTES[name][1]]))
    mol = np.concatenate([np.full(len(pks), c) for c, pks in WASTES[name][1]])
    assert found.pk.size == pks.size
    assert_allclose(found.pk, pks, rtol=0, atol=0.1)
    assert_allclose(found.mol_l, mol, rtol=0.03)
    assert_allclose(found.mol_l.sum(), mol.sum(), rtol=0.03)
    assert found.carbon_mol_l == 0.0
    assert np.abs(found.residual_eq_l).max() < 1e-3 * np.ptp(curve_of(name)[0])


@pytest.mark.parametrize(("name", "carbon", "acid"), [("acetic and carbonate", 0.02, 0.05),
                                                       ("HCl 0.01 N + 1 mmol/L CT", 1e-3, 0.0)])
def test_carbonate_is_told_from_other_acids(name, carbon, acid):
    """Carbon is carbon, not two acids at its pK."""
    found = fit(name)
    assert_allclose(found.carbon_mol_l, carbon, rtol=0.03)
    assert_allclose(found.mol_l.sum(), acid, rtol=0.03)
    assert fit(name, carbonate=False).carbon_mol_l == 0.0


def test_strong_acid_has_no_buffer():
    """Water alone explains a strong acid; its alkalinity is minus its normality."""
    found = fit("HCl 0.01 N")
    assert found.pk.size == 0
    assert_allclose(found.base_eq_l, -0.01, rtol=1e-6)


@pytest.mark.parametrize(("name", "expected"), [("acetic 0.1 M", 0.0), ("phosphoric 0.1 M", -0.1), ("citric 0.1 M", -0.1),
                                                 ("acetic and carbonate", 0.0), ("HCl 0.01 N + 1 mmol/L CT", -0.01)])
def test_alkalinity_by_definition(name, expected):
    """Steps with pK below 4.5 count minus where they hold their proton (Dickson 1981), strong acid counts minus."""
    assert_allclose(fit(name).base_eq_l, expected, rtol=0, atol=2e-4)


# facts table 3.2, computed there for ideal solutions: eq/L to pH 6, 7, 8, 9; printed to 1e-6
DEMANDS = {
    "HCl 0.01 N": [0.009999, 0.010000, 0.010001, 0.010010],
    "HCl 0.01 N + 1 mmol/L CT": [0.010307, 0.010817, 0.010984, 0.011053],
    "acetic 0.1 M": [0.094605, 0.099433, 0.099944, 0.100004],
}


@pytest.mark.parametrize("name", DEMANDS)
def test_demand_of_the_facts_table(name):
    """A curve is reproduced where no reading stands."""
    assert_allclose(fit(name).base_at([6.0, 7.0, 8.0, 9.0]), DEMANDS[name], rtol=0, atol=1.5e-6)


def test_buffer_of_the_facts_table():
    """Buffer intensity of 0.1 M acetic acid at pH 7 is 1.298e-3 eq/L per pH (computed in facts table 3.2)."""
    assert_allclose(fit("acetic 0.1 M").buffer_at(7.0), 1.298e-3, rtol=1e-3)


@pytest.mark.parametrize("name", WASTES)
def test_demand_of_the_waste_thinned_tenfold(name):
    """What was titrated undiluted tells the demand of the waste in ten times its volume within 1 %."""
    ph = np.array([6.0, 7.0, 8.0, 9.0])
    found, true = fit(name).base_at(ph, 0.1), base_of(name, ph, 0.1)
    assert_allclose(found, true, rtol=0.01)
    thin, thick = base_of(name, 11.0, 0.1), base_of(name, 11.0)
    assert abs(thin / thick - 1.0) > 0.01  # thinning matters, so that the check can fail
    assert_allclose(fit(name).base_at(11.0, 0.1), thin, rtol=0.01)


@pytest.mark.parametrize("share", [1.0, 0.3])
def test_buffer_is_the_slope_of_base(share):
    """Central differences, with carbon and with thinning."""
    found, ph = fit("acetic and carbonate"), np.array([1.5, 4.0, 6.5, 9.0, 10.5, 12.5])
    slope = (found.base_at(ph + 1e-5, share) - found.base_at(ph - 1e-5, share)) / 2e-5
    assert_allclose(found.buffer_at(ph, share), slope, rtol=1e-6)


def test_readings_thinned_by_titrant_tell_the_same_acid():
    """Each reading has its own share of waste; the acid found is that of the raw waste."""
    ph = np.linspace(2.9, 12.0, 40)
    share = np.linspace(1.0, 0.6, 40)
    found = fit_spectrum(base_of("acetic 0.1 M", ph, share), ph, dilution=share, **WATER)
    assert_allclose([found.pk[0], found.mol_l[0]], [4.756, 0.1], rtol=1e-3)
    assert found.pk.size == 1
    wrong = fit_spectrum(base_of("acetic 0.1 M", ph, share), ph, **WATER)
    assert wrong.pk[-1] > 12.0  # left out, thinning looks like a second acid


def noisy(name, seed, u_ph=0.02, u_share=1e-4):
    """Spectrum of readings with seeded normal errors of pH and of base."""
    base, ph = curve_of(name, top=12.5 if "phosphoric" in name else 11.0)
    random, u = np.random.default_rng(seed), u_share * base.max()
    return fit_spectrum(base + u * random.standard_normal(base.size), ph + u_ph * random.standard_normal(base.size),
                        u_ph=u_ph, u_base_eq_l=u, **WATER)


@pytest.mark.parametrize("name", ["acetic 0.1 M", "phosphoric 0.1 M", "citric 0.1 M", "three acids"])
def test_stated_uncertainty_covers_the_truth(name):
    """Over 50 seeded curves, 95 % intervals of strength and pK hold the true value at least 85 times in 100.

    And they are not idle: half-size intervals hold it clearly less often.
    """
    pks = np.sort(np.concatenate([site_pks(pks) for _, pks in WASTES[name][1]]))
    mol = np.concatenate([np.full(len(pks), c) for c, pks in WASTES[name][1]])
    off = []
    for seed in range(50):
        found = noisy(name, seed)
        near = np.abs(found.pk[:, None] - pks).argmin(axis=0)
        off += [*(found.pk[near] - pks) / found.u_pk[near], *(found.mol_l[near] - mol) / found.u_mol_l[near]]
    off = np.abs(off)
    assert np.mean(off < 1.96) >= 0.85
    assert np.mean(off < 0.5) < 0.6  # 0.38 for a normal error


def test_uncertainty_of_one_acid_by_repetition():
    """The scatter of 200 seeded fits is the stated standard uncertainty."""
    found = [noisy("acetic 0.1 M", seed) for seed in range(200)]
    assert sum(s.carbon_mol_l > 0.0 for s in found) < 20  # scatter is not taken for carbon
    found = [s for s in found if s.pk.size == 1]
    assert len(found) > 180
    assert_allclose(np.std([s.pk[0] for s in found]), np.median([s.u_pk[0] for s in found]), rtol=0.2)
    assert_allclose(np.std([s.mol_l[0] for s in found]), np.median([s.u_mol_l[0] for s in found]), rtol=0.2)


def test_scatter_is_not_taken_for_a_buffer():
    """A strong acid read with errors keeps its alkalinity, and seldom gets a buffer that is not there."""
    found = [noisy("HCl 0.01 N", seed, u_share=2e-3) for seed in range(20)]
    assert sum(s.pk.size > 0 for s in found) <= 3
    assert_allclose([s.base_eq_l for s in found], -0.01, rtol=0.02)
    assert sum(noisy("HCl 0.01 N", seed).carbon_mol_l > 0.0 for seed in range(40)) <= 6


def test_the_penalty_is_as_strong_as_errors_allow():
    """Discrepancy principle: larger stated errors, stronger smoothing; squares on the grid within the number of readings."""
    base, ph = curve_of("three acids")

    def squares(found):
        left = base - water_of(ph) - 1.0 / (1.0 + 10.0 ** (found.grid_pk - ph[:, None])) @ found.grid_mol_l
        return np.sum(((left - np.average(left, weights=found.error_eq_l**-2)) / found.error_eq_l) ** 2)

    kind = {"u_base_eq_l": 1e-5, "carbonate": False, **WATER}
    careful, careless = (fit_spectrum(base, ph, u_ph=u, **kind) for u in (0.005, 0.2))
    assert careless.ridge > careful.ridge > 1e-7
    assert squares(careless) < 1.1 * ph.size  # weights still followed the curve after the penalty was chosen
    assert squares(fit_spectrum(base, ph, u_ph=0.2, ridge=10.0 * careless.ridge, **kind)) > ph.size


def test_residuals_as_large_as_errors():
    """Readings with the errors that were stated leave squares near one; errors twice as large are seen and told."""
    base, ph = curve_of("three acids", 80, 11.0)
    off = 0.02 * np.random.default_rng(1).standard_normal(ph.size)
    kind = {"u_ph": 0.02, "u_base_eq_l": 1e-5, **WATER}
    right, twice = fit_spectrum(base, ph + off, **kind), fit_spectrum(base, ph + 2.0 * off, **kind)
    assert 0.6 < right.reduced_chi2 < 1.5
    assert 2.5 < twice.reduced_chi2 < 6.0
    assert_allclose(twice.u_pk / right.u_pk, 2.0, rtol=0.4)


def test_order_of_readings_does_not_matter():
    """Readings of two vessels may come one after the other."""
    base, ph = curve_of("three acids")
    order = np.random.default_rng(3).permutation(ph.size)
    assert_allclose(fit_spectrum(base[order], ph[order], **WATER).mol_l, fit("three acids").mol_l, rtol=1e-6)


def test_as_acids():
    """Acids for other conditions: strengths kept, pK moved by the activity of a single charge."""
    found = fit("three acids")
    acids = found.as_acids()
    assert_allclose([acid.pk[0] for acid in acids], found.pk)
    assert_allclose(list(acids.values()), found.mol_l)
    assert len({acid.name for acid in acids}) == 3
    # HA = H+ + A-: K = (H) gamma [A-] / [HA], so that pK is pK' - log gamma
    assert_allclose([acid.pk[0] for acid in found.as_acids(-0.1)], found.pk + 0.1)


@pytest.mark.parametrize("ridge", [1e-2, 1e-5])
def test_smoothing_leaves_the_strength(ridge):
    """Any penalty that lets the curve be followed gives the same buffers; what the grid holds is the total."""
    found = fit("acetic 0.1 M", ridge=ridge)
    assert found.ridge == ridge
    assert_allclose(found.mol_l, [0.1], rtol=1e-3)
    assert_allclose(found.grid_mol_l.sum(), 0.1, rtol=0.05)


def test_a_stronger_penalty_smooths_more():
    """Tikhonov's penalty lowers the sum of squares on the grid."""
    squares = [np.sum(fit("acetic 0.1 M", ridge=r).grid_mol_l ** 2) for r in (1e-6, 1e-3, 1.0)]
    assert squares[0] > squares[1] > squares[2]


BASE, PH = curve_of("acetic 0.1 M")


@pytest.mark.parametrize(("base", "ph", "options", "words"), [
    (BASE[:4], PH[:4], {}, r"5 readings or more.*found shapes \(4,\).*Add readings"),
    (BASE, PH[:-1], {}, r"one base for each pH; found shapes \(40,\) and \(39,\)"),
    (BASE * np.nan, PH, {}, r"must be numbers.*found others\. Leave such readings out"),
    (BASE, PH, {"dilution": 0.0}, r"share of waste above 0 and 1 at most"),
    (0.0 * BASE, PH, {}, r"must differ from reading to reading; found one value.*Titrate over"),
    (BASE, PH, {"u_ph": 0.0}, r"error of a pH reading must be above 0; found 0\. Give its scatter"),
    (BASE, PH, {"u_base_eq_l": 0.0}, r"error of the base added must be above 0; found 0 eq/L\. Give the scatter"),
    (BASE, PH, {"pk_grid": [20.0]}, r"grid of pK must reach the readings, which run from pH 2\.88 to 12\.00; none.*Widen it"),
])  # fmt: skip
def test_refusals(base, ph, options, words):
    """Each says the rule, what was found and what to do."""
    with pytest.raises(InputError, match=words):
        fit_spectrum(base, ph, **WATER, **options)
