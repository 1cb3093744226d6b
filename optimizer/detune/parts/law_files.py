"""Read the files that a mount list names beside its rows: load-deflection curves and stiffness tables.

Each is a small list of its own with headers and units, CSV or XLSX, relative to the folder of the mount list.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

import numpy as np

from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.units import show
from detune.parts.columns import Column, Limits
from detune.parts.headers import match_headers
from detune.parts.laws import AmplitudeTable, LawTable, LoadCurve, Row
from detune.parts.source_file import read_rows
from detune.parts.table import Table, rows_of

_POSITIVE = Limits(low=0.0, low_open=True)
_AGREES = 0.05

CURVE_COLUMNS: tuple[Column, ...] = (
    Column("deflection", "length", "mm", "axial deflection from free, compression positive", True, "none"),
    Column("load", "force", "N", "static axial load, compression positive", True, "none"),
)
TABLE_COLUMNS: tuple[Column, ...] = (
    Column("temperature", "temperature", "degC", "temperature of the mount", False, "one, not stated",
           Limits(low=-273.15)),
    Column("frequency", "frequency", "Hz", "frequency of vibration", True, "none", _POSITIVE),
    Column("stiffness_dynamic", "stiffness", "N/mm", "axial storage stiffness", False,
           "none; a file has this column or stiffness_ratio", _POSITIVE),
    Column("stiffness_ratio", "ratio", "", "storage stiffness over the row's dynamic stiffness", False,
           "none; a file has this column or stiffness_dynamic", _POSITIVE),
    Column("loss_factor", "ratio", "", "loss factor", True, "none", Limits(0.0, 3.0, low_open=True)),
)  # fmt: skip
AMPLITUDE_COLUMNS: tuple[Column, ...] = (
    Column("amplitude", "length", "mm", "peak of the dynamic axial deflection", True, "none", _POSITIVE),
    Column("stiffness_ratio", "ratio", "", "stiffness over the row's dynamic stiffness", True, "none",
           _POSITIVE),
    Column("loss_factor", "ratio", "", "loss factor", True, "none", Limits(0.0, 3.0)),
)  # fmt: skip

Law = TypeVar("Law")


@dataclass(frozen=True)
class Laws:
    """The laws of a table's rows, None where a row names none or names a faulty file; n of each.

    A stiffness table in newtons per metre is still in these, as `rows_of_table` relates it to its row later.
    """

    curves: tuple[LoadCurve | None, ...]
    tables: tuple[LawTable | None, ...]
    amplitudes: tuple[AmplitudeTable | None, ...]
    faults: tuple[Fault, ...]


def read_laws(table: Table) -> Laws:
    """Read every file that the rows name, each once, and collect all their faults."""
    faults: list[Fault] = []
    return Laws(
        tuple(_read_column(table, "curve_file", _curve, faults)),
        tuple(_read_column(table, "law_file", _stiffness_table, faults)),
        tuple(_read_column(table, "amplitude_file", _amplitudes, faults)),
        tuple(faults),
    )


def _read_column(
    table: Table, column: str, read: Callable[[str, list[Fault]], Law | None], faults: list[Fault]
) -> Iterator[Law | None]:
    known: dict[str, Law | None] = {}
    folder = Path(table.file).parent
    for row, name in enumerate(table.texts(column)):
        if not name:
            yield None
            continue
        if name not in known:
            path = folder / name
            known[name] = None
            if Path(name).is_absolute():
                faults.append(table.fault(row, column, "a file named relative to the folder of this list"))
            elif not path.is_file():
                beside = [entry.name for entry in path.parent.iterdir()] if path.parent.is_dir() else []
                near = nearest_name(path.name, beside)
                expected = "a file, named relative to the folder of this list; there is no such file"
                faults.append(table.fault(row, column, expected, near))
            else:
                known[name] = read(str(path), faults)
        yield known[name]


def _table(file: str, columns: Sequence[Column], faults: list[Fault]) -> Table | None:
    """Read a file by its columns; None when it has faults, which are added to the others."""
    try:
        rows = read_rows(file)
    except BriefError as error:
        faults.extend(error.faults)
        return None
    matching = match_headers(rows, columns, None, None, None)
    table = Table(rows, matching.columns, matching.sources)
    found = [*rows.faults, *matching.faults, *table.faults]
    faults.extend(found)
    return None if found else table


def _not_rising(table: Table, name: str, rows: Sequence[int], what: str) -> list[Fault]:
    """Return a fault for each of `rows` whose figure does not rise above that of the row before it."""
    values = table.numbers(name)
    kind = table.column(name).kind
    return [
        table.fault(row, name, f"more than {show(values[row - 1], kind)}, which stands above it: {what}")
        for row in rows
        if not values[row] > values[row - 1]
    ]


def _too_short(table: Table, faults: list[Fault]) -> bool:
    if len(table) >= 2:
        return False
    faults.append(Fault(table.file, table.lines[0], "row", "1 row", "at least two rows"))
    return True


def _curve(file: str, faults: list[Fault]) -> LoadCurve | None:
    table = _table(file, CURVE_COLUMNS, faults)
    if table is None or _too_short(table, faults):
        return None
    later = range(1, len(table))
    found = _not_rising(table, "deflection", later, "the deflection rises from row to row")
    back = _not_rising(table, "load", later, "the curve turns back, and one load would have two deflections")
    found += [fault for fault in back if fault.line not in {other.line for other in found}]
    deflection, load = table.numbers("deflection"), table.numbers("load")
    if not found:
        at_rest = np.flatnonzero(deflection == 0.0)
        if not at_rest.size:
            found.append(table.fault(0, "deflection", "a row with deflection 0, the free mount"))
        elif load[at_rest[0]] != 0.0:
            found.append(table.fault(int(at_rest[0]), "load", "0 N at deflection 0, the free mount"))
    faults.extend(found)
    return None if found else LoadCurve(tuple(deflection.tolist()), tuple(load.tolist()), file)


def _amplitudes(file: str, faults: list[Fault]) -> AmplitudeTable | None:
    table = _table(file, AMPLITUDE_COLUMNS, faults)
    if table is None or _too_short(table, faults):
        return None
    found = _not_rising(table, "amplitude", range(1, len(table)), "the amplitude rises from row to row")
    found += _without_unity(table, "stiffness_ratio", table.numbers("stiffness_ratio").tolist())
    faults.extend(found)
    if found:
        return None
    amplitude, ratio, loss = (
        tuple(table.numbers(name).tolist()) for name in ("amplitude", "stiffness_ratio", "loss_factor")
    )
    return AmplitudeTable(amplitude, ratio, loss, file)


def _stiffness_table(file: str, faults: list[Fault]) -> LawTable | None:
    table = _table(file, TABLE_COLUMNS, faults)
    if table is None:
        return None
    stated = [name for name in ("stiffness_dynamic", "stiffness_ratio") if table.has(name)]
    if len(stated) != 1:
        expected = "exactly one of stiffness_dynamic and stiffness_ratio"
        faults.append(table.header_fault(stated[-1] if stated else "stiffness_dynamic", expected))
        return None
    name = stated[0]
    blocks, found = _blocks(table)
    for row in rows_of(~table.given(name)):
        found.append(table.fault(row, name, "a value in every row: nothing is filled in between others"))
    values = table.numbers(name)
    if not found and name == "stiffness_ratio":
        found += _without_unity(table, name, values.tolist())
    faults.extend(found)
    if found:
        return None
    frequency, loss = table.numbers("frequency"), table.numbers("loss_factor")
    warmth = table.numbers("temperature")

    def grid(figures: np.ndarray) -> tuple[Row, ...]:
        return tuple(tuple(figures[block].tolist()) for block in blocks)

    return LawTable(
        tuple(frequency[blocks[0]].tolist()),
        tuple(float(warmth[block.start]) for block in blocks) if table.has("temperature") else (),
        grid(values),
        grid(loss),
        name == "stiffness_dynamic",
        file,
    )


def _without_unity(table: Table, name: str, ratios: list[float]) -> list[Fault]:
    if min(ratios) <= 1.0 + _AGREES and max(ratios) >= 1.0 - _AGREES:
        return []
    row = int(np.argmin(np.abs(np.array(ratios) - 1.0)))
    why = "the row's dynamic stiffness would hold nowhere in the table"
    return [table.fault(row, name, f"a ratio of 1 at or between some of the rows: {why}")]


def _blocks(table: Table) -> tuple[list[slice], list[Fault]]:
    """Split the rows by temperature; every block must hold the same frequencies, rising."""
    faults: list[Fault] = []
    warmth, frequency = table.numbers("temperature"), table.numbers("frequency")
    if table.has("temperature"):
        empty = rows_of(~table.given("temperature"))
        faults = [table.fault(row, "temperature", "a temperature in every row") for row in empty]
        if faults:
            return [], faults
        starts = [0, *(np.flatnonzero(np.diff(warmth) != 0.0) + 1).tolist()]
        faults += _not_rising(
            table, "temperature", starts[1:], "rows of one temperature stand together, rising"
        )
    else:
        starts = [0]
    if faults:
        return [], faults
    blocks = [slice(a, b) for a, b in zip(starts, [*starts[1:], len(table)], strict=True)]
    for block in blocks:
        later = range(block.start + 1, block.stop)
        faults += _not_rising(table, "frequency", later, "the frequency rises from row to row")
    if faults:
        return [], faults
    for block in blocks:
        faults += _gap(table, frequency[blocks[0]].tolist(), block)
    if len(table) and blocks[0].stop - blocks[0].start < 2:
        faults.append(table.fault(0, "frequency", "at least two frequencies"))
    return blocks, faults


def _gap(table: Table, wanted: list[float], block: slice) -> list[Fault]:
    """Return the first place where a block does not hold the frequencies of the first block."""
    found = table.numbers("frequency")[block].tolist()
    for place, frequency in enumerate(wanted):
        if place >= len(found) or not math.isclose(found[place], frequency, rel_tol=1e-9):
            row = min(block.start + place, block.stop - 1)
            text = show(frequency, "frequency")
            expected = f"a row for {text}: every temperature has the frequencies of the first, without a gap"
            return [table.fault(row, "frequency", expected)]
    if len(found) > len(wanted):
        row = block.start + len(wanted)
        return [table.fault(row, "frequency", "no row: the first temperature has no such frequency")]
    return []


def related_tables(
    tables: Sequence[LawTable | None], dynamic: Sequence[float]
) -> tuple[LawTable | None, ...]:
    """Turn tables in N/m into ratios to the axial dynamic stiffness of their rows; dynamic: N/m, n of them."""
    return tuple(
        LawTable(
            law.frequency,
            law.temperature,
            tuple(tuple(value / stiffness for value in row) for row in law.stiffness_ratio),
            law.loss_factor,
            True,
            law.file,
        )
        if law is not None and law.absolute
        else law
        for law, stiffness in zip(tables, dynamic, strict=True)
    )


def check_absolute_tables(table: Table, laws: Laws, dynamic: Sequence[float]) -> list[Fault]:
    """Return a fault for each row whose dynamic stiffness lies outside the stiffness table it names."""
    faults = []
    for row, (law, stiffness) in enumerate(zip(laws.tables, dynamic, strict=True)):
        if law is None or not law.absolute or stiffness != stiffness:
            continue
        values = [value for figures in law.stiffness_ratio for value in figures]
        if min(values) / (1.0 + _AGREES) <= stiffness <= max(values) * (1.0 + _AGREES):
            continue
        low, high = show(min(values), "stiffness"), show(max(values), "stiffness")
        expected = (
            f"a table that holds the row's axial dynamic stiffness, {show(stiffness, 'stiffness')}; "
            f"it reaches from {low} to {high}"
        )
        faults.append(table.fault(row, "law_file", expected))
    return faults
