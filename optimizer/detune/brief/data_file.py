"""Tables of numbers that a study names beside it: spectra, lines and records as CSV files.

The first line that is no comment holds the headers, `name [unit]`; every later one holds numbers alone. Lines
that start with # are comments. A fault is told as one sentence with the file and the line.
"""

import csv
import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pydantic import ValidationInfo

from detune.brief.statement import refuse
from detune.ground import units
from detune.ground.errors import nearest_name

Floats = NDArray[np.float64]
DELIMITERS = (";", "\t", ",")
LARGEST_FILE = 200_000_000


class DataFileFault(ValueError):
    """What is wrong in a table, as what was expected there."""


@dataclass(frozen=True, eq=False)
class DataTable:
    """Columns (N,) in SI by name, as they are written, and the line (N,) of the file each row stands in."""

    file: str
    columns: Mapping[str, Floats]
    written: Mapping[str, tuple[str, ...]]
    line: NDArray[np.int64]

    def refuse_rows(self, wrong: NDArray[np.bool_], column: str, expected: str) -> None:
        """Raise DataFileFault at the first row where `wrong` (N,) holds."""
        if np.any(wrong):
            row = int(np.argmax(wrong))
            raise DataFileFault(
                f'{expected}, but line {self.line[row]} of {self.file} has {column} "{self.written[column][row]}"'
            )

    def refuse_falling(self, column: str) -> None:
        """Raise DataFileFault unless the column rises from row to row."""
        values = self.columns[column]
        falls = np.concatenate([[False], np.diff(values) <= 0.0])
        self.refuse_rows(falls, column, f"a {column} that rises from row to row")


def folder_of(info: ValidationInfo) -> Path:
    """Return the folder that relative file names start from: that of the study, or the current one."""
    context = info.context or {}
    return Path(context.get("folder", "."))


def read_named(
    info: ValidationInfo,
    file: str,
    required: Mapping[str, str],
    one_of: Mapping[str, str] | None = None,
    optional: Mapping[str, str] | None = None,
) -> DataTable:
    """Return the table of a file named under the key "file" of a statement; what is wrong is refused there.

    Arguments as in `read_table`.
    """
    try:
        return read_table(folder_of(info), file, required, one_of, optional)
    except DataFileFault as fault:
        raise refuse(file, str(fault), at="file") from None


def read_table(
    folder: Path,
    file: str,
    required: Mapping[str, str],
    one_of: Mapping[str, str] | None = None,
    optional: Mapping[str, str] | None = None,
) -> DataTable:
    """Return the columns of a CSV file in SI.

    required, one_of, optional: column name -> kind of unit. Of `one_of` exactly one column must be there.
    Raises DataFileFault for a missing file, header or cell, a wrong unit, and for what is no finite number.
    """
    headers, rows = _cells(folder / file, file)
    known = {**required, **(one_of or {}), **(optional or {})}
    place: dict[str, int] = {}
    scales: dict[str, tuple[float, float]] = {}
    head_line, names = headers
    for index, header in enumerate(names):
        name, unit = _split(header)
        if name not in known:
            near = nearest_name(name, known)
            hint = f'; did you mean "{near}"?' if near else ""
            raise DataFileFault(
                f'columns named {_listed(known)}, but line {head_line} of {file} has "{header}"{hint}'
            )
        if name in place:
            raise DataFileFault(f'each column once, but line {head_line} of {file} has "{name}" twice')
        try:
            scales[name] = units.parse_column(unit, known[name])
        except units.UnitError as error:
            raise DataFileFault(
                f'{error.expected} in brackets behind the name, but line {head_line} of {file} has "{header}"'
            ) from None
        place[name] = index
    missing = [name for name in required if name not in place]
    if missing:
        raise DataFileFault(f'a column "{missing[0]} [unit]", but line {head_line} of {file} has none')
    found = [name for name in one_of or {} if name in place]
    if one_of and len(found) != 1:
        raise DataFileFault(
            f"exactly one of the columns {_listed(one_of)}, but line {head_line} of {file} has "
            + (" and ".join(found) or "none")
        )
    if not rows:
        raise DataFileFault(f"rows of numbers below the headers, but {file} has none")
    columns = {
        name: np.array([_number(file, line, name, cells, index) for line, cells in rows]) * scales[name][0]
        + scales[name][1]
        for name, index in place.items()
    }
    written = {name: tuple(cells[index] for _, cells in rows) for name, index in place.items()}
    return DataTable(file, columns, written, np.array([line for line, _ in rows]))


def _cells(path: Path, file: str) -> tuple[tuple[int, list[str]], list[tuple[int, list[str]]]]:
    """Return the header line and the others, each with its line number; blank and comment lines are left out."""
    try:
        if path.stat().st_size > LARGEST_FILE:
            raise DataFileFault(f"a file of at most {LARGEST_FILE // 1_000_000} MB, but {file} is larger")
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        reason = "no such file" if isinstance(error, FileNotFoundError) else (error.strerror or "unreadable")
        raise DataFileFault(
            f"a CSV file that can be read, its path relative to the study file; {file}: {reason}"
        ) from None
    except UnicodeDecodeError:
        raise DataFileFault(f"a CSV file in UTF-8, but {file} is in another encoding") from None
    lines = [
        (number, line)
        for number, line in enumerate(text.splitlines(), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not lines:
        raise DataFileFault(f"a line of headers, but {file} is empty")
    delimiter = next((mark for mark in DELIMITERS if mark in lines[0][1]), ",")
    parsed = [
        (number, [cell.strip() for cell in next(csv.reader([line], delimiter=delimiter))])
        for number, line in lines
    ]
    width = len(parsed[0][1])
    for number, cells in parsed[1:]:
        if len(cells) != width:
            raise DataFileFault(
                f"{width} cells in every row, as in the headers, but line {number} of {file} has {len(cells)}"
            )
    return parsed[0], parsed[1:]


def _split(header: str) -> tuple[str, str]:
    name, bracket, unit = header.partition("[")
    return name.strip().replace(" ", "_"), unit.rstrip().removesuffix("]").strip() if bracket else ""


def _number(file: str, line: int, name: str, cells: list[str], index: int) -> float:
    text = cells[index].replace("\u2212", "-")
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise DataFileFault(
            f'a finite number, with a decimal point, in every cell, but line {line} of {file} has {name} "{text}"'
        )
    return value


def _listed(names: Mapping[str, str]) -> str:
    return ", ".join(f'"{name} [unit]"' for name in names)
