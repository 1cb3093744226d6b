"""Tuned absorbers: a mass on a damped spring that takes the motion of the place it is fixed to."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.ground.units import show
from detune.parts.assumed import Assumed
from detune.parts.columns import Column, Limits
from detune.parts.kinds.rows import column_array, optional, stated, whole
from detune.parts.prices import COST_COLUMNS, Breaks, CostBreaks, breaks_of, check_prices, cost_breaks
from detune.parts.table import Table, rows_of

_POSITIVE = Limits(low=0.0, low_open=True)

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("mass", "mass", "kg", "moving mass", True, "none", _POSITIVE),
    Column("mass_fixed", "mass", "kg", "mass of the frame, which moves with the machine", False,
           "assumed: 0 kg", Limits(low=0.0)),
    Column("frequency", "frequency", "Hz", "tuning: undamped natural frequency on a fixed base", True, "none",
           _POSITIVE),
    Column("frequency_min", "frequency", "Hz", "least tuning that can be set", False, "not adjustable",
           _POSITIVE),
    Column("frequency_max", "frequency", "Hz", "greatest tuning that can be set", False, "not adjustable",
           _POSITIVE),
    Column("damping_ratio", "ratio", "", "viscous damping ratio on a fixed base", True, "none",
           Limits(0.0, 1.0)),
    Column("stroke", "length", "mm", "greatest peak motion of the moving mass against its frame", True, "none",
           _POSITIVE),
    Column("tolerance", "ratio", "%", "tuning frequency of a delivered absorber, plus or minus", True, "none",
           Limits(0.0, 0.5)),
    *COST_COLUMNS,
    Column("stock", "count", "", "absorbers that can be had", False, "no limit", Limits(low=0.0)),
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Absorber:
    """One row of an absorber list, in SI. mass: moving, kg. frequency: tuning, Hz. stroke: peak, m.

    It acts along its own axis z. tolerance: of the tuning frequency, as a ratio. frequency_min and
    frequency_max: between which it can be set, None when it cannot.
    """

    catalog: str
    file: str
    line: int
    part: str
    mass: float
    mass_fixed: float
    frequency: float
    frequency_min: float | None
    frequency_max: float | None
    damping_ratio: float
    stroke: float
    tolerance: float
    cost: float
    stock: int | None
    cost_breaks: Breaks = ()


@dataclass(frozen=True, slots=True, eq=False)
class AbsorberArrays:
    """P absorbers as read-only arrays (P,), SI.

    stiffness k = m (2 pi f)^2 in N/m and viscous c = 2 z m 2 pi f in N s/m, by definition of the tuning f and
    the ratio z of one mass on one spring. stiffness_low and stiffness_high are k at the ends of the tolerance.
    """

    mass: NDArray[np.float64]
    mass_fixed: NDArray[np.float64]
    stiffness: NDArray[np.float64]
    stiffness_low: NDArray[np.float64]
    stiffness_high: NDArray[np.float64]
    viscous: NDArray[np.float64]
    stroke: NDArray[np.float64]
    cost: NDArray[np.float64]
    cost_breaks: CostBreaks

    def __len__(self) -> int:
        return len(self.cost)


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row."""
    faults = []
    low, tuned, high = (table.numbers(name) for name in ("frequency_min", "frequency", "frequency_max"))
    for name, other in (("frequency_min", "frequency_max"), ("frequency_max", "frequency_min")):
        for row in rows_of(table.given(other) & ~table.given(name)):
            if table.has(name):
                faults.append(table.fault(row, name, f"a frequency, because {other} is stated"))
        if table.given(other).any() and not table.has(name):
            faults.append(table.header_fault(name, f"a column of this name, because {other} is stated"))
    for row in rows_of((tuned < low) | (tuned > high)):
        range_ = f"{show(float(low[row]), 'frequency')} and {show(float(high[row]), 'frequency')}"
        faults.append(table.fault(row, "frequency", f"a tuning between {range_}"))
    return [*faults, *check_prices(table)]


def build(table: Table, catalog: str) -> tuple[tuple[Absorber, ...], tuple[Assumed, ...]]:
    """Make the absorbers of a table without faults, and list what was assumed. catalog: its name."""
    told = table.given("mass_fixed")
    rows = zip(
        table.lines,
        table.texts("part"),
        table.numbers("mass").tolist(),
        np.where(told, table.numbers("mass_fixed"), 0.0).tolist(),
        table.numbers("frequency").tolist(),
        optional(table, "frequency_min"),
        optional(table, "frequency_max"),
        table.numbers("damping_ratio").tolist(),
        table.numbers("stroke").tolist(),
        table.numbers("tolerance").tolist(),
        table.numbers("cost").tolist(),
        whole(table, "stock"),
        breaks_of(table),
        strict=True,
    )
    parts = table.texts("part")
    found = tuple(
        Assumed(catalog, parts[row], "mass_fixed", "0 kg", "the list states the moving mass only")
        for row in rows_of(~told)
    )
    return tuple(Absorber(catalog, table.file, *row) for row in rows), found


def value(absorber: Absorber, column: str) -> float | str | bool | None:
    """Return an absorber's figure in a column, in SI, None where the list states nothing. Raises KeyError."""
    return stated(absorber, column, COLUMNS)


def files(absorber: Absorber) -> tuple[str, ...]:
    """Return the further files that the row was read from: none."""
    return ()


def absorber_arrays(absorbers: Iterable[Absorber]) -> AbsorberArrays:
    """Gather absorbers into arrays, in the order given."""
    parts = tuple(absorbers)

    def stiffness(share: float) -> NDArray[np.float64]:
        omega = [2.0 * math.pi * part.frequency * (1.0 + share * part.tolerance) for part in parts]
        return column_array([part.mass * w**2 for part, w in zip(parts, omega, strict=True)])

    return AbsorberArrays(
        mass=column_array([part.mass for part in parts]),
        mass_fixed=column_array([part.mass_fixed for part in parts]),
        stiffness=stiffness(0.0),
        stiffness_low=stiffness(-1.0),
        stiffness_high=stiffness(1.0),
        viscous=column_array([4.0 * math.pi * p.damping_ratio * p.mass * p.frequency for p in parts]),
        stroke=column_array([part.stroke for part in parts]),
        cost=column_array([part.cost for part in parts]),
        cost_breaks=cost_breaks(parts),
    )
