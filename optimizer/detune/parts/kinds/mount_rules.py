"""What the figures of one mount must fulfil together. Rules of single columns stand with the columns."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault, nearest_name
from detune.ground.units import show
from detune.parts.table import Table

DAMPING = ("loss_factor", "damping_ratio", "viscous", "amplification")
"""The columns of which each row fills exactly one."""

FAMILY_TOLERANCE = {"rubber": 0.15, "spring": 0.10}
"""Stiffness tolerance by family where a list states none: common practice of the trade."""

_DYNAMIC_LOW, _DYNAMIC_HIGH = 0.9, 10.0
_ROUNDING = 0.01
"""Lists round to two or three digits, so a deflection limit may fall short of its load by this much."""


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row, every rule of every row."""
    rules = (_lateral, _dynamic, _damping, _load_rated, _loads, _travel, _temperature, _tolerance)
    # An absurd figure may overflow in a comparison; the comparison is still right with an infinity.
    with np.errstate(over="ignore"):
        return [fault for rule in rules for fault in rule(table)]


def _rows(mask: NDArray[np.bool_]) -> list[int]:
    return [int(row) for row in np.flatnonzero(mask)]


def _both_or_neither(table: Table, name: str, other: str) -> Iterator[Fault]:
    absent = table.given(other) & ~table.given(name)
    if not absent.any():
        return
    reason = f"because {other} is stated: static and dynamic stiffness are stated both or neither"
    if not table.has(name):
        yield table.header_fault(name, f"a column of this name, {reason}")
        return
    for row in _rows(absent):
        yield table.fault(row, name, f"a stiffness, {reason}")


def _lateral(table: Table) -> Iterator[Fault]:
    for axis in ("x", "y"):
        static, dynamic = f"stiffness_{axis}_static", f"stiffness_{axis}_dynamic"
        yield from _both_or_neither(table, static, dynamic)
        yield from _both_or_neither(table, dynamic, static)
    x = table.given("stiffness_x_static") | table.given("stiffness_x_dynamic")
    y = table.given("stiffness_y_static") | table.given("stiffness_y_dynamic")
    if (y & ~x).any() and not table.has("stiffness_x_static"):
        yield table.header_fault("stiffness_x_static", "a column of this name, because the list states y")
        return
    for row in _rows(y & ~x):
        yield table.fault(row, "stiffness_x_static", "a stiffness, because this row states the y direction")


def _dynamic(table: Table) -> Iterator[Fault]:
    for axis in ("z", "x", "y"):
        name, base = f"stiffness_{axis}_dynamic", f"stiffness_{axis}_static"
        dynamic, static = table.numbers(name), table.numbers(base)
        for row in _rows(dynamic < _DYNAMIC_LOW * static):
            least = show(_DYNAMIC_LOW * static[row], "stiffness")
            why = "a mount is not softer in vibration, so the two are exchanged or differ in unit"
            yield table.fault(row, name, f"at least {least}, 0.9 of {base}: {why}")
        for row in _rows(dynamic > _DYNAMIC_HIGH * static):
            most = show(_DYNAMIC_HIGH * static[row], "stiffness")
            yield table.fault(row, name, f"at most {most}, 10 times {base}: more is an error of unit")


def _damping(table: Table) -> Iterator[Fault]:
    choice = "exactly one of " + ", ".join(DAMPING)
    if not any(table.has(name) for name in DAMPING):
        yield table.header_fault("loss_factor", f"{choice}; the list states no damping")
        return
    stated = [name for name in DAMPING if table.has(name)]
    filled = np.array([table.given(name) for name in stated])
    for row in _rows(filled.sum(axis=0) == 0):
        yield table.fault(row, stated[0], f"{choice}; this row fills none")
    for row in _rows(filled.sum(axis=0) > 1):
        names = [name for name in stated if table.given(name)[row]]
        yield table.fault(row, names[1], f"{choice}; this row fills {' and '.join(names)}")
    for row in _rows(table.given("viscous_lateral") & ~table.given("viscous")):
        yield table.fault(
            row, "viscous_lateral", "an empty cell, or the axial coefficient in viscous beside it"
        )
    lateral = table.given("stiffness_x_static") | table.given("stiffness_x_dynamic")
    for row in _rows(table.given("viscous_lateral") & ~lateral):
        yield table.fault(row, "viscous_lateral", "an empty cell, or the lateral stiffness beside it")


def _load_rated(table: Table) -> Iterator[Fault]:
    wanted = table.given("damping_ratio") & ~table.given("load_rated")
    reason = "because damping_ratio holds at the rated load"
    if wanted.any() and not table.has("load_rated"):
        yield table.header_fault("load_rated", f"a column of this name, {reason}")
    elif wanted.any():
        for row in _rows(wanted):
            yield table.fault(row, "load_rated", f"a load, {reason}")


def _loads(table: Table) -> Iterator[Fault]:
    least, most, rated = (table.numbers(name) for name in ("load_min", "load_max", "load_rated"))
    for row in _rows(least > most):
        yield table.fault(row, "load_min", f"at most load_max, which is {show(most[row], 'force')}")
    for row in _rows(((rated < least) | (rated > most)) & (least <= most)):
        window = f"load_min {show(least[row], 'force')} and load_max {show(most[row], 'force')}"
        yield table.fault(row, "load_rated", f"a load between {window}")
    for row in _rows((least < 0) & ~table.flags("pulls")):
        yield table.fault(row, "load_min", "at least 0 N, or pulls = yes: a negative load is tension")


def _travel(table: Table) -> Iterator[Fault]:
    limit, load = table.numbers("deflection_max"), table.numbers("load_max")
    sag = load / table.numbers("stiffness_z_static")
    for row in _rows(limit < (1 - _ROUNDING) * sag):
        why = "load_max / stiffness_z_static: with less the mount cannot carry its load"
        yield table.fault(row, "deflection_max", f"at least {show(sag[row], 'length')}, {why}")
    for row in _rows(table.numbers("free_height") < limit):
        most = show(limit[row], "length")
        yield table.fault(row, "free_height", f"at least deflection_max, which is {most}")


def _temperature(table: Table) -> Iterator[Fault]:
    most = table.numbers("temperature_max")
    for row in _rows(table.numbers("temperature_min") >= most):
        text = show(most[row], "temperature")
        yield table.fault(row, "temperature_min", f"less than temperature_max, which is {text}")


def _tolerance(table: Table) -> Iterator[Fault]:
    families = table.texts("family")
    for row in _rows(table.given("family") & ~table.given("tolerance")):
        if families[row] not in FAMILY_TOLERANCE:
            expected = "rubber or spring, or a stated tolerance: another family has none by common practice"
            yield table.fault(row, "family", expected, nearest_name(families[row], FAMILY_TOLERANCE))
