"""Blocks of the sheet for the wall: what would upset the plan, the store, what to measure, what it all rests on."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

import numpy as np
import pandas as pd

from aquabuf.assess.plant.aims import aims_of
from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.curve import PH_STEP, DoseCurve
from aquabuf.assess.plant.drift import UnderError, UnderFeedError, worst_of
from aquabuf.assess.plant.faults import FULL, Fault
from aquabuf.assess.plant.feed import both_units, shown
from aquabuf.assess.plant.feed_lines import FeedLine
from aquabuf.assess.plant.held import held_words
from aquabuf.assess.plant.hold import buffer_words
from aquabuf.assess.plant.indices import (
    band_names,
    langelier,
    langelier_words,
    low_point_words,
    potential_words,
)
from aquabuf.assess.plant.quantities import find_quantity, measured
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.storage import column_seconds, feed_rules
from aquabuf.assess.plant.stream import TOTALS
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.dose_lines import aligned, block, bullet, figure, sentence, titled
from aquabuf.units import to_house

__all__ = ["assumption_lines", "assumptions", "cautions", "cost_words", "digester", "fault_lines", "hold", "hold_lines",
           "log", "log_lines", "saturation", "saturation_lines", "season", "store", "store_lines", "upset",
           "upset_lines"]

BUFFERS_SHOWN = 2
COLUMNS_ML = (100.0, 250.0, 500.0, 1000.0, 2000.0, 5000.0)  # calibration columns; common sizes, no source
READABLE_S = 30.0  # a drawdown that takes less cannot be timed to a few percent by hand; common practice, no source
MOST_PERCENT = 100.0  # of the dose
UNSAID = ", as the plan does not say"
COUNTED = ("phosphate", "ammonium", "silica", "fluoride", "hypochlorite")  # weak acids among the totals


# ---------------------------------------------------------------- upset


def upset(answer: Answer) -> str:
    """What an error of the dose, the readings or the feed does, and a feed at fault."""
    return titled("WHAT WOULD UPSET IT", *(bullet(line) for line in upset_lines(answer)), _faults(answer))


def upset_lines(answer: Answer) -> list[str]:
    """What an error of the dose, the readings or the feed does, a sentence each."""
    lines = [_price(c) for c in answer.curves if np.isfinite(c.up_mg_l) or np.isfinite(c.down_mg_l)]
    lines += [f"Range of {r.words()} (the other doses held)." for r in answer.ranges]
    e, f = answer.readings_error, answer.feed_error
    if e is not None:
        held = ", these doses held" if answer.feeds else ""
        lines += [_spreads(e.doses), f"Errors of the readings{held}: {_told(e)}."]
    if f is not None:
        share = ", ".join(f"{100.0 * u:.3g} %" for u in dict.fromkeys(f.relative_u.values()))
        lines.append(f"Feeds that err by {share} (one standard deviation): {_told(f)}.")
    return [line for line in lines if line]


def _price(c: DoseCurve) -> str:
    """What 0.1 pH costs in dose; where that is more than the dose itself, that pH hardly follows it."""
    ways = [f"{shown(abs(change))} mg/L {'more' if change > 0.0 else 'less'} "
            f"{f'({shown(abs(percent))} %) ' if np.isfinite(percent) else ''}{verb} pH by {PH_STEP:g}"
            for change, percent, verb in ((c.up_mg_l, c.up_percent, "raises"), (c.down_mg_l, c.down_percent, "lowers"))
            if np.isfinite(change) and not abs(percent) > MOST_PERCENT]
    said = " and ".join(ways) or f"pH hardly follows it, less than {PH_STEP:g} for none or twice of it"
    return f"{c.product} in {c.step}, {shown(c.wanted_mg_l)} mg/L: {said}."


def _told(found: UnderError | UnderFeedError) -> str:
    """The window that is left most often; where nothing is wanted, how far pH moves."""
    windows = found.windows
    if windows["leaves_percent"].notna().any():
        return worst_of(found)
    r = windows[windows["quantity"] == find_quantity("ph").label].iloc[-1]
    return (f"pH of the {r['step']} from {r['value_low']:.2f} to {r['value_high']:.2f} in {100.0 * COVERAGE:.0f} % of "
            "draws")


def _spreads(doses: pd.DataFrame) -> str:
    """How far the doses that are solved for follow errors of the readings."""
    each, missed = [], []
    for r in doses.to_dict("records"):
        if r["u_mg_l_product"] > 0.0:
            if r["not_found_percent"] > 0.0:
                missed.append(f"{brief(r['not_found_percent'], 2)} % of draws have no dose of {r['product']}")
            if r["high_mg_l_product"] > 0.0:
                each.append(f"{r['product']} {shown(r['low_mg_l_product'])} to {shown(r['high_mg_l_product'])} mg/L")
    told = f"the dose would be {', '.join(each)} in {100.0 * COVERAGE:.0f} % of draws" if each else ""
    said = "; ".join(x for x in (told, *missed) if x)
    return f"Readings err: {said}." if said else ""


def _faults(answer: Answer) -> str:
    if not answer.faults:
        return ""
    several = _in_several_steps(answer)
    rows = [[f.product.name, f.step if f.product.name in several else "", _case(f, bool(several)),
              f"{shown(float(f.product.mg_l_product(f.dose_mol_l)[0]))} for "
             f"{shown(float(f.product.mg_l_product(f.wanted_mol_l)[0]))}", figure(float(f.ph_behind[0]), 2),
             figure(float(f.ph_final[0]), 2), shown(abs(float(f.excess_kg[0])))] for f in answer.faults]
    first = answer.faults[0]
    title = f"  A feed at fault for {first.hours:g} h, in {both_units(float(first.volume_m3[0]), 'm³')} of water:"
    head = [["feed", "step", "fault", "mg/L of product", "pH behind", "pH behind", "kg too much"],
            ["", "", "", "", "the step", "the works", "or missing"]]
    return titled(title, aligned(head, rows, left=(0, 1, 2)), *(bullet(w) for w in fault_lines(answer)))


def _in_several_steps(answer: Answer) -> set[str]:
    """Products at fault in more steps than one."""
    return {f.product.name for f in answer.faults for g in answer.faults
            if f.product.name == g.product.name and f.step != g.step}


def fault_lines(answer: Answer) -> list[str]:
    """What the faults do and ask for, and how they were taken."""
    return [*_lessons(answer.faults, _in_several_steps(answer)), *(f"{w}." for w in answer.fault_words)]


def _lessons(faults: Sequence[Fault], several: set[str]) -> list[str]:
    """What a fault does and asks for, each once, behind the feeds that it is said of."""
    of: dict[str, list[str]] = {}
    for f in faults:
        where = f" in {f.step}" if f.product.name in several else ""
        for words in f.words()[1:]:
            of.setdefault(words, []).append(f"{f.product.name}{where} {f.case}")
    said: dict[tuple[str, ...], list[str]] = {}
    for words, feeds in of.items():
        said.setdefault(tuple(feeds), []).append(sentence(words))
    return [f"{', '.join(feeds)}: {' '.join(words)}" for feeds, words in said.items()]


def _case(fault: Fault, short: bool) -> str:
    """The case in the table; where steps take up room, in fewer words."""
    return FULL.removeprefix("stuck at ") if short and fault.case == FULL else fault.case


# ---------------------------------------------------------------- store


def store(answer: Answer) -> str:
    """Use, stock and cost of every product."""
    lines = [s for s in answer.store if s.kg_d > 0.0]
    if not lines:
        return ""
    word = answer.plan.currency
    per = [f"{word}/d", f"{word}/month"] if word else ["per day", "per month"]
    head = [["product", "use", "use", "use", "stock", "cost", "cost", "cost per", "cost per"],
            ["", "kg/d", "kg/month", "lb/month", "days", *per, "1000 m³", "million gal"]]
    rows = [[s.product.name, shown(s.kg_d), shown(s.kg_month), both_units(s.kg_month, "kg").split("(")[1].split()[0],
             figure(s.stock_days, 1), *cost_words([s.cost])] for s in lines]
    if len(lines) > 1 and all(s.cost for s in lines):
        rows.append(["all", "", "", "", "", *cost_words([s.cost for s in lines])])
    return titled("STORE AND COST", aligned(head, rows), *(bullet(w) for w in store_lines(answer)))


def store_lines(answer: Answer) -> list[str]:
    """When to order, whether the store is large enough, whether a load fits."""
    said = []
    for s in (s for s in answer.store if s.kg_d > 0.0):
        parts = [s.order.words() if s.order else "", s.silo_words, s.delivery_words]
        said += [f"{s.product.name}: {sentence('; '.join(p for p in parts if p))}"] if any(parts) else []
    return said


def cost_words(costs: Sequence) -> list[str]:
    """Costs together per day, per month, per 1000 m3 and per million gallons; dashes where one is not known."""
    if not all(costs):
        return ["-"] * 4
    return [shown(float(sum(getattr(c, name)[0] for c in costs)))
            for name in ("per_day", "per_month", "per_1000_m3", "per_million_gal")]


# ---------------------------------------------------------------- log


def log(answer: Answer) -> str:
    """What to measure and to write down this shift."""
    return block("MEASURE AND LOG THIS SHIFT", log_lines(answer))


def log_lines(answer: Answer) -> list[str]:
    """What to measure and to write down, a sentence each."""
    lines = [_check(line) for line in answer.feeds if _is_fed(answer, line)]
    if lines:
        off = feed_rules()["feed accuracy"]
        lines = [_jars(answer), *lines, f"Reset a feed that is off by more than {off.limit:g} % ({off.source})."]
    lines += _watch(answer)
    if lines:
        lines.append("Write down: time, name, flow, raw pH, alkalinity and temperature, the settings, level of each "
                     "tank, strength and lot of each load, alarms, and who changed a set point.")
    return [line for line in lines if line]


def _is_fed(answer: Answer, line: FeedLine) -> bool:
    """Whether a machine feeds it and is on."""
    return bool(line.mol_l[0] > 0.0) and (line.step, line.product.name) not in answer.beds


def _jars(answer: Answer) -> str:
    """A jar with the doses, a jar on either side."""
    fed = [x for x in answer.feeds if x.product.product.form != "gas" and _is_fed(answer, x)]
    if not fed:
        return ""
    doses = " and ".join(f"{shown(x.mg_l_product)} mg of {x.product.name}" for x in fed)
    gas = any(x.product.product.form == "gas" and x.mol_l[0] > 0.0 for x in answer.feeds)
    apart = " Gas cannot be weighed into a jar." if gas else ""
    return (f"Jar test before a change: per liter, in the order of the steps, {doses}; one jar with a tenth less, one "
            f"with a tenth more.{apart}")


def _check(line: FeedLine) -> str:
    """How to prove the feed: a drawdown of what is pumped, a catch of what is dry, a meter for gas."""
    name = line.product.name
    if line.rate.moved:
        l_h = float(line.rate.l_h[0])
        ml = next((v for v in COLUMNS_ML if float(column_seconds(v, l_h)[0]) >= READABLE_S), COLUMNS_ML[-1])
        return f"{name}: drawdown of {ml:,.0f} mL in {shown(float(column_seconds(ml, l_h)[0]))} s."
    kg_h = float(line.rate.product_kg_h[0])
    if line.product.product.form == "gas":
        return f"{name}: gas meter at {both_units(kg_h, 'kg/h')}; weigh the tank at the start and end of the shift."
    return f"{name}: catch of one minute weighs {shown(1e3 * kg_h / 60.0)} g."


def _watch(answer: Answer) -> list[str]:
    """What to measure behind which step, with the window it must keep."""
    if not answer.train.feasible()[0]:
        return []
    said: dict[str, list[str]] = {}
    for p in answer.train.passed:
        aims = [a for a in aims_of(answer.train) if a.step == p.step.name]
        if p.outcome.doses and not any(a.target.quantity.name == "ph" for a in aims):
            said[p.step.name] = [f"pH {p.after.water().ph[0]:.2f} is expected"]
        for a in aims:
            value = a.target.quantity.text(float(a.value(answer.train)[0]))
            said.setdefault(p.step.name, []).append(f"{a.target.quantity.label} {value}, keep {a.window_words}")
    return [f"Behind {step}: {'; '.join(words)}." for step, words in said.items()]


# ---------------------------------------------------------------- water


def saturation(answer: Answer) -> str:
    """Scale and corrosion of the last water, constants named."""
    return block("SCALE, CORROSION AND BUFFERING OF THE LAST WATER", saturation_lines(answer))


def saturation_lines(answer: Answer) -> list[str]:
    """Scale, corrosion and buffering of the last water, a sentence each."""
    final = answer.train.final
    water = final.water()
    v = measured(final, ("ccpp", "larson_ratio", "chloride_sulfate_ratio", "alkalinity"))
    lines = [langelier_words(langelier(water))]
    if np.isfinite(v["ccpp"][0]):
        lines[0] += f" Brought to balance it {potential_words(float(v['ccpp'][0]))}."
    caco3 = np.asarray(to_house(v["alkalinity"], "mg/L as CaCO3", "alkalinity", back=True))
    said = [f"{label} {v[name][0]:.2f}: {band}" for name, label in (
        ("larson_ratio", "Larson ratio"), ("chloride_sulfate_ratio", "chloride to sulfate")) if (
        band := band_names(name, v[name], caco3)[0])]
    lines += [f"{'; '.join(said)}."] if said else []
    lines.append(low_point_words(water))
    return [sentence(x) for x in lines if x]


def hold(answer: Answer) -> str:
    """Buffers that hold the wanted pH, and what a feed fault does to the water as it is."""
    return block("HOLDING THE pH", hold_lines(answer))


def hold_lines(answer: Answer) -> list[str]:
    """How long the pH holds, the best buffers, and how many more there are."""
    if answer.hold is None:
        return []
    first, *others = answer.hold.buffers
    told = [first, *(b for b in others if b.usable[0])][:BUFFERS_SHOWN]
    return [held_words(answer.hold.held), *(buffer_words(b) for b in told),
            f"{len(answer.hold.buffers) - len(told)} more pairs are in buffers.csv."]


def season(answer: Answer) -> str:
    """What a season of raw water does."""
    return "" if answer.season is None else block("OVER THE SEASON", [sentence(w) for w in answer.season.words()])


def digester(answer: Answer) -> str:
    """How the digester stands."""
    return block("DIGESTER", [sentence(answer.digester_words)]) if answer.digester_words else ""


# ---------------------------------------------------------------- what it rests on


def assumptions(answer: Answer) -> str:
    """What the figures rest on: the pair, the constants, what was taken because the plan does not say."""
    return block("WHAT IT RESTS ON", assumption_lines(answer))


def assumption_lines(answer: Answer) -> list[str]:
    """What the figures rest on, a sentence each."""
    unsaid = [a.removesuffix(UNSAID) for a in answer.assumptions if a.endswith(UNSAID)]
    lines = [f"Raw water solved from {answer.pair}; carbonate constants of Plummer & Busenberg 1982 with Davies "
             "activities; alkalinity is the proton deficit at the pH 4.5 zero level.", _unknown(answer)]
    if unsaid:
        lines.append(f"Taken because the plan does not say: {'; '.join(_grouped(unsaid))}.")
    lines += [sentence(a) for a in answer.assumptions if not a.endswith(UNSAID)]
    e = answer.readings_error
    if e is not None:
        lines.append(f"Shares are of {e.draws:,} draws, seed {e.seed}; a fixed target counts with the band that "
                     "practice holds it to.")
    return [line for line in lines if line]


def _unknown(answer: Answer) -> str:
    """Ions that no reading tells: none in the balance of acids and bases."""
    raw = answer.train.raw
    unknown = [name for name in TOTALS if not np.isfinite(raw.total(name)[0])]
    weak = [name for name in unknown if name in COUNTED]
    ions = [name for name in unknown if name not in COUNTED]
    said = [f"{', '.join(weak)} not given, counted as none"] if weak else []
    said += [f"{', '.join(ions)} not given, what needs them is not judged"] if ions else []
    return sentence("; ".join(said)) if said else ""


def _grouped(texts: Iterable[str]) -> list[str]:
    """`[a]: x` and `[a]: y` as one `[a] x, y`."""
    groups: dict[str, list[str]] = {}
    for text in texts:
        found = re.match(r"(.*?): (\w.*)", text)
        label, rest = found.groups() if found else (text, "")
        groups.setdefault(label, []).append(rest)
    return [f"{label} {', '.join(rest)}".strip() for label, rest in groups.items()]


def cautions(answer: Answer) -> str:
    """Cautions of these products and steps."""
    return block("CAUTIONS", list(answer.cautions))
