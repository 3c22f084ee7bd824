"""The equalization tank ahead of a neutralization: whether it is worth building, and what leaves it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.basis import Basis, amounts_of
from aquabuf.assess.tank.equalize import DAY_S, cumulative_volume
from aquabuf.assess.tank.equalize_volume import VolumeChoice, choose_volume, run_tank, trial_volumes, volume_table
from aquabuf.assess.tank.profile import Cases, peak_factor

__all__ = ["Equalization", "equalization_of"]

Array = NDArray[np.float64]

EVEN_FLOW = 1.5        # largest over mean flow up to which the flow itself needs no volume: practice, no source
VARIES = 0.02          # relative swing of flow or demand below which nothing is to be equalized: practice
OVERFLOWS = 0.05       # share of the water over a tank for the flow, beyond which it is not worth building: practice
HARDLY_HELPS = 0.8     # share of the swings left, beyond which a tank for the strength is not worth building: practice


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Equalization:
    """The tank ahead. content_m3 : always full, for the strength; flow_m3 : above it, for the flow.

    told : what speaks against it, or what it fails to do. table : what other volumes leave. saved_eq_d : reagent that
    mixing saves against treating each water alone. out, base_eq_l : what leaves it, over the course. draw_m3_h : at
    which it is drawn off, None where as much leaves as comes.
    """

    content_m3: float
    flow_m3: float
    choice: VolumeChoice | None
    table: pd.DataFrame | None
    words: str
    saved_eq_d: float
    out: Cases
    base_eq_l: Array
    draw_m3_h: float | None
    told: tuple[str, ...] = ()

    @property
    def volume_m3(self) -> float:
        """The whole tank."""
        return self.content_m3 + self.flow_m3


def _course_as_case(basis: Basis) -> Cases:
    c = basis.course
    own = None if c.base_eq_l is None else c.base_eq_l[:, None]
    return Cases(c.time_s, c.flow_m3_h[:, None], c.strength[:, :, None], own, c.step_s)


def _varies(basis: Basis) -> bool:
    """Whether flow or demand swings enough for a tank ahead."""
    q = basis.course.flow_m3_h
    lacks = basis.chem.readout.base_at(basis.aim_ph, basis.amounts) - basis.base_eq_l
    flows = q > 0.0
    size = float(np.abs(lacks[flows]).mean())
    return bool(np.ptp(q) > VARIES * q.mean() or np.ptp(lacks[flows]) > VARIES * size)


def _no_tank(basis: Basis, case: Cases, words: str, choice: VolumeChoice | None = None,
             table: pd.DataFrame | None = None, told: tuple[str, ...] = ()) -> Equalization:
    return Equalization(content_m3=0.0, flow_m3=0.0, choice=choice, table=table, words=words, saved_eq_d=0.0, out=case,
                        base_eq_l=basis.base_eq_l[:, None], draw_m3_h=None, told=told)


def equalization_of(basis: Basis) -> Equalization:
    """The tank ahead: as the file sets it, else by the knee of volume against what is left of the swings."""
    case, wish = _course_as_case(basis), basis.job.wishes.equalization_m3
    if wish == 0.0:
        return _no_tank(basis, case, "none, as the file sets it")
    if wish is None and not _varies(basis):
        return _no_tank(basis, case, "none: flow and strength hardly vary")
    flow_m3, why = _flow_volume(basis)
    table, told = _table(basis, case, flow_m3), []
    if wish is None and flow_m3 > 0.0 and float(table["overflow_share"].iloc[0]) > OVERFLOWS:
        why = (f"the flow is left to the tanks: {shown(flow_m3)} m³ for a daily cycle would still let "
               f"{100.0 * float(table['overflow_share'].iloc[0]):.0f} % of the water pass over")
        told.append(why)
        flow_m3, table = 0.0, _table(basis, case, 0.0)
    if wish is not None:
        content, words, choice = max(wish - flow_m3, 0.5 * wish), f"{shown(wish)} m³, as the file sets it", None
        flow_m3 = wish - content
    else:
        content, words, choice = _content(table)
        told += [] if content > 0.0 else [words]
    words = "; ".join(filter(None, (words, why)))
    if content + flow_m3 == 0.0:
        return _no_tank(basis, case, words, choice, table, tuple(told))
    draw = basis.course.mean_m3_h if flow_m3 > 0.0 else None
    tank = run_tank(case, basis.base_eq_l[:, None], np.array([content]), flow_volume_m3=flow_m3, draw_m3_h=draw)
    over = float(tank.overflow_m3.sum() / basis.course.volume_m3.sum()) if draw is not None else 0.0
    if over > OVERFLOWS:
        told.append(f"{100.0 * over:.0f} % of the water passes over a volume of {shown(flow_m3)} m³ for the flow; the "
                    "tanks behind see that flow")
    out = Cases(case.time_s, tank.out_m3_h[:, 0], tank.out_amounts[:, :, 0], tank.out_base_eq_l[:, 0], case.step_s)
    return Equalization(content_m3=content, flow_m3=flow_m3, choice=choice, table=table, words=words, out=out,
                        saved_eq_d=_saved(content, table), base_eq_l=tank.out_base_eq_l[:, 0], draw_m3_h=draw,
                        told=tuple(told))


def _content(table: pd.DataFrame) -> tuple[float, str, VolumeChoice]:
    """Volume for the strength by the knee, why, and the rule."""
    choice = choose_volume(table)
    left = table["sd_eq_l"].to_numpy(dtype=float)
    if not left[0] > 0.0:
        return 0.0, "none for the strength, which does not vary", choice
    if left[choice.row] > HARDLY_HELPS * left[0]:
        return 0.0, (f"none for the strength: {shown(choice.volume_m3)} m³, the best ratio of gain to size, would "
                     f"leave {100.0 * left[choice.row] / left[0]:.0f} % of its swings and "
                     f"{shown(float(table['volume_m3'].iloc[-1]))} m³ {100.0 * left[-1] / left[0]:.0f} %"), choice
    return choice.volume_m3, f"{shown(choice.volume_m3)} m³ always full: {choice.words}", choice


def _flow_volume(basis: Basis) -> tuple[float, str]:
    """Volume that evens out the flow, where it swings so much that tanks and feeds should not follow it."""
    course = basis.course
    factor = peak_factor(course.flow_m3_h, course.dt_s)
    if factor <= EVEN_FLOW:
        return 0.0, f"flow peaks at {factor:.2f} times its mean, up to {EVEN_FLOW:g} is left to the tanks"
    daily = course.duration_s >= DAY_S
    found = cumulative_volume(course, repeat_s=DAY_S if daily else None).volume_m3
    return found, (f"{shown(found)} m³ of it for the flow, which peaks at {factor:.2f} times its mean (gap of the "
                   "cumulative flow curve, Environmental Engineers' Handbook)")


def _aim_of(basis: Basis, amounts: Array) -> Array:
    return basis.chem.readout.base_at(basis.aim_ph, amounts_of(amounts))


def _table(basis: Basis, case: Cases, flow_m3: float) -> pd.DataFrame:
    return volume_table(
        case, basis.chem.base_eq_l, trial_volumes(basis.course.mean_m3_h), flow_volume_m3=flow_m3,
        draw_m3_h=basis.course.mean_m3_h if flow_m3 > 0.0 else None,
        ph=lambda base, amounts: basis.chem.readout.ph(base, amounts_of(amounts)),
        aim=lambda amounts: _aim_of(basis, amounts))


def _saved(content: float, table: pd.DataFrame) -> float:
    at = table["volume_m3"].to_numpy(dtype=float)
    return float(np.interp(content, at, table["saved_eq_d"].to_numpy(dtype=float)))
