"""Quality checks of each sample. A check that cannot be made (a reading is missing) is not listed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import LongRows, frame_of
from aquabuf.assess.ionsums import conductivity_of_ions, most_conductivity_percent, most_imbalance_percent
from aquabuf.assess.options import ALWAYS_ACID
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.sample.inputs import MAJOR_IONS, Array, Values, reading
from aquabuf.assess.sample.leftout import ALUMINUM_ACTS_BELOW, demand, titrated_organic
from aquabuf.assess.sample.solve import PH_AIR
from aquabuf.chem.acids import acid_table
from aquabuf.readings.schema import Schema, quantities
from aquabuf.tables import read_table
from aquabuf.units import substances, to_house

__all__ = ["Check", "Rounding", "allowed", "check_facts", "check_rows", "counted", "failed", "file_check_rows",
           "fixed_check", "outside_usual", "roundings", "sample_checks"]

WHOLE_MIN_ROWS, WHOLE_SHARE = 10, 90.0  # common practice, no source
ROUNDING_SD = 1.0 / np.sqrt(12.0)   # of a unit: standard deviation of an even spread
ALL_ROWS = "(all rows)"
ROUNDED_COLUMNS = ("ph", "temperature_c", "alkalinity_eq_l", "anc_eq_l", "conductivity_us_cm", "dic_mol_l")


@dataclass(frozen=True, slots=True, eq=False)
class Check:
    """One check over all samples: value and lowest and highest allowed; nan value where it cannot be made."""

    name: str
    value: Array
    low: Array | float
    high: Array | float
    detail: NDArray | None = None

    @property
    def met(self) -> NDArray[np.bool_]:
        """True where the value lies within its limits."""
        with np.errstate(invalid="ignore"):
            return (self.value >= self.low) & (self.value <= self.high)


def check_facts() -> dict[str, dict[str, str]]:
    """Rows of the shipped tables of checks by name, those of samples first."""
    return {r["name"]: r for table in ("checks", "lake_checks") for r in read_table(table)}


def allowed(fact: Mapping[str, str]) -> str:
    """What a check allows, in words: its own where the limit varies, else built from the limits of the table."""
    low, high = float(fact["low"] or "-inf"), float(fact["high"] or "inf")
    if not (fact["low"] or fact["high"]):
        return fact["limit_words"]
    return f"{fact['limit_words']}: {_limit_words(np.array([low]), np.array([high]))[0]} {fact['unit']}"


def fixed_check(name: str, value: Array, detail: NDArray | None = None) -> Check:
    """A check whose limits are the same for all samples, as the table has them."""
    fact = check_facts()[name]
    return Check(name, value, float(fact["low"] or "-inf"), float(fact["high"] or "inf"), detail)


def sample_checks(values: Values, figures: Mapping[str, NDArray], pair: NDArray, carbonate_gap: Array,
                  carbonate_gap_u: Array) -> list[Check]:
    """All checks of the solved samples.

    `figures` are columns of results.csv; `carbonate_gap` is the carbonate alkalinity that pH and alkalinity leave
    [eq/L], with its standard uncertainty (nan without both readings).
    """
    rows = pair.size

    def get(name: str) -> Array:
        return reading(values, name)

    cations, anions, complete = _charges(values, figures, rows)
    total = (cations + anions) * 1e6
    some = complete & (total > 0.0)
    imbalance = 100.0 * (anions - cations) / np.where(some, anions + cations, np.nan)
    most = most_imbalance_percent(total)
    measured = get("conductivity_us_cm")
    computed = np.where(complete, _conductivity(values, figures), np.nan)
    spread = most_conductivity_percent(measured)
    hardness = _percent_off(get("calcium_mol_l") + get("magnesium_mol_l"), get("total_hardness_mol_l"), 1e-9)
    unstated_salinity = np.where(np.isnan(get("salinity")), measured, np.nan)
    outside, names = outside_usual(values, rows)
    conductivity_off = _percent_off(computed, measured, 0.01)
    return [
        Check("ion balance", imbalance, -most, most),
        Check("conductivity", conductivity_off, -spread, spread),
        Check("pH against alkalinity", carbonate_gap * 1e3, -2e3 * carbonate_gap_u, np.inf),
        _over_determined(figures, rows),
        *_brown(values, figures, pair),
        fixed_check("CO2 pressure", figures["pco2_uatm"]),
        fixed_check("temperature", get("temperature_c")),
        fixed_check("salinity", unstated_salinity),
        fixed_check("hardness", hardness),
        fixed_check("holding time", get("holding_days")),
        fixed_check("usual ranges", outside, names),
        fixed_check("draws", 100.0 * figures["draws_solved"]),
    ]


def _percent_off(value: Array, reference: Array, least: float) -> Array:
    """How far a value is from its reference [%]; nan where the reference is not more than `least`."""
    with np.errstate(invalid="ignore"):
        usable = reference > least
    return 100.0 * (value / np.where(usable, reference, np.nan) - 1.0)


def _charges(values: Values, figures: Mapping[str, NDArray], rows: int) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Cations and anions [eq/L] with those of the solution, and whether all major ions were measured.

    Weak acids count with the charge they have at the pH; aluminum counts where it is dissolved as Al+++.
    """
    plus, minus = np.zeros(rows), np.zeros(rows)
    for name, ion in substances().items():
        given = values.get(f"{name.replace(' ', '_')}_mol_l")
        if given is not None and ion.charge and name not in acid_table():
            side = plus if ion.charge > 0 else minus
            amount = np.nan_to_num(given)
            if name == "aluminum":
                amount = np.where(figures["ph"] < ALUMINUM_ACTS_BELOW, amount, 0.0)
            side += abs(ion.charge) * amount
    plus += 1e-3 * (figures["hydrogen_meq_l"] + figures["weak_cations_meq_l"])
    minus += 1e-3 * (figures["bicarbonate_mmol_l"] + 2.0 * figures["carbonate_mmol_l"] + figures["hydroxide_meq_l"]
                     + figures["weak_anions_meq_l"])
    complete = np.ones(rows, dtype=bool)
    for name in MAJOR_IONS:
        complete &= np.isfinite(reading(values, f"{name}_mol_l"))
    return plus, minus, complete


def _conductivity(values: Values, figures: Mapping[str, NDArray]) -> Array:
    """Conductivity at 25 °C from the ions. [µS/cm]"""
    solved = {"bicarbonate": "bicarbonate_mmol_l", "carbonate": "carbonate_mmol_l", "hydrogen": "hydrogen_meq_l",
              "hydroxide": "hydroxide_meq_l"}
    charges = {}
    for name, ion in substances().items():
        given = 1e-3 * figures[solved[name]] if name in solved else values.get(f"{name.replace(' ', '_')}_mol_l")
        if given is not None and ion.charge:
            charges[name] = abs(ion.charge) * given
    return conductivity_of_ions(charges, figures["ionic_strength_mol_l"])


def _over_determined(figures: Mapping[str, NDArray], rows: int) -> Check:
    """Titrated alkalinity against the one that pH and carbon give, where all three were measured."""
    missing = np.full(rows, np.nan)
    gap, gap_u = figures.get("closure_meq_l", missing), figures.get("closure_u_meq_l", missing)
    return Check("alkalinity against pH and carbon", gap, -2.0 * gap_u, 2.0 * gap_u)


def _brown(values: Values, figures: Mapping[str, NDArray], pair: NDArray) -> list[Check]:
    """Whether organic acids and aluminum spoil the CO2 pressure, or the tolerance, of a brown or acid water."""
    doc = reading(values, "doc_mg_l")
    rests_on_both = (pair == "pH and alkalinity") | (pair == PH_AIR)
    carbonate = 1e-3 * (figures["bicarbonate_mmol_l"] + 2.0 * figures["carbonate_mmol_l"])
    organic = titrated_organic(values, figures["ph"]) / np.maximum(carbonate, 1e-9)
    no_doc = np.where(rests_on_both & np.isnan(doc), figures["ph"], np.nan)
    asked = np.maximum(np.abs(figures[RANK_BY]) * 1e-3, 1e-9)
    share = demand(values, figures["ph"], ALWAYS_ACID) / asked
    any_known = np.isfinite(doc) | np.isfinite(reading(values, "aluminum_mol_l"))
    organic = np.where(rests_on_both & np.isfinite(doc), organic, np.nan)
    return [fixed_check("CO2 in brown acid water", 100.0 * organic),
            fixed_check("CO2 in acid water", no_doc),
            fixed_check("acids not counted", np.where(any_known, 100.0 * share, np.nan))]


def outside_usual(values: Mapping[str, NDArray], rows: int, schema: Schema | None = None) -> tuple[Array, NDArray]:
    """How many readings lie outside the soft limits of the column table (of readings if none is given), and which."""
    count, names = np.zeros(rows), np.full(rows, "", dtype=object)
    for name, quantity in (schema or quantities()).items():
        if name in values and quantity.is_number:
            with np.errstate(invalid="ignore"):
                hit = (values[name] < quantity.soft_low) | (values[name] > quantity.soft_high)
            count += hit
            names[hit] = np.where(names[hit] == "", name, names[hit] + ", " + name)
    return count, names


def failed(checks: list[Check], rows: int) -> NDArray[np.object_]:
    """Names of the checks that each sample fails, joined by semicolons."""
    out = np.full(rows, "", dtype=object)
    for check in checks:
        hit = np.isfinite(check.value) & ~check.met
        out[hit] = np.where(out[hit] == "", check.name, out[hit] + "; " + check.name)
    return out


def counted(checks: list[Check], *, only_unmet: bool = False) -> dict[str, int]:
    """Number of samples that each check could be made for, or those that broke it."""
    out: dict[str, int] = {}
    for check in checks:
        hit = np.isfinite(check.value) & ~(check.met & only_unmet)
        out[check.name] = out.get(check.name, 0) + int(hit.sum())
    return out


def check_rows(checks: list[Check], frame: pd.DataFrame, *, only_unmet: bool) -> pd.DataFrame:
    """The checks as a long table, sample by sample; `frame` has `row` and `sample_id`."""
    facts = check_facts()
    n = len(frame)
    met = [c.met for c in checks]
    rows = LongRows([np.isfinite(c.value) & ~(m & only_unmet) for c, m in zip(checks, met, strict=True)])
    low, high = (rows.pick([np.broadcast_to(getattr(c, end), n) for c in checks]) for end in ("low", "high"))
    ok = rows.pick(met).astype(bool)

    def of_check(field: str) -> NDArray[np.object_]:
        return rows.of_mask([facts[c.name][field] for c in checks])

    remedy = of_check("remedy")
    remedy[ok] = ""
    for j, check in enumerate(checks):
        if check.detail is not None:
            at = (rows.which == j) & ~ok
            remedy[at] = remedy[at] + ": " + check.detail[rows.sample[at]]
    return frame_of({
        "row": frame["row"].to_numpy()[rows.sample],
        "sample_id": frame["sample_id"].to_numpy(dtype=object)[rows.sample],
        "check": of_check("name"), "value": rows.pick([c.value for c in checks]),
        "limit": np.array(_limit_words(low, high), dtype=object), "unit": of_check("unit"),
        "met": worded(ok.size, (ok, "yes"), default="no"), "remedy": remedy, "source": of_check("source")})


def _limit_words(low: Array, high: Array) -> list[str]:
    """The limits in words; each distinct pair is worded once."""
    @cache
    def one(a: float, b: float) -> str:
        if a == -np.inf:
            return f"at most {b:.5g}"
        return f"at least {a:.5g}" if b == np.inf else f"{a:.5g} to {b:.5g}"
    return [one(a, b) for a, b in zip(low.tolist(), high.tolist(), strict=True)]


@dataclass(frozen=True, slots=True)
class Rounding:
    """Readings of one column: how many, how many are whole numbers in the file's unit, and what rounding costs.

    error : standard uncertainty of rounding to whole numbers; stated : sum of the readings' own. House unit.
    """

    size: int
    whole: int
    error: float
    stated: float

    def plus(self, other: Rounding) -> Rounding:
        """Both pieces of a column together."""
        return Rounding(self.size + other.size, self.whole + other.whole, self.error, self.stated + other.stated)

    @property
    def hurts(self) -> bool:
        """Whether nearly all readings are whole numbers and rounding outweighs their mean stated uncertainty."""
        return 100.0 * self.whole >= WHOLE_SHARE * self.size and self.error * self.size > self.stated


def roundings(values: Values, u: Values, headers: Mapping[str, tuple[str, str]]) -> dict[str, Rounding]:
    """Rounding of the columns where it can hide the truth, in the unit each has in the file."""
    out = {}
    for name, unit in headers.values():
        if name in ROUNDED_COLUMNS and name in values:
            quantity, given = quantities()[name], np.isfinite(values[name])
            in_file = to_house(values[name][given], unit, quantity.dimension, quantity.substance, 1.0, back=True)
            one = abs(float(to_house(1.0, unit, quantity.dimension, quantity.substance, 1.0)
                            - to_house(0.0, unit, quantity.dimension, quantity.substance, 1.0)))
            whole = np.abs(in_file - np.round(in_file)) < 1e-6 * np.maximum(np.abs(in_file), 1.0)
            out[name] = Rounding(in_file.size, int(whole.sum()), ROUNDING_SD * one, float(u[name][given].sum()))
    return out


def file_check_rows(rounding: Mapping[str, Rounding], duplicates: int) -> pd.DataFrame:
    """Checks of a table as a whole, in the columns of `check_rows`; they belong to no row."""
    found = [("duplicate names", float(duplicates), "0", duplicates == 0, "")]
    found += [("whole numbers", 100.0 * r.whole / r.size, f"below {WHOLE_SHARE:g} in {name}, or rounding within its u",
               not r.hurts, f": {name}") for name, r in rounding.items() if r.size >= WHOLE_MIN_ROWS]
    facts = check_facts()
    return pd.DataFrame([{
        "row": "", "sample_id": ALL_ROWS, "check": check, "value": value, "limit": limit, "unit": facts[check]["unit"],
        "met": "yes" if met else "no", "remedy": "" if met else facts[check]["remedy"] + detail,
        "source": facts[check]["source"]} for check, value, limit, met, detail in found])
