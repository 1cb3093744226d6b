"""Read a parts list from a Parquet file into cells. The library for it is an extra of this package."""

from __future__ import annotations

import datetime
from collections.abc import Callable
from decimal import Decimal
from importlib import import_module
from pathlib import Path
from typing import Any

from detune.ground.errors import BriefError, Fault
from detune.parts.sheet import Sheet, content_of

_DATES = (datetime.date, datetime.time, datetime.timedelta)


def read_parquet(path: str | Path) -> Sheet:
    """Read a Parquet file; its column names are the headers and its rows count from 1.

    Raises BriefError when the file cannot be read, has no rows, or the extra "parquet" is not installed. A
    null is an empty cell; nan is not. Dates, lists and other things that are no text, number or yes-no are
    refused where a column of ours reads them.
    """
    file = str(path)
    content_of(Path(path), file)
    read_table, error_type = _library(file)
    try:
        table = read_table(path)
    except (error_type, OSError) as error:
        reason = str(error).partition("\n")[0]
        expected = f"a Parquet file; this file cannot be read as one ({reason})"
        raise BriefError([Fault(file, None, "file", "", expected)]) from None
    if not table.num_rows:
        raise BriefError([Fault(file, None, "file", "", "a row for each part; there is none")])
    refused: dict[tuple[int, int], str] = {}
    columns = []
    for at, column in enumerate(table.columns):
        texts = []
        for row, value in enumerate(column.to_pylist()):
            text, why = _cell(value)
            texts.append(text)
            if why:
                refused[row, at] = why
        columns.append(tuple(texts))
    headers = tuple(name.strip() for name in table.column_names)
    lines = tuple(range(1, table.num_rows + 1))
    return Sheet(file, headers, None, lines, tuple(columns), (), refused=refused)


def _library(file: str) -> tuple[Callable[[str | Path], Any], type[Exception]]:
    """Return what reads a file, and the error it raises for one that it cannot read."""
    try:
        error_type: type[Exception] = import_module("pyarrow").ArrowException
        return import_module("pyarrow.parquet").read_table, error_type
    except ImportError:
        expected = "a list in CSV or XLSX, or the extra that reads Parquet: pip install 'detune[parquet]'"
    raise BriefError([Fault(file, None, "file", "", expected)])


def _cell(value: Any) -> tuple[str, str]:
    if value is None:
        return "", ""
    if isinstance(value, bool):
        return ("yes" if value else "no"), ""
    if isinstance(value, float):
        return (str(int(value)) if value.is_integer() and abs(value) < 2.0**53 else repr(value)), ""
    if isinstance(value, str | int | Decimal):
        return str(value).strip(), ""
    what = "a date or a time" if isinstance(value, _DATES) else "something that is no text and no number"
    return str(value), f"the column holds {what}: write it as text or as a number"
