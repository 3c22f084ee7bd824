"""From a table of readings to what the engine wants: values, uncertainties, ionic strength, pressure.

Values are a dictionary of house-unit arrays, so that the same functions serve the readings and their random draws.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.chem.properties import air_pressure
from aquabuf.engine.build import IONS
from aquabuf.readings.result import UserAcid
from aquabuf.readings.schema import quantities
from aquabuf.units import substances

__all__ = ["MAJOR_IONS", "PH_COLUMNS", "TITRATED_BY", "Values", "alkalinity_reading", "alkalinity_source",
           "ionic_strength", "own_acids", "pressure", "reading", "uncertainties", "values_of", "water_keywords"]

Array = NDArray[np.float64]
Values = Mapping[str, Array]

PH_COLUMNS = {"ph": "meter", "ph_total": "total", "ph_seawater": "seawater", "ph_free": "free"}
NAN_HAS_MEANING = (*IONS, "boron", "sulfate", "fluoride")  # to the engine; other acids not measured count as none
MAJOR_IONS = ("calcium", "magnesium", "sodium", "chloride", "sulfate")  # needed before ions give ionic strength
TITRATED_BY = "titrated_by"  # column of the readings: method of the titration, "" where there was none
OWN_ACID_U_REL = 0.05  # common practice, as for the shipped acids
STRENGTH_PER_CONDUCTIVITY = 1.6e-5  # mol/L per µS/cm at 25 °C; Russell 1976 (recalled)
STRENGTH_PER_TDS = 2.5e-5           # mol/L per mg/L; Langelier 1936
STRENGTH_SOURCES = ("", "given", "ions", "conductivity", "dissolved solids", "salinity", "alkalinity")


def values_of(frame: pd.DataFrame) -> dict[str, Array]:
    """Every number of the readings that holds at least one value, by column name in house units."""
    numbers = {name: frame[name].to_numpy() for name in frame.columns if name != "row"}
    return {name: v for name, v in numbers.items() if v.dtype.kind == "f" and not np.isnan(v).all()}


def uncertainties(values: Values, headers: Mapping[str, tuple[str, str]] | None = None) -> dict[str, Array]:
    """Standard uncertainty of every quantity: its own column where given, else the default of the column table.

    `headers` (file header to column and unit) tell which were given per kilogram, as sea laboratories do.
    """
    known = quantities()
    per_kg = {name for name, unit in (headers or {}).values() if "/kg" in unit}
    out = {}
    for name, value in values.items():
        quantity = known.get(name)
        if quantity is None:  # an uncertainty column, or an acid of the user's own
            if not name.endswith("_mol_l") or name.endswith("_u_mol_l"):
                continue
            default, u_name = OWN_ACID_U_REL * np.abs(value), name.replace("_mol_l", "_u_mol_l")
        elif name in per_kg and quantity.default_u_per_kg is not None:
            default, u_name = np.full(value.shape, quantity.default_u_per_kg), quantity.u_name
        else:
            default, u_name = quantity.default_u + quantity.default_u_rel * np.abs(value), quantity.u_name
        own = values.get(u_name)
        out[name] = default if own is None else np.where(np.isfinite(own), own, default)
    return out


def own_acids(acids: Mapping[str, UserAcid]) -> tuple[Acid, ...]:
    """Acids of the user's own, from the map file, as the engine wants them."""
    return tuple(Acid(name=a.name, pk=tuple(a.pk), charge_full=a.charge, enthalpy_j_mol=tuple(a.dh_j_mol or ()),
                      heat_capacity_j_mol_k=tuple(a.dcp_j_mol_k or ()), reference="given in the map file")
                 for a in acids.values())


def reading(values: Values, name: str) -> Array:
    """The values of one quantity, nan throughout where it was not measured. (The temperature is always there.)"""
    given = values.get(name)
    return np.full(values["temperature_c"].shape, np.nan) if given is None else given


def pressure(values: Values) -> Array:
    """Air pressure: measured, else of the elevation, else 1. [atm]"""
    by_height = air_pressure(reading(values, "elevation_m"))
    given = reading(values, "air_pressure_atm")
    return np.where(np.isfinite(given), given, np.where(np.isfinite(by_height), by_height, 1.0))


def ionic_strength(values: Values) -> tuple[Array, NDArray[np.object_]]:
    """Ionic strength of fresh rows [mol/L] and its source; nan where salinity or alkalinity must imply it.

    Order: given, major ions, conductivity at 25 °C, dissolved solids.
    """
    t = values["temperature_c"]
    candidates = (
        reading(values, "ionic_strength_mol_l"), _of_ions(values),
        STRENGTH_PER_CONDUCTIVITY * reading(values, "conductivity_us_cm"),
        STRENGTH_PER_TDS * reading(values, "tds_mg_l"),
    )
    out, source = np.full(t.shape, np.nan), np.zeros(t.shape, dtype=int)
    for index, candidate in enumerate(candidates, start=1):
        use = np.isnan(out) & np.isfinite(candidate)
        out[use], source[use] = candidate[use], index
    implied = np.isnan(out)
    has_salt = np.nan_to_num(reading(values, "salinity")) > 0.0
    source[implied] = np.where(has_salt[implied], STRENGTH_SOURCES.index("salinity"),
                               STRENGTH_SOURCES.index("alkalinity"))
    source[np.nan_to_num(reading(values, "salinity")) >= 1.0] = STRENGTH_SOURCES.index("salinity")
    return out, np.array(STRENGTH_SOURCES, dtype=object)[source]


def _of_ions(values: Values) -> Array:
    """Half the sum of concentration times charge squared; nan unless all major ions and an alkalinity are there."""
    alkalinity = alkalinity_reading(values)
    total = np.abs(alkalinity)  # bicarbonate in ordinary water, H+ in acid water
    for name, ion in substances().items():
        given = values.get(f"{name.replace(' ', '_')}_mol_l")
        if ion.charge and given is not None:
            total = total + ion.charge**2 * np.nan_to_num(given)
    for name in MAJOR_IONS:
        total = np.where(np.isnan(reading(values, f"{name}_mol_l")), np.nan, total)
    return 0.5 * total


def alkalinity_reading(values: Values) -> Array:
    """Alkalinity, or ANC where only that was measured; nan where neither was. [eq/L]"""
    if "anc_eq_l" not in values:
        return reading(values, "alkalinity_eq_l")
    alkalinity = reading(values, "alkalinity_eq_l")
    return np.where(np.isnan(alkalinity), values["anc_eq_l"], alkalinity)


def alkalinity_source(values: Values) -> NDArray[np.object_]:
    """Where each alkalinity comes from: alkalinity, anc, or computed."""
    measured, anc = (np.isfinite(reading(values, name)) for name in ("alkalinity_eq_l", "anc_eq_l"))
    return worded(measured.size, (anc, "anc"), (measured, "alkalinity"), default="computed")


def water_keywords(values: Values, acids: tuple[Acid, ...], carbonic: str) -> dict:
    """Keywords for a `Water` beside its pair: conditions, weak acids and ions found in the readings."""
    names = [a.name for a in acids] + list(acid_table()) + list(IONS)
    totals = {f"{n}_mol_l": values[f"{n}_mol_l"] for n in names if f"{n}_mol_l" in values}
    totals = {n: v if n.removesuffix("_mol_l") in NAN_HAS_MEANING else np.nan_to_num(v) for n, v in totals.items()}
    return totals | {
        "t_c": values["temperature_c"], "salinity": np.nan_to_num(reading(values, "salinity")),
        "ionic_strength_mol_l": ionic_strength(values)[0], "pressure_atm": pressure(values),
        "acids": acids, "carbonic": carbonic,
    }
