"""Tables of a run: alkalinity.csv and findings.csv."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import LongRows, frame_of
from aquabuf.assess.titration.choose import Choice
from aquabuf.assess.titration.convert import converted
from aquabuf.assess.titration.findings import Finding, finding_facts
from aquabuf.assess.titration.options import ALWAYS_END_POINT, TitrationOptions, ph_digits
from aquabuf.assess.titration.parts import calculated_acidity, co2_acidity, partition_of, species
from aquabuf.assess.titration.solve import ACIDITY_END_POINTS, Estimate, Solved, text_of
from aquabuf.readings.titration.result import Titrations
from aquabuf.tables import read_table
from aquabuf.units import convert

__all__ = ["MICRO", "NO_RESULT", "REFUSED", "WARNED", "column_facts", "definition_of", "figures_of", "findings_table",
           "limit_words", "results_table", "titration_digits"]

Array = NDArray[np.float64]

MICRO = 1e6
PER_LITER, PER_KILOGRAM = {"eq": "ueq_l", "mol": "umol_l"}, {"eq": "umol_kg", "mol": "umol_kg"}
PER_SAMPLE = "µeq"  # in the table of findings: per liter, or per kilogram for samples by mass
REFUSED, NO_RESULT, WARNED, OK = "refused", "no result", "warned", "ok"


def column_facts(options: TitrationOptions, *, by_liter: bool = True, by_kilogram: bool = True,
                 ) -> Iterator[tuple[str, str, dict[str, str]]]:
    """Columns of alkalinity.csv in order: column name, key of its figures, and its row of the table of facts."""
    for row in read_table("titration_results"):
        ends = options.end_points if row["name"].startswith("fixed") else ACIDITY_END_POINTS
        keys = [row["name"].replace("*", ph_digits(e)) for e in ends] if "*" in row["name"] else [row["name"]]
        for key in keys:
            if "{" not in key:
                yield key, key, row
                continue
            for units, wanted in ((PER_LITER, by_liter), (PER_KILOGRAM, by_kilogram)):
                if wanted:
                    yield key.format(**units), key, row


def titration_digits(options: TitrationOptions) -> dict[str, int]:
    """Decimals of each column of alkalinity.csv."""
    return {name: int(row["digits"]) for name, _, row in column_facts(options) if row["digits"]}


def definition_of(s: Solved, choice: Choice) -> NDArray[np.object_]:
    """What the result of each titration is called."""
    filtered = text_of(s.samples, "filtered", s.curves.count.size)
    words = worded(filtered.size, (filtered == "yes", "alkalinity"), (filtered == "no", "ANC"),
                   (s.curves.is_base & (choice.method == ""), "acidity"), default="alkalinity or ANC")
    for name, end in (("fixed_4_5", np.full(words.size, ALWAYS_END_POINT)), ("fixed_level", s.level_ph)):
        for i in np.flatnonzero(choice.method == name).tolist():
            words[i] += f" to pH {end[i]:g}"
    return words


def _estimate(name: str, e: Estimate) -> dict[str, NDArray]:
    return {f"{name}_{{eq}}": e.value, f"{name}_u_{{eq}}": e.u}


def figures_of(s: Solved, choice: Choice, options: TitrationOptions) -> dict[str, NDArray]:
    """Every figure of alkalinity.csv by key; amounts still in equivalents or moles per unit of sample."""
    n, estimates = s.curves.count.size, s.estimates
    wanted = options.conversion != "none"
    out: dict[str, NDArray] = {
        "definition": definition_of(s, choice),
        "titrated_with": np.where(s.curves.is_base, "base", "acid").astype(object),
        "recommended_{eq}": choice.value, "recommended_u_{eq}": choice.u,
        "recommended_mg_l_caco3": _mg_l(s, choice.value), "recommended_u_mg_l_caco3": _mg_l(s, choice.u),
        "recommended_method": choice.method, "recommended_reason": choice.reason,
        "converted_{eq}": converted(s, options.conversion, choice.value),
        "converted_to": np.full(n, options.conversion if wanted else "", dtype=object),
    }
    for name in ("gran", "inflection", "two_point", "fit", "acid_excess", "fixed_level"):
        out |= _estimate(name, estimates[name])
    for name, (able, why) in choice.able.items():
        out[f"{name}_status"] = np.where(able, OK, why)
    out |= _gran(s) | _fit(s, options)
    out["inflection_resolution_{eq}"] = s.inflection.resolution
    for end in options.end_points:
        out |= _estimate(f"fixed_{ph_digits(end)}", estimates[f"fixed_{end:g}"])
    out["fixed_level_ph"] = np.where(np.isfinite(estimates["fixed_level"].value), s.level_ph, np.nan)
    out["acid_excess_offset_ph"] = s.excess.fit.offset_ph
    for end in ACIDITY_END_POINTS:
        out |= _estimate(f"acidity_{ph_digits(end)}", s.acidity[end])
    out |= _made_of(s, choice)
    return out | _conditions(s)


def _mg_l(s: Solved, per_unit: Array) -> Array:
    """Per unit of sample as mg/L of calcium carbonate."""
    per_liter = per_unit * np.where(s.curves.by_mass, s.curves.density_kg_l, 1.0)
    return convert(per_liter, "eq/L", "mg/L as CaCO3", "alkalinity")


def _gran(s: Solved) -> dict[str, NDArray]:
    g, lines, c = s.gran, s.gran_lines, s.curves
    rows = np.arange(c.count.size)
    has = g.first >= 0
    volume = g.acid / c.per_added

    def ph_at(index: NDArray) -> Array:
        return np.where(has, s.ph[rows, np.maximum(index, 0)], np.nan)
    return {
        "gran_volume_ml": np.where(c.added_mass, np.nan, volume), "gran_mass_g": np.where(c.added_mass, volume, np.nan),
        "gran_slope_ratio": g.slope_ratio, "gran_points": g.points, "gran_r": g.r, "gran_ph_first": ph_at(g.first),
        "gran_ph_last": ph_at(g.last), "gran_low_{eq}": g.low, "gran_high_{eq}": g.high, "gran_windows": g.count,
        "gran_carbonate_{eq}": lines.carbonate_second, "gran_third_{eq}": lines.carbonate_third,
        "gran_k1_ratio": lines.k1_ratio,
    }


def _fit(s: Solved, options: TitrationOptions) -> dict[str, NDArray]:
    f = s.fit
    nothing = np.full(s.curves.count.size, np.nan)
    return {
        "fit_dic_{mol}": f.fit.carbon, "fit_dic_u_{mol}": f.u_carbon, "fit_offset_ph": f.fit.offset_ph,
        "fit_offset_u_ph": f.u_offset, "fit_acid_{mol}": f.fit.acid_total if options.weak_acid else nothing,
        "fit_acid_pk": f.fit.acid_pk if options.weak_acid else nothing, "fit_chi2": f.fit.reduced_chi2,
        "fit_points": f.points,
    }


def _made_of(s: Solved, choice: Choice) -> dict[str, NDArray]:
    """Partition, speciation and acidity."""
    by_rule, holds = partition_of(s, choice.value)
    by_species = species(s, choice.value)
    metals = calculated_acidity(s.samples, s.ph[:, 0]) / np.where(s.curves.by_mass, s.curves.density_kg_l, 1.0)
    with np.errstate(invalid="ignore"):  # below pH 4.5 there is no alkalinity; above, an unknown one stays unknown
        alkalinity = np.where(s.ph[:, 0] < ALWAYS_END_POINT, 0.0, np.maximum(choice.value, 0.0))
    out: dict[str, NDArray] = {"partition_holds": holds, "co2_acidity_{mol}": co2_acidity(s),
                               "calculated_acidity_{eq}": metals,
                               "net_acidity_{eq}": metals - alkalinity}
    for part, rule, spec in zip(("hydroxide", "carbonate", "bicarbonate"), by_rule, by_species, strict=True):
        out[f"partition_{part}_{{eq}}"], out[f"species_{part}_{{eq}}"] = rule, spec
    return out


def _conditions(s: Solved) -> dict[str, NDArray]:
    c = s.curves
    lowest = np.where(np.isfinite(s.ph), s.ph, np.inf).min(axis=1, initial=np.inf)
    return {"points": c.count, "first_ph": s.ph[:, 0], "lowest_ph": np.where(np.isfinite(lowest), lowest, np.nan),
            "temperature_c": c.t_c, "salinity": c.salinity}


def results_table(t: Titrations, s: Solved, choice: Choice, found: Sequence[Finding], figures: Mapping[str, NDArray], *,
                  options: TitrationOptions, by_liter: bool, by_kilogram: bool) -> pd.DataFrame:
    """Table alkalinity.csv: one row per titration in input order; refused ones with their name and status alone."""
    n, at = len(t), np.flatnonzero(t.usable)
    warnings = warnings_of(found, at.size)
    has = np.isfinite(choice.value) | (s.curves.is_base & np.isfinite(
        np.stack([e.value for e in s.acidity.values()])).any(axis=0))
    status = np.full(n, REFUSED, dtype=object)
    status[at] = worded(at.size, (~has, NO_RESULT), (has & (warnings != ""), WARNED), default=OK)
    figures = {**figures, "warnings": warnings}
    columns: dict[str, Any] = {}
    for name, key, row in column_facts(options, by_liter=by_liter, by_kilogram=by_kilogram):
        if key == "status":
            columns[name] = status
        elif key in t.samples.columns and key in ("sample_id", "row", "site", "date"):
            columns[name] = t.samples[key].to_numpy()
        elif key == "recommended_reason":
            columns[name] = _spread(figures[key], at, n)
            _add_refusals(columns[name], t)
        elif key in figures:
            columns[name] = _spread(_scaled(figures[key], name, row["unit"], s.curves.by_mass), at, n)
        else:
            columns[name] = np.full(n, "", dtype=object)
    return frame_of(columns)


def _add_refusals(reason: NDArray[np.object_], t: Titrations) -> None:
    """Put the first reason of refusal of each refused titration where the others have theirs."""
    first = t.rejected.drop_duplicates("sample_id").set_index("sample_id")
    names = t.samples["sample_id"].to_numpy(dtype=object)
    for i in np.flatnonzero(~t.usable).tolist():
        if names[i] in first.index:
            line = first.loc[names[i]]
            reason[i] = f"refused ({line['file']}, row {line['row']}): {line['column']}: {line['rule']}"


def _scaled(v: NDArray, name: str, unit: str, by_mass: NDArray[np.bool_]) -> NDArray:
    """Amounts in micro-units, in the column of their kind of sample only."""
    if unit not in PER_LITER:
        return v
    wanted = by_mass if name.endswith("_kg") else ~by_mass
    return np.where(wanted, v * MICRO, np.nan)


def _spread(v: NDArray, at: NDArray[np.intp], n: int) -> Any:
    """Values of the usable titrations among all; blank for the others, and counts stay whole."""
    if v.dtype.kind in "iu":
        counts = pd.array([pd.NA] * n, dtype="Int64")
        counts[at] = v
        return counts
    text = v.dtype.kind in "OU"
    out = np.full(n, "" if text else np.nan, dtype=object if text else float)
    out[at] = v
    return out


def warnings_of(found: Sequence[Finding], n: int) -> NDArray[np.object_]:
    """Names of the findings of each titration, joined by semicolons."""
    out = np.full(n, "", dtype=object)
    for f in found:
        out[f.here] = np.where(out[f.here] == "", f.name, out[f.here] + f"; {f.name}")
    return out


def findings_table(s: Solved, found: Sequence[Finding], rows: NDArray) -> pd.DataFrame:
    """Table findings.csv: sample by sample, with value, limit, remedy and source of each finding."""
    facts = [finding_facts()[f.name] for f in found]
    long = LongRows([f.here for f in found])
    point = long.pick([f.point for f in found]).astype(np.intp) if found else np.zeros(0, dtype=np.intp)
    line = np.where(point >= 0, s.curves.row[long.sample, np.maximum(point, 0)], 0) if point.size else point
    more = long.pick([f.more for f in found]) if found else np.zeros(0, dtype=object)

    def fact(name: str) -> NDArray:
        return long.of_mask([row[name] for row in facts])
    words, unit = fact("words").astype(object), fact("unit").astype(object)
    per_sample = unit == PER_SAMPLE
    unit[per_sample] = np.where(s.curves.by_mass[long.sample[per_sample]], "µmol/kg", "µeq/L")
    return pd.DataFrame({
        "sample_id": s.curves.names[long.sample], "row": rows[long.sample],
        "point_row": pd.Series(np.where(line > 0, line, -1), dtype="Int64").mask(line <= 0),
        "finding": fact("name"), "value": long.pick([f.value for f in found]).astype(float), "unit": unit,
        "limit": long.of_mask([limit_words(row) for row in facts]), "words": words, "more": more,
        "remedy": fact("remedy"), "source": long.of_mask([_source(row) for row in facts]),
    })


def limit_words(row: Mapping[str, str]) -> str:
    """The limits of a finding in words; "" where it has none."""
    low, high = row["low"], row["high"]
    if low and high:
        return f"{low} to {high}"
    return f"at least {low}" if low else f"at most {high}" if high else ""


def _source(row: Mapping[str, str]) -> str:
    return row["source"] + (" (recalled)" if row["mark"] == "recalled" else "")
