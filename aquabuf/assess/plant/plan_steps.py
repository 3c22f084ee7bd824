"""The steps of a plan: each kind has its keys; products, doses and targets are resolved against the store."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType
from typing import Any

from aquabuf.assess.plant.plan import Source, StepSpec
from aquabuf.assess.plant.plan_keys import Amount, Checked, check_keys, plan_keys, window_of
from aquabuf.assess.plant.plan_place import Place, nearest_hint, shown_value
from aquabuf.assess.plant.plan_store import Told
from aquabuf.assess.plant.quantities import PlantQuantity, find_quantity, in_house, plant_quantities
from aquabuf.assess.plant.steps.soften import SPLIT
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.targets import Target
from aquabuf.chem.products import strength_of
from aquabuf.errors import InputError
from aquabuf.readings.entries import is_number, number_and_unit
from aquabuf.units import parse_unit

__all__ = ["read_steps"]

STEPS = "steps"
COMMON = ("do", "name")
PURE, DELIVERED = "pure", "product"  # what the mass of a dose may count, beside a formula
BARE = ("ph", "ratio")               # dimensions of targets without a unit
_TRACE = 1e-3                        # any share: what a basis means goes in proportion
MOST_MOL_L = 1.0
_DOSES = {"dose": "product", "co2_dose": "co2"}  # key of a dose, key of its product
SIGNED = ("alkalinity", "si_calcite", "ccpp")  # targets that may be below zero


def read_steps(place: Place, value: object, store: Mapping[str, Stocked], sources: Mapping[str, Source], told: Told,
               ) -> tuple[StepSpec, ...]:
    """All steps in order. Raises InputError naming line, step, key and remedy."""
    if not isinstance(value, list) or not value:
        raise place.error(f"a plan needs its steps, one or more; found {shown_value(value)}. Write [[steps]] and below "
                          "it for example do = \"adjust\".")
    steps: list[StepSpec] = []
    for index, table in enumerate(value):
        step = _step(place.inner(index, label=f"[[steps]] {index + 1}"), table, store, sources, told)
        if step.name in (s.name for s in steps):
            raise place.inner(index, label=f"[[steps]] {index + 1}").error(
                f"each step must have a name of its own; found {step.name!r} again. Add name = \"...\".",
                "name" if "name" in table else "do")
        steps.append(step)
    return tuple(steps)


def _step(place: Place, value: object, store: Mapping[str, Stocked], sources: Mapping[str, Source], told: Told,
          ) -> StepSpec:
    table = place.table(value, "[[steps]]")
    head = check_keys(place, {k: v for k, v in table.items() if k in COMMON}, STEPS)
    kind, name = head["do"], head.get("name", head["do"])
    inner = Place(place.file, place.lines, place.path, f"{place.label} ({name})")
    section = f"{STEPS}.{kind}"
    for key in table:
        if key not in plan_keys(section) and key not in COMMON:
            raise inner.unknown(key, (*COMMON, *plan_keys(section)), f"a key of {kind}")
    checked = check_keys(inner, {k: v for k, v in table.items() if k not in COMMON}, section)
    told.defaults(inner.label, checked, skip=("dose_as",))
    values = {key: _resolved(inner, section, key, v, store) for key, v in checked.values.items()}
    for key, of in _DOSES.items():
        if key in values:
            values[key] = _dose(inner, checked, key, _fed(inner, values, key, of), told)
    values.pop("dose_as", None)
    if kind in _MORE:
        _MORE[kind](inner, values, sources)
    return StepSpec(kind, name, MappingProxyType(values), place.lines.of(place.path))


def _resolved(place: Place, section: str, key: str, value: Any, store: Mapping[str, Stocked]) -> Any:
    """Products and targets in place of their names."""
    kind = plan_keys(section)[key].type
    if kind == "product":
        return _stocked(place, key, value, store)
    if kind == "products":
        if len(set(value)) < len(value):
            raise place.error(f"{key} must name each product once; found {shown_value(list(value))}. Remove one.", key)
        return tuple(_stocked(place, key, name, store) for name in value)
    if kind == "targets":
        return _targets(place, key, value)
    return value


def _stocked(place: Place, key: str, name: str, store: Mapping[str, Stocked]) -> Stocked:
    if name in store:
        return store[name]
    if not store:
        raise place.error(f"{key} names {name!r}, and the store is empty. Add [products.\"{name}\"].", key)
    raise place.error(f"{key} names {name!r}, which is not in the store; there are {', '.join(store)}."
                      f"{nearest_hint(name, store)} Correct it, or add [products.\"{name}\"].", key)


# ---------------------------------------------------------------- doses


def _fed(place: Place, values: Mapping[str, Any], key: str, of: str) -> Stocked:
    """The product that a dose is of."""
    if of not in values:
        raise place.error(f"{key} must go with {of}; found none. Add {of} or remove {key}.", key)
    return values[of]


def _dose(place: Place, checked: Checked, key: str, product: Stocked, told: Told) -> float:
    """A dose as active substance. [mol/L]"""
    amount: Amount = checked[key]
    unit, _, stated = amount.unit.partition(" as ")
    counted = checked.get("dose_as", PURE)
    own = "dose_as" in checked.values and "dose_as" not in (k.name for k in checked.defaults)
    if stated and own and counted != stated:
        raise place.error(f"what the dose counts must be said once; found {stated!r} in {key} and {counted!r} in "
                          "dose_as. Remove one.", "dose_as")
    found = parse_unit(unit, "amount") if unit else None
    if found is None or found.kind not in ("mass", "amount") or found.basis or found.per_kg:
        raise place.error(f"{key} must be in one of mg/L, g/L, µg/L, mmol/L; found {amount.unit!r}. Write for example "
                          f"{key} = \"25 mg/L\".", key)
    per_liter = amount.value * found.scale
    if found.kind == "amount":
        if stated or own:
            raise place.error(f"{key} in moles counts the active substance; found a basis beside it. Remove it.", key)
        return _believed(place, key, amount, per_liter)
    if not stated and not own:
        told.assume(f"{place.label}: its {key} counts {_counts(counted, product)}, as the plan does not say")
    share = _pure_share(place, "dose_as" if own else key, stated or counted, product)
    return _believed(place, key, amount, per_liter * share / product.product.molar_mass_g)


def _pure_share(place: Place, key: str, counts: str, product: Stocked) -> float:
    """Mass of the active substance in a mass of what the dose counts. [-]"""
    if counts in (PURE, DELIVERED):
        return 1.0 if counts == PURE else product.strength
    def share() -> float:
        try:
            return strength_of(product.product, _TRACE, counts) / _TRACE
        except InputError as error:
            raise InputError(str(error).replace("the strength of", "a dose of", 1)) from None
    return place.tried(key, share)


def _counts(counts: str, product: Stocked) -> str:
    return f"pure {product.product.formula}" if counts == PURE else counts


def _believed(place: Place, key: str, amount: Amount, mol_l: float) -> float:
    if mol_l > MOST_MOL_L:
        raise place.error(f"{key} must be at most {MOST_MOL_L:g} mol/L of active substance; found {amount.value:g} "
                          f"{amount.unit}. Check value and unit.", key)
    return mol_l


# ---------------------------------------------------------------- targets


def _targets(place: Place, key: str, table: Mapping[str, Any]) -> tuple[Target, ...]:
    inner = place.inner(key, label=f"{place.label} {key}")
    if not table:
        raise place.error(f"{key} must have one quantity or more; found none. Write for example {key} = "
                          "{ ph = 8.4 }.", key)
    return tuple(_target(inner, name, value) for name, value in table.items())


def _target(place: Place, name: str, value: object) -> Target:
    try:
        quantity = find_quantity(name)
    except InputError:
        known = [n for n, q in plant_quantities().items() if q.is_target]
        raise place.unknown(name, known, "a quantity that a target can be set for") from None
    try:
        low, high = window_of(value, lambda part: _target_value(quantity, part))
        return Target(quantity=quantity, low=low, high=high)
    except InputError as error:
        example = "8.4" if quantity.dimension in BARE else f"\"... {quantity.unit}\""
        raise place.error(f"{name} {error}. Write for example {name} = {example}.", name) from None


def _target_value(quantity: PlantQuantity, value: object) -> float:
    if is_number(value) and quantity.dimension in BARE:
        return _within(quantity, float(value), value)
    if is_number(value):
        raise InputError(f"must have a unit, for example {quantity.unit}; found {shown_value(value)}")
    if not isinstance(value, str):
        raise InputError(f"must be a number{'' if quantity.dimension in BARE else ' with its unit, in quotes'}; found "
                         f"{shown_value(value)}")
    number, unit = number_and_unit(value)
    if not unit and quantity.dimension not in BARE:
        raise InputError(f"must have a unit, for example {quantity.unit}; found {shown_value(value)}")
    try:
        return _within(quantity, in_house(quantity, number, unit), value)
    except InputError as error:
        raise InputError(f"cannot be {shown_value(value)}: {str(error).rstrip('.')}") from None


def _within(quantity: PlantQuantity, house: float, value: object) -> float:
    """A pH within its scale, and no amount below zero; indices may be anything near."""
    low, high = (0.0, 14.0) if quantity.dimension == "ph" else (-100.0, 100.0)
    if quantity.name not in SIGNED and quantity.dimension != "ph":
        low = 0.0
    if not low <= house <= high:
        raise InputError(f"must be {'at least' if house < low else 'at most'} {low if house < low else high:g}; found "
                         f"{shown_value(value)}")
    return house


# ---------------------------------------------------------------- what single kinds ask for


def _one_way(place: Place, values: Mapping[str, Any], ways: Mapping[str, str], words: str, *, needed: bool) -> None:
    """One of several ways to state something; a way may need a second key."""
    found = [way for way in ways if values.get(way) not in (None, False)]
    partners = {partner for partner in ways.values() if partner}
    wanted = {ways[way] for way in found if ways[way]}
    if len(found) > 1 or (needed and not found) or partners & set(values) != wanted:
        there = [key for key in (*ways, *sorted(partners)) if key in values]
        raise place.error(f"{words}; found {' and '.join(there) or 'none'}. Give one of them.")


def _aerate(place: Place, values: Mapping[str, Any], _: Mapping[str, Source]) -> None:
    _one_way(place, values, {"efficiency": "", "kla": "time", "to_air": ""},
             "aerate takes one of efficiency, kla with time, or to_air = true", needed=True)


def _contact(place: Place, values: Mapping[str, Any], _: Mapping[str, Source]) -> None:
    _one_way(place, values, {"approach": "", "rate": "time"}, "contact takes one of approach, or rate with time",
             needed=False)


def _soften(place: Place, values: Mapping[str, Any], _: Mapping[str, Source]) -> None:
    if (values["method"] == SPLIT) != ("magnesium" in values):
        raise place.error(f"magnesium belongs to method = \"{SPLIT}\" and must be given there; found method = "
                          f"\"{values['method']}\" with{'' if 'magnesium' in values else 'out'} it. Give it, or "
                          "change the method.", "magnesium" if "magnesium" in values else "method")


def _remineralize(place: Place, values: Mapping[str, Any], _: Mapping[str, Source]) -> None:
    if not {"alkalinity", "calcium"} & set(values):
        raise place.error("remineralize needs what is wanted, alkalinity or calcium or both; found none. Add one.")
    if ("base" in values) != ("ph" in values):
        raise place.error(f"base and ph must come together; found {'base' if 'base' in values else 'ph'} alone. Add "
                          "the other.", "base" if "base" in values else "ph")


def _blend(place: Place, values: Mapping[str, Any], sources: Mapping[str, Source]) -> None:
    names, shares = values["with"], values.get("shares")
    own = shares is not None
    for name in names:
        if name not in sources:
            if not sources:
                raise place.error(f"with names {name!r}, and the plan has no sources. Add [sources.\"{name}\"].",
                                  "with")
            raise place.error(f"with names {name!r}, which is not among the sources; there are {', '.join(sources)}."
                              f"{nearest_hint(name, sources)} Correct it, or add [sources.\"{name}\"].", "with")
    if len(set(names)) < len(names):
        raise place.error(f"with must name each source once; found {shown_value(list(names))}. Remove one.", "with")
    if shares is None:
        bare = [n for n in names if sources[n].share is None and sources[n].flow_m3_d is None]
        if bare:
            raise place.error(f"the blend needs a share or flow of {bare[0]}; found none. Add shares here, or share to "
                              f"[sources.{bare[0]}].")
        shares = [share for n in names if (share := sources[n].share) is not None]
    elif len(shares) != len(names):
        raise place.error(f"shares must be as many as the sources in with; found {len(shares)} for {len(names)}. "
                          "Give one each.", "shares")
    if sum(shares) > 1.0 + 1e-9:
        raise place.error(f"shares of a blend must add up to 100 % at most; found {100 * sum(shares):.4g} %. Lower "
                          "them; the rest is the water of the step before.", "shares" if own else "with")


def _recarbonate(place: Place, values: Mapping[str, Any], _: Mapping[str, Source]) -> None:
    stages = values["ph"]
    if len(stages) > 2 or (len(stages) == 2 and not stages[0] > stages[1]):
        raise place.error(f"ph must be that of one stage, or of two with the lower one last; found "
                          f"{shown_value(list(stages))}. Write for example ph = [10.3, 8.6].", "ph")


_MORE: Mapping[str, Callable[[Place, Mapping[str, Any], Mapping[str, Source]], None]] = MappingProxyType({
    "aerate": _aerate, "blend": _blend, "contact": _contact, "recarbonate": _recarbonate,
    "remineralize": _remineralize, "soften": _soften})
