"""The published simulated titration of sea water: its curve and what the fit makes of it."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[1] / "published"))

from published_rows import read_rows

from aquabuf.engine.balance import Family
from aquabuf.engine.fit import fit_curve
from aquabuf.engine.titrate import Points, titration_curve

ROWS = read_rows("titration")
# Dickson 1981, Deep-Sea Res. 28A:609, inputs recalled: mol/kg, free hydrogen ion scale, constants of one sample
ALKALINITY, CARBON = 2450e-6, 2200e-6
K1, K2, K_BORIC, K_WATER, K_BISULFATE, K_FLUORIDE = 1.00e-6, 8.20e-10, 1.78e-9, 4.32e-14, 1.0 / 12.3, 1.0 / 408.0
BORON, SULFATE, FLUORIDE = 420e-6, 28240e-6, 70e-6
SAMPLE_G, ACID_MOL_KG = 200.0, 0.3


def points_of(mass_g):
    """Points of the titration after so much acid, with the constants of the paper."""
    w = np.atleast_2d(np.asarray(mass_g, dtype=float))
    one = np.ones(w.shape)
    families = (Family(BORON * one, (K_BORIC * one,), 0), Family(SULFATE * one, (K_BISULFATE * one,), 1),
                Family(FLUORIDE * one, (K_FLUORIDE * one,), 1))
    return Points(acid=ACID_MOL_KG * w / SAMPLE_G, dilution=SAMPLE_G / (SAMPLE_G + w), k1=K1 * one, k2=K2 * one, c_h=one,
                  c_oh=K_WATER * one, h_per_activity=one, families=families)


@pytest.mark.parametrize("row", [r for r in ROWS if r["what"] == "simulated"], ids=lambda r: f"{r['alkalinity_ueq_l']} g")
def test_curve_of_the_paper(row):
    """Minus log of free H+ after each mass of acid."""
    curve = titration_curve(points_of([float(row["alkalinity_ueq_l"])]), np.array([ALKALINITY]), np.array([CARBON]))
    assert_allclose(curve[0, 0], float(row["expected"]), rtol=0, atol=float(row["atol"]), err_msg=row["source"])


@pytest.mark.parametrize("offset", [0.0, 0.05])
def test_fit_recovers_alkalinity_and_carbon(offset):
    """From the table as printed, six decimals and 0.05 g apart, with a true and with a shifted electrode."""
    points = points_of(np.arange(0.0, 2.501, 0.05))
    ph = np.round(titration_curve(points, np.array([ALKALINITY]), np.array([CARBON])), 6) + offset
    fit = fit_curve(points, ph, np.ones(ph.shape, bool), u_ph=np.array([1e-4]), u_acid=np.array([1e-9]),
                    alkalinity=np.array([2e-3]))
    expected = {r["quantity"]: r for r in ROWS if r["what"] == "simulated_result"}
    for quantity, value in (("alkalinity_umol_kg", fit.alkalinity[0]), ("carbon_umol_kg", fit.carbon[0])):
        row = expected[quantity]
        assert_allclose(value * 1e6, float(row["expected"]), rtol=0, atol=float(row["atol"]), err_msg=row["source"])
    assert_allclose(fit.offset_ph, offset, atol=2e-6)
