"""Ballast: plates and blocks that are bolted to a machine to make it heavier or to move its centre."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.ground.units import show
from detune.parts.assumed import Assumed
from detune.parts.columns import Column, Limits
from detune.parts.kinds.rows import column_array, stated, whole
from detune.parts.prices import COST_COLUMNS, Breaks, CostBreaks, breaks_of, check_prices, cost_breaks
from detune.parts.table import Table, rows_of

_POSITIVE = Limits(low=0.0, low_open=True)

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("mass", "mass", "kg", "mass of one piece", True, "none", _POSITIVE),
    Column("length", "length", "mm", "size along its own x", True, "none", _POSITIVE),
    Column("width", "length", "mm", "size along its own y", True, "none", _POSITIVE),
    Column("height", "length", "mm", "size along its own z", True, "none", _POSITIVE),
    Column("tolerance", "ratio", "%", "mass of a delivered piece, plus or minus", False, "assumed: 5 %",
           Limits(0.0, 1.0, high_open=True)),
    *COST_COLUMNS,
    Column("stock", "count", "", "pieces that can be had", False, "no limit", Limits(low=0.0)),
)  # fmt: skip

TOLERANCE = 0.05
"""Tolerance of a mass where a list states none: common practice of the trade."""

_DENSEST = 12000.0
"""Lead is 11,340 kg/m^3; a denser piece of ballast is an error of unit."""


@dataclass(frozen=True, slots=True)
class Ballast:
    """One row of a ballast list, in SI: a block of even density. mass: kg. length, width, height: m.

    tolerance: of the mass, as a ratio.
    """

    catalog: str
    file: str
    line: int
    part: str
    mass: float
    length: float
    width: float
    height: float
    tolerance: float
    cost: float
    stock: int | None
    cost_breaks: Breaks = ()


@dataclass(frozen=True, slots=True, eq=False)
class BallastArrays:
    """P pieces as read-only arrays, SI. mass, tolerance, cost (P,); size (P, 3) along x, y, z, m.

    inertia (P, 3): about the piece's own centre and axes, kg m^2, of a block of even density:
    m (b^2 + c^2) / 12 about the axis across b and c.
    """

    mass: NDArray[np.float64]
    size: NDArray[np.float64]
    inertia: NDArray[np.float64]
    tolerance: NDArray[np.float64]
    cost: NDArray[np.float64]
    cost_breaks: CostBreaks

    def __len__(self) -> int:
        return len(self.cost)


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row."""
    faults = []
    with np.errstate(all="ignore"):
        volume = np.prod([table.numbers(name) for name in ("length", "width", "height")], axis=0)
        dense = table.numbers("mass") > _DENSEST * volume
    for row in rows_of(dense):
        most = show(float(_DENSEST * volume[row]), "mass")
        expected = f"at most {most}, a block of lead of this size: more is an error of unit"
        faults.append(table.fault(row, "mass", expected))
    return [*faults, *check_prices(table)]


def build(table: Table, catalog: str) -> tuple[tuple[Ballast, ...], tuple[Assumed, ...]]:
    """Make the pieces of a table without faults, and list what was assumed for them. catalog: its name."""
    told = table.given("tolerance")
    rows = zip(
        table.lines,
        table.texts("part"),
        *(table.numbers(name).tolist() for name in ("mass", "length", "width", "height")),
        np.where(told, table.numbers("tolerance"), TOLERANCE).tolist(),
        table.numbers("cost").tolist(),
        whole(table, "stock"),
        breaks_of(table),
        strict=True,
    )
    why = "common practice for a mass"
    parts = table.texts("part")
    found = tuple(
        Assumed(catalog, parts[row], "tolerance", f"{100 * TOLERANCE:g} %", why) for row in rows_of(~told)
    )
    return tuple(Ballast(catalog, table.file, *row) for row in rows), found


def value(ballast: Ballast, column: str) -> float | str | bool | None:
    """Return a piece's figure in a column, in SI, None where the list states nothing. Raises KeyError."""
    return stated(ballast, column, COLUMNS)


def files(ballast: Ballast) -> tuple[str, ...]:
    """Return the further files that the row was read from: none."""
    return ()


def ballast_arrays(pieces: Iterable[Ballast]) -> BallastArrays:
    """Gather pieces of ballast into arrays, in the order given."""
    parts = tuple(pieces)
    mass = np.array([part.mass for part in parts], dtype=np.float64)
    size = np.array([(p.length, p.width, p.height) for p in parts], dtype=np.float64).reshape(len(parts), 3)
    square = size**2
    inertia = mass[:, None] * (square.sum(axis=1, keepdims=True) - square) / 12.0
    for array in (mass, size, inertia):
        array.setflags(write=False)
    return BallastArrays(
        mass=mass,
        size=size,
        inertia=inertia,
        tolerance=column_array([part.tolerance for part in parts]),
        cost=column_array([part.cost for part in parts]),
        cost_breaks=cost_breaks(parts),
    )
