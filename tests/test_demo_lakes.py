"""The demo lakes: what is read and refused, whether the waters make physical sense, and what their README says of them.

Expected values come from the README, from the raw text of the tables read with the csv module, and from laws and
published constants written out here; only pH is compared with the charge balance of the engine.
"""

import csv
import re
import tomllib
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from scipy.stats import kendalltau

from aquabuf.assess.lake.event_file import read_event
from aquabuf.assess.lake.inputs import Lakes, setting_of
from aquabuf.assess.lake.schemes import read_scheme, shipped_schemes
from aquabuf.assess.sample.inputs import values_of
from aquabuf.chem.organic import organic_models
from aquabuf.readings.reader import read_readings

DATA = Path(__file__).parents[1] / "field_data"
SURVEY, HISTORY = "lake_survey.csv", "lake_history.csv"
CATIONS, ANIONS = ("Calcium", "Magnesium", "Sodium", "Potassium", "Ammonium"), ("Sulfate", "Nitrate", "Chloride")
MG_PER_MEQ = {"Calcium": 20.039, "Magnesium": 12.1525, "Sodium": 22.990, "Potassium": 39.098, "Ammonium": 14.007,
              "Sulfate": 48.028, "Nitrate": 14.007, "Chloride": 35.45}  # IUPAC molar masses over charge  # fmt: skip
SEA = {"Sodium": 0.859, "Magnesium": 0.196, "Calcium": 0.037, "Potassium": 0.018, "Sulfate": 0.103}  # ICP Waters, per Cl
SITES, PK = 10.2, (3.04, 4.42, 6.70)        # µeq/mg, Hruska et al. 2003, second set of pK (recalled)
LOG_BETA = (-5.00, -10.1, -16.9, -22.7)     # Al(OH)n, Nordstrom & May 1996 (recalled)
SLIP = "OR-2011-07"
AIR = 422e-6  # atm of CO2 at sea level in 2024, to a few per cent


def lines(table):
    """Header and rows as plain text, comments left out."""
    with (DATA / table).open(newline="", encoding="utf-8") as stream:
        records = list(csv.reader(line for line in stream if not line.startswith("#")))
    return records[0], records[1:]


@cache
def numbers(table):
    """Good rows by sample: text where it is no number, half a detection limit, nan for blanks."""
    header, rows = lines(table)
    good = pd.DataFrame(rows[:31] if table == SURVEY else rows, columns=header).set_index("Sample")
    words = ("Lake", "Region", "Sampling date", "Kind of pH", "ANC method", "Sample filtered", "Laboratory", "Notes")
    for name in good.columns.difference(words):
        low = good[name].str.startswith("<")
        good[name] = pd.to_numeric(good[name].str.lstrip("<")) * np.where(low, 0.5, 1.0)
    for ion in MG_PER_MEQ:
        head = next(c for c in good.columns if c.startswith(f"{ion} ("))
        good[ion] = good[head] if "µeq" in head else 1e3 * good[head] / MG_PER_MEQ[ion]
    good["Al"] = good["Aluminum (µg/L)"] / 26.982  # µmol/L
    good["charge"] = good[list(CATIONS)].sum(axis=1, skipna=False) - good[list(ANIONS)].sum(axis=1, skipna=False)
    return good


@cache
def readings(table):
    """The table as the program reads it."""
    return read_readings(DATA / table)


def refused():
    """Lines of the refused rows of the survey by sample."""
    return readings(SURVEY).rejected.set_index("sample_id")


# ---------------------------------------------------------------- in and out


@pytest.mark.parametrize("table", [SURVEY, HISTORY])
def test_readme_counts_rows_and_refusals(table):
    """Rows of the file are the figure in the README; those that are read or end as refused leave none over."""
    rows, words = re.search(rf"\| `{table}` \|.*\| (\d+) \| (.*) \|\n", (DATA / "README.md").read_text("utf-8")).groups()
    bad = 0 if words == "none" else int(words.split(",")[0])
    assert len(lines(table)[1]) == int(rows)
    assert len(numbers(table)) == int(rows) - bad
    assert readings(table).rejected["row"].nunique() == max(bad - 1, 0)  # the last bad one is read, see below
    assert len(readings(table).frame) == int(rows) - max(bad - 1, 0)


@pytest.mark.parametrize(("sample", "column", "value", "rule", "remedy"), [
    ("PE-24", "sample_id", "PE-24", "already used in row 6", "name of its own"),
    ("TA-24b", "pH (field)", "64", "must be -1 to 15", "6.4"),
    ("SE-24b", "Calcium (µeq/L)", "-12.4", "must be 0 to", "below zero"),
    ("CH-24b", "Water temp (°C)", "61.3", "must be -2 to 60 °C", "°F (then 16.3 °C)"),
    ("RU-24b", "ANC (µeq/L)", "about 130", "must be a number", "leave it blank"),
])
def test_each_unreadable_row_is_refused_with_its_reason(sample, column, value, rule, remedy):
    """Row, column, value, rule and remedy of each row that was spoiled on purpose; the row is the line of the file."""
    line = refused().loc[sample]
    assert (line["column"], line["value"]) == (column, value)
    assert rule in line["rule"]
    assert remedy in line["remedy"]
    assert (DATA / SURVEY).read_text("utf-8").splitlines()[line["row"] - 1].startswith(f"{sample},")


def test_a_row_with_nothing_to_go_by_is_read():
    """The broken bottle: no pH, ANC, alkalinity, carbon or ion, which is for the lake question to refuse."""
    frame = readings(SURVEY).frame
    row = frame[frame["sample_id"] == "GT-24b"].iloc[0]
    names = ["ph", "anc_eq_l", "alkalinity_eq_l", "dic_mol_l", *(f"{ion.lower()}_mol_l" for ion in MG_PER_MEQ)]
    assert row[names].isna().all()
    assert np.isfinite(row["doc_mg_l"])
    assert frame["sample_id"].iloc[-1] == "GT-24b"


@pytest.mark.parametrize("table", [SURVEY, HISTORY])
def test_every_detection_limit_is_flagged(table):
    """Each '<' of a row that is read, counted in the raw text."""
    bad = set(refused()["row"]) if table == SURVEY else set()
    text = (DATA / table).read_text("utf-8").splitlines()
    expected = sum(line.count(",<") for row, line in enumerate(text, start=1) if row not in bad)
    assert len(readings(table).flags) == expected > 10


def test_every_column_of_lakes_is_tried():
    """The survey has the columns that lake questions ask for; volume alone is left to depth and area."""
    given = {name for name, _ in readings(SURVEY).headers.values()}
    assert {"survey_weight", "anc_method", "ph_kind", "filtered", "ph_air_equilibrated", "equilibration_co2_ppm", "lake_area_m2",
            "watershed_area_m2", "mean_depth_m", "residence_time_yr", "runoff_m_yr", "precipitation_m_yr", "wind_speed_m_s",
            "sulfur_deposition_eq_m2_yr", "nitrate_deposition_eq_m2_yr", "ammonium_deposition_eq_m2_yr",
            "chloride_deposition_eq_m2_yr", "base_cation_deposition_eq_m2_yr", "hydrogen_deposition_eq_m2_yr",
            "nitrogen_sink_eq_m2_yr"} <= given
    assert "analysis_method" in {name for name, _ in readings(HISTORY).headers.values()}


# ---------------------------------------------------------------- water


def organic(ph):
    """Charge of a triprotic acid. [µeq/mg]"""
    a = np.cumprod([10.0 ** (np.asarray(ph) - k) for k in PK], axis=0)
    return SITES * (a[0] + 2 * a[1] + 3 * a[2]) / (3 * (1 + a.sum(axis=0)))


def aluminum(ph):
    """Mean charge of dissolved aluminum. [-]"""
    shares = np.stack([10.0 ** (b + n * np.asarray(ph)) for n, b in enumerate((0.0, *LOG_BETA))])
    return (np.array([3, 2, 1, 0, -1]).reshape(-1, *[1] * np.ndim(ph)) * shares).sum(axis=0) / shares.sum(axis=0)


def at_no_acid(charge, ph=4.5):
    """Where the tangent of a charge against h, taken at `ph`, meets h = 0: what a Gran line leaves out."""
    h, step = 10.0**-ph, 1e-4
    up, down = (charge(-np.log10(h * (1 + s))) for s in (step, -step))
    return float(charge(ph) - (up - down) / (2 * step))


ORGANIC_LEFT, ALUMINUM_LEFT = at_no_acid(organic), at_no_acid(aluminum)


def left_out(good):
    """Organic anions less aluminum that the titrations leave out. [µeq/L]"""
    return ORGANIC_LEFT * good["DOC (mg/L)"] - ALUMINUM_LEFT * good["Al"]


def noise(good, gran):
    """Standard deviation of charge balance less Gran ANC by the noise that the README tells. [µeq/L]"""
    ions = sum((0.012 * good[ion]) ** 2 for ion in (*CATIONS, *ANIONS))
    return np.sqrt(ions + (2.0 + 0.01 * gran.abs()) ** 2 + (0.03 * ORGANIC_LEFT * good["DOC (mg/L)"]) ** 2 + 0.3)


def titrated(table):
    """Gran ANC; the end point, and the slipped sulfate, left out, the offset of the river board taken off. [µeq/L]"""
    good = numbers(table)
    if table == SURVEY:
        return good["ANC (µeq/L)"].where(good["ANC method"] == "gran")
    board = np.where(good["Laboratory"] == "river board", 12.0, 0.0)
    return (good["Gran ANC (µeq/L)"] - board).where(good.index != SLIP)


def test_what_a_gran_line_leaves_out_is_as_told():
    """6.2 µeq per mg of carbon and 2.3 per µmol of aluminum in the README; the pure chemistry says the same."""
    told = re.search(r"\(([\d.]+) µeq\s+per mg of carbon, ([\d.]+) per µmol\)", (DATA / "README.md").read_text("utf-8"))
    assert_allclose([float(x) for x in told.groups()], [ORGANIC_LEFT, ALUMINUM_LEFT], rtol=0, atol=0.05)


@pytest.mark.parametrize(("table", "lakes"), [(SURVEY, 27), (HISTORY, 364)])
def test_charges_balance_with_organic_anions(table, lakes):
    """Ions less titration is what organic acids and aluminum explain: within four of the noises told, 5 % of all ions."""
    good, gran = numbers(table), titrated(table)
    left = (good["charge"] - gran - left_out(good)).dropna()
    assert len(left) == lakes
    assert (left.abs() < 4.0 * noise(good, gran)[left.index]).all()
    total = good[[*CATIONS, *ANIONS]].sum(axis=1) + gran.abs()
    assert (left.abs() < 0.05 * total[left.index]).all()
    assert abs(left.median()) < 1.0


def test_conductivity_is_that_of_the_ions():
    """Equivalent conductivities of the US lake surveys, summed at infinite dilution; 12 % is twice 1.5 % and 0.09 in pH.

    Ionic strength lowers a sum by 1 to 3 % in such waters, so the median is within 4 %.
    """
    per_meq = {"Calcium": 59.47, "Magnesium": 53.0, "Sodium": 50.08, "Potassium": 73.48, "Ammonium": 73.5, "Sulfate": 80.0,
               "Nitrate": 71.42, "Chloride": 76.31}
    for table in (SURVEY, HISTORY):
        good = numbers(table).dropna(subset=[*MG_PER_MEQ, "DOC (mg/L)"])
        good = good[(good["Specific conductance (µS/cm)"] < 40.0) & (good.index != SLIP)]
        ph = good["pH (field)"].to_numpy()
        h = 10.0 ** (6.0 - ph)
        bicarbonate = np.maximum(good["charge"] + h + good["Al"] * aluminum(ph) - good["DOC (mg/L)"] * organic(ph), 0.0)
        summed = 1e-3 * (sum(per_meq[ion] * good[ion] for ion in per_meq) + 349.65 * h + 44.5 * bicarbonate)
        assert len(good) >= 19
        ratio = summed / good["Specific conductance (µS/cm)"]
        assert_allclose(ratio, 1.0, rtol=0, atol=0.12, err_msg=table)
        assert 1.0 < ratio.median() < 1.04


def engine(table):
    """Charge balance of each good row by the engine, and its conditions; the one thing here that is not by hand."""
    frame = readings(table).frame.set_index("sample_id").loc[numbers(table).index].reset_index()
    values = values_of(frame)
    return Lakes({name: v[:, None] for name, v in values.items()}, setting_of(values, 1e6 * AIR),
                 organic_models()["hruska_b"], np.ones((1, 1)))


def charge_anc(table):
    """Charge-balance ANC by titration, alkalinity or ions, whichever is there. [eq/L]"""
    good = numbers(table)
    anc = titrated(table)
    if table == SURVEY:
        anc = anc.fillna(1e3 * good["Alkalinity (mg/L as CaCO3)"] / 50.043)
    return 1e-6 * (anc + left_out(good)).fillna(good["charge"]).to_numpy()[:, None]


@pytest.mark.parametrize(("table", "most"), [(SURVEY, 3.4), (HISTORY, 4.6)])
def test_ph_is_that_of_the_balance_at_the_carbon_told(table, most):
    """Between 0.9 times the CO2 of air and the most that the README tells; both are nearly one pH in acid lakes.

    Slack: three times 0.03 for the electrode with the error of the titration over the buffer intensity.
    """
    assert f"{most:g}" in re.search(r"CO2 is at air to ([^;]*);", (DATA / "README.md").read_text("utf-8"))[1]
    lakes, good, anc = engine(table), numbers(table), charge_anc(table)
    water, air = lakes.balance(), lakes.setting.air_co2_mol_l
    low, high = water.ph(anc, co2=most * air), water.ph(anc, co2=0.9 * air)
    titration = 1e-6 * (2.0 + 0.01 * 1e6 * np.abs(anc) + 0.03 * ORGANIC_LEFT * good["DOC (mg/L)"].fillna(0).to_numpy()[:, None])
    ph = good["pH (field)"].to_numpy()[:, None]
    skip = (good.index == SLIP) | good["DOC (mg/L)"].isna()
    slack = 3.0 * np.hypot(0.03, titration / water.intensity(ph, co2=air))
    inside = (ph > low - slack) & (ph < high + slack)
    assert inside[~skip].all(), good.index[~inside[:, 0] & ~skip].tolist()
    assert ((high - low)[ph < 4.9] < 0.1).all()
    assert (ph < 4.9).sum() >= 3


def test_second_readings_of_carbon_agree():
    """Carbon of LA-24, and the pH of WI-24 after 400 ppm of CO2 at 22 °C were bubbled through, follow from the ANC."""
    lakes, good, anc = engine(SURVEY), numbers(SURVEY), charge_anc(SURVEY)
    at = good.index.get_loc("LA-24")
    dic = np.full(anc.shape, good.loc["LA-24", "DIC (mg/L as C)"] / 12.011e3)
    water = lakes.balance()
    u = np.hypot(3.3e-6, 0.015 * dic[0]) / water.intensity(np.array([[7.02]]), dic=dic[:1])[0, 0]
    assert_allclose(water.ph(anc, dic=dic)[at], good.loc["LA-24", "pH (field)"], rtol=0, atol=3.0 * np.hypot(0.03, u[0]))
    at = good.index.get_loc("WI-24")
    # Henry's law 10^-1.430 mol/L/atm and pK1 6.369 at 22 °C (Plummer & Busenberg 1982) between 20 and 25 °C, no activity
    carbonate = 1e-6 * (67.0 + (ORGANIC_LEFT - organic(7.0)) * 2.4)
    by_hand = 6.369 + 1.430 + np.log10(carbonate / 400e-6)
    assert good.loc["WI-24", "Equilibration CO2 (ppm)"] == 400.0
    assert_allclose(good.loc["WI-24", "Air-equilibrated pH"], by_hand, rtol=0, atol=0.1)


# ---------------------------------------------------------------- survey


def test_weights_are_those_of_the_design():
    """One weight per region and size, and all of them together make the lakes of the country that the README tells."""
    good = numbers(SURVEY)
    strata = good.groupby(["Region", good["Lake area (ha)"].fillna(1.2) >= 4.0])["Design weight"]  # Hobbin Tarn is small
    assert (strata.nunique() == 1).all()
    assert len(strata) == 8
    told = int(re.search(r"of the (\d+) lakes of the country", (DATA / "README.md").read_text("utf-8"))[1])
    assert_allclose(good["Design weight"].sum(), told, rtol=0, atol=0.005 * len(good))
    assert_allclose(strata.sum(), strata.sum().round(), rtol=0, atol=0.05)


def test_water_and_rain_balance():
    """Residence time is volume over outflow; chloride leaves as it comes; free acid is what the other ions leave.

    Slack is the rounding, and for chloride three times 1.2 % noise.
    """
    good = numbers(SURVEY)
    runoff = good["Runoff (mm/yr)"] / 1e3
    tau = good["Mean depth (m)"] * good["Lake area (ha)"] / (runoff * good["Catchment area (ha)"])
    assert tau.notna().sum() == 30
    assert_allclose(tau, good["Residence time (yr)"], rtol=0, atol=0.0051)
    chloride = good["Chloride deposition (kg/ha/yr as Cl)"] / 0.3545  # meq/m2/yr
    assert_allclose(chloride, (runoff * good["Chloride"]).fillna(chloride), rtol=0.045)
    left = (good["Sulfur deposition (kg/ha/yr as S)"] / 0.16030 - SEA["Sulfate"] * chloride
            + (good["Nitrate deposition (kg/ha/yr as N)"] - good["Ammonium deposition (kg/ha/yr as N)"]) / 0.14007
            - good["Base cation deposition (meq/m²/yr)"])
    assert_allclose(left, good["Hydrogen deposition (meq/m²/yr)"], rtol=0, atol=0.4)
    assert (good["Precipitation (mm/yr)"] > good["Runoff (mm/yr)"])[runoff.notna()].all()


def test_ions_are_those_of_the_regions():
    """Sodium to chloride near the sea ratio at the shore, calcium the base of hard water, ANC and pH rising together."""
    good = numbers(SURVEY)
    shore = good[good["Region"] == "Salt Shore"]
    assert len(shore) == 5
    assert_allclose(shore["Sodium"] / shore["Chloride"], SEA["Sodium"], rtol=0.08)
    hard = good[good["Region"] == "Kiln Hills"]
    assert (hard["Calcium"] > 0.7 * hard[list(CATIONS)].sum(axis=1) - 100.0).all()
    assert kendalltau(good["Calcium"], titrated(SURVEY), nan_policy="omit").statistic > 0.7
    assert kendalltau(good["pH (field)"], titrated(SURVEY), nan_policy="omit").statistic > 0.8


def test_only_wrackle_pool_has_less_than_its_sea_salt():
    """Magnesium and sulfate below the part of its chloride; no other lake and no other ion."""
    good = numbers(SURVEY)
    below = {(good.loc[i, "Lake"], ion) for ion, ratio in SEA.items() for i in good.index
             if good.loc[i, ion] - ratio * good.loc[i, "Chloride"] < 0.0}
    assert below == {("Wrackle Pool", "Magnesium"), ("Wrackle Pool", "Sulfate")}


def test_acid_lakes_and_brown_lakes_are_those_named():
    """ANC at or below zero: five lakes; charge balance and Gran ANC in other bands (0, 50, 200) with 10 mg/L of carbon: four."""
    good, gran = numbers(SURVEY), titrated(SURVEY)
    assert set(good["Lake"][gran <= 0]) == {"Garrow Tarn", "Skarrow Tarn", "Pellin Tarn", "Curlin Mere", "Quagmoor Pool"}
    assert (good["Aluminum (µg/L)"][gran <= 0] > 54.0).all()  # 2 µmol/L
    apart = np.digitize(gran, [0, 50, 200], right=True) != np.digitize(good["charge"], [0, 50, 200], right=True)
    brown = good["DOC (mg/L)"] > 10.0
    assert set(good["Lake"][apart & brown]) == {"Peddle Mere", "Quagmoor Pool", "Umberlow Mere", "Rushett Mere"}
    assert good["DOC (mg/L)"][apart & brown].round().agg(["min", "max"]).tolist() == [13.0, 20.0]
    assert set(good["Lake"][(gran - 50.0).abs() < 10.0]) == {"Umberlow Mere", "Hobbin Tarn", "Felsick Tarn"}


def test_what_single_lakes_lack_or_have():
    """Of KT, FE, TA, HO, LI, LA and WI the README says what is odd."""
    good = numbers(SURVEY)
    kt = good.loc["KT-24"]
    assert kt["ANC method"] == "end point 4.5"
    assert_allclose(kt["ANC (µeq/L)"] - (kt["charge"] - left_out(good)["KT-24"]), 1e6 * 10**-4.5, rtol=0, atol=6.0)
    blank = good.isna()
    assert set(blank.columns[blank.loc["FE-24"]]) >= {"Potassium (µeq/L)", "Nitrate (µeq/L)"}
    assert [good.index[blank[c]].tolist() for c in ("Potassium (µeq/L)", "DOC (mg/L)", "Runoff (mm/yr)", "ANC (µeq/L)")] == [
        ["FE-24"], ["TA-24"], ["HO-24"], ["LI-24"]]
    assert good.index[good["Sample filtered"] == "yes"].tolist() == ["LI-24"]
    assert_allclose(good.loc["TA-24", "charge"] - good.loc["TA-24", "ANC (µeq/L)"], 64.0, rtol=0, atol=0.5)
    assert good.index[~blank["DIC (mg/L as C)"]].tolist() == ["LA-24"]
    assert good.index[~blank["Air-equilibrated pH"]].tolist() == ["WI-24"]


def test_critical_loads_of_five_lakes_are_exceeded():
    """Steady-state water chemistry: F = sin(pi/2 BC*/400), SO4 before 15 + 0.16 BC* (Norway, recalled), ANC limit 20 µeq/L."""
    good = numbers(SURVEY)
    star = {ion: good[ion] - ratio * good["Chloride"] for ion, ratio in SEA.items()}
    base = star["Calcium"] + star["Magnesium"] + star["Sodium"] + star["Potassium"]
    runoff = good["Runoff (mm/yr)"] / 1e3
    soil = np.sin(np.pi / 2 * np.minimum(base / 400.0, 1.0))
    load = runoff * (base - soil * (star["Sulfate"] + good["Nitrate"] - 15.0 - 0.16 * base) - 20.0)
    sulfur = good["Sulfur deposition (kg/ha/yr as S)"] / 0.16030 - SEA["Sulfate"] * good["Chloride deposition (kg/ha/yr as Cl)"] / 0.3545
    exceedance = sulfur + runoff * good["Nitrate"] - load
    assert exceedance.notna().sum() == 29
    assert set(good["Lake"][exceedance > 0]) == {"Garrow Tarn", "Skarrow Tarn", "Pellin Tarn", "Dunnack Tarn", "Curlin Mere"}
    assert good["Nitrate"][good["Region"] == "High Tops"].idxmax() == "DU-24"


# ---------------------------------------------------------------- event and scheme


def test_event_water_is_complete_and_acid():
    """Every ion is there, and their sum, from the file itself, is below that of every sample of the High Tops but one."""
    event = read_event(DATA / "lake_event.toml")
    water = tomllib.loads((DATA / "lake_event.toml").read_text("utf-8"))["water"]
    charge = sum(water[f"{ion.lower()} (µeq/L)"] * (1 if ion in CATIONS else -1) for ion in MG_PER_MEQ)
    assert_allclose(charge, -31.4, rtol=0, atol=0.01)
    assert (event.name, event.missing_ions, event.anc_from) == ("first melt of the High Tops", (), "ions")
    assert event.fractions == (0.15, 0.3, 0.5)
    assert_allclose(event.u["sulfate_mol_l"], 1.5e-6)
    assert (charge > numbers(SURVEY)["charge"]).sum() == 1


def test_scheme_has_the_limits_of_the_file():
    """Three classes by Gran ANC, each limit as written, under a name that no shipped scheme has."""
    scheme = read_scheme(DATA / "lake_scheme.toml")
    assert [(c.name, c.upper_belongs, c.at_risk) for c in scheme.classes[:2]] == [("barren", True, True), ("on watch", False, True)]
    assert_allclose([c.upper for c in scheme.classes], [5e-6, 60e-6, np.inf])
    assert (scheme.classes[2].name, scheme.classes[2].at_risk) == ("sound", False)
    assert scheme.quantity == "anc_gran"
    assert scheme.name not in shipped_schemes()
