"""The wastes of a stream file: what they hold, their titrations, how they come."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from aquabuf.assess.plant.plan_keys import Checked, check_keys
from aquabuf.assess.plant.plan_place import Place, nearest_word, shown_value
from aquabuf.assess.plant.plan_store import Told
from aquabuf.assess.plant.plan_units import in_key_unit
from aquabuf.assess.tank.curve import MeasuredCurve, measured, strength_of
from aquabuf.assess.tank.job import Arrival, Batch, Daily, Spread
from aquabuf.assess.tank.waste import CARBON, Waste, dissolved
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.chem.metals import metals
from aquabuf.chem.products import Product, find_product, products
from aquabuf.errors import InputError
from aquabuf.readings.curve_file import read_curves
from aquabuf.readings.entries import number_and_unit
from aquabuf.readings.schema import quantities
from aquabuf.units import Unit, parse_unit, substances

__all__ = ["read_wastes"]

ALKALINITY = "alkalinity"
MIDDLE_POINTS = 81  # at which samples are compared
MOST_MOL_L = 20.0  # more than the strongest waste acid holds
NORMAL = "N"        # equivalents per liter, as the trade writes it
UNITS = "mg/L, g/L, mmol/L, meq/L, N"


def read_wastes(top: Place, content: Mapping[str, Any], folder: Path, told: Told, *, has_profile: bool,
                ) -> tuple[Arrival, ...]:
    """The wastes of a stream file in its order. Raises InputError naming line, key and remedy."""
    table = top.inner("wastes", label="[wastes]").table(content.get("wastes", {}))
    if not table:
        raise InputError(f"{top.file}: a stream file needs one waste or more in [wastes]; none is there. Add for example "
                         "[wastes.rinse] with its temperature, flow and what it holds.")
    own = _own_acids(top, content)
    return tuple(_arrival(top.inner("wastes", name, label=f"[wastes.{name}]"), name, value, own, folder, told,
                          in_profile=has_profile) for name, value in table.items())


def _own_acids(top: Place, content: Mapping[str, Any]) -> dict[str, tuple[Acid, float | None]]:
    """Acids of the user's own by name, with their molar mass where it is given."""
    table = top.inner("acids", label="[acids]").table(content.get("acids", {}))
    found = {}
    for name, value in table.items():
        place = top.inner("acids", name, label=f"[acids.{name}]")
        checked = check_keys(place, place.table(value), "acids")
        acid = place.tried("pk", lambda n=name, c=checked: Acid(name=n, pk=c["pk"], charge_full=c["charge"]))
        found[name] = acid, checked.get("molar_mass")
    return found


def _arrival(place: Place, name: str, value: object, own: Mapping[str, tuple[Acid, float | None]], folder: Path,
             told: Told, *, in_profile: bool) -> Arrival:
    found = check_keys(place, place.table(value), "wastes")
    samples = _samples(place, found, folder, told)
    curve = _chosen(place, found, samples, told)
    waste = Waste(name=name, t_c=found["temperature"], ph=found.get("ph"), solids_g_l=found.get("solids", 0.0),
                  curve=curve)
    contents = _contents(place, found.get("holds", {}), own)
    waste = place.tried("holds", lambda: dissolved(waste, contents, tuple(acid for acid, _ in own.values())))
    batch = _inner(place, found, "batch", told)
    spread, daily = _inner(place, found, "strength", told), _inner(place, found, "daily", told)
    mean, least, most = found.get("flow"), found.get("least"), found.get("most")
    _check_flows(place, found, batch, in_profile)
    return Arrival(
        waste=waste, mean_m3_h=mean if batch is None else batch["size"] / batch["every"], least_m3_h=least,
        most_m3_h=most, samples=samples,
        spread=None if spread is None else Spread(relative_sd=spread["spread"], lasting_h=spread["lasting"],
                                                  least=spread.get("least"), most=spread.get("most")),
        daily=None if daily is None else Daily(swing=daily["swing"], peak_h=daily["peak"]),
        batch=None if batch is None else Batch(size_m3=batch["size"], every_h=batch["every"], over_h=batch["over"],
                                               first_h=batch["first"]))


def _inner(place: Place, found: Checked, key: str, told: Told) -> Checked | None:
    if key not in found.values:
        return None
    inner = place.inner(key, label=f"{place.label} {key}")
    checked = check_keys(inner, found[key], f"wastes.{key}")
    told.defaults(inner.label, checked)
    return checked


def _check_flows(place: Place, found: Checked, batch: Checked | None, in_profile: bool) -> None:
    mean, least, most = found.get("flow"), found.get("least"), found.get("most")
    steady = [key for key in ("flow", "least", "most", "daily") if key in found.values]
    if batch is not None and steady:
        raise place.error(f"a waste that is dumped in batches has no {steady[0]}; found both. Remove one.", steady[0])
    if batch is not None and batch["over"] > batch["every"]:
        raise place.error(f"a dump must be over before the next begins, after {batch['every']:g} h; found over = "
                          f"{batch['over']:g} h. Correct one of them.", "batch")
    if mean is None and batch is None and not in_profile:
        raise place.error("flow is needed: a mean flow, a batch, or a [profile]; none is there. Add for example flow = "
                          "\"12 m3/h\".")
    if mean is None:
        return
    for key, wrong, rule in (("least", least is not None and least > mean, "at most"),
                             ("most", most is not None and most < mean, "at least")):
        if wrong:
            raise place.error(f"{key} must be {rule} the mean flow, {mean:g} m³/h; found {found[key]:g} m³/h. Correct one "
                              "of them.", key)


# ---------------------------------------------------------------- titrations


def _samples(place: Place, found: Checked, folder: Path, told: Told) -> tuple[MeasuredCurve, ...]:
    name = found.get("titration")
    if name is None:
        if "sample" in found.values:
            raise place.error("sample must go with titration; found none. Add titration or remove sample.", "sample")
        return ()
    file = folder / name
    if not file.is_file():
        raise place.error(f"titration must be a table beside the stream file; found no file {name!r}. Correct the name.",
                          "titration")
    table = place.tried("titration", lambda: read_curves(file))
    told.notes.extend(f"{place.label}, {name}: {words}" for words in table.notes)
    lines = [f"row {r.row}, sample {r.sample_id!r}, {r.column}: {r.rule}; found {r.value}. {r.remedy}"
             for r in table.refused.itertuples()]
    told.notes.extend(f"{place.label}, {name}, left out: {words}" for words in lines)
    if not table.curves:
        raise place.error(f"no titration of {name} can be used. {lines[0] if lines else 'It is empty'}.", "titration")
    return tuple(measured(points, found["temperature"]) for points in table.curves)


def _chosen(place: Place, found: Checked, samples: tuple[MeasuredCurve, ...], told: Told) -> MeasuredCurve | None:
    if not samples:
        return None
    wanted = found.get("sample")
    if wanted is None:
        curve = _middle(samples)
        if len(samples) > 1:
            told.assume(f"{place.label}: designed for sample {curve.sample_id}, the middle one of {len(samples)} by demand")
        return curve
    by_name = {curve.sample_id: curve for curve in samples}
    if wanted not in by_name:
        raise place.unknown(wanted, by_name, f"a sample of {found['titration']}")
    return by_name[wanted]


def _middle(samples: tuple[MeasuredCurve, ...]) -> MeasuredCurve:
    """The sample in the middle by its strength, the first of two."""
    low, high = max(c.ph[0] for c in samples), min(c.ph[-1] for c in samples)
    if len(samples) == 1 or not low < high:
        return samples[0]
    strength, _ = strength_of(samples, np.linspace(low, high, MIDDLE_POINTS))
    return samples[int(np.argsort(strength, kind="stable")[(len(samples) - 1) // 2])]


# ---------------------------------------------------------------- what is dissolved


def _contents(place: Place, table: Mapping[str, Any], own: Mapping[str, tuple[Acid, float | None]],
              ) -> list[tuple[str | Product, float]]:
    """Substances by the name of their total, or as products. [mol/L; eq/L of alkalinity]"""
    inner = place.inner("holds", label=f"{place.label} holds")
    return [(_meant(inner, name, own), _mol_l(inner, name, value, own)) for name, value in table.items()]


def _totals() -> dict[str, str]:
    """Columns of readings whose totals a waste may hold: name in the file, dimension."""
    dissolved_names = {*acid_table(), *substances()}
    named = {n.removesuffix("_mol_l"): n for n in quantities() if n.endswith("_mol_l")}
    return {"inorganic carbon": "dic_mol_l"} | {n: d for n, d in named.items() if n in dissolved_names}


def _meant(place: Place, name: str, own: Mapping[str, tuple[Acid, float | None]]) -> str | Product:
    """What a name stands for: an acid of the user's own, a metal, a total, alkalinity, or a product."""
    if name in own or name in metals():
        return name
    if name == ALKALINITY:
        return ALKALINITY
    if name in _totals():
        return CARBON if name == "inorganic carbon" else name
    try:
        return find_product(name)
    except InputError as error:
        if "can mean several" in str(error):
            raise place.error(str(error), name) from None
    known = (*own, *metals(), ALKALINITY, *_totals(), *products())
    near = nearest_word(name, known)
    hint = f" The nearest is {near}." if near else ""
    raise place.error(f"{name!r} is no product, weak acid, metal or ion.{hint} Correct it, or define an acid of your own "
                      "in [acids].", name)


def _mol_l(place: Place, name: str, value: Any, own: Mapping[str, tuple[Acid, float | None]]) -> float:
    meant = _meant(place, name, own)
    if not isinstance(value, str):
        raise place.error(f"{name} must be a concentration with its unit, in quotes; found {shown_value(value)}. Write for "
                          f"example \"{name}\" = \"120 mg/L\".", name)
    try:
        number, unit = number_and_unit(value)
    except InputError as error:
        raise place.error(f"{name} {error}. Write for example \"{name}\" = \"120 mg/L\".", name) from None
    if number < 0.0 and name != ALKALINITY:
        raise place.error(f"{name} must be zero or more; found {value!r}. Correct it.", name)
    try:
        found = _converted(name, meant, number, unit, own)
    except InputError as error:
        raise place.error(f"{name} {error}. Write for example \"{name}\" = \"120 mg/L\".", name) from None
    if not abs(found) <= MOST_MOL_L:
        raise place.error(f"{name} must be at most {MOST_MOL_L:g} mol/L; found {value!r}. Check value and unit.", name)
    return found


def _converted(name: str, meant: str | Product, number: float, unit: str, own: Mapping[str, tuple[Acid, float | None]],
               ) -> float:
    """Amount of a substance. [mol/L, eq/L of alkalinity]"""
    if isinstance(meant, Product):
        parsed = _parsed(unit)
        if parsed.kind == "charge":
            per_mole = abs(meant.adds["alkalinity"])
            if not per_mole:
                raise InputError(f"has no equivalents; found {unit!r}. Give it as mass or moles")
            return number * parsed.scale / per_mole
        return number * parsed.scale / (meant.molar_mass_g if parsed.kind == "mass" else 1.0)
    if meant == ALKALINITY:
        return in_key_unit(number, unit, "alkalinity_eq_l", "eq/L")
    if meant in own or meant in metals():
        mass = own[meant][1] if meant in own else metals()[meant].molar_mass_g
        parsed = _parsed(unit)
        if parsed.kind == "charge":
            raise InputError(f"must be in mg/L, g/L or mmol/L; found {unit!r}")
        if parsed.kind == "mass" and mass is None:
            raise InputError(f"is given as mass, and no molar mass is known; found {unit!r}. Add molar_mass to "
                             f"[acids.{name}]")
        return number * parsed.scale / (mass if parsed.kind == "mass" and mass is not None else 1.0)
    return in_key_unit(number, unit, _totals()[name], "mol/L")


def _parsed(unit: str) -> Unit:
    """A unit of mass, moles or equivalents per liter, without a basis; scales lead to g/L, mol/L, eq/L."""
    found = parse_unit("eq/L" if unit == NORMAL else unit, "amount") if unit else None
    if found is None or found.kind not in ("mass", "amount", "charge") or found.basis or found.per_kg:
        raise InputError(f"must be in one of {UNITS}; found {unit!r}")
    return found
