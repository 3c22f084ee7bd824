"""How long the present buffering holds a pH window against a feed that adds acid or base by fault.

A flowing water takes the fault at once: the question is which excess dose it tolerates. A mixed basin takes it in by
and by and washes it out again: the question is when it leaves the window. Acid counts positive, base negative.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import as_rows, common_shape
from aquabuf.chem.acids import acid_table
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.water import Water
from aquabuf.errors import InputError

__all__ = ["Held", "basin_hours", "held_against", "held_words", "tolerated_dose_mol_l", "tolerated_words"]

Array = NDArray[np.float64]

HOURS_PER_DAY = 24.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Held:
    """What a water takes before it leaves a pH window, and what a stated fault does to it; arrays of rows.

    acid_eq_l, base_eq_l : strong acid and base to the lower and upper limit, closed; the `_open` ones with the CO2
        pressure the water has now held. Negative: it is outside already. [eq/L]
    fault_eq_l : excess acid (negative: base) in each liter of inflow; nan where none was stated. [eq/L]
    ph_after, ph_after_open : of a flowing water with that fault, at once.
    hours, hours_open : until a mixed basin leaves the window; inf: never; nan: no basin was stated. [h]
    """

    ph_low: Array
    ph_high: Array
    ph: Array
    acid_eq_l: Array
    acid_open_eq_l: Array
    base_eq_l: Array
    base_open_eq_l: Array
    fault_eq_l: Array
    ph_after: Array
    ph_after_open: Array
    hours: Array
    hours_open: Array


def held_against(water: Water, *, ph_low: ArrayLike, ph_high: ArrayLike, fault_eq_l: ArrayLike = np.nan,
                 fault_eq_l_h: ArrayLike = np.nan, volume_m3: ArrayLike = np.nan, flow_m3_d: ArrayLike = 0.0) -> Held:
    """What `water` takes within the meter pH window, and what a feed fault of strong acid or base does.

    Parameters
    ----------
    fault_eq_l
        Excess of each liter that flows in (acid positive): a flowing water's pH follows at once; with `volume_m3` and
        `flow_m3_d` a mixed basin takes it in. [eq/L]
    fault_eq_l_h
        Instead: what goes into each liter of a basin per hour, washed out by the flow if there is one; 1 eq/m3 is
        0.001 eq/L. [eq/L per h]

    Raises InputError where the window is upside down, shapes do not fit, or the fault is stated twice.
    """
    try:
        shape = common_shape(water.alkalinity_eq_l, ph_low, ph_high, fault_eq_l, fault_eq_l_h, volume_m3, flow_m3_d)
        low, high, in_flow, in_basin, volume, flow = (
            as_rows(v, shape) for v in (ph_low, ph_high, fault_eq_l, fault_eq_l_h, volume_m3, flow_m3_d))
    except ValueError as error:
        raise InputError(f"water, window and fault must be numbers that broadcast to one shape; found {error}. Give "
                         f"one value or one per row.") from None
    if shape != water.shape:
        raise InputError(f"window and fault must have the shape of the water, {water.shape}; found {shape}. Make the "
                         f"water with one row per question.")
    if (low >= high).any():
        raise InputError("ph_low must be below ph_high; found a window upside down. Swap the limits.")
    if np.isfinite(in_flow).any() and np.isfinite(in_basin).any():
        raise InputError("a fault is stated in the inflow (fault_eq_l) or per hour of basin (fault_eq_l_h); found both."
                         " Give one.")
    turnover = np.where(np.isfinite(volume), flow / HOURS_PER_DAY / volume, 0.0)
    rate = np.where(np.isfinite(in_basin), in_basin, np.where(np.isfinite(volume), in_flow * turnover, np.nan))
    acid, acid_open = (water.acid_to_ph_eq_l(low, way) for way in ("closed", "open"))
    base, base_open = (water.base_to_ph_eq_l(high, way) for way in ("closed", "open"))
    return Held(ph_low=low, ph_high=high, ph=water.ph, acid_eq_l=acid, acid_open_eq_l=acid_open, base_eq_l=base,
                base_open_eq_l=base_open, fault_eq_l=in_flow, ph_after=water.after_acid(in_flow).ph,
                ph_after_open=water.after_acid(in_flow, "open").ph, hours=_hours(acid, base, rate, turnover),
                hours_open=_hours(acid_open, base_open, rate, turnover))


def _hours(acid: Array, base: Array, rate: Array, turnover: Array) -> Array:
    """Hours on the side that the fault pushes to; none where the water is outside on either side."""
    margin = np.where((acid < 0.0) | (base < 0.0), 0.0, np.where(rate > 0.0, acid, base))
    return basin_hours(margin, np.abs(rate), turnover)


def basin_hours(margin_eq_l: ArrayLike, fault_eq_l_h: ArrayLike, turnover_per_h: ArrayLike = 0.0) -> Array:
    """Hours until a mixed basin has gained `margin_eq_l` from a steady fault, washed out by its flow.

    x' = F - k x from x = 0 has x = (F / k)(1 - exp(-k t)), so t = -ln(1 - margin k / F) / k; margin / F without flow;
    inf where the washout keeps pace. F is the fault per liter of basin and hour, k flow over volume: mass balance of a
    mixed tank. A margin of zero or less gives 0. [h]
    """
    margin, fault, k = (np.asarray(v, dtype=float) for v in (margin_eq_l, fault_eq_l_h, turnover_per_h))
    known = np.isfinite(margin) & np.isfinite(fault) & np.isfinite(k)
    left = np.maximum(margin, 0.0)
    acts = known & (fault > 0.0)
    plain = left / np.where(acts, fault, 1.0)
    ends = (acts & (plain * k < 1.0)) | (left == 0.0)
    washed = -np.log1p(-np.where(ends, plain * k, 0.0)) / np.where(k > 0.0, k, 1.0)
    return np.where(known, np.where(ends, np.where(k > 0.0, washed, plain), np.inf), np.nan)


def tolerated_dose_mol_l(water: Water, *, ph_low: ArrayLike, ph_high: ArrayLike, adds: Mapping[str, float]) -> Array:
    """Excess of a product that brings a closed water to the nearer limit of the window. [mol/L]

    `adds` is what a mole of it brings: "alkalinity" [eq], "carbon" [mol] and totals by name; of these, weak acids
    count. At a fixed pH alkalinity is a straight line in the carbon and the totals, so the dose follows in one step.
    Inf where the product never takes the water out, as bicarbonate near pH 8; 0 where it is outside already.
    """
    low, high = (np.asarray(v, dtype=float) for v in (ph_low, ph_high))
    with np.errstate(invalid="ignore"):
        doses = [_dose_to_ph(water, limit, adds) for limit in (low, high)]
        inside = (water.ph >= low) & (water.ph <= high)
    nearer = np.minimum(*(np.where(d > 0.0, d, np.inf) for d in doses))
    return np.where(np.isfinite(water.ph), np.where(inside, nearer, 0.0), np.nan)


def _dose_to_ph(water: Water, ph: Array, adds: Mapping[str, float]) -> Array:
    """Dose that would bring the closed water to `ph`; zero or negative where none does. [mol/L]"""
    state = water.state
    h = state.h_from_ph(as_rows(ph, water.shape).reshape(-1))
    net = adds.get("alkalinity", 0.0) - adds.get("carbon", 0.0) * protons_lost(state.carbonate_fractions(h))
    acids = [(d.acid.name, f.k, f.zero) for d, f in zip(state.acids, state.families, strict=True)]
    known = {name for name, _, _ in acids}
    acids += [(a.name, state.conditions.acid_constants(a), a.zero_level)
              for name, a in acid_table().items() if name in adds and name not in known]
    for name, k, zero in acids:
        if name in adds:
            net = net - adds[name] * (protons_lost(fractions(k, 1.0 / h)) - zero)
    gap = -water.acid_to_ph_eq_l(ph).reshape(-1)
    return (gap / np.where(net == 0.0, np.nan, net)).reshape(water.shape)


def tolerated_words(dose_mol_l: float, name: str, molar_mass_g: float, strength: float = 1.0) -> str:
    """The tolerated excess of a product of mass fraction `strength`, for a person."""
    if np.isnan(dose_mol_l):
        return f"the excess of {name} that is tolerated is not known, as the water is not solved"
    if np.isinf(dose_mol_l):
        return f"no excess of {name} alone takes the water out of the window"
    if dose_mol_l <= 0.0:
        return f"no excess of {name} is tolerated: the water is outside the window already"
    mg_l = 1e3 * molar_mass_g * dose_mol_l / strength
    return f"up to {mg_l:.3g} mg/L of {name} in excess keeps the water in the window"


def held_words(held: Held, row: int = 0) -> str:
    """What the water takes and what the fault does, for one row."""
    def at(v: Array) -> float:
        return float(np.ravel(v)[row])

    window = f"pH {at(held.ph_low):.2f} to {at(held.ph_high):.2f}"
    if not np.isfinite(at(held.ph)):
        return f"How long {window} holds is not known: the water is not solved."
    if min(at(held.acid_eq_l), at(held.base_eq_l)) < 0.0:
        return f"At pH {at(held.ph):.2f} the water is outside {window} already."
    said = [f"{window} holds until {1e3 * at(held.acid_eq_l):.3g} meq/L of strong acid or "
            f"{1e3 * at(held.base_eq_l):.3g} meq/L of strong base in a closed water; "
            f"{1e3 * at(held.acid_open_eq_l):.3g} and {1e3 * at(held.base_open_eq_l):.3g} meq/L where the CO2 pressure "
            f"is held by air or gas"]
    fault = at(held.fault_eq_l)
    if np.isfinite(fault):
        kind = "acid" if fault > 0.0 else "base"
        said.append(f"a fault of {1e3 * abs(fault):.3g} meq/L of {kind} takes flowing water to pH "
                    f"{at(held.ph_after):.2f} at once ({at(held.ph_after_open):.2f} open)")
    hours, hours_open = at(held.hours), at(held.hours_open)
    if not np.isnan(hours):
        said.append(f"the mixed basin leaves the window {_after(hours)} (closed) or {_after(hours_open)} (open)")
    return ". ".join(s[0].upper() + s[1:] if s[0].islower() and not s.startswith("pH") else s for s in said) + "."


def _after(hours: float) -> str:
    return "never, as its flow washes the fault out" if np.isinf(hours) else f"after {hours:.3g} h"
