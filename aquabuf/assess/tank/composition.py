"""A waste as it is known: what is dissolved in it, or a measured titration curve, or both.

The strength of a waste is its `base_eq_l`: alkalinity by the house's definition, negative for an acid waste. It follows
from the strong acids and bases that are named, from pH and composition together, or from a titration; never from pH
alone, because buffers that pH does not show may ask for many times as much reagent.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from types import MappingProxyType

import numpy as np

from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.chem.acids import Acid, acid_named, acid_table
from aquabuf.chem.metals import free_at, metals
from aquabuf.chem.products import Product
from aquabuf.engine.balance import fractions
from aquabuf.engine.readout import PH_LEAST, PH_MOST
from aquabuf.errors import InputError
from aquabuf.units import substances

__all__ = ["ALKALINITY", "CARBON", "PH_FOR_STRENGTH", "Waste", "check_known", "dissolved", "ionic_strength_of"]

ALKALINITY = "alkalinity"
CARBON = "carbon"
PH_FOR_STRENGTH = 7.0      # ionic strength is that of the neutralized waste


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Waste:
    """One waste. Concentrations in mol/L of the undiluted waste.

    base_eq_l : strong base less strong acid; None where pH or a curve tells it. [eq/L]
    ph : measured, if it was. -1 to 15.
    acids : totals of weak acids. carbon_mol_l : total inorganic carbon. metals : totals by name of the metals table.
    ions : other dissolved totals, for side effects only. solids_g_l : suspended solids that come with it.
    titrated : whether the base is an alkalinity that was titrated, so that with pH it tells the carbon.
    curve : measured titration; it decides the demand where there is one.
    """

    name: str
    t_c: float = 25.0
    base_eq_l: float | None = None
    ph: float | None = None
    acids: Mapping[Acid, float] = field(default_factory=dict)
    carbon_mol_l: float = 0.0
    metals: Mapping[str, float] = field(default_factory=dict)
    ions: Mapping[str, float] = field(default_factory=dict)
    solids_g_l: float = 0.0
    titrated: bool = False
    curve: MeasuredCurve | None = None

    def __post_init__(self) -> None:
        if self.ph is not None and not PH_LEAST <= self.ph <= PH_MOST:
            raise InputError(f"the pH of waste {self.name!r} must be {PH_LEAST:g} to {PH_MOST:g}; found {self.ph:g}. "
                             "Correct it, or leave it out where strong acids and bases are named.")
        for what, mol in (*((a.name, m) for a, m in self.acids.items()), *self.metals.items(), *self.ions.items(),
                          (CARBON, self.carbon_mol_l)):
            if not 0.0 <= mol < np.inf:
                raise InputError(f"the amount of {what} in waste {self.name!r} must be zero or more; found {mol:g} "
                                 "mol/L. Correct it.")
        if self.base_eq_l is not None and not np.isfinite(self.base_eq_l):
            raise InputError(f"the base of waste {self.name!r} must be a number; found {self.base_eq_l:g} eq/L. Leave "
                             "it out where it is not known.")

    @property
    def has_composition(self) -> bool:
        """Whether anything but pH says what holds protons in it."""
        amounts = (*self.acids.values(), *self.metals.values(), self.carbon_mol_l)
        return self.base_eq_l is not None or any(mol > 0.0 for mol in amounts)

    def total(self, name: str) -> float:
        """Dissolved total of a weak acid, metal or ion by name. [mol/L]"""
        acids = {acid.name: mol for acid, mol in self.acids.items()}
        if name == CARBON:
            return self.carbon_mol_l
        return acids.get(name, 0.0) + self.metals.get(name, 0.0) + self.ions.get(name, 0.0)


def dissolved(waste: Waste, contents: Iterable[tuple[str | Product, float]], own: Sequence[Acid] = ()) -> Waste:
    """The waste with these substances dissolved in it as well, by name or as a product. [mol/L]

    Weak acids, metals and ions go by the name of their total; a product brings what its row says, strong acids and
    bases among it, so that the base of the waste is then known without pH. Where only salts and free weak acids are
    named, a measured pH tells more than their names, and decides. A product that forms a hydroxide brings its metal
    dissolved. An amount of zero tells nothing.

    Raises InputError for a name that nothing has, with the nearest, for an amount below zero, and for a titrated
    alkalinity beside strong acids or bases, which it counts already.
    """
    acids, ions, found = dict(waste.acids), dict(waste.ions), dict(waste.metals)
    carbon, base, known, titrated, strong = waste.carbon_mol_l, 0.0, False, waste.titrated, ""
    for what, mol in contents:
        name = what if isinstance(what, str) else what.name
        if not (mol >= 0.0 or what == ALKALINITY):
            raise InputError(f"the amount of {name} in waste {waste.name!r} must be zero or more; found {mol:g} mol/L. "
                             "Correct it.")
        parts = {what: 1.0} if isinstance(what, str) else _parts(what)
        titrated |= what == ALKALINITY
        if mol == 0.0 and what != ALKALINITY:
            continue
        base_part = parts.pop(ALKALINITY, None)
        if base_part is not None:
            base += base_part * mol
            known |= waste.ph is None or not _is_mild(base_part, parts)
            strong = strong or ("" if isinstance(what, str) or base_part == 0.0 else name)
        for name, per_mole in parts.items():
            if name == CARBON:
                carbon += per_mole * mol
            elif name in metals():
                found[name] = found.get(name, 0.0) + per_mole * mol
            elif name in substances() and not _is_acid(name, own):
                ions[name] = ions.get(name, 0.0) + per_mole * mol
            else:
                acid = acid_named(name, own)
                acids[acid] = acids.get(acid, 0.0) + per_mole * mol
    if titrated and strong:
        raise InputError(f"the alkalinity of waste {waste.name!r} counts its acids and bases already; found alkalinity "
                         f"and {strong}. Remove one of them.")
    if known or waste.base_eq_l is not None:
        base += waste.base_eq_l or 0.0
    return replace(waste, acids=MappingProxyType(acids), ions=MappingProxyType(ions), metals=MappingProxyType(found),
                   carbon_mol_l=carbon, base_eq_l=base if known or waste.base_eq_l is not None else None,
                   titrated=titrated)


def _parts(product: Product) -> dict[str, float]:
    """What a mole of a product dissolves to: its hydroxide as the metal, and the base that this takes back."""
    parts = {name: n for name, n in product.adds.items() if n != 0.0 or name == ALKALINITY}
    by_hydroxide = {metal.hydroxide: metal for metal in metals().values()}
    for solid, n in product.solids.items():
        metal = by_hydroxide.get(solid)
        if metal is not None:
            parts[metal.name] = parts.get(metal.name, 0.0) + n
            parts[ALKALINITY] += metal.charge * n
    return parts


def _is_mild(base_part: float, parts: Mapping[str, float]) -> bool:
    """Whether a mole brings no strong acid or base: a salt, or a weak acid as such."""
    weak = [(acid_table()[name], n) for name, n in parts.items() if name in acid_table()]
    rest = any(name in substances() for name in parts if name not in acid_table())
    return base_part == 0.0 or (not rest and base_part == -sum(a.zero_level * n for a, n in weak))


def _is_acid(name: str, own: Sequence[Acid]) -> bool:
    try:
        acid_named(name, own)
    except InputError:
        return False
    return True


def ionic_strength_of(waste: Waste) -> float:
    """Ionic strength of the neutralized waste, from what is known to be dissolved in it. [mol/L]

    Half the sum of z^2 c over its weak acids and what metals stay dissolved at pH 7, its ions, bicarbonate, and as many
    single charges as it takes to balance them; at least that of the salt that its strong acid or base makes. Follows
    from the definition.
    """
    h = np.array([10.0**-PH_FOR_STRENGTH])
    charges = [(substances()[name].charge or 0, mol) for name, mol in waste.ions.items()]
    charges.append((-1, waste.carbon_mol_l))
    charges += [(metals()[name].charge, min(mol, float(free_at(metals()[name], PH_FOR_STRENGTH))))
                for name, mol in waste.metals.items()]
    for acid, mol in waste.acids.items():
        alpha = fractions([np.array([10.0**-pk]) for pk in acid.pk], 1.0 / h)
        charges += [(acid.charge_full - lost, mol * float(share[0])) for lost, share in enumerate(alpha)]
    squares, charge = sum(z * z * mol for z, mol in charges), sum(z * mol for z, mol in charges)
    return max(0.5 * (squares + abs(charge)), abs(waste.base_eq_l or 0.0))


def check_known(waste: Waste) -> None:
    """InputError where nothing, or pH alone, says how much base or acid a waste asks for."""
    if waste.curve is not None or waste.base_eq_l is not None or (waste.has_composition and waste.ph is not None):
        return
    known = "its composition without pH" if waste.has_composition else "its pH" if waste.ph is not None else "nothing"
    ions = " and ions that hold no protons" if waste.ions and not waste.has_composition else ""
    raise InputError(
        f"waste {waste.name!r} must be known by a titration, by its strong acids and bases, or by pH and composition "
        f"together; found {known}{ions} alone. pH does not show what buffers hold: an acetic waste asks for some 75 "
        "times what its pH says. Titrate a liter of it with the reagent past both ends of the window, or have its "
        "acids, bases and metals analyzed; nothing is sized until then.")
