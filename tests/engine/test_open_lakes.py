"""Real lakes: pH after bubbling with air, predicted from the alkalinity measured apart from it.

Eastern Lake Survey 1984 (US EPA, public domain). The files are not part of the project: the folder is named by the
environment variable AQUABUF_OPEN_DATA; without it the test is skipped.
"""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from aquabuf import Water

FOLDER = os.environ.get("AQUABUF_OPEN_DATA", "")


@pytest.mark.open_data
@pytest.mark.skipif(not FOLDER, reason="AQUABUF_OPEN_DATA does not name the folder of agency files")
def test_air_equilibrated_ph_of_survey_lakes():
    """Median absolute error at most 0.09, root mean square at most 0.18 in pH.

    Air of the laboratory at 350 µatm CO2 and 22 °C (the agency says 300 ppm, 20 to 25 °C; 350 fits its clear lakes), Gran
    ANC of the revised release, ionic strength 1.6e-5 times conductivity (Russell 1976, recalled).
    """
    lakes = pd.read_csv(Path(FOLDER) / "nsws_lakes_1984.csv")
    lakes = lakes.dropna(subset=["pH_air_equilibrated", "anc_ueq_L_revised", "cond_uS_cm_25C"])
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=lakes["anc_ueq_L_revised"] * 1e-6, pco2_atm=350e-6, t_c=22.0,
                                       ionic_strength_mol_l=1.6e-5 * lakes["cond_uS_cm_25C"])
    error = water.ph - lakes["pH_air_equilibrated"].to_numpy()

    assert error.size > 850
    assert (water.status == 0).all()
    assert np.median(np.abs(error)) <= 0.09
    assert np.sqrt(np.mean(error**2)) <= 0.18
