"""Lists of dampers, ballast, absorbers and pads in XLSX: the same parts as from CSV, and faults by sheet and cell."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from openpyxl import Workbook

from detune.ground.errors import BriefError
from detune.parts.catalog import read_catalog

CATALOGS = Path(__file__).parents[2] / "catalogs"
PADS = """\
part,family,hardness [ShA],dynamic_to_static,loss_factor,thickness [mm],sheet_width [mm],sheet_length [mm],\
cut_min [mm],pressure_max [MPa],cost_per_m2
sheet-a,rubber,50,1.3,0.1,20,500,1000,30,1,800
sheet-b,rubber,60,1.5,0.12,12.5,500,1000,30,1.2,900
"""
KINDS = ("damper", "ballast", "absorber", "pad")


def text_of(kind: str) -> str:
    names = {"damper": "dampers.csv", "ballast": "ballast.csv", "absorber": "absorbers.csv"}
    return PADS if kind == "pad" else (CATALOGS / names[kind]).read_text(encoding="utf-8")


def typed(text: str) -> float | str | None:
    try:
        return float(text)
    except ValueError:
        return text or None


def book(folder: Path, kind: str, spoilt: dict[str, Any] | None = None) -> Path:
    """The list on a sheet "Stock" behind a cover, some cells spoilt: content, or the error of a formula."""
    made = Workbook()
    made.active.title = "Cover"
    sheet = made.create_sheet("Stock")
    for line in csv.reader(text_of(kind).splitlines()):
        sheet.append([typed(text) for text in line])
    for address, content in (spoilt or {}).items():
        sheet[address].value = content
        if isinstance(content, str) and content.startswith("#"):
            sheet[address].data_type = "e"
    path = folder / f"{kind}.xlsx"
    made.save(path)
    return path


def column_of(kind: str, name: str) -> str:
    header = next(csv.reader(text_of(kind).splitlines()))
    index = next(i for i, text in enumerate(header) if text.split(" [")[0] == name)
    return "ABCDEFGHIJKLMNOPQRSTUVWXYZ"[index]


@pytest.mark.parametrize("kind", KINDS)
def test_workbook_and_csv_give_the_same_parts(kind: str, tmp_path: Path) -> None:
    plain = tmp_path / "plain.csv"
    plain.write_text(text_of(kind), encoding="utf-8")
    expected = read_catalog(plain, "list", kind).parts
    found = read_catalog(book(tmp_path, kind), "list", kind, sheet="Stock").parts
    assert [replace(part, file="") for part in found] == [replace(part, file="") for part in expected]
    assert [part.line for part in found] == list(range(2, 2 + len(found)))


FAULTS = [
    ("damper", "viscous", "soft", "a number"),
    ("damper", "stroke", "#N/A", "the error of a formula"),
    ("ballast", "mass", -3.0, "above 0"),
    ("ballast", "height", "#REF!", "the error of a formula"),
    ("ballast", "mass", 900.0, "a block of lead of this size"),
    ("absorber", "frequency", 0.0, "above 0"),
    ("absorber", "stroke", None, "a value in every row"),
    ("absorber", "tolerance", "#DIV/0!", "the error of a formula"),
    ("pad", "hardness", 95.0, "75"),
    ("pad", "thickness", "thick", "a number"),
    ("pad", "cost_per_m2", None, "a value in every row"),
]


@pytest.mark.parametrize(("kind", "name", "content", "expected"), FAULTS)
def test_a_fault_names_sheet_and_cell(
    kind: str, name: str, content: Any, expected: str, tmp_path: Path
) -> None:
    address = f"{column_of(kind, name)}3"
    path = book(tmp_path, kind, {address: content})
    with pytest.raises(BriefError) as caught:
        read_catalog(path, "list", kind, sheet="Stock")
    (fault,) = caught.value.faults
    assert (fault.file, fault.where, fault.line) == (str(path), f"Stock!{address}", 3)
    assert expected in fault.expected or expected in fault.found, str(fault)


@pytest.mark.parametrize("kind", KINDS)
def test_a_number_twice_names_both_rows(kind: str, tmp_path: Path) -> None:
    path = book(tmp_path, kind, {"A3": next(iter(csv.DictReader(text_of(kind).splitlines())))["part"]})
    with pytest.raises(BriefError) as caught:
        read_catalog(path, "list", kind, sheet="Stock")
    (fault,) = caught.value.faults
    assert fault.where == "Stock!A3" and "row 2" in fault.expected
