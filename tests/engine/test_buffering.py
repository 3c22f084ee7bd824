"""Buffer intensity, its split, acid tolerance, weakest point and carrier: derivatives, integrals and hand-worked cases."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.integrate import quad

from aquabuf import Water
from aquabuf.chem.acids import acid_table

COMMON = {"t_c": 17.0, "phosphate_mol_l": 3e-4, "citrate_mol_l": 2e-4, "ammonium_mol_l": 4e-4, "sulfate_mol_l": 2e-3,
          "boron_mol_l": 1e-4, "acetate_mol_l": 5e-4}
REGIMES = [{"salinity": 0.0, "ionic_strength_mol_l": 0.02}, {"salinity": 30.0}]
IDS = ["fresh", "marine"]
PH = np.linspace(2.6, 11.9, 32)


@pytest.mark.parametrize("regime", REGIMES, ids=IDS)
@pytest.mark.parametrize("known", [{"dic_mol_l": 2e-3}, {"pco2_atm": 4e-4}], ids=["closed", "open"])
def test_buffer_intensity_is_the_slope_of_alkalinity(regime, known):
    """dC_base/dpH by five-point differences of the alkalinity of separate waters, a pH apart from each other: definition."""
    make = Water.from_ph_dic if "dic_mol_l" in known else Water.from_ph_pco2
    step = 1e-3

    def alkalinity(ph):
        return make(ph=ph, **known, **COMMON, **regime).alkalinity_eq_l

    slope = (8.0 * (alkalinity(PH + step) - alkalinity(PH - step))
             - (alkalinity(PH + 2 * step) - alkalinity(PH - 2 * step))) / (12.0 * step)
    water = make(ph=PH, **known, **COMMON, **regime)
    analytic = water.buffer_intensity_eq_l("closed" if "dic_mol_l" in known else "open")
    assert_allclose(analytic, slope, rtol=2e-8)


@pytest.mark.parametrize("regime", REGIMES, ids=IDS)
def test_split_adds_up(regime):
    """The pairs and the water itself are the whole, also for acids with overlapping steps (citric)."""
    water = Water.from_ph_dic(ph=PH, dic_mol_l=2e-3, **COMMON, **regime)
    shares = water.buffer_by_pair()

    assert_allclose(sum(shares.values()), water.buffer_intensity_eq_l(), rtol=1e-12)
    assert all((v >= 0.0).all() for v in shares.values())
    assert set(shares) >= {"CO2/HCO3-", "HCO3-/CO3--", "NH4+/NH3", "H2Cit-/HCit--", "H+ itself", "OH- itself"}


def test_split_of_distant_steps_is_that_of_single_acids():
    """Phosphoric steps lie 5 units apart: each carries ln10 C x (1 - x) of its own pair (Van Slyke 1922) within 1e-4."""
    acid = acid_table()["phosphate"]
    water = Water.from_ph_dic(ph=np.array([2.1, 7.2, 12.3]), dic_mol_l=0.0, phosphate_mol_l=1e-3, t_c=25.0,
                              ionic_strength_mol_l=0.0)
    for row, (pk, label) in enumerate(zip(acid.pk, acid.pairs, strict=True)):
        x = 1.0 / (1.0 + 10.0 ** (pk - water.ph[row]))
        assert_allclose(water.buffer_by_pair()[label][row], np.log(10.0) * 1e-3 * x * (1.0 - x), rtol=1e-4)


def test_cross_terms_are_shared_evenly():
    """Symmetry: halfway between pK1 and pK2 of carbonic acid both pairs carry the same, half the variance each."""
    water = Water.from_ph_dic(ph=0.5 * (6.35186 + 10.32885), dic_mol_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.0)
    shares = water.buffer_by_pair()
    assert_allclose(shares["CO2/HCO3-"], shares["HCO3-/CO3--"], rtol=1e-4)


@pytest.mark.parametrize("regime", REGIMES, ids=IDS)
@pytest.mark.parametrize("exchange", ["closed", "open"])
@pytest.mark.parametrize("target", [4.5, 6.0, 9.5])
def test_acid_to_ph_lands_there_and_is_the_integral(regime, exchange, target):
    """The dose brings the water to the pH, and equals the integral of buffer intensity over the pH passed."""
    water = Water.from_ph_dic(ph=7.6, dic_mol_l=2e-3, **COMMON, **regime)
    dose = water.acid_to_ph_eq_l(target, exchange)
    after = water.after_acid(dose, exchange)

    def intensity(ph):
        if exchange == "closed":
            return float(Water.from_ph_dic(ph=ph, dic_mol_l=2e-3, **COMMON, **regime).buffer_intensity_eq_l())
        held = Water.from_ph_pco2(ph=ph, pco2_atm=water.pco2_atm, **COMMON, **regime)
        return float(held.buffer_intensity_eq_l("open"))

    assert_allclose(after.ph, target, rtol=0, atol=1e-9)
    assert_allclose(dose, quad(intensity, target, 7.6, epsrel=1e-9)[0], rtol=1e-7)
    assert_allclose(water.base_to_ph_eq_l(target, exchange), -dose, rtol=0, atol=0)


def test_open_tolerance_is_the_alkalinity_left_at_the_carbonic_endpoint():
    """Hand-worked: at 1e-3 atm and pH 5, KH K1 P/h = 1.51e-3 H+... so alkalinity left is HCO3- less H+ (I = 0, 25 °C)."""
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=2e-3, pco2_atm=1e-3, t_c=25.0, ionic_strength_mol_l=0.0)
    left = (10.0**-1.46794 * 0.99681 * 10.0**-6.35186 * 1e-3 / 1e-5 - 1e-5) * 0.99705
    assert_allclose(water.acid_to_ph_eq_l(5.0, "open"), 2e-3 - left, rtol=1e-6)


def test_open_tolerance_at_another_pressure():
    """Aerated to 4e-4 atm first: the dose is alkalinity less that of water at the pH under that pressure."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1.5e-3, t_c=10.0)
    dose = water.acid_to_ph_eq_l(5.6, "open", pco2_atm=4e-4)
    assert_allclose(water.after_acid(dose, "open", pco2_atm=4e-4).ph, 5.6, rtol=0, atol=1e-9)
    assert_allclose(water.after_acid(dose, "open", pco2_atm=4e-4).pco2_atm, 4e-4, rtol=1e-12)


def test_after_acid_and_its_reverse_cancel():
    """A dose and its reverse leave the water as it was, alkalinity falls by the dose and carbon stays (conservation)."""
    water = Water.from_ph_dic(ph=[5.0, 7.0, 9.0], dic_mol_l=2e-3, **COMMON)
    acid = water.after_acid(3e-4)
    assert_allclose(acid.alkalinity_eq_l, water.alkalinity_eq_l - 3e-4, rtol=0, atol=1e-18)
    assert_allclose(acid.dic_mol_l, 2e-3, rtol=1e-15)
    assert (acid.ph < water.ph).all()
    assert_allclose(acid.after_acid(-3e-4).ph, water.ph, rtol=0, atol=1e-9)


@pytest.mark.parametrize("regime", REGIMES, ids=IDS)
@pytest.mark.parametrize("exchange", ["closed", "open"])
def test_curve_points_are_the_single_answers(regime, exchange):
    """Each point of the curve is the dose to that pH and the slope there; shape is rows by points."""
    water = Water.from_ph_dic(ph=[[7.0], [8.0]], dic_mol_l=2e-3, **COMMON, **regime)
    points = np.array([4.0, 6.5, 9.0])
    added, intensity = water.curve(points, exchange)
    assert added.shape == intensity.shape == (2, 1, 3)
    for j, ph in enumerate(points):
        assert_allclose(added[..., j], water.acid_to_ph_eq_l(ph, exchange), rtol=1e-13)
        there = water.after_acid(added[..., j], exchange)
        assert_allclose(intensity[..., j], there.buffer_intensity_eq_l(exchange), rtol=1e-7)


@pytest.mark.parametrize("regime", REGIMES, ids=IDS)
def test_weakest_point_is_the_next_valley(regime):
    """Dense grid (0.001 pH) of buffer intensity: downhill from the sample to the first point where it turns."""
    grid = np.arange(2.5, 12.0, 0.001)
    start = np.array([3.5, 4.4, 5.2, 6.0, 6.7, 7.6, 8.3, 9.0, 9.9, 10.8])
    beta = Water.from_ph_dic(ph=grid, dic_mol_l=2e-3, **COMMON, **regime).buffer_intensity_eq_l()
    found = Water.from_ph_dic(ph=start, dic_mol_l=2e-3, **COMMON, **regime).weakest_buffering()
    for ph, bottom, intensity, distance in zip(start, found.ph, found.intensity, found.distance, strict=True):
        i = int(np.argmin(np.abs(grid - ph)))
        way = -1 if beta[i - 1] < beta[i + 1] else 1
        while 0 < i < grid.size - 1 and beta[i + way] < beta[i]:
            i += way
        if i in (0, grid.size - 1):
            assert np.isnan(bottom)
        else:
            assert_allclose(bottom, grid[i], rtol=0, atol=0.0015)
            assert_allclose(intensity, beta[i], rtol=1e-5)
            assert_allclose(distance, bottom - ph, rtol=0, atol=1e-12)


def test_carrier_by_hand():
    """Which pair has the most ln10 C x (1 - x): plain cases, worked by hand at I = 0, 25 °C, each pair 1 mM."""
    water = Water.from_ph_dic(
        ph=[2.5, 4.756, 6.352, 9.245, 12.5], dic_mol_l=1e-3, acetate_mol_l=1e-3, ammonium_mol_l=1e-3, t_c=25.0,
        ionic_strength_mol_l=0.0)
    found = water.carrier()
    assert_array_equal(found.label, ["H+ itself", "CH3COOH/CH3COO-", "CO2/HCO3-", "NH4+/NH3", "OH- itself"])
    assert_array_equal(found.in_range, [False, True, True, True, False])
    assert_allclose(found.pka[1:4], [4.756, 6.352, 9.245], rtol=0, atol=0.001)
    assert_allclose(found.base_acid_ratio[1:4], 1.0, rtol=0, atol=0.001)
    assert np.isnan(found.acid_left[[0, 4]]).all()
    assert (found.share[1:4] > 0.5).all()


def test_base_to_acid_ratio_of_the_carrier():
    """Henderson-Hasselbalch: half a unit above pKa there is 10^0.5 times more base than acid."""
    water = Water.from_ph_dic(ph=[5.256, 4.256], dic_mol_l=0.0, acetate_mol_l=1e-2, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(water.carrier().base_acid_ratio, [10.0**0.5, 10.0**-0.5], rtol=1e-9)


def test_what_is_left_of_the_carrier_by_hand():
    """Acetate 10 mM alone at pH = pKa: acid to pKa - 1 takes 1/2 - 1/11 = 9/22 of it, and the change of free H+."""
    water = Water.from_ph_dic(ph=4.756, dic_mol_l=0.0, acetate_mol_l=1e-2, t_c=25.0, ionic_strength_mol_l=0.0)
    found, rho = water.carrier(), 0.99705
    hydrogen = rho * (10.0**-3.756 - 10.0**-4.756), rho * (10.0**-4.756 - 10.0**-5.756)
    assert_allclose(found.acid_left, 1e-2 * 9 / 22 + hydrogen[0], rtol=1e-5)
    assert_allclose(found.base_left, 1e-2 * 9 / 22 + hydrogen[1], rtol=1e-5)


def test_effective_range_is_pka_and_one_unit():
    """pKa ± 1: base to acid 1:10 to 1:10; the edges are counted in, half a unit beyond is not."""
    water = Water.from_ph_dic(ph=[3.2, 3.757, 5.755, 6.3], dic_mol_l=0.0, acetate_mol_l=1e-2, t_c=25.0,
                              ionic_strength_mol_l=0.0)
    low, high, inside = water.effective_ranges()["CH3COOH/CH3COO-"]
    assert_allclose([low[0], high[0]], [3.756, 5.756], rtol=0, atol=1e-9)
    assert_array_equal(inside, [False, True, True, False])
    assert "H+ itself" not in water.effective_ranges()


def test_meter_pka_carries_the_activity_coefficients():
    """pKa' of acetic acid on the meter scale at I = 0.1 is 4.756 + log gamma1 - 0.01 (Davies by hand: -0.1072)."""
    water = Water.from_ph_dic(ph=4.7, dic_mol_l=0.0, acetate_mol_l=1e-2, t_c=25.0, ionic_strength_mol_l=0.1)
    low, _, _ = water.effective_ranges()["CH3COOH/CH3COO-"]
    assert_allclose(low + 1.0, 4.756 - 0.1072 - 0.01, rtol=0, atol=2e-4)


def test_meter_pka_in_sea_water():
    """On the meter scale pK1 is the printed 5.8401 (seawater scale, Millero et al. 2006) + 0.147 (Takahashi, recalled)."""
    water = Water.from_ph_dic(ph=[6.0], dic_mol_l=2e-3, t_c=25.0, salinity=35.0)
    low, high, inside = water.effective_ranges()["CO2/HCO3-"]
    assert_allclose([low, high], [[5.8401 + 0.1467 - 1.0], [5.8401 + 0.1467 + 1.0]], rtol=0, atol=3e-4)
    assert inside.all()
    carrier = water.carrier()
    assert_allclose(carrier.pka, low + 1.0, rtol=0, atol=1e-12)
    assert_allclose(carrier.acid_left, water.acid_to_ph_eq_l(float(low[0])), rtol=1e-9)
