"""Find each of our columns in a parts list: by our own header, by the study's mapping, or as a constant."""

from __future__ import annotations

import difflib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from detune.ground.errors import Fault, nearest_name
from detune.ground.units import UnitError, parse_column
from detune.parts.columns import Column, column_named, columns_for, split_header
from detune.parts.sheet import Sheet

_MISSPELT = 0.9
"""Likeness from which an unmapped header of a supplier's sheet is taken for a misspelt one of ours."""


@dataclass(frozen=True)
class Source:
    """Where a column's cells come from.

    where: the header as written, or the constant's place in the study. index: position in the sheet, None for
    a constant. constant: its text. scale, offset: SI = scale * number + offset. unit: as written.
    broken: the unit is not understood, so the numbers cannot be.
    """

    column: Column
    where: str
    index: int | None
    constant: str | None = None
    scale: float = 1.0
    offset: float = 0.0
    unit: str = ""
    broken: bool = False


@dataclass(frozen=True)
class Matching:
    """The columns with the numbered ones put in, sources by column name, headers left unread, faults."""

    columns: tuple[Column, ...]
    sources: Mapping[str, Source]
    unread: tuple[str, ...]
    faults: tuple[Fault, ...]


@dataclass(frozen=True)
class Stated:
    """What a study says of a supplier's sheet, by the name of our column."""

    headers: Mapping[str, str]
    units: Mapping[str, str]
    constants: Mapping[str, str]


class _Matcher:
    def __init__(self, sheet: Sheet, columns: Sequence[Column], stated: Stated) -> None:
        self.sheet = sheet
        own = (split_header(header)[0] for header in sheet.headers)
        self.columns = columns_for(columns, (*own, *stated.headers, *stated.units, *stated.constants))
        self.stated = stated
        self.names = [column.name for column in self.columns]
        self.sources: dict[str, Source] = {}
        self.read: set[int] = set()
        self.faults: list[Fault] = []

    def fault(self, where: str, found: str, expected: str, nearest: str | None = None) -> None:
        self.faults.append(Fault(self.sheet.file, self.sheet.header_line, where, found, expected, nearest))

    def header_fault(self, header: str, found: str, expected: str, nearest: str | None = None) -> None:
        self.fault(self.sheet.header(header), found, expected, nearest)

    def known_keys(self, table: Mapping[str, str], place: str) -> Iterator[tuple[Column, str, str]]:
        for key, value in table.items():
            column = column_named(self.columns, key)
            if column is None:
                self.fault(f"{place}.{key}", key, "the name of a column", nearest_name(key, self.names))
            else:
                yield column, f"{place}.{key}", value

    def match(self) -> Matching:
        self.mapped_headers()
        self.own_headers()
        self.constants()
        self.units_without_column()
        self.missing()
        unread = [h for i, h in enumerate(self.sheet.headers) if i not in self.read]
        return Matching(self.columns, self.sources, tuple(unread), tuple(self.faults))

    def mapped_headers(self) -> None:
        headers = self.sheet.headers
        for column, place, header in self.known_keys(self.stated.headers, "headers"):
            places = [index for index, text in enumerate(headers) if text == header.strip()]
            if not places:
                self.fault(place, header, "a header of this sheet", nearest_name(header, headers))
                continue
            if len(places) > 1:
                self.fault(
                    place, header, f"a header that stands once in the sheet; it stands {len(places)} times"
                )
            self.read.update(places)
            _, bracket = split_header(header)
            stated = self.stated.units.get(column.name)
            # A foreign header may hold anything in brackets, a currency say, so the study's word wins.
            unitless = not column.numeric or column.kind in ("cost", "count")
            unit = stated if stated is not None else (None if unitless else bracket)
            self.add(column, header, places[0], unit)

    def own_headers(self) -> None:
        mapped = set(self.read)
        for index, header in enumerate(self.sheet.headers):
            if index in mapped:
                continue
            name, bracket = split_header(header)
            column = column_named(self.columns, name)
            if column is None:
                self.unknown_header(header, name)
                continue
            self.read.add(index)
            if column.name in self.sources:
                first = self.sources[column.name].index
                place = "" if first is None else f"; column {first + 1} of the sheet gives it already"
                self.header_fault(header, header, f"each column once{place}")
                continue
            stated = self.stated.units.get(name)
            if stated is not None and bracket is not None and stated.strip() != bracket:
                self.header_fault(
                    header, stated, f"the unit of the header, {bracket}, or no unit in the study"
                )
            self.add(column, header, index, bracket if bracket is not None else stated)

    def unknown_header(self, header: str, name: str) -> None:
        if not header:
            self.header_fault("header", "", "a name in every cell of the header row")
            return
        near = difflib.get_close_matches(name, self.names, 1, _MISSPELT)
        if self.stated.headers and not near:
            return
        nearest = column_named(self.columns, nearest_name(name, self.names) or "")
        expected = (
            "the name of a column, with its unit as in mass [kg]; other headers are mapped in the study"
        )
        self.header_fault(header, header, expected, nearest.header if nearest else None)

    def add(self, column: Column, header: str, index: int, unit: str | None) -> None:
        scale, offset, broken = 1.0, 0.0, False
        if column.numeric:
            try:
                scale, offset = parse_column(unit or "", column.kind)
            except UnitError as error:
                broken = True
                expected = error.expected if unit else f"{error.expected}; write it as {column.header}"
                self.header_fault(header, unit or "", expected, error.nearest)
        elif unit:
            self.header_fault(header, unit, f"no unit, for this column is {column.kind}")
        self.sources[column.name] = Source(
            column, header, index, scale=scale, offset=offset, unit=unit or "", broken=broken
        )

    def constants(self) -> None:
        for column, place, text in self.known_keys(self.stated.constants, "constants"):
            if column.name in self.sources:
                there = self.sources[column.name].where
                self.fault(place, text, f'a column that the sheet does not have; it has "{there}"')
            elif column.name == "part":
                self.fault(place, text, "another column: each part has a number of its own")
            else:
                self.sources[column.name] = Source(
                    column, place, None, constant=text.strip(), unit=column.unit
                )

    def units_without_column(self) -> None:
        for column, place, unit in self.known_keys(self.stated.units, "units"):
            source = self.sources.get(column.name)
            if source is None:
                self.fault(
                    place, unit, f"the unit of a column that is read; {column.name} is not in the sheet"
                )
            elif source.index is None:
                self.fault(place, unit, "no unit here; a constant carries its own")

    def missing(self) -> None:
        unread = [header for index, header in enumerate(self.sheet.headers) if index not in self.read]
        for column in self.columns:
            if column.required and column.name not in self.sources:
                expected = f"a column {column.header}: {column.meaning}"
                nearest = nearest_name(column.name, unread)
                self.header_fault(column.header, "", expected, nearest)


def match_headers(
    sheet: Sheet,
    columns: Sequence[Column],
    headers: Mapping[str, str] | None,
    units: Mapping[str, str] | None,
    constants: Mapping[str, str] | None,
) -> Matching:
    """Find each column in the sheet.

    headers: our column -> the sheet's header. units: our column -> unit, for a header that does not carry its
    own. constants: our column -> one value for the whole list, with its unit. Where `headers` is empty every
    header of the sheet must be one of ours; otherwise the others are left unread, save one that looks like a
    misspelt one of ours.
    """
    return _Matcher(sheet, columns, Stated(headers or {}, units or {}, constants or {})).match()
