"""The map of what is feasible in two unknowns, its boundaries traced and named, and every part of the lists on it."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.parts.kinds.mount import Mount
from detune.physics.separation import separation as distance
from detune.sizing.batch_trace import Margins, Traced, trace_batch
from detune.sizing.made_parts import made_design, sizing_of
from detune.sizing.statement import STANDARD_GRAVITY, power_form
from detune.sizing.worst_frequency import worst
from detune.solvers.map_axes import MapAxis, MapPlane, plane_of
from detune.solvers.map_dots import PartDot, part_dots
from detune.solvers.map_islands import Islands, islands_of
from detune.solvers.map_region import Region, region_of
from detune.solvers.one_axis_statement import OneAxis
from detune.solvers.size_batch import judge, static_loads

__all__ = ["PartDot", "SizingMap", "axis_values", "one_axis_margins", "sizing_map"]

Floats = NDArray[np.float64]
LINES = 41
LINES_JUDGED = (17, 13)
TWO_PI = 2.0 * math.pi
BOUNDS = "the study's own bounds"


@dataclass(frozen=True)
class SizingMap:
    """The map on the axes `first` and `second`, the other unknowns held at `values` (u,).

    `traced` holds margins and boundaries, `objective` (Y, X) its values, `region` the least margin on finer lines;
    `pieces` the exact outlines of the branches where the map is stiffness (or natural frequency) against damping of
    one axis. `without`: parts that have no such figure and are no dot. `exact`: margins in closed form; `left_out`:
    what they do not hold. `answer`: whether `values` are a design that meets the brief, at `place`.
    """

    first: MapAxis
    second: MapAxis
    values: Floats
    place: tuple[float, float]
    traced: Traced
    region: Region
    objective: Floats
    objective_name: str
    dots: tuple[PartDot, ...]
    without: int
    pieces: tuple[Floats, ...]
    exact: bool
    left_out: tuple[str, ...]
    answer: bool


def one_axis_margins(
    axis: OneAxis, stiffness: Floats, damping: Floats, mass: Floats
) -> tuple[tuple[str, ...], Floats]:
    """Names (R) and margins (R, N) of a one-axis problem, closed form over whole ranges; totals (N,) in SI."""
    problem = axis.problem
    viscous = problem.damping_kind == "viscous"
    gamma = damping**2 if viscous else (damping * stiffness) ** 2
    rows: dict[str, Floats] = {}
    for label, limit in zip(axis.labels, problem.limits, strict=True):
        u = [(TWO_PI * f) ** 2 for f in (limit.lower_frequency, limit.upper_frequency)]
        ratio, _ = worst(power_form(limit), problem.damping_kind, stiffness, gamma, mass, u[0], u[1])  # type: ignore[arg-type]
        margin = 1.0 / np.sqrt(np.maximum(ratio, 1e-18)) - 1.0
        rows[label] = np.minimum(rows[label], margin) if label in rows else margin
    if problem.sag is not None:
        sag = mass * STANDARD_GRAVITY * problem.sag.dynamic_to_static / stiffness
        rows["sag (at rest)"] = problem.sag.most / sag - 1.0
    if problem.separation is not None:
        frequency = np.sqrt(stiffness / mass) / TWO_PI
        least = np.min([distance(frequency, a, b) for a, b in problem.excitation_intervals], axis=0)
        rows["separation from resonance"] = least / problem.separation - 1.0
    return tuple(rows), np.stack(list(rows.values()))


def sizing_map(
    brief: Brief,
    names: tuple[str, ...],
    values: Floats,
    axis: OneAxis | None,
    parts: dict[str, tuple[Mount, ...]],
    goal: str,
    answer: bool = True,
) -> SizingMap:
    """The map on the two axes of these names round the point `values` (u,); `parts` of the lists by group."""
    plane = plane_of(brief, axis, names, values)
    size = (LINES, LINES) if axis is not None else LINES_JUDGED
    logs = (plane.first.logarithmic, plane.second.logarithmic)
    x, y = (
        _lines(own.low, own.high, n, own.logarithmic)
        for own, n in zip((plane.first, plane.second), size, strict=True)
    )
    margins, labels = _margins(plane)

    def least(a: Floats, b: Floats) -> Floats:
        return np.asarray(margins(a, b).min(axis=0))

    found = Islands(x[:0], y[:0], ()) if axis is None else islands_of(plane, least)
    finer_x, finer_y = _with_lines(x, found.x), _with_lines(y, found.y)
    traced = trace_batch(margins, labels, finer_x, finer_y, logs, rounds=12 if axis is not None else 5)
    xx, yy = np.meshgrid(finer_x, finer_y)
    points = plane.points(xx.ravel(), yy.ravel())
    loads: dict[str, list[float]] = {}
    for group, load in static_loads(made_design(brief, values)):
        loads.setdefault(group, []).append(load)
    dots = part_dots(plane, brief, parts, {group: float(np.mean(each)) for group, each in loads.items()})
    place = plane.place(values[None])[0]
    return SizingMap(
        first=plane.first,
        second=plane.second,
        values=values,
        place=(float(place[0]), float(place[1])),
        traced=traced,
        region=region_of(margins, traced, found, logs, exact=axis is not None),
        objective=_objective(brief, axis, points, goal).reshape(xx.shape),
        objective_name=goal,
        dots=dots.dots,
        without=dots.without,
        pieces=found.pieces,
        exact=axis is not None,
        left_out=() if axis is None else axis.relaxed,
        answer=answer,
    )


def _lines(low: float, high: float, count: int, log: bool) -> Floats:
    if high <= low:
        low, high = low - max(1e-3 * abs(low), 1e-9), high + max(1e-3 * abs(high), 1e-9)
    lines = np.geomspace(low, high, count) if log else np.linspace(low, high, count)
    lines[0], lines[-1] = low, high
    return np.asarray(lines)


def _with_lines(plain: Floats, more: Floats) -> Floats:
    """The plain lines with others between them, none doubled by rounding."""
    kept = [float(plain[0])]
    for value in np.unique([*plain, *more]):
        if value > kept[-1] + 1e-12 * max(abs(value), abs(kept[-1])) + 1e-300 and value < plain[-1]:
            kept.append(float(value))
    if kept[-1] >= plain[-1] * (1.0 - 1e-12):
        kept.pop()
    return np.array([*kept, float(plain[-1])])


def axis_values(brief: Brief, axis: OneAxis, points: Floats) -> tuple[Floats, Floats, Floats]:
    """Total stiffness, damping and mass (N,) of one axis at points (N, u)."""
    problem = axis.problem
    stiffness = np.full(len(points), problem.stiffness_bounds[0])
    damping = np.full(len(points), problem.damping_bounds[0])
    mass = np.full(len(points), problem.mass)
    for column, unknown in enumerate(sizing_of(brief).unknown):
        if unknown.kind == "stiffness":
            stiffness = axis.pieces * points[:, column]
        elif unknown.kind == "viscous":
            damping = axis.pieces * points[:, column]
        elif unknown.kind == "loss-factor":
            damping = points[:, column]
        elif unknown.kind == "ballast":
            mass = problem.mass + points[:, column]
    return stiffness, damping, mass


def _margins(plane: MapPlane) -> tuple[Margins, tuple[str, ...]]:
    """Margins of every requirement at places of a map, and their names; of derived axes the bounds as well."""
    brief, axis = plane.brief, plane.axis
    own: Callable[[Floats], Floats]
    if axis is not None:
        kept, _ = one_axis_margins(axis, *axis_values(brief, axis, plane.values[None]))

        def own(points: Floats) -> Floats:
            return one_axis_margins(axis, *axis_values(brief, axis, points))[1]

    else:
        first = judge(brief, plane.values[None])
        # One line for each requirement at its worst place.
        names = [f"{r.allowable.quantity()} ({r.condition})" for r in first.requirements]
        kept = tuple(dict.fromkeys(names))
        rows = {name: [k for k, other in enumerate(names) if other == name] for name in kept}

        def own(points: Floats) -> Floats:
            found = judge(brief, points).margins
            return np.stack([found[rows[name]].min(axis=0) for name in kept])

    if not plane.derived:
        return lambda x, y: own(plane.points(x, y)), kept

    def within(x: Floats, y: Floats) -> Floats:
        points = plane.points(x, y)
        return np.concatenate([own(points), plane.within(points)[None]])

    return within, (*kept, BOUNDS)


def _objective(brief: Brief, axis: OneAxis | None, points: Floats, goal: str) -> Floats:
    if axis is None:
        return judge(brief, points).objectives[goal]
    from detune.solvers.size_front import one_axis_objectives

    return one_axis_objectives(brief, axis, points)[goal]
