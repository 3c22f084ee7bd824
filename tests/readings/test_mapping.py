"""Map files: someone else's table is read as it is, and every slip in the map has a message."""

import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import FileError, HeaderError, InputError
from aquabuf.readings.mapping import read_map
from aquabuf.readings.reader import read_readings
from aquabuf.readings.template import template

TABLE = "Station,Day,Probe pH,Ca100,NO3,T,Operator\nA,6/5/2012,7.1,4007.8,14.007,59,x\nA,7/5/2012,7.2,-5,-9999,68,y\n"
MAP = """
[columns]
"Probe pH" = "ph"
"Ca100" = { is = "calcium", unit = "mg/L", multiply = 0.01, negative = "zero" }
"NO3" = "nitrate (mg/L as N)"
"T" = "temperature (°F)"
"Operator" = "ignore"
"Day" = "date"
[compose]
sample_id = ["Station", "Day"]
[values]
salinity = 0.2
water_kind = "river"
[read]
missing = [-9999]
date_order = "day-month-year"
"""


@pytest.fixture
def mapped(table):
    """Readings of a table by a map, both given as text."""

    def read(map_text, table_text=TABLE):
        return read_readings(table(table_text), table(map_text, "map.toml"))

    return read


def test_a_table_as_it_is(mapped):
    """Names, units, a factor, composed names, constants, own missing values and the order of dates."""
    readings = mapped(MAP)
    frame = readings.frame
    assert readings.rejected.empty
    assert frame["sample_id"].tolist() == ["A_6/5/2012", "A_7/5/2012"]
    assert [str(day.date()) for day in frame["date_parsed"]] == ["2012-05-06", "2012-05-07"]
    assert_allclose(frame["calcium_mol_l"], [1e-3, 0.0], rtol=1e-9)
    assert_allclose(frame["nitrate_mol_l"], [1e-3, float("nan")], rtol=1e-9)
    assert_allclose(frame["temperature_c"], [15.0, 20.0])
    assert frame["salinity"].tolist() == [0.2, 0.2]
    assert frame["water_kind"].tolist() == ["stream", "stream"]
    assert readings.notes == (
        "1 columns left out: Operator",
        "1 x below zero, set to zero in calcium_mol_l (first: row 3, '-5')",
    )


def test_negative_values_can_be_left_out(mapped):
    """Or kept, and then the row is rejected by the limit."""
    assert mapped(MAP.replace('"zero"', '"missing"')).frame["calcium_mol_l"].isna().tolist() == [False, True]
    assert mapped(MAP.replace('"zero"', '"keep"')).rejected["column"].tolist() == ["Ca100"]


@pytest.mark.parametrize(
    ("policy", "words"),
    [
        ('unlisted = "error"\n', r"column 'Operator' is not listed in the map file, and unlisted = \"error\""),
        ("", r"column 'Operator' is not known"),
    ],
)
def test_headers_that_the_map_leaves_out(mapped, policy, words):
    """They are read if they explain themselves, refused or ignored."""
    text = policy + MAP.replace('"Operator" = "ignore"\n', "")
    with pytest.raises(HeaderError, match=words):
        mapped(text)
    ignored = mapped(
        'unlisted = "ignore"\n' + MAP.replace('"Operator" = "ignore"\n', "").replace('"T" = "temperature (°F)"\n', "")
    )
    assert "temperature_c" not in ignored.frame
    assert ignored.notes[0] == "2 columns left out: T, Operator"


def test_options_of_the_file(mapped):
    """Delimiter, decimal sign and encoding as said, where looking would not do."""
    options = '[read]\ndelimiter = ";"\ndecimal = ","\n'
    frame = mapped(options, "sample_id;anc_ueq_l\na;1,234\nb;2,500\n").frame
    assert_allclose(frame["anc_eq_l"], [1.234e-6, 2.5e-6])
    constants = mapped(options + "[values]\ntemperature_c = 12.5\n", "sample_id;anc_ueq_l\na;1,234\n").frame
    assert constants["temperature_c"].tolist() == [12.5]


def test_encoding_that_is_wrong(table):
    """A named encoding is not second-guessed."""
    with pytest.raises(FileError, match=r"cannot be decoded as utf-8\. Correct 'encoding' in the map file"):
        read_readings(
            table("sample_id,site\na,Höhe\n".encode("latin-1")), table('[read]\nencoding = "utf-8"\n', "m.toml")
        )


def test_words_for_no_value_of_ones_own(mapped):
    """Words and numbers, in text and number columns alike."""
    frame = mapped(
        '[read]\nmissing = ["no data", 99]\n', "sample_id,ph,site\na,no data,No Data\nb,99.0,S\nc,7,S\n"
    ).frame
    assert frame["ph"].isna().tolist() == [True, True, False]
    assert frame["site"].tolist() == ["", "S", "S"]


def test_an_acid_of_ones_own(mapped):
    """It has a column in mol/L, or in mg/L by its molar mass."""
    text = "[acids.malate]\npk = [3.4, 5.2]\ncharge = 0\ndh_j_mol = [1, 2]\nmolar_mass_g = 134.0\n"
    readings = mapped(text, "sample_id,malate_mg_l,malate_u_mmol_l\na,134,0.1\nb,<67,\n")
    assert_allclose(readings.frame["malate_mol_l"], [1e-3, 0.25e-3])
    assert_allclose(readings.frame["malate_u_mol_l"], [1e-4, 0.5e-3 / 12**0.5])
    acid = readings.acids["malate_mol_l"]
    assert (acid.name, acid.pk, acid.charge, acid.dh_j_mol, acid.dcp_j_mol_k) == (
        "malate",
        (3.4, 5.2),
        0,
        (1.0, 2.0),
        (),
    )
    with pytest.raises(
        HeaderError, match=r"malate cannot be given in mg/L, because it has no molar mass; give molar_mass_g"
    ):
        mapped(text.replace("molar_mass_g = 134.0\n", ""), "sample_id,malate_mg_l\na,1\n")


@pytest.mark.parametrize(
    ("text", "error", "words"),
    [
        ("[columns\n", FileError, r"map\.toml: the map file is not valid TOML: .*line 1.*Correct that line"),
        ("colums = 1\n", InputError, r"map file map\.toml, top level: the key 'colums' is not known\. Use one of: unlisted, columns"),
        ('unlisted = "skip"\n', InputError, r"unlisted: must be one of read, ignore, error; found 'skip'"),
        ("columns = 3\n", InputError, r"\[columns\]: must be a table of keys and values; found 3"),
        ('[columns]\n"T" = "temprature (°C)"\n', HeaderError, r"\[columns\] 'T': column 'temprature \(°C\)' is not known.*temperature_c"),
        ('[columns]\n"T" = 5\n', InputError, r"\[columns\] 'T': must be a quantity in quotes, .*found 5"),
        ('[columns]\n"N" = { is = "nitrate", unit = "mg/L" }\n', HeaderError, r"\[columns\] 'N': .*ambiguous"),
        ('[columns]\n"N" = { unit = "mg/L" }\n', InputError, r"\[columns\] 'N': the key 'is' is missing"),
        ('[columns]\n"N" = { is = "ph", units = "-" }\n', InputError, r"the key 'units' is not known\. Use one of: is, unit, multiply"),
        ('[columns]\n"N" = { is = "ph", multiply = 0 }\n', InputError, r"'multiply' must be a number above 0; found 0"),
        ('[columns]\n"N" = { is = "ph", negative = "drop" }\n', InputError, r"must be one of keep, zero, missing; found 'drop'"),
        ("[compose]\nsample = ['a']\n", InputError, r"\[compose\]: the key 'sample' is not known\. Use one of: sample_id"),
        ("[compose]\nsample_id = 'a'\n", InputError, r"\[compose\] sample_id: must be a list of headers; found 'a'"),
        ("[values]\ntemperature = 20\n", HeaderError, r"\[values\] 'temperature': column 'temperature' needs a unit"),
        ("[values]\nph = 'high'\n", InputError, r"\[values\] 'ph': must be a number; found 'high'"),
        ("[values]\nsample_id = 'x'\n", InputError, r"sample_id cannot be the same for every row\. Use \[compose\]"),
        ("[read]\ndelimiter = ':'\n", InputError, r"\[read\] delimiter: must be one of"),
        ("[read]\nsep = ';'\n", InputError, r"\[read\]: the key 'sep' is not known\. Use one of: delimiter, decimal"),
        ("[read]\nmissing = -9\n", InputError, r"\[read\] missing: must be a list of words or numbers, .*found -9"),
        ("[read]\ndelimiter = ','\ndecimal = ','\n", InputError, r"delimiter and decimal cannot both be a comma"),
        ("[read]\ndate_order = 'mdy'\n", InputError, r"date_order: must be one of day-month-year, month-day-year; found 'mdy'"),
        ("[acids.x1]\ncharge = 0\n", InputError, r"\[acids\.x1\]: the key 'pk' is missing"),
        ("[acids.x1]\npk = 4\n", InputError, r"\[acids\.x1\] pk: must be a list of numbers, .*found 4"),
        ("[acids.x1]\npk = [5, 4]\n", InputError, r"pk: must rise from first to last, .*found \[5\.0, 4\.0\]"),
        ("[acids.x1]\npk = [4]\ncharge = 0.5\n", InputError, r"charge: must be a whole number from -8 to 8; found 0\.5"),
        ("[acids.x1]\npk = [4]\ndh_j_mol = [1, 2]\n", InputError, r"dh_j_mol: needs one number per pk, that is 1; found 2"),
        ("[acids.x1]\npk = [4]\nmolar_mass_g = -1\n", InputError, r"molar_mass_g: must be a number above 0; found -1"),
        ("[acids.x1]\npk = [4]\npka = [4]\n", InputError, r"\[acids\.x1\]: the key 'pka' is not known"),
        ("[acids.calcium]\npk = [4]\n", InputError, r"\[acids\]: the name 'calcium' stands for both"),
    ],
)  # fmt: skip
def test_slips_in_the_map(table, text, error, words):
    """Each names the key, the rule, what was found and what to write."""
    with pytest.raises(error, match=words):
        read_map(table(text, "map.toml"))


def test_a_map_that_is_not_there(tmp_path, table):
    """Missing, or no text."""
    with pytest.raises(FileError, match=r"no such map file"):
        read_map(tmp_path / "none.toml")
    with pytest.raises(FileError, match=r"the map file must be UTF-8 text"):
        read_map(table(b"# caf\xe9\n", "m.toml"))


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('[columns]\n"PH" = "ph"\n', r"the map names the header 'PH' under \[columns\], but the file has none such"),
        ('[columns]\n"Probe PH" = "ph"\n', r"The nearest headers of the file are Probe pH"),
        ('unlisted = "ignore"\n[compose]\nsample_id = ["Station", "Hour"]\n', r"names the header 'Hour' under \[compose\]"),
        (MAP.replace('"Day" = "date"', '"Station" = "sample_id"'), r"'Station' and \[compose\] both give sample_id"),
        (MAP.replace("salinity = 0.2", "temperature_c = 2"), r"columns 'T' and 'temperature_c' both give temperature_c"),
    ],
)  # fmt: skip
def test_maps_that_do_not_fit_the_file(mapped, text, words):
    """A header that is not there, or a quantity given twice."""
    with pytest.raises((HeaderError, FileError), match=words):
        mapped(text)


def test_the_starter_map_is_valid(table):
    """Its own example table reads by it."""
    rows = "Station,Day,Probe pH,Alk,NO3,Ca100,Operator,example_acid_mg_l\nA,2024-01-02,7,100.086,no data,-3,x,12\n"
    readings = read_readings(table(rows), table(template("map"), "map.toml"))
    assert readings.rejected.empty
    assert readings.frame["sample_id"].tolist() == ["A_2024-01-02"]
    assert_allclose(readings.frame["alkalinity_eq_l"], 2e-3, rtol=1e-9)
    assert_allclose(readings.frame["example_acid_mol_l"], 1e-4, rtol=1e-9)


def test_fill_serves_only_rows_that_have_none(tmp_path):
    """A missing cell takes the value, in the unit its name states, and is flagged; a given one stays."""
    table, table_map = tmp_path / "t.csv", tmp_path / "m.toml"
    table.write_text("sample_id,temperature_c\na,\nb,7.5\n", encoding="utf-8")
    table_map.write_text('[fill]\n"temperature (°F)" = 59.0\n"elevation (m)" = 250\n', encoding="utf-8")
    readings = read_readings(table, table_map)
    assert_allclose(readings.frame["temperature_c"], [15.0, 7.5])
    assert_allclose(readings.frame["elevation_m"], [250.0, 250.0])
    assert readings.flags.query("column == 'temperature_c'")["row"].tolist() == [2]
    assert "missing, filled from the map file" in readings.flags["what"].tolist()


def test_fill_leaves_what_was_measured_per_kilogram(tmp_path):
    """A reading per kilogram is a reading: only the row without one is filled."""
    table, table_map = tmp_path / "t.csv", tmp_path / "m.toml"
    table.write_text("sample_id,ph,temperature_c,alkalinity_umol_kg\na,8,10,2000\nb,8,10,\n", encoding="utf-8")
    table_map.write_text('[fill]\n"alkalinity (meq/L)" = 5\n', encoding="utf-8")
    readings = read_readings(table, table_map)
    assert_allclose(readings.frame["alkalinity_eq_l"], [2000e-6 * 0.9997, 5e-3], rtol=1e-4)  # fresh water at 10 °C
    assert readings.flags["sample_id"].tolist().count("b") >= 1


@pytest.mark.parametrize(("entry", "words"), [
    ('temperature_c = "warm"', r"\[fill\] 'temperature_c': must be a number.*found 'warm'"),
    ('site = 3', r"\[fill\] 'site': must be a number for a column of numbers; found 3"),
    ('alkalinity_umol_kg = 2000', r"\[fill\] 'alkalinity_umol_kg': cannot be per kilogram"),
])
def test_fill_that_means_nothing(tmp_path, entry, words):
    """Each wrong entry is named with the rule."""
    table_map = tmp_path / "m.toml"
    table_map.write_text(f"[fill]\n{entry}\n", encoding="utf-8")
    with pytest.raises(InputError, match=words):
        read_map(table_map)
