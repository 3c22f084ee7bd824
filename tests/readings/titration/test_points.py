"""Points of a titration: what refuses a sample, with which words, while its neighbors stay."""

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.table import as_map, open_table
from aquabuf.readings.titration import blocks
from aquabuf.readings.titration.blocks import MOST_POINTS

HEADER = "sample_id,titrant_ml,ph,sample_volume_ml,titrant_eq_l"


@pytest.mark.parametrize(
    ("rows", "where", "rule", "remedy"),
    [
        ("x,0,7,50,0.1\nx,0.5,6,50,0.1\nx,0.4,5,50,0.1\n", (6, "titrant_ml", "0.4"),
         "the titrant added since the start must not fall; it was 0.5 mL in row 5", "correct it, or add a column sequence"),
        ("x,0,7,50,0.1\nx,,6,50,0.1\nx,,5,50,0.1\n", (5, "titrant_ml", "blank in 2 of 3 points"),
         "each point needs the titrant added", "fill it in, or remove the row"),
        ("x,0,7,50,0.1\nx,1,,50,0.1\n", (5, "ph", "blank in 1 of 2 points"), "each point needs pH or potential", "fill it in"),
        ("x,0,7,50,0.1\n", (4, "(rows)", "1 point"), "a titration needs 2 points or more", "add the other points, under the same sample_id"),
        ("x,0,74,50,0.1\nx,1,5,50,0.1\n", (4, "ph", "74"), "must be 0 to 14", "is it 7.4? Check the decimal sign"),
        ("x,0,-0.1,50,0.1\nx,1,5,50,0.1\n", (4, "ph", "-0.1"), "must be 0 to 14", "it cannot be below zero; leave it blank, or correct it"),
        ("x,-1,7,50,0.1\nx,1,5,50,0.1\n", (4, "titrant_ml", "-1"), "must be 0 to 100000 mL", "it cannot be below zero"),
        ("x,0,7,50,0.1\nx,much,5,50,0.1\n", (5, "titrant_ml", "much"), "must be a number", "correct it or leave it blank"),
        ("x,0,<5,50,0.1\nx,1,5,50,0.1\n", (4, "ph", "<5"), "'<' has no use for ph", "enter the value itself"),
        ("x,0,7,0,0.1\nx,1,5,,\n", (4, "sample_volume_ml", "0"), "must be 0.1 to 100000 mL", "check the unit in the header"),
        ("x,0,7,50,0\nx,1,5,50,0\n", (4, "titrant_eq_l", "0"), "must be 1e-06 to 40 eq/L", "check the unit in the header"),
        ("x,0,7,50,0.1\nx,1,6\n", (5, "(row)", "3 fields"), "each row needs 5 fields, as the header has", "check delimiters"),
        ("x,0,7,50,0.1\n,1,6,50,0.1\n", (5, "sample_id", ""), "each row needs a sample_id", "till then the sample above is refused"),
        ("x,0,7,50,0.1\nNA,1,6,50,0.1\n", (5, "sample_id", ""), "each row needs a sample_id", "fill in the name of its sample"),
        ("x,0,7,50,0.1\n,1\n", (5, "(row)", "2 fields"), "each row needs 5 fields", "check delimiters"),
    ],
)  # fmt: skip
def test_a_bad_point_refuses_its_sample_only(among_good, rows, where, rule, remedy):
    """One line with row, column, value, rule and remedy."""
    found = among_good(rows)
    assert len(found) == 1, found.to_string()
    line = found.iloc[0]
    assert (line["file"], line["row"], line["column"], line["value"]) == ("points", *where)
    assert rule in line["rule"]
    assert remedy in line["remedy"]


@pytest.mark.parametrize(
    ("rows", "column", "value", "words"),
    [
        ("x,0,7,50,0.1,,\nx,,6,50,0.1,1.5,\n", "titrant_g", "1.5", "mixed units: the titrant added must be in one column for all points of a sample; titrant_ml has values too"),
        ("x,0,7,50,0.1,,\nx,1,,50,0.1,,120\n", "potential_mv", "120", "mixed units: pH or potential must be in one column for all points of a sample; ph has values too"),
    ],
)  # fmt: skip
def test_mixed_units(among_good, rows, column, value, words):
    """A sample takes its titrant from one column, and its readings from one."""
    found = among_good(rows, header=f"{HEADER},titrant_g,potential_mv\n")
    assert len(found) == 1, found.to_string()
    line = found.iloc[0]
    assert (line["row"], line["column"], line["value"], line["rule"]) == (5, column, value, words)
    assert "leave the cells of one column blank in this sample" in line["remedy"]


def test_samples_of_one_file_may_differ_in_their_units(titrations):
    """Volume with pH, mass with potential, counts: 800 counts are a milliliter, unless the sample says otherwise."""
    found = titrations(
        f"{HEADER},titrant_g,titrant_counts,potential_mv,counts_per_ml,sample_mass_g,titrant_eq_kg\n"
        "a,0,7,50,0.1,,,,,,\na,0.5,4,,,,,,,,\n"
        "b,,,,,0,,-20.5,,100,0.1\nb,,,,,1.25,,150,,100,\n"
        "c,,7,50,0.1,,0,,,,\nc,,5,,,,200,,,,\n"
        "d,,7,50,0.1,,0,,400,,\nd,,5,,,,200,,400,,\n"
    )
    assert found.rejected.empty, found.rejected.to_string()
    assert found.added.tolist() == [0, 0.5, 0, 1.25, 0, 0.25, 0, 0.5]
    assert found.reading.tolist() == [7, 4, -20.5, 150, 7, 5, 7, 5]
    assert found.added_by.tolist() == ["volume", "mass", "counts", "counts"]
    assert found.read_as.tolist() == ["ph", "potential", "ph", "ph"]
    assert_array_equal(found.samples["sample_mass_g"], [np.nan, 100, np.nan, np.nan])
    assert_array_equal(found.samples["counts_per_ml"], [np.nan, np.nan, np.nan, 400])


def test_points_of_a_sample_stand_together(titrations):
    """A name that comes again refuses all its rows; the row is named."""
    text = "".join(f"{name},{i},{7 - i / 10},50,0.1\n" for i, name in enumerate("aabbaccbb"))
    found = titrations(f"{HEADER}\n{text}")
    assert found.samples["sample_id"].tolist() == ["a", "b", "c"]
    assert found.usable.tolist() == [False, False, True]
    assert found.start.tolist() == [0, 0, 0, 2]
    assert found.point_row.tolist() == [7, 8]
    assert found.rejected[["row", "sample_id", "column", "value"]].to_numpy().tolist() == [[2, "a", "sample_id", "a"], [4, "b", "sample_id", "b"]]
    assert found.rejected["rule"].tolist() == [
        "the points of a sample must stand together; this name comes again in row 6",
        "the points of a sample must stand together; this name comes again in row 9",
    ]
    assert set(found.rejected["remedy"]) == {"move its rows together, or give each titration a name of its own"}


def test_repeated_readings_are_kept(titrations):
    """The same titrant added twice is a reading repeated."""
    found = titrations(f"{HEADER}\na,0,7,50,0.1\na,0.5,5,,\na,0.5,5.1,,\n")
    assert found.usable.tolist() == [True]
    assert found.reading.tolist() == [7, 5, 5.1]


def test_points_are_sorted_by_their_number(titrations):
    """Only samples out of order are noted; one without numbers keeps its rows."""
    found = titrations(
        f"{HEADER},sequence,minutes\na,0.5,5,50,0.1,2,3\na,0,7,50,0.1,1,0\na,1,4,50,0.1,3,6\n"
        "b,0,7,50,0.1,1,\nb,0.5,5,50,0.1,2,\nc,0,7,50,0.1,,\nc,0.5,5,50,0.1,,\nno volume,1,5,,0.1,2,\nno volume,0,7,,0.1,1,\n"
    )
    assert found.usable.tolist() == [True, True, True, False]
    assert found.added.tolist() == [0, 0.5, 1, 0, 0.5, 0, 0.5]
    assert found.point_row.tolist() == [3, 2, 4, 5, 6, 7, 8]
    assert_array_equal(found.minutes, [0, 3, 6, np.nan, np.nan, np.nan, np.nan])
    assert found.notes == ("points: 1 x points of the sample sorted in sequence (first: row 2)",)
    assert found.flags.to_numpy().tolist() == [["points", 2, "a", "sequence", "", "points of the sample sorted"]]


@pytest.mark.parametrize(
    ("numbers", "where", "rule", "remedy"),
    [
        ("1 1 2", (5, "sequence", "1"), "each point of a sample needs a number of its own; row 4 has it too", "correct one of them"),
        ("1 2.5 2.5", (6, "sequence", "2.5"), "row 5 has it too", "correct one of them"),
        ("1 NA 2", (5, "sequence", ""), "each point needs its number where other points of the sample have one", "fill it in, or empty the others"),
        ("2 1 3", (4, "titrant_ml", "0"), "must not fall; it was 0.5 mL in row 5", "correct it or the numbers of the points"),
    ],
)  # fmt: skip
def test_numbers_of_points_that_do_not_order_them(among_good, numbers, where, rule, remedy):
    """Repeated, missing, or against the titrant."""
    rows = "".join(f"x,{v},7,50,0.1,{n}\n" for v, n in zip(("0", "0.5", "1"), numbers.split(), strict=True))
    found = among_good(rows, header=f"{HEADER},sequence\n")
    assert len(found) == 1, found.to_string()
    line = found.iloc[0]
    assert (line["row"], line["column"], line["value"]) == where
    assert rule in line["rule"]
    assert remedy in line["remedy"]


@pytest.mark.parametrize(("points", "usable"), [(MOST_POINTS, True), (MOST_POINTS + 1, False), (3 * MOST_POINTS, False)])
def test_a_titration_that_is_too_long(titrations, points, usable):
    """5,000 points come out whole; more refuse the sample, and the next one is read as ever."""
    rows = "".join(f"long,{i},7,50,0.1\n" for i in range(points))
    found = titrations(f"{HEADER}\n{rows}z,0,7,50,0.1\nz,1,5,,\n")
    assert MOST_POINTS == 5000
    assert found.usable.tolist() == [usable, True]
    assert np.diff(found.start).tolist() == [points if usable else 0, 2]
    assert found.point_row[-2:].tolist() == [points + 2, points + 3]
    if not usable:
        line = found.rejected.iloc[0]
        assert (line["row"], line["column"], line["value"]) == (2, "(rows)", f"{points} points")
        assert line["rule"] == "a titration may have 5000 points at most"
        assert line["remedy"] == "leave out points, or give each titration a name of its own"


def test_no_row_of_a_titration_that_is_too_long_is_kept(table, monkeypatch):
    """A file of one endless titration does not fill the memory."""
    monkeypatch.setattr(blocks, "MOST_POINTS", 10)
    opened = open_table(table(f"{HEADER}\n" + "long,0,7,50,0.1\n" * 11 + "b,0,7,50,0.1\n"), as_map(None, titration_quantities()))
    (batch,) = blocks.batches(opened, 5, blocks.scan_names(opened))
    assert (batch.names, batch.lengths.tolist(), [row for row, _ in batch.records]) == (["long", "b"], [11, 1], [13])


def test_a_nameless_row_before_all_others(titrations):
    """It belongs to no sample, and has its line."""
    found = titrations(f"{HEADER}\n,0,7,50,0.1\nb,0,7,50,0.1\nb,1,5,50,0.1\n")
    assert found.samples["sample_id"].tolist() == ["", "b"]
    assert found.usable.tolist() == [False, True]
    assert found.rejected[["row", "sample_id", "rule"]].to_numpy().tolist() == [[2, "", "each row needs a sample_id"]]


def test_several_problems_of_one_sample(titrations):
    """Each bad cell has its line; what is said of the sample in every row counts once."""
    found = titrations(f"{HEADER}\na,x,7,wide,0.1\na,0,99,wide,0.1\na,1,99,wide,0.1\n")
    assert found.rejected[["row", "column", "value"]].to_numpy().tolist() == [
        [2, "titrant_ml", "x"], [2, "sample_volume_ml", "wide"], [3, "ph", "99"], [4, "ph", "99"],
    ]  # fmt: skip


def test_a_composed_name(titrations):
    """Site and day make the name of a titration; a part that is missing is a name that is missing."""
    table_map = '[columns]\n"day" = "ignore"\n[compose]\nsample_id = ["lake", "day"]\n'
    rows = "A,1,0,7,50,0.1\nA,1,1,5,50,0.1\nA,2,0,7,50,0.1\nA,2,1,5,50,0.1\nA,,2,4,50,0.1\nB,2,0,7,50,0.1\nB,2,1,5,50,0.1\n"
    found = titrations("lake,day" + HEADER.removeprefix("sample_id") + "\n" + rows, points_map=table_map)
    assert found.samples["sample_id"].tolist() == ["A_1", "A_2", "B_2"]
    assert found.usable.tolist() == [True, False, True]
