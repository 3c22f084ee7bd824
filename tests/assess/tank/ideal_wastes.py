"""Tables of ideal wastes from closed forms at 25 °C, Kw 1e-14, for tests that check printed figures."""

import numpy as np

from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.tank.reagents import reagent_of
from aquabuf.chem.products import products
from aquabuf.engine.readout import GRID_PH, Readout

PK_CARBONIC = (6.352, 10.329)
H = 10.0**-GRID_PH


def protons_lost(pks):
    """Mean protons lost by an acid with these pK values."""
    weights, ks = [np.ones_like(H)], 1.0
    for n, pk in enumerate(pks, start=1):
        ks = ks * 10.0**-pk
        weights.append(ks / H**n)
    return sum(n * w for n, w in enumerate(weights)) / sum(weights)


def ideal(*held):
    """A readout with these carriers, the last of them inorganic carbon."""
    return Readout(1.0, 1e-14, np.stack([*(np.broadcast_to(h, GRID_PH.shape) for h in held), protons_lost(PK_CARBONIC)]))


NOTHING = 0.0  # held by a carrier that is strong acid or base alone


def stocked(name, strength=1.0, **kwargs):
    """A product of the table in the store."""
    return Stocked(name=name, product=products()[name], strength=strength, **kwargs)


def reagent(name, strength=1.0, *, density_kg_l=None, price_per_kg=None, **kwargs):
    """A reagent of which all equivalents react, unless told otherwise."""
    return reagent_of(stocked(name, strength, density_kg_l=density_kg_l, price_per_kg=price_per_kg),
                      **{"efficiency": 1.0} | kwargs)


def diluted_caustic(normality):
    """Sodium hydroxide of this normality, ideal."""
    return reagent("caustic soda", 1e-3 * products()["caustic soda"].molar_mass_g * normality, density_kg_l=1.0)
