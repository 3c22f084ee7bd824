"""The [digester] section of a plan: what it becomes, what is said of it, and what cannot be used."""

import re
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import FIXED, write_plan

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.digester import digester, digester_words
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.errors import InputError
from aquabuf.report.dose_sheet import dose_sheet

MG_CACO3, MG_ACETIC = 50043.0, 60052.0  # mg/eq, mg/mol; IUPAC masses
SECTION = '''
[digester]
alkalinity = "2000 mg/L as CaCO3"
volatile_acids = "1000 mg/L as CH3COOH"
co2_share = "35 %"
temperature = "35 °C"
'''


@pytest.fixture
def plan_of(tmp_path):
    """A plan with a digester; what is written below it."""
    def read(more="", section=SECTION):
        return read_plan(write_plan(tmp_path, text=f"{FIXED}{section}{more}"))
    return read


@pytest.fixture
def words(plan_of):
    """What an answer says of the digester."""
    def go(more="", section=SECTION):
        return solve_plan(plan_of(more, section), draws=0).digester_words
    return go


def test_house_units(plan_of):
    """Equivalents, shares, and the ionic strength that is taken where none is given, told as an assumption."""
    plan = plan_of()
    spec = plan.digester
    assert_allclose([spec.alkalinity_eq_l, spec.volatile_acids_eq_l, spec.co2_share, spec.t_c, spec.ionic_strength_mol_l],
                    [2000.0 / MG_CACO3, 1000.0 / MG_ACETIC, 0.35, 35.0, 0.15], rtol=1e-4)
    assert (spec.ratio, spec.ph) == (None, None)
    told = [a for a in plan.assumptions if a.startswith("[digester]")]
    assert any('ionic_strength = "0.15 mol/L"' in a for a in told)
    assert any("85 % of the volatile acids count in its alkalinity" in a for a in told)


@pytest.mark.parametrize("acids", ["1000 mg/L as CH3COOH", "16.652 mmol/L", "16.652 meq/L"])
def test_units_of_volatile_acids(plan_of, acids):
    """Mass of acetic acid, moles and equivalents are the same here: 1000 / 60.052."""
    spec = plan_of(section=SECTION.replace("1000 mg/L as CH3COOH", acids)).digester
    assert_allclose(spec.volatile_acids_eq_l, 16.652e-3, rtol=1e-4)


@pytest.mark.parametrize(("ph", "alkalinity"), [(6.8, 2000.0), (7.0, 3000.0), (6.5, 1000.0)])
def test_ph_of_the_facts(words, ph, alkalinity):
    """2,000 mg/L with 35 % CO2 gives 6.8, 3,000 gives 7.0, 1,000 about 6.5 (35 °C, I 0.15; facts, section 3)."""
    section = SECTION.replace("2000", f"{alkalinity:.0f}").replace("1000 mg/L as CH3COOH", "0 mg/L as CH3COOH")
    found = float(re.search(r"pH (\d\.\d\d) with", words(section=section))[1])
    assert_allclose(found, ph, rtol=0, atol=0.07)


def test_words_without_a_wish(words):
    """Ratio 0.50 and its band; bicarbonate 2000 - 0.71 x 1000; nothing is added."""
    said = words()
    assert said.startswith("Volatile acids over alkalinity 0.50 mg acetic acid per mg CaCO3")
    assert "Bicarbonate alkalinity 1292 mg/L as CaCO3" in said  # 2000 - 0.85 x 50.043 / 60.052 x 1000
    assert "To bring it back" not in said
    assert "No alkali is lacking" not in said


def test_back_to_a_ratio(words):
    """0.25 asks for 4,000 mg/L of alkalinity: 2,000 x 1.6787 of sodium bicarbonate, or 2,000 x 0.7403 of hydrated lime."""
    said = words("ratio = 0.25\n")
    assert "To bring it back: 3357 mg/L of sodium bicarbonate, the first choice" in said
    assert "Hydrated lime would be 1481 mg/L" in said
    assert "No alkali is lacking." in words("ratio = 0.5\n")


def test_back_to_a_ph(words):
    """At the CO2 pressure of the gas bicarbonate goes as 10^pH: three tenths of a pH double the 1,292 mg/L."""
    said = words()
    now = float(re.search(r"pH (\d\.\d\d) with", said)[1])
    soda = float(re.search(r"To bring it back: (\d+) mg/L", words(f"ph = {now + 0.3:.2f}\n"))[1])
    assert_allclose(soda, 1292.0 * (10.0**0.3 - 1.0) * 1.6787, rtol=0.03)  # pH is read to 0.01, 2.3 %
    assert "No alkali is lacking." in words("ph = 6.0\n")


def test_no_bicarbonate_left(words):
    """400 mg/L of acids count 283 mg/L of alkalinity; where only 200 are there the gas no longer sets the pH, and none is told."""
    said = words(section=SECTION.replace("2000", "200").replace("1000", "400"))
    assert "Bicarbonate alkalinity -83 mg/L as CaCO3" in said  # 200 - 0.7083 x 400
    assert said.endswith("No bicarbonate is left, so that the volatile acids and not the gas set the pH, near their pKa of 4.8 or below: "
                         "measure it.")
    assert re.search(r"pH \d", said) is None
    assert "To bring it back: " in words("ratio = 0.25\n", SECTION.replace("2000", "200").replace("1000", "400"))


def test_the_ph_of_no_bicarbonate_is_not_known():
    """Row by row; a missing reading says that it is missing, not that no bicarbonate is left."""
    found = digester(alkalinity_eq_l=np.array([200.0, 2000.0, np.nan]) / MG_CACO3, volatile_acids_eq_l=400.0 / MG_ACETIC,
                     co2_share=0.35, t_c=35.0, ionic_strength_mol_l=0.15)
    assert np.isnan(found.ph).tolist() == [True, False, True]
    assert [band is None for band in found.ph_band] == [True, False, True]
    assert digester_words(found, row=2).startswith("The state of the digester is not known")


def test_it_reaches_record_and_sheet(plan_of):
    """As one text under its key and title; a plan without one has neither."""
    answer = solve_plan(plan_of("ratio = 0.25\n"), draws=0)
    assert answer_record(answer)["digester"] == answer.digester_words
    block = next(b for b in dose_sheet(answer).split("\n\n") if b.startswith("DIGESTER"))
    assert "3357 mg/L of sodium bicarbonate" in " ".join(block.split())
    bare = solve_plan(plan_of(section=""), draws=0)
    assert answer_record(bare)["digester"] is None
    assert "DIGESTER" not in dose_sheet(bare)


@pytest.mark.parametrize(("old", "new", "message"), [
    ('co2_share = "35 %"', 'co2_shar = "35 %"', r"line 28, \[digester\]: co2_shar is not a key here\. The nearest is co2_share\."),
    ('co2_share = "35 %"\n', "", r"\[digester\]: co2_share is needed .*it is missing"),
    ('"35 %"', "35", r"line 28, \[digester\]: co2_share must be above 0 and at most 1; found 35"),
    ('"2000 mg/L as CaCO3"', "2000", r"line 26, \[digester\]: alkalinity must have a unit"),
    ('"1000 mg/L as CH3COOH"', '"1000 mg/L as CaCO3"', r"line 27, \[digester\]: volatile_acids must be in one of .*found 'mg/L as CaCO3'"),
    ('"35 °C"', '"95 °C"', r"line 29, \[digester\]: temperature must be at least 0 and at most 60"),
    ('"35 °C"\n', '"35 °C"\nratio = 0.2\nph = 7.0\n', r"line 31, \[digester\]: a digester comes back to a ratio or to a pH; found both"),
    ('"35 °C"\n', '"35 °C"\nratio = 0\n', r"line 30, \[digester\]: ratio must be above 0 and at most 2; found 0"),
    ('"35 °C"\n', '"35 °C"\nph = 4\n', r"line 30, \[digester\]: ph must be at least 5 and at most 9; found 4"),
], ids=["unknown key", "missing key", "percent", "no unit", "wrong basis", "too hot", "two wishes", "no ratio", "no digester"])
def test_what_cannot_be_used(plan_of, old, new, message):
    """File, line and section."""
    assert old in SECTION
    with pytest.raises(InputError, match=rf"^plan\.toml, .*{message}"):
        plan_of(section=SECTION.replace(old, new, 1))
