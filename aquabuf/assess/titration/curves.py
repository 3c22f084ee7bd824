"""Titrations as arrays: amounts per unit of sample, and what is known of each sample and its instruments."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.assess.sample.inputs import STRENGTH_PER_CONDUCTIVITY
from aquabuf.assess.titration.calibrate import nernst_mv_per_ph
from aquabuf.chem.properties import seawater_density
from aquabuf.readings.schema import Quantity, titration_quantities
from aquabuf.readings.titration.result import COUNTS_PER_ML, Titrations

__all__ = ["ASSUMED_PH_SCATTER", "ASSUMED_T_C", "SHARED_BY_ALL", "Curves", "curves_of", "u_of"]

Array = NDArray[np.float64]

ASSUMED_T_C = 20.0         # a laboratory bench, where no temperature is given
ASSUMED_PH_SCATTER = 0.01  # of one reading about the curve; common practice, no source
COARSE_PH = (0.1, 0.05, 0.02)  # steps that a meter may be read to; anywhere in a step is as likely
LEAST_READ = 6             # readings that must all be whole steps before it counts as how the meter was read
PER_LITER = 1e3            # mL per L, and g per kg
ADDED_BY = {"volume": "titrant_volume_ml", "counts": "titrant_counts", "mass": "titrant_mass_g"}
SHARED_BY_ALL = ("titrant_strength_eq_l", "titrant_strength_eq_kg", "sample_volume_ml", "sample_mass_g",
                 "cartridge_factor")  # whose relative uncertainty all points of a titration share


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Curves:
    """Titrations times points, nan behind the last point of each; of repeated readings the last counts.

    added : titrant. [mL or g]
    reading : pH or potential in mV. [-] or [mV]
    acid : acid added per unit of sample; negative for base. [eq/L or eq/kg]
    dilution : share of sample in the mixture. [-]
    per_added : acid per unit of titrant, one per titration. [eq/L per mL or alike]
    relative_u : standard uncertainty of `acid` that all points share. [-]
    u_acid : scatter of one reading of `acid`. [eq/L or eq/kg]
    u_ph_scatter, u_ph : scatter of one pH reading, and what all readings share. [-]
    drift : largest change between repeated readings at one volume, in the unit of `reading`; nan where there are none.
    repeats : most readings in a row at one volume.
    by_mass : whether the sample is given by mass, so that amounts are per kilogram.
    added_mass : whether the titrant was weighed. needs_density : whether volume and mass had to be brought together.
    """

    names: NDArray[np.object_]
    added: Array
    reading: Array
    minutes: Array
    row: NDArray[np.int64]
    count: NDArray[np.intp]
    acid: Array
    dilution: Array
    per_added: Array
    relative_u: Array
    u_acid: Array
    u_ph_scatter: Array
    u_ph: Array
    drift: Array
    repeats: NDArray[np.intp]
    by_mass: NDArray[np.bool_]
    added_mass: NDArray[np.bool_]
    needs_density: NDArray[np.bool_]
    is_base: NDArray[np.bool_]
    is_potential: NDArray[np.bool_]
    strength: Array
    sample: Array
    t_c: Array
    salinity: Array
    ionic_strength_mol_l: Array
    density_kg_l: Array

    @property
    def there(self) -> NDArray[np.bool_]:
        """Which points exist."""
        return np.isfinite(self.acid)

    def take(self, rows: NDArray) -> Curves:
        """Some of the titrations, no wider than their longest."""
        picked = {f.name: getattr(self, f.name)[rows] for f in fields(self)}
        width = max(int(picked["count"].max(initial=0)), 1)
        return Curves(**{name: v[:, :width] if v.ndim == 2 else v for name, v in picked.items()})


def u_of(values: Mapping[str, Array], quantity: Quantity, size: Array) -> Array:
    """Standard uncertainty of a quantity: its own column where given, else the default of the column table."""
    default = quantity.default_u + quantity.default_u_rel * np.abs(size)
    own = values.get(quantity.u_name)
    return default if own is None else np.where(np.isfinite(own), own, default)


def curves_of(t: Titrations) -> Curves:
    """Arrays of the usable titrations of `t`, in its order."""
    rows = np.flatnonzero(t.usable)
    frame = t.samples.iloc[rows]
    values = {name: frame[name].to_numpy() for name in frame.columns if frame[name].dtype.kind == "f"}
    n = rows.size

    def value(name: str, default: float = np.nan) -> Array:
        v = values.get(name)
        return np.full(n, default) if v is None else np.where(np.isnan(v), default, v)

    def word(name: str) -> NDArray[np.object_]:
        return frame[name].to_numpy(dtype=object) if name in frame else np.full(n, "", dtype=object)

    padded, count, drift, repeats = _padded(t, rows)
    t_c, salinity = value("temperature_c", ASSUMED_T_C), value("salinity", 0.0)
    density = seawater_density(t_c, salinity) / 1e3
    by_mass = np.isfinite(value("sample_mass_g"))
    is_base = word("titrant_kind") == "base"
    sample = np.where(by_mass, value("sample_mass_g"), value("sample_volume_ml"))
    added_by = t.added_by[rows]
    added_mass = added_by == "mass"
    strength, titrant_per_added = _titrant(value, added_mass, by_mass)
    per_added = np.where(is_base, -1.0, 1.0) * strength / sample
    u_added, scale = _added_uncertainty(values, added_by, value)
    potential = t.read_as[rows] == "potential"
    relative_u = _relative_u(values, value, scale)
    return Curves(
        names=frame["sample_id"].to_numpy(dtype=object), **padded, count=count,
        acid=per_added[:, None] * padded["added"],
        dilution=sample[:, None] / (sample[:, None] + titrant_per_added[:, None] * padded["added"]),
        per_added=per_added, relative_u=relative_u, u_acid=np.abs(per_added) * u_added,
        u_ph_scatter=_scatter(value("ph_scatter"), padded["reading"], potential),
        u_ph=_shared_ph_u(values, value, potential, relative_u, t_c), drift=drift, repeats=repeats, by_mass=by_mass,
        added_mass=added_mass, is_base=is_base, is_potential=potential, strength=strength, sample=sample,
        needs_density=(added_mass != by_mass) | (added_mass != np.isfinite(value("titrant_strength_eq_kg"))),
        t_c=t_c, salinity=salinity, density_kg_l=density,
        ionic_strength_mol_l=np.where(np.isfinite(value("ionic_strength_mol_l")), value("ionic_strength_mol_l"),
                                      STRENGTH_PER_CONDUCTIVITY * value("conductivity_us_cm")))


def _padded(t: Titrations, rows: NDArray[np.intp]) -> tuple[dict[str, NDArray], NDArray[np.intp], Array,
                                                            NDArray[np.intp]]:
    """Points side by side, repeated readings at one volume given way to the last; their change and number."""
    number = np.repeat(np.arange(t.usable.size), np.diff(t.start))
    same = np.zeros(t.added.size, dtype=bool)  # as the next point
    same[:-1] = (number[:-1] == number[1:]) & (t.added[:-1] == t.added[1:])
    place = np.full(t.usable.size, -1, dtype=np.intp)
    place[rows] = np.arange(rows.size)
    drift = np.full(rows.size, np.nan)
    steps = np.flatnonzero(same)
    np.fmax.at(drift, place[number[steps]], np.abs(t.reading[steps + 1] - t.reading[steps]))
    kept = np.flatnonzero(~same)
    of = place[number[kept]]
    repeats = np.zeros(rows.size, dtype=np.intp)
    np.maximum.at(repeats, of, np.diff(kept, prepend=-1))
    count = np.bincount(of, minlength=rows.size)
    column = np.arange(kept.size) - np.concatenate([[0], np.cumsum(count)[:-1]])[of] if kept.size else kept
    shape = (rows.size, max(int(count.max(initial=0)), 1))
    out = {}
    for name, source in (("added", t.added), ("reading", t.reading), ("minutes", t.minutes)):
        out[name] = np.full(shape, np.nan)
        out[name][of, column] = source[kept]
    out["row"] = np.zeros(shape, dtype=np.int64)
    out["row"][of, column] = t.point_row[kept]
    return out, count, drift, repeats


def _scatter(given: Array, reading: Array, is_potential: NDArray[np.bool_]) -> Array:
    """Scatter of one pH reading: as given, else the assumed one and what reading the meter to coarse steps adds."""
    step = np.zeros(given.size)
    enough = ~is_potential & (np.isfinite(reading).sum(axis=1) >= LEAST_READ)
    for size in sorted(COARSE_PH):
        off = np.abs(reading / size - np.round(reading / size))
        step = np.where(enough & (np.nan_to_num(off) < 1e-6).all(axis=1), size, step)
    return np.where(np.isfinite(given), given, np.hypot(ASSUMED_PH_SCATTER, step / np.sqrt(12.0)))


def _titrant(value, by_weight: NDArray[np.bool_], by_mass: NDArray[np.bool_]) -> tuple[Array, Array]:
    """Strength per unit of what was added (mL or g), and what that adds to the sample in the sample's own unit."""
    density = value("titrant_density_kg_l", 1.0)
    per_l, per_kg = value("titrant_strength_eq_l"), value("titrant_strength_eq_kg")
    per_ml = np.where(np.isfinite(per_l), per_l, per_kg * density)
    strength = np.where(by_weight, per_ml / density, per_ml) * value("cartridge_factor", 1.0)
    in_sample_unit = np.where(by_weight & ~by_mass, 1.0 / density, np.where(~by_weight & by_mass, density, 1.0))
    return strength, in_sample_unit


def _added_uncertainty(values: Mapping[str, Array], added_by: NDArray[np.object_], value) -> tuple[Array, Array]:
    """Scatter of one reading of the titrant [mL or g] and the relative uncertainty of its scale."""
    known = titration_quantities()
    scatter, scale = np.full(added_by.size, np.nan), np.zeros(added_by.size)
    for kind, name in ADDED_BY.items():
        q, which = known[name], added_by == kind
        per_unit = value("counts_per_ml", COUNTS_PER_ML) if kind == "counts" else 1.0
        scatter = np.where(which, q.default_u / per_unit, scatter)
        scale[which] = q.default_u_rel
    own = value("titrant_scatter_ml")
    return np.where(np.isfinite(own), own, scatter), scale


def _relative_u(values: Mapping[str, Array], value, scale: Array) -> Array:
    """Relative uncertainty of acid per unit of sample that all points share: strength, sample, scale, cartridge."""
    known = titration_quantities()
    total = scale**2
    for name in SHARED_BY_ALL:
        size = value(name)
        total = total + np.where(np.isfinite(size), u_of(values, known[name], size) / size, 0.0) ** 2
    return np.sqrt(total)


def _shared_ph_u(values: Mapping[str, Array], value, is_potential: NDArray[np.bool_], relative_u: Array, t_c: Array,
                 ) -> Array:
    """Uncertainty of pH that all readings of a titration share: calibration of the meter or of the potentials.

    Potentials without standards take their zero from the acid, so that its strength moves every pH alike.
    """
    known = titration_quantities()
    by_meter = u_of(values, known["ph"], np.zeros(t_c.size))
    standard = np.hypot(known["standard_1_ph"].default_u, known["potential_mv"].default_u / nernst_mv_per_ph(t_c))
    by_acid = np.hypot(known["standard_1_ph"].default_u, relative_u / LN10)
    calibrated = np.where(np.isfinite(value("standard_1_ph")), standard, by_acid)
    own = value(known["ph"].u_name)
    return np.where(is_potential & np.isnan(own), calibrated, by_meter)
