"""Links of a chain: conditions, constants with source and range, and the balance of the solved water."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from typing import Any

import numpy as np

from aquabuf.arrays import exp10
from aquabuf.assess.options import Options
from aquabuf.assess.sample.chain_steps import INSIDE, OUTSIDE, Part, Step, quantity_label, six
from aquabuf.assess.sample.inputs import (
    MAJOR_IONS,
    STRENGTH_PER_CONDUCTIVITY,
    STRENGTH_PER_TDS,
    Values,
    ionic_strength,
    reading,
)
from aquabuf.assess.sample.solve import air_pco2
from aquabuf.chem import activity, fresh, marine
from aquabuf.chem.acids import k_of_temperature
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.build import of_sea_salt
from aquabuf.engine.conditions import LIMITS, Conditions
from aquabuf.engine.water import Water
from aquabuf.tables import read_table

__all__ = ["STRENGTH_SOURCES", "STRENGTH_WORDS", "balance", "carbonate_constants", "conditions_part",
           "constant_value", "constants_part", "pressure_words", "within"]

ACID_RANGE = (1.0, 77.0)  # °C, of the form that `k_of_temperature` takes; Goldberg et al. 2002
STRENGTH_WORDS = {
    "given": "as given in the readings",
    "ions": "half the sum of concentration times charge squared, with the alkalinity as bicarbonate; all of "
            f"{', '.join(MAJOR_IONS)} are measured",
    "conductivity": f"{STRENGTH_PER_CONDUCTIVITY:g} mol/L for each µS/cm at 25 °C",
    "dissolved solids": f"{STRENGTH_PER_TDS:g} mol/L for each mg/L of dissolved solids",
    "salinity": "of sea salt at this salinity, or what the alkalinity asks for if that is more",
    "alkalinity": "nothing measured tells it: that of the alkalinity as a salt of single charges",
}
STRENGTH_SOURCES = {"given": "reading", "ions": "definition", "conductivity": "Russell 1976 (recalled)",
                    "dissolved solids": "Langelier 1936", "salinity": "DOE handbook 1994 (recalled)",
                    "alkalinity": "least that electroneutrality allows"}


def _one(v: object) -> float:
    return float(np.ravel(np.asarray(v, dtype=float))[0])


# ---------------------------------------------------------------- conditions


def conditions_part(water: Water, values: Values, options: Options) -> Part:
    """Temperature, salinity, ionic strength, pressure and air: each with its origin and range."""
    c = water.state.conditions
    strength, salt = str(ionic_strength(values)[1][0]), bool(_one(c.is_marine))
    no_salt = np.isnan(reading(values, "salinity")[0])
    steps = [
        Step(label="temperature", value=six(_one(water.t_c)), unit="°C", words="of the water", source="reading",
             sign=within("t_c", _one(water.t_c))),
        Step(label="salinity", value=six(_one(water.salinity)),
             source="none given counts as zero" if no_salt else "reading",
             words="from 1 on the constants of sea water hold" if salt else "below 1 the constants of fresh water hold",
             sign=within("salinity", _one(water.salinity))),
        Step(label=f"ionic strength, from {strength}", value=six(_one(water.ionic_strength_mol_l)),
             unit="mol/kg of water" if salt else "mol/L", words=STRENGTH_WORDS[strength],
             source=STRENGTH_SOURCES[strength],
             sign="" if salt else within("ionic_strength_mol_l", _one(water.ionic_strength_mol_l))),
        Step(label="air pressure", value=six(_one(water.pressure_atm)), unit="atm", **pressure_words(values),
             sign=within("pressure_atm", _one(water.pressure_atm))),
        Step(label="density", value=six(_one(water.density_kg_l)), unit="kg/L", words="of the water as it is",
             source="Millero & Poisson 1981" if salt else "Kell 1975"),
        Step(label="CO2 pressure of air", value=f"{1e6 * _air(water, options):.1f}", unit="µatm",
             words=f"{options.air_co2_ppm:g} µmol/mol of dry air, less water vapor",
             source="Weiss & Price 1980 (recalled)"),
    ]
    return Part("Conditions", tuple(steps))


def _air(water: Water, options: Options) -> float:
    return _one(air_pco2({"t_c": water.t_c, "pressure_atm": water.pressure_atm, "salinity": water.salinity}, options))


def within(key: str, value: float) -> str:
    """Whether a condition lies in the range that the constants are made for."""
    low, high = LIMITS[key][:2]
    return INSIDE if low <= value <= high else OUTSIDE


def pressure_words(values: Values) -> dict[str, str]:
    """Where the air pressure comes from."""
    if np.isfinite(reading(values, "air_pressure_atm")[0]):
        return {"words": "as measured", "source": "reading"}
    if np.isfinite(reading(values, "elevation_m")[0]):
        return {"words": "of the standard atmosphere at the elevation given", "source": "ISO 2533 (recalled)"}
    return {"words": "neither pressure nor elevation is given", "source": "sea level"}


# ---------------------------------------------------------------- constants


def constant_value(function: str, t_c: float, salinity: float) -> float:
    """The constant called `function` of fresh or of sea water. Units as in the table of constants."""
    of_fresh: Callable | None = getattr(fresh, function, None)
    return _one(of_fresh(t_c) if of_fresh else getattr(marine, function)(t_c, salinity))


def constants_part(water: Water, options: Options) -> Part:
    """Each constant that this water needs: value at its conditions, source, range, and whether it lies inside."""
    return Part("Constants at these conditions", (*_listed(water, options), *_by_acid(water), *_activity(water),
                                                  *_of_salt(water)),
                "pK and log at zero ionic strength in fresh water; at this salinity in sea water. Used: with activity "
                "coefficients, in units of the hydrogen variable h (what a meter reads in fresh water, the seawater "
                "scale per kilogram in salt water)")


def _listed(water: Water, options: Options) -> Iterator[Step]:
    c, s = water.state.conditions, water.state
    there = {d.acid.name for d in s.acids if _one(d.total) > 0.0} | {
        name for name, v in s.ions.items() if _one(v) > 0.0} | {options.carbonic}
    if bool(_one(c.is_marine)):
        there |= {"sulfate", "fluoride"}  # they set the scales of pH
    return _listed_at(c, there, options.carbonic, {d.acid.name: c.acid_constants(d.acid) for d in s.acids})


def carbonate_constants(c: Conditions, carbonic: str) -> Iterator[Step]:
    """Constants of carbon dioxide, carbonate and water at these conditions; `carbonic` is the set of sea water."""
    return _listed_at(c, {carbonic}, carbonic, {})


def _listed_at(c: Conditions, there: set[str], carbonic: str, acids: Mapping[str, Any]) -> Iterator[Step]:
    """The constants of the table that are needed with the acids and ions that are there."""
    salt, t, salinity = bool(_one(c.is_marine)), _one(c.t_c), _one(c.salinity)
    used = {"K0": _one(c.k0), "K1": _one(c.k1), "K2": _one(c.k2), "Kw": _one(c.c_oh)}
    for row in read_table("chain_constants"):
        needs = set(filter(None, row["for"].split(";")))
        if (row["regime"] == "salt") != salt or not needs <= there:
            continue
        as_used = used.get(row["symbol"]) if not needs or needs == {carbonic} else None
        if len(needs) == 1 and (acid := next(iter(needs))) in acids and row["kind"] == "pK":
            as_used = _one(acids[acid][int(row["step"])])
        log = np.log10(constant_value(row["function"], t, salinity))
        sign = -1.0 if row["kind"] == "pK" else 1.0
        also = "" if as_used is None else f"; used: {row['kind']} {sign * np.log10(as_used):.4f}"
        yield Step(label=f"{row['symbol']}: {row['reaction']}", value=f"{row['kind']} {sign * log + 0.0:.4f}",
                   unit=row["unit"], words=f"holds for {_range(row)}{also}", source=f"{row['source']} ({row['mark']})",
                   sign=_in_range(row, t, salinity))


def _range(row: Mapping[str, str]) -> str:
    upward = f"S from {row['s_low']}"
    parts = [f"S {row['s_low']} to {row['s_high']}" if row["s_high"] else upward] if row["s_low"] else []
    parts += [f"{row['t_low']} to {row['t_high']} °C"] if row["t_high"] else []
    return ", ".join(parts) or "any temperature (no range is stated)"


def _in_range(row: Mapping[str, str], t: float, salinity: float) -> str:
    limits = ((row["t_low"], row["t_high"], t), (row["s_low"], row["s_high"], salinity))
    inside = all(float(low or "-inf") <= v <= float(high or "inf") for low, high, v in limits)
    return INSIDE if inside else OUTSIDE


def _by_acid(water: Water) -> Iterator[Step]:
    """Weak acids whose constants follow from 25 °C: all in fresh water, in salt those without their own equation."""
    c = water.state.conditions
    salt, t = bool(_one(c.is_marine)), _one(c.t_c)
    own = {row["for"] for row in read_table("chain_constants") if row["regime"] == "salt" and row["kind"] == "pK"}
    for d in water.state.acids:
        if not _one(d.total) > 0.0 or (salt and d.acid.name in own):
            continue
        for step, (pair, used) in enumerate(zip(d.acid.pairs, c.acid_constants(d.acid), strict=True)):
            at_t = -np.log10(_one(k_of_temperature(d.acid.pk[step], d.acid.enthalpy_j_mol[step],
                                                   d.acid.heat_capacity_j_mol_k[step], t)))
            yield Step(label=f"K: {pair}", value=f"pK {at_t:.4f}", unit="mol/kg", source=d.acid.reference,
                       words=f"holds for {ACID_RANGE[0]:g} to {ACID_RANGE[1]:g} °C; at 25 °C {d.acid.pk[step]:g}; "
                             f"used: pK {-np.log10(_one(used)):.4f}",
                       sign=INSIDE if ACID_RANGE[0] <= t <= ACID_RANGE[1] else OUTSIDE)


def _activity(water: Water) -> Iterator[Step]:
    """Activity coefficients of fresh water."""
    c = water.state.conditions
    if bool(_one(c.is_marine)):
        return
    a, strength = _one(c.debye_huckel_a), _one(c.ionic_strength_mol_l)
    most = LIMITS["ionic_strength_mol_l"][1]
    for charge in (1, 2):
        gamma = exp10(activity.log_gamma_davies(charge, strength, a))
        yield Step(label=f"activity coefficient of charge {charge}", value=f"{_one(gamma):.4f}",
                   words=f"log10 g = -A z² (√I / (1 + √I) - 0.3 I), A = {a:.4f}; holds for I up to {most:g} mol/L",
                   source="Davies 1962 (printed)", sign=INSIDE if strength <= most else OUTSIDE)


def _of_salt(water: Water) -> Iterator[Step]:
    """Totals in salt water; those that sea salt brings are told from those measured by their amount."""
    c, s = water.state.conditions, water.state
    if not bool(_one(c.is_marine)):
        return
    totals = {d.acid.name: _one(d.total) for d in s.acids} | {name: _one(v) for name, v in s.ions.items()}
    for name in ("boron", "sulfate", "fluoride", "calcium"):
        of_salt = _one(of_sea_salt(name, c.salinity)) * _one(c.density_kg_l)
        if name in totals and np.isclose(totals[name], of_salt, rtol=1e-9):
            source = next(r["source"] for r in read_table("constants") if r["used_for"].startswith("boron, sulfate"))
            yield Step(label=f"{name} of sea salt", value=six(totals[name]), unit="mol/L", source=source,
                       words="in proportion to salinity")
    yield Step(label="meter pH from the seawater scale", value=f"{-np.log10(_one(c.activity_per_h)):.4f}",
               words="is added to the pH on the seawater scale; good to 0.02 or worse",
               source="larger of Davies activity and Takahashi et al. 1982 (recalled)")


# ---------------------------------------------------------------- balance


def balance(water: Water, pair: str) -> Part:
    """The equation in symbols and words, and every term of it at the solved pH."""
    row = next(r for r in read_table("pair_equations") if r["pair"] == pair)
    s, c = water.state, water.state.conditions
    _, a1, a2 = (_one(f) for f in s.carbonate_fractions())
    carbon, h = _one(s.dic), _one(s.h)
    terms = [("bicarbonate, [HCO3-]", carbon * a1), ("carbonate, 2 [CO3--]", 2.0 * carbon * a2)]
    for d, family in zip(s.acids, s.families, strict=True):
        charge = _one(d.total * (protons_lost(fractions(family.k, 1.0 / s.h)) - d.acid.zero_level))
        if charge:
            terms.append((f"{quantity_label(d.acid.name)}, against {d.acid.species[d.acid.zero_level]}", charge))
    terms += [("hydroxide, [OH-]", _one(c.c_oh) / h), ("hydrogen ion, -[H+]", -_one(c.c_h) * h)]
    steps = [Step(label="equation", value=row["symbols"], words=row["words"], source="charge and mass balance")]
    steps.append(Step(label="shares of carbon", value="a0 = h²/D, a1 = K1 h/D, a2 = K1 K2/D",
                      words="D = h² + K1 h + K1 K2; a0 is dissolved carbon dioxide, a1 bicarbonate, a2 carbonate",
                      source="mass action"))
    steps += [Step(label=label, value=six(1e3 * v), unit="meq/L") for label, v in terms]
    steps.append(Step(label="sum: alkalinity of the solved water", value=six(1e3 * _one(s.alkalinity)), unit="meq/L",
                      words="acids weaker than pK 4.5 count where they have lost a proton",
                      source="Dickson 1981 (printed)"))
    return Part("The balance", tuple(steps),
                "A alkalinity, C total inorganic carbon, p CO2 pressure, W(h) all of A but carbonate")
