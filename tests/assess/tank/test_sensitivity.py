"""How demand and tolerance move, against closed forms of strong and weak acids, and the ion product of water."""

import numpy as np
import pytest
from made_jobs import acetic, bicarbonate, course, job, steady, strong

from aquabuf.assess.tank.arrivals import Arrival
from aquabuf.assess.tank.basis import basis_of
from aquabuf.assess.tank.composition import Waste
from aquabuf.assess.tank.sensitivity import sensitivity_of
from aquabuf.chem.acids import acid_table


def rows(*arrivals, **options):
    """The table by its changes, and what the design has."""
    basis = basis_of(job(*arrivals, **options))
    table = sensitivity_of(basis)
    assert list(table.columns) == ["change", "demand_eq_l", "demand_ratio", "tolerance_eq_l", "tolerance_ratio"]
    return basis, {row["change"]: row for row in table.to_dict("records")}


def test_strength_of_strong_acid():
    """A tenth more acid asks for a tenth more base; water has the same tolerance."""
    _, found = rows(steady(strong()), aim=7.0)
    for change, share in (("strength +10 %", 1.1), ("strength -10 %", 0.9)):
        assert found[change]["demand_ratio"] == pytest.approx(share, rel=1e-4)
        assert found[change]["demand_eq_l"] == pytest.approx(0.01 * share, rel=1e-3)
        assert found[change]["tolerance_ratio"] == pytest.approx(1.0, rel=1e-9)


def test_buffers_of_a_weak_acid():
    """Free acetic acid at pH 7 has lost 99.4 % of its protons (pK 4.76) and had lost 36 % at the zero level of 4.5."""
    basis, found = rows(steady(acetic(0.02, base_eq_l=-0.005)), aim=7.0)
    lost = lambda ph: 1.0 / (1.0 + 10.0 ** (4.70 - ph))  # noqa: E731 (pK at 0.02 mol/L, Davies)
    before = basis.fit.demand_eq_l
    gained = 0.2 * 0.02 * (lost(7.0) - acid_table()["acetate"].zero_level)
    assert found["buffers +20 %"]["demand_eq_l"] - before == pytest.approx(gained, rel=0.01)
    assert found["buffers -20 %"]["demand_eq_l"] - before == pytest.approx(-gained, rel=0.01)
    assert found["buffers +20 %"]["tolerance_ratio"] == pytest.approx(1.2, rel=0.02)
    assert found["strength +10 %"]["tolerance_ratio"] == pytest.approx(1.1, rel=0.01)


def test_other_aims_say_which_and_stay_inside():
    """Half a unit either way; held a tenth of the window from its end."""
    _, found = rows(steady(strong()), aim=7.0)
    assert {"aim pH 7.5", "aim pH 6.5"} <= set(found)
    assert found["aim pH 7.5"]["demand_eq_l"] - found["aim pH 6.5"]["demand_eq_l"] == pytest.approx(
        2.0 * (10.0**-6.5 - 10.0**-7.5), rel=0.15)
    _, found = rows(steady(strong()), aim=8.6)
    assert "aim pH 8.7" in found
    assert "aim pH 8.1" in found
    _, found = rows(steady(strong()), window=(6.98, 7.02), aim=7.0)
    assert {"aim pH 7.016", "aim pH 6.984"} <= set(found)


def test_temperature_moves_the_ion_product_of_water():
    """Tolerance from 6 to 9 is that of hydroxide: pKw 13.995, 14.535 and 13.535 at 25, 15... (CRC Handbook, recalled:
    13.680 at 35 °C, 14.346 at 15 °C)."""
    _, found = rows(steady(strong(t_c=25.0)), window=(8.0, 10.0), aim=9.0)
    assert found["at 35 °C"]["tolerance_ratio"] == pytest.approx(10.0 ** (13.995 - 13.680), rel=0.05)
    assert found["at 15 °C"]["tolerance_ratio"] == pytest.approx(10.0 ** (13.995 - 14.346), rel=0.05)
    assert found["at 35 °C"]["demand_ratio"] == pytest.approx(1.0, rel=0.01)


def test_temperature_stays_where_constants_hold():
    """Water of 4 °C is not cooled below zero, nor that of 50 °C heated."""
    _, cold = rows(steady(strong(t_c=4.0)), aim=7.0)
    assert {"at 0 °C", "at 14 °C"} <= set(cold)
    _, hot = rows(steady(strong(t_c=50.0)), aim=7.0)
    assert "at 40 °C" in hot
    assert not any(change in hot for change in ("at 50 °C", "at 60 °C"))


def test_ph_as_read_decides_a_waste_that_is_known_by_it():
    """Strong acid from pH 2 with a trace of acetate: demand goes by 10^-0.1 and 10^0.1."""
    waste = Waste(name="w", ph=2.0, acids={acid_table()["acetate"]: 1e-5}, ions={"chloride": 0.01})
    _, found = rows(steady(waste), aim=7.0)
    assert found["pH read +0.1"]["demand_ratio"] == pytest.approx(10.0**-0.1, rel=0.01)
    assert found["pH read -0.1"]["demand_ratio"] == pytest.approx(10.0**0.1, rel=0.01)
    assert not any("pH read" in change for change in rows(steady(strong()), aim=7.0)[1])


def test_ionic_strength():
    """Rows only where there is one, and as far as the Davies equation goes."""
    _, found = rows(steady(bicarbonate(), flow_m3_h=6.0), aim=7.0)
    assert {"ionic strength times 2", "no ionic strength"} <= set(found)
    _, strongest = rows(steady(strong(-0.6)), aim=7.0)
    assert "ionic strength times 2" not in strongest
    assert "no ionic strength" in strongest


def test_measured_base_of_the_stream_is_kept():
    """Temperature and ionic strength do not bring back the base of the description: -0.02 measured, not -0.01."""
    profile = course([6.0, 6.0], base_eq_l={"": np.array([-0.02, -0.02])})
    _, found = rows(Arrival(waste=strong(), mean_m3_h=None), profile=profile, aim=7.0)
    assert found["at 35 °C"]["demand_eq_l"] == pytest.approx(0.02, rel=1e-3)
    assert found["no ionic strength"]["demand_eq_l"] == pytest.approx(0.02, rel=1e-3)
