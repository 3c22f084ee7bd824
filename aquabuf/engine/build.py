"""From what a user gives to a solved state: broadcasting, sea-salt totals, implied ionic strength."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Mapping
from difflib import get_close_matches

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import as_rows, common_shape
from aquabuf.chem import seasalt
from aquabuf.chem.acids import Acid, acid_named, acid_table
from aquabuf.engine.conditions import FRESH_BELOW, Conditions, conditions
from aquabuf.engine.pairs import solve_pair
from aquabuf.engine.state import PH_SCALES, Dissolved, State
from aquabuf.errors import InputError

__all__ = ["BORON_OF_SEAWATER", "IONS", "SEA_SALTS", "SUFFIX", "build_state", "checked", "of_sea_salt"]

Array = NDArray[np.float64]

IONS = ("calcium", "magnesium", "sodium", "potassium")  # that pair with carbonate and sulfate
BORON_OF_SEAWATER = {"uppstrom": seasalt.boron_uppstrom, "lee": seasalt.boron_lee}
SEA_SALTS = ("boron", "sulfate", "fluoride", "calcium")
SUFFIX = "_mol_l"


def checked(value: str, allowed: Collection[str], subject: str, remedy: str) -> str:
    """`value` if it is one of `allowed`; InputError naming rule, value and remedy otherwise."""
    if value not in allowed:
        raise InputError(f"{subject} must be one of {', '.join(allowed)}; found {value!r}. {remedy}")
    return value


def build_state(
    known: Mapping[str, ArrayLike], ph_scale: str = "meter", *,
    t_c: ArrayLike, salinity: ArrayLike = 0.0, ionic_strength_mol_l: ArrayLike | None = None,
    pressure_atm: ArrayLike = 1.0, acids: Iterable[Acid] = (), carbonic: str = "millero",
    boron_ratio: str = "uppstrom", **totals: ArrayLike,
) -> tuple[State, tuple[int, ...], dict]:
    """Solve one pair: the state of the flattened rows, their shape, and the options to solve it again with.

    The keywords are described at `Water`. Raises InputError for unknown names and shapes that do not fit.
    """
    checked(ph_scale, PH_SCALES, "the pH scale", "Use 'meter' for a meter calibrated with standard buffers.")
    checked(boron_ratio, BORON_OF_SEAWATER, "boron_ratio", "Leave it out for 'uppstrom'.")
    own = tuple(acids)
    acid_totals, ion_totals = _sorted_totals(totals, own)
    strengths = [] if ionic_strength_mol_l is None else [ionic_strength_mol_l]
    try:
        shape = common_shape(*known.values(), t_c, salinity, pressure_atm, *strengths, *totals.values())
    except ValueError as error:
        raise InputError(f"the inputs must broadcast to one shape; found {error}. Give scalars or arrays of one "
                         f"length.") from None

    def flat(v: ArrayLike) -> Array:
        try:
            return as_rows(v, shape).reshape(-1)
        except (TypeError, ValueError):
            raise InputError(f"every input must be a number or an array of numbers; found {v!r}. Correct it.") from None

    values = {n: flat(v) for n, v in known.items()}
    s, t, p = flat(salinity), flat(t_c), flat(pressure_atm)
    sea = s >= FRESH_BELOW
    if sea.any():
        acid_totals = {n: acid_totals.get(n, np.nan) for n in SEA_SALTS if n not in IONS} | acid_totals
        ion_totals = {"calcium": np.nan} | ion_totals
    sulfate, fluoride = (flat(acid_totals.get(n, np.nan)) for n in ("sulfate", "fluoride"))

    def solve(strength: Array) -> State:
        c = conditions(t, s, strength, pressure_atm=p, sulfate_mol_l=sulfate, fluoride_mol_l=fluoride,
                       carbonic=carbonic)
        dissolved = tuple(Dissolved(acid_named(n, own), _with_sea(n, flat(v), c, boron_ratio))
                          for n, v in acid_totals.items())
        ions = {n: _with_sea(n, flat(v), c, boron_ratio) for n, v in ion_totals.items()}
        return solve_pair(values, c, dissolved, ions, ph_scale=ph_scale)

    given = np.full(s.shape, np.nan) if ionic_strength_mol_l is None else flat(ionic_strength_mol_l)
    state = solve(_implied_strength(given, values, s, solve))
    return state, shape, {"acids": own, "carbonic": carbonic, "boron_ratio": boron_ratio}


def _sorted_totals(totals: dict[str, ArrayLike], own: tuple[Acid, ...]) -> tuple[dict, dict]:
    """Totals of weak acids and of ions by plain name. Raises InputError for a name that is neither."""
    names = set(acid_table()) | {a.name for a in own} | set(IONS)
    acid_totals: dict[str, ArrayLike] = {}
    ion_totals: dict[str, ArrayLike] = {}
    for keyword, value in totals.items():
        name = keyword.removesuffix(SUFFIX)
        if not keyword.endswith(SUFFIX) or name not in names:
            near = get_close_matches(keyword, [n + SUFFIX for n in names], n=3) or sorted(n + SUFFIX for n in names)
            raise InputError(f"{keyword!r} is not a total that water can have; nearest: {', '.join(near)}. "
                             f"Correct the name, or describe your own acid in `acids`.")
        (ion_totals if name in IONS else acid_totals)[name] = value
    return acid_totals, ion_totals


def of_sea_salt(name: str, salinity: Array, boron_ratio: str = "uppstrom") -> Array:
    """Total of boron, sulfate, fluoride or calcium that sea salt brings. [mol/kg]"""
    of_salt = {"boron": BORON_OF_SEAWATER[boron_ratio], "sulfate": seasalt.sulfate_of_seawater,
               "fluoride": seasalt.fluoride_of_seawater, "calcium": seasalt.calcium_of_seawater}
    return of_salt[name](salinity)


def _with_sea(name: str, given: Array, c: Conditions, boron_ratio: str) -> Array:
    """A total with its gaps filled from salinity in marine rows, if sea salt brings it; boron is 0 in fresh."""
    if name not in SEA_SALTS:
        return given
    in_fresh = np.nan if name in IONS else 0.0
    fill = np.where(c.is_marine, of_sea_salt(name, c.salinity, boron_ratio) * c.density_kg_l, in_fresh)
    return np.where(np.isnan(given), fill, given)


def _implied_strength(given: Array, values: dict[str, Array], s: Array,
                      solve: Callable[[Array], State]) -> Array:
    """Ionic strength: the given one, else the larger of what salinity and alkalinity (as a 1:1 salt) imply."""
    missing = np.isnan(given)
    if not missing.any():
        return given
    of_salt = seasalt.ionic_strength_seawater(np.clip(np.nan_to_num(s), 0.0, FRESH_BELOW))
    alkalinity = values.get("alkalinity")
    if alkalinity is None:
        alkalinity = solve(of_salt).alkalinity
    return np.where(missing, np.fmax(of_salt, np.abs(alkalinity)), given)
