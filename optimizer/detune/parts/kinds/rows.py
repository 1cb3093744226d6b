"""What the kinds of part share when they make their parts from a table."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.parts.columns import NUMBERED, Column
from detune.parts.prices import PREFIX, stated_break
from detune.parts.table import Table


def optional(table: Table, name: str) -> list[float | None]:
    """Return the SI numbers of a column, None where the cell is empty."""
    return [None if number != number else number for number in table.numbers(name).tolist()]


def whole(table: Table, name: str) -> list[int | None]:
    """Return the whole numbers of a column, None where the cell is empty."""
    return [None if number is None else int(number) for number in optional(table, name)]


def stated(part: Any, column: str, columns: Sequence[Column]) -> float | str | bool | None:
    """Return a part's figure in a column whose name is the part's own field; prices by their quantity.

    Raises KeyError for a name that is no column.
    """
    if column not in {known.name for known in columns}:
        if not any(known.number_in(column) for known in columns):
            raise KeyError(column)
        return stated_break(part, column)
    if column == PREFIX + NUMBERED:
        return None
    figure: float | str | bool | None = getattr(part, column)
    return figure


def column_array(figures: Sequence[float | None], absent: float = math.nan) -> NDArray[np.float64]:
    """Return figures as a read-only array, `absent` where there is none."""
    array = np.array([absent if figure is None else figure for figure in figures], dtype=np.float64)
    array.setflags(write=False)
    return array
