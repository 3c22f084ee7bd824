"""The curve of a titration and its fit, against worked curves, closed forms and conservation."""

import numpy as np
import pytest
from by_hand import gamma
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf.chem import fresh
from aquabuf.chem.acids import Acid, acid_named
from aquabuf.chem.properties import water_density
from aquabuf.engine.build import of_sea_salt
from aquabuf.engine.fit import fit_curve
from aquabuf.engine.titrate import mixed_ionic_strength, points_at, titration_curve


def points_of(acid, dilution, *, t_c=15.0, salinity=0.0, strength=2e-3, totals=None, by_mass=False, sulfuric=False):
    """Points of one titration at one ionic strength."""
    acid, dilution = np.atleast_2d(acid), np.atleast_2d(dilution)
    one = np.ones(acid.shape[0])
    return points_at(acid, dilution, t_c=t_c * one, salinity=salinity * one, ionic_strength_mol_l=np.full(acid.shape, strength),
                     totals={a: v * one for a, v in (totals or {}).items()}, by_mass=np.full(acid.shape[0], by_mass),
                     sulfuric=np.full(acid.shape[0], sulfuric))


def carbonate_by_hand(alkalinity, carbon, acid, dilution, t_c, strength, extra=lambda h, g1, g2: 0.0):
    """pH of one point by a bracketed search; activities by the Davies equation written again."""
    rho = water_density(t_c) / 1000.0
    g0, g1, g2 = (gamma(z, strength, t_c) for z in (0, 1, 2))
    k1, k2 = fresh.k1_carbonic(t_c) * g0 / g1, fresh.k2_carbonic(t_c) * g1 / g2
    kw = fresh.k_water(t_c)

    def left(ph):
        h = 10.0**-ph
        forms = 1.0 + k1 / h + k1 * k2 / h**2
        carbonate = carbon * (k1 / h + 2.0 * k1 * k2 / h**2) / forms
        return alkalinity - acid - carbonate - rho * (kw / g1 / h - h / g1) / dilution + extra(h, g1, g2)
    return brentq(left, 1.0, 13.0, xtol=1e-13)


ADDED = np.array([0.0, 2e-4, 9e-4, 1.2e-3, 1.5e-3, 2.4e-3])
DILUTION = 1.0 / (1.0 + ADDED / 0.05)


@pytest.mark.parametrize("t_c", [5.0, 15.0, 25.0])
def test_curve_against_a_bracketed_search(t_c):
    """Closed carbonate water with dilution, point by point."""
    ours = titration_curve(points_of(ADDED, DILUTION, t_c=t_c), np.array([1.2e-3]), np.array([1.3e-3]))[0]
    by_hand = [carbonate_by_hand(1.2e-3, 1.3e-3, x, d, t_c, 2e-3) for x, d in zip(ADDED, DILUTION, strict=True)]
    assert_allclose(ours, by_hand, rtol=0, atol=1e-9)


def test_sulfuric_acid_keeps_part_of_its_acid():
    """Half a sulfate per equivalent, whose bisulfate constant is 10^-1.987 at 25 °C (Goldberg et al. 2002, recalled)."""
    ours = titration_curve(points_of(ADDED, DILUTION, t_c=25.0, sulfuric=True), np.array([1.2e-3]), np.array([1.3e-3]))[0]
    by_hand = [carbonate_by_hand(1.2e-3, 1.3e-3, x, d, 25.0, 2e-3,
                                 lambda h, g1, g2, x=x: 0.5 * x * h / (10.0**-1.987 * g1 / g2 + h))
               for x, d in zip(ADDED, DILUTION, strict=True)]
    assert_allclose(ours, by_hand, rtol=0, atol=2e-5)
    plain = titration_curve(points_of(ADDED, DILUTION, t_c=25.0), np.array([1.2e-3]), np.array([1.3e-3]))[0]
    assert ours[-1] - plain[-1] > 0.01, "bound acid must show"


def test_weak_acid_of_the_sample_is_not_thinned_twice():
    """Per unit of sample a weak acid counts whole, whatever the dilution: half of it is dissociated at its pK."""
    own = Acid(name="own", pk=(5.0,))
    points = points_of(ADDED, DILUTION, totals={own: 4e-4})
    k = points.families[0].k[0]
    lost = points.terms(k)[1] - points_of(ADDED, DILUTION).terms(k)[1]
    assert_allclose(lost, np.full((1, ADDED.size), 2e-4), rtol=1e-12)


def test_slopes_of_the_balance_are_derivatives():
    """Slopes against ln h agree with differences of the balance itself."""
    points = points_of(ADDED, DILUTION, totals={acid_named("phosphate"): 1e-5, acid_named("ammonium"): 1e-4}, sulfuric=True)
    h, step = np.full((1, ADDED.size), 10.0**-6.3), 1e-6
    up, down = points.terms(h * np.exp(step)), points.terms(h * np.exp(-step))
    _, _, d_carbon, d_rest = points.terms(h)
    assert_allclose((up[0] - down[0]) / (2.0 * step), d_carbon, rtol=1e-7)
    assert_allclose((up[1] - down[1]) / (2.0 * step), d_rest, rtol=1e-6)


def test_a_titration_by_mass_is_the_same_water():
    """Per kilogram everything is the same but for the density of the water."""
    rho = float(water_density(15.0)) / 1000.0
    by_volume = titration_curve(points_of(ADDED, DILUTION), np.array([1.2e-3]), np.array([1.3e-3]))
    by_mass = titration_curve(points_of(ADDED / rho, DILUTION, by_mass=True), np.array([1.2e-3 / rho]), np.array([1.3e-3 / rho]))
    assert_allclose(by_mass, by_volume, rtol=0, atol=1e-9)


@pytest.mark.parametrize(("acid", "alkalinity", "expected"), [
    (0.0, 1e-3, 0.9 * 2e-3 + 0.1 * 0.05),                     # nothing added yet reacts
    (5e-4, 1e-3, 0.9 * (2e-3 - 5e-4) + 0.1 * 0.05),           # half neutralized
    (4e-3, 1e-3, 0.9 * (2e-3 - 1e-3) + 0.1 * 0.05),           # acid in excess adds to it
    (-5e-4, -1e-3, 0.9 * (2e-3 - 5e-4) + 0.1 * 0.05),         # base into acid water
    (5e-4, -1e-3, 0.9 * 2e-3 + 0.1 * 0.05),                   # acid into acid water neutralizes nothing
])
def test_ionic_strength_of_sample_and_titrant(acid, alkalinity, expected):
    """By counting ions: each equivalent neutralized takes one ion of each charge away."""
    found = mixed_ionic_strength(np.array(2e-3), np.array(0.05), np.array(acid), np.array(alkalinity), np.array(0.9))
    assert_allclose(found, expected, rtol=1e-12)


def test_bicarbonate_water_loses_its_ions_to_the_acid():
    """Sodium bicarbonate becomes sodium chloride: the ionic strength of the sample stays, thinned."""
    found = mixed_ionic_strength(np.array(1e-3), np.array(0.1), np.array(1e-3), np.array(1e-3), np.array(1.0 / 1.01))
    assert_allclose(found, 1e-3 / 1.01, rtol=1e-9)  # 1e-3 * 100 mL / 0.1 = 1 mL of acid


def test_sea_water_constants_are_thinned_with_the_salt():
    """Plain acid thins the sea, salted acid does not."""
    first = points_of([0.0, 2e-3], [1.0, 0.9], salinity=35.0, strength=0.7)
    plain = points_at(np.array([[0.0, 2e-3]]), np.array([[1.0, 0.9]]), t_c=np.array([15.0]), salinity=np.array([35.0]),
                      ionic_strength_mol_l=np.array([[0.7, 0.63]]), totals={}, by_mass=np.array([False]), sulfuric=np.array([False]))
    thin = points_of([0.0], [1.0], salinity=31.5, strength=0.63)
    assert_allclose(first.k1[0, 1], first.k1[0, 0], rtol=1e-12)
    assert_allclose(plain.k1[0, 1], thin.k1[0, 0], rtol=1e-12)


# ------------------------------------------------------------------ the fit

def test_fit_gives_back_what_made_the_curve():
    """Alkalinity, carbon and electrode offset of a curve from the bracketed search."""
    ph = np.array([[carbonate_by_hand(1.2e-3, 1.3e-3, x, d, 15.0, 2e-3) + 0.08 for x, d in zip(ADDED, DILUTION, strict=True)]])
    f = fit_curve(points_of(ADDED, DILUTION), ph, np.ones(ph.shape, bool), u_ph=np.array([0.01]), u_acid=np.array([1e-6]),
                  alkalinity=np.array([1e-3]))
    assert_allclose([f.alkalinity[0], f.carbon[0], f.offset_ph[0]], [1.2e-3, 1.3e-3, 0.08], rtol=1e-6)
    assert_allclose(f.residual_ph, 0.0, atol=1e-6)


def test_fit_finds_a_weak_acid_of_unknown_strength():
    """Total and pK of one more acid, whose base counts in alkalinity from pK 4.5 on."""
    acid, ratio = np.linspace(0.0, 1.8e-3, 25), 0.05
    d = 1.0 / (1.0 + acid / ratio)
    for pk, counted in ((5.2, 0.0), (4.0, -2e-4)):  # below 4.5 the base is the zero level, so its total drops out
        own = Acid(name="own", pk=(pk,))
        made = points_of(acid, d, totals={own: 2e-4}, strength=0.0)
        base = 2e-4 if own.zero_level else 0.0
        ph = titration_curve(made, np.array([1.2e-3 - base]), np.array([1.1e-3]))
        f = fit_curve(points_of(acid, d, strength=0.0), ph, np.ones(ph.shape, bool), u_ph=np.array([1e-3]),
                      u_acid=np.array([1e-8]), alkalinity=np.array([1e-3]), weak_acid=True)
        assert_allclose([f.acid_total[0], f.acid_pk[0]], [2e-4, pk], rtol=2e-4)
        assert_allclose(f.alkalinity[0], 1.2e-3 + counted, rtol=2e-5)


def test_response_is_the_change_with_the_strength():
    """The response to a relative error of the acid equals the shift when all acid is scaled."""
    ph = np.array([[carbonate_by_hand(1.2e-3, 1.3e-3, x, d, 15.0, 2e-3) for x, d in zip(ADDED, DILUTION, strict=True)]])
    args = {"u_ph": np.array([0.01]), "u_acid": np.array([1e-6]), "alkalinity": np.array([1e-3])}
    use = np.ones(ph.shape, bool)
    f = fit_curve(points_of(ADDED, DILUTION), ph, use, **args)
    scaled = fit_curve(points_of(ADDED * 1.001, DILUTION), ph, use, **args)
    shift = [(scaled.alkalinity - f.alkalinity)[0], (scaled.carbon - f.carbon)[0], (scaled.offset_ph - f.offset_ph)[0]]
    assert_allclose(shift, f.response[0, :3] * 0.001, rtol=0.01)


def test_covariance_is_the_scatter_of_repeated_fits():
    """Standard uncertainties agree with the spread over seeded readings with scatter."""
    acid = np.linspace(0.0, 2.2e-3, 25)
    d = 1.0 / (1.0 + acid / 0.05)
    true = titration_curve(points_of(acid, d), np.array([1.2e-3]), np.array([1.3e-3]))
    n, rng = 600, np.random.default_rng(3)
    ph = true + 0.01 * rng.standard_normal((n, acid.size))
    many = points_of(np.tile(acid, (n, 1)), np.tile(d, (n, 1)))
    f = fit_curve(many, ph, np.ones(ph.shape, bool), u_ph=np.full(n, 0.01), u_acid=np.full(n, 1e-7), alkalinity=np.full(n, 1e-3))
    assert f.converged.all()
    for values, i in ((f.alkalinity, 0), (f.carbon, 1), (f.offset_ph, 2)):
        assert_allclose(np.std(values), np.sqrt(f.covariance[:, i, i].mean()), rtol=0.12)
    assert_allclose(f.reduced_chi2.mean(), 1.0, atol=0.05)


def test_rows_do_not_see_each_other():
    """A titration is fitted alike alone and among others; one that cannot be fitted stays nan."""
    acid = np.stack([np.linspace(0.0, 2.2e-3, 12), np.linspace(0.0, 2.2e-3, 12), np.linspace(0.0, 2.2e-3, 12)])
    d = 1.0 / (1.0 + acid / 0.05)
    ph = titration_curve(points_of(acid, d), np.array([1.2e-3, 4e-4, 1e-3]), np.array([1.3e-3, 5e-4, 1.1e-3]))
    use = np.ones(ph.shape, bool)
    use[2, 2:] = False  # two points for three unknowns
    args = [np.full(3, 0.01), np.full(3, 1e-6), np.array([1e-3, 5e-4, 1e-3])]

    def fit(rows):
        return fit_curve(points_of(acid[rows], d[rows]), ph[rows], use[rows], u_ph=args[0][rows], u_acid=args[1][rows],
                         alkalinity=args[2][rows])
    together, alone = fit([0, 1, 2]), [fit([i]) for i in range(3)]
    for i in range(3):
        assert_allclose(together.alkalinity[i], alone[i].alkalinity[0], rtol=1e-9)
    assert together.converged.tolist() == [True, True, False]
    assert np.isnan(together.alkalinity[2])


def test_acid_in_excess_alone_in_sea_water():
    """Without CO2 the points past the end point give alkalinity and offset, with bisulfate and HF counted."""
    acid = np.linspace(2.6e-3, 3.6e-3, 12)
    d = 1.0 / (1.0 + acid / 0.1)
    salt = {acid_named(n): float(of_sea_salt(n, np.array([35.0]))[0]) for n in ("boron", "sulfate", "fluoride")}
    points = points_of(acid, d, salinity=35.0, strength=0.7, totals=salt, by_mass=True)
    ph = titration_curve(points, np.array([2.3e-3]), np.array([0.0])) - 0.06
    f = fit_curve(points, ph, np.ones(ph.shape, bool), u_ph=np.array([0.001]), u_acid=np.array([1e-8]),
                  alkalinity=np.array([2.2e-3]), carbon=False)
    assert_allclose([f.alkalinity[0], f.offset_ph[0]], [2.3e-3, -0.06], rtol=1e-6)
    assert f.carbon[0] == 0.0
