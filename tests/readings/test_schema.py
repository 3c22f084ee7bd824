"""The schema holds together, and its lists say what a user needs."""

import re
import subprocess
import sys

import pytest

from aquabuf.errors import InputError
from aquabuf.readings.headers import parse_header
from aquabuf.readings.listing import columns_text
from aquabuf.readings.schema import (
    acid_quantity,
    example_header,
    find_quantity,
    name_index,
    quantities,
    schema_order,
    titration_quantities,
    unit_labels,
)
from aquabuf.readings.template import template, template_kinds
from aquabuf.tables import read_table

NUMBERS = [q for q in quantities().values() if q.is_number]
CONTRACT = ["sample_id", "temperature_c", "ph", "salinity", "conductivity_us_cm", "alkalinity_mg_l_caco3", "alkalinity_ueq_l",
            "alkalinity_umol_kg", "dic_umol_kg", "calcium_mg_l"]  # fmt: skip


@pytest.mark.parametrize("header", CONTRACT)
def test_contract_names_work_as_they_stand(header):
    """These headers are promised."""
    assert parse_header(header, name_index()).header == header


@pytest.mark.parametrize("quantity", NUMBERS, ids=lambda q: q.name)
def test_canonical_names_are_house_units(quantity):
    """A column named as the program names it is taken as it is, and so is its uncertainty."""
    for name, is_u in ((quantity.name, False), (quantity.u_name, True)):
        column = parse_header(name, name_index())
        assert (column.name, column.is_u) == (name, is_u)
        assert column.scale == pytest.approx(1.0, rel=1e-12)
        assert column.offset == 0.0


def test_every_alias_is_known_and_none_is_given_twice():
    """An alias that stands in two rows of the table would be a guess."""
    seen = {}
    for quantity in quantities().values():
        for alias, basis in quantity.aliases:
            assert seen.setdefault(alias, quantity.name) == quantity.name
            assert not basis or basis in quantity.bases, (alias, basis)
            assert len(alias) > 1, f"{alias!r} of {quantity.name} is too short to be safe"


@pytest.mark.parametrize("quantity", [*NUMBERS, *(q for q in titration_quantities().values() if q.is_number and q not in NUMBERS)],
                         ids=lambda q: q.name)
def test_limits_are_in_order_and_uncertainty_has_a_source(quantity):
    """Hard limits enclose the usual ones; a default uncertainty says where it comes from."""
    assert quantity.low <= quantity.soft_low < quantity.soft_high <= quantity.high
    assert bool(quantity.default_u or quantity.default_u_rel) == bool(quantity.u_source)
    assert quantity.meaning
    assert quantity.needed_by


def test_the_two_column_names_differ_by_u():
    """The uncertainty has _u before the unit."""
    assert find_quantity("alkalinity_eq_l").u_name == "alkalinity_u_eq_l"
    assert find_quantity("ph").u_name == "ph_u"
    assert find_quantity("temperature_c").u_name == "temperature_u_c"
    assert find_quantity("holding_days").u_name == "holding_u_days"


def test_unknown_canonical_name():
    """The message shows what a canonical name looks like."""
    with pytest.raises(InputError, match=r"no column is named 'calcium'\. Use a canonical name such as calcium_mol_l"):
        find_quantity("calcium")


def test_an_acid_of_the_user_may_not_take_a_known_name():
    """Its name would mean two things."""
    with pytest.raises(
        InputError, match=r"the name 'acetate' stands for both acetate_mol_l and acetate_mol_l; rename one"
    ):
        name_index([acid_quantity("acetate")])


def test_order_puts_uncertainty_behind_its_quantity():
    """Unknown names stay last."""
    assert schema_order(["zzz", "calcium_u_mol_l", "ph", "calcium_mol_l"]) == [
        "ph",
        "calcium_mol_l",
        "calcium_u_mol_l",
        "zzz",
    ]


def test_ambiguous_quantities_have_no_bare_unit():
    """mg/L of these can be meant in two ways in the trade, so it is never listed alone."""
    for name in ("nitrate", "nitrite", "ammonium", "phosphate", "silica"):
        assert "mg/L" not in unit_labels(find_quantity(f"{name}_mol_l"), rare=True)
    assert "mg/L" not in unit_labels(find_quantity("alkalinity_eq_l"), rare=True)
    assert "mg/L" in unit_labels(find_quantity("calcium_mol_l"))


def test_every_example_header_reads():
    """The header that help texts show for a quantity means that quantity."""
    for name, quantity in quantities().items():
        assert parse_header(example_header(quantity), name_index()).name == name


def test_the_list_fits_its_width_and_names_every_column():
    """At 100 characters no line is longer, and each column has a line."""
    lines = columns_text().splitlines()
    assert max(map(len, lines)) <= 100
    starts = {line.split()[0] for line in lines if line.strip()}
    assert set(quantities()) <= starts


def test_details_of_one_column():
    """Units, limits with unit, default uncertainty and its source."""
    text = columns_text(["Ca"])
    assert text.startswith("calcium_mol_l\n")
    assert re.search(r"units +mmol/L, .*mg/L as CaCO3", text)
    assert "0 to 10 mol/L" in text
    assert "calcium_u_mol_l, else 1e-06 mol/L + 5 %" in text
    assert max(map(len, columns_text(list(quantities())).splitlines())) <= 100
    assert "lake, stream, raw_water" in columns_text(["water_kind"])


def test_details_of_an_unknown_column():
    """The nearest names are shown."""
    with pytest.raises(InputError, match=r"no column is named 'alkalinty'\. The nearest are alkalinity_eq_l"):
        columns_text(["alkalinty"])
    with pytest.raises(InputError, match=r"no column is named 'qqq'\. Ask for the list without a name"):
        columns_text(["qqq"])
    with pytest.raises(InputError, match=r"no column of readings is named 'titrant', but one of titrations is\. Add --titration"):
        columns_text(["titrant"])


def test_details_of_a_header_with_its_unit():
    """As it stands in a table."""
    assert columns_text(["calcium_mg_l"]) == columns_text(["calcium_mol_l"])


def test_lists_and_starter_files_come_without_the_slow_libraries():
    """The command line must start fast."""
    code = (
        "import sys; from aquabuf.readings import schema, listing, template, headers;"
        "listing.columns_text(); template.template('lake');"
        "sys.exit(bool({'numpy', 'pandas', 'scipy'} & set(sys.modules)))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_kinds_of_starter_file():
    """The table of templates decides, and the map file comes last."""
    assert template_kinds() == [*dict.fromkeys(row["kind"] for row in read_table("templates")), "map"]
    assert {"stream", "lake", "plant", "estuary"} <= set(template_kinds())
    with pytest.raises(InputError, match=r"no starter file is named 'pond'\. Use one of: lake, stream, .*map"):
        template("pond")
