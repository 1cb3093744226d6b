"""Static and dynamic stiffness of mounts from what suppliers print: stiffness, deflection or natural frequency
at the rated load, or a load-deflection curve. Static and dynamic never stand in for each other unless the
list or the study states their ratio.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.ground.units import STANDARD_GRAVITY, show
from detune.parts.assumed import Assumed
from detune.parts.laws import LoadCurve, deflection_under, tangent_stiffness
from detune.parts.table import Table, rows_of

Floats = NDArray[np.float64]

RATIO = "dynamic_to_static"
FAMILIES_OF_RATIO = ("rubber", "neoprene", "spring")
"""Families for which a common-practice ratio of dynamic to static stiffness exists."""

_AGREES = 0.05
"""Two statements of one figure may differ by this much, as each is rounded or measured by itself."""

_SOURCES = {
    "static": ("stiffness_z_static", "deflection_rated", "curve_file", RATIO),
    "dynamic": ("stiffness_z_dynamic", "natural_frequency_rated", RATIO),
}


@dataclass(frozen=True)
class Stiffness:
    """Static and dynamic stiffness (n, 3), N/m, nan where none. from_ratio: column -> rows (n,) filled by the
    ratio of dynamic to static.
    """

    static: Floats
    dynamic: Floats
    from_ratio: dict[str, NDArray[np.bool_]]


def resolve(table: Table, curves: Sequence[LoadCurve | None]) -> Stiffness:
    """Return the stiffness of every row; nan where it cannot be had, of which `check_stiffness` tells why.

    Axial: static from deflection d at the rated load F as F/d, or the tangent of the curve there; dynamic
    from the natural frequency f at that load as (2 pi f)^2 F/g, by definition of a mass F/g on one spring.
    What is stated as a stiffness comes first.
    """
    states: dict[str, list[Floats]] = {}
    for state, derived in (("static", _static(table, curves)), ("dynamic", _dynamic(table))):
        x, y, z = (table.numbers(f"stiffness_{axis}_{state}") for axis in "xyz")
        states[state] = [x.copy(), y.copy(), np.where(np.isnan(z), derived, z)]
    ratio = table.numbers(RATIO)
    from_ratio: dict[str, NDArray[np.bool_]] = {}
    for place, axis in enumerate("xyz"):
        static, dynamic = states["static"][place], states["dynamic"][place]
        for state, filled in (
            ("dynamic", np.where(np.isnan(dynamic), ratio * static, dynamic)),
            ("static", np.where(np.isnan(static), dynamic / ratio, static)),
        ):
            from_ratio[f"stiffness_{axis}_{state}"] = np.isnan(states[state][place]) & ~np.isnan(filled)
            states[state][place] = filled
    for columns in states.values():
        columns[1] = np.where(np.isnan(columns[1]), columns[0], columns[1])
    return Stiffness(np.column_stack(states["static"]), np.column_stack(states["dynamic"]), from_ratio)


def _static(table: Table, curves: Sequence[LoadCurve | None]) -> Floats:
    load = table.numbers("load_rated")
    secant = load / table.numbers("deflection_rated")
    return np.array(
        [
            secant[row] if curve is None else _on_curve(tangent_stiffness, curve, load[row])
            for row, curve in enumerate(curves)
        ],
        dtype=np.float64,
    )


def _on_curve(figure: Callable[[LoadCurve, float], float], curve: LoadCurve, load: float) -> float:
    """Return a figure of the curve under a load, nan outside the curve."""
    return figure(curve, load) if curve.load[0] <= load <= curve.load[-1] else math.nan


def _dynamic(table: Table) -> Floats:
    omega = 2.0 * math.pi * table.numbers("natural_frequency_rated")
    with np.errstate(over="ignore"):
        return np.asarray(omega**2 * table.numbers("load_rated") / STANDARD_GRAVITY)


def sag(stiffness: Stiffness, curves: Sequence[LoadCurve | None], load: Floats) -> Floats:
    """Return the static deflection (n,) of each row under its load (n,), m; nan outside a curve."""
    straight = load / stiffness.static[:, 2]
    return np.array(
        [
            straight[row] if curve is None else _on_curve(deflection_under, curve, load[row])
            for row, curve in enumerate(curves)
        ],
        dtype=np.float64,
    )


def check_stiffness(
    table: Table, stiffness: Stiffness, curves: Sequence[LoadCurve | None]
) -> Iterator[Fault]:
    """Yield what is wrong between the statements of stiffness of each row."""
    yield from _missing(table)
    yield from _ratio_family(table, stiffness)
    yield from _disagreeing(table, curves)
    yield from _ratio_against_both(table, stiffness)


def _missing(table: Table) -> Iterator[Fault]:
    other = {"static": "stiffness_z_dynamic", "dynamic": "stiffness_z_static"}
    frequency = table.given("natural_frequency_rated")
    for state, (name, *figures) in _SOURCES.items():
        filled = table.given(name)
        for figure in figures:
            beside = table.given(other[state])
            if figure == RATIO and state == "static":
                beside = beside | frequency
            elif figure == RATIO:
                beside = beside | table.given("deflection_rated") | table.given("curve_file")
            filled = filled | (table.given(figure) & (beside if figure == RATIO else True))
        if filled.all():
            continue
        column = table.column(name)
        instead = " or ".join(figures)
        if not any(table.has(source) for source in (name, *figures)):
            yield table.header_fault(name, f"a column {column.header}: {column.meaning}; or {instead}")
            continue
        at = next(source for source in (name, *figures) if table.has(source))
        for row in rows_of(~filled):
            yield table.fault(row, at, f"a value in every row: {column.meaning}, or {instead}")


def _ratio_family(table: Table, stiffness: Stiffness) -> Iterator[Fault]:
    filled = np.any(list(stiffness.from_ratio.values()), axis=0)
    families = table.texts("family")
    for row in rows_of(filled):
        if families[row] not in FAMILIES_OF_RATIO:
            known = ", ".join(FAMILIES_OF_RATIO)
            expected = (
                f"both stiffnesses in the row: a ratio fills one of them only for the families {known}; "
                f"this family is {families[row]}"
            )
            yield table.fault(row, RATIO, expected)


def _disagreeing(table: Table, curves: Sequence[LoadCurve | None]) -> Iterator[Fault]:
    load = table.numbers("load_rated")
    on_curve = np.array([curve is not None for curve in curves], dtype=np.bool_)
    static, dynamic = table.numbers("stiffness_z_static"), table.numbers("stiffness_z_dynamic")
    tangent_or_secant = _static(table, curves)
    for row in _apart(np.where(on_curve, math.nan, tangent_or_secant), static):
        figure = show(tangent_or_secant[row], "stiffness")
        expected = (
            f"{_within('stiffness_z_static', static[row])}; load_rated over this deflection is {figure}"
        )
        yield table.fault(row, "deflection_rated", expected)
    for row in _apart(np.where(on_curve, tangent_or_secant, math.nan), static):
        tangent = show(tangent_or_secant[row], "stiffness")
        expected = f"an empty cell, or the tangent of the curve at load_rated within 5 %, which is {tangent}"
        yield table.fault(row, "stiffness_z_static", expected)
    for row in _apart(_dynamic(table), dynamic):
        figure = show(float(_dynamic(table)[row]), "stiffness")
        expected = f"{_within('stiffness_z_dynamic', dynamic[row])}; (2 pi f)^2 load_rated / g is {figure}"
        yield table.fault(row, "natural_frequency_rated", expected)
    rests = np.array(
        [
            math.nan if curve is None else _on_curve(deflection_under, curve, load[row])
            for row, curve in enumerate(curves)
        ]
    )
    for row in _apart(table.numbers("deflection_rated"), rests):
        expected = (
            f"the deflection of the curve at load_rated within 5 %, which is {show(rests[row], 'length')}"
        )
        yield table.fault(row, "deflection_rated", expected)


def _within(name: str, stated: float) -> str:
    return f"a figure that agrees within 5 % with {name}, which is {show(stated, 'stiffness')}"


def _apart(figure: Floats, stated: Floats) -> list[int]:
    with np.errstate(over="ignore"):
        return rows_of(np.abs(figure - stated) > _AGREES * np.abs(stated))


def _ratio_against_both(table: Table, stiffness: Stiffness) -> Iterator[Fault]:
    """A constant for the whole list is for rows that lack a figure; a cell speaks of its own row."""
    if not table.stated_in_sheet(RATIO):
        return
    filled = stiffness.from_ratio["stiffness_z_static"] | stiffness.from_ratio["stiffness_z_dynamic"]
    found = stiffness.dynamic[:, 2] / stiffness.static[:, 2]
    for row in _apart(np.where(filled, math.nan, table.numbers(RATIO)), found):
        expected = f"the ratio of the two axial stiffnesses of the row within 5 %, which is {found[row]:.3g}"
        yield table.fault(row, RATIO, expected)


def assumed_by_ratio(table: Table, stiffness: Stiffness, catalog: str) -> Iterator[Assumed]:
    """Yield the stiffnesses that a ratio stated for the whole list filled in."""
    if table.stated_in_sheet(RATIO):
        return
    ratio, parts = table.numbers(RATIO), table.texts("part")
    why = "the study states one dynamic_to_static for the whole list"
    for name, filled in stiffness.from_ratio.items():
        axis, state = name.split("_")[1:]
        other = "static" if state == "dynamic" else "dynamic"
        for row in rows_of(filled):
            value = f"{ratio[row]:g} times stiffness_{axis}_{other}"
            if state == "static":
                value = f"stiffness_{axis}_dynamic / {ratio[row]:g}"
            yield Assumed(catalog, parts[row], name, value, why)
