"""Lakes whose critical load was worked out apart from the code, and a root that is bracketed."""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from aquabuf.assess.lake.critical import CriticalLoadChoice, critical_load, parse_choice

GRAM_PER_EQ = 96.06 / 2  # of sulfate
BASE_CATIONS = ("calcium", "magnesium", "sodium", "potassium")
# Charges in µeq/L, runoff in m/yr and deposition of sulfate in g/m2/yr of the Eastern Lake Survey (US EPA). Of Cedar River
# Flow only the non-marine sums are known: they stand in calcium and sulfate.
LAKES = {
    "hawk pond": ({"calcium": 59.281, "magnesium": 16.287, "sodium": 17.487, "potassium": 6.341, "sulfate": 132.457,
                   "nitrate": 9.775, "chloride": 8.040}, 0.762, 2.10),
    "st john lake": ({"calcium": 73.852, "magnesium": 25.747, "sodium": 23.838, "potassium": 1.560, "sulfate": 133.914,
                      "nitrate": 1.436, "chloride": 6.404}, 0.508, 2.04),
    "cedar river flow": ({"calcium": 203.10, "magnesium": 0.0, "sodium": 0.0, "potassium": 0.0, "sulfate": 118.34,
                          "nitrate": 1.89, "chloride": 0.0}, 0.635, np.nan),
}


@dataclass(frozen=True)
class Fixed:
    """An ANC limit as an option gives it."""

    value_eq_l: float
    is_variable: bool = False


VARIABLE = Fixed(np.nan, True)


def charges_of(**ueq_l):
    """Charges of a lake in eq/L from µeq/L, none for what is not given; numbers or lists."""
    names = (*BASE_CATIONS, "sulfate", "nitrate", "chloride")
    return {name: 1e-6 * np.asarray(ueq_l.get(name, 0.0), dtype=float) for name in names}


def of_lake(name, choice=None):
    """Critical load of one of `LAKES`."""
    charges, runoff, sulfur = LAKES[name]
    return critical_load(charges_of(**charges), runoff, choice or CriticalLoadChoice(),
                         sulfur_deposition_eq_m2_yr=sulfur / GRAM_PER_EQ)


def choice_of(row):
    """Choice of a published row."""
    limit = row["limit_ueq_l"]
    return parse_choice(row["choice"], VARIABLE if limit == "variable" else Fixed(float(limit) * 1e-6))


def bracketed_original(bc, acid, scale):
    """Root of b + F(b) acid = bc by bisection and interpolation between two ends of opposite sign."""
    def off(b):
        return b + np.sin(np.pi / 2 * min(max(b / scale, 0.0), 1.0)) * acid - bc

    if bc <= 0.0:
        return bc
    low, high = (0.0, bc) if acid >= 0.0 else (bc, bc - acid)
    return brentq(off, low, 1.001 * high, xtol=1e-18, rtol=1e-15)
