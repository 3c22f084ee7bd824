"""Reads the published check values beside this file.

A row of the main tables: module, quantity, t_c, salinity, other arguments (`name=number;name=number`), the transform in
which the value is printed, a shift that moves the computed value to the printed form, expected, atol, mark and source.
Marks: printed (seen in print), recalled (from memory of the source), derived (worked out apart from the code from the
named source), computed-by-library (a general reference library).
"""

import csv
import importlib
import pkgutil
from pathlib import Path

import numpy as np

import aquabuf.chem

MARKS = {"printed", "recalled", "derived", "computed-by-library"}
CHEM_TABLES = tuple(sorted(m.name for m in pkgutil.iter_modules(aquabuf.chem.__path__)))  # a new one cannot be forgotten
TRANSFORMS = {
    "plain": lambda k: k,
    "log10": np.log10,
    "pK": lambda k: -np.log10(k),
    "ln": np.log,
}


def read_rows(name):
    """Rows of `tests/published/<name>.csv` as dictionaries of strings, in file order."""
    with (Path(__file__).parent / f"{name}.csv").open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def row_id(row):
    """A readable test name, such as `k1_millero t_c=25 salinity=35 5.8401`."""
    where = [f"{key}={row[key]}" for key in ("step", "t_c", "salinity") if row.get(key)]
    return " ".join([row.get("quantity") or row["acid"], *where, row["expected"]])


def arguments(row):
    """Keyword arguments of a row as numbers; a formula stays text."""
    pairs = [pair.split("=") for pair in row["other"].split(";") if pair]
    own = [(key, row[key]) for key in ("t_c", "salinity") if row[key]]
    return {key: value if key == "formula" else float(value) for key, value in [*own, *pairs]}


def computed(row):
    """What the code gives for a row, in the row's printed form."""
    target = getattr(importlib.import_module(f"aquabuf.chem.{row['module']}"), row["quantity"])
    value = target(**arguments(row)) if callable(target) else target
    return TRANSFORMS[row["transform"]](value) + float(row["shift"] or 0.0)
