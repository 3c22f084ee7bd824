"""What is known of a sample: from its points, from the file of samples, from both, and what is missing."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

POINTS = "sample_id,titrant_ml,ph\na,0,7\na,0.5,4\nb,0,7\nb,0.5,4\n"
SAMPLES = "sample_id,sample_volume_ml,titrant_eq_l\n"


def only(found, **where):
    """The one line of `rejected` that fits."""
    lines = found.rejected
    for column, value in where.items():
        lines = lines[lines[column] == value]
    assert len(lines) == 1, found.rejected.to_string()
    return lines.iloc[0]


def test_columns_of_the_sample_in_the_points(titrations):
    """The same in all rows, or blank after the first; or only in some row."""
    found = titrations(
        "sample_id,titrant_ml,ph,sample_volume_ml,titrant_eq_l,site,date,exchange,ph_u\n"
        "a,0,7,50,0.1,L1,2024-05-31,purged,0.02\na,0.5,4,50,0.1,L1,2024-05-31,sparged,0.02\n"
        "b,0,7,100,0.1,L2,,,\nb,0.5,4,,,,,,\nc,0,7,,0.1,,,,\nc,1,4,25,,L3,,,\n"
    )
    assert found.rejected.empty
    frame = found.samples
    assert list(frame.columns) == ["row", "sample_id", "ph_u", "sample_volume_ml", "titrant_strength_eq_l", "exchange", "site", "date"]
    assert frame["row"].tolist() == [2, 4, 6]
    assert frame["sample_volume_ml"].tolist() == [50, 100, 25]
    assert frame["site"].tolist() == ["L1", "L2", "L3"]
    assert frame["exchange"].tolist() == ["purged", "", ""]
    assert_array_equal(frame["ph_u"], [0.02, np.nan, np.nan])
    assert frame["ph_u"].dtype == float


def test_a_file_of_samples(titrations):
    """Found by name, whatever the order; points and samples together tell their headers."""
    found = titrations(POINTS, "Sample,Sample volume (L),titrant_u_meq_l,titrant_meq_l,titrant_kind\nb,0.1,,20,NaOH\na,0.05,0.1,16,\n")
    assert found.rejected.empty
    assert_allclose(found.samples["sample_volume_ml"], [50, 100])
    assert_allclose(found.samples["titrant_strength_eq_l"], [0.016, 0.02])
    assert_allclose(found.samples["titrant_strength_u_eq_l"], [1e-4, np.nan])
    assert found.samples["titrant_kind"].tolist() == ["", "base"]
    assert found.headers == {
        "sample_id": ("sample_id", ""), "titrant_ml": ("titrant_volume_ml", "mL"), "ph": ("ph", "-"), "Sample": ("sample_id", ""),
        "Sample volume (L)": ("sample_volume_ml", "L"), "titrant_u_meq_l": ("titrant_strength_u_eq_l", "meq/L"),
        "titrant_meq_l": ("titrant_strength_eq_l", "meq/L"), "titrant_kind": ("titrant_kind", ""),
    }  # fmt: skip


@pytest.mark.parametrize(
    ("points", "samples", "row", "remedy"),
    [
        (POINTS, None, 2, "add a column sample_volume_ml or sample_mass_g to points.csv, or to a file of samples with a row for each sample_id"),
        (POINTS.replace("ph\n", "ph,sample_volume_l\n").replace("\nb,0,7", "\nb,0,7,0.1").replace("4\n", "4,\n").replace("a,0,7", "a,0,7,"), None, 2,
         "fill in sample_volume_l in row 2, or give it in a file of samples"),
        (POINTS, SAMPLES + "b,50,0.1\n", 2, "add a row of this name to samples.csv with sample_volume_ml or sample_mass_g, or give it in points.csv"),
        (POINTS, "sample_id,titrant_eq_l\na,0.1\nb,0.1\n", 2, "add a column sample_volume_ml or sample_mass_g to samples.csv or to points.csv"),
        (POINTS, SAMPLES + "b,50,0.1\na,,0.1\n", 2, "fill in sample_volume_ml in row 3 of samples.csv"),
    ],
)  # fmt: skip
def test_a_size_that_is_missing(titrations, points, samples, row, remedy):
    """The line names the sample, and which column of which file would give it."""
    line = only(titrations(points, samples), sample_id="a", column="sample_volume_ml")
    assert (line["file"], line["row"], line["value"]) == ("points", row, "")
    assert line["rule"] == "sample_volume_ml or sample_mass_g must be known"
    assert line["remedy"] == remedy


@pytest.mark.parametrize(("name", "other", "asked"), [("Loch A", "loch  a", True), ("Tarn-mouth", "Tarn mouth", True), ("Loch A 12", "loch a 13", False),
                                                      ("a", "b", False), ("Ж", "Я", False)])
def test_a_misspelled_name_is_asked_about(titrations, name, other, asked):
    """A name of the same figures that differs in a letter, case or spaces only."""
    line = only(titrations(POINTS.replace("a,", f"{name},"), f"{SAMPLES}{other},50,0.1\nb,50,0.1\n"), sample_id=name, column="sample_volume_ml")
    assert line["remedy"].startswith(f"is it {other} in row 2 of samples.csv? Else add a row") == asked
    assert "add a row of this name to samples.csv" in line["remedy"]


def test_a_strength_that_is_missing(titrations):
    """Alike."""
    found = titrations(POINTS, "sample_id,sample_volume_ml\na,50\nb,50\n")
    assert not found.usable.any()
    line = only(found, sample_id="b")
    assert line["rule"] == "titrant_strength_eq_l or titrant_strength_eq_kg must be known"
    assert line["remedy"] == "add a column titrant_strength_eq_l or titrant_strength_eq_kg to samples.csv or to points.csv"
    assert (line["column"], line["row"]) == ("titrant_strength_eq_l", 4)


def test_size_and_strength_once_each(titrations):
    """Both kinds are one too many, and the line stands where the second is."""
    found = titrations(
        POINTS.replace("ph\n", "ph,sample_mass_g\n").replace("b,0,7", "b,0,7,49.5").replace("4\n", "4,\n").replace("a,0,7", "a,0,7,"),
        "sample_id,sample_volume_ml,titrant_eq_l,titrant_eq_kg\na,50,0.1,0.098\nb,50,0.1,\n",
    )
    first, second = only(found, sample_id="a"), only(found, sample_id="b")
    assert (first["file"], first["row"], first["column"], first["value"]) == ("samples", 2, "titrant_eq_kg", "0.098")
    assert first["rule"] == "only one of titrant_strength_eq_l and titrant_strength_eq_kg may be given; titrant_eq_l has 0.1 eq/L"
    assert (second["file"], second["row"], second["column"], second["value"]) == ("points", 4, "sample_mass_g", "49.5")
    assert second["rule"] == "only one of sample_volume_ml and sample_mass_g may be given; sample_volume_ml has 50 mL"
    assert first["remedy"] == second["remedy"] == "leave one of them blank"


def test_mass_and_volume_in_one_titration(titrations):
    """Sample by mass and titrant by volume, or the reverse, is allowed."""
    found = titrations(POINTS, "sample_id,sample_mass_g,titrant_eq_kg,titrant_eq_l\na,50,0.1,\nb,50,,0.1\n")
    assert found.usable.all()
    assert found.added_by.tolist() == ["volume", "volume"]


def test_values_that_contradict_between_rows(titrations):
    """Both values and both rows."""
    found = titrations("sample_id,titrant_ul,ph,sample_volume_l,titrant_n,site\na,0,7,0.05,0.1,S\na,1,6,,,T\nb,0,7,0.05,0.1,\nb,1,6,0.04,0.1,\n")
    assert not found.usable.any()
    text, number = only(found, sample_id="a"), only(found, sample_id="b")
    assert (text["row"], text["column"], text["value"]) == (3, "site", "T")
    assert text["rule"] == "a sample has one value in this column; row 2 has S"
    assert (number["row"], number["column"], number["value"]) == (5, "sample_volume_l", "0.04")
    assert number["rule"] == "a sample has one value in this column; row 4 has 0.05 L"
    assert number["remedy"] == "correct one of them, or leave all but the first blank"


def test_values_that_contradict_between_files(titrations):
    """Each in the unit of its file; a difference beyond nine figures is none."""
    points = POINTS.replace("ph\n", "ph,sample_volume_l,site\n").replace("7\n", "7,0.05,S\n").replace("4\n", "4,,\n")
    found = titrations(points, SAMPLES.replace("\n", ",site\n") + "b,50.00000000001,0.1,S\na,49,0.1,T\n")
    assert found.usable.tolist() == [False, True]
    number, text = only(found, column="sample_volume_l"), only(found, column="site")
    assert (number["file"], number["row"], number["sample_id"], number["value"]) == ("points", 2, "a", "0.05")
    assert number["rule"] == "both files must say the same; samples.csv has 49 mL in row 3"
    assert number["remedy"] == "correct one of them, or leave one blank"
    assert (text["value"], text["rule"]) == ("S", "both files must say the same; samples.csv has T in row 3")
    near = titrations(points, SAMPLES + "a,50.000001,0.1\nb,50,0.1\n")
    assert only(near, sample_id="a")["rule"] == "both files must say the same; samples.csv has 50.000001 mL in row 2"


def test_remarks_are_kept_side_by_side(titrations):
    """They are no values that could contradict."""
    points = "sample_id,titrant_ml,ph,notes\na,0,7,\na,1,6,drifts\na,2,5,end\na,3,4,drifts\n"
    samples = "sample_id,sample_volume_ml,titrant_n,notes\na,50,0.1,cloudy\n"
    assert titrations(points, samples).samples["notes"].tolist() == ["drifts; end; cloudy"]
    assert titrations(points.replace("drifts", "").replace("end", ""), samples).samples["notes"].tolist() == ["cloudy"]


@pytest.mark.parametrize(
    ("row", "where", "rule"),
    [
        ("a,fifty,0.1", ("sample_volume_ml", "fifty"), "must be a number"),
        ("a,0,0.1", ("sample_volume_ml", "0"), "must be 0.1 to 100000 mL"),
        ("a,50,0", ("titrant_eq_l", "0"), "must be 1e-06 to 40 eq/L"),
        ("a,50", ("(row)", "2 fields"), "each row needs 3 fields, as the header has"),
    ],
)
def test_a_bad_row_of_samples_refuses_the_sample(titrations, row, where, rule):
    """With the reason of the file of samples, once."""
    found = titrations(POINTS, SAMPLES + f"b,50,0.1\n{row}\n")
    assert found.usable.tolist() == [False, True]
    assert len(found.rejected) == 1, found.rejected.to_string()
    line = found.rejected.iloc[0]
    assert (line["file"], line["row"], line["sample_id"], line["column"], line["value"], line["rule"]) == ("samples", 3, "a", *where, rule)


def test_rows_of_samples_that_serve_no_points(titrations):
    """Repeated, nameless, without points: each has its line, and the first row of a name is kept."""
    found = titrations(POINTS, SAMPLES + "a,50,0.1\nz,50,0.1\nb,50,0.1\na,49,0.1\n,50,0.1\ny,x,0.1\n,1\n")
    assert found.usable.all()
    assert found.samples["sample_volume_ml"].tolist() == [50, 50]
    assert set(found.rejected["file"]) == {"samples"}
    assert found.rejected[["row", "sample_id", "column", "value", "rule"]].to_numpy().tolist() == [
        [3, "z", "sample_id", "z", "no points of this sample are in points.csv"],
        [5, "a", "sample_id", "a", "sample_id is already used in row 2"],
        [6, "", "sample_id", "", "each row needs a sample_id"],
        [7, "y", "sample_volume_ml", "x", "must be a number"],
        [7, "y", "sample_id", "y", "no points of this sample are in points.csv"],
        [8, "", "(row)", "2 fields", "each row needs 3 fields, as the header has"],
    ]
    assert only(found, row=3)["remedy"] == "add its points, write the name as it is there, or remove the row"
    assert only(found, row=5)["remedy"] == "fill in a name of its own, or remove the row; the first row is kept"


@pytest.mark.parametrize(("given", "lacking"), [("standard_1_ph", "standard_1_mv"), ("standard_3_mv", "standard_3_ph")])
def test_standards_come_in_pairs(titrations, given, lacking):
    """pH and potential of a standard belong together."""
    header = SAMPLES.replace("\n", ",standard_1_ph,standard_1_mv,standard_3_ph,standard_3_mv\n")
    one = {"standard_1_ph": "7,,,", "standard_3_mv": ",,,5"}[given]
    found = titrations(POINTS, f"{header}a,50,0.1,{one}\nb,50,0.1,4,170,7,-5\n")
    assert found.usable.tolist() == [False, True]
    line = only(found, sample_id="a")
    assert (line["file"], line["row"], line["column"], line["value"]) == ("samples", 2, given, one.strip(","))
    assert line["rule"] == f"a standard needs its pH and its potential; {lacking} is not given"
    assert line["remedy"] == f"fill in {lacking}, or leave both blank"
    assert found.samples["standard_3_mv"].tolist()[1] == -5


def test_below_detection_is_half_with_its_spread_and_said_once(titrations):
    """A value evenly likely from 0 to x; in the points it stands in each row and is noted once."""
    samples = SAMPLES.replace("\n", ",doc_mg_l\n") + "a,50,0.1,<4\nb,50,0.1,\n"
    found = titrations(POINTS, samples)
    assert_allclose(found.samples["doc_mg_l"], [2, np.nan])
    assert_allclose(found.samples["doc_u_mg_l"], [4 / math.sqrt(12), np.nan])
    assert found.notes == ("samples: 1 x below detection, half the limit used in doc_mg_l (first: row 2, '<4')",)
    points = POINTS.replace("ph\n", "ph,doc_mg_l\n").replace("7\n", "7,<4\n").replace("4\n", "4,<4\n").replace("<<", "<")
    found = titrations(points.replace(",<4,<4", ",<4"), SAMPLES + "a,50,0.1\nb,50,0.1\n")
    assert found.samples["doc_mg_l"].tolist() == [2, 2]
    assert found.flags[["file", "row", "sample_id", "value"]].to_numpy().tolist() == [["points", 2, "a", "<4"], ["points", 4, "b", "<4"]]


def test_flags_of_refused_samples_are_left_out(titrations):
    """As they are not used: those of both files, and of what a map fills in."""
    points = POINTS.replace("ph\n", "ph,aluminum_mg_l\n").replace("7\n", "7,<1\n").replace("4\n", "4,\n")
    samples = SAMPLES.replace("\n", ",doc_mg_l\n") + "b,,0.1,<4\na,50,0.1,<2\n"
    found = titrations(points, samples, "[fill]\ntemperature_c = 20\n")
    assert found.usable.tolist() == [True, False]
    assert found.flags[["file", "sample_id", "column"]].to_numpy().tolist() == [
        ["points", "a", "aluminum_mol_l"], ["points", "a", "temperature_c"], ["samples", "a", "doc_mg_l"],
    ]  # fmt: skip


def test_a_header_that_both_files_have(titrations):
    """Where it means two things, that of the points is told."""
    found = titrations(
        POINTS.replace("titrant_ml", "V"), SAMPLES.replace("sample_volume_ml", "V") + "a,50,0.1\nb,50,0.1\n",
        '[columns]\nV = "titrant (mL)"\n', '[columns]\nV = "sample volume (mL)"\n',
    )  # fmt: skip
    assert found.headers["V"] == ("titrant_volume_ml", "mL")
    assert found.samples["sample_volume_ml"].tolist() == [50, 50]


def test_what_contradicts_is_not_judged_further(titrations):
    """One line, though a mass is given beside the two volumes."""
    points = POINTS.replace("ph\n", "ph,sample_volume_ml\n").replace("7\n", "7,50\n").replace("4\n", "4,\n")
    found = titrations(points, "sample_id,sample_volume_ml,sample_mass_g,titrant_n\na,49,50,0.1\nb,50,,0.1\n")
    assert only(found)["rule"] == "both files must say the same; samples.csv has 49 mL in row 2"


def test_per_kilogram_by_the_density_of_the_sample(titrations):
    """Temperature and salinity may stand in the other file; UNESCO technical paper 44 (recalled): 1023.34306 kg/m3."""
    points = "sample_id,titrant_ml,ph,temperature_c,salinity,boron_umol_kg\na,0,7,25,35,<416\na,1,4,,,\nb,0,7,,,\nb,1,4,,,\nc,0,7,,,\nc,1,4,,,\n"
    samples = SAMPLES.replace("\n", ",dic_umol_kg,dic_u_umol_kg\n") + "a,50,0.1,2000,2\nb,50,0.1,1000,\nc,50,0.1,,\n"
    found = titrations(points, samples)
    pure = 0.99820  # 20 °C, IAPWS
    assert_allclose(found.samples["dic_mol_l"], [2000e-6 * 1.02334306, 1000e-6 * pure, np.nan], rtol=1e-5)
    assert_allclose(found.samples["dic_u_mol_l"], [2e-6 * 1.02334306, np.nan, np.nan], rtol=1e-5)
    assert_allclose(found.samples["boron_mol_l"], [208e-6 * 1.02334306, np.nan, np.nan], rtol=1e-5)
    assert_allclose(found.samples["boron_u_mol_l"], [416e-6 / math.sqrt(12) * 1.02334306, np.nan, np.nan], rtol=1e-5)
    assert found.notes == (
        "points: 1 x below detection, half the limit used in boron_mol_l (first: row 2, '<416')",
        "points: 1 x no temperature, density at 20 °C used in dic_mol_l (first: row 4)",
        "points: 1 x no salinity, density of fresh water used in dic_mol_l (first: row 4)",
    )


def test_conductivity_is_brought_to_25_degrees_across_the_files(titrations):
    """Factor 0.618 at 5 °C for 1.91 % per degree; the temperature stands in the points."""
    points = POINTS.replace("ph\n", "ph,temperature_c\n").replace("7\n", "7,5\n").replace("4\n", "4,\n")
    found = titrations(points, SAMPLES.replace("\n", ",conductivity_raw_us_cm\n") + "a,50,0.1,100\nb,50,0.1,\n")
    assert_allclose(found.samples["conductivity_us_cm"], [100 / 0.618, np.nan], rtol=1e-9)


def test_values_and_fill_of_the_maps(titrations):
    """A constant is for every row; a number to fill in serves a sample that has none in either file."""
    points = POINTS.replace("ph\n", "ph,temperature_c\n").replace("a,0,7", "a,0,7,12").replace("b,0,7", "b,0,7,").replace("4\n", "4,\n")
    found = titrations(
        points, "sample_id,titrant_eq_l\na,0.1\nb,0.1\n", '[fill]\ntemperature_c = 20\n"sample volume (L)" = 0.1\n',
        '[fill]\nsalinity = 35\n[values]\nexchange = "purged"\n',
    )  # fmt: skip
    assert found.rejected.empty, found.rejected.to_string()
    assert found.samples["temperature_c"].tolist() == [12, 20]
    assert found.samples["sample_volume_ml"].tolist() == [100, 100]
    assert found.samples["salinity"].tolist() == [35, 35]
    assert found.samples["exchange"].tolist() == ["purged", "purged"]
    assert "points: 1 x missing, filled from the map file in temperature_c (first: row 4)" in found.notes


def test_fill_of_a_column_of_points(titrations):
    """It serves each point that has none."""
    found = titrations(POINTS.replace("ph\n", "ph,minutes\n").replace("7\n", "7,\n").replace("4\n", "4,3\n"),
                       SAMPLES + "a,50,0.1\nb,50,0.1\n", "[fill]\nminutes = 0\n")
    assert found.minutes.tolist() == [0, 3, 0, 3]
    assert found.flags["row"].tolist() == [2, 4]


def test_acids_of_the_maps(titrations):
    """Those of either map."""
    acid = "[acids.{0}]\npk = [{1}]\nmolar_mass_g = 100\n"
    points = POINTS.replace("ph\n", "ph,malate_mg_l\n").replace("7\n", "7,10\n").replace("4\n", "4,\n")
    found = titrations(points, SAMPLES.replace("\n", ",humate_mmol_l\n") + "a,50,0.1,1\nb,50,0.1,2\n",
                       acid.format("malate", 3.4), acid.format("humate", 4.5))
    assert {name: acid.pk for name, acid in found.acids.items()} == {"malate_mol_l": (3.4,), "humate_mol_l": (4.5,)}
    assert_allclose(found.samples["malate_mol_l"], [1e-4, 1e-4])
    assert_allclose(found.samples["humate_mol_l"], [1e-3, 2e-3])
