"""A titration curve as few buffers: strengths and pK of weak acids that hold protons as the waste does.

Per liter of raw waste, with d its share in the mixture:

    base added = constant + sum_i C_i alpha(pH, pK_i) + C_T nu(pH) + w(pH) / d,    w = [OH-] - [H+]

Strengths on a grid of pK come from non-negative least squares, smoothed by Tikhonov's penalty that is as strong as the
reading errors allow (discrepancy principle, Morozov 1966). Neighbors on the grid make one buffer; strengths and pK are
then fitted without penalty, and a buffer that the readings do not need is left out (Akaike's criterion for small
samples, Hurvich & Tsai 1989). Method names recalled.

Acids of several steps come out as one buffer per step. Carbonic acid and acids near its pK cannot be told apart.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import least_squares, nnls

from aquabuf.arrays import LN10, exp10
from aquabuf.chem.acids import ZERO_LEVEL_PK, Acid
from aquabuf.engine.balance import fractions, moments
from aquabuf.errors import InputError

__all__ = ["PK_GRID", "Spectrum", "fit_spectrum"]

Array = NDArray[np.float64]

PK_GRID: Array = np.linspace(1.0, 13.0, 121)
U_PH = 0.02            # scatter of pH readings; common practice, no source
U_BASE_SHARE = 0.002   # of the base added; common practice, no source
FEWEST_POINTS = 5
BEYOND = 0.5           # pH beyond the readings within which a pK can still be told
RIDGES = 10.0 ** np.arange(2.0, -7.1, -1.0)  # penalties tried, the strongest first; relative
LEAST_HIT = 1e-3       # of the largest strength on the grid
ROUNDS = 3             # of weights that follow the curve
CLOSEST = 0.3          # pK; closer hits make one buffer, and the halves of a split one start so far off
MOST_CHANGES = 20      # while buffers are left out, joined and split
MOST_PIVOTS = 20_000    # of non-negative least squares
LEAST_SINGULAR = 1e-7  # of scaled slopes


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Spectrum:
    """Buffers of a waste and how well they are known. Strengths per liter of raw waste.

    pk : of each buffer, rising; on the activity of a meter, at ionic strength and temperature of the titration. [-]
    mol_l, carbon_mol_l : strength of each buffer and of carbonic acid. [mol/L]
    constant : of the balance; base less acid that stays charged at every pH, and the zero of counting. [eq/L]
    covariance : of constant, carbon, strengths and pK, in this order; carbon has zeros where it was not fitted.
    grid_pk, grid_mol_l : the smoothed strengths on the grid. ridge : penalty used, relative.
    ph, residual_eq_l, error_eq_l : readings less curve at each reading, and the reading error there. [eq/L]
    """

    pk: Array
    mol_l: Array
    carbon_mol_l: float
    constant: float
    covariance: Array
    grid_pk: Array
    grid_mol_l: Array
    ridge: float
    c_h: float
    c_oh: float
    k1: float
    k2: float
    ph: Array
    residual_eq_l: Array
    error_eq_l: Array

    @property
    def u_mol_l(self) -> Array:
        """Standard uncertainty of each strength. [mol/L]"""
        return np.sqrt(np.diag(self.covariance))[2:2 + self.pk.size]

    @property
    def u_pk(self) -> Array:
        """Standard uncertainty of each pK. [-]"""
        return np.sqrt(np.diag(self.covariance))[2 + self.pk.size:]

    @property
    def u_carbon_mol_l(self) -> float:
        """Standard uncertainty of carbonic acid. [mol/L]"""
        return float(np.sqrt(self.covariance[1, 1]))

    @property
    def reduced_chi2(self) -> float:
        """Weighted squares of the residuals over the degrees of freedom; near 1 where reading errors explain them."""
        known = 1 + (self.covariance[1, 1] > 0.0) + 2 * self.pk.size
        return float(np.sum((self.residual_eq_l / self.error_eq_l) ** 2) / max(self.ph.size - known, 1))

    @property
    def base_eq_l(self) -> float:
        """Alkalinity of the raw waste, counted from pH 4.5 as everywhere. [eq/L]"""
        return float(-self.constant - self.mol_l[self.pk < ZERO_LEVEL_PK].sum())

    def base_at(self, ph: ArrayLike, dilution: ArrayLike = 1.0) -> Array:
        """Base to add per liter of raw waste to reach a pH, when waste is `dilution` of the mixture. [eq/L]"""
        x, d = np.asarray(ph, dtype=float), np.asarray(dilution, dtype=float)
        acids = _alpha(x, self.pk) @ self.mol_l
        return self.constant + acids + self.carbon_mol_l * self._carbonic(x)[0] + _water(x, self.c_h, self.c_oh) / d

    def buffer_at(self, ph: ArrayLike, dilution: ArrayLike = 1.0) -> Array:
        """Slope of `base_at` against pH. [eq/L per pH]"""
        x, d = np.asarray(ph, dtype=float), np.asarray(dilution, dtype=float)
        alpha = _alpha(x, self.pk)
        acids = (alpha * (1.0 - alpha)) @ self.mol_l + self.carbon_mol_l * self._carbonic(x)[1]
        return LN10 * (acids + (self.c_oh * exp10(x) + self.c_h * exp10(-x)) / d)

    def _carbonic(self, ph: Array) -> tuple[Array, Array]:
        return _carbonic(ph, self.k1, self.k2)

    def as_acids(self, log_gamma: float = 0.0) -> dict[Acid, float]:
        """The buffers as weak acids with their strengths, carbonic acid apart. [mol/L]

        Parameters
        ----------
        log_gamma
            Common logarithm of the activity coefficient of a single charge during the titration: takes pK to zero
            ionic strength for acids without charge. A titration tells neither charge nor heat: pK does not move with
            temperature, and a base such as ammonia is counted as an acid without charge.
        """
        return {Acid(name=f"buffer_{i}", pk=(float(pk - log_gamma),), reference="fitted to a titration curve",
                     meaning=f"buffer of pK {pk:.2f} found by titration"): float(mol)
                for i, (pk, mol) in enumerate(zip(self.pk, self.mol_l, strict=True), start=1)}


def fit_spectrum(base_eq_l: ArrayLike, ph: ArrayLike, *, c_h: float, c_oh: float, k1: float, k2: float,
                 dilution: ArrayLike = 1.0, pk_grid: ArrayLike = PK_GRID, carbonate: bool = True,
                 ridge: float | None = None, u_ph: float = U_PH, u_base_eq_l: ArrayLike | None = None) -> Spectrum:
    """Fit few buffers to a titration curve.

    Parameters
    ----------
    base_eq_l, ph
        Base added per liter of raw waste, acid negative [eq/L], and meter pH, in any order.
    c_h, c_oh
        [H+] is c_h 10^-pH and [OH-] is c_oh 10^pH. [mol/L]
    k1, k2
        Constants of carbonic acid in terms of 10^-pH. [-]
    dilution
        Share of waste in the mixture at each reading. [-]
    pk_grid
        Values of pK tried; those more than 0.5 beyond the readings are left out, as nothing tells them.
    carbonate
        Whether carbonic acid may be in it.
    ridge
        Penalty, relative; chosen by the discrepancy principle if None.
    u_ph, u_base_eq_l
        Standard error of a pH reading, and of the base added [eq/L] (0.2 % of it if None). Errors that all readings
        share, such as those of calibration and of titrant, are not in the uncertainties.

    Raises
    ------
    InputError
        Fewer than 5 readings, shapes that do not fit, values that are no numbers, errors not above zero.
    """
    y, x = np.asarray(base_eq_l, dtype=float), np.asarray(ph, dtype=float)
    d = np.broadcast_to(np.asarray(dilution, dtype=float), y.shape)
    _check(y, x, d, u_ph)
    u_base = np.hypot(U_BASE_SHARE * y, U_BASE_SHARE * 0.1 * float(np.ptp(y))) if u_base_eq_l is None else \
        np.broadcast_to(np.asarray(u_base_eq_l, dtype=float), y.shape)
    grid = np.asarray(pk_grid, dtype=float)
    grid = grid[(grid >= x.min() - BEYOND) & (grid <= x.max() + BEYOND)]
    if not grid.size:
        raise InputError(f"the grid of pK must reach the readings, which run from pH {x.min():.2f} to {x.max():.2f}; "
                         "none of it lies there. Widen it.")
    if not (u_base > 0.0).all():
        raise InputError(f"the error of the base added must be above 0; found {float(u_base.min()):g} eq/L. Give the "
                         "scatter of the burette.")
    start = Spectrum(pk=grid, mol_l=np.zeros(grid.size), carbon_mol_l=0.0, constant=0.0, covariance=np.zeros((2, 2)),
                     grid_pk=grid, grid_mol_l=np.zeros(grid.size), ridge=0.0, c_h=c_h, c_oh=c_oh, k1=k1, k2=k2, ph=x,
                     residual_eq_l=y, error_eq_l=np.hypot(u_ph * np.ptp(y) / np.ptp(x), u_base))
    problem = _Problem(y, d, u_base, u_ph, carbonate)
    smooth = start
    for _ in range(ROUNDS):
        smooth = problem.smoothed(smooth, grid, ridge)
    best = problem.fewest(smooth)
    return replace(best, grid_pk=grid, grid_mol_l=smooth.mol_l, ridge=smooth.ridge)


def _check(y: Array, x: Array, d: Array, u_ph: float) -> None:
    if y.ndim != 1 or y.shape != x.shape or y.size < FEWEST_POINTS:
        raise InputError(f"a spectrum needs {FEWEST_POINTS} readings or more, one base for each pH; found shapes "
                         f"{y.shape} and {x.shape}. Add readings.")
    if not (np.isfinite(y).all() and np.isfinite(x).all() and ((d > 0.0) & (d <= 1.0)).all()):
        raise InputError("base and pH of a spectrum must be numbers, and the share of waste above 0 and 1 at most; "
                         "found others. Leave such readings out.")
    if not (np.ptp(y) > 0.0 and np.ptp(x) > 0.0):
        raise InputError("base and pH of a spectrum must differ from reading to reading; found one value throughout. "
                         "Titrate over several units of pH.")
    if not u_ph > 0.0:
        raise InputError(f"the error of a pH reading must be above 0; found {u_ph:g}. Give its scatter, e.g. 0.02.")


def _water(ph: Array, c_h: float, c_oh: float) -> Array:
    return c_oh * exp10(ph) - c_h * exp10(-ph)


def _alpha(ph: Array, pk: Array) -> Array:
    """Share dissociated, pH by pK."""
    return 1.0 / (1.0 + exp10(np.clip(pk - ph[..., None], -200.0, 200.0)))


def _carbonic(ph: Array, k1: float, k2: float) -> tuple[Array, Array]:
    """Mean protons lost per carbonic acid and their variance, its slope against ln h."""
    inv_h = exp10(ph)
    mean, variance, _ = moments(fractions((np.asarray(k1), np.asarray(k2)), inv_h))
    return mean, variance


@dataclass(frozen=True, slots=True)
class _Problem:
    """Readings and their errors while buffers are sought."""

    y: Array
    d: Array
    u_base: Array
    u_ph: float
    carbonate: bool

    def _errors(self, s: Spectrum) -> Array:
        return np.hypot(self.u_ph * s.buffer_at(s.ph, self.d), self.u_base)

    def _with_residuals(self, s: Spectrum) -> Spectrum:
        return replace(s, residual_eq_l=self.y - s.base_at(s.ph, self.d))

    # ------------------------------------------------------------ on the grid

    def smoothed(self, s: Spectrum, grid: Array, ridge: float | None) -> Spectrum:
        """Strengths on the grid, with the strongest penalty that the reading errors allow."""
        weight = 1.0 / s.error_eq_l
        nu = _carbonic(s.ph, s.k1, s.k2)[0] if self.carbonate else np.zeros(s.ph.size)
        columns = np.column_stack([np.ones(s.ph.size), -np.ones(s.ph.size), nu, _alpha(s.ph, grid)])
        a = columns * weight[:, None]
        b = (self.y - _water(s.ph, s.c_h, s.c_oh) / self.d) * weight
        scale = float(np.sqrt((a[:, 3:] ** 2).sum(axis=0).mean()))
        penalty = np.hstack([np.zeros((grid.size, 3)), np.eye(grid.size)])
        zeros = np.zeros(grid.size)
        found, used = np.zeros(columns.shape[1]), 0.0
        for used in RIDGES if ridge is None else (ridge,):
            found, _ = nnls(np.vstack([a, np.sqrt(used) * scale * penalty]), np.concatenate([b, zeros]),
                            maxiter=MOST_PIVOTS)
            if np.sum((a @ found - b) ** 2) <= s.ph.size:
                break
        smooth = self._with_residuals(replace(s, pk=grid, mol_l=found[3:], carbon_mol_l=float(found[2]),
                                      constant=float(found[0] - found[1]), ridge=float(used)))
        return replace(smooth, error_eq_l=self._errors(smooth))

    # ------------------------------------------------------------ few buffers

    def fewest(self, smooth: Spectrum) -> Spectrum:
        """Grid hits put together, then buffers left out, joined or split as long as Akaike's criterion falls."""
        pk, mol = _clusters(smooth.pk, smooth.mol_l)
        best = self._fitted(smooth, pk, mol, smooth.carbon_mol_l)
        for _ in range(MOST_CHANGES):
            changed = min(self._changes(best), key=self._criterion, default=best)
            if changed is best or self._criterion(changed) > self._criterion(best):
                break
            best = changed
        return best

    def _changes(self, s: Spectrum) -> Iterator[Spectrum]:
        """What might do instead: without the least sure buffer, the closest two as one, without carbon, carbon for the
        buffers near its pK, one split."""
        if s.pk.size:
            least = int(np.argmin(s.mol_l / s.u_mol_l))
            yield self._fitted(s, np.delete(s.pk, least), np.delete(s.mol_l, least), s.carbon_mol_l)
        if s.pk.size > 1:
            yield self._fitted(s, *_joined(s.pk, s.mol_l, int(np.argmin(np.diff(s.pk)))), s.carbon_mol_l)
        if s.carbon_mol_l > 0.0:
            yield self._fitted(s, s.pk, s.mol_l, 0.0)
        like_carbon = np.minimum(np.abs(s.pk + np.log10(s.k1)), np.abs(s.pk + np.log10(s.k2))) < CLOSEST
        if self.carbonate and like_carbon.any():
            carbon = s.carbon_mol_l + 0.5 * float(s.mol_l[like_carbon].sum())
            yield self._fitted(s, s.pk[~like_carbon], s.mol_l[~like_carbon], carbon)
        if s.reduced_chi2 > 1.0:
            for i in range(s.pk.size):
                yield self._fitted(s, *_split(s.pk, s.mol_l, i), s.carbon_mol_l)

    def _criterion(self, s: Spectrum) -> float:
        n, k = s.ph.size, 1 + (s.carbon_mol_l > 0.0) + 2 * s.pk.size
        if n - k - 1 <= 0:
            return np.inf
        return float(np.sum((s.residual_eq_l / s.error_eq_l) ** 2) + 2 * k + 2 * k * (k + 1) / (n - k - 1))

    def _fitted(self, s: Spectrum, pk: Array, mol: Array, carbon: float) -> Spectrum:
        """Strengths and pK fitted without penalty, under the errors of `s`."""
        m, c = pk.size, int(carbon > 0.0)
        low, high = s.ph.min() - BEYOND, s.ph.max() + BEYOND
        least = np.concatenate([[-np.inf], np.zeros(c + m), np.full(m, low)])
        most = np.concatenate([np.full(1 + c + m, np.inf), np.full(m, high)])
        scale = np.concatenate([np.full(1 + c + m, float(np.ptp(self.y))), np.ones(m)])
        start = np.concatenate([[s.constant], [carbon] * c, np.maximum(mol, 1e-6 * scale[0]), pk])
        nu = [_carbonic(s.ph, s.k1, s.k2)[0][:, None]] * c

        def of(p: Array) -> Spectrum:
            return replace(s, constant=float(p[0]), carbon_mol_l=float(p[1]) if c else 0.0, mol_l=p[1 + c:1 + c + m],
                           pk=p[1 + c + m:])

        def misfit(p: Array) -> Array:
            return (of(p).base_at(s.ph, self.d) - self.y) / s.error_eq_l

        def slopes(p: Array) -> Array:
            alpha = _alpha(s.ph, p[1 + c + m:])
            by_pk = -LN10 * alpha * (1.0 - alpha) * p[1 + c:1 + c + m]
            return np.hstack([np.ones((s.ph.size, 1)), *nu, alpha, by_pk]) / s.error_eq_l[:, None]

        done = least_squares(misfit, np.clip(start, least, most), slopes, bounds=(least, most), x_scale=scale)
        found = self._with_residuals(of(done.x))
        covariance = np.insert(np.insert(_covariance(slopes(done.x)), 1, 0.0, axis=0), 1, 0.0, axis=1) if not c else \
            _covariance(slopes(done.x))
        found = replace(found, covariance=covariance)
        return _sorted(replace(found, covariance=covariance * max(1.0, found.reduced_chi2)))


def _clusters(pk: Array, mol: Array) -> tuple[Array, Array]:
    """Mean pK and strength of each hump on the grid; humps end at gaps and at valleys."""
    hits = np.flatnonzero(mol > LEAST_HIT * mol.max(initial=0.0))
    if not hits.size:
        return np.zeros(0), np.zeros(0)
    level = np.concatenate([[0.0], mol, [0.0]])[1:-1]
    valley = np.zeros(mol.size, dtype=bool)
    valley[1:-1] = (level[1:-1] < level[:-2]) & (level[1:-1] <= level[2:])
    cut = (np.diff(pk[hits]) > CLOSEST) | valley[hits[1:]]
    at = np.concatenate([[0], np.flatnonzero(cut) + 1])
    total = np.add.reduceat(mol[hits], at)
    return np.add.reduceat(pk[hits] * mol[hits], at) / total, total


def _joined(pk: Array, mol: Array, i: int) -> tuple[Array, Array]:
    """Buffers i and i + 1 as one."""
    total = mol[i] + mol[i + 1]
    mean = (pk[i] * mol[i] + pk[i + 1] * mol[i + 1]) / total if total > 0.0 else pk[i]
    return np.concatenate([pk[:i], [mean], pk[i + 2:]]), np.concatenate([mol[:i], [total], mol[i + 2:]])


def _split(pk: Array, mol: Array, i: int) -> tuple[Array, Array]:
    """Buffer i as two halves."""
    return (np.concatenate([pk[:i], [pk[i] - CLOSEST, pk[i] + CLOSEST], pk[i + 1:]]),
            np.concatenate([mol[:i], [0.5 * mol[i]] * 2, mol[i + 1:]]))


def _covariance(slopes: Array) -> Array:
    """Inverse of the normal matrix; what the readings cannot tell gets a large variance instead of an error."""
    size = np.maximum(np.sqrt((slopes**2).sum(axis=0)), 1e-300)
    _, singular, v = np.linalg.svd(slopes / size, full_matrices=True)
    kept = np.zeros(v.shape[0])
    kept[:singular.size] = singular
    return (v.T / np.maximum(kept, LEAST_SINGULAR) ** 2) @ v / np.outer(size, size)


def _sorted(s: Spectrum) -> Spectrum:
    """Buffers in order of pK."""
    order, m = np.argsort(s.pk), s.pk.size
    at = np.concatenate([[0, 1], 2 + order, 2 + m + order]).astype(np.intp)
    return replace(s, pk=s.pk[order], mol_l=s.mol_l[order], covariance=s.covariance[np.ix_(at, at)])
