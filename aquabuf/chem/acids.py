"""Weak acids: the shipped table, acids of the user's own, and their constants against temperature."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.properties import GAS_CONSTANT, kelvin
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["ZERO_LEVEL_PK", "Acid", "acid_named", "acid_table", "k_of_temperature"]

ZERO_LEVEL_PK = 4.5  # acids weaker than this count in alkalinity when dissociated (Dickson 1981)
T_REFERENCE_C = 25.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Acid:
    """A weak acid that loses one proton after the other.

    name : the quantity it is given by; its total goes by `<name>_mol_l`
    pk : pK of each step at 25 °C and zero ionic strength, rising
    charge_full : charge of the fully protonated form (0 for acetic acid, +1 for ammonium)
    enthalpy_j_mol, heat_capacity_j_mol_k : of each step; zeros leave the pK constant
    species : formula of each form, from fully protonated to bare
    reference : where the numbers come from
    """

    name: str
    pk: tuple[float, ...]
    charge_full: int = 0
    enthalpy_j_mol: tuple[float, ...] = ()
    heat_capacity_j_mol_k: tuple[float, ...] = ()
    species: tuple[str, ...] = ()
    meaning: str = ""
    reference: str = "given by the user"

    def __post_init__(self) -> None:
        n = len(self.pk)
        if not 1 <= n <= 6:
            raise InputError(f"acid {self.name!r} must have 1 to 6 pK values; found {n}. Give them as a list.")
        if not np.all(np.isfinite(self.pk)) or any(b <= a for a, b in zip(self.pk, self.pk[1:], strict=False)):
            raise InputError(f"the pK values of acid {self.name!r} must be numbers that rise; found "
                             f"{list(self.pk)}. List them from the first proton lost to the last.")
        for field in ("enthalpy_j_mol", "heat_capacity_j_mol_k"):
            values = getattr(self, field) or (0.0,) * n
            if len(values) != n:
                raise InputError(f"{field} of acid {self.name!r} must have one value per pK ({n}); found "
                                 f"{len(values)}. Use 0 where it is not known.")
            object.__setattr__(self, field, tuple(values))
        names = self.species or tuple(_form(self.name, n - i, self.charge_full - i) for i in range(n + 1))
        if len(names) != n + 1:
            raise InputError(f"acid {self.name!r} has {n + 1} forms; found {len(names)} names. Name each one.")
        object.__setattr__(self, "species", names)

    @property
    def zero_level(self) -> int:
        """Protons already lost in the form that counts zero in alkalinity."""
        return sum(pk < ZERO_LEVEL_PK for pk in self.pk)

    @property
    def pairs(self) -> tuple[str, ...]:
        """Label of each conjugate pair, acid/base."""
        return tuple(f"{acid}/{base}" for acid, base in zip(self.species, self.species[1:], strict=False))


def _form(name: str, protons: int, charge: int) -> str:
    """Readable formula of a user's acid, such as H2humic-."""
    head = "" if protons == 0 else "H" if protons == 1 else f"H{protons}"
    return f"{head}{name}{('+' if charge > 0 else '-') * abs(charge)}"


def _numbers(cell: str, factor: float = 1.0) -> tuple[float, ...]:
    return tuple(float(x) * factor for x in cell.split(";"))


@cache
def acid_table() -> dict[str, Acid]:
    """The shipped weak acids by name, carbonic acid apart."""
    return {
        row["name"]: Acid(
            name=row["name"], meaning=row["meaning"], charge_full=int(row["charge_full"]), pk=_numbers(row["pk"]),
            enthalpy_j_mol=_numbers(row["enthalpy_kj_mol"], 1e3),
            heat_capacity_j_mol_k=_numbers(row["heat_capacity_j_mol_k"]),
            species=tuple(row["species"].split(";")), reference=f"{row['reference']} ({row['mark']})",
        )
        for row in read_table("acids")
    }


def acid_named(name: str, own: Iterable[Acid] = ()) -> Acid:
    """The acid called `name`, the user's own first. Raises InputError with the nearest names."""
    known = acid_table() | {acid.name: acid for acid in own}
    if name not in known:
        near = get_close_matches(name, known, n=3) or sorted(known)
        raise InputError(f"no weak acid is called {name!r}; nearest: {', '.join(near)}. "
                         f"Define your own with its pK values, or correct the name.")
    return known[name]


def k_of_temperature(
    pk: float, enthalpy_j_mol: float, heat_capacity_j_mol_k: float, t_c: ArrayLike,
) -> NDArray[np.float64]:
    """Dissociation constant at `t_c` from its value at 25 °C. [mol/kg]

    ln K = ln K25 - dH/R (1/T - 1/T25) + dCp/R (T25/T - 1 + ln(T/T25)), 1 to 77 °C.
    Source of the form: handbook section on ionization reactions of buffers (after Goldberg et al. 2002).
    """
    t = kelvin(t_c)
    t_ref = float(kelvin(T_REFERENCE_C))
    ln_k = (-pk * np.log(10.0) - enthalpy_j_mol / GAS_CONSTANT * (1.0 / t - 1.0 / t_ref)
            + heat_capacity_j_mol_k / GAS_CONSTANT * (t_ref / t - 1.0 + np.log(t / t_ref)))
    return np.exp(ln_k)
