"""The dose-response table for a shift log: what any dose of a product sets and does, and what 0.1 pH costs."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from aquabuf.assess.plant.build import build_steps
from aquabuf.assess.plant.curve import DoseCurve, dose_curve
from aquabuf.assess.plant.feed import both_units, shown
from aquabuf.assess.plant.feed_lines import feed_of
from aquabuf.assess.plant.plan import Plan
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.plan_units import in_key_unit
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import stream_of
from aquabuf.assess.plant.train import Passed, Train, run_train
from aquabuf.errors import InputError
from aquabuf.report.dose_lines import aligned, bullet, calcite_words, figure, sentence

__all__ = ["dose_responses", "mg_l_of"]

MG_L = "mg/L"
MARK = ">"


def mg_l_of(text: str) -> float:
    """A dose such as "60 mg/L" as mg/L. Raises InputError where it is no dose above 0."""
    number, _, unit = text.strip().partition(" ")
    try:
        value = in_key_unit(float(number), unit, "mass", MG_L)
    except (ValueError, InputError) as error:
        reason = str(error) if isinstance(error, InputError) else f"must be a number and a unit; found {text!r}"
        raise InputError(f"the largest dose {reason}. Write it as \"60 mg/L\".") from None
    if not (np.isfinite(value) and value > 0.0):
        raise InputError(f"the largest dose must be above 0; found {text!r}. Write it as \"60 mg/L\".")
    return value


def dose_responses(path: Path, *, step: str | None = None, product: str | None = None,
                   most_mg_l: float | None = None) -> str:
    """Tables of every product that a plan doses, or of one step or product.

    most_mg_l : largest dose of the tables, of product as delivered; by default about twice the wanted one.

    Raises
    ------
    InputError
        For a plan that cannot be read or has no doses, a step or product that it has not, and where nothing of the
        product is wanted and no largest dose is given.
    """
    plan = read_plan(path)
    train = run_train(stream_of(dict(plan.raw.values))[0], build_steps(plan))
    if not train.feasible()[0]:
        reasons = "; ".join(f"{name}: {f.words}" for name, f in train.findings("stop"))
        raise InputError(f"{plan.file} has no doses to draw a response around. {reasons}")
    chosen = _chosen(plan, train, step, product)
    return "\n\n".join(_sheet(plan, p, s, most_mg_l) for p, s in chosen) + "\n"


def _chosen(plan: Plan, train: Train, step: str | None, product: str | None) -> list[tuple[Passed, Stocked]]:
    """Steps and products that are asked for. Raises InputError naming those there are where none is."""
    there = list({(p.step.name, d.product.name): (p, d.product)
                  for p in train.passed for d in p.outcome.doses}.values())
    found = [(p, s) for p, s in there if step in (None, p.step.name) and product in (None, s.name)]
    if not found:
        asked = " and ".join(f"{what} {name!r}" for what, name in (("step", step), ("product", product)) if name)
        doses = "; ".join(f"{s.name} in {p.step.name}" for p, s in there)
        raise InputError(f"{plan.file} must dose what the table is for; found {asked or 'no dose'}, and it doses "
                         f"{doses or 'nothing'}. {'Correct the name.' if there else 'Add a step that doses.'}")
    return found


def _sheet(plan: Plan, passed: Passed, stocked: Stocked, most_mg_l: float | None) -> str:
    wanted = next(d.mol_l[0] for d in passed.outcome.doses if d.product.name == stocked.name)
    if wanted == 0.0 and most_mg_l is None:
        raise InputError(f"nothing of {stocked.name!r} is wanted in step {passed.step.name!r}, so that the table needs "
                         "its largest dose; found none. Give --most \"60 mg/L\".")
    curve = dose_curve(passed, stocked.name, most_mg_l=most_mg_l)
    p = stocked.product
    head = [f"{plan.name}{f', {plan.date}' if plan.date else ''}: {stocked.name} in {passed.step.name}",
            bullet(f"{p.name}, {p.formula}, {100.0 * stocked.strength:.4g} % ({stocked.strength_from}); flow "
                   f"{both_units(plan.flow.now_m3_d, 'm³/d')}; water before the step pH "
                   f"{passed.before.water().ph[0]:.2f}, {passed.before.t_c[0]:.1f} °C; other doses held.", mark="")]
    return "\n".join([*head, "", _table(plan, stocked, curve), "",
                      *(bullet(sentence(words)) for words in curve.words()),
                      bullet("pH read: ______  time: ______  name: ______________  set: ______ %")])


def _table(plan: Plan, stocked: Stocked, curve: DoseCurve) -> str:
    t = curve.table
    doses = t["dose_mg_l_product"].to_numpy()
    rate, setting = feed_of(plan, stocked, stocked.mol_l(doses))
    fed, unit = (rate.l_h, "L/h") if rate.moved else (rate.product_kg_h, "kg/h")
    head = [["", "mg/L of", "mg/L", "feed", "set", "pH", "alk. mg/L", "sat.", "calcite", "buffer", "pH per"],
            ["", "product", "pure", unit, "%", "", "as CaCO3", "index", "mg/L", "meq/L/pH", "mg/L"]]
    rows = []
    for i, r in enumerate(t.to_dict("records")):
        pct = "-" if setting is None else shown(float(setting.setting_pct[i])) if setting.status[i] == "set" \
            else str(setting.status[i])
        rows.append([MARK if r["is_wanted"] else "", shown(doses[i]), shown(r["dose_mg_l_pure"]), shown(float(fed[i])),
                     pct, figure(r["ph"], 2), figure(r["alkalinity_mg_l_caco3"], 1), figure(r["si_calcite"], 2, "+"),
                     calcite_words(r["ccpp_mg_l_caco3"]), figure(r["buffer_intensity_meq_l_ph"], 3),
                     figure(r["slope_ph_per_mg_l"], 3, "+")])
    return aligned(head, rows)
