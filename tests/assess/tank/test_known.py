"""Buffers behind a titration and acidity by pH and metals, told in words."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.known import known_of
from aquabuf.assess.tank.waste import Waste, chemistry
from aquabuf.chem.metals import metals
from aquabuf.engine.conditions import conditions


def of_metals(ph, **mg_l):
    """A waste known by pH and metals, in mg/L; its sulfate is left out."""
    names = {"fe2": "iron(II)", "fe3": "iron(III)", "al": "aluminum", "mn": "manganese(II)", "zn": "zinc", "mg": "magnesium"}
    found = {names[k]: 1e-3 * v / metals()[names[k]].molar_mass_g for k, v in mg_l.items()}
    return Waste(name="seep", ph=ph, metals=found)


def told(waste, flow=22.7):
    """What is known of one waste."""
    return known_of(chemistry([waste]), (flow,))[0]


@pytest.mark.parametrize(("ph", "amounts", "expected"), [  # facts 5.4, computed with exact weights (Kirby & Cravotta form)
    (3.0, {"fe3": 50, "al": 20, "mn": 10}, 313.96), (2.5, {"fe2": 100, "fe3": 200, "al": 80, "mn": 15}, 1347.60),
    (4.0, {"fe3": 2, "al": 25, "mn": 30}, 204.14),
])
def test_acidity_of_a_seep(ph, amounts, expected):
    """mg/L as CaCO3 and the load of 100 gpm, beside what the chemistry takes."""
    found = told(of_metals(ph, **amounts))
    assert_allclose(found.acidity_eq_l * 50.043e3, expected, rtol=2e-4)
    assert "mg/L as CaCO3" in found.words[0]
    assert f"{expected * 22.7 * 24e-3:,.0f}"[:2] in found.words[0]


@pytest.mark.parametrize("waste", [of_metals(3.0, zn=20, fe3=10), of_metals(3.0, mg=50), Waste(name="acid", base_eq_l=-0.01)])
def test_no_acidity_where_the_sum_would_leave_something_out(waste):
    """Other metals, none of these, or no pH."""
    found = told(waste)
    assert np.isnan(found.acidity_eq_l)
    assert found.words == ()


def test_magnesium_beside_iron_does_no_harm():
    """It stays dissolved."""
    assert_allclose(told(of_metals(3.0, fe3=50, al=20, mn=10, mg=40)).acidity_eq_l * 50.043e3, 313.96, rtol=2e-4)


def test_buffers_behind_a_titration():
    """Acetic 8 mmol/L and ammonium 3 mmol/L, written out here, come back with their pK."""
    c = conditions(25.0)
    ph = np.arange(3.0, 11.01, 0.25)
    h = 10.0**-ph
    base = 8e-3 / (1.0 + h / 10.0**-4.75) + 3e-3 / (1.0 + h / 10.0**-9.25) + float(c.c_oh) / h - float(c.c_h) * h
    start = 8e-3 / (1.0 + 10.0**(4.75 - 4.0)) + 3e-3 / (1.0 + 10.0**(9.25 - 4.0)) + float(c.c_oh) * 1e4 - float(c.c_h) * 1e-4
    found = told(Waste(name="w", curve=MeasuredCurve("a", base - start, ph)))
    assert_allclose(found.spectrum.pk, [4.75, 9.25], atol=0.02)
    assert_allclose(found.spectrum.mol_l, [8e-3, 3e-3], rtol=0.02)
    assert "pK 4.75" in found.words[0]
    assert "within its reading error" in found.words[0]


def test_a_curve_that_no_weak_acids_tell_is_said_to_be_off():
    """A step that is steeper than any weak acid, as a metal makes it when it falls out."""
    c = conditions(25.0)
    ph = np.concatenate([np.arange(3.0, 5.0, 0.25), np.linspace(5.0, 5.1, 12), np.arange(5.35, 10.0, 0.25)])
    base = 1e-2 * np.clip((ph - 5.0) / 0.1, 0.0, 1.0) + float(c.c_oh) * 10.0**ph - float(c.c_h) * 10.0**-ph + 1e-6 * ph
    found = told(Waste(name="w", curve=MeasuredCurve("a", base - base[0] - 1e-4, ph)))
    assert "no weak acids" in found.words[0]
