"""Warming of a waste by its neutralization, and the dissolved solids that the reagent leaves."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.side_case import CARBON, NOTE, STOP, WARNING, Effect, Treated
from aquabuf.assess.tank.side_solids import metal_left_mol_l, solids_kg_m3
from aquabuf.chem.heat import (
    CO2_DISSOLVING_KJ_MOL,
    NEUTRALIZATION_KJ_EQ,
    SLAKING_KJ_G,
    carbonic_enthalpies_kj_mol,
    dilution_heat_kj_mol,
    temperature_rise_k,
)
from aquabuf.chem.products import molar_mass
from aquabuf.units import substances

__all__ = ["BOILS_C", "HOT_C", "SEWER_LIMIT_C", "dissolved_effects", "heat_effects", "heat_kj_l"]

Array = NDArray[np.float64]

SEWER_LIMIT_C = 40.0  # influent of treatment works, 40 CFR 403.5 (printed in a summary)
HOT_C = 60.0          # guarded surfaces; common practice
BOILS_C = 90.0        # near boiling, unsafe as a batch; common practice
SOURCE = "enthalpies of formation (recalled), within 1.4 % of calorimetry (printed)"
GAS = "gas"
SLAKES = "slakes"


def _off(shares: Array) -> Array:
    """How much of each proton of an acid is off, from the first to the last."""
    return np.cumsum(shares[::-1])[::-1][1:]


def _changes(case: Treated) -> list[tuple[Array, Array]]:
    """Per weak acid: protons that came off, step by step [mol/L], and what that takes [kJ/mol]."""
    out = [(total * (_off(case.acid_shares(acid, case.end_ph)) - _off(case.acid_shares(acid, case.start_ph))),
            1e-3 * np.array(acid.enthalpy_j_mol)) for acid, total in case.weak_acids.items()]
    carbonic = np.array(carbonic_enthalpies_kj_mol())
    end = _off(case.carbonate_shares(case.end_ph))
    out.append((case.totals.get(CARBON, 0.0) * (end - _off(case.carbonate_shares(case.start_ph))), carbonic))
    if case.added(CARBON):
        out.append((case.added(CARBON) * (end - _off_as_fed(case)), carbonic))
    return out


def _off_as_fed(case: Treated) -> Array:
    """Protons that are off the carbon of the reagent as it is fed: both of a carbonate, none of carbon dioxide."""
    per_carbon = case.product.adds["alkalinity"] / case.product.adds[CARBON]
    return np.clip([per_carbon, per_carbon - 1.0], 0.0, 1.0)


def heat_kj_l(case: Treated) -> tuple[float, float, bool]:
    """Heat of reaction, heat of dilution, slaking and dissolving, and whether the latter is known. [kJ/L of waste]

    Water that forms gives off 55.8 kJ/mol, acids take their enthalpy of ionization. Acid that is bound by nothing that
    is known is counted as if by hydroxide; so is base that metals take, which gives off less: both err on the hot side.
    """
    changes = _changes(case)
    off = sum(float(change.sum()) for change, _ in changes)
    taken = sum(float(change @ enthalpy) for change, enthalpy in changes)
    if case.is_acid:
        fed = case.dose_eq_l if case.product.adds["alkalinity"] else 0.0
        more_h = case.hydrogen(case.end_ph) - case.hydrogen(case.start_ph)
        water = fed - more_h + off  # every proton that neither stays free nor goes to an acid that is known
    else:
        as_carbonate = float(_off_as_fed(case).sum()) if case.added(CARBON) else 0.0
        less_oh = case.hydroxide(case.start_ph) - case.hydroxide(case.end_ph)
        water = less_oh + max(case.added("alkalinity") - case.added(CARBON) * as_carbonate, 0.0)
    other, known = _other_heat(case)
    return NEUTRALIZATION_KJ_EQ * water - taken, other, known


def _other_heat(case: Treated) -> tuple[float, bool]:
    """Heat that the reagent gives off apart from reaction. [kJ/L of waste]"""
    if SLAKES in case.product.groups:
        return case.mol_l * case.product.molar_mass_g * SLAKING_KJ_G, True
    if case.product.form == GAS and case.product.formula == "CO2":
        return case.mol_l * CO2_DISSOLVING_KJ_MOL, True
    if case.strength is None or case.product.form != "liquid":
        return 0.0, case.product.form != "liquid"
    found = dilution_heat_kj_mol(case.product.formula, case.strength)
    return (case.mol_l * found, True) if np.isfinite(found) else (0.0, False)


def heat_effects(case: Treated, outlet_limit_c: float = SEWER_LIMIT_C) -> list[Effect]:
    """Heat of reaction and dilution, warming, and the outlet against a limit of temperature. [°C]"""
    reaction, other, known = heat_kj_l(case)
    rise = float(temperature_rise_k(reaction + other))
    outlet = case.t_c + rise
    hot = (f"; guard hot surfaces above {HOT_C:g} °C" if outlet > HOT_C else "")
    said = ("within the limit" if outlet <= outlet_limit_c else
            f"boils or nearly so: thin the waste or cool it before the reagent{hot}" if outlet >= BOILS_C else
            f"above the limit: cool or thin it before the discharge{hot}")
    return [
        Effect(name="heat of reaction", value=reaction, unit="kJ/L",
               words="water that forms, less what acids take to ionize; metals are counted as acid, a little too hot",
               rule=f"{NEUTRALIZATION_KJ_EQ:.1f} kJ/eq for strong with strong, enthalpies of ionization",
               source=SOURCE),
        Effect(name="heat of dilution", value=other, unit="kJ/L",
               words="thinning, slaking or dissolving of the reagent" if known else
               "not known for this reagent or strength: comes on top",
               rule="by the strength that is fed",
               source="CRC Handbook; worked example (printed), NBS tables (recalled)",
               severity=NOTE if known else WARNING),
        Effect(name="temperature rise", value=rise, unit="K",
               words="nothing lost to the surroundings; reagent water left out",
               rule="13.35 K per eq/L of strong acid with strong base", source=SOURCE),
        Effect(name="outlet temperature", value=outlet, unit="°C", words=said, rule=f"limit {outlet_limit_c:g} °C",
               source="40 CFR 403.5 for 40 °C, as summarized in Environmental Engineers' Handbook (printed); the "
                      "permit outranks it",
               severity=NOTE if outlet <= outlet_limit_c else STOP if outlet >= BOILS_C else WARNING)]


def dissolved_effects(case: Treated) -> list[Effect]:
    """Dissolved solids that the treatment adds: ions of the reagent less what falls out; CO2 is taken as gone."""
    ions = sum(case.added(name) * substances()[name].molar_mass_g for name in case.product.adds
               if name in substances() and name != CARBON)
    solids = solids_kg_m3(case)
    left = metal_left_mol_l(case)
    out = (solids["gypsum"] * molar_mass("CaSO4") / molar_mass("CaSO4.2H2O") + solids["calcium fluoride"]
           + sum((total - left[m.name]) * m.molar_mass_g for m, total in case.metals.items()))
    return [Effect(name="dissolved solids added", value=1e3 * (ions - out), unit="mg/L",
                   words="salt load on sewer, stream or reuse; below zero where more falls out than is added",
                   rule="ions of the reagent less calcium salts and metals that fall out; bicarbonate left in is not "
                        "counted",
                   source="atomic masses")]
