"""Invented titrations: curves by the engine with a little scatter, written as the two files that a user has."""

import csv

import numpy as np

from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.chem.acids import acid_named
from aquabuf.chem.seasalt import ionic_strength_seawater
from aquabuf.engine.build import of_sea_salt
from aquabuf.engine.titrate import mixed_ionic_strength, points_at, titration_curve
from aquabuf.readings.titration.reader import read_titrations

SALINITY, SEA_T_C = 35.0, 20.0
SEA_ACIDS = ("boron", "sulfate", "fluoride")


def curve(added, *, strength, sample, alkalinity, carbon, ionic_strength=5e-3, t_c=15.0, acids=None, sulfuric=False,
          titrant_ionic_strength=None, sea=False):
    """pH of a titration; strength in eq per liter or kilogram (negative: base), sample in mL or g."""
    added = np.asarray(added, dtype=float)[None]
    acid, dilution, a = strength * added / sample, sample / (sample + added), np.array([alkalinity])
    own = np.array([[ionic_strength_seawater(SALINITY) if sea else ionic_strength]])
    titrant = abs(strength) * (1.5 if sulfuric else 1.0) if titrant_ionic_strength is None else titrant_ionic_strength
    points = points_at(acid, dilution, t_c=np.array([t_c]), salinity=np.array([SALINITY if sea else 0.0]),
                       ionic_strength_mol_l=mixed_ionic_strength(own, np.array([[titrant]]), acid, a[:, None], dilution),
                       totals={acid_named(n): np.array([v]) for n, v in (acids or {}).items()}, by_mass=np.array([sea]),
                       sulfuric=np.array([sulfuric]))
    return titration_curve(points, a, np.array([carbon]))[0]


def fresh(added, *, strength, alkalinity, carbon, scatter=0.004, ionic_strength=5e-3, conductivity=300.0,
          acids=None, **more):
    """One titration of 100 mL in the columns of the files: readings, and what is known of the sample."""
    added = np.asarray(added, dtype=float)
    ph = curve(added, strength=strength, sample=100.0, alkalinity=alkalinity, carbon=carbon, ionic_strength=ionic_strength,
               acids=acids, sulfuric=more.get("titrant_acid") == "sulfuric")
    ph = ph + np.random.default_rng(5).normal(0.0, scatter, added.size)
    known = {"sample_volume_ml": 100.0, "titrant_eq_l": abs(strength), "temperature_c": 15.0,
             "conductivity_us_cm": conductivity}
    return {"titrant_ml": added.round(4), "ph": ph.round(4)}, known | more


def sea(added, *, carbon, **more):
    """One titration of 120 g of sea water by mass."""
    salts = {name: float(of_sea_salt(name, SALINITY)) for name in SEA_ACIDS}
    ph = curve(added, strength=0.1, sample=120.0, alkalinity=2.3e-3, carbon=carbon, t_c=SEA_T_C, acids=salts,
               titrant_ionic_strength=0.7, sea=True)
    ph = ph + np.random.default_rng(6).normal(0.0, 0.002, added.size)
    known = {"sample_mass_g": 120.0, "titrant_eq_kg": 0.1, "temperature_c": SEA_T_C, "salinity": SALINITY,
             "titrant_ionic_strength_mol_l": 0.7}
    return {"titrant_g": added.round(4), "ph": ph.round(4)}, known | more


def swapped():
    """A titration whose two readings at the end point stand in each other's place."""
    points, known = fresh(np.arange(0.0, 10.0, 0.3), strength=0.05, alkalinity=3e-3, carbon=3.2e-3)
    points["ph"][[20, 21]] = points["ph"][[21, 20]]
    return points, known


def millivolts(sign=-1.0):
    """A titration read in mV without standards; the wrong sign is an electrode that cannot be."""
    points, known = fresh(np.arange(0.0, 9.0, 0.3), strength=0.05, alkalinity=3e-3, carbon=3.2e-3)
    return {"titrant_ml": points["titrant_ml"], "mv": (400.0 + sign * 57.17 * points["ph"]).round(2)}, known


WATERS = {
    "Dilute lake": fresh(np.arange(0.0, 1.0, 0.03), strength=0.02, alkalinity=50e-6, carbon=75e-6, ionic_strength=4e-4,
                         conductivity=25.0, filtered="no"),
    "Acid lake": fresh(np.arange(0.0, 0.8, 0.03), strength=0.02, alkalinity=-20e-6, carbon=30e-6, ionic_strength=4e-4,
                       conductivity=25.0, filtered="no"),
    "Hard water": fresh(np.arange(0.0, 10.0, 0.25), strength=0.05, alkalinity=3.4e-3, carbon=3.6e-3,
                        titrant_acid="sulfuric", filtered="yes"),
    "Carbonate water": fresh(np.arange(0.0, 7.5, 0.2), strength=0.05, alkalinity=2.8e-3, carbon=2.1e-3, filtered="yes"),
    "Sea water": sea(np.arange(0.0, 4.0, 0.1), carbon=2.0e-3),
    "Swept sea water": sea(np.arange(0.0, 4.0, 0.1), carbon=0.0, exchange="purged"),
    "Mine water": fresh(np.arange(0.0, 9.0, 0.25), strength=-0.05, alkalinity=-2e-3, carbon=1e-3, titrant_kind="base"),
    "Mine water begun": fresh(np.arange(0.0, 3.6, 0.25), strength=-0.05, alkalinity=-2e-3, carbon=1e-3, titrant_kind="base"),
    "Swapped": swapped(),
    "Three points": fresh([0.0, 0.5, 1.0], strength=0.02, alkalinity=50e-6, carbon=75e-6, ionic_strength=4e-4),
    "Three past the end": fresh([6.6, 7.0, 7.4], strength=0.05, alkalinity=3e-3, carbon=3.2e-3),
    "One point left": fresh([0.0, 0.0], strength=0.05, alkalinity=3e-3, carbon=3.2e-3),
    "Equal volumes": fresh([0, 0, 1, 1, 2, 3, 3.2, 3.4, 3.6, 3.6, 4, 4.5], strength=0.05, alkalinity=1.7e-3, carbon=1.8e-3),
    "Strong water": fresh(np.arange(0.0, 30.0, 1.0), strength=1.0, alkalinity=0.2, carbon=0.21, ionic_strength=0.2,
                          conductivity=15000.0),
    "Many points": fresh(np.arange(0.0, 12.0, 0.03), strength=0.05, alkalinity=3.4e-3, carbon=3.6e-3),
    "Stops too soon": fresh(np.arange(0.0, 6.0, 0.25), strength=0.05, alkalinity=3.4e-3, carbon=3.6e-3),
    "Wrong strength": fresh(np.arange(0.0, 8.0, 0.3), strength=0.05, alkalinity=2e-3, carbon=2.2e-3, titrant_eq_l=0.5),
    "Millivolts": millivolts(),
    "Millivolts turned": millivolts(sign=1.0),
}


def write_files(folder, waters):
    """The two files of some waters; returns their paths."""
    columns = list(dict.fromkeys(name for _, known in waters.values() for name in known))
    samples = [{"sample_id": name, **known} for name, (_, known) in waters.items()]
    points = [dict(zip(("sample_id", *readings), (name, *row), strict=True)) for name, (readings, _) in waters.items()
              for row in zip(*readings.values(), strict=True)]
    headers = list(dict.fromkeys(name for row in points for name in row))
    for name, rows, head in (("samples", samples, ["sample_id", *columns]), ("points", points, headers)):
        with (folder / f"{name}.csv").open("w", newline="", encoding="utf-8") as stream:
            writer = csv.DictWriter(stream, head, restval="")
            writer.writeheader()
            writer.writerows(rows)
    return folder / "points.csv", folder / "samples.csv"


def assessed(folder, waters, **options):
    """Result of some waters; names in `result.solved.curves.names`."""
    titrations = read_titrations(*write_files(folder, waters))
    assert titrations.usable.all(), titrations.rejected.to_string()
    return assess_titrations(titrations, TitrationOptions(**options), by_liter=True, by_kilogram=True)
