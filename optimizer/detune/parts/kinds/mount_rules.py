"""What the figures of one mount must fulfil together. Rules of single columns stand with the columns."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from detune.ground.errors import Fault, nearest_name
from detune.ground.units import show
from detune.parts.kinds.mount_damping import check_damping, wants_rated_load
from detune.parts.kinds.mount_stiffness import RATIO, Stiffness, check_stiffness, resolve, sag
from detune.parts.law_files import Laws, check_absolute_tables, read_laws
from detune.parts.prices import check_prices
from detune.parts.table import Table, rows_of

FAMILY_TOLERANCE = {"rubber": 0.15, "spring": 0.10}
"""Stiffness tolerance by family where a list states none: common practice of the trade."""

_DYNAMIC_LOW, _DYNAMIC_HIGH = 0.9, 10.0
_ROUNDING = 0.01
"""Lists round to two or three digits, so a deflection limit may fall short of its load by this much."""


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row, every rule of every row."""
    laws = read_laws(table)
    rules = (_lateral, check_damping, _load_rated, _loads, _temperature, _tolerance, _amplitude, _air_spring)
    # An absurd figure may overflow in a comparison; the comparison is still right with an infinity.
    with np.errstate(over="ignore"):
        stiffness = resolve(table, laws.curves)
        faults = [*laws.faults, *check_stiffness(table, stiffness, laws.curves), *_dynamic(table, stiffness)]
        faults += [fault for rule in rules for fault in rule(table)]
        faults += [*_travel(table, stiffness, laws), *_on_curve(table, laws)]
        faults += check_absolute_tables(table, laws, stiffness.dynamic[:, 2].tolist())
        faults += check_prices(table)
    return faults


def _both_or_neither(table: Table, name: str, other: str) -> Iterator[Fault]:
    absent = table.given(other) & ~table.given(name) & ~table.given(RATIO)
    if not absent.any():
        return
    reason = f"because {other} is stated: static and dynamic stiffness are stated both or neither"
    if not table.has(name):
        yield table.header_fault(name, f"a column of this name, {reason}")
        return
    for row in rows_of(absent):
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
    for row in rows_of(y & ~x):
        yield table.fault(row, "stiffness_x_static", "a stiffness, because this row states the y direction")


def _dynamic(table: Table, stiffness: Stiffness) -> Iterator[Fault]:
    for axis in ("z", "x", "y"):
        base = f"stiffness_{axis}_static"
        place = "xyz".index(axis)
        dynamic, static = stiffness.dynamic[:, place], stiffness.static[:, place]
        stated = table.given(f"stiffness_{axis}_dynamic") | table.given(base) if axis == "y" else True
        for row in rows_of((dynamic < _DYNAMIC_LOW * static) & stated):
            least = show(_DYNAMIC_LOW * static[row], "stiffness")
            why = "a mount is not softer in vibration, so the two are exchanged or differ in unit"
            yield table.fault(row, _stated(table, axis, row), f"at least {least}, 0.9 of {base}: {why}")
        for row in rows_of((dynamic > _DYNAMIC_HIGH * static) & stated):
            most = show(_DYNAMIC_HIGH * static[row], "stiffness")
            expected = f"at most {most}, 10 times {base}: more is an error of unit"
            yield table.fault(row, _stated(table, axis, row), expected)


def _stated(table: Table, axis: str, row: int) -> str:
    """The column from which the row's dynamic stiffness comes."""
    name = f"stiffness_{axis}_dynamic"
    if axis == "z" and not table.given(name)[row] and table.given("natural_frequency_rated")[row]:
        return "natural_frequency_rated"
    return name


def _load_rated(table: Table) -> Iterator[Fault]:
    reasons = {
        "damping_ratio": "damping_ratio holds at the rated load",
        "damping_kind": "a damping that may be viscous is read at the rated load",
        "deflection_rated": "deflection_rated holds at the rated load",
        "natural_frequency_rated": "natural_frequency_rated holds at the rated load",
        "curve_file": "the stiffness of a curve is its tangent at the rated load",
        "stiffness_follows_load": "an air spring's stiffness is stated at the rated load",
    }
    told = table.given("load_rated")
    for name, reason in reasons.items():
        wanted = {
            "damping_kind": lambda: wants_rated_load(table) & ~table.given("damping_ratio"),
            "stiffness_follows_load": lambda: table.flags("stiffness_follows_load"),
        }.get(name, lambda name=name: table.given(name))()
        if (wanted & ~told).any() and not table.has("load_rated"):
            yield table.header_fault("load_rated", f"a column of this name, because {reason}")
            return
        for row in rows_of(wanted & ~told):
            yield table.fault(row, "load_rated", f"a load, because {reason}")
        told = told | wanted


def _loads(table: Table) -> Iterator[Fault]:
    least, most, rated = (table.numbers(name) for name in ("load_min", "load_max", "load_rated"))
    for row in rows_of(least > most):
        yield table.fault(row, "load_min", f"at most load_max, which is {show(most[row], 'force')}")
    for row in rows_of(((rated < least) | (rated > most)) & (least <= most)):
        window = f"load_min {show(least[row], 'force')} and load_max {show(most[row], 'force')}"
        yield table.fault(row, "load_rated", f"a load between {window}")
    for row in rows_of((least < 0) & ~table.flags("pulls")):
        yield table.fault(row, "load_min", "at least 0 N, or pulls = yes: a negative load is tension")


def _travel(table: Table, stiffness: Stiffness, laws: Laws) -> Iterator[Fault]:
    limit, load = table.numbers("deflection_max"), table.numbers("load_max")
    # An air spring is levelled: its load says nothing of its deflection.
    deflection = np.where(table.flags("stiffness_follows_load"), np.nan, sag(stiffness, laws.curves, load))
    for row in rows_of(limit < (1 - _ROUNDING) * deflection):
        curve = laws.curves[row] is not None
        source = "the deflection of the curve" if curve else "load_max / stiffness_z_static"
        why = f"{source}: with less the mount cannot carry its load"
        yield table.fault(row, "deflection_max", f"at least {show(deflection[row], 'length')}, {why}")
    for row in rows_of(table.numbers("free_height") < limit):
        most = show(limit[row], "length")
        yield table.fault(row, "free_height", f"at least deflection_max, which is {most}")


def _on_curve(table: Table, laws: Laws) -> Iterator[Fault]:
    least, most, limit, height = (
        table.numbers(name) for name in ("load_min", "load_max", "deflection_max", "free_height")
    )
    pulls = table.flags("pulls")
    for row, curve in enumerate(laws.curves):
        if curve is None:
            continue
        end = (
            f"the end of the curve, {show(curve.load[-1], 'force')} at {show(curve.deflection[-1], 'length')}"
        )
        if most[row] > curve.load[-1]:
            yield table.fault(row, "load_max", f"at most {end}")
        if least[row] < curve.load[0]:
            start = f"the start of the curve, {show(curve.load[0], 'force')}"
            yield table.fault(row, "load_min", f"at least {start}")
        if curve.deflection[0] < 0.0 and not pulls[row]:
            yield table.fault(row, "curve_file", "a curve from deflection 0 up, or pulls = yes")
        if limit[row] > (1 + _ROUNDING) * curve.deflection[-1]:
            yield table.fault(row, "deflection_max", f"at most {end}, which is its stop")
        if height[row] < curve.deflection[-1]:
            yield table.fault(row, "free_height", f"at least {end}")


def _temperature(table: Table) -> Iterator[Fault]:
    most = table.numbers("temperature_max")
    for row in rows_of(table.numbers("temperature_min") >= most):
        text = show(most[row], "temperature")
        yield table.fault(row, "temperature_min", f"less than temperature_max, which is {text}")


def _tolerance(table: Table) -> Iterator[Fault]:
    families = table.texts("family")
    for row in rows_of(table.given("family") & ~table.given("tolerance")):
        if families[row] not in FAMILY_TOLERANCE:
            expected = "rubber or spring, or a stated tolerance: another family has none by common practice"
            yield table.fault(row, "family", expected, nearest_name(families[row], FAMILY_TOLERANCE))


def _amplitude(table: Table) -> Iterator[Fault]:
    most = table.numbers("amplitude_max")
    for row in rows_of(table.numbers("amplitude_min") >= most):
        yield table.fault(
            row, "amplitude_min", f"less than amplitude_max, which is {show(most[row], 'length')}"
        )
    for name in ("amplitude_min", "amplitude_max"):
        for row in rows_of(table.given(name) & table.given("amplitude_file")):
            yield table.fault(row, name, "an empty cell, for amplitude_file states the range of amplitudes")


def _air_spring(table: Table) -> Iterator[Fault]:
    follows = table.flags("stiffness_follows_load")
    for row in rows_of(follows & ~(table.numbers("load_min") > 0.0) & ~np.isnan(table.numbers("load_min"))):
        yield table.fault(row, "load_min", "more than 0 N: an air spring without load has no stiffness")
    for row in rows_of(follows & table.given("curve_file")):
        yield table.fault(row, "curve_file", "an empty cell beside stiffness_follows_load = yes")
    for row in rows_of(follows & table.flags("pulls")):
        yield table.fault(row, "pulls", "no, for an air spring does not hold in tension")
