"""A chain tells what was done: constants against published values, sums against laws, shares against closed forms.

All waters are invented.
"""

import csv
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from sample_tables import readings

from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.assess.sample.chain import chain_of, refused_chain
from aquabuf.assess.sample.chain_constants import constant_value
from aquabuf.assess.sample.chain_readings import Origin
from aquabuf.assess.sample.chain_results import equation_of, written
from aquabuf.assess.sample.chain_steps import BROKEN, INSIDE, KEPT, NOT_MET, OUTSIDE, REFUSED, quantity_label, six
from aquabuf.assess.sample.columns import AS_GIVEN, result_columns
from aquabuf.assess.sample.solve import PAIRS
from aquabuf.errors import InputError
from aquabuf.tables import read_table

ROOT = Path(__file__).parents[3]
STREAM = {"sample_id": "s", "water_kind": "stream", "temperature_c": 25.0, "ph": 7.0, "alkalinity_eq_l": 1e-3}
SEA = {"sample_id": "s", "water_kind": "sea", "temperature_c": 25.0, "salinity": 35.0, "ph": 8.1, "alkalinity_eq_l": 2.35e-3}


def chain(row, **options):
    """The chain of one water in house units."""
    read, chosen = readings(row), Options(**({"draws": 0} | options))
    part = assess(read, chosen, shipped_limits())
    return chain_of(part, read, chosen, shipped_limits(), Origin.of("w.csv", (), read.flags, read.frame, {}))


def part_of(found, title):
    """The steps of one part by label."""
    return {s.label: s for s in next(p for p in found.parts if p.title.startswith(title)).steps}


def number(step):
    """The number of a step, behind pK or log."""
    return float(step.value.replace("pK", "").replace("log", "").split()[0])


# ---------------------------------------------------------------- constants


def published(table, quantity, t_c, salinity=""):
    """Value and tolerance of a published row, as printed."""
    with (ROOT / "tests" / "published" / f"{table}.csv").open(encoding="utf-8", newline="") as stream:
        row = next(r for r in csv.DictReader(stream) if (r["quantity"], r["t_c"], r["salinity"]) == (quantity, t_c, salinity))
    return float(row["expected"]), float(row["atol"])


@pytest.mark.parametrize(("label", "quantity", "sign"), [
    ("K1: CO2(aq) + H2O = H+ + HCO3-", "k1_carbonic", -1), ("K2: HCO3- = H+ + CO3--", "k2_carbonic", -1),
    ("K0: CO2(g) = CO2(aq)", "k_henry_co2", 1), ("Kw: H2O = H+ + OH-", "k_water", 1),
    ("Ksp: CaCO3 (calcite) = Ca++ + CO3--", "ksp_calcite", 1)])
@pytest.mark.parametrize("t_c", [0.0, 25.0])
def test_fresh_constants_are_the_published_ones(label, quantity, sign, t_c):
    """Plummer & Busenberg 1982 and IAPWS R11-07 at the temperature of the sample."""
    step = part_of(chain(STREAM | {"temperature_c": t_c, "calcium_mol_l": 1e-3}), "Constants")[label]
    expected, atol = published("fresh", quantity, f"{t_c:g}")
    assert_allclose(number(step), sign * expected, rtol=0, atol=atol + 5e-5)
    assert step.sign == INSIDE


def test_sea_constants_are_the_published_ones():
    """Millero et al. 2006, abstract: pK1 5.8401 at 25 °C and salinity 35 on the seawater scale; the one used is the same."""
    step = part_of(chain(SEA), "Constants")["K1: CO2(aq) + H2O = H+ + HCO3-"]
    assert_allclose(number(step), published("marine", "k1_millero", "25", "35")[0], rtol=0, atol=5e-5)
    assert step.unit == "mol/kg, seawater scale"
    assert "used: pK 5.8401" in step.words
    assert "Millero et al. 2006" in step.source


def test_the_other_marine_set():
    """Lueker et al. 2000 print pK1 5.8472 at 25 °C and salinity 35 (total scale); its range is its own."""
    step = part_of(chain(SEA, carbonic="lueker"), "Constants")["K1: CO2(aq) + H2O = H+ + HCO3-"]
    assert_allclose(number(step), 5.8472, rtol=0, atol=5e-5)
    assert "S 19 to 43, 2 to 35 °C" in step.words


def test_the_constant_used_follows_from_davies():
    """At 25 °C and I = 0.01: A = 0.5092 (Helgeson & Kirkham 1974), log g1 = -A (0.1/1.1 - 0.003); pK2' = pK2 + 3 log g1."""
    found = part_of(chain(STREAM | {"ionic_strength_mol_l": 0.01}), "Constants")
    log_g = -0.5092 * (0.1 / 1.1 - 0.3 * 0.01)
    used = float(found["K2: HCO3- = H+ + CO3--"].words.split("used: pK ")[1])
    assert_allclose(used, 10.3289 + 3.0 * log_g, rtol=0, atol=0.002)
    assert_allclose(number(found["activity coefficient of charge 1"]), 10.0**log_g, rtol=0, atol=2e-4)
    assert_allclose(number(found["activity coefficient of charge 2"]), 10.0 ** (4.0 * log_g), rtol=0, atol=8e-4)


def test_a_constant_outside_its_range_says_so():
    """Pairs of magnesium hold from 10 °C (Siebert & Hostetler 1977), Mucci's calcite from salinity 5."""
    label = "K pair: Mg++ + HCO3- = MgHCO3+"
    hard = {"calcium_mol_l": 1e-3, "magnesium_mol_l": 5e-4}
    assert part_of(chain(STREAM | hard | {"temperature_c": 9.9}), "Constants")[label].sign == OUTSIDE
    assert part_of(chain(STREAM | hard | {"temperature_c": 10.0}), "Constants")[label].sign == INSIDE
    calcite = "Ksp: CaCO3 (calcite) = Ca++ + CO3--"
    assert part_of(chain(SEA | {"salinity": 3.0}), "Constants")[calcite].sign == OUTSIDE
    assert part_of(chain(SEA), "Constants")[calcite].sign == INSIDE


def test_conditions_outside_the_range_say_so():
    """Constants reach 50 °C and an ionic strength of 0.1 mol/L in fresh water."""
    found = part_of(chain(STREAM | {"temperature_c": 52.0, "ionic_strength_mol_l": 0.2}), "Conditions")
    assert found["temperature"].sign == OUTSIDE
    assert found["ionic strength, from given"].sign == OUTSIDE


def test_the_table_of_constants_agrees_with_its_page():
    """Range, source and mark of every constant stand in docs/constants.md under its name, and the value at 25 °C, S 35."""
    page = {}
    for line in (ROOT / "docs" / "constants.md").read_text(encoding="utf-8").splitlines():
        cells = [c.strip() for c in line.strip("|").split("|")]
        if line.startswith("| `") and len(cells) >= 7:
            page.setdefault(cells[0].strip("`"), cells)
    for row in read_table("chain_constants"):
        name, reaction, scale, range_, source, known, value = page[row["function"]]
        assert row["function"] in _NAMED or row["reaction"] == reaction, name
        assert (row["source"], row["mark"]) == (source, known), name
        assert range_ in _ranges(row), name
        sign = -1.0 if row["kind"] == "pK" else 1.0
        assert_allclose(sign * np.log10(constant_value(row["function"], 25.0, 35.0)), float(value.split()[1]), rtol=0, atol=6e-5)
        assert scale.split(" ")[0] in row["unit"] or scale == "-", name


_NAMED = {"k0_co2", "k1_millero", "k2_millero", "k1_lueker", "k2_lueker"}  # the page calls them by name, not by reaction


def _ranges(row):
    """Ways in which the page may write a range."""
    t = f"{row['t_low']} to {row['t_high']} °C"
    if row["s_high"]:
        return (f"S {row['s_low']} to {row['s_high']}, {t}",)
    return (t,) if row["t_high"] else (f"from S {row['s_low']}",) if row["s_low"] else ("no temperature term", "constant enthalpy")


# ---------------------------------------------------------------- conditions, balance, pair


@pytest.mark.parametrize(("more", "source", "expected"), [
    ({"tds_mg_l": 400.0}, "dissolved solids", 0.010),                        # 2.5e-5 per mg/L, Langelier 1936
    ({"conductivity_us_cm": 500.0, "tds_mg_l": 400.0}, "conductivity", 0.008),  # 1.6e-5 per µS/cm, Russell 1976 (recalled)
    ({"ionic_strength_mol_l": 0.03}, "given", 0.03),
    ({}, "alkalinity", 1e-3),                                                # a 1:1 salt of 1 meq/L
    # half of (4 * 0.4 + 4 * 0.1 + 0.2 + 0.3 + 4 * 0.1 + 1.0) mmol/L
    ({"calcium_mol_l": 4e-4, "magnesium_mol_l": 1e-4, "sodium_mol_l": 2e-4, "chloride_mol_l": 3e-4, "sulfate_mol_l": 1e-4},
     "ions", 1.95e-3),
], ids=lambda v: v if isinstance(v, str) else "")
def test_ionic_strength_and_what_it_is_from(more, source, expected):
    """Its value by hand, and the words for its origin."""
    step = part_of(chain(STREAM | more), "Conditions")[f"ionic strength, from {source}"]
    assert_allclose(float(step.value), expected, rtol=1e-5)
    assert step.words
    assert step.source


@pytest.mark.parametrize("row", [STREAM, STREAM | {"phosphate_mol_l": 1e-4, "ammonium_mol_l": 2e-4, "acetate_mol_l": 1e-4},
                                 SEA, STREAM | {"ph": 4.2, "alkalinity_eq_l": -6e-5, "dic_mol_l": 5e-5}],
                         ids=["stream", "many acids", "sea", "acid"])
def test_the_terms_of_the_balance_add_up(row):
    """Charge balance: the terms sum to the alkalinity that the answer rests on, which is the titrated one of this pair."""
    found = chain(row)
    steps = next(p for p in found.parts if p.title == "The balance").steps
    terms = [float(s.value) for s in steps if s.unit == "meq/L" and not s.label.startswith("sum")]
    total = float(next(s for s in steps if s.label.startswith("sum")).value)
    assert len(terms) >= 4
    assert_allclose(sum(terms), total, rtol=2e-5, atol=1e-9)
    if "dic_mol_l" not in row:
        assert_allclose(total, 1e3 * row["alkalinity_eq_l"], rtol=2e-5)


def test_shares_of_carbon_by_hand():
    """pH 7 at 25 °C, I 0.001 (Davies): bicarbonate over carbonate is h / K2', and the two carry all but a trace of A."""
    steps = part_of(chain(STREAM | {"ionic_strength_mol_l": 1e-3}), "The balance")
    root = np.sqrt(1e-3)
    log_g = -0.5092 * (root / (1.0 + root) - 0.3e-3)
    ratio = 10.0 ** (-7.0 + 10.3289 + 3.0 * log_g)
    assert_allclose(float(steps["bicarbonate, [HCO3-]"].value) / float(steps["carbonate, 2 [CO3--]"].value), ratio / 2.0, rtol=0.005)


@pytest.mark.parametrize(("row", "options", "pair", "why"), [
    (STREAM, {}, "pH and alkalinity", "the only two that were measured"),
    (STREAM | {"pco2_atm": 1e-3}, {}, "pH and alkalinity", "first in the order of preference; also measured: alkalinity and pCO2, pH and pCO2"),
    (STREAM | {"ph": 6.0, "alkalinity_eq_l": 2e-5, "dic_mol_l": 6e-5}, {}, "pH and carbon", "more than 2 times that of the measured carbon"),
    (SEA | {"dic_mol_l": 2.05e-3, "dic_u_mol_l": 2e-6, "alkalinity_u_eq_l": 2e-6}, {}, "alkalinity and carbon", "tell the pH better"),
    ({k: v for k, v in STREAM.items() if k != "ph"}, {"exchange": "open"}, "alkalinity and air", "which completes alkalinity"),
    (STREAM | {"ph": 4.6, "alkalinity_eq_l": -2.6e-5}, {}, "pH and air", "cannot tell its carbon"),
], ids=lambda v: v if isinstance(v, str) else "")
def test_known_pair_and_why(row, options, pair, why):
    """The pair and the reason for it, one case of each kind."""
    step = part_of(chain(row, **options), "What the answer rests on")["known pair"]
    assert step.value == pair
    assert why in step.words


def test_a_pair_that_fails_is_named():
    """Alkalinity below that of hydroxide at pH 10.5 (0.3 meq/L): no carbon solves it, the next pair does."""
    row = STREAM | {"ph": 10.5, "alkalinity_eq_l": 5e-5, "dic_mol_l": 1e-3, "dic_u_mol_l": 1e-3}
    assert "pH and alkalinity came first and cannot be solved" in part_of(chain(row), "What the answer rests on")["known pair"].words


def test_a_titrated_alkalinity_beside_the_pair():
    """pH with carbon: the titration stands, the rest follows from [HCO3-] = C a1 (a1 0.313 at pH 6, 25 °C: pK1 6.352)."""
    row = STREAM | {"ph": 6.0, "alkalinity_eq_l": 2e-5, "dic_mol_l": 6e-5}
    step = part_of(chain(row), "What the answer rests on")["alkalinity as titrated"]
    assert (step.value, step.unit) == ("0.0200", "meq/L")
    used = float(step.words.split("rest on the ")[1].split()[0])
    assert_allclose(used, 0.06 / (1.0 + 10.0**0.352) - 0.001, rtol=0, atol=3e-4)  # less the hydrogen ion
    assert part_of(chain({k: v for k, v in (STREAM | {"dic_mol_l": 1e-3}).items() if k != "alkalinity_eq_l"}),
                   "What the answer rests on")["alkalinity"].value == "computed"


def test_a_rule_without_its_quantity_is_not_judged():
    """At pH 4.7 no pair buffers within its range: the rule on what is left of it has nothing to judge."""
    step = rules({"temperature_c": 10.0, "water_kind": "lake", "ph": 4.7, "alkalinity_eq_l": -2e-5})["pair nearly used up"]
    assert (step.value, step.unit, step.sign) == ("acid until that pair is used up none", "", "")
    assert "not judged" in step.words


def test_open_water_is_in_balance_with_air():
    """Henry's law: CO2 is K0 p of air at 425 ppm less vapor (0.0313 atm at 25 °C), 411.7 µatm; the balance says so."""
    found = chain(STREAM, exchange="open", air_co2_ppm=425.0)
    assert part_of(found, "What the answer rests on")["exchange with air"].value == "open"
    assert_allclose(float(part_of(found, "Results")["CO2 pressure"].value), 425.0 * (1.0 - 0.0313), rtol=2e-4)
    assert part_of(found, "The balance")["equation"].value.startswith("p = x (P - pH2O)")


# ---------------------------------------------------------------- results


def test_every_number_has_its_equation_and_no_equation_is_left_over():
    """The table of equations is that of the results; the pairs are those of the solver."""
    keys = {equation_of(c.name).key for c in result_columns(Options()) if c.unit and c.name not in AS_GIVEN}
    assert keys == {row["name"] for row in read_table("result_equations")}
    assert {row["pair"] for row in read_table("pair_equations")} == set(PAIRS)
    assert all(row[field] for row in read_table("result_equations") for field in ("label", "symbols", "words", "source"))
    assert equation_of("acid_to_ph_5_5_open_meq_l").label == "acid to pH 5.5, open to air"


def share_words(found, label):
    """Shares of a result in percent, by reading."""
    words = part_of(found, "Results")[label].words.split("Interval from ")[1].split(";")[0]
    return {part.rsplit(" ", 2)[0]: float(part.rsplit(" ", 2)[1]) for part in words.split(", ")}


@pytest.mark.parametrize(("ph_u", "alkalinity_u"), [(0.05, 1e-5), (0.02, 1e-4), (0.1, 1e-4)])
def test_shares_by_error_propagation(ph_u, alkalinity_u):
    """p = A h / (K0 K1) near pH 7, so var ln p = (ln 10 u_pH)^2 + (u_A / A)^2; temperature is given as exact."""
    row = STREAM | {"ph_u": ph_u, "alkalinity_u_eq_l": alkalinity_u, "temperature_u_c": 1e-9}
    of_ph, of_alkalinity = (np.log(10.0) * ph_u) ** 2, (alkalinity_u / 1e-3) ** 2
    found = share_words(chain(row, draws=4000), "CO2 pressure")
    assert_allclose(found.get("pH", 0.0), 100.0 * of_ph / (of_ph + of_alkalinity), rtol=0, atol=2.5)
    assert_allclose(sum(found.values()), 100.0, rtol=0, atol=2.0)


def test_a_result_that_is_a_reading_rests_on_it_alone():
    """The interval of the alkalinity comes from the alkalinity, in either unit."""
    found = chain(STREAM, draws=200)
    assert share_words(found, "alkalinity") == share_words(found, "alkalinity as calcium carbonate") == {"alkalinity": 100.0}


def test_what_is_fixed_by_air_has_no_shares():
    """In open water the CO2 pressure is that of air whatever the readings."""
    assert "Interval from" not in part_of(chain(STREAM, draws=200, exchange="open"), "Results")["CO2 pressure over that of air"].words


def test_without_draws_no_interval_is_told():
    """Neither ends nor shares, and the words say why."""
    found = next(p for p in chain(STREAM).parts if p.title == "Results")
    assert found.words == "no intervals: the run was made without draws"
    assert not any("Interval from" in s.words or " to " in s.value for s in found.steps if s.unit)


@pytest.mark.parametrize(("value", "digits", "text"), [(7.0, 3, "7.000"), (-0.00001, 3, "0.000"), (np.nan, 2, "none"),
                                                       (np.inf, 4, "inf"), (1234.56789, None, "1234.57")])
def test_numbers_as_written(value, digits, text):
    """Decimals filled up, no negative zero, words where there is none."""
    assert written(value, digits) == text


def test_small_words():
    """Six digits; names of columns as people say them."""
    assert [six(v) for v in (1.0, 1.23456789e-5, -0.0, np.nan)] == ["1", "1.23457e-05", "0", ""]
    assert [quantity_label(n) for n in ("ph_total", "doc", "calcium_hardness")] == ["pH total", "DOC", "calcium hardness"]


# ---------------------------------------------------------------- uncertainties, rules, refusals


def test_uncertainty_and_where_it_is_from():
    """Given, default with its parts by hand, and of the user's own column."""
    found = part_of(chain(STREAM | {"ph_u": 0.03, "calcium_mol_l": 1e-3}), "Standard uncertainty")
    row = next(r for r in read_table("columns") if r["name"] == "calcium_mol_l")
    assert found["pH"].value == "0.03"
    assert found["pH"].words.startswith("given")
    assert_allclose(float(found["calcium"].value), float(row["default_u"]) + 1e-3 * float(row["default_u_rel"]), rtol=1e-5)
    assert found["calcium"].source == row["u_source"]
    assert found["calcium"].words == f"default: {row['default_u']} mol/L and {100 * float(row['default_u_rel']):g} % of the value"


def rules(row, **options):
    """Rules of a water by name."""
    return part_of(chain(row, **options), "Rules")


def test_each_rule_broken_or_kept():
    """A lake of 0.1 meq/L: below 0.2 (survey band) and not below 0.05 or 0 (Driscoll et al. 2003)."""
    found = rules({"temperature_c": 10.0, "water_kind": "lake", "ph": 6.8, "alkalinity_eq_l": 1e-4}, draws=100)
    assert next(iter(found)) == "sensitive to acid"
    assert [found[n].sign for n in ("sensitive to acid", "may turn acid", "acidic")] == [BROKEN, KEPT, KEPT]
    step = found["sensitive to acid"]
    assert (step.value, step.unit) == ("alkalinity 0.1000", "meq/L")
    assert "warned where alkalinity < 0.2 meq/L" in step.words
    assert "in 100 % of the draws" in step.words
    assert "next: keep on the watch list" in step.words
    assert "200 µeq/L" in step.source
    assert "soft for the mains" not in found


def test_a_worse_band_says_it_already():
    """At -20 µeq/L the bands below 50 and 200 µeq/L hold as well, and are not counted again."""
    found = rules({"temperature_c": 10.0, "water_kind": "lake", "ph": 4.7, "alkalinity_eq_l": -2e-5})
    assert found["acidic"].sign == BROKEN
    assert found["may turn acid"].sign == KEPT
    assert "listed before says it already" in found["may turn acid"].words


def test_a_check_that_is_not_met_has_its_remedy():
    """Water of 40 °C."""
    step = part_of(chain(STREAM | {"temperature_c": 40.0}), "Quality checks")["temperature"]
    assert step.sign == NOT_MET
    assert "allowed: at most 35; to do: check whether it is in °F" in step.words


def test_the_verdict_counts():
    """In the first line: rules and checks by name, and the status."""
    found = chain({"temperature_c": 40.0, "water_kind": "lake", "ph": 4.6, "alkalinity_eq_l": -2.6e-5})
    assert "rules broken (acidic, below pH 6" in found.verdict
    assert "temperature" in found.verdict
    assert found.verdict.endswith("status: carbon from air")
    assert chain(STREAM | {"alkalinity_eq_l": 3e-3, "ph": 8.0}).verdict == "no rule broken; all checks met"


def test_a_refused_row_has_its_reasons():
    """Each reason with rule and remedy, and no result."""
    reasons = pd.DataFrame([{"column": "pH", "value": "74", "rule": "must be -1 to 15", "remedy": "is it 7.4?"}])
    found = refused_chain("x", 7, Origin(file="w.csv"), reasons)
    assert [(s.label, s.value, s.words, s.sign) for s in found.steps()] == [("pH", "74", "must be -1 to 15; to do: is it 7.4?", REFUSED)]
    assert found.refused
    assert refused_chain("x", 7, Origin(file="w.csv"), reasons, only_result=True).verdict.endswith("assessed without it")


def test_one_sample_at_a_time():
    """Two samples are no chain."""
    read = readings(STREAM, STREAM | {"sample_id": "t"})
    part = assess(read, Options(draws=0), shipped_limits())
    with pytest.raises(InputError, match=r"a chain is of one sample; found 2\. Assess its row alone\."):
        chain_of(part, read, Options(draws=0), shipped_limits(), Origin(file="w.csv"))
