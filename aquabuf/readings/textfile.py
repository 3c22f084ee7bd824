"""A text table on disk: encoding, delimiter, decimal sign, comment lines, and records with their line numbers."""

from __future__ import annotations

import codecs
import csv
import re
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import islice
from pathlib import Path

from aquabuf.errors import FileError, InputError

__all__ = ["Record", "TableFormat", "inspect_table", "open_records"]

Record = tuple[int, list[str]]  # line in the file, fields

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab"}
_SAMPLE_RECORDS = 300
_BLOCK = 1 << 20
_COMMA_NUMBER = re.compile(r"\s*[<>]?\s*[+-]?\d*,\d+(?:[eE][+-]?\d+)?\s*")
_POINT_NUMBER = re.compile(r"\s*[<>]?\s*[+-]?\d*\.\d+(?:[eE][+-]?\d+)?\s*")
_THOUSANDS_LOOK = re.compile(r"\s*[<>]?\s*[+-]?[1-9]\d{0,2},\d{3}\s*")
_BINARY = re.compile(rb"[\x00-\x08\x0e-\x1a\x1c-\x1f]")


@dataclass(frozen=True, slots=True)
class TableFormat:
    """How a table is written; `notes` says what was recognized."""

    encoding: str
    delimiter: str
    decimal: str
    notes: tuple[str, ...]


class _Lines:
    """Lines of a stream without comment lines; `number` counts every line of the file."""

    def __init__(self, stream):
        self.stream = stream
        self.number = 0

    def __iter__(self):
        for line in self.stream:
            self.number += 1
            if not line.startswith("#"):
                yield line


def _encoding(path: Path, wanted: str) -> str:
    """Encoding of the whole file: UTF-8 (with or without mark) if it is, else Latin-1; FileError for no text."""
    decoder = codecs.getincrementaldecoder(wanted or "utf-8")()
    utf8, first = True, True
    with path.open("rb") as stream:
        while block := stream.read(_BLOCK):
            if first and block.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
                raise FileError(f"{path.name}: the file must be UTF-8 or Latin-1 text, found UTF-16. Save it as UTF-8.")
            if _BINARY.search(block):
                raise FileError(
                    f"{path.name}: the file must be a text table (CSV), found binary data. Export it as CSV."
                )
            utf8 = utf8 and _decodes(decoder, block)
            first = False
    utf8 = utf8 and _decodes(decoder, b"", final=True)
    if wanted and not utf8:
        raise FileError(f"{path.name}: the file cannot be decoded as {wanted}. Correct 'encoding' in the map file.")
    if wanted:
        return "utf-8-sig" if wanted.lower().replace("_", "-") in ("utf-8", "utf8") else wanted
    return "utf-8-sig" if utf8 else "latin-1"


def _decodes(decoder: codecs.IncrementalDecoder, block: bytes, final: bool = False) -> bool:
    try:
        decoder.decode(block, final)
    except UnicodeDecodeError:
        return False
    return True


def check_path(path: Path) -> None:
    """FileError unless `path` is a readable file that is not empty."""
    if path.is_dir():
        raise FileError(f"{path.name}: a file is needed, found a folder. Name the table inside it.")
    try:
        with path.open("rb") as stream:
            head = stream.read(1)
    except FileNotFoundError:
        raise FileError(f"{path}: no such file. Check the name and the folder.") from None
    except OSError as error:
        raise FileError(f"{path}: cannot be read ({error.strerror}). Check the permissions.") from None
    if not head:
        raise FileError(f"{path.name}: the file is empty. A header line and one row at least are needed.")


def _sample_lines(path: Path, encoding: str) -> list[str]:
    with path.open(encoding=encoding, newline="") as stream:
        full = (line for line in _Lines(stream) if line.strip())
        return list(islice(full, _SAMPLE_RECORDS))


def _sample(lines: list[str], delimiter: str) -> list[list[str]]:
    """Records of the sample; a quote left open at the cut is not an error here."""
    return [record for record in csv.reader(lines, delimiter=delimiter) if record]


def _delimiter(lines: list[str]) -> str:
    """The delimiter under which most sample records have as many fields as the header."""

    def score(delimiter: str) -> tuple[float, int]:
        records = _sample(lines, delimiter)
        width = len(records[0])
        same = sum(len(record) == width for record in records) / len(records)
        return (same if width > 1 else 0.0, width)

    return max(DELIMITERS, key=score)


def _decimal(records: list[list[str]], delimiter: str, name: str) -> str:
    """Decimal sign of the sample; InputError when the numbers can be read in two ways."""
    cells = [cell for record in records[1:] for cell in record]
    commas = [cell for cell in cells if _COMMA_NUMBER.fullmatch(cell)]
    points = sum(bool(_POINT_NUMBER.fullmatch(cell)) for cell in cells)
    if delimiter == "," or len(commas) < points or not commas:
        return "."
    if len(commas) == points:
        raise InputError(
            f"{name}: decimal points and decimal commas are equally common in the first rows "
            f"(e.g. {commas[0].strip()!r}); one sign is needed. "
            'Say decimal = "," or "." under [read] in a map file.'
        )
    if all(_THOUSANDS_LOOK.fullmatch(cell) for cell in commas):
        raise InputError(
            f"{name}: {commas[0].strip()!r} can be a decimal comma or a thousands separator. "
            'Say decimal = "," or "." under [read] in a map file.'
        )
    return ","


def inspect_table(path: Path, *, encoding: str = "", delimiter: str = "", decimal: str = "") -> TableFormat:
    """Recognize encoding, delimiter and decimal sign of a table; what is given is taken as it is.

    Raises
    ------
    FileError
        Missing, empty, a folder, binary, or not decodable.
    InputError
        No header, or a decimal sign that can be read in two ways.
    """
    check_path(path)
    encoding = _encoding(path, encoding)
    lines = _sample_lines(path, encoding)
    if not lines:
        raise InputError(f"{path.name}: the table has no header line, only comments or blank lines. Add one.")
    delimiter = delimiter or _delimiter(lines)
    decimal = decimal or _decimal(_sample(lines, delimiter), delimiter, path.name)
    notes = []
    if delimiter != ",":
        notes.append(f"fields are separated by {DELIMITERS.get(delimiter, repr(delimiter))}")
    if decimal == ",":
        notes.append("numbers have a decimal comma")
    if encoding == "latin-1":
        notes.append("the text is not UTF-8 and was read as Latin-1")
    return TableFormat(encoding, delimiter, decimal, tuple(notes))


def open_records(path: Path, form: TableFormat) -> Iterator[Record]:
    """Records of the table with the line each begins on (1 = first line of the file); blank ones are left out.

    Raises
    ------
    FileError
        A quotation mark that is never closed, or a field too long to be one.
    """
    with path.open(encoding=form.encoding, newline="") as stream:
        lines = _Lines(stream)
        reader = csv.reader(lines, delimiter=form.delimiter, strict=True)
        before = 0
        while True:
            try:
                record = next(reader, None)
            except csv.Error as error:
                raise FileError(
                    f"{path.name}, line {lines.number}: the fields cannot be told apart ({error}). "
                    "Check the quotation marks there and before."
                ) from None
            if record is None:
                return
            start = lines.number - (reader.line_num - before) + 1
            before = reader.line_num
            if record and (record[0] or any(record)):
                yield start, record
