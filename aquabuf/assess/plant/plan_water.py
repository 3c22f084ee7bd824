"""Raw water of a plan: a row of a table of readings, keys and values of the plan, or a row with some of it replaced."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.plan import RawWater
from aquabuf.assess.plant.plan_keys import Checked, check_keys, plan_keys
from aquabuf.assess.plant.plan_place import Place, nearest_hint
from aquabuf.assess.sample.inputs import uncertainties, values_of
from aquabuf.assess.sample.solve import has
from aquabuf.errors import AquabufError, InputError
from aquabuf.readings.entries import Entries, read_entries
from aquabuf.readings.reader import read_readings
from aquabuf.readings.result import Readings
from aquabuf.readings.schema import Quantity, quantities

__all__ = ["errors_of", "read_water", "water_columns"]

Array = NDArray[np.float64]

NOT_OF_WATER = ("count", "angle", "area", "volume", "load", "runoff", "years", "speed", "time")  # dimensions
LAKE_ONLY = ("depth_m", "mean_depth_m")
TEMPERATURE = "temperature_c"


@cache
def water_columns() -> Mapping[str, Quantity]:
    """Columns of readings that describe a water, by name."""
    return {name: q for name, q in quantities().items()
            if q.is_number and q.dimension not in NOT_OF_WATER and name not in LAKE_ONLY}


def read_water(place: Place, table: Mapping[str, object], section: str, name: str, folder: Path,
               ) -> tuple[RawWater, Checked]:
    """The water of a table of the plan, and its other keys. Raises InputError naming line, key and remedy."""
    own = plan_keys(section)
    checked = check_keys(place, {k: v for k, v in table.items() if k in own}, section)
    entries = _entries(place, {k: v for k, v in table.items() if k not in own}, tuple(own))
    row, words = _row(place, checked, folder)
    for key in ("sample", "map"):
        if key in table and "readings" not in table:
            raise place.error(f"{key} must go with readings; found none. Add readings or remove {key}.", key)
    entries.check_u(place.where(), water_columns(), others=row)
    values = _joined(row, entries)
    _check_enough(place, values)
    if entries.values:
        given = ", ".join(water_columns()[n].base for n in entries.values)
        words = f"{words}; given in the plan: {given}" if words else "given in the plan"
    own_values = {n: v for n, v in values.items() if n in quantities()}
    return RawWater(name=name, values=own_values, u=uncertainties(values), words=words), checked


def errors_of(place: Place, table: Mapping[str, object]) -> Mapping[str, float]:
    """Standard uncertainties of single readings by column name, as [drift] errors gives them."""
    return read_entries(table, water_columns(), lambda key: f"{place.where(key)} {key!r}", texts=True, spreads=True).u


def _entries(place: Place, table: Mapping[str, object], beside: tuple[str, ...]) -> Entries:
    return read_entries(table, water_columns(), lambda key: f"{place.where(key)} {key!r}", beside=beside, texts=True)


def _joined(row: Mapping[str, Array], entries: Entries) -> dict[str, Array]:
    """Row and keys as one water, uncertainty columns included; a value that is replaced loses its uncertainty."""
    values = {name: v for name, v in row.items() if name not in {quantities()[n].u_name for n in entries.values}}
    values |= {name: np.array([v]) for name, v in entries.values.items()}
    return values | {quantities()[name].u_name: np.array([v]) for name, v in entries.u.items()}


def _row(place: Place, checked: Checked, folder: Path) -> tuple[dict[str, Array], str]:
    """One row of a table of readings, and where it stands; nothing where the plan names no table."""
    file = checked.get("readings")
    if file is None:
        return {}, ""
    mapping = checked.get("map")
    try:
        readings = read_readings(folder / file, None if mapping is None else folder / mapping)
    except (AquabufError, ValueError) as error:  # a path may hold what no file name can
        raise place.error(f"readings cannot be read: {error}", "readings") from None
    at = _which(place, readings, checked.get("sample"), file)
    line = readings.frame.iloc[[at]]
    known = {name for q in water_columns().values() for name in (q.name, q.u_name)}
    values = {n: v for n, v in values_of(line).items() if n in known}
    day = f", {line['date'].iloc[0]}" if "date" in line and line["date"].iloc[0] else ""
    return values, f"sample {line['sample_id'].iloc[0]} of {Path(file).name}, row {line['row'].iloc[0]}{day}"


def _which(place: Place, readings: Readings, sample: str | None, file: str) -> int:
    names = [str(name) for name in readings.frame["sample_id"]]
    if sample is None:
        if not names:
            raise place.error(f"{file} must have a row that can be used; found none of {len(readings.rejected)} "
                              f"problems solved. {_first_problem(readings.rejected.to_dict('records'))}", "readings")
        return len(names) - 1
    if sample in names:
        return names.index(sample)
    refused = [r for r in readings.rejected.to_dict("records") if str(r["sample_id"]) == sample]
    if refused:
        raise place.error(f"sample {sample!r} of {file} cannot be used. {_first_problem(refused)}", "sample")
    raise place.error(f"sample must be a name of {file}; found {sample!r}, which is not there."
                      f"{nearest_hint(sample, names)} Correct it.", "sample")


def _first_problem(rejected: list[dict[Any, Any]]) -> str:
    if not rejected:
        return "Add a row of readings."
    first = rejected[0]
    return f"Row {first['row']}, {first['column']} = {first['value']!r}: {first['rule']}; {first['remedy']}."


def _check_enough(place: Place, values: Mapping[str, Array]) -> None:
    """Temperature, and two of what fixes the carbonate system."""
    if TEMPERATURE not in values:
        raise place.error(f"the temperature is needed; it is missing. Add for example {TEMPERATURE} = 11.2.")
    there = [name for name, found in has(values, 1).items() if found[0]]
    if len(there) < 2:
        raise InputError(f"{place.where()}: two of pH, alkalinity, inorganic carbon (dic) and CO2 pressure (pco2) are "
                         f"needed; found {', '.join(there) or 'none'}. Add another.")
