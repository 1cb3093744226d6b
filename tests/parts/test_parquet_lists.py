"""Lists in Parquet: the same mounts as from CSV; the library for it is an extra and may be absent."""

from __future__ import annotations

import csv
import datetime
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from detune.ground.errors import BriefError, Fault
from detune.parts.catalog import read_catalog

pyarrow = pytest.importorskip("pyarrow")
from pyarrow import parquet  # noqa: E402

CATALOGS = Path(__file__).parents[2] / "catalogs"


@pytest.fixture
def make_file(tmp_path: Path, make_list: Callable[..., str]) -> Callable[..., Path]:
    """Write the good list with its numbers as numbers, some columns replaced."""

    def _make(rows: int = 3, **columns: list[Any]) -> Path:
        header, *lines = csv.reader(make_list(rows).splitlines())
        table: dict[str, list[Any]] = {}
        for name, cells in zip(header, zip(*lines, strict=True), strict=True):
            table[name] = [_typed(text) for text in cells]
        for name, cells in columns.items():
            table[next(header for header in table if header.split(" ")[0] == name)] = cells
        path = tmp_path / "parts.parquet"
        parquet.write_table(pyarrow.table(table), path)
        return path

    return _make


def _typed(text: str) -> float | str | None:
    try:
        return float(text)
    except ValueError:
        return text or None


def faults_of(path: Path, **study: Any) -> tuple[Fault, ...]:
    with pytest.raises(BriefError) as caught:
        read_catalog(path, "trees", **study)
    return caught.value.faults


def test_parquet_and_csv_give_the_same_mounts(tmp_path: Path) -> None:
    header, *lines = csv.reader((CATALOGS / "rubber.csv").read_text().splitlines())
    columns = {
        name: [_typed(text) for text in cells]
        for name, cells in zip(header, zip(*lines, strict=True), strict=True)
    }
    parquet.write_table(pyarrow.table(columns), tmp_path / "rubber.parquet")
    plain = read_catalog(CATALOGS / "rubber.csv", "rubber").parts
    found = read_catalog(tmp_path / "rubber.parquet", "rubber").parts
    assert [replace(p, file="", line=0) for p in found] == [replace(p, file="", line=0) for p in plain]
    assert [part.line for part in found[:3]] == [1, 2, 3]


@pytest.mark.parametrize(
    ("column", "cells", "row", "expected"),
    [
        ("cost", [1.0, None, 2.0], 2, "a value in every row: price"),
        ("cost", [1.0, 2.0, float("nan")], 3, "a cost as a number"),
        ("mass", [1.0, float("nan"), 2.0], 2, "or an empty cell where there is none"),
        ("load_min", [1.0, 2.0, float("inf")], 3, "a force as a number in N"),
        ("part", [datetime.date(2024, 3, 1)] * 1 + [None] * 2, 1, "a date or a time"),
        ("part", ["elm-a", "elm-b", "elm-a"], 3, "it stands already in row 1"),
        ("family", ["rubber", "rubber", "ruber"], None, ""),
        ("stock", [[1], [2], [3]], 1, "no text and no number"),
    ],
)
def test_cells_that_are_refused(
    column: str, cells: list[Any], row: int | None, expected: str, make_file: Callable[..., Path]
) -> None:
    path = make_file(**{column: cells})
    if row is None:
        assert read_catalog(path, "trees").parts[2].family == "ruber"
        return
    fault = next(fault for fault in faults_of(path) if fault.line == row)
    assert expected in fault.expected
    assert fault.where.startswith(column)


def test_types_of_columns(make_file: Callable[..., Path]) -> None:
    path = make_file(pulls=[True, False, None], stock=[1, 2, None], part=[1, 2, 3])
    parts = read_catalog(path, "trees").parts
    assert [part.pulls for part in parts] == [True, False, False]
    assert [part.stock for part in parts] == [1, 2, None]
    assert [part.part for part in parts] == ["1", "2", "3"]


def test_missing_column_and_no_rows_and_no_file(make_file: Callable[..., Path], tmp_path: Path) -> None:
    path = make_file()
    table = parquet.read_table(path)
    parquet.write_table(table.drop_columns(["cost"]), path)
    (fault,) = faults_of(path)
    assert (fault.line, fault.where) == (None, "cost")
    parquet.write_table(table.slice(0, 0), path)
    (fault,) = faults_of(path)
    assert "a row for each part" in fault.expected
    path.write_bytes(b"PAR1 and no more")
    (fault,) = faults_of(path)
    assert "cannot be read as one" in fault.expected
    (fault,) = faults_of(tmp_path / "part.parquet")
    assert fault.nearest == "parts.parquet"


def test_absent_library_is_named_as_an_extra(
    make_file: Callable[..., Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    path = make_file()
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    (fault,) = faults_of(path)
    assert "the extra that reads Parquet" in fault.expected
    assert "detune[parquet]" in fault.expected
