"""The part of a page that answers "what if": sliders over doses worked out in advance; without a script, tables."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from importlib.resources import files
from typing import Any

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.dose_grid import LARGEST_FACTOR, Channel, DoseGrid, MovedDose, grids_of
from aquabuf.assess.plant.feed import in_us, shown
from aquabuf.assess.plant.feed_lines import FeedLine, feed_of
from aquabuf.assess.plant.indices import NOTHING_MG_L
from aquabuf.assess.plant.quantities import in_unit
from aquabuf.report.dose_lines import calcite_words, figure
from aquabuf.report.html.parts import Column, paragraph, shown_text, table

__all__ = ["data_script", "grid_record", "whatif_panels", "whatif_script"]

Array = NDArray[np.float64]

PERCENT = 100.0
LARGEST = PERCENT * LARGEST_FACTOR  # of a slider, in percent of the dose of the plan
SLIDER_STEP = 0.25                  # percent; in a weak buffer one percent of a dose may be a tenth of pH
TABLE_ROWS = 10                     # intervals of the table that stands in for the sliders
MORE_DIGITS = 2                     # of the stored values than are shown
SIGNED, CALCITE = "si_calcite", "ccpp"
KEPT, LOST, EDGE = "kept", "NOT KEPT", "AT THE EDGE"
RAILS = "guard rails"


def whatif_script() -> str:
    """The script behind the sliders."""
    return (files("aquabuf") / "data" / "whatif.js").read_text(encoding="utf-8")


def whatif_panels(answer: Answer) -> tuple[str, ...]:
    """A panel per grid with its table, then the data; nothing where no dose was found or nothing is fed."""
    grids = grids_of(answer.train)
    if not grids:
        return ()
    records = [grid_record(answer, grid) for grid in grids]
    out = [paragraph("Move a dose and see the water that follows; the other doses stay as planned. The works were run "
                     f"in advance with doses from none to {LARGEST_FACTOR:g} times the plan's, so nothing is sent or "
                     "fetched. It is a reading of that table, not a new plan: before a change, solve the plan again or "
                     "try it in a jar.")]
    for k, (grid, record) in enumerate(zip(grids, records, strict=True)):
        out += [_controls(k, grid, record), _table_of(grid, record)]
    return (*out, data_script("whatif-data", records))


def data_script(name: str, content: Any) -> str:
    """Numbers and words for a script, in a block that nothing within can end."""
    text = json.dumps(content, allow_nan=False, separators=(",", ":"))
    for mark in "<>&":
        text = text.replace(mark, f"\\u{ord(mark):04x}")
    return f'<script type="application/json" id="{name}">{text}</script>'


# ---------------------------------------------------------------- what the script reads


def grid_record(answer: Answer, grid: DoseGrid) -> dict[str, Any]:
    """A grid as the script reads it: doses of the plan and what their machines give, values row by row, windows."""
    return {"largest": LARGEST,
            "moved": [_moved_record(answer, m, mg_l) for m, mg_l in zip(grid.moved, grid.mg_l, strict=True)],
            "channels": [_channel_record(answer, c) for c in grid.channels]}


def _moved_record(answer: Answer, moved: MovedDose, mg_l: Array) -> dict[str, Any]:
    line = _line_of(answer, moved)
    rate, unit = (line.rate.l_h, "L/h") if line.rate.moved else (line.rate.product_kg_h, "kg/h")
    us, us_unit = in_us(float(rate[0]), unit)
    pump = line.spec.pump if line.rate.moved else None
    return {"points": mg_l.size, "dose": float(moved.product.mg_l_product(moved.mol_l)), "rate": float(rate[0]),
            "unit": unit, "us_rate": float(us), "us_unit": us_unit, "knob": pump.sets if pump else "setting",
            "settings": _settings(answer, moved, mg_l)}


def _line_of(answer: Answer, moved: MovedDose) -> FeedLine:
    """Feed of a dose; feeds stand in the order of the doses of the run."""
    before = sum(len(p.outcome.doses) for p in answer.train.passed[:moved.place])
    return answer.feeds[before + moved.which]


def _settings(answer: Answer, moved: MovedDose, mg_l: Array) -> list[float | None] | None:
    """Setting at every dose, none where it is out of reach; no list where the plan has no machine."""
    setting = feed_of(answer.plan, moved.product, moved.product.mol_l(mg_l))[1]
    if setting is None:
        return None
    return [_number(float(v), 3) if status == "set" else None
            for v, status in zip(setting.setting_pct, setting.status, strict=True)]


def _channel_record(answer: Answer, channel: Channel) -> dict[str, Any]:
    q = channel.quantity
    kind = {SIGNED: "signed", CALCITE: "calcite"}.get(q.name, "plain")
    digits = 1 if kind == "calcite" else q.digits
    stored = q.digits + MORE_DIGITS
    return {"label": q.label[:1].upper() + q.label[1:] if q.name != "ph" else q.label, "kind": kind, "digits": digits,
            "nothing": NOTHING_MG_L, "error": _number(channel.error, 6) or 0.0, "close": 10.0**-stored,
            "windows": _windows(answer, channel), "values": [_number(float(v), stored) for v in channel.values.flat]}


def _windows(answer: Answer, channel: Channel) -> list[dict[str, Any]]:
    """What is wanted of a quantity there; of the pH of the final water the guard rails too."""
    q = channel.quantity
    several = len({t.step for t in answer.targets}) > 1
    out = [{"words": f"{aim.step}: {aim.window.words}", "short": f"{q.label} ({aim.step})" if several else q.label,
            "low": _number(float(in_unit(q, aim.window.low)), 9),
            "high": _number(float(in_unit(q, aim.window.high)), 9)} for aim in channel.targets]
    if q.name == "ph" and channel.place in (None, len(answer.train.passed) - 1):
        g = answer.plan.guards
        out.append({"words": f"{RAILS}: pH {g.ph_low:g} to {g.ph_high:g}", "short": RAILS, "low": g.ph_low,
                    "high": g.ph_high})
    return out


def _number(value: float, digits: int) -> float | None:
    """A number that JSON can hold, without figures that nobody needs; None where it is not known or endless."""
    return round(value, digits) + 0.0 if np.isfinite(value) else None


# ---------------------------------------------------------------- what a person sees


def _controls(k: int, grid: DoseGrid, record: Mapping[str, Any]) -> str:
    """Sliders, what the water is, windows; hidden until the script shows it."""
    sliders = "\n".join(_slider(k, i, m) for i, m in enumerate(grid.moved))
    windows = "\n".join(f"<li data-window>{shown_text(w['words'])}</li>"
                        for c in record["channels"] for w in c["windows"])
    wanted = f"<ul>\n{windows}\n</ul>" if windows else ""
    return (f'<div class="card note screen" data-whatif hidden>\n<h3>{shown_text(_title(grid))}</h3>\n{sliders}\n'
            f'<p><output data-verdict class="big" aria-live="polite"></output></p>\n{_readout(grid)}\n{wanted}\n'
            '<p><button type="button">Back to the plan</button></p>\n'
            f"{paragraph(_honest(grid), soft=True)}\n</div>")


def _title(grid: DoseGrid) -> str:
    return " and ".join(f"{m.product.name} in {m.step}" for m in grid.moved)


def _slider(k: int, i: int, moved: MovedDose) -> str:
    name = f"whatif-{k}-{i}"
    words = f"{moved.product.name} in {moved.step}, none to {LARGEST_FACTOR:g} times the plan"
    return (f'<div class="slider"><label for="{name}">{shown_text(words)}</label>\n'
            f'<input type="range" id="{name}" min="0" max="{LARGEST:g}" step="{SLIDER_STEP:g}" value="{PERCENT:g}">\n'
            '<span data-dose></span></div>')


def _readout(grid: DoseGrid) -> str:
    """Quantities down, waters across."""
    places = list(dict.fromkeys(c.where for c in grid.channels))
    names = dict.fromkeys(c.quantity.name for c in grid.channels)
    at = {(c.quantity.name, c.where): n for n, c in enumerate(grid.channels)}
    label = {c.quantity.name: _labelled(c) for c in grid.channels}
    head = "".join(f'<th scope="col" class="number">{shown_text(where)}</th>' for where in places)
    rows = "\n".join(f'<tr><th scope="row">{shown_text(label[name])}</th>' + "".join(
        f'<td class="number" data-channel="{at[name, where]}"></td>' if (name, where) in at else "<td></td>"
        for where in places) + "</tr>" for name in names)
    return (f'<div class="scroll" tabindex="0" role="region" aria-label="The water at these doses"><table>\n<thead>\n'
            f'<tr><th scope="col">the water</th>{head}</tr>\n</thead>\n<tbody>\n{rows}\n</tbody>\n</table></div>')


def _labelled(channel: Channel) -> str:
    q = channel.quantity
    return q.label if q.unit == "-" else f"{q.label} ({q.unit})"


def _honest(grid: DoseGrid) -> str:
    """The grid, how it is read, and how far that is off."""
    points = " by ".join(str(x.size) for x in grid.mg_l)
    way, middles = ("linearly", "halfway between all points") if len(grid.moved) == 1 else \
        ("bilinearly", "in the middle of every cell and of every edge")
    worst: dict[str, tuple[float, Channel]] = {}
    for c in grid.channels:
        if np.isfinite(c.error):
            worst[c.quantity.name] = max(worst.get(c.quantity.name, (0.0, c)), (c.error, c), key=lambda x: x[0])
    errors = ", ".join(f"{_labelled(c)} {_error_words(error)}" for error, c in worst.values())
    return (f"Read {way} between {points} doses. Checked against the works run {middles}, the largest error anywhere "
            f"is: {errors}. A window closer than that says {EDGE}.")


def _error_words(error: float) -> str:
    return "below 0.0001" if error < 1e-4 else f"{error:.2g}"


# ---------------------------------------------------------------- without a script


def _table_of(grid: DoseGrid, record: Mapping[str, Any]) -> str:
    """Water along each dose with the other as planned; open where no script folds it."""
    first = grid.channels[0].where
    shown_channels = [c for c in grid.channels if c.where == first]
    columns = [Column(title="dose (mg/L)"), Column(title="% of the plan", number=True), Column(title="windows"),
               *(Column(title=_labelled(c), number=True, meaning=c.quantity.words) for c in shown_channels)]
    parts = []
    for i, m in enumerate(grid.moved):
        step = (grid.mg_l[i].size - 1) // TABLE_ROWS
        rows, tones = [], []
        for k in range(0, grid.mg_l[i].size, step):
            at = tuple(k if j == i else (x.size - 1) // 2 for j, x in enumerate(grid.mg_l))
            lost = _lost(grid, record, at)
            rows.append([shown(float(grid.mg_l[i][k])), f"{LARGEST * k / (grid.mg_l[i].size - 1):.0f}", lost,
                         *(_cell(c, float(c.values[at])) for c in shown_channels)])
            tones.append("warn" if lost.startswith(LOST) else "")
        parts.append(table(columns, rows, tones=tones, caption=f"{m.product.name} in {m.step}: water {first} along its "
                           "dose, the other doses as planned"))
    body = "\n".join(parts)
    title = shown_text(f"The curves as a table: {_title(grid)}")
    return f'<details class="curves" open>\n<summary>{title}</summary>\n{body}\n</details>'


def _cell(channel: Channel, value: float) -> str:
    if channel.quantity.name == CALCITE:
        return calcite_words(value)
    return figure(value, channel.quantity.digits, "+" if channel.quantity.name == SIGNED else "")


def _lost(grid: DoseGrid, record: Mapping[str, Any], at: Sequence[int]) -> str:
    """Windows that the water at a point of the grid leaves."""
    lost = [w["short"] for c, r in zip(grid.channels, record["channels"], strict=True) for w in r["windows"]
            if not _inside(float(c.values[tuple(at)]), w, r["close"])]
    every = any(r["windows"] for r in record["channels"])
    return f"{LOST}: {', '.join(lost)}" if lost else KEPT if every else "none wanted"


def _inside(value: float, window: Mapping[str, Any], close: float) -> bool:
    low, high = window["low"], window["high"]
    return (low is None or value >= low - close) and (high is None or value <= high + close)
