"""Plan files (TOML): raw water, flow, products in the store, steps in order, targets. Keys are in data/plan_keys.csv.

A number with a dimension is a string with its unit ("9.6 ML/d", "57.4 mg/L as CaCO3", "92 %"); pH and indices are bare
numbers. Every mistake is named with its line.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

from aquabuf.assess.plant.digester import ACID_IN_TITRATION
from aquabuf.assess.plant.faults import Guards
from aquabuf.assess.plant.plan import DigesterSpec, DriftSpec, Flow, HoldSpec, Plan, Source
from aquabuf.assess.plant.plan_keys import Checked, check_keys
from aquabuf.assess.plant.plan_place import Place, shown_value
from aquabuf.assess.plant.plan_steps import read_steps
from aquabuf.assess.plant.plan_store import Told, read_product
from aquabuf.assess.plant.plan_water import errors_of, read_water
from aquabuf.assess.plant.toml_file import read_toml
from aquabuf.assess.plant.toml_lines import toml_lines
from aquabuf.errors import InputError

__all__ = ["SECTIONS", "read_plan"]

SECTIONS = ("plan", "flow", "water", "sources", "products", "steps", "hold", "digester", "drift", "limits", "guards")


def read_plan(path: str | Path) -> Plan:
    """Read and check a plan file.

    Raises
    ------
    FileError
        The file cannot be read.
    InputError
        Not TOML, or a key or value that cannot be used; the message names file, line, key and remedy.
    """
    path = Path(path)
    text, content = read_toml(path, "plan file")
    top = Place(path.name, toml_lines(text), (), "top level")
    for name in content:
        if name not in SECTIONS:
            raise top.unknown(name, SECTIONS, "a table of a plan")
    told = Told()
    head = _section(top, content, "plan", told, needed=True)
    guards = _guards(top, content, told)
    sources = _sources(top, content, path.parent)
    water = _found(top, content, "water", needed=True)
    raw, _ = read_water(_place(top, "water"), water, "water", "raw water", path.parent)
    products = {name: read_product(place, name, place.table(table), told)
                for name, table, place in _named(top, content, "products")}
    store = MappingProxyType({name: stocked for name, (stocked, _) in products.items()})
    steps = read_steps(_place(top, "steps"), content.get("steps"), store, sources, told)
    return Plan(
        name=head["name"], use=head["use"], currency=head.get("currency", ""), date=head.get("date", ""),
        note=head.get("note", ""), flow=_flow(top, content, told), raw=raw, sources=sources, store=store,
        feeds=MappingProxyType({name: feed for name, (_, feed) in products.items()}),
        steps=steps, guards=guards, hold=_hold(top, content, head["use"], guards, told),
        digester=_digester(top, content, told), drift=_drift(top, content, path.parent, told),
        limits=_limits(top, content), assumptions=tuple(told.assumptions), notes=tuple(told.notes), file=path.name)


def _place(top: Place, name: str) -> Place:
    return top.inner(name, label=f"[{name}]")


def _found(top: Place, content: Mapping[str, Any], name: str, *, needed: bool = False) -> dict[str, Any]:
    """A table of the plan; empty where it is not there."""
    if needed and name not in content:
        raise InputError(f"{top.file}: a plan needs [{name}]; it is missing. Add it.")
    return _place(top, name).table(content.get(name, {}))


def _section(top: Place, content: Mapping[str, Any], name: str, told: Told, *, needed: bool = False) -> Checked:
    """A table whose keys are all in the list; its defaults are told."""
    checked = check_keys(_place(top, name), _found(top, content, name, needed=needed), name)
    told.defaults(f"[{name}]", checked)
    return checked


def _named(top: Place, content: Mapping[str, Any], name: str) -> list[tuple[str, Any, Place]]:
    """Tables within a table, by the names that the plan gives them, each with its place."""
    place = _place(top, name)
    return [(key, value, place.inner(key, label=f"[{name}.{key}]"))
            for key, value in _found(top, content, name).items()]


def _flow(top: Place, content: Mapping[str, Any], told: Told) -> Flow:
    flow = _section(top, content, "flow", told, needed=True)
    now, least, most = flow["now"], flow.get("least"), flow.get("most")
    for key, wrong, rule in (("least", least is not None and least > now, "at most"),
                             ("most", most is not None and most < now, "at least")):
        if wrong:
            raise _place(top, "flow").error(f"{key} must be {rule} the flow now, {now:g} m³/d; found {flow[key]:g} "
                                            "m³/d. Correct one of them.", key)
    return Flow(now_m3_d=now, least_m3_d=least, most_m3_d=most)


def _sources(top: Place, content: Mapping[str, Any], folder: Path) -> Mapping[str, Source]:
    found = {}
    for name, value, place in _named(top, content, "sources"):
        water, checked = read_water(place, place.table(value), "sources", name, folder)
        share, flow = checked.get("share"), checked.get("flow")
        if share is not None and flow is not None:
            raise place.error("a source must have one of share and flow; found both. Remove one.", "flow")
        found[name] = Source(name=name, water=water, share=share, flow_m3_d=flow)
    return MappingProxyType(found)


def _guards(top: Place, content: Mapping[str, Any], told: Told) -> Guards:
    found = _section(top, content, "guards", told)
    low, high = found["ph"]
    return _place(top, "guards").tried("ph", lambda: Guards(
        ph_low=low, ph_high=high, over_dose=found["over_dose"], over_ph=found["over_ph"]))


def _hold(top: Place, content: Mapping[str, Any], use: str, guards: Guards, told: Told) -> HoldSpec | None:
    if "hold" not in content:
        return None
    place = _place(top, "hold")
    found = check_keys(place, _found(top, content, "hold"), "hold")
    fault = found.get("fault")
    if fault is None and "fault_of" in content["hold"]:
        raise place.error("fault_of must go with fault; found none. Add fault or remove fault_of.", "fault_of")
    told.defaults(place.label, found, skip=("fault_of",) if fault is None else ())
    window = found.get("window")
    if window is None:
        window = guards.ph_low, guards.ph_high
        told.assume(f"[hold]: window = [{window[0]:g}, {window[1]:g}], that of [guards], as the plan does not say")
    if "use" not in found.values:
        told.assume(f"[hold]: use = \"{use}\", that of [plan], as the plan does not say")
    return HoldSpec(ph=found["ph"], intensity_eq_l=found["intensity"], use=found.get("use", use),
                    window=window, basin_m3=found.get("basin"),
                    fault_eq_l=None if fault is None else fault if found["fault_of"] == "acid" else -fault)


def _digester(top: Place, content: Mapping[str, Any], told: Told) -> DigesterSpec | None:
    if "digester" not in content:
        return None
    found = _section(top, content, "digester", told)
    if found.get("ratio") is not None and found.get("ph") is not None:
        raise _place(top, "digester").error("a digester comes back to a ratio or to a pH; found both. Remove one.",
                                            "ph")
    told.assume(f"[digester]: {100 * ACID_IN_TITRATION:g} % of the volatile acids count in its alkalinity, as for an "
                f"end point near pH 4")
    return DigesterSpec(alkalinity_eq_l=found["alkalinity"], volatile_acids_eq_l=found["volatile_acids"],
                        co2_share=found["co2_share"], t_c=found["temperature"],
                        ionic_strength_mol_l=found["ionic_strength"], ratio=found.get("ratio"), ph=found.get("ph"))


def _drift(top: Place, content: Mapping[str, Any], folder: Path, told: Told) -> DriftSpec | None:
    if "drift" not in content:
        return None
    found = _section(top, content, "drift", told)
    place = _place(top, "drift")
    files = {}
    for key in ("readings", "map"):
        name = found.get(key)
        files[key] = None if name is None else _file(place, key, name, folder)
    if files["map"] is not None and files["readings"] is None:
        raise place.error("map must go with readings; found none. Add readings or remove map.", "map")
    inner = place.inner("errors", label="[drift] errors")
    return DriftSpec(readings=files["readings"], mapping=files["map"], errors=errors_of(inner, found.get("errors", {})),
                     feed_error=found["feed_error"], draws=found["draws"], seed=found["seed"])


def _file(place: Place, key: str, name: str, folder: Path) -> Path:
    try:
        there = (folder / name).is_file()
    except ValueError:  # a text may hold what no file name can
        there = False
    if not there:
        raise place.error(f"{key} must be a file beside the plan; found no file {name!r}. Correct the name.", key)
    return folder / name


def _limits(top: Place, content: Mapping[str, Any]) -> Mapping[str, Mapping[str, Any]]:
    """The user's own limits as they stand; the limits of a plan are checked by those who judge."""
    for name, value, place in _named(top, content, "limits"):
        if not isinstance(value, dict):
            raise place.error(f"a limit must be a table of keys and values; found {shown_value(value)}. Write "
                              f"[limits.\"{name}\"] and its keys below.")
    return MappingProxyType(_found(top, content, "limits"))
