"""Weak acids: the record, its messages, the shipped table and the course in temperature."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from aquabuf.chem.acids import Acid, acid_named, acid_table, k_of_temperature
from aquabuf.errors import AquabufError, InputError
from aquabuf.tables import read_table

# The zero level of Dickson 1981 (pK 4.5) as the definition of total alkalinity writes it out for the usual acids:
# H3PO4 counts minus, HPO4-- and PO4--- plus; HSO4- and HF minus; B(OH)4-, SiO(OH)3-, NH3, HS- plus.
ZERO_LEVEL_SPECIES = {
    "phosphate": "H2PO4-", "sulfate": "SO4--", "fluoride": "F-", "boron": "B(OH)3", "silica": "Si(OH)4",
    "ammonium": "NH4+", "sulfide": "H2S", "acetate": "CH3COOH", "formate": "HCOO-", "citrate": "H2Cit-",
    "oxalate": "Ox--", "phthalate": "HPht-", "sulfite": "HSO3-", "lactate": "CH3CHOHCOO-", "benzoate": "C6H5COO-",
}


@pytest.mark.parametrize(("name", "species"), ZERO_LEVEL_SPECIES.items())
def test_zero_level_is_that_of_the_alkalinity_definition(name, species):
    """The form counted zero is the one that dominates at pH 4.5 (Dickson 1981; SOP 3 of the DOE handbook)."""
    acid = acid_named(name)
    assert acid.species[acid.zero_level] == species


def _charge_of_formula(formula):
    """Charge written at the end of a formula."""
    signs = re.search(r"[+-]*$", formula).group()
    return len(signs) * (1 if signs.startswith("+") else -1)


@pytest.mark.parametrize("acid", acid_table().values(), ids=lambda acid: acid.name)
def test_each_form_has_one_charge_less_than_the_one_before(acid):
    """Losing a proton lowers the charge by one: a law for every row, read off the written formulas."""
    charges = [_charge_of_formula(formula) for formula in acid.species]
    assert charges == [acid.charge_full - i for i in range(len(acid.pk) + 1)]


def test_pk_at_the_zero_level_border_counts_as_weaker():
    """An acid of pK 4.5 counts in alkalinity when dissociated (Dickson 1981: 4.5 or more)."""
    assert Acid(name="border", pk=(4.5,)).zero_level == 0
    assert Acid(name="stronger", pk=(4.499,)).zero_level == 1


def test_own_acid_gets_readable_forms():
    """Formulas of a user's acid follow from its protons and charges."""
    acid = Acid(name="humic", pk=(3.0, 5.0, 9.0))
    assert acid.species == ("H3humic", "H2humic-", "Hhumic--", "humic---")
    assert acid.pairs == ("H3humic/H2humic-", "H2humic-/Hhumic--", "Hhumic--/humic---")
    assert Acid(name="amine", pk=(9.0,), charge_full=1).species == ("Hamine+", "amine")
    assert (acid.enthalpy_j_mol, acid.heat_capacity_j_mol_k) == ((0.0,) * 3, (0.0,) * 3)


@pytest.mark.parametrize(("arguments", "message"), [
    ({"pk": ()}, r"acid 'x' must have 1 to 6 pK values; found 0\. Give them as a list"),
    ({"pk": (1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0)}, r"acid 'x' must have 1 to 6 pK values; found 7"),
    ({"pk": (5.0, 4.0)}, r"pK values of acid 'x' must be numbers that rise; found \[5\.0, 4\.0\]\. List them"),
    ({"pk": (4.0, 4.0)}, r"must be numbers that rise; found \[4\.0, 4\.0\]"),
    ({"pk": (np.nan,)}, r"must be numbers that rise; found \[nan\]"),
    ({"pk": (4.0, np.inf)}, r"must be numbers that rise; found \[4\.0, inf\]"),
    ({"pk": (4.0, 5.0), "enthalpy_j_mol": (1.0,)},
     r"enthalpy_j_mol of acid 'x' must have one value per pK \(2\); found 1\. Use 0 where it is not known"),
    ({"pk": (4.0,), "heat_capacity_j_mol_k": (1.0, 2.0)},
     r"heat_capacity_j_mol_k of acid 'x' must have one value per pK \(1\); found 2\. Use 0"),
    ({"pk": (4.0,), "species": ("HX",)}, r"acid 'x' has 2 forms; found 1 names\. Name each one"),
])
def test_bad_acid_says_rule_value_and_remedy(arguments, message):
    """Each field is checked when the record is made."""
    with pytest.raises(InputError, match=message):
        Acid(name="x", **arguments)


def test_unknown_acid_is_answered_with_the_nearest_names():
    """A slip of the pen gets the likely names, and how to define an acid of one's own."""
    with pytest.raises(InputError, match=r"no weak acid is called 'phosphat'; nearest: phosphate.*Define your own"):
        acid_named("phosphat")


def test_unknown_acid_without_near_name_lists_all():
    """A far-off name is answered with every known one."""
    with pytest.raises(AquabufError, match=r"called 'zzz'; nearest: acetate, ammonium, .*, sulfite"):
        acid_named("zzz")


def test_own_acid_outranks_the_shipped_one():
    """A user's acid of the same name wins; the shipped table stays as it was."""
    own = Acid(name="acetate", pk=(4.7,))
    assert acid_named("acetate", [own]) is own
    assert acid_named("acetate").pk == (4.756,)  # handbook (NIST 46)
    assert acid_named("humic", [Acid(name="humic", pk=(4.0,))]).pk == (4.0,)


def test_acid_is_read_only():
    """A shared record cannot be changed by accident."""
    with pytest.raises(AttributeError, match="cannot assign"):
        acid_named("acetate").pk = (5.0,)


@pytest.mark.parametrize("t_c", [5.0, 25.0, 60.0])
def test_course_in_temperature_integrates_van_t_hoff(t_c):
    """d ln K/dT = dH(T)/(R T^2) with dH(T) = dH + dCp (T - T25), integrated by quadrature."""
    pk, enthalpy, heat_capacity = 4.5, 12e3, -180.0
    rise, _ = quad(lambda t: (enthalpy + heat_capacity * (t - 298.15)) / (8.314462618 * t * t), 298.15, t_c + 273.15)
    expected = -pk * np.log(10.0) + rise
    assert_allclose(np.log(k_of_temperature(pk, enthalpy, heat_capacity, t_c)), expected, rtol=0, atol=1e-9)


def test_shipped_table_has_a_reference_and_a_mark_in_each_row():
    """Every fact says where it comes from and how it is known; no name is listed twice."""
    rows = read_table("acids")
    assert all(len(row["reference"]) > 10 and row["mark"] in {"printed", "recalled", "derived"} for row in rows)
    assert len({row["name"] for row in rows}) == len(rows) == len(acid_table())


def test_missing_table_is_an_error():
    """A table that is not shipped cannot be read as an empty one."""
    with pytest.raises(FileNotFoundError, match="no_such_table"):
        read_table("no_such_table")
