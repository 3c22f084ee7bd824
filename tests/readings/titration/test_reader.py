"""Files as they come, whole or in pieces, of any length: no row is lost, and no exception that nobody meant."""

import contextlib
import csv
import io
import os
import tracemalloc
from dataclasses import fields
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.errors import AquabufError, FileError, HeaderError, InputError
from aquabuf.readings import textfile
from aquabuf.readings.titration import blocks
from aquabuf.readings.titration.reader import iter_titrations, read_titrations
from aquabuf.readings.titration.result import TITRATION_FLAG_COLUMNS, TITRATION_REJECTED_COLUMNS, join_titrations

POINTS = "sample_id,titrant_ml,ph\na,0,7\na,0.5,4\nb,0,7\nb,0.5,4\n"
SAMPLES = "sample_id,sample_volume_ml,titrant_eq_l\na,50,0.1\nb,100,0.02\n"
MANY = settings(max_examples=100, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck),
                phases=(Phase.explicit, Phase.generate))  # fmt: skip


def assert_same(one, other):
    """Every field of two results is equal."""
    for field in fields(one):
        a, b = getattr(one, field.name), getattr(other, field.name)
        if isinstance(a, pd.DataFrame):
            pd.testing.assert_frame_equal(a, b)
        elif isinstance(a, np.ndarray):
            assert a.dtype == b.dtype
            assert_array_equal(a, b)
        else:
            assert a == b


def test_two_titrations(titrations):
    """What stands where, and in which type."""
    found = titrations(POINTS.replace("ph\n", "ph,minutes\n").replace("7\n", "7,0\n").replace("4\n", "4,2.5\n"), SAMPLES)
    assert list(found.samples.columns) == ["row", "sample_id", "sample_volume_ml", "titrant_strength_eq_l"]
    assert found.samples.to_numpy().tolist() == [[2, "a", 50, 0.1], [4, "b", 100, 0.02]]
    assert (len(found), found.usable.dtype, found.start.dtype, found.point_row.dtype) == (2, bool, np.int64, np.int64)
    assert found.start.tolist() == [0, 2, 4]
    assert found.added.tolist() == [0, 0.5, 0, 0.5]
    assert found.reading.tolist() == [7, 4, 7, 4]
    assert found.minutes.tolist() == [0, 2.5, 0, 2.5]
    assert found.point_row.tolist() == [2, 3, 4, 5]
    assert (found.added_by.tolist(), found.read_as.tolist()) == (["volume"] * 2, ["ph"] * 2)
    assert (found.rejected.empty, found.flags.empty, found.notes, found.acids) == (True, True, (), {})
    assert tuple(found.rejected.columns) == TITRATION_REJECTED_COLUMNS == ("file", "row", "sample_id", "column", "value", "rule", "remedy")
    assert tuple(found.flags.columns) == TITRATION_FLAG_COLUMNS == ("file", "row", "sample_id", "column", "value", "what")


def test_a_refused_sample_keeps_its_place_and_name(titrations):
    """Its numbers are missing, its words blank, and it has no points."""
    found = titrations(POINTS.replace("a,0.5", "a,x"), SAMPLES.replace("\n", ",S\n").replace("eq_l,S", "eq_l,site"))
    assert found.usable.tolist() == [False, True]
    first = found.samples.iloc[0]
    assert (first["row"], first["sample_id"], first["site"]) == (2, "a", "")
    assert np.isnan(first["sample_volume_ml"])
    assert found.start.tolist() == [0, 0, 2]
    assert (found.added_by.tolist(), found.read_as.tolist()) == (["", "volume"], ["", "ph"])


def test_all_refused_is_still_an_answer(titrations):
    """No points, and the reasons."""
    found = titrations(POINTS)
    assert not found.usable.any()
    assert (len(found.added), len(found.rejected)) == (0, 4)


@pytest.mark.parametrize(
    ("points", "samples"),
    [
        (POINTS.replace(",", ";").replace(".", ","), SAMPLES.replace(",", ";").replace(".", ",")),
        (POINTS.replace(",", "\t").replace(".", ","), SAMPLES),
        ("# remark\n\n" + POINTS.replace("\n", "\r\n"), SAMPLES.replace(",", ";")),
    ],
)
def test_dialects(titrations, points, samples):
    """Semicolons and decimal commas, tabs, remarks; each file in its own."""
    found = titrations(points, samples)
    assert found.added.tolist() == [0, 0.5, 0, 0.5]
    assert found.samples["titrant_strength_eq_l"].tolist() == [0.1, 0.02]
    remarks = 2 if points.startswith("#") else 0
    assert found.point_row.tolist() == [row + remarks for row in (2, 3, 4, 5)]


def test_notes_name_their_file(titrations):
    """Once, with the first piece."""
    found = titrations(POINTS.replace(",", ";").replace(".", ","), SAMPLES.replace("\n", ",1\n").replace("eq_l,1", "eq_l,Operator"),
                       samples_map='[columns]\n"Operator" = "ignore"\n')
    assert found.notes == (
        "points.csv: fields are separated by semicolon", "points.csv: numbers have a decimal comma", "samples.csv: 1 columns left out: Operator",
    )  # fmt: skip


@pytest.mark.parametrize(
    ("points", "samples", "error", "words"),
    [
        ("", None, FileError, r"points\.csv: the file is empty"),
        ("sample_id,titrant_ml,ph\n", None, InputError, r"points\.csv: the table has a header but no rows"),
        (POINTS, "sample_id,sample_volume_ml\n", InputError, r"samples\.csv: the table has a header but no rows"),
        (POINTS, "", FileError, r"samples\.csv: the file is empty"),
        ("titrant_ml,ph\n0,7\n", None, HeaderError, r"points\.csv: the table has no column sample_id"),
        (POINTS.replace("titrant_ml", "tirtant"), None, HeaderError, r"points\.csv: column 'tirtant' is not known.*titrant"),
        (POINTS, SAMPLES.replace("titrant_eq_l", "strenght"), HeaderError, r"samples\.csv: column 'strenght' is not known"),
        (POINTS.replace("titrant_ml", "minutes"), SAMPLES, HeaderError,
         r"points\.csv: no column gives the titrant added, which each point needs; one of titrant_volume_ml, titrant_mass_g, titrant_counts is required\. Rename"),
        (POINTS.replace("ph", "minutes"), SAMPLES, HeaderError,
         r"points\.csv: no column gives the pH or potential read, .*one of ph, potential_mv is required\. Rename the column, or give its meaning in a map file"),
        (POINTS, POINTS.replace("ph", "pH"), HeaderError,
         r"samples\.csv: a file of samples has a row per sample, and 'titrant_ml', 'pH' belongs to single points\. Move it .*Are the two files exchanged"),
        (POINTS.replace("ph\n", "ph,dic_umol_kg\n"), SAMPLES.replace("eq_l\n", "eq_l,dic_umol_l\n"), HeaderError,
         r"'dic_umol_kg' in points\.csv and 'dic_umol_l' in samples\.csv both give dic_mol_l, one per kilogram and one per liter\. Remove one"),
        (POINTS + '"a', None, FileError, r"points\.csv, line 6: the fields cannot be told apart"),
    ],
)  # fmt: skip
def test_files_that_cannot_be_read(titrations, points, samples, error, words):
    """The message names the file."""
    with pytest.raises(error, match=words):
        titrations(points, samples)


def test_files_that_are_not_there(table, tmp_path):
    """Either of them, or a map."""
    path = table(POINTS)
    with pytest.raises(FileError, match=r"none\.csv: no such file"):
        read_titrations(tmp_path / "none.csv")
    with pytest.raises(FileError, match=r"none\.csv: no such file"):
        read_titrations(path, tmp_path / "none.csv")
    with pytest.raises(FileError, match=r"none\.toml: no such map file"):
        read_titrations(path, points_map=tmp_path / "none.toml")
    with pytest.raises(InputError, match=r"chunk_samples must be 1 or more; found 0"):
        next(iter_titrations(path, chunk_samples=0))


def test_one_acid_in_two_ways(titrations):
    """The maps must agree."""
    acid = "[acids.malate]\npk = [{}]\n"
    assert titrations(POINTS, SAMPLES, acid.format(3.4), acid.format(3.4)).usable.all()
    with pytest.raises(InputError, match=r"\[acids\.malate\] differs between the map files of points and samples\. Make both the same"):
        titrations(POINTS, SAMPLES, acid.format(3.4), acid.format(3.5))


def scrambled(seed, rows=120):
    """Points of some two dozen samples with every fault, and a file of samples with faults of its own."""
    rng = np.random.default_rng(seed)
    lines, names = [], [f"s{i}" for i in range(24)]
    for name in [*names, *rng.choice(names, 2)]:
        for i in range(rng.integers(1, 2 * rows // len(names))):
            cells = [name, f"{i * 0.1:g}", f"{7 - i / 5:g}", "" if i else "<3"]
            if rng.random() < 0.02:
                cells[rng.integers(0, 4)] = str(rng.choice(["", "x", "-1", "99"]))
            lines.append(",".join(cells[: 2 if rng.random() < 0.01 else 4]))
    known = [f"{name},{rng.choice(['50'] * 6 + ['', 'x'])},0.1,<0.1" for name in [*names, "s1", "z", ""] if rng.random() < 0.9]
    return "\n".join(["sample_id,titrant_ml,ph,doc_mg_l", *lines]), "\n".join(["sample_id,sample_volume_ml,titrant_n,phosphate_mg_l_p", *known])


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("chunk_samples", [1, 2, 7, 1000])
@pytest.mark.parametrize("most_rows", [10, 50_000])
def test_pieces_make_the_whole(table, monkeypatch, seed, chunk_samples, most_rows):
    """Whatever the size of a piece, the joined result is the same; and no piece is larger than asked for."""
    points, samples = (table(text, name) for text, name in zip(scrambled(seed), ("p.csv", "s.csv"), strict=True))
    whole = read_titrations(points, samples)
    assert len(whole.rejected) > 5
    assert whole.usable.sum() > 3
    monkeypatch.setattr(blocks, "MOST_ROWS", most_rows)
    parts = list(iter_titrations(points, samples, chunk_samples=chunk_samples))
    assert all(0 < len(part) <= chunk_samples for part in parts)
    assert [bool(part.notes) for part in parts[1:]] == [False] * (len(parts) - 1)
    assert_same(join_titrations(parts), whole)


def test_a_long_titration_through_small_pieces(table, monkeypatch):
    """A titration is never cut, however few rows a piece should have."""
    monkeypatch.setattr(blocks, "MOST_ROWS", 5)
    path = table("sample_id,titrant_ml,ph,sample_volume_ml,titrant_n\n" + "".join(
        f"s{i},{j},7,50,0.1\n" for i, count in enumerate((3, 40, 2, 2)) for j in range(count)))
    parts = list(iter_titrations(path))
    assert [np.diff(part.start).tolist() for part in parts] == [[3, 40], [2, 2]]
    assert parts[0].added[3:].tolist() == list(range(40))


def test_memory_does_not_grow_with_the_file(table, monkeypatch):
    """Eight times the points, in pieces of the same size, take less than half as much again."""
    monkeypatch.setattr(blocks, "NAMES_AT_ONCE", 100)
    monkeypatch.setattr(textfile, "_BLOCK", 1 << 14)

    def peak(count):
        path = table("sample_id,titrant_ml,ph,sample_volume_ml,titrant_n\n" + "".join(
            f"s{i},{j},7,50,0.1\n" for i in range(count) for j in range(10)), f"{count}.csv")
        tracemalloc.start()
        points = sum(len(part.added) for part in iter_titrations(path, chunk_samples=100))
        most = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        assert points == 10 * count
        return most

    peak(100)  # what is loaded once
    assert peak(2000) < 1.5 * peak(250)


def owners(text):
    """Sample of each line by the csv module alone: a name, or that of the row before."""
    found, last = {}, ""
    for row, record in enumerate(csv.reader(io.StringIO(text)), start=1):
        if row > 1 and any(record):
            last = last if record[0].strip() in ("", "NaN") else record[0].strip()
            found[row] = last
    return found


CELLS = ["", " ", "NaN", "inf", "-inf", "1e308", "1e999", "1e-320", "0", "-0", "-1", "<", "<0.1", ">5", "٣", "1,5", '"', "7.0 ?", "-999",
         "15", "50", "0.0001", "x" * 300, "±", "acid", "base", "a", "b", "purged", "2024-05-31"]
HEADERS = ["sequence", "minutes", "titrant_g", "potential_mv", "titrant_counts", "sample_volume_ml", "titrant_n",
           "titrant_eq_kg", "doc_mg_l", "site", "date", "exchange", "dic_umol_kg", "temperature_c", "ph_u", "standard_1_ph", "standard_1_mv"]


@MANY
@given(data=st.data())
def test_garbled_tables(tmp_path, data):
    """Rows in are rows of usable samples and rows of refused ones, always; each refused one has its reason."""
    known = data.draw(st.sampled_from([["sample_volume_ml", "titrant_n"]] * 4 + [[]]))
    more = data.draw(st.lists(st.sampled_from([name for name in HEADERS if name not in known]), max_size=5, unique=True))
    headers = ["sample_id", "titrant_ml", "ph", *known, *more]
    usual = {"titrant_ml": "{i}", "ph": "6", "sample_volume_ml": "50", "titrant_n": "0.1"}
    lines = []
    unique = data.draw(st.sampled_from([True, True, True, False]))
    for name in data.draw(st.lists(st.sampled_from(["a", "b", "c", "d", "e"]), min_size=1, max_size=6 - unique, unique=unique)):
        for i in range(data.draw(st.integers(1, 4))):
            line = [name, *(usual.get(header, "").format(i=i) for header in headers[1:])]
            if data.draw(st.integers(0, 9)) == 0:
                line[data.draw(st.integers(0, len(line) - 1))] = data.draw(st.sampled_from(CELLS))
            lines.append(line[: data.draw(st.sampled_from([len(line)] * 19 + [2]))])
    stream = io.StringIO()
    csv.writer(stream, lineterminator="\n").writerows([headers, *lines])
    points = tmp_path / "p.csv"
    points.write_text(stream.getvalue(), encoding="utf-8")
    samples = None
    if data.draw(st.booleans()):
        samples = tmp_path / "s.csv"
        cells = st.sampled_from(["50", "0.1", *[""] * 10, *CELLS[:20]])
        rows = [",".join([name, *(f'"{data.draw(cells)}"'.replace('"""', '"') for _ in range(2))]) for name in "abce"]
        samples.write_text("\n".join(["sample_id,sample_volume_ml,titrant_n", *rows]), encoding="utf-8")
    check_rows(points, samples, stream.getvalue(), data.draw(st.integers(1, 4)))


def check_rows(points, samples, text, chunk_samples):
    """Every row of the file is accounted for, or the file is refused with a message."""
    try:
        found = join_titrations(iter_titrations(points, samples, chunk_samples=chunk_samples))
    except AquabufError:
        return
    owner = owners(text)
    assert found.samples["sample_id"].tolist() == list(dict.fromkeys(owner.values()))
    usable = set(found.samples["sample_id"][found.usable])
    assert sorted(found.point_row.tolist()) == [row for row, name in owner.items() if name in usable]
    assert set(found.samples["sample_id"][~found.usable]) <= set(found.rejected["sample_id"])
    assert usable.isdisjoint(found.rejected.loc[found.rejected["file"] == "points", "sample_id"])
    assert np.isfinite(found.added).all()
    assert np.isfinite(found.reading).all()
    for i in np.flatnonzero(found.usable):
        own = slice(found.start[i], found.start[i + 1])
        assert (np.diff(found.added[own]) >= 0).all()


def test_the_garbled_tables_are_not_all_refused(tmp_path):
    """So that the test above says something: the same check on a table that is mostly good."""
    text = POINTS.replace("ph\n", "ph,sample_volume_ml,titrant_n\n").replace("7\n", "7,50,0.1\n").replace("4\n", "4,,\n") + "c,0,9\n"
    path = tmp_path / "p.csv"
    path.write_text(text, encoding="utf-8")
    check_rows(path, None, text, 1)
    assert read_titrations(path).usable.tolist() == [True, True, False]


@MANY
@given(st.binary(max_size=300), st.sampled_from([b"", b"sample_id,titrant_ml,ph\n", POINTS.encode()]), st.booleans())
def test_random_bytes(tmp_path, content, before, as_samples):
    """Any bytes at all, in either file: an answer or a message."""
    points, samples = tmp_path / "p.csv", tmp_path / "s.csv"
    points.write_bytes(POINTS.encode() if as_samples else before + content)
    samples.write_bytes(b"sample_id,sample_volume_ml,titrant_n\n" + content if as_samples else SAMPLES.encode())
    with contextlib.suppress(AquabufError):
        read_titrations(points, samples)


DATA = os.environ.get("AQUABUF_OPEN_DATA", "")


@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
@pytest.mark.open_data
def test_teaching_titrations():
    """Two titrations, six and eleven points, read as they are by a map; every number is the file's."""
    path = Path(DATA) / "titrations_gran.csv"
    found = read_titrations(path, points_map=Path(__file__).parents[3] / "docs" / "maps" / "titrations_gran_points.toml")
    with path.open(newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert found.rejected.empty
    assert found.samples["sample_id"].tolist() == ["A_Gran", "B_Lab4_Sample1_t0"]
    assert found.start.tolist() == [0, 6, 17]
    assert_allclose(found.added, [float(row["acid_mL"]) for row in rows], rtol=1e-12)
    assert_allclose(found.reading, [float(row["pH"]) for row in rows], rtol=0)
    assert found.samples["sample_volume_ml"].tolist() == [50, 50]
    assert found.samples["titrant_strength_eq_l"].tolist() == [0.1, 0.1]
    assert found.samples["titrant_kind"].tolist() == ["acid", "acid"]
    assert found.notes == ("titrations_gran.csv: 3 columns left out: reported_Ve_mL, reported_ANC_eq_L, reported_r",)
