"""Heat and gas of a neutralization: warming, carbon dioxide, toxic gases, the pH after stripping, dissolved solids."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.assess.tank.side_case import CARBON, NOTE, STOP, WARNING, Effect, Treated
from aquabuf.chem.acids import acid_named
from aquabuf.chem.gases import AIR_CO2_PPM, pco2_of_air
from aquabuf.chem.products import molar_mass
from aquabuf.chem.properties import GAS_CONSTANT, kelvin
from aquabuf.tables import read_table

__all__ = [
    "GasHazard", "co2_effects", "co2_m3_per_kg", "gas_effects", "gas_hazards", "gas_share", "gas_shares",
    "mixing_effects", "stripped_ph",
]

Array = NDArray[np.float64]

ATM_PA = 101325.0
STOICHIOMETRY = "atomic masses, Henry's law"
CO2_LIMIT_ATM = 0.005        # eight-hour limit of workplaces, 5000 ppm (recalled)
BUBBLES_ATM = 1.0
PH_RANGE = (-1.0, 15.0)
HALVINGS = 60
TELLING_SHARE = 0.01         # of a toxic gas, from which on a waste is told to give it off already
NEUTRAL_PH = 7.0
ACID_SIDE = "acid"


# ---------------------------------------------------------------- carbon dioxide


def co2_m3_per_kg(t_c: ArrayLike) -> Array:
    """Volume of a kilogram of carbon dioxide at 1 atm, as an ideal gas. [m3/kg]"""
    return GAS_CONSTANT * kelvin(t_c) / ATM_PA / (1e-3 * molar_mass("CO2"))


def _non_carbon(case: Treated, ph: float) -> float:
    """Base that everything but carbon and water holds, but for a constant. [eq/L]"""
    if case.held is not None:
        return case.held(ph)
    return sum(total * _lost(case.acid_shares(acid, ph)) for acid, total in case.weak_acids.items())


def _lost(shares: Array) -> float:
    return float(np.arange(shares.size) @ shares)


def stripped_ph(case: Treated, pco2_atm: float | None = None) -> tuple[float, float]:
    """pH and inorganic carbon [mol/L] once the treated waste has come to equilibrium with air, or a CO2 pressure.

    Its base stays; halved between -1 and 15. Metals are left out: what falls out on the way would hold pH down.
    """
    if pco2_atm is None:
        pco2_atm = float(pco2_of_air(AIR_CO2_PPM, case.t_c))
    co2, k1, k2 = (float(x) for x in (case.c.k0 * pco2_atm, case.c.k1, case.c.k2))
    base = (_non_carbon(case, case.end_ph) + case.total(CARBON) * _lost(case.carbonate_shares(case.end_ph))
            + case.hydroxide(case.end_ph) - case.hydrogen(case.end_ph))

    def gap(ph: float) -> float:
        first = co2 * k1 * 10.0**ph
        carbonate = first * (1.0 + 2.0 * k2 * 10.0**ph)
        return carbonate + case.hydroxide(ph) - case.hydrogen(ph) + _non_carbon(case, ph) - base
    low, high = PH_RANGE
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        low, high = (low, middle) if gap(middle) > 0.0 else (middle, high)
    h = 10.0 ** -low
    return low, co2 * (1.0 + k1 / h * (1.0 + k2 / h))


def co2_effects(case: Treated, window: tuple[float, float] | None = None) -> list[Effect]:
    """Carbon dioxide that can leave, how hard it presses, and where pH goes downstream. window : pH of the permit."""
    total = case.total(CARBON)
    ph, left = stripped_ph(case)
    outside = window is not None and not window[0] <= ph <= window[1]
    strips = total > left
    rows = [Effect(
        name="pH after CO2 strips" if strips else "pH in contact with air", value=ph, unit="pH",
        words=("what the water comes to downstream" if strips else "the water takes CO2 up from air, slowly")
        + (", outside the window" if outside else ""),
        rule=f"equilibrium with air of {AIR_CO2_PPM:g} ppm CO2, base unchanged",
        source="Henry's law and carbonic acid constants",
        severity=WARNING if outside and strips else NOTE)]
    if not strips:
        return rows
    kg = (total - left) * molar_mass("CO2")
    pressure = total * float(case.carbonate_shares(case.end_ph)[0]) / float(case.c.k0)
    kg_d = kg * case.m3_d
    presses = pressure > CO2_LIMIT_ATM
    bubbles = "it bubbles and foams: freeboard and vent; " if pressure > BUBBLES_ATM else ""
    said = (f"{bubbles}gathers over the tank and in pits: vent, gas alarm, no entry alone" if presses else
            "below the workplace limit even in closed air")
    return [
        Effect(name="carbon dioxide set free", value=kg, unit="kg/m3",
               words=f"{kg_d:.3g} kg/d, {kg_d * float(co2_m3_per_kg(case.t_c)):.3g} m3/d at {case.t_c:.1f} °C, if all "
                     "that air can strip leaves; what stays in holds pH down and lifts it later",
               rule="carbon of waste and reagent less what stays in balance with air", source=STOICHIOMETRY),
        Effect(name="carbon dioxide gas", value=kg_d * float(co2_m3_per_kg(case.t_c)), unit="m3/d",
               words="volume of the same at 1 atm", rule="ideal gas", source="gas law"),
        Effect(name="carbon dioxide pressure", value=pressure, unit="atm", words=said,
               rule=f"limit of {CO2_LIMIT_ATM:g} atm in the air over the water; bubbles above {BUBBLES_ATM:g} atm",
               source="Henry's law; workplace limit of 5000 ppm (recalled)",
               severity=WARNING if presses else NOTE),
        *rows]


# ---------------------------------------------------------------- toxic gases


@dataclass(frozen=True, slots=True, kw_only=True)
class GasHazard:
    """A dissolved total that leaves as a toxic gas on one side of its pK.

    counted_as : formula that `limit_mg_l` counts. side : reagent that sets it free, "acid" or "base". hold_ph : keep
    above (acid side) or below (base side).
    """

    name: str
    gas: str
    counted_as: str
    side: str
    severity: str
    limit_mg_l: float
    hold_ph: float
    words: str
    source: str


@cache
def gas_hazards() -> Mapping[str, GasHazard]:
    """The table of toxic gases by the total that they come from."""
    return {r["name"]: GasHazard(
        name=r["name"], gas=r["gas"], counted_as=r["counted_as"], side=r["side"], severity=r["severity"],
        limit_mg_l=float(r["limit_mg_l"]), hold_ph=float(r["hold_ph"]), words=r["words"],
        source=f"{r['source']} ({r['mark']})") for r in read_table("gas_hazards")}


def gas_share(ph: ArrayLike, pk: ArrayLike, side: str = ACID_SIDE) -> Array:
    """Share of a weak acid in its acid form at a pH, or of its base form for the side "base". [-] Mass action."""
    sign = 1.0 if side == ACID_SIDE else -1.0
    return 1.0 / (1.0 + exp10(sign * (np.asarray(ph, dtype=float) - np.asarray(pk, dtype=float))))


def gas_shares(case: Treated, ph: ArrayLike) -> dict[str, Array]:
    """Share that is gas (for hypochlorite: HOCl, which chloride turns into chlorine) at every pH, by the total. [-]"""
    return {name: gas_share(ph, _pk(case, name), hazard.side) for name, hazard in gas_hazards().items()
            if case.total(name) > 0.0}


def _pk(case: Treated, name: str) -> float:
    """pK of the step to or from the gas: the first one."""
    return -float(np.log10(case.c.acid_constants(acid_named(name))[0]))


def gas_effects(case: Treated) -> list[Effect]:
    """Toxic gases: share at start and end, and a stop where acid is to go to a waste that holds what becomes one."""
    return [_gas_row(case, gas_hazards()[name], share)
            for name, share in gas_shares(case, [case.start_ph, case.end_ph]).items()]


def _gas_row(case: Treated, hazard: GasHazard, share: Array) -> Effect:
    mg_l = 1e3 * case.total(hazard.name) * molar_mass(hazard.counted_as)
    sets_free = case.is_acid == (hazard.side == ACID_SIDE)
    is_much = mg_l >= hazard.limit_mg_l
    already = is_much and share.max() > TELLING_SHARE
    severity = hazard.severity if sets_free and is_much else WARNING if sets_free or already else NOTE
    gives = f"share as {hazard.gas}" if hazard.name != "hypochlorite" else "share as HOCl, which gives chlorine"
    said = f"{gives} {share[0]:.3g} at pH {case.start_ph:.2f}, {share[1]:.3g} at pH {case.end_ph:.2f}"
    if severity == STOP:
        said += f". Acid must not go to this waste: {hazard.words}"
    elif severity == WARNING:
        said += f". {hazard.words[0].upper()}{hazard.words[1:]}"
    side = "above" if hazard.side == ACID_SIDE else "below"
    return Effect(
        name=f"{hazard.name}, {mg_l:.3g} mg/L as {hazard.counted_as}", value=float(share.max()), unit="-", words=said,
        rule=f"{hazard.severity} from {hazard.limit_mg_l:g} mg/L on where {_article(hazard.side)} is fed; "
             f"hold {side} pH {hazard.hold_ph:g}", source=hazard.source, severity=severity)


def _article(side: str) -> str:
    return f"{'an' if side == ACID_SIDE else 'a'} {side}"


def mixing_effects(streams: Sequence[tuple[str, float, Mapping[str, float]]]) -> list[Effect]:
    """Streams that must not meet in one tank or drain: name, pH, totals [mol/L] of each.

    An acid stream (below pH 7) beside one that holds sulfide, cyanide or hypochlorite; hypochlorite beside ammonium.
    """
    rows: list[Effect] = []
    for holder, _, totals in streams:
        for hazard in (h for h in gas_hazards().values() if h.side == ACID_SIDE):
            mg_l = 1e3 * totals.get(hazard.name, 0.0) * molar_mass(hazard.counted_as)
            acids = [name for name, ph, _ in streams if ph < NEUTRAL_PH and name != holder]
            if mg_l >= hazard.limit_mg_l and acids:
                rows.append(Effect(
                    name=f"{holder} beside {', '.join(acids)}", value=mg_l, unit="mg/L",
                    words=f"{hazard.gas} comes off when they meet: {hazard.words}",
                    rule=f"{hazard.limit_mg_l:g} mg/L as {hazard.counted_as} beside a stream below pH {NEUTRAL_PH:g}",
                    source=hazard.source, severity=hazard.severity))
        bleach, ammonia = gas_hazards()["hypochlorite"], gas_hazards()["ammonium"]
        others = [name for name, _, other in streams if other.get(ammonia.name, 0.0) > 0.0]
        mg_l = 1e3 * totals.get(bleach.name, 0.0) * molar_mass(bleach.counted_as)
        if mg_l >= bleach.limit_mg_l and others:
            rows.append(Effect(
                name=f"{holder} with ammonia of {', '.join(others)}", value=mg_l, unit="mg/L",
                words="chloramines come off when they meet: reduce the hypochlorite first",
                rule=f"{bleach.limit_mg_l:g} mg/L of hypochlorite beside ammonium", source="common practice, no source",
                severity=WARNING))
    return rows
