"""What follows from other columns of the same row: density, conductivity at 25 °C, calcium from its hardness."""

from __future__ import annotations

import numpy as np

from aquabuf.readings.schema import find_quantity
from aquabuf.readings.sheet import Sheet

__all__ = ["conductivity_25", "density_kg_l", "derive"]

CONDUCTIVITY_PER_DEGREE = 0.0191  # linear compensation of instrument makers, 1.91 % per °C
DENSITY_T_C = 20.0  # when a row has no temperature; between 0 and 30 °C the density changes by 0.4 %


def conductivity_25(conductivity_us_cm, t_c):
    """Conductivity at 25 °C from that at the temperature of the sample. [µS/cm]

    EC25 = EC / (1 + 0.0191 (t - 25)), instrument manuals; natural waters range over 0.0175 to 0.0198 (Hayashi 2004).
    """
    return conductivity_us_cm / (1.0 + CONDUCTIVITY_PER_DEGREE * (t_c - 25.0))


def density_kg_l(sheet: Sheet, column: str, needed: np.ndarray | None = None) -> np.ndarray:
    """Density of each sample from its temperature and salinity; what is missing is replaced and flagged. [kg/L]

    `needed` marks the rows that will use it (all if it is not given): only they are flagged.
    """
    from aquabuf.chem.properties import seawater_density  # only tables per kilogram need it

    nothing = np.full(len(sheet), np.nan)
    needed = np.ones(len(sheet), dtype=bool) if needed is None else needed
    t_c = sheet.numbers.get("temperature_c", nothing)
    salinity = sheet.numbers.get("salinity", nothing)
    sheet.flag(np.isnan(t_c) & needed, column, None, f"no temperature, density at {DENSITY_T_C:g} °C used")
    sheet.flag(np.isnan(salinity) & needed, column, None, "no salinity, density of fresh water used")
    t_c = _within("temperature_c", np.where(np.isnan(t_c), DENSITY_T_C, t_c))
    salinity = _within("salinity", np.where(np.isnan(salinity), 0.0, salinity))
    return seawater_density(t_c, salinity) / 1e3


def _within(name: str, values: np.ndarray) -> np.ndarray:
    """Values inside the hard limits; rows outside are rejected anyway, and must not overflow."""
    q = find_quantity(name)
    return np.clip(values, q.low, q.high)


def _fill(sheet: Sheet, name: str, values: np.ndarray) -> None:
    kept = sheet.numbers.get(name)
    sheet.numbers[name] = values if kept is None else np.where(np.isnan(kept), values, kept)


def _from_raw_conductivity(sheet: Sheet) -> None:
    raw = sheet.numbers["conductivity_raw_us_cm"]
    t_c = sheet.numbers.get("temperature_c", np.full(len(sheet), np.nan))
    sheet.flag(
        np.isfinite(raw) & np.isnan(t_c), "conductivity_raw_us_cm", None, "no temperature, so no conductivity at 25 °C"
    )
    own = np.isfinite(sheet.numbers.get("conductivity_us_cm", np.full(len(sheet), np.nan)))
    _fill(sheet, "conductivity_us_cm", conductivity_25(raw, t_c))
    spread = sheet.numbers.get("conductivity_raw_u_us_cm")
    if spread is not None:
        _fill(sheet, "conductivity_u_us_cm", np.where(own, np.nan, conductivity_25(spread, t_c)))


def _from_calcium_hardness(sheet: Sheet) -> None:
    own = np.isfinite(sheet.numbers.get("calcium_mol_l", np.full(len(sheet), np.nan)))
    _fill(sheet, "calcium_mol_l", sheet.numbers["calcium_hardness_mol_l"])
    spread = sheet.numbers.get("calcium_hardness_u_mol_l")
    if spread is not None:
        _fill(sheet, "calcium_u_mol_l", np.where(own, np.nan, spread))


def derive(sheet: Sheet) -> None:
    """Fill conductivity at 25 °C and calcium where they are missing and can be derived; measured values stay."""
    if "conductivity_raw_us_cm" in sheet.numbers:
        _from_raw_conductivity(sheet)
    if "calcium_hardness_mol_l" in sheet.numbers:
        _from_calcium_hardness(sheet)
