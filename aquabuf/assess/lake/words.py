"""What stands beside the numbers of each lake in words: what is missing and what brings it, what explains a gap."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.lake.answers import ANC_KINDS, Answers, Plan
from aquabuf.assess.lake.budget import NEEDED
from aquabuf.assess.lake.chemistry import CARBON_SOURCES
from aquabuf.assess.lake.inputs import Lakes

__all__ = ["anc_used_words", "carbon_words", "charge_form_words", "gap_words", "left_out_words"]

Array = NDArray[np.float64]
Words = NDArray[np.object_]

TITRATED = ("anc", "alkalinity")


@dataclass(frozen=True, slots=True)
class _Answer:
    """A result, what it is called, and the readings it needs: of each tuple any one serves.

    ways : tuples that serve only as a whole, any one of them.
    """

    column: str
    label: str
    needs: tuple[tuple[str, ...], ...] = ()
    ways: tuple[tuple[str, ...], ...] = ()

    def lacking(self, there: Mapping[str, bool]) -> str:
        """Readings to give, in words."""
        needs = [" or ".join(need) for need in self.needs if not any(there[name] for name in need)]
        ways = [" and ".join(name for name in way if not there[name]) for way in self.ways]
        return ", ".join(needs + [" or ".join(way for way in ways if way)] * bool(ways))

    def readings(self) -> tuple[str, ...]:
        """Those it depends on, each once."""
        return tuple(dict.fromkeys(name for group in (*self.needs, *self.ways) for name in group))


_ION_NEEDS = tuple((ion,) for ion in NEEDED)
_RESIDENCE = tuple(("residence_time", other) for other in ("lake_volume", "runoff", "watershed_area"))
_ANSWERS = (
    _Answer("anc_used_ueq_l", "class", (("anc", "alkalinity", "all major ions"),)),
    _Answer("anc_charge_ueq_l", "charge-balance ANC", _ION_NEEDS),
    _Answer("organic_anion_ueq_l", "organic anions", (("doc",), ("ph",))),
    _Answer("acid_to_ph_6_0_ueq_l", "closed tolerance", (("ph",), ("temperature",), (*TITRATED, "dic"))),
    _Answer("ph_at_air", "pH at air", (("temperature",), (*TITRATED, "all major ions"))),
    _Answer("critical_load_meq_m2_yr", "critical load", (("runoff",), *_ION_NEEDS)),
    _Answer("exceedance_meq_m2_yr", "exceedance", (("sulfur_deposition",),)),
    _Answer("lake_volume_m3", "the whole lake's figures", ways=(
        ("lake_volume",), ("mean_depth", "lake_area"), ("residence_time", "runoff", "watershed_area"))),
    _Answer("years_to_anc_limit", "years", (("sulfur_deposition",), *_RESIDENCE)),
    _Answer("episode_anc_ueq_l", "episode", (
        ("precipitation",), ("hydrogen_deposition", "sulfur_deposition"), ("hydrogen_deposition", "nitrate_deposition"),
        ("hydrogen_deposition", "ammonium_deposition"))),
    _Answer("gas_transfer_m_d", "CO2 flux", (("wind_speed",),)),
    _Answer("reacidify_yr", "re-acidification", _RESIDENCE),
)
BASES = {
    "anc": "anc_eq_l", "alkalinity": "alkalinity_eq_l", "ph": "ph", "dic": "dic_mol_l", "temperature": "temperature_c",
    "doc": "doc_mg_l", "runoff": "runoff_m_yr", "lake_volume": "lake_volume_m3", "mean_depth": "mean_depth_m",
    "residence_time": "residence_time_yr", "watershed_area": "watershed_area_m2", "wind_speed": "wind_speed_m_s",
    "precipitation": "precipitation_m_yr", "sulfur_deposition": "sulfur_deposition_eq_m2_yr",
    "nitrate_deposition": "nitrate_deposition_eq_m2_yr", "ammonium_deposition": "ammonium_deposition_eq_m2_yr",
    "hydrogen_deposition": "hydrogen_deposition_eq_m2_yr", "lake_area": "lake_area_m2",
    **{ion: f"{ion}_mol_l" for ion in NEEDED},
}


def left_out_words(lakes: Lakes, columns: Mapping[str, NDArray], usable_titration: NDArray[np.bool_], *,
                   with_event: bool) -> Words:
    """For each lake the answers that could not be worked out, each with the columns of readings that would bring it."""
    there = {name: np.isfinite(lakes.get(column))[:, 0] for name, column in BASES.items()}
    for name in TITRATED:  # one to a fixed end point, or worked out from ions, is none
        there[name] &= usable_titration
    there["all major ions"] = np.logical_and.reduce([there[ion] for ion in NEEDED])
    there["lake_volume"] = np.isfinite(columns["lake_volume_m3"].astype(float))  # of depth and area serves as well
    out = np.full(next(iter(there.values())).size, "", dtype=object)
    for answer in _ANSWERS:
        if answer.column.startswith("episode") and with_event:
            continue
        gone = np.isnan(columns[answer.column].astype(float))
        if answer.column == "reacidify_yr":  # blank too where the lake stays above the limit
            gone &= columns["lime_dose_ueq_l"].astype(float) > 0.0
        readings = answer.readings()
        given = np.stack([there[name] for name in readings], axis=1)
        for pattern in np.unique(given[gone], axis=0):
            words = answer.lacking(dict(zip(readings, pattern, strict=True)))
            if words:
                hit = gone & (given == pattern).all(axis=1)
                out[hit] += np.where(out[hit] == "", "", "; ") + f"{answer.label} (give {words})"
    return out


def anc_used_words(plan: Plan, method: Words) -> Words:
    """Which ANC each lake's answers rest on, with its method where it was stated."""
    out = worded(plan.used.size, *((plan.used == k, name) for k, name in enumerate(ANC_KINDS)))
    stated = (plan.used == 0) & (method != "") & (method != "gran")
    out[stated] = "titrated ANC (" + method[stated] + ")"
    out[(plan.used <= 1) & (method == "")] += " (method unstated)"
    return out


def charge_form_words(answers: Answers, computed: NDArray[np.bool_]) -> Words:
    """Whether the charge-balance ANC counts ammonium."""
    b = answers.budget
    known = np.isfinite(b.charge)[:, 0]
    return worded(known.size, (known, "without ammonium"), (known & b.with_ammonium[:, 0], "with ammonium"),
                  (known & computed & np.isnan(b.charge_bare)[:, 0], "as given"))


def carbon_words(plan: Plan, ph_kind: Words, doc_mg_l: Array) -> Words:
    """What the carbon of each lake rests on."""
    out = worded(plan.sources[1].size, *((plan.sources[1] == k, name) for k, name in enumerate(CARBON_SOURCES)))
    of_anc = plan.sources[1] == CARBON_SOURCES.index("pH and ANC")
    out[of_anc & (ph_kind == "open_bottle")] += "; pH of an open bottle, which has lost CO2: too low"
    out[of_anc & np.isnan(doc_mg_l)] += "; organic carbon not given: too high where the water is brown"
    return out


def gap_words(columns: Mapping[str, NDArray]) -> Words:
    """What explains the difference between charge-balance and titrated ANC of each lake."""
    gap, organic, aluminum, other, rest, u = (columns[f"anc_gap{part}_ueq_l"].astype(float)
                                              for part in ("", "_organic", "_aluminum", "_other", "_rest", "_u"))
    known, explained = np.isfinite(gap), np.abs(rest) <= 2.0 * u
    small = np.abs(gap) <= 2.0 * u
    parts = ((organic, "organic anions"), (aluminum, "aluminum"), (other, "fluoride or ammonium"))
    by = np.argmax(np.nan_to_num(np.abs([size for size, _ in parts])), axis=0)
    unknown_doc = known & np.isnan(organic)
    return worded(gap.size, (known & ~explained, "not explained by organic anions and aluminum: error or an ion not "
                                                 "measured"),
                  *((known & explained & (by == k), f"mostly {name}") for k, (_, name) in enumerate(parts)),
                  (known & small & (explained | unknown_doc), "within error"),
                  (unknown_doc & ~small, "organic carbon not given: organic anions cannot be told from error"))
