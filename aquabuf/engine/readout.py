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

__all__ = ["GRID_PH", "MetalTable", "Readout"]

Array = NDArray[np.float64]

PH_LEAST, PH_MOST, PH_STEP = -1.0, 15.0, 0.004
GRID_PH: Array = np.linspace(PH_LEAST, PH_MOST, round((PH_MOST - PH_LEAST) / PH_STEP) + 1)
LAST = GRID_PH.size - 2
BARE_STEPS = 4           # Newton steps from the start before rows are guarded
STEP_DONE = 2e-3         # of a bare step; what is left after it is its square
GUARDED_STEPS = 60
GUARDED_DONE = 1e-7


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
class _Lines:
    """Straight lines of a table between grid points: value a + b pH on each piece."""

    a: Array
    b: Array

    @classmethod
    def of(cls, table: Array) -> _Lines:
        slope = np.diff(table, axis=-1) / PH_STEP
        return cls(table[..., :-1] - slope * GRID_PH[:-1], slope)


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
    _lines: _Lines = field(init=False, repr=False)
    _metal_lines: tuple[tuple[_Lines, _Lines], ...] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        if self.held.ndim != 2 or self.held.shape[1] != GRID_PH.size:
            raise InputError(f"a readout needs one table of {GRID_PH.size} values per carrier; found shape "
                             f"{self.held.shape}. Work it out on GRID_PH.")
        falls = np.diff(self.held, axis=1) < -1e-9 * (1.0 + np.abs(self.held[:, 1:]))
        if falls.any():
            j, k = np.argwhere(falls)[0]
            raise InputError(f"the base held by a carrier must rise with pH; carrier {j + 1} falls at pH "
                             f"{GRID_PH[k]:.2f}. Correct its curve.")
        object.__setattr__(self, "_lines", _Lines.of(self.held))
        object.__setattr__(self, "_metal_lines", tuple(
            (_Lines.of(np.log(m.free + m.bound)), _Lines.of(m.bound / (m.free + m.bound))) for m in self.metals))

    @property
    def carriers(self) -> int:
        """Number of carriers."""
        return int(self.held.shape[0])

    @property
    def neutral_ph(self) -> float:
        """pH at which [H+] equals [OH-]."""
        return 0.5 * float(np.log10(self.c_h / self.c_oh))

    # ------------------------------------------------------------ at a pH

    def base_at(self, ph: ArrayLike, amounts: ArrayLike) -> Array:
        """Base of a mixture that has this pH. [eq/L]

        ph, and amounts without its first axis of carriers, broadcast; pH outside -1 to 15 is nan.
        """
        x, c = self._given(ph, amounts)
        held, _ = self._held(x, c)
        return self._water(x) + held

    def buffer_at(self, ph: ArrayLike, amounts: ArrayLike) -> Array:
        """Buffer intensity of a mixture at a pH, the slope of base against pH. [eq/L per pH]"""
        x, c = self._given(ph, amounts)
        _, slope = self._held(x, c)
        ten = np.exp(LN10 * x)
        return LN10 * (self.c_oh * ten + self.c_h / ten) + slope

    def solids_at(self, ph: ArrayLike, amounts: ArrayLike) -> dict[str, Array]:
        """Metal in solid hydroxide at a pH, by its name. [mol/L]"""
        x, c = self._given(ph, amounts)
        return {m.name: m.solid(x, np.tensordot(m.per_unit, c, axes=1)) for m in self.metals}

    def _given(self, ph: ArrayLike, amounts: ArrayLike) -> tuple[Array, Array]:
        x, c = np.asarray(ph, dtype=float), np.asarray(amounts, dtype=float)
        if c.ndim == 0 or c.shape[0] != self.carriers:
            raise InputError(f"amounts need one row per carrier ({self.carriers}); found shape {c.shape}. "
                             "Put carriers on the first axis.")
        return np.where((x >= PH_LEAST) & (x <= PH_MOST), x, np.nan), c

    def _water(self, x: Array) -> Array:
        ten = np.exp(LN10 * x)
        return self.c_oh * ten - self.c_h / ten

    def _held(self, x: Array, c: Array) -> tuple[Array, Array]:
        """Base held by carriers and metals, and its slope against pH."""
        k = np.clip(np.nan_to_num((x - PH_LEAST) / PH_STEP), 0, LAST).astype(np.intp)
        value: Array = np.zeros(np.broadcast_shapes(x.shape, c.shape[1:]))
        slope = np.zeros(value.shape)
        for j in range(self.carriers):
            b = self._lines.b[j][k]
            value += c[j] * (self._lines.a[j][k] + b * x)
            slope += c[j] * b
        for m, (over, share) in zip(self.metals, self._metal_lines, strict=True):
            total = np.tensordot(m.per_unit, c, axes=1)
            s, up = np.exp(over.a[k] + over.b[k] * x), share.a[k] + share.b[k] * x
            is_solid = total > s
            dissolved = np.where(is_solid, s, total)
            value += m.charge * (total - dissolved) + m.complex_charge * dissolved * up
            ds = np.where(is_solid, s * over.b[k], 0.0)
            slope += -m.charge * ds + m.complex_charge * (ds * up + dissolved * share.b[k])
        return value, slope

    # ------------------------------------------------------------ pH

    def ph(self, base_eq_l: ArrayLike, amounts: ArrayLike, start: ArrayLike | None = None) -> Array:
        """pH of mixtures with this base and these amounts; nan where base is not finite or no pH from -1 to 15 fits.

        Newton's method on asinh(rest / 2 sqrt(Kw)), in which water alone is a straight line; `start` is a first guess
        (the pH a moment ago). Rows that do not settle at once are kept between two bounds and halved.
        """
        y, c = np.asarray(base_eq_l, dtype=float), np.asarray(amounts, dtype=float)
        shape = np.broadcast_shapes(y.shape, c.shape[1:], () if start is None else np.shape(start))
        y = np.broadcast_to(y, shape)
        missing = (1,) * (len(shape) - c.ndim + 1)
        c = np.broadcast_to(c.reshape(c.shape[:1] + missing + c.shape[1:]), (c.shape[0], *shape))
        x = np.array(np.broadcast_to(self.neutral_ph if start is None else start, shape), dtype=float)
        with np.errstate(invalid="ignore"):
            np.clip(x, PH_LEAST, PH_MOST, out=x)
            for _ in range(BARE_STEPS):
                step = self._step(x, y, c)
                x += step
                np.clip(x, PH_LEAST, PH_MOST, out=x)
                rest = ~(np.abs(step) < STEP_DONE)
                if not rest.any():
                    return x
            x[rest] = self._guarded(y[rest], c[:, rest], x[rest])
        return x

    def _step(self, x: Array, y: Array, c: Array) -> Array:
        held, slope = self._held(x, c)
        rest = y - held
        least = 4.0 * self.c_h * self.c_oh
        gap = np.arcsinh(rest / np.sqrt(least)) - LN10 * (x - self.neutral_ph)
        return gap / (LN10 + slope / np.sqrt(rest * rest + least))

    def _guarded(self, y: Array, c: Array, x: Array) -> Array:
        """The same between bounds that only come closer; one-dimensional."""
        low, high = np.full(x.shape, PH_LEAST), np.full(x.shape, PH_MOST)
        x = np.where(np.isfinite(x), x, self.neutral_ph)
        last = np.full(x.shape, np.inf)
        for _ in range(GUARDED_STEPS):
            step = self._step(x, y, c)
            low, high = np.where(step > 0.0, x, low), np.where(step > 0.0, high, x)
            new = x + step
            new = np.where((new > low) & (new < high) & (np.abs(step) < 0.5 * last), new, 0.5 * (low + high))
            last, x = np.abs(new - x), new
            if (last < GUARDED_DONE).all():
                break
        outside = (y < self._edge(PH_LEAST, c)) | (y > self._edge(PH_MOST, c))
        return np.where(np.isfinite(y) & np.isfinite(c).all(axis=0) & ~outside, x, np.nan)

    def _edge(self, ph: float, c: Array) -> Array:
        x = np.full(c.shape[1:], ph)
        return self._water(x) + self._held(x, c)[0]
