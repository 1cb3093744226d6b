"""Read a parts list from whichever kind of file it is, told by the ending of its name."""

from __future__ import annotations

from pathlib import Path

from detune.ground.errors import BriefError, Fault
from detune.parts.sheet import Sheet, read_sheet

_WORKBOOKS = (".xlsx", ".xlsm")
_PARQUET = (".parquet", ".pq")
_NOT_READ = (".xls", ".xlsb", ".ods")


def read_rows(path: str | Path, sheet: str | None = None) -> Sheet:
    """Read an XLSX workbook (.xlsx, .xlsm), a Parquet file (.parquet, .pq) or, under any other name, a CSV.

    sheet: name of the sheet of a workbook, None for the first. Raises BriefError when the file cannot be read
    at all, or a sheet is asked for in a file that has none.
    """
    ending = Path(path).suffix.lower()
    if ending in _WORKBOOKS:
        from detune.parts.workbook import read_workbook

        return read_workbook(path, sheet)
    if ending in _NOT_READ:
        expected = "a list in CSV, XLSX or Parquet; save this workbook as XLSX"
        raise BriefError([Fault(str(path), None, "file", ending, expected)])
    if sheet is not None:
        expected = "no sheet, for only a workbook (.xlsx) has sheets"
        raise BriefError([Fault(str(path), None, "sheet", sheet, expected)])
    if ending in _PARQUET:
        from detune.parts.parquet_file import read_parquet

        return read_parquet(path)
    return read_sheet(path)
