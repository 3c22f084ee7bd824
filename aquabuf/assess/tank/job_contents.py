"""What a waste of a stream file holds: names and concentrations, as a laboratory reports them.

A name is a product of the products table ("sulfuric acid"), a weak acid as such ("acetic acid"), the total of a weak
acid whatever its form ("phosphate"), a metal, an ion, "inorganic carbon", "alkalinity", or an acid of the user's own.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from types import MappingProxyType
from typing import Any

from aquabuf.assess.plant.plan_keys import Checked, check_keys
from aquabuf.assess.plant.plan_place import Place, nearest_hint, shown_value
from aquabuf.assess.plant.plan_store import Told
from aquabuf.assess.plant.plan_units import in_key_unit
from aquabuf.assess.tank.composition import ALKALINITY, CARBON, Waste
from aquabuf.chem.acids import Acid, acid_named, acid_table
from aquabuf.chem.metals import metals
from aquabuf.chem.products import Product, find_product, molar_mass, own_product, products
from aquabuf.errors import InputError
from aquabuf.readings.entries import number_and_unit
from aquabuf.readings.schema import quantities
from aquabuf.units import Unit, parse_unit, substances
from aquabuf.units import key as plain

__all__ = ["Meant", "OwnAcids", "contents_of", "free_acids", "own_acids", "tell_contents"]

Meant = str | Product
OwnAcids = Mapping[str, tuple[Acid, float | None]]  # acid, and its molar mass where it is given

INORGANIC = "inorganic carbon"
MOST_MOL_L = 20.0   # more than the strongest waste acid holds
NORMAL = "N"        # equivalents per liter, as the trade writes it
UNITS = "mg/L, g/L, mmol/L, meq/L, N"
PLAIN_UNITS = "mg/L, g/L, mmol/L"
OXIDIZES = "FeSO4"  # formula of products that the table counts as oxidized
H_G_MOL = molar_mass("H")


def own_acids(top: Place, table: Mapping[str, Any]) -> dict[str, tuple[Acid, float | None]]:
    """Acids of the user's own by name. Raises InputError for a name that something else has."""
    found = {}
    for name, value in table.items():
        place = top.inner("acids", name, label=f"[acids.{name}]")
        checked = check_keys(place, place.table(value), "acids")
        if not plain(name):
            raise place.error(f"an acid needs a name of letters; found {name!r}. Name it.")
        if plain(name) in _names():
            raise place.error(f"the name {name} is taken: it stands for {_names()[plain(name)]} already. Choose "
                              "another name.")
        found[name] = _acid(place, name, checked), checked.get("molar_mass")
    return found


def _acid(place: Place, name: str, checked: Checked) -> Acid:
    return place.tried("pk", lambda: Acid(name=name, pk=checked["pk"], charge_full=checked["charge"]))


@cache
def free_acids() -> Mapping[str, Product]:
    """Weak acids as such by their name ("acetic acid"): what a mole brings, counted from the zero level of alkalinity.

    Those that the products table has are left to it. Molar mass by formula, or by the anion and its protons.
    """
    known = {plain(word) for word in products()}
    found = {}
    for acid in acid_table().values():
        if acid.charge_full or plain(acid.meaning) in known:
            continue
        try:
            mass = molar_mass(acid.species[0])
        except InputError:  # short for an organic acid: H3Cit
            mass = substances()[acid.name].molar_mass_g + len(acid.pk) * H_G_MOL
        found[acid.meaning] = own_product(acid.meaning, molar_mass_g=mass, alkalinity=-float(acid.zero_level),
                                          ions={acid.name: 1.0}, source=acid.reference)
    return MappingProxyType(found)


@cache
def _totals() -> Mapping[str, str]:
    """Totals that a waste may hold: name in the file, column of readings that brings its units."""
    dissolved_names = {*acid_table(), *substances()}
    named = {n.removesuffix("_mol_l"): n for n in quantities() if n.endswith("_mol_l")}
    elements = {name.partition("(")[0] for name in metals()}  # as metals they ask for base, as mere ions they would not
    return MappingProxyType({INORGANIC: "dic_mol_l"} | {
        n: d for n, d in named.items() if n in dissolved_names and n not in elements})


@cache
def _names() -> Mapping[str, str]:
    """Every name but those of products, by its plain form."""
    return MappingProxyType({plain(n): n for n in (*free_acids(), *_totals(), *metals(), ALKALINITY, CARBON)})


# ---------------------------------------------------------------- names


def contents_of(place: Place, table: Mapping[str, Any], own: OwnAcids) -> list[tuple[Meant, float]]:
    """Substances by the name of their total, or as products. [mol/L; eq/L of alkalinity]

    Raises InputError naming line, key and remedy.
    """
    found: dict[str, tuple[Meant, float]] = {}
    for name, value in table.items():
        meant = _meant(place, name, own)
        key = meant if isinstance(meant, str) else meant.name
        if key in found:
            raise place.error(f"{name} is given twice, under two names of {key}. Remove one of them.", name)
        found[key] = meant, _mol_l(place, name, value, meant, own)
    return list(found.values())


def _meant(place: Place, name: str, own: OwnAcids) -> Meant:
    """What a name stands for."""
    if name in own:
        return name
    known = _names().get(plain(name), "")
    if known in free_acids():
        return free_acids()[known]
    if known in (INORGANIC, CARBON):
        return CARBON
    if known:
        return known
    if plain(name) in substances() and len(_metals_in(name)) == 1:
        return _metals_in(name)[0]  # manganese that is dissolved is manganese(II)
    try:
        product = find_product(name)
    except InputError as error:
        if "can mean several" in str(error):
            raise place.error(str(error), name) from None
    else:
        return _dissolved_product(place, name, product)
    if _metals_in(name):
        raise place.error(f"{name} must say which ion it is, as each asks for base of its own; found {name!r}. Write "
                          f"{' or '.join(_metals_in(name))}.", name)
    hint = nearest_hint(name, (*own, *free_acids(), *metals(), ALKALINITY, *_totals(), *products()))
    raise place.error(f"{name!r} is no product, weak acid, metal or ion.{hint} Correct it, or define an acid of your "
                      "own in [acids].", name)


def _metals_in(name: str) -> list[str]:
    """Metals that a name has in it ("total iron"), or the symbol of which it is."""
    words = plain(name).split("_")
    return [n for n, metal in metals().items() if plain(n).split("_")[0] in words or metal.symbol == name]


def _dissolved_product(place: Place, name: str, product: Product) -> Product:
    """The product, if its row of the table says what it dissolves to."""
    if product.formula.startswith(OXIDIZES):
        raise place.error(f"{name} must be told by what it dissolves to; the products table counts its iron as "
                          "oxidized. Give iron(II) and sulfate.", name)
    try:
        dict(product.adds)
    except InputError:
        raise place.error(f"{name} must be told by what it dissolves to, as its basicity differs; found the product. "
                          "Give aluminum, chloride and pH, or titrate the waste.", name) from None
    return product


# ---------------------------------------------------------------- amounts


def _mol_l(place: Place, name: str, value: Any, meant: Meant, own: OwnAcids) -> float:
    example = f"Write for example {_quoted(name)} = \"120 mg/L{_basis_of(meant)}\"."
    if not isinstance(value, str):
        raise place.error(f"{name} must be a concentration with its unit, in quotes; found {shown_value(value)}. "
                          f"{example}", name)
    try:
        number, unit = number_and_unit(value)
        if number < 0.0 and meant != ALKALINITY:
            raise InputError(f"must be zero or more; found {value!r}")
        found = _converted(name, meant, number, unit, own)
    except InputError as error:
        raise place.error(f"{name} {error}. {example}", name) from None
    if not abs(found) <= MOST_MOL_L:
        raise place.error(f"{name} must be at most {MOST_MOL_L:g} mol/L; found {value!r}. Check value and unit.", name)
    return found


def _basis_of(meant: Meant) -> str:
    """What a mass of a total counts, in words, where it must be said."""
    column = _totals().get(INORGANIC if meant == CARBON else meant, "") if isinstance(meant, str) else ""
    column = "alkalinity_eq_l" if meant == ALKALINITY else column
    bases = quantities()[column].bases if column else ()
    return f" as {bases[0]}" if bases else ""


def _quoted(name: str) -> str:
    return name if name.replace("_", "a").replace("-", "a").isalnum() and name.isascii() else f"\"{name}\""


def _converted(name: str, meant: Meant, number: float, unit: str, own: OwnAcids) -> float:
    """Amount of a substance. [mol/L, eq/L of alkalinity]"""
    if isinstance(meant, Product):
        parsed = _parsed(unit, UNITS)
        if parsed.kind == "charge":
            return number * parsed.scale / _equivalents(meant, unit)
        return number * parsed.scale / (meant.molar_mass_g if parsed.kind == "mass" else 1.0)
    if meant == ALKALINITY:
        return in_key_unit(number, "eq/L" if unit == NORMAL else unit, "alkalinity_eq_l", "eq/L")
    if meant in own or meant in metals():
        symbol = "" if meant in own else metals()[meant].symbol
        mass = own[meant][1] if meant in own else metals()[meant].molar_mass_g
        parsed = _parsed(unit, PLAIN_UNITS, symbol)
        if parsed.kind == "charge":
            raise InputError(f"must be in one of {PLAIN_UNITS}; found {unit!r}")
        if parsed.kind == "mass" and mass is None:
            raise InputError(f"is given as mass, and no molar mass is known; found {unit!r}. Add molar_mass to "
                             f"[acids.{name}]")
        return number * parsed.scale / (mass if parsed.kind == "mass" and mass is not None else 1.0)
    return in_key_unit(number, unit, _totals()[INORGANIC if meant == CARBON else meant], "mol/L")


def _equivalents(product: Product, unit: str) -> float:
    """Equivalents of a mole, where they do not hang on the end point."""
    acids = [acid_table()[name] for name in product.adds if name in acid_table()]
    if product.name in free_acids() and len(acids[0].pk) == 1:
        return 1.0
    if any(acid.zero_level < len(acid.pk) > 1 for acid in acids):
        raise InputError(f"loses protons in steps, so that its equivalents hang on the end point; found {unit!r}. Give "
                         f"it in {PLAIN_UNITS}")
    per_mole = abs(product.adds["alkalinity"])
    if not per_mole:
        raise InputError(f"has no equivalents; found {unit!r}. Give it in {PLAIN_UNITS}")
    return per_mole


def _parsed(unit: str, units: str, basis: str = "") -> Unit:
    """A unit of mass, moles or equivalents per liter; scales lead to g/L, mol/L, eq/L. `basis` may stand behind it."""
    found = parse_unit("eq/L" if unit == NORMAL else unit, "amount") if unit else None
    kinds = ("mass", "amount", "charge")
    if found is None or found.kind not in kinds or found.basis not in ("", basis) or found.per_kg:
        raise InputError(f"must be in one of {units}; found {unit!r}" if unit else f"must have a unit, one of {units}; "
                         "found none")
    return found


# ---------------------------------------------------------------- what is taken for granted


def tell_contents(label: str, waste: Waste, contents: list[tuple[Meant, float]], own: OwnAcids, told: Told) -> None:
    """What a composition is taken to mean: that it is whole, and the forms that named totals came in."""
    if waste.curve is not None:
        if contents:
            told.assume(f"{label}: its titration decides the demand; what it holds serves ionic strength and side "
                        "effects")
        return
    told.assume(f"{label}: what it holds is taken as whole; an acid, base or metal that is not named is not counted")
    if waste.base_eq_l is None or waste.titrated:
        return
    for what, mol in contents:
        if what == CARBON and mol > 0.0:
            told.assume(f"{label}: inorganic carbon counts as carbon dioxide that was taken up; what came as carbonate "
                        "must be named, such as soda ash")
        elif isinstance(what, str) and mol > 0.0 and (what in own or what in acid_table()):
            acid = acid_named(what, [a for a, _ in own.values()])
            if 0 < len(acid.pk) > acid.zero_level:
                told.assume(f"{label}: {what} counts as {acid.species[acid.zero_level]} with neutral counter-ions; "
                            "what came as another form must be named")
