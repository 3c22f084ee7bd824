"""pH of mixtures of a few known waters, read from tables: quick enough for every step of a simulation.

A *carrier* is what an inflow brings besides strong acid and base: the weak acids of a waste in their fixed proportion,
or the carbon of a reagent. Its share in a mixture is its *amount*; amounts and base are conserved by mixing, and pH
follows from them:

    base = w(pH) + sum_j amount_j held_j(pH) + sum_m metal_m(pH, total_m),    w = [OH-] - [H+]

held : base that one unit of the carrier has taken up at a pH, counted from the zero level of alkalinity.
metal : hydroxide in the solid and in dissolved hydroxo complexes, z (C - s) + (z + n) complex.

Reaction invariants: Gustafsson & Waller 1983, Chem. Eng. Sci. 38:389 (recalled). Tables are linear between grid
points; the pH found agrees with the balance solved directly to about 1e-5.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import LN10
from aquabuf.errors import InputError

__all__ = ["GRID_PH", "Follower", "MetalTable", "Readout"]

Array = NDArray[np.float64]

PH_LEAST, PH_MOST, PH_STEP = -1.0, 15.0, 0.004
GRID_PH: Array = np.linspace(PH_LEAST, PH_MOST, round((PH_MOST - PH_LEAST) / PH_STEP) + 1)
BARE_STEPS = 6           # Newton steps from the start before rows are guarded
STEP_DONE = 2e-3         # of a bare step; what is left after it is its square
STEP_DONE_METALS = 1e-5  # where a metal begins to fall out the slope jumps, and only a small step says that it is over
FOLLOWED_DONE, FOLLOWED_DONE_METALS = 5e-3, 2e-4  # the same between two moments of a simulation: leaves under 1e-4 pH
GUARDED_STEPS = 60
GUARDED_DONE = 1e-7
CLOSED = 1e-6            # of the gap in asinh: no more to be done


@dataclass(frozen=True, slots=True, eq=False)
class MetalTable:
    """A metal that falls out as hydroxide, on GRID_PH.

    charge : of the free ion; complex_charge : hydroxide that a dissolved complex holds, per metal (0: it forms none).
    free, bound : concentration of the free ion and of the complex over the solid. [mol/L]
    per_unit : metal in one unit of each carrier, shape (J,). [mol]
    """

    name: str
    charge: int
    complex_charge: int
    free: Array
    bound: Array
    per_unit: Array

    def solid(self, ph: Array, total: Array) -> Array:
        """Metal in the solid. [mol/L]"""
        return np.maximum(total - np.exp(np.interp(ph, GRID_PH, np.log(self.free + self.bound))), 0.0)


@dataclass(frozen=True, slots=True, eq=False)
class Readout:
    """Tables of some carriers under one set of conditions.

    c_h, c_oh : [H+] is c_h 10^-pH and [OH-] is c_oh 10^pH. [mol/L]
    held : base taken up by one unit of each carrier at GRID_PH, shape (J, grid). [eq per unit]
    metals : metals that fall out; their amounts follow from those of the carriers.

    Raises InputError where a table does not fit the grid or base held does not rise with pH.
    """

    c_h: float
    c_oh: float
    held: Array
    metals: tuple[MetalTable, ...] = ()
    _lines: Array = field(init=False, repr=False)        # rows: a of each carrier, then b; held is a + b pH
    _metal_lines: Array = field(init=False, repr=False)  # rows: dissolved (a, b), share in complexes (a, b), per metal

    def __post_init__(self) -> None:
        if self.held.ndim != 2 or self.held.shape[1] != GRID_PH.size:
            raise InputError(f"a readout needs one table of {GRID_PH.size} values per carrier; found shape "
                             f"{self.held.shape}. Work it out on GRID_PH.")
        falls = np.diff(self.held, axis=1) < -1e-9 * (1.0 + np.abs(self.held[:, 1:]))
        if falls.any():
            j, k = np.argwhere(falls)[0]
            raise InputError(f"the base held by a carrier must rise with pH; carrier {j + 1} falls at pH "
                             f"{GRID_PH[k]:.2f}. Correct its curve.")
        object.__setattr__(self, "_lines", _lines(self.held))
        over = np.reshape([m.free + m.bound for m in self.metals], (-1, GRID_PH.size))
        share = np.reshape([m.bound / (m.free + m.bound) for m in self.metals], over.shape)
        object.__setattr__(self, "_metal_lines", np.concatenate([_lines(over), _lines(share)]))

    @property
    def carriers(self) -> int:
        """Number of carriers."""
        return int(self.held.shape[0])

    @property
    def neutral_ph(self) -> float:
        """pH at which [H+] equals [OH-]."""
        return 0.5 * float(np.log10(self.c_h / self.c_oh))

    @property
    def _done(self) -> float:
        return STEP_DONE_METALS if self.metals else STEP_DONE

    # ------------------------------------------------------------ at a pH

    def base_at(self, ph: ArrayLike, amounts: ArrayLike) -> Array:
        """Base of a mixture that has this pH. [eq/L]

        ph, and amounts without its first axis of carriers, broadcast; pH outside -1 to 15 is nan.
        """
        x, c = self._given(ph, amounts)
        return self._water(x) + self._held(x, c)[0]

    def buffer_at(self, ph: ArrayLike, amounts: ArrayLike) -> Array:
        """Buffer intensity of a mixture at a pH, the slope of base against pH. [eq/L per pH]"""
        x, c = self._given(ph, amounts)
        ten = np.exp(LN10 * x)
        return LN10 * (self.c_oh * ten + self.c_h / ten) + self._held(x, c)[1]

    def solids_at(self, ph: ArrayLike, amounts: ArrayLike) -> dict[str, Array]:
        """Metal in solid hydroxide at a pH, by its name. [mol/L]"""
        x, c = self._given(ph, amounts)
        return {m.name: m.solid(x, np.tensordot(m.per_unit, c, axes=1)) for m in self.metals}

    def _given(self, ph: ArrayLike, amounts: ArrayLike) -> tuple[Array, Array]:
        x, c = np.asarray(ph, dtype=float), self._checked(amounts)
        shape = np.broadcast_shapes(x.shape, c.shape[1:])
        return np.broadcast_to(np.where((x >= PH_LEAST) & (x <= PH_MOST), x, np.nan), shape), _stretched(c, shape)

    def _checked(self, amounts: ArrayLike) -> Array:
        c = np.asarray(amounts, dtype=float)
        if c.ndim == 0 or c.shape[0] != self.carriers:
            raise InputError(f"amounts need one row per carrier ({self.carriers}); found shape {c.shape}. "
                             "Put carriers on the first axis.")
        return c

    def _water(self, x: Array) -> Array:
        ten = np.exp(LN10 * x)
        return self.c_oh * ten - self.c_h / ten

    def _held(self, x: Array, c: Array) -> tuple[Array, Array]:
        """Base held by carriers and metals, and its slope against pH; x and c of one shape."""
        rows = x.shape or (1,)
        held = _Held(self, rows)
        with np.errstate(invalid="ignore"):
            held.give(c.reshape(c.shape[:1] + rows))
            held.at(x.reshape(rows))
        return held.value.reshape(x.shape), held.slope.reshape(x.shape)

    # ------------------------------------------------------------ pH

    def ph(self, base_eq_l: ArrayLike, amounts: ArrayLike, start: ArrayLike | None = None) -> Array:
        """pH of mixtures with this base and these amounts; nan where base is not finite or no pH from -1 to 15 fits.

        `start` is a first guess (the pH a moment ago). Rows that do not settle at once are kept between two bounds and
        halved.
        """
        y, c = np.asarray(base_eq_l, dtype=float), self._checked(amounts)
        asked = np.broadcast_shapes(y.shape, c.shape[1:], () if start is None else np.shape(start))
        shape = asked or (1,)
        y, c = np.broadcast_to(y, shape), _stretched(c, shape)
        newton = Follower(self, shape, self.neutral_ph if start is None else start,
                          done=self._done)
        with np.errstate(invalid="ignore"):
            x = newton.follow(y, c)
            outside = (y < self._edge(PH_LEAST, c)) | (y > self._edge(PH_MOST, c))
            return np.where(np.isfinite(y) & np.isfinite(c).all(axis=0) & ~outside, x, np.nan).reshape(asked)

    def follower(self, shape: tuple[int, ...], start: ArrayLike) -> Follower:
        """Keeps the pH of mixtures that change a little from call to call; starts from a guess."""
        return Follower(self, shape, start, done=FOLLOWED_DONE_METALS if self.metals else FOLLOWED_DONE)

    def _edge(self, ph: float, c: Array) -> Array:
        x = np.full(c.shape[1:], ph)
        return self._water(x) + self._held(x, c)[0]


class _Held:
    """Base held by carriers and metals at a pH, with its slope, in arrays of one shape that are used again."""

    def __init__(self, tables: Readout, shape: tuple[int, ...]):
        j, m = tables.carriers, len(tables.metals)
        self._lines, self._metal_lines, self._j, self._m = tables._lines, tables._metal_lines, j, m
        each = (m,) + (1,) * len(shape)
        self._charge = np.reshape([float(t.charge) for t in tables.metals], each)
        self._complex = np.reshape([float(t.complex_charge) for t in tables.metals], each)
        self._per_unit = [np.reshape([t.per_unit[i] for t in tables.metals], each) for i in range(j)]
        self._position, self._piece = np.empty(shape), np.empty(shape, dtype=np.intp)
        self._ab, self._sum, self._part = np.empty((2 * j, *shape)), np.empty((2, *shape)), np.empty((2, *shape))
        self._metal_ab = np.empty((4 * m, *shape))
        self.value, self.slope = np.empty(shape), self._sum[1]

    def give(self, c: Array) -> None:
        """Take amounts of the carriers, shape (J, ...), for the calls that follow."""
        self._c = c
        if self._m:
            self._total = sum((p * c[i] for i, p in enumerate(self._per_unit)), start=np.zeros_like(self._charge))

    def at(self, x: Array) -> None:
        """Set `value` [eq/L] and `slope` [eq/L per pH] for the pH `x`."""
        position, total, part = self._position, self._sum, self._part
        np.subtract(x, PH_LEAST, out=position)
        np.multiply(position, 1.0 / PH_STEP, out=position)
        np.copyto(self._piece, position, casting="unsafe")
        self._lines.take(self._piece, axis=1, out=self._ab, mode="clip")
        if self._j == 0:
            total.fill(0.0)
        for i, amount in enumerate(self._c):
            np.multiply(self._ab[i::self._j], amount, out=part if i else total)
            if i:
                np.add(total, part, out=total)
        np.multiply(total[1], x, out=self.value)
        np.add(self.value, total[0], out=self.value)
        if self._m:
            self._add_metals(x)

    def _add_metals(self, x: Array) -> None:
        """z per metal in the solid, and what the dissolved complexes hold."""
        m, total = self._m, self._total
        ab = self._metal_lines.take(self._piece, axis=1, out=self._metal_ab, mode="clip")
        over, up = ab[:m] + ab[m:2 * m] * x, ab[2 * m:3 * m] + ab[3 * m:] * x
        is_solid = total > over
        dissolved = np.where(is_solid, over, total)
        change = np.where(is_solid, ab[m:2 * m], 0.0)
        held = self._charge * (total - dissolved) + self._complex * dissolved * up
        slope = self._complex * (change * up + dissolved * ab[3 * m:]) - self._charge * change
        for i in range(m):
            np.add(self.value, held[i], out=self.value)
            np.add(self.slope, slope[i], out=self.slope)


class Follower:
    """pH of mixtures from one moment to the next: starts from the last pH, and works in arrays that are used again.

    ph : the last pH found, changed by `follow`. Base beyond pH -1 or 15 is held at that pH.
    """

    def __init__(self, tables: Readout, shape: tuple[int, ...], start: ArrayLike, done: float):
        self._tables, self._held, self._done = tables, _Held(tables, shape), done
        self.ph: Array = np.array(np.broadcast_to(np.clip(start, PH_LEAST, PH_MOST), shape), dtype=float)
        self._last = self.ph.copy()
        self._step, self._z, self._per_base = np.empty(shape), np.empty(shape), np.empty(shape)
        self._open = np.empty(shape, dtype=bool)
        self._least = 4.0 * tables.c_h * tables.c_oh
        self._neutral = LN10 * tables.neutral_ph

    def follow(self, base_eq_l: Array, amounts: Array) -> Array:
        """PH of the mixtures as they are now; base of the follower's shape, amounts (J, *shape).

        A row takes steps until its own is small, whatever the others do.
        """
        x, step, size = self.ph, self._step, self._z
        self._held.give(amounts)
        self._look_ahead(x)
        rest: NDArray[np.bool_] | None = None
        for _ in range(BARE_STEPS):
            self._newton(x, base_eq_l)
            if rest is not None:
                np.multiply(step, rest, out=step)
            np.add(x, step, out=x)
            np.minimum(np.maximum(x, PH_LEAST, out=x), PH_MOST, out=x)
            np.abs(step, out=size)
            if size.max(initial=0.0) < self._done:
                return x
            large = ~(size < self._done)
            rest = large if rest is None else rest & large
        if rest is not None and rest.any():
            x[rest] = _guarded(self._tables, base_eq_l[rest], amounts[:, rest], x[rest])
        return x

    def _look_ahead(self, x: Array) -> None:
        """Move the start on by the last change of pH: in a simulation it changes evenly."""
        np.multiply(x, 2.0, out=self._step)
        np.subtract(self._step, self._last, out=self._step)
        np.copyto(self._last, x)
        np.minimum(np.maximum(self._step, PH_LEAST, out=x), PH_MOST, out=x)

    def _newton(self, x: Array, y: Array) -> None:
        """Step to where the balance would close if held went on as a straight line and water as its own secant. [pH]

        The secant runs to where water alone would take up the rest: exact without carriers, Newton's step with many.
        """
        step, z, per_base = self._step, self._z, self._per_base
        self._held.at(x)
        np.subtract(y, self._held.value, out=step)                     # what is left for the water
        np.multiply(step, self._least**-0.5, out=step)
        np.subtract(np.multiply(x, LN10, out=z), self._neutral, out=z)
        np.subtract(step, np.sinh(z, out=per_base), out=per_base)      # less what water has
        np.subtract(np.arcsinh(step, out=step), z, out=step)
        np.greater(np.abs(step, out=z), CLOSED, out=self._open)
        np.divide(step, per_base, out=per_base, where=self._open)
        np.multiply(per_base, self._open, out=per_base)
        np.multiply(per_base, self._held.slope, out=per_base)
        np.multiply(per_base, self._least**-0.5 / LN10, out=per_base)
        np.add(per_base, 1.0, out=per_base)
        np.divide(step, per_base, out=step)
        np.multiply(step, 1.0 / LN10, out=step)


def _guarded(tables: Readout, y: Array, c: Array, x: Array) -> Array:
    """The same between bounds that only come closer; one-dimensional, each row until it is done."""
    newton = Follower(tables, x.shape, np.where(np.isfinite(x), x, tables.neutral_ph), done=0.0)
    newton._held.give(c)
    low, high = np.full(x.shape, PH_LEAST), np.full(x.shape, PH_MOST)
    x, last = newton.ph, np.full(x.shape, np.inf)
    for _ in range(GUARDED_STEPS):
        newton._newton(x, y)
        step, open_ = newton._step, last >= GUARDED_DONE
        low, high = np.where(step > 0.0, x, low), np.where(step > 0.0, high, x)
        new = x + step
        new = np.where((new > low) & (new < high) & (np.abs(step) < 0.5 * last), new, 0.5 * (low + high))
        last, x = np.where(open_, np.abs(new - x), last), np.where(open_, new, x)
        if not open_.any():
            break
    return x


def _lines(tables: Array) -> Array:
    """Straight lines a + b pH between the grid points of each table: all a, then all b."""
    slope = np.diff(tables, axis=-1) / PH_STEP
    return np.concatenate([tables[:, :-1] - slope * GRID_PH[:-1], slope])


def _stretched(c: Array, shape: tuple[int, ...]) -> Array:
    missing = (1,) * (len(shape) - c.ndim + 1)
    return np.broadcast_to(c.reshape(c.shape[:1] + missing + c.shape[1:]), (c.shape[0], *shape))
