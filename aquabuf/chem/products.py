"""Treatment chemicals: what one mole of each adds to water, and what its strength counts.

The table `data/products.csv` lists them. Alkalinity has its zero level at pH 4.5 as in the engine: phosphate counts as
H2PO4-, ammonia as NH4+, hypochlorite as HOCl, fluoride as F-. Coagulants are taken to precipitate whole as hydroxide.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from difflib import get_close_matches
from functools import cache
from types import MappingProxyType
from typing import NoReturn

from aquabuf.chem.acids import acid_table
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import key, substances

__all__ = [
    "FORMS", "Product", "atoms", "find_product", "molar_mass", "own_product", "products", "strength_of",
    "with_basicity", "zero_level_charge",
]

FORMS = ("solid", "liquid", "slurry", "gas")
AVAILABLE_CHLORINE = "Cl2"  # counted by oxidizing power: one per hypochlorite, whatever the formula holds
NEUTRALIZING = "CaCO3"      # counted by the acid that is bound
NEEDS_BASICITY = "basicity"  # group of products whose effect depends on it
BASES = (NEUTRALIZING, AVAILABLE_CHLORINE, "Al2O3", "Al", "Fe", "Fe2O3", "CaO", "Ca", "MgO", "Mg", "Na2O", "K2O", "CO2",
         "SO3", "SO4", "P2O5", "PO4", "P", "N", "NH3", "F", "Cl", "SiO2")
_PIECE = re.compile(r"([A-Z][a-z]?)(\d*)|(\()|\)(\d*)")
_PART = re.compile(r"(?:^|[.·])(\d+(?:\.\d+)?)?((?:[A-Z][a-z]?\d*|[()]\d*)+)")


@dataclass(frozen=True, slots=True, kw_only=True)
class Product:
    """A chemical that is dosed. Read-only; strengths are mass fractions of the active substance.

    formula : of the active substance, which doses and strength count, with its water of crystallization.
    adds : per mole of it: "alkalinity" [eq], "carbon" [mol] and the totals of dissolved substances [mol].
    solids : solid that forms per mole, by formula. [mol/mol]
    strength : usual one; None where there is none, so that it must be asked for. strength_low, strength_high : as sold.
    density_kg_l : of the product as delivered; bulk density of a solid.
    groups : words that cautions and suggestions hang on.
    """

    name: str
    formula: str
    molar_mass_g: float  # [g/mol]
    adds: Mapping[str, float]
    solids: Mapping[str, float]
    form: str
    strength: float | None
    strength_low: float | None
    strength_high: float | None
    density_kg_l: float | None
    groups: tuple[str, ...]
    mark: str
    source: str

    @property
    def caco3_g_per_g(self) -> float:
        """Alkalinity as CaCO3 that a mass of the active substance adds; negative where it takes some. [g/g]"""
        return self.adds["alkalinity"] * 0.5 * molar_mass("CaCO3") / self.molar_mass_g


class _AskBasicity(Mapping[str, float]):
    """What a product adds while its basicity is not known: every use asks for it."""

    def __init__(self, name: str):
        self._name = name

    def _ask(self) -> NoReturn:
        raise InputError(f"{self._name!r} takes alkalinity according to its basicity, which is not given. "
                         "State the basicity of the certificate, e.g. 50 %.")

    def __getitem__(self, name: str) -> float:
        self._ask()

    def __iter__(self) -> Iterator[str]:
        self._ask()

    def __len__(self) -> int:
        self._ask()


# ---------------------------------------------------------------- formulas


@cache
def _atomic_masses() -> Mapping[str, float]:
    return {row["element"]: float(row["mass_g_mol"]) for row in read_table("atomic_masses")}


@cache
def atoms(formula: str) -> Mapping[str, float]:
    """Atoms of each element in a formula such as Al2(SO4)3.14H2O; a dot or "·" starts a part with its own count."""
    found: dict[str, float] = {}
    end = 0
    while end < len(formula) and (part := _PART.match(formula, end)):
        for element, count in _part_atoms(part[2], formula).items():
            found[element] = found.get(element, 0.0) + count * float(part[1] or 1)
        end = part.end()
    if end != len(formula) or not formula or formula[0] in ".·":
        _bad_formula(formula, f"the rest {formula[end:]!r} cannot be read")
    if not all(found.values()):
        _bad_formula(formula, f"{next(e for e, n in found.items() if not n)} has a count of 0")
    return MappingProxyType(found)


def _part_atoms(part: str, formula: str) -> Counter[str]:
    levels: list[Counter[str]] = [Counter()]
    for element, count, opens, times in (m.groups() for m in _PIECE.finditer(part)):
        if opens:
            levels.append(Counter())
        elif element:
            if element not in _atomic_masses():
                _bad_formula(formula, f"{element!r} is no element of the table atomic_masses.csv")
            levels[-1][element] += int(count or 1)
        elif len(levels) == 1:
            _bad_formula(formula, "a bracket closes that was never opened")
        else:
            for inner, number in levels.pop().items():
                levels[-1][inner] += number * int(times or 1)
    if len(levels) > 1:
        _bad_formula(formula, "a bracket stays open")
    return levels[0]


def _bad_formula(formula: str, why: str) -> NoReturn:
    raise InputError(f"{formula!r} is not a chemical formula: {why}. "
                     "Write element symbols and counts, e.g. 'Ca(OH)2' or 'Al2(SO4)3.14H2O'.")


def molar_mass(formula: str) -> float:
    """Molar mass of a formula from the table of atomic masses. [g/mol]

    >>> round(molar_mass("Al2(SO4)3.14H2O"), 2)
    594.34
    """
    return sum(count * _atomic_masses()[element] for element, count in atoms(formula).items())


def zero_level_charge(name: str) -> int:
    """Charge that a dissolved total counts with in alkalinity: of the form at the zero level if it is a weak acid. [-]

    Alkalinity added is the sum of these charges times the totals added: any other result would leave water charged.
    """
    acid, substance = acid_table().get(name), substances().get(name)
    charge = acid.charge_full - acid.zero_level if acid else substance.charge if substance else None
    if charge is None:
        raise InputError(f"{name!r} is not a dissolved total that a product can add. Use names such as 'calcium', "
                         "'sodium', 'chloride', 'sulfate', 'phosphate'.")
    return charge


# ---------------------------------------------------------------- the table


def _amounts(cell: str) -> dict[str, float]:
    return {name: float(value) for name, _, value in (pair.partition("=") for pair in cell.split(";") if pair)}


def _product_of(row: Mapping[str, str]) -> Product:
    ask = NEEDS_BASICITY in row["groups"].split(";")
    adds = _AskBasicity(row["name"]) if ask else MappingProxyType(
        {"alkalinity": float(row["alkalinity"]), "carbon": float(row["carbon"])} | _amounts(row["ions"]))
    bare = Product(
        name=row["name"], formula=row["formula"], molar_mass_g=molar_mass(row["formula"]), adds=adds,
        solids=MappingProxyType(_amounts(row["solids"])), form=row["form"], strength=None, strength_low=None,
        strength_high=None, density_kg_l=float(row["density_kg_l"]) if row["density_kg_l"] else None,
        groups=tuple(row["groups"].split(";")), mark=row["mark"], source=row["source"])
    basis = row["strength_basis"] or row["formula"]
    usual, low, high = (strength_of(bare, float(row[cell]), basis) if row[cell] else None
                        for cell in ("strength", "strength_low", "strength_high"))
    return replace(bare, strength=usual, strength_low=low, strength_high=high)


@cache
def products() -> Mapping[str, Product]:
    """The shipped products by name, in table order."""
    return MappingProxyType({row["name"]: _product_of(row) for row in read_table("products")})


@cache
def _spellings() -> tuple[Mapping[str, tuple[str, ...]], ...]:
    """Products by the plain form of their name, of their other names, of their formula; the first that knows wins."""
    rounds: tuple[dict[str, tuple[str, ...]], ...] = ({}, {}, {})
    for row in read_table("products"):
        for found, words in zip(rounds, ([row["name"]], row["also"].split(";"), [row["formula"]]), strict=True):
            for word in filter(None, words):
                found[key(word)] = (*found.get(key(word), ()), row["name"])
    by_formula = {word: names[:1] for word, names in rounds[2].items()}  # a mg of each is the same
    return rounds[0], rounds[1], by_formula


def find_product(name: str) -> Product:
    """The shipped product that `name` means: its name, another name people use, or its formula.

    Raises
    ------
    InputError
        A name that nothing has (says the nearest), or that several products have (says what each does).
    """
    for found in _spellings():
        meant = found.get(key(name), ())
        if len(meant) == 1:
            return products()[meant[0]]
        if meant:
            _ask_which(name, meant)
    known = {key(word): word for row in read_table("products") for word in (row["name"], *row["also"].split(";"))
             if word}
    near = [known[word] for word in get_close_matches(key(name), known, n=3)] or list(products())
    raise InputError(f"no product is called {name!r}; nearest: {', '.join(near)}. "
                     "Correct the name, or define a product of your own.")


def _ask_which(name: str, meant: tuple[str, ...]) -> NoReturn:
    each = "; ".join(f"{n!r} ({products()[n].formula}, {products()[n].form}, {_effect(products()[n])})" for n in meant)
    raise InputError(f"{name!r} can mean several products. Say which; each with its change of alkalinity in mg/L as "
                     f"CaCO3 per mg/L of the pure product: {each}.")


def _effect(product: Product) -> str:
    if NEEDS_BASICITY in product.groups:
        return "takes alkalinity by its basicity"
    change = product.caco3_g_per_g
    return "leaves alkalinity" if change == 0.0 else f"{'adds' if change > 0.0 else 'takes'} {abs(change):.3f}"


# ---------------------------------------------------------------- strength and basicity


def strength_of(product: Product, fraction: float, basis: str) -> float:
    """Mass fraction of the active substance of a product whose strength is stated as something else. [-]

    Parameters
    ----------
    fraction : as the certificate has it, above 0 to 1. [-]
    basis : the formula that the certificate counts ("Al2O3", "CaO", "P2O5", "Al2(SO4)3.18H2O"), the name of a product,
        "available chlorine" (the chlorine gas of the same oxidizing power), or "CaCO3" (neutralizing value).

    Raises
    ------
    InputError
        A fraction out of range or above that of the pure substance, or a basis that the substance does not hold.
    """
    if not 0.0 < fraction <= 1.5:  # the neutralizing value of a pure lime is above 1
        raise InputError(f"the strength of {product.name!r} must be a fraction above 0; found {fraction:g}. "
                         "Give 92 % as 0.92.")
    formula = _basis_formula(basis)
    share = _basis_per_mole(product, formula, basis) * molar_mass(formula) / product.molar_mass_g
    strength = fraction / share
    if strength > 1.0 + 1e-9:
        raise InputError(f"{100 * fraction:g} % as {basis} is more than pure {product.formula} holds "
                         f"({100 * share:.4g} %) in {product.name!r}. Check the figure and its basis.")
    return min(strength, 1.0)


def _basis_formula(basis: str) -> str:
    plain = key(basis)
    if plain in ("available_chlorine", "chlorine"):
        return AVAILABLE_CHLORINE
    known = {key(known): known for known in BASES}
    if plain in known:
        return known[plain]
    named = (row["formula"] for row in read_table("products") if key(row["name"]) == plain)
    return next(named, basis)


def _basis_per_mole(product: Product, formula: str, basis: str) -> float:
    """Moles of the basis in one mole of the active substance."""
    if formula == product.formula:
        return 1.0
    if formula == AVAILABLE_CHLORINE:
        shares = {product.adds.get("hypochlorite", 0.0)}
    elif formula == NEUTRALIZING:
        shares = {0.5 * max(product.adds["alkalinity"], 0.0)}
    else:
        own = atoms(product.formula)
        shares = {own.get(element, 0.0) / count for element, count in atoms(formula).items() if element not in "OH"}
    if len(shares) != 1 or 0.0 in shares:
        raise InputError(f"the strength of {product.name!r} ({product.formula}) cannot be counted as {basis!r}: "
                         f"it holds no fixed share of it. State it as {product.formula} or as one of its own oxides or "
                         "elements.")
    return shares.pop()


def with_basicity(product: Product, basicity: float) -> Product:
    """A polyaluminum chloride whose basicity is known: the share of chloride that hydroxide took the place of. [-]

    One mole of aluminum takes 3 (1 - B) eq of alkalinity and leaves as much chloride: stoichiometry of
    Al(OH)3B Cl3(1-B).
    """
    if NEEDS_BASICITY not in product.groups:
        raise InputError(f"{product.name!r} has no basicity; found {basicity:g}. Leave it out: only products such as "
                         f"{', '.join(repr(n) for n, p in products().items() if NEEDS_BASICITY in p.groups)} have one.")
    if not 0.0 <= basicity < 1.0:
        raise InputError(f"the basicity of {product.name!r} must be 0 to below 1; found {basicity:g}. "
                         "Give 50 % as 0.5.")
    left = 3.0 * (1.0 - basicity)
    return replace(product, name=f"{product.name}, basicity {100 * basicity:g} %",
                   adds=MappingProxyType({"alkalinity": -left, "carbon": 0.0, "chloride": left}),
                   groups=tuple(group for group in product.groups if group != NEEDS_BASICITY))


# ---------------------------------------------------------------- products of the user's own


def own_product(
    name: str, *, formula: str = "", molar_mass_g: float | None = None, alkalinity: float | None = None,
    carbon: float = 0.0, ions: Mapping[str, float] = MappingProxyType({}),
    solids: Mapping[str, float] = MappingProxyType({}), form: str = "liquid", strength: float | None = None,
    density_kg_l: float | None = None, groups: tuple[str, ...] = (), source: str = "given by the user",
) -> Product:
    """A product that the table does not have, per mole of its active substance.

    formula or molar_mass_g : one of them. ions : totals added [mol], names as in `zero_level_charge`.
    alkalinity : may be left out where ions are given; must agree with their charge. [eq]

    Raises
    ------
    InputError
        No mass, no effect, an unknown ion, form or formula, or alkalinity that would leave the water charged.
    """
    if not formula and molar_mass_g is None:
        raise InputError(f"product {name!r} needs the formula or the molar mass of its active substance; neither is "
                         "given. Add formula, e.g. 'Ca(OH)2'.")
    mass = molar_mass(formula) if molar_mass_g is None else molar_mass_g
    for what, value, high in (("molar mass", mass, 1e6), ("strength", strength, 1.0), ("density", density_kg_l, 25.0)):
        if value is not None and not 0.0 < value <= high:
            raise InputError(f"the {what} of product {name!r} must be above 0 and at most {high:g}; found {value:g}. "
                             "Give g/mol, a mass fraction, kg/L.")
    if form not in FORMS:
        raise InputError(f"product {name!r} must be one of {', '.join(FORMS)}; found {form!r}. Correct its form.")
    adds = {"alkalinity": _own_alkalinity(name, alkalinity, carbon, ions), "carbon": carbon, **ions}
    for solid in solids:
        atoms(solid)
    return Product(
        name=name, formula=formula or name, molar_mass_g=mass, adds=MappingProxyType(adds),
        solids=MappingProxyType(dict(solids)), form=form, strength=strength, strength_low=None, strength_high=None,
        density_kg_l=density_kg_l, groups=groups, mark="given", source=source)


def _own_alkalinity(name: str, alkalinity: float | None, carbon: float, ions: Mapping[str, float]) -> float:
    charge = sum(zero_level_charge(ion) * amount for ion, amount in ions.items())
    if alkalinity is None and not ions and not carbon:
        raise InputError(f"product {name!r} must say what it adds; neither alkalinity nor ions nor carbon is given. "
                         "Add alkalinity in eq per mole, or its ions.")
    if alkalinity is None:
        return charge
    if ions and abs(alkalinity - charge) > 1e-6 * max(1.0, abs(charge)):
        raise InputError(f"product {name!r} must add as much alkalinity as charge by its ions, {charge:g} eq/mol; "
                         f"found {alkalinity:g}. Add the missing ions, or leave alkalinity out.")
    return alkalinity
