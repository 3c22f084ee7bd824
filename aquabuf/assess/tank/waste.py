"""A waste as it is known: what is dissolved in it, or a measured titration curve, or both; and its chemistry as tables.

The strength of a waste is its `base_eq_l`: alkalinity by the house's definition, negative for an acid waste. It follows
from the strong acids and bases that are named, from pH and composition together, or from a titration; never from pH
alone, because buffers that pH does not show may ask for many times as much reagent.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.curve import MeasuredCurve, held_table
from aquabuf.chem.acids import Acid, acid_named
from aquabuf.chem.metals import metals
from aquabuf.chem.products import Product
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.conditions import Conditions, conditions
from aquabuf.engine.hydroxides import metal_table
from aquabuf.engine.readout import GRID_PH, MetalTable, Readout
from aquabuf.errors import InputError
from aquabuf.units import substances

__all__ = ["CARBON", "Chemistry", "Waste", "chemistry", "dissolved", "ionic_strength_of"]

Array = NDArray[np.float64]

ALKALINITY = "alkalinity"
CARBON = "carbon"
HIGHEST_STRENGTH = 0.5     # the Davies equation is not carried beyond; its coefficients of that strength are kept
PH_FOR_STRENGTH = 7.0      # ionic strength is that of the neutralized waste
PH_DISAGREES = 0.3         # between the pH measured and the one that strong acids and bases imply


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Waste:
    """One waste. Concentrations in mol/L of the undiluted waste.

    base_eq_l : strong base less strong acid; None where pH or a curve tells it. [eq/L]
    ph : measured, if it was.
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

    @property
    def has_composition(self) -> bool:
        """Whether anything but pH says what holds protons in it."""
        return bool(self.base_eq_l is not None or self.acids or self.carbon_mol_l or self.metals)

    def total(self, name: str) -> float:
        """Dissolved total of a weak acid, metal or ion by name. [mol/L]"""
        acids = {acid.name: mol for acid, mol in self.acids.items()}
        if name == CARBON:
            return self.carbon_mol_l
        return acids.get(name, 0.0) + self.metals.get(name, 0.0) + self.ions.get(name, 0.0)


def dissolved(waste: Waste, contents: Iterable[tuple[str | Product, float]], own: Sequence[Acid] = ()) -> Waste:
    """The waste with these substances dissolved in it as well, by name or as a product. [mol/L]

    Weak acids, metals and ions go by the name of their total; a product brings what its row says, strong acids and
    bases among it, so that the base of the waste is then known without pH.

    Raises InputError for a name that nothing has, with the nearest, and for an amount below zero.
    """
    acids, ions, found = dict(waste.acids), dict(waste.ions), dict(waste.metals)
    carbon, base, titrated = waste.carbon_mol_l, waste.base_eq_l, waste.titrated
    for what, mol in contents:
        name = what if isinstance(what, str) else what.name
        if not (mol >= 0.0 or what == ALKALINITY):
            raise InputError(f"the amount of {name} in waste {waste.name!r} must be zero or more; found {mol:g} mol/L. "
                             "Correct it.")
        parts = {what: 1.0} if isinstance(what, str) else dict(what.adds)
        titrated |= name == ALKALINITY
        base_part = parts.pop(ALKALINITY, None)
        if base_part is not None:
            base = (base or 0.0) + base_part * mol
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
    return replace(waste, acids=MappingProxyType(acids), ions=MappingProxyType(ions), metals=MappingProxyType(found),
                   carbon_mol_l=carbon, base_eq_l=base, titrated=titrated)


def _is_acid(name: str, own: Sequence[Acid]) -> bool:
    try:
        acid_named(name, own)
    except InputError:
        return False
    return True


def ionic_strength_of(waste: Waste) -> float:
    """Ionic strength of the neutralized waste, from what is known to be dissolved in it. [mol/L]

    Half the sum of z^2 c over its weak acids at pH 7, its metals and ions, and as many single charges as it takes to
    balance them (at least the strong acid or base there is). Follows from the definition.
    """
    h = np.array([10.0**-PH_FOR_STRENGTH])
    squares = charge = 0.0
    for acid, mol in waste.acids.items():
        alpha = fractions([np.array([10.0**-pk]) for pk in acid.pk], 1.0 / h)
        for lost, share in enumerate(alpha):
            z = acid.charge_full - lost
            squares, charge = squares + z * z * mol * float(share[0]), charge + z * mol * float(share[0])
    for name, mol in waste.ions.items():
        z = substances()[name].charge
        squares, charge = squares + z * z * mol, charge + z * mol
    squares, charge = squares + waste.carbon_mol_l, charge - waste.carbon_mol_l
    counter = max(abs(charge), abs(waste.base_eq_l or 0.0))
    return 0.5 * (squares + counter)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Chemistry:
    """Wastes as tables: one carrier per waste, then one of inorganic carbon that reagents bring.

    base_eq_l : of each waste, undiluted. ph : as the tables have it. t_c : the temperature of the tables.
    warnings : what the engineer must know of how they were made.
    """

    wastes: tuple[Waste, ...]
    t_c: float
    constants: Conditions
    readout: Readout
    base_eq_l: Array
    ph: Array
    warnings: tuple[str, ...] = ()

    @property
    def carbon_carrier(self) -> int:
        """Row of the amounts that carbon of reagents goes to, in mol/L."""
        return len(self.wastes)

    def blend(self, shares: ArrayLike) -> tuple[float, Array]:
        """Base [eq/L] and amounts of a mixture of the wastes by share of its volume."""
        s = np.asarray(shares, dtype=float)
        return float(s @ self.base_eq_l), np.append(s, 0.0)

    def demand(self, ph: ArrayLike, shares: ArrayLike | None = None) -> Array:
        """Strong base to add to a liter of a mixture to reach a pH; negative where acid is needed. [eq/L]"""
        base, amounts = self.blend(self._one() if shares is None else shares)
        x = np.asarray(ph, dtype=float)
        return self.readout.base_at(x, amounts.reshape((-1,) + (1,) * x.ndim)) - base

    def ph_after(self, added_eq_l: ArrayLike, shares: ArrayLike | None = None) -> Array:
        """pH of a mixture after so much strong base (negative: acid). [eq/L]"""
        base, amounts = self.blend(self._one() if shares is None else shares)
        added = np.asarray(added_eq_l, dtype=float)
        return self.readout.ph(base + added, amounts.reshape((-1,) + (1,) * added.ndim))

    def _one(self) -> Array:
        if len(self.wastes) != 1:
            raise InputError(f"several wastes need shares of each; found {len(self.wastes)} wastes and no shares. "
                             "Give one share per waste.")
        return np.ones(1)


def chemistry(wastes: Sequence[Waste], *, t_c: float | None = None, ionic_strength_mol_l: float | None = None,
              ) -> Chemistry:
    """The tables of some wastes that are treated together.

    t_c : of the mixture; the mean of the wastes if not given. ionic_strength_mol_l : the mean of theirs if not given.

    Raises
    ------
    InputError
        No waste; a waste of which only pH is known, or nothing; a pH that its composition cannot have.
    """
    if not wastes:
        raise InputError("a neutralization needs at least one waste; found none. Describe the stream.")
    warnings: list[str] = []
    for waste in wastes:
        _refuse_ph_alone(waste)
    t = float(np.mean([w.t_c for w in wastes])) if t_c is None else t_c
    strength = (float(np.mean([ionic_strength_of(w) for w in wastes])) if ionic_strength_mol_l is None
                else ionic_strength_mol_l)
    if strength > HIGHEST_STRENGTH:
        warnings.append(f"The neutralized waste has an ionic strength of about {strength:.2g} mol/L; activities are held "
                        f"at those of {HIGHEST_STRENGTH:g} mol/L, where the Davies equation ends. pH values near 1 and 13 "
                        f"are then good to about 0.2; the demand to the window is hardly touched.")
    c = conditions(t, 0.0, min(strength, HIGHEST_STRENGTH))
    c_h, c_oh = float(c.c_h), float(c.c_oh)
    held, bases = [], []
    for waste in wastes:
        if waste.curve is not None:
            own = conditions(waste.curve.t_c, 0.0, min(strength, HIGHEST_STRENGTH))  # water as it was when titrated
            table, base, told = held_table(waste.curve, float(own.c_h), float(own.c_oh))
            warnings += [f"{waste.name}: {words}" for words in told]
        else:
            waste, words = _with_carbon(waste, c)
            warnings += words
            table, base = _held_by_acids(waste, c), np.nan if waste.base_eq_l is None else waste.base_eq_l
        held.append(table)
        bases.append(base)
    held.append(_lost((c.k1, c.k2)))
    readout = Readout(c_h, c_oh, np.stack(held), _metal_tables(wastes, c))
    base_eq_l = np.array(bases)
    ones = np.eye(len(wastes) + 1)[:, :len(wastes)]
    for k, waste in enumerate(wastes):
        if np.isnan(base_eq_l[k]):
            base_eq_l[k] = readout.base_at(_measured(waste), ones[:, k])
    ph = readout.ph(base_eq_l, ones)
    warnings += [_disagreement(w, float(x)) for w, x in zip(wastes, ph, strict=True)]
    return Chemistry(wastes=tuple(wastes), t_c=t, constants=c, readout=readout, base_eq_l=base_eq_l, ph=ph,
                     warnings=tuple(filter(None, warnings)))


def _refuse_ph_alone(waste: Waste) -> None:
    if waste.curve is not None or waste.base_eq_l is not None or (waste.has_composition and waste.ph is not None):
        return
    known = "its pH" if waste.ph is not None else "its composition without pH" if waste.has_composition else "nothing"
    raise InputError(
        f"waste {waste.name!r} must be known by a titration, by its strong acids and bases, or by pH and composition "
        f"together; found {known} alone. pH does not show what buffers hold: an acetic waste asks for some 75 times "
        "what its pH says. Titrate a liter of it with the reagent past both ends of the window, or have its acids, bases and "
        "metals analyzed; nothing is sized until then.")


def _with_carbon(waste: Waste, c: Conditions) -> tuple[Waste, list[str]]:
    """The waste with the carbon that its titrated alkalinity and pH imply, where carbon is not given."""
    if not waste.titrated or waste.ph is None or waste.carbon_mol_l or waste.base_eq_l is None:
        return waste, []
    def at_ph(table: Array) -> float:
        return float(np.interp(waste.ph, GRID_PH, table))  # type: ignore[arg-type]
    h = 10.0**-waste.ph
    rest = waste.base_eq_l - (float(c.c_oh) / h - float(c.c_h) * h) - at_ph(_held_by_acids(waste, c))
    carbon = rest / max(at_ph(_lost((c.k1, c.k2))), 1e-6)
    if 0.0 <= carbon < 1.0:
        return replace(waste, carbon_mol_l=carbon), [
            f"{waste.name}: inorganic carbon {1e3 * carbon:.3g} mmol/L follows from its alkalinity and pH."]
    return waste, [f"{waste.name}: alkalinity and pH imply an inorganic carbon of {1e3 * carbon:.3g} mmol/L, which no water has; "
                   "none is counted. Check both, and what else holds protons."]


def _measured(waste: Waste) -> float:
    if waste.ph is None:  # refused before; here for the type checker
        raise InputError(f"waste {waste.name!r} needs a pH; none is given. Add it.")
    return waste.ph


def _disagreement(waste: Waste, ph: float) -> str:
    if waste.ph is None or not abs(ph - waste.ph) > PH_DISAGREES:
        return ""
    basis = "titration starts at" if waste.curve is not None else "strong acids and bases imply"
    return (f"{waste.name}: the {basis} pH {ph:.2f}, measured is {waste.ph:.2f}. The demand follows the former; find out why "
            "they differ before anything is built.")


def _lost(k: Sequence[ArrayLike]) -> Array:
    inv_h = 10.0**GRID_PH
    return protons_lost(fractions([np.full(GRID_PH.shape, float(x)) for x in k], inv_h))


def _held_by_acids(waste: Waste, c: Conditions) -> Array:
    table = waste.carbon_mol_l * _lost((c.k1, c.k2))
    for acid, mol in waste.acids.items():
        table = table + mol * (_lost(c.acid_constants(acid)) - acid.zero_level)
    return table


def _metal_tables(wastes: Sequence[Waste], c: Conditions) -> tuple[MetalTable, ...]:
    """Metals of wastes that are known by composition; a measured curve holds its metals already.

    Solubility by concentration products of ideal solutions at the pKw of the waste.
    """
    by_waste: list[Mapping[str, float]] = [{} if w.curve is not None else w.metals for w in wastes]
    pkw = -np.log10(float(c.c_h * c.c_oh))
    return tuple(metal_table(metal, [*(mol.get(name, 0.0) for mol in by_waste), 0.0], pkw=pkw)
                 for name, metal in metals().items() if any(mol.get(name, 0.0) > 0.0 for mol in by_waste))
