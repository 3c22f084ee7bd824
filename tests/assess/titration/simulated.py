"""Titrations with every error of a bench, made without aquabuf's chemistry: carbonate constants printed in handbooks, the
Davies equation, and bisection.
"""

import numpy as np
import pandas as pd
from carbonate_by_hand import TABLE

from aquabuf.readings.titration.result import TITRATION_FLAG_COLUMNS, TITRATION_REJECTED_COLUMNS, Titrations

ERRORS = {"strength": 0.005, "scale": 0.001, "sample_ml": 0.02, "sample": 0.002, "added_ml": 0.005, "ph": 0.01,
          "ph_all": 0.03}  # standard deviations, those that the column table takes by default
BISECTIONS = 70


def bisected(balance, low, high, shape):
    """Root of a falling function of pH at every point."""
    low, high = np.full(shape, low), np.full(shape, high)
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        above = balance(middle) > 0.0
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return 0.5 * (low + high)


def ph_of(alkalinity, carbon, acid, dilution, strength, t_c):
    """pH of closed carbonate water after acid, per liter of sample; ionic strength at each point is given."""
    _, k1, k2, kw, a, rho = TABLE[t_c]
    root = np.sqrt(strength)
    g1 = 10.0 ** (-a * (root / (1.0 + root) - 0.3 * strength))
    g0 = 10.0 ** (0.1 * strength)
    k1, k2 = 10.0**k1 * g0 / g1, 10.0**k2 / g1**3

    def short(ph):  # alkalinity that is there less the one this pH would need
        h = 10.0**-ph
        carbonate = carbon * (k1 / h + 2.0 * k1 * k2 / h**2) / (1.0 + k1 / h + k1 * k2 / h**2)
        water = (10.0**kw / g1 * rho / h - rho / g1 * h) / dilution
        return alkalinity - acid - carbonate - water
    return bisected(short, 1.0, 13.0, np.broadcast_shapes(np.shape(acid), np.shape(strength)))


class Bench:
    """Titrations of random waters, with their truth."""

    def __init__(self, count, low, high, seed, *, t_c=25.0, points=30, end_ml=4.0, sample_ml=100.0, purged=False):
        rng = np.random.default_rng(seed)
        self.alkalinity = rng.uniform(low, high, count)
        self.carbon = np.maximum(self.alkalinity, 0.0) * rng.uniform(1.02, 1.5, count) + rng.uniform(1e-5, 4e-5, count)
        if purged:
            self.carbon[:] = 0.0
        self.t_c, self.count, self.purged = t_c, count, purged
        self.salt = 1.2 * np.abs(self.alkalinity) + 1e-4
        top = self.alkalinity + 6e-4
        self.strength, self.sample_ml = np.round(np.maximum(top * sample_ml / end_ml, 1e-4), 4), sample_ml
        end = np.maximum(self.alkalinity, 0.0) * sample_ml / self.strength
        last = top * sample_ml / self.strength
        first = np.linspace(0.0, 0.8, 8) * end[:, None]
        rest = 0.85 * end[:, None] + (last - 0.85 * end)[:, None] * np.linspace(0.0, 1.0, points - 8)
        self.added = np.round(np.sort(np.concatenate([first, rest], axis=1), axis=1), 3)
        shared = {n: 1.0 + ERRORS[n] * rng.standard_normal((count, 1)) for n in ("strength", "scale")}
        self.true_strength = self.strength[:, None] * shared["strength"]
        self.true_sample = sample_ml * (1.0 + np.hypot(ERRORS["sample_ml"] / sample_ml, ERRORS["sample"])
                                        * rng.standard_normal((count, 1)))
        slips = ERRORS["added_ml"] * rng.standard_normal(self.added.shape) * (self.added > 0.0)
        true_added = np.maximum(self.added * shared["scale"] + slips, 0.0)
        off = ERRORS["ph_all"] * rng.standard_normal((count, 1)) + ERRORS["ph"] * rng.standard_normal(self.added.shape)
        self.ph = np.round(self.true_ph(true_added) + off, 3)

    def true_ph(self, added):
        """pH that a perfect electrode would read."""
        acid = self.true_strength * added / self.true_sample
        dilution = self.true_sample / (self.true_sample + added)
        alkalinity = self.alkalinity[:, None]
        used = np.clip(acid, np.minimum(alkalinity, 0.0), np.maximum(alkalinity, 0.0))
        strength = dilution * (self.salt[:, None] - np.abs(used)) + (1.0 - dilution) * self.true_strength
        return ph_of(alkalinity, self.carbon[:, None], acid, dilution, strength, self.t_c)

    def acid_to(self, ph):
        """Acid that truly brings each water to a pH; nan where it starts below. [eq/L of sample]"""
        last = self.added[:, -1:] * 1.1

        def short(share):
            return self.true_ph(last * share) - ph
        share = bisected(short, 0.0, 1.0, (self.count, 1))
        found = (self.true_strength * last * share / self.true_sample)[:, 0]
        return np.where(self.true_ph(np.zeros((self.count, 1)))[:, 0] > ph, found, np.nan)

    def titrations(self):
        """What the user would write down."""
        n, m = self.added.shape
        samples = pd.DataFrame({
            "row": 2 + m * np.arange(n), "sample_id": [f"s{i}" for i in range(n)], "sample_volume_ml": self.sample_ml,
            "titrant_strength_eq_l": self.strength, "temperature_c": self.t_c, "ionic_strength_mol_l": self.salt,
            "exchange": "purged" if self.purged else "closed", "titrant_acid": "hydrochloric", "filtered": "yes"})
        return titrations(samples, self.added, self.ph)


def titrations(samples, added, ph):
    """Titrations object of a rectangle of points."""
    n, m = added.shape
    return Titrations(
        samples=samples, usable=np.ones(n, dtype=bool), start=np.arange(n + 1) * m, added=added.ravel(), reading=ph.ravel(),
        minutes=np.full(n * m, np.nan), point_row=np.arange(2, 2 + n * m), added_by=np.full(n, "volume", dtype=object),
        read_as=np.full(n, "ph", dtype=object), rejected=pd.DataFrame(columns=list(TITRATION_REJECTED_COLUMNS)), notes=(),
        flags=pd.DataFrame(columns=list(TITRATION_FLAG_COLUMNS)), headers={}, acids={})
