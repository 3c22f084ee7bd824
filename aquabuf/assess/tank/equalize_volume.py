"""Volume of an equalization tank against what it leaves of the swings of base and pH, and the choice among volumes.

The volume that evens out flow and the one that evens out content are additive: the level moves in the one, the other
lies under it and is always full.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import cache
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.equalize import Draw, Equalized, equalize, mixing_saving
from aquabuf.assess.tank.profile import HOUR_S, Cases
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["VolumeChoice", "choose_volume", "run_tank", "trial_volumes", "volume_rules", "volume_table"]

Array = NDArray[np.float64]
PhOf = Callable[[Array, Array], Array]      # base, amounts -> pH
AimOf = Callable[[Array], Array]            # amounts -> base at the set point

TRIAL_HOURS = (0.0, 0.5, 1.0, 2.0, 3.0, 4.0, 6.0, 8.0, 10.0, 12.0, 16.0, 20.0, 24.0)
LEAST_POINTS = 3  # of a curve that can have a knee
_SLACK = 1e-9


@cache
def volume_rules() -> Mapping[str, dict[str, str]]:
    """Rules for choosing a volume by name, as `data/tank_volume_rules.csv` has them."""
    return {row["name"]: row for row in read_table("tank_volume_rules")}


def trial_volumes(mean_m3_h: float, hours: Sequence[float] = TRIAL_HOURS) -> Array:
    """Volumes that hold the mean flow for so many hours. [m3]"""
    return mean_m3_h * np.asarray(hours, dtype=float)


def run_tank(cases: Cases, base_eq_l: ArrayLike, volume_m3: ArrayLike, *, flow_volume_m3: float = 0.0,
             draw_m3_h: float | None = None) -> Equalized:
    """Run all cases through tanks of these volumes, (n, volumes, cases), from the state that the course leads back to.

    volume_m3 : always full, for the content; one value or several. flow_volume_m3 : above it, for the flow, drawn at
    a constant rate (the mean flow of all cases if not given); without it as much leaves as comes.
    """
    least = np.atleast_1d(np.asarray(volume_m3, dtype=float))[:, None]
    q, y, s = cases.flow_m3_h[:, None], np.asarray(base_eq_l, dtype=float)[:, None], cases.strength[:, :, None]
    rate = mean_flow(cases) if draw_m3_h is None else draw_m3_h
    levels = flow_volume_m3 > 0.0
    # no draw from a tank that only evens out content: it is full and overflows as much as comes
    draw, bottom = (Draw(rate), least) if levels else (Draw(0.0), np.zeros_like(least))

    def passed(start_m3: Array, amounts: Array, start_base: ArrayLike | None, start: ArrayLike | None) -> Equalized:
        return equalize(cases.time_s, cases.step_s, q, y, amounts, volume_m3=least + flow_volume_m3, least_m3=bottom,
                        draw=draw, start_m3=start_m3, start_base_eq_l=start_base, start_amounts=start)

    level = least + flow_volume_m3
    if levels:
        level = passed(least + 0.5 * flow_volume_m3, s[:0], None, None).level_m3[-1]
    # content at the end is linear in that at the start: end = a start + b, with a told by a tracer that nothing brings
    wastes = s.shape[0]
    tracer = np.concatenate([s, np.zeros_like(s[:1])])
    probe = passed(level, tracer, 0.0, np.append(np.zeros(wastes), 1.0))
    kept = 1.0 - probe.amounts[-1, -1]
    return passed(level, s, probe.base_eq_l[-1] / kept, probe.amounts[:wastes, -1] / kept)


def mean_flow(cases: Cases) -> float:
    """Mean flow over time and cases. [m3/h]"""
    dt = np.append(np.diff(cases.time_s), cases.step_s)
    return float((cases.flow_m3_h.mean(axis=1) * dt).sum() / dt.sum())


def volume_table(cases: Cases, of_wastes_eq_l: ArrayLike, volumes_m3: ArrayLike, *, flow_volume_m3: float = 0.0,
                 draw_m3_h: float | None = None, ph: PhOf | None = None, aim: AimOf | None = None) -> pd.DataFrame:
    """What each volume leaves of the swings, one row per volume, over all cases and by what flows out.

    Columns: volume_m3, total_m3 (with the volume for flow), hold_h (of mean flow), sd_eq_l, sd_share (of no tank),
    peak_eq_l (farthest from the mean), low_eq_l, high_eq_l, flow_peak_factor, saved_eq_d (reagent that mixing saves),
    overflow_share (of flow, above the draw), and with `ph` ph_sd, ph_low, ph_high.

    ph : pH of base and amounts (J, ...). aim : base at the set point, for what is saved; zero if not given.
    """
    volumes = np.atleast_1d(np.asarray(volumes_m3, dtype=float))
    if not (volumes >= 0.0).all() or (np.diff(volumes) <= 0.0).any():
        raise InputError(f"volumes to be tried must rise from 0 or more; found {volumes.tolist()} m3. Sort them.")
    base = cases.base(of_wastes_eq_l)
    dt = np.append(np.diff(cases.time_s), cases.step_s)
    raw_sd = _spread(base, cases.flow_m3_h * dt[:, None])[1]
    tank = run_tank(cases, base, volumes, flow_volume_m3=flow_volume_m3, draw_m3_h=draw_m3_h)
    mean = mean_flow(cases)
    came = mean * float(dt.sum()) / HOUR_S
    rows = []
    for m, volume in enumerate(volumes.tolist()):
        out, y, amounts = tank.out_m3_h[:, m], tank.out_base_eq_l[:, m], tank.out_amounts[:, :, m]
        weight = out * dt[:, None]
        center, sd = _spread(y, weight)
        flows = weight > 0.0
        saving = mixing_saving(cases.flow_m3_h, base, dt, out_flow_m3_h=out, out_base_eq_l=y,
                               aim_eq_l=aim(cases.strength) if aim else 0.0, out_aim_eq_l=aim(amounts) if aim else 0.0)
        overflow = 0.0 if flow_volume_m3 == 0.0 else float(tank.overflow_m3[m].mean()) / came
        row = {"volume_m3": volume, "total_m3": volume + flow_volume_m3, "hold_h": volume / mean, "sd_eq_l": sd,
               "sd_share": sd / raw_sd if raw_sd > 0.0 else np.nan, "peak_eq_l": float(np.abs(y - center)[flows].max()),
               "low_eq_l": float(y[flows].min()), "high_eq_l": float(y[flows].max()),
               "flow_peak_factor": float(out.max() / mean), "saved_eq_d": saving.saved_eq_d, "overflow_share": overflow}
        if ph is not None:
            x = ph(y, amounts)
            row |= {"ph_sd": _spread(x, weight)[1], "ph_low": float(x[flows].min()), "ph_high": float(x[flows].max())}
        rows.append(row)
    return pd.DataFrame(rows)


def _spread(values: Array, weight: Array) -> tuple[float, float]:
    """Mean and standard deviation by weight."""
    total = weight.sum()
    mean = float((values * weight).sum() / total)
    return mean, float(np.sqrt(((values - mean) ** 2 * weight).sum() / total))


class VolumeChoice(NamedTuple):
    """The volume that a rule picks, and the rule."""

    volume_m3: float    # for the content
    total_m3: float     # with that for the flow
    rule: str           # its name
    words: str
    mark: str
    source: str
    row: int            # of the table


def choose_volume(table: pd.DataFrame, rule: str = "knee", limit: float | None = None) -> VolumeChoice:
    """Pick a volume of `volume_table` by one of `volume_rules`; all but the knee need a limit.

    Raises InputError for an unknown rule, a limit missing or not needed, or a limit that no volume tried meets.
    """
    if rule not in volume_rules():
        raise InputError(f"the rule for a volume must be one of {', '.join(volume_rules())}; found {rule!r}. "
                         "Correct it.")
    told = volume_rules()[rule]
    if bool(told["needs"]) != (limit is not None):
        needed = f"a limit in {told['needs']}" if told["needs"] else "no limit"
        given = "none" if limit is None else f"{limit:g}"
        raise InputError(f"the rule {rule!r} needs {needed}; found {given}. Correct it.")
    row = _knee(table) if limit is None else _least(table, rule, limit, told["needs"])
    words = told["words"] if limit is None else f"{told['words']}: {limit:g} {told['needs']}"
    return VolumeChoice(float(table["volume_m3"].iloc[row]), float(table["total_m3"].iloc[row]), rule, words,
                        told["mark"], told["source"], row)


def _knee(table: pd.DataFrame) -> int:
    """Row farthest below the chord; the first where nothing is gained at all."""
    if len(table) < LEAST_POINTS:
        raise InputError(f"a knee needs at least {LEAST_POINTS} volumes; found {len(table)}. Try more of them.")
    v, sd = table["volume_m3"].to_numpy(dtype=float), table["sd_eq_l"].to_numpy(dtype=float)
    gain = sd[0] - sd[-1]
    if not gain > 0.0:
        return 0
    x, y = (v - v[0]) / (v[-1] - v[0]), (sd - sd[-1]) / gain
    return int(np.argmax(1.0 - x - y))


def _least(table: pd.DataFrame, rule: str, limit: float, unit: str) -> int:
    column = {"sd": "sd_eq_l", "peak": "peak_eq_l", "hours": "hold_h"}[rule]
    values = table[column].to_numpy(dtype=float)
    meets = values >= limit * (1.0 - _SLACK) if rule == "hours" else values <= limit * (1.0 + _SLACK)
    if not meets.any():
        raise InputError(f"no volume tried meets the rule {rule!r} at {limit:g} {unit}; the largest, "
                         f"{table['volume_m3'].iloc[-1]:.4g} m3, gives {values[-1]:.4g}. Try larger volumes or "
                         "another limit.")
    return int(np.argmax(meets))
