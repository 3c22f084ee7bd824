"""The water of each lake: its carbon, what acid does to it closed and open to air, its pH at air.

Closed answers start from the pH and the carbon that were measured; open ones from an ANC, which air completes.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.lake.budget import Budget, gran_leaves_out
from aquabuf.assess.lake.inputs import Lakes
from aquabuf.engine.lake import LakeBalance

__all__ = ["ANC_SOURCES", "CARBON_SOURCES", "Chemistry", "chemistry", "choose_sources", "of_titration"]

Array = NDArray[np.float64]

# What the charge-balance ANC of the open answers is worked out from, best first
ANC_SOURCES = ("Gran ANC", "alkalinity", "charge balance", "pH and carbon")
# What the carbon of the closed answers is worked out from, best first
CARBON_SOURCES = ("carbon", "CO2 pressure", "pH and ANC", "air, because pH and ANC leave no carbonate")
NONE = len(ANC_SOURCES)


@dataclass(frozen=True, slots=True, eq=False)
class Chemistry:
    """Each lake's water; nan where a reading is missing.

    anc : charge-balance ANC that the open answers rest on; anc_closed : that of the pH and the carbon, which the closed
    answers start from, so that no error between readings is taken for a change. [eq/L]
    ph : in the lake, closed. dic : inorganic carbon. carbonate : carbonate alkalinity. [mol/L, eq/L]
    organic : charge of organic anions at that pH. [eq/L]
    closed_to, open_to : strong acid to each threshold. [eq/L]
    """

    anc: Array
    anc_closed: Array
    ph: Array
    dic: Array
    carbonate: Array
    organic: Array
    pco2_atm: Array
    ph_at_air: Array
    buffer_closed: Array
    buffer_open: Array
    closed_to: tuple[Array, ...]
    open_to: tuple[Array, ...]


def choose_sources(lakes: Lakes, b: Budget) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Index of each lake in ANC_SOURCES and in CARBON_SOURCES, from its values, not its draws; their length if none."""
    ph = np.isfinite(lakes.get("ph"))
    carbon = (np.isfinite(lakes.get("dic_mol_l")), np.isfinite(lakes.get("pco2_atm")))
    titrated = np.isfinite(b.gran) | np.isfinite(b.alkalinity)
    anc = (np.isfinite(b.gran), np.isfinite(b.alkalinity), np.isfinite(b.charge), ph & (carbon[0] | carbon[1]))
    # the sum of ions carries too much error to tell carbon; only a titration does
    left = of_titration(lakes, np.where(np.isfinite(b.gran), b.gran, b.alkalinity))
    left = left - lakes.balance(at_meter=True).without_carbon(lakes.get("ph"))
    with np.errstate(invalid="ignore"):
        carbons = (*carbon, ph & titrated & ~(left <= 0.0), ph & titrated)
    return _first(anc), _first(carbons)


def _first(there: Sequence[NDArray[np.bool_]]) -> NDArray[np.intp]:
    out = np.full(there[0].shape[0], len(there), dtype=np.intp)
    for index in reversed(range(len(there))):
        out[there[index][:, 0]] = index
    return out


def chemistry(lakes: Lakes, b: Budget, sources: tuple[NDArray[np.intp], NDArray[np.intp]],
              thresholds: Sequence[float]) -> Chemistry:
    """Work out each lake; `sources` as chosen for its values, thresholds are pH values."""
    anc_from, carbon_from = (s[:, None] for s in sources)
    water, meter = lakes.balance(), lakes.balance(at_meter=True)
    measured = lakes.get("ph")
    titrated = of_titration(lakes, np.where(anc_from == 0, b.gran, b.alkalinity))
    carbonate = titrated - meter.without_carbon(measured)
    by_charge = np.where(np.isfinite(b.charge_bare), b.charge_bare + np.nan_to_num(lakes.charge("ammonium")), b.charge)
    by_charge = by_charge - np.nan_to_num(lakes.charge("fluoride"))  # both are in the water, whatever ANC is reported
    anc = np.select([anc_from <= 1, anc_from == 2], [titrated, by_charge], np.nan)
    dic = _carbon(lakes, meter, measured, carbonate, carbon_from)
    of_pair = meter.anc(measured, dic=dic)
    ph = _closed_ph(lakes, water, measured, of_pair, anc, dic)
    by_pressure = carbon_from == CARBON_SOURCES.index("CO2 pressure")
    if by_pressure.any():
        ph_there, dic_there = _of_pressure(lakes, water, measured, anc)
        ph, dic = np.where(by_pressure, ph_there, ph), np.where(by_pressure, dic_there, dic)
        of_pair = np.where(by_pressure, water.anc(ph_there, dic=dic_there), of_pair)
    anc = np.where(anc_from == 3, of_pair, anc)
    air = lakes.setting.air_co2_mol_l
    ph_at_air = water.ph(anc, co2=air)
    at_start = water.anc(ph, dic=dic)
    shape = np.broadcast_shapes(anc.shape, ph.shape)
    levels = [np.full((1, 1), t) for t in thresholds]
    return Chemistry(
        anc=anc, anc_closed=at_start, ph=ph, dic=dic,
        carbonate=np.where(carbon_from == 3, carbonate, np.where(
            np.isfinite(measured), meter.carbonate_per_dic(measured), water.carbonate_per_dic(ph)) * dic),
        organic=np.where(np.isfinite(lakes.get("doc_mg_l")), lakes.organic.anion_eq_l(lakes.doc_mg_l, ph), np.nan),
        pco2_atm=dic * water.co2_per_dic(ph) / lakes.setting.lake.k0,
        ph_at_air=ph_at_air,
        buffer_closed=water.intensity(ph, dic=dic), buffer_open=water.intensity(ph_at_air, co2=air),
        closed_to=tuple(np.broadcast_to(at_start - water.anc(x, dic=dic), shape) for x in levels),
        open_to=tuple(np.broadcast_to(anc - water.anc(x, co2=air), shape) for x in levels))


def of_titration(lakes: Lakes, titrated: Array) -> Array:
    """Charge-balance ANC of a titrated one: with the organic anions, less the aluminum, that a Gran line leaves out."""
    organic, aluminum = gran_leaves_out(lakes)
    return titrated + organic - aluminum


def _carbon(lakes: Lakes, meter: LakeBalance, ph: Array, carbonate: Array, carbon_from: NDArray[np.intp]) -> Array:
    """Inorganic carbon: measured, what carbonate alkalinity at this pH needs, or that of air."""
    of_anc = np.maximum(carbonate, 0.0) / meter.carbonate_per_dic(ph)
    of_air = lakes.setting.air_co2_mol_l / meter.co2_per_dic(ph)
    return np.select([carbon_from == 0, carbon_from == 2, carbon_from == 3],
                     [lakes.get("dic_mol_l"), of_anc, of_air], np.nan)


def _of_pressure(lakes: Lakes, water: LakeBalance, measured: Array, anc: Array) -> tuple[Array, Array]:
    """pH and carbon of a lake with a measured CO2 pressure: pH as read there, else of its ANC."""
    co2 = lakes.get("pco2_atm") * lakes.setting.lake.k0
    read_there = np.isfinite(measured) & ~lakes.setting.moved
    ph = np.where(read_there, measured, water.ph(anc, co2=co2))
    ph = np.where(np.isnan(ph), measured, ph)
    return ph, co2 / water.co2_per_dic(ph)


def _closed_ph(lakes: Lakes, water: LakeBalance, measured: Array, of_pair: Array, anc: Array, dic: Array) -> Array:
    """pH in the lake: as read, brought to its temperature where it was read at another, else of ANC and carbon."""
    moved = lakes.setting.moved & np.isfinite(measured)
    missing = np.isnan(measured)
    if not moved.any() and not missing.any():
        return measured
    asked = np.where(moved, of_pair, np.where(missing, anc, np.nan))
    solved = water.ph(asked, dic=dic)
    return np.where(np.isfinite(solved) & (moved | missing), solved, measured)  # without carbon it stays as it was read
