"""Plan a titration: the volumes to expect, the steps to take, and whether strength and sample suit each other."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.sample.solve import believable
from aquabuf.assess.titration.assess import TitrationResult, assess_titrations
from aquabuf.assess.titration.endpoints import end_point_for
from aquabuf.assess.titration.options import ALWAYS_END_POINT, TitrationOptions
from aquabuf.chem.gases import AIR_CO2_PPM, pco2_of_air
from aquabuf.engine.titrate import mixed_ionic_strength, points_at, titration_curve
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.readings.titration.result import (
    COUNTS_PER_ML,
    TITRATION_FLAG_COLUMNS,
    TITRATION_REJECTED_COLUMNS,
    Titrations,
)
from aquabuf.units import convert

__all__ = ["STRENGTHS", "Plan", "Setup", "Verdict", "plan"]

Array = NDArray[np.float64]

# What a reading of the titrant should amount to at the end point; common practice, no source
DEVICES = {"burette": (1.0, 20.0, 0.01), "microburette": (0.1, 5.0, 0.001),
           "counts": (200.0 / COUNTS_PER_ML, 2000.0 / COUNTS_PER_ML, 1.0 / COUNTS_PER_ML)}
STRENGTHS = {"burette": (0.01, 0.02, 0.05, 0.1), "microburette": (0.01, 0.02, 0.05, 0.1, 0.5),
             "counts": (0.16, 1.6)}  # eq/L, as sold or usual; recalled
SAMPLE_ML = (25.0, 50.0, 100.0, 200.0)
MOST_DILUTION = 0.2
LEAST_JUDGED_EQ = 5e-5  # alkalinity below which titrant is counted as for this one; common practice, no source
COARSE_TO_PH, FINE_TO_PH, LAST_PH = 5.5, 4.3, 3.3
COARSE_STEPS, ACID_STEPS = 8, 8
FINE_STEP_PH = 0.3
DENSE = 4000


@dataclass(frozen=True, slots=True, kw_only=True)
class Setup:
    """What is expected and at hand; raises InputError for values that make no sense.

    alkalinity_eq_l : expected. strength_eq_l : of the acid. device : one of DEVICES; counts: digital titrator.
    ph : expected first pH; None takes water in equilibrium with air.
    """

    alkalinity_eq_l: float
    sample_ml: float = 100.0
    strength_eq_l: float = 0.02
    device: str = "burette"
    t_c: float = 20.0
    ph: float | None = None
    sulfuric: bool = False

    def __post_init__(self) -> None:
        if self.device not in DEVICES:
            raise InputError(f"the device must be one of {', '.join(DEVICES)}; found {self.device!r}.")
        for name, value, low, high, unit in (
            ("the expected alkalinity", self.alkalinity_eq_l, -0.01, 0.5, "eq/L"),
            ("the sample volume", self.sample_ml, 1.0, 5000.0, "mL"),
            ("the strength", self.strength_eq_l, 1e-4, 20.0, "eq/L"),
            ("the temperature", self.t_c, 0.0, 50.0, "°C"),
            ("the expected pH", 7.0 if self.ph is None else self.ph, 3.0, 12.0, ""),
        ):
            if not low <= value <= high:
                unit = f" {unit}" if unit else ""
                raise InputError(f"{name} must be {low:g} to {high:g}{unit}; found {value:g}. Check its unit.")


@dataclass(frozen=True, slots=True)
class Verdict:
    """Whether a strength and a sample volume suit: titrant to the end point [mL], share of titrant, reason in words."""

    setup: Setup
    end_ml: float
    dilution: float
    problem: str


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Plan:
    """What to expect and to do.

    carbon_mol_l, first_ph : of the water expected. end_ph : pH at the equivalence point in the closed vessel.
    volumes_ml : titrant to the equivalence point and to each pH named. level_ph : end point suited to the alkalinity.
    steps_ml : step to take down to COARSE_TO_PH, to FINE_TO_PH and to LAST_PH. table : added and pH of each step.
    result : that very titration assessed without noise, for the uncertainty to expect.
    """

    setup: Setup
    carbon_mol_l: float
    first_ph: float
    end_ph: float
    level_ph: float
    volumes_ml: dict[float | str, float]
    steps_ml: tuple[float, float, float]
    table: pd.DataFrame
    verdict: Verdict
    better: tuple[Verdict, ...]
    result: TitrationResult


def plan(setup: Setup) -> Plan:
    """Work out a titration of the water that `setup` expects."""
    carbon, first_ph = _water(setup)
    dense = np.linspace(0.0, _reach(setup), DENSE)
    ph = _curve(setup, carbon, dense)
    if not np.isfinite(ph).all():
        raise _no_water(setup)
    level = float(end_point_for(np.array(_mg(setup.alkalinity_eq_l))))
    at = {e: _volume_at(dense, ph, e) for e in dict.fromkeys((8.3, level, ALWAYS_END_POINT, 4.2, LAST_PH))}
    end = setup.alkalinity_eq_l * setup.sample_ml / setup.strength_eq_l
    steps = _steps(setup, dense, ph)
    table = _table(setup, carbon, steps, dense, ph)
    end_ph = float(np.interp(end, dense, ph)) if end >= 0.0 else float("nan")
    volumes: dict[float | str, float] = {"equivalence point": end}
    for end_point, ml in at.items():
        volumes[end_point] = ml
    return Plan(setup=setup, carbon_mol_l=carbon, first_ph=first_ph, end_ph=end_ph, level_ph=level,
                volumes_ml=volumes, steps_ml=steps, table=table, verdict=judge(setup),
                better=_better(setup), result=_assessed(setup, table))


def _mg(eq_l: float) -> float:
    return convert(eq_l, "eq/L", "mg/L as CaCO3", "alkalinity")


def _water(setup: Setup) -> tuple[float, float]:
    """Carbon and first pH of the water expected."""
    strength = max(abs(setup.alkalinity_eq_l) * 1.5, 1e-4)
    if setup.ph is None:
        air = pco2_of_air(AIR_CO2_PPM, setup.t_c, 1.0, 0.0)
        water = Water.from_alkalinity_pco2(alkalinity_eq_l=setup.alkalinity_eq_l, pco2_atm=air, t_c=setup.t_c,
                                           ionic_strength_mol_l=strength)
    else:
        water = Water.from_ph_alkalinity(ph=setup.ph, alkalinity_eq_l=setup.alkalinity_eq_l, t_c=setup.t_c,
                                         ionic_strength_mol_l=strength)
    if not believable(water):
        raise _no_water(setup)
    return float(water.dic_mol_l), float(water.ph)


def _no_water(setup: Setup) -> InputError:
    """That no water is like the one expected."""
    alkalinity = f"no water has an alkalinity of {setup.alkalinity_eq_l * 1e6:g} µeq/L"
    if setup.ph is None:
        return InputError(f"{alkalinity} in equilibrium with air. Correct the alkalinity or its unit.")
    return InputError(f"{alkalinity} at pH {setup.ph:g}. Leave the pH out, or correct one of them.")


def _reach(setup: Setup) -> float:
    """Titrant that brings the water below LAST_PH for sure. [mL]"""
    acid = 1.2 * max(setup.alkalinity_eq_l, 0.0) + 1.5e-3
    if setup.strength_eq_l <= 2.0 * acid:
        raise InputError(f"the strength must be well above the alkalinity, at least {2.0 * acid:.2g} eq/L here; found "
                         f"{setup.strength_eq_l:g}. Take stronger acid.")
    return setup.sample_ml * acid / (setup.strength_eq_l - acid)


def _curve(setup: Setup, carbon: float, added_ml: Array) -> Array:
    """pH after each addition, CO2 kept in."""
    added = added_ml[None, :]
    acid = setup.strength_eq_l * added / setup.sample_ml
    dilution = setup.sample_ml / (setup.sample_ml + added)
    alkalinity = np.array([setup.alkalinity_eq_l])
    strength = mixed_ionic_strength(np.maximum(np.abs(alkalinity) * 1.5, 1e-4)[:, None],
                                    np.array([[setup.strength_eq_l * (1.5 if setup.sulfuric else 1.0)]]), acid,
                                    alkalinity[:, None], dilution)
    points = points_at(acid, dilution, t_c=np.array([setup.t_c]), salinity=np.zeros(1), ionic_strength_mol_l=strength,
                       totals={}, by_mass=np.zeros(1, dtype=bool), sulfuric=np.array([setup.sulfuric]))
    return titration_curve(points, alkalinity, np.array([carbon]))[0]


def _volume_at(added_ml: Array, ph: Array, end_ph: float) -> float:
    """Titrant to a pH; nan where the water is below it already. [mL]"""
    return float(np.interp(-end_ph, -ph, added_ml)) if ph[0] >= end_ph else float("nan")


def _readable(step_ml: float, smallest_ml: float, *, down: bool) -> float:
    """The step as 1, 2, 3 or 5 times a power of ten of what the device can show: the nearest, or the next below."""
    shown = step_ml / smallest_ml
    if not shown > 1.0:
        return smallest_ml
    power = 10.0 ** np.floor(np.log10(shown))
    steps = np.array([1.0, 2.0, 3.0, 5.0, 10.0]) * power
    if down:
        return float(steps[steps <= shown * (1.0 + 1e-9)].max() * smallest_ml)
    return float(steps[np.abs(np.log(steps / shown)).argmin()] * smallest_ml)


def _steps(setup: Setup, added_ml: Array, ph: Array) -> tuple[float, float, float]:
    """Step in the buffered part, around the end point and past it. [mL]"""
    smallest = DEVICES[setup.device][2]

    def volume(end: float) -> float:
        v = _volume_at(added_ml, ph, end)
        return 0.0 if np.isnan(v) else v
    grid = np.arange(min(COARSE_TO_PH, ph[0]), FINE_TO_PH - 1e-9, -FINE_STEP_PH)
    between = np.diff([volume(e) for e in grid]) if grid.size > 1 else np.array([volume(FINE_TO_PH)])
    fine = float(between.min()) if between.size else smallest
    coarse = volume(COARSE_TO_PH) / COARSE_STEPS
    past = (volume(LAST_PH) - volume(FINE_TO_PH)) / ACID_STEPS
    step = _readable(fine, smallest, down=True)
    return max(_readable(coarse, smallest, down=False), step), step, _readable(past, smallest, down=False)


def _table(setup: Setup, carbon: float, steps: tuple[float, float, float], dense: Array, ph: Array) -> pd.DataFrame:
    """Every step down to LAST_PH, with the pH to expect."""
    added, now = [0.0], float(ph[0])
    while now > LAST_PH and len(added) < 200:
        step = steps[0 if now > COARSE_TO_PH else 1 if now > FINE_TO_PH else 2]
        if now > COARSE_TO_PH and float(np.interp(added[-1] + step, dense, ph)) < COARSE_TO_PH - FINE_STEP_PH:
            step = steps[1]
        added.append(added[-1] + step)
        now = float(np.interp(added[-1], dense, ph))
    values = np.round(np.array(added), 6)
    return pd.DataFrame({"titrant_ml": values, "titrant_counts": values * COUNTS_PER_ML,
                         "ph": _curve(setup, carbon, values)})


def judge(setup: Setup) -> Verdict:
    """Whether the strength and the sample volume of `setup` suit."""
    low, high, _ = DEVICES[setup.device]
    size = max(abs(setup.alkalinity_eq_l), LEAST_JUDGED_EQ) * setup.sample_ml
    end = size / setup.strength_eq_l
    dilution = end / (setup.sample_ml + end)
    problem = ""
    if end < low:
        problem = "too little titrant to the end point: its reading is too coarse"
    elif end > high:
        problem = "more titrant to the end point than the device holds well"
    elif dilution > MOST_DILUTION:
        problem = f"the titrant would thin the sample by {100.0 * dilution:.0f} %"
    return Verdict(setup, end, dilution, problem)


def _better(setup: Setup) -> tuple[Verdict, ...]:
    """Other strengths and sample volumes that suit, where this one does not."""
    if not judge(setup).problem:
        return ()
    tried = [judge(replace(setup, strength_eq_l=n, sample_ml=v)) for n in STRENGTHS[setup.device] for v in SAMPLE_ML]
    if setup.device == "burette":
        tried.insert(0, judge(replace(setup, device="microburette")))

    def nearness(v: Verdict) -> tuple[bool, bool, float, float]:
        same = v.setup.sample_ml == setup.sample_ml
        return not same, v.setup.device == setup.device, v.setup.strength_eq_l, -v.setup.sample_ml
    return tuple(sorted((v for v in tried if not v.problem), key=nearness))


def _assessed(setup: Setup, table: pd.DataFrame) -> TitrationResult:
    """The planned titration as if it had been done, to learn the uncertainty it would have."""
    n = len(table)
    samples = pd.DataFrame({"row": [2], "sample_id": ["plan"], "sample_volume_ml": [setup.sample_ml],
                            "titrant_strength_eq_l": [setup.strength_eq_l], "temperature_c": [setup.t_c],
                            "titrant_acid": ["sulfuric" if setup.sulfuric else "hydrochloric"]})
    by = np.array(["counts" if setup.device == "counts" else "volume"], dtype=object)
    return assess_titrations(Titrations(
        samples=samples, usable=np.ones(1, dtype=bool), start=np.array([0, n]), added=table["titrant_ml"].to_numpy(),
        reading=table["ph"].to_numpy(), minutes=np.full(n, np.nan), point_row=np.arange(2, n + 2), added_by=by,
        read_as=np.array(["ph"], dtype=object), rejected=pd.DataFrame(columns=list(TITRATION_REJECTED_COLUMNS)),
        notes=(), flags=pd.DataFrame(columns=list(TITRATION_FLAG_COLUMNS)), headers={}, acids={},
    ), TitrationOptions(), by_liter=True, by_kilogram=False)
