"""Stream files (TOML): wastes, the window of the discharge, reagents, site, layout, simulation. Keys: stream_keys.csv.

Numbers with a dimension are strings with their unit, as in plan files. Every mistake is named with its line.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from types import MappingProxyType
from typing import Any

from aquabuf.assess.plant.plan import FeedSpec
from aquabuf.assess.plant.plan_keys import Checked, check_keys, plan_keys
from aquabuf.assess.plant.plan_place import Place
from aquabuf.assess.plant.plan_store import Told, read_product
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.toml_file import read_toml
from aquabuf.assess.plant.toml_lines import toml_lines
from aquabuf.assess.tank.job import TIME_RULE, Arrival, Job, Site, Trial, Window, Wishes
from aquabuf.assess.tank.job_wastes import beside, not_there, read_wastes
from aquabuf.assess.tank.reagents import Reagent, reagent_of
from aquabuf.errors import FileError, InputError
from aquabuf.readings.profile_file import ProfileTable, read_profile

__all__ = ["SECTIONS", "read_stream"]

SECTIONS = ("tank", "acids", "wastes", "profile", "window", "reagents", "use", "site", "layout", "simulate")
S_PER_H, S_PER_D = 3600.0, 86400.0
MOST_STEPS = 1e7  # of a simulation: a year of steps of 3 s


def read_stream(path: str | Path) -> Job:
    """Read and check a stream file.

    Raises
    ------
    FileError
        The file cannot be read.
    InputError
        Not TOML, or a key or value that cannot be used; the message names file, line, key and remedy.
    """
    path = Path(path)
    text, content = read_toml(path, "stream file")
    top = Place(path.name, toml_lines(text), (), "top level")
    for name in content:
        if name not in SECTIONS:
            raise top.unknown(name, SECTIONS, "a table of a stream file")
    told = Told("file")
    head = _section(top, content, "tank", told, needed=True)
    profile = _profile(top, content, path.parent, told)
    arrivals = read_wastes(top, content, path.parent, told, has_profile=profile is not None)
    window = _window(top, content, told)
    trial = _trial(top, content, told)
    if profile is not None:
        _tell_profile(top.inner("profile", label="[profile]"), profile, arrivals, trial.days, told)
    reagents, residence = _reagents(top, content, told)
    use = _section(top, content, "use", told)
    for kind in ("base", "acid"):
        _check_use(top, use, kind, reagents)
    return Job(
        name=head["name"], date=head.get("date", ""), note=head.get("note", ""), currency=head.get("currency", ""),
        arrivals=arrivals, window=window, reagents=reagents, residence_min=residence, base=use.get("base"),
        acid=use.get("acid"), site=_site(top, content, told), wishes=_wishes(top, content, told, window),
        trial=trial, profile=profile, assumptions=tuple(told.assumptions),
        notes=tuple(told.notes), file=path.name)


def _section(top: Place, content: Mapping[str, Any], name: str, told: Told, *, needed: bool = False) -> Checked:
    if needed and name not in content:
        raise InputError(f"{top.file}: a stream file needs [{name}]; it is missing. Add it.")
    place = top.inner(name, label=f"[{name}]")
    checked = check_keys(place, place.table(content.get(name, {})), name)
    told.defaults(place.label, checked)
    return checked


def _window(top: Place, content: Mapping[str, Any], told: Told) -> Window:
    found = _section(top, content, "window", told, needed=True)
    place = top.inner("window", label="[window]")
    low, high = found["ph"]
    if not low < high:
        raise place.error(f"ph must have a lower limit below its upper one; found [{low:g}, {high:g}]. Give both.",
                          "ph")
    aim, own = found.get("aim"), not {"total", "each"} <= {key.name for key in found.defaults}
    if aim is not None and not low < aim < high:
        raise place.error(f"aim must lie within the window {low:g} to {high:g}; found {aim:g}. Correct one of them.",
                          "aim")
    return Window(low=low, high=high, aim=aim, total_min=found["total"], each_min=found["each"], source=found["source"],
                  time_source=found["source"] if own else TIME_RULE)


def _reagents(top: Place, content: Mapping[str, Any], told: Told,
              ) -> tuple[Mapping[str, Reagent], Mapping[str, float]]:
    """Reagents, by the keys of a product of a store and those of a neutralization; residence times that are set."""
    table = top.inner("reagents", label="[reagents]").table(content.get("reagents", {}))
    if not table:
        raise InputError(f"{top.file}: a stream file needs one reagent or more in [reagents]; none is there. Add for "
                         "example [reagents.caustic] with is = \"caustic soda\".")
    own = plan_keys("reagents")
    known = {**plan_keys("products"), **own}
    found, residence = {}, {}
    for name, value in table.items():
        place = top.inner("reagents", name, label=f"[reagents.{name}]")
        keys = place.table(value)
        for key in keys:
            if key not in known:
                raise place.unknown(key, known)
        more = check_keys(place, {k: v for k, v in keys.items() if k in own}, "reagents")
        stocked, feed = read_product(place, name, {k: v for k, v in keys.items() if k not in own}, told)
        found[name] = _reagent(place, stocked, feed, more)
        if "residence" in more.values:
            residence[name] = more["residence"]
        _tell(place, found[name], more, feed.made_up is None, told)
    return MappingProxyType(found), MappingProxyType(residence)


def _reagent(place: Place, stocked: Stocked, feed: FeedSpec, more: Checked) -> Reagent:
    return place.tried("is", lambda: reagent_of(
        stocked, efficiency=more.get("efficiency"), made_up=feed.made_up, dry=more["dry"],
        dissolution_per_min=_per_min(more.get("dissolves"))))


def _tell(place: Place, reagent: Reagent, more: Checked, made_up_by_table: bool, told: Told) -> None:
    """What was taken from the table of reagents."""
    if "efficiency" not in more.values:
        told.assume(f"{place.label}: {100.0 * reagent.efficiency:g} % of its equivalents react "
                    f"({reagent.efficiency_source}), as the file does not say")
    if made_up_by_table and reagent.fed_as.endswith("made up on site"):
        told.assume(f"{place.label}: fed as {reagent.fed_as}, as the file does not say")
    if reagent.dissolution_per_min is not None and "dissolves" not in more.values:
        told.assume(f"{place.label}: dissolves at {60.0 * reagent.dissolution_per_min:.3g} per h, the rate of the "
                    "reagents table, as the file does not say")


def _per_min(per_h: float | None) -> float | None:
    return None if per_h is None else per_h / 60.0


def _check_use(top: Place, use: Checked, kind: str, reagents: Mapping[str, Reagent]) -> None:
    name = use.get(kind)
    if name is None:
        return
    place = top.inner("use", label="[use]")
    if name not in reagents:
        raise not_there(place, kind, name, reagents, "a reagent of [reagents]")
    if reagents[name].kind != kind:
        raise place.error(f"{kind} must be a reagent that {'raises' if kind == 'base' else 'lowers'} pH; {name} is "
                          f"{'an acid' if kind == 'base' else 'a base'}. Name another.", kind)


def _profile(top: Place, content: Mapping[str, Any], folder: Path, told: Told) -> ProfileTable | None:
    if "profile" not in content:
        return None
    found = _section(top, content, "profile", told)
    place = top.inner("profile", label="[profile]")
    file = beside(place, folder, found["file"], "file")
    names = tuple(content["wastes"]) if isinstance(content.get("wastes"), dict) else ()
    table = place.tried("file", lambda: _table(file, names, S_PER_H * found["hold_gaps"]))
    told.notes.extend(f"{place.label}: {words}" for words in table.notes)
    return table


def _table(file: Path, names: tuple[str, ...], hold_gap_s: float) -> ProfileTable:
    try:
        return read_profile(file, names, hold_gap_s=hold_gap_s)
    except FileError as error:
        raise InputError(str(error)) from None


def _tell_profile(place: Place, table: ProfileTable, arrivals: Sequence[Arrival], days: float, told: Told) -> None:
    """What is made of a profile: shares of several wastes, repetition where it is short, temperature left aside."""
    known = [a.waste.name for a in arrivals if a.mean_m3_h is not None]
    columns = {name for name in (*table.strength, *table.base_eq_l) if name}
    if len(arrivals) > 1:
        if len(known) == len(arrivals):
            told.assume("[profile]: each waste has its share of the mean flows, times its strength in the table")
        elif columns == {a.waste.name for a in arrivals}:
            told.assume("[profile]: the strength of each waste in the table is its share of the flow, the rest water")
        else:
            no_flow, no_column = (next(a.waste.name for a in arrivals if a.waste.name not in names)
                                  for names in (known, columns))
            raise place.error("several wastes need the flow of each, or a column of strength for each; found no flow "
                              f"of {no_flow!r}, and in {table.name} no column for {no_column!r}. Add either.", "file")
    lasts = float(table.time_s[-1] - table.time_s[0] + table.step_s) / S_PER_D
    if lasts < days:
        told.assume(f"[profile]: its {lasts:.3g} days are repeated over the {days:g} days of the simulation")
    if table.t_c is not None:
        told.notes.append("[profile]: its temperature is not followed; the chemistry is that of the mean temperature "
                          "of the wastes")


def _site(top: Place, content: Mapping[str, Any], told: Told) -> Site:
    s = _section(top, content, "site", told)
    return Site(depth_m=s["depth"], feed_error=s["feed_error"], resolution=s["resolution"], turndown=s["turndown"],
                line_m=s["line"], line_bore_mm=s["line_bore"], probe_lag_s=s["probe_lag"],
                probe_noise_ph=s["probe_noise"], outlet_limit_c=s["outlet_limit"], storage_d=s.get("storage"),
                containment=s["containment"])


def _wishes(top: Place, content: Mapping[str, Any], told: Told, window: Window) -> Wishes:
    w = _section(top, content, "layout", told)
    place = top.inner("layout", label="[layout]")
    stages, volumes, points = w.get("stages"), w.get("volumes"), w.get("set_points")
    counts = {name: n for name, n in (("stages", stages), ("volumes", None if volumes is None else len(volumes)),
                                      ("set_points", None if points is None else len(points))) if n is not None}
    if len(set(counts.values())) > 1:
        told_counts = ", ".join(f"{name} {n}" for name, n in counts.items())
        raise place.error(f"stages, volumes and set_points must agree in number; found {told_counts}. Correct one.",
                          next(iter(counts)))
    if points is not None and not window.low < points[-1] < window.high:
        raise place.error(f"the last set point must lie within the window {window.low:g} to {window.high:g}; found "
                          f"{points[-1]:g}. Correct it.", "set_points")
    if points is not None and window.aim is not None and points[-1] != window.aim:
        raise place.error(f"the last set point must be the aim of [window], {window.aim:g}; found {points[-1]:g}. "
                          "Remove one of them.", "set_points")
    return Wishes(stages=next(iter(counts.values()), None), volumes_m3=volumes, set_points=points,
                  equalization_m3=w.get("equalization"), axis=w["control"], feedforward=w["feedforward"])


def _trial(top: Place, content: Mapping[str, Any], told: Told) -> Trial:
    t = _section(top, content, "simulate", told)
    if t.get("step") is not None and t["days"] * S_PER_D > MOST_STEPS * t["step"]:
        raise top.inner("simulate", label="[simulate]").error(
            f"step must be long enough for {MOST_STEPS:.0e} steps at most; found {t['step']:g} s for {t['days']:g} d. "
            "Lengthen it, or leave it out.", "step")
    return Trial(days=t["days"], step_s=t.get("step"), cases=t["cases"], seed=t["seed"], buffer_sd=t["buffer_spread"],
                 probe_offset_sd=t["probe_offset"])
