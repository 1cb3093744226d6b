"""What the library that reads an XLSX workbook passes over in silence: errors, formulas without a value, and
cells shown in per cent. Read from the parts of the file itself (ECMA-376, Office Open XML, part 1, 18.3.1).
"""

from __future__ import annotations

import io
import posixpath
import re
import zipfile
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from xml.etree import ElementTree

_PER_CENT_FORMATS = {9, 10}
"""Built-in number formats "0%" and "0.00%" (ECMA-376, part 1, 18.8.30)."""

_REFERENCE = re.compile(r"([A-Z]{1,3})([0-9]{1,7})")
_LITERAL = re.compile(r'"[^"]*"|\\.')


@dataclass(frozen=True)
class Marks:
    """Cells by (row, column), both from 0. errors: with the error's text. uncalculated: with the formula.
    per_cent: shown in per cent, so that the number stored is a hundredth of the number seen.
    """

    errors: dict[tuple[int, int], str]
    uncalculated: dict[tuple[int, int], str]
    per_cent: frozenset[tuple[int, int]]

    @cached_property
    def rows(self) -> frozenset[int]:
        """The rows that hold an error or a formula without a value."""
        return frozenset(row for row, _ in (*self.errors, *self.uncalculated))


def read_marks(content: bytes, sheet: str) -> Marks:
    """Return the marks of one sheet. content: the file. Raises ValueError when it is no sound workbook."""
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            shown = _per_cent_styles(archive)
            marks = Marks({}, {}, frozenset())
            per_cent = set()
            for place, cell in _cells(archive, _sheet_part(archive, sheet)):
                value, formula = _child(cell, "v"), _child(cell, "f")
                if cell.get("t") == "e":
                    marks.errors[place] = (value or "#ERROR").strip()
                elif (
                    formula is not None
                    and not value
                    and _child(cell, "is") is None
                    and cell.get("t") != "str"
                ):
                    marks.uncalculated[place] = "=" + formula.strip()
                elif cell.get("t", "n") == "n" and int(cell.get("s", "0")) in shown:
                    per_cent.add(place)
    except (zipfile.BadZipFile, KeyError, ElementTree.ParseError) as error:
        raise ValueError(f"damaged file: {error}") from None
    return Marks(marks.errors, marks.uncalculated, frozenset(per_cent))


def _local(tag: str) -> str:
    return tag.rpartition("}")[2]


def _child(element: ElementTree.Element, name: str) -> str | None:
    """The text of the first child of that name, empty when it has none, None without such a child."""
    return next((child.text or "" for child in element if _local(child.tag) == name), None)


def _elements(archive: zipfile.ZipFile, part: str, name: str) -> Iterator[ElementTree.Element]:
    with archive.open(part) as stream:
        for _, element in ElementTree.iterparse(stream):
            if _local(element.tag) == name:
                yield element


def _attribute(element: ElementTree.Element, name: str) -> str:
    return next((value for key, value in element.attrib.items() if _local(key) == name), "")


def _sheet_part(archive: zipfile.ZipFile, sheet: str) -> str:
    identifier = next(
        (
            next(value for key, value in element.attrib.items() if key.endswith("}id"))
            for element in _elements(archive, "xl/workbook.xml", "sheet")
            if element.get("name") == sheet
        ),
        None,
    )
    for relation in _elements(archive, "xl/_rels/workbook.xml.rels", "Relationship"):
        if relation.get("Id") == identifier:
            return posixpath.normpath(posixpath.join("/xl", relation.get("Target", ""))).lstrip("/")
    raise KeyError(f"no part holds the sheet {sheet}")


def _per_cent_styles(archive: zipfile.ZipFile) -> frozenset[int]:
    if "xl/styles.xml" not in archive.namelist():
        return frozenset()
    formats = {
        int(element.get("numFmtId", "0"))
        for element in _elements(archive, "xl/styles.xml", "numFmt")
        if "%" in _LITERAL.sub("", element.get("formatCode", ""))
    }
    styles = next(_elements(archive, "xl/styles.xml", "cellXfs"), ())
    return frozenset(
        index
        for index, style in enumerate(styles)
        if int(style.get("numFmtId", "0")) in formats | _PER_CENT_FORMATS
    )


def _cells(archive: zipfile.ZipFile, part: str) -> Iterator[tuple[tuple[int, int], ElementTree.Element]]:
    """Yield every cell with its place. A row or cell without a reference follows the one before it."""
    line = -1
    for row in _elements(archive, part, "row"):
        line = int(row.get("r", line + 2)) - 1
        column = -1
        for cell in row:
            match = _REFERENCE.fullmatch(cell.get("r", ""))
            column = _column(match.group(1)) if match else column + 1
            yield (line, column), cell
        row.clear()


def _column(name: str) -> int:
    column = 0
    for letter in name:
        column = 26 * column + ord(letter) - ord("A") + 1
    return column - 1
