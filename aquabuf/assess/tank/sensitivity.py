"""How demand and tolerance move when one thing at a time is not as taken."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.tank.basis import Basis
from aquabuf.assess.tank.demand import window_fit
from aquabuf.assess.tank.waste import HIGHEST_STRENGTH, Chemistry, chemistry
from aquabuf.engine.conditions import LIMITS
from aquabuf.engine.readout import PH_LEAST, PH_MOST

__all__ = ["sensitivity_of"]

Array = NDArray[np.float64]

STRENGTH, BUFFERS, AIM_PH, TEMPERATURE_K, PH_READING, IONIC = 0.1, 0.2, 0.5, 10.0, 0.1, 2.0
NEAR_END = 0.1  # of the width of the window: an aim is moved no closer to its ends


@dataclass(frozen=True, slots=True, eq=False)
class _Mean:
    """The mean of the stream under some chemistry: its base as it comes, and its amounts."""

    chem: Chemistry
    base_eq_l: float
    amounts: Array


def sensitivity_of(basis: Basis) -> pd.DataFrame:
    """One row per change: demand to the aim and tolerance of the window, and both over those of the design.

    Strength moves base and buffers together, buffers what holds base alone. A change of chemistry moves the base of a
    waste only where it follows from a measured pH. Changes that cannot be made have no row.

    Columns: change, demand_eq_l, demand_ratio, tolerance_eq_l, tolerance_ratio.
    """
    as_is = _Mean(basis.chem, basis.mean.base_eq_l, basis.mean.amounts)
    usual = _row(basis, "", as_is, basis.aim_ph)
    rows = [
        *(_row(basis, f"strength {100.0 * x:+.0f} %", _scaled(as_is, 1.0 + x, 1.0 + x), basis.aim_ph)
          for x in (STRENGTH, -STRENGTH)),
        *(_row(basis, f"buffers {100.0 * x:+.0f} %", _scaled(as_is, 1.0, 1.0 + x), basis.aim_ph)
          for x in (BUFFERS, -BUFFERS)),
        *(_row(basis, f"aim pH {ph:.4g}", as_is, ph) for ph in _other_aims(basis)),
        *(_row(basis, words, _remade(basis, chem), basis.aim_ph) for words, chem in _other_chemistry(basis)),
    ]
    for row in rows:
        for what in ("demand", "tolerance"):
            before = usual[f"{what}_eq_l"]
            row[f"{what}_ratio"] = row[f"{what}_eq_l"] / before if before != 0.0 else np.nan
    return pd.DataFrame(rows)[["change", "demand_eq_l", "demand_ratio", "tolerance_eq_l", "tolerance_ratio"]]


def _row(basis: Basis, change: str, mean: _Mean, aim_ph: float) -> dict:
    window = basis.job.window
    fit = window_fit(mean.chem.readout, mean.base_eq_l, mean.amounts, window.low, window.high, aim_ph)
    return {"change": change, "demand_eq_l": float(fit.demand_eq_l), "tolerance_eq_l": float(fit.tolerance_eq_l)}


def _scaled(mean: _Mean, base: float, amounts: float) -> _Mean:
    return _Mean(mean.chem, base * mean.base_eq_l, amounts * mean.amounts)


def _remade(basis: Basis, chem: Chemistry) -> _Mean:
    """The mean under other chemistry; where the base of the stream was measured, it moves by as much as that of the
    wastes."""
    shares = basis.mean.amounts[:-1]
    return _Mean(chem, basis.mean.base_eq_l + chem.blend(shares)[0] - basis.chem.blend(shares)[0], basis.mean.amounts)


def _other_aims(basis: Basis) -> list[float]:
    window = basis.job.window
    free = NEAR_END * (window.high - window.low)
    found = (float(np.clip(basis.aim_ph + x, window.low + free, window.high - free)) for x in (AIM_PH, -AIM_PH))
    return [ph for ph in found if abs(ph - basis.aim_ph) > 1e-6]


def _other_chemistry(basis: Basis) -> list[tuple[str, Chemistry]]:
    """Other temperatures, pH as measured, and ionic strengths."""
    wastes, t_c, i = basis.job.wastes, basis.chem.t_c, float(basis.chem.constants.ionic_strength_mol_l)
    low, high = LIMITS["t_c"][:2]
    made = [(f"at {t:.0f} °C", chemistry(wastes, t_c=t))
            for t in (max(t_c - TEMPERATURE_K, low), min(t_c + TEMPERATURE_K, high)) if abs(t - t_c) > 1e-6]
    for x in (PH_READING, -PH_READING):
        read = [replace(w, ph=float(np.clip(w.ph + x, PH_LEAST, PH_MOST)))
                if w.ph is not None and w.base_eq_l is None and w.curve is None else w for w in wastes]
        if any(a is not b for a, b in zip(read, wastes, strict=True)):
            made.append((f"pH read {x:+.1f}", chemistry(read, t_c=t_c)))
    strengths = ((f"ionic strength times {IONIC:g}", IONIC * i), ("no ionic strength", 0.0))
    made += [(words, chemistry(wastes, t_c=t_c, ionic_strength_mol_l=mol_l)) for words, mol_l in strengths
             if i > 0.0 and mol_l <= HIGHEST_STRENGTH]
    return made
