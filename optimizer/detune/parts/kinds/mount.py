"""Mounts: one mount, made from a row of a mount list.

Local axes of a part: z is its own axis, x and y are lateral. Stiffness under a steady load (static) and for
vibration (dynamic) are two figures and never stand in for each other.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.units import STANDARD_GRAVITY, show
from detune.parts.assumed import Assumed
from detune.parts.kinds.mount_arrays import MountArrays, is_plain, mount_arrays
from detune.parts.kinds.mount_columns import COLUMNS
from detune.parts.kinds.mount_damping import DAMPING, UNKNOWN, Damping, damping
from detune.parts.kinds.mount_rules import FAMILY_TOLERANCE, check
from detune.parts.kinds.mount_stiffness import assumed_by_ratio, resolve
from detune.parts.kinds.rows import optional, stated, whole
from detune.parts.law_files import Laws, read_laws, related_tables
from detune.parts.laws import (
    AmplitudeTable,
    Axes,
    LawTable,
    LoadCurve,
    Relaxation,
    UnknownDamping,
    deflection_under,
)
from detune.parts.prices import Breaks, breaks_of
from detune.parts.table import Table, rows_of

__all__ = [
    "COLUMNS",
    "Axes",
    "Mount",
    "MountArrays",
    "amplitude_caution",
    "build",
    "check",
    "files",
    "is_plain",
    "mount_arrays",
    "value",
]


@dataclass(frozen=True, slots=True)
class Mount:
    """One row of a mount list, in SI, with where it came from.

    stiffness_static, stiffness_dynamic: N/m. loss_factor: of the dynamic stiffness. viscous: N s/m. The two
    damping figures add up; a list states one, and the other is 0. damping_from: the column it came from, and
    damping_stated its number there (SI). load_min, load_max, load_rated: static axial load, N, compression
    positive. deflection_max: axial, from free, m. tolerance: of both stiffnesses, as a ratio.
    temperature_min, temperature_max: degC. None stands where the list states nothing.

    What follows is for mounts that are not plain, see `is_plain` and `detune.parts.laws`. follows_load: an air
    spring, whose axial stiffnesses hold at load_rated. damping_kind: viscous, loss factor or unknown, of the
    stated figure. loss_factor of a mount with a table is the least of the table. amplitude_min and
    amplitude_max: of the peak dynamic axial deflection, m, for which the row holds. cost: of one piece.
    approximate: why the figures are an estimate, empty for a row of a list.

    What parts.compose puts together: base, the part number of the mount itself; pieces of it; the part number
    of a damper beside it, with damper_cost, its share of the cost, and its catalog, quantity breaks and stock.
    Of an absorber, which is a mount that carries nothing but its own mass: moving_mass, kg, riding_mass of its
    frame, kg, and stroke, m peak.
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
    cost_breaks: Breaks = ()
    damping_kind: str = ""
    relaxation: Relaxation | None = None
    law_table: LawTable | None = None
    load_curve: LoadCurve | None = None
    follows_load: bool = False
    amplitude_table: AmplitudeTable | None = None
    damping_unknown: UnknownDamping | None = None
    amplitude_min: float | None = None
    amplitude_max: float | None = None
    approximate: str = ""
    base: str = ""
    pieces: int = 1
    damper: str = ""
    damper_cost: float = 0.0
    damper_catalog: str = ""
    damper_breaks: Breaks = ()
    damper_stock: int | None = None
    moving_mass: float = 0.0
    riding_mass: float = 0.0
    stroke: float | None = None

    @property
    def bought(self) -> tuple[str, ...]:
        """The part numbers this stands for: of the mount and of a damper beside it; none for an empty station."""
        if self.pieces == 0:
            return ()
        return (self.base or self.part, *((self.damper,) if self.damper else ()))


def build(table: Table, catalog: str) -> tuple[tuple[Mount, ...], tuple[Assumed, ...]]:
    """Make the mounts of a table without faults, and list what was assumed for them. catalog: its name."""
    laws = read_laws(table)
    stiffness = resolve(table, laws.curves)
    damped = damping(table, stiffness.dynamic, _least_loss(laws))
    families = table.texts("family")
    by_family = [FAMILY_TOLERANCE.get(family, math.nan) for family in families]
    tolerance = np.where(table.given("tolerance"), table.numbers("tolerance"), by_family)
    stock = whole(table, "stock")
    rows = zip(
        table.lines,
        table.texts("part"),
        families,
        _axes(stiffness.static),
        _axes(stiffness.dynamic),
        _axes(damped.loss_factor),
        _axes(damped.viscous),
        damped.column,
        damped.stated.tolist(),
        table.numbers("load_min").tolist(),
        table.numbers("load_max").tolist(),
        optional(table, "load_rated"),
        _deflection_max(table, laws),
        table.flags("pulls").tolist(),
        optional(table, "free_height"),
        optional(table, "mass"),
        table.numbers("cost").tolist(),
        tolerance.tolist(),
        optional(table, "temperature_min"),
        optional(table, "temperature_max"),
        stock,
        breaks_of(table),
        damped.kind,
        [None if ratio is None else Relaxation(ratio) for ratio in optional(table, "relaxation_ratio")],
        related_tables(laws.tables, stiffness.dynamic[:, 2].tolist()),
        laws.curves,
        table.flags("stiffness_follows_load").tolist(),
        laws.amplitudes,
        _unknown(damped),
        optional(table, "amplitude_min"),
        optional(table, "amplitude_max"),
        strict=True,
    )
    mounts = tuple(Mount(catalog, table.file, *row) for row in rows)
    return mounts, (*_assumed(table, catalog), *assumed_by_ratio(table, stiffness, catalog))


def _axes(figures: NDArray[np.float64]) -> list[Axes]:
    return [(None if x != x else x, None if y != y else y, z) for x, y, z in figures.tolist()]


def _least_loss(laws: Laws) -> NDArray[np.float64]:
    least = []
    for table, amplitudes in zip(laws.tables, laws.amplitudes, strict=True):
        if table is not None:
            least.append(min(min(row) for row in table.loss_factor))
        else:
            least.append(math.nan if amplitudes is None else min(amplitudes.loss_factor))
    return np.array(least, dtype=np.float64)


def _deflection_max(table: Table, laws: Laws) -> list[float | None]:
    """A curve ends at the stop, which is the limit of a row that states none."""
    return [
        curve.deflection[-1] if limit is None and curve is not None else limit
        for limit, curve in zip(optional(table, "deflection_max"), laws.curves, strict=True)
    ]


def _unknown(damped: Damping) -> list[UnknownDamping | None]:
    readings = zip(damped.kind, _axes(damped.as_loss_factor), _axes(damped.as_viscous), strict=True)
    return [UnknownDamping(eta, c) if kind == UNKNOWN else None for kind, eta, c in readings]


def _assumed(table: Table, catalog: str) -> tuple[Assumed, ...]:
    parts, families = table.texts("part"), table.texts("family")
    x, y = table.given("stiffness_x_static"), table.given("stiffness_y_static")
    x, y = x | table.given("stiffness_x_dynamic"), y | table.given("stiffness_y_dynamic")
    silent = table.given("viscous") & x & ~table.given("viscous_lateral")
    amplified = (table.numbers("amplification") < 5.0) & ~table.given("damping_kind")
    found: list[Assumed] = []

    def note(mask: NDArray[np.bool_], what: str, value: str, why: str) -> None:
        found.extend(Assumed(catalog, parts[row], what, value, why) for row in rows_of(mask))

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


def amplitude_caution(mount: Mount, amplitude: float) -> str | None:
    """Return a sentence when a peak dynamic axial deflection (m) lies outside what the row is valid for."""
    table = mount.amplitude_table
    low = mount.amplitude_min if table is None else table.amplitude[0]
    high = mount.amplitude_max if table is None else table.amplitude[-1]
    head = f"{mount.part}: a dynamic deflection of {show(amplitude, 'length')} peak is"
    if low is not None and amplitude < low:
        return f"{head} below {show(low, 'length')}, the least for which its figures hold"
    if high is not None and amplitude > high:
        return f"{head} above {show(high, 'length')}, the greatest for which its figures hold"
    return None


def files(mount: Mount) -> tuple[str, ...]:
    """Return the further files that the row was read from."""
    laws = (mount.load_curve, mount.law_table, mount.amplitude_table)
    return tuple(law.file for law in laws if law is not None)


def value(mount: Mount, column: str) -> float | str | bool | None:
    """Return a mount's figure in a column, in SI (degC for a temperature), None where it has none.

    Assumed figures are returned as well, and what follows from others: the natural frequency and deflection
    at the rated load of a row that states stiffness. Raises KeyError for a name that is no column.
    """
    if column in DAMPING:
        return mount.damping_stated if mount.damping_from == column else None
    if column == "viscous_lateral":
        return mount.viscous[0] if mount.damping_from == "viscous" else None
    if column in _STIFFNESS:
        _, axis, state = column.split("_")
        axes = mount.stiffness_static if state == "static" else mount.stiffness_dynamic
        return axes["xyz".index(axis)]
    if column in _DERIVED:
        return _derived(mount, column)
    return stated(mount, column, COLUMNS)


_STIFFNESS = tuple(f"stiffness_{axis}_{state}" for axis in "xyz" for state in ("static", "dynamic"))
_DERIVED = (
    "deflection_rated",
    "natural_frequency_rated",
    "dynamic_to_static",
    "relaxation_ratio",
    "law_file",
    "amplitude_file",
    "curve_file",
    "stiffness_follows_load",
)


def _derived(mount: Mount, column: str) -> float | str | bool | None:
    static, dynamic, load = mount.stiffness_static[2], mount.stiffness_dynamic[2], mount.load_rated
    if column == "dynamic_to_static":
        return dynamic / static
    if column == "stiffness_follows_load":
        return mount.follows_load
    if column == "relaxation_ratio":
        return None if mount.relaxation is None else mount.relaxation.stiffness_ratio
    if column == "natural_frequency_rated":
        return None if load is None else math.sqrt(dynamic * STANDARD_GRAVITY / load) / (2.0 * math.pi)
    if column == "deflection_rated":
        if load is None or mount.follows_load:
            return None
        return load / static if mount.load_curve is None else deflection_under(mount.load_curve, load)
    laws = {
        "law_file": mount.law_table,
        "amplitude_file": mount.amplitude_table,
        "curve_file": mount.load_curve,
    }
    law = laws[column]
    return None if law is None else law.file
