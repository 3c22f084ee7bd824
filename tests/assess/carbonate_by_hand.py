"""Fresh carbonate water worked out a second time, from printed constants only; nothing of aquabuf is used.

log K of Plummer & Busenberg 1982 (their printed equations, evaluated), Marshall & Franck 1981 for water (printed
handbook table), the Debye-Hueckel slope of Helgeson & Kirkham 1974 (printed; 10 and 20 °C between the printed
points), density of water from the handbook, CO2 fugacity over pressure of Weiss 1974 (recalled).
"""

import numpy as np
from scipy.optimize import brentq

LN10 = np.log(10.0)
#      log K0, log K1, log K2, log Kw, A, density kg/L
TABLE = {
    10.0: (-1.2694, -6.4633, -10.4879, -14.528, 0.4976, 0.99970),
    25.0: (-1.4679, -6.3519, -10.3289, -13.995, 0.5092, 0.99705),
}
FUGACITY_RATIO = 0.9968  # at 25 °C and 1 atm


class BareWater:
    """Carbonate, hydrogen and hydroxide ions at one ionic strength [mol/L]; h is the meter activity."""

    def __init__(self, t_c, strength):
        k0, k1, k2, kw, a, self.rho = TABLE[t_c]
        root = np.sqrt(strength)
        g1 = 10.0 ** (-a * (root / (1.0 + root) - 0.3 * strength))  # Davies 1962; double charge has its fourth power
        g0 = 10.0 ** (0.1 * strength)
        self.k0 = 10.0**k0 / g0 * FUGACITY_RATIO * self.rho  # mol/L per atm of pressure
        self.k1, self.k2 = 10.0**k1 * g0 / g1, 10.0**k2 / g1**3
        self.c_h, self.c_oh = self.rho / g1, 10.0**kw / g1 * self.rho

    def shares(self, ph):
        """Fractions of total carbon as CO2, HCO3- and CO3--."""
        h = 10.0**-ph
        parts = np.array([1.0, self.k1 / h, self.k1 * self.k2 / h**2])
        return parts / parts.sum()

    def dic(self, ph, alkalinity):
        """Total carbon of a water of this pH and alkalinity."""
        _, a1, a2 = self.shares(ph)
        return (alkalinity - self.c_oh * 10.0**ph + self.c_h * 10.0**-ph) / (a1 + 2.0 * a2)

    def alkalinity(self, ph, dic):
        """Alkalinity at a pH, carbon kept."""
        _, a1, a2 = self.shares(ph)
        return dic * (a1 + 2.0 * a2) + self.c_oh * 10.0**ph - self.c_h * 10.0**-ph

    def alkalinity_at_co2(self, ph, co2):
        """Alkalinity at a pH, dissolved CO2 held."""
        return self.alkalinity(ph, co2 / self.shares(ph)[0])

    def ph(self, alkalinity, dic):
        """pH of this alkalinity and carbon."""
        return brentq(lambda x: self.alkalinity(x, dic) - alkalinity, 2.0, 12.0, xtol=1e-12)

    def ph_at_co2(self, alkalinity, co2):
        """pH of this alkalinity with dissolved CO2 held."""
        return brentq(lambda x: self.alkalinity_at_co2(x, co2) - alkalinity, 2.0, 12.0, xtol=1e-12)

    def buffer(self, ph, dic, exchange="closed"):
        """Buffer intensity: ln 10 (H+ + OH- + carbon terms), Van Slyke's sum over forms."""
        a0, a1, a2 = self.shares(ph)
        own = self.c_h * 10.0**-ph + self.c_oh * 10.0**ph
        closed = a0 * a1 + a1 * a2 + 4.0 * a0 * a2
        return LN10 * (own + dic * (closed if exchange == "closed" else a1 + 4.0 * a2))
