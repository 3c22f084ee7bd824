"""Works for the tests of drift and faults, and their water by hand: strong base in carbonate water."""

import numpy as np
from carbonate_by_hand import BareWater
from made_streams import stocked, stream, target
from scipy.optimize import brentq

from aquabuf.assess.plant.steps.adjust import Adjust, Dose
from aquabuf.assess.plant.train import run_train

STRENGTH = 5e-3
CAUSTIC, LIME, CO2 = stocked("caustic soda"), stocked("hydrated lime", strength=0.92), stocked("carbon dioxide")


def by_hand(caustic=0.0):
    """Carbonate water at 25 °C with some caustic in it, one mole of which is half (1 + 1) of ionic strength."""
    return BareWater(25.0, STRENGTH + caustic)


def ph_by_hand(alkalinity, dic, caustic):
    """pH after a dose of caustic. [mol/L]"""
    return by_hand(caustic).ph(alkalinity + caustic, dic)


def caustic_by_hand(alkalinity, dic, ph):
    """Caustic that brings a water to a pH. [mol/L]"""
    return brentq(lambda x: ph_by_hand(alkalinity, dic, x) - ph, 0.0, 5e-3, xtol=1e-15)


def bare(alkalinity, ph):
    """Carbonate water of the model above as a stream, one row per pH or alkalinity, and its carbon."""
    alkalinity, ph = np.broadcast_arrays(np.atleast_1d(np.asarray(alkalinity, dtype=float)), np.asarray(ph, dtype=float))
    dic = np.array([by_hand().dic(p, a) for p, a in zip(ph, alkalinity, strict=True)])
    return stream(alkalinity, dic, t_c=25.0, strength=STRENGTH), dic


def adjusted(raw, *targets, products=(CAUSTIC,)):
    """A run of one step that adjusts."""
    return run_train(raw, [Adjust(name="final", products=products, targets=targets)])


def dosing(products, mol_l, name="dose", **more):
    """A step of fixed doses."""
    return Dose(name=name, products=tuple(products), mol_l=tuple(mol_l), **more)


def ph(low, high=None):
    """A target of pH."""
    return target("ph", low, high)
