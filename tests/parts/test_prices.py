"""Quantity breaks: the price of one piece by how many are bought. Prices are read off the list by eye."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from detune.ground.errors import BriefError
from detune.parts.catalog import filter_parts, read_catalog
from detune.parts.columns import column_named, columns_for
from detune.parts.kinds.mount import COLUMNS, mount_arrays, value
from detune.parts.prices import lowest_price, price_each

BREAKS = {"cost_100": "15", "cost_10": "21.5"}


def test_price_of_each_by_the_quantity(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    part = read_catalog(write(make_list(1, add=BREAKS)), "trees").parts[0]
    assert part.cost_breaks == ((10, 21.5), (100, 15.0))
    expected = {1: 24.5, 9: 24.5, 10: 21.5, 99: 21.5, 100: 15.0, 5000: 15.0}
    assert {pieces: price_each(part, pieces) for pieces in expected} == expected
    assert lowest_price(part) == 15.0
    with pytest.raises(ValueError, match="one piece or more"):
        price_each(part, 0)


def test_row_without_breaks_has_one_price(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    part = read_catalog(write(make_list(1)), "trees").parts[0]
    assert (part.cost_breaks, price_each(part, 400), lowest_price(part)) == ((), 24.5, 24.5)


def test_arrays_of_parts_with_different_breaks(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    cells = {(3, "cost_10"): "", (3, "cost_100"): "", (4, "cost_10"): ""}
    catalog = read_catalog(write(make_list(3, cells, add=BREAKS)), "trees")
    arrays = mount_arrays(catalog.parts).cost_breaks
    assert arrays.pieces.tolist() == [1, 10, 100]
    np.testing.assert_array_equal(arrays.price, [[24.5, 21.5, 15], [24.5, 24.5, 24.5], [24.5, 24.5, 15]])
    np.testing.assert_array_equal(arrays.each(99), [21.5, 24.5, 24.5])
    np.testing.assert_array_equal(arrays.each(100), [15, 24.5, 15])
    with pytest.raises(ValueError, match="read-only"):
        arrays.price[0, 0] = 1.0
    assert mount_arrays([]).cost_breaks.price.shape == (0, 1)


@pytest.mark.parametrize(
    ("more", "cells", "line", "where", "expected"),
    [
        (BREAKS, {(3, "cost_10"): "30"}, 3, "cost_10", "at most 24.5, the price in cost"),
        (BREAKS, {(3, "cost_100"): "22"}, 3, "cost_100", "at most 21.5, the price in cost_10"),
        (
            BREAKS,
            {(3, "cost_10"): "", (3, "cost_100"): "25"},
            3,
            "cost_100",
            "at most 24.5, the price in cost",
        ),
        (BREAKS, {(2, "cost_100"): "0"}, 2, "cost_100", "a cost above 0"),
        (BREAKS, {(2, "cost_100"): "ask"}, 2, "cost_100", "a cost as a number"),
        ({"cost_1": "24"}, {}, 1, "cost_1", "the name of a column"),
        ({"cost_010": "24"}, {}, 1, "cost_010", "the name of a column"),
        ({"cost_ten": "24"}, {}, 1, "cost_ten", "the name of a column"),
        ({"cost_10 [kg]": "24"}, {}, 1, "cost_10 [kg]", "no unit, for a cost is a bare number"),
    ],
)
def test_prices_that_are_refused(
    more: dict[str, str],
    cells: dict[tuple[int, str], str],
    line: int,
    where: str,
    expected: str,
    make_list: Callable[..., str],
    write: Callable[..., Path],
) -> None:
    with pytest.raises(BriefError) as caught:
        read_catalog(write(make_list(2, cells, add=more)), "trees")
    (fault,) = caught.value.faults
    assert (fault.line, fault.where) == (line, where)
    assert expected in fault.expected


def test_break_from_a_supplier_sheet_and_as_a_filter(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(2, {(3, "From 25"): ""}, add={"From 25": "20"})
    catalog = read_catalog(write(text), "trees", "mount", {"cost_25": "From 25"})
    assert [part.cost_breaks for part in catalog.parts] == [((25, 20.0),), ()]
    assert (value(catalog.parts[0], "cost_25"), value(catalog.parts[1], "cost_25")) == (20.0, None)
    assert value(catalog.parts[0], "cost_50") is None
    kept, dropped = filter_parts(catalog, {"cost_25": {"max": 22.0}})
    assert kept == (0,)
    assert dropped == {1: "the list states no cost_25"}


def test_numbered_columns() -> None:
    made = [column.name for column in columns_for(COLUMNS, ["cost_100", "cost_20", "cost_1", "mass"])]
    assert made[made.index("cost") + 1 : made.index("tolerance")] == ["cost_20", "cost_100"]
    column = column_named(COLUMNS, "cost_20")
    assert column is not None and column.meaning == "price of each when 20 or more are bought"
    assert column_named(COLUMNS, "cost_<n>") is None
    assert column_named(COLUMNS, "cost_") is None


@given(
    st.dictionaries(st.integers(2, 999), st.integers(1, 500), max_size=5),
    st.integers(1, 1200),
    st.integers(0, 300),
)
def test_price_never_rises_and_is_never_below_the_lowest(
    falls: dict[int, int], pieces: int, more: int
) -> None:
    price, breaks = 3000.0, []
    for least in sorted(falls):
        price -= falls[least]
        breaks.append((least, price))

    class Priced:
        cost = 3000.0
        cost_breaks = tuple(breaks)

    here, there = price_each(Priced(), pieces), price_each(Priced(), pieces + more)
    assert lowest_price(Priced()) <= there <= here <= 3000.0
