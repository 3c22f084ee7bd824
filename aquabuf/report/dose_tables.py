"""Tables of a solved plan, by the name of their file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.quantities import in_unit, plant_quantities
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.assess.plant.train import Passed

__all__ = ["dose_tables", "sweeps"]

PERCENT = 100.0
FLAT = str | int | float | bool | None


def dose_tables(answer: Answer, record: Mapping[str, Any]) -> dict[str, pd.DataFrame]:
    """Every table that has something to say. `record` : the answer as `answer_record` gives it."""
    tables = {
        "doses.csv": _frame([_flat(d) | _flat(d["feed"]) for d in record["doses"]]),
        "steps.csv": _frame(record["steps"]),
        "curves.csv": _joined([c.table.assign(step=c.step, product=c.product) for c in answer.curves]),
        "faults.csv": _frame([_flat(f) | {"passes": "; ".join(f["passes"])} for f in record["faults"]]),
        "limits.csv": _frame(record["limits"]),
        "errors.csv": _errors(answer),
        "blend.csv": _joined([_sweep(p) for p in answer.train.passed if sweeps(p)]),
        "buffers.csv": _frame(record["hold"]["buffers"] if record["hold"] else []),
    }
    if answer.season is not None:
        tables |= {"season.csv": answer.season.table, "season_doses.csv": answer.season.doses}
    return {name: table for name, table in tables.items() if len(table)}


def _frame(rows: list[dict[str, Any]]) -> pd.DataFrame:
    """Rows as a table; a column of numbers stays one where some are not known."""
    return pd.DataFrame(rows).astype({name: float for name in rows[0] if _is_number(rows, name)}) if rows else \
        pd.DataFrame()


def _is_number(rows: list[dict[str, Any]], name: str) -> bool:
    values = [r[name] for r in rows if r[name] is not None]
    return bool(values) and all(isinstance(v, float) for v in values)


def _flat(record: Mapping[str, Any]) -> dict[str, Any]:
    """What fits a cell."""
    return {name: v for name, v in record.items() if isinstance(v, FLAT)}


def _joined(tables: list[pd.DataFrame]) -> pd.DataFrame:
    """Tables below each other, step and product first."""
    if not tables:
        return pd.DataFrame()
    table = pd.concat(tables, ignore_index=True)
    first = [name for name in ("step", "product") if name in table]
    return table[[*first, *(name for name in table.columns if name not in first)]]


def _errors(answer: Answer) -> pd.DataFrame:
    """Doses, windows and causes under errors of the readings and of the feeds; `table` says which a row is."""
    readings, feeds = answer.readings_error, answer.feed_error
    parts = [] if readings is None else [("dose", "readings", readings.doses), ("window", "readings", readings.windows),
                                         ("cause", "readings", readings.causes)]
    parts += [] if feeds is None else [("window", "feeds", feeds.windows), ("window", "feeds", feeds.each),
                                       ("cause", "feeds", feeds.causes)]
    tables = [t.drop(columns="row").assign(table=kind, erring=erring) for kind, erring, t in parts if len(t)]
    if not tables:
        return pd.DataFrame()
    names = list(dict.fromkeys(name for t in tables for name in t.columns))
    rows = [{name: r.get(name) for name in names} for t in tables for r in t.to_dict("records")]
    lead = ["table", "erring", "cause"] if "cause" in names else ["table", "erring"]
    return pd.DataFrame(rows)[[*lead, *(n for n in names if n not in lead)]]


def sweeps(passed: Passed) -> bool:
    """Whether a step blends and looks at the other ratios too."""
    return isinstance(passed.step, Blend) and passed.step.with_sweep


def _sweep(passed: Passed) -> pd.DataFrame:
    """The blend at every share of the source that is varied."""
    assert isinstance(passed.step, Blend)
    found, named = passed.step.sweep(passed.before), plant_quantities()
    values = {"ph": found.ph, "alkalinity": found.alkalinity_eq_l, "si_calcite": found.si_calcite,
              "ccpp": found.ccpp_mol_l}
    return pd.DataFrame({"step": passed.step.name, "vary": found.vary, "share_percent": PERCENT * found.share} | {
        named[name].column: np.asarray(in_unit(named[name], v))[:, 0] for name, v in values.items()})
