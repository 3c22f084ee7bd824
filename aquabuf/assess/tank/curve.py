"""A measured titration curve of a waste: base against pH both ways, as a table for mixtures, and several side by side.

Per liter of raw waste, with d the share of waste in the mixture (Gustafsson & Waller 1983, recalled: what the acids
hold depends on pH alone, so that thinning touches water only):

    base added = held(pH) - held(raw) + w(pH) / d - w(raw),    w = [OH-] - [H+]

Between points `held` is interpolated by a monotone cubic (Fritsch & Butland 1984, as in scipy) and water is exact.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import PchipInterpolator
from scipy.optimize import isotonic_regression

from aquabuf.arrays import LN10, exp10
from aquabuf.chem.acids import ZERO_LEVEL_PK
from aquabuf.engine.readout import GRID_PH
from aquabuf.errors import InputError
from aquabuf.readings.curve_file import curve_quantities
from aquabuf.readings.curve_points import FEWEST_POINTS, CurvePoints

__all__ = ["WIDEST_GAP", "Band", "MeasuredCurve", "Resolution", "band", "held_table", "measured", "resolution",
           "strength_of"]

Array = NDArray[np.float64]

WIDEST_GAP = 0.5      # pH between neighboring points in the window; common practice, no source
UNSURE_MOST = 0.1     # of the window: a wider step does where base is known as well as that; common practice
FLOORED_TOLD, FLOORED_ERRORS = 1e-3, 2.0  # of the rise of the curve, and of reading errors, from which flooring is told
HALVINGS = 52
ROUNDING = 1e-9       # of the rise of the curve


@dataclass(frozen=True, slots=True, eq=False)
class MeasuredCurve:
    """Base added per liter of raw waste against pH; both rise, acid is negative, zero is the raw waste.

    base_eq_l, ph : points. [eq/L], [-]
    t_c : temperature of the titration. [°C]
    dilution : share of waste in the mixture at each point; 1 where thinning is taken out or not known. [-]
    c_h, c_oh : [H+] is c_h 10^-pH and [OH-] is c_oh 10^pH; zero while water is not told apart. [mol/L]
    tails : pH to which the curve may be carried on by water alone; None: nan outside the points.
    notes : what was repaired, corrected or taken for granted.

    Raises InputError where points are too few, missing, or do not rise.
    """

    sample_id: str
    base_eq_l: Array
    ph: Array
    t_c: float = 25.0
    dilution: Array | float = 1.0
    c_h: float = 0.0
    c_oh: float = 0.0
    tails: tuple[float, float] | None = None
    notes: tuple[str, ...] = ()
    _held: PchipInterpolator = field(init=False, repr=False)

    def __post_init__(self) -> None:
        base, ph = (np.asarray(v, dtype=float) for v in (self.base_eq_l, self.ph))
        where = f"the titration curve of {self.sample_id!r}"
        if base.ndim != 1 or base.shape != ph.shape or base.size < FEWEST_POINTS:
            raise InputError(f"{where} needs {FEWEST_POINTS} points or more, one base for each pH; found {base.size} "
                             f"and {ph.size}. Titrate on, with smaller steps where pH is steep.")
        rises = (np.diff(base) > 0.0) & (np.diff(ph) > 0.0)  # False for nan
        if not rises.all():
            i = int(np.flatnonzero(~rises)[0]) + 1
            raise InputError(f"{where}: base and pH must both rise from point to point; point {i + 1} has {base[i]:g} "
                             f"eq/L at pH {ph[i]:g} after {base[i - 1]:g} eq/L at pH {ph[i - 1]:g}. Correct or remove "
                             "it.")
        d = np.broadcast_to(np.asarray(self.dilution, dtype=float), base.shape)
        if not ((d > 0.0) & (d <= 1.0)).all():
            raise InputError(f"{where}: the share of waste in the mixture must be above 0 and 1 at most; found "
                             f"{float(d.min()):g} to {float(d.max()):g}. Give sample volume over total volume.")
        for name, value in (("base_eq_l", base), ("ph", ph), ("dilution", d)):
            object.__setattr__(self, name, value)
        object.__setattr__(self, "_held", PchipInterpolator(ph, base - self._water(ph), extrapolate=False))

    def _water(self, ph: Array) -> Array:
        return self.c_oh * exp10(ph) - self.c_h * exp10(-ph)

    # ------------------------------------------------------------ questions

    @property
    def reach(self) -> tuple[float, float]:
        """Lowest and highest pH that can be asked for: where it was measured, or to the ends of its tails."""
        low, high = float(self.ph[0]), float(self.ph[-1])
        return (low, high) if self.tails is None else (min(low, self.tails[0]), max(high, self.tails[1]))

    @property
    def raw_ph(self) -> float:
        """pH of the raw waste, nothing added; nan where that was not measured."""
        return float(self.ph_at(0.0))

    def base_at(self, ph: ArrayLike) -> Array:
        """Base to add to the raw waste to reach a pH; nan out of reach. [eq/L]"""
        x = self._inside(ph)
        return self._held(np.clip(x, self.ph[0], self.ph[-1])) + self._water(x)

    def buffer_at(self, ph: ArrayLike) -> Array:
        """Buffer intensity, the slope of base against pH; nan out of reach. [eq/L per pH]"""
        x = self._inside(ph)
        slope = self._held.derivative()(np.clip(x, self.ph[0], self.ph[-1]))
        beyond = (x < self.ph[0]) | (x > self.ph[-1])
        return np.where(beyond, 0.0, slope) + LN10 * (self.c_oh * exp10(x) + self.c_h * exp10(-x))

    def ph_at(self, base_eq_l: ArrayLike) -> Array:
        """pH after so much base (negative: acid), the inverse of `base_at`; nan out of reach."""
        y = np.asarray(base_eq_l, dtype=float)
        low, high = (np.full(y.shape, end) for end in self.reach)
        least, most = self.base_at(low), self.base_at(high)
        inside = (y >= least - ROUNDING * (most - least)) & (y <= most + ROUNDING * (most - least))
        for _ in range(HALVINGS):
            middle = 0.5 * (low + high)
            above = self.base_at(middle) > y
            low, high = np.where(above, low, middle), np.where(above, middle, high)
        return np.where(inside, 0.5 * (low + high), np.nan)

    def _inside(self, ph: ArrayLike) -> Array:
        x, (low, high) = np.asarray(ph, dtype=float), self.reach
        return np.where((x >= low) & (x <= high), x, np.nan)

    # ------------------------------------------------------------ corrections

    def with_water(self, c_h: float, c_oh: float) -> MeasuredCurve:
        """The curve of the waste not thinned by titrant, with the part of water told apart.

        Where it is flatter than water alone, what the acids hold would fall with pH, which nothing does: it is floored
        to the nearest curve that does not fall (isotonic least squares, points weighted by the reading errors of base
        and of pH), and told.
        """
        if (self.c_h, self.c_oh) == (c_h, c_oh):
            return self
        water, share = c_oh * exp10(self.ph) - c_h * exp10(-self.ph), np.asarray(self.dilution)
        held = self.base_eq_l - water / share
        slope = LN10 * (c_oh * exp10(self.ph) + c_h * exp10(-self.ph)) / share
        q, meter = curve_quantities()["base_added_eq_l"], curve_quantities()["ph"]
        error = np.hypot(meter.default_u * slope, q.default_u + q.default_u_rel * np.abs(self.base_eq_l))
        floored = np.asarray(isotonic_regression(held, weights=error**-2).x)
        told = list(self.notes)
        if share.min() < 1.0:
            told.append(f"thinning by the titrant, down to {100.0 * share.min():.3g} % of waste, was taken out")
        told += _floor_words(self.ph, floored - held, error, float(self.base_eq_l[-1] - self.base_eq_l[0]))
        new = replace(self, base_eq_l=floored + water, dilution=1.0, c_h=c_h, c_oh=c_oh, notes=tuple(told))
        raw = self.raw_ph
        return new if np.isnan(raw) else replace(new, base_eq_l=new.base_eq_l - float(new.base_at(raw)))

    def with_tails(self, low_ph: float = 0.0, high_ph: float = 14.0) -> MeasuredCurve:
        """The curve carried on beyond its points as strong acid and base in water would; told in `notes`.

        Raises InputError while water is not told apart.
        """
        if not self.c_h > 0.0 or not self.c_oh > 0.0:
            raise InputError(f"the curve of {self.sample_id!r} can be carried on by strong acid and base only when "
                             "water is told apart; found no constants of water. Call with_water first.")
        return replace(self, tails=(low_ph, high_ph), notes=(*self.notes, _beyond_words(self)))


def _floor_words(ph: Array, shift: Array, error: Array, rise: float) -> list[str]:
    """Stretches that were floored by more than reading errors explain."""
    hit = np.flatnonzero((np.abs(shift) > FLOORED_TOLD * rise) & (np.abs(shift) > FLOORED_ERRORS * error))
    if not hit.size:
        return []
    worst = float(np.abs(shift[hit]).max())
    runs = np.split(hit, np.flatnonzero(np.diff(hit) > 1) + 1)
    where = " and ".join(f"from pH {ph[run[0]]:.2f} to {ph[run[-1]]:.2f}" for run in runs)
    return [f"{where} the curve is flatter than water alone can be; it was floored by up to {worst:.2g} eq/L "
            f"({100.0 * worst / rise:.2g} % of its rise): check the electrode there"]


def _beyond_words(curve: MeasuredCurve) -> str:
    return (f"measured from pH {curve.ph[0]:.2f} to {curve.ph[-1]:.2f}; beyond, only strong acid and base and water "
            "are counted, so that a buffer there would be missed")


def measured(points: CurvePoints, t_c: float = 25.0) -> MeasuredCurve:
    """The curve of a file; `t_c` where the file has no temperature. [°C]"""
    return MeasuredCurve(points.sample_id, points.base_eq_l, points.ph, t_c if np.isnan(points.t_c) else points.t_c,
                         points.dilution, notes=points.notes)


def held_table(curve: MeasuredCurve, c_h: float, c_oh: float) -> tuple[Array, float, tuple[str, ...]]:
    """Base held by a unit of the waste on GRID_PH, the base of the raw waste, and what must be told.

    Held base counts from pH 4.5, the zero level of alkalinity (from the nearest end where that was not measured), so
    that `base` is the acid it takes from the raw waste to there, less what water takes: its alkalinity but for acids
    that are half dissociated at 4.5. A titration cannot tell more, and mixing needs no more.

    Returns
    -------
    held [eq per L of waste] at GRID_PH, level beyond the points; base_eq_l of the raw waste [eq/L]; notes.

    Raises
    ------
    InputError
        The raw waste is not within the curve.
    """
    known = curve.with_water(c_h, c_oh)
    raw = curve.raw_ph
    if np.isnan(raw):
        raise InputError(f"the titration curve of {curve.sample_id!r} must hold the raw waste, with nothing added; it "
                         f"runs from {curve.base_eq_l[0]:.4g} to {curve.base_eq_l[-1]:.4g} eq/L. Add its pH at 0.")
    low, high = known.ph[0], known.ph[-1]
    at = np.clip(np.append(GRID_PH, ZERO_LEVEL_PK), low, high)
    held = known._held(at)
    table = np.maximum.accumulate(held[:-1] - held[-1])
    base = float(np.interp(raw, GRID_PH, table) + known._water(np.asarray(raw)))
    told = known.notes if known.tails else (*known.notes, _beyond_words(known))
    return table, base, told


# ---------------------------------------------------------------- several samples


@dataclass(frozen=True, slots=True, eq=False)
class Band:
    """Base to add to reach each pH over several samples, nan where none was measured. [eq/L]

    count : samples measured at each pH. strength, misfit : see `strength_of`.
    """

    ph: Array
    lowest: Array
    median: Array
    highest: Array
    count: NDArray[np.intp]
    strength: Array
    misfit: Array


def band(curves: Sequence[MeasuredCurve], ph: ArrayLike) -> Band:
    """Lowest, median and highest demand of several samples of one waste at each pH.

    Raises InputError without any curve.
    """
    x = np.atleast_1d(np.asarray(ph, dtype=float))
    bases = _stacked(curves, x)
    count = np.isfinite(bases).sum(axis=0)
    safe = np.where(count > 0, bases, 0.0)  # a column without any value is put back to nan below
    low, median, high = (np.where(count > 0, f(safe, axis=0), np.nan) for f in (np.nanmin, np.nanmedian, np.nanmax))
    strength, misfit = strength_of(curves, x)
    return Band(x, low, median, high, count, strength, misfit)


def strength_of(curves: Sequence[MeasuredCurve], ph: ArrayLike) -> tuple[Array, Array]:
    """Each sample as a multiple of the median curve, by least squares over these pH values.

    Returns
    -------
    strength : factor per sample, nan where no pH was measured in common. [-]
    misfit : what the factor leaves, root mean square over that of the sample. [-] Large where samples differ in kind,
        not only in strength.
    """
    bases = _stacked(curves, np.atleast_1d(np.asarray(ph, dtype=float)))
    there = np.isfinite(bases)
    safe = np.where(there.any(axis=0), bases, 0.0)
    middle = np.where(there, np.nanmedian(safe, axis=0), 0.0)
    own = np.where(there, bases, 0.0)
    size, total = (middle * middle).sum(axis=1), (own * own).sum(axis=1)
    strength = np.divide((own * middle).sum(axis=1), size, out=np.full(len(bases), np.nan), where=size > 0.0)
    left = own - strength[:, None] * middle
    return strength, np.sqrt(np.divide((left * left).sum(axis=1), total, out=np.full(len(bases), np.nan),
                                       where=total > 0.0))


def _stacked(curves: Sequence[MeasuredCurve], ph: Array) -> Array:
    if not curves:
        raise InputError("a band needs at least one titration curve; found none. Titrate samples of the waste.")
    return np.stack([curve.base_at(ph) for curve in curves])


# ---------------------------------------------------------------- resolution


@dataclass(frozen=True, slots=True, kw_only=True)
class Resolution:
    """How well the points of a curve tell the window.

    covered : whether both ends of the window were measured. points : within the window.
    gap_low, gap_high : the widest step of pH that touches the window.
    unsure_eq_l : how far base within such a step may be off, since it only must rise. [eq/L]
    window_eq_l : base between the ends of the window, nan where not covered. [eq/L]
    step_eq_l : titrant step that would do there. [eq/L]
    words : verdict and what to measure.
    """

    covered: bool
    points: int
    gap_low: float
    gap_high: float
    unsure_eq_l: float
    window_eq_l: float
    step_eq_l: float
    fine: bool
    words: str

    @property
    def gap_ph(self) -> float:
        """The widest step. [pH]"""
        return self.gap_high - self.gap_low

    @property
    def unsure_share(self) -> float:
        """What is unsure over the width of the window. [-]"""
        return self.unsure_eq_l / self.window_eq_l


def resolution(curve: MeasuredCurve, ph_low: float, ph_high: float, widest: float = WIDEST_GAP) -> Resolution:
    """Whether points stand closely enough in a window of pH, and what to measure where they do not.

    Raises InputError for a window whose ends do not rise.
    """
    if not ph_low < ph_high:
        raise InputError(f"a window needs a low and a high pH, in this order; found {ph_low:g} and {ph_high:g}. "
                         "Turn them.")
    covered = bool(curve.ph[0] <= ph_low and ph_high <= curve.ph[-1])
    touch = np.flatnonzero((curve.ph[1:] > ph_low) & (curve.ph[:-1] < ph_high))
    points = int(((curve.ph >= ph_low) & (curve.ph <= ph_high)).sum())
    if not touch.size:
        return Resolution(covered=False, points=0, gap_low=np.nan, gap_high=np.nan, unsure_eq_l=np.nan,
                          window_eq_l=np.nan, step_eq_l=np.nan, fine=False,
                          words=_uncovered_words(curve, ph_low, ph_high))
    steps = np.diff(curve.ph)[touch]
    i = int(touch[np.argmax(steps)])
    gap = float(curve.ph[i + 1] - curve.ph[i])
    held = curve.base_eq_l - curve._water(curve.ph)
    unsure = float(held[i + 1] - held[i])
    first, last = float(curve.base_eq_l[i]), float(curve.base_eq_l[i + 1])
    window = float(curve.base_at(ph_high) - curve.base_at(ph_low)) if covered else np.nan
    step = (last - first) / np.ceil(gap / widest)
    words = [] if covered else [_uncovered_words(curve, ph_low, ph_high)]
    fine = gap <= widest or unsure <= UNSURE_MOST * window
    if not fine:
        share = f", {100.0 * unsure / window:.3g} % of the window" if covered else ""
        words.append(f"From pH {curve.ph[i]:.2f} to {curve.ph[i + 1]:.2f} no point was read ({gap:.2g} pH; {widest:g} "
                     f"is the most by common practice), so base there may be off by up to {unsure:.2g} eq/L{share}. "
                     f"Titrate again from {first:.4g} to {last:.4g} eq/L in steps of {step:.2g} eq/L or less, with "
                     "thinner titrant if the burette cannot, until no step is wider.")
    return Resolution(covered=covered, points=points, gap_low=float(curve.ph[i]), gap_high=float(curve.ph[i + 1]),
                      unsure_eq_l=unsure, window_eq_l=window, step_eq_l=float(step), fine=covered and fine,
                      words=" ".join(words))


def _uncovered_words(curve: MeasuredCurve, ph_low: float, ph_high: float) -> str:
    return (f"The window of pH {ph_low:g} to {ph_high:g} is not covered: the curve runs from pH {curve.ph[0]:.2f} to "
            f"{curve.ph[-1]:.2f}. Titrate past both ends of the window.")
