"""Reagents side by side for one load: what each takes and leaves behind, which cannot do it, and the one to choose.

The choice is argued in words: among those that reach the set point the least cost decides where prices are known, else
the smallest tank. A reagent that cannot reach it is named with what would help: stripping carbon dioxide, or another.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from aquabuf.assess.plant.feed import HOURS_PER_DAY, shown
from aquabuf.assess.tank.ceilings import limestone_end_ph
from aquabuf.assess.tank.demand import Demand, Load, aims_of, demands, mixed, reagent_gain
from aquabuf.assess.tank.reagents import (
    ACID,
    BASE,
    STONE_FORMULAS,
    Reagent,
    dissolved_share,
    effective_share,
    end_ph_in,
)
from aquabuf.chem.gases import AIR_CO2_PPM, pco2_of_air
from aquabuf.engine.conditions import Conditions
from aquabuf.engine.readout import Readout
from aquabuf.errors import InputError

__all__ = ["Candidate", "Comparison", "Effects", "compare"]

STRIPPED_ATM = 0.01  # CO2 that simple aeration leaves (practice)
BUBBLES_ATM = 1.0    # CO2 above the pressure of the air leaves by itself


@dataclass(frozen=True, slots=True, kw_only=True)
class Effects:
    """What a dose leaves behind; nan where nobody worked it out. [kg/d], [K], [kg/d of CO2]"""

    sludge_kg_d: float = np.nan
    heat_k: float = np.nan
    gas_kg_d: float = np.nan


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Candidate:
    """One reagent at the set point; figures are nan where it does not reach it.

    end_ph : where solubility or practice stops it in this waste; nan where nothing does.
    co2_atm : pressure of CO2 at the set point from carbon of waste and reagent, as far as it is still dissolved.
    reaches : the set point. words : why not, and what would do it.
    """

    reagent: Reagent
    demand: Demand
    effective_share: float
    gain_ph_per_eq_l: float
    end_ph: float
    co2_atm: float
    reaches: bool
    effects: Effects
    risks: tuple[str, ...]
    words: str

    def row(self) -> dict[str, object]:
        """The figures by the name of their column."""
        residence = self.reagent.residence_min
        return {
            "reagent": self.reagent.name, "kind": self.reagent.kind, "fed_as": self.reagent.fed_as,
            "reaches_setpoint": self.reaches, "end_ph": self.end_ph, "demand_meq_l": 1e3 * self.demand.eq_l,
            "nominal_eq_kg": self.reagent.eq_per_kg, "effective_share": self.effective_share,
            "effective_eq_kg": self.effective_share / self.reagent.kg_per_eq, "product_kg_d": self.demand.kg_d,
            "cost_per_day": self.demand.cost_d, "fed_l_h": self.demand.fed_l_h,
            "gain_ph_per_meq_l": 1e-3 * self.gain_ph_per_eq_l,
            "residence_low_min": residence.low, "residence_min": residence.usual, "residence_high_min": residence.high,
            "sludge_kg_d": self.effects.sludge_kg_d, "heat_k": self.effects.heat_k, "co2_kg_d": self.effects.gas_kg_d,
            "co2_atm": self.co2_atm,
            "risks": "; ".join(self.risks), "words": self.words}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Comparison:
    """All candidates in the order given. chosen : None where none reaches the set point. why : in words."""

    candidates: tuple[Candidate, ...]
    chosen: Candidate | None
    why: str

    def table(self) -> pd.DataFrame:
        """One row per reagent."""
        return pd.DataFrame([candidate.row() for candidate in self.candidates])


def compare(
    readout: Readout, load: Load, reagents: Sequence[Reagent], *, low_ph: float, setpoint_ph: float, high_ph: float,
    constants: Conditions, carbon_carrier: int | None = None, stripped: float = 0.0, pco2_atm: float = 1.0,
    effects: Callable[[Reagent, float], Effects] | None = None, coldest_c: float = np.nan,
    hours_per_day: float = HOURS_PER_DAY,
) -> Comparison:
    """Reagents of the kind that a load needs, judged at the set point.

    Parameters
    ----------
    constants : of the ceilings; those of the tables. stripped : share of the reagents' carbon that leaves as gas.
    pco2_atm : pressure of CO2 over a limestone bed. effects : what a dose [eq/L of waste] of a reagent leaves behind.
    coldest_c : lowest temperature of store and lines; nan where not known. [°C]

    Raises
    ------
    InputError
        No reagent, none of the kind that the load needs, or a set point outside the window.
    """
    aim = aims_of(low_ph, setpoint_ph, high_ph)[0]
    rows = demands(readout, [load], [aim], reagents, carbon_carrier=carbon_carrier, stripped=stripped,
                   hours_per_day=hours_per_day)
    if not reagents or rows[0].reagent is None:
        kind = BASE if load.base_eq_l <= readout.base_at(setpoint_ph, load.amounts) else ACID
        found = ", ".join(r.name for r in reagents) or "none"
        raise InputError(f"pH {setpoint_ph:g} asks for {kind} here, so one {kind} at least must be compared; found "
                         f"{found}. Add a reagent that is {kind}.")
    judged = [_judged(readout, row, constants, carbon_carrier, stripped, pco2_atm, effects, coldest_c, high_ph)
              for row in rows if row.reagent is not None]
    chosen, why = _choice(judged, setpoint_ph, high_ph)
    told = tuple(_with_remedy(candidate, aim.ph, constants, chosen) for candidate in judged)
    return Comparison(candidates=told, why=why,
                      chosen=next((c for c in told if chosen is not None and c.reagent is chosen.reagent), None))


def _judged(readout: Readout, row: Demand, constants: Conditions, carbon_carrier: int | None, stripped: float,
            pco2_atm: float, effects: Callable[[Reagent, float], Effects] | None, coldest_c: float,
            high_ph: float) -> Candidate:
    reagent, ph, load = row.reagent, row.aim.ph, row.load
    assert reagent is not None
    end = end_ph_in(reagent, max(row.strong_eq_l, 0.0), constants, pco2_atm)
    stop = reagent.ceiling_ph if reagent.kind == BASE else reagent.lowest_ph
    end_ph = float(end) if end is not None else np.nan if stop is None else stop
    by_end = np.isnan(end_ph) or (ph <= end_ph if reagent.kind == BASE else ph >= end_ph)
    reaches = bool(np.isfinite(row.eq_l) and by_end)
    gain = co2_atm = np.nan
    if reaches:
        if carbon_carrier is not None:
            co2_atm = _co2_atm(row, constants, carbon_carrier, stripped)
        gain = float(reagent_gain(readout, load.base_eq_l, load.amounts, ph, reagent, row.eq_l,
                                  carbon_carrier=carbon_carrier, stripped=stripped))
    return Candidate(
        reagent=reagent, demand=row, gain_ph_per_eq_l=gain, end_ph=end_ph, co2_atm=co2_atm, reaches=reaches,
        effective_share=float(effective_share(readout, reagent, ph, carbon_carrier, stripped)),
        effects=effects(reagent, row.eq_l) if effects is not None and reaches else Effects(),
        risks=_risks(reagent, end_ph, co2_atm, high_ph, coldest_c), words="")


def _co2_atm(row: Demand, constants: Conditions, carbon_carrier: int, stripped: float) -> float:
    """Pressure of CO2 over the mixture: Henry's law on its share that is no bicarbonate or carbonate. [atm]"""
    assert row.reagent is not None
    _, total, _ = mixed(row.load.base_eq_l, row.load.amounts, row.reagent, row.eq_l, carbon_carrier=carbon_carrier,
                        stripped=stripped)
    h = 10.0**-row.aim.ph
    share = 1.0 / (1.0 + constants.k1 / h * (1.0 + constants.k2 / h))
    return float(total[carbon_carrier] * share / constants.k0)


def _risks(reagent: Reagent, end_ph: float, co2_atm: float, high_ph: float, coldest_c: float) -> tuple[str, ...]:
    found = [*reagent.limited_by, *reagent.hazards]
    if reagent.carbon_per_eq and co2_atm > BUBBLES_ATM:
        found.append(f"its CO2 would stand at {shown(co2_atm)} atm, so that it bubbles off: less is needed than a "
                     "closed tank would take; state the share that leaves, or titrate with it in an open vessel")
    if reagent.kind == BASE and _stops_inside(end_ph, high_ph):
        found.append(f"cannot pass the window: it stops at pH {end_ph:.1f}")
    minutes = reagent.residence_min.usual
    if reagent.dissolution_per_min is not None and np.isfinite(minutes):
        share = float(dissolved_share(reagent.dissolution_per_min, minutes))
        found.append(f"about {100.0 * share:.0f} % has dissolved when it leaves one tank of {minutes:g} min; the rest "
                     "lifts pH downstream")
    if reagent.freezes_at_c >= coldest_c:  # nan on either side says nothing
        found.append(f"freezes or forms crystals at {reagent.freezes_at_c:g} °C, and store or lines reach "
                     f"{coldest_c:g} °C: heat them, or take a strength that stays liquid")
    return tuple(found)


def _stops_inside(end_ph: float, high_ph: float) -> bool:
    return end_ph <= high_ph


# ---------------------------------------------------------------- the choice and its reasons


def _choice(judged: Sequence[Candidate], setpoint_ph: float, high_ph: float) -> tuple[Candidate | None, str]:
    able = [c for c in judged if c.reaches]
    if not able:
        return None, (f"None of {', '.join(c.reagent.name for c in judged)} brings this waste to pH {setpoint_ph:g}. "
                      "Add a reagent that does.")
    priced = [c for c in able if np.isfinite(c.demand.cost_d)]
    unpriced = [c.reagent.name for c in able if not np.isfinite(c.demand.cost_d)]
    if priced:
        ranked = sorted(priced, key=lambda c: c.demand.cost_d)
        best = ranked[0]
        reason = f"{best.reagent.name} costs least, {shown(best.demand.cost_d)} a day"
        reason += "".join(f"; {c.reagent.name} {shown(c.demand.cost_d)}" for c in ranked[1:])
        if unpriced:
            reason += f"; not ranked for want of a price: {', '.join(unpriced)}"
    else:
        ranked = sorted(able, key=lambda c: (c.reagent.residence_min.usual, c.demand.kg_d))
        best = ranked[0]
        reason = (f"no price is known, so the smallest tank decides: {best.reagent.name} asks for "
                  f"{best.reagent.residence_min.usual:g} min")
        reason += "".join(f"; {c.reagent.name} {c.reagent.residence_min.usual:g} min" for c in ranked[1:])
    why = [f"{reason[0].upper()}{reason[1:]}.", _price_of_choice(best, ranked[1:])]
    if best.reagent.kind == BASE and _stops_inside(best.end_ph, high_ph):
        why.append(f"It stops at pH {best.end_ph:.1f} by itself, so that an overdose stays inside the window.")
    elif tame := [c.reagent.name for c in ranked[1:] if c.reagent.kind == BASE and _stops_inside(c.end_ph, high_ph)]:
        why.append(f"An overdose leaves the window; of {', '.join(tame)} it would not.")
    left = [c.reagent.name for c in judged if not c.reaches]
    if left:
        why.append(f"Set aside: {', '.join(left)}, not able to reach pH {setpoint_ph:g}.")
    return best, " ".join(filter(None, why))


def _price_of_choice(best: Candidate, others: Sequence[Candidate]) -> str:
    """What the choice costs in tank or in sludge against the best of the others there."""
    words = []
    quickest = min(others, key=lambda c: c.reagent.residence_min.usual, default=best)
    if quickest.reagent.residence_min.usual < best.reagent.residence_min.usual:
        times = best.reagent.residence_min.usual / quickest.reagent.residence_min.usual
        words.append(f"its tank is {shown(times)} times that for {quickest.reagent.name}")
    cleanest = min((c for c in others if np.isfinite(c.effects.sludge_kg_d)), default=best,
                   key=lambda c: c.effects.sludge_kg_d)
    if cleanest.effects.sludge_kg_d < best.effects.sludge_kg_d:
        words.append(f"it makes {shown(best.effects.sludge_kg_d)} kg/d of sludge, {cleanest.reagent.name} "
                     f"{shown(cleanest.effects.sludge_kg_d)}")
    return f"For that {' and '.join(words)}." if words else ""


def _with_remedy(candidate: Candidate, ph: float, constants: Conditions, chosen: Candidate | None) -> Candidate:
    """The candidate with the reason why it does not reach the set point, and what would."""
    if candidate.reaches:
        return candidate
    reagent, end = candidate.reagent, candidate.end_ph
    acid = max(candidate.demand.strong_eq_l, 0.0)
    second = f"finish with {chosen.reagent.name}" if chosen is not None else f"finish with a strong {reagent.kind}"
    if reagent.stock.product.formula in STONE_FORMULAS:
        air = float(pco2_of_air(AIR_CO2_PPM, constants.t_c))
        at_strip, at_air = (float(limestone_end_ph(acid, p, constants)) for p in (STRIPPED_ATM, air))
        words = (f"ends at pH {end:.2f} under the CO2 over the bed; with CO2 stripped to {STRIPPED_ATM:g} atm it "
                 f"stands at {at_strip:.2f}, in balance with air at {at_air:.2f}. Strip it, then {second}")
    elif reagent.carbon_per_eq and reagent.kind == BASE:
        words = (f"its own carbonic acid holds it below pH {ph:g} (a solution of it stands at pH {end:.2f}). Strip "
                 f"CO2, or {second}")
    elif reagent.carbon_per_eq:
        words = f"the gas brings the water no lower than about pH {end:.1f}; {second}"
    else:
        words = f"stops at pH {end:.1f}; {second}"
    return replace(candidate, words=words)
