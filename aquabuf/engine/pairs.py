"""Solve a known pair: any two of pH, alkalinity, total inorganic carbon and CO2 pressure. Rows are one-dimensional."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import exp10
from aquabuf.engine.balance import System, alkalinity_at, fractions, protons_lost
from aquabuf.engine.conditions import Conditions
from aquabuf.engine.solve import PH_HIGHEST, PH_LOWEST, solve_h
from aquabuf.engine.state import Dissolved, State, families_of, per_h
from aquabuf.engine.status import IMPOSSIBLE, NOT_FINITE, SOLVED

__all__ = ["solve_pair"]

Array = NDArray[np.float64]


def solve_pair(
    known: Mapping[str, Array], c: Conditions, acids: tuple[Dissolved, ...], ions: dict[str, Array],
    *, ph_scale: str = "meter",
) -> State:
    """State of each row from any two of ph (on `ph_scale`), alkalinity [eq/L], dic [mol/L] and pco2 [atm]."""
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        h, dic, alk, residual, status = _solve(tuple(known), known, c, acids, ions, ph_scale)
    status = np.where(c.status < SOLVED, c.status, np.where(status < SOLVED, status, c.status)).astype(np.int8)
    lost = status < SOLVED
    h, dic, alk, residual = (np.where(lost, np.nan, v) for v in (h, dic, alk, residual))
    return State(c, acids, ions, h, dic, alk, residual, status)


def _solve(pair: tuple[str, ...], known: Mapping[str, Array], c: Conditions, acids: tuple[Dissolved, ...],
           ions: Mapping[str, Array], ph_scale: str) -> tuple[Array, Array, Array, Array, NDArray[np.int8]]:
    families = families_of(c, acids)
    shape = c.t_c.shape
    zero = np.zeros(shape)

    def system(alk: Array = zero, **carbon: Array) -> System:
        return System(alk, c.c_h, c.c_oh, c.k1, c.k2, families=families, **carbon)

    co2 = c.k0 * known["pco2"] if "pco2" in pair else zero
    if "ph" in pair:
        h = exp10(-known["ph"]) / per_h(c, ph_scale)
        alpha = fractions((c.k1, c.k2), 1.0 / h)
        if "alkalinity" in pair:
            alk = known["alkalinity"]
            dic = (alk - alkalinity_at(system(dic=zero), h)) / protons_lost(alpha)
        else:
            dic = co2 / alpha[0] if "pco2" in pair else known["dic"]
            alk = alkalinity_at(system(dic=dic), h)
        status = _direct_status(pair, known, dic, h)
        residual = alkalinity_at(system(dic=dic), h) - alk
    elif "alkalinity" in pair:
        alk = known["alkalinity"]
        solved = solve_h(system(alk, co2=co2) if "pco2" in pair else system(alk, dic=known["dic"]))
        h, residual, status = solved.h, solved.residual, solved.status
        dic = co2 / fractions((c.k1, c.k2), 1.0 / h)[0] if "pco2" in pair else known["dic"]
    else:
        dic = known["dic"]
        h = 1.0 / _inverse_h(c, dic / co2 - 1.0)
        alk = alkalinity_at(system(dic=dic), h)
        status = _direct_status(pair, known, dic - co2, h)
        residual = zero
    for amount in ions.values():
        status[(amount < 0.0) & (status == SOLVED)] = IMPOSSIBLE
    for d in acids:
        status[(d.total < 0.0) & (status == SOLVED)] = IMPOSSIBLE
        status[~np.isfinite(d.total)] = NOT_FINITE
    return h, dic, alk, residual, status


def _inverse_h(c: Conditions, ratio: Array) -> Array:
    """Positive root 1/h of k1 k2 /h^2 + k1 /h = ratio, where ratio is (HCO3- + CO3--) / CO2."""
    return 2.0 * ratio / (c.k1 + np.sqrt(c.k1 * c.k1 + 4.0 * c.k1 * c.k2 * ratio))


def _direct_status(pair: tuple[str, ...], known: Mapping[str, Array], must_not_be_negative: Array, h: Array,
                   ) -> NDArray[np.int8]:
    """Status of pairs that need no iteration."""
    status = np.full(h.shape, SOLVED, dtype=np.int8)
    possible = (must_not_be_negative >= 0.0) & (h >= 10.0 ** -PH_HIGHEST) & (h <= 10.0 ** -PH_LOWEST)
    for name in pair:
        if name in ("dic", "pco2"):
            possible &= known[name] >= 0.0
    status[~possible] = IMPOSSIBLE
    for name in pair:
        status[~np.isfinite(known[name])] = NOT_FINITE
    return status
