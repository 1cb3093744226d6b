"""Quantity breaks: what one piece costs when several of a number are bought together.

A list states the price of a single piece in `cost`, and in `cost_10`, `cost_100` and so on the price of each
piece from that many up. Prices never rise with the quantity.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol, TypeAlias

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.parts.columns import NUMBERED, Column, Limits
from detune.parts.table import Table

PREFIX = "cost_"

COST_COLUMNS: tuple[Column, ...] = (
    Column("cost", "cost", "", "price of one, every list in one currency", True, "none",
           Limits(low=0.0, low_open=True)),
    Column(PREFIX + NUMBERED, "cost", "", f"price of each when {NUMBERED} or more are bought",
           False, "the price of the next smaller quantity", Limits(low=0.0, low_open=True)),
)  # fmt: skip
"""The price columns of a kind of part that is bought by the piece."""

Breaks: TypeAlias = tuple[tuple[int, float], ...]
"""(from how many pieces, price of each) for every break a row states, pieces rising from 2."""


class Priced(Protocol):
    """A part bought by the piece."""

    @property
    def cost(self) -> float: ...

    @property
    def cost_breaks(self) -> Breaks: ...


@dataclass(frozen=True, slots=True, eq=False)
class CostBreaks:
    """Prices of P parts. pieces (B,), rising from 1; price (P, B), of each part from pieces[b] up. Read-only.

    B counts the break quantities of all the parts together; a part that has no break at one carries on with
    its price below it.
    """

    pieces: NDArray[np.int64]
    price: NDArray[np.float64]

    def each(self, pieces: int) -> NDArray[np.float64]:
        """Return the price (P,) of one piece when `pieces` of a part are bought. Raises ValueError below 1."""
        _require_some(pieces)
        place = int(np.searchsorted(self.pieces, pieces, side="right")) - 1
        return np.asarray(self.price[:, place])


def price_each(part: Priced, pieces: int) -> float:
    """Return the price of one piece when `pieces` of this part are bought together.

    The count is that of the whole order: all stations that carry this part number. Buying more than are
    needed to reach a cheaper quantity is not considered. Raises ValueError below one piece.
    """
    _require_some(pieces)
    price = part.cost
    for least, cheaper in part.cost_breaks:
        if pieces >= least:
            price = cheaper
    return price


def lowest_price(part: Priced) -> float:
    """Return the price of one piece in the largest quantity: a lower bound whatever is bought."""
    return part.cost_breaks[-1][1] if part.cost_breaks else part.cost


def _require_some(pieces: int) -> None:
    if pieces < 1:
        raise ValueError(f"a price holds for one piece or more, not for {pieces}")


def check_prices(table: Table) -> list[Fault]:
    """Return a fault for every price that is higher than the price of a smaller quantity."""
    names = ("cost", *table.numbered(PREFIX + NUMBERED).values())
    faults: list[Fault] = []
    if len(names) == 1:
        return faults
    for row in range(len(table)):
        lowest, below = float("inf"), ""
        for name in names:
            price = float(table.numbers(name)[row])
            if price > lowest:
                expected = (
                    f"at most {lowest:g}, the price in {below}: a price does not rise with the quantity"
                )
                faults.append(table.fault(row, name, expected))
            elif price == price:
                lowest, below = price, name
    return faults


def breaks_of(table: Table) -> list[Breaks]:
    """Return the quantity breaks of each row of a table without faults."""
    numbered = table.numbered(PREFIX + NUMBERED)
    prices = {pieces: table.numbers(name).tolist() for pieces, name in numbered.items()}
    return [
        tuple((pieces, column[row]) for pieces, column in prices.items() if column[row] == column[row])
        for row in range(len(table))
    ]


def stated_break(part: Priced, column: str) -> float | None:
    """Return the price that stands in a column such as "cost_10", None where the row leaves it empty."""
    return next((price for pieces, price in part.cost_breaks if column == f"{PREFIX}{pieces}"), None)


def cost_breaks(parts: Sequence[Priced]) -> CostBreaks:
    """Gather the prices of parts into arrays, in the order given."""
    pieces = sorted({1, *(least for part in parts for least, _ in part.cost_breaks)})
    price = np.array([[price_each(part, count) for count in pieces] for part in parts], dtype=np.float64)
    arrays = CostBreaks(np.array(pieces, dtype=np.int64), price.reshape(len(parts), len(pieces)))
    arrays.pieces.setflags(write=False)
    arrays.price.setflags(write=False)
    return arrays
