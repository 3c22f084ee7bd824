"""Rows and samples: what makes a sample, which rows count, which of several results is used."""

import pytest
from numpy.testing import assert_allclose
from wqx_rows import PH, result

from aquabuf.errors import InputError
from aquabuf.readings.long.choose import DIFFERS_RULE
from aquabuf.readings.long.scan import AGREE_RULE
from aquabuf.readings.source import open_any

CA = 40.078e3  # mg of calcium per mole, IUPAC


def lines(readings, *columns):
    """Some columns of `rejected` as lists."""
    return readings.rejected[list(columns)].values.tolist()


def test_samples_in_order_of_first_appearance(read):
    """Results of one sample may stand anywhere; the row is that of the first; place and time are those it has."""
    readings = read(
        result("pH", "6", id="B", site="Tarn", depth="0.5", depth_unit="m"),
        result("pH", "7", id="A"),
        result("Calcium", "4", "mg/l", id="B", site="Tarn", depth="0.50", depth_unit="m", time="10:30"),
        result("Calcium", "8", "mg/l", id="A", site="Mere", date="2024-06-01"),
    )
    frame = readings.frame
    assert frame[["row", "sample_id", "site", "time"]].values.tolist() == [[2, "ORG_B", "Tarn", "10:30"], [3, "ORG_A", "Mere", ""]]
    assert frame["ph"].tolist() == [6, 7]
    assert_allclose(frame["calcium_mol_l"] * CA, [4, 8])
    assert frame["depth_m"].tolist()[:1] == [0.5]
    assert [str(day.date()) for day in frame["date_parsed"]] == ["2024-06-01"] * 2
    assert readings.rejected.empty


@pytest.mark.parametrize(
    ("more", "row", "name", "column", "rule"),
    [
        ({"id": ""}, 3, "", "sample_id", "each row needs a sample_id"),
        ({"org": "NA"}, 3, "", "sample_id", "each row needs a sample_id"),
        ({"id": "B", "date": ""}, 3, "ORG_B", "ActivityStartDate", "each sample needs a date"),
    ],
)
def test_a_sample_without_name_or_date_is_refused(read, more, row, name, column, rule):
    """Its neighbors stay; a row without a name belongs to no other such row."""
    readings = read(PH, result("Calcium", "4", "mg/l", **more), result("pH", "6", id="C"))
    assert readings.frame["sample_id"].tolist() == ["ORG_A", "ORG_C"]
    assert lines(readings, "row", "sample_id", "column", "rule") == [[row, name, column, rule]]


def test_a_date_in_one_of_its_rows_will_do(read):
    """The first row may lack it."""
    readings = read(result("pH", "6", date=""), result("Calcium", "4", "mg/l"))
    assert readings.frame["date"].tolist() == ["2024-06-01"]
    assert readings.rejected.empty


def test_two_ways_to_one_name(read):
    """AB_C and A_BC are two samples whose joined names agree: the second is refused as in a wide table."""
    readings = read(result("pH", "6", org="A_B", id="C"), result("pH", "7", org="A", id="B_C"))
    assert readings.frame["ph"].tolist() == [6]
    assert lines(readings, "row", "rule") == [[3, "sample_id is already used in row 2"]]


@pytest.mark.parametrize(
    ("role", "first", "other", "found", "own"),
    [
        ("site", {"site": "Tarn"}, {"site": "Mere"}, "Mere", "Tarn"),
        ("date", {}, {"date": "2024-06-02"}, "2024-06-02", "2024-06-01"),
        ("depth", {"depth": "1", "depth_unit": "m"}, {"depth": "2", "depth_unit": "m"}, "2 m", "1 m"),
        ("depth", {"depth": "1", "depth_unit": "m"}, {"depth": "1", "depth_unit": "ft"}, "1 ft", "1 m"),
    ],
)
def test_results_of_one_sample_must_agree(read, role, first, other, found, own):
    """A result from another place, day or depth is no result of this sample."""
    readings = read({**PH, **first}, result("Calcium", "4", "mg/l", **other))
    assert readings.frame["ph"].tolist() == [7.1]
    assert readings.frame["calcium_mol_l"].isna().all()
    assert lines(readings, "row", "sample_id", "value", "rule") == [[3, "ORG_A", found, AGREE_RULE.format(role=role)]]
    assert f"the sample begins in row 2 with {own}" in readings.rejected["remedy"][0]


@pytest.mark.parametrize("cells", [{"date": "1 Jun 2024"}, {"time": "18:00"}, {"date": "2024-06-01T10:00"}])
def test_another_spelling_or_clock_time_is_no_contradiction(read, cells):
    """A day may be written in two ways, and a laboratory reads later than a boat."""
    readings = read({**PH, "time": "09:00"}, result("Calcium", "4", "mg/l", **cells))
    assert readings.rejected.empty
    assert readings.frame[["date", "time"]].values.tolist() == [["2024-06-01", "09:00"]]


def test_a_depth_comes_with_its_own_unit(read):
    """A unit beside no depth means nothing."""
    rows = [result("pH", "7", depth_unit="ft"), result("Calcium", "4", "mg/l", depth="2", depth_unit="m")]
    assert read(*rows).frame["depth_m"].tolist() == [2]


def test_a_bad_depth_costs_the_depth_only(read):
    """It is for the record; unit and number are judged as those of a result."""
    for cells, rule in (({"depth": "deep", "depth_unit": "m"}, "must be a number"), ({"depth": "1"}, "depth needs a unit")):
        readings = read({**PH, **cells})
        assert readings.frame["ph"].tolist() == [7.1]
        assert readings.frame["depth_m"].isna().all()
        assert lines(readings, "row", "column") == [[2, "ActivityDepthHeightMeasure/MeasureValue"]]
        assert rule in readings.rejected["rule"][0]


@pytest.mark.parametrize(
    ("more", "note"),
    [
        ({"type": "Quality Control Sample-Field Blank"}, "2 rows left out by ActivityTypeCode: Quality Control Sample-Field Blank (2)"),
        ({"type": "quality control field replicate msr/obs"}, "2 rows left out by ActivityTypeCode: quality control field replicate msr/obs (2)"),
        ({"status": "Rejected"}, "2 rows left out by ResultStatusIdentifier: Rejected (2)"),
        ({"media": "Sediment"}, "2 rows left out by ActivityMediaName: Sediment (2)"),
        ({"what": "Phosphorus"}, "2 results of 1 characteristics left out, which the map does not name: Phosphorus (2)"),
    ],
)  # fmt: skip
def test_rows_that_are_no_readings(read, more, note):
    """They are counted by the word they have, and their sample does not appear."""
    row = {**result("Calcium", "4", "mg/l", id="B", fraction="Total"), **more}
    readings = read(PH, row, row)
    assert readings.frame["sample_id"].tolist() == ["ORG_A"]
    assert readings.rejected.empty
    assert note in readings.notes


def test_a_blank_word_leaves_nothing_out(read):
    """What is not said cannot be held against a row."""
    assert len(read({**PH, "type": "", "media": "", "status": ""}).frame) == 1


def test_forms_of_a_characteristic_that_are_not_named(read):
    """Particles are no ions, and all aluminum is not the dissolved part; the note names the form."""
    readings = read(
        PH,
        result("Calcium", "4", "mg/l", fraction="Suspended"),
        result("Aluminum", "90", "ug/l", fraction="Total"),
        result("Aluminum", "90", "ug/l"),
    )
    note = "3 results of 3 characteristics left out, which the map does not name: Calcium [Suspended] (1), Aluminum [Total] (1), Aluminum [no fraction] (1)"
    assert note in readings.notes
    assert "calcium_mol_l" not in readings.frame


def test_a_long_list_is_cut(read):
    """The most frequent twelve, then how many more."""
    rows = [result(f"Thing {i:02d}", "1") for i in range(14)] + [result("Thing 13", "1")]
    note = next(note for note in read(PH, *rows).notes if "characteristics" in note)
    assert note.startswith("15 results of 14 characteristics left out, which the map does not name: Thing 13 (2), Thing 00 (1)")
    assert note.endswith("Thing 10 (1) and 2 more")


def test_the_preferred_fraction_is_used(read):
    """Dissolved over total, wherever they stand; the other is counted, not refused."""
    readings = read(result("Calcium", "9", "mg/l", fraction="Total"), result("Calcium", "4", "mg/l", fraction="Dissolved"))
    assert_allclose(readings.frame["calcium_mol_l"] * CA, [4])
    assert readings.rejected.empty
    assert "1 results stand back behind a form that the map prefers: Calcium [Total] (1)" in readings.notes


def test_a_refused_result_makes_room_for_the_next_form(read):
    """The total stands in where the dissolved one cannot be read."""
    readings = read(result("Calcium", "9", "mg/l", fraction="Total"), result("Calcium", "x", "mg/l", fraction="Dissolved"))
    assert_allclose(readings.frame["calcium_mol_l"] * CA, [9])
    assert lines(readings, "row", "value") == [[3, "x"]]


def test_words_that_go_with_a_form(read):
    """A pH of the laboratory says so, but only where it is the one that is used."""
    readings = read(
        result("pH, lab", "7.5", id="A"), result("pH", "7", id="A"), result("pH, lab", "6.5", id="B"),
        result("Gran acid neutralizing capacity", "30", "ueq/L", id="B"),
    )  # fmt: skip
    assert readings.frame[["ph", "ph_kind", "anc_method"]].values.tolist() == [[7, "", ""], [6.5, "open_bottle", "gran"]]


def test_replicates(read):
    """The first is used; the same again, also in another unit, is counted; a different one is refused."""
    readings = read(
        result("Calcium", "4", "mg/l"),
        result("Calcium", "4000", "ug/l"),
        result("Calcium", "5", "mg/l"),
        result("Calcium", condition="Not Detected", limit="8", limit_unit="mg/l"),  # half of it is 4, but it was not measured
        result("Calcium", "5", "mg/l", id="B"),
    )
    assert_allclose(readings.frame["calcium_mol_l"] * CA, [4, 5])
    assert "calcium_u_mol_l" not in readings.frame
    assert lines(readings, "row", "sample_id", "column", "value", "rule") == [
        [4, "ORG_A", "Calcium", "5", DIFFERS_RULE], [5, "ORG_A", "Calcium", "Not Detected", DIFFERS_RULE]]  # fmt: skip
    assert "4 in row 2 is used" in readings.rejected["remedy"][0]
    assert "1 results say again what the sample already has" in readings.notes
    assert readings.flags.empty  # of the one that is not used


def test_rows_that_do_not_fit_the_header(long_table):
    """They are refused with their fields, in the place of the file where they stand."""
    path = long_table([PH, result("pH", "7", id="B")])
    head, first, second = path.read_text(encoding="utf-8").splitlines()
    path.write_text("\n".join([head, "x", first, "y,z", second, "w"]) + "\n", encoding="utf-8")
    found = [(len(part.frame), part.rejected["row"].tolist()) for part in open_any(path, "wqx", 1)]
    assert found == [(1, [2, 4]), (1, [6])]
    part = next(open_any(path, "wqx"))
    assert lines(part, "column", "value") == [["(row)", "1 fields"], ["(row)", "2 fields"], ["(row)", "1 fields"]]


def test_notes_on_the_file_come_once(long_table):
    """With the first piece, as in a wide table."""
    path = long_table([PH, result("pH", "7", id="B"), result("Phosphorus", "7")])
    first, second = open_any(path, "wqx", 1)
    assert any("Phosphorus" in note for note in first.notes)
    assert second.notes == ()


def test_the_unit_of_a_column_is_that_of_most(read):
    """Where one quantity comes in several units, the record of headers names the most frequent."""
    readings = read(*(result("Calcium", "4", unit, id=name) for unit, name in (("ug/l", "A"), ("mg/l", "B"), ("mg/l", "C"))))
    assert readings.headers["Calcium"] == ("calcium_mol_l", "mg/L")


def test_nothing_that_is_a_reading(read):
    """The message says what was found instead."""
    words = r"long\.csv: no row holds a reading that the map long_wqx\.toml names\. Found: 1 rows left out by ActivityTypeCode: " \
            r"Quality Control X \(1\); 1 results of 1 characteristics left out, .*Phosphorus \(1\)\. Check \[characteristics\]"
    with pytest.raises(InputError, match=words):
        read(result("Phosphorus", "1"), result("pH", "7", type="Quality Control X"))


def test_a_visit_as_one_sample(read):
    """By place and day, field readings and bottle come together; another depth is refused."""
    rows = [
        result("Temperature, water", "10", "deg C", id="field", site="Tarn", depth="1", depth_unit="m"),
        result("Calcium", "4", "mg/l", id="bottle", site="Tarn"),
        result("Calcium", "9", "mg/l", id="deep", site="Tarn", depth="8", depth_unit="m"),
    ]
    readings = read(*rows, by="wqx_visit")
    assert readings.frame[["sample_id", "temperature_c"]].values.tolist() == [["ORG_Tarn_2024-06-01", 10]]
    assert_allclose(readings.frame["calcium_mol_l"] * CA, [4])
    assert lines(readings, "row", "rule") == [[4, AGREE_RULE.format(role="depth")]]
    assert len(read(*rows).frame) == 3


def test_what_was_recognized(read):
    """Where the words of the map come from, and which columns the file does without."""
    notes = read(PH, without=("speciation", "media")).notes
    assert notes[:2] == (
        "map long_wqx.toml: columns and words of the Water Quality Exchange (recalled)",
        "the file has no column MethodSpecificationName, ActivityMediaName, which the map can do without",
    )
