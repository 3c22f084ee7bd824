"""What can be told of a waste beside its demand: the buffers behind its titration, and acidity by pH and metals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.tank.composition import Waste
from aquabuf.assess.tank.waste import Chemistry
from aquabuf.chem.acidity import acidity_eq_l, caco3_mg_l_of_eq_l, load_kg_d
from aquabuf.engine.conditions import conditions
from aquabuf.engine.spectrum import Spectrum, fit_spectrum

__all__ = ["Known", "known_of"]

SHOWN_SHARE = 0.02   # of all buffers, below which one is not told; practice
ACID_METALS = ("iron(II)", "iron(III)", "aluminum", "manganese(II)")
NO_ACID = ("magnesium",)  # stays dissolved up to END_PH
END_PH = 8.3         # of the demand that acidity is compared with, near the end point of the method


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Known:
    """One waste. spectrum : buffers fitted to its titration, None without one. acidity_eq_l : nan where it holds none
    of the metals or its pH is not measured. words : both in sentences."""

    waste: str
    spectrum: Spectrum | None
    acidity_eq_l: float
    words: tuple[str, ...]


def known_of(chem: Chemistry, flows_m3_h: tuple[float, ...]) -> tuple[Known, ...]:
    """What is told of each waste; flows for the load of acidity. [m3/h]"""
    return tuple(_known(chem, k, waste, flow)
                 for k, (waste, flow) in enumerate(zip(chem.wastes, flows_m3_h, strict=True)))


def _known(chem: Chemistry, k: int, waste: Waste, flow_m3_h: float) -> Known:
    spectrum = None if waste.curve is None else _spectrum(waste)
    words = [] if spectrum is None else [_buffer_words(waste.name, spectrum)]
    acidity = _acidity(waste)
    if np.isfinite(acidity):
        words.append(_acidity_words(chem, k, waste, acidity, flow_m3_h))
    return Known(waste=waste.name, spectrum=spectrum, acidity_eq_l=acidity, words=tuple(words))


def _spectrum(waste: Waste) -> Spectrum:
    curve = waste.curve
    assert curve is not None
    c = conditions(curve.t_c)
    return fit_spectrum(curve.base_eq_l, curve.ph, c_h=float(c.c_h), c_oh=float(c.c_oh), k1=float(c.k1),
                        k2=float(c.k2), dilution=curve.dilution)


def _buffer_words(name: str, s: Spectrum) -> str:
    total = float(s.mol_l.sum() + s.carbon_mol_l)
    found = [f"pK {pk:.2f} ± {u_pk:.2f}: {brief(1e3 * mol)} ± {brief(1e3 * u, 2)} mmol/L"
             for pk, u_pk, mol, u in zip(s.pk, s.u_pk, s.mol_l, s.u_mol_l, strict=True) if mol > SHOWN_SHARE * total]
    if s.carbon_mol_l > SHOWN_SHARE * total:
        found.append(f"carbonic acid: {brief(1e3 * s.carbon_mol_l)} ± {brief(1e3 * s.u_carbon_mol_l, 2)} mmol/L")
    scatter = float(np.sqrt(np.mean((s.residual_eq_l / s.error_eq_l) ** 2)))
    fit = "the curve is told by them within its reading error" if scatter < 2.0 else \
        f"the curve is off by {scatter:.1f} times its reading error: metals that fall out are no weak acids"
    return (f"{name}: buffers behind its titration (fitted, one standard uncertainty): "
            f"{'; '.join(found) or 'none within the readings'}. {fit[0].upper()}{fit[1:]}")


def _acidity(waste: Waste) -> float:
    """Acidity by pH and metals [eq/L]; nan without a pH or these metals, or where others would be left out."""
    others = [m for m, mol in waste.metals.items() if mol > 0.0 and m not in (*ACID_METALS, *NO_ACID)]
    if waste.ph is None or others or not any(waste.metals.get(m, 0.0) > 0.0 for m in ACID_METALS):
        return float("nan")
    two, three, al, mn = (waste.metals.get(m, 0.0) for m in ACID_METALS)
    return float(acidity_eq_l(waste.ph, two, three, al, mn))


def _acidity_words(chem: Chemistry, k: int, waste: Waste, acidity: float, flow_m3_h: float) -> str:
    mg_l = float(caco3_mg_l_of_eq_l(acidity))
    shares = np.eye(len(chem.wastes))[k]
    demand = float(chem.demand(END_PH, shares))
    load, taken = float(load_kg_d(flow_m3_h, mg_l)), float(caco3_mg_l_of_eq_l(demand))
    return (f"{waste.name}: acidity by pH and metals {brief(mg_l)} mg/L as CaCO3, {brief(load)} kg/d (Kirby & Cravotta "
            f"2005); by its chemistry it takes {brief(taken)} mg/L to pH {END_PH:g}. The sum counts iron(III) and "
            "aluminum a little high and leaves hydrogen sulfate out")
