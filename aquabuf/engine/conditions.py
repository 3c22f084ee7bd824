"""The constants of each row at its temperature, salinity and ionic strength.

Inside the engine `h` is the hydrogen variable that the constants of a row are written for: the activity that a meter
reads in fresh water (salinity below 1), the seawater-scale concentration (mol/kg) from salinity 1 on. Constants are
conditional, so that concentrations in mol/L follow from `h` alone, and the solver need not know the regime.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import as_rows, common_shape, exp10
from aquabuf.chem import activity, fresh, gases, marine, seasalt
from aquabuf.chem.acids import Acid, k_of_temperature
from aquabuf.chem.properties import seawater_density, water_density
from aquabuf.engine.status import FLAGGED, NOT_FINITE, OUT_OF_RANGE, SOLVED
from aquabuf.errors import InputError

__all__ = ["CARBONIC_SETS", "FRESH_BELOW", "LIMITS", "Conditions", "conditions"]

Array = NDArray[np.float64]

FRESH_BELOW = 1.0  # practical salinity at which the seawater scale takes over

# (flagged below, flagged above, refused below, refused above); ranges of the carbonate constants, see docs/constants.md
LIMITS = {
    "t_c": (0.0, 50.0, -2.0, 60.0),
    "salinity": (0.0, 50.0, 0.0, 55.0),
    "ionic_strength_mol_l": (0.0, 0.1, 0.0, 0.5),  # of fresh water: the Davies equation
    "pressure_atm": (0.4, 1.2, 0.2, 2.0),
}
CARBONIC_SETS = {  # salinity and temperature range of each marine set
    "millero": (0.0, 55.0, -2.0, 60.0),
    "lueker": (19.0, 43.0, 2.0, 35.0),
}


@dataclass(frozen=True, slots=True, eq=False)
class Conditions:
    """Conditional constants per row; every array has the common shape of the inputs.

    free_per_h, total_per_h, activity_per_h : factors from `h` to the free concentration (mol/kg), the total-scale
    concentration (mol/kg) and the meter activity of H+. [-]
    c_h, c_oh : concentration of H+ is c_h h and of OH- is c_oh / h. [mol/L]
    k0 : dissolved CO2 over its partial pressure. [mol/L/atm]
    k1, k2 : conditional constants of carbonic acid, in units of h.
    """

    t_c: Array
    salinity: Array
    ionic_strength_mol_l: Array
    pressure_atm: Array
    is_marine: NDArray[np.bool_]
    density_kg_l: Array
    free_per_h: Array
    total_per_h: Array
    activity_per_h: Array
    c_h: Array
    c_oh: Array
    k0: Array
    k1: Array
    k2: Array
    status: NDArray[np.int8]
    debye_huckel_a: Array
    _cache: dict[Acid, tuple[Array, ...]] = field(default_factory=dict, repr=False)

    def acid_constants(self, acid: Acid) -> tuple[Array, ...]:
        """Conditional dissociation constants of `acid`, one array per step, in units of h."""
        if acid not in self._cache:
            self._cache[acid] = _acid_constants(self, acid)
        return self._cache[acid]


def _by_regime(is_marine: NDArray[np.bool_], fresh_value: Callable, marine_value: Callable) -> Array:
    """Evaluate each regime on its own rows only; the callables take a row selection."""
    if not is_marine.any():
        return fresh_value(...)
    if is_marine.all():
        return marine_value(...)
    out = np.empty(is_marine.shape)
    out[~is_marine] = fresh_value(~is_marine)
    out[is_marine] = marine_value(is_marine)
    return out


def conditions(
    t_c: ArrayLike,
    salinity: ArrayLike = 0.0,
    ionic_strength_mol_l: ArrayLike = 0.0,
    *,
    pressure_atm: ArrayLike = 1.0,
    sulfate_mol_l: ArrayLike = np.nan,
    fluoride_mol_l: ArrayLike = np.nan,
    carbonic: str = "millero",
) -> Conditions:
    """Constants at the given temperature [°C], practical salinity, ionic strength [mol/L] and air pressure [atm].

    Scalars give scalars.
    Salinity from 1 on fixes the ionic strength; the one given counts for fresh rows only. Sulfate and fluoride
    (nan: from salinity) set the pH scales of marine rows. `carbonic` names the marine set of K1 and K2.
    Rows outside the ranges in `LIMITS` are flagged or refused by their `status`, never raised; refused rows are nan.
    Raises InputError for an unknown `carbonic`.
    """
    if carbonic not in CARBONIC_SETS:
        raise InputError(f"carbonic must be one of {', '.join(CARBONIC_SETS)}; found {carbonic!r}. "
                         f"Leave it out for 'millero'.")
    shape = common_shape(t_c, salinity, ionic_strength_mol_l, pressure_atm, sulfate_mol_l, fluoride_mol_l)
    one, shape = shape == (), shape or (1,)
    t, s, i_given, p = (as_rows(v, shape) for v in (t_c, salinity, ionic_strength_mol_l, pressure_atm))
    status = _row_status(t, s, i_given, p, carbonic)
    bad = status < 0
    if bad.any():  # any harmless water keeps the arithmetic quiet; the status tells the truth
        t, s, i_given, p = (np.where(bad, safe, v) for v, safe in ((t, 25.0), (s, 0.0), (i_given, 0.0), (p, 1.0)))
    is_marine = s >= FRESH_BELOW
    i = np.where(is_marine, seasalt.ionic_strength_seawater(s), i_given)
    rho = _by_regime(is_marine, lambda r: water_density(t[r]), lambda r: seawater_density(t[r], s[r])) / 1000.0
    a = activity.debye_huckel_a(t)
    gamma_1 = exp10(activity.log_gamma_davies(1, i, a))
    gamma_0 = exp10(activity.log_gamma_neutral(i))
    sulfate = _per_kg(sulfate_mol_l, rho, seasalt.sulfate_of_seawater(s))
    fluoride = _per_kg(fluoride_mol_l, rho, seasalt.fluoride_of_seawater(s))
    free, total, act = _scales(is_marine, t, s, gamma_1, sulfate, fluoride)

    k1 = _by_regime(is_marine, lambda r: fresh.k1_carbonic(t[r]) * (gamma_0 / gamma_1)[r],
                    lambda r: _carbonic_sea(carbonic, 1, t[r], s[r], total[r]))
    k2 = _by_regime(is_marine, lambda r: fresh.k2_carbonic(t[r]) / (gamma_1**3)[r],
                    lambda r: _carbonic_sea(carbonic, 2, t[r], s[r], total[r]))
    k_w = _by_regime(is_marine, lambda r: fresh.k_water(t[r]) / gamma_1[r], lambda r: marine.k_water_sea(t[r], s[r]))
    k_0 = _by_regime(is_marine, lambda r: fresh.k_henry_co2(t[r]) / gamma_0[r], lambda r: marine.k0_co2(t[r], s[r]))
    found: dict[str, Any] = {
        "t_c": t, "salinity": s, "ionic_strength_mol_l": i, "pressure_atm": p, "density_kg_l": rho,
        "free_per_h": free, "total_per_h": total, "activity_per_h": act, "c_h": free * rho, "c_oh": k_w * rho,
        "k0": k_0 * gases.co2_fugacity_ratio(t, p) * rho, "k1": k1, "k2": k2, "debye_huckel_a": a,
    }
    if bad.any():  # what was put in for the arithmetic must not be taken for an answer
        found = {name: np.where(bad, np.nan, v) for name, v in found.items()}
    found |= {"is_marine": is_marine, "status": status}
    return Conditions(**({name: v.reshape(()) for name, v in found.items()} if one else found))


def _row_status(t: Array, s: Array, i: Array, p: Array, carbonic: str) -> NDArray[np.int8]:
    """Status of each row from the ranges in LIMITS and of the marine carbonic set."""
    status = np.full(t.shape, SOLVED, dtype=np.int8)
    refused = np.zeros(t.shape, dtype=bool)
    fresh_i = np.where(s < FRESH_BELOW, i, 0.0)
    for name, v in (("t_c", t), ("salinity", s), ("ionic_strength_mol_l", fresh_i), ("pressure_atm", p)):
        low, high, least, most = LIMITS[name]
        status[(v < low) | (v > high)] = FLAGGED
        refused |= (v < least) | (v > most)
    s_low, s_high, t_low, t_high = CARBONIC_SETS[carbonic]
    refused |= (s >= FRESH_BELOW) & ((s < s_low) | (s > s_high) | (t < t_low) | (t > t_high))
    status[refused] = OUT_OF_RANGE
    status[~(np.isfinite(t) & np.isfinite(s) & np.isfinite(i) & np.isfinite(p))] = NOT_FINITE
    return status


def _per_kg(given_mol_l: ArrayLike, rho: Array, of_salinity: Array) -> Array:
    given = np.asarray(given_mol_l, dtype=float) / rho
    return np.where(np.isnan(given), of_salinity, given)


def _scales(is_marine: NDArray[np.bool_], t: Array, s: Array, gamma_1: Array, sulfate: Array, fluoride: Array,
            ) -> tuple[Array, Array, Array]:
    """Factors from h to the free and the total-scale concentration and to the meter activity of H+."""
    free, total, act = 1.0 / gamma_1, 1.0 / gamma_1, np.ones(t.shape)
    r = is_marine
    if r.any():
        k_s = marine.k_bisulfate(t[r], s[r])
        to_sea = seasalt.free_to_seawater_scale(sulfate[r], k_s, fluoride[r], marine.k_fluoride(t[r], s[r]))
        free[r] = 1.0 / to_sea
        total[r] = seasalt.free_to_total_scale(sulfate[r], k_s) / to_sea
        # Davies holds to salinity 5 or so, the seawater fit beyond: the larger of the two joins them without a step
        act[r] = np.maximum(gamma_1[r] / to_sea, seasalt.hydrogen_activity_takahashi(t[r], s[r]))
    return free, total, act


def _carbonic_sea(carbonic: str, step: int, t: Array, s: Array, total_per_h: Array) -> Array:
    if carbonic == "lueker":
        return (marine.k1_lueker if step == 1 else marine.k2_lueker)(t, s) / total_per_h
    return (marine.k1_millero if step == 1 else marine.k2_millero)(t, s)


# Marine constants per acid and step: function, and the scale it is on
_SEA_ACIDS: dict[str, tuple[tuple[Callable, ...], str]] = {
    "boron": ((marine.k_boric,), "total"),
    "sulfate": ((marine.k_bisulfate,), "free"),
    "fluoride": ((marine.k_fluoride,), "free"),
    "phosphate": ((marine.k1_phosphoric, marine.k2_phosphoric, marine.k3_phosphoric), "seawater"),
    "silica": ((marine.k_silicic,), "seawater"),
    "ammonium": ((marine.k_ammonium,), "seawater"),
    "sulfide": ((marine.k_sulfide,), "total"),
}


def _acid_constants(c: Conditions, acid: Acid) -> tuple[Array, ...]:
    """Conditional constants of one acid: by its own marine equation where there is one, else by activities."""
    def by_activity(step: int, r: Any) -> Array:
        k = k_of_temperature(acid.pk[step], acid.enthalpy_j_mol[step], acid.heat_capacity_j_mol_k[step], c.t_c[r])
        before, after = (_log_gamma(acid.charge_full - step - lost, c.ionic_strength_mol_l[r], c.debye_huckel_a[r])
                         for lost in (0, 1))
        return k * exp10(before - after)

    def by_sea(step: int, r: Any) -> Array:
        if acid.name not in _SEA_ACIDS:
            return by_activity(step, r) / c.activity_per_h[r]
        functions, scale = _SEA_ACIDS[acid.name]
        to_h = {"seawater": 1.0, "total": c.total_per_h[r], "free": c.free_per_h[r]}[scale]
        return functions[step](c.t_c[r], c.salinity[r]) / to_h

    return tuple(_by_regime(c.is_marine, lambda r, j=j: by_activity(j, r), lambda r, j=j: by_sea(j, r))
                 for j in range(len(acid.pk)))


def _log_gamma(charge: int, i: Array, a: Array) -> Array:
    return activity.log_gamma_neutral(i) if charge == 0 else activity.log_gamma_davies(charge, i, a)
