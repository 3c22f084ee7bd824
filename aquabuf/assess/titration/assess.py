"""Assess a piece of titrations: every method, the recommended result, what went wrong, and who was refused."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.titration.choose import Choice, choose
from aquabuf.assess.titration.findings import Finding, findings
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.solve import Solved, solve_titrations
from aquabuf.assess.titration.tables import figures_of, findings_table, results_table
from aquabuf.readings.titration.result import Titrations

__all__ = ["TitrationResult", "assess_titrations", "assumptions"]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class TitrationResult:
    """Assessed titrations in input order.

    results : one row per sample, refused ones too; columns of alkalinity.csv.
    findings : one row per finding. rejected : reasons of refusal. solved : all that was worked out, for figures.
    at : place in `results` of each titration in `solved`. choice : recommended results.
    found : findings before they became a table. assumed : how many titrations rest on each assumption, in words.
    """

    results: pd.DataFrame
    findings: pd.DataFrame
    rejected: pd.DataFrame
    solved: Solved
    choice: Choice
    found: tuple[Finding, ...]
    at: NDArray[np.intp]
    assumed: Mapping[str, int]


def assess_titrations(t: Titrations, options: TitrationOptions, *, by_liter: bool, by_kilogram: bool,
                      ) -> TitrationResult:
    """Assess the titrations of `t`; `by_liter` and `by_kilogram` say which columns the table is to have."""
    s = solve_titrations(t, options)
    choice = choose(s)
    found = findings(s, choice)
    at = np.flatnonzero(t.usable)
    results = results_table(t, s, choice, found, figures_of(s, choice, options), options=options, by_liter=by_liter,
                            by_kilogram=by_kilogram)
    return TitrationResult(
        results=results, findings=findings_table(s, found, results["row"].to_numpy()[at]), rejected=t.rejected,
        solved=s, choice=choice, found=found, at=at, assumed=_assumed(s))


def _assumed(s: Solved) -> dict[str, int]:
    """How many titrations rest on each assumption, in words."""
    return {words: int(mask.sum()) for words, mask in assumptions(s).items() if mask.any()}


def assumptions(s: Solved) -> dict[str, NDArray[np.bool_]]:
    """What is taken where it was not stated, in words, and of which titrations."""
    n = s.curves.count.size

    def blank(name: str) -> NDArray[np.bool_]:
        v = s.samples.get(name)
        if v is None:
            return np.ones(n, dtype=bool)
        return v == "" if v.dtype.kind == "O" else np.isnan(v)

    acid = ~s.curves.is_base
    return {
        "no temperature: 20 °C": blank("temperature_c"),
        "kind of acid not stated: hydrochloric": blank("titrant_acid") & acid,
        "CO2 in the vessel not stated: kept in (closed)": blank("exchange"),
        "uncertainty of the strength not stated: default": blank("titrant_strength_u_eq_l")
        & blank("titrant_strength_u_eq_kg"),
        "uncertainty of pH not stated: default": blank("ph_u"),
        "ionic strength from the alkalinity alone (no conductivity, salinity or ions)":
            np.isnan(s.curves.ionic_strength_mol_l) & blank("salinity"),
        "filtered or not is not stated": blank("filtered"),
        "no standards: the zero potential comes from the acid end of the curve, so the strength is not checked":
            s.curves.is_potential & (s.calibration.standards == 0),
        "fewer than two standards: slope of the electrode as in theory, to 1 % unless electrode_slope_spread says so":
            s.curves.is_potential & (s.calibration.standards < 2),
        "density of the titrant not stated: 1 kg/L": blank("titrant_density_kg_l") & s.curves.needs_density,
    }
