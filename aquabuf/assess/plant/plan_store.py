"""The store of a plan: products with the strength of their certificate, and how each is fed and kept."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from aquabuf.assess.plant.feed import Curve, Feeder, MadeUp, Pump, measured_curve
from aquabuf.assess.plant.plan import FeedSpec
from aquabuf.assess.plant.plan_keys import Amount, Checked, check_keys
from aquabuf.assess.plant.plan_place import Place, shown_value
from aquabuf.assess.plant.store import Stocked
from aquabuf.chem.products import NEEDS_BASICITY, Product, find_product, own_product, strength_of, with_basicity
from aquabuf.chem.strength import check_certificate, density_from_strength, strength_from_density
from aquabuf.readings.entries import is_number
from aquabuf.tables import read_table

__all__ = ["Told", "read_product"]

SECTION, OWN = "products", "own"
OF_OWN = ("formula", "molar_mass", "adds", "solids", "form", "groups")  # keys of the user's own product
KEPT = ("day_tank", "store", "stock", "delivery", "shipping")
MOST_PER_MOLE = 1000.0
SAME_STRENGTH = 0.005  # within which a density of the table belongs to a strength


class Told:
    """What reading a plan, or another file of keys, brings to say: assumptions and notes, each once."""

    def __init__(self, file: str = "plan") -> None:
        self.file = file
        self.assumptions: list[str] = []
        self.notes: list[str] = []

    def assume(self, words: str) -> None:
        """Something was taken that the plan does not say."""
        if words not in self.assumptions:
            self.assumptions.append(words)

    def defaults(self, label: str, checked: Checked, skip: tuple[str, ...] = ()) -> None:
        """The defaults of a table."""
        for key in checked.defaults:
            if key.name not in skip:
                self.assume(f"{label}: {key.name} = {key.default}, as the {self.file} does not say")


def read_product(place: Place, name: str, table: Mapping[str, object], told: Told) -> tuple[Stocked, FeedSpec]:
    """One product of the store, and its feed. Raises InputError naming line, key and remedy."""
    checked = check_keys(place, table, SECTION)
    own = checked["is"].lower() == OWN
    told.defaults(place.label, checked, skip=("supply",) if own else ("supply", "form"))
    product, basis = _product(place, name, checked, own, told)
    strength, how = _strength(place, checked, product, basis, told)
    density = _density(place, checked, product, strength, how, told)
    _compare(place, checked, product, strength, told)
    stocked = Stocked(name=name, product=product, strength=strength, strength_from=how, density_kg_l=density,
                      price_per_kg=checked.get("price"))
    return stocked, _feed(place, name, checked, density, told)


def _product(place: Place, name: str, checked: Checked, own: bool, told: Told) -> tuple[Product, str]:
    """The product and what its strength counts where the plan does not say."""
    if own:
        product = _own(place, name, checked)
        return product, product.formula
    given = [key for key in OF_OWN if key in checked.values and key != "form"]
    if given:
        raise place.error(f"{given[0]} belongs to a product of your own; found is = {checked['is']!r}. Write is = "
                          f"\"own\", or remove it.", given[0])
    product = place.tried("is", lambda: find_product(checked["is"]))
    basis = next(row["strength_basis"] for row in read_table("products") if row["name"] == product.name)
    needs, basicity = NEEDS_BASICITY in product.groups, checked.get("basicity")
    if needs and basicity is None:
        raise place.error(f"basicity is needed for {product.name}; it is missing. Take it from the certificate, for "
                          "example basicity = \"70 %\".")
    if basicity is not None:
        plain = product
        product = place.tried("basicity", lambda: with_basicity(plain, basicity))
    return product, basis or product.formula


def _own(place: Place, name: str, checked: Checked) -> Product:
    adds = _numbers(place, "adds", checked.get("adds", {}))
    solids = _numbers(place, "solids", checked.get("solids", {}))
    ions = {k: v for k, v in adds.items() if k not in ("alkalinity", "carbon")}
    return place.tried("is", lambda: own_product(
        name, formula=checked.get("formula", ""), molar_mass_g=checked.get("molar_mass"),
        alkalinity=adds.get("alkalinity"), carbon=adds.get("carbon", 0.0), ions=ions, solids=solids,
        form=checked["form"], groups=checked.get("groups", ())))


def _numbers(place: Place, key: str, table: Mapping[str, Any]) -> dict[str, float]:
    for name, value in table.items():
        if not is_number(value) or abs(value) > MOST_PER_MOLE:
            raise place.inner(key, label=f"{place.label} {key}").error(
                f"{name} must be a number per mole, up to {MOST_PER_MOLE:g}; found {shown_value(value)}. Write "
                "it without quotes.", name)
    return {name: float(value) for name, value in table.items()}


def _strength(place: Place, checked: Checked, product: Product, basis: str, told: Told) -> tuple[float, str]:
    """Mass fraction of the active substance, and what it rests on."""
    stated, said = checked.get("strength"), checked.get("strength_as")
    if stated is not None:
        if said is None and basis != product.formula:
            told.assume(f"{place.label}: its strength counts {basis}, as is usual for {product.name}")
        strength = _stated(place, product, stated, said or basis)
        low, high = product.strength_low or 0.0, product.strength_high or 1.0
        if not low - SAME_STRENGTH <= strength <= high + SAME_STRENGTH:
            told.notes.append(f"{place.label}: a strength of {100 * strength:.3g} % {product.formula} is outside the "
                              f"{100 * low:.3g} to {100 * high:.3g} % that {product.name} is sold with; check the "
                              "certificate and what its figure counts")
        return strength, "certificate"
    if said is not None:
        raise place.error("strength_as must go with strength; found none. Add strength or remove strength_as.",
                          "strength_as")
    density = checked.get("density")
    by_density = np.nan if density is None else strength_from_density(product, density)
    if np.isfinite(by_density):
        told.assume(f"{place.label}: strength {100 * by_density:.4g} % {product.formula} by its density of "
                    f"{density:g} kg/L, as no certificate strength is given")
        return by_density, "density"
    if product.strength is None:
        raise place.error(f"give the strength of {place.path[-1]} ({product.name}) from its certificate: none is usual."
                          " Write for example strength = \"92 %\".")
    told.assume(f"{place.label}: strength {100 * product.strength:.4g} % {product.formula}, the usual one of "
                f"{product.name} ({product.mark}: {product.source}), as no certificate strength is given")
    return product.strength, "usual strength of the table"


def _stated(place: Place, product: Product, stated: float, basis: str) -> float:
    """Mass fraction of the active substance by a strength as the certificate has it."""
    if basis != product.name:  # which stands in for the formula where a product of the user's own has none
        return place.tried("strength", lambda: strength_of(product, stated, basis))
    if stated > 1.0:
        raise place.error(f"strength must be at most 100 %; found {100 * stated:g} %. Correct it.", "strength")
    return stated


def _density(place: Place, checked: Checked, product: Product, strength: float, how: str, told: Told) -> float | None:
    """Density of the product as delivered; None where neither plan nor tables tell it. [kg/L]"""
    if checked.get("density") is not None:
        return checked["density"]
    belongs = density_from_strength(product, strength) if product.form == "liquid" else np.nan
    near = product.strength is None or abs(product.strength - strength) <= SAME_STRENGTH or product.form == "solid"
    if np.isfinite(belongs) and how == "certificate":
        told.assume(f"{place.label}: density {belongs:.3f} kg/L, as belongs to its strength")
        return belongs
    if product.density_kg_l is None or not near:
        return None
    told.assume(f"{place.label}: density {product.density_kg_l:g} kg/L, that of the products table")
    return product.density_kg_l


def _compare(place: Place, checked: Checked, product: Product, strength: float, told: Told) -> None:
    """A note where stated strength and density disagree."""
    density = checked.get("density")
    if checked.get("strength") is not None and density is not None:
        wrong = check_certificate(product, strength, density, checked.get("density_at"))
        if wrong:
            told.notes.append(f"{place.label}: {wrong}")


# ---------------------------------------------------------------- feed


def _feed(place: Place, name: str, checked: Checked, density: float | None, told: Told) -> FeedSpec:
    """Machine, mixture, tanks and deliveries of a product."""
    if "pump" in checked.values and "feeder" in checked.values:
        raise place.error("a product must have one of pump and feeder; found both. Remove one.", "feeder")
    if any(key in checked.values for key in KEPT[1:]):
        told.defaults(place.label, Checked({}, tuple(k for k in checked.defaults if k.name == "supply")))
    kg = {key: _mass(place, key, checked.get(key), density) for key in ("store", "stock", "delivery")}
    return FeedSpec(
        pump=_machine(place, name, checked, "pump", told), feeder=_machine(place, name, checked, "feeder", told),
        made_up=_mixture(place, checked), day_tank_l=checked.get("day_tank"), store_kg=kg["store"],
        stock_kg=kg["stock"], delivery_kg=kg["delivery"], shipping_d=checked.get("shipping"),
        supply=checked["supply"])


def _mixture(place: Place, checked: Checked) -> MadeUp | None:
    fraction, density = checked.get("slurry"), checked.get("slurry_density")
    if (fraction is None) != (density is None):
        missing, there = ("slurry_density", "slurry") if density is None else ("slurry", "slurry_density")
        raise place.error(f"slurry and slurry_density must come together; found {there} alone. Add {missing}: weigh a "
                          "liter of the mixture, or take it from the recipe.", there)
    if fraction is None or density is None:
        return None
    return place.tried("slurry", lambda: MadeUp(fraction=fraction, density_kg_l=density))


def _mass(place: Place, key: str, amount: Amount | None, density: float | None) -> float | None:
    """An amount given as mass or volume. [kg]"""
    if amount is None or amount.dimension == "weight":
        return None if amount is None else amount.value
    if density is None:
        raise place.error(f"{key} is given as a volume, so that the density of the product is needed; it is missing. "
                          "Add density, or give the mass.", key)
    return 1e3 * density * amount.value


def _machine(place: Place, name: str, checked: Checked, kind: str, told: Told) -> Any:
    """A pump or feeder, None where the plan has none."""
    table = checked.get(kind)
    if table is None:
        return None
    inner = place.inner(kind, label=f"{place.label} {kind}")
    found = check_keys(inner, table, f"{SECTION}.{kind}")
    unused = (found.get("sets", ""), *(() if "curve" in found.values else ("curve_unit",)))
    told.defaults(inner.label, found, skip=unused)
    title = found.get("name", name)
    curve = _curve(inner, f"{kind} {title!r}", found)
    low, high = found.get("range", (0.0, 1.0))
    common: dict[str, Any] = {"name": title, "range_pct": (100.0 * low, 100.0 * high), "curve": curve,
                              "turndown": found.get("turndown")}
    if kind == "feeder":
        return inner.tried("", lambda: Feeder(largest_kg_h=found["largest"], **common))
    return inner.tried("", lambda: Pump(largest_l_h=found["largest"], stroke=found["stroke"], speed=found["speed"],
                                          sets=found["sets"], **common))


def _curve(place: Place, owner: str, found: Checked) -> Curve | None:
    points = found.get("curve")
    if points is None:
        return None
    return place.tried("curve", lambda: measured_curve(owner, points, found["curve_unit"]))
