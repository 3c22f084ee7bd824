"""Cells, rows and pieces: what is kept, what is rejected and with which words."""

import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from aquabuf.readings.reader import iter_readings, read_readings
from aquabuf.readings.result import join_readings
from aquabuf.readings.template import template, template_kinds

CA = 40.078e3  # mg of calcium per mole, IUPAC


def reject_of(readings, **where):
    """The one line of `rejected` that fits."""
    lines = readings.rejected
    for column, value in where.items():
        lines = lines[lines[column] == value]
    assert len(lines) == 1, readings.rejected.to_string()
    return lines.iloc[0]


@pytest.mark.parametrize(
    ("header", "cell", "rule", "remedy"),
    [
        ("ph", "seven", "must be a number", "correct it or leave it blank"),
        ("ph", "7.4 mg/L", "must be a number", "units belong in the header"),
        ("ph", "1_0", "must be a number", "correct it"),
        ("ph", "0x7", "must be a number", "correct it"),
        ("ph", "1e400", "must be finite", "leave the cell blank"),
        ("calcium_mg_l", "1e200", "must be finite", "leave the cell blank"),
        ("ph", "inf", "must be finite", "leave the cell blank"),
        ("ph", "-Infinity", "must be finite", "leave the cell blank"),
        ("ph", ">9", "above the range of the method", "diluted result or leave it blank"),
        ("ph", "<4", "'<' has no use for ph", "enter the value itself"),
        ("ph", "74", "must be -1 to 15", "is it 7.4? Check the decimal sign"),
        ("ph", "745", "must be -1 to 15", "is it 7.45?"),
        ("temperature_c", "61", "must be -2 to 60 °C", "is it in °F (then 16.1 °C)?"),
        ("temperature_c", "273", "must be -2 to 60 °C", "is it in kelvin"),
        ("temperature_c", "288.25", "must be -2 to 60 °C", "is it in kelvin (then 15.1 °C)?"),
        ("temperature_c", "215", "must be -2 to 60 °C", "is it 21.5?"),
        ("temperature_f", "200", "must be 28.4 to 140 °F", "is it 20? Check the decimal sign"),
        ("calcium_mg_l", "-3", "must be 0 to 400780 mg/L", "cannot be below zero"),
        ("calcium_mg_l", "1e9", "must be 0 to 400780 mg/L", "check the unit in the header"),
        ("calcium_mg_l", "<-1", "a detection limit must be above zero", "leave it blank"),
        ("calcium_mg_l", "ND", "a value below detection needs its limit", "write it as <0.02"),
        ("calcium_mg_l", "<LOD", "a value below detection needs its limit", "write it as <0.02"),
        ("salinity", "-1", "must be 0 to 50", "cannot be below zero"),
        ("ph_u", "-0.1", "an uncertainty must be 0 or more", "check"),
        ("water_kind", "pond", "must be one of lake, stream", "correct the word"),
        ("filtered", "maybe", "must be one of yes, no", "correct the word"),
    ],
)  # fmt: skip
def test_a_bad_cell_rejects_its_row_only(table, header, cell, rule, remedy):
    """Row, name, column, value, rule and remedy; the neighbors stay."""
    good = {"water_kind": "lake", "filtered": "yes", "temperature_f": "50"}.get(header, "5")
    readings = read_readings(table(f"sample_id,{header}\na,{good}\nb,{cell}\nc,{good}\n"))
    assert readings.frame["sample_id"].tolist() == ["a", "c"]
    line = reject_of(readings, row=3)
    assert (line["sample_id"], line["column"], line["value"]) == ("b", header, cell)
    assert rule in line["rule"]
    assert remedy in line["remedy"]


@pytest.mark.parametrize("cell", ["1,234.5", "1,234", "1 234", "1'234", "1,234,567"])
def test_thousands_are_refused_never_guessed(table, cell):
    """1,234 can be 1.234 as well."""
    line = reject_of(read_readings(table(f'sample_id,anc_ueq_l\na,"{cell}"\nb,1\n')), row=2)
    assert "thousands separators are not read" in line["rule"]
    assert "1234.5" in line["remedy"]


def test_the_other_decimal_sign_is_refused(table):
    """In a file of points a comma does not fit, and the reverse."""
    line = reject_of(read_readings(table('sample_id,ph\na,"7,4"\nb,7.4\n')), row=2)
    assert line["rule"] == "the decimal sign of this file is a point"
    readings = read_readings(table("sample_id;ph\na;7,4\nb;7,5\nc;7.4\nd;1.234,5\n"))
    assert reject_of(readings, row=4)["rule"] == "the decimal sign of this file is a comma"
    assert "thousands separators" in reject_of(readings, row=5)["rule"]


@pytest.mark.parametrize("token", ["", "NA", "N/A", "n.a.", "-", "--", "nan", "NaN", "null", " "])
def test_words_for_no_value(table, token):
    """Missing is missing, not zero and not an error."""
    readings = read_readings(table(f"sample_id,ph,site\na,{token},{token}\nb,7,S\n"))
    assert readings.rejected.empty
    assert math.isnan(readings.frame["ph"][0])
    assert readings.frame["site"].tolist() == ["", "S"]


def test_below_detection_is_half_with_its_spread(table):
    """A value evenly likely from 0 to x has mean x/2 and standard deviation x/sqrt(12)."""
    readings = read_readings(table("sample_id,calcium_mg_l,calcium_u_mg_l\na,<4,1\nb,< 8,\nc,8,2\n"))
    assert_allclose(readings.frame["calcium_mol_l"] * CA, [2.0, 4.0, 8.0])
    assert_allclose(readings.frame["calcium_u_mol_l"] * CA, [4 / math.sqrt(12), 8 / math.sqrt(12), 2.0])
    assert readings.below_detection("calcium_mol_l").tolist() == [True, True, False]
    assert readings.flags["value"].tolist() == ["<4", "< 8"]
    assert readings.notes == ("2 x below detection, half the limit used in calcium_mol_l (first: row 2, '<4')",)


def test_below_detection_with_the_spread_column_first(table):
    """The order of the columns does not matter."""
    readings = read_readings(table("sample_id,calcium_u_mg_l,calcium_mg_l\na,1,<4\nb,2,8\n"))
    assert_allclose(readings.frame["calcium_u_mol_l"] * CA, [4 / math.sqrt(12), 2.0])


def test_wrong_number_of_fields(table):
    """The name is given where it can be."""
    readings = read_readings(table("sample_id,ph\na,7\nb,7,4\nc\nd,7\n"))
    assert readings.frame["sample_id"].tolist() == ["a", "d"]
    line = reject_of(readings, row=3)
    assert (line["sample_id"], line["column"], line["value"]) == ("b", "(row)", "3 fields")
    assert line["rule"] == "each row needs 2 fields, as the header has"
    assert reject_of(readings, row=4)["value"] == "1 fields"


def test_a_value_under_no_header(table):
    """It would be lost in silence."""
    line = reject_of(read_readings(table("sample_id,ph,\na,7,\nb,7,9\n")), row=3)
    assert (line["value"], line["rule"]) == ("9", "a column without a header must be empty")


def test_names_are_needed_and_used_once(table):
    """The first usable row keeps the name."""
    readings = read_readings(table("sample_id,ph\na,7\n,7\na,8\nb,99\nb,8\n"))
    assert readings.frame[["row", "sample_id"]].to_numpy().tolist() == [[2, "a"], [6, "b"]]
    assert reject_of(readings, row=3)["rule"] == "each row needs a sample_id"
    assert reject_of(readings, row=4)["rule"] == "sample_id is already used in row 2"


@pytest.mark.parametrize("chunk_rows", [1, 2, 3, 7, 100])
def test_pieces_make_the_whole(table, chunk_rows):
    """Names used twice are caught across pieces, and the pieces add up to the file."""
    names = ["a", "b", "c", "a", "d", "e", "b", "f", "a"]
    path = table("sample_id,ph\n" + "".join(f"{name},{7 + i / 10}\n" for i, name in enumerate(names)))
    parts = list(iter_readings(path, chunk_rows=chunk_rows))
    assert len(parts) == -(-len(names) // chunk_rows)
    kept = pd.concat([part.frame for part in parts])
    rejected = pd.concat([part.rejected for part in parts])
    assert kept["sample_id"].tolist() == ["a", "b", "c", "d", "e", "f"]
    assert kept["row"].tolist() == [2, 3, 4, 6, 7, 9]
    assert rejected["row"].tolist() == [5, 8, 10]
    assert [rule[-1] for rule in rejected["rule"]] == ["2", "3", "2"]


def test_a_spread_that_begins_in_a_later_piece(table):
    """The whole has the column in its place, missing where nothing was said."""
    path = table("sample_id,calcium_mg_l,doc_mg_l\na,1,1\nb,<4,1\n")
    whole = join_readings(iter_readings(path, chunk_rows=1))
    assert list(whole.frame.columns) == ["row", "sample_id", "calcium_mol_l", "calcium_u_mol_l", "doc_mg_l"]
    assert math.isnan(whole.frame["calcium_u_mol_l"][0])
    assert whole.notes == ("1 x below detection, half the limit used in calcium_mol_l (first: row 3, '<4')",)


@pytest.mark.parametrize(
    ("text", "day"),
    [("2024-05-31", "2024-05-31"), ("2024-05-31T14:30", "2024-05-31"), ("31 May 2024", "2024-05-31"), ("16-Oct-84", "1984-10-16"),
     ("5-Jan-07", "2007-01-05"), ("31.5.2024", "2024-05-31"), ("03.04.2024", "2024-04-03"), ("31/5/2024", "2024-05-31"),
     ("5/31/2024", "2024-05-31"), ("4/4/2024", "2024-04-04"), ("1 September 2023", "2023-09-01")],
)  # fmt: skip
def test_dates(table, text, day):
    """The text stays, the day stands beside it."""
    readings = read_readings(table(f"sample_id,date\na,{text}\n"))
    assert readings.frame["date"][0] == text
    assert readings.frame["date_parsed"][0] == pd.Timestamp(day)


@pytest.mark.parametrize("text", ["6/5/2012", "2024-13-01", "31.2.2024", "spring", "2024"])
def test_dates_that_are_not_one_day(table, text):
    """They stay as text, are noted, and do not cost the row."""
    readings = read_readings(table(f"sample_id,date\na,{text}\nb,2024-05-31\n"))
    assert readings.frame["date"][0] == text
    assert pd.isna(readings.frame["date_parsed"][0])
    assert readings.flags["row"].tolist() == [2]
    assert "date_order in a map file" in readings.notes[0]


def test_choices_take_other_spellings(table):
    """Words of the trade mean one of the schema's."""
    readings = read_readings(table("sample_id,Water kind,filtered\na,River,Y\nb,raw water,no\nc,,\n"))
    assert readings.frame["water_kind"].tolist() == ["stream", "raw_water", ""]
    assert readings.frame["filtered"].tolist() == ["yes", "no", ""]


# factor [1 + 0.0191 (t - 25)] as tabulated for the linear compensation
@pytest.mark.parametrize(
    ("t_c", "factor"), [(5, 0.618), (10, 0.7135), (15, 0.809), (20, 0.9045), (25, 1.0), (30, 1.0955)]
)
def test_conductivity_is_brought_to_25_degrees(table, t_c, factor):
    """EC25 = EC / factor; the raw reading stays in its own column."""
    readings = read_readings(
        table(f"sample_id,temperature_c,conductivity_raw_us_cm,conductivity_raw_u_us_cm\na,{t_c},100,3\n")
    )
    assert_allclose(readings.frame["conductivity_us_cm"], 100 / factor, rtol=1e-9)
    assert_allclose(readings.frame["conductivity_u_us_cm"], 3 / factor, rtol=1e-9)
    assert readings.frame["conductivity_raw_us_cm"][0] == 100


def test_measured_conductivity_at_25_degrees_stays(table):
    """The derived value only fills gaps, and without a temperature there is none."""
    text = "sample_id,temperature_c,conductivity_us_cm,conductivity_raw_us_cm\na,5,150,100\nb,5,,100\nc,,,100\n"
    readings = read_readings(table(text))
    assert_allclose(readings.frame["conductivity_us_cm"], [150, 100 / 0.618, np.nan])
    assert readings.notes == (
        "1 x no temperature, so no conductivity at 25 °C in conductivity_raw_us_cm (first: row 4)",
    )


def test_calcium_from_its_hardness(table):
    """100.086 mg/L as CaCO3 is 1 mmol/L; measured calcium stays."""
    readings = read_readings(
        table("sample_id,calcium_hardness_mg_l_caco3,calcium_mg_l\na,100.086,\nb,100.086,20.039\n")
    )
    assert_allclose(readings.frame["calcium_mol_l"], [1e-3, 0.5e-3], rtol=1e-9)


def test_per_kilogram_by_the_density_of_each_row(table):
    """UNESCO technical paper 44 (recalled from memory): 1023.34306 at S 35, 25 °C; 999.96675 at S 0, 5 °C [kg/m3]."""
    text = "sample_id,temperature_c,salinity,alkalinity_umol_kg,alkalinity_u_umol_kg\na,25,35,2300,2\nb,5,0,2300,2\n"
    readings = read_readings(table(text))
    density = np.array([1.02334306, 0.99996675])
    assert_allclose(readings.frame["alkalinity_eq_l"], 2300e-6 * density, rtol=2e-8)
    assert_allclose(readings.frame["alkalinity_u_eq_l"], 2e-6 * density, rtol=2e-8)


def test_per_kilogram_without_temperature_or_salinity_is_said(table):
    """Pure water at 20 °C has 0.9982 kg/L (IAPWS)."""
    readings = read_readings(table("sample_id,dic_umol_kg\na,2000\n"))
    assert_allclose(readings.frame["dic_mol_l"], 2000e-6 * 0.9982, rtol=1e-5)
    assert readings.notes == (
        "1 x no temperature, density at 20 °C used in dic_mol_l (first: row 2)",
        "1 x no salinity, density of fresh water used in dic_mol_l (first: row 2)",
    )


def test_several_problems_of_one_row(table):
    """Each has its line, in the order of the columns."""
    readings = read_readings(table("sample_id,ph,temperature_c\na,x,99\nb,7,5\n"))
    assert readings.rejected["column"].tolist() == ["ph", "temperature_c"]
    assert readings.frame["sample_id"].tolist() == ["b"]


def test_all_rows_bad_is_still_an_answer(table):
    """An empty frame and the reasons."""
    readings = read_readings(table("sample_id,ph\na,x\nb\n"))
    assert readings.frame.empty
    assert readings.rejected["row"].tolist() == [2, 3]


def test_no_row_is_lost(table):
    """Rows kept and rows rejected are the rows of the file."""
    text = "sample_id,ph,calcium_mg_l\n" + "".join(
        f"s{i % 90},{i % 17},{'<' if i % 5 == 0 else ''}{i % 7}\n" for i in range(200)
    )
    readings = read_readings(table(text))
    rows = set(readings.frame["row"]) | set(readings.rejected["row"])
    assert rows == set(range(2, 202))
    assert not set(readings.frame["row"]) & set(readings.rejected["row"])


def test_headers_tell_how_each_was_read(table):
    """To print beside the result."""
    readings = read_readings(table("Sample ID,pH,Alkalinity (mg/L as CaCO3)\na,7,50\n"))
    assert readings.headers == {
        "Sample ID": ("sample_id", ""),
        "pH": ("ph", "-"),
        "Alkalinity (mg/L as CaCO3)": ("alkalinity_eq_l", "mg/L as CaCO3"),
    }


@settings(max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
@given(
    values=st.lists(st.floats(-5000, 15000).map(lambda v: v + 0.0), min_size=1, max_size=12),
    dialect=st.sampled_from([(",", "."), (";", ","), ("\t", ","), (";", ".")]),
)
def test_numbers_survive_every_dialect(table, values, dialect):
    """What Python writes is what is read, to the last bit, whatever the delimiter and decimal sign."""
    delimiter, decimal = dialect
    rows = [f"s{i}{delimiter}{repr(value).replace('.', decimal)}" for i, value in enumerate(values)]
    first = f"first{delimiter}0{decimal}5"  # so that the decimal sign shows
    path = table(
        "\n".join([f"sample_id{delimiter}anc_eq_l", first, f"second{delimiter}1{decimal}25", *rows]).replace(
            "anc_eq_l", "anc_meq_l"
        )
    )
    kept = read_readings(path).frame["anc_eq_l"].to_numpy()[2:]
    assert kept.tolist() == [value * 1e-3 for value in values]


@pytest.mark.parametrize("kind", [kind for kind in template_kinds() if kind != "map"])
def test_starter_tables_read_back(table, kind):
    """Every row is used and every remark names a column."""
    text = template(kind)
    readings = read_readings(table(text))
    assert len(readings.frame) == 2
    assert readings.rejected.empty
    assert text == template(kind)
    for header in readings.headers:
        assert f"#   {header}" in text


def test_the_same_file_gives_the_same_answer(table):
    """No clock, no chance."""
    path = table("sample_id,ph,date\na,7,2024-05-31\nb,x,\na,8,\n")
    first, second = read_readings(path), read_readings(path)
    pd.testing.assert_frame_equal(first.frame, second.frame)
    pd.testing.assert_frame_equal(first.rejected, second.rejected)
