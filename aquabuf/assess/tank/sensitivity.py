"""How demand and tolerance move when one thing at a time is not as taken."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from aquabuf.assess.tank.basis import Basis
from aquabuf.assess.tank.demand import window_fit
from aquabuf.assess.tank.layout import Layout
from aquabuf.assess.tank.waste import Chemistry, chemistry

__all__ = ["sensitivity_of"]

STRENGTH, BUFFERS, AIM_PH, TEMPERATURE_K, PH_READING, IONIC = 0.1, 0.2, 0.5, 10.0, 0.1, 2.0


@dataclass(frozen=True, slots=True)
class _Point:
    demand_eq_l: float
    tolerance_eq_l: float


def _point(basis: Basis, chem: Chemistry, base: float, amounts: np.ndarray, aim: float) -> _Point:
    window = basis.job.window
    aim = float(np.clip(aim, window.low + 0.05, window.high - 0.05))
    fit = window_fit(chem.readout, base, amounts, window.low, window.high, aim)
    return _Point(float(fit.demand_eq_l), float(fit.tolerance_eq_l))


def sensitivity_of(basis: Basis, layout: Layout) -> pd.DataFrame:
    """One row per change: demand to the aim and tolerance of the window, and both over those of the design.

    Columns: change, demand_eq_l, demand_ratio, tolerance_eq_l, tolerance_ratio.
    """
    mean, aim = basis.mean, basis.aim_ph
    shares = mean.amounts[:-1]

    def at(chem: Chemistry, strength: float = 1.0, buffers: float = 1.0, aim_ph: float = aim) -> _Point:
        base, amounts = chem.blend(shares)
        if chem is basis.chem:
            base = mean.base_eq_l
        return _point(basis, chem, strength * base, strength * buffers * amounts, aim_ph)

    def remade(t_c: float | None = None, strength: float | None = None, ph: float = 0.0) -> Chemistry | None:
        wastes = [w if w.ph is None or w.base_eq_l is not None or w.curve is not None else replace(w, ph=w.ph + ph)
                  for w in basis.job.wastes]
        if ph and all(a is b for a, b in zip(wastes, basis.job.wastes, strict=True)):
            return None
        return chemistry(wastes, t_c=basis.chem.t_c if t_c is None else t_c, ionic_strength_mol_l=strength)

    usual = at(basis.chem)
    i = float(basis.chem.constants.ionic_strength_mol_l)
    t_low, t_high = max(basis.chem.t_c - TEMPERATURE_K, 0.0), min(basis.chem.t_c + TEMPERATURE_K, 50.0)
    made = [
        (f"strength {100 * STRENGTH:+.0f} %", lambda: at(basis.chem, 1.0 + STRENGTH)),
        (f"strength {-100 * STRENGTH:+.0f} %", lambda: at(basis.chem, 1.0 - STRENGTH)),
        (f"buffers {100 * BUFFERS:+.0f} %", lambda: at(basis.chem, buffers=1.0 + BUFFERS)),
        (f"buffers {-100 * BUFFERS:+.0f} %", lambda: at(basis.chem, buffers=1.0 - BUFFERS)),
        (f"aim {AIM_PH:+.1f} pH", lambda: at(basis.chem, aim_ph=aim + AIM_PH)),
        (f"aim {-AIM_PH:+.1f} pH", lambda: at(basis.chem, aim_ph=aim - AIM_PH)),
        (f"at {t_low:.0f} °C", lambda: at(remade(t_c=t_low) or basis.chem)),
        (f"at {t_high:.0f} °C", lambda: at(remade(t_c=t_high) or basis.chem)),
        (f"pH read {PH_READING:+.1f}", lambda: _or_none(remade(ph=PH_READING), at)),
        (f"pH read {-PH_READING:+.1f}", lambda: _or_none(remade(ph=-PH_READING), at)),
        (f"ionic strength times {IONIC:g}", lambda: at(remade(strength=IONIC * i) or basis.chem)),
        ("no ionic strength", lambda: at(remade(strength=0.0) or basis.chem)),
    ]
    rows = []
    for change, do in made:
        p = do()
        if p is not None:
            rows.append({"change": change, "demand_eq_l": p.demand_eq_l,
                         "demand_ratio": p.demand_eq_l / usual.demand_eq_l if usual.demand_eq_l else np.nan,
                         "tolerance_eq_l": p.tolerance_eq_l, "tolerance_ratio": p.tolerance_eq_l / usual.tolerance_eq_l})
    return pd.DataFrame(rows)


def _or_none(chem: Chemistry | None, at) -> _Point | None:
    return None if chem is None else at(chem)
