"""Why a sample cannot be assessed, in the words of rejected.csv."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import Values, alkalinity_reading, ionic_strength, reading
from aquabuf.assess.sample.solve import MOST_PCO2_ATM, NO_PAIR, choose, groups, has, take_rows, water_of
from aquabuf.chem.acids import Acid
from aquabuf.engine.conditions import CARBONIC_SETS, FRESH_BELOW, LIMITS
from aquabuf.engine.status import OUT_OF_RANGE
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.units import convert

__all__ = ["refusals"]


STRENGTH_COLUMNS = {  # where each estimate of ionic strength comes from
    "given": "ionic_strength_mol_l", "ions": "major ions", "conductivity": "conductivity_us_cm",
    "dissolved solids": "tds_mg_l", "salinity": "salinity", "alkalinity": "alkalinity_eq_l",
}
Reason = tuple[tuple[str, ...], str, str, str]  # columns, value, rule, remedy


def refusals(frame: pd.DataFrame, values: Values, bad: NDArray[np.bool_], acids: tuple[Acid, ...], options: Options,
             headers: Mapping[str, tuple[str, str]]) -> pd.DataFrame:
    """One line per refused sample: row, sample_id, column, value, rule, remedy; columns by their header in the file."""
    in_file = {name: header for header, (name, _) in headers.items()}
    rows = np.flatnonzero(bad)
    reasons: dict[int, Reason] = {}
    there = has(values, bad.size)
    t = values["temperature_c"]
    for i in rows.tolist():
        members = [m for m, v in there.items() if v[i]]
        if np.isnan(t[i]):
            reasons[i] = (("temperature_c",), "missing", "every sample needs a water temperature",
                          "give temperature_c, or a value for rows without one under [fill] of a map file")
        elif len(members) < 2 and not (members == ["alkalinity"] and options.exchange == "open"):
            remedy = "give alkalinity, which air completes" if options.exchange == "open" else "give a second one"
            other = ", or run with --exchange open" if members == ["alkalinity"] else ""
            reasons[i] = (("ph", "alkalinity", "dic", "pco2"), f"only {members[0]}" if members else "none",
                          "two of pH, alkalinity, carbon and CO2 pressure make a known pair",
                          f"{remedy}{other}")
    remaining = np.array([i for i in rows.tolist() if i not in reasons], dtype=np.intp)
    if remaining.size:
        only = np.full(bad.size, NO_PAIR, dtype=np.int8)
        for choice in choose(values, bad.size, options, carbon_unknown=np.zeros(bad.size, dtype=bool),
                             preferred=np.full(bad.size, NO_PAIR, dtype=np.int8)):
            open_rows = remaining[only[remaining] == NO_PAIR]
            only[open_rows] = choice[open_rows]
        for pair, ph_column, group in groups(values, only):
            water = water_of(take_rows(values, group), pair, ph_column, acids, options)
            for i, code, pco2 in zip(group.tolist(), water.status.tolist(), water.pco2_atm.tolist(), strict=True):
                reasons[i] = (_out_of_range(values, i, options) if code == OUT_OF_RANGE
                              else _contradiction(values, i, pair, ph_column, pco2, in_file))
    lines = [(frame["row"].iloc[i], frame["sample_id"].iloc[i], ", ".join(in_file.get(c, c) for c in reasons[i][0]),
              *reasons[i][1:]) for i in rows.tolist()]
    return pd.DataFrame(lines, columns=list(REJECTED_COLUMNS))


def _out_of_range(values: Values, i: int, options: Options) -> Reason:
    found = {"t_c": ("temperature_c", "°C"), "salinity": ("salinity", ""), "pressure_atm": ("air_pressure_atm", "atm")}
    for key, (column, unit) in found.items():
        low, high = LIMITS[key][2:]
        if column in values and not low <= np.nan_to_num(values[column][i], nan=low) <= high:
            return ((column,), f"{values[column][i]:.4g}", f"{column} must be {low:g} to {high:g} {unit}".rstrip(),
                    "correct the value or its unit")
    t, s = values["temperature_c"][i], np.nan_to_num(reading(values, "salinity")[i])
    if s >= FRESH_BELOW:
        name = options.carbonic
        s_low, s_high, t_low, t_high = CARBONIC_SETS[name]
        return (("salinity", "temperature_c"), f"{s:g}; {t:g} °C",
                f"the {name} constants reach salinity {s_low:g} to {s_high:g} at {t_low:g} to {t_high:g} °C",
                "use --marine-constants millero")
    one = {name: v[i:i + 1] for name, v in values.items()}
    strength, source = (v[0] for v in ionic_strength(one))
    if np.isnan(strength):  # not estimated: the least that the alkalinity implies
        strength = abs(alkalinity_reading(one)[0])
    return ((STRENGTH_COLUMNS[source],), f"ionic strength {strength:.3g} mol/L from {source}",
            f"ionic strength of fresh water must be at most {LIMITS['ionic_strength_mol_l'][3]:g} mol/L",
            "give salinity if this is salt water; correct the ions or the conductivity otherwise")


def _contradiction(values: Values, i: int, pair: str, ph_column: str, pco2_atm: float, in_file: Mapping[str, str],
                   ) -> Reason:
    """A pair that no water has, or none at the surface; the likely slip by pair."""
    alkalinity = next((name for name in ("alkalinity_eq_l", "anc_eq_l") if name in values
                       and np.isfinite(values[name][i])), "alkalinity_eq_l")
    names = {"pH": ph_column, "alkalinity": alkalinity, "carbon": "dic_mol_l", "pCO2": "pco2_atm", "air": "air"}
    columns = tuple(names[m] for m in pair.split(" and ") if m != "air")
    shown = "; ".join(f"{in_file.get(c, c)} = {_shown(c, values[c][i])}" for c in columns)
    if pco2_atm > MOST_PCO2_ATM:
        rule = f"the CO2 pressure that this pair implies, {pco2_atm:.3g} atm, must be at most {MOST_PCO2_ATM:g} atm"
        remedy = "check both readings and their units; more CO2 would leave as bubbles"
    elif pair == "pH and alkalinity":
        rule = "alkalinity must leave carbonate above zero at this pH, within uncertainty and organic charge"
        remedy = "check pH and titration; give dic, or doc and aluminum if these carry charge"
    elif pair == "carbon and pCO2":
        rule, remedy = "total carbon must be more than the CO2 that this pressure dissolves", "check both readings"
    else:
        rule, remedy = "no water has these values", "check both readings and their units"
    return (columns, shown, rule, remedy)


def _shown(column: str, value: float) -> str:
    """A house value in a unit that people read."""
    if column.endswith("_eq_l"):
        return f"{convert(value, 'eq/L', 'µeq/L', 'alkalinity'):.4g} µeq/L"
    if column.endswith("_mol_l"):
        return f"{value * 1e6:.4g} µmol/L"
    return f"{value * 1e6:.4g} µatm" if column.endswith("_atm") else f"{value:.4g}"
