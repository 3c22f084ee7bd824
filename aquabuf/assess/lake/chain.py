"""The chain of one lake, from its readings to its verdicts: which ANC it has, its class, its loads, what was judged."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.chain_results import (
    TITLES,
    class_part,
    figures_part,
    load_part,
    verdict_part,
    verdict_words,
)
from aquabuf.assess.lake.draws import DRAWN
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.tables import class_table, load_table, verdict_table
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.chain_constants import (
    STRENGTH_SOURCES,
    STRENGTH_WORDS,
    carbonate_constants,
    pressure_words,
    within,
)
from aquabuf.assess.sample.chain_readings import Origin, entered, in_house_units, uncertainty_steps
from aquabuf.assess.sample.chain_results import checks_part
from aquabuf.assess.sample.chain_steps import Chain, Part, Step, six
from aquabuf.assess.sample.inputs import Values, ionic_strength, uncertainties, values_of
from aquabuf.assess.sample.quality import check_rows

__all__ = ["LakeTables", "lake_chain"]

MICRO = 1e6
TITRATION_IS = {"anc_eq_l": "the titration of a whole sample, so it is an ANC",
                "alkalinity_eq_l": "the titration of a filtered sample, so it is an alkalinity"}


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LakeTables:
    """The long tables that chains are made from; more rows than those of one lake do no harm."""

    checks: pd.DataFrame
    classes: pd.DataFrame
    verdicts: pd.DataFrame
    loads: pd.DataFrame

    @classmethod
    def of(cls, found: LakeAssessment, limits: tuple[Limit, ...]) -> LakeTables:
        """All of them, of an assessment."""
        return cls(checks=check_rows(found.checks, found.frame, only_unmet=False), classes=class_table(found),
                   verdicts=verdict_table(found, limits), loads=load_table(found))

    def at(self, row: int) -> LakeTables:
        """Those of one row of the readings."""
        return LakeTables(checks=_of(self.checks, row), classes=_of(self.classes, row),
                          verdicts=_of(self.verdicts, row), loads=_of(self.loads, row))


def _of(table: pd.DataFrame, row: int) -> pd.DataFrame:
    return table[table["row"].to_numpy() == row] if len(table) else table


def lake_chain(found: LakeAssessment, i: int, tables: LakeTables, options: LakeOptions, limits: tuple[Limit, ...],
               origin: Origin, headers: Mapping[str, tuple[str, str]]) -> Chain:
    """The chain of lake `i` of an assessment with these options and limits.

    tables : of the assessment. headers : of the readings, header to column and unit.
    """
    row: dict[str, Any] = {str(name): value for name, value in found.results.iloc[i].items()}
    own = tables.at(int(row["row"]))
    values = values_of(found.frame.iloc[[i]])
    values.setdefault("temperature_c", np.full(1, np.nan))
    drawn = {name: u for name, u in uncertainties(values, headers).items() if name in DRAWN}
    parts = (
        entered(origin, int(row["row"])), in_house_units(values, origin),
        uncertainty_steps(values, drawn, origin), _conditions(found, i, values, options),
        _constants(found, i, options),
        *(figures_part(title, found, i, row, options, more) for title, more in (
            (TITLES[0], tuple(_taken_as(found, i, values))), (TITLES[1], ()))),
        checks_part(own.checks), figures_part(TITLES[2], found, i, row, options),
        class_part(found, i, row, own.classes, options),
        *(figures_part(title, found, i, row, options) for title in TITLES[3:5]),
        load_part(found, i, row, own.loads, options),
        *(figures_part(title, found, i, row, options) for title in TITLES[6:]),
        verdict_part(found, row, own.verdicts, limits, options), _left_out(row))
    return Chain(sample_id=str(row["sample_id"]), row=int(row["row"]), file=origin.file,
                 verdict=verdict_words(found, row), parts=tuple(p for p in parts if p.steps))


def _taken_as(found: LakeAssessment, i: int, values: Values) -> Iterator[Step]:
    """A titration that is taken under another name than that of its column."""
    for name, words in TITRATION_IS.items():
        used = float(found.lakes.get(name)[i, 0])
        if np.isfinite(used) and not np.isfinite(values.get(name, np.full(1, np.nan))[0]):
            yield Step(label="titration taken as", value="ANC" if name.startswith("anc") else "alkalinity", words=words,
                       source="filtered or not, as recorded")


def _conditions(found: LakeAssessment, i: int, values: Values, options: LakeOptions) -> Part:
    """Temperature, ionic strength, pressure and air, each with its origin, and the model of organic acids."""
    setting = found.lakes.setting
    c = setting.lake
    if np.isnan(c.t_c[i, 0]):
        return Part("Conditions", (Step(label="temperature", value="none", words="so nothing that needs a constant "
                                        "can be worked out"),))
    strength = ionic_strength(values)
    of = str(strength[1][0]) if np.isfinite(strength[0][0]) else "alkalinity"
    steps = [
        Step(label="temperature", value=six(float(c.t_c[i, 0])), unit="°C", words="of the water", source="reading",
             sign=within("t_c", float(c.t_c[i, 0]))),
        Step(label=f"ionic strength, from {of}", value=six(float(c.ionic_strength_mol_l[i, 0])), unit="mol/L",
             words=STRENGTH_WORDS[of], source=STRENGTH_SOURCES[of],
             sign=within("ionic_strength_mol_l", float(c.ionic_strength_mol_l[i, 0]))),
        Step(label="air pressure", value=six(float(c.pressure_atm[i, 0])), unit="atm", **pressure_words(values)),
        Step(label="CO2 pressure of air", value=f"{MICRO * setting.air_pco2_atm[i, 0]:.1f}", unit="µatm",
             words=f"{options.air_co2_ppm:g} µmol/mol of dry air, less water vapor",
             source="Weiss & Price 1980 (recalled)"),
    ]
    organic = found.rules.organic
    steps.append(Step(label="organic acids", value=organic.name, words=organic.in_words()))
    return Part("Conditions", tuple(steps))


def _constants(found: LakeAssessment, i: int, options: LakeOptions) -> Part:
    """Constants of carbonic acid and water at the temperature of the lake."""
    c = found.lakes.setting.take(np.array([i])).lake
    if np.isnan(c.t_c[0, 0]):
        return Part("Constants at these conditions", ())
    return Part("Constants at these conditions", tuple(carbonate_constants(c, options.carbonic)),
                "pK and log at zero ionic strength in fresh water; used: with activity coefficients")


def _left_out(row: Mapping[str, Any]) -> Part:
    """What could not be worked out and what would bring it."""
    steps = [Step(label=what, value="not worked out", words=needs.removesuffix(")"))
             for what, _, needs in (word.partition(" (") for word in str(row["left_out"]).split("; ") if word)]
    return Part("What is left out", tuple(steps))
