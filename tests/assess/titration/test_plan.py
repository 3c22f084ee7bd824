"""The plan of a titration: volumes and steps against a curve worked out by hand, verdicts, and settings that make no sense."""

import itertools

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose
from scipy.optimize import brentq
from titrations import curve

from aquabuf.assess.titration.plan import STRENGTHS, Setup, plan
from aquabuf.errors import InputError

HARD = {"alkalinity_eq_l": 2e-3, "strength_eq_l": 0.02, "t_c": 25.0, "ph": 7.6}
SOFT = {"alkalinity_eq_l": 1e-4, "strength_eq_l": 0.02, "device": "microburette", "t_c": 10.0, "ph": 6.6}
COUNTS = {"alkalinity_eq_l": 1e-3, "strength_eq_l": 0.16, "device": "counts", "t_c": 25.0, "ph": 7.2}
SETUPS = {"hard": HARD, "soft": SOFT, "counts": COUNTS}
SMALLEST_ML = {"burette": 0.01, "microburette": 0.001, "counts": 1.0 / 800.0}  # half a division, a microliter, a count


def by_hand(setup, volumes):
    """pH of the planned water at these volumes, its carbon from the first pH."""
    ionic = 1.5 * setup["alkalinity_eq_l"]
    carbon = BareWater(setup["t_c"], ionic).dic(setup["ph"], setup["alkalinity_eq_l"])
    return curve(volumes, alkalinity=setup["alkalinity_eq_l"], carbon=carbon, strength=setup["strength_eq_l"], t_c=setup["t_c"], ionic=ionic)


# ------------------------------------------------------------------ volumes

@pytest.mark.parametrize("name", SETUPS)
def test_volumes_to_each_ph(name):
    """Titrant to pH 8.3, the end points and the last point, against a second curve with printed constants."""
    setup = SETUPS[name]
    p = plan(Setup(**setup))
    for end, ml in p.volumes_ml.items():
        if end == "equivalence point":
            assert_allclose(ml, setup["alkalinity_eq_l"] * 100.0 / setup["strength_eq_l"], rtol=1e-12)
        elif end == 8.3:
            assert np.isnan(ml)  # both waters start below
        else:
            expected = brentq(lambda v, end=end: by_hand(setup, [v])[0] - end, 0.0, 20.0, xtol=1e-9)
            assert_allclose(ml, expected, rtol=3e-3, err_msg=str(end))


def test_volume_to_phenolphthalein():
    """A water of pH 9.2 needs acid to get to pH 8.3."""
    setup = HARD | {"ph": 9.2}
    ml = plan(Setup(**setup)).volumes_ml[8.3]
    assert_allclose(ml, brentq(lambda v: by_hand(setup, [v])[0] - 8.3, 0.0, 5.0), rtol=0.01)


@pytest.mark.parametrize(("ueq_l", "printed"), [(50.0, 5.35), (100.0, 5.19), (500.0, 4.83), (1000.0, 4.68), (2000.0, 4.53)])
def test_ph_of_the_equivalence_point(ueq_l, printed):
    """With as much carbon as alkalinity, pure CO2 is left: ideal values by hand (pK1 6.35), dilution and activity apart."""
    ph = brentq(lambda x: BareWater(25.0, 1.5e-6 * ueq_l).dic(x, ueq_l * 1e-6) - ueq_l * 1e-6, 6.0, 10.0)
    p = plan(Setup(alkalinity_eq_l=ueq_l * 1e-6, strength_eq_l=0.1, t_c=25.0, ph=ph))
    assert_allclose(p.end_ph, printed, rtol=0, atol=0.02)


def test_equilibrium_with_air_where_no_ph_is_given():
    """Carbon and pH of water at rest with air; at 25 °C and 2 meq/L by hand: CO2 is K0 times its pressure."""
    p = plan(Setup(alkalinity_eq_l=2e-3, t_c=25.0))
    water = BareWater(25.0, 3e-3)
    co2 = water.k0 * 425e-6 * (1.0 - 0.0313)  # vapor pressure of water at 25 °C: 3.17 kPa
    ph = water.ph_at_co2(2e-3, co2)
    assert_allclose(p.first_ph, ph, rtol=0, atol=0.01)
    assert_allclose(p.carbon_mol_l, water.dic(ph, 2e-3), rtol=2e-3)


@pytest.mark.parametrize(("mg_l", "level"), [(2.5, 4.9), (30.0, 4.9), (150.0, 4.6), (500.0, 4.3)])
def test_end_point_by_alkalinity(mg_l, level):
    """Standard methods: 4.9, 4.6 and 4.3 for 30, 150 and 500 mg/L as CaCO3."""
    p = plan(Setup(alkalinity_eq_l=mg_l / 50043.5, strength_eq_l=0.1))
    assert p.level_ph == level
    assert level in p.volumes_ml


def test_acid_water_has_no_equivalence_point_to_reach():
    """-50 µeq/L: negative, and what it still takes to pH 4.2 is there."""
    p = plan(Setup(alkalinity_eq_l=-5e-5, t_c=25.0))
    assert np.isnan(p.end_ph)
    assert p.volumes_ml["equivalence point"] < 0.0 < p.volumes_ml[4.2]
    assert np.isnan(p.volumes_ml[4.9])


# ------------------------------------------------------------------ steps and points

EVERY = list(itertools.product(STRENGTHS, (-1e-4, 2e-5, 4e-4, 3e-3, 2e-2), (25.0, 200.0), (None, 6.5, 10.5)))


def planned():
    """Plans of all devices, strengths, waters and volumes that make sense."""
    for device, alkalinity, volume, ph in EVERY:
        for strength in STRENGTHS[device]:
            try:
                yield plan(Setup(alkalinity_eq_l=alkalinity, sample_ml=volume, strength_eq_l=strength, device=device, ph=ph))
            except InputError:
                continue


@pytest.fixture(scope="module")
def plans():
    """All of them, worked out once."""
    made = list(planned())
    assert len(made) > 80
    return made


def test_steps_can_be_read(plans):
    """1, 2, 3 or 5 times a power of ten of the smallest reading, never below it: a digital titrator shows whole counts."""
    for p in plans:
        for step in p.steps_ml:
            shown = step / SMALLEST_ML[p.setup.device]
            assert_allclose(shown, round(shown), rtol=0, atol=1e-6)
            assert f"{shown:.0e}"[0] in "1235", shown
            assert_allclose(float(f"{shown:.0e}"), shown)


def test_points_of_a_plan(plans):
    """From no titrant on, each a whole number of readings further, down to pH 3.3, and never too many to do."""
    for p in plans:
        ml, ph = p.table["titrant_ml"].to_numpy(), p.table["ph"].to_numpy()
        shown = ml / SMALLEST_ML[p.setup.device]
        assert ml[0] == 0.0
        assert_allclose(shown, np.round(shown), rtol=0, atol=1e-3)
        assert (np.diff(ml) > 0.0).all()
        assert (np.diff(ph) < 0.0).all()
        assert ph[-1] <= 3.3 < ph[-2]
        assert len(ml) <= 60
        assert_allclose(p.table["titrant_counts"], 800.0 * ml)


def test_steps_suit_the_curve(plans):
    """Where strength and sample suit the device, no step passes far more than 0.3 pH near the end point, and five or more carry the line."""
    suited = [p for p in plans if not p.verdict.problem]
    assert len(suited) > 20
    for p in suited:
        ph = p.table["ph"].to_numpy()
        near = (ph[:-1] < 5.4) & (ph[1:] > 4.3)
        assert np.all(-np.diff(ph)[near] < 0.4), p.setup
        assert (ph < 4.3).sum() >= 5, p.setup


@pytest.mark.parametrize("name", SETUPS)
def test_ph_to_expect_at_each_point(name):
    """Against the curve by hand."""
    table = plan(Setup(**SETUPS[name])).table
    assert_allclose(table["ph"], by_hand(SETUPS[name], table["titrant_ml"]), rtol=0, atol=0.01)


def test_the_planned_titration_gives_the_water_back():
    """Assessed as if it had been done: the alkalinity that was expected, with the uncertainty to expect."""
    for setup, method in ((HARD, "fit"), (SOFT, "gran"), (COUNTS, "fit")):
        r = plan(Setup(**setup)).result.results.iloc[0]
        assert r["recommended_method"] == method
        assert abs(r["recommended_ueq_l"] - setup["alkalinity_eq_l"] * 1e6) < 1.645 * r["recommended_u_ueq_l"]
        assert 0.0 < r["recommended_u_ueq_l"] < 0.05 * setup["alkalinity_eq_l"] * 1e6
        assert r["warnings"] == ""


def test_sulfuric_acid_needs_more_of_it():
    """Its sulfate binds hydrogen ion again below pH 4; to pH 4.5 the same is needed within 1 %."""
    plain, sulfuric = (plan(Setup(**HARD, sulfuric=x)).volumes_ml for x in (False, True))
    assert sulfuric[3.3] > 1.003 * plain[3.3]
    assert_allclose(sulfuric[4.5], plain[4.5], rtol=0.01)


# ------------------------------------------------------------------ verdicts

VERDICTS = [
    (HARD, ""), (SOFT, ""), (COUNTS, ""),
    (SOFT | {"device": "burette"}, "too little titrant to the end point: its reading is too coarse"),  # 0.5 mL
    (HARD | {"alkalinity_eq_l": 6e-3}, "more titrant to the end point than the device holds well"),    # 30 mL
    (HARD | {"alkalinity_eq_l": 6e-3, "sample_ml": 50.0}, "the titrant would thin the sample by 23 %"),  # 15 of 65 mL
    (COUNTS | {"strength_eq_l": 1.6}, "too little titrant to the end point: its reading is too coarse"),  # 50 counts
]


@pytest.mark.parametrize(("setup", "problem"), VERDICTS, ids=[p[:20] or f"suits {s['strength_eq_l']}" for s, p in VERDICTS])
def test_verdict(setup, problem):
    """By titrant to the end point, worked out in the margin."""
    p = plan(Setup(**setup))
    assert p.verdict.problem == problem
    end = setup["alkalinity_eq_l"] * setup.get("sample_ml", 100.0) / setup["strength_eq_l"]
    assert_allclose([p.verdict.end_ml, p.verdict.dilution], [end, end / (end + setup.get("sample_ml", 100.0))], rtol=1e-12)
    assert bool(p.better) == bool(problem)


def test_better_choices_suit_and_are_nearest_first():
    """Each of them has no problem; the same sample volume comes before others, and the microburette is offered for dilute water."""
    p = plan(Setup(**SOFT | {"device": "burette"}))
    assert {v.problem for v in p.better} == {""}
    first = p.better[0].setup
    assert (first.device, first.sample_ml, first.strength_eq_l) == ("microburette", 100.0, 0.02)
    volumes = [v.setup.sample_ml for v in p.better]
    assert volumes.index(100.0) == 0
    assert volumes == sorted(volumes, key=lambda v: v != 100.0)


def test_nothing_better_for_a_water_that_no_strength_suits():
    """0.3 eq/L needs 75 mL of 0.1 eq/L for the smallest sample: no usual strength in a burette does."""
    p = plan(Setup(alkalinity_eq_l=0.3, strength_eq_l=1.0, ph=8.5))
    assert p.verdict.problem == "more titrant to the end point than the device holds well"
    assert p.better == ()


# ------------------------------------------------------------------ settings

WRONG = [
    ({"device": "spoon"}, r"the device must be one of burette, microburette, counts; found 'spoon'"),
    ({"alkalinity_eq_l": 1.0}, r"the expected alkalinity must be -0.01 to 0.5 eq/L; found 1. Check its unit"),
    ({"alkalinity_eq_l": float("nan")}, r"the expected alkalinity must be .* found nan"), ({"sample_ml": 0.5}, r"the sample volume must be 1 to 5000 mL; found 0.5"),
    ({"strength_eq_l": 21.0}, r"the strength must be 0.0001 to 20 eq/L; found 21"), ({"t_c": 68.0}, r"the temperature must be 0 to 50 °C; found 68"),
    ({"ph": 2.9}, r"the expected pH must be 3 to 12; found 2.9. Check its unit"),
]


@pytest.mark.parametrize(("more", "message"), WRONG, ids=[next(iter(w)) for w, _ in WRONG])
def test_settings_that_make_no_sense(more, message):
    """Rule, value and remedy."""
    with pytest.raises(InputError, match=message):
        Setup(**HARD | more)


def test_strength_too_near_the_alkalinity():
    """The sample would be thinned without end; the least strength is told."""
    with pytest.raises(InputError, match=r"the strength must be well above the alkalinity, at least 0.0078 eq/L here; found 0.005. Take stronger acid"):
        plan(Setup(alkalinity_eq_l=2e-3, strength_eq_l=0.005))


@pytest.mark.parametrize("setup", [{"alkalinity_eq_l": 5e-5, "ph": 11.0}, {"alkalinity_eq_l": -5e-5, "ph": 7.0}, {"alkalinity_eq_l": 1e-4, "ph": 3.5}], ids=str)
def test_pair_that_no_water_has(setup):
    """At pH 11 hydroxide alone is more than 50 µeq/L; 100 µeq/L at pH 3.5 would hold 0.3 mol/L of CO2."""
    with pytest.raises(InputError, match=r"no water has an alkalinity of -?\d+ µeq/L at pH .*. Leave the pH out, or correct one of them"):
        plan(Setup(**setup))


def test_alkalinity_that_no_water_at_rest_with_air_has():
    """No pH was given, so the message does not speak of one."""
    with pytest.raises(InputError, match=r"no water has an alkalinity of 400000 µeq/L in equilibrium with air. Correct the alkalinity or its unit"):
        plan(Setup(alkalinity_eq_l=0.4, strength_eq_l=2.0))
