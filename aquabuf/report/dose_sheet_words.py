"""Words of the sheet for the wall: head, stop, feeds to set, targets, warnings, cautions, what to log."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import step_rows
from aquabuf.assess.plant.curve import DoseCurve
from aquabuf.assess.plant.feed import metric_and_us, shown
from aquabuf.assess.plant.feed_lines import FeedLine
from aquabuf.assess.plant.quantities import find_quantity, plant_quantities
from aquabuf.report.dose_lines import sentence
from aquabuf.report.dose_page import Block, Line, beside, block_of, stacked, wrapped
from aquabuf.report.dose_settings import OUT_OF_REACH, control_words, rate_words, setting_words
from aquabuf.report.style import GRAY, INK, WARNED

__all__ = ["LOG", "MOST_WARNINGS", "TIGHT_BELOW", "curve_words", "fault_notes", "feeds_block", "foot_block",
           "head_block", "stop_block", "targets_block", "warnings_block"]

LOG = ("Log each shift: time, flow, raw pH, alkalinity and temperature; pH behind each step; setting, drawdown and "
       "tank level of each feed; lot and strength of each delivery; alarms; who changed what, and why.")
RAW = ("ph", "alkalinity", "calcium", "dic", "buffer_intensity")  # of the raw water in the head
MOST_REASON, MOST_WARNINGS = 7, 6
LARGE, LESS = 11.5, 10.0         # points, of the figures to set and of what goes with them
M3_PER_ML = 1e3
TIGHT_BELOW = 0.85              # scale
PAD = 0.09                      # around the words of a box [inches]
COLUMNS = (0.0, 1.95, 3.25, 4.4, 5.55)  # left ends in the table of feeds, for a page of WIDTH
WIDTH = 7.57
SET, NOT_SET = "Set the feeds", "Not to be set:"
PERCENT = 100.0
TITLES = ("dose as delivered", "rate", "US units", "setting")


def head_block(answer: Answer, width: float, scale: float = 1.0) -> Block:
    """Plan, day, flow in both units, and the raw water."""
    plan = answer.plan
    day = f", {plan.date}" if plan.date and plan.date not in plan.name else ""
    us = metric_and_us(plan.flow.now_m3_d, "m³/d")[1]
    flow = f"Flow {shown(plan.flow.now_m3_d / M3_PER_ML)} ML/d ({us})"
    row = step_rows(answer)[0]
    known = [q for q in (find_quantity(n) for n in RAW) if np.isfinite(row[q.column])]
    values = [f"{q.label} {row[q.column]:.{q.digits}f}{'' if q.unit == '-' else f' {q.unit}'}" for q in known]
    raw = f"Raw water: {row['temperature_c']:.1f} °C, {', '.join(values)} (from {answer.pair.replace('_', ' ')})"
    note = [plan.note] if plan.note else []
    return stacked(block_of([f"{plan.name}{day}"], width, 14.0 * scale, bold=True, most=2),
                   block_of([f"{flow}. For {plan.use}."], width, 10.5 * scale, bold=True, most=1),
                   block_of([raw, *note], width, 7.5, most=2), gap=0.02)


def stop_block(answer: Answer, width: float, scale: float = 1.0) -> Block:
    """Why this plan must not be run; nothing where it may."""
    if answer.feasible:
        return Block()
    reason = sentence(answer.reason or "no doses were found")
    inner = stacked(
        block_of(["STOP: do not dose by this sheet"], width - PAD, 14.0 * scale, bold=True, color="white", x=PAD),
        block_of([reason], width - PAD, max(8.5 * scale, 7.5), color="white", x=PAD, most=MOST_REASON), gap=0.02)
    lines = tuple(Line(o.x, o.y + PAD, o.words, o.size, o.bold, o.color) for o in inner.lines)
    return Block(lines, (), inner.height + 2.0 * PAD, fill="#7d2315")


# ---------------------------------------------------------------- feeds


@dataclass(frozen=True, slots=True)
class _Cell:
    """Large words and small ones below them."""

    large: str
    small: str = ""
    bold: bool = False
    color: str = INK


def _cells(line: FeedLine, control: str, *, tight: bool, bed: bool) -> tuple[_Cell, ...]:
    product, rate = line.product, line.rate
    own = (f"in {line.step}: {product.product.name} ({product.product.formula}), {PERCENT * product.strength:.3g} % by "
           f"{product.strength_from}")
    setting, about = setting_words(line, bed=bed)
    if not np.isfinite(line.mol_l[0]):
        return (_Cell(product.name, own, bold=True), _Cell("none", bold=True), _Cell("–"), _Cell("–"),
                _Cell(setting, about, bold=True, color=WARNED))
    is_set = bed or line.mol_l[0] == 0.0 or (line.setting is not None and line.setting.status[0] == "set")
    (metric, us), dose = rate_words(line), metric_and_us(line.mg_l_product, "mg/L")
    per_day = metric_and_us(float(rate.product_kg_d[0]), "kg/d")
    moved = "" if tight or not rate.moved else f"{rate.moved.removesuffix(' to pump')}; "
    return (_Cell(product.name, own, bold=True),
            _Cell(dose[0], f"{shown(line.mg_l_pure)} mg/L pure", bold=True), _Cell(metric, f"{moved}{per_day[0]}"),
            _Cell(us, per_day[1] if tight else f"{per_day[1]}; {dose[1]}"),
            _Cell(setting, control if tight and is_set else about, bold=True, color=INK if is_set else WARNED))


def feeds_block(answer: Answer, width: float, scale: float = 1.0) -> Block:
    """The table of feeds: a row of large words for each, what belongs to it in small ones; at a small scale in fewer
    lines."""
    tight = scale < TIGHT_BELOW
    lefts = [c * width / WIDTH for c in COLUMNS]
    rooms = [b - a - 0.08 for a, b in zip(lefts, [*lefts[1:], width + 0.08], strict=True)]
    titles = tuple(Line(x, 0.05, t, 8.0) for x, t in zip(lefts[1:], TITLES, strict=True))
    parts = [Block((Line(0.0, 0.03, SET if answer.feasible else NOT_SET, 12.0, True), *titles), (0.26,), 0.29)]
    told: set[str] = set()
    for line in answer.feeds:
        bed = (line.step, line.product.name) in answer.beds
        told_of = _cells(line, control_words(answer, line), tight=tight, bed=bed)
        cells = [_cell_block(c, x, room, scale, tight) for c, x, room in zip(told_of, lefts, rooms, strict=True)]
        row = tuple(item for cell in cells for item in cell.lines)
        parts.append(Block(row, (), max(c.height for c in cells)))
        if setting_words(line)[0] == OUT_OF_REACH and (answer.feasible or not tight):
            parts.append(block_of([f"{line.setting_words()}."], width, 6.8, color=WARNED, most=3))
        if line.product.name not in told and not tight:
            parts.append(block_of(_range_words(answer, line.product.name), width, 7.0, most=2))
        told.add(line.product.name)
        parts.append(Block((), (0.02,), 0.06))
    parts.append(block_of(_bases(answer), width, 6.5, color=GRAY, most=2))
    if not answer.feeds:
        parts.append(block_of(["No step of this plan doses a product."], width, 10.0))
    return stacked(*parts)


def _bases(answer: Answer) -> list[str]:
    """How the settings are known, each way once with the feeds that it holds for."""
    ways: dict[str, list[str]] = {}
    for line in answer.feeds:
        if line.setting is not None and line.setting.status[0] == "set":
            ways.setdefault(line.setting.reach.basis, []).append(line.product.name)
    return [f"Setting of {', '.join(dict.fromkeys(names))}: {way}." for way, names in ways.items()]


def _cell_block(cell: _Cell, x: float, room: float, scale: float, tight: bool) -> Block:
    size, alarm = (LARGE if cell.bold else LESS) * scale, cell.color != INK
    large = block_of([cell.large], x + room, size, bold=cell.bold, color=cell.color, x=x, most=1 if tight else 2)
    small = [cell.small] if cell.small else []
    return stacked(large, block_of(small, x + room, 6.5, color=cell.color if alarm else GRAY, x=x,
                                   most=1 if tight else 4))


def _range_words(answer: Answer, product: str) -> list[str]:
    """How far the feed may go, in the words of its control range."""
    return [f"{r.words()}." for r in answer.ranges if r.product.name == product]


# ---------------------------------------------------------------- targets and warnings


def targets_block(answer: Answer, width: float) -> Block:
    """Wanted and reached, with a word whether it is met."""
    parts = [block_of(["Targets"], width, 9.0, bold=True)]
    for t in answer.targets:
        reached = t.target.quantity.text(t.reached)
        words = f"{t.step}: {t.target.words}; reached {reached}: {'met' if t.met else 'NOT MET'}"
        parts.append(block_of([words], width, 7.5, bold=not t.met, most=3))
    if not answer.targets:
        parts.append(block_of(["The plan sets no target; doses are fixed."], width, 7.5))
    return stacked(*parts)


def warnings_block(answer: Answer, width: float, most: int = MOST_WARNINGS) -> Block:
    """Warnings of the steps, rules that the final water breaks, tank rules; at most `most`, the rest counted."""
    found = [f"{name}: {f.words}" for name, f in answer.train.findings("warning")]
    found += [f"guard rails: {f.words}" for f in answer.guards if f.severity == "warning"]
    named = {q.column: q for q in plant_quantities().values()}
    for q, j in ((named[j.limit.quantity], j) for j in answer.limits if j.broken):
        unit = "" if q.unit == "-" else f" {q.unit}"
        found.append(f"final water, {q.label} {j.value:z.{q.digits}f}{unit}: {j.limit.words}")
    rest = len(found) - most
    shown_now = found[:most] + ([f"and {rest} more, see the text of the sheet"] if rest > 0 else [])
    none = "nothing is warned of" if answer.feasible else "nothing beyond the stop"
    return stacked(block_of(["Look out"], width, 9.0, bold=True),
                   block_of(shown_now or [none], width, 7.0, bullet="– ", most=2))


def fault_notes(answer: Answer) -> list[str]:
    """What must be known of the faults, each way once with the feeds that it holds for."""
    ways: dict[str, list[str]] = {}
    names = dict.fromkeys(line.product.name for line in answer.feeds)
    for words in answer.fault_words:
        name = next((n for n in names if words.startswith(f"{n}: ")), "")
        ways.setdefault(words.removeprefix(f"{name}: "), []).append(name)
    named = {way: ", ".join(dict.fromkeys(name for name in of if name)) for way, of in ways.items()}
    return [sentence(f"{way}: {names}" if names else way) for way, names in named.items()]


def curve_words(curve: DoseCurve) -> tuple[str, ...]:
    """What the curve says, a sentence each."""
    return tuple(sentence(words) for words in curve.words())


def foot_block(answer: Answer, width: float, scale: float = 1.0) -> Block:
    """Cautions in two columns, and what to log."""
    size = 6.6 * scale
    half = 0.5 * (width - 0.2)
    left, right = (block_of(c, half, size, bullet="– ") for c in _even(answer.cautions, half, size))
    cautions = beside(left, right, half + 0.2)
    return stacked(Block((), (0.0,), 0.04), block_of(["Cautions"], width, 8.5, bold=True), cautions,
                   block_of([LOG], width, 7.2 * scale, bold=True), gap=0.02)


def _even(sentences: Sequence[str], width: float, size: float) -> tuple[Sequence[str], Sequence[str]]:
    """The sentences in two columns of like height, in order."""
    heights = np.cumsum([len(wrapped(s, width - 0.08, size)) for s in sentences])
    if not heights.size:
        return (), ()
    cut = int(np.argmin(np.maximum(heights, heights[-1] - heights))) + 1
    return sentences[:cut], sentences[cut:]
