"""The text of a planned titration."""

from __future__ import annotations

import math

from aquabuf.assess.titration.choose import DILUTE_BELOW_EQ, method_facts
from aquabuf.assess.titration.options import ALWAYS_END_POINT
from aquabuf.assess.titration.plan import COARSE_TO_PH, FINE_TO_PH, LAST_PH, LEAST_JUDGED_EQ, Plan, Setup
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.readings.titration.result import COUNTS_PER_ML
from aquabuf.report.summary import cautions, item, plural
from aquabuf.units import convert

__all__ = ["plan_text"]

BETTER_SHOWN = 3


def plan_text(p: Plan) -> str:
    """Volumes to expect, steps to take, what the result will be worth, assumptions and cautions."""
    return "\n\n".join([_head(p), _verdict(p), _volumes(p), _steps(p), _table(p), _worth(p), _rests_on(p),
                        "\n".join(["Cautions", *(item(line) for line in cautions("titration"))])]) + "\n"


def _amount(s: Setup, ml: float) -> str:
    """Titrant in mL, and in counts for a digital titrator."""
    if math.isnan(ml):
        return "below it at the start"
    counts = f" = {plural(round(ml * COUNTS_PER_ML), 'count')}" if s.device == "counts" else ""
    return f"{ml:.3f} mL{counts}"


def _head(p: Plan) -> str:
    s = p.setup
    mg = convert(s.alkalinity_eq_l, "eq/L", "mg/L as CaCO3", "alkalinity")
    acid = "sulfuric" if s.sulfuric else "hydrochloric"
    return (f"Plan for {s.alkalinity_eq_l * 1e6:,.0f} µeq/L ({mg:.3g} mg/L as CaCO3), first pH about {p.first_ph:.2f}:"
            f"\n{s.sample_ml:g} mL of sample, {s.strength_eq_l:g} eq/L {acid} acid, {s.device}, {s.t_c:g} °C.")


def _verdict(p: Plan) -> str:
    if not p.verdict.problem:
        return "Strength and sample volume suit each other."
    lines = [f"Strength and sample volume do not suit: {p.verdict.problem}.", "Better:"]
    for v in p.better[:BETTER_SHOWN]:
        device = "" if v.setup.device == p.setup.device else f" in a {v.setup.device}"
        lines.append(item(f"{v.setup.strength_eq_l:g} eq/L{device} with {v.setup.sample_ml:g} mL of sample: "
                          f"{_amount(p.setup, v.end_ml)} to the end point, {100.0 * v.dilution:.1f} % titrant."))
    if not p.better:
        lines[1] = ("No usual strength with 25 to 200 mL of sample suits this device. For very dilute water take a "
                    "microburette; for very strong water thin a measured part of the sample with pure water, and "
                    "count the pure water as part of the sample's volume.")
    return "\n".join(lines)


def _volumes(p: Plan) -> str:
    s, lines = p.setup, ["Titrant to expect"]
    level = ("the fixed end point for this alkalinity; in so dilute water it reads too much"
             if s.alkalinity_eq_l < DILUTE_BELOW_EQ else "the end point that suits this alkalinity")
    for end, ml in p.volumes_ml.items():
        if end == "equivalence point":
            where = f" (pH {p.end_ph:.2f} with the CO2 kept in): {_amount(s, ml)}"
            where = ": none; alkalinity is below zero, base would be needed" if math.isnan(p.end_ph) else where
            lines.append(item(f"to the equivalence point{where}"))
            continue
        note = {p.level_ph: f" ({level})", LAST_PH: " (last point)"}.get(float(end), "")
        lines.append(item(f"to pH {end:g}{note}: {_amount(s, ml)}"))
    return "\n".join(lines)


def _steps(p: Plan) -> str:
    s, (coarse, fine, past) = p.setup, p.steps_ml
    lines = ["Steps; go by the pH you read, since the alkalinity is only expected"]
    if p.first_ph > COARSE_TO_PH:
        lines.append(item(f"down to pH {COARSE_TO_PH:g}: {_amount(s, coarse)} at a time"))
    if p.first_ph > FINE_TO_PH:
        lines.append(item(f"{'from there' if p.first_ph > COARSE_TO_PH else 'down'} to pH {FINE_TO_PH:g}: "
                          f"{_amount(s, fine)} at a time, so that no step passes more than about 0.3 pH; wait until "
                          f"pH moves less than 0.01 in 30 s"))
    lines.append(item(f"{'on' if p.first_ph > FINE_TO_PH else 'down'} to pH {LAST_PH:g}: {_amount(s, past)} at a time; "
                      f"these points carry the Gran line, so take five or more"))
    lines.append(item("write down titrant (running total) and pH each time; cover the vessel and stir gently; "
                      "without a cover be done within 10 minutes"))
    return "\n".join(lines)


def _table(p: Plan) -> str:
    counts = p.setup.device == "counts"
    lines = [f"Points ({len(p.table)}): {'counts' if counts else 'mL'} and the pH to expect"]
    cells = [f"{r.titrant_counts:7.0f} {r.ph:5.2f}" if counts else f"{r.titrant_ml:8.3f} {r.ph:5.2f}"
             for r in p.table.itertuples()]
    columns = 4
    height = math.ceil(len(cells) / columns)
    for i in range(height):
        lines.append("  " + "    ".join(cells[i::height]))
    return "\n".join(lines)


def _two_figures(v: float) -> str:
    """A number to two figures, never with a power of ten."""
    return f"{float(f'{v:.2g}'):,.6g}"


def _worth(p: Plan) -> str:
    r = p.result.results.iloc[0]
    method = r["recommended_method"]
    if not method:
        return item(f"Such a curve gives no result to rely on: {r['recommended_reason']}.", mark="")
    mg, fixed = TO_COVERAGE * r["recommended_u_mg_l_caco3"], r["fixed_4_5_ueq_l"]
    alone = f" A single end point at pH {ALWAYS_END_POINT:g} would read {fixed:,.1f} µeq/L."
    u = TO_COVERAGE * r["recommended_u_ueq_l"]
    return item(f"Such a curve gives the alkalinity by the {method_facts('method')[method]['words']} to "
                f"± {_two_figures(u)} µeq/L (± {_two_figures(mg)} mg/L as CaCO3; 90 % interval with the default "
                f"uncertainties of pH, strength and volumes).{'' if math.isnan(fixed) else alone}", mark="")


def _rests_on(p: Plan) -> str:
    s = p.setup
    carbon = (f"first pH as given: {s.ph:g}" if s.ph is not None else
              f"first pH not given: water in equilibrium with air of {AIR_CO2_PPM:g} ppm CO2 (about the mean of "
              f"{AIR_CO2_YEAR}, recalled); groundwater and lakes hold more CO2 and start lower")
    lines = [carbon + ".", "CO2 stays in the vessel; carbonate is the only weak acid.",
             f"{COUNTS_PER_ML:g} counts are 1 mL." if s.device == "counts" else "",
             f"Strength and sample are judged as for {LEAST_JUDGED_EQ * 1e6:g} µeq/L: water with less still needs "
             "titrant enough for the points past the end point." if abs(s.alkalinity_eq_l) < LEAST_JUDGED_EQ else "",
             "What suits a device (titrant to the end point, at most 20 % of titrant) is common practice, no source."]
    return "\n".join(["What the plan rests on", *(item(line) for line in lines if line)])
