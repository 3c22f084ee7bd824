"""The alkalinity balance written a second time, in 50 digits, from the conditional constants alone.

Source of the equation: the definition of total alkalinity (Dickson 1981; SOP 3 of the DOE handbook): every acid counts
the protons it has lost beyond its zero level, OH- plus, H+ minus. Nothing of the engine's balance or solver is used.
"""

import mpmath as mp
import numpy as np

from aquabuf import Water
from aquabuf.chem.acids import acid_table

DIGITS = 50
ACIDS = ("boron", "phosphate", "silica", "ammonium", "sulfide", "sulfate", "fluoride", "acetate", "citrate", "phthalate",
         "oxalate", "sulfite")


def random_waters(count, seed):
    """Waters over the whole range: 0 to 50 °C, fresh and to salinity 50, up to a dozen acids, alkalinity of both signs."""
    rng = np.random.default_rng(seed)
    marine = rng.random(count) < 0.4
    totals = {f"{name}_mol_l": 10.0 ** rng.uniform(-7, -2, count) * (rng.random(count) < 0.6) for name in ACIDS}
    size = 10.0 ** rng.uniform(-7, -0.8, count)
    return Water.from_alkalinity_dic(
        alkalinity_eq_l=np.where(rng.random(count) < 0.35, -size, size),
        dic_mol_l=10.0 ** rng.uniform(-8, -1, count) * (rng.random(count) < 0.95), t_c=rng.uniform(0, 50, count),
        salinity=np.where(marine, rng.uniform(1, 50, count), 0.0),
        ionic_strength_mol_l=10.0 ** rng.uniform(-5, -1, count), **totals)


def precise_ph(water, row):
    """Meter pH of one row by 36 halvings of pH -6 to 22 and secant steps to 45 digits."""
    with mp.workdps(DIGITS):
        c = water.state.conditions
        at = {name: mp.mpf(float(getattr(c, name)[row])) for name in ("c_h", "c_oh", "k1", "k2", "activity_per_h")}
        alkalinity, dic = (mp.mpf(float(v[row])) for v in (water.state.alkalinity, water.state.dic))
        groups = [(dic, [at["k1"], at["k2"]], 0)]
        for dissolved in water.state.acids:
            if dissolved.total[row] > 0:
                zero = sum(pk < 4.5 for pk in acid_table()[dissolved.acid.name].pk)
                steps = [mp.mpf(float(k[row])) for k in c.acid_constants(dissolved.acid)]
                groups.append((mp.mpf(float(dissolved.total[row])), steps, zero))

        def excess(x):
            h = mp.power(10, -x)
            total = at["c_oh"] / h - at["c_h"] * h - alkalinity
            for amount, steps, zero in groups:
                weights = [mp.mpf(1)]
                for k in steps:
                    weights.append(weights[-1] * k / h)
                lost = sum(j * w for j, w in enumerate(weights)) / sum(weights)
                total += amount * (lost - zero)
            return total

        low, high = mp.mpf(-6), mp.mpf(22)
        for _ in range(36):
            middle = (low + high) / 2
            low, high = (low, middle) if excess(middle) > 0 else (middle, high)
        f_low, f_high = excess(low), excess(high)
        for _ in range(8):
            if f_high == f_low or abs(high - low) < mp.mpf(10) ** -45:
                break
            low, high, f_low = high, high - f_high * (high - low) / (f_high - f_low), f_high
            f_high = excess(high)
        return high - mp.log10(at["activity_per_h"])


def ph_errors(water):
    """Distance of every solved row from the high-precision pH. [-]"""
    rows = np.flatnonzero(water.state.status >= 0)
    ph = water.state.ph()
    with mp.workdps(DIGITS):
        return rows, np.array([float(abs(precise_ph(water, r) - mp.mpf(float(ph[r])))) for r in rows])
