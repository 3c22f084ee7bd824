"""CO2 of lakes: what goes to the air, an independent figure of its pressure, and whether a pressure can be stated."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import as_rows, common_shape, exp10
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.quality import check_facts
from aquabuf.tables import read_table

__all__ = ["NEAL_AIR_ATM", "Stateable", "co2_tests", "flux_mol_m2_d", "neal_excess_simple", "neal_excess_temperature",
           "neal_left_out_share", "stateable", "supersaturation"]

Array = NDArray[np.float64]

L_PER_M3 = 1e3
MICRO = 1e6
MOST_SHOWN = 1000.0  # a larger value of a failed test is not told to the digit

# Air that the constants of Neal, House & Down hold: K1 K0 p of fresh water at zero ionic strength is their denominator
# within 2 % from 0 to 25 °C. "Times air" means this pressure, not the one of today.
NEAL_AIR_ATM = 10.0**-3.5


def flux_mol_m2_d(pco2_atm: ArrayLike, air_pco2_atm: ArrayLike, k0_mol_l_atm: ArrayLike, k_m_d: ArrayLike) -> Array:
    """CO2 that the lake gives to the air; negative: it takes CO2 up. [mol/m2/d]

    k K0 (pCO2 - pCO2 of air), the film model; without chemical enhancement, which matters above about pH 8 in calm air.
    """
    excess = np.asarray(pco2_atm, dtype=float) - np.asarray(air_pco2_atm, dtype=float)
    return np.asarray(k_m_d, dtype=float) * L_PER_M3 * np.asarray(k0_mol_l_atm, dtype=float) * excess


def supersaturation(pco2_atm: ArrayLike, air_pco2_atm: ArrayLike) -> Array:
    """CO2 pressure over that of air: above 1 the lake gives CO2 off. nan where that of air is not positive. [-]"""
    air = np.asarray(air_pco2_atm, dtype=float)
    return np.asarray(pco2_atm, dtype=float) / np.where(air > 0.0, air, np.nan)


def neal_excess_simple(gran_eq_l: ArrayLike, ph: ArrayLike) -> Array:
    """CO2 pressure times that of air (`NEAL_AIR_ATM`) by Gran alkalinity and pH alone. [-]

    (Alk + 10^(6-pH)) 10^(6-pH) / 6.0, Alk in µeq/L. Source: Neal, House & Down 1998, Sci. Total Environ. 210/211:173,
    abstract. Exact at about 7 °C; 8 % high at 0 °C and 15 % low at 20 °C. For dilute water without many organic anions,
    where `neal_left_out_share` is small (pH below about 8). nan where pH and alkalinity leave no bicarbonate.
    """
    return _bicarbonate_times_acid(gran_eq_l, ph, 1.0) / 6.0


def neal_excess_temperature(gran_eq_l: ArrayLike, ph: ArrayLike, t_c: ArrayLike) -> Array:
    """CO2 pressure times that of air (`NEAL_AIR_ATM`) by Gran alkalinity, pH and temperature, 0 to 25 °C. [-]

    (0.95 Alk + 10^(6-pH)) 10^(6-pH) / (6.46 - 0.0636 t), Alk in µeq/L; 0.95 is an activity coefficient that suits an
    ionic strength of about 0.0024 mol/L. Source, waters and nan: as `neal_excess_simple`.
    """
    return _bicarbonate_times_acid(gran_eq_l, ph, 0.95) / (6.46 - 0.0636 * np.asarray(t_c, dtype=float))


def _bicarbonate_times_acid(gran_eq_l: ArrayLike, ph: ArrayLike, activity: float) -> Array:
    acid = exp10(6.0 - np.asarray(ph, dtype=float))
    bicarbonate = activity * MICRO * np.asarray(gran_eq_l, dtype=float) + acid
    return np.where(bicarbonate > 0.0, bicarbonate, np.nan) * acid


def neal_left_out_share(gran_eq_l: ArrayLike, ph: ArrayLike, t_c: ArrayLike) -> Array:
    """Carbonate and hydroxide, which both forms of Neal et al. leave out, over the bicarbonate they count. [-]

    With the constants of that source: pKw = -6.0843 + 4471.33/T + 0.017053 T, pK2 = -6.498 + 2902.39/T + 0.02379 T,
    T = 273 + t. Their excess is too high by about this share.
    """
    t = 273.0 + np.asarray(t_c, dtype=float)
    inverse_h = exp10(np.asarray(ph, dtype=float))
    hydroxide = exp10(-(-6.0843 + 4471.33 / t + 0.017053 * t)) * inverse_h
    carbonate_per_bicarbonate = exp10(-(-6.498 + 2902.39 / t + 0.02379 * t)) * inverse_h
    bicarbonate = np.asarray(gran_eq_l, dtype=float) + 1.0 / inverse_h
    return hydroxide / np.where(bicarbonate > 0.0, bicarbonate, np.nan) + 2.0 * carbonate_per_bicarbonate


@cache
def co2_tests() -> tuple[Limit, ...]:
    """The tests that a CO2 pressure must pass, in the order in which they are asked.

    A row of the table that names a check has its limit, unit, mark and source from there.
    """
    return tuple(_test(row) for row in read_table("co2_tests"))


def _test(row: Mapping[str, str]) -> Limit:
    fact = check_facts()[row["check"]] if row["check"] else row
    limit = fact["limit"] if fact is row else fact["high"] or fact["low"]
    return Limit(name=row["name"], group=row["name"], quantity=row["quantity"], operator=row["operator"],
                 limit=float(limit), lower=-np.inf, unit=fact["unit"], kinds=("any",), regimes=("any",),
                 words=row["words"], next_step=row["remedy"],
                 source=f"{fact['source']}{' (recalled)' if fact['mark'] == 'recalled' else ''}")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Stateable:
    """Whether each CO2 pressure can be stated.

    mask : true where it can. words : why not and what to do; "" where it can, and where there is no pressure at all.
    test : name of the test that it failed, a row of co2_tests.csv; value : what that test looked at, in its unit.
    """

    mask: NDArray[np.bool_]
    words: NDArray[np.object_]
    test: NDArray[np.object_]
    value: Array


def stateable(pco2_atm: ArrayLike, *, of_titration: ArrayLike, ph: ArrayLike, carbonate_eq_l: ArrayLike,
              organic_eq_l: ArrayLike, low_atm: ArrayLike = np.nan, high_atm: ArrayLike = np.nan,
              tests: Sequence[Limit] | None = None) -> Stateable:
    """Whether CO2 pressures are worth stating; the first of `tests` (those shipped if not given) that fails is told.

    of_titration : whether the pressure rests on pH and a titrated ANC. Measured carbon or CO2 passes all tests but the
    one of the interval, since organic anions do not touch it.
    carbonate_eq_l : carbonate alkalinity at `ph`. organic_eq_l : charge of the organic anions that the titration
    counts, nan where organic carbon is not known. low_atm, high_atm : ends of the 90 % interval, nan where there is
    none. A test whose readings are missing is passed.
    """
    pressure = np.asarray(pco2_atm, dtype=float)
    shape = common_shape(pressure, of_titration, ph, carbonate_eq_l, organic_eq_l, low_atm, high_atm)
    quantities = _quantities(np.asarray(of_titration, dtype=bool), *(
        np.asarray(v, dtype=float) for v in (pressure, ph, carbonate_eq_l, organic_eq_l, low_atm, high_atm)))
    words, test = np.full(shape, "", dtype=object), np.full(shape, "", dtype=object)
    value, passed = np.full(shape, np.nan), np.broadcast_to(np.isfinite(pressure), shape).copy()
    for one in co2_tests() if tests is None else tests:
        found = as_rows(quantities[one.quantity], shape)
        fails = passed & one.met(found)
        words[fails], test[fails], value[fails] = _words(one, found[fails]), one.name, found[fails]
        passed &= ~fails
    return Stateable(mask=passed, words=words, test=test, value=value)


def _quantities(of_titration: NDArray[np.bool_], pressure: Array, ph: Array, carbonate: Array, organic: Array,
                low: Array, high: Array,
                ) -> dict[str, Array]:
    """What the tests ask for, by the names in their table; nan where a test does not apply."""
    some, bounded, no_interval = carbonate > 0.0, low > 0.0, np.isnan(low) | np.isnan(high)
    with np.errstate(over="ignore"):  # next to no carbonate: all of it is organic
        share = 100.0 * organic / np.where(some, carbonate, 1.0)
    ratio = np.where(bounded, high / np.where(bounded, low, 1.0), np.inf)
    return {
        "carbonate_ueq_l": np.where(of_titration, MICRO * carbonate, np.nan),
        "organic_share_percent": np.where(of_titration & some, share, np.nan),
        "ph": np.where(of_titration & np.isnan(organic), ph, np.nan),
        "interval_ratio": np.where(no_interval, np.nan, ratio),
        "pco2_uatm": np.where(of_titration, MICRO * pressure, np.nan),
    }


def _words(test: Limit, values: Array) -> NDArray[np.object_]:
    """Why and what to do, row by row; each distinct value is worded once."""
    distinct, which = np.unique(values, return_inverse=True)
    worded = [f"not stated: {test.words.format(value=_shown(v), limit=f'{test.limit:g}')}; {test.next_step}"
              for v in distinct.tolist()]
    return np.array(worded, dtype=object)[which]


def _shown(value: float) -> str:
    if value > MOST_SHOWN:
        return f"more than {MOST_SHOWN:g}"
    return f"{value:.0f}" if value >= 100.0 else f"{value:.3g}"
