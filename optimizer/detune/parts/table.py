"""Turn the cells of a sheet into columns of SI numbers, words and flags, and say what is wrong in them."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from decimal import Decimal

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.ground.units import KINDS, UnitError, parse, parse_column
from detune.parts.columns import NUMBERED, Column
from detune.parts.headers import Source
from detune.parts.sheet import Sheet

_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_PER_CENT = re.compile(rf"{_NUMBER.pattern}\s*%")
_PLAIN = re.compile(r"[0-9eE+.\n-]*")
_COMMA = re.compile(r"[+-]?[0-9][0-9,.]*")
_YES_NO = {"yes": True, "y": True, "true": True, "no": False, "n": False, "false": False}


def rows_of(mask: NDArray[np.bool_]) -> list[int]:
    """Return the numbers of the rows, from 0, where a mask (n,) is true."""
    return [int(row) for row in np.flatnonzero(mask)]


class Table:
    """The rows of one sheet, by column; n rows. Filled when made, then only read.

    lines: line of each row. faults: what is wrong with single cells. A number that is a fault is nan after
    that, so that no rule complains of it a second time.
    """

    def __init__(self, sheet: Sheet, columns: Sequence[Column], sources: Mapping[str, Source]) -> None:
        self.file = sheet.file
        self.header_line = sheet.header_line
        self._sheet = sheet
        self.lines = sheet.lines
        self.line_word = "row" if sheet.name or sheet.header_line is None else "line"
        self.faults: list[Fault] = []
        self._columns = {column.name: column for column in columns}
        self._sources = sources
        self._cells: dict[str, Sequence[str]] = {}
        self._given: dict[str, NDArray[np.bool_]] = {}
        self._numbers: dict[str, NDArray[np.float64]] = {}
        self._refused: dict[str, set[int]] = {}
        for column in columns:
            self._fill(column, sheet)

    def __len__(self) -> int:
        return len(self.lines)

    def column(self, name: str) -> Column:
        """Return the column of that name. Raises KeyError for any other."""
        return self._columns[name]

    def has(self, name: str) -> bool:
        """Say whether the column is stated at all, in the sheet or as a constant."""
        return name in self._sources

    def given(self, name: str) -> NDArray[np.bool_]:
        """Return which rows fill the column, even with something that cannot be read. Shape (n,)."""
        return self._given[name]

    def numbers(self, name: str) -> NDArray[np.float64]:
        """Return the SI numbers of a column, nan where empty or unreadable. Shape (n,)."""
        return self._numbers[name]

    def texts(self, name: str) -> Sequence[str]:
        """Return the cells of a column as text, n of them."""
        return self._cells[name]

    def flags(self, name: str) -> NDArray[np.bool_]:
        """Return a yes-no column, False where empty or unreadable. Shape (n,)."""
        words = [_YES_NO.get(cell.casefold(), False) for cell in self._cells[name]]
        return np.array(words, dtype=np.bool_)

    def numbered(self, name: str) -> dict[int, str]:
        """Return the columns that a numbered column such as "cost_<n>" stands for, by n rising."""
        stem = name.removesuffix(NUMBERED)
        ends = [column.removeprefix(stem) for column in self._columns if column.startswith(stem)]
        return {number: f"{stem}{number}" for number in sorted(int(end) for end in ends if end.isdigit())}

    def where(self, name: str) -> str:
        """Return where the header stands: as the sheet writes it, or ours when it has no such column."""
        source = self._sources.get(name)
        if source is not None and source.index is None:
            return source.where
        return self._sheet.header(self._columns[name].header if source is None else source.where)

    def header_fault(self, name: str, expected: str) -> Fault:
        """A fault of a whole column, at the header row."""
        return Fault(self.file, self.header_line, self.where(name), "", expected)

    def fault(self, row: int, name: str, expected: str, nearest: str | None = None) -> Fault:
        """A fault of one cell, showing what stands in it."""
        found = self._cells[name][row]
        source = self._sources.get(name)
        index = None if source is None else source.index
        where = self.where(name) if index is None else self._sheet.cell(row, index)
        return Fault(self.file, self.lines[row], where, found, expected, nearest)

    def stated_in_sheet(self, name: str) -> bool:
        """Say whether the sheet has the column, and not the study as one constant for the whole list."""
        source = self._sources.get(name)
        return source is not None and source.index is not None

    def _fill(self, column: Column, sheet: Sheet) -> None:
        name, count = column.name, len(sheet.lines)
        source = self._sources.get(name)
        if source is None:
            self._cells[name] = ("",) * count
        elif source.index is None:
            self._cells[name] = (source.constant or "",) * count
        else:
            self._cells[name] = sheet.columns[source.index]
        cells = self._cells[name]
        self._given[name] = np.fromiter(map(bool, cells), dtype=np.bool_, count=count)
        if source is not None and source.index is None:
            self._check_constant(column, source)
        elif source is not None:
            self._check_missing(column)
            self._check_words(column)
            self._check_refused(column, source)
        if column.numeric:
            self._numbers[name] = self._converted(column, source, cells)
            if source is not None and source.index is not None:
                self._check_limits(column)

    def _converted(self, column: Column, source: Source | None, cells: Sequence[str]) -> NDArray[np.float64]:
        if source is None:
            return np.full(len(cells), math.nan)
        if source.index is None:
            return np.full(len(cells), _constant_value(column, source.constant or ""))
        values = np.array(self._floats(column, source, cells), dtype=np.float64)
        if source.broken:
            return np.full(len(cells), math.nan)
        if source.scale == 1.0 and source.offset == 0.0:
            return values
        with np.errstate(over="ignore"):
            values = values * source.scale + source.offset
        self._refuse(column, np.isinf(values), values, "a number that is not so large")
        return values

    def _floats(self, column: Column, source: Source, cells: Sequence[str]) -> list[float]:
        if not self._refused[column.name] and _PLAIN.fullmatch("\n".join(cells)):
            try:
                values = [float(cell or "nan") for cell in cells]
            except ValueError:
                pass
            else:
                if math.inf not in values and -math.inf not in values:
                    return values
        return [self._float(column, source, row, cell) for row, cell in enumerate(cells)]

    def _float(self, column: Column, source: Source, row: int, cell: str) -> float:
        cell = cell.replace("\u2212", "-")
        if not cell or row in self._refused[column.name]:
            return math.nan
        per_cent = column.kind == "ratio" and _PER_CENT.fullmatch(cell)
        if per_cent and math.isfinite(float(cell[:-1])):
            # Decimal, because 7 % shall be the same number as 0.07.
            fraction = float(Decimal(cell[:-1].rstrip()).scaleb(-2))
            return (fraction - source.offset) / source.scale
        if _NUMBER.fullmatch(cell) and math.isfinite(float(cell)):
            return float(cell)
        self.faults.append(self.fault(row, column.name, _number_wanted(column, source.unit, cell)))
        return math.nan

    def _check_constant(self, column: Column, source: Source) -> None:
        text, expected, nearest = source.constant or "", "", None
        if column.kind == "yes-no":
            expected = "" if text.casefold() in _YES_NO else "yes or no"
        elif not column.numeric or not text:
            expected = "" if text else "a value for the whole list"
        else:
            try:
                value = np.array([parse(text, column.kind)])
                if column.limits.outside(value)[0]:
                    expected = _limits_wanted(column)
                elif column.kind == "count" and value[0] % 1:
                    expected = "a whole number"
            except UnitError as error:
                expected, nearest = error.expected, error.nearest
        if expected:
            self.faults.append(Fault(self.file, self.header_line, source.where, text, expected, nearest))

    def _check_missing(self, column: Column) -> None:
        if column.required:
            for row in rows_of(~self._given[column.name]):
                expected = f"a value in every row: {column.meaning}"
                self.faults.append(self.fault(row, column.name, expected))

    def _check_refused(self, column: Column, source: Source) -> None:
        self._refused[column.name] = set()
        for (row, index), why in sorted(self._sheet.refused.items()):
            if index == source.index:
                self._refused[column.name].add(row)
                self.faults.append(self.fault(row, column.name, why))

    def _check_words(self, column: Column) -> None:
        cells = self._cells[column.name]
        if column.kind == "yes-no":
            wrong = [row for row, cell in enumerate(cells) if cell and cell.casefold() not in _YES_NO]
            self.faults.extend(self.fault(row, column.name, "yes or no") for row in wrong)
        elif column.kind == "text":
            wrong = [row for row, cell in enumerate(cells) if not cell.isprintable()]
            self.faults.extend(self.fault(row, column.name, "text on one line") for row in wrong)

    def _check_limits(self, column: Column) -> None:
        values = self._numbers[column.name]
        self._refuse(column, column.limits.outside(values), values, _limits_wanted(column))
        if column.kind == "count":
            self._refuse(column, values % 1 > 0, values, "a whole number")

    def _refuse(
        self, column: Column, wrong: NDArray[np.bool_], values: NDArray[np.float64], expected: str
    ) -> None:
        for row in rows_of(wrong):
            self.faults.append(self.fault(row, column.name, expected))
        values[wrong] = math.nan


def _constant_value(column: Column, text: str) -> float:
    try:
        value = parse(text, column.kind)
    except UnitError:
        return math.nan
    return math.nan if column.limits.outside(np.array([value]))[0] else value


def _limits_wanted(column: Column) -> str:
    return f"a {KINDS[column.kind].meaning} {column.limits.words(column.kind)}"


def _number_wanted(column: Column, unit: str, cell: str) -> str:
    meaning = KINDS[column.kind].meaning
    wanted = f"a {meaning} as a number in {unit}" if unit else f"a {meaning} as a number"
    if "," in cell and _COMMA.fullmatch(cell):
        if re.fullmatch(r"[+-]?[0-9]{1,3}(,[0-9]{3})+(\.[0-9]*)?", cell):
            whole = cell.replace(",", "")
            return f'{wanted}; a comma can be read in two ways, write "{whole}" or a decimal point'
        return f'{wanted}; a decimal comma is not read, write "{cell.replace(",", ".")}"'
    number = _NUMBER.match(cell)
    if number and _is_unit(cell[number.end() :], column.kind):
        return f"{wanted}; the unit stands in the header, not in the cell"
    if column.required:
        return wanted
    return f"{wanted}, or an empty cell where there is none"


def _is_unit(text: str, kind: str) -> bool:
    try:
        parse_column(text, kind)
    except UnitError:
        return False
    return True
