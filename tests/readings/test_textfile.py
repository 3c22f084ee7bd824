"""Files as they come: delimiters, decimal commas, encodings, marks, comments, quotes - and files that are no table."""

import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import FileError, HeaderError, InputError
from aquabuf.readings.reader import iter_readings, read_readings

# the same three rows in several dialects; 1 mg/L Ca = 1/40.078 mmol/L by the IUPAC atomic weight
PLAIN = "sample_id,ph,calcium_mg_l,site\na,7.5,40.078,Höhe\nb,6.25,20.039,Tal\nc,8,4.0078,Ufer\n"
GERMAN = "sample_id;pH;Calcium (mg/L);site\na;7,5;40,078;Höhe\nb;6,25;20,039;Tal\nc;8;4,0078;Ufer\n"
DIALECTS = {
    "comma": PLAIN.encode(),
    "semicolon and decimal comma": GERMAN.encode(),
    "tab and decimal comma": GERMAN.replace(";", "\t").encode(),
    "semicolon and decimal point": PLAIN.replace(",", ";").encode(),
    "byte order mark": b"\xef\xbb\xbf" + PLAIN.encode(),
    "Latin-1": PLAIN.encode("latin-1"),
    "Latin-1 and decimal comma": GERMAN.encode("latin-1"),
    "Windows line ends": PLAIN.replace("\n", "\r\n").encode(),
    "old line ends": PLAIN.replace("\n", "\r").encode(),
    "quotes": PLAIN.replace("Höhe", '"Höhe"').replace("7.5", '"7.5"').encode(),
    "quoted headers": PLAIN.replace("sample_id,ph", '"sample_id","pH"').encode(),
    "comments and blank lines": ("# a remark, with commas\n\n" + PLAIN.replace("b,", "# another; one\n\nb,")).encode(),
    "blank records": PLAIN.replace("b,6", ",,,\nb,6").encode(),
    "no last line end": PLAIN.rstrip("\n").encode(),
    "spaces": PLAIN.replace(",", " , ").encode(),
    "columns without header": PLAIN.replace("site\n", "site,,\n").replace("Höhe", "Höhe,,").replace("Tal", "Tal,,").replace("Ufer", "Ufer,,").encode(),
}  # fmt: skip


@pytest.mark.parametrize("dialect", DIALECTS)
def test_the_same_table_in_every_dialect(table, dialect):
    """However it is written, the readings are the same."""
    readings = read_readings(table(DIALECTS[dialect]))
    assert readings.rejected.empty
    assert readings.frame["sample_id"].tolist() == ["a", "b", "c"]
    assert_allclose(readings.frame["ph"], [7.5, 6.25, 8.0])
    assert_allclose(readings.frame["calcium_mol_l"], [1e-3, 0.5e-3, 1e-4], rtol=1e-9)
    assert readings.frame["site"].tolist() == ["Höhe", "Tal", "Ufer"]


def test_rows_are_lines_of_the_file(table):
    """Comments, blank lines, blank records and fields of two lines all count as lines."""
    text = '# one\n\nsample_id,ph,notes\na,7,"two\nlines"\n,,\n# remark\nb,7,\nc,7,x\n'
    assert read_readings(table(text)).frame["row"].tolist() == [4, 8, 9]


@pytest.mark.parametrize(
    ("dialect", "note"),
    [("semicolon and decimal comma", "decimal comma"), ("semicolon and decimal comma", "separated by semicolon"),
     ("tab and decimal comma", "separated by tab"), ("Latin-1", "read as Latin-1"), ("columns without header", "2 empty columns")],
)  # fmt: skip
def test_what_was_recognized_is_said(table, dialect, note):
    """Nothing about the file is assumed in silence."""
    assert any(note in line for line in read_readings(table(DIALECTS[dialect])).notes)


def test_a_plain_file_needs_no_note(table):
    """Comma, point, UTF-8."""
    assert read_readings(table(PLAIN)).notes == ()


@pytest.mark.parametrize(
    ("content", "error", "words"),
    [
        (b"", FileError, r"table\.csv: the file is empty\. A header line and one row"),
        (b"\xff\xfes\x00a\x00", FileError, r"must be UTF-8 or Latin-1 text, found UTF-16\. Save it as UTF-8"),
        (b"PK\x03\x04\x00\x00zip", FileError, r"must be a text table \(CSV\), found binary data\. Export it as CSV"),
        (b"# only\n\n# remarks\n", InputError, r"has no header line, only comments or blank lines"),
        (b"sample_id,ph\n", InputError, r"has a header but no rows\. Add at least one row"),
        (b'sample_id,ph\na,7\nb,"7\nc,7\n', FileError, r"table\.csv, line 4: the fields cannot be told apart .*quotation marks"),
        (b"sample_id;ph\na;7,5\nb;7.5\n", InputError, r"equally common in the first rows \(e\.g\. '7,5'\).*decimal = "),
        (b"sample_id;anc_ueq_l\na;1,234\nb;2,500\n", InputError, r"'1,234' can be a decimal comma or a thousands separator"),
        (b",,\n", HeaderError, r"the header line has no names\. The first line that is no comment must name"),
        (b" , \n1,2\n", InputError, r"the header line has no names\. The first line that is no comment must name"),
        (b"ph,calcium_mg_l\n7,1\n", HeaderError, r"has no column sample_id, and each row needs a name\. .*\[compose\]"),
        (b"sample_id,ph,ph\na,7,7\n", HeaderError, r"two columns have the same header 'ph'"),
        (b"sample_id,ph,pH\na,7,7\n", HeaderError, r"columns 'ph' and 'pH' both give ph; one is needed"),
    ],
)  # fmt: skip
def test_files_that_cannot_be_read(table, content, error, words):
    """One line that says what is wrong and what to do."""
    with pytest.raises(error, match=words) as caught:
        read_readings(table(content))
    assert "\n" not in str(caught.value)


def test_missing_file_and_folder(tmp_path):
    """The two commonest slips."""
    with pytest.raises(FileError, match=r"nothing\.csv: no such file\. Check the name"):
        read_readings(tmp_path / "nothing.csv")
    with pytest.raises(FileError, match=r"a file is needed, found a folder"):
        read_readings(tmp_path)


def test_all_bad_headers_are_told_at_once(table):
    """So that the user need not try again for each."""
    with pytest.raises(HeaderError) as caught:
        read_readings(table("sample_id,xyzzy,nitrate_mg_l\na,1,1\n"))
    first, second, hint = str(caught.value).splitlines()
    assert "'xyzzy' is not known" in first
    assert "'nitrate_mg_l' is ambiguous" in second
    assert "aquabuf template map" in hint


def test_pieces_of_no_rows(table):
    """chunk_rows has a rule."""
    with pytest.raises(InputError, match=r"chunk_rows must be 1 or more; found 0"):
        next(iter_readings(table(PLAIN), chunk_rows=0))


def test_late_latin1_byte(table):
    """A file that stops being UTF-8 after a megabyte is still read as one encoding."""
    rows = b"".join(b"s%06d,7.0,plain text that fills the line up\n" % i for i in range(30000))
    readings = read_readings(table(b"sample_id,ph,notes\n" + rows + b"last,7,caf\xe9\n"))
    assert readings.frame["notes"].iloc[-1] == "café"
    assert len(readings.frame) == 30001
