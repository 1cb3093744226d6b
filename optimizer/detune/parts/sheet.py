"""Read a parts list in CSV into cells, each with its line. Knows nothing of columns or units."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from detune.ground.errors import BriefError, Fault, nearest_name

_DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab"}
_QUOTED = re.compile(r'"(?:[^"]|"")*"')
_FIRST_LINE = re.compile(r"[^\r\n]*[^\s][^\r\n]*")
_FOREIGN = {
    b"PK\x03\x04": "an XLSX workbook; let its name end in .xlsx",
    b"\xd0\xcf\x11\xe0": "an XLS workbook; save the sheet as CSV in UTF-8",
    b"PAR1": "a Parquet file; let its name end in .parquet",
    b"\xff\xfe": "text in UTF-16; save it in UTF-8",
    b"\xfe\xff": "text in UTF-16; save it in UTF-8",
}


@dataclass(frozen=True)
class Sheet:
    """Cells as text, without surrounding blanks.

    headers: one per column. header_line and lines: 1-based, of each row's first line in the file; a file
    without lines counts its rows and has no header_line. columns: cells by column, each as long as `lines`.
    faults: rows that had to be left out. name: of the sheet in its workbook, empty elsewhere. letters: of
    each column in the workbook. refused: (row, column), both from 0, of a cell that no column of ours may
    read -> what it holds, in words.
    """

    file: str
    headers: tuple[str, ...]
    header_line: int | None
    lines: tuple[int, ...]
    columns: tuple[tuple[str, ...], ...]
    faults: tuple[Fault, ...]
    name: str = ""
    letters: tuple[str, ...] = ()
    refused: Mapping[tuple[int, int], str] = field(default_factory=dict)

    def cell(self, row: int, column: int) -> str:
        """Where a cell stands: Sheet1!D7 in a workbook, the header elsewhere. row, column: from 0."""
        if not self.name:
            return self.headers[column]
        return address(self.name, self.letters[column], self.lines[row])

    def header(self, text: str) -> str:
        """Where a header stands: with the name of the sheet in a workbook."""
        return f"{quoted_sheet(self.name)}!{text}" if self.name else text


def quoted_sheet(name: str) -> str:
    """The name of a sheet as a formula writes it: in quotation marks unless it is a plain word."""
    return name if re.fullmatch(r"\w+", name) else f"'{name}'"


def address(name: str, letter: str, line: int) -> str:
    """The address of a cell as a formula writes it, for example Sheet1!D7."""
    return f"{quoted_sheet(name)}!{letter}{line}"


def read_sheet(path: str | Path) -> Sheet:
    """Read a CSV file: UTF-8, comma, semicolon or tab, one header row; rows without any text are skipped.

    Raises BriefError when the file cannot be read as such at all. Rows with a wrong number of cells are left
    out and stand in `faults`.
    """
    file = str(path)
    text = _decoded(content_of(Path(path), file), file)
    delimiter = _delimiter(text)
    records, faults = _records(text, delimiter, file)
    if not records:
        if faults:
            raise BriefError(faults)
        raise BriefError(
            [Fault(file, 1, "file", "", "a header row and a row for each part; the file is empty")]
        )
    header_line, header = records[0]
    headers = tuple(cell.strip() for cell in header)
    rows: list[list[str]] = []
    lines: list[int] = []
    for line, cells in records[1:]:
        if len(cells) == len(headers):
            rows.append(cells)
            lines.append(line)
        else:
            faults.append(_wrong_count(file, line, len(cells), len(headers), delimiter))
    if not rows and not faults:
        faults.append(
            Fault(file, header_line, "file", "", "a row for each part below the header; there is none")
        )
    columns = tuple(tuple(map(str.strip, column)) for column in zip(*rows, strict=True))
    return Sheet(file, headers, header_line, tuple(lines), columns or ((),) * len(headers), tuple(faults))


def content_of(path: Path, file: str) -> bytes:
    """Return the bytes of a file. Raises BriefError when there is none, with the nearest name beside it."""
    try:
        return path.read_bytes()
    except FileNotFoundError:
        neighbours = [entry.name for entry in path.parent.iterdir()] if path.parent.is_dir() else []
        fault = Fault(file, None, "file", "", "a list of figures; there is no such file",
                      nearest_name(path.name, neighbours))  # fmt: skip
    except IsADirectoryError:
        fault = Fault(file, None, "file", "", "a list of figures; this is a folder")
    except OSError as error:
        fault = Fault(file, None, "file", "", f"a file that can be read; the system says: {error.strerror}")
    raise BriefError([fault])


def _decoded(content: bytes, file: str) -> str:
    for start, what in _FOREIGN.items():
        if content.startswith(start):
            raise BriefError([Fault(file, None, "file", "", f"text in CSV; this is {what}")])
    if b"\0" in content:
        line = content.count(b"\n", 0, content.index(b"\0")) + 1
        raise BriefError([Fault(file, line, "file", "", "text in CSV; this is a binary file")])
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        found = content[error.start : error.start + 1].hex()
        expected = "text in UTF-8; this byte belongs to another character set; save the sheet as CSV in UTF-8"
        raise BriefError([Fault(file, line, "file", f"byte {found}", expected)]) from None


def _delimiter(text: str) -> str:
    first = _FIRST_LINE.search(text)
    bare = _QUOTED.sub("", first.group()) if first else ""
    return max(_DELIMITERS, key=bare.count)


def _records(text: str, delimiter: str, file: str) -> tuple[list[tuple[int, list[str]]], list[Fault]]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    records: list[tuple[int, list[str]]] = []
    start = 1
    try:
        for cells in reader:
            # A row of delimiters only is what a spreadsheet writes for a row once touched.
            if cells and (cells[0].strip() or any(map(str.strip, cells))):
                records.append((start, cells))
            start = reader.line_num + 1
    except csv.Error as error:
        expected = f'rows of a CSV file; from here on it cannot be read ({error}): look for a stray "'
        return records, [Fault(file, start, "row", "", expected)]
    return records, []


def _wrong_count(file: str, line: int, found: int, wanted: int, delimiter: str) -> Fault:
    expected = f"{wanted} cells, as many as the header has, set apart by a {_DELIMITERS[delimiter]}"
    if found > wanted and delimiter == ",":
        expected += "; a decimal comma cuts a number in two: write a decimal point"
    return Fault(file, line, "row", f"{found} cells" if found != 1 else "1 cell", expected)
