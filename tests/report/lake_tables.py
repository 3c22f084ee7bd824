"""Small survey tables as text for the tests of a run over lakes. All waters are invented but Hawk Pond.

Hawk Pond is lake 1A1-003 of the Eastern Lake Survey 1984 (US EPA, public domain), ions as the agency prints them.
"""

import csv
import io

IONS = ("calcium", "magnesium", "sodium", "potassium", "ammonium", "sulfate", "nitrate", "chloride")
CATIONS, ANIONS = IONS[:5], IONS[5:]


def table_of(*rows):
    """CSV text of a row per dictionary; a column stands where its first row has it, gaps are blank."""
    header = list(dict.fromkeys(name for row in rows for name in row))
    stream = io.StringIO()
    csv.writer(stream, lineterminator="\n").writerows([header, *([row.get(name, "") for name in header] for row in rows)])
    return stream.getvalue()


def ions(*ueq_l):
    """Columns of IONS from their charges in µeq/L."""
    return {f"{name}_ueq_l": value for name, value in zip(IONS, ueq_l, strict=True)}


def charge(row, *, ammonium=True):
    """Charge-balance ANC of a row by hand: cations less strong anions. [µeq/L]"""
    cations = CATIONS if ammonium else CATIONS[:4]
    return sum(float(row[f"{i}_ueq_l"]) for i in cations) - sum(float(row[f"{i}_ueq_l"]) for i in ANIONS)


def organic_left_by_gran(doc_mg_l, at_ph=4.5, sites=10.2, pk=(3.04, 4.42, 6.7)):
    """Organic anions that a Gran line leaves out, by hand: what the tangent of the default acid in h, at pH 4.5, has at h = 0.

    Three equal acid steps of Hruska et al. 2003 (pK recalled); the slope by a step along the imaginary axis, exact. [µeq/L]
    """
    k1, k2, k3 = (10.0**-p for p in pk)

    def anions(h):
        steps = (h**3, k1 * h**2, k1 * k2 * h, k1 * k2 * k3)
        return sum(n * s for n, s in enumerate(steps)) / 3.0 / sum(steps)

    h = 10.0**-at_ph
    return doc_mg_l * sites * (anions(h) - h * anions(complex(h, 1e-30)).imag / 1e-30)


HYDROLOGY = {"elevation_m": 0, "lake_area_ha": 10, "watershed_area_ha": 200, "mean_depth_m": 4, "residence_time_yr": 0.5,
             "runoff_m_yr": 0.7, "precipitation_m_yr": 1.0, "wind_speed_m_s": 3.0}
DEPOSITION = {"sulfur_deposition_meq_m2_yr": 40, "nitrate_deposition_meq_m2_yr": 20, "ammonium_deposition_meq_m2_yr": 15}

ALDER = {"sample_id": "A-24", "site": "Alder Tarn", "region": "north", "date": "2024-09-01", "temperature_c": 10, "ph": 6.5,
         "anc_ueq_l": 60, "anc_method": "gran", **ions(70, 20, 30, 5, 2, 40, 5, 20), "doc_mg_l": 2, **HYDROLOGY, **DEPOSITION}
BIRCH = {"sample_id": "B-24", "site": "Birch Mere", "region": "south", "date": "2024-09-01", "temperature_c": 12, "ph": 7.3,
         "alkalinity_ueq_l": 230, "filtered": "yes", **ions(200, 50, 30, 5, 0, 30, 2, 25), "doc_mg_l": 5, **HYDROLOGY,
         **DEPOSITION}
CEDAR = {"sample_id": "C-24", "site": "Cedar Pool", "region": "south", "date": "2024-09-02", "temperature_c": 12, "ph": 4.8,
         "anc_ueq_l": -20, "anc_method": "gran", **ions(30, 10, 30, 5, 8, 62, 15, 25), "doc_mg_l": 1, "aluminum_ug_l": 200,
         **HYDROLOGY, **DEPOSITION}
DOCK = {"sample_id": "D-24", "site": "Dock Water", "region": "north", "date": "2024-09-02", "temperature_c": 9, "ph": 6.1,
        **ions(55, 20, 30, 5, 2, 45, 5, 22), "doc_mg_l": 1}
TORN = {"sample_id": "T-24", "site": "Torn Tarn", "region": "north", "temperature_c": 9, "ph": 66, "anc_ueq_l": 30}
EMPTY = {"sample_id": "E-24", "site": "Elder Tarn", "region": "north", "temperature_c": 9}
SURVEY_ROWS = (ALDER, BIRCH, TORN, CEDAR, EMPTY, DOCK)
SURVEY = table_of(*SURVEY_ROWS)  # four lakes in rows 2, 3, 5 and 7; rows 4 and 6 are refused

HAWK = {"sample_id": "1A1-003", "site": "Hawk Pond", "region": "Adirondacks", "temperature_c": 25, "ph": 4.79,
        "anc_ueq_l": -21.7, "anc_method": "gran", **ions(59.281, 16.287, 17.487, 6.341, 5.156, 132.457, 9.775, 8.040),
        "fluoride_ueq_l": 2.853, "doc_mg_l": 1.57, "conductivity_us_cm": 23.7, "runoff_m_yr": 0.762,
        "sulfur_deposition_meq_m2_yr": 43.72, "lake_volume_m3": 434_000, "residence_time_yr": 0.578}

# EPA QA/G-9S, p. 109 (quoted on a public help page): eleven values in order, two of them tied several times
QA_SERIES = (10, 10, 10, 5, 10, 20, 18, 17, 15, 24, 15)


def series(site, anc, sulfate, first=2010, **more):
    """A sample each September; calcium makes up for what the sulfate leaves of the ANC."""
    return [{"sample_id": f"{site}-{first + k}", "site": site, "date": f"{first + k}-09-15", "temperature_c": 10,
             "anc_ueq_l": a, "anc_method": "gran", "sulfate_ueq_l": s, **more}
            for k, (a, s) in enumerate(zip(anc, sulfate, strict=True))]


# An event and a scheme of the user's own
EVENT = """[event]
name = "first melt"
fraction = [0.2, 0.5]

[water]
temperature_c = 1.0
"calcium (µeq/L)" = 10.0
"magnesium (µeq/L)" = 5.0
"sodium (µeq/L)" = 10.0
"potassium (µeq/L)" = 2.0
"ammonium (µeq/L)" = 8.0
"sulfate (µeq/L)" = 40.0
"nitrate (µeq/L)" = 25.0
"chloride (µeq/L)" = 10.0
"doc (mg/L)" = 0.0
"aluminum (µg/L)" = 0.0
"""
EVENT_ANC = 10 + 5 + 10 + 2 + 8 - 40 - 25 - 10  # µeq/L

SCHEME = """name = "two_steps"
words = "house rule of an invented board"
source = "invented"
quantity = "anc_gran"
unit = "µeq/L"
stand_ins = ["alkalinity", "anc_charge"]

[[classes]]
name = "poor"
upper = 30
upper_belongs = true
at_risk = true
words = "little is left"
next_step = "sample the melt"

[[classes]]
name = "sound"
at_risk = false
words = "enough is left"
next_step = "sample again in some years"
"""
