"""Damping of mounts from what suppliers print, read as a loss factor, as a viscous coefficient, or as both when
nobody knows which of the two it is.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault, nearest_name
from detune.ground.units import STANDARD_GRAVITY
from detune.parts.table import Table, rows_of

Floats = NDArray[np.float64]

DAMPING = ("loss_factor", "damping_ratio", "viscous", "amplification")
"""The columns of which each row fills exactly one, unless a file states its damping."""

DAMPING_FILES = ("law_file", "amplitude_file")

VISCOUS, LOSS_FACTOR, UNKNOWN = "viscous", "loss factor", "unknown"
KINDS_OF_DAMPING = (VISCOUS, LOSS_FACTOR, UNKNOWN)

_MEANT = {
    "loss_factor": (LOSS_FACTOR, UNKNOWN),
    "damping_ratio": (VISCOUS, LOSS_FACTOR, UNKNOWN),
    "viscous": (VISCOUS,),
    "amplification": (LOSS_FACTOR, VISCOUS, UNKNOWN),
}
"""Kinds that each column can be; the first is what it means where the list says nothing."""


@dataclass(frozen=True)
class Damping:
    """Damping of n rows. column: where it is stated (n). stated: its number there (n,). kind: (n).

    loss_factor and viscous (n, 3): the reading the row is used with, one of the two 0; N s/m. as_loss_factor
    and as_viscous (n, 3): both readings of a row whose kind is unknown, nan elsewhere. Lateral figures are
    nan where there is no lateral stiffness.
    """

    column: list[str]
    stated: Floats
    kind: list[str]
    loss_factor: Floats
    viscous: Floats
    as_loss_factor: Floats
    as_viscous: Floats


def damping(table: Table, dynamic: Floats, least_loss: Floats) -> Damping:
    """Return the damping of every row.

    dynamic: stiffness (n, 3), N/m. least_loss: least loss factor of the row's file (n,), nan where it names
    none. As a loss factor: a ratio z is eta = 2 z (equal at resonance), an amplification Q is eta = 1/Q, for
    a mass on k (1 + j eta) moves 1/eta times its static deflection there. As a viscous coefficient, at the
    rated load F: c = 2 z sqrt(k F/g) on each axis with its own k (definition of the ratio of one mass on one
    spring), with z = eta/2, or the z whose transmissibility peaks at Q (`physics.damping`).
    """
    stated = np.array([table.numbers(name) for name in DAMPING])
    place = np.argmax(~np.isnan(stated), axis=0)
    by_file = ~np.isnan(least_loss)
    column = [_file_column(table, row) if by_file[row] else DAMPING[index] for row, index in enumerate(place)]
    words = table.texts("damping_kind")
    kind = [LOSS_FACTOR if by_file[row] else words[row] or _MEANT[name][0] for row, name in enumerate(column)]
    eta, ratio = _ratios(table, stated)
    eta = np.where(by_file, least_loss, eta)
    viscous = _coefficients(table, dynamic, ratio)
    lateral = np.where(np.isnan(dynamic), math.nan, 0.0)
    used = np.array([_MEANT[name][0] if word == UNKNOWN else word for name, word in zip(column, kind, strict=True)]
                    if len(table) else [], dtype=object)  # fmt: skip
    unknown = np.array([word == UNKNOWN for word in kind], dtype=np.bool_)[:, None]
    lossy = (used == LOSS_FACTOR)[:, None]
    as_loss_factor = eta[:, None] + lateral
    return Damping(
        column,
        np.where(by_file, least_loss, stated[place, np.arange(len(table))]),
        kind,
        np.where(lossy, as_loss_factor, lateral),
        np.where(lossy, lateral, viscous),
        np.where(unknown, as_loss_factor, math.nan),
        np.where(unknown, viscous, math.nan),
    )


def _file_column(table: Table, row: int) -> str:
    return next(name for name in DAMPING_FILES if table.given(name)[row])


def _ratios(table: Table, stated: Floats) -> tuple[Floats, Floats]:
    """Return each row's figure as a loss factor (n,) and as a viscous damping ratio (n,)."""
    from detune.physics.damping import viscous_ratio_from_amplification

    loss_factor, ratio, _, amplification = stated
    eta = np.where(np.isnan(loss_factor), 1.0 / amplification, loss_factor)
    eta = np.where(np.isnan(ratio), eta, 2.0 * ratio)
    # An amplification of 1 or less is a fault; it must not stop the search for further faults.
    peak = np.where(amplification > 1.0, amplification, 2.0)
    from_peak = np.where(amplification > 1.0, viscous_ratio_from_amplification(peak), math.nan)
    z = np.where(np.isnan(ratio), np.where(np.isnan(amplification), loss_factor / 2.0, from_peak), ratio)
    return eta, z


def _coefficients(table: Table, dynamic: Floats, ratio: Floats) -> Floats:
    rated_mass = table.numbers("load_rated") / STANDARD_GRAVITY
    at_rated = 2.0 * ratio[:, None] * np.sqrt(dynamic) * np.sqrt(rated_mass[:, None])
    axial = table.numbers("viscous")
    lateral = np.where(table.given("viscous_lateral"), table.numbers("viscous_lateral"), 0.0)
    given = np.column_stack([lateral, lateral, axial]) + np.where(np.isnan(dynamic), math.nan, 0.0)
    return np.where(np.isnan(axial)[:, None], at_rated, given)


def check_damping(table: Table) -> Iterator[Fault]:
    """Yield what is wrong between the damping cells of each row."""
    yield from _one_column(table)
    yield from _lateral_alone(table)
    yield from _kind(table)
    yield from _relaxation(table)


def _by_file(table: Table) -> NDArray[np.bool_]:
    return table.given("law_file") | table.given("amplitude_file")


def _one_column(table: Table) -> Iterator[Fault]:
    choice = "exactly one of " + ", ".join(DAMPING)
    by_file = _by_file(table)
    if not by_file.all() and not any(table.has(name) for name in DAMPING):
        yield table.header_fault("loss_factor", f"{choice}; the list states no damping")
        return
    stated = [name for name in DAMPING if table.has(name)]
    filled = np.array([table.given(name) for name in stated]).reshape(len(stated), len(table))
    for row in rows_of((filled.sum(axis=0) == 0) & ~by_file):
        yield table.fault(row, stated[0], f"{choice}; this row fills none")
    for row in rows_of((filled.sum(axis=0) > 1) & ~by_file):
        names = [name for name in stated if table.given(name)[row]]
        yield table.fault(row, names[1], f"{choice}; this row fills {' and '.join(names)}")
    for row in rows_of((filled.sum(axis=0) > 0) & by_file):
        name = next(name for name in stated if table.given(name)[row])
        yield table.fault(row, name, f"an empty cell, for {_file_column(table, row)} states the damping")


def _lateral_alone(table: Table) -> Iterator[Fault]:
    for row in rows_of(table.given("viscous_lateral") & ~table.given("viscous")):
        yield table.fault(
            row, "viscous_lateral", "an empty cell, or the axial coefficient in viscous beside it"
        )
    lateral = table.given("stiffness_x_static") | table.given("stiffness_x_dynamic")
    for row in rows_of(table.given("viscous_lateral") & ~lateral):
        yield table.fault(row, "viscous_lateral", "an empty cell, or the lateral stiffness beside it")


def _kind(table: Table) -> Iterator[Fault]:
    by_file = _by_file(table)
    for row, word in enumerate(table.texts("damping_kind")):
        if not word:
            continue
        if word not in KINDS_OF_DAMPING:
            near = nearest_name(word, KINDS_OF_DAMPING)
            yield table.fault(row, "damping_kind", ", ".join(KINDS_OF_DAMPING[:2]) + " or unknown", near)
            continue
        if by_file[row]:
            expected = f"an empty cell, for {_file_column(table, row)} states the damping"
            yield table.fault(row, "damping_kind", expected)
            continue
        filled = [name for name in DAMPING if table.given(name)[row]]
        if len(filled) == 1 and word not in _MEANT[filled[0]]:
            expected = f"{' or '.join(_MEANT[filled[0]])}, for the row states {filled[0]}"
            yield table.fault(row, "damping_kind", expected)


def _relaxation(table: Table) -> Iterator[Fault]:
    stated = table.given("relaxation_ratio")
    for row in rows_of(stated & ~table.given("viscous")):
        yield table.fault(row, "relaxation_ratio", "an empty cell, or the dashpot's coefficient in viscous")
    for row in rows_of(stated & _by_file(table)):
        yield table.fault(row, "relaxation_ratio", f"an empty cell beside {_file_column(table, row)}")
    for row in rows_of(table.given("law_file") & table.given("amplitude_file")):
        expected = "an empty cell beside law_file: only one of the two can state the damping"
        yield table.fault(row, "amplitude_file", expected)


def wants_rated_load(table: Table) -> NDArray[np.bool_]:
    """Return which rows (n,) state damping that can only be read at a rated load."""
    words = table.texts("damping_kind")
    other = np.array([word in (VISCOUS, UNKNOWN) for word in words], dtype=np.bool_)
    return table.given("damping_ratio") | (
        other & (table.given("amplification") | table.given("loss_factor"))
    )
