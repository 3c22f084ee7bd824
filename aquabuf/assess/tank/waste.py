"""The chemistry of wastes as tables: base held by what each holds, or by its titration curve, and pH of mixtures."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.composition import (
    CARBON,
    PH_FOR_STRENGTH,
    Waste,
    check_known,
    dissolved,
    ionic_strength_of,
)
from aquabuf.assess.tank.curve import held_table
from aquabuf.chem.metals import Metal, complex_at, free_at, metals
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.conditions import LIMITS, Conditions, conditions
from aquabuf.engine.hydroxides import metal_table
from aquabuf.engine.readout import GRID_PH, PH_LEAST, PH_MOST, MetalTable, Readout
from aquabuf.errors import InputError

__all__ = ["CARBON", "Chemistry", "Waste", "chemistry", "dissolved", "ionic_strength_of"]

Array = NDArray[np.float64]

HIGHEST_STRENGTH = 0.5     # the Davies equation is not carried beyond; its coefficients of that strength are kept
PH_DISAGREES = 0.3         # between the pH measured and the one that strong acids and bases imply
CARBON_FROM_PH = 4.5       # below, alkalinity and pH tell nothing of carbon, which holds hardly any base there
OVERSATURATED_PH = 1.5     # above the pH where hydroxide begins to fall out, up to which metals stay dissolved for long
PH_ERROR = 0.1             # of a pH measured in a waste; practice
UNSURE = 0.1               # of the demand, from which such an error is told
FAR_FROM_TITRATION_K = 10.0  # between waste and titration


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

    t_c : of the mixture; the mean of the wastes if not given. ionic_strength_mol_l : the mean of those whose
    composition is known if not given. Carbon that follows from alkalinity and pH is in the wastes of the result.

    Raises
    ------
    InputError
        No waste; a waste of which only pH is known, or nothing; a temperature or ionic strength out of range; a waste
        so strong that it has no pH from -1 to 15.
    """
    if not wastes:
        raise InputError("a neutralization needs at least one waste; found none. Describe the stream.")
    for waste in wastes:
        check_known(waste)
    t = _checked_t(float(np.mean([w.t_c for w in wastes])) if t_c is None else t_c, "the mixture of the wastes",
                   "Correct it, or cool the stream first")
    strength, warnings = _strength(wastes, ionic_strength_mol_l)
    c = conditions(t, 0.0, min(strength, HIGHEST_STRENGTH))
    c_h, c_oh = float(c.c_h), float(c.c_oh)
    held, bases, complete = [], [], []
    for waste in wastes:
        if waste.curve is not None:
            titrated_at = _checked_t(waste.curve.t_c, f"the titration of waste {waste.name!r}", "Correct it")
            own = conditions(titrated_at, 0.0, min(strength, HIGHEST_STRENGTH))  # water as it was when titrated
            table, base, told = held_table(waste.curve, float(own.c_h), float(own.c_oh))
            warnings += [f"{waste.name}: {words}" for words in (*told, *_far(t, titrated_at))]
        else:
            waste, words = _with_carbon(waste, c)
            warnings += words
            table, base = _held_by_acids(waste, c), np.nan if waste.base_eq_l is None else waste.base_eq_l
        complete.append(waste)
        held.append(table)
        bases.append(base)
    held.append(_lost((c.k1, c.k2)))
    readout = Readout(c_h, c_oh, np.stack(held), _metal_tables(complete, c))
    base_eq_l = np.array(bases)
    ones = np.eye(len(wastes) + 1)[:, :len(wastes)]
    for k, waste in enumerate(complete):
        if np.isnan(base_eq_l[k]):
            base_eq_l[k], words = _base_of_ph(waste, readout, ones[:, k])
            warnings += words
    ph = readout.ph(base_eq_l, ones)
    for waste, found, x in zip(complete, base_eq_l, ph, strict=True):
        if not np.isfinite(x):
            raise InputError(f"waste {waste.name!r} must have a pH from {PH_LEAST:g} to {PH_MOST:g}; its base of "
                             f"{found:.3g} eq/L lies beyond. Check the amounts and their units; what is so strong is a "
                             "reagent.")
    warnings += [_disagreement(w, float(x)) for w, x in zip(complete, ph, strict=True)]
    return Chemistry(wastes=tuple(complete), t_c=t, constants=c, readout=readout, base_eq_l=base_eq_l, ph=ph,
                     warnings=tuple(filter(None, warnings)))


def _checked_t(t_c: float, what: str, remedy: str) -> float:
    low, high = LIMITS["t_c"][2:]
    if not low <= t_c <= high:
        raise InputError(f"the temperature of {what} must be {low:g} to {high:g} °C, as far as the constants go; found "
                         f"{t_c:g} °C. {remedy}.")
    return t_c


def _far(t_c: float, titrated_c: float) -> list[str]:
    if abs(t_c - titrated_c) <= FAR_FROM_TITRATION_K:
        return []
    return [f"titrated at {titrated_c:g} °C, treated at {t_c:.3g} °C; what its acids hold is taken as it was titrated, "
            "only water is corrected"]


def _strength(wastes: Sequence[Waste], given: float | None) -> tuple[float, list[str]]:
    """Ionic strength of the tables, and what to say of it. [mol/L]"""
    if given is not None:
        if not 0.0 <= given < np.inf:
            raise InputError(f"the ionic strength must be zero or more; found {given:g} mol/L. Correct it or leave it "
                             "out.")
        strength, warnings = given, []
    else:
        known = [w for w in wastes if w.has_composition or w.ions]
        strength = float(np.mean([ionic_strength_of(w) for w in known])) if known else 0.0
        taken = f"that of the other wastes is taken, {strength:.2g} mol/L" if known else "it is taken as zero"
        warnings = [f"{w.name}: its ionic strength is not known, as no ions are given; {taken}." for w in wastes
                    if not (w.has_composition or w.ions)]
    if strength > HIGHEST_STRENGTH:
        warnings.append(f"The neutralized waste has an ionic strength of about {strength:.2g} mol/L; activities are "
                        f"held at those of {HIGHEST_STRENGTH:g} mol/L, where the Davies equation ends. pH values near "
                        "1 and 13 are then good to about 0.2; the demand to the window is hardly touched.")
    return strength, warnings


def _base_of_ph(waste: Waste, readout: Readout, one: Array) -> tuple[float, list[str]]:
    """Base of a waste that pH and composition tell, with metals dissolved as stated, and what to say of it. [eq/L]

    A little above the pH where its hydroxide begins to fall out a metal stays dissolved for long, held by sulfate and
    hydroxo complexes that the tables leave out; it then asks for base as Kirby & Cravotta (2005) count it.
    Far above it is there as hydroxide already.
    """
    ph = _measured(waste)
    base, words = float(readout.base_at(ph, one)), []
    for name, solid in readout.solids_at(ph, one).items():
        mol = float(solid)
        if not mol > 0.0:
            continue
        metal, total = metals()[name], waste.metals[name]
        mg = 1e3 * metal.molar_mass_g
        told = (f"{waste.name}: of {mg * total:.3g} mg/L {name} its hydroxide leaves {mg * (total - mol):.2g} mg/L "
                f"dissolved at pH {ph:.2f}; ")
        if ph <= _falls_out_at(metal, total, -float(np.log10(readout.c_h * readout.c_oh))) + OVERSATURATED_PH:
            base -= metal.charge * mol
            words.append(told + "all of it is counted as dissolved and asks for base, and pH sinks as it falls out. "
                                "State the dissolved part alone if some is solid.")
        else:
            words.append(told + "the rest is counted as hydroxide that is solid already and asks for no base. Titrate "
                                "the waste if that is not so.")
    unsure = PH_ERROR * float(readout.buffer_at(ph, one))
    demand = abs(float(readout.base_at(PH_FOR_STRENGTH, one)) - base)
    if unsure > UNSURE * demand > 0.0:
        words.append(f"{waste.name}: its strong acid or base follows from pH {ph:.2f}; an error of {PH_ERROR:g} in pH "
                     f"is {100.0 * unsure / demand:.0f} % of the demand to pH 7. Titrate it, or name the strong acids "
                     "and bases.")
    return base, words


def _falls_out_at(metal: Metal, mol_l: float, pkw: float) -> float:
    """pH where hydroxide of so much metal begins to fall out."""
    over = free_at(metal, GRID_PH, pkw) + complex_at(metal, GRID_PH, pkw)
    return float(GRID_PH[int(np.argmax(over < mol_l))])


def _with_carbon(waste: Waste, c: Conditions) -> tuple[Waste, list[str]]:
    """The waste with the carbon that its titrated alkalinity and pH imply, where carbon is not given."""
    if not waste.titrated or waste.ph is None or waste.carbon_mol_l or waste.base_eq_l is None:
        return waste, []
    if waste.ph < CARBON_FROM_PH:
        return waste, [f"{waste.name}: below pH {CARBON_FROM_PH:g} alkalinity and pH do not tell inorganic carbon; "
                       "none is counted. Have it measured where the stream may hold carbonate."]

    def at_ph(table: Array) -> float:
        return float(np.interp(waste.ph, GRID_PH, table))  # type: ignore[arg-type]
    h = 10.0**-waste.ph
    rest = waste.base_eq_l - (float(c.c_oh) / h - float(c.c_h) * h) - at_ph(_held_by_acids(waste, c))
    carbon = rest / at_ph(_lost((c.k1, c.k2)))
    free = carbon * float(fractions([np.asarray(c.k1), np.asarray(c.k2)], 1.0 / h)[0])
    if carbon >= 0.0 and free <= float(c.k0):  # more would bubble out of it
        return replace(waste, carbon_mol_l=carbon), [
            f"{waste.name}: inorganic carbon {1e3 * carbon:.3g} mmol/L follows from its alkalinity and pH."]
    return waste, [f"{waste.name}: alkalinity and pH imply an inorganic carbon of {1e3 * carbon:.3g} mmol/L, which no "
                   "open water has; none is counted. Check both, and what else holds protons."]


def _measured(waste: Waste) -> float:
    if waste.ph is None:  # refused before; here for the type checker
        raise InputError(f"waste {waste.name!r} needs a pH; none is given. Add it.")
    return waste.ph


def _disagreement(waste: Waste, ph: float) -> str:
    told = waste.curve is not None or waste.base_eq_l is not None  # else the base follows from this pH
    if waste.ph is None or not told or not abs(ph - waste.ph) > PH_DISAGREES:
        return ""
    basis = "titration starts at" if waste.curve is not None else \
        "alkalinity implies" if waste.titrated else "strong acids and bases imply"
    return (f"{waste.name}: the {basis} pH {ph:.2f}, measured is {waste.ph:.2f}. The demand follows the former; find "
            "out why they differ before anything is built.")


def _lost(k: Sequence[Array]) -> Array:
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
