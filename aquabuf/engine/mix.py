"""Mixing of waters."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.acids import Acid
from aquabuf.engine.build import SUFFIX
from aquabuf.engine.conditions import conditions
from aquabuf.engine.water import Water
from aquabuf.errors import InputError

__all__ = ["mix"]

Array = NDArray[np.float64]


def mix(waters: Sequence[Water], volumes: Sequence[ArrayLike]) -> Water:
    """Mix waters in proportion to `volumes` (any unit); closed, so alkalinity, totals, salt and heat are conserved.

    The pH is solved, never averaged. Heat capacity per kilogram is taken as equal (sea water has 5 % less).
    Raises InputError where numbers of waters and volumes differ, a volume is negative, or all are zero; and where the
    waters were made with different marine sets, or with different acids of one name.
    """
    if len(waters) != len(volumes) or not waters:
        raise InputError(f"mixing needs one volume per water; found {len(waters)} waters and {len(volumes)} volumes. "
                         f"Give them in the same order.")
    v = [np.asarray(x, dtype=float) for x in volumes]
    if any((x < 0.0).any() for x in v) or not np.all(sum(v) > 0.0):
        raise InputError("volumes must not be negative and must not all be zero; found such a value. Correct it.")
    for option in ("carbonic", "boron_ratio"):
        found = {w.options[option] for w in waters}
        if len(found) > 1:
            raise InputError(f"waters to be mixed must share {option}; found {', '.join(sorted(found))}. "
                             f"Make them with the same one.")
    mass = [x * w.density_kg_l for x, w in zip(v, waters, strict=True)]
    whole = sum(mass)

    def by_mass(name: str) -> Array:
        return sum(m * getattr(w, name) for m, w in zip(mass, waters, strict=True)) / whole

    t, s = by_mass("t_c"), by_mass("salinity")
    density = conditions(np.ravel(t), np.ravel(s)).density_kg_l.reshape(np.shape(t))

    def amount(per_liter: Sequence[Array]) -> Array:
        return sum(x * c for x, c in zip(v, per_liter, strict=True)) / whole * density

    names = sorted({n for w in waters for n in w.total_names})
    own = _own_acids(waters)
    totals = {f"{name}{SUFFIX}": amount([w.total_mol_l(name) for w in waters]) for name in names}
    return Water.from_alkalinity_dic(
        alkalinity_eq_l=amount([w.alkalinity_eq_l for w in waters]), dic_mol_l=amount([w.dic_mol_l for w in waters]),
        t_c=t, salinity=s, ionic_strength_mol_l=by_mass("ionic_strength_mol_l"), pressure_atm=by_mass("pressure_atm"),
        **(waters[0].options | {"acids": tuple(own.values())}), **totals)


def _own_acids(waters: Sequence[Water]) -> dict[str, Acid]:
    """The users' own acids of all waters by name. Raises InputError where one name stands for two acids."""
    own: dict[str, Acid] = {}
    for water in waters:
        for acid in water.options["acids"]:
            if own.setdefault(acid.name, acid) != acid:
                raise InputError(f"acids of one name must be the same in all waters to be mixed; found two called "
                                 f"{acid.name!r}. Rename one.")
    return own
