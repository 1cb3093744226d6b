"""The columns a catalog may have: name, unit, meaning, and what happens when one is left out.

A column whose name ends in <n> stands for as many columns as a list has use for, one for each whole number:
"cost_<n>" is cost_10, cost_100 and so on.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.ground.units import show

NUMBERED = "<n>"

_HEADER = re.compile(r"(?P<name>[^\[\]]*?)\s*(?:\[(?P<unit>[^\[\]]*)\])?\s*", re.DOTALL)


@dataclass(frozen=True)
class Limits:
    """The values a column may take, in SI. An open end excludes the limit itself."""

    low: float = -math.inf
    high: float = math.inf
    low_open: bool = False
    high_open: bool = False

    def outside(self, values: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Return which values lie outside; a nan does not. values: (n,), SI."""
        below = values <= self.low if self.low_open else values < self.low
        above = values >= self.high if self.high_open else values > self.high
        return below | above

    def words(self, kind: str) -> str:
        """Say the limits as a sentence part, for example "above 0 N/m"."""
        ends = []
        if self.low > -math.inf:
            ends.append(f"{'above' if self.low_open else 'at least'} {show(self.low, kind, 6)}")
        if self.high < math.inf:
            ends.append(f"{'below' if self.high_open else 'at most'} {show(self.high, kind, 6)}")
        return " and ".join(ends)


ANY = Limits()


@dataclass(frozen=True)
class Column:
    """One column of a catalog.

    kind: a name in `detune.ground.units.KINDS`, or "text" or "yes-no".
    unit: the unit in our own header, empty where none is written. required: whether every row must fill it.
    default: what is taken for an empty cell, in words. limits: the values allowed, in SI.
    """

    name: str
    kind: str
    unit: str
    meaning: str
    required: bool
    default: str
    limits: Limits = ANY

    @property
    def header(self) -> str:
        """The header of our own files, for example "mass [kg]"."""
        return f"{self.name} [{self.unit}]" if self.unit else self.name

    @property
    def numeric(self) -> bool:
        return self.kind not in ("text", "yes-no")

    def number_in(self, name: str) -> int | None:
        """Return the n of a name that this numbered column stands for, None for any other name. n is 2 up."""
        if not self.name.endswith(NUMBERED):
            return None
        match = re.fullmatch(re.escape(self.name.removesuffix(NUMBERED)) + "([1-9][0-9]{0,8})", name)
        return int(match.group(1)) if match and match.group(1) != "1" else None


def split_header(header: str) -> tuple[str, str | None]:
    """Return the name and the unit of a header such as "mass [kg]"; the unit is None when there is none."""
    match = _HEADER.fullmatch(header)
    if match is None:
        return header.strip(), None
    unit = match.group("unit")
    return match.group("name").strip(), None if unit is None else unit.strip()


def column_named(columns: Iterable[Column], name: str) -> Column | None:
    """Return the column of that name, or None. "cost_10" is made from the numbered column "cost_<n>"."""
    for column in columns:
        number = column.number_in(name)
        if number is not None:
            meaning = column.meaning.replace(NUMBERED, str(number))
            return replace(column, name=name, meaning=meaning, required=False)
        if column.name == name and not name.endswith(NUMBERED):
            return column
    return None


def columns_for(columns: Sequence[Column], names: Iterable[str]) -> tuple[Column, ...]:
    """Return the columns, each numbered one replaced by those among `names` that it stands for, n rising."""
    found: list[Column] = []
    wanted = tuple(dict.fromkeys(names))
    for column in columns:
        if not column.name.endswith(NUMBERED):
            found.append(column)
            continue
        numbers = {number: name for name in wanted if (number := column.number_in(name)) is not None}
        made = (column_named([column], numbers[number]) for number in sorted(numbers))
        found.extend(one for one in made if one is not None)
    return tuple(found)


def markdown_table(columns: Sequence[Column]) -> str:
    """Return the columns as a markdown table for the documentation."""
    rows = [("header", "kind", "meaning", "required", "when empty", "allowed")]
    for column in columns:
        required = "yes" if column.required else "no"
        allowed = column.limits.words(column.kind) if column.numeric else ""
        rows.append((f"`{column.header}`", column.kind, column.meaning, required, column.default, allowed))
    lines = ["| " + " | ".join(cell.replace("|", "\\|") for cell in row) + " |" for row in rows]
    lines.insert(1, "|" + "---|" * len(rows[0]))
    return "\n".join(lines) + "\n"
