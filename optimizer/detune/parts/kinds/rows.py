"""What the kinds of part share when they make their parts from a table."""

from __future__ import annotations

from detune.parts.table import Table


def optional(table: Table, name: str) -> list[float | None]:
    """Return the SI numbers of a column, None where the cell is empty."""
    return [None if number != number else number for number in table.numbers(name).tolist()]
