"""What errors of the readings and of the feeds do: interval of each dose, and how often the held doses miss a window.

Two questions are kept apart. The operator asks how well the readings tell the dose: doses are found anew for each draw
of the readings. The water asks how well the dose suits it: the doses found from the readings are held, and the true
water differs from the reading by a draw of its error.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.frames import frame_of
from aquabuf.assess.plant.aims import (
    PERCENT,
    Aim,
    aims_of,
    dosed_of,
    repeated,
    share_interval,
    unit_words,
)
from aquabuf.assess.plant.steps.base import Step
from aquabuf.assess.plant.storage import feed_rules
from aquabuf.assess.plant.stream import Stream, stream_of
from aquabuf.assess.plant.targets import Target
from aquabuf.assess.plant.train import Train, held_steps, run_train
from aquabuf.assess.sample.inputs import Values, uncertainties
from aquabuf.assess.sample.solve import take_rows
from aquabuf.assess.uncertainty import drawn, interval, row_blocks, share
from aquabuf.errors import InputError
from aquabuf.readings.schema import quantities

__all__ = ["ALL", "LEAST_DRAWS", "UnderError", "UnderFeedError", "under_error", "under_feed_error", "worst_of"]

Array = NDArray[np.float64]

ALL = "all together"
LEAST_DRAWS, MOST_DRAWS = 100, 100_000
ROUNDING = 1e-11  # spread in parts of the mean
MOSTLY = 0.5  # share of the variance from which one cause counts as most of it


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnderError:
    """Errors of the readings.

    doses : of each row, step and product: the dose found from the readings, and the interval of what would be found.
    windows : of each row and target, doses held: interval of the quantity, probability of leaving its window.
    causes : of each row, target and reading: share of the variance when that reading alone errs.
    """

    doses: pd.DataFrame
    windows: pd.DataFrame
    causes: pd.DataFrame
    draws: int
    seed: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnderFeedError:
    """Errors of the feeds.

    windows : as in UnderError, all feeds erring. each : the same for each product alone (column `cause`).
    causes : share of the variance when the feed of one product alone errs.
    """

    windows: pd.DataFrame
    each: pd.DataFrame
    causes: pd.DataFrame
    relative_u: Mapping[str, float]
    draws: int
    seed: int


# ---------------------------------------------------------------- readings


def under_error(values: Values, steps: Sequence[Step], *, u: Mapping[str, Array] | None = None, draws: int = 1000,
                seed: int = 1, targets: Sequence[Target] = ()) -> UnderError:
    """What uncertain readings of the raw water do to the doses and, doses held, to the water.

    Parameters
    ----------
    values
        Readings by column name in house units, one-dimensional, a water per row. With several rows the settings of
        the steps must be one for all.
    u
        Standard uncertainties; by default the columns of their own, else the defaults of the table of columns.
    targets
        Judged on the final water; by default those of the steps, each on the water that leaves its step.

    Raises
    ------
    InputError
        For draws or a seed out of range; where the raw water cannot be solved.
    """
    _check(draws, seed)
    u = uncertainties(values) if u is None else u
    raw, pair = stream_of(values)
    quiet = _quiet(steps)
    train = run_train(raw, quiet)
    aims = aims_of(train, targets, watch_ph=True)
    names = [n for n in u if n in values and np.any(u[n] > 0.0)]
    doses = np.full((len(train.doses()), raw.rows, draws), np.nan)
    found = np.full((len(aims), raw.rows, draws), np.nan)
    spread = np.zeros((len(names), len(aims), raw.rows))
    for rows in row_blocks(np.flatnonzero(pair != ""), draws):
        some, its = take_rows(values, rows), take_rows({n: u[n] for n in names}, rows)
        held = held_steps(repeated(_rows_of(train, rows), draws))
        drawn_raw = _raw(some, its, draws, seed, names, pair[rows])
        doses[:, rows] = _shaped([d.mol_l for _, d in run_train(drawn_raw, quiet).doses()], rows.size, draws)
        found[:, rows] = _values_of(aims, run_train(drawn_raw, held), rows.size, draws)
        for k, name in enumerate(names):
            alone = run_train(_raw(some, its, draws, seed, [name], pair[rows]), held)
            spread[k][:, rows] = _variance(_values_of(aims, alone, rows.size, draws))
    told = [a.value(train) for a in aims]
    return UnderError(doses=_dose_table(train, doses), windows=_windows(aims, told, found),
                      causes=_causes(aims, {_label(n): s for n, s in zip(names, spread, strict=True)}),
                      draws=draws, seed=seed)


def _check(draws: int, seed: int) -> None:
    if not LEAST_DRAWS <= draws <= MOST_DRAWS:
        raise InputError(f"draws must be from {LEAST_DRAWS} to {MOST_DRAWS}; found {draws}. Use 1000.")
    if seed < 0:
        raise InputError(f"seed must be 0 or more; found {seed}. Any whole number does.")


def _quiet(steps: Sequence[Step]) -> list[Step]:
    """The steps without the search for reasons, which would be told of a draw."""
    return [replace(s, explain=False) if hasattr(s, "explain") else s for s in steps]  # type: ignore[type-var]


def _rows_of(train: Train, rows: NDArray[np.intp]) -> Train:
    """Some of the rows of the raw water and of the doses of a run."""
    passed = tuple(replace(p, outcome=replace(p.outcome, doses=tuple(
        replace(d, mol_l=d.mol_l[rows]) for d in p.outcome.doses))) for p in train.passed)
    return Train(train.raw.take(rows), passed)


def _raw(values: Values, u: Mapping[str, Array], draws: int, seed: int, names: Sequence[str],
         pair: NDArray[np.object_]) -> Stream:
    """Raw water of the draws; rows that would be solved from another pair than the readings are nan."""
    stream, now = stream_of(drawn(values, u, draws, seed, names))
    other = now != np.repeat(pair, draws)
    return stream.replaced(carbon_mol_l=np.where(other, np.nan, stream.carbon_mol_l)) if other.any() else stream


def _label(name: str) -> str:
    base = quantities()[name].base if name in quantities() else name
    return "pH" if base == "ph" else base.replace("_", " ")


def _dose_table(train: Train, doses: Array) -> pd.DataFrame:
    parts = []
    for (step, d), many in zip(train.doses(), doses, strict=True):
        mg_l = d.product.mg_l_product(many)
        low, high = interval(mg_l)
        parts.append(frame_of({
            "row": np.arange(1, many.shape[0] + 1), "step": np.full(many.shape[0], step),
            "product": np.full(many.shape[0], d.product.name), "dose_mg_l_product": d.product.mg_l_product(d.mol_l),
            "low_mg_l_product": low, "high_mg_l_product": high, "u_mg_l_product": np.sqrt(_variance(mg_l)),
            "not_found_percent": PERCENT * np.isnan(many).mean(axis=1)}))
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame()


# ---------------------------------------------------------------- feeds


def under_feed_error(train: Train, *, relative_u: float | Mapping[str, float] | None = None, draws: int = 1000,
                     seed: int = 1, targets: Sequence[Target] = ()) -> UnderFeedError:
    """How often each window is left when every feed errs on its own, normally around the dose that was found.

    Parameters
    ----------
    relative_u
        Standard error of a feed in parts of its dose, one for all or by product; by default the most that the rule on
        feed accuracy allows, taken as one standard error, which is on the safe side. [-]
    targets
        As in `under_error`.

    Raises
    ------
    InputError
        For draws, a seed or an error out of range; for a product that no step doses.
    """
    _check(draws, seed)
    each = _relative(train, relative_u)
    aims = aims_of(train, targets, watch_ph=True)
    rows = train.raw.rows
    factors = drawn({n: np.ones(rows) for n in each}, {n: np.full(rows, r) for n, r in each.items()}, draws, seed, each)
    many = repeated(train, draws)
    told = [a.value(train) for a in aims]

    def found(some: Mapping[str, Array]) -> Array:
        return _values_of(aims, run_train(many.raw, held_steps(many, some)), rows, draws)

    together = found(factors)
    alone = {n: found({n: factors[n]}) for n in each}
    tables = [_windows(aims, told, v).assign(cause=n) for n, v in alone.items()]
    return UnderFeedError(
        windows=_windows(aims, told, together).assign(cause=ALL),
        each=pd.concat(tables, ignore_index=True) if tables else pd.DataFrame(),
        causes=_causes(aims, {f"feed of {n}": _variance(v) for n, v in alone.items()}), relative_u=each, draws=draws,
        seed=seed)


def _relative(train: Train, relative_u: float | Mapping[str, float] | None) -> dict[str, float]:
    names = dict.fromkeys(d.product.name for _, d in train.doses())
    rule = feed_rules()["feed accuracy"].limit / PERCENT
    if isinstance(relative_u, Mapping):
        for name in relative_u:
            dosed_of(train, name)
        each = {n: float(relative_u.get(n, rule)) for n in names}
    else:
        each = dict.fromkeys(names, rule if relative_u is None else float(relative_u))
    for name, value in each.items():
        if not 0.0 <= value <= 1.0:
            raise InputError(f"the feed error of {name!r} must be a share from 0 to 1; found {value:g}. "
                             "Give 5 % as 0.05.")
    return each


# ---------------------------------------------------------------- shared


def _shaped(flat: Sequence[ArrayLike], rows: int, draws: int) -> Array:
    return np.array(flat, dtype=float).reshape(len(flat), rows, draws)


def _values_of(aims: Sequence[Aim], train: Train, rows: int, draws: int) -> Array:
    """Shape (aims, rows, draws), house units."""
    return _shaped([a.value(train) for a in aims], rows, draws)


def _variance(many: Array) -> Array:
    """Of the draws that were solved, along the last axis; 0 where fewer were than two, or only rounding varies."""
    there = np.isfinite(many)
    count = there.sum(axis=-1)
    kept = np.where(there, many, 0.0)
    mean = kept.sum(axis=-1) / np.maximum(count, 1)
    off = np.where(there, kept - mean[..., None], 0.0)
    variance = (off**2).sum(axis=-1) / np.maximum(count - 1, 1)
    return np.where(variance > (ROUNDING * mean) ** 2, variance, 0.0)


def _windows(aims: Sequence[Aim], told: Sequence[Array], found: Array) -> pd.DataFrame:
    """One row per water and aim: value with the readings, interval, and how often the window is left."""
    return pd.concat([frame_of(_window(a, t, f)) for a, t, f in zip(aims, told, found, strict=True)],
                     ignore_index=True) if aims else pd.DataFrame()


def _window(aim: Aim, told: Array, found: Array) -> dict[str, NDArray]:
    valid = np.isfinite(found)
    left = share(~aim.window.met(found), valid)
    low, high = share_interval(left, valid.sum(axis=1))
    if aim.watched:
        left, low, high = (np.full(told.shape, np.nan) for _ in range(3))
    q, rows = aim.target.quantity, told.size
    value_low, value_high = (aim.in_unit(end) for end in interval(found))
    return {
        "row": np.arange(1, rows + 1), "step": np.full(rows, aim.step), "quantity": np.full(rows, q.label),
        "unit": np.full(rows, unit_words(q)), "window": np.full(rows, aim.window_words),
        "value": aim.in_unit(told), "value_low": value_low, "value_high": value_high, "leaves_percent": PERCENT * left,
        "leaves_low_percent": PERCENT * low, "leaves_high_percent": PERCENT * high,
        "not_solved_percent": PERCENT * (1.0 - valid.mean(axis=1))}


def _causes(aims: Sequence[Aim], spread: Mapping[str, Array]) -> pd.DataFrame:
    """Share of the variance by cause: one row per water, aim and cause that moves the quantity."""
    whole = sum(spread.values(), start=np.zeros(0)) if not spread else np.sum(list(spread.values()), axis=0)
    return pd.DataFrame([
        {"row": row + 1, "step": a.step, "quantity": a.target.quantity.label, "cause": cause,
         "variance_percent": PERCENT * each[k, row] / whole[k, row],
         "u_alone": abs(float(a.in_unit(np.sqrt(each[k, row])))), "unit": unit_words(a.target.quantity)}
        for k, a in enumerate(aims) for row in range(whole.shape[1]) for cause, each in _largest_first(spread, k, row)],
        columns=["row", "step", "quantity", "cause", "variance_percent", "u_alone", "unit"])


def _largest_first(spread: Mapping[str, Array], k: int, row: int) -> Iterator[tuple[str, Array]]:
    for cause in sorted(spread, key=lambda n: -spread[n][k, row]):
        if spread[cause][k, row] > 0.0:
            yield cause, spread[cause]


def worst_of(found: UnderError | UnderFeedError, row: int = 1) -> str:
    """The window that is left most often, and what most of it comes from, in words; rows count from 1."""
    here = found.windows[(found.windows["row"] == row) & found.windows["leaves_percent"].notna()]
    if here.empty:
        return "no window can be judged: no target is set, or none could be computed"
    worst = here.sort_values("leaves_percent", ascending=False, kind="stable").iloc[0]
    unit = f" {worst['unit']}" if worst["unit"] and worst["unit"] not in worst["window"] else ""
    what = f"{worst['quantity']} leaves {worst['window']}{unit}"
    if worst["leaves_percent"] == 0.0:
        return (f"no window is left in any of {found.draws:,} draws (the true share is below "
                f"{worst['leaves_high_percent']:.2g} %)")
    causes = found.causes[(found.causes["row"] == row) & (found.causes["step"] == worst["step"])
                          & (found.causes["quantity"] == worst["quantity"])]
    noun = " reading" if isinstance(found, UnderError) else ""
    return f"{what} in {worst['leaves_percent']:.2g} % of draws; {_cause_words(causes, noun)}"


def _cause_words(causes: pd.DataFrame, noun: str) -> str:
    if causes.empty:
        return "nothing that errs moves it: it is off before any error"
    first = causes.iloc[0]
    if first["variance_percent"] >= PERCENT * MOSTLY:
        return f"most of it is the {first['cause']}{noun} ({first['variance_percent']:.0f} % of the variance)"
    shared = " and ".join(f"the {r['cause']}{noun} ({r['variance_percent']:.0f} %)"
                          for r in causes.head(2).to_dict("records"))
    return f"{shared} have the largest shares of the variance"
