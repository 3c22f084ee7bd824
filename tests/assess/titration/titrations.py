"""Titrations from plain dictionaries, curves worked out by hand, and their assessment without files. All waters are invented.

The curves use printed constants (`carbonate_by_hand`) and a root finder; nothing of aquabuf's chemistry.
"""

import numpy as np
import pandas as pd
from carbonate_by_hand import BareWater
from scipy.optimize import brentq

from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.result import TITRATION_FLAG_COLUMNS, TITRATION_REJECTED_COLUMNS, Titrations

TEXT = ("titrant_kind", "titrant_acid", "exchange", "own_method", "water_kind", "filtered", "site", "date", "notes")
OF_POINTS = ("added", "ph", "potential_mv", "minutes", "by", "refused")


def curve(added_ml, *, alkalinity, carbon, strength=0.05, sample_ml=100.0, t_c=25.0, ionic=None, acids=()):
    """Meter pH of a closed titration [eq/L, mol/L]; a negative strength is base.

    `carbon` may be one value per point: what is left of it. `ionic` is the ionic strength of the sample; `acids` are
    totals [mol/L] and pK of weak acids with one proton.
    """
    ionic = 1.2 * abs(alkalinity) + 1e-4 if ionic is None else ionic
    kept = np.broadcast_to(carbon, np.shape(added_ml))
    out = []
    for volume, carbon_left in zip(np.asarray(added_ml, dtype=float), kept, strict=True):
        acid, share = strength * volume / sample_ml, sample_ml / (sample_ml + volume)
        used_up = max(min(acid, max(alkalinity, 0.0)), min(alkalinity, 0.0))
        water = BareWater(t_c, share * (ionic - abs(used_up)) + (1.0 - share) * abs(strength))
        bound = [(share * total, 10.0**-pk * water.c_h / water.rho, pk < 4.5) for total, pk in acids]

        def missing(ph, *, water=water, bound=bound, left=share * (alkalinity - acid), dic=share * carbon_left):
            bases = sum(total * (k / (k + 10.0**-ph) - strong) for total, k, strong in bound)
            return water.alkalinity(ph, dic) + bases - left
        out.append(brentq(missing, 0.5, 13.5, xtol=1e-12))
    return np.array(out)


def steps(end_ml, *, beyond=1.35, coarse=9, fine=10, past=8):
    """Titrant as a careful hand adds it: coarse to 0.9 of the end point, fine around it, and on for the Gran line."""
    parts = (np.linspace(0.0, 0.9, coarse, endpoint=False), np.linspace(0.9, 1.08, fine, endpoint=False),
             np.linspace(1.08, beyond, past))
    return np.round(np.concatenate(parts) * end_ml, 4)


def acid_steps(past, *, alkalinity, strength=0.02, sample_ml=100.0, count=30):
    """Even titrant until `past` [eq/L] of acid more than the alkalinity."""
    return np.round(np.linspace(0.0, (max(alkalinity, 0.0) + past) * sample_ml / strength, count), 4)


def hard(**more):
    """Ordinary fresh water: 2 meq/L, titrated by 0.05 eq/L; facts and points can be replaced."""
    return sample(steps(4.0), alkalinity=2e-3, carbon=2.2e-3, **more)


def dilute(**more):
    """Dilute water: 100 µeq/L, titrated by 0.02 eq/L to pH 3.3."""
    return sample(acid_steps(6e-4, alkalinity=1e-4), alkalinity=1e-4, carbon=1.3e-4, strength=0.02, **more)


CURVE = ("alkalinity", "carbon", "strength", "sample_ml", "t_c", "ionic", "acids")


def sample(added, *, offset=0.0, scatter=0.0, seed=3, **more):
    """One titration as a dictionary: points by hand and the facts that belong to them; what is given replaces facts.

    `offset` is what the electrode reads too high, `scatter` the standard deviation of seeded noise of pH.
    """
    made = {name: more.pop(name) for name in CURVE if name in more}
    made = {"strength": 0.05, "sample_ml": 100.0, "t_c": 25.0, "ionic": 1.2 * abs(made["alkalinity"]) + 1e-4} | made
    noise = scatter * np.random.default_rng(seed).standard_normal(len(added))
    facts = {"sample_volume_ml": made["sample_ml"], "titrant_strength_eq_l": abs(made["strength"]),
             "temperature_c": made["t_c"], "ionic_strength_mol_l": made["ionic"], "titrant_acid": "hydrochloric",
             "titrant_kind": "base" if made["strength"] < 0.0 else "acid", "exchange": "closed", "filtered": "yes"}
    return facts | {"added": added, "ph": np.round(curve(added, **made) + offset + noise, 4)} | more


def titrations(*given, acids=None):
    """Titrations of dictionaries: `added`, `ph` or `potential_mv`, `minutes`, `by`, and facts in house units.

    A `refused` one (its value is file, row, column, value, rule and remedy) has no points.
    """
    names = list(dict.fromkeys(name for one in given for name in one if name not in OF_POINTS and name != "sample_id"))
    usable = np.array(["refused" not in one for one in given], dtype=bool)
    counts = [len(one["added"]) if ok else 0 for one, ok in zip(given, usable, strict=True)]
    start = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    written = np.cumsum([0, *(max(n, 1) for n in counts)])[:-1]  # a refused one stands in the file all the same
    ids = [one.get("sample_id", f"s{i}") for i, one in enumerate(given)]
    frame = {"row": written + 2, "sample_id": pd.Series(ids, dtype="str")}
    for name in names:
        if name in TEXT:
            frame[name] = pd.Series([one.get(name, "") if ok else "" for one, ok in zip(given, usable, strict=True)], dtype="str")
        else:
            frame[name] = [float(one.get(name, np.nan)) if ok else np.nan for one, ok in zip(given, usable, strict=True)]

    def points(of):
        parts = [np.asarray(of(one), dtype=float) for one, ok in zip(given, usable, strict=True) if ok]
        return np.concatenate([*parts, np.zeros(0)])
    rejected = [(one["refused"][0], one["refused"][1], name, *one["refused"][2:])
                for one, name in zip(given, ids, strict=True) if "refused" in one]
    return Titrations(
        samples=pd.DataFrame(frame), usable=usable, start=start, added=points(lambda one: one["added"]),
        reading=points(lambda one: one["potential_mv" if "potential_mv" in one else "ph"]),
        minutes=points(lambda one: one.get("minutes", np.full(len(one["added"]), np.nan))),
        point_row=np.concatenate([*(np.arange(n) + first + 2 for n, first in zip(counts, written, strict=True)), np.zeros(0)]).astype(np.int64),
        added_by=np.array([one.get("by", "volume") if ok else "" for one, ok in zip(given, usable, strict=True)], dtype=object),
        read_as=np.array([("potential" if "potential_mv" in one else "ph") if ok else "" for one, ok in zip(given, usable, strict=True)], dtype=object),
        rejected=pd.DataFrame(rejected, columns=list(TITRATION_REJECTED_COLUMNS)), notes=(),
        flags=pd.DataFrame(columns=list(TITRATION_FLAG_COLUMNS)), headers={}, acids=acids or {})


def assessed(*given, by_liter=True, by_kilogram=True, acids=None, **options):
    """Assessment of these titrations; `options` are those of a run."""
    return assess_titrations(titrations(*given, acids=acids), TitrationOptions(**options), by_liter=by_liter,
                             by_kilogram=by_kilogram)


def results(*given, **more):
    """Only the table of results, by sample_id."""
    return assessed(*given, **more).results.set_index("sample_id")


def row(one, **more):
    """The one row of results of one titration."""
    return results(one, **more).iloc[0]


def found(one, **more):
    """Findings of one titration by name."""
    return assessed(one, **more).findings.set_index("finding")
