"""The critical load function of sulfur and nitrogen together, in its simple lake form.

A balance of acid at steady state, after the first-order acidity balance (recalled). Per area of the catchment, lake
included: deposited sulfur runs to the lake whole; of deposited nitrogen the land keeps back a given sink (uptake, soil
and denitrification), all of it while less falls; the lake keeps back a share rho of what reaches it. The ANC of the
outflow is then at its limit where

    (1 - rho_S) S + (1 - rho_N) max(N - sink, 0) = critical load.

The full form, with bare land, forests and the lake's own surface told apart, is not here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "NITROGEN_VELOCITIES_M_YR", "REASONS", "SULFUR_VELOCITY_M_YR", "LoadFunction", "Position", "at_both_ends",
    "lake_share", "load_function", "position", "retained_share",
]

Array = NDArray[np.float64]

SULFUR_VELOCITY_M_YR = 0.5             # at which a lake takes up sulfate; recalled with the method. [m/yr]
NITROGEN_VELOCITIES_M_YR = (5.0, 6.5)  # range for nitrate; recalled with the method. [m/yr]

# Why a cut of one of the two alone does not do
REASONS: Mapping[str, str] = MappingProxyType({
    "sulfur": "nitrogen alone exceeds the load: no cut of sulfur alone is enough",
    "nitrogen": "sulfur alone exceeds the load: no cut of nitrogen alone is enough",
    "out_of_reach": "the load is below zero: the ANC limit is out of reach",
})


def lake_share(lake_area_m2: ArrayLike, catchment_area_m2: ArrayLike) -> Array:
    """Lake area over catchment area, the lake counted in the catchment. [-] nan where it is not from 0 to 1."""
    catchment = np.asarray(catchment_area_m2, dtype=float)
    share = np.asarray(lake_area_m2, dtype=float) / np.where(catchment > 0.0, catchment, np.nan)
    return np.where((share >= 0.0) & (share <= 1.0), share, np.nan)


def retained_share(velocity_m_yr: ArrayLike, runoff_m_yr: ArrayLike, share_of_lake: ArrayLike) -> Array:
    """Share of what reaches a lake that stays in it, rho = s / (s + Q/r). [-]

    velocity : net mass transfer to the bed, s. share_of_lake : r of `lake_share`. Balance of a mixed lake: what comes
    in leaves by the outflow, Q catchment c, or over the bed, s lake c. 0 without a lake. Source recalled.
    """
    to_bed = np.asarray(velocity_m_yr, dtype=float) * np.asarray(share_of_lake, dtype=float)
    runoff = np.asarray(runoff_m_yr, dtype=float)
    return to_bed / (to_bed + np.where(runoff > 0.0, runoff, np.nan))


@dataclass(frozen=True, slots=True, eq=False)
class LoadFunction:
    """Corners of the critical load function of each lake. [eq/m2/yr]

    sulfur_max : sulfur that may fall while nitrogen is at `nitrogen_min` or less, which the sink keeps back whole.
    nitrogen_max : nitrogen that may fall without any sulfur.
    retained_sulfur, retained_nitrogen : shares that the lake keeps back. [-]
    """

    load: Array
    sulfur_max: Array
    nitrogen_min: Array
    nitrogen_max: Array
    retained_sulfur: Array
    retained_nitrogen: Array


def load_function(
    load_eq_m2_yr: ArrayLike, nitrogen_sink_eq_m2_yr: ArrayLike, runoff_m_yr: ArrayLike, share_of_lake: ArrayLike, *,
    nitrogen_velocity_m_yr: float, sulfur_velocity_m_yr: float = SULFUR_VELOCITY_M_YR,
) -> LoadFunction:
    """The critical load function from the critical load of acidity and the nitrogen sink, per area of catchment.

    CLmax(S) = CL / (1 - rho_S); CLmin(N) = sink; CLmax(N) = sink + CL / (1 - rho_N). Negative where CL is.
    """
    load, sink = np.asarray(load_eq_m2_yr, dtype=float), np.asarray(nitrogen_sink_eq_m2_yr, dtype=float)
    of_sulfur = retained_share(sulfur_velocity_m_yr, runoff_m_yr, share_of_lake)
    of_nitrogen = retained_share(nitrogen_velocity_m_yr, runoff_m_yr, share_of_lake)
    return LoadFunction(load, load / (1.0 - of_sulfur), sink, sink + load / (1.0 - of_nitrogen), of_sulfur, of_nitrogen)


@dataclass(frozen=True, slots=True, eq=False)
class Position:
    """Where a deposition of sulfur and nitrogen lies.

    excess : acid that reaches the outflow above the critical load; negative inside. [eq/m2/yr]
    sulfur_cut, nitrogen_cut : by how much one of them alone must fall; 0 inside, nan where that is not enough, and then
    `sulfur_cannot` or `nitrogen_cannot` holds. [eq/m2/yr]
    out_of_reach : where even no deposition is too much.
    """

    excess: Array
    sulfur_cut: Array
    nitrogen_cut: Array
    sulfur_cannot: NDArray[np.bool_]
    nitrogen_cannot: NDArray[np.bool_]
    out_of_reach: NDArray[np.bool_]

    @property
    def outside(self) -> NDArray[np.bool_]:
        """Where the pair exceeds the critical load function; never where a reading is missing."""
        return self.excess > 0.0

    def reason(self) -> NDArray[np.object_]:
        """Why a cut of one alone does not do, in words, else empty."""
        words = np.where(self.sulfur_cannot, REASONS["sulfur"], "").astype(object)
        both = self.sulfur_cannot & self.nitrogen_cannot
        words[self.nitrogen_cannot] = REASONS["nitrogen"]
        words[both] = f"{REASONS['sulfur']}; {REASONS['nitrogen']}"
        words[self.out_of_reach] = REASONS["out_of_reach"]
        return words


def position(of: LoadFunction, sulfur_deposition_eq_m2_yr: ArrayLike,
             nitrogen_deposition_eq_m2_yr: ArrayLike) -> Position:
    """Whether a deposition of non-marine sulfur and of all nitrogen lies outside, and the way back along each axis."""
    sulfur = np.asarray(sulfur_deposition_eq_m2_yr, dtype=float)
    nitrogen = np.asarray(nitrogen_deposition_eq_m2_yr, dtype=float)
    by_sulfur = (1.0 - of.retained_sulfur) * sulfur
    by_nitrogen = (1.0 - of.retained_nitrogen) * np.maximum(nitrogen - of.nitrogen_min, 0.0)
    excess = by_sulfur + by_nitrogen - of.load
    known = ~np.isnan(excess)
    sulfur_cannot, nitrogen_cannot = known & (by_nitrogen > of.load), known & (by_sulfur > of.load)
    cut = np.maximum(excess, 0.0)
    return Position(
        excess=excess, sulfur_cannot=sulfur_cannot, nitrogen_cannot=nitrogen_cannot,
        out_of_reach=known & (of.load < 0.0),
        sulfur_cut=np.where(sulfur_cannot, np.nan, cut / (1.0 - of.retained_sulfur)),
        nitrogen_cut=np.where(nitrogen_cannot, np.nan, cut / (1.0 - of.retained_nitrogen)))


def at_both_ends(
    load_eq_m2_yr: ArrayLike, nitrogen_sink_eq_m2_yr: ArrayLike, runoff_m_yr: ArrayLike, share_of_lake: ArrayLike,
    sulfur_deposition_eq_m2_yr: ArrayLike, nitrogen_deposition_eq_m2_yr: ArrayLike,
) -> tuple[Position, Position]:
    """The position at the lower and at the upper end of the range for nitrogen; the lower end is the worse one."""
    low, high = (position(load_function(load_eq_m2_yr, nitrogen_sink_eq_m2_yr, runoff_m_yr, share_of_lake,
                                        nitrogen_velocity_m_yr=velocity),
                          sulfur_deposition_eq_m2_yr, nitrogen_deposition_eq_m2_yr)
                 for velocity in NITROGEN_VELOCITIES_M_YR)
    return low, high
