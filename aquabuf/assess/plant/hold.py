"""Holding a pH: what buffer to add for a wanted pH and buffer intensity.

A buffer is a conjugate pair and the two reagents that make it (table `buffer_pairs.csv`). The total follows from the
intensity, the split between the reagents from the proton balance of the mixed water, and the ionic strength of both
from what was added, round by round. Volumes of the reagents are neglected.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import LN10, as_rows, common_shape
from aquabuf.assess.plant.steps.words import brief
from aquabuf.chem.acids import acid_named
from aquabuf.chem.products import molar_mass, zero_level_charge
from aquabuf.engine.balance import fractions, moments, protons_lost
from aquabuf.engine.buffer import EFFECTIVE_RANGE
from aquabuf.engine.build import SUFFIX
from aquabuf.engine.conditions import LIMITS
from aquabuf.engine.state import CARBONATE_FORMS, State
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["BufferPair", "Buffering", "Reagent", "buffer_pairs", "buffer_uses", "buffer_words", "hold_ph", "ranked",
           "why_not"]

Array = NDArray[np.float64]

CARBONATE = "carbonate"            # name of inorganic carbon among the acids
CARBONATE_FIRST = ("drinking water",)  # uses in which bicarbonate leads whatever its total
ROUNDS = 100
SETTLED = 1e-13                    # mol/L of ionic strength
STRENGTH_REACH = LIMITS["ionic_strength_mol_l"][3]  # beyond it the activity equation is not asked
ON_EDGE = 1e-9                     # pH within which the edge of a range belongs to it


@dataclass(frozen=True, slots=True, kw_only=True)
class Reagent:
    """One chemical of a pair as a pure substance; `parts` are moles of acid totals and strong ions per mole."""

    name: str
    formula: str
    parts: Mapping[str, float]

    @property
    def molar_mass_g(self) -> float:
        """Molar mass of the formula. [g/mol]"""
        return molar_mass(self.formula)

    @property
    def alkalinity(self) -> float:
        """Alkalinity per mole: charge of the strong ions, and of acids at their zero level. [eq/mol]"""
        return sum(n * zero_level_charge(name) for name, n in self.parts.items() if name != CARBONATE)


@dataclass(frozen=True, slots=True, kw_only=True)
class BufferPair:
    """One step of a weak acid as a buffer: `step` counts from 1 for the first proton; species from HnA to A."""

    acid: str
    step: int
    species: tuple[str, ...]
    charge_full: int
    zero_level: int
    acid_reagent: Reagent
    base_reagent: Reagent
    uses: tuple[str, ...]
    against: str
    mark: str
    source: str

    @property
    def label(self) -> str:
        """The pair as acid/base."""
        return f"{self.species[self.step - 1]}/{self.species[self.step]}"

    def of_acid(self, reagent: Reagent) -> float:
        """Moles of the weak acid, in whatever form, per mole of reagent."""
        return reagent.parts.get(self.acid, 0.0)

    def strong_ions(self, reagent: Reagent) -> float:
        """Ionic strength of the strong ions of one mole per liter. [mol/L]"""
        return 0.5 * sum(n * zero_level_charge(ion) ** 2 for ion, n in reagent.parts.items() if ion != self.acid)


@cache
def buffer_pairs() -> tuple[BufferPair, ...]:
    """The shipped pairs, in the order of the table."""
    return tuple(_pair(row) for row in read_table("buffer_pairs"))


def _pair(row: Mapping[str, str]) -> BufferPair:
    if row["acid"] == CARBONATE:
        known: dict[str, Any] = {"species": CARBONATE_FORMS, "charge_full": 0, "zero_level": 0}
    else:
        acid = acid_named(row["acid"])
        known = {n: getattr(acid, n) for n in ("species", "charge_full", "zero_level")}
    acid_reagent, base_reagent = (
        Reagent(name=row[f"{side}_reagent"], formula=row[f"{side}_formula"],
                parts={n: float(v) for n, v in (p.split("=") for p in row[f"{side}_parts"].split(";"))})
        for side in ("acid", "base"))
    return BufferPair(acid=row["acid"], step=int(row["step"]), acid_reagent=acid_reagent, base_reagent=base_reagent,
                      uses=tuple(row["uses"].split(";")), against=row["against"], mark=row["mark"],
                      source=row["source"], **known)


def buffer_uses() -> tuple[str, ...]:
    """Uses that the table knows, such as "drinking water"."""
    return tuple(dict.fromkeys(use for pair in buffer_pairs() for use in pair.uses))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Buffering:
    """What one pair takes to hold the pH; every array has the shape of the question, nan where there is no answer.

    pka : meter pKa at the temperature and final ionic strength.
    outside_ph : how far the wanted pH lies outside pKa - 1 to pKa + 1; negative inside. [pH]
    peak_share : intensity of this pair at the wanted pH over its peak. [-]
    lacking_eq_l : intensity wanted beyond what the water has at that pH. [eq/L per pH]
    least_mol_l : least total of the weak acid that gives it; `total_mol_l` is what is added: more where the water
        itself must be moved. [mol/L]
    acid_base_ratio : acid form over base form at the wanted pH. [-]
    acid_mol_l, base_mol_l : of the two reagents; nan where one would be negative. [mol/L]
    permitted, in_range, reachable, in_reach : for the use; within pKa +- 1; both reagents not negative; ionic
        strength within the activity equation. `usable` is all four.
    strength_mol_l : ionic strength of the mixed water that the constants were taken at. [mol/L]
    water : the mixed water, solved again from its totals: its pH is the wanted one.
    """

    pair: BufferPair
    use: str
    ph: Array
    pka: Array
    outside_ph: Array
    peak_share: Array
    lacking_eq_l: Array
    least_mol_l: Array
    total_mol_l: Array
    acid_base_ratio: Array
    acid_mol_l: Array
    base_mol_l: Array
    permitted: bool
    in_range: NDArray[np.bool_]
    reachable: NDArray[np.bool_]
    in_reach: NDArray[np.bool_]
    strength_mol_l: Array
    water: Water

    @property
    def usable(self) -> NDArray[np.bool_]:
        """Whether the pair can serve."""
        return self.in_range & self.reachable & self.in_reach & self.permitted

    @property
    def leads(self) -> NDArray[np.bool_]:
        """Whether it is the first choice whatever its total, in range or not, as bicarbonate in drinking water."""
        return self.reachable & self.in_reach & (self.permitted and self.pair.acid == CARBONATE
                                                 and self.use in CARBONATE_FIRST)

    @property
    def acid_mg_l(self) -> Array:
        """Mass of the pure acid reagent. [mg/L]"""
        return 1e3 * self.pair.acid_reagent.molar_mass_g * self.acid_mol_l

    @property
    def base_mg_l(self) -> Array:
        """Mass of the pure base reagent. [mg/L]"""
        return 1e3 * self.pair.base_reagent.molar_mass_g * self.base_mol_l


def hold_ph(water: Water, *, ph: ArrayLike, intensity_eq_l: ArrayLike, use: str) -> tuple[Buffering, ...]:
    """What each pair of the table takes to hold `water` at a meter pH with a closed buffer intensity [eq/L per pH].

    The water brings its carbonate, its other weak acids, temperature and ionic strength. With the intensity at the
    wanted pH being ln10 (OH- + H+ + sum of total times variance of protons lost) (Van Slyke 1922), the least total is
    what is lacking over ln10 times the variance of the whole acid, so that overlapping steps count. Raises InputError
    for an unknown use or shapes that do not fit.
    """
    if use not in buffer_uses():
        raise InputError(f"use must be one of {', '.join(buffer_uses())}; found {use!r}. Name the nearest.")
    try:
        shape = common_shape(water.alkalinity_eq_l, ph, intensity_eq_l)
    except ValueError as error:
        raise InputError(f"water, ph and intensity_eq_l must broadcast to one shape; found {error}. Give one value "
                         f"or one per row.") from None
    present = _Present(water, shape, as_rows(ph, shape).reshape(-1), as_rows(intensity_eq_l, shape).reshape(-1))
    return tuple(_fitted(pair, present, use) for pair in buffer_pairs())


class _Present:
    """The water as it is, flattened, and the pH and intensity wanted of it."""

    def __init__(self, water: Water, shape: tuple[int, ...], ph: Array, intensity: Array):
        def flat(v: ArrayLike) -> Array:
            return as_rows(v, shape).reshape(-1)

        self.shape, self.ph, self.intensity = shape, ph, intensity
        self.alkalinity, self.dic = flat(water.alkalinity_eq_l), flat(water.dic_mol_l)
        self.strength = flat(water.ionic_strength_mol_l)
        self.totals: dict[str, Any] = {f"{n}{SUFFIX}": flat(water.total_mol_l(n)) for n in water.total_names}
        self.options = water.options | {n: flat(getattr(water, n)) for n in ("t_c", "salinity", "pressure_atm")}
        self.marine = flat(water.is_marine) > 0.0
        self.charge_squares = flat(_charge_squares(water.state).reshape(water.shape))

    def at_ph(self, strength: Array) -> Water:
        """Its carbon and totals at the wanted pH, at an ionic strength of the mixture."""
        return Water.from_ph_dic(ph=self.ph, dic_mol_l=self.dic, ionic_strength_mol_l=strength, **self.totals,
                                 **self.options)


def _charge_squares(state: State) -> Array:
    """Ionic strength of what shifts with pH: carbonate, weak acids, H+ and OH-. [mol/L]"""
    c, alpha = state.conditions, state.carbonate_fractions()
    total = c.c_h * state.h + c.c_oh / state.h + state.dic * (alpha[1] + 4.0 * alpha[2])
    for d, family in zip(state.acids, state.families, strict=True):
        for lost, a in enumerate(fractions(family.k, 1.0 / state.h)):
            total = total + d.total * a * (d.acid.charge_full - lost) ** 2
    return 0.5 * total


def _fitted(pair: BufferPair, present: _Present, use: str) -> Buffering:
    """Rounds of mixing at the ionic strength of the mixture before, until it no longer moves; each row by itself."""
    strength = present.strength
    for _ in range(ROUNDS):
        found, after = _mixed(pair, present, strength)
        moving = ~present.marine & (np.abs(np.minimum(after, STRENGTH_REACH) - strength) > SETTLED)
        if not moving.any():
            break
        strength = np.where(moving, np.clip(after, 0.0, STRENGTH_REACH), strength)
    in_reach = present.marine | (after <= STRENGTH_REACH)
    water = _solved_again(pair, present, strength, found)
    return Buffering(pair=pair, use=use, permitted=use in pair.uses, in_reach=in_reach.reshape(present.shape),
                     water=water, ph=present.ph.reshape(present.shape), strength_mol_l=strength.reshape(present.shape),
                     **{name: v.reshape(present.shape) for name, v in found.items()})


def _mixed(pair: BufferPair, present: _Present, strength: Array) -> tuple[dict[str, Any], Array]:
    """The pair at the wanted pH with the constants of one ionic strength; and the ionic strength that follows."""
    base = present.at_ph(strength)
    state = base.state
    c, inv = state.conditions, 1.0 / state.h
    k = (c.k1, c.k2) if pair.acid == CARBONATE else c.acid_constants(acid_named(pair.acid))
    step = k[pair.step - 1]
    alpha = fractions(k, inv)
    pka, ratio = -np.log10(step * c.activity_per_h), step * inv
    lacking = np.maximum(present.intensity - base.buffer_intensity_eq_l(), 0.0)
    least = lacking / (LN10 * moments(alpha)[1])
    total, acid, basic = _split(pair, protons_lost(alpha) - pair.zero_level,
                                base.alkalinity_eq_l - present.alkalinity, least)
    charges = 0.5 * sum((a * (pair.charge_full - lost) ** 2 for lost, a in enumerate(alpha)), start=np.zeros(inv.shape))
    added = (total * charges + np.nan_to_num(acid) * pair.strong_ions(pair.acid_reagent)
             + np.nan_to_num(basic) * pair.strong_ions(pair.base_reagent))
    outside = np.abs(present.ph - pka) - EFFECTIVE_RANGE
    return {
        "pka": pka, "outside_ph": outside, "peak_share": 4.0 * ratio / (1.0 + ratio) ** 2, "lacking_eq_l": lacking,
        "least_mol_l": least, "total_mol_l": total, "acid_base_ratio": 1.0 / ratio, "acid_mol_l": acid,
        "base_mol_l": basic, "in_range": outside <= ON_EDGE, "reachable": np.isfinite(acid),
    }, present.strength + added + _charge_squares(state) - present.charge_squares


def _split(pair: BufferPair, per_total: Array, shift: Array, least: Array) -> tuple[Array, Array, Array]:
    """Total, acid and base reagent [mol/L]: the least total from `least` on for which no reagent is negative.

    The acid at the wanted pH holds `per_total` equivalents of alkalinity per mole, the water itself must gain `shift`:
    n_a x_a + n_b x_b = T and e_a x_a + e_b x_b = T per_total + shift, so that both amounts are straight lines in T.
    """
    a, b = pair.acid_reagent, pair.base_reagent
    n_a, n_b, e_a, e_b = pair.of_acid(a), pair.of_acid(b), a.alkalinity, b.alkalinity
    det = n_a * e_b - n_b * e_a
    lines = [((e_b - per_total * n_b) / det, -shift * n_b / det), ((per_total * n_a - e_a) / det, shift * n_a / det)]
    total, possible = least, np.isfinite(least) & np.isfinite(shift)
    for slope, start in lines:
        zero = -start / np.where(slope == 0.0, 1.0, slope)
        total = np.where((slope > 0.0) & (zero > total), zero, total)
    amounts = []
    for slope, start in lines:
        amount = slope * total + start
        size = np.abs(slope * total) + np.abs(start)
        possible &= amount >= -1e-12 * size  # rounding of a difference must not make it impossible
        amounts.append(np.maximum(amount, 0.0))
    acid, basic = (np.where(possible, x, np.nan) for x in amounts)
    return np.where(possible, total, least), acid, basic


def _solved_again(pair: BufferPair, present: _Present, strength: Array, found: Mapping[str, Array]) -> Water:
    """The mixed water from alkalinity and carbon alone, as a check that does not know the wanted pH."""
    shape, totals = present.shape, dict(present.totals)
    dic, added = present.dic, found["acid_mol_l"] * pair.of_acid(pair.acid_reagent)
    added = added + found["base_mol_l"] * pair.of_acid(pair.base_reagent)
    if pair.acid == CARBONATE:
        dic = dic + added
    else:
        name = f"{pair.acid}{SUFFIX}"
        totals[name] = np.nan_to_num(totals.get(name, np.zeros(added.shape))) + added
    alkalinity = (present.alkalinity + found["acid_mol_l"] * pair.acid_reagent.alkalinity
                  + found["base_mol_l"] * pair.base_reagent.alkalinity)
    given = {"alkalinity_eq_l": alkalinity, "dic_mol_l": dic, "ionic_strength_mol_l": strength} | totals
    return Water.from_alkalinity_dic(**{n: v.reshape(shape) for n, v in given.items()}, **{
        n: v.reshape(shape) if isinstance(v, np.ndarray) else v for n, v in present.options.items()})


def ranked(options: tuple[Buffering, ...]) -> NDArray[np.intp]:
    """Indices of `options` per row, best first (options along the first axis).

    Where bicarbonate leads for the use it comes first if its reagents can make the pH, in range or not; then the usable
    pairs by least mass of both reagents; then the others, nearest range first.
    """
    first, usable = np.stack([o.leads for o in options]), np.stack([o.usable for o in options])
    mass = np.stack([o.acid_mg_l + o.base_mg_l for o in options])
    outside = np.stack([np.where(np.isfinite(o.outside_ph), o.outside_ph, np.inf) for o in options])
    group = np.where(first, 0, np.where(usable, 1, 2))
    return np.lexsort((outside, np.where(group < 2, mass, np.inf), group), axis=0)


def why_not(option: Buffering, row: int = 0) -> tuple[str, ...]:
    """Why the pair cannot serve for one row, in words; none if it can."""
    pair, at = option.pair, _Row(option, row)
    if not np.isfinite(at.least_mol_l):
        return ("the water or the wanted pH is not one that can be solved",)
    said = []
    if not option.permitted:
        said.append(f"not permitted for {option.use} ({pair.source})")
    if not at.in_range:
        said.append(f"pH {at.ph:.2f} lies {at.outside_ph:.2f} outside its range of pKa {at.pka:.2f} ± "
                    f"{EFFECTIVE_RANGE:g}: there it works at {100 * at.peak_share:.2g} % of its peak and would take "
                    f"{brief(1e3 * at.least_mol_l)} mmol/L even so")
    if not at.reachable:
        said.append(f"{pair.acid_reagent.name} and {pair.base_reagent.name} cannot make pH {at.ph:.2f} in this water, "
                    f"as one of them would have to be taken out: bring the pH nearer with a strong acid or base first")
    if not at.in_reach:
        said.append(f"the ionic strength would pass {STRENGTH_REACH:g} mol/L, so that its total is a rough figure")
    return tuple(said)


def buffer_words(option: Buffering, row: int = 0) -> str:
    """What the pair takes for one row, why it fails where it does, and what speaks against it."""
    pair, at, reasons = option.pair, _Row(option, row), why_not(option, row)
    said = [f"first choice for {option.use}"] if at.leads else []
    said += [f"not usable: {'; '.join(reasons)}"] if reasons and not at.leads else list(reasons)
    if np.isfinite(at.acid_mol_l) and at.in_reach:
        if not at.lacking_eq_l > 0.0:
            said.append(f"at pH {at.ph:.2f} the water has that intensity without a buffer: only its pH is to be moved")
        made = f"{'made all the same, ' if reasons else ''}pH {at.ph:.2f} with {brief(1e3 * at.reached)} meq/L per pH"
        amounts = [f"{brief(mg_l)} mg/L of {r.name} ({r.formula})" for mg_l, r in (
            (at.acid_mg_l, pair.acid_reagent), (at.base_mg_l, pair.base_reagent)) if mg_l > 0.0] or ["nothing"]
        said.append(f"{made} takes {' and '.join(amounts)}, "
                    f"{brief(1e3 * at.total_mol_l)} mmol/L in all; pKa {at.pka:.2f}, acid to base form "
                    f"{at.acid_base_ratio:.2g} to 1")
    return f"{pair.label}: {'; '.join(said)}; against it: {pair.against}."


class _Row:
    """One row of a `Buffering`: its arrays as plain numbers."""

    def __init__(self, option: Buffering, row: int):
        self._option, self._row = option, row

    def __getattr__(self, name: str) -> float:
        value = self._option.water.buffer_intensity_eq_l() if name == "reached" else getattr(self._option, name)
        return float(np.ravel(value)[self._row])
