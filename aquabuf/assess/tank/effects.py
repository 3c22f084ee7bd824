"""Side effects of a load of wastes with a reagent: from tables and totals to the record that they follow from."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from aquabuf.assess.tank.compare import Effects
from aquabuf.assess.tank.demand import Load
from aquabuf.assess.tank.reagents import Reagent
from aquabuf.assess.tank.side import SideEffects, Treated, side_effects
from aquabuf.assess.tank.waste import CARBON, Chemistry
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.engine.readout import GRID_PH

__all__ = ["effects_of", "summary_of", "totals_of", "treated"]

LOWEST_C = 0.0  # of side effects; a waste may be a little colder
SLUDGE, HEAT, GAS = "dry solids per day", "temperature rise", "carbon dioxide set free"


def totals_of(chem: Chemistry, load: Load) -> tuple[dict[str, float], dict[Acid, float], float]:
    """Dissolved totals by name, acids of the user's own [mol/L], and suspended solids [g/L] of a load."""
    totals: dict[str, float] = {}
    own: dict[Acid, float] = {}
    solids = 0.0
    for share, waste in zip(load.amounts, chem.wastes, strict=False):
        s = float(share)
        solids += s * waste.solids_g_l
        for acid, mol in waste.acids.items():
            if acid_table().get(acid.name) == acid:
                totals[acid.name] = totals.get(acid.name, 0.0) + s * mol
            else:
                own[acid] = own.get(acid, 0.0) + s * mol
        for name, mol in (*waste.metals.items(), *waste.ions.items(), (CARBON, waste.carbon_mol_l)):
            totals[name] = totals.get(name, 0.0) + s * mol
    return {name: mol for name, mol in totals.items() if mol > 0.0}, own, solids


def treated(chem: Chemistry, load: Load, reagent: Reagent, eq_l: float, end_ph: float) -> Treated:
    """A load that a reagent brings to a pH, as side effects need it. eq_l : reacting equivalents per liter. [eq/L]"""
    totals, own, solids = totals_of(chem, load)
    return Treated(
        flow_m3_h=load.flow_m3_h, t_c=max(chem.t_c, LOWEST_C),
        start_ph=float(chem.readout.ph(load.base_eq_l, load.amounts)), end_ph=end_ph, dose_eq_l=eq_l,
        product=reagent.stock.product, strength=reagent.stock.strength, totals=totals, acids=own,
        held=_held(chem, load), solids_g_l=solids, efficiency=reagent.efficiency, constants=chem.constants)


def _held(chem: Chemistry, load: Load) -> Callable[[float], float] | None:
    """Base held by all but carbon and water where a measured curve tells more than the composition; None else."""
    if all(w.curve is None for w in chem.wastes):
        return None
    carbon = chem.readout.held[chem.carbon_carrier]
    table = sum((float(s) * (chem.readout.held[j] - (0.0 if w.curve is not None else w.carbon_mol_l) * carbon)
                 for j, (s, w) in enumerate(zip(load.amounts, chem.wastes, strict=False))), start=0.0 * carbon)
    return lambda ph: float(np.interp(ph, GRID_PH, table))


def effects_of(chem: Chemistry, load: Load, reagent: Reagent, eq_l: float, end_ph: float) -> SideEffects:
    """Side effects of a reagent in a load."""
    return side_effects(treated(chem, load, reagent, eq_l, end_ph))


def summary_of(effects: SideEffects, m3_d: float) -> Effects:
    """What the comparison of reagents shows of them. m3_d : flow, as gas is told per volume."""
    values = {row.name: row.value for row in effects.rows}
    return Effects(sludge_kg_d=values.get(SLUDGE, 0.0), heat_k=values.get(HEAT, 0.0),
                   gas_kg_d=values.get(GAS, 0.0) * m3_d)
