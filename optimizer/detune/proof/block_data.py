"""Named tuples of arrays that the block search passes around; compiled and plain code use the same ones."""

from __future__ import annotations

from typing import NamedTuple

from detune.proof.selection_data import Floats, Integers


class Frame(NamedTuple):
    """What all nodes of a table share: rows (R, n) with a window, and the static load (n,)."""

    rows: Floats
    load: Floats


class Domain(NamedTuple):
    """Parts still possible for one group, P lanes in one order.

    matrix_map (m, 3); static, dynamic (3, P); cost (P,); lower, upper (S_g, P) with the search's slack; first_row: row
    of the group's first station in the frame.
    """

    matrix_map: Floats
    static: Floats
    dynamic: Floats
    cost: Floats
    lower: Floats
    upper: Floats
    first_row: int


class Ask(NamedTuple):
    """What a design must reach: bands (3, I) low, high, separation; cost cap; the archive's staircase.

    flags (2,): whether a required value acts on the bands, and on the static windows.
    """

    bands: Floats
    cap: float
    steps: Floats
    values: Floats
    flags: Integers


class Node(NamedTuple):
    """A prefix: packed static and dynamic stiffness (m,), cost, and windows (R,) of all rows."""

    static: Floats
    dynamic: Floats
    cost: float
    row_low: Floats
    row_high: Floats


class Bench(NamedTuple):
    """Work space for one block of 64: two blocks with room for their solutions, windows, lane arrays."""

    soft: Floats
    stiff: Floats
    window_low: Floats
    window_high: Floats
    cost: Floats
    need: Floats
    fails: Floats
    eigen_fails: Floats
    axis: Floats
    scratch: Floats
    lane_u: Integers
    lane_v: Integers
