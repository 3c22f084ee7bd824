"""Choose the known pair of each sample and solve it."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import PH_COLUMNS, Array, Values, alkalinity_reading, reading, water_keywords
from aquabuf.chem.acids import Acid
from aquabuf.chem.gases import pco2_of_air
from aquabuf.engine.conditions import FRESH_BELOW
from aquabuf.engine.status import SOLVED
from aquabuf.engine.water import Water

__all__ = ["ALKALINITY_AIR", "MOST_PCO2_ATM", "NO_PAIR", "PAIRS", "PH_AIR", "air_pco2", "believable", "blocks",
           "choose", "groups", "has", "ph_columns", "take_rows", "water_of"]

NO_PAIR = -1
BLOCK_ROWS = 16_384
MOST_PCO2_ATM = 2.0  # more would leave any water at the surface as bubbles; common practice, no source
ALKALINITY_AIR, PH_AIR = "alkalinity and air", "pH and air"

# Order of preference, unless `closure` finds another pair better for a row: measured carbon where pH and alkalinity
# imply it badly, alkalinity with carbon in salt water where the two tell the pH better than the meter. Air stands in
# last: where asked for, or where pH and alkalinity of an acid water cannot tell its carbon.
PAIRS = ("pH and alkalinity", "pH and carbon", "alkalinity and carbon", "alkalinity and pCO2", "pH and pCO2",
         "carbon and pCO2", PH_AIR, ALKALINITY_AIR)
MEASURED_PAIRS = PAIRS[:6]
_MAKERS: dict[str, Callable[..., Water]] = {
    "pH and alkalinity": Water.from_ph_alkalinity, "pH and carbon": Water.from_ph_dic,
    "alkalinity and carbon": Water.from_alkalinity_dic, "alkalinity and pCO2": Water.from_alkalinity_pco2,
    "pH and pCO2": Water.from_ph_pco2, "carbon and pCO2": Water.from_dic_pco2,
}


def has(values: Values, rows: int) -> dict[str, NDArray[np.bool_]]:
    """Which of the four pair members each row has."""
    def there(*names: str) -> NDArray[np.bool_]:
        found = np.zeros(rows, dtype=bool)
        for name in names:
            if name in values:
                found |= np.isfinite(values[name])
        return found
    return {"pH": there(*PH_COLUMNS), "alkalinity": there("alkalinity_eq_l", "anc_eq_l"),
            "carbon": there("dic_mol_l"), "pCO2": there("pco2_atm")}


def choose(values: Values, rows: int, options: Options, *, preferred: NDArray[np.int8],
           carbon_unknown: NDArray[np.bool_]) -> Iterator[NDArray[np.int8]]:
    """Pair of each row by preference: first choice, second choice and so on; NO_PAIR where none is left.

    preferred : pair to try first in each row, or NO_PAIR.
    carbon_unknown : rows whose pH and alkalinity cannot tell the carbon, so that they are no pair.
    """
    there = has(values, rows)
    able = np.stack([np.logical_and(*(there[m] for m in pair.split(" and "))) for pair in MEASURED_PAIRS])
    stand_in = carbon_unknown & able[0]
    able[0] &= ~carbon_unknown
    for _ in MEASURED_PAIRS:
        choice = np.full(rows, NO_PAIR, dtype=np.int8)
        for index in reversed(range(len(MEASURED_PAIRS))):
            choice[able[index]] = index
        first = np.flatnonzero((preferred != NO_PAIR) & able[preferred, np.arange(rows)])
        choice[first] = preferred[first]
        found = np.flatnonzero(choice != NO_PAIR)
        if not found.size:
            break
        able[choice[found], found] = False
        yield choice
    yield np.where(stand_in, PAIRS.index(PH_AIR), NO_PAIR).astype(np.int8)
    if options.exchange == "open":
        yield np.where(there["alkalinity"], PAIRS.index(ALKALINITY_AIR), NO_PAIR).astype(np.int8)


def take_rows(values: Values, rows: NDArray) -> dict[str, Array]:
    """The same values for some of the rows."""
    return {name: v[rows] for name, v in values.items()}


def ph_columns(values: Values, rows: int) -> NDArray[np.str_]:
    """pH column that counts in each row: the meter's first in fresh water, last in salt water."""
    salt = np.nan_to_num(reading(values, "salinity")) >= FRESH_BELOW
    column = np.full(rows, "ph", dtype="U12")
    for which, order in ((~salt, ("ph", "ph_total", "ph_seawater", "ph_free")),
                         (salt, ("ph_total", "ph_seawater", "ph_free", "ph"))):
        for name in reversed(order):
            if name in values:
                column[which & np.isfinite(values[name])] = name
    return column


def groups(values: Values, choice: NDArray[np.int8]) -> Iterator[tuple[str, str, NDArray[np.intp]]]:
    """Rows that are solved alike, in blocks: pair, pH column and row numbers."""
    column = ph_columns(values, choice.size)
    for index, pair in enumerate(PAIRS):
        for name in PH_COLUMNS:
            for rows in blocks(np.flatnonzero((choice == index) & (column == name))):
                yield pair, name, rows


def blocks(rows: NDArray[np.intp]) -> Iterator[NDArray[np.intp]]:
    """Row numbers in blocks whose arrays stay in the processor's cache."""
    for start in range(0, rows.size, BLOCK_ROWS):
        yield rows[start:start + BLOCK_ROWS]


def believable(water: Water) -> NDArray[np.bool_]:
    """Rows that are solved and whose CO2 could stay in water at the surface."""
    with np.errstate(invalid="ignore"):
        return (water.status >= SOLVED) & (water.pco2_atm <= MOST_PCO2_ATM)


def water_of(values: Values, pair: str, ph_column: str, acids: tuple[Acid, ...], options: Options) -> Water:
    """Solve rows that share a pair. A pH read at another temperature is solved there and carried to the water's."""
    keywords = water_keywords(values, acids, options.carbonic)
    alkalinity = alkalinity_reading(values)
    if pair == ALKALINITY_AIR:
        return Water.from_alkalinity_pco2(alkalinity_eq_l=alkalinity, pco2_atm=air_pco2(keywords, options), **keywords)
    if pair == PH_AIR:
        values, pair = {**values, "pco2_atm": air_pco2(keywords, options)}, "pH and pCO2"
    known = {"alkalinity": ("alkalinity_eq_l", alkalinity), "carbon": ("dic_mol_l", values.get("dic_mol_l")),
             "pCO2": ("pco2_atm", values.get("pco2_atm")), "pH": ("ph", values.get(ph_column))}
    members = pair.split(" and ")
    given = dict(known[m] for m in members)
    if "pH" not in members:
        return _MAKERS[pair](**given, **keywords)
    t_ph = reading(values, "ph_temperature_c")
    t_water = keywords["t_c"]
    keywords["t_c"] = np.where(np.isfinite(t_ph), t_ph, t_water)
    water = _MAKERS[pair](**given, ph_scale=PH_COLUMNS[ph_column], **keywords)
    return water.at_temperature(t_water) if np.any(keywords["t_c"] != t_water) else water


def air_pco2(keywords: dict, options: Options) -> Array:
    """CO2 pressure of air over each row. [atm]"""
    return pco2_of_air(options.air_co2_ppm, keywords["t_c"], keywords["pressure_atm"], keywords["salinity"])
