"""Metals that fall out as hydroxides: what stays dissolved at a pH, how much hydroxide, and where one pH cannot serve
all.

The table `data/metals.csv` has one row per metal. Over the solid, with [OH-] = 10^(pH - pKw):

    free ion = 10^-pKsp / [OH-]^z,    anion = 10^log_k_up [OH-]^n    for M(OH)z(s) + n OH- = M(OH)z+n

Solubility products are of fresh precipitates (aged ones dissolve less) at 25 °C; activities are those of an ideal
solution, or conditional where pkw is. Hydroxo complexes between ion and anion, complexes with cyanide, ammonia,
citrate or EDTA, and fine solids that pass a clarifier are not in it: all hold more metal in the effluent. Near its
least a computed level is therefore a lower bound; plants seldom keep below some tenths of a mg/L by hydroxide alone
(practice).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "Conflict", "Metal", "complex_at", "conflict", "dissolved_at", "free_at", "least_ph", "metal_named", "metals",
    "precipitation_window", "soluble_window", "window_disagreement",
]

Array = NDArray[np.float64]

PKW = 14.0                # rounded, of an ideal solution at 25 °C
PH_RANGE = (-1.0, 15.0)
PH_POINTS = 1601          # of the search for windows, every 0.01
AGREES_PH = 0.5           # between these constants and a table of analysts
START_MOL_L, DONE_MOL_L = 1e-2, 1e-5  # of the tables of precipitation that analysts use


@dataclass(frozen=True, slots=True, kw_only=True)
class Metal:
    """A metal and its hydroxide.

    pksp : of M(OH)z(s). log_k_up, charge_up : constant of M(OH)z(s) + n OH- and n, the charge of the anion; None where
    it forms none. ph_low, ph_high : window of least solubility in practice, nan where none is known.
    table_window : pH of start, end and return as a table of analysts has it, nan where it has none.
    limit_mg_l : level to compare with where no other is given, nan where none is known. mg/L of the element.
    """

    name: str
    symbol: str
    charge: int
    molar_mass_g: float  # [g/mol]
    hydroxide: str
    pksp: float
    log_k_up: float | None
    charge_up: int | None
    solubility_source: str
    ph_low: float
    ph_high: float
    window_source: str
    table_window: tuple[float, float, float]
    table_source: str
    limit_mg_l: float
    limit_source: str

    @property
    def hydroxide_g_mol(self) -> float:
        """Molar mass of the hydroxide, counted without water. [g/mol]"""
        return molar_mass(self.hydroxide)

    @property
    def g_hydroxide_per_g(self) -> float:
        """Dry hydroxide from a mass of metal. [g/g]"""
        return self.hydroxide_g_mol / self.molar_mass_g

    @property
    def caco3_mg_per_mg(self) -> float:
        """Alkalinity as CaCO3 that its precipitation takes: charge times half a mole of CaCO3. [mg/mg]"""
        return self.charge * 0.5 * molar_mass("CaCO3") / self.molar_mass_g

    @property
    def limit_mol_l(self) -> float:
        """The listed level. [mol/L]"""
        return 1e-3 * self.limit_mg_l / self.molar_mass_g


def _marked(row: Mapping[str, str], what: str) -> str:
    return f"{row[f'{what}_source']} ({row[f'{what}_mark']})" if row[f"{what}_source"] else ""


def _number(cell: str) -> float:
    return float(cell) if cell else np.nan


def _metal_of(row: Mapping[str, str]) -> Metal:
    has_anion = bool(row["log_k_up"])
    return Metal(
        name=row["name"], symbol=row["symbol"], charge=int(row["charge"]), molar_mass_g=molar_mass(row["symbol"]),
        hydroxide=row["hydroxide"], pksp=float(row["pksp"]), log_k_up=float(row["log_k_up"]) if has_anion else None,
        charge_up=int(row["charge_up"]) if has_anion else None, solubility_source=_marked(row, "solubility"),
        ph_low=_number(row["ph_low"]), ph_high=_number(row["ph_high"]), window_source=_marked(row, "window"),
        table_window=(_number(row["table_start"]), _number(row["table_done"]), _number(row["table_back"])),
        table_source=_marked(row, "table"), limit_mg_l=_number(row["limit_mg_l"]), limit_source=_marked(row, "limit"))


@cache
def metals() -> Mapping[str, Metal]:
    """The shipped metals by name, in table order."""
    return MappingProxyType({row["name"]: _metal_of(row) for row in read_table("metals")})


def metal_named(name: str) -> Metal:
    """The metal of this name. Raises InputError with the nearest names."""
    if name not in metals():
        near = get_close_matches(name, metals(), n=3) or list(metals())
        raise InputError(f"no metal is called {name!r}; nearest: {', '.join(near)}. Correct the name; give iron, "
                         "chromium and manganese with their valence.")
    return metals()[name]


# ---------------------------------------------------------------- solubility


def _oh(ph: ArrayLike, pkw: ArrayLike) -> Array:
    return np.asarray(ph, dtype=float) - np.asarray(pkw, dtype=float)  # log10 [OH-]


def free_at(metal: Metal, ph: ArrayLike, pkw: ArrayLike = PKW) -> Array:
    """Free ion over the solid hydroxide, by the definition of Ksp. [mol/L]"""
    return exp10(-metal.pksp - metal.charge * _oh(ph, pkw))


def complex_at(metal: Metal, ph: ArrayLike, pkw: ArrayLike = PKW) -> Array:
    """Hydroxo anion over the solid hydroxide; zero for a metal that forms none. [mol/L]"""
    oh = _oh(ph, pkw)
    if metal.log_k_up is None or metal.charge_up is None:
        return 0.0 * oh
    return exp10(metal.log_k_up + metal.charge_up * oh)


def dissolved_at(metal: Metal, ph: ArrayLike, pkw: ArrayLike = PKW) -> Array:
    """Metal that stays dissolved over the solid, ion and anion. [mol/L]"""
    return free_at(metal, ph, pkw) + complex_at(metal, ph, pkw)


def least_ph(metal: Metal, pkw: float = PKW) -> float:
    """pH of least solubility: there z times the ion is n times the anion; nan for a metal that forms no anion."""
    if metal.log_k_up is None or metal.charge_up is None:
        return np.nan
    z, n = metal.charge, metal.charge_up
    return pkw + (np.log10(z / n) - metal.pksp - metal.log_k_up) / (z + n)


def precipitation_window(metal: Metal, pkw: float = PKW, *, start_mol_l: float = START_MOL_L,
                         done_mol_l: float = DONE_MOL_L) -> tuple[float, float, float]:
    """pH at which the ion begins to fall out, is out, and its anion takes it back into solution (nan: never).

    Out and back are counted at `done_mol_l`; each species by itself. Follows from the constants.
    """
    start, done = (pkw - (metal.pksp + np.log10(c)) / metal.charge for c in (start_mol_l, done_mol_l))
    if metal.log_k_up is None or metal.charge_up is None:
        return start, done, np.nan
    return start, done, pkw + (np.log10(done_mol_l) - metal.log_k_up) / metal.charge_up


def window_disagreement(metal: Metal, pkw: float = PKW) -> str:
    """Both windows of precipitation in words where they differ by more than half a pH; empty where they agree."""
    computed = precipitation_window(metal, pkw)
    apart = [not abs(a - b) <= AGREES_PH for a, b in zip(computed, metal.table_window, strict=True)
             if not (np.isnan(a) or np.isnan(b))]
    if not any(apart):
        return ""
    return (f"{metal.name}: starts to fall out, is out, dissolves again at pH {_window_words(computed)} by its "
            "constants and at "
            f"{_window_words(metal.table_window)} by {metal.table_source}. Where they differ, find the pH in a jar "
            "test.")


def _window_words(window: tuple[float, float, float]) -> str:
    return ", ".join("none" if np.isnan(x) else f"{x:.1f}" for x in window)


def soluble_window(metal: Metal, limit_mol_l: float, pkw: float = PKW) -> tuple[float, float]:
    """pH from and to which no more than a limit stays dissolved; nan, nan where it never does.

    On a grid of 0.01 from -1 to 15.
    """
    ph = np.linspace(*PH_RANGE, PH_POINTS)
    low = ph[dissolved_at(metal, ph, pkw) <= limit_mol_l]
    return (float(low[0]), float(low[-1])) if low.size else (np.nan, np.nan)


# ---------------------------------------------------------------- several metals together


@dataclass(frozen=True, slots=True)
class Conflict:
    """Whether one pH serves all metals.

    ph_low, ph_high : pH at which all are below their level, by solubility; nan where there is none.
    windows : the same by metal. practice_low, practice_high : common part of the windows of least solubility.
    clash : whether either basis leaves no pH. words : which metals need what.
    """

    ph_low: float
    ph_high: float
    windows: Mapping[str, tuple[float, float]]
    practice_low: float
    practice_high: float
    clash: bool
    words: str


def conflict(chosen: Sequence[Metal], limits_mol_l: Mapping[str, float] | None = None, pkw: float = PKW) -> Conflict:
    """Whether there is one pH at which all metals are below given levels, or those listed where none is given.

    A metal without any level counts by its practical window alone. Raises InputError where a level is not above zero.
    """
    given = limits_mol_l or {}
    for name, value in given.items():
        if not value > 0.0:
            raise InputError(f"the level of {metal_named(name).name} must be above zero; found {value:g} mol/L. Give "
                             "what "
                             "the permit allows.")
    levels = {m.name: given.get(m.name, m.limit_mol_l) for m in chosen}
    windows = {m.name: soluble_window(m, levels[m.name], pkw) for m in chosen if np.isfinite(levels[m.name])}
    practice = {m.name: (m.ph_low, m.ph_high) for m in chosen if np.isfinite(m.ph_low)}
    low, high, said = _common(windows, "below their levels")
    p_low, p_high, p_said = _common(practice, "at least solubility in practice")
    words = " ".join(filter(None, (said, p_said))) or "One pH can serve all metals that are listed."
    return Conflict(low, high, MappingProxyType(windows), p_low, p_high, bool(said or p_said), words)


def _common(windows: Mapping[str, tuple[float, float]], purpose: str) -> tuple[float, float, str]:
    """Common part of windows, and the words where there is none."""
    if not windows:
        return np.nan, np.nan, ""
    never = [name for name, (low, _) in windows.items() if np.isnan(low)]
    if never:
        return np.nan, np.nan, (f"By these constants no pH brings {_listed(never)} below its level by hydroxide "
                                "alone: test it, "
                                "or plan for sulfide, carbonate or another treatment.")
    low, high = max(w[0] for w in windows.values()), min(w[1] for w in windows.values())
    if low <= high:
        return low, high, ""
    late = [f"{n} at least {w[0]:.1f}" for n, w in windows.items() if w[0] > high]
    early = [f"{n} at most {w[1]:.1f}" for n, w in windows.items() if w[1] < low]
    return np.nan, np.nan, (f"No single pH serves all metals {purpose}: {_listed([*late, *early])}. Treat in two "
                            "stages with "
                            "a clarifier between, or keep the streams apart; after the higher pH the discharge must be "
                            "brought back.")


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
