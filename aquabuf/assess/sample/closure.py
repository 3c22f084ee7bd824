"""What more than two readings of one sample say about each other."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import PH_COLUMNS, Array, Values, alkalinity_reading, water_keywords
from aquabuf.assess.sample.quality import ORGANIC_SITES_EQ_PER_MG, ORGANIC_TITRATED_EQ_PER_MG
from aquabuf.assess.sample.solve import ph_columns, take_rows
from aquabuf.chem.acids import Acid
from aquabuf.engine.balance import protons_lost
from aquabuf.engine.water import Water

__all__ = ["Closure", "closure"]

ALUMINUM_CHARGE = 3.0  # upper bound per mole in acid water
MAGNIFIED_BELOW = 0.1  # carbonate charge per mole of carbon; pH 5.4 and below
MUCH_BETTER = 2.0      # times smaller uncertainty before measured carbon takes the place of alkalinity


@dataclass(frozen=True, slots=True, eq=False)
class Closure:
    """Carbonate alkalinity that pH and alkalinity leave [eq/L], and titrated less computed alkalinity [meq/L].

    carbon_unknown : that carbonate cannot tell the carbon. It is negative, by no more than uncertainty, organic acids
        and aluminum can explain; or the water is so acid that carbon is many times the carbonate, and carbonate is
        within its uncertainty and the charge of titrated organic acids.
    carbon_first : carbon was measured much better than pH and alkalinity imply it.
    """

    carbonate: Array
    carbonate_u: Array
    carbon_unknown: NDArray[np.bool_]
    carbon_first: NDArray[np.bool_]
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
    out = Closure(*(np.full(n, np.nan) for _ in range(2)), *(np.zeros(n, dtype=bool) for _ in range(2)),
                  *(np.full(n, np.nan) for _ in range(2)))
    column = ph_columns(values, n)
    for name, scale in PH_COLUMNS.items():
        rows = np.flatnonzero(column == name)
        if rows.size and name in values:
            out.put(rows, _of_one_scale(take_rows(values, rows), take_rows(u, rows), name, scale, acids, options))
    return out


def _of_one_scale(values: Values, u: Values, ph_column: str, scale: str, acids: tuple[Acid, ...], options: Options,
                  ) -> Closure:
    ph, ph_u = values[ph_column], u[ph_column]
    missing = np.full(ph.shape, np.nan)
    alkalinity, source = alkalinity_reading(values)
    keywords = water_keywords(values, acids, options.carbonic)
    t_ph = values.get("ph_temperature_c", missing)
    keywords["t_c"] = np.where(np.isfinite(t_ph), t_ph, keywords["t_c"])
    alkalinity_u = np.where(source == "anc", u.get("anc_eq_l", missing), u.get("alkalinity_eq_l", missing))
    bare = Water.from_ph_dic(ph=ph, dic_mol_l=0.0, ph_scale=scale, **keywords)
    carbonate = alkalinity - bare.alkalinity_eq_l
    carbonate_u = np.hypot(alkalinity_u, bare.buffer_intensity_eq_l() * ph_u)
    doc = np.nan_to_num(values.get("doc_mg_l", missing))
    allowance = (2.0 * carbonate_u + ORGANIC_SITES_EQ_PER_MG * doc
                 + ALUMINUM_CHARGE * np.nan_to_num(values.get("aluminum_mol_l", missing)))
    dic, dic_u = values.get("dic_mol_l", missing), u.get("dic_mol_l", missing)
    per_mole = protons_lost(bare.state.carbonate_fractions())
    with np.errstate(invalid="ignore"):
        doubt = 2.0 * carbonate_u + ORGANIC_TITRATED_EQ_PER_MG * doc
        in_acid_water = (per_mole < MAGNIFIED_BELOW) & (carbonate <= doubt)
        unknown = (carbonate >= -allowance) & ((carbonate <= 0.0) | in_acid_water)
        carbon_first = carbonate_u / per_mole > MUCH_BETTER * dic_u
    if np.isnan(dic).all():
        return Closure(carbonate, carbonate_u, unknown, carbon_first, missing, missing)
    with_carbon = Water.from_ph_dic(ph=ph, dic_mol_l=dic, ph_scale=scale, **keywords)
    spread = np.sqrt(alkalinity_u**2 + (per_mole * dic_u) ** 2 + (with_carbon.buffer_intensity_eq_l() * ph_u) ** 2)
    return Closure(carbonate, carbonate_u, unknown, carbon_first, 1e3 * (alkalinity - with_carbon.alkalinity_eq_l),
                   1e3 * spread)
