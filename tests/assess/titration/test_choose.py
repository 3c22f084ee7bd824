"""Which method is recommended, by the kind of water and by what each method can do; every reason in words."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq
from titrations import acid_steps, assessed, curve, dilute, hard, results, row, sample, steps

from aquabuf.assess.titration.choose import DILUTE_BELOW_EQ, method_facts

LINE = "Gran line: free acid past the end point, extrapolated to none; needs no end-point pH and does not mind an electrode that is off"


def chosen(one):
    """Method and reason of one titration."""
    r = row(one)
    return r["recommended_method"], r["recommended_reason"]


def cut(one, *, above=-1.0, below=99.0):
    """The titration with only those readings that lie between two pH."""
    keep = (one["ph"] > above) & (one["ph"] < below)
    return one | {"added": one["added"][keep], "ph": one["ph"][keep]}


# ------------------------------------------------------------------ kinds of water

KINDS = {
    "ordinary": (hard(), "fit", "ordinary fresh water; fit of the whole curve: "),
    "alkalinity": (dilute(), "gran", r"dilute or acid water \(alkalinity about \d+ µeq/L, below 400\); Gran line: "),
    "conductivity": (hard(conductivity_us_cm=90.0), "gran", r"dilute or acid water \(conductivity 90 µS/cm, below 100\); Gran line: "),
    "first pH": (sample(steps(1.6), alkalinity=8e-4, carbon=1.12e-3), "gran", r"dilute or acid water \(pH 6.\d\d at the start, below 7\); Gran line: "),
    "organic carbon": (hard(doc_mg_l=25.0), "gran", r"dilute or acid water \(organic carbon 25 mg/L\); Gran line: "),
    "wastewater": (hard(water_kind="wastewater"), "fixed_4_5", r"waste water \(water_kind wastewater\); end point at pH 4.5: "),
    "salt, CO2 swept out": (sample(acid_steps(1.5e-3, alkalinity=2e-3, strength=0.1), alkalinity=2e-3, carbon=0.0, strength=0.1,
                                   exchange="purged", salinity=1.0), "acid_excess", r"salt water \(salinity 1\); acid in excess after CO2 was swept out: "),
}


@pytest.mark.parametrize("name", KINDS)
def test_kind_of_water_decides(name):
    """Each kind, and each cause for which water counts as dilute, leads to its method and says why."""
    one, method, reason = KINDS[name]
    found = chosen(one)
    assert found[0] == method
    assert re.match(reason, found[1]), found[1]


def test_hard_groundwater_is_not_dilute_for_its_carbon_dioxide():
    """Below pH 7 by its CO2 alone; yet the inflection, which the field manual forbids there, stays out."""
    r = row(sample(steps(4.0), alkalinity=2e-3, carbon=2.8e-3))
    assert r["first_ph"] < 7.0
    assert r["recommended_reason"].startswith("ordinary fresh water; fit of the whole curve: ")
    assert r["inflection_status"] == "not below pH 7, 400 µeq/L or 100 µS/cm, or with organic acids"


@pytest.mark.parametrize("facts", [{"doc_mg_l": 15.0}, {"conductivity_us_cm": 110.0}, {"salinity": 0.9}, {"water_kind": "stream"}], ids=str)
def test_just_not_another_kind(facts):
    """2 meq/L with 150 µeq/L of organic sites (7 %), 110 µS/cm or a salinity below 1 is ordinary fresh water."""
    assert chosen(hard(**facts))[1].startswith("ordinary fresh water; ")


def test_four_hundred_microequivalents_are_the_border():
    """The limit of the field manual, from both sides."""
    assert DILUTE_BELOW_EQ == 4e-4
    by = {a: row(sample(steps(a * 2000.0), alkalinity=a, carbon=1.05 * a)) for a in (3.8e-4, 4.2e-4)}
    assert [r["recommended_reason"].split(" (")[0].split(";")[0] for r in by.values()] == ["dilute or acid water", "ordinary fresh water"]


def test_salt_comes_before_waste_and_waste_before_dilute():
    """A sewage works at the coast has salt water; brown waste water is waste water."""
    assert chosen(hard(water_kind="wastewater", salinity=5.0))[1].startswith("salt water (salinity 5)")
    assert chosen(dilute(water_kind="wastewater"))[1].startswith("waste water (water_kind wastewater)")


def test_every_water_names_methods_that_exist():
    """The order of each kind of water is made of the methods of the table."""
    for name, facts in method_facts("water").items():
        assert set(facts["order"].split(";")) <= set(method_facts("method")), name


# ------------------------------------------------------------------ a preferred method that cannot work

def test_fit_is_passed_over_where_the_curve_starts_late():
    """Readings from pH 5 down leave the fit out; the Gran line comes next, and the reason tells both."""
    method, reason = chosen(cut(hard(), below=5.1))
    assert method == "gran"
    assert reason.startswith(f"ordinary fresh water; {LINE}; ")
    assert reason.endswith("; fit of the whole curve cannot be used: needs two points below pH 4.5 and two above 5.2 to tell carbon from alkalinity")


SHORT = sample([0.0, 3.72, 3.8, 3.88, 3.95, 4.1, 4.18], alkalinity=2e-3, carbon=2.2e-3)  # two readings below pH 4.6, two above 5.1


def test_inflection_where_the_curve_stops_at_the_end_point():
    """Neither fit nor Gran line has its points, but the inflection is seen."""
    method, reason = chosen(SHORT)
    assert method == "inflection"
    assert f"inflection point: the point of steepest fall of pH; known to {row(SHORT)['inflection_resolution_ueq_l']:.3g} µeq/L by" in reason
    for words in ("fit of the whole curve cannot be used: needs two points below", "Gran line cannot be used: needs three points in a row from pH 4.6 to 2.7"):
        assert words in reason


def test_coarse_steps_leave_the_inflection_out():
    """Steps of 10 % of the alkalinity tell no inflection; the end point by alkalinity is next where they are near it in pH."""
    one = sample([0.0, 1.0, 2.0, 2.8, 3.2, 3.6, 4.0], alkalinity=2e-3, carbon=2.2e-3)
    r = row(one)
    assert r["recommended_method"] == "fixed_level"
    assert r["inflection_status"] != "ok"
    assert "end point by alkalinity: pH 4.9, 4.6 or 4.3 by the alkalinity found; pH 4.6, points " in r["recommended_reason"]


def test_two_end_points_where_dilute_water_was_read_only_there():
    """Three readings of a dilute water, two of them past pH 4.5: too few for a line or a fit."""
    method, reason = chosen(sample([0.0, 0.48, 0.66, 0.98], alkalinity=1e-4, carbon=1.3e-4, strength=0.02))
    assert method == "two_point", reason
    assert "two end points 0.30 pH apart: the free acid doubles between them" in reason


def test_no_method_at_all():
    """Two readings: no result, and why each method has none."""
    r = row(sample([0.0, 0.5], alkalinity=1e-4, carbon=1.3e-4, strength=0.02))
    assert (r["status"], r["recommended_method"]) == ("no result", "")
    assert np.isnan(r["recommended_ueq_l"])
    for words in ("; no method for it has a result (Gran line: needs three points in a row from pH 4.6 to 2.7; ",
                  "fit of the whole curve: needs 5 points or more", "two end points 0.30 pH apart: the curve does not pass pH 4.5 and 4.2)"):
        assert words in r["recommended_reason"]


@pytest.mark.parametrize("facts", [{"ionic_strength_mol_l": 0.7}, {"ionic_strength_mol_l": np.nan, "conductivity_us_cm": 60000.0}], ids=["given", "conductivity"])
def test_salt_water_that_is_not_called_so(facts):
    """No constants above 0.5 mol/L unless the salinity is known: methods that need none still work, the others say why, neighbors are untouched."""
    table = results(hard(**facts), hard())
    salty, plain = table.iloc[0], table.iloc[1]
    assert salty["recommended_method"] == "inflection"
    words = "ionic strength above 0.5 mol/L, where the fresh-water constants end; give the salinity of salt water"
    assert [salty[f"{name}_status"] for name in ("fit", "gran")] == [words, words]
    assert salty["fixed_4_5_ueq_l"] == plain["fixed_4_5_ueq_l"]
    assert plain["recommended_ueq_l"] == row(hard())["recommended_ueq_l"]


def test_curved_gran_line_is_passed_over():
    """Dilute water with an acid of pK 4 at five times its alkalinity and DOC unknown: its Gran points bend."""
    fine = acid_steps(9e-4, alkalinity=3e-4, count=60)
    r = row(sample(fine, alkalinity=3e-4, carbon=3.5e-4, strength=0.02, acids=((4e-4, 4.0),), ph_scatter=0.001, titrant_scatter_ml=1e-4))
    assert r["gran_status"] == "its points do not lie on a line"
    assert r["recommended_method"] != "gran"


# ------------------------------------------------------------------ the user's own method

CAN = {"gran": hard(), "inflection": hard(), "fixed_4_5": hard(), "fixed_level": hard(), "fit": dilute(), "two_point": dilute(),
       "acid_excess": KINDS["salt, CO2 swept out"][0] | {"salinity": 0.0}}


@pytest.mark.parametrize("method", CAN)
def test_own_method_is_kept_where_it_can_work(method):
    """The value of that method is the result, though another would be preferred."""
    r = row(CAN[method] | {"own_method": method})
    assert r["recommended_method"] == method
    assert "; your own method, which can work here; " in r["recommended_reason"]
    assert r["recommended_ueq_l"] == r[f"{method}_ueq_l"]
    assert "own method unfit" not in r["warnings"]


CANNOT = [
    (dilute(), "inflection", "gran", "not below pH 7, 400 µeq/L or 100 µS/cm, or with organic acids"),
    (dilute(), "fixed_4_5", "gran", "a fixed end point counts free acid as alkalinity, about 32 µeq/L at pH 4.5"),
    (dilute(), "fixed_level", "gran", "a fixed end point counts free acid as alkalinity, about 32 µeq/L at pH 4.5"),
    (hard(), "two_point", "fit", "made for less than 400 µeq/L"),
    (hard(), "acid_excess", "fit", "needs CO2 swept out (exchange = purged)"),
    (hard(exchange="purged"), "fit", "gran", "CO2 was swept out"),
    (SHORT, "gran", "inflection", "needs three points in a row from pH 4.6 to 2.7"),
    (SHORT, "fit", "inflection", "needs two points below pH 4.5 and two above 5.2 to tell carbon from alkalinity"),
    (cut(hard(), above=4.7), "fixed_4_5", "", "the curve does not pass this pH"),
    (sample([0.0, 1.0, 2.0, 3.5, 3.8, 4.5, 5.0, 5.5], alkalinity=2e-3, carbon=2.2e-3), "fixed_4_5", "fit", "steps too coarse at the end point"),
]


@pytest.mark.parametrize(("one", "own", "instead", "why"), CANNOT, ids=[f"{own}: {why[:25]}" for _, own, _, why in CANNOT])
def test_own_method_is_refused_where_it_cannot_work(one, own, instead, why):
    """Another method takes its place, and a finding says why in words."""
    a = assessed(one | {"own_method": own})
    r, finding = a.results.iloc[0], a.findings.set_index("finding").loc["own method unfit"]
    assert r["recommended_method"] == instead
    assert finding["more"] == why
    assert r[f"{own}_status"] == why
    assert "your own method, which can work here" not in r["recommended_reason"]


def test_end_point_that_was_titrated_to_needs_no_fine_steps():
    """What most waterworks write down: first pH, and the acid to pH 4.5. By hand that is A less what is left at pH 4.5."""
    alkalinity, carbon, ionic = 2e-3, 2.2e-3, 5e-3
    acid = brentq(lambda v: curve([v], alkalinity=alkalinity, carbon=carbon, ionic=ionic)[0] - 4.5, 3.0, 5.0)
    one = sample([0.0, round(acid, 3)], alkalinity=alkalinity, carbon=carbon, ionic=ionic, own_method="fixed_4_5")
    r = row(one)
    assert (r["recommended_method"], r["fixed_4_5_status"]) == ("fixed_4_5", "ok")
    assert_allclose(r["recommended_ueq_l"], acid * 500.0, rtol=1e-3)
    assert r["warnings"] == ""  # nothing more is needed for what was prescribed


def test_each_end_point_has_its_own_steps():
    """A reading at pH 4.65 and the next at 3.2: the end point at 4.6 was titrated to, the one at 4.5 lies in a gap."""
    r = row(sample([0.0, 3.0, 3.6, 3.96, 5.4], alkalinity=2e-3, carbon=2.2e-3))
    assert (r["fixed_level_ph"], r["fixed_level_status"], r["fixed_4_5_status"]) == (4.6, "ok", "steps too coarse at the end point")


def test_steep_steps_tell_no_inflection():
    """Four readings with 30 % of the alkalinity between two of them: a top of their slopes may be anywhere."""
    r = row(sample([0.0, 3.0, 4.2, 4.6], alkalinity=2e-3, carbon=2.2e-3))
    assert (r["recommended_method"], r["inflection_status"]) == ("", "steps too coarse to tell it")


# ------------------------------------------------------------------ the strength of the titrant

@pytest.mark.parametrize(("factor", "fits"), [(10.0, 0.05), (0.1, 0.05)])
def test_a_strength_off_by_ten_gives_no_result(factor, fits):
    """The free acid tells: 0.05 eq/L was used. No result by any method, and the strength that would fit is named."""
    r = row(hard(titrant_strength_eq_l=0.05 * factor))
    assert (r["status"], r["recommended_method"]) == ("no result", "")
    assert np.isnan([r["recommended_ueq_l"], r["recommended_u_ueq_l"], r["recommended_mg_l_caco3"]]).all()
    before, after = r["recommended_reason"].split(" eq/L should give, as ")
    assert before.startswith("the strength of the titrant is in doubt: free acid rises by ")
    assert before.endswith(f" of what {0.05 * factor:.3g}")
    assert_allclose(float(after.split(" eq/L would; correct the strength or its unit")[0]), fits, rtol=0.05)
    assert np.isfinite(r["gran_ueq_l"])  # the value of the method is there to look at


@pytest.mark.parametrize(("factor", "doubtful"), [(1.0 / 3.4, True), (1.0 / 2.8, False), (2.9, False), (3.6, True)])
def test_border_of_doubt(factor, doubtful):
    """A factor of three either way may be an electrode or a bottle; beyond, there is no result."""
    assert (row(hard(titrant_strength_eq_l=0.05 * factor))["recommended_method"] == "") == doubtful


def test_own_method_gets_no_result_either_with_a_doubtful_strength():
    """Not even the end point that the user must report."""
    assert row(hard(titrant_strength_eq_l=0.5, own_method="fixed_4_5"))["recommended_method"] == ""


def test_an_unresolved_slope_widens_the_uncertainty():
    """Strength stated 20 % too high: 2.4 meq/L come out, and the error that the slope shows is in the uncertainty.

    Free acid rises by 1/1.2 of what is stated, and the rest of the curve finds the electrode right, so all of it counts:
    (1 - 1/1.2) of 2.4 meq/L is 400 µeq/L. The truth, 2 meq/L, lies well inside the 90 % interval.
    """
    good, bad = results(hard(), hard(titrant_strength_eq_l=0.06)).itertuples()
    assert good.recommended_u_ueq_l < 15.0
    assert_allclose(bad.recommended_ueq_l, 2400.0, rtol=0.01)
    assert_allclose(bad.recommended_u_ueq_l, 400.0, rtol=0.1)
    assert abs(bad.recommended_ueq_l - 2000.0) < 1.3 * bad.recommended_u_ueq_l


def test_a_wrong_strength_in_dilute_water_is_not_hidden_by_the_electrode():
    """Stated twice as strong, an acid makes 200 of 100 µeq/L; the interval must tell that half of it may be wrong.

    The rest of the curve finds the electrode right: all of (1 - 1/2) of 200 µeq/L, 100, counts.
    """
    r = row(dilute(titrant_strength_eq_l=0.04))
    assert_allclose(r["recommended_ueq_l"], 200.0, rtol=0.03)
    assert_allclose(r["recommended_u_ueq_l"], 100.0, rtol=0.05)


def test_a_slope_that_the_electrode_explains_does_not_widen_it():
    """In hard water the bicarbonate part shows an electrode 0.1 off; the alkalinity stands with its own uncertainty."""
    good, off = results(hard(), hard(offset=0.1)).itertuples()
    assert_allclose([off.recommended_ueq_l, off.recommended_u_ueq_l], [good.recommended_ueq_l, good.recommended_u_ueq_l], rtol=1e-3)
    assert_allclose(off.fit_offset_ph, 0.1, rtol=0, atol=0.002)


# ------------------------------------------------------------------ base

def test_base_titration_is_read_for_acidity():
    """Acid water of -1 meq/L with 0.3 mM carbon and 0.05 eq/L base: its free acid by the Gran line, and no word of fit."""
    one = sample(np.linspace(0.0, 3.0, 25), alkalinity=-1e-3, carbon=3e-4, strength=-0.05)
    r = row(one)
    assert r["recommended_method"] == "gran"
    assert_allclose(r["recommended_ueq_l"], -1000.0, rtol=0.01)
    assert r["recommended_reason"].startswith("titrated with base: see the acidity columns; its free acid by the Gran line, ")
    assert r["fit_status"] == "titrated with base"
    assert r["fixed_4_5_status"] == "titrated with base"


def test_base_titration_without_free_acid_has_no_alkalinity():
    """Neutral water with CO2: acidity to pH 8.3, no Gran line, and its status is not `no result`."""
    r = row(sample(np.linspace(0.0, 1.6, 17), alkalinity=1e-3, carbon=1.5e-3, strength=-0.05))
    assert (r["recommended_method"], r["definition"], r["status"]) == ("", "acidity", "ok")
    assert r["recommended_reason"] == "titrated with base: see the acidity columns"
    assert np.isnan(r["recommended_ueq_l"])
    assert r["acidity_8_3_ueq_l"] > 400.0
