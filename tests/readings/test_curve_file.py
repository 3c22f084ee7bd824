"""Titration curves of wastes from a table: units, order, repairs, and each fault with its row, column and remedy."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.curve_file import curve_quantities, read_curves
from aquabuf.readings.headers import parse_header
from aquabuf.readings.schema import example_header, name_index

PH = [2.0, 2.3, 3.1, 6.5, 9.0, 10.5]
BASE = [0.0, 4.0, 8.0, 10.0, 11.0, 13.0]  # in tenths of the unit of each case


def rows(*columns):
    """Lines of a table."""
    return "".join(",".join(map(str, line)) + "\n" for line in zip(*columns, strict=True))


@pytest.fixture
def curves(table):
    """Read a table given as text."""

    def read(text, **options):
        return read_curves(table(text), **options)

    return read


def only(found):
    """The one curve of a file without faults."""
    assert found.refused.empty, found.refused.to_string()
    assert len(found.curves) == 1
    return found.curves[0]


# eq/L of 10 units: by definition of the prefixes; 50.0435 mg CaCO3 per meq (100.087 g/mol, two equivalents)
@pytest.mark.parametrize(("header", "eq_l", "options"), [
    ("base (meq/L)", 0.01, {}),
    ("base added (eq/L)", 10.0, {}),
    ("base_added_meq_l", 0.01, {}),
    ("Alkali [mmol/L]", 0.01, {}),
    ("caustic (mg/L as CaCO3)", 10.0 / 50.0435 * 1e-3, {}),
    ("base (mL)", 0.01, {"sample_volume_ml": 100.0, "titrant_normality_eq_l": 0.1}),
    ("base (L)", 10.0, {"sample_volume_ml": 100.0, "titrant_normality_eq_l": 0.1}),
    ("reagent ratio", 5.0, {"titrant_normality_eq_l": 0.5}),
    ("base per influent (L/L)", 5.0, {"titrant_normality_eq_l": 0.5}),
    ("base (mL/L)", 5e-3, {"titrant_normality_eq_l": 0.5}),
    ("reagent ratio [gal/gal]", 5.0, {"titrant_normality_eq_l": 0.5}),
    ("base_ml_l", 5e-3, {"titrant_normality_eq_l": 0.5}),
])  # fmt: skip
def test_units(curves, header, eq_l, options):
    """Ten of each unit, in equivalents per liter of raw waste; rows are lines of the file."""
    curve = only(curves(f"pH,{header}\n" + rows(PH, BASE), **options))
    assert_allclose(curve.base_eq_l, np.array(BASE) / 10.0 * eq_l, rtol=2e-5, atol=1e-15)
    assert_allclose(curve.ph, PH)
    assert curve.rows.tolist() == [2, 3, 4, 5, 6, 7]


def test_acid_counts_negative(curves):
    """Acid in its own column, or with a minus among base; in whatever order, the curve rises."""
    own = only(curves("base (meq/L),acid (meq/L),pH\n,5,3\n,2,4.5\n0,,6.2\n1,,8\n3,,9.5\n"))
    signed = only(curves("base (meq/L),pH\n3,9.5\n1,8\n0,6.2\n-5,3\n-2,4.5\n"))
    for curve in (own, signed):
        assert_allclose(curve.base_eq_l, [-5e-3, -2e-3, 0.0, 1e-3, 3e-3])
        assert_allclose(curve.ph, [3.0, 4.5, 6.2, 8.0, 9.5])
    assert signed.rows.tolist() == [5, 6, 4, 3, 2]


def test_thinning_by_titrant(curves):
    """Share of waste: sample over sample and titrant, however titrant is counted."""
    share = 100.0 / (100.0 + np.array(BASE))
    by_volume = only(curves("base (mL),pH,sample volume (mL),normality\n" + rows(BASE, PH, [100] * 6, [0.1] * 6)))
    assert_allclose(by_volume.dilution, share)
    by_ratio = only(curves("base (L/L),pH\n" + rows(np.array(BASE) / 100, PH), titrant_normality_eq_l=0.1))
    assert_allclose(by_ratio.dilution, share)
    text = "base (meq/L),pH\n" + rows(BASE, PH)
    by_amount = only(curves(text, titrant_normality_eq_l=0.1))
    assert_allclose(by_amount.dilution, share)
    unknown = only(curves(text))
    assert_allclose(unknown.dilution, 1.0)
    assert unknown.notes == ("the titrant normality is not given: thinning by the titrant is not corrected for",)


def test_row_values_outrank_arguments(curves):
    """A row's own volume and strength are used, the arguments where it has none."""
    text = "base (mL),pH,sample volume (mL),normality\n0,2,,\n4,2.3,200,\n4,3.1,,0.15\n10,6.5,,\n11,9,,\n"
    curve = only(curves(text, sample_volume_ml=100.0, titrant_normality_eq_l=0.1))
    assert_allclose(curve.base_eq_l, [0.0, 0.1 * 4 / 200, 0.15 * 4 / 100, 0.1 * 10 / 100, 0.1 * 11 / 100])


def test_samples_temperature_and_time(curves):
    """A blank name belongs to the sample before; temperature is a mean, told where it ran; time is kept as written."""
    text = ("sample,base (meq/L),pH,temp (°C),time stamp,notes\n" +
            rows(["a", *[""] * 5], BASE, PH, [20, 21, 22, 23, 24, 25], ["2024-05-01 06:00", *[""] * 5], [""] * 6) +
            rows(["b"] * 6, BASE, PH, [77, *[""] * 5], [""] * 6, ["warm"] * 6).replace("77", "25"))
    a, b = curves(text).curves
    assert (a.sample_id, a.t_c, a.time) == ("a", 22.5, "2024-05-01 06:00")
    assert a.notes[-1].startswith("the temperature ran over 5 °C")
    assert (b.sample_id, b.t_c, b.time) == ("b", 25.0, "")
    assert not any("temperature" in note for note in b.notes)
    assert np.isnan(only(curves("base (meq/L),pH\n" + rows(BASE, PH))).t_c)
    assert only(curves("base (meq/L),pH\n" + rows(BASE, PH), t_c=30.0)).t_c == 30.0


def test_small_falls_are_evened_out_and_told(curves):
    """The nearest rising curve by least squares: two neighbors in the wrong order become their mean, once."""
    curve = only(curves("base (meq/L),pH\n" + rows([0, 1, 2, 3, 4, 5, 6], [2.0, 2.5, 2.44, 3, 4, 5, 6])))
    assert_allclose(curve.ph, [2.0, 2.47, 3, 4, 5, 6])
    assert_allclose(curve.base_eq_l, np.array([0, 1.5, 3, 4, 5, 6]) * 1e-3)
    assert any("rows 3, 4 were evened out by up to 0.030" in note for note in curve.notes)
    refused = curves("base (meq/L),pH\n" + rows([0, 1, 2, 3, 4, 5, 6], [2.0, 2.5, 2.44, 3, 4, 5, 6]), noise_ph=0.02)
    assert refused.curves == ()


def test_the_raw_waste_stays_at_nothing_added(curves):
    """Evening out around the raw waste does not move it."""
    curve = only(curves("base (meq/L),pH\n" + rows([0, 1, 2, 3, 4, 5], [2.02, 2.0, 3, 4, 5, 6])))
    assert_allclose(curve.base_eq_l[0], 0.0, atol=0)
    assert_allclose(curve.ph[0], 2.01)


def test_points_of_one_amount_are_averaged(curves):
    """Base and acid vessels both begin with the raw waste."""
    curve = only(curves("base (meq/L),acid (meq/L),pH\n0,,6.0\n1,,7\n2,,8\n,0,6.04\n,1,5\n,2,4\n"))
    assert_allclose(curve.ph, [4, 5, 6.02, 7, 8])
    assert any("rows 2 and 5 have the same amount; their mean pH is used" in note for note in curve.notes)


def test_a_curve_without_the_raw_waste_is_told(curves):
    """Its own pH must be in the curve for a demand."""
    curve = only(curves("base (meq/L),pH\n" + rows([1, 2, 3, 4, 5], [2, 3, 4, 5, 6])))
    assert any("the raw waste (nothing added) is not within the curve, which runs from 0.001 to 0.005 eq/L" in note
               for note in curve.notes)


GOOD = rows(["a"] * 6, BASE, [""] * 6, [""] * 6, PH, [100] * 6, [0.1] * 6)
HEADER = "sample_id,base (meq/L),base (mL),acid (meq/L),pH,sample volume (mL),normality\n"


def bad(changes, count=6):
    """Rows of a sample x that is good but for these cells: (row, field) -> text."""
    lines = [["x", str(b), "", "", str(p), "", ""] for b, p in zip(BASE, PH, strict=True)][:count]
    for (row, at), text in changes.items():
        lines[row][at] = text
    return "".join(",".join(line) + "\n" for line in lines)


# rows of x stand on lines 8 to 13 of the file
@pytest.mark.parametrize(("text", "row", "column", "rule", "remedy"), [
    (bad({(2, 1): "", (2, 2): "8"}), 10, "base (mL)", r"mixed units: .* base \(meq/L\) has values too", "convert one of them"),
    (bad({(3, 4): ""}), 11, "pH", "each point needs its pH", "fill it in, or remove the row"),
    (bad({(3, 1): ""}), 11, "base (meq/L)", "each point needs the base or acid added", r"0 for the raw waste"),
    (bad({(i, 1): "" for i in range(6)}), 8, "base (meq/L)", "a curve needs the base or acid added", "fill it in"),
    (bad({(3, 4): "2.5"}), 11, "pH", r"must rise as base is added; it was 3\.1 in row 10", "read the point again"),
    (bad(dict(zip([(i, 4) for i in range(6)], ["9", "8", "7", "6", "5", "4"], strict=True))), 9, "pH",
     "must rise as base is added; it was 9 in row 8", "is this acid"),
    (bad({}, count=4), 8, "(rows)", "a curve needs 5 or more", "titrate on"),
    (bad({(1, 1): "8"}), 10, "pH", r"points of the same amount must agree within 0\.1; pH is 2\.3 in row 9", "read it again"),
    (bad({(i, 4): "no" for i in range(6)}), 8, "pH", "must be a number", "units belong in the header"),
    (bad({(2, 4): "31"}), 10, "pH", "must be -1 to 15", ""),
    (bad({(2, 3): "-3"}), 10, "acid (meq/L)", "must be 0 to 40000 meq/L", ""),
    (bad({(i, 1): "" for i in range(6)} | {(i, 2): str(i) for i in range(6)}), 9, "sample volume (mL)",
     "sample_volume_ml must be known where titrant is counted by volume", "pass it for the whole file"),
    (bad({}) + "x,9,3\n", 14, "(row)", "each row needs 7 fields, as the header has", "check delimiters"),
])  # fmt: skip
def test_a_bad_curve_comes_back_and_the_good_go_on(curves, text, row, column, rule, remedy):
    """Each fault is named with row, column, rule and remedy; the neighbors are whole."""
    found = curves(HEADER + GOOD + text + GOOD.replace("a,", "c,"))
    assert [curve.sample_id for curve in found.curves] == ["a", "c"]
    assert all(curve.ph.size == 6 for curve in found.curves)
    assert found.refused_ids == ("x",)
    line = found.refused.iloc[0]
    assert (line["row"], line["column"]) == (row, column)
    assert re.search(rule, line["rule"]), line["rule"]
    assert re.search(remedy, line["remedy"]), line["remedy"]


@pytest.mark.parametrize(("text", "options", "error", "words"), [
    ("base (meq/L),temp (°C)\n1,2\n", {}, HeaderError, r"needs a column of pH; found base_added_eq_l, temperature_c\. Add one"),
    ("pH,temp (°C)\n1,2\n", {}, HeaderError, r"needs a column of what was added; found ph, temperature_c\. Add one, e\.g\."),
    ("pH,base\n1,2\n", {}, HeaderError, r"'base' needs a unit, which says what is meant: .*mL"),
    ("pH,base (mg/L)\n1,2\n", {}, HeaderError, r"mg/L of base_added can mean mg/L as CaCO3"),
    ("pH,base (meq/kg)\n1,2\n", {}, HeaderError, r"column 'base \(meq/kg\)' is per kilogram.*Multiply it by the density"),
    ("pH,base (meq/L),alkali (meq/L)\n1,2,3\n", {}, HeaderError, r"both give base_added_eq_l"),
    ("pH,base (meq/L)\n", {}, InputError, r"has a header but no rows\. Add the points"),
    ("pH,base (meq/L)\n1,2\n", {"sample_volume_ml": 0.0}, InputError, r"sample_volume_ml must be above 0; found 0\.0\. Correct"),
    ("pH,base (meq/L)\n1,2\n", {"titrant_normality_eq_l": -1}, InputError, r"titrant_normality_eq_l must be above 0; found -1"),
    ("pH,base (meq/L)\n1,2\n", {"noise_ph": 3}, InputError, r"noise_ph must be 0 to 1; found 3\. A scatter"),
])  # fmt: skip
def test_files_that_cannot_be_read(curves, text, options, error, words):
    """The header or an argument is refused as a whole, with the remedy."""
    with pytest.raises(error, match=words):
        curves(text, **options)


def test_a_stray_cell_and_a_map(curves, table):
    """A value without a header is named; a map gives meaning to other headers, and values for all rows."""
    found = curves("base (meq/L),pH,\n" + rows(BASE, PH, ["", "", "?", "", "", ""]))
    assert found.curves == ()
    assert (found.refused.iloc[0]["row"], found.refused.iloc[0]["rule"]) == (4, "a column without a header must be empty")
    mapping = table('unlisted = "ignore"\n[columns]\nx = "base (mL)"\npH = "pH"\n[values]\n'
                    'sample_volume_ml = 100\n"normality" = 0.1\n', "map.toml")
    found = curves("x,pH,who\n" + rows(BASE, PH, ["me"] * 6), mapping=mapping)
    assert_allclose(only(found).base_eq_l, np.array(BASE) * 1e-3)
    assert "1 columns left out: who" in found.notes


def test_every_column_of_the_table_is_read_by_its_own_name():
    """Names, units and aliases of the shipped table fit together."""
    index = name_index(schema=curve_quantities())
    for name, quantity in curve_quantities().items():
        assert parse_header(example_header(quantity), index).name == name
        assert parse_header(name, index).name == name
