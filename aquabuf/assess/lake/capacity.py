"""How much acid a whole lake can take, and how long that lasts against the acid that falls on it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.lake.inputs import Lakes
from aquabuf.chem.seasalt import equivalents_per_chloride
from aquabuf.units import substances

__all__ = ["H2SO4_KG_PER_KEQ", "Deposition", "Hydrology", "deposition", "hydrology", "keq", "years_left"]

Array = NDArray[np.float64]

H2SO4_KG_PER_KEQ = substances()["hydrogen"].molar_mass_g + 0.5 * substances()["sulfate"].molar_mass_g
LITERS_PER_M3 = 1e3
LEAST_ACID = 1e-12  # net acid that counts as none [eq/m2/yr]


@dataclass(frozen=True, slots=True, eq=False)
class Hydrology:
    """Water of each lake; nan where nothing tells it.

    volume_m3 and residence_yr : given, else from each other and the outflow. volume_from : in words.
    outflow_m3_yr : runoff of the land and precipitation (or as much as runoff) on the lake itself, which the catchment
        holds; nan where the lake is larger than its catchment. Source: the residence times of the agency's survey of
        1984 follow this rule.
    """

    volume_m3: Array
    volume_from: NDArray[np.object_]
    residence_yr: Array
    outflow_m3_yr: Array


def hydrology(lakes: Lakes) -> Hydrology:
    """Volume, outflow and residence time of each lake."""
    runoff, lake, watershed = (lakes.get(n) for n in ("runoff_m_yr", "lake_area_m2", "watershed_area_m2"))
    surface = np.nan_to_num(lake)
    rain = np.where(np.isfinite(lakes.get("precipitation_m_yr")), lakes.get("precipitation_m_yr"), runoff)
    outflow = np.where(surface <= watershed, runoff * (watershed - surface) + rain * surface, np.nan)
    tau, given = lakes.get("residence_time_yr"), lakes.get("lake_volume_m3")
    by_depth, by_time = lakes.get("mean_depth_m") * lake, outflow * tau
    volume = np.where(np.isfinite(given), given, np.where(np.isfinite(by_depth), by_depth, by_time))
    words = worded(volume.shape[0], (np.isfinite(by_time)[:, 0], "runoff and residence time"),
                   (np.isfinite(by_depth)[:, 0], "mean depth and area"), (np.isfinite(given)[:, 0], "given"))
    return Hydrology(volume, words, np.where(np.isfinite(tau), tau, volume / outflow), outflow)


@dataclass(frozen=True, slots=True, eq=False)
class Deposition:
    """Deposition on each lake and its catchment. [eq/m2/yr]

    sulfur : sea salt taken off where chloride deposition is given. net_acid : sulfur, nitrate and ammonium less base
    cations, of those given; nan without sulfur. counted : which those are, in words.
    """

    sulfur: Array
    nitrogen: Array
    net_acid: Array
    counted: NDArray[np.object_]


def deposition(lakes: Lakes, *, keep_sea_salt: bool = False) -> Deposition:
    """Deposition of each lake; its sulfur with the sea salt left in if that is kept in the water too.

    Ammonium counts as acid because plants and microbes that take it up or oxidize it give off H+, one more than it
    bound in the air; nitrate counts because its H+ came with it. What soils and plants hold back is not taken off, so
    that this is the most acid there can be.
    """
    def load(name: str) -> Array:
        return lakes.get(f"{name}_deposition_eq_m2_yr")

    chloride = 0.0 if keep_sea_salt else np.nan_to_num(load("chloride"))
    sulfur = load("sulfur") - equivalents_per_chloride()["sulfate"] * chloride
    nitrate, ammonium, cations = load("nitrate"), load("ammonium"), load("base_cation")
    net = sulfur + np.nan_to_num(nitrate) + np.nan_to_num(ammonium) - np.nan_to_num(cations)
    words = np.full(net.shape[0], "", dtype=object)
    for name, value, sign in (("sulfur", sulfur, ""), ("nitrate", nitrate, " + "), ("ammonium", ammonium, " + "),
                              ("base cations", cations, " - ")):
        here = np.isfinite(value)[:, 0] & np.isfinite(sulfur)[:, 0]
        words[here] += f"{sign}{name}"
    some = np.isfinite(nitrate) | np.isfinite(ammonium)
    nitrogen = np.where(some, np.nan_to_num(nitrate) + np.nan_to_num(ammonium), np.nan)
    return Deposition(sulfur, nitrogen, net, words)


def keq(concentration_eq_l: Array, volume_m3: Array) -> Array:
    """Amount in a whole lake: 1 eq/L in 1 m3 is 1 keq. [keq]"""
    return concentration_eq_l * volume_m3


def years_left(anc_above_eq_l: Array, lakes: Lakes, water: Hydrology, net_acid_eq_m2_yr: Array) -> tuple[Array, Array]:
    """Years until the water's own ANC above a limit is used up: by acid on the whole catchment, by acid on the lake.

    Mass balance with nothing neutralized on the way and nothing washed out or in, so that the truth lies between and
    beyond: soils lengthen both. Without areas, the first follows from runoff and residence time. 0 where the limit is
    passed already; nan where no net acid falls.
    """
    per_liter = np.maximum(anc_above_eq_l, 0.0)
    acid = np.where(net_acid_eq_m2_yr > LEAST_ACID, net_acid_eq_m2_yr, np.nan)
    in_lake = LITERS_PER_M3 * per_liter * water.volume_m3
    by_depth_of_runoff = LITERS_PER_M3 * per_liter * lakes.get("runoff_m_yr") * water.residence_yr / acid
    on_catchment = in_lake / (acid * lakes.get("watershed_area_m2"))
    return (np.where(np.isfinite(on_catchment), on_catchment, by_depth_of_runoff),
            in_lake / (acid * lakes.get("lake_area_m2")))
