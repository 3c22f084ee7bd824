"""Totals and side effects of a mixture of wastes, against stoichiometry by hand."""

import numpy as np
import pytest
from ideal_wastes import reagent
from made_jobs import CAUSTIC, SODA_ASH, acetic, bicarbonate, strong

from aquabuf.assess.tank.composition import Waste
from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.demand import Load
from aquabuf.assess.tank.effects import effects_of, summary_of, totals_of, treated
from aquabuf.assess.tank.waste import chemistry
from aquabuf.chem.acids import Acid, acid_table


def load(*shares, flow=2.0, base=0.0):
    """A mixture of wastes."""
    return Load(name="made", flow_m3_h=flow, base_eq_l=base, amounts=np.array([*shares, 0.0]))


def test_totals_add_up_by_share():
    """Half of one and a quarter of the other, acids of the user's own apart."""
    own = Acid(name="own", pk=(5.0,))
    first = Waste(name="a", base_eq_l=-0.01, acids={acid_table()["acetate"]: 0.02}, metals={"zinc": 0.001},
                  ions={"sulfate": 0.004}, carbon_mol_l=0.002, solids_g_l=0.4)
    second = Waste(name="b", base_eq_l=0.0, acids={acid_table()["acetate"]: 0.04, own: 0.008},
                   ions={"sulfate": 0.008})
    totals, apart, solids = totals_of(chemistry([first, second]), load(0.5, 0.25))
    assert totals == pytest.approx({"acetate": 0.02, "zinc": 0.0005, "sulfate": 0.004, "carbon": 0.001})
    assert solids == pytest.approx(0.2)
    assert apart == {own: pytest.approx(0.002)}


def test_gas_of_soda_ash_on_sulfuric_acid():
    """0.449 kg of CO2 per kg of H2SO4 (facts 8.2) if all of it leaves: 1 g/L at 2 m3/h is 48 kg/d of acid.

    At pH 4.2 hardly any bicarbonate stays behind.
    """
    acid_eq_l = 2.0 / 98.079
    waste = strong(-acid_eq_l, ions={"sulfate": 0.5 * acid_eq_l})
    found = summary_of(effects_of(chemistry([waste]), load(1.0, base=-acid_eq_l), SODA_ASH, acid_eq_l, 4.2), 48.0)
    assert found.gas_kg_d == pytest.approx(48.0 * 0.449, rel=0.01)


def test_heat_of_strong_acid_with_caustic():
    """13.35 K per eq/L (facts 8.1), and the heat of dilution of the caustic, within a tenth."""
    found = summary_of(effects_of(chemistry([strong(-0.1)]), load(1.0, base=-0.1),
                                  reagent("caustic soda", 0.05, density_kg_l=1.05), 0.1, 7.0), 48.0)
    assert found.heat_k == pytest.approx(1.335, rel=0.1)
    assert found.gas_kg_d == 0.0


def test_sludge_per_day():
    """Suspended solids that come along: 0.5 g/L at 2 m3/h is 24 kg/d."""
    chem = chemistry([strong(solids_g_l=0.5)])
    found = summary_of(effects_of(chem, load(1.0, base=-0.01), CAUSTIC, 0.01, 7.0), 48.0)
    assert found.sludge_kg_d == pytest.approx(24.0, rel=1e-6)


def test_treated_record():
    """Start pH from the load, the product and its strength from the reagent."""
    case = treated(chemistry([strong()]), load(1.0, base=-0.01), CAUSTIC, 0.01, 7.0)
    assert case.start_ph == pytest.approx(2.0, abs=0.06)  # activity of 0.01 mol/L
    assert (case.end_ph, case.dose_eq_l, case.strength, case.flow_m3_h) == (7.0, 0.01, 0.25, 2.0)
    assert case.held is None


def test_water_a_little_below_freezing_is_taken_at_zero():
    """Constants go to -2 °C, side effects to 0 °C."""
    assert treated(chemistry([strong()], t_c=-1.0), load(1.0, base=-0.01), CAUSTIC, 0.01, 7.0).t_c == 0.0


def test_measured_curve_holds_more_than_the_composition():
    """Base held between two pH by a titrated waste is that of its curve, less that of water; carbon of the other waste
    is counted apart."""
    curve = MeasuredCurve("a", np.linspace(0.0, 0.04, 9), np.linspace(3.0, 11.0, 9))
    chem = chemistry([acetic(curve=curve, base_eq_l=None, carbon_mol_l=0.002), bicarbonate()])
    case = treated(chem, load(0.5, 0.5, base=-0.001), CAUSTIC, 0.01, 7.0)
    assert case.held(8.0) - case.held(6.0) == pytest.approx(0.5 * 0.01, rel=1e-3)
