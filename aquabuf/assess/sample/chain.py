"""The chain of one sample, from its readings to its verdict: every link with value, unit, words and source.

A chain says what an assessment did; it decides nothing and solves nothing anew but the draws of single readings.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.limits import Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment
from aquabuf.assess.sample.chain_constants import balance, conditions_part, constants_part
from aquabuf.assess.sample.chain_readings import Origin, entered, house_label, in_house_units, uncertainty_steps
from aquabuf.assess.sample.chain_results import checks_part, results_part, rules_part, shares, written
from aquabuf.assess.sample.chain_steps import MET, NOT_MET, REFUSED, Chain, Part, Step, six
from aquabuf.assess.sample.closure import MUCH_BETTER, Closure, closure
from aquabuf.assess.sample.inputs import PH_COLUMNS, Values, uncertainties
from aquabuf.assess.sample.solve import (
    ALKALINITY_AIR,
    MEASURED_PAIRS,
    NO_PAIR,
    PAIRS,
    PH_AIR,
    groups,
    has,
    ph_columns,
    water_of,
)
from aquabuf.assess.sample.tables import CARBON_FROM_AIR
from aquabuf.engine.balance import protons_lost
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.readings.result import Readings

__all__ = ["Chain", "Part", "Step", "chain_of", "refused_chain"]

ORDER_SOURCE = "order of preference by uncertainty; our choice"


def chain_of(part: Assessment, readings: Readings, options: Options, limits: tuple[Limit, ...], origin: Origin, *,
             with_shares: bool = True) -> Chain:
    """The chain of the one accepted sample of `part`, which is the assessment of `readings` with these options.

    with_shares : draw each reading alone too, to tell which of them the intervals come from.

    Raises InputError unless there is just one sample.
    """
    if len(part.results) != 1:
        raise InputError(f"a chain is of one sample; found {len(part.results)}. Assess its row alone.")
    row = {str(name): value for name, value in part.results.iloc[0].items()}
    inputs = part.inputs
    values = inputs.values
    u = uncertainties(values, readings.headers)
    pair, ph_column, _ = next(iter(groups(values, inputs.choice)))
    water = water_of(values, pair, ph_column, inputs.acids, options)
    opened = options.exchange == "open" and pair != ALKALINITY_AIR
    water = water.at_air(options.air_co2_ppm) if opened else water
    gap = closure(values, u, inputs.acids, options)
    parts = (
        entered(origin, int(row["row"])), in_house_units(values, origin), uncertainty_steps(values, u, origin),
        _known_pair(values, pair, gap, water, options, row),
        conditions_part(water, values, options), constants_part(water, options),
        balance(water, ALKALINITY_AIR if opened else pair),
        results_part(row, shares(values, u, inputs.choice, inputs.acids, options) if with_shares else {}, options),
        checks_part(part.checks), rules_part(row, part.verdicts, limits, options))
    return Chain(sample_id=str(row["sample_id"]), row=int(row["row"]), file=origin.file, verdict=_verdict(row),
                 parts=tuple(p for p in parts if p.steps or p.words))


def _verdict(row: Mapping[str, Any]) -> str:
    """The outcome in one sentence."""
    broken, failed = (list(filter(None, str(row[name]).split("; "))) for name in ("warnings", "failed_checks"))
    words = [_counted(broken, "rule", "broken") if broken else "no rule broken",
             _counted(failed, "check", "not met") if failed else "all checks met"]
    words += [f"status: {row['status']}"] if row["status"] != "ok" else []
    return "; ".join(words)


def _counted(names: list[str], noun: str, what: str) -> str:
    return f"{len(names)} {noun}{'s' if len(names) > 1 else ''} {what} ({', '.join(names)})"


def refused_chain(sample_id: str, row: int, origin: Origin, reasons: pd.DataFrame, *, only_result: bool = False,
                  ) -> Chain:
    """The chain of a row that was refused: its readings as entered, and each reason with its remedy.

    only_result : it is one result of a sample that was assessed without it, in a long table.
    """
    verdict = "refused: the sample was assessed without it" if only_result else "refused: it was not assessed"
    steps = [Step(label=str(r["column"]), value=str(r["value"]), sign=REFUSED,
                  words=f"{r['rule']}; to do: {r['remedy']}") for r in reasons.to_dict("records")]
    parts = (*([entered(origin, row)] if origin.cells else []), Part("Why it was refused", tuple(steps)))
    return Chain(sample_id=sample_id, row=row, file=origin.file, verdict=verdict, parts=parts, refused=True)


# ---------------------------------------------------------------- the known pair


def _known_pair(values: Values, pair: str, gap: Closure, water: Water, options: Options,
                row: Mapping[str, Any]) -> Part:
    """What the answer rests on, and why."""
    steps = [Step(label="known pair", value=pair, words=_why(values, pair, gap, water), source=ORDER_SOURCE)]
    column = str(ph_columns(values, 1)[0])
    given = [name for name in PH_COLUMNS if name in values and np.isfinite(values[name][0])]
    if "pH" in pair.split(" and ") and given:
        others = f"; also given: {', '.join(house_label(n)[0] for n in given if n != column)}" if len(given) > 1 else ""
        steps.append(Step(label="pH used", value=house_label(column)[0],
                          words=f"on the {PH_COLUMNS[column]} scale; a meter's comes first in fresh water, last in "
                                f"salt water{others}"))
    steps += list(_temperature_of_ph(values))
    if options.exchange == "open":
        steps.append(Step(label="exchange with air", value="open", source="option of the run",
                          words="the solved water was brought into equilibrium with air before anything was read "
                                "from it"))
    carbon, carbon_u = float(gap.carbon_meq_l[0]), float(gap.carbon_u_meq_l[0])
    if np.isfinite(carbon):
        steps.append(Step(label="alkalinity less that of pH and carbon", value=six(carbon), unit="meq/L",
                          words=f"three readings of one pair; standard uncertainty {carbon_u:.3g} meq/L",
                          sign=MET if abs(carbon) <= 2.0 * carbon_u else NOT_MET))
    steps += list(_alkalinity(pair, row))
    return Part("What the answer rests on", tuple(steps))


def _alkalinity(pair: str, row: Mapping[str, Any]) -> Iterable[Step]:
    """What became of the alkalinity where it is not one of the pair."""
    if str(row["alkalinity_from"]) == "computed":
        yield Step(label="alkalinity", value="computed", words="not titrated; it follows from the known pair")
    elif "alkalinity" not in pair.split(" and "):
        yield Step(label="alkalinity as titrated", value=written(float(row["alkalinity_meq_l"]), 4), unit="meq/L",
                   words=f"stands among the results; species and tolerances rest on the "
                         f"{written(float(row['alkalinity_used_meq_l']), 4)} meq/L of the solved water")


def _temperature_of_ph(values: Values) -> Iterable[Step]:
    t_ph = values.get("ph_temperature_c")
    if t_ph is not None and np.isfinite(t_ph[0]) and t_ph[0] != values["temperature_c"][0]:
        yield Step(label="temperature of the pH reading", value=six(float(t_ph[0])), unit="°C",
                   words="the water was solved there and carried to its own temperature as a closed sample")


def _why(values: Values, pair: str, gap: Closure, water: Water) -> str:
    """Why this pair and no other."""
    there = has(values, 1)
    able = [p for p in MEASURED_PAIRS if all(there[m][0] for m in p.split(" and "))]
    if pair == PH_AIR:
        return CARBON_FROM_AIR
    if pair == ALKALINITY_AIR:
        return "no measured pair has a solution, and the run asked for exchange with air, which completes alkalinity"
    if len(able) == 1:
        return "the only two that were measured of pH, alkalinity, carbon and CO2 pressure"
    preferred = int(gap.preferred[0])
    if preferred != NO_PAIR and PAIRS[preferred] == pair == "pH and carbon":
        per_mole = float(np.ravel(protons_lost(water.state.carbonate_fractions()))[0])
        return (f"pH and alkalinity would imply the carbon with a standard uncertainty of "
                f"{six(1e3 * float(gap.carbonate_u[0]) / per_mole)} mmol/L, more than {MUCH_BETTER:g} times that of "
                f"the measured carbon")
    if preferred != NO_PAIR and PAIRS[preferred] == pair:
        return "in this salt water the two tell the pH better than the meter does"
    before = able[:able.index(pair)]
    others = ", ".join(p for p in able if p != pair)
    return (f"{', '.join(before)} came first and cannot be solved or cannot tell the carbon" if before
            else f"first in the order of preference; also measured: {others}")
