"""Read a parts list into a catalog, with every fault at once, and choose parts from it by its columns."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TypeAlias

from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.units import UnitError, parse, show
from detune.parts.assumed import Assumed
from detune.parts.columns import Column, column_named
from detune.parts.headers import match_headers
from detune.parts.kinds import KINDS, Part
from detune.parts.kinds.mount import Mount
from detune.parts.sheet import Sheet
from detune.parts.source_file import read_rows
from detune.parts.table import Table

Criterion: TypeAlias = Sequence[str] | Mapping[str, float]
"""The texts allowed in a column, or a window {"min": ..., "max": ...} in SI with one or both ends."""


@dataclass(frozen=True, slots=True)
class Catalog:
    """A parts list.

    kind: a name in `detune.parts.kinds.KINDS`. parts: in the order of the file. assumed: what the list leaves
    out and was filled in. file: path as given. unread: headers of a mapped sheet that no column reads.
    further_files: those that the rows name and that were read with it, each once.
    """

    name: str
    kind: str
    parts: tuple[Part, ...]
    assumed: tuple[Assumed, ...]
    file: str
    unread: tuple[str, ...] = ()
    further_files: tuple[str, ...] = ()

    @property
    def mounts(self) -> tuple[Mount, ...]:
        """The parts of a list of mounts. Raises BriefError for a list of another kind."""
        if self.kind != "mount":
            raise BriefError([Fault(self.file, None, "kind", self.kind, "a list of mounts")])
        return tuple(part for part in self.parts if isinstance(part, Mount))


def read_catalog(
    path: str | Path,
    name: str,
    kind: str = "mount",
    header_map: Mapping[str, str] | None = None,
    units: Mapping[str, str] | None = None,
    constants: Mapping[str, str] | None = None,
    sheet: str | None = None,
) -> Catalog:
    """Read a parts list: CSV (UTF-8; comma, semicolon or tab; decimal point), XLSX, or Parquet (an extra).

    The ending of the file's name tells which. sheet: of a workbook, None for the first. Our own headers are
    a column's name with its unit, "stiffness_z_static [N/mm]". A supplier's sheet is read as it stands:
    header_map: our column -> its header. units: our column -> its unit, where the header does not carry one.
    constants: our column -> one value with its unit for the whole list. Figures become SI, degC for
    temperatures. Raises BriefError with every fault found, each with file, line and column (in a workbook the
    sheet and the cell, Sheet1!D7).
    """
    file = str(path)
    if kind not in KINDS:
        expected = f"a kind of part: {', '.join(KINDS)}"
        raise BriefError([Fault(file, None, "kind", kind, expected, nearest_name(kind, KINDS))])
    rules = KINDS[kind]
    rows = read_rows(path, sheet)
    matching = match_headers(rows, rules.COLUMNS, header_map, units, constants)
    table = Table(rows, matching.columns, matching.sources)
    faults = [*rows.faults, *matching.faults, *table.faults, *_duplicates(table), *rules.check(table)]
    if faults:
        raise BriefError(_in_sheet_order(faults, rows))
    parts, assumed = rules.build(table, name)
    further = dict.fromkeys(further for part in parts for further in rules.files(part))
    return Catalog(name, kind, parts, assumed, file, matching.unread, tuple(further))


def _duplicates(table: Table) -> list[Fault]:
    first: dict[str, int] = {}
    faults = []
    for row, part in enumerate(table.texts("part")):
        if not part:
            continue
        line = first.setdefault(part, table.lines[row])
        if line != table.lines[row]:
            expected = f"each part number once; it stands already in {table.line_word} {line}"
            faults.append(table.fault(row, "part", expected))
    return faults


def _in_sheet_order(faults: list[Fault], rows: Sheet) -> list[Fault]:
    place = {rows.header(header): index for index, header in enumerate(rows.headers)}
    cells = {letter: index for index, letter in enumerate(rows.letters)}

    def column(fault: Fault) -> int:
        address = re.fullmatch(r".*!([A-Z]+)[0-9]+", fault.where)
        if address is None:
            return place.get(fault.where, len(rows.headers))
        return cells.get(address.group(1), len(rows.headers))

    return sorted(faults, key=lambda fault: (fault.line or 0, column(fault)))


def filter_parts(
    catalog: Catalog, criteria: Mapping[str, Criterion]
) -> tuple[tuple[int, ...], dict[int, str]]:
    """Choose the parts that meet every criterion.

    criteria: column -> the texts allowed ("yes" and "no" for a yes-no column), or a window in SI, both ends
    included. A part that states nothing in the column is dropped. Returns the indices kept, in catalog order,
    and for each index dropped the first reason. Raises BriefError with every criterion that cannot be judged.
    """
    kind = KINDS[catalog.kind]
    wanted: list[tuple[Column, Criterion]] = []
    faults: list[Fault] = []
    for name, criterion in criteria.items():
        column = column_named(kind.COLUMNS, name)
        if column is None:
            faults.append(_unknown_column(catalog.file, catalog.kind, name))
            continue
        faults.extend(_criterion_faults(catalog.file, column, criterion))
        wanted.append((column, criterion))
    if faults:
        raise BriefError(faults)
    kept: list[int] = []
    dropped: dict[int, str] = {}
    for index, part in enumerate(catalog.parts):
        reasons = (_reason(column, criterion, kind.value(part, column.name)) for column, criterion in wanted)
        reason = next((reason for reason in reasons if reason), None)
        if reason is None:
            kept.append(index)
        else:
            dropped[index] = reason
    return tuple(kept), dropped


def criteria_in_si(
    texts: Mapping[str, Sequence[str] | Mapping[str, str | None]], kind: str = "mount", file: str = "study"
) -> dict[str, Criterion]:
    """Turn criteria as a study writes them, {"load_max": {"min": "1.2 kN"}}, into those of `filter_parts`.

    An end that is None is left open. kind: kind of part. file: the study, for the faults. Raises BriefError
    with every window end that cannot be read and every unknown column.
    """
    criteria: dict[str, Criterion] = {}
    faults: list[Fault] = []
    for name, text in texts.items():
        column = column_named(KINDS[kind].COLUMNS, name)
        if column is None:
            faults.append(_unknown_column(file, kind, name))
        elif not isinstance(text, Mapping):
            criteria[name] = text
        elif not column.numeric:
            faults.append(Fault(file, None, f"filter.{name}", str(dict(text)), "a list of the texts allowed"))
        else:
            window: dict[str, float] = {}
            for end, number in text.items():
                if number is None:
                    continue
                try:
                    window[end] = parse(number, column.kind)
                except UnitError as error:
                    place = f"filter.{name}.{end}"
                    faults.append(Fault(file, None, place, error.found, error.expected, error.nearest))
            criteria[name] = window
    if faults:
        raise BriefError(faults)
    return criteria


def _unknown_column(file: str, kind: str, name: str) -> Fault:
    nearest = nearest_name(name, [column.name for column in KINDS[kind].COLUMNS])
    return Fault(file, None, f"filter.{name}", name, f"a column of a {kind} list", nearest)


def _criterion_faults(file: str, column: Column, criterion: Criterion) -> list[Fault]:
    where = f"filter.{column.name}"
    if not column.numeric:
        words = [] if isinstance(criterion, Mapping | str) else list(criterion)
        if not words:
            return [Fault(file, None, where, str(criterion), "a list of the texts allowed")]
        if column.kind == "yes-no":
            wrong = [word for word in words if word not in ("yes", "no")]
            return [Fault(file, None, where, str(word), "yes or no") for word in wrong]
        return []
    if not isinstance(criterion, Mapping) or not criterion:
        return [Fault(file, None, where, str(criterion), "a window with min, max or both")]
    faults = []
    for key, end in criterion.items():
        if key not in ("min", "max"):
            faults.append(
                Fault(file, None, f"{where}.{key}", key, "min or max", nearest_name(key, ("min", "max")))
            )
        elif not isinstance(end, int | float) or isinstance(end, bool) or math.isnan(end):
            faults.append(Fault(file, None, f"{where}.{key}", str(end), "a number in SI"))
    if not faults and criterion.get("min", -math.inf) > criterion.get("max", math.inf):
        expected = f"at most max, which is {show(criterion['max'], column.kind)}"
        faults.append(Fault(file, None, f"{where}.min", show(criterion["min"], column.kind), expected))
    return faults


def _reason(column: Column, criterion: Criterion, stated: float | str | bool | None) -> str:
    """Say why a part is dropped; empty when it is kept."""
    if stated is None:
        return f"the list states no {column.name}"
    if isinstance(criterion, Mapping):
        number = float(stated)
        text = f"{column.name} {show(number, column.kind)}"
        if number < criterion.get("min", -math.inf):
            return f"{text} is below {show(criterion['min'], column.kind)}"
        if number > criterion.get("max", math.inf):
            return f"{text} is above {show(criterion['max'], column.kind)}"
        return ""
    word = stated if isinstance(stated, str) else ("yes" if stated else "no")
    return "" if word in criterion else f"{column.name} {word} is not among {', '.join(criterion)}"
