"""A season of raw water through the works: doses and targets row by row, the range of each feed, what it follows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray
from scipy.stats import rankdata

from aquabuf.arrays import worded
from aquabuf.assess.frames import frame_of
from aquabuf.assess.plant.aims import PERCENT, Aim, aims_of, column_of
from aquabuf.assess.plant.quantities import find_quantity, in_unit, measured, plant_quantities
from aquabuf.assess.plant.steps.base import Dosed, Step
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.stream import TOTALS, Stream, stream_of
from aquabuf.assess.plant.train import Train, run_train
from aquabuf.assess.sample.inputs import Values
from aquabuf.errors import InputError
from aquabuf.readings.schema import quantities
from aquabuf.units import key

__all__ = ["MET", "MISSED", "UNREAD", "Season", "rank_correlation", "season"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

MET, MISSED, UNREAD = "met", "not met", "raw water not solved"
RAW = ("ph", "alkalinity", "dic")      # of the raw water in the table
RANGE = (0.05, 0.95)                   # of the usual doses
FOLLOWS = 0.5                          # rank correlation from which a dose follows a reading; practice
LEAST_ROWS = 10                        # that a correlation is told of
DOSED = 1e-12                          # a dose below this is none [mol/L]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Season:
    """The answer.

    table : one row per row of raw water. targets : one row per target. doses : one row per step and product; `low` and
        `high` bound nine rows of ten, `turndown` is their ratio over the rows that dose, `turndown_ends` that of the
        most to the least.
    status : of each row, MET, MISSED or UNREAD. share_missed : of the rows whose raw water could be solved.
    first_reason : why the first of them is missed, "" where none is.
    """

    table: pd.DataFrame
    doses: pd.DataFrame
    targets: pd.DataFrame
    status: NDArray[np.object_]
    share_missed: float
    first_reason: str
    train: Train

    def words(self) -> tuple[str, ...]:
        """What the season says, a sentence each."""
        read = int((self.status != UNREAD).sum())
        unread = self.status.size - read
        out = [f"{PERCENT * (1.0 - self.share_missed):.3g} % of {read:,} rows meet every target"]
        if self.first_reason:
            first = int(np.flatnonzero(self.status == MISSED)[0]) + 1
            out.append(f"{PERCENT * self.share_missed:.3g} % cannot be met, the first in row {first}: "
                       f"{self.first_reason}")
        if unread:
            out.append(f"{unread:,} of {self.status.size:,} rows left out: {UNREAD}")
        return (*out, *(_dose_words(row) for row in self.doses.to_dict("records")))


def season(raw: Values | Stream, steps: Sequence[Step], *, flow_m3_d: ArrayLike = np.nan) -> Season:
    """Send rows of raw water through the works, each as if it were that day's plan.

    Parameters
    ----------
    raw
        Readings (house units by column name, one-dimensional), or a stream.
    flow_m3_d
        One or one per row; with it the turndown counts the feed, else the dose alone.

    Raises
    ------
    InputError
        Where no row of raw water can be solved, or the flow does not fit the rows.
    """
    stream = raw if isinstance(raw, Stream) else stream_of(raw)[0]
    unread = ~(np.isfinite(stream.water().ph) & np.isfinite(stream.alkalinity_eq_l))
    if unread.all():
        raise InputError(f"a season needs rows of raw water that can be solved; none of {stream.rows} can. "
                         "Check pH and alkalinity.")
    flow = _flow(flow_m3_d, stream.rows)
    train = run_train(_filled(stream, unread), steps)
    aims = aims_of(train)
    met = np.array([a.target.met(a.value(train)) for a in aims], dtype=bool)
    whole = np.logical_and.reduce([train.feasible(), *met])
    status = worded(stream.rows, (whole, MET), (unread, UNREAD), default=MISSED)
    missed = status == MISSED
    readings = _readings(raw, stream)
    return Season(
        table=_table(stream, train, aims, status, flow), status=status, train=train,
        doses=frame_of(_columns([_dose_row(name, d, ~unread, readings, flow) for name, d in train.doses()])),
        targets=frame_of(_columns([
            {"step": a.step, "target": a.target.words,
             "met_percent": PERCENT * float(m[~unread].mean())} for a, m in zip(aims, met, strict=True)])),
        share_missed=float(missed[~unread].mean()), first_reason=_reason(train, aims, met, missed))


def _flow(flow_m3_d: ArrayLike, rows: int) -> Array:
    flow = np.asarray(flow_m3_d, dtype=float)
    if flow.shape not in ((), (1,), (rows,)) or (flow < 0.0).any():
        raise InputError(f"flow_m3_d must be one value or one per row of water ({rows}), none below 0; found "
                         f"{flow.size} values, the least {np.min(flow):g}. Correct the flow.")
    return np.broadcast_to(flow, (rows,))


def _filled(stream: Stream, unread: Mask) -> Stream:
    """The stream with the first solved water in place of rows that are not, so that every step sees whole rows."""
    rows = np.arange(stream.rows)
    return stream.take(np.where(unread, np.flatnonzero(~unread)[0], rows)) if unread.any() else stream


def _reason(train: Train, aims: Sequence[Aim], met: Mask, missed: Mask) -> str:
    if not missed.any():
        return ""
    first = int(np.flatnonzero(missed)[0])
    told = next((f.words for _, f in train.findings("stop") if f.where[first]), "")
    short = [a.target.words for a, m in zip(aims, met, strict=True) if not m[first]]
    return told or f"{' and '.join(short)} not reached"


def _columns(rows: Sequence[Mapping[str, object]]) -> dict[str, NDArray]:
    """Rows as columns; text stays objects."""
    names = rows[0] if rows else ()
    return {name: np.array([r[name] for r in rows], dtype=object if isinstance(rows[0][name], str) else None)
            for name in names}


# ---------------------------------------------------------------- the table


def _table(stream: Stream, train: Train, aims: Sequence[Aim], status: NDArray[np.object_], flow: Array) -> pd.DataFrame:
    there = status != UNREAD
    columns: dict[str, NDArray] = {"row": np.arange(1, stream.rows + 1), "flow_m3_d": flow,
                                   "raw_temperature_c": stream.t_c}
    for name, house in measured(stream, RAW).items():
        columns[f"raw_{column_of(find_quantity(name))}"] = in_unit(find_quantity(name), house)
    for step, d in train.doses():
        columns[f"{key(step)}_{key(d.product.name)}_mg_l_product"] = np.where(
            there, d.product.mg_l_product(d.mol_l), np.nan)
    for a in aims:
        columns[f"{key(a.step)}_{column_of(a.target.quantity)}"] = np.where(there, a.in_unit(a.value(train)), np.nan)
    columns["final_ph"] = np.where(there, train.final.water().ph, np.nan)
    return frame_of(columns | {"status": status})


# ---------------------------------------------------------------- the doses


def _dose_row(step: str, dosed: Dosed, read: Mask, readings: Mapping[str, Array], flow: Array) -> dict[str, object]:
    """Range, turndown and the reading that a dose follows."""
    found = read & np.isfinite(dosed.mol_l)
    mol_l = dosed.mol_l[found]
    mg_l = dosed.product.mg_l_product(mol_l)
    some = mol_l > DOSED
    least, low, high, most = (np.quantile(mg_l, (0.0, *RANGE, 1.0)) if mg_l.size else np.full(4, np.nan))
    reading, correlation = _followed(np.where(found, dosed.mol_l, np.nan), readings)
    feed = np.where(np.isfinite(flow[found]), flow[found], 1.0) * mg_l
    return {
        "step": step, "product": dosed.product.name, "least_mg_l_product": float(least),
        "low_mg_l_product": float(low), "high_mg_l_product": float(high), "most_mg_l_product": float(most),
        "not_dosed_percent": PERCENT * float((~some).mean()) if some.size else np.nan,
        "turndown": _turndown(feed[some], RANGE), "turndown_ends": _turndown(feed[some], (0.0, 1.0)),
        "follows": reading, "rank_correlation": correlation,
    }


def _turndown(feed: Array, ends: tuple[float, float]) -> float:
    """High over low end of the feeds; nan where none is above zero."""
    some = feed[feed > 0.0]
    if not some.size:
        return float("nan")
    low, high = np.quantile(some, ends)
    return float(high / low)


def _dose_words(row: Mapping) -> str:
    name = row["product"]
    if not np.isfinite(row["most_mg_l_product"]):
        return f"{name} in {row['step']}: no dose was found in any row"
    if row["most_mg_l_product"] - row["least_mg_l_product"] <= 1e-9 * row["most_mg_l_product"]:
        return f"{name} in {row['step']}: {brief(row['most_mg_l_product'])} mg/L of product throughout"
    turndown = f", a turndown of {row['turndown']:,.1f} to 1 while dosing" if np.isfinite(row["turndown"]) else ""
    none = f", none in {row['not_dosed_percent']:.2g} % of rows" if row["not_dosed_percent"] > 0.0 else ""
    low, high, least, most = (brief(row[f"{n}_mg_l_product"]) for n in ("low", "high", "least", "most"))
    return (f"{name} in {row['step']}: {low} to {high} mg/L of product in nine rows of ten ({least} to {most} at the "
            f"ends){turndown}{none}; {_follow_words(row)}")


def _follow_words(row: Mapping) -> str:
    rho = row["rank_correlation"]
    if not np.isfinite(rho):
        return "no reading varies enough to say what it follows"
    if abs(rho) < FOLLOWS:
        return f"it follows no single reading (the nearest is {row['follows']}, rank correlation {rho:.2f})"
    return (f"it follows {row['follows']} of the raw water most: {'more' if rho > 0.0 else 'less'} of it where "
            f"{row['follows']} is high (rank correlation {rho:.2f})")


def _readings(raw: Values | Stream, stream: Stream) -> dict[str, Array]:
    """What a dose may follow, by its name for people."""
    if not isinstance(raw, Stream):
        known = quantities()
        return {_label(known[n].base): np.asarray(v) for n, v in raw.items() if n in known}
    found = measured(stream, RAW) | {"temperature": stream.t_c} | {n: stream.total(n) for n in TOTALS}
    return {_label(n): v for n, v in found.items()}


def _label(base: str) -> str:
    known = plant_quantities()
    return known[base].label if base in known else base.replace("_", " ")


def _followed(dose: Array, readings: Mapping[str, Array]) -> tuple[str, float]:
    """The reading with the strongest rank correlation to a dose, and that; "" and nan where none varies."""
    best, rho = "", np.nan
    for name, value in readings.items():
        now = rank_correlation(dose, value)
        if np.isfinite(now) and not abs(now) <= abs(rho):
            best, rho = name, now
    return best, rho


def rank_correlation(a: Array, b: Array) -> float:
    """Spearman's rank correlation of the rows that have both; nan for few of them, or where one does not vary. [-]"""
    both = np.isfinite(a) & np.isfinite(b)
    if both.sum() < LEAST_ROWS or np.ptp(a[both]) == 0.0 or np.ptp(b[both]) == 0.0:
        return float("nan")
    return float(np.corrcoef(rankdata(a[both]), rankdata(b[both]))[0, 1])
