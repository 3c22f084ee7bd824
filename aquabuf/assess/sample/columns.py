"""The columns of results.csv, from the shipped table."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from aquabuf.assess.options import Options
from aquabuf.tables import read_table

__all__ = ["AS_GIVEN", "ResultColumn", "limit_quantities", "result_columns", "table_columns"]

AS_GIVEN = ("sample_id", "row", "site", "region", "date", "time", "depth_m", "water_kind")  # only repeated


@dataclass(frozen=True, slots=True)
class ResultColumn:
    """One column: name, unit, whether it has an interval, decimals written, meaning."""

    name: str
    unit: str
    interval: bool
    digits: int | None
    meaning: str


def table_columns(table: str, expand: Callable[[str], list[str]]) -> Iterator[ResultColumn]:
    """Columns of a shipped table of result columns, in its order; `expand` gives the names that a * stands for."""
    for row in read_table(table):
        digits = int(row["digits"]) if row["digits"] else None
        for name in expand(row["name"]) if "*" in row["name"] else [row["name"]]:
            yield ResultColumn(name, row["unit"], row["interval"] == "yes", digits, row["meaning"])


def result_columns(options: Options) -> Iterator[ResultColumn]:
    """Columns of results.csv in order, tolerance columns for each threshold of `options`."""
    from aquabuf.assess.sample.headline import threshold_column

    def expand(name: str) -> list[str]:
        kind = name.split("_")[0]
        exchange = "open" if "_open_" in name else "closed"
        thresholds = options.acid_thresholds if kind == "acid" else options.base_thresholds
        return [threshold_column(kind, ph, exchange) for ph in thresholds]

    yield from table_columns("results", expand)


def limit_quantities(options: Options) -> dict[str, str]:
    """Figures that a limit can be set on, with their unit: the numbers that are worked out, not those only repeated."""
    return {c.name: c.unit for c in result_columns(options) if c.unit and c.name not in AS_GIVEN}
