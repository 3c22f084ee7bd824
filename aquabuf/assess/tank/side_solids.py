"""What falls out when a waste is neutralized: gypsum, calcium fluoride, metal hydroxides; the sludge they make."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.side_case import NOTE, WARNING, Effect, Treated
from aquabuf.chem.acids import acid_named
from aquabuf.chem.metals import conflict, dissolved_at, window_disagreement
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "GYPSUM", "SLUDGE_SHARE", "calcium_solids", "gypsum_onset_acid_g_l", "gypsum_onset_eq_l", "gypsum_solubility_mol_l",
    "hydroxide_effects", "metal_left_mol_l", "salt_effects", "sludge_effects", "solids_kg_m3",
]

Array = NDArray[np.float64]

GYPSUM, FLUORITE = "CaSO4.2H2O", "CaF2"
KSP_FLUORITE = 10.0**-10.46  # handbook 3.45e-11 at 25 °C (recalled); other handbooks 3.9e-11
HALVINGS = 200
NEAR = 0.5                   # of saturation, from which on scale is told
SLUDGE_SHARE = 0.02          # solids in settled hydroxide sludge; common practice 1 to 3 %, gypsum and limestone more
SOURCE_GYPSUM = "Environmental Engineers' Handbook (printed), read as CaSO4 (recalled)"
STOICHIOMETRY = "atomic masses"
BELOW = "below saturation: no gypsum sludge"
CLOSE = "near saturation: scale where it warms or dries"
ABOVE = ("above saturation: sludge and much scale; a clear solution may stay supersaturated for hours and scale "
         "downstream unless sludge is recycled as seed (10 g/L halves scale)")
FLUORIDE_FALLS = ("stays dissolved at equilibrium; plants reach 10 to 20 mg/L, since fine crystals pass and aluminum "
                  "or iron bind fluoride")
FLUORIDE_STAYS = "nothing takes it out: sodium and magnesium fluoride stay dissolved"


# ---------------------------------------------------------------- calcium salts


@cache
def _gypsum_table() -> tuple[Array, Array]:
    rows = read_table("gypsum_solubility")
    return np.array([float(r["t_c"]) for r in rows]), np.array([float(r["caso4_mg_l"]) for r in rows])


def gypsum_solubility_mol_l(t_c: ArrayLike) -> Array:
    """Calcium sulfate that stays dissolved in water with nothing else, 0 to 100 °C, nan outside. [mol/L]

    Straight lines between the three points of `data/gypsum_solubility.csv`. Other salts raise it, by a half and more in
    strong brines.
    """
    t, mg_l = _gypsum_table()
    return np.interp(np.asarray(t_c, dtype=float), t, mg_l, left=np.nan, right=np.nan) / molar_mass("CaSO4") * 1e-3


def gypsum_onset_acid_g_l(t_c: ArrayLike) -> Array:
    """Sulfuric acid above which lime drops gypsum: as much sulfate as stays dissolved. [g/L] Follows from
    stoichiometry."""
    return gypsum_solubility_mol_l(t_c) * molar_mass("H2SO4")


def calcium_solids(calcium: float, sulfate: float, fluoride: float, *, gypsum_mol_l: float, free_fluoride: float = 1.0,
                   ksp_fluorite: float = KSP_FLUORITE) -> tuple[float, float]:
    """Gypsum and calcium fluoride at equilibrium, both against the same calcium. [mol/L]

    Products of concentrations: that of a saturated gypsum solution, `gypsum_mol_l` squared, and Ksp of fluorite with
    the share of fluoride that is F-. The calcium left is the root of its balance, which rises with it.
    """
    if calcium <= 0.0:
        return 0.0, 0.0

    def solids(left: float) -> tuple[float, float]:
        gypsum = max(sulfate - gypsum_mol_l**2 / left, 0.0)
        return gypsum, 0.5 * max(fluoride - np.sqrt(ksp_fluorite / left) / free_fluoride, 0.0)
    low, high = np.log(1e-30), np.log(calcium)
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        left = float(np.exp(middle))
        low, high = (low, middle) if left + sum(solids(left)) > calcium else (middle, high)
    return solids(float(np.exp(high)))


def gypsum_onset_eq_l(case: Treated) -> float:
    """Dose at which the solution is saturated with gypsum; 0 if it comes so, nan if the dose never gets there. [eq/L]

    Root of (Ca + a d) (SO4 + b d) = s^2, a and b what an equivalent of reagent brings. Fluoride is left out.
    """
    if not case.dose_eq_l > 0.0:
        return np.nan
    s2 = float(gypsum_solubility_mol_l(case.t_c)) ** 2
    a, b = (case.added(name) / case.dose_eq_l for name in ("calcium", "sulfate"))
    ca, so4 = (case.totals.get(name, 0.0) for name in ("calcium", "sulfate"))
    square, line, rest = a * b, a * so4 + b * ca, ca * so4 - s2
    if rest >= 0.0:
        return 0.0
    if square == 0.0 and line == 0.0:
        return np.nan
    found = -2.0 * rest / (line + np.sqrt(line * line - 4.0 * square * rest))
    return found if found <= case.dose_eq_l else np.nan


def _calcium_solids_of(case: Treated) -> tuple[float, float]:
    bare = float(case.acid_shares(acid_named("fluoride"), case.end_ph)[-1])
    return calcium_solids(case.total("calcium"), case.total("sulfate"), case.total("fluoride"),
                          gypsum_mol_l=float(gypsum_solubility_mol_l(case.t_c)), free_fluoride=bare)


def salt_effects(case: Treated) -> list[Effect]:
    """Gypsum and fluoride, where the waste or the reagent brings what they are made of."""
    gypsum, fluorite = _calcium_solids_of(case)
    rows: list[Effect] = []
    if case.total("calcium") and case.total("sulfate"):
        rows += _gypsum_rows(case, gypsum)
    if case.total("fluoride"):
        left = 1e3 * (case.total("fluoride") - 2.0 * fluorite) * molar_mass("F")
        rows.append(Effect(
            name="calcium fluoride", value=fluorite * molar_mass(FLUORITE), unit="kg/m3",
            words="falls out where calcium is fed", rule="solubility product of fluorite at the end pH, HF counted",
            source="handbook Ksp (recalled)"))
        rows.append(Effect(
            name="fluoride left", value=left, unit="mg/L",
            words=FLUORIDE_FALLS if fluorite else FLUORIDE_STAYS,
            rule="equilibrium with fluorite; practice 10 to 20 mg/L", source="handbook Ksp and practice (recalled)",
            severity=NOTE if fluorite else WARNING))
    return rows


def _gypsum_rows(case: Treated, gypsum: float) -> list[Effect]:
    onset = gypsum_onset_eq_l(case)
    share = np.sqrt(case.total("calcium") * case.total("sulfate")) / float(gypsum_solubility_mol_l(case.t_c))
    limit = float(gypsum_onset_acid_g_l(case.t_c))
    rows = [Effect(
        name="gypsum saturation", value=float(share), unit="-",
        words=BELOW if share < NEAR else CLOSE if share <= 1.0 else ABOVE,
        rule=f"calcium sulfate that stays dissolved; lime on sulfuric acid passes it above {limit:.2f} g/L of acid",
        source=f"{SOURCE_GYPSUM}; MIL-HDBK-1005/9A on scaling (printed)", severity=NOTE if share < NEAR else WARNING)]
    if np.isfinite(onset):
        rows.append(Effect(name="gypsum onset", value=float(onset), unit="eq/L",
                           words="dose from which on gypsum may fall out",
                           rule="calcium times sulfate as in a saturated solution",
                           source=SOURCE_GYPSUM))
    if gypsum > 0.0:
        mass = gypsum * molar_mass(GYPSUM)
        rows.append(Effect(name="gypsum", value=mass, unit="kg/m3",
                           words=f"dry gypsum at equilibrium, {mass * case.m3_d:.3g} kg/d; less while it stays "
                                 "supersaturated",
                           rule="what passes the solubility, as CaSO4.2H2O", source=SOURCE_GYPSUM, severity=WARNING))
    return rows


# ---------------------------------------------------------------- metals


def metal_left_mol_l(case: Treated) -> dict[str, float]:
    """Metal that stays dissolved at the end pH, by its name. [mol/L]"""
    return {m.name: min(total, float(dissolved_at(m, case.end_ph, case.pkw))) for m, total in case.metals.items()}


def hydroxide_effects(case: Treated) -> list[Effect]:
    """Hydroxides, what stays dissolved against the listed level, and metals that one pH cannot serve."""
    rows: list[Effect] = []
    left = metal_left_mol_l(case)
    for metal, total in case.metals.items():
        solid = total - left[metal.name]
        mg_l = 1e3 * left[metal.name] * metal.molar_mass_g
        known = np.isfinite(metal.limit_mg_l)
        over = bool(known and mg_l > metal.limit_mg_l)
        level = (f"{metal.limit_mg_l:g} mg/L, to compare: {metal.limit_source}; the permit outranks it" if known
                 else "no level listed")
        rows.append(Effect(
            name=f"{metal.name} hydroxide", value=solid * metal.hydroxide_g_mol, unit="kg/m3",
            words=f"{100.0 * solid / total:.3g} % of it falls out as {metal.hydroxide}",
            rule="solubility at the end pH", source=metal.solubility_source))
        rows.append(Effect(
            name=f"{metal.name} left", value=mg_l, unit="mg/L",
            words=("above the level: another end pH, sulfide or a complex breaker is needed" if over else
                   "at least; mixed complexes and fine solids that pass the clarifier come on top"),
            rule=level, source=metal.solubility_source, severity=WARNING if over else NOTE))
        if told := window_disagreement(metal):  # at 25 °C, as the tables are
            rows.append(Effect(name=f"{metal.name} window", value=case.end_ph, unit="pH", words=told,
                               rule="within half a pH of the table of analysts", source=metal.table_source))
    judged = [m for m in case.metals if np.isfinite(m.limit_mg_l) or np.isfinite(m.ph_low)]
    if len(judged) > 1:
        found = conflict(judged, pkw=case.pkw)
        rows.append(Effect(
            name="one pH for all metals", value=case.end_ph, unit="pH", words=found.words,
            rule="below the listed levels by solubility, and windows of least solubility in practice",
            source="; ".join(dict.fromkeys(m.window_source for m in judged if m.window_source)),
            severity=WARNING if found.clash else NOTE))
    return rows


# ---------------------------------------------------------------- sludge


def solids_kg_m3(case: Treated) -> dict[str, float]:
    """Dry solids in the neutralized waste by kind. [kg/m3]"""
    gypsum, fluorite = _calcium_solids_of(case)
    left = metal_left_mol_l(case)
    hydroxides = sum((total - left[m.name]) * m.hydroxide_g_mol for m, total in case.metals.items())
    is_solid = case.product.form in ("solid", "slurry")
    unreacted = case.mol_l * case.product.molar_mass_g * (1.0 / case.efficiency - 1.0) if is_solid else 0.0
    return {"gypsum": gypsum * molar_mass(GYPSUM), "calcium fluoride": fluorite * molar_mass(FLUORITE),
            "metal hydroxides": hydroxides, "solids of the waste": case.solids_g_l, "unreacted reagent": unreacted}


def sludge_effects(case: Treated, sludge_share: float = SLUDGE_SHARE) -> list[Effect]:
    """Dry solids and the volume of wet sludge at a share of solids by mass, counted at the density of water.

    Raises InputError for a share that is not above 0 and below 1.
    """
    if not 0.0 < sludge_share < 1.0:
        raise InputError(f"the share of solids in sludge must be above 0 and below 1; found {sludge_share:g}. "
                         "Give 2 % as 0.02.")
    parts = solids_kg_m3(case)
    total = sum(parts.values())
    said = ", ".join(f"{name} {value:.3g}" for name, value in parts.items() if value > 0.0) or "none"
    rule = "gypsum, fluoride, hydroxides, solids of the waste, unreacted reagent; calcium carbonate is not counted"
    return [
        Effect(name="dry solids", value=total, unit="kg/m3", words=said, rule=rule, source=STOICHIOMETRY),
        Effect(name="dry solids per day", value=total * case.m3_d, unit="kg/d", words="at this flow all day", rule=rule,
               source=STOICHIOMETRY),
        Effect(name="wet sludge", value=total * case.m3_d / sludge_share * 1e-3, unit="m3/d",
               words=f"settled, at {100.0 * sludge_share:g} % of solids",
               rule="hydroxide sludge settles to 1 to 3 % of solids by mass, gypsum far denser",
               source="common practice, no source; a settling test tells it"),
    ]
