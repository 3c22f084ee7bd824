"""Blending of any number of waters, and what every other ratio of them would do.

Alkalinity, carbon, ions and heat are conserved and the pH is solved. A mean of pH values is no pH, and waters at
saturation mix to water that is not.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Finding, StepOutcome
from aquabuf.assess.plant.steps.words import as_rows_of, holding, span
from aquabuf.assess.plant.stream import Stream, mixed
from aquabuf.errors import InputError
from aquabuf.units import to_house

__all__ = ["Blend", "Source", "Sweep", "SweepPoint"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

STEP = 0.05          # of the share that is swept
TOLD_PH = 0.01       # difference of a mean pH that is worth a word
TOLD_MOL_L = 1e-7    # potential beyond that of the parts that is worth a word, 0.01 mg/L as CaCO3


@dataclass(frozen=True, slots=True, eq=False)
class Source:
    """A water to be blended; `share` is its volume in proportion to those of the others, one or one per row."""

    name: str
    stream: Stream
    share: ArrayLike


@dataclass(frozen=True, slots=True, eq=False)
class SweepPoint:
    """A share of the swept source and the precipitation potential there, by row; nan where there is none."""

    share: Array
    ccpp_mol_l: Array


@dataclass(frozen=True, slots=True, eq=False)
class Sweep:
    """The blend at every share of the source `vary`, the others in proportion; arrays are (shares, rows)."""

    vary: str
    share: Array  # (shares,)
    ph: Array
    alkalinity_eq_l: Array
    si_calcite: Array
    ccpp_mol_l: Array

    def most_depositing(self) -> SweepPoint:
        """Where most calcium carbonate would deposit; nothing where no share deposits."""
        return self._extreme(self.ccpp_mol_l)

    def most_dissolving(self) -> SweepPoint:
        """Where most calcium carbonate would dissolve; nothing where no share dissolves."""
        return self._extreme(-self.ccpp_mol_l)

    def _extreme(self, potential: Array) -> SweepPoint:
        i = np.where(np.isfinite(potential), potential, -np.inf).argmax(axis=0)
        known = np.isfinite(potential).all(axis=0)  # else the worst may lie where nothing is known
        there = known & (np.take_along_axis(potential, i[None, :], 0)[0] > 0.0)
        found = np.take_along_axis(self.ccpp_mol_l, i[None, :], 0)[0]
        return SweepPoint(np.where(there, self.share[i], np.nan), np.where(there, found, np.nan))

    def turns(self) -> Array:
        """Shares at which the potential changes sign, straight between two points of the sweep; nan where it does not.

        Shape (shares - 1, rows): one cell per interval.
        """
        a, b = self.ccpp_mol_l[:-1], self.ccpp_mol_l[1:]
        changes = (a < 0.0) != (b < 0.0)
        changes &= np.isfinite(a) & np.isfinite(b)
        part = a / np.where(changes, a - b, 1.0)
        low, high = self.share[:-1, None], self.share[1:, None]
        return np.where(changes, low + part * (high - low), np.nan)

    def beyond_parts(self) -> tuple[Mask, Mask]:
        """Rows in which some blend deposits more than both ends of the sweep, and in which some dissolves more."""
        most, least = self.ccpp_mol_l.max(axis=0), self.ccpp_mol_l.min(axis=0)
        ends = self.ccpp_mol_l[[0, -1]]
        return ((most > ends.max(axis=0) + TOLD_MOL_L) & (most > 0.0),
                (least < ends.min(axis=0) - TOLD_MOL_L) & (least < 0.0))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Blend:
    """The water so far mixed with others.

    own_share, own_name : of the water that comes from the step before.
    vary : name of the source whose share the sweep changes; the first of the others by default.
    with_sweep : whether `run` looks at the other ratios too.
    """

    name: str
    others: Sequence[Source]
    own_share: ArrayLike
    own_name: str = "the water so far"
    vary: str | None = None
    with_sweep: bool = True
    kind: str = "blend"

    def __post_init__(self) -> None:
        names = [self.own_name, *(s.name for s in self.others)]
        if not self.others:
            raise InputError(f"step {self.name!r} blends and needs another water; none is given. Add a source.")
        if len(set(names)) < len(names):
            raise InputError(f"sources of step {self.name!r} must have names of their own; found {', '.join(names)}. "
                             "Rename one.")
        if self.vary is not None and self.vary not in names:
            raise InputError(f"step {self.name!r} sweeps the share of {self.vary!r}, which is no source; there are "
                             f"{', '.join(names)}. Name one of them.")

    def run(self, stream: Stream) -> StepOutcome:
        """The blend. Raises InputError for shares that are negative, all zero, or do not fit the rows."""
        sources = self._sources(stream)
        shares = np.array([s.share for s in sources])
        after = mixed([s.stream for s in sources], list(shares))
        mean = (shares * [s.stream.water().ph for s in sources]).sum(axis=0) / shares.sum(axis=0)
        figures = {"ph_after": after.water().ph, "mean_of_ph": mean}
        findings = [_mean_finding(after.water().ph, mean)]
        if self.with_sweep:
            sweep = self.sweep(stream)
            figures |= _sweep_figures(sweep)
            findings += _sweep_findings(sweep, figures)
        return StepOutcome(after, (), holding(*findings), figures)

    def sweep(self, stream: Stream, step: float = STEP) -> Sweep:
        """The blend from none to all of one source. Raises InputError as `run` does, or where the rest has no share."""
        sources = self._sources(stream)
        vary = self.vary or self.others[0].name
        rest = sum(np.asarray(s.share) for s in sources if s.name != vary)
        if not np.all(rest > 0.0):
            raise InputError(f"the sweep of step {self.name!r} changes the share of {vary!r} against the other "
                             "sources; their shares are all zero in some row. Give them shares, or leave it out.")
        share = np.linspace(0.0, 1.0, round(1.0 / step) + 1)
        rows, n = sources[0].stream.rows, share.size
        at = np.tile(share, rows)
        volumes = [at if s.name == vary else (1.0 - at) * np.repeat(np.asarray(s.share) / rest, n) for s in sources]
        water = mixed([s.stream.repeated(n) for s in sources], volumes).water()

        def by_share(v: Array) -> Array:
            return v.reshape(rows, n).T

        return Sweep(vary, share, *(by_share(v) for v in (
            water.ph, water.alkalinity_eq_l, water.saturation_index(), water.precipitation_potential_mol_l())))

    def _sources(self, stream: Stream) -> list[Source]:
        """All waters with as many rows as the longest, and their shares by row."""
        sources = [Source(self.own_name, stream, self.own_share), *self.others]
        rows = max(s.stream.rows for s in sources)
        for s in sources:
            if s.stream.rows not in (1, rows):
                raise InputError(f"sources of step {self.name!r} must have one row or {rows}; {s.name!r} has "
                                 f"{s.stream.rows}. Give one reading, or one for each row.")
        out = []
        for s in sources:
            water = s.stream if s.stream.rows == rows else s.stream.take(np.zeros(rows, dtype=int))
            out.append(Source(s.name, water, as_rows_of(s.share, rows, f"share of {s.name!r} in step {self.name!r}")))
        return out


def _caco3(mol_l: Array) -> Array:
    return np.asarray(to_house(mol_l, "mg/L as CaCO3", "hardness", back=True))


def _sweep_figures(sweep: Sweep) -> dict[str, Array]:
    deposits, dissolves, turns = sweep.most_depositing(), sweep.most_dissolving(), sweep.turns()
    first = np.isfinite(turns).argmax(axis=0)
    return {
        "most_depositing_share_percent": 100.0 * deposits.share,
        "most_depositing_ccpp_mg_l_caco3": _caco3(deposits.ccpp_mol_l),
        "most_dissolving_share_percent": 100.0 * dissolves.share,
        "most_dissolving_ccpp_mg_l_caco3": _caco3(dissolves.ccpp_mol_l),
        "saturation_turns_share_percent": 100.0 * np.take_along_axis(turns, first[None, :], 0)[0],
        "saturation_turns_count": np.isfinite(turns).sum(axis=0).astype(float),
    }


def _mean_finding(ph: Array, mean: Array) -> Finding:
    where = np.abs(ph - mean) > TOLD_PH
    return Finding("note", f"the blend has pH {span(ph, where, 2)}; the mean of the pH values, {span(mean, where, 2)}, "
                   f"would be wrong by {span(np.abs(mean - ph), where, 2)}", where,
                   "alkalinity and carbon are conserved in mixing, pH is not")


def _sweep_findings(sweep: Sweep, figures: dict[str, Array]) -> list[Finding]:
    deposits, dissolves = (figures[f"most_{what}_ccpp_mg_l_caco3"] for what in ("depositing", "dissolving"))
    at_deposits, at_dissolves = (figures[f"most_{what}_share_percent"] for what in ("depositing", "dissolving"))
    some_deposit, some_dissolve = np.isfinite(deposits), np.isfinite(dissolves)
    ordered = np.sort(sweep.turns(), axis=0)  # the first, second ... of each row; nan last
    turning = np.isfinite(ordered)
    turns = [span(100.0 * share, there, 0) for share, there in zip(ordered, turning, strict=True) if there.any()]
    above, below = sweep.beyond_parts()
    unknown = np.asarray((~np.isfinite(sweep.si_calcite) & np.isfinite(sweep.ph)).any(axis=0))
    vary, rule = repr(sweep.vary), "precipitation potential of calcite along the ratio sweep"
    beyond, avoid = "waters mix along a curve, not a straight line", "stay away from that ratio, also in a changeover"
    return [
        Finding("warning", "some ratios deposit more than either end of the sweep, most at "
                f"{span(at_deposits, above, 0)} % of {vary}", above, beyond, avoid),
        Finding("warning", "some ratios dissolve more than either end of the sweep, most at "
                f"{span(at_dissolves, below, 0)} % of {vary}", below, beyond, avoid),
        Finding("note", f"worst for deposits is {span(at_deposits, some_deposit, 0)} % of {vary}: "
                f"{span(deposits, some_deposit)} mg/L as CaCO3 would deposit", some_deposit, rule),
        Finding("note", f"worst for pipes of cement and metal is {span(at_dissolves, some_dissolve, 0)} % of {vary}: "
                f"{span(-dissolves, some_dissolve)} mg/L as CaCO3 would dissolve", some_dissolve, rule),
        Finding("note", f"the blend changes between dissolving and depositing at about {' and '.join(turns)} % of "
                f"{vary}", np.isfinite(ordered[0]), rule),
        Finding("note", "saturation along the ratios is not judged: calcium of a source is not known", unknown, rule,
                "measure calcium of every source"),
    ]
