"""Read a parts list from a sheet of an XLSX workbook into cells, each with its address.

A workbook hides what a text file shows: a formula error and a formula never calculated look like an empty
cell to the library that reads the values, a per cent is stored as a fraction, and a part number may have
become a date. `workbook_marks` finds the first three; cells of this kind are refused where a column of ours
reads them.
"""

from __future__ import annotations

import datetime
from collections.abc import Iterable
from decimal import Decimal
from pathlib import Path
from typing import TYPE_CHECKING, TypeAlias

from detune.ground.errors import BriefError, Fault, nearest_name
from detune.parts.sheet import Sheet, address, content_of, quoted_sheet
from detune.parts.workbook_marks import Marks, read_marks

if TYPE_CHECKING:
    from python_calamine import CalamineSheet, CalamineWorkbook

Value: TypeAlias = (
    int | float | str | bool | datetime.time | datetime.date | datetime.datetime | datetime.timedelta
)
Place: TypeAlias = tuple[int, int]
"""Row and column of a cell in its sheet, both from 0."""

_EXACT_INTEGER = 2.0**53


def read_workbook(path: str | Path, sheet: str | None = None) -> Sheet:
    """Read one sheet of an XLSX workbook; sheet: its name, None for the first that is not hidden.

    The first row with any text is the header row; rows without any text are skipped. Raises BriefError when
    the file is no workbook, has no such sheet, or the sheet has no row below its header. Merged cells, and
    cells outside the headers, stand in `faults`.
    """
    from python_calamine import CalamineError, CalamineWorkbook

    file = str(path)
    content = content_of(Path(path), file)
    try:
        book = CalamineWorkbook.from_path(str(path))
        chosen = book.get_sheet_by_name(_sheet_name(book, sheet, file))
        marks = read_marks(content, chosen.name)
        grid = _padded(list(chosen.to_python(skip_empty_area=False)), marks)
    except (CalamineError, OSError, ValueError) as error:
        reason = str(error).strip() or type(error).__name__
        expected = f"an XLSX workbook without a password; this file cannot be read as one ({reason})"
        raise BriefError([Fault(file, None, "file", "", expected)]) from None
    return _sheet(file, chosen, grid, marks)


def _sheet_name(book: CalamineWorkbook, wanted: str | None, file: str) -> str:
    from python_calamine import SheetTypeEnum, SheetVisibleEnum

    pages = [meta for meta in book.sheets_metadata if meta.typ == SheetTypeEnum.WorkSheet]
    names = [meta.name for meta in pages]
    if wanted is None:
        shown = [meta.name for meta in pages if meta.visible == SheetVisibleEnum.Visible]
        if shown:
            return shown[0]
        raise BriefError([Fault(file, None, "sheet", "", "a sheet of cells that is not hidden")])
    if wanted in names:
        return wanted
    expected = f"the name of a sheet of this workbook: {', '.join(names)}"
    raise BriefError([Fault(file, None, "sheet", wanted, expected, nearest_name(wanted, names))])


def _padded(grid: list[list[Value]], marks: Marks) -> list[list[Value]]:
    """Add empty cells so that the grid is a rectangle and holds every cell of the marks."""
    places = (*marks.errors, *marks.uncalculated)
    height = max([len(grid), *(row + 1 for row, _ in places)])
    width = max([0, *(len(row) for row in grid), *(column + 1 for _, column in places)])
    rows = [*grid, *([] for _ in range(height - len(grid)))]
    return [[*row, *[""] * (width - len(row))] for row in rows]


def _sheet(file: str, page: CalamineSheet, grid: list[list[Value]], marks: Marks) -> Sheet:
    """Put a grid that begins at A1 into rows below one header row."""
    filled = [row for row in range(len(grid)) if _is_filled(row, grid[row], marks)]
    if not filled:
        expected = "a header row and a row for each part; the sheet is empty"
        raise BriefError([Fault(file, 1, f"{quoted_sheet(page.name)}!A1", "", expected)])
    header_row, *rows = filled
    width = len(grid[0])
    header_cells = [_text(grid[header_row][column], False) for column in range(width)]
    columns = [column for column in range(width) if header_cells[column]]
    faults = [*_merged(file, page, header_row), *_strays(file, page.name, grid, rows, columns)]
    if not rows:
        expected = "a row for each part below the header; there is none"
        faults.append(Fault(file, header_row + 1, quoted_sheet(page.name), "", expected))
    refused: dict[Place, str] = {}
    cells: list[tuple[str, ...]] = []
    for at, column in enumerate(columns):
        texts = []
        for index, row in enumerate(rows):
            text, why = _cell(grid[row][column], (row, column), marks)
            texts.append(text)
            if why:
                refused[index, at] = why
        cells.append(tuple(texts))
    return Sheet(
        file,
        tuple(header_cells[column] for column in columns),
        header_row + 1,
        tuple(row + 1 for row in rows),
        tuple(cells),
        tuple(faults),
        page.name,
        tuple(letters(column) for column in columns),
        refused,
    )


def _is_filled(row: int, cells: Iterable[Value], marks: Marks) -> bool:
    if any(_text(value, False) for value in cells):
        return True
    return row in marks.rows


def _cell(value: Value, place: Place, marks: Marks) -> tuple[str, str]:
    """Return a cell as text, and why no column may read it; the reason is empty for a sound cell."""
    if place in marks.errors:
        return marks.errors[
            place
        ], "the cell holds the error of a formula: mend the formula or empty the cell"
    if place in marks.uncalculated:
        why = "the cell holds a formula that was never calculated: open the workbook, calculate and save it"
        return marks.uncalculated[place], why
    if isinstance(value, datetime.time | datetime.date | datetime.timedelta):
        why = "the cell holds a date or a time, perhaps made of a number or a name by the spreadsheet"
        return str(value), f"{why}: format the cell as text and write it again"
    return _text(value, place in marks.per_cent), ""


def _text(value: Value, per_cent: bool) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        if per_cent:
            return f"{Decimal(repr(value)).scaleb(2):f}%"
        if float(value).is_integer() and abs(value) < _EXACT_INTEGER:
            return str(int(value))
        return repr(value)
    return str(value).strip()


def _merged(file: str, page: CalamineSheet, header_row: int) -> list[Fault]:
    expected = "single cells: merged cells hold one value in their first cell and none in the others"
    return [
        Fault(file, top + 1, f"{address(page.name, letters(left), top + 1)}:{letters(right)}{bottom + 1}",
              "merged cells", expected)
        for (top, left), (bottom, right) in page.merged_cell_ranges or []
        if bottom >= header_row
    ]  # fmt: skip


def _strays(
    file: str, name: str, grid: list[list[Value]], rows: list[int], columns: list[int]
) -> list[Fault]:
    """Return a fault for the first cell of every column that has cells but no header."""
    faults = []
    for column in sorted({*range(len(grid[0]))} - {*columns}):
        for row in rows:
            text = _text(grid[row][column], False)
            if text:
                expected = "an empty cell, or a header above it"
                faults.append(Fault(file, row + 1, address(name, letters(column), row + 1), text, expected))
                break
    return faults


def letters(column: int) -> str:
    """Return the letters of a column counted from 0: A, B, ... Z, AA."""
    text = ""
    column += 1
    while column:
        column, place = divmod(column - 1, 26)
        text = chr(ord("A") + place) + text
    return text
