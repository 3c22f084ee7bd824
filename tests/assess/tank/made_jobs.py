"""Small jobs built in Python, for tests of a whole design: strong acid, buffered acid, batches, a measured course."""

import numpy as np
from ideal_wastes import reagent

from aquabuf.assess.tank.composition import Waste
from aquabuf.assess.tank.job import Arrival, Batch, Job, Site, Trial, Window, Wishes
from aquabuf.chem.acids import acid_table
from aquabuf.readings.profile_file import ProfileTable

HOUR_S, DAY_S, L_PER_M3 = 3600.0, 86400.0, 1000.0

CAUSTIC = reagent("caustic soda", 0.25, density_kg_l=1.28, price_per_kg=0.3)
ACID = reagent("sulfuric acid", 0.38, density_kg_l=1.28, price_per_kg=0.2)
GAS = reagent("carbon dioxide", price_per_kg=0.3)
SODA_ASH = reagent("soda ash", price_per_kg=0.4)
LIMESTONE = reagent("limestone", price_per_kg=0.04)
MAGNESIA = reagent("magnesium hydroxide", 0.6, density_kg_l=1.5, price_per_kg=0.5)
REAGENTS = {"caustic": CAUSTIC, "acid": ACID}


def strong(base_eq_l=-0.01, name="strong", **more):
    """Strong acid (negative) or base alone."""
    return Waste(name=name, base_eq_l=base_eq_l, **more)


def acetic(mol_l=0.02, base_eq_l=0.0, name="acetic", **more):
    """Free acetic acid."""
    return Waste(name=name, base_eq_l=base_eq_l, acids={acid_table()["acetate"]: mol_l}, **more)


def bicarbonate(mol_l=0.01, acid_eq_l=0.02, name="buffered", **more):
    """Bicarbonate with more strong acid than it takes up: buffered all over the window."""
    return Waste(name=name, base_eq_l=mol_l - acid_eq_l, carbon_mol_l=mol_l, **more)


def steady(waste, flow_m3_h=6.0, **more):
    """A waste that always comes the same."""
    return Arrival(waste=waste, mean_m3_h=flow_m3_h, **more)


def batch(waste, size_m3, every_h, over_h, first_h=0.0):
    """A waste that is dumped."""
    return Arrival(waste=waste, mean_m3_h=size_m3 / every_h,
                   batch=Batch(size_m3=size_m3, every_h=every_h, over_h=over_h, first_h=first_h))


def course(flow_m3_h, step_s=HOUR_S, strength=None, **more):
    """A measured course of steps of one length."""
    q = np.asarray(flow_m3_h, dtype=float)
    return ProfileTable(name="made", rows=np.arange(q.size), time_s=step_s * np.arange(q.size), step_s=step_s, flow_m3_h=q,
                        strength={} if strength is None else {"": np.asarray(strength, dtype=float)}, **more)


def job(*arrivals, window=(6.0, 9.0), aim=None, reagents=None, base="caustic", acid=None, profile=None,
        residence_min=None, notes=(), assumptions=(), total_min=446.0, each_min=60.0, site=None, wishes=None, trial=None):
    """A job; site, wishes and trial change single fields. Without equalization, and for a tenth of a day."""
    return Job(
        name="made", arrivals=arrivals, window=Window(low=window[0], high=window[1], aim=aim, total_min=total_min,
                                                      each_min=each_min, source="made"),
        reagents=REAGENTS if reagents is None else reagents, base=base, acid=acid, profile=profile, notes=notes,
        assumptions=assumptions, residence_min=residence_min or {},
        site=Site(**{"depth_m": 3.0, "feed_error": 0.01, "resolution": 0.001, "turndown": 100.0, "line_m": 2.0,
                     "line_bore_mm": 6.0, "probe_lag_s": 10.0, "probe_noise_ph": 0.02, "outlet_limit_c": 40.0,
                     "storage_d": 20.0, "containment": "110 % of largest"} | (site or {})),
        wishes=Wishes(**{"stages": None, "volumes_m3": None, "set_points": None, "equalization_m3": 0.0,
                         "axis": "demand", "feedforward": True} | (wishes or {})),
        trial=Trial(**{"days": 0.1, "step_s": None, "cases": 0, "seed": 1, "buffer_sd": 0.0, "probe_offset_sd": 0.0}
                    | (trial or {})))
