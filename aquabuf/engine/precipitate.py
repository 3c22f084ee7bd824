"""Calcium carbonate: saturation, and how much would precipitate or dissolve.

Fresh rows count the ion pairs of calcium, magnesium, sodium and potassium with bicarbonate, carbonate and sulfate.
Marine constants are stoichiometric: pairs are inside them. Carbonate species of a `State` itself are sums of free and
paired ions; here the measured pH and alkalinity (or carbon) are kept and the pairs are solved with them.
Phosphate and hydroxide pairs are left out. Rows are one-dimensional.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import exp10
from aquabuf.chem import activity, fresh, marine
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.state import State

__all__ = ["MINERALS", "Pairing", "pairing", "precipitation_potential", "saturation_index", "solubility_ratio"]

Array = NDArray[np.float64]

MINERALS = {
    "calcite": (fresh.ksp_calcite, marine.ksp_calcite_sea),
    "aragonite": (fresh.ksp_aragonite, marine.ksp_aragonite_sea),
    "vaterite": (fresh.ksp_vaterite, None),
}
METALS = ("calcium", "magnesium", "sodium", "potassium")
PAIRS = {  # metal, ligand: constant, charge of the pair
    ("calcium", "bicarbonate"): (fresh.k_pair_cahco3, 1), ("calcium", "carbonate"): (fresh.k_pair_caco3, 0),
    ("magnesium", "bicarbonate"): (fresh.k_pair_mghco3, 1), ("magnesium", "carbonate"): (fresh.k_pair_mgco3, 0),
    ("sodium", "bicarbonate"): (fresh.k_pair_nahco3, 0), ("sodium", "carbonate"): (fresh.k_pair_naco3, -1),
    ("calcium", "sulfate"): (fresh.k_pair_caso4, 0), ("magnesium", "sulfate"): (fresh.k_pair_mgso4, 0),
    ("sodium", "sulfate"): (fresh.k_pair_naso4, -1), ("potassium", "sulfate"): (fresh.k_pair_kso4, -1),
}
CHARGE = {"calcium": 2, "magnesium": 2, "sodium": 1, "potassium": 1, "bicarbonate": -1, "carbonate": -2, "sulfate": -2}
PAIR_TOLERANCE = 1e-11  # relative change of free calcium
PAIR_ROUNDS = 200
DAMP_FROM = 15           # rounds after which strongly paired waters are damped so that they settle
FIRST_TOLERANCE = 1e-5  # of the saturation index where the spectators are held
ROOT_TOLERANCE = 1e-9   # of the pH where they follow
INDEX_TOLERANCE = 1e-8  # of the saturation index there
SECANT_ROUNDS = 40
LONGEST_STEP = 1.0      # of pH
SLOPE_STEP = 1e-4       # of pH
ROOT_ROUNDS = 80
SEARCH_PH = (1.0, 14.0)
ROUNDING = 1e-9         # of alkalinity; carbonate below it is the difference of two equal numbers
NOTHING = 1e-30         # mol/L; stands for "none left" under a logarithm


@dataclass(frozen=True, slots=True, eq=False)
class _Solution:
    """Conditional constants in mol/L of one set of rows, and the totals that pairs draw on."""

    pair_k: dict[tuple[str, str], Array]
    metals: dict[str, Array]
    sulfate: Array
    k1: Array
    k2: Array

    def take(self, rows: NDArray[np.intp]) -> _Solution:
        if rows.size == self.k1.size:
            return self
        return _Solution({n: k[rows] for n, k in self.pair_k.items()}, {n: m[rows] for n, m in self.metals.items()},
                         self.sulfate[rows], self.k1[rows], self.k2[rows])


@dataclass(frozen=True, slots=True, eq=False)
class _Spectators:
    """Free concentration of what pairs but is not calcium or carbonate. [mol/L]"""

    metals: dict[str, Array]
    sulfate: Array

    def take(self, rows: NDArray[np.intp]) -> _Spectators:
        return _Spectators({n: m[rows] for n, m in self.metals.items()}, self.sulfate[rows])

    def put(self, rows: NDArray[np.intp], values: _Spectators) -> None:
        self.sulfate[rows] = values.sulfate
        for n, m in self.metals.items():
            m[rows] = values.metals[n]


@dataclass(frozen=True, slots=True, eq=False)
class Pairing:
    """Free ions of the rows that hold both calcium and carbonate, at the water's own pH and alkalinity.

    rows : which rows of the state; the other arrays have one value for each of them. [mol/L]
    """

    state: State
    rows: NDArray[np.intp]
    solution: _Solution
    spectators: _Spectators
    calcium: Array
    carbonate: Array
    dic: Array


def pairing(state: State) -> Pairing:
    """Solve the ion pairs once; saturation and precipitation of every mineral follow from it."""
    calcium = state.ions.get("calcium", np.full(state.h.shape, np.nan))
    other_alk = alkalinity_at(state.system(dic=np.zeros(state.h.shape)), state.h)
    with np.errstate(invalid="ignore"):
        carbonate_alk = state.alkalinity - other_alk
        some = carbonate_alk > ROUNDING * (np.abs(state.alkalinity) + np.abs(other_alk))
        rows = np.flatnonzero((calcium > 0.0) & np.isfinite(calcium) & some)
    s, h = _solution(state).take(rows), state.h[rows]
    amount = carbonate_alk[rows]
    n = rows.size
    out = Pairing(state, rows, s, _Spectators({m: np.zeros(n) for m in s.metals if m != "calcium"}, np.zeros(n)),
                  *(np.full(n, np.nan) for _ in range(3)))
    active, now = np.arange(n), _Spectators({m: v for m, v in s.metals.items() if m != "calcium"}, s.sulfate)
    before = np.full(n, np.inf)
    for turn in range(PAIR_ROUNDS):
        free_calcium, bicarbonate, dic = _calcium_and_carbonate(s, h, amount, now, 0.0, 2.0, None)
        now = _follow(s, h, free_calcium, bicarbonate, now, damped=turn >= DAMP_FROM)
        settled = np.abs(free_calcium - before) <= PAIR_TOLERANCE * free_calcium
        if settled.any():
            done = active[settled]
            out.calcium[done], out.dic[done] = free_calcium[settled], dic[settled]
            out.carbonate[done] = (s.k2 / h * bicarbonate)[settled]
            out.spectators.put(done, now.take(settled))
        keep = np.flatnonzero(~settled)
        if not keep.size:
            break
        s, now, h, amount, active = s.take(keep), now.take(keep), h[keep], amount[keep], active[keep]
        before = free_calcium[keep]
    return out


def _solution(state: State) -> _Solution:
    c = state.conditions
    gamma = _gammas(state)
    rho, is_fresh = c.density_kg_l, ~c.is_marine
    totals = {d.acid.name: d.total for d in state.acids}
    metals = {m: _known(state.ions.get(m, np.zeros(rho.shape))) for m in METALS if m in state.ions or m == "calcium"}
    sulfate = _known(totals.get("sulfate", np.zeros(rho.shape)))
    pair_k = {}
    for (metal, ligand), (k, z) in PAIRS.items():
        if metal in metals:
            strength = gamma[CHARGE[metal]] * gamma[-CHARGE[ligand]] / gamma[abs(z)]
            pair_k[metal, ligand] = np.where(is_fresh, k(c.t_c) * strength / rho, 0.0)
    return _Solution(pair_k, metals, sulfate, c.k1, c.k2)


def _known(total: Array) -> Array:
    """A total with zero where it is not known; pairs of an unknown ion cannot be counted."""
    return np.where(np.isfinite(total), total, 0.0)


def _gammas(state: State) -> dict[int, Array]:
    """Activity coefficients by number of charges. [-]"""
    i, a = state.conditions.ionic_strength_mol_l, state.conditions.debye_huckel_a
    return {0: exp10(activity.log_gamma_neutral(i))} | {
        z: exp10(activity.log_gamma_davies(z, i, a)) for z in (1, 2)}


def _solubility(state: State, mineral: str) -> Array:
    """Conditional solubility product. [(mol/L)^2]"""
    c = state.conditions
    gamma = exp10(activity.log_gamma_davies(2, c.ionic_strength_mol_l, c.debye_huckel_a))
    return _tabulated(state, mineral) * np.where(c.is_marine, 1.0, gamma**-2.0) * c.density_kg_l**2


def _tabulated(state: State, mineral: str) -> Array:
    """Solubility product on the scale of its source: activities in fresh rows, concentrations in marine ones."""
    c = state.conditions
    of_fresh, of_sea = MINERALS[mineral]
    ksp = of_fresh(c.t_c)
    if c.is_marine.any():
        at_sea = np.full(ksp.shape, np.nan) if of_sea is None else of_sea(c.t_c, c.salinity)
        ksp = np.where(c.is_marine, at_sea, ksp)
    return ksp


def solubility_ratio(state: State, mineral: str, other: str) -> Array:
    """Solubility product of `mineral` over that of `other` at the water's conditions. [-]"""
    return _tabulated(state, mineral) / _tabulated(state, other)


def _follow(s: _Solution, h: Array, calcium: Array, bicarbonate: Array, now: _Spectators, *, damped: bool,
            ) -> _Spectators:
    """Spectators in balance with the given free calcium and bicarbonate, one round; damped: half the way there."""
    ligands = {"bicarbonate": bicarbonate, "carbonate": s.k2 / h * bicarbonate, "sulfate": now.sulfate}
    metals = {m: s.metals[m] / _bound(s, ligands, metal=m) for m in now.metals}
    sulfate = s.sulfate / _bound(s, metals | {"calcium": calcium}, ligand="sulfate")
    if damped:
        metals = {m: 0.5 * (v + now.metals[m]) for m, v in metals.items()}
        sulfate = 0.5 * (sulfate + now.sulfate)
    return _Spectators(metals, sulfate)


def _calcium_and_carbonate(
    s: _Solution, h: Array, amount: Array, now: _Spectators, co2_weight: float, carbonate_weight: float,
    gap: Array | None,
) -> tuple[Array, Array, Array]:
    """Free calcium, free bicarbonate and total carbon, the spectators held. [mol/L]

    co2_weight CO2 + HCO3- + carbonate_weight CO3-- (pairs included) equals `amount`. The calcium total is the
    water's own, or follows the carbon at a fixed `gap` as when the mineral dissolves or precipitates.
    Free bicarbonate is amount / (d0 + d1 Ca) and total carbon is bicarbonate times (u0 + u1 Ca); the calcium balance
    Ca (1 + sulfate pairs) + u1 Ca HCO3 = total is then a quadratic in free calcium with one positive root.
    """
    q, r = h / s.k1, s.k2 / h
    f1, f2 = _bound(s, now.metals, ligand="bicarbonate"), _bound(s, now.metals, ligand="carbonate")
    b1, b2 = s.pair_k["calcium", "bicarbonate"], r * s.pair_k["calcium", "carbonate"]
    d0, d1 = co2_weight * q + f1 + carbonate_weight * r * f2, b1 + carbonate_weight * b2
    u0, u1 = q + f1 + r * f2, b1 + b2
    s0 = 1.0 + s.pair_k["calcium", "sulfate"] * now.sulfate
    if gap is None:
        b, c = s0 * d0 + u1 * amount - s.metals["calcium"] * d1, -s.metals["calcium"] * d0
    else:
        b, c = s0 * d0 - gap * d1, -(gap * d0 + amount * u0)
    a = np.maximum(s0 * d1, NOTHING)
    root = -0.5 * (b + np.copysign(np.sqrt(np.maximum(b * b - 4.0 * a * c, 0.0)), b))
    calcium = np.maximum(np.where(root < 0.0, c / root, root / a), NOTHING)
    bicarbonate = amount / (d0 + d1 * calcium)
    return calcium, bicarbonate, bicarbonate * (u0 + u1 * calcium)


def _bound(s: _Solution, partners: dict[str, Array], *, metal: str = "", ligand: str = "") -> Array:
    """Total over free concentration of one metal or ligand that pairs with `partners`. [-]"""
    total = np.ones(s.k1.shape)
    for (m, a), k in s.pair_k.items():
        if (m == metal and a in partners) or (a == ligand and m in partners):
            total += k * partners[a if m == metal else m]
    return total


def saturation_index(pairs: Pairing, mineral: str = "calcite") -> Array:
    """log10 of the ion activity product over the solubility product, at the water's own pH and alkalinity. [-]

    One value per row of the state; nan where calcium is missing or zero, or carbonate alkalinity is not above zero.
    Sources: Plummer & Busenberg 1982 (fresh, with pairs); Mucci 1983 (salinity 1 and above).
    """
    out = np.full(pairs.state.h.shape, np.nan)
    ksp = _solubility(pairs.state, mineral)[pairs.rows]
    out[pairs.rows] = np.log10(pairs.calcium * pairs.carbonate / ksp)
    return out


def precipitation_potential(pairs: Pairing, mineral: str = "calcite") -> tuple[Array, Array]:
    """Mineral that precipitates (positive) or dissolves (negative) to equilibrium [mol/L], and the meter pH then.

    Closed water at constant temperature and ionic strength: each mole takes one of calcium and of carbon and two
    equivalents of alkalinity. Along that line saturation rises with pH, so one bounded root gives the answer; the
    spectators are held while it is found and follow after, until the pH no longer moves.
    """
    state, rows = pairs.state, pairs.rows
    out, ph_then = np.full(state.h.shape, np.nan), np.full(state.h.shape, np.nan)
    s, now = pairs.solution, pairs.spectators
    ksp = _solubility(state, mineral)[rows]
    others = state.system(dic=np.zeros(state.h.shape)).take(rows)
    fixed, gap = state.alkalinity[rows] - 2.0 * pairs.dic, s.metals["calcium"] - pairs.dic
    path = _Path(s, now, others, fixed, gap, ksp)
    start = -np.log10(state.h[rows])
    x, dic = _follow_secant(path, start, np.arange(rows.size))
    left = np.flatnonzero(np.isnan(x))
    if left.size:  # a first root between fixed ends, from which the secant cannot miss
        x[left], found = _root_along(path.take(left), start[left])
        left = left[found]
        x[left], dic[left] = _follow_secant(path.take(left), x[left], np.arange(left.size))
    out[rows] = pairs.dic - dic
    ph_then[rows] = np.where(np.isfinite(dic), x, np.nan) - np.log10(state.conditions.activity_per_h[rows])
    return out, ph_then


@dataclass(frozen=True, slots=True, eq=False)
class _Path:
    """Water on its way to equilibrium with the mineral: what stays fixed, and the spectators held for now."""

    solution: _Solution
    spectators: _Spectators
    others: System
    fixed: Array  # alkalinity less twice the carbon [eq/L]
    gap: Array    # calcium less carbon [mol/L]
    ksp: Array

    def take(self, rows: NDArray[np.intp]) -> _Path:
        if rows.size == self.ksp.size:
            return self
        return _Path(self.solution.take(rows), self.spectators.take(rows), self.others.take(rows), self.fixed[rows],
                     self.gap[rows], self.ksp[rows])

    def at(self, x: Array) -> tuple[Array, Array, Array]:
        """Free calcium, free bicarbonate and total carbon where -log10 h is `x`."""
        h = exp10(-x)
        amount = np.maximum(alkalinity_at(self.others, h) - self.fixed, NOTHING)
        return _calcium_and_carbonate(self.solution, h, amount, self.spectators, 2.0, 0.0, self.gap)

    def index(self, x: Array) -> Array:
        """Saturation index where -log10 h is `x`; rises with x."""
        calcium, bicarbonate, _ = self.at(x)
        return self._index_of(calcium, bicarbonate, x)

    def _index_of(self, calcium: Array, bicarbonate: Array, x: Array) -> Array:
        return np.log10(calcium * self.solution.k2 / self.ksp * bicarbonate) + x

    def followed(self, x: Array, *, damped: bool) -> tuple[Array, Array, _Path]:
        """Saturation index and total carbon at `x`, and the path with the spectators in balance there."""
        calcium, bicarbonate, dic = self.at(x)
        now = _follow(self.solution, exp10(-x), calcium, bicarbonate, self.spectators, damped=damped)
        return self._index_of(calcium, bicarbonate, x), dic, replace(self, spectators=now)


def _follow_secant(path: _Path, x: Array, rows: NDArray[np.intp]) -> tuple[Array, Array]:
    """Root of the saturation index by secant steps, the spectators following each one; total carbon there.

    nan where it does not settle. `rows` numbers the rows of `path`.
    """
    root, dic = np.full(x.shape, np.nan), np.full(x.shape, np.nan)
    f, _, path = path.followed(x, damped=False)
    slope = (path.index(x + SLOPE_STEP) - path.index(x)) / SLOPE_STEP
    for turn in range(SECANT_ROUNDS):
        step = np.clip(f / slope, -LONGEST_STEP, LONGEST_STEP)
        x = x - step
        f_new, carbon, path = path.followed(x, damped=turn >= DAMP_FROM)
        settled = (np.abs(step) < ROOT_TOLERANCE) & (np.abs(f_new) < INDEX_TOLERANCE)
        root[rows[settled]], dic[rows[settled]] = x[settled], carbon[settled]
        with np.errstate(divide="ignore", invalid="ignore"):
            secant = (f - f_new) / step
        slope = np.where((np.abs(step) > SLOPE_STEP) & (secant > 0.1 * slope), secant, slope)
        keep = np.flatnonzero(~settled & np.isfinite(f_new))
        if not keep.size:
            break
        path, x, f, slope, rows = path.take(keep), x[keep], f_new[keep], slope[keep], rows[keep]
    return root, dic


def _root_along(path: _Path, x: Array) -> tuple[Array, NDArray[np.bool_]]:
    """Where the saturation index of each row is zero, from a first point: march, then close in.

    The step doubles until the sign turns; then regula falsi with the Illinois weights. Rows end on their own.
    """
    f = path.index(x)
    near, f_near = x.copy(), f.copy()
    far, f_far = near.copy(), f_near.copy()
    rows = np.flatnonzero(np.isfinite(f) & (f != 0.0))
    step = np.clip(-0.6 * f[rows], -2.0, 2.0)
    while rows.size:
        near[rows], f_near[rows] = far[rows], f_far[rows]
        far[rows] = np.clip(far[rows] + step, *SEARCH_PH)
        f_far[rows] = path.take(rows).index(far[rows])
        ahead = (f_far[rows] * f[rows] > 0.0) & (far[rows] > SEARCH_PH[0]) & (far[rows] < SEARCH_PH[1])
        rows, step = rows[ahead], 2.0 * step[ahead]
    found = np.isfinite(f) & (f_far * f_near <= 0.0)
    x = far.copy()
    rows = np.flatnonzero(found & (f != 0.0))
    path = path.take(rows)
    for _ in range(ROOT_ROUNDS):
        if not rows.size:
            break
        a, b, f_a, f_b = near[rows], far[rows], f_near[rows], f_far[rows]
        new = np.clip(b - f_b * (b - a) / (f_b - f_a), np.minimum(a, b), np.maximum(a, b))
        f_new = path.index(new)
        crossed = f_new * f_b <= 0.0
        near[rows] = np.where(crossed, b, a)
        f_near[rows] = np.where(crossed, f_b, 0.5 * f_a)
        far[rows], f_far[rows] = new, f_new
        x[rows] = new
        keep = np.flatnonzero((np.abs(f_new) > FIRST_TOLERANCE) & (np.abs(new - b) > FIRST_TOLERANCE * 0.01))
        rows, path = rows[keep], path.take(keep)
    found[rows] = False
    return x, found
