"""Dampers: a dashpot beside a mount, along its own axis and perhaps across it. It carries no static load."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
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
_NOT_NEGATIVE = Limits(low=0.0)

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("viscous", "damping", "N s/m", "axial damping coefficient", True, "none", _POSITIVE),
    Column("viscous_lateral", "damping", "N s/m", "lateral damping coefficient, both directions", False,
           "assumed: 0 N s/m", _NOT_NEGATIVE),
    Column("stiffness_series", "stiffness", "N/mm", "axial stiffness of rod and eyes, in series with the"
           " dashpot", False, "rigid", _POSITIVE),
    Column("stroke", "length", "mm", "whole travel from end to end, fitted at its middle", True, "none",
           _POSITIVE),
    Column("force_max", "force", "N", "greatest damping force", False, "none", _POSITIVE),
    Column("tolerance", "ratio", "%", "damping coefficient of a delivered damper, plus or minus", False,
           "assumed: 30 %", Limits(0.0, 1.0, high_open=True)),
    Column("mass", "mass", "kg", "mass of one damper", False, "none", _POSITIVE),
    *COST_COLUMNS,
    Column("temperature_min", "temperature", "degC", "least temperature in use", False, "none",
           Limits(low=-273.15)),
    Column("temperature_max", "temperature", "degC", "greatest temperature in use", False, "none",
           Limits(low=-273.15)),
    Column("stock", "count", "", "dampers that can be had", False, "no limit", _NOT_NEGATIVE),
)  # fmt: skip

TOLERANCE = 0.30
"""Tolerance of a damping coefficient where a list states none: common practice of the trade."""


@dataclass(frozen=True, slots=True)
class Damper:
    """One row of a damper list, in SI. None where the list states nothing.

    viscous, viscous_lateral: N s/m. stiffness_series: N/m, None for rigid; with it the axial dynamic
    stiffness is j w c k / (k + j w c). stroke: end to end, m, so that it may move half of it either way.
    tolerance: of the coefficients, as a ratio.
    """

    catalog: str
    file: str
    line: int
    part: str
    viscous: float
    viscous_lateral: float
    stiffness_series: float | None
    stroke: float
    force_max: float | None
    tolerance: float
    mass: float | None
    cost: float
    temperature_min: float | None
    temperature_max: float | None
    stock: int | None
    cost_breaks: Breaks = ()


@dataclass(frozen=True, slots=True, eq=False)
class DamperArrays:
    """P dampers as read-only arrays (P,), SI. Rigid: stiffness_series is inf. No limit: force_max is inf.

    mass is nan where a list states none.
    """

    viscous: NDArray[np.float64]
    viscous_lateral: NDArray[np.float64]
    stiffness_series: NDArray[np.float64]
    stroke: NDArray[np.float64]
    force_max: NDArray[np.float64]
    tolerance: NDArray[np.float64]
    mass: NDArray[np.float64]
    cost: NDArray[np.float64]
    cost_breaks: CostBreaks

    def __len__(self) -> int:
        return len(self.cost)


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row."""
    return [*_temperature(table), *check_prices(table)]


def _temperature(table: Table) -> Iterator[Fault]:
    most = table.numbers("temperature_max")
    for row in rows_of(table.numbers("temperature_min") >= most):
        text = show(float(most[row]), "temperature")
        yield table.fault(row, "temperature_min", f"less than temperature_max, which is {text}")


def build(table: Table, catalog: str) -> tuple[tuple[Damper, ...], tuple[Assumed, ...]]:
    """Make the dampers of a table without faults, and list what was assumed for them. catalog: its name."""
    lateral, tolerance = table.given("viscous_lateral"), table.given("tolerance")
    rows = zip(
        table.lines,
        table.texts("part"),
        table.numbers("viscous").tolist(),
        np.where(lateral, table.numbers("viscous_lateral"), 0.0).tolist(),
        optional(table, "stiffness_series"),
        table.numbers("stroke").tolist(),
        optional(table, "force_max"),
        np.where(tolerance, table.numbers("tolerance"), TOLERANCE).tolist(),
        optional(table, "mass"),
        table.numbers("cost").tolist(),
        optional(table, "temperature_min"),
        optional(table, "temperature_max"),
        whole(table, "stock"),
        breaks_of(table),
        strict=True,
    )
    parts = table.texts("part")
    found = [
        Assumed(catalog, parts[row], "viscous_lateral", "0 N s/m", "the list states axial damping only")
        for row in rows_of(~lateral)
    ]
    found += [
        Assumed(catalog, parts[row], "tolerance", f"{100 * TOLERANCE:g} %", "common practice for damping")
        for row in rows_of(~tolerance)
    ]
    return tuple(Damper(catalog, table.file, *row) for row in rows), tuple(found)


def value(damper: Damper, column: str) -> float | str | bool | None:
    """Return a damper's figure in a column, in SI, None where the list states nothing. Raises KeyError."""
    return stated(damper, column, COLUMNS)


def files(damper: Damper) -> tuple[str, ...]:
    """Return the further files that the row was read from: none."""
    return ()


def damper_arrays(dampers: Iterable[Damper]) -> DamperArrays:
    """Gather dampers into arrays, in the order given."""
    parts = tuple(dampers)
    return DamperArrays(
        viscous=column_array([part.viscous for part in parts]),
        viscous_lateral=column_array([part.viscous_lateral for part in parts]),
        stiffness_series=column_array([part.stiffness_series for part in parts], math.inf),
        stroke=column_array([part.stroke for part in parts]),
        force_max=column_array([part.force_max for part in parts], math.inf),
        tolerance=column_array([part.tolerance for part in parts]),
        mass=column_array([part.mass for part in parts]),
        cost=column_array([part.cost for part in parts]),
        cost_breaks=cost_breaks(parts),
    )
