"""Mounts as arrays, and the column table of the documentation."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from detune.ground.units import KINDS as UNIT_KINDS
from detune.ground.units import parse_column
from detune.parts.catalog import read_catalog
from detune.parts.columns import Column, Limits, markdown_table, split_header
from detune.parts.kinds import KINDS
from detune.parts.kinds.mount import COLUMNS, mount_arrays


def test_arrays_hold_what_the_mounts_state(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    lateral = ("stiffness_x_static [N/mm]", "stiffness_x_dynamic [N/mm]")
    absent = (*lateral, "deflection_max [mm]", "free_height [mm]", "mass [kg]")
    cells = {(3, header): "" for header in absent} | {(3, "pulls"): "yes", (3, "cost"): "31"}
    parts = read_catalog(write(make_list(2, cells)), "trees").parts
    arrays = mount_arrays(parts)
    assert len(arrays) == 2
    nan, inf = np.nan, np.inf
    np.testing.assert_allclose(arrays.stiffness_static, [[40e3, 40e3, 160e3], [nan, nan, 160e3]])
    np.testing.assert_allclose(arrays.stiffness_dynamic, [[50e3, 50e3, 200e3], [nan, nan, 200e3]])
    np.testing.assert_allclose(arrays.loss_factor, [[0.1, 0.1, 0.1], [nan, nan, 0.1]])
    np.testing.assert_allclose(arrays.viscous, [[0, 0, 0], [nan, nan, 0]])
    np.testing.assert_allclose(arrays.load_min, [200, 200])
    np.testing.assert_allclose(arrays.load_max, [1200, 1200])
    np.testing.assert_allclose(arrays.deflection_max, [0.012, inf])
    np.testing.assert_allclose(arrays.free_height, [0.04, nan])
    np.testing.assert_allclose(arrays.mass, [0.35, nan])
    np.testing.assert_allclose(arrays.cost, [24.5, 31])
    np.testing.assert_allclose(arrays.tolerance, [0.15, 0.15])
    assert arrays.pulls.tolist() == [False, True]
    with pytest.raises(ValueError, match="read-only"):
        arrays.cost[0] = 1.0


def test_arrays_of_no_mounts_have_their_shapes() -> None:
    arrays = mount_arrays([])
    assert arrays.stiffness_static.shape == (0, 3)
    assert (len(arrays), arrays.pulls.shape) == (0, (0,))


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_declares_readable_columns(kind: str) -> None:
    columns = KINDS[kind].COLUMNS
    assert columns[0].name == "part"
    assert len({column.name for column in columns}) == len(columns)
    for column in columns:
        assert column.meaning and column.default
        assert split_header(column.header) == (column.name, column.unit or None)
        if column.numeric:
            assert column.kind in UNIT_KINDS
            parse_column(column.unit, column.kind)


def test_column_table_in_markdown() -> None:
    columns = [
        Column("mass", "mass", "kg", "mass of one", True, "none", Limits(low=0.0, low_open=True)),
        Column("pulls", "yes-no", "", "a | b", False, "assumed: no"),
    ]
    assert markdown_table(columns).splitlines() == [
        "| header | kind | meaning | required | when empty | allowed |",
        "|---|---|---|---|---|---|",
        "| `mass [kg]` | mass | mass of one | yes | none | above 0 kg |",
        "| `pulls` | yes-no | a \\| b | no | assumed: no |  |",
    ]
    assert len(markdown_table(COLUMNS).splitlines()) == len(COLUMNS) + 2


def test_limits_leave_nan_alone_and_mind_their_ends() -> None:
    values = np.array([-1.0, 0.0, 0.5, 1.0, 2.0, np.nan])
    closed, opened = Limits(0.0, 1.0), Limits(0.0, 1.0, low_open=True, high_open=True)
    assert closed.outside(values).tolist() == [True, False, False, False, True, False]
    assert opened.outside(values).tolist() == [True, True, False, True, True, False]
    assert closed.words("ratio") == "at least 0 and at most 1"
    assert opened.words("ratio") == "above 0 and below 1"
