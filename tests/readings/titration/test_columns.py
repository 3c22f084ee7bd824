"""The schema of titrations: its names, and headers whose unit says what is meant."""

import re
from dataclasses import replace

import pytest

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.headers import parse_header
from aquabuf.readings.listing import columns_text
from aquabuf.readings.mapping import read_map
from aquabuf.readings.schema import (
    acid_quantity,
    example_header,
    index_of,
    name_index,
    quantities,
    schema_order,
    titration_quantities,
)
from aquabuf.readings.titration.result import COUNTS_PER_ML
from aquabuf.tables import read_table
from aquabuf.units import accepted_units, key

SCHEMA = titration_quantities()
INDEX = name_index(schema=SCHEMA)
NUMBERS = [q for q in SCHEMA.values() if q.is_number]


@pytest.mark.parametrize("quantity", NUMBERS, ids=lambda q: q.name)
def test_canonical_names_are_house_units(quantity):
    """A column named as the program names it is taken as it is, and so is its uncertainty."""
    for name, is_u in ((quantity.name, False), (quantity.u_name, True)):
        column = parse_header(name, INDEX)
        assert (column.name, column.is_u) == (name, is_u)
        assert (column.scale, column.offset) == (pytest.approx(1.0, rel=1e-12), 0.0)


def test_every_example_header_reads():
    """The header that help texts show for a quantity means that quantity."""
    for name, quantity in SCHEMA.items():
        assert parse_header(example_header(quantity), INDEX).name == name


def test_a_name_of_several_quantities_is_told_apart_by_every_unit():
    """No spelling of a unit fits two of them, and none of the names is too short."""
    shared = {name: meanings for name, meanings in INDEX.items() if len(meanings) > 1}
    assert {"titrant", "titrant_strength", "acid"} <= set(shared)
    for meanings in shared.values():
        spellings = [spelling for quantity, _ in meanings for row in read_table("units") if row["group"] == quantity.dimension
                     for spelling in {row["suffix"], key(row["unit"]), *row["spellings"].split(";")} if spelling]
        assert len(spellings) == len(set(spellings))
    assert all(len(name) > 1 for name in INDEX)


def test_shared_rows_are_those_of_readings():
    """One record for both kinds of table; `acids` stands for every acid that readings may have."""
    assert SCHEMA["temperature_c"] is quantities()["temperature_c"]
    acids = {f"{row['name']}_mol_l" for row in read_table("acids")}
    assert acids <= set(SCHEMA)
    assert {"borate", "acids"}.isdisjoint(SCHEMA)
    points, samples = titration_quantities("points"), titration_quantities("samples")
    assert set(points) & set(samples) == {"sample_id"}
    assert set(points) | set(samples) == set(SCHEMA)
    assert {"titrant_volume_ml", "titrant_mass_g", "titrant_counts", "ph", "potential_mv"} <= set(points)
    assert acids <= set(samples)


# value of one unit in the house unit, by definition of the prefixes
@pytest.mark.parametrize(
    ("header", "name", "scale"),
    [
        ("titrant_ml", "titrant_volume_ml", 1), ("titrant_ul", "titrant_volume_ml", 1e-3), ("titrant_g", "titrant_mass_g", 1),
        ("titrant_mg", "titrant_mass_g", 1e-3), ("titrant_counts", "titrant_counts", 1), ("Titrant (digits)", "titrant_counts", 1),
        ("titrant_eq_l", "titrant_strength_eq_l", 1), ("titrant_meq_l", "titrant_strength_eq_l", 1e-3),
        ("Titrant (N)", "titrant_strength_eq_l", 1), ("titrant_eq_kg", "titrant_strength_eq_kg", 1), ("normality", "titrant_strength_eq_l", 1),
        ("Titrant strength (meq/kg)", "titrant_strength_eq_kg", 1e-3), ("acid normality (N)", "titrant_strength_eq_l", 1),
        ("Acid added, mL", "titrant_volume_ml", 1), ("acid [µL]", "titrant_volume_ml", 1e-3), ("acid_g", "titrant_mass_g", 1),
        ("Base (mL)", "titrant_volume_ml", 1), ("sample_volume_l", "sample_volume_ml", 1e3), ("sample_mass_kg", "sample_mass_g", 1e3),
        ("potential_mv", "potential_mv", 1), ("emf (V)", "potential_mv", 1e3), ("mV", "potential_mv", 1), ("pH", "ph", 1), ("point", "sequence", 1),
        ("elapsed_s", "minutes", 1 / 60), ("minutes", "minutes", 1), ("time elapsed (h)", "minutes", 60), ("counts", "titrant_counts", 1),
        ("titrant_density_g_ml", "titrant_density_kg_l", 1), ("Temperature (°C)", "temperature_c", 1), ("boron_umol_kg", "boron_mol_l", 1e-6),
        ("titrant_u_eq_l", "titrant_strength_u_eq_l", 1), ("titrant_strength_u_eq_l", "titrant_strength_u_eq_l", 1),
        ("titrant_u_ml", "titrant_volume_u_ml", 1), ("titrant_u_counts", "titrant_counts_u", 1), ("titrant_u_eq_kg", "titrant_strength_u_eq_kg", 1),
        ("titrant_counts_u", "titrant_counts_u", 1), ("titrant uncertainty (µL)", "titrant_volume_u_ml", 1e-3), ("ph_u", "ph_u", 1),
    ],
)  # fmt: skip
def test_headers_of_titrations(header, name, scale):
    """Short names find their quantity by the unit."""
    column = parse_header(header, INDEX)
    assert (column.name, column.scale) == (name, pytest.approx(scale, rel=1e-12))


@pytest.mark.parametrize(
    ("header", "words"),
    [
        ("titrant", r"'titrant' needs a unit, which says what is meant: titrant_volume in mL, µL, L; titrant_mass in g, mg, kg; .*e\.g\. titrant_volume_ml"),
        ("titrant_strength", r"needs a unit, which says what is meant: titrant_strength in eq/L, meq/L; titrant_strength in eq/kg, meq/kg"),
        ("titrant (gal)", r"'gal' is not a unit of titrant_volume or titrant_mass or titrant_counts or titrant_strength\. Use one of: mL, µL, L, g, mg, kg, eq/L"),
        ("titrant (mol/L)", r"'mol/L' is not a unit of .*eq/L, meq/L"),
        ("titrant_mol_kg", r"column 'titrant_mol_kg' is not known"),
        ("burette", r"column 'burette' needs a unit: titrant_volume can be in mL, µL, L"),
        ("titrant_kind (mL)", r"titrant_kind takes no unit, found 'mL'"),
    ],
)  # fmt: skip
def test_headers_that_are_doubtful(header, words):
    """A unit is needed where a name means several things; mol/L of sulfuric acid would be two equivalents."""
    with pytest.raises(HeaderError, match=words):
        parse_header(header, INDEX)


def test_names_that_no_unit_tells_apart_clash():
    """Also an acid of the user's own may not take a name, whatever its unit."""
    a, b = acid_quantity("malate"), acid_quantity("malate")
    with pytest.raises(InputError, match=r"the name 'malate' stands for both malate_mol_l and malate_mol_l; rename one"):
        index_of([a, b])
    with pytest.raises(InputError, match=r"the name 'titrant' stands for both titrant_volume_ml and titrant_mol_l"):
        name_index([acid_quantity("titrant")], SCHEMA)
    with pytest.raises(InputError, match=r"the name 'site' stands for both site and titrant_counts"):
        index_of([SCHEMA["site"], replace(SCHEMA["titrant_counts"], aliases=(("site", ""),))])
    with pytest.raises(InputError, match=r"the name 'alkalinity' stands for both alkalinity_eq_l and alkalinity_mol_l"):
        index_of([quantities()["alkalinity_eq_l"], acid_quantity("alkalinity")])


def test_a_map_file_of_titrations(table):
    """Its quantities are those of titrations; a map of readings does not know them."""
    path = table('[columns]\n"V" = "titrant (mL)"\n[acids.malate]\npk = [3.4]\n', "m.toml")
    found = read_map(path, SCHEMA)
    assert found.columns["V"].name == "titrant_volume_ml"
    assert set(found.acids) == {"malate_mol_l"}
    with pytest.raises(HeaderError, match=r"map file m\.toml, \[columns\] 'V': column 'titrant \(mL\)' is not known"):
        read_map(path)


def test_the_list_of_columns():
    """Every column has its line; a name of several quantities shows all of them."""
    lines = columns_text(schema=SCHEMA).splitlines()
    assert max(map(len, lines)) <= 100
    assert set(SCHEMA) <= {line.split()[0] for line in lines if line.strip()}
    text = columns_text(["titrant"], schema=SCHEMA)
    for name in ("titrant_volume_ml", "titrant_mass_g", "titrant_counts", "titrant_strength_eq_l", "titrant_strength_eq_kg"):
        assert re.search(rf"^{name}$", text, re.M)
    assert "0.02 mL + 0.2 %" in columns_text(["sample_volume_ml"], schema=SCHEMA)
    with pytest.raises(InputError, match=r"no column is named 'titrand'\. The nearest are titrant_volume_ml"):
        columns_text(["titrand"], schema=SCHEMA)


def test_order_of_columns():
    """That of the table, each uncertainty behind its quantity."""
    names = ["zzz", "temperature_c", "ph_u", "sample_volume_u_ml", "sample_volume_ml"]
    assert schema_order(names, SCHEMA) == ["ph_u", "sample_volume_ml", "sample_volume_u_ml", "temperature_c", "zzz"]


def test_the_default_of_the_titrator_is_the_one_that_is_told():
    """The list of columns says the same number as the program uses."""
    assert f"; {COUNTS_PER_ML:g} where it is not given" in SCHEMA["counts_per_ml"].meaning


def test_accepted_units_of_the_titrant():
    """In the order of the table."""
    assert [unit.label for unit in accepted_units("small_volume")] == ["mL", "µL", "L"]
