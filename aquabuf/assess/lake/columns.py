"""The columns of the lake results, from the shipped table."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from aquabuf.assess.sample.columns import ResultColumn, table_columns
from aquabuf.assess.sample.headline import threshold_column

__all__ = ["AS_GIVEN", "TO_PH_6", "acid_column", "lake_columns", "lake_quantities"]

AS_GIVEN = ("sample_id", "row", "site", "region", "date", "depth_m", "water_kind", "survey_weight", "filtered",
            "ph_kind", "anc_method")  # only repeated


def acid_column(ph: float, exchange: str) -> str:
    """Column of the acid to a pH, such as acid_to_ph_6_0_open_ueq_l."""
    return threshold_column("acid", ph, exchange, "ueq_l")


TO_PH_6 = acid_column(6.0, "open")


def lake_columns(thresholds: Sequence[float]) -> Iterator[ResultColumn]:
    """Columns of results.csv of lakes in order, tolerance columns for each pH threshold."""
    yield from table_columns("lake_results", lambda name: [
        acid_column(ph, "open" if "_open_" in name else "closed") for ph in thresholds])


def lake_quantities(thresholds: Sequence[float]) -> dict[str, str]:
    """Figures that a limit can be set on, with their unit."""
    return {c.name: c.unit for c in lake_columns(thresholds) if c.unit and c.name not in AS_GIVEN}
