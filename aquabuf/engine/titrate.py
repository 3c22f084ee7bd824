"""A sample while it is titrated: the balance at each point, the curve it should follow, and its fit.

Everything is counted per unit of sample (L, or kg for titrations by mass), so that dilution touches water alone:

    A - x = C nu(h) + sum T (lost - zero) + (OH- - H+) / d

A : alkalinity of the sample; C : its carbon; T : its other weak acids; x : strong acid added (negative: base);
nu, lost : mean protons lost per carbonic and other acid; d : share of sample in the mixture.
Arrays are titrations times points; a point that does not exist has weight zero.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.engine.balance import Family, System, fractions, moments
from aquabuf.engine.conditions import FRESH_BELOW, conditions
from aquabuf.engine.solve import solve_h

__all__ = ["Points", "mixed_ionic_strength", "points_at", "titration_curve"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Points:
    """Points of some titrations with their constants; every array is titrations times points.

    acid : strong acid added per unit of sample; negative for base. [eq/L or eq/kg]
    dilution : share of sample in the mixture. [-]
    k1, k2 : constants of carbonic acid in units of the hydrogen variable h.
    c_h, c_oh : H+ is c_h h and OH- is c_oh / h, per unit of mixture.
    h_per_activity : factor from the activity that a meter reads to h.
    families : other weak acids, totals per unit of sample; acids that the titrant brings among them.
    """

    acid: Array
    dilution: Array
    k1: Array
    k2: Array
    c_h: Array
    c_oh: Array
    h_per_activity: Array
    families: tuple[Family, ...] = ()

    def h(self, ph: Array) -> Array:
        """Hydrogen variable of a meter pH."""
        return np.exp(-LN10 * ph) * self.h_per_activity

    def terms(self, h: Array) -> tuple[Array, Array, Array, Array]:
        """What the balance holds besides A - x: per unit of carbon, all the rest, and their slopes against ln h."""
        inv = 1.0 / h
        carbon, variance, _ = moments(fractions((self.k1, self.k2), inv))
        base, acid = self.c_oh * inv / self.dilution, self.c_h * h / self.dilution
        rest, slope = base - acid, -(base + acid)
        for f in self.families:
            lost, spread, _ = moments(fractions(f.k, inv))
            rest += f.total * (lost - f.zero)
            slope -= f.total * spread
        return carbon, rest, -variance, slope

    def take(self, rows: NDArray) -> Points:
        """The same for some of the titrations."""
        picked = {n: getattr(self, n)[rows] for n in ("acid", "dilution", "k1", "k2", "c_h", "c_oh", "h_per_activity")}
        return Points(**picked, families=tuple(f.take(rows) for f in self.families))


def mixed_ionic_strength(sample_mol_l: Array, titrant_mol_l: Array, acid: Array, alkalinity: Array, dilution: Array,
                         ) -> Array:
    """Ionic strength of sample and titrant together. [mol/L]

    The mean of both by volume, less what acid and bicarbonate lose as they turn to water and CO2: one ion of each
    charge per equivalent. Follows from the definition; exact for a 1:1 acid in a bicarbonate water.
    """
    neutralized = np.clip(acid, np.minimum(alkalinity, 0.0), np.maximum(alkalinity, 0.0))
    mixed = dilution * (sample_mol_l - np.abs(neutralized)) + (1.0 - dilution) * titrant_mol_l
    return np.maximum(mixed, 0.0)


def points_at(acid: Array, dilution: Array, *, t_c: Array, salinity: Array, ionic_strength_mol_l: Array,
              totals: dict[Acid, Array], by_mass: NDArray[np.bool_], sulfuric: NDArray[np.bool_]) -> Points:
    """Points with the constants of each at its temperature and ionic strength.

    Parameters
    ----------
    acid, dilution, ionic_strength_mol_l
        Of each point: titrations times points.
    t_c, salinity, by_mass, sulfuric
        Of each titration: temperature [°C], practical salinity, whether amounts are per kilogram, and whether the
        titrant is sulfuric acid, whose sulfate binds H+ again below pH 3.5.
    totals
        Weak acids of the sample, one value per titration. [mol/L, or mol/kg where by mass]

    Notes
    -----
    Sea water keeps the constants of its salinity, thinned as its ionic strength is: the share of sample in the mixture
    where the titrant is plain acid, all of it where salt was added to the titrant.
    """
    shape = acid.shape
    t, s = (np.broadcast_to(v[:, None], shape) for v in (t_c, salinity))
    start = ionic_strength_mol_l[:, :1]
    is_sea = (s >= FRESH_BELOW) & (start > 0.0)
    thinned = np.divide(ionic_strength_mol_l, start, out=np.ones(shape), where=is_sea)
    c = conditions(t, np.where(is_sea, np.maximum(s * np.minimum(thinned, 1.0), FRESH_BELOW), s),
                   ionic_strength_mol_l)
    unit = np.where(by_mass[:, None], c.density_kg_l, 1.0)
    families = [Family(np.broadcast_to(total[:, None], shape), c.acid_constants(a), a.zero_level)
                for a, total in totals.items()]
    if sulfuric.any():
        bisulfate = acid_table()["sulfate"]
        brought = np.where(sulfuric[:, None], 0.5 * np.maximum(acid, 0.0), 0.0)
        families.append(Family(brought, c.acid_constants(bisulfate), bisulfate.zero_level))
    return Points(acid=acid, dilution=dilution, k1=c.k1, k2=c.k2, c_h=c.c_h / unit, c_oh=c.c_oh / unit,
                  h_per_activity=1.0 / c.activity_per_h, families=tuple(families))


def titration_curve(points: Points, alkalinity: Array, carbon: Array) -> Array:
    """Meter pH at each point of a closed titration; nan where no water is like that. Amounts per unit of sample."""
    shape, d = points.acid.shape, points.dilution

    def flat(v: Array) -> Array:
        return np.broadcast_to(v, shape).reshape(-1)

    families = tuple(Family(flat(f.total * d), tuple(flat(k) for k in f.k), f.zero) for f in points.families)
    system = System(flat((alkalinity[:, None] - points.acid) * d), flat(points.c_h), flat(points.c_oh),
                    flat(points.k1), flat(points.k2), dic=flat(carbon[:, None] * d), families=families)
    activity = solve_h(system).h.reshape(shape) / points.h_per_activity
    return -np.log10(activity)

