"""Cells as entered and their conversion: factors by hand from molar masses and definitions. All waters are invented."""

import pytest

from aquabuf.readings.origin import cells_of
from aquabuf.readings.source import load_map, open_any


def cells(path, row=2, mapping=None):
    """Cells of a row by canonical column."""
    return {c.name: c for c in cells_of(path, mapping, {row})[row]}


@pytest.mark.parametrize(("header", "text", "name", "factor", "words"), [
    ("Alkalinity (mg/L as CaCO3)", "50", "alkalinity_eq_l", 2.0 / 100.0869e3, "CaCO3: 100.08"),   # 2 eq per mole
    ("Alkalinity (°dH)", "7", "alkalinity_eq_l", 10.0 * 2.0 / 56.077e3, "CaO: 56.07"),            # 10 mg/L CaO
    ("Alkalinity (µeq/L)", "350", "alkalinity_eq_l", 1e-6, ""),
    ("Total hardness (mg/L as CaCO3)", "100", "total_hardness_mol_l", 1.0 / 100.0869e3, "2 equivalents per mole"),
    ("Calcium (mg/L)", "40", "calcium_mol_l", 1.0 / 40.078e3, "Ca: 40.078 g/mol"),
    ("Calcium (meq/L)", "2", "calcium_mol_l", 0.5e-3, "charge 2"),
    ("DOC (mg/L)", "5", "doc_mg_l", 1.0, ""),
], ids=lambda v: v if isinstance(v, str) and "(" in v else "")
def test_factor_and_basis(table, header, text, name, factor, words):
    """The factor that is told turns the cell into the value that is read."""
    path = table(f"sample_id,temperature_c,{header}\na,10,{text}\n")
    cell = cells(path)[name]
    assert (cell.text, cell.column.header, cell.row) == (text, header, 2)
    told = cell.conversion()
    stated = 1.0 if told == "no conversion" else float(told.split()[1])
    assert stated == pytest.approx(factor, rel=2e-5)
    assert words in told
    read = next(open_any(path)).frame[name].iloc[0]
    assert read == pytest.approx(float(text) * factor, rel=2e-5)


def test_temperature_with_an_offset(table):
    """°F: times 5/9 less 160/9; K: less 273.15."""
    assert cells(table("sample_id,Water temp (K)\na,283\n"))["temperature_c"].conversion() == "× 1 - 273.15"
    assert cells(table("sample_id,Water temp (°F)\na,50\n"))["temperature_c"].conversion() == "× 0.555556 - 17.7778"


def test_per_kilogram_tells_of_the_density(table):
    """A laboratory's µmol/kg."""
    path = table("sample_id,temperature_c,salinity,alkalinity (µmol/kg)\na,10,35,2300\n")
    assert cells(path)["alkalinity_eq_l"].conversion() == "× 1e-06 × density of the sample"


def test_the_cell_is_as_entered(table):
    """Comments count as lines, a decimal comma stays, blanks and words for "no value" are no cells."""
    path = table("# a comment\nsample_id;temperature_c;ph;calcium (mg/L);chloride (mg/L)\na;10,5;7,40; <0,5 ;n/a\nb;11;8,1;;\n")
    found = cells(path, 3)
    assert {name: c.text for name, c in found.items()} == {"sample_id": "a", "temperature_c": "10,5", "ph": "7,40", "calcium_mol_l": "<0,5"}
    assert found["calcium_mol_l"].value == 0.5
    assert found["sample_id"].conversion() == ""
    assert set(cells(path, 4)) == {"sample_id", "temperature_c", "ph"}


def test_a_row_that_does_not_fit_has_no_cells(table):
    """Too few fields: which is which cannot be told."""
    assert cells_of(table("sample_id,ph,calcium (mg/L)\na,7\n"), None, {2}) == {2: ()}


def test_a_factor_and_constants_of_a_map(table):
    """`multiply` is in the factor; a value for every row says where it is from."""
    mapping = load_map(table('[columns]\n"x" = { is = "chloride", unit = "mg/L", multiply = 2.0 }\n[values]\ntemperature_c = 12.0\nwater_kind = "lake"\n', "m.toml"))
    found = cells(table("sample_id,x\na,35.45\n"), mapping=mapping)
    assert float(found["chloride_mol_l"].conversion().split()[1]) == pytest.approx(2.0 / 35.45e3, rel=1e-5)
    assert (found["temperature_c"].text, found["temperature_c"].place) == ("12.0", "the same for every row, from the map file")
    assert found["water_kind"].text == "lake"


LONG = '[long]\nsample_id = "S"\ncharacteristic = "P"\nvalue = "V"\nunit = "U"\n[characteristics]\n"acidity" = "ph"\n"Ca" = "calcium"\n'


def test_a_long_table_has_a_row_per_reading(table):
    """The sample is known by its first row; each reading has its own, with the characteristic as its column."""
    path = table("S,P,V,U\na,acidity,7.1,\nb,acidity,8,\na,Ca,40.078,mg/l\n", "l.csv")
    found = cells(path, 2, load_map(table(LONG, "l.toml")))
    assert {n: (c.row, c.column.header, c.text) for n, c in found.items()} == {"ph": (2, "acidity", "7.1"), "calcium_mol_l": (4, "Ca", "40.078")}
    assert float(found["calcium_mol_l"].conversion().split()[1]) == pytest.approx(1.0 / 40.078e3, rel=5e-6)  # six digits are told
