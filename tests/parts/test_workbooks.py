"""Lists in XLSX: the same mounts as from CSV, and every fault by sheet and cell. Workbooks are made by openpyxl."""

from __future__ import annotations

import csv
import datetime
import zipfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from openpyxl import Workbook
from openpyxl.cell import Cell
from openpyxl.worksheet.worksheet import Worksheet

from detune.ground.errors import BriefError, Fault
from detune.parts.catalog import read_catalog

CATALOGS = Path(__file__).parents[2] / "catalogs"
Spoil = Callable[[Worksheet], None]


@pytest.fixture
def make_book(tmp_path: Path, make_list: Callable[..., str]) -> Callable[..., Path]:
    """Write a workbook: a cover sheet if wanted, then the good list on Sheet1, spoilt cell by cell.

    Columns: A part, B family, C and D axial stiffness, G loss_factor, H load_min, P tolerance, S stock.
    """

    def _make(spoil: Spoil | None = None, rows: int = 3, title: str = "Sheet1", **how: Any) -> Path:
        book = Workbook()
        sheet = book.active
        sheet.title = title
        for line in csv.reader(make_list(rows, **how).splitlines()):
            sheet.append([_typed(text) for text in line])
        if spoil is not None:
            spoil(sheet)
        path = tmp_path / "parts.xlsx"
        book.save(path)
        return path

    return _make


def _typed(text: str) -> float | str | None:
    try:
        return float(text)
    except ValueError:
        return text or None


def put(address: str, content: Any, number_format: str | None = None) -> Spoil:
    def _put(sheet: Worksheet) -> None:
        cell: Cell = sheet[address]
        cell.value = content
        if number_format is not None:
            cell.number_format = number_format

    return _put


def error_of(address: str, error: str) -> Spoil:
    def _put(sheet: Worksheet) -> None:
        sheet[address].value = error
        sheet[address].data_type = "e"

    return _put


def faults_of(path: Path, **study: Any) -> tuple[Fault, ...]:
    with pytest.raises(BriefError) as caught:
        read_catalog(path, "trees", **study)
    return caught.value.faults


def test_workbook_and_csv_give_the_same_mounts(
    make_book: Callable[..., Path], make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    from dataclasses import replace

    text, book = write(make_list()), make_book()
    plain = read_catalog(text, "trees")
    found = read_catalog(book, "trees")
    assert [replace(part, file="") for part in found.parts] == [replace(p, file="") for p in plain.parts]
    assert [part.line for part in found.parts] == [2, 3, 4]


def test_demo_list_through_a_workbook(tmp_path: Path) -> None:
    from dataclasses import replace

    book = Workbook()
    for row in csv.reader((CATALOGS / "springs.csv").read_text().splitlines()):
        book.active.append([_typed(text) for text in row])
    book.save(tmp_path / "springs.xlsx")
    plain = read_catalog(CATALOGS / "springs.csv", "springs").parts
    found = read_catalog(tmp_path / "springs.xlsx", "springs").parts
    assert [replace(part, file="") for part in found] == [replace(part, file="") for part in plain]


@pytest.mark.parametrize("error", ["#DIV/0!", "#N/A", "#REF!", "#VALUE!", "#NAME?", "#NUM!"])
def test_formula_error_names_sheet_and_cell(error: str, make_book: Callable[..., Path]) -> None:
    path = make_book(error_of("D3", error))
    (fault,) = faults_of(path)
    assert (fault.file, fault.where, fault.line, fault.found) == (str(path), "Sheet1!D3", 3, error)
    assert "the error of a formula" in fault.expected
    assert str(fault).startswith(f'{path}:3: Sheet1!D3: found "{error}", expected')


@pytest.mark.parametrize("address", ["K4", "S4"])
def test_error_in_an_optional_cell_is_no_empty_cell(address: str, make_book: Callable[..., Path]) -> None:
    """K is deflection_max: read as empty it would be a mount without a limit."""
    (fault,) = faults_of(make_book(error_of(address, "#N/A")))
    assert fault.where == f"Sheet1!{address}"


def test_formula_never_calculated(make_book: Callable[..., Path]) -> None:
    (fault,) = faults_of(make_book(put("C3", "=80*2")))
    assert (fault.where, fault.found) == ("Sheet1!C3", "=80*2")
    assert "never calculated" in fault.expected


def test_last_row_of_errors_alone_is_still_a_row(make_book: Callable[..., Path]) -> None:
    faults = faults_of(make_book(error_of("A5", "#REF!")))
    assert ("Sheet1!A5", "#REF!") in {(fault.where, fault.found) for fault in faults}
    assert "Sheet1!C5" in {fault.where for fault in faults}


@pytest.mark.parametrize(
    ("address", "expected"),
    [
        ("A3", "a value in every row: part number"),
        ("C3", "a value in every row: axial stiffness under a steady load"),
        ("H4", "a value in every row: least static axial load"),
        ("O2", "a value in every row: price of one"),
    ],
)
def test_empty_required_cell(address: str, expected: str, make_book: Callable[..., Path]) -> None:
    (fault,) = faults_of(make_book(put(address, None)))
    assert (fault.where, fault.found) == (f"Sheet1!{address}", "")
    assert expected in fault.expected


@pytest.mark.parametrize(
    ("address", "content"),
    [
        ("C3", datetime.date(2024, 5, 1)),
        ("A3", datetime.date(2024, 3, 1)),
        ("H3", datetime.time(12, 30)),
        ("K3", datetime.datetime(2024, 5, 1, 6, 0)),
    ],
)
def test_date_in_place_of_a_figure_or_a_name(
    address: str, content: Any, make_book: Callable[..., Path]
) -> None:
    (fault,) = faults_of(make_book(put(address, content)))
    assert fault.where == f"Sheet1!{address}"
    assert str(content.year) in fault.found if hasattr(content, "year") else fault.found == "12:30:00"
    assert "a date or a time" in fault.expected


def test_date_in_a_column_nobody_reads(make_book: Callable[..., Path]) -> None:
    path = make_book(put("T2", datetime.date(2024, 5, 1)), add={"Revised": "x"})
    catalog = read_catalog(path, "trees", header_map={"mass": "mass [kg]"})
    assert (len(catalog.parts), catalog.unread) == (3, ("Revised",))


def test_numbers_stored_as_text_are_read_or_refused_like_text(make_book: Callable[..., Path]) -> None:
    path = make_book(put("C3", " 161.5\u00a0"))
    assert read_catalog(path, "trees").parts[1].stiffness_static[2] == 161.5e3
    (fault,) = faults_of(make_book(put("C3", "161,5")))
    assert (fault.where, fault.found) == ("Sheet1!C3", "161,5")
    assert 'write "161.5"' in fault.expected


def test_part_numbers_and_flags_as_numbers_and_logical_values(make_book: Callable[..., Path]) -> None:
    def spoil(sheet: Worksheet) -> None:
        sheet["A2"].value = 1001
        sheet["L2"].value = True
        sheet["L3"].value = False

    parts = read_catalog(make_book(spoil), "trees").parts
    assert [part.part for part in parts] == ["1001", "rowan-b", "rowan-c"]
    assert [part.pulls for part in parts[:2]] == [True, False]


@pytest.mark.parametrize("number_format", ["0%", "0.00%", "0.0 %"])
def test_per_cent_is_what_the_reader_sees(number_format: str, make_book: Callable[..., Path]) -> None:
    """A cell that shows 7 % holds 0.07; read below the header "tolerance [%]" it would be 0.07 %."""
    parts = read_catalog(make_book(put("P2", 0.07, number_format)), "trees").parts
    assert [part.tolerance for part in parts] == pytest.approx([0.07, 0.15, 0.15], rel=1e-12)
    shown = read_catalog(make_book(put("G2", 0.12, number_format)), "trees").parts[0]
    assert shown.loss_factor[2] == pytest.approx(0.12, rel=1e-12)


def test_per_cent_where_no_ratio_belongs(make_book: Callable[..., Path]) -> None:
    (fault,) = faults_of(make_book(put("H2", 2.0, "0%")))
    assert (fault.where, fault.found) == ("Sheet1!H2", "200%")


def test_percent_sign_in_quotation_marks_is_no_per_cent(make_book: Callable[..., Path]) -> None:
    part = read_catalog(make_book(put("P2", 12, '0" %"')), "trees").parts[0]
    assert part.tolerance == pytest.approx(0.12, rel=1e-12)


def test_blank_rows_and_columns_are_passed_over(make_book: Callable[..., Path]) -> None:
    def spoil(sheet: Worksheet) -> None:
        sheet.insert_rows(3)
        sheet.insert_rows(1, 2)
        sheet.insert_cols(4)

    parts = read_catalog(make_book(spoil), "trees").parts
    assert [part.line for part in parts] == [4, 6, 7]
    (fault,) = faults_of(make_book(lambda sheet: (spoil(sheet), put("E6", 1.0)(sheet))[0]))
    assert fault.where == "Sheet1!E6"


def test_merged_cells_are_refused(make_book: Callable[..., Path]) -> None:
    faults = faults_of(make_book(lambda sheet: sheet.merge_cells("B2:B4")))
    assert (faults[0].where, faults[0].found) == ("Sheet1!B2:B4", "merged cells")
    assert {fault.where for fault in faults} == {"Sheet1!B2:B4", "Sheet1!B3", "Sheet1!B4"}


def test_cell_without_a_header(make_book: Callable[..., Path]) -> None:
    (fault,) = faults_of(make_book(put("U3", "ask first")))
    assert (fault.where, fault.found) == ("Sheet1!U3", "ask first")


def test_rules_between_cells_name_the_cell(make_book: Callable[..., Path]) -> None:
    faults = faults_of(make_book(lambda sheet: (put("D3", 16.0)(sheet), put("H4", 1300.0)(sheet))[0]))
    assert [fault.where for fault in faults] == ["Sheet1!D3", "Sheet1!H4"]


def test_faults_of_headers_name_the_sheet(make_book: Callable[..., Path]) -> None:
    faults = faults_of(make_book(put("O1", "prize"), title="Price list"))
    assert [fault.where for fault in faults] == ["'Price list'!prize", "'Price list'!cost"]
    (fault,) = faults_of(make_book(put("O2", "dear"), title="Price list"))
    assert fault.where == "'Price list'!O2"


def test_sheet_is_chosen_by_name(make_book: Callable[..., Path]) -> None:
    def cover(sheet: Worksheet) -> None:
        first = sheet.parent.create_sheet("Cover", 0)
        first["A1"] = "Mounts, spring"
        hidden = sheet.parent.create_sheet("Draft", 0)
        hidden.sheet_state = "hidden"

    path = make_book(cover)
    assert len(read_catalog(path, "trees", sheet="Sheet1").parts) == 3
    faults = faults_of(path)
    assert faults[0].where.startswith("Cover!")
    (fault,) = faults_of(path, sheet="Shet1")
    assert (fault.where, fault.found, fault.nearest) == ("sheet", "Shet1", "Sheet1")
    (fault,) = faults_of(path, sheet="Draft")
    assert "the sheet is empty" in fault.expected


def test_supplier_headers_and_constants(make_book: Callable[..., Path]) -> None:
    path = make_book(put("N1", "Weight"), drop=["stock"])
    catalog = read_catalog(path, "trees", "mount", {"mass": "Weight"}, {"mass": "kg"}, {"stock": "4"})
    assert [(part.mass, part.stock) for part in catalog.parts] == [(0.35, 4)] * 3


def test_list_without_rows(make_book: Callable[..., Path]) -> None:
    (fault,) = faults_of(make_book(rows=0))
    assert (fault.where, fault.line) == ("Sheet1", 1)
    assert "a row for each part below the header" in fault.expected


@pytest.mark.parametrize(
    "content", [b"", b"part,cost\n", b"PK\x03\x04 no more", b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" * 80]
)
def test_file_that_is_no_workbook(content: bytes, tmp_path: Path) -> None:
    path = tmp_path / "parts.xlsx"
    path.write_bytes(content)
    (fault,) = faults_of(path)
    assert (fault.where, fault.line) == ("file", None)
    assert "an XLSX workbook" in fault.expected


def test_workbook_without_its_parts(tmp_path: Path) -> None:
    path = tmp_path / "parts.xlsx"
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("readme.txt", "nothing")
    (fault,) = faults_of(path)
    assert "cannot be read as one" in fault.expected


def test_missing_workbook_and_other_endings(tmp_path: Path, write: Callable[..., Path]) -> None:
    (tmp_path / "parts.xlsx").write_bytes(b"")
    (fault,) = faults_of(tmp_path / "part.xlsx")
    assert (fault.nearest, fault.where) == ("parts.xlsx", "file")
    (fault,) = faults_of(tmp_path / "parts.ods")
    assert "save this workbook as XLSX" in fault.expected
    (fault,) = faults_of(write("part\n"), sheet="Sheet1")
    assert (fault.where, fault.found) == ("sheet", "Sheet1")
    assert "only a workbook" in fault.expected
