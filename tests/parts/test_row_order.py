"""What a row means does not depend on where it stands, nor on the order of the columns."""

from __future__ import annotations

import csv
import dataclasses
import io
from pathlib import Path
from random import Random
from tempfile import TemporaryDirectory

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.errors import BriefError
from detune.parts.catalog import Catalog, read_catalog

RUBBER = Path(__file__).parents[2] / "catalogs" / "rubber.csv"
HEADER, *ROWS = list(csv.reader(RUBBER.read_text(encoding="utf-8").splitlines()))


def read(header: list[str], rows: list[list[str]]) -> Catalog:
    text = io.StringIO()
    csv.writer(text).writerows([header, *rows])
    with TemporaryDirectory() as folder:
        path = Path(folder) / "list.csv"
        path.write_text(text.getvalue(), encoding="utf-8", newline="")
        return read_catalog(path, "rubber")


def by_number(catalog: Catalog) -> dict[str, object]:
    return {part.part: dataclasses.replace(part, line=0, file="") for part in catalog.parts}


EXPECTED = by_number(read(HEADER, ROWS))


@settings(deadline=None, max_examples=25)
@given(st.randoms(use_true_random=False))
def test_order_of_rows_and_columns(random: Random) -> None:
    rows = random.sample(ROWS, len(ROWS))
    places = random.sample(range(len(HEADER)), len(HEADER))
    catalog = read([HEADER[place] for place in places], [[row[place] for place in places] for row in rows])
    assert by_number(catalog) == EXPECTED
    assert [part.part for part in catalog.parts] == [row[0] for row in rows]
    assert [part.line for part in catalog.parts] == list(range(2, len(rows) + 2))
    assert {(item.part, item.what) for item in catalog.assumed} == {
        (item.part, item.what) for item in read(HEADER, ROWS).assumed
    }


@settings(deadline=None, max_examples=40)
@given(
    st.dictionaries(
        st.tuples(st.integers(0, 19), st.integers(0, len(HEADER) - 1)),
        st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=6)
        | st.sampled_from(["nan", "-1", "0", "1e400", "1,5", "yes", "1e-400"]),
        min_size=1,
        max_size=6,
    )
)
def test_whatever_stands_in_a_cell_is_read_or_named(spoilt: dict[tuple[int, int], str]) -> None:
    """No other error than a BriefError, and none without a line of a spoilt row or of its double."""
    rows = [list(row) for row in ROWS[:20]]
    for (row, place), text in spoilt.items():
        rows[row][place] = text
    try:
        catalog = read(HEADER, rows)
    except BriefError as error:
        assert all(fault.line is not None and fault.line >= 2 for fault in error.faults)
        assert all(fault.expected and fault.where for fault in error.faults)
    else:
        for part in catalog.parts:
            assert all(k is None or k > 0 for k in (*part.stiffness_static, *part.stiffness_dynamic))
            assert part.load_min <= part.load_max
            assert 0 <= part.loss_factor[2] <= 1.5


def test_empty_optional_cells_do_not_shift_a_row() -> None:
    with pytest.raises(BriefError):
        read(HEADER, [ROWS[0][1:]])
