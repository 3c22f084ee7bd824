"""Standard buffer solutions, whose pH was measured apart from any speciation.

A buffer is given as a recipe of salts; the engine wants alkalinity. Electroneutrality says
strong cations = sum of the charges of the weak acids' anions + OH- - H+, and alkalinity counts each acid from the form
it has at its zero level (pK 4.5, Dickson 1981), so alkalinity = strong cations + charge of the zero-level forms:
one potassium hydrogen phthalate has alkalinity 1 - 1 = 0, borax (Na 2 : B 4) has 2.
"""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf import Water
from aquabuf.chem.properties import water_density

ZERO_LEVEL_CHARGE = {"phthalate": -1, "phosphate": -1, "citrate": -1, "boron": 0, "carbon": 0}

# molal: strong cations [eq/kg], and the totals of the weak acids [mol/kg]; compositions as published for the standards
RECIPES = {
    "phthalate 0.05": (0.05, {"phthalate": 0.05}),
    "phosphate 1:1": (0.075, {"phosphate": 0.05}),
    "phosphate 1:3.5": (0.008695 + 0.06086, {"phosphate": 0.039125}),
    "borax 0.01": (0.02, {"boron": 0.04}),
    "carbonate": (0.075, {"carbon": 0.05}),
    "citrate 0.05": (0.05, {"citrate": 0.05}),
}


def charge_of(formula):
    """Charge written at the end of a formula."""
    signs = re.search(r"[+-]*$", formula).group()
    return len(signs) * (1 if signs.startswith("+") else -1)


def standard(name, t_c, dilution=1.0):
    """The buffer at `t_c`, its ionic strength found from its own speciation in three rounds."""
    cations, acids = RECIPES[name]
    per_l = water_density(t_c) / 1000.0 / dilution
    totals = {n: v * per_l for n, v in acids.items()}
    alkalinity = cations * per_l + sum(ZERO_LEVEL_CHARGE[n] * v for n, v in totals.items())
    dic = totals.pop("carbon", 0.0)
    strength = np.asarray(cations * per_l)
    for _ in range(3):
        water = Water.from_alkalinity_dic(
            alkalinity_eq_l=alkalinity, dic_mol_l=dic, t_c=t_c, ionic_strength_mol_l=strength,
            **{f"{n}_mol_l": v for n, v in totals.items()})
        strength = 0.5 * (cations * per_l + sum(charge_of(f) ** 2 * v for f, v in water.species_mol_l.items()))
    return water


@pytest.mark.parametrize("t_c", [0.0, 10.0, 25.0, 40.0, 50.0])
def test_phthalate_follows_hetzer(t_c):
    """Hetzer et al. 1977 (printed): pH = 2073.44/T - 13.3270 + 0.045199 T - 3.4846e-5 T2, within 0.02 from 0 to 50 °C."""
    t = t_c + 273.15
    expected = 2073.44 / t - 13.3270 + 0.045199 * t - 3.4846e-5 * t * t
    assert_allclose(standard("phthalate 0.05", t_c).ph, expected, rtol=0, atol=0.02)


@pytest.mark.parametrize(("name", "t_c", "expected", "atol"), [
    ("phthalate 0.05", 25.0, 4.005, 0.01),     # Hamer 1946 and IUPAC, printed
    ("phosphate 1:1", 25.0, 6.865, 0.015),     # JIS Z 8802, printed to 0.01; third decimal recalled from memory
    ("phosphate 1:1", 0.0, 6.984, 0.015),      # the same at other temperatures
    ("phosphate 1:1", 10.0, 6.923, 0.015),
    ("phosphate 1:1", 40.0, 6.838, 0.02),      # Davies departs most in the warm
    ("phosphate 1:1", 50.0, 6.833, 0.02),
    ("borax 0.01", 0.0, 9.464, 0.02),          # IUPAC, third decimal recalled from memory
    ("borax 0.01", 50.0, 9.011, 0.02),
    ("phosphate 1:3.5", 25.0, 7.413, 0.015),   # NBS, recalled from memory, printed to 0.01
    ("borax 0.01", 10.0, 9.33, 0.015),         # JIS Z 8802 and a controller manual, printed
    ("borax 0.01", 25.0, 9.180, 0.015),        # Staples & Bates 1969, printed
    ("borax 0.01", 40.0, 9.07, 0.015),         # JIS Z 8802, printed
    ("carbonate", 0.0, 10.32, 0.025),          # controller manual, printed
    ("carbonate", 25.0, 10.012, 0.025),        # Staples & Bates 1969, printed
    ("carbonate", 50.0, 9.83, 0.025),          # controller manual, printed
    ("citrate 0.05", 25.0, 3.776, 0.02),       # Staples & Bates 1969, printed
])
def test_ph_of_standard(name, t_c, expected, atol):
    """pH(S) of the standards; tolerance is what the Davies equation can give at I = 0.02 to 0.1."""
    assert_allclose(standard(name, t_c).ph, expected, rtol=0, atol=atol)


@pytest.mark.parametrize(("name", "expected"), [
    ("phthalate 0.05", 0.016), ("phosphate 1:1", 0.029), ("phosphate 1:3.5", 0.016), ("carbonate", 0.029),
    ("citrate 0.05", 0.034),
])
def test_van_slyke_buffer_value(name, expected):
    """Printed buffer values of the standards, Lange's Handbook 15th ed. p. 8.106 (two digits: 3 % in themselves).

    The printed ones let ionic strength grow with the base, the engine holds it: phthalate comes out 10 % low, of which
    6 % stay when ionic strength follows (see the series below). Borax is left out: its printed 0.020 disagrees with any
    calculation (0.0234).
    """
    assert_allclose(standard(name, 25.0).buffer_intensity_eq_l(), expected, rtol=0.10 if "phthalate" in name else 0.07)


@pytest.mark.parametrize(("name", "expected"), [
    ("phthalate 0.05", 0.052), ("phosphate 1:1", 0.080), ("phosphate 1:3.5", 0.070), ("borax 0.01", 0.01),
    ("carbonate", 0.079),
])
def test_dilution_value(name, expected):
    """pH change on dilution with an equal volume of water; Bates, recalled from memory.

    Tolerance: the Davies equation flattens toward I = 0.1 and gives up to a quarter less than measured. Citrate is left out:
    its recalled +0.024 is half of what any equation of this type gives for a 1:1 salt of its pK values.
    """
    change = standard(name, 25.0, dilution=2.0).ph - standard(name, 25.0).ph
    assert_allclose(change, expected, rtol=0, atol=0.02)


# mL of 0.1 M NaOH to 50 mL of 0.1 M phthalate, made up to 100 mL: pH and buffer value at 25 °C
# Bower & Bates 1955, as printed in Lange's Handbook 15th ed., table 8.16
BOWER_BATES = [
    (3.0, 4.20, 0.017), (6.6, 4.40, 0.020), (11.1, 4.60, 0.025), (16.5, 4.80, 0.029), (22.6, 5.00, 0.031),
    (28.8, 5.20, 0.030), (34.1, 5.40, 0.025), (38.8, 5.60, None), (42.3, 5.80, None),
]


def series(ml):
    """NaOH adds its own equivalents to the zero alkalinity of potassium hydrogen phthalate."""
    naoh = ml * 0.1 / 100.0
    return Water.from_alkalinity_dic(alkalinity_eq_l=naoh, dic_mol_l=0.0, phthalate_mol_l=0.05, t_c=25.0,
                                     ionic_strength_mol_l=0.05 + 2.0 * naoh)


@pytest.mark.parametrize(("ml", "ph", "beta"), BOWER_BATES)
def test_bower_bates_series(ml, ph, beta):
    """pH, and the buffer value as it was measured: base over pH between neighbors, ionic strength growing with the base."""
    assert_allclose(series(ml).ph, ph, rtol=0, atol=0.025)
    if beta is not None:
        measured = 0.2e-3 / (series(ml + 0.1).ph - series(ml - 0.1).ph)
        assert_allclose(measured, beta, rtol=0.08)
        assert_allclose(series(ml).buffer_intensity_eq_l(), measured, rtol=0.07)  # held ionic strength: 2 to 6 % less
