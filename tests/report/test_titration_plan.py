"""The text of a planned titration: what it says, in which unit, and that its numbers are those of the plan."""

import re

import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.titration.plan import Setup, plan
from aquabuf.report.titration_plan import plan_text
from aquabuf.tables import read_table

HARD = {"alkalinity_eq_l": 2e-3, "strength_eq_l": 0.02, "ph": 7.6, "t_c": 25.0}
SOFT = {"alkalinity_eq_l": 1e-4, "device": "microburette", "ph": 6.6, "t_c": 10.0}
COUNTS = {"alkalinity_eq_l": 1e-3, "strength_eq_l": 0.16, "device": "counts", "ph": 7.2, "sulfuric": True}


def text_of(setup):
    """Text and plan of a setup."""
    p = plan(Setup(**setup))
    return plan_text(p), p


def flat(setup):
    """Text in one line."""
    return " ".join(text_of(setup)[0].split())


def block(text, head):
    """Lines of the block that begins so."""
    return next(b for b in text.split("\n\n") if b.startswith(head)).splitlines()


@pytest.mark.parametrize("setup", [HARD, SOFT, COUNTS, HARD | {"alkalinity_eq_l": -5e-5, "ph": None}], ids=["hard", "soft", "counts", "acid"])
def test_text_is_the_same_each_time_and_fits_a_screen(setup):
    """Same plan, same text; no line longer than 100 characters; one line end at its end."""
    text = text_of(setup)[0]
    assert text == text_of(setup)[0]
    assert max(map(len, text.splitlines())) <= 105
    assert text.endswith("\n")
    assert not text.endswith("\n\n")
    assert "nan" not in text


def test_head_repeats_what_was_asked_for():
    """Alkalinity in both units (2 meq/L are 100 mg/L as CaCO3), volume, strength, acid, device and temperature."""
    assert text_of(HARD)[0].splitlines()[:2] == ["Plan for 2,000 µeq/L (100 mg/L as CaCO3), first pH about 7.60:",
                                                 "100 mL of sample, 0.02 eq/L hydrochloric acid, burette, 25 °C."]
    assert "0.16 eq/L sulfuric acid, counts" in text_of(COUNTS)[0]


def test_volumes_are_those_of_the_plan():
    """Each end point with its volume; 10 mL to the equivalence point of 2 meq/L by 0.02 eq/L."""
    text, p = text_of(HARD)
    lines = block(text, "Titrant to expect")
    assert f"  - to the equivalence point (pH {p.end_ph:.2f} with the CO2 kept in): 10.000 mL" in lines
    assert "  - to pH 8.3: below it at the start" in lines
    assert f"  - to pH 4.6 (the end point that suits this alkalinity): {p.volumes_ml[4.6]:.3f} mL" in lines
    assert f"  - to pH 3.3 (last point): {p.volumes_ml[3.3]:.3f} mL" in lines
    assert len(lines) == 1 + len(p.volumes_ml)


def test_fixed_end_point_is_not_praised_in_dilute_water():
    """Below 400 µeq/L it reads too much, and the line of its volume says so."""
    assert "to pH 4.9 (the fixed end point for this alkalinity; in so dilute water it reads too much): " in flat(SOFT)
    assert "suits this alkalinity" not in flat(SOFT)


def test_acid_water_reaches_no_equivalence_point():
    """No negative volume is asked for."""
    words = flat(SOFT | {"alkalinity_eq_l": -5e-5, "ph": None})
    assert "to the equivalence point: none; alkalinity is below zero, base would be needed" in words
    assert "-0." not in words.split("Steps;")[0]


def test_counts_are_whole():
    """A digital titrator shows counts: 1 meq/L in 100 mL by 0.16 eq/L are 0.625 mL or 500 counts; steps and points in counts too."""
    text, p = text_of(COUNTS)
    assert ": 0.625 mL = 500 counts" in text
    assert f"down to pH 5.5: {p.steps_ml[0]:.3f} mL = {p.steps_ml[0] * 800:.0f} counts at a time" in text
    assert block(text, "Points (")[0] == f"Points ({len(p.table)}): counts and the pH to expect"
    assert "800 counts are 1 mL." in text
    assert "counts" not in text_of(HARD)[0]


def test_one_count_is_one():
    """No `1 counts`."""
    words = flat({"alkalinity_eq_l": 2e-3, "strength_eq_l": 1.6, "device": "counts", "ph": 8.44})
    assert " = 1 count" in words
    assert " 1 counts" not in words


def test_points_are_read_down_the_columns():
    """Every point of the table once, four columns, in order when read downward."""
    text, p = text_of(HARD)
    cells = [re.findall(r"(\d+\.\d{3}) +(\d+\.\d\d)", line) for line in block(text, "Points (")[1:]]
    height = len(cells)
    down = [cells[i][k] for k in range(4) for i in range(height) if k < len(cells[i])]
    assert_allclose([float(ml) for ml, _ in down], p.table["titrant_ml"], rtol=0, atol=5e-4)
    assert_allclose([float(ph) for _, ph in down], p.table["ph"], rtol=0, atol=0.005001)


STARTS = [(7.6, 2e-3, ["down to pH 5.5", "from there to pH 4.3", "on to pH 3.3"]), (5.2, 5e-5, ["down to pH 4.3", "on to pH 3.3"]),
          (4.1, -7e-5, ["down to pH 3.3"])]


@pytest.mark.parametrize(("ph", "alkalinity", "parts"), STARTS)
def test_steps_begin_where_the_water_is(ph, alkalinity, parts):
    """No step is asked for above the first pH."""
    lines = block(text_of({"alkalinity_eq_l": alkalinity, "ph": ph, "device": "microburette"})[0], "Steps;")
    said = [line.strip(" -").split(":")[0] for line in lines if re.match(r"  - (down|from|on) ", line)]
    assert said == parts


def test_verdict_and_better_choices():
    """That it suits; or why not, and at most three that do, with titrant and dilution."""
    assert "Strength and sample volume suit each other." in flat(HARD)
    words = block(text_of(SOFT | {"device": "burette"})[0], "Strength and sample volume do not suit")
    assert words[0] == "Strength and sample volume do not suit: too little titrant to the end point: its reading is too coarse."
    assert words[1] == "Better:"
    assert words[2] == "  - 0.02 eq/L in a microburette with 100 mL of sample: 0.500 mL to the end point, 0.5 % titrant."
    assert 3 <= len(words) <= 5


def test_nothing_better_has_a_remedy():
    """Neither strength nor volume will do: other ways are named."""
    words = flat({"alkalinity_eq_l": 0.3, "strength_eq_l": 1.0, "ph": 8.5})
    assert "No usual strength with 25 to 200 mL of sample suits this device." in words
    assert "Better:" not in words


def test_what_the_result_will_be_worth():
    """Method and 90 % interval of the planned curve: 1.645 times its uncertainty, in both units; and what a single end point would read."""
    text, p = text_of(SOFT)
    r = p.result.results.iloc[0]
    half = 1.645 * r["recommended_u_ueq_l"]
    words = " ".join(text.split())
    assert f"gives the alkalinity by the Gran line to ± {half:.2g} µeq/L (± {half * 0.0500435:.2g} mg/L as CaCO3; 90 % interval" in words
    assert f"A single end point at pH 4.5 would read {r['fixed_4_5_ueq_l']:.1f} µeq/L." in words


def test_assumptions_and_cautions():
    """First pH given or air; closed vessel; every caution of titrations."""
    words = flat(HARD)
    assert "first pH as given: 7.6." in words
    air = flat(HARD | {"ph": None})
    assert "first pH not given: water in equilibrium with air of 425 ppm CO2" in air
    assert "CO2 stays in the vessel; carbonate is the only weak acid." in air
    assert all(row["words"] in words for row in read_table("cautions") if row["command"] == "titration")
