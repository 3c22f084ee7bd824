"""The demo tables of the invented river: what is assessed, refused and warned of, and whether it makes physical sense.

Expected counts and warnings come from how the tables were designed (field_data/README.md), from the raw text of the
tables read with the csv module, and from laws written out here; none is copied from the program's output.
"""

import csv
import re
from functools import cache
from pathlib import Path

import gsw
import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner
from numpy.testing import assert_allclose

from aquabuf.cli.main import main

ROOT = Path(__file__).parents[1]
DATA = ROOT / "field_data"
STREAM, PLANT, ESTUARY = "stream_survey.csv", "plant_raw_water.csv", "estuary_profile.csv"
EXTRA = {STREAM: [], PLANT: ["--limits", str(DATA / "plant_limits.toml")],
         ESTUARY: ["--map", str(DATA / "estuary_map.toml")]}  # fmt: skip
BROWN = ["MD-melt", "MD-base", "BP-melt", "BP-base"]
MG_PER_MEQ = {"Calcium": 20.039, "Magnesium": 12.1525, "Sodium": 22.990, "Potassium": 39.098, "Ammonium": 14.007,
              "Sulfate": 48.028, "Nitrate": 14.007, "Chloride": 35.45}  # IUPAC molar masses over charge  # fmt: skip


def run(table, out, *more):
    """One assessment through the command line; returns its exit code and what it printed."""
    done = CliRunner().invoke(main, ["assess", str(DATA / table), "--out", str(out), *EXTRA[table], *more])
    return done.exit_code, done.output


def raw(table, delimiter=","):
    """The rows of a table as plain text, by their first field; comment lines left out, short rows as they are."""
    with (DATA / table).open(newline="", encoding="utf-8") as stream:
        records = list(csv.reader((line for line in stream if not line.startswith("#")), delimiter=delimiter))
    return records[0], records[1:]


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    """Output folder of a table, which is assessed once with the default options but for the figure."""
    top = tmp_path_factory.mktemp("demo")

    @cache
    def folder_of(table):
        code, text = run(table, top / table, "--no-figure")
        assert code == 0, text
        return top / table

    return folder_of


def read(results, table, name):
    """One result table."""
    return pd.read_csv(results(table) / name, dtype={"value": str} if name == "rejected.csv" else None)


def by_id(results, table):
    """results.csv by sample."""
    return read(results, table, "results.csv").set_index("sample_id")


def warned(results, table, warning):
    """Samples that carry a warning."""
    verdicts = read(results, table, "verdicts.csv")
    return set(verdicts.loc[verdicts["warning"] == warning, "sample_id"])


def failing(results, table, check):
    """Samples that fail a quality check."""
    checks = read(results, table, "checks.csv")
    return set(checks.loc[(checks["check"] == check) & (checks["met"] == "no"), "sample_id"])


# ---------------------------------------------------------------- in and out


@pytest.mark.parametrize(("table", "refused"), [(STREAM, 9), (PLANT, 1), (ESTUARY, 0)])
def test_no_row_is_lost(results, table, refused):
    """Assessed and refused rows together are the rows of the file; as many are refused as were spoiled."""
    rows = raw(table, ";" if table == PLANT else ",")[1]
    assert len(read(results, table, "results.csv")) == len(rows) - refused
    assert (results(table) / "rejected.csv").exists() == bool(refused)
    if refused:
        assert read(results, table, "rejected.csv")["row"].nunique() == refused


BAD_ROWS = [  # sample, column, value found, words of the rule, words of the remedy
    ("LT-base", "sample_id", "LT-base", "already used in row", "name of its own"),
    ("SB-noon", "Calcium (mg/L)", "trace", "must be a number", "leave it blank"),
    ("DM-noon", "pH (field)", "74", "must be -1 to 15", "7.4"),
    ("TA-noon", "Water temp (°C)", "62.6", "must be -2 to 60 °C", "°F (then 17.0 °C)"),
    ("TB-noon", "Water temp (°C)", "missing", "needs a water temperature", "[fill]"),
    ("BP-noon", "pH (field)", "4,98", "decimal sign of this file is a point", "write 7.4"),
    ("CS-noon", "alkalinity", "alkalinity", "make a known pair", "give a second one"),
    ("KB-noon", "Gran ANC (µeq/L)", "2,870", "thousands separators are not read", "without them"),
    ("TL-noon", "(row)", "23 fields", "needs 24 fields", "check delimiters"),
]


@pytest.mark.parametrize("bad", BAD_ROWS, ids=lambda bad: bad[0])
def test_each_bad_row_is_refused_with_its_reason(results, bad):
    """Row, column, value, rule and remedy are told for each row that was spoiled on purpose."""
    sample, *expected = bad
    rejected = read(results, STREAM, "rejected.csv").fillna("")
    lines = rejected[rejected["sample_id"] == sample]
    assert len(lines) == 1
    line = lines.iloc[0]
    for field, words in zip(("column", "value", "rule", "remedy"), expected, strict=True):
        assert words in line[field], field
    assert (DATA / STREAM).read_text(encoding="utf-8").splitlines()[line["row"] - 1].startswith(f"{sample},")


def test_decimal_point_among_commas_is_refused(results):
    """10.3 in a file of decimal commas is no number there."""
    line = read(results, PLANT, "rejected.csv").iloc[0]
    assert (line["sample_id"], line["column"], line["value"]) == ("R21-06", "Water temp (°C)", "10.3")
    assert "decimal sign of this file is a comma" in line["rule"]


def test_estuary_needs_its_map(tmp_path):
    """Headers of a laboratory's own are named one by one, and nothing is guessed."""
    done = CliRunner().invoke(main, ["assess", str(DATA / ESTUARY), "--out", str(tmp_path / "x")])
    assert done.exit_code == 1
    assert re.search(r"column 'TA' is not known\..*map file", done.output)
    assert "column 'TCO2' needs a unit" in done.output


@pytest.mark.parametrize(("table", "more"), [(STREAM, []), (PLANT, ["--no-figure"]), (ESTUARY, ["--no-figure"])])
def test_same_bytes_twice(tmp_path, table, more):
    """Two runs write the same bytes and print the same text, the figure included."""
    texts = [run(table, tmp_path / name, *more) for name in ("one", "two")]
    assert texts[0] == texts[1]
    assert texts[0][0] == 0, texts[0][1]
    names = sorted(path.name for path in (tmp_path / "one").iterdir())
    assert names == sorted(path.name for path in (tmp_path / "two").iterdir())
    assert ("samples.png" in names) == (more == [])
    for name in names:
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes(), name


def test_open_exchange_assesses_the_row_without_ph(tmp_path):
    """Alkalinity with air is a known pair, so one refusal fewer than closed."""
    code, _ = run(STREAM, tmp_path / "open", "--exchange", "open", "--no-figure", "--draws", "0")
    table = pd.read_csv(tmp_path / "open" / "results.csv").set_index("sample_id")
    assert (code, len(table)) == (0, 25)
    assert table.loc["CS-noon", "pair"] == "alkalinity and air"


# ---------------------------------------------------------------- streams


def titrated():
    """ANC of the good stream samples as written in the file. [µeq/L]"""
    header, rows = raw(STREAM)
    at = header.index("Gran ANC (µeq/L)")
    return {row[0]: float(row[at]) for row in rows[:24]}


def test_class_of_each_stream_follows_its_titration(results):
    """Class edges 0, 50 and 200 µeq/L: Driscoll et al. 2003 (0, 50); survey band (200, recalled from memory).

    UT-base lies on an edge: 50 is not below 50.
    """
    anc = titrated()
    assert anc["UT-base"] == 50.0
    assert warned(results, STREAM, "acidic") == {s for s, v in anc.items() if v <= 0}
    assert warned(results, STREAM, "may turn acid") == {s for s, v in anc.items() if 0 < v < 50}
    assert warned(results, STREAM, "sensitive to acid") == {s for s, v in anc.items() if 50 <= v < 200}


def test_limestone_water_resists_and_headwaters_do_not(results):
    """Alkalinity and saturation rise from granite to limestone; acid to pH 6 is negative where pH is below 6."""
    table = by_id(results, STREAM)
    hard, thin = table[table["region"] == "Kiln Hills"], table[table["region"] == "High Tops"]
    assert hard["alkalinity_meq_l"].min() > 5 * thin["alkalinity_meq_l"].max()
    assert hard["si_calcite"].min() > thin["si_calcite"].max()
    assert (hard["warnings"].isna()).all()
    assert ((table["acid_to_ph_6_0_meq_l"] < 0) == (table["ph"] < 6.0)).all()


def test_melt_is_more_acid_than_base_flow(results):
    """Snowmelt is the acid season of every site."""
    table = by_id(results, STREAM)
    sites = sorted({sample.split("-")[0] for sample in table.index})
    assert len(sites) == 12
    for column in ("ph", "alkalinity_meq_l"):
        melt, base = (table.loc[[f"{s}-{season}" for s in sites], column].to_numpy() for season in ("melt", "base"))
        assert (melt < base).all(), column


def test_water_that_gives_off_co2_rises_in_ph(results):
    """Above the CO2 of air, equilibrium with air raises pH; below, it lowers it."""
    table = by_id(results, STREAM)
    table = table[table["status"] == "ok"]
    excess, rise = table["pco2_air_ratio"] - 1.0, table["ph_at_air"] - table["ph"]
    assert len(table) >= 15
    assert (np.sign(excess) == np.sign(rise)).all()


def test_holding_co2_never_weakens_the_buffer(results):
    """With CO2 pressure held, carbon follows the base: open buffer intensity is at least the closed one."""
    table = by_id(results, STREAM)
    assert (table["buffer_open_meq_l_ph"] >= table["buffer_closed_meq_l_ph"] * (1 - 1e-6)).all()


def test_missing_anions_of_brown_water_are_the_organic_ones(results):
    """Charge that the ions of brown water lack, summed from the raw table, against Oliver, Thurman & Malcolm (1983).

    10 µeq per mg C; pK = 0.96 + 0.90 pH - 0.039 pH^2. Bicarbonate below pH 5 is under 1 µeq/L and left out;
    aluminum counts three charges. 30 µeq/L is what 1.5 % noise in each ion, 5 % in aluminum and 0.03 in pH can add up to.
    """
    header, rows = raw(STREAM)
    for row in (r for r in rows[:24] if r[0] in BROWN):
        cell = dict(zip(header, row, strict=True))
        ph, doc = float(cell["pH (field)"]), float(cell["DOC (mg/L)"])
        charge = 10.0 ** (6.0 - ph) + 3.0 * float(cell["Aluminum (µg/L)"]) / 26.982
        for name, mass in MG_PER_MEQ.items():
            text = next(v for k, v in cell.items() if k.startswith(f"{name} (mg/L"))
            value = float(text.lstrip("<")) * (0.5 if text.startswith("<") else 1.0)
            charge += (-1.0 if name in ("Sulfate", "Nitrate", "Chloride") else 1.0) * 1e3 * value / mass
        k = 10.0 ** -(0.96 + 0.90 * ph - 0.039 * ph**2)
        assert_allclose(charge, 10.0 * doc * k / (k + 10.0**-ph), rtol=0, atol=30.0, err_msg=row[0])
    assert failing(results, STREAM, "ion balance") == set(BROWN)


def test_organic_alkalinity_is_seen_where_carbon_was_measured(results):
    """BP-base titrates organic acids that its pH and carbon do not know of; clear tarns close."""
    assert failing(results, STREAM, "alkalinity against pH and carbon") == {"BP-base"}


def test_detection_limits_are_noted(results):
    """Every '<' that was read is counted in the notes; two rows are refused only later, for want of a reading."""
    header, rows = raw(STREAM)
    read_rows = rows[:24] + [row for row in rows[24:] if row[0] in ("TB-noon", "CS-noon")]
    notes = " ".join((results(STREAM) / "run.json").read_text(encoding="utf-8").split())
    for name, column in (("Ammonium (mg/L as N)", "ammonium"), ("Aluminum (µg/L)", "aluminum")):
        count = sum(row[header.index(name)].startswith("<") for row in read_rows)
        assert count > 0
        assert f"{count} x below detection, half the limit used: {column}_mol_l" in notes


# ---------------------------------------------------------------- plant


def plant_alkalinity(kind):
    """Alkalinity of the good plant samples of a kind as written in the file. [mg/L as CaCO3]"""
    header, rows = raw(PLANT, ";")
    at, which = header.index("Alkalinity (mg/L as CaCO3)"), header.index("Kind of water")
    return {row[0]: float(row[at].replace(",", ".")) for row in rows[:-1] if row[which] == kind}


def test_plant_limits_of_the_house_replace_and_add(results, tmp_path):
    """Treated water is judged by the house's 50 mg/L instead of the shipped 40, raw water by the shipped 30."""
    treated, raw_water = plant_alkalinity("treated"), plant_alkalinity("raw")
    assert warned(results, PLANT, "soft for the mains") == {s for s, v in treated.items() if v < 50}
    assert warned(results, PLANT, "little for coagulants") == {s for s, v in raw_water.items() if v < 30}
    table = by_id(results, PLANT)
    far = set(table.index[(table["si_calcite"] < -1) & (table["water_kind"] == "treated_water")])
    assert warned(results, PLANT, "dissolves lime scale") == far != set()
    CliRunner().invoke(main, ["assess", str(DATA / PLANT), "--out", str(tmp_path / "p"), "--no-figure", "--draws", "0"])
    shipped = pd.read_csv(tmp_path / "p" / "verdicts.csv")
    soft = set(shipped.loc[shipped["warning"] == "soft for the mains", "sample_id"])
    assert soft == {s for s, v in treated.items() if v < 40}
    assert "dissolves lime scale" not in set(shipped["warning"])


def test_plant_alkalinity_is_converted_by_the_mass_of_calcium_carbonate(results):
    """1 meq/L is 50.04 mg/L as CaCO3 (100.086 g/mol, two charges)."""
    table = by_id(results, PLANT)
    for sample, value in (plant_alkalinity("raw") | plant_alkalinity("treated")).items():
        assert_allclose(table.loc[sample, "alkalinity_meq_l"], value / 50.043, rtol=2e-4, atol=5e-5)


def test_alum_and_storm_move_the_water_away_from_calcite(results):
    """Calcite saturation of the raw water is lowest where alkalinity is, in the storm."""
    table = by_id(results, PLANT)
    raw_water = table[table["water_kind"] == "raw_water"]
    assert raw_water["si_calcite"].idxmin() == raw_water["alkalinity_meq_l"].idxmin() == "R17-02"
    assert (raw_water["ccpp_mg_l"] < 0).all()


# ---------------------------------------------------------------- estuary


def estuary():
    """The estuary table by sample name, numbers as written; nan for blanks."""
    header, rows = raw(ESTUARY)
    table = pd.DataFrame(rows, columns=header)
    table.index = table["Stn"] + "_" + table["Depth"]
    return table.drop(columns=["Stn", "Day"]).apply(pd.to_numeric)


def test_per_kilogram_readings_use_the_density_of_sea_water(results):
    """µmol/kg times the TEOS-10 density (gsw, 44.7 N taken; no place enters beyond 1e-5) is what is reported per liter.

    2e-4 covers the density formula of 1980 and the four decimals of the output.
    """
    table, given = by_id(results, ESTUARY), estuary()
    sa = gsw.SR_from_SP(given["S psu"].to_numpy())
    rho = gsw.rho(sa, gsw.CT_from_t(sa, given["T deg C"].to_numpy(), 0.0), 0.0) / 1000.0
    assert list(table.index) == list(given.index)
    assert_allclose(table["alkalinity_meq_l"], given["TA"] * rho / 1e3, rtol=2e-4)


def test_alkalinity_mixes_along_a_line(results):
    """Conservative mixing: titrated alkalinity per kg lies on the line between river and sea, within 3 x 4 µmol/kg."""
    given = estuary()
    s, ta = given["S psu"].to_numpy(), given["TA"].to_numpy()
    line = np.interp(s, [s[0], s[-1]], [ta[0], ta[-1]])
    assert_allclose(ta, line, rtol=0, atol=12.0)
    assert by_id(results, ESTUARY)["alkalinity_meq_l"].is_monotonic_increasing


def test_regime_and_pair_follow_salinity(results):
    """Below 1 fresh, to 30 brackish, above marine; at sea alkalinity and carbon tell pH better than the electrode."""
    table, s = by_id(results, ESTUARY), estuary()["S psu"]
    expected = np.where(s < 1, "fresh", np.where(s < 30, "brackish", "marine"))
    assert table["regime"].tolist() == expected.tolist()
    assert (table.loc[(s >= 20).to_numpy(), "pair"] == "alkalinity and carbon").all()
    assert set(table.loc[(s >= 1).to_numpy(), "pair"]) <= {"alkalinity and carbon", "pH and alkalinity"}


def test_uncalibrated_ph_is_found(results):
    """The check compares all three readings wherever they are, whichever pH column holds the reading; one disagrees."""
    checks = read(results, ESTUARY, "checks.csv")
    made = set(checks.loc[checks["check"] == "alkalinity against pH and carbon", "sample_id"])
    assert made == set(estuary().index)
    assert failing(results, ESTUARY, "alkalinity against pH and carbon") == {"A8_0.5"}


def test_computed_ph_agrees_with_the_dye(results):
    """pH from alkalinity and carbon fits the measured total-scale pH, but for the uncalibrated one.

    0.09 is three standard deviations of two readings of 4 µmol/kg each, over the weakest buffer there, 0.13 meq/L per
    pH, with 0.01 for the dye.
    """
    table, given = by_id(results, ESTUARY), estuary()
    off = (table["ph_total"] - given["pHT"]).dropna().drop("A8_0.5")
    assert len(off) == 11
    assert_allclose(off, 0.0, rtol=0, atol=0.09)
    assert given.loc["A8_0.5", "pHT"] - table.loc["A8_0.5", "ph_total"] > 0.1


def test_the_weakest_buffer_is_where_carbon_nears_alkalinity(results):
    """Egleston et al. 2010: sea water buffers least where inorganic carbon about equals alkalinity."""
    table, given = by_id(results, ESTUARY), estuary()
    salt = given["S psu"] >= 1
    weakest = table.loc[salt, "buffer_closed_meq_l_ph"].idxmin()
    assert abs(given.loc[weakest, "TCO2"] / given.loc[weakest, "TA"] - 1.0) < 0.03
    assert warned(results, ESTUARY, "weak for salt water") >= {weakest}


def test_surface_takes_up_carbon_and_depth_gives_it_back(results):
    """At each station with two depths the deeper water has more CO2 and lies closer to dissolving calcite."""
    table = by_id(results, ESTUARY)
    for top, deep in (("A5_0.5", "A5_6"), ("A7_0.5", "A7_9"), ("A9_0.5", "A9_14")):
        assert table.loc[deep, "pco2_uatm"] > table.loc[top, "pco2_uatm"]
        assert table.loc[deep, "si_calcite"] < table.loc[top, "si_calcite"]


# ---------------------------------------------------------------- the walk-through


REFUSED = "tank field_data/stream_regeneration.toml --out regeneration"  # the walk-through shows a design that fails
QUICK = {"titration": ["--figures", "0"], "tank": ["--no-figure", "--cases", "0"]}


def test_commands_of_the_walk_through_run(tmp_path, monkeypatch):
    """Every command of docs/first_hour.md ends as the page says; its output goes elsewhere."""
    text = (ROOT / "docs" / "first_hour.md").read_text(encoding="utf-8")
    commands = re.findall(r"^    aquabuf (.+)$", text, flags=re.MULTILINE)
    assert len(commands) >= 11
    monkeypatch.chdir(ROOT)
    for command in commands:
        words = command.split(" > ")[0].split()
        if "--out" in words:
            at = words.index("--out") + 1
            words[at:at + 1] = [str(tmp_path / words[at]), *QUICK.get(words[0], ["--no-figure", "--draws", "0"])]
        done = CliRunner().invoke(main, words)
        assert done.exit_code == int(command == REFUSED), f"{command}: {done.output or done.exception}"
