"""Calcium carbonate and magnesium hydroxide in the works: how much settles, or dissolves, until the water rests.

Each mole of calcium carbonate takes two equivalents of alkalinity, one carbon and one calcium; each mole of magnesium
hydroxide two equivalents and one magnesium. Both follow from the pH alone by the proton balance, so one bounded root
in pH gives the calcium carbonate, and the ionic strength and the pairing of magnesium follow it round by round.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10, exp10
from aquabuf.assess.plant.stream import Stream, strength_per_mol
from aquabuf.chem.activity import log_gamma_davies
from aquabuf.chem.fresh import k_water
from aquabuf.chem.solids import K_PAIR_CAOH, K_PAIR_MGOH, ksp_brucite
from aquabuf.engine.balance import alkalinity_at, protons_lost
from aquabuf.engine.precipitate import Pairing, pairing, saturation_index
from aquabuf.engine.state import State
from aquabuf.errors import InputError

__all__ = ["BRUCITE", "BRUCITE_FORMULA", "CALCITE", "CALCITE_FORMULA", "Rest", "brucite_index", "dissolvable_calcite",
           "hydroxide_pair_share", "settled"]

Array = NDArray[np.float64]

CALCITE_FORMULA, BRUCITE_FORMULA = "CaCO3", "Mg(OH)2"
CALCITE: Mapping[str, float] = MappingProxyType({"alkalinity": 2.0, "carbon": 1.0, "calcium": 1.0})
BRUCITE: Mapping[str, float] = MappingProxyType({"alkalinity": 2.0, "magnesium": 1.0})
HYDROXIDE_PAIRS = MappingProxyType({"calcium": K_PAIR_CAOH, "magnesium": K_PAIR_MGOH})

PH_REACH = (3.0, 12.8)    # of the root for calcium carbonate
PH_WIDE = (0.0, 15.0)     # of the root without it
PH_TOLERANCE = 1e-12
LOOSE, LEAST_LOOSE = 1e-3, 4e-8  # of the saturation ratio in the first round, and what of it is left in the last ones
NO_SURPLUS = 1e-18        # eq/L
BENT_FROM = 1.0           # saturation index from which it counts by itself
NEAR, NEARER = 0.5, 0.15  # pH around the root of the round before, and how that shrinks
SURE = 3                  # rounds before the end may be found
SETTLED = 1e-12           # change of an amount from round to round [mol/L]
ROUNDS, STEPS = 40, 90
EMPTY = -30.0             # saturation index of water with no calcium or no carbonate left


@dataclass(frozen=True, slots=True, kw_only=True)
class Rest:
    """Where precipitation stops: at a saturation ratio, or once so little is left, whichever comes first.

    brucite_ratio None : no magnesium hydroxide forms. Ratio 1 and nothing left over is equilibrium.
    """

    calcite_ratio: float = 1.0
    brucite_ratio: float | None = 1.0
    least_calcium_mol_l: float = 0.0
    least_magnesium_mol_l: float = 0.0

    def __post_init__(self) -> None:
        for name, ratio in (("calcium carbonate", self.calcite_ratio), ("magnesium hydroxide", self.brucite_ratio)):
            if ratio is not None and not 1.0 <= ratio <= 1000.0:
                raise InputError(f"the saturation ratio that {name} settles to must be 1 (equilibrium) to 1000; found "
                                 f"{ratio:g}. Give how many times saturation stays in the water.")
        for name, least in (("calcium", self.least_calcium_mol_l), ("magnesium", self.least_magnesium_mol_l)):
            if not 0.0 <= least < 0.1:
                raise InputError(f"the {name} that settling leaves must be 0 or more and below 0.1 mol/L; found "
                                 f"{least:g}. Give 0 for equilibrium.")


def settled(stream: Stream, rest: Rest) -> Stream:
    """The water after calcium carbonate and magnesium hydroxide have settled out of it; nothing dissolves.

    A row whose calcium is not known becomes unknown; magnesium that is not known counts as none.
    """
    x, y = _in_balance(stream, rest, _amounts)
    after = stream.added(CALCITE, -x, {CALCITE_FORMULA: -1.0})
    return after if rest.brucite_ratio is None else after.added(BRUCITE, -y, {BRUCITE_FORMULA: -1.0})


def dissolvable_calcite(stream: Stream) -> Array:
    """Calcium carbonate that dissolves until the closed water is saturated; 0 where it is already. [mol/L]"""
    still = Rest(brucite_ratio=None)
    return 0.0 - _in_balance(stream, still, _dissolving)[0]


def brucite_index(stream: Stream) -> Array:
    """log10 of saturation with magnesium hydroxide, magnesium pairs of the engine counted; nan without any. [-]"""
    state = stream.water().state
    with np.errstate(divide="ignore"):
        at_rest = np.log10(_brucite_constant(state, 1.0) * state.h**2)
        return np.log10(stream.total("magnesium") * _free_magnesium(pairing(state))) - at_rest


def hydroxide_pair_share(stream: Stream, metal: str) -> Array:
    """Share of calcium or magnesium that is paired with hydroxide at the water's pH, other pairs apart. [-]

    The engine leaves these pairs out; closed form with constants of 25 °C. Such a share more of the metal stays
    dissolved, and half a mole of alkalinity for each.
    """
    state = stream.water().state
    c = state.conditions
    gamma_1, gamma_2 = (exp10(log_gamma_davies(z, c.ionic_strength_mol_l, c.debye_huckel_a)) for z in (1, 2))
    paired = HYDROXIDE_PAIRS[metal] * k_water(c.t_c) / state.h * gamma_2 / gamma_1
    return paired / (1.0 + paired)


# ---------------------------------------------------------------- rounds of ionic strength


def _in_balance(stream: Stream, rest: Rest, amounts: Callable[[_Bath, Array, int], tuple[Array, Array]],
                ) -> tuple[Array, Array]:
    """Calcium carbonate and magnesium hydroxide that leave, at the ionic strength that this makes. [mol/L]"""
    calcium = stream.total("calcium")
    x, y = (np.full(stream.rows, np.nan) for _ in range(2))
    rows = np.flatnonzero((stream.water().status >= 0) & np.isfinite(calcium))
    if not rows.size:
        return x, y
    raw = stream.take(rows)
    share, near = np.ones(rows.size), np.full(rows.size, np.nan)
    found = (np.zeros(rows.size), np.zeros(rows.size))
    for turn in range(ROUNDS):
        before = found
        taken = strength_per_mol(CALCITE) * before[0] + strength_per_mol(BRUCITE) * before[1]
        now = raw.replaced(ionic_strength_mol_l=np.maximum(raw.ionic_strength_mol_l - taken, 0.0))
        bath = _Bath.of(now, rest, share)
        found = amounts(bath, near, turn)
        share = _free_magnesium(pairing(bath.after(*found)))
        if turn > SURE and max(np.abs(a - b).max() for a, b in zip(found, before, strict=True)) < SETTLED:
            break
    x[rows], y[rows] = found
    return x, y


def _free_magnesium(pairs: Pairing) -> Array:
    """Share of magnesium that is in no pair with carbonate, bicarbonate or sulfate; 1 where that is not known. [-]"""
    free = np.ones(pairs.state.h.shape)
    total = pairs.solution.metals.get("magnesium", np.zeros(pairs.rows.size))
    some = total > 0.0
    free[pairs.rows[some]] = pairs.spectators.metals["magnesium"][some] / total[some] if some.any() else 1.0
    return free


def _brucite_constant(state: State, free_share: Array | float) -> Array:
    """Magnesium total over h squared in water saturated with magnesium hydroxide. [mol/L per (mol/kg)^2]"""
    c = state.conditions
    gamma_2 = exp10(log_gamma_davies(2, c.ionic_strength_mol_l, c.debye_huckel_a))
    return ksp_brucite(c.t_c) / (gamma_2 * k_water(c.t_c) ** 2) * c.density_kg_l / free_share


# ---------------------------------------------------------------- one round, ionic strength held


@dataclass(frozen=True, slots=True, eq=False)
class _Bath:
    """Water that may precipitate, at one ionic strength; amounts follow from its pH. Concentrations in mol/L."""

    state: State
    rest: Rest
    brucite: Array        # magnesium total over h squared at rest
    calcium: Array
    magnesium: Array

    @classmethod
    def of(cls, stream: Stream, rest: Rest, free_share: Array) -> _Bath:
        state = stream.water().state
        return cls(state, rest, (rest.brucite_ratio or 1.0) * _brucite_constant(state, free_share),
                   stream.total("calcium"), np.nan_to_num(stream.total("magnesium")))

    def take(self, rows: NDArray[np.intp]) -> _Bath:
        s = self.state
        c = s.conditions
        part = replace(c, _cache={}, **{n: getattr(c, n)[rows] for n in c.__dataclass_fields__ if n != "_cache"})
        acids = tuple(replace(d, total=d.total[rows]) for d in s.acids)
        state = State(part, acids, {n: v[rows] for n, v in s.ions.items()}, s.h[rows], s.dic[rows], s.alkalinity[rows],
                      s.residual[rows], s.status[rows])
        return _Bath(state, self.rest, self.brucite[rows], self.calcium[rows], self.magnesium[rows])

    def brucite_formed(self, h: Array) -> Array:
        """Magnesium hydroxide that has formed where the hydrogen variable is `h`."""
        if self.rest.brucite_ratio is None:
            return np.zeros(h.shape)
        most = np.maximum(self.magnesium - self.rest.least_magnesium_mol_l, 0.0)
        return np.clip(self.magnesium - self.brucite * h * h, 0.0, most)

    def calcite_formed(self, h: Array) -> Array:
        """Calcium carbonate that must have formed for the proton balance to close at `h`; negative if dissolved."""
        s = self.state
        lost = protons_lost(s.carbonate_fractions(h))
        return (s.alkalinity - 2.0 * self.brucite_formed(h) - alkalinity_at(s.system(), h)) / (2.0 - lost)

    def surplus(self, h: Array, x: Array) -> Array:
        """Alkalinity left over at `h` once `x` of calcium carbonate has formed; falls with pH. [eq/L]"""
        s = self.state
        there = alkalinity_at(s.system(dic=s.dic - x), h)
        return s.alkalinity - 2.0 * x - 2.0 * self.brucite_formed(h) - there

    def at(self, h: Array, x: Array, y: Array) -> State:
        """The water after `x` of calcium carbonate and `y` of magnesium hydroxide, its hydrogen variable being `h`."""
        s = self.state
        ions = s.ions | {"calcium": self.calcium - x, "magnesium": self.magnesium - y}
        return replace(s, h=h, dic=s.dic - x, alkalinity=s.alkalinity - 2.0 * (x + y), ions=ions)

    def after(self, x: Array, y: Array) -> State:
        """The water once `x` and `y` have left."""
        return self.at(exp10(-self.ph_with(x)), x, y)

    def ph_with(self, x: Array) -> Array:
        """-log10 h once `x` has formed and magnesium hydroxide rests."""
        low, high = (np.full(x.shape, v) for v in PH_WIDE)
        return _root(lambda p: self.surplus(exp10(-p), x), low, high, np.full(x.shape, np.nan), 0, NO_SURPLUS)

    def beyond(self, p: Array, near: Array, side: float) -> NDArray[np.intp]:
        """Rows known to reach rest (`near` is finite), and those that are above it (side 1) or below (-1) at `p`."""
        known = np.isfinite(near)
        open_rows = np.flatnonzero(~known)
        if open_rows.size:
            known[open_rows] = side * self.take(open_rows).index(p[open_rows]) > 0.0
        return np.flatnonzero(known)

    def index(self, p: Array) -> Array:
        """Saturation index of calcite over its rest where -log10 h is `p`; rises with p. [-]"""
        h = exp10(-p)
        x = self.calcite_formed(h)
        left = np.minimum(self.calcium, self.state.dic) - x
        some = left > 0.0
        index = saturation_index(pairing(self.at(h, np.where(some, x, 0.0), self.brucite_formed(h))))
        return np.where(some & np.isfinite(index), index, EMPTY) - np.log10(self.rest.calcite_ratio)

    def excess(self, p: Array) -> Array:
        """Saturation ratio over its rest, less 1; logarithmic far above. Nearly straight in p, signed as `index`."""
        index = LN10 * self.index(p)
        bend = LN10 * BENT_FROM
        return np.expm1(np.minimum(index, bend)) + np.exp(bend) * np.maximum(index - bend, 0.0)


def _amounts(bath: _Bath, near: Array, turn: int) -> tuple[Array, Array]:
    """What settles; calcium carbonate only where the water is above its rest once the magnesium hydroxide is out.

    near : -log10 h at the rest of calcium carbonate as far as it is known, nan where not; changed in place.
    turn : number of the round; the first ones need not be exact.
    """
    x = np.zeros(bath.calcium.shape)
    start = bath.ph_with(x)
    over = bath.beyond(start, near, 1.0)
    if over.size:
        part = bath.take(over)
        near[over] = _root(part.excess, np.minimum(PH_REACH[0], start[over] - 1.0), start[over], near[over], turn)
        most = np.maximum(part.calcium - bath.rest.least_calcium_mol_l, 0.0)
        x[over] = np.clip(part.calcite_formed(exp10(-near[over])), 0.0, most)
    return x, bath.brucite_formed(exp10(-bath.ph_with(x)))


def _dissolving(bath: _Bath, near: Array, turn: int) -> tuple[Array, Array]:
    """What dissolves, as a negative amount; `near` and `turn` as in `_amounts`."""
    x = np.zeros(bath.calcium.shape)
    start = -np.log10(bath.state.h)
    under = bath.beyond(start, near, -1.0)
    if under.size:
        part = bath.take(under)
        near[under] = _root(part.excess, start[under], np.maximum(PH_REACH[1], start[under] + 1.0), near[under], turn)
        x[under] = np.minimum(part.calcite_formed(exp10(-near[under])), 0.0)
    return x, np.zeros(x.shape)


def _root(f: Callable[[Array], Array], low: Array, high: Array, near: Array, turn: int, loose: float = LOOSE) -> Array:
    """Root of each row between `low` and `high`: inverse quadratic steps where they are safe, else halving.

    near : where it was in the round before, nan where that is not known. Chandrupatla 1997, Adv. Eng. Softw. 28:145.
    Rows with one sign at both ends give the end nearer to zero.
    """
    enough, reach = loose * max(1e-2**turn, LEAST_LOOSE), NEAR * NEARER**turn
    known = np.isfinite(near)
    a, b = np.where(known, np.fmin(near + reach, high), high), np.where(known, np.fmax(near - reach, low), low)
    fa, fb = f(a), f(b)
    if (outside := known & (fa * fb > 0.0)).any():
        known &= ~outside
        a, b = np.where(outside, high, a), np.where(outside, low, b)
        fa, fb = f(a), f(b)
    c, fc = a, fa
    with np.errstate(invalid="ignore", divide="ignore"):
        t = np.clip(np.where(known & (fa != fb), fa / (fa - fb), 0.5), 1e-3, 1.0 - 1e-3)
    for _ in range(STEPS):
        x = a + t * (b - a)
        fx = f(x)
        same = np.sign(fx) == np.sign(fa)
        b, fb, c, fc = np.where(same, b, a), np.where(same, fb, fa), np.where(same, a, b), np.where(same, fa, fb)
        a, fa = x, fx
        width = np.abs(b - a)
        if ((width < 2.0 * PH_TOLERANCE) | (np.minimum(np.abs(fa), np.abs(fb)) <= enough)).all():
            break
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
            quick = (phi**2 < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
            step = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
            least = np.minimum(PH_TOLERANCE / width, 0.5)
        t = np.clip(np.where(quick & np.isfinite(step), step, 0.5), least, 1.0 - least)
    return np.where(np.abs(fa) <= np.abs(fb), a, b)
