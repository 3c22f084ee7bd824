"""Activity and ion pairs written a second time, for tests that compare with them.

The constants come from the tables of chem (each with its published row); how they combine is written here.
"""

import numpy as np
from scipy.optimize import brentq

from aquabuf.chem import fresh
from aquabuf.chem.acids import k_of_temperature
from aquabuf.chem.activity import debye_huckel_a
from aquabuf.chem.properties import water_density

# metal charge, ligand charge, constant; Plummer & Busenberg 1982 (calcium carbonates), others as named in chem.fresh
PAIRS = {
    ("calcium", "HCO3"): fresh.k_pair_cahco3, ("calcium", "CO3"): fresh.k_pair_caco3, ("calcium", "SO4"): fresh.k_pair_caso4,
    ("magnesium", "HCO3"): fresh.k_pair_mghco3, ("magnesium", "CO3"): fresh.k_pair_mgco3,
    ("magnesium", "SO4"): fresh.k_pair_mgso4, ("sodium", "HCO3"): fresh.k_pair_nahco3,
    ("sodium", "CO3"): fresh.k_pair_naco3, ("sodium", "SO4"): fresh.k_pair_naso4, ("potassium", "SO4"): fresh.k_pair_kso4,
}
CHARGE = {"calcium": 2, "magnesium": 2, "sodium": 1, "potassium": 1, "HCO3": -1, "CO3": -2, "SO4": -2}


def gamma(charge, strength, t_c):
    """Davies 1962: log10 gamma = -A z2 (sqrt(I)/(1 + sqrt(I)) - 0.3 I); 0.1 I for neutral species."""
    root = np.sqrt(strength)
    ion = -debye_huckel_a(t_c) * charge**2 * (root / (1.0 + root) - 0.3 * strength)
    return 10.0 ** np.where(np.equal(charge, 0), 0.1 * strength, ion)


def pair_constant(metal, ligand, strength, t_c):
    """Pair over free metal times free ligand, all in mol/L."""
    m, a = CHARGE[metal], CHARGE[ligand]
    factor = gamma(m, strength, t_c) * gamma(a, strength, t_c) / gamma(m + a, strength, t_c)
    return PAIRS[metal, ligand](t_c) * factor / (water_density(t_c) / 1000.0)


class PairedWater:
    """Free ions at a given activity of H+ and carbonate alkalinity, by plain substitution from all-free ions."""

    def __init__(self, metals, sulfate, t_c, strength, *, pairs=tuple(PAIRS)):
        self.metals, self.sulfate, self.t_c, self.strength = metals, sulfate, t_c, strength
        self.k = {pair: pair_constant(*pair, strength, t_c) for pair in pairs if pair[0] in metals}
        self.rho = water_density(t_c) / 1000.0
        g1, g2 = gamma(1, strength, t_c), gamma(2, strength, t_c)
        self.k1 = fresh.k1_carbonic(t_c) * gamma(0, strength, t_c) / g1
        self.k2 = fresh.k2_carbonic(t_c) * g1 / g2
        self.c_h, self.c_oh = self.rho / g1, fresh.k_water(t_c) / g1 * self.rho
        self.k_bisulfate = k_of_temperature(1.987, -22.4e3, -258.0, t_c) * g1 / g2  # Goldberg et al. 2002, recalled
        self.g2 = g2

    def carbonate_alkalinity(self, h, alkalinity):
        """Alkalinity less OH-, plus H+ and HSO4-."""
        return alkalinity - self.c_oh / h + self.c_h * h + self.sulfate * h / (self.k_bisulfate + h)

    def speciate(self, h, carbonate_alkalinity, metals=None):
        """Total over free of each anion, total carbon [mol/L] and calcite saturation index, after 120 half-steps."""
        metals = metals or self.metals
        free = dict(metals)
        so4, hco3 = self.sulfate, carbonate_alkalinity
        for _ in range(120):
            co3 = self.k2 / h * hco3
            ligand = {"HCO3": hco3, "CO3": co3, "SO4": so4}
            for m, total in metals.items():
                bound = 1.0 + sum(k * ligand[a] for (metal, a), k in self.k.items() if metal == m)
                free[m] = 0.5 * (free[m] + total / bound)
            held = {a: 1.0 + sum(k * free[m] for (m, lig), k in self.k.items() if lig == a) for a in ligand}
            so4 = 0.5 * (so4 + self.sulfate / held["SO4"])
            hco3 = 0.5 * (hco3 + carbonate_alkalinity / (held["HCO3"] + 2.0 * self.k2 / h * held["CO3"]))
        co3 = self.k2 / h * hco3
        dic = hco3 * h / self.k1 + hco3 * held["HCO3"] + co3 * held["CO3"]
        product = free["calcium"] * co3 * (self.g2 / self.rho) ** 2
        with np.errstate(invalid="ignore"):  # far from the root carbonate may be negative
            return held, dic, float(np.log10(product / fresh.ksp_calcite(self.t_c)))

    def precipitation_potential(self, h, alkalinity):
        """Calcite to remove [mol/L] until SI = 0, and -log10 h then: two nested bracketed searches."""
        dic = self.speciate(h, self.carbonate_alkalinity(h, alkalinity))[1]

        def removed(x):
            metals = self.metals | {"calcium": self.metals["calcium"] - x}

            def carbon_off(ph):
                at = 10.0**-ph
                return self.speciate(at, self.carbonate_alkalinity(at, alkalinity - 2 * x), metals)[1] - (dic - x)

            ph = brentq(carbon_off, 4.5, 11.5, xtol=1e-12)
            at = 10.0**-ph
            return self.speciate(at, self.carbonate_alkalinity(at, alkalinity - 2 * x), metals)[2], ph

        least = min(self.metals["calcium"], dic, 0.5 * alkalinity)
        x = brentq(lambda x: removed(x)[0], -5.0 * dic - 1e-4, 0.999 * least, xtol=1e-13)
        return x, removed(x)[1]
