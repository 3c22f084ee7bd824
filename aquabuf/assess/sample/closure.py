"""What more than two readings of one sample say about each other."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import PH_COLUMNS, Array, Values, alkalinity_reading, water_keywords
from aquabuf.assess.sample.leftout import charge_allowance, titrated_organic
from aquabuf.assess.sample.solve import NO_PAIR, PAIRS, blocks, ph_columns, take_rows
from aquabuf.chem.acids import Acid
from aquabuf.engine.balance import protons_lost
from aquabuf.engine.water import Water

__all__ = ["Closure", "closure"]

MAGNIFIED_BELOW = 0.1  # carbonate charge per mole of carbon; pH 5.4 and below; our choice
MUCH_BETTER = 2.0      # times smaller uncertainty before measured carbon takes the place of alkalinity; our choice


@dataclass(frozen=True, slots=True, eq=False)
class Closure:
    """Carbonate alkalinity that pH and alkalinity leave [eq/L], and titrated less computed alkalinity [meq/L].

    carbon_unknown : that carbonate cannot tell the carbon. It is negative, by no more than uncertainty, organic acids
        and aluminum can explain; or the water is so acid that carbon is many times the carbonate, and carbonate is
        within its uncertainty and the charge of titrated organic acids.
    preferred : index of the pair (of PAIRS) that is better than the usual first choice; NO_PAIR where none is.
    """

    carbonate: Array
    carbonate_u: Array
    carbon_unknown: NDArray[np.bool_]
    preferred: NDArray[np.int8]
    carbon_meq_l: Array
    carbon_u_meq_l: Array

    def take(self, rows: NDArray[np.intp]) -> Closure:
        """The same for some of the rows."""
        return Closure(*(getattr(self, f.name)[rows] for f in fields(self)))

    def put(self, rows: NDArray[np.intp], values: Closure) -> None:
        """Fill some of the rows."""
        for f in fields(self):
            getattr(self, f.name)[rows] = getattr(values, f.name)


def closure(values: Values, u: Values, acids: tuple[Acid, ...], options: Options) -> Closure:
    """Compare alkalinity with what the pH alone, and pH with carbon, ask for; nan where a reading is missing."""
    n = values["temperature_c"].size
    out = Closure(carbonate=np.full(n, np.nan), carbonate_u=np.full(n, np.nan), carbon_unknown=np.zeros(n, dtype=bool),
                  preferred=np.full(n, NO_PAIR, dtype=np.int8), carbon_meq_l=np.full(n, np.nan),
                  carbon_u_meq_l=np.full(n, np.nan))
    column = ph_columns(values, n)
    for name, scale in PH_COLUMNS.items():
        for rows in blocks(np.flatnonzero((column == name) & (name in values))):
            out.put(rows, _of_one_scale(take_rows(values, rows), take_rows(u, rows), name, scale, acids, options))
    return out


def _of_one_scale(values: Values, u: Values, ph_column: str, scale: str, acids: tuple[Acid, ...], options: Options,
                  ) -> Closure:
    ph, ph_u = values[ph_column], u[ph_column]
    missing = np.full(ph.shape, np.nan)
    alkalinity = alkalinity_reading(values)
    keywords = water_keywords(values, acids, options.carbonic)
    t_ph = values.get("ph_temperature_c", missing)
    keywords["t_c"] = np.where(np.isfinite(t_ph), t_ph, keywords["t_c"])
    alkalinity_u = np.where(np.isnan(values.get("alkalinity_eq_l", missing)), u.get("anc_eq_l", missing),
                            u.get("alkalinity_eq_l", missing))
    bare = Water.from_ph_dic(ph=ph, dic_mol_l=0.0, ph_scale=scale, **keywords)
    carbonate = alkalinity - bare.alkalinity_eq_l
    carbonate_u = np.hypot(alkalinity_u, bare.buffer_intensity_eq_l() * ph_u)
    allowance = 2.0 * carbonate_u + charge_allowance(values)
    dic, dic_u = values.get("dic_mol_l", missing), u.get("dic_mol_l", missing)
    per_mole = protons_lost(bare.state.carbonate_fractions())
    with np.errstate(invalid="ignore"):
        doubt = 2.0 * carbonate_u + titrated_organic(values, ph)
        in_acid_water = (per_mole < MAGNIFIED_BELOW) & (carbonate <= doubt)
        unknown = (carbonate >= -allowance) & ((carbonate <= 0.0) | in_acid_water)
        carbon_better = ~bare.is_marine & (carbonate_u / per_mole > MUCH_BETTER * dic_u)
    preferred = np.where(carbon_better, PAIRS.index("pH and carbon"), NO_PAIR).astype(np.int8)
    if np.isnan(dic).all():
        return Closure(carbonate, carbonate_u, unknown, preferred, missing, missing)
    with_carbon = Water.from_ph_dic(ph=ph, dic_mol_l=dic, ph_scale=scale, **keywords)
    of_pair, intensity = np.hypot(alkalinity_u, per_mole * dic_u), with_carbon.buffer_intensity_eq_l()
    with np.errstate(invalid="ignore"):
        pair_better = bare.is_marine & (of_pair < intensity * ph_u)  # it tells the pH better than the meter does
    preferred[pair_better] = PAIRS.index("alkalinity and carbon")
    return Closure(carbonate, carbonate_u, unknown, preferred, 1e3 * (alkalinity - with_carbon.alkalinity_eq_l),
                   1e3 * np.hypot(of_pair, intensity * ph_u))
