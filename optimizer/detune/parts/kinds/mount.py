"""Mounts: the columns of a mount list, one mount, and many mounts as arrays.

Local axes of a part: z is its own axis, x and y are lateral. Stiffness under a steady load (static) and for
vibration (dynamic) are two figures and never stand in for each other.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.units import STANDARD_GRAVITY
from detune.parts.assumed import Assumed
from detune.parts.columns import Column, Limits
from detune.parts.kinds.mount_rules import DAMPING, FAMILY_TOLERANCE, check
from detune.parts.table import Table

__all__ = ["COLUMNS", "Axes", "Mount", "MountArrays", "build", "check", "mount_arrays", "value"]

_POSITIVE = Limits(low=0.0, low_open=True)
_NOT_NEGATIVE = Limits(low=0.0)
_ABSOLUTE_ZERO = Limits(low=-273.15)
_ONE = "none; each row fills one damping column"
_PAIR = "none; static and dynamic are stated both or neither"

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("family", "text", "", "rubber, spring, or another word", True, "none"),
    Column("stiffness_z_static", "stiffness", "N/mm", "axial stiffness under a steady load",
           True, "none", _POSITIVE),
    Column("stiffness_z_dynamic", "stiffness", "N/mm", "axial stiffness in vibration",
           True, "none", _POSITIVE),
    Column("stiffness_x_static", "stiffness", "N/mm", "lateral stiffness under a steady load",
           False, _PAIR, _POSITIVE),
    Column("stiffness_x_dynamic", "stiffness", "N/mm", "lateral stiffness in vibration",
           False, _PAIR, _POSITIVE),
    Column("stiffness_y_static", "stiffness", "N/mm", "stiffness in the other lateral direction, steady load",
           False, "as stiffness_x_static", _POSITIVE),
    Column("stiffness_y_dynamic", "stiffness", "N/mm", "stiffness in the other lateral direction, vibration",
           False, "as stiffness_x_dynamic", _POSITIVE),
    Column("loss_factor", "ratio", "", "loss factor of the dynamic stiffness, all axes",
           False, _ONE, Limits(0.0, 1.5)),
    Column("damping_ratio", "ratio", "", "viscous damping ratio at load_rated, each axis",
           False, _ONE, Limits(0.0, 1.0)),
    Column("viscous", "damping", "N s/m", "axial damping coefficient",
           False, _ONE, _NOT_NEGATIVE),
    Column("viscous_lateral", "damping", "N s/m", "lateral damping coefficient, beside viscous",
           False, "assumed: 0 N s/m", _NOT_NEGATIVE),
    Column("amplification", "ratio", "", "amplification at resonance, read as 1 / loss factor",
           False, _ONE, Limits(1.0, 1000.0, low_open=True)),
    Column("load_min", "force", "N", "least static axial load, compression positive", True, "none"),
    Column("load_max", "force", "N", "greatest static axial load", True, "none", _POSITIVE),
    Column("load_rated", "force", "N", "rated static axial load", False, "none", _POSITIVE),
    Column("deflection_max", "length", "mm", "greatest axial deflection from free, all causes together",
           False, "no limit of the part's own", _POSITIVE),
    Column("pulls", "yes-no", "", "whether the mount may be in tension", False, "assumed: no"),
    Column("free_height", "length", "mm", "height without load", False, "none", _POSITIVE),
    Column("mass", "mass", "kg", "mass of one mount", False, "none", _POSITIVE),
    Column("cost", "cost", "", "price of one mount, every list in one currency", True, "none", _POSITIVE),
    Column("tolerance", "ratio", "%", "stiffness of a delivered mount, plus or minus",
           False, "assumed: rubber 15 %, spring 10 %; none for another family",
           Limits(0.0, 1.0, high_open=True)),
    Column("temperature_min", "temperature", "degC", "least temperature in use",
           False, "none", _ABSOLUTE_ZERO),
    Column("temperature_max", "temperature", "degC", "greatest temperature in use",
           False, "none", _ABSOLUTE_ZERO),
    Column("stock", "count", "", "mounts that can be had", False, "no limit", _NOT_NEGATIVE),
)  # fmt: skip

Axes = tuple[float | None, float | None, float]
"""Figures along x, y, z; x and y are None where the list states nothing lateral."""


@dataclass(frozen=True, slots=True)
class Mount:
    """One row of a mount list, in SI, with where it came from.

    stiffness_static, stiffness_dynamic: N/m. loss_factor: of the dynamic stiffness. viscous: N s/m. The two
    damping figures add up; a list states one, and the other is 0. damping_from: the column it came from, and
    damping_stated its number there (SI). load_min, load_max, load_rated: static axial load, N, compression
    positive. deflection_max: axial, from free, m. tolerance: of both stiffnesses, as a ratio.
    temperature_min, temperature_max: degC. None stands where the list states nothing.
    """

    catalog: str
    file: str
    line: int
    part: str
    family: str
    stiffness_static: Axes
    stiffness_dynamic: Axes
    loss_factor: Axes
    viscous: Axes
    damping_from: str
    damping_stated: float
    load_min: float
    load_max: float
    load_rated: float | None
    deflection_max: float | None
    pulls: bool
    free_height: float | None
    mass: float | None
    cost: float
    tolerance: float
    temperature_min: float | None
    temperature_max: float | None
    stock: int | None


def build(table: Table, catalog: str) -> tuple[tuple[Mount, ...], tuple[Assumed, ...]]:
    """Make the mounts of a table without faults, and list what was assumed for them. catalog: its name."""
    static, dynamic = _stiffness(table, "static"), _stiffness(table, "dynamic")
    loss_factor, viscous, damping_from, damping_stated = _damping(table, dynamic)
    families = table.texts("family")
    by_family = [FAMILY_TOLERANCE.get(family, math.nan) for family in families]
    tolerance = np.where(table.given("tolerance"), table.numbers("tolerance"), by_family)
    stock = [None if count is None else int(count) for count in _optional(table, "stock")]
    rows = zip(
        table.lines,
        table.texts("part"),
        families,
        _axes(static),
        _axes(dynamic),
        _axes(loss_factor),
        _axes(viscous),
        damping_from,
        damping_stated,
        table.numbers("load_min").tolist(),
        table.numbers("load_max").tolist(),
        _optional(table, "load_rated"),
        _optional(table, "deflection_max"),
        table.flags("pulls").tolist(),
        _optional(table, "free_height"),
        _optional(table, "mass"),
        table.numbers("cost").tolist(),
        tolerance.tolist(),
        _optional(table, "temperature_min"),
        _optional(table, "temperature_max"),
        stock,
        strict=True,
    )
    return tuple(Mount(catalog, table.file, *row) for row in rows), _assumed(table, catalog)


def _optional(table: Table, name: str) -> list[float | None]:
    return [None if number != number else number for number in table.numbers(name).tolist()]


def _axes(figures: NDArray[np.float64]) -> list[Axes]:
    return [(None if x != x else x, None if y != y else y, z) for x, y, z in figures.tolist()]


def _stiffness(table: Table, state: str) -> NDArray[np.float64]:
    x, y, z = (table.numbers(f"stiffness_{axis}_{state}") for axis in "xyz")
    return np.column_stack([x, np.where(np.isnan(y), x, y), z])


def _damping(
    table: Table, dynamic: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], list[str], list[float]]:
    """Return loss factor (n, 3), viscous coefficient (n, 3), and the column and number each came from.

    A damping ratio z at the rated load is c = 2 z sqrt(k m) on each axis, with the axis's own dynamic
    stiffness k and m = load / standard gravity (definition of the ratio of one mass on one spring). An
    amplification Q is the loss factor 1/Q: at resonance a mass on k (1 + j eta) moves 1/eta times its static
    deflection.
    """
    stated = np.array([table.numbers(name) for name in DAMPING])
    column = np.argmax(~np.isnan(stated), axis=0)
    loss_factor, ratio, coefficient, amplification = stated
    lateral = np.where(np.isnan(dynamic), math.nan, 0.0)
    eta = np.where(np.isnan(loss_factor), 1.0 / amplification, loss_factor)
    eta = np.where(np.isnan(eta), 0.0, eta)
    rated_mass = table.numbers("load_rated") / STANDARD_GRAVITY
    viscous = 2.0 * ratio[:, None] * np.sqrt(dynamic) * np.sqrt(rated_mass[:, None])
    across = np.where(table.given("viscous_lateral"), table.numbers("viscous_lateral"), 0.0)
    given = np.column_stack([across, across, coefficient])
    viscous = np.where(np.isnan(coefficient)[:, None], viscous, given)
    viscous = np.where(np.isnan(viscous), 0.0, viscous)
    numbers = stated[column, np.arange(len(table))].tolist()
    return eta[:, None] + lateral, viscous + lateral, [DAMPING[place] for place in column], numbers


def _assumed(table: Table, catalog: str) -> tuple[Assumed, ...]:
    parts, families = table.texts("part"), table.texts("family")
    x, y = table.given("stiffness_x_static"), table.given("stiffness_y_static")
    silent = table.given("viscous") & x & ~table.given("viscous_lateral")
    amplified = table.numbers("amplification") < 5.0
    found: list[Assumed] = []

    def note(mask: NDArray[np.bool_], what: str, value: str, why: str) -> None:
        found.extend(Assumed(catalog, parts[int(row)], what, value, why) for row in np.flatnonzero(mask))

    untold = ~table.given("tolerance")
    for family, ratio in FAMILY_TOLERANCE.items():
        of_family = np.array([name == family for name in families], dtype=np.bool_)
        note(
            untold & of_family, "tolerance", f"{100 * ratio:g} %", f"common practice for the family {family}"
        )
    note(x & ~y, "stiffness_y", "as stiffness_x", "the list states one lateral stiffness")
    note(~table.given("pulls"), "pulls", "no", "not stated to hold in tension")
    note(silent, "viscous_lateral", "0 N s/m", "the list states axial damping only")
    note(amplified, "loss_factor", "1 / amplification",
         "below an amplification of 5 a viscous mount of the same peak is damped otherwise")  # fmt: skip
    return tuple(found)


def value(mount: Mount, column: str) -> float | str | bool | None:
    """Return what the list states in a column, in SI (degC for a temperature), None where it states nothing.

    Assumed figures are returned as well. Raises KeyError for a name that is no column.
    """
    if column in DAMPING:
        return mount.damping_stated if mount.damping_from == column else None
    if column == "viscous_lateral":
        return mount.viscous[0] if mount.damping_from == "viscous" else None
    if column.startswith("stiffness_"):
        _, axis, state = column.split("_")
        axes = mount.stiffness_static if state == "static" else mount.stiffness_dynamic
        return axes["xyz".index(axis)]
    if column not in _PLAIN_COLUMNS:
        raise KeyError(column)
    stated: float | str | bool | None = getattr(mount, column)
    return stated


_PLAIN_COLUMNS = {column.name for column in COLUMNS} & set(Mount.__slots__)


@dataclass(frozen=True, slots=True, eq=False)
class MountArrays:
    """P mounts as read-only arrays, SI. Columns of the (P, 3) arrays are the local axes x, y, z.

    Where a part states none, lateral figures, free_height and mass are nan and deflection_max is inf.
    """

    stiffness_static: NDArray[np.float64]
    stiffness_dynamic: NDArray[np.float64]
    loss_factor: NDArray[np.float64]
    viscous: NDArray[np.float64]
    load_min: NDArray[np.float64]
    load_max: NDArray[np.float64]
    deflection_max: NDArray[np.float64]
    free_height: NDArray[np.float64]
    mass: NDArray[np.float64]
    cost: NDArray[np.float64]
    pulls: NDArray[np.bool_]
    tolerance: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.cost)


def mount_arrays(mounts: Iterable[Mount]) -> MountArrays:
    """Gather mounts into arrays, in the order given."""
    parts = tuple(mounts)

    def frozen(values: NDArray[np.float64]) -> NDArray[np.float64]:
        values.setflags(write=False)
        return values

    def axes(figures: Sequence[Axes]) -> NDArray[np.float64]:
        return frozen(np.array(figures, dtype=np.float64).reshape(len(parts), 3))

    def column(figures: Sequence[float | None], absent: float = math.nan) -> NDArray[np.float64]:
        return frozen(
            np.array([absent if figure is None else figure for figure in figures], dtype=np.float64)
        )

    pulls = np.array([part.pulls for part in parts], dtype=np.bool_)
    pulls.setflags(write=False)
    return MountArrays(
        stiffness_static=axes([part.stiffness_static for part in parts]),
        stiffness_dynamic=axes([part.stiffness_dynamic for part in parts]),
        loss_factor=axes([part.loss_factor for part in parts]),
        viscous=axes([part.viscous for part in parts]),
        load_min=column([part.load_min for part in parts]),
        load_max=column([part.load_max for part in parts]),
        deflection_max=column([part.deflection_max for part in parts], math.inf),
        free_height=column([part.free_height for part in parts]),
        mass=column([part.mass for part in parts]),
        cost=column([part.cost for part in parts]),
        pulls=pulls,
        tolerance=column([part.tolerance for part in parts]),
    )
