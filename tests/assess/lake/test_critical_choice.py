"""Which variant of the critical load: what a choice refuses, how it reads, its words, and how far the variants lead."""

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from critical_lakes import LAKES, VARIABLE, Fixed, charges_of
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import MARKS, read_rows

from aquabuf.assess.lake.critical import CriticalLoadChoice, critical_load, parse_choice
from aquabuf.assess.lake.critical_choice import FORMS, limit_words, sulfate_backgrounds
from aquabuf.assess.lake.critical_variants import full_factorial, one_at_a_time, sensitivity
from aquabuf.errors import InputError
from aquabuf.tables import read_table

ROWS = read_rows("critical_loads")
TABLES = {"background": ("sulfate_background", ("a_ueq_l", "b")), "anc limit": ("anc_limits", ("limit_ueq_l",))}


# ------------------------------------------------------------------ the tables


@pytest.mark.parametrize("row", [r for r in ROWS if r["subject"] in TABLES], ids=lambda r: f"{r['choice']} {r['quantity']}")
def test_shipped_number_matches_its_source(row):
    """Relations and limits as published."""
    shipped = {r["name"]: r for r in read_table(TABLES[row["subject"]][0])}[row["choice"]]
    assert_allclose(float(shipped[row["quantity"]]), float(row["expected"]), rtol=0, atol=float(row["atol"]))


@pytest.mark.parametrize("subject", TABLES)
def test_every_shipped_number_has_a_published_row_mark_and_source(subject):
    """A number that nobody checked cannot be shipped; the variable limit has equations of its own."""
    table, quantities = TABLES[subject]
    shipped = {(r["name"], q) for r in read_table(table) for q in quantities if r[q]}
    assert shipped == {(r["choice"], r["quantity"]) for r in ROWS if r["subject"] == subject}
    assert all(r["mark"] in MARKS and len(r["source"]) > 5 for r in read_table(table))
    assert [r["name"] for r in read_table("anc_limits") if not r["limit_ueq_l"]] == ["variable"]


def test_relation_in_house_units():
    """Norway at 100 µeq/L of base cations: 15 + 16."""
    norway = sulfate_backgrounds()["norway"]
    assert_allclose(norway.a_eq_l + norway.b * 100e-6, 31e-6, rtol=1e-12)


# ------------------------------------------------------------------ what a choice refuses


@pytest.mark.parametrize(("field", "value", "message"), [
    ("form", "load", r"the form of F must be one of concentration, flux; found 'load'"),
    ("base_cations", "past", r"F is taken at must be one of today, original; found 'past'"),
    ("sulfate_background", "mars", r"original sulfate must be one of norway, finland, sweden, canada; found 'mars'"),
    ("excess_background", "cut", r"above today's must be one of kept, capped; found 'cut'"),
    ("tracer", "bromide", r"tracer of sea salt must be one of chloride, sodium, none; found 'bromide'. Correct it"),
    ("s_scale", 400.0, r"concentration form must be from 4 to 40000 µeq/L; found 4e\+08. The usual one is 400"),
    ("s_scale", np.nan, r"found nan"),
    ("anc_limit_eq_l", 20.0, r"within 0.001 eq/L of zero; found 20. Give 20 µeq/L as 2e-5"),
    ("anc_limit_eq_l", np.nan, r"found nan"),
])
def test_what_a_choice_refuses(field, value, message):
    """Subject, rule, value found and remedy, for each field."""
    with pytest.raises(InputError, match=message):
        CriticalLoadChoice(**{field: value})


def test_scale_is_checked_in_the_unit_of_the_form():
    """0.4 eq/m2/yr is usual for a flux, and 1000 times too much for a concentration."""
    assert CriticalLoadChoice(form="flux", s_scale=0.4).has_usual_scale
    with pytest.raises(InputError, match=r"found 400000. The usual"):
        CriticalLoadChoice(s_scale=0.4)
    with pytest.raises(InputError, match=r"flux form must be from 4 to 40000 meq/m²/yr; found 0.4"):
        CriticalLoadChoice(form="flux", s_scale=4e-4)


# ------------------------------------------------------------------ from words


@pytest.mark.parametrize(("text", "fields"), [
    ("", {}),
    ("flux original norway", {"form": "flux", "base_cations": "original"}),
    ("Canada, ORIGINAL  flux", {"form": "flux", "base_cations": "original", "sulfate_background": "canada"}),
    ("capped sodium", {"excess_background": "capped", "tracer": "sodium"}),
    ("no_sea_salt today", {"tracer": "none"}),
    ("s=300", {"s_scale": 3e-4}),
    ("s=300 flux flux", {"form": "flux", "s_scale": 0.3}),
])
def test_words_in_any_order(text, fields):
    """What is named is set, S in the unit of the form; the rest keeps its default."""
    assert parse_choice(text) == CriticalLoadChoice(**fields)


def test_limit_comes_from_an_option_of_its_own():
    """Fixed or variable."""
    assert parse_choice("flux", Fixed(39e-6)).anc_limit_eq_l == 39e-6
    assert parse_choice("flux", VARIABLE).anc_limit_eq_l is None


@pytest.mark.parametrize(("text", "message"), [
    ("flux norge", r"among concentration, flux, today, original, norway, .* no_sea_salt, s=NUMBER; found 'norge'. Correct"),
    ("flux today concentration", r"of concentration, flux a critical load takes one; found 'flux' and 'concentration'. Drop"),
    ("norway sweden", r"of norway, finland, sweden, canada a critical load takes one; found 'norway' and 'sweden'"),
    ("s=300 s=400", r"of s=NUMBER a critical load takes one; found 's=300' and 's=400'"),
    ("s=", r"s=NUMBER must hold a number; found s=. Write it as s=400"),
    ("s=many", r"s=NUMBER must hold a number; found s=many"),
    ("s=inf", r"found s=inf"),
    ("s=1", r"from 4 to 40000 µeq/L; found 1. The usual one is 400"),
])
def test_words_that_are_none(text, message):
    """The message lists what may be written."""
    with pytest.raises(InputError, match=message):
        parse_choice(text)


@pytest.mark.parametrize("choice", [
    CriticalLoadChoice(), CriticalLoadChoice(form="flux", s_scale=0.3, excess_background="capped", tracer="none"),
    CriticalLoadChoice(base_cations="original", sulfate_background="canada", tracer="sodium", s_scale=8e-4)])
def test_label_reads_back(choice):
    """The short words of a choice are those of the option."""
    assert parse_choice(choice.label) == choice


def test_lines_name_every_choice_with_its_source():
    """F, its S and base cations, the relation, what lies above today, nitrate, limit, tracer."""
    words = replace(parse_choice("flux original sweden capped sodium s=300"), anc_limit_eq_l=39e-6).in_words()
    for part in ("run off per area", "S 300 meq/m²/yr, given by the user; usual 400 (Henriksen & Posch 2001",
                 "base cations before acid deposition", "5 µeq/L + 0.05 BC* (sweden: Swedish lakes; Wilander, recalled)",
                 "cut to today's sulfate", "nitrate before acid deposition none", "ANC limit 39 µeq/L (brown trout, Bridcut",
                 "sea salt taken off by sodium"):
        assert part in words
    plain = CriticalLoadChoice(tracer="none").in_words()
    for part in ("concentration of base cations, S 400 µeq/L (S and equation printed", "taken at today's base cations",
                 "15 µeq/L + 0.16 BC*", "Brakke et al. 1989", "kept where it is above", "Lien et al. 1996", "left in"):
        assert part in plain


def test_limit_in_words():
    """Shipped limits carry their sources, also after arithmetic; another number is the user's."""
    assert "Lien et al. 1996" in limit_words(20 * 1e-6)
    assert limit_words(25e-6) == "ANC limit 25 µeq/L (given by the user)"
    assert limit_words(None).startswith("ANC limit 0.25 yr/m of the critical load, from 0 to 50 µeq/L (fish and invertebrates")


# ------------------------------------------------------------------ how far the variants lead


def hawk(**options):
    """Arguments of the most acid of the worked lakes."""
    charges, runoff, _ = LAKES["hawk pond"]
    return (charges_of(**{k: [[v]] for k, v in charges.items()}), np.array([[runoff]])), {
        "sulfur_deposition_eq_m2_yr": np.array([[0.04372]]), **options}


def test_each_variant_differs_in_one_thing():
    """One of form, base cations, 3 backgrounds, excess, 3 other limits, 2 tracers, 2 scales: 14 with the chosen one."""
    chosen = CriticalLoadChoice()
    variants = list(one_at_a_time(chosen))
    assert variants[0] == ("as chosen", chosen)
    changed = [[f for f in CriticalLoadChoice.__dataclass_fields__ if getattr(c, f) != getattr(chosen, f)]
               for _, c in variants[1:]]
    assert [fields[0] for fields in changed] == [
        "form", "base_cations", *["sulfate_background"] * 3, "excess_background", *["anc_limit_eq_l"] * 3,
        *["tracer"] * 2, *["s_scale"] * 2]
    assert all(len(fields) == 1 for fields in changed)
    assert len({words for words, _ in variants}) == len(variants) == 14


def test_variants_of_another_choice():
    """From the variable limit there are three fixed ones; S of one's own goes along to the other form in proportion."""
    chosen = CriticalLoadChoice(anc_limit_eq_l=None, s_scale=3e-4, tracer="none")
    found = dict(one_at_a_time(chosen))
    assert {"ANC limit 0 µeq/L", "ANC limit 20 µeq/L", "ANC limit 50 µeq/L", "sea salt by chloride"} <= set(found)
    assert "variable ANC limit" not in found
    assert_allclose([found["F by flux"].scale, found["S halved"].scale, found["S doubled"].scale], [0.3, 1.5e-4, 6e-4])


def test_worked_variants_of_hawk_pond():
    """Loads in meq/m2/yr worked out apart: 24.03 as chosen, 32.80 original; the ANC limit moves it by runoff."""
    args, options = hawk()
    loads = {v.words: float(v.load[0, 0]) * 1e3 for v in sensitivity(*args, CriticalLoadChoice(), **options).variants}
    assert_allclose([loads["as chosen"], loads["F at the original base cations"]], [24.03, 32.80], rtol=0, atol=0.006)
    assert_allclose([loads["ANC limit 0 µeq/L"] - loads["as chosen"], loads["as chosen"] - loads["ANC limit 50 µeq/L"]],
                    [20 * 0.762, 30 * 0.762], rtol=1e-9)


def test_lowest_and_highest_by_every_combination():
    """2 forms, 2 base cations, 4 backgrounds, 2 limits; the worked range of the lake, 24 to 40, lies inside."""
    args, options = hawk()
    found = sensitivity(*args, CriticalLoadChoice(), **options)
    each = [critical_load(*args, CriticalLoadChoice(form=form, base_cations=base, sulfate_background=name, anc_limit_eq_l=limit),
                          **options)
            for form, base, name, limit in product(
                ("concentration", "flux"), ("today", "original"), ("norway", "finland", "sweden", "canada"), (20e-6, None))]
    assert found.combinations == len(each) == 32
    assert_array_equal([found.load_lowest, found.load_highest], [min(e.load for e in each), max(e.load for e in each)])
    assert_array_equal([found.exceedance_lowest, found.exceedance_highest],
                       [min(e.exceedance for e in each), max(e.exceedance for e in each)])
    assert found.load_lowest < 24.03e-3 < 40.35e-3 < found.load_highest


def test_variable_limit_is_not_counted_twice():
    """Chosen and variable limit are one where the variable one is chosen."""
    assert len(list(full_factorial(CriticalLoadChoice(anc_limit_eq_l=None)))) == 16


def test_deposition_goes_along_to_every_variant():
    """Total deposition loses its sea salt by each variant's tracer: 0.103 of the chloride, none where it is left in."""
    args, options = hawk(sulfur_is="total", chloride_deposition_eq_m2_yr=np.array([[0.02]]))
    charges, runoff = args
    leached = 1000.0 * runoff * charges["nitrate"]
    found = {v.words: v.exceedance + v.load - leached for v in sensitivity(*args, CriticalLoadChoice(), **options).variants}
    assert_allclose([found["as chosen"], found["sea salt left in"]], [[[0.04372 - 0.00206]], [[0.04372]]], rtol=1e-9)


def test_tracer_without_a_reading_is_left_out():
    """No chloride, no variant by chloride."""
    (charges, runoff), options = hawk()
    del charges["chloride"]
    words = [v.words for v in sensitivity(charges, runoff, CriticalLoadChoice(tracer="sodium"), **options).variants]
    assert "sea salt by chloride" not in words
    assert "sea salt left in" in words


def test_a_lake_without_runoff_leaves_the_others_alone():
    """nan in its own row, also in lowest and highest."""
    charges, _, _ = LAKES["hawk pond"]
    lakes = charges_of(**{k: [[v], [v]] for k, v in charges.items()})
    found = sensitivity(lakes, np.array([[0.762], [np.nan]]), CriticalLoadChoice(), sulfur_deposition_eq_m2_yr=0.04)
    for value in (found.load_lowest, found.load_highest, found.exceedance_lowest, found.variants[3].load):
        assert_array_equal(np.isnan(value[:, 0]), [False, True])


def test_usual_scales_agree_at_one_meter_of_runoff():
    """400 µeq/L in a meter of runoff are 400 meq/m2/yr."""
    assert_allclose(FORMS["flux"].s_scale, 1000.0 * 1.0 * FORMS["concentration"].s_scale, rtol=1e-14)
