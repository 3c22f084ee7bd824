"""Lakes from plain dictionaries in house units, assessed without files; all are invented but Hawk Pond."""

from pathlib import Path

import numpy as np
import pandas as pd
from made_lakes import HAWK_POND, ions

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.options import LakeOptions, rules_of
from aquabuf.assess.limits import shipped_limits
from aquabuf.readings.result import REJECTED_COLUMNS, Readings

TEXT = ("site", "region", "date", "water_kind", "filtered", "anc_method", "ph_kind", "titrated_by")
SULFATE_G, NITRATE_G = 96.06 / 2, 62.005  # grams per equivalent

# Every reading that an answer needs; ions sum to a charge balance of 60 µeq/L without ammonium
WATER = {"temperature_c": 10.0, "ph": 6.5, "anc_eq_l": 40e-6, "anc_method": "gran", "dic_mol_l": 80e-6, "doc_mg_l": 3.0,
         "aluminum_mol_l": 1e-6, "conductivity_us_cm": 22.0,
         **ions(calcium=80.0, magnesium=30.0, sodium=40.0, potassium=5.0, ammonium=2.0, sulfate=65.0, nitrate=5.0,
                chloride=25.0)}
LAND = {"runoff_m_yr": 0.6, "precipitation_m_yr": 1.0, "residence_time_yr": 0.8, "lake_volume_m3": 9.6e5,
        "lake_area_m2": 2e5,
        "watershed_area_m2": 2e6, "wind_speed_m_s": 3.0}
FALL = {"sulfur_deposition_eq_m2_yr": 0.04, "nitrate_deposition_eq_m2_yr": 0.02, "ammonium_deposition_eq_m2_yr": 0.015,
        "chloride_deposition_eq_m2_yr": 0.02, "base_cation_deposition_eq_m2_yr": 0.01,
        "hydrogen_deposition_eq_m2_yr": 0.03,
        "nitrogen_sink_eq_m2_yr": 0.01}
FULL = WATER | LAND | FALL
# Lake 1A1-003 of the Eastern Lake Survey 1984 (US EPA): Gran ANC, runoff and sulfate deposition as printed
HAWK = ions(**HAWK_POND) | {"anc_eq_l": -21.7e-6, "temperature_c": 10.0, "runoff_m_yr": 0.762,
                            "sulfur_deposition_eq_m2_yr": 2.10 / SULFATE_G}


def gran_leaves(doc_mg_l, aluminum_mol_l):
    """What a Gran line leaves out, organic anions less aluminum [eq/L]: value at h = 0 of the tangents at pH 4.5.

    Mass action written out: three steps of pK 3.04, 4.42 and 6.70 on 10.2 µeq/mg; hydroxides of aluminum of log beta
    -5.00, -10.1, -16.9 and -22.7.
    """
    def charge(h):
        steps = np.cumprod(10.0 ** -np.array([3.04, 4.42, 6.70]) / h)
        hydroxides = 10.0 ** np.array([-5.00, -10.1, -16.9, -22.7]) / h ** np.arange(1, 5)
        organic = 10.2e-6 * doc_mg_l * (steps @ [1, 2, 3]) / 3.0 / (1.0 + steps.sum())
        return organic - aluminum_mol_l * (3.0 - (hydroxides @ [1, 2, 3, 4]) / (1.0 + hydroxides.sum()))

    h = 10.0**-4.5
    return charge(h) - h * (charge(h * 1.0001) - charge(h * 0.9999)) / (2e-4 * h)


def without(row, *names):
    """The same lake with some readings never made."""
    return {name: value for name, value in row.items() if name not in names}


def readings(*rows):
    """Readings whose frame holds the rows (house units); what a row lacks is missing."""
    frame = {"row": np.arange(2, 2 + len(rows)),
             "sample_id": pd.Series([row.get("sample_id", f"s{i}") for i, row in enumerate(rows)], dtype="str")}
    for name in dict.fromkeys(name for row in rows for name in row if name != "sample_id"):
        if name in TEXT:
            frame[name] = pd.Series([row.get(name, "") for row in rows], dtype="str")
        else:
            frame[name] = [row.get(name, np.nan) for row in rows]
    if "date" in frame:
        frame["date_parsed"] = pd.to_datetime(frame["date"], errors="coerce").astype("datetime64[s]")
    return Readings(frame=pd.DataFrame(frame), rejected=pd.DataFrame(columns=list(REJECTED_COLUMNS)))


def assessed(*rows, limits=None, event: Path | None = None, **options):
    """Assessment of the rows; without draws unless asked for."""
    chosen = options_of(**options)
    return assess_lakes(readings(*rows), rules_of(chosen, event), chosen,
                        shipped_limits("lake_limits") if limits is None else limits)


def options_of(**options):
    """Options as `assessed` takes them."""
    return LakeOptions(**({"draws": 0} | options))


def results(*rows, **options):
    """Only the table of results, by sample_id."""
    return assessed(*rows, **options).results.set_index("sample_id")


def result(row, **options):
    """The result of one lake."""
    return results(row, **options).iloc[0]
