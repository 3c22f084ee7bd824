"""Every finding is made by a titration that has the fault, with its value and its point, and by no sound one."""

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from titrations import acid_steps, assessed, dilute, found, hard, row, sample, steps

from aquabuf.assess.titration.findings import finding_facts

ADDED = steps(4.0)  # of `hard`: 2 meq/L, 4 mL of 0.05 eq/L in 100 mL; 27 points in rows 2 to 28


def moved(one, at, by):
    """One reading misread by so much pH."""
    ph = np.array(one["ph"])
    ph[at] += by
    return one | {"ph": ph}


def swapped(one, at):
    """A reading and the next in each other's place."""
    ph = np.array(one["ph"])
    ph[[at, at + 1]] = ph[[at + 1, at]]
    return one | {"ph": ph}


def repeated(one, at, by):
    """One volume read twice: first `by` higher, then as it is."""
    return one | {"added": np.insert(one["added"], at, one["added"][at]), "ph": np.insert(one["ph"], at, one["ph"][at] + by)}


def millivolts(one, slope):
    """Read by an electrode of this slope, and calibrated with two standards."""
    rest = {name: value for name, value in one.items() if name != "ph"}
    return rest | {"potential_mv": 400.0 - slope * one["ph"], "standard_1_ph": 7.0, "standard_1_mv": 400.0 - 7.0 * slope,
                   "standard_2_ph": 4.0, "standard_2_mv": 400.0 - 4.0 * slope}


WEAK = sample(acid_steps(9e-4, alkalinity=1e-4, count=40), alkalinity=1e-4, carbon=1.3e-4, strength=0.02, acids=((1.5e-4, 3.6),))
UNSEEN = sample(acid_steps(9e-4, alkalinity=2e-4, count=40), alkalinity=2e-4, carbon=1.3e-4, strength=0.02, acids=((1e-4, 4.6),))
BASE = sample(np.linspace(0.0, 3.0, 31), alkalinity=-1e-3, carbon=3e-4, strength=-0.05, scatter=0.008)
BENT = sample(acid_steps(9e-4, alkalinity=3e-4, count=60), alkalinity=3e-4, carbon=3.5e-4, strength=0.02, acids=((4e-4, 4.0),), ph_scatter=0.001,
              titrant_scatter_ml=1e-4)
COARSE = sample([0.0, 1.0, 2.0, 3.0, 3.5, 3.8, 4.6, 5.0, 5.5], alkalinity=2e-3, carbon=2.2e-3)
LAKE = sample(acid_steps(6e-4, alkalinity=-2e-5), alkalinity=-2e-5, carbon=3e-5, strength=0.02)
DILUTED = sample(steps(40.0), alkalinity=4e-3, carbon=4.2e-3, strength=0.01)

# name: a titration that has the fault, least and greatest value it must have, row of its point in the file (2 is the first)
CASES = {
    "wrong way": (BASE | {"titrant_kind": "acid"}, 6.5, 7.5, None),                       # pH 3.0 to 10
    "running total": (hard() | {"added": np.full(27, 0.2)}, 27.0, 27.0, None),
    "strength doubtful": (hard(titrant_strength_eq_l=0.5), 0.095, 0.105, None),           # 0.05 over 0.5
    "Gran slope": (hard(titrant_strength_eq_l=0.06), 0.80, 0.85, None),                   # 0.05 over 0.06
    "outside usual": (sample(steps(0.0666), alkalinity=2e-3, carbon=2.2e-3, strength=3.0), 1.0, 1.0, None),  # 3 eq/L
    "alkalinity against conductivity": (hard(conductivity_us_cm=120.0), 16.4, 16.8, None),  # 2000 over 120
    "temperature missing": (hard(temperature_c=np.nan), None, None, None),
    "few points": (sample([0.0, 3.6, 4.2, 4.6], alkalinity=2e-3, carbon=2.2e-3), 4.0, 4.0, None),
    "stops too soon": (hard() | {name: hard()[name][:-9] for name in ("added", "ph")}, 4.0, 4.5, None),
    "coarse end point": (COARSE, 1.4, 1.6, None),
    "pH turns back": (moved(hard(), 5, 0.5), 0.3, 0.5, 7),
    "points swapped": (swapped(hard(), 12), 0.1, 0.2, 14),
    "point off the curve": (moved(hard(), 5, -0.14), 0.12, 0.14, 7),
    "drift": (repeated(hard(), 8, 0.05), 0.0499, 0.0501, None),
    "slow titration": (hard(minutes=np.linspace(0.0, 25.0, 27)), 25.0, 25.0, None),
    "dilution": (DILUTED, 28.0, 29.0, None),                                              # about 40 of 140 mL
    "curved Gran line": (BENT, 1.0, 1e3, None),
    "metals take part": (hard(aluminum_mol_l=1e-4), 14.9, 15.2, None),                    # 0.3 of 2 meq/L
    "choice of points matters": (WEAK, 5.0, 30.0, None),
    "fit is poor": (moved(hard(), 5, 0.5), 10.0, 1e4, None),
    "carbon dioxide lost": (sample(ADDED, alkalinity=2e-3, carbon=2e-3 + 1.5e-3 * np.exp(-2.0 * ADDED)), 15.0, 43.0, None),  # 1.5 of 3.5
    "carbon differs": (hard(dic_mol_l=3e-3), -27.0, -26.0, None),                         # 2.2 against 3.0
    "electrode offset": (hard(offset=0.15), 0.145, 0.155, None),
    "electrode slope": (millivolts(hard(), 54.0), 91.0, 91.5, None),                      # 54 over 59.16
    "methods disagree": (UNSEEN, 3.5, 1e3, None),
    "end point hides acid": (LAKE, 10.0, 14.0, None),                                     # -20 and 32 of free acid
    "own method unfit": (dilute(own_method="inflection"), None, None, None),
}
SOUND = {
    "hard": hard(scatter=0.008), "dilute": dilute(scatter=0.008, conductivity_us_cm=14.0),
    "at 10 °C": sample(ADDED, alkalinity=2e-3, carbon=2.2e-3, t_c=10.0, scatter=0.008, conductivity_us_cm=210.0),
    "above pH 8.3": sample(ADDED, alkalinity=2e-3, carbon=1.9e-3, scatter=0.008),
    "acid lake": sample(acid_steps(6e-4, alkalinity=-2e-4), alkalinity=-2e-4, carbon=3e-5, strength=0.02, scatter=0.005),
    "base": BASE,
    "swept out": sample(acid_steps(1.5e-3, alkalinity=2e-3, strength=0.05), alkalinity=2e-3, carbon=0.0, exchange="purged", scatter=0.008),
    "millivolts": millivolts(hard(scatter=0.008), 58.5),
    "no standards": {name: v for name, v in millivolts(hard(scatter=0.008), 59.16).items() if not name.startswith("standard")},
    "own method": hard(own_method="inflection", scatter=0.004), "carbon measured": hard(dic_mol_l=2.2e-3, dic_u_mol_l=5e-5),
    "read twice": repeated(hard(), 8, 0.015), "quick": hard(minutes=np.linspace(0.0, 9.5, 27)),
}


@pytest.fixture(scope="module")
def sound():
    """The sound ones, assessed together; every one has a result."""
    a = assessed(*(one | {"sample_id": name} for name, one in SOUND.items()))
    assert a.results["recommended_ueq_l"].notna().all()
    return a.findings


def test_every_finding_has_a_titration_that_makes_it():
    """The guard of this table: a new finding needs a case."""
    assert list(CASES) == list(finding_facts())


@pytest.mark.parametrize("name", CASES)
def test_finding(name):
    """The fault is found, with its value and the row of its point, in the words of the table."""
    one, low, high, point = CASES[name]
    findings = found(one)
    assert name in findings.index
    f, facts = findings.loc[name], finding_facts()[name]
    assert np.isnan(f["value"]) if low is None else low <= f["value"] <= high
    assert f["point_row"] is pd.NA if point is None else f["point_row"] == point
    assert f["unit"] == {"µeq": "µeq/L"}.get(facts["unit"], facts["unit"])  # of a sample by volume
    assert (f["words"], f["remedy"]) == (facts["words"], facts["remedy"])
    assert f["source"] == facts["source"] + (" (recalled)" if facts["mark"] == "recalled" else "")
    assert name in row(one)["warnings"].split("; ")


@pytest.mark.parametrize("name", SOUND)
def test_sound_titration_has_no_finding(sound, name):
    """None of all findings: a warning that cries at sound work is no warning."""
    mine = sound[sound["sample_id"] == name]
    assert mine[["finding", "value", "more"]].values.tolist() == []


def test_base_titration_of_neutral_water_is_sound():
    """It has no acid end to reach and no alkalinity to find: nothing to warn of."""
    a = assessed(sample(np.linspace(0.0, 1.6, 17), alkalinity=1e-3, carbon=1.5e-3, strength=-0.05, scatter=0.005))
    assert (a.results["status"].tolist(), a.findings["finding"].tolist()) == (["ok"], [])


@pytest.mark.parametrize(("name", "limit"), [("strength doubtful", "0.3 to 3"), ("few points", "at least 5"), ("dilution", "at most 20"),
                                             ("electrode slope", "95 to 102"), ("points swapped", "")])
def test_limits_in_words(name, limit):
    """Both, one, or none where the words say it."""
    assert found(CASES[name][0]).loc[name, "limit"] == limit


def test_every_finding_says_what_to_do_and_where_it_comes_from():
    """No row of the table without words, remedy, mark and source; what has no source says so."""
    for name, facts in finding_facts().items():
        assert all(facts[key] for key in ("words", "remedy", "source")), name
        assert facts["mark"] in ("printed", "derived", "practice", "recalled"), name
        assert facts["mark"] != "practice" or "common practice" in facts["source"] or "theory" in facts["source"], name


# ------------------------------------------------------------------ which point, and what more is said

@pytest.mark.parametrize("by", [0.5, -0.5])
@pytest.mark.parametrize("at", [3, 5, 18])
def test_turned_reading_is_the_one_that_was_misread(at, by):
    """Too high or too low: the row named is that of the slip, not of its sound neighbor."""
    f = found(moved(hard(), at, by))
    assert f.loc["pH turns back", "point_row"] == at + 2
    assert "points swapped" not in f.index


@pytest.mark.parametrize(("rise", "turned"), [(0.07, True), (0.05, False)])
def test_a_turn_is_more_than_scatter(rise, turned):
    """Four times the scatter of a difference, 0.057 at 0.01 each."""
    one = hard()
    names = set(found(moved(one, 24, one["ph"][23] - one["ph"][24] + rise)).index)
    assert bool(names & {"pH turns back", "points swapped"}) == turned


def test_small_errors_of_slope_are_seen_by_good_instruments():
    """Strength 8 % off, electrode known to 0.005 and strength to 0.02 %: free acid rises by 0.98/1.08, which is told."""
    exact = {"ph_u": 0.005, "titrant_strength_u_eq_l": 1e-5}
    assert "Gran slope" in found(hard(titrant_strength_eq_l=0.054, **exact)).index
    assert "Gran slope" not in found(hard(titrant_strength_eq_l=0.054)).index
    assert "Gran slope" not in found(hard(**exact)).index


def test_wrong_standards_make_an_offset_and_none_make_none():
    """Standards of pH 7.15 and 4.15 taken for 7 and 4: every pH is 0.15 low; without standards there is nothing to be off."""
    one = millivolts(hard(), 59.16)
    off = {name: v + (59.16 * 0.15 if name.endswith("_mv") else 0.0) if name.startswith("standard") else v for name, v in one.items()}
    assert_allclose(found(off).loc["electrode offset", "value"], 0.15, rtol=0, atol=0.01)
    assert "electrode offset" not in found({name: v for name, v in one.items() if not name.startswith("standard")}).index


@pytest.mark.parametrize("at", [4, 9, 14, 22])
def test_swapped_pair_is_told_from_a_jump(at):
    """The first of the two rows; a swap is no turn."""
    f = found(swapped(moved(hard(), at, 0.06), at))
    assert f.loc["points swapped", "point_row"] == at + 2
    assert "pH turns back" not in f.index


def test_a_base_titration_turns_the_other_way():
    """There pH rises; a fall is the turn."""
    assert found(moved(BASE, 10, -0.5)).loc["pH turns back", "point_row"] == 12


def test_more_words_where_the_table_cannot_know_them():
    """Which strength would fit, which two methods differ and by how much, why the user's own cannot work."""
    assert found(CASES["strength doubtful"][0]).loc["strength doubtful", "more"].endswith(" eq/L would; correct the strength or its unit")
    r = row(UNSEEN)
    assert found(UNSEEN).loc["methods disagree", "more"] == f"Gran line {r['gran_ueq_l']:.1f}, fit {r['fit_ueq_l']:.1f} µeq/L"
    assert found(CASES["own method unfit"][0]).loc["own method unfit", "more"] == "not below pH 7, 400 µeq/L or 100 µS/cm, or with organic acids"


def test_a_doubtful_strength_is_told_without_what_follows_from_it():
    """A curve ten times too long fits nothing; to send the user to single points would lead astray."""
    assert list(found(hard(titrant_strength_eq_l=0.5, scatter=0.01)).index) == ["strength doubtful"]


def water(alkalinity, *, stated=1.0, offset=0.0, seed=1):
    """A titration to 0.6 meq/L past the end point, read to 0.01 with that scatter; strength stated wrong, or electrode off."""
    strength = 0.02 if alkalinity < 1e-3 else 0.05
    one = sample(acid_steps(6e-4, alkalinity=alkalinity, strength=strength), alkalinity=alkalinity, carbon=1.1 * alkalinity + 2e-5, strength=strength,
                 offset=offset, scatter=0.01, seed=seed)
    return one | {"ph": np.round(one["ph"], 2), "titrant_strength_eq_l": strength * stated}


ELECTRODE, STRENGTH, UNTOLD = "the bicarbonate part of the curve shows the same electrode offset (", "the bicarbonate part of the curve finds the electrode right: ", \
    "the curve cannot tell which; "
SLOPES = [
    (hard(titrant_strength_eq_l=0.06, doc_mg_l=20.0), "organic acids bind acid along the line and lower its slope; "),
    (hard(titrant_strength_eq_l=0.03, doc_mg_l=20.0), STRENGTH),  # they never raise it
    (water(3e-5, stated=1.3), UNTOLD), (water(3e-5, offset=0.114), UNTOLD),  # too little bicarbonate
    *((water(a, stated=n), STRENGTH) for a in (1e-4, 3e-4, 2e-3) for n in (2.0, 0.5)), *((water(a, offset=d), ELECTRODE) for a in (1e-4, 3e-4, 2e-3) for d in (0.3, -0.3)),
]


@pytest.mark.parametrize(("one", "words"), SLOPES, ids=[f"{i} {words[:30]}" for i, (_, words) in enumerate(SLOPES)])
def test_what_a_slope_off_theory_may_mean(one, words):
    """Organic acids; strength or electrode, whichever the rest of the curve sides with, in dilute water too; or not to be told."""
    assert found(one).loc["Gran slope", "more"].startswith(words)


def test_strength_and_electrode_are_never_taken_for_each_other():
    """Sixty noisy titrations of dilute water: a wrong strength is not called an electrode that is off, nor the reverse."""
    fault = [{"stated": 1.3}, {"stated": 1.0 / 1.3}, {"offset": 0.114}, {"offset": -0.114}] * 15
    crowd = [water(1e-4, **more, seed=i) | {"sample_id": f"{next(iter(more))} {i}"} for i, more in enumerate(fault)]
    findings = assessed(*crowd).findings
    slopes = findings[findings["finding"] == "Gran slope"]
    assert len(slopes) > 55
    of_strength = slopes["sample_id"].str.startswith("stated")
    assert not slopes[of_strength]["more"].str.startswith(ELECTRODE).any()
    assert not slopes[~of_strength]["more"].str.startswith(STRENGTH).any()
    assert slopes[of_strength]["more"].str.startswith(STRENGTH).mean() > 0.7
    assert slopes[~of_strength]["more"].str.startswith(ELECTRODE).mean() > 0.7


# ------------------------------------------------------------------ limits from both sides

@pytest.mark.parametrize(("one", "name"), [
    (hard(conductivity_us_cm=150.0), "alkalinity against conductivity"), (repeated(hard(), 8, 0.019), "drift"),
    (hard(minutes=np.linspace(0.0, 10.0, 27)), "slow titration"), (hard(offset=0.08), "electrode offset"), (millivolts(hard(), 57.0), "electrode slope"),
    (sample([0.0, 2.0, 3.8, 4.2, 4.6], alkalinity=2e-3, carbon=2.2e-3), "few points"), (hard(titrant_strength_eq_l=0.052), "Gran slope"),
    (hard(minutes=np.linspace(0.0, 25.0, 27), exchange="purged"), "slow titration"), (moved(hard(), 5, 0.05), "point off the curve"),
    (hard(dic_mol_l=2.3e-3), "carbon differs"), (hard(aluminum_mol_l=6e-5), "metals take part"), (hard(own_method="fit"), "own method unfit")], ids=lambda x: x if isinstance(x, str) else "")
def test_just_inside_a_limit(one, name):
    """The same fault, but small enough."""
    assert name not in found(one).index


def test_drift_of_potentials_is_counted_in_ph():
    """3 mV between two readings at one volume are 0.05 pH."""
    one = millivolts(hard(), 59.16)
    twice = {"added": np.insert(one["added"], 8, one["added"][8]), "potential_mv": np.insert(one["potential_mv"], 8, one["potential_mv"][8] - 3.0)}
    assert_allclose(found(one | twice).loc["drift", "value"], 3.0 / 59.16, rtol=1e-4)


def test_findings_stand_in_the_order_of_samples_and_of_the_table():
    """Sample by sample, with the row of each in the file of points."""
    a = assessed(moved(hard(), 5, 0.5) | {"sample_id": "a"}, hard() | {"sample_id": "b"}, LAKE | {"sample_id": "c"})
    assert a.findings["sample_id"].tolist() == ["a", "a", "a", "c"]
    assert a.findings["finding"].tolist() == ["pH turns back", "point off the curve", "fit is poor", "end point hides acid"]
    assert a.findings["row"].tolist() == [2, 2, 2, 2 + 27 + 27]


def test_no_findings_is_an_empty_table_with_its_columns():
    """For those who read it by program."""
    table = assessed(hard()).findings
    assert len(table) == 0
    assert list(table) == ["sample_id", "row", "point_row", "finding", "value", "unit", "limit", "words", "more", "remedy", "source"]
