"""The schemas: every quantity a table may hold, from `data/columns.csv` (readings) and `data/titration_columns.csv`.

Reading, the list of columns, the starter files, the tests and the documentation all derive from them.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import cache

from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import CONCENTRATIONS, WITH_BASIS, Unit, accepted_units, key, parse_unit, substances

__all__ = [
    "Index",
    "Quantity",
    "Schema",
    "acid_quantity",
    "example_header",
    "find_quantity",
    "name_index",
    "quantities",
    "schema_order",
    "titration_quantities",
    "unit_labels",
]


@dataclass(frozen=True, slots=True, kw_only=True)
class Quantity:
    """One quantity of the schema; limits and default uncertainty are in the house unit."""

    name: str  # canonical column name, unit included
    kind: str  # text, date, choice or number
    house_unit: str = ""
    dimension: str = ""
    has_default_unit: bool = False  # a header without a unit is harmless
    substance: str = ""
    molar_mass_g: float | None = None
    charge: int | None = None
    bases: tuple[str, ...] = ()  # formulas that may follow "as"
    bare_basis: str = ""  # what mg/L alone means; "" = must be said
    below_limit: bool = False  # "<0.02" can be used
    choices: tuple[tuple[str, str], ...] = ()  # (spelling, word)
    low: float = float("-inf")
    high: float = float("inf")
    soft_low: float = float("-inf")
    soft_high: float = float("inf")
    default_u: float = 0.0
    default_u_rel: float = 0.0
    u_source: str = ""
    default_u_per_kg: float | None = None  # takes the place of both where the file is in a unit per kilogram
    u_per_kg_source: str = ""
    needed_by: str = ""
    meaning: str = ""
    aliases: tuple[tuple[str, str], ...] = ()  # (plain header, basis its words state)

    @property
    def is_number(self) -> bool:
        """Whether the column holds numbers with a unit."""
        return self.kind == "number"

    @property
    def house(self) -> Unit:
        """The house unit as a `Unit`."""
        unit = parse_unit(self.house_unit, self.dimension)
        if unit is None:
            raise InputError(f"{self.name}: the house unit {self.house_unit!r} is not in the unit table")
        return unit

    @property
    def base(self) -> str:
        """The name without its unit, e.g. "calcium"."""
        suffix = self.house.suffix if self.is_number else ""
        return self.name.removesuffix(f"_{suffix}") if suffix else self.name

    @property
    def u_name(self) -> str:
        """Name of the column with the standard uncertainty, e.g. "calcium_u_mol_l"."""
        return f"{self.base}_u{self.name.removeprefix(self.base)}"


Schema = Mapping[str, Quantity]  # by canonical name, in table order
Index = Mapping[str, tuple[tuple[Quantity, str], ...]]  # by plain header: each quantity meant, basis its words state


def _number(text: str, missing: float) -> float:
    return float(text) if text else missing


def _pairs(text: str) -> tuple[tuple[str, str], ...]:
    """Aliases "a;b=N" as ((plain a, ""), (plain b, "N"))."""
    items = (part.partition("=") for part in text.split(";") if part)
    return tuple((key(name), basis) for name, _, basis in items)


def _spellings(text: str) -> tuple[tuple[str, str], ...]:
    """Choices "lake;stream=river|creek" as (plain spelling, word)."""
    found = []
    for word, _, others in (part.partition("=") for part in text.split(";") if part):
        found += [(key(spelling), word) for spelling in (word, *filter(None, others.split("|")))]
    return tuple(found)


def _quantity(row: dict[str, str]) -> Quantity:
    """One schema record from its table row."""
    of = substances().get(row["substance"])
    return Quantity(
        name=row["name"],
        kind=row["kind"],
        house_unit=row["house_unit"],
        dimension=row["dimension"],
        has_default_unit=bool(row["default_unit"]),
        substance=row["substance"],
        molar_mass_g=of.molar_mass_g if of else None,
        charge=of.charge if of else None,
        bases=tuple(filter(None, row["bases"].split(";"))),
        bare_basis=row["bare_basis"],
        below_limit=row["below_limit"] == "yes",
        choices=_spellings(row["choices"]),
        low=_number(row["low"], float("-inf")),
        high=_number(row["high"], float("inf")),
        soft_low=_number(row["soft_low"], float("-inf")),
        soft_high=_number(row["soft_high"], float("inf")),
        default_u=_number(row["default_u"], 0.0),
        default_u_rel=_number(row["default_u_rel"], 0.0),
        u_source=row["u_source"],
        default_u_per_kg=float(row["default_u_per_kg"]) if row["default_u_per_kg"] else None,
        u_per_kg_source=row["u_per_kg_source"],
        needed_by=row["needed_by"],
        meaning=row["meaning"],
        aliases=_pairs(row["aliases"]),
    )


@cache
def quantities() -> dict[str, Quantity]:
    """The schema of readings by canonical name, in table order (treat as read-only)."""
    return {row["name"]: _quantity(row) for row in read_table("columns")}


@cache
def titration_quantities(table: str = "") -> dict[str, Quantity]:
    """The schema of titrations by canonical name, in table order (treat as read-only).

    `table` leaves only what belongs to single points ("points") or to the whole sample ("samples"); the name of the
    sample is in both.
    """
    found: dict[str, Quantity] = {}
    for row in read_table("titration_columns"):
        if table in ("", row["table"]) or row["table"] == "both":
            found |= _titration_records(row)
    return found


def _titration_records(row: dict[str, str]) -> dict[str, Quantity]:
    """Records of one row: its own, that of a column of readings, or those of all weak acids of the readings."""
    if row["kind"] != "shared":
        return {row["name"]: _quantity(row)}
    names = [f"{acid['name']}_mol_l" for acid in read_table("acids")] if row["name"] == "acids" else [row["name"]]
    return {name: quantities()[name] for name in names}


def acid_quantity(name: str, molar_mass_g: float | None = None, charge: int | None = None) -> Quantity:
    """Schema record of an acid that the user defines in a map file; its column is `NAME_mol_l`."""
    return Quantity(
        name=f"{key(name)}_mol_l",
        kind="number",
        house_unit="mol/L",
        dimension="amount",
        molar_mass_g=molar_mass_g,
        charge=charge,
        below_limit=True,
        low=0.0,
        high=10.0,
        default_u=1e-6,
        default_u_rel=0.05,
        u_source="common practice, no source",
        needed_by="acid-base (an acid of your own)",
        meaning=f"{name}, all forms (defined in the map file)",
    )


@cache
def _shipped_index() -> Index:
    return index_of(quantities().values())


def _clash(name: str, one: Quantity, other: Quantity) -> InputError:
    return InputError(f"the name {name!r} stands for both {one.name} and {other.name}; rename one")


def _told_apart(one: Quantity, other: Quantity) -> bool:
    """Whether the unit in a header says which of the two is meant."""
    groups = {"" if q.dimension in CONCENTRATIONS else q.dimension for q in (one, other)}
    return one.is_number and other.is_number and len(groups) == 2


def index_of(records: Iterable[Quantity]) -> Index:
    """Plain header name (no unit) -> the quantities it may mean, each with the basis that the words state.

    One name may stand for several quantities where the unit tells them apart ("titrant" in mL, g or eq/L).
    """
    found: dict[str, tuple[tuple[Quantity, str], ...]] = {}
    for record in records:
        for name, basis in dict(((key(record.base), ""), *record.aliases)).items():
            others = found.get(name, ())
            for other, _ in others:
                if not _told_apart(other, record):
                    raise _clash(name, other, record)
            found[name] = (*others, (record, basis))
    return found


def name_index(extra: Iterable[Quantity] = (), schema: Schema | None = None) -> Index:
    """Names of a schema (that of readings if none is given), with the records of user-defined acids added."""
    shipped = _shipped_index() if schema is None else index_of(schema.values())
    own = index_of(extra)
    for name in own:
        if name in shipped:
            raise _clash(name, shipped[name][0][0], own[name][0][0])
    return {**shipped, **own} if own else shipped


def schema_order(names: Iterable[str], schema: Schema | None = None) -> list[str]:
    """Canonical names in the order of the schema, each uncertainty behind its quantity; others stay last."""
    found = dict.fromkeys(names)
    records = (quantities() if schema is None else schema).values()
    known = [name for q in records for name in ((q.name, q.u_name) if q.is_number else (q.name,))]
    return [name for name in dict.fromkeys((*known, *found)) if name in found]


def find_quantity(name: str) -> Quantity:
    """The schema record with this canonical name; InputError when there is none."""
    try:
        return quantities()[name]
    except KeyError:
        raise InputError(f"no column is named {name!r}. Use a canonical name such as calcium_mol_l.") from None


def usable_units(quantity: Quantity) -> list[Unit]:
    """Units that a column of this quantity may have, mass units once per basis."""
    if not quantity.is_number:
        return []
    units = accepted_units(quantity.dimension, quantity.bases)
    return [unit for unit in units if not why_not(quantity, unit)]


def why_not(quantity: Quantity, unit: Unit) -> str:
    """Reason why `quantity` cannot be given in `unit`, "" when it can (a mass without basis is judged elsewhere)."""
    if quantity.dimension not in WITH_BASIS or unit == quantity.house:
        return ""
    if quantity.dimension == "load" and unit.kind == "mass" and not quantity.bases:
        return "it is a sum of several ions, so that a mass does not tell its charge"
    degree = unit.basis and unit.label == unit.unit
    if degree and "CaCO3" not in quantity.bases:
        return "degrees of hardness are for hardness and alkalinity"
    if unit.basis and not degree and unit.basis not in quantity.bases:
        return f"it is not given as {unit.basis}"
    fixed = quantity.dimension in ("alkalinity", "hardness", "load") or quantity.charge
    if unit.kind == "charge" and (not fixed or quantity.dimension == "mass"):
        return "its charge is zero or depends on pH, so equivalents are not defined"
    if unit.kind == "amount" and quantity.dimension == "mass" and quantity.molar_mass_g is None:
        return "it is a mass with no one molar mass"
    weighable = quantity.bases or quantity.molar_mass_g
    if unit.kind == "mass" and quantity.dimension == "amount" and not weighable:
        return "it has no molar mass; give molar_mass_g in the map file"
    return ""


def label_for(quantity: Quantity, unit: Unit) -> str:
    """The unit as it is best written for this quantity, without the basis where it goes without saying."""
    bare = unit.basis and unit.basis == quantity.bare_basis and unit.label != unit.unit
    return unit.unit if bare else unit.label


def unit_labels(quantity: Quantity, *, rare: bool = False) -> list[str]:
    """Accepted units in words, in table order; `rare` adds those that short lists leave out."""
    units = usable_units(quantity)
    short = [unit for unit in units if rare or not unit.rare] or units
    return [label_for(quantity, unit) for unit in short]


def example_header(quantity: Quantity) -> str:
    """A header as most people would write it: the first mass unit where there is one, else the house unit."""
    common = next((u for u in usable_units(quantity) if u.suffix == "mg_l"), None)
    if common is None:
        return quantity.name
    stated = "" if common.basis in ("", quantity.bare_basis) else f"_{key(common.basis)}"
    return f"{quantity.base}_{common.suffix}{stated}"
