"""Waters, products and targets for the tests of the plant room."""

import numpy as np

from aquabuf.assess.plant.quantities import find_quantity, in_house
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import TOTALS, Stream
from aquabuf.assess.plant.targets import Target
from aquabuf.chem.products import find_product

MG_CACO3 = 100.086 / 2 * 1e3  # mg per equivalent; IUPAC masses Ca 40.078, C 12.011, O 15.999
IONS = {"calcium": 3e-4, "magnesium": 1e-4, "sodium": 4e-4, "chloride": 3e-4, "sulfate": 1e-4}


def stream(alkalinity=1e-3, carbon=1.1e-3, *, t_c=15.0, strength=3e-3, pressure=1.0, **totals):
    """A stream of as many rows as the longest argument."""
    rows = max(np.size(v) for v in (alkalinity, carbon, t_c, strength, pressure, *totals.values()))

    def full(v):
        return np.broadcast_to(np.asarray(v, dtype=float), (rows,)).copy()

    return Stream(t_c=full(t_c), alkalinity_eq_l=full(alkalinity), carbon_mol_l=full(carbon),
                  totals={n: full(v) for n, v in totals.items()}, ionic_strength_mol_l=full(strength),
                  pressure_atm=full(pressure))


def soft(rows=1):
    """Soft upland water: alkalinity 20 mg/L as CaCO3, pH about 6.9."""
    return stream(np.full(rows, 4e-4), 5e-4, t_c=10.0, strength=1e-3, **IONS)


def stocked(name, price=None, strength=1.0):
    """A shipped product in the store."""
    return Stocked(name=name, product=find_product(name), strength=strength, price_per_kg=price)


def target(name, low, high=None, unit=""):
    """A target in the unit of the tables; one value, or a window."""
    q = find_quantity(name)
    ends = [v if np.isinf(v) else in_house(q, v, unit) for v in (low, low if high is None else high)]
    return Target(quantity=q, low=ends[0], high=ends[1])


def random_streams(rows, seed):
    """Waters from pH about 3 to 11, 0 to 40 °C, some totals unknown or zero, some acid."""
    rng = np.random.default_rng(seed)
    totals = {}
    for name in TOTALS:
        amount = 10.0 ** rng.uniform(-6.0, -2.5, rows)
        totals[name] = np.where(rng.random(rows) < 0.1, np.nan, np.where(rng.random(rows) < 0.1, 0.0, amount))
    return stream(rng.uniform(-1e-3, 6e-3, rows), 10.0 ** rng.uniform(-5.0, -2.0, rows) * (rng.random(rows) < 0.95),
                  t_c=rng.uniform(0.0, 40.0, rows), strength=10.0 ** rng.uniform(-4.0, -2.0, rows), **totals)
