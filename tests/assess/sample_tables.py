"""Readings from plain dictionaries, and their assessment without files. All waters are invented."""

import numpy as np
import pandas as pd

from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.readings.result import REJECTED_COLUMNS, Readings

TEXT = ("sample_id", "site", "region", "date", "time", "water_kind")


def readings(*rows, acids=None):
    """Readings whose frame holds the rows (house units); what a row lacks is missing."""
    names = list(dict.fromkeys(name for row in rows for name in row))
    frame = {"row": np.arange(2, 2 + len(rows))}
    frame["sample_id"] = [row.get("sample_id", f"s{i}") for i, row in enumerate(rows)]
    for name in names:
        if name in TEXT:
            frame[name] = pd.Series([row.get(name, "") for row in rows], dtype="str")
        else:
            frame[name] = [row.get(name, np.nan) for row in rows]
    return Readings(frame=pd.DataFrame(frame), rejected=pd.DataFrame(columns=list(REJECTED_COLUMNS)),
                    acids=acids or {})


def assessed(*rows, limits=None, acids=None, **options):
    """Assessment of the rows; without draws unless asked for."""
    chosen = Options(**({"draws": 0} | options))
    return assess(readings(*rows, acids=acids), chosen, shipped_limits() if limits is None else limits)


def results(*rows, **options):
    """Only the table of results, by sample_id."""
    return assessed(*rows, **options).results.set_index("sample_id")
