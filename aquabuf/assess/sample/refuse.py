"""Why a sample cannot be assessed, in the words of rejected.csv."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import Values
from aquabuf.assess.sample.solve import NO_PAIR, choose, groups, has, take_rows, water_of
from aquabuf.chem.acids import Acid
from aquabuf.engine.conditions import LIMITS
from aquabuf.engine.status import OUT_OF_RANGE
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.units import convert

__all__ = ["refusals"]


def refusals(frame: pd.DataFrame, values: Values, bad: NDArray[np.bool_], acids: tuple[Acid, ...], options: Options,
             ) -> pd.DataFrame:
    """One line per refused sample: row, sample_id, column, value, rule, remedy."""
    rows = np.flatnonzero(bad)
    reasons: dict[int, tuple[str, str, str, str]] = {}
    there = has(values, bad.size)
    t = values["temperature_c"]
    for i in rows.tolist():
        members = [m for m, v in there.items() if v[i]]
        if np.isnan(t[i]):
            reasons[i] = ("temperature_c", "", "every sample needs a water temperature",
                          "give temperature_c, or one value for all rows under [values] of a map file")
        elif len(members) < 2:
            found = members[0] if members else "none"
            reasons[i] = ("ph, alkalinity, dic, pco2", f"found {found}",
                          "two of pH, alkalinity, carbon and CO2 pressure make a known pair",
                          "give a second one" + (", or run with --exchange open" if found == "alkalinity" else ""))
    remaining = np.array([i for i in rows.tolist() if i not in reasons], dtype=np.intp)
    if remaining.size:
        nowhere = np.zeros(bad.size, dtype=bool)
        first = next(choose(values, bad.size, options, carbon_first=nowhere, carbon_unknown=nowhere))
        only = np.full(bad.size, NO_PAIR, dtype=np.int8)
        only[remaining] = first[remaining]
        for pair, ph_column, group in groups(values, only):
            status = water_of(take_rows(values, group), pair, ph_column, acids, options).status
            for i, code in zip(group.tolist(), status.tolist(), strict=True):
                reasons[i] = (_out_of_range(values, i) if code == OUT_OF_RANGE
                              else _contradiction(values, i, pair, ph_column))
    lines = [(frame["row"].iloc[i], frame["sample_id"].iloc[i], *reasons[i]) for i in rows.tolist()]
    return pd.DataFrame(lines, columns=list(REJECTED_COLUMNS))


def _out_of_range(values: Values, i: int) -> tuple[str, str, str, str]:
    found = {"t_c": ("temperature_c", "°C"), "salinity": ("salinity", ""), "pressure_atm": ("air_pressure_atm", "atm")}
    for key, (column, unit) in found.items():
        low, high = LIMITS[key][2:]
        if column in values and not low <= np.nan_to_num(values[column][i], nan=low) <= high:
            return (column, f"{values[column][i]:.4g}", f"{column} must be {low:g} to {high:g} {unit}".rstrip(),
                    "correct the value or its unit")
    return ("conductivity, salinity", "", f"ionic strength of fresh water must be at most "
            f"{LIMITS['ionic_strength_mol_l'][3]:g} mol/L, and the marine constants must reach this salinity",
            "give salinity if this is salt water; use --marine-constants millero")


def _contradiction(values: Values, i: int, pair: str, ph_column: str) -> tuple[str, str, str, str]:
    """A pair that no water has; the likely slip by pair."""
    alkalinity = next((name for name in ("alkalinity_eq_l", "anc_eq_l") if name in values
                       and np.isfinite(values[name][i])), "alkalinity_eq_l")
    names = {"pH": ph_column, "alkalinity": alkalinity, "carbon": "dic_mol_l", "pCO2": "pco2_atm"}
    columns = [names[m] for m in pair.split(" and ")]
    shown = "; ".join(f"{c} {_shown(c, values[c][i])}" for c in columns)
    if pair == "pH and alkalinity":
        rule = "alkalinity must leave carbonate above zero at this pH, within uncertainty and organic charge"
        remedy = "check pH and titration; give dic, or doc if organic acids carry charge"
    elif pair == "carbon and pCO2":
        rule, remedy = "total carbon must be more than the CO2 that this pressure dissolves", "check both readings"
    else:
        rule, remedy = "no water has this pair of values", "check both readings and their units"
    return (", ".join(columns), shown, rule, remedy)


def _shown(column: str, value: float) -> str:
    """A house value in a unit that people read."""
    if column.endswith("_eq_l"):
        return f"{convert(value, 'eq/L', 'µeq/L', 'alkalinity'):.4g} µeq/L"
    if column.endswith("_mol_l"):
        return f"{value * 1e6:.4g} µmol/L"
    return f"{value * 1e6:.4g} µatm" if column.endswith("_atm") else f"{value:.4g}"
