"""The map of what is feasible in two unknowns, its boundaries traced and named, and every part of the lists on it."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.parts.kinds.mount import Mount
from detune.physics.separation import separation as distance
from detune.sizing.batch_trace import Margins, Traced, trace_batch
from detune.sizing.made_parts import bounds, logarithmic, sizing_of
from detune.sizing.one_axis_map import RegionPiece, feasible_region
from detune.sizing.statement import STANDARD_GRAVITY, Ballast, OneAxisProblem, power_form
from detune.sizing.worst_frequency import worst
from detune.solvers.one_axis_statement import OneAxis
from detune.solvers.size_batch import judge

Floats = NDArray[np.float64]
LINES = 41
LINES_JUDGED = (17, 13)
TWO_PI = 2.0 * math.pi


@dataclass(frozen=True)
class PartDot:
    """One part (or ballast step) at its place on the map; `complete` is false where the list has no such figure."""

    name: str
    x: float
    y: float


@dataclass(frozen=True)
class SizingMap:
    """The map in the unknowns `first` and `second`, the others held at `values` (u,).

    `traced` holds margins and boundaries, `objective` (Y, X) its values; `pieces` the exact branches where the map
    is stiffness against damping of one axis. `exact`: margins in closed form; `left_out`: what they do not hold.
    """

    first: SizingUnknown
    second: SizingUnknown
    values: Floats
    traced: Traced
    objective: Floats
    objective_name: str
    dots: tuple[PartDot, ...]
    pieces: tuple[RegionPiece, ...]
    pieces_per: int
    exact: bool
    left_out: tuple[str, ...]


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
    mounts: tuple[Mount, ...],
    goal: str,
) -> SizingMap:
    """The map in the two unknowns of these names round the point `values` (u,)."""
    unknowns = sizing_of(brief).unknown
    titles = [unknown.title for unknown in unknowns]
    i, j = titles.index(names[0]), titles.index(names[1])
    low, high = bounds(brief)
    logs = (logarithmic(unknowns[i]), logarithmic(unknowns[j]))
    size = (LINES, LINES) if axis is not None else LINES_JUDGED
    x = _lines(float(low[i]), float(high[i]), size[0], logs[0])
    y = _lines(float(low[j]), float(high[j]), size[1], logs[1])
    pieces: tuple[RegionPiece, ...] = ()
    per = 1
    if axis is not None:
        per = axis.pieces
        x, y, pieces = _with_islands(axis, unknowns, values, i, j, x, y)
    margins, labels = _margins(brief, axis, values, i, j)
    traced = trace_batch(margins, labels, x, y, logs, rounds=12 if axis is not None else 5)
    xx, yy = np.meshgrid(x, y)
    points = np.repeat(values[None], xx.size, axis=0)
    points[:, i], points[:, j] = xx.ravel(), yy.ravel()
    objective = _objective(brief, axis, points, goal).reshape(xx.shape)
    return SizingMap(
        first=unknowns[i],
        second=unknowns[j],
        values=values,
        traced=traced,
        objective=objective,
        objective_name=goal,
        dots=part_dots(brief, unknowns[i], unknowns[j], values, mounts, axis),
        pieces=pieces,
        pieces_per=per,
        exact=axis is not None,
        left_out=() if axis is None else axis.relaxed,
    )


def _lines(low: float, high: float, count: int, log: bool) -> Floats:
    if high <= low:
        low, high = low - max(1e-3 * abs(low), 1e-9), high + max(1e-3 * abs(high), 1e-9)
    lines = np.geomspace(low, high, count) if log else np.linspace(low, high, count)
    lines[0], lines[-1] = low, high
    return np.asarray(lines)


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


def _margins(
    brief: Brief, axis: OneAxis | None, values: Floats, i: int, j: int
) -> tuple[Margins, tuple[str, ...]]:
    def at(x: Floats, y: Floats) -> Floats:
        points = np.repeat(values[None], len(x), axis=0)
        points[:, i], points[:, j] = x, y
        return points

    if axis is not None:
        labels, _ = one_axis_margins(axis, *axis_values(brief, axis, values[None]))

        def exact(x: Floats, y: Floats) -> Floats:
            return one_axis_margins(axis, *axis_values(brief, axis, at(x, y)))[1]

        return exact, labels
    first = judge(brief, values[None])
    # One line for each requirement at its worst place.
    names = [f"{r.allowable.quantity()} ({r.condition})" for r in first.requirements]
    kept = tuple(dict.fromkeys(names))
    rows = {name: [k for k, other in enumerate(names) if other == name] for name in kept}

    def judged(x: Floats, y: Floats) -> Floats:
        found = judge(brief, at(x, y)).margins
        return np.stack([found[rows[name]].min(axis=0) for name in kept])

    return judged, kept


def _objective(brief: Brief, axis: OneAxis | None, points: Floats, goal: str) -> Floats:
    if axis is None:
        return judge(brief, points).objectives[goal]
    from detune.solvers.size_front import one_axis_objectives

    return one_axis_objectives(brief, axis, points)[goal]


def _with_islands(
    axis: OneAxis, unknowns: tuple[SizingUnknown, ...], values: Floats, i: int, j: int, x: Floats, y: Floats
) -> tuple[Floats, Floats, tuple[RegionPiece, ...]]:
    """Lines completed so that every exact branch is cut, and the branches, on a map of stiffness against damping."""
    if unknowns[i].kind != "stiffness" or unknowns[j].kind not in ("viscous", "loss-factor"):
        return x, y, ()
    fixed = _at_ballast(axis.problem, unknowns, values)
    per = axis.pieces if unknowns[j].kind == "viscous" else 1
    scaled = tuple(
        replace(piece, stiffness=piece.stiffness / axis.pieces, least_damping=piece.least_damping / per,
                greatest_damping=piece.greatest_damping / per)
        for piece in feasible_region(fixed)
    )  # fmt: skip
    more_x, more_y = list(x), list(y)
    for piece in scaled:
        # A node inside every branch, however small; the branch itself is drawn from its exact curves.
        for k in np.linspace(0, len(piece.stiffness) - 1, 5).astype(int)[1:-1]:
            more_x.append(float(piece.stiffness[k]))
            more_y.append(float(0.5 * (piece.least_damping[k] + piece.greatest_damping[k])))
    return _apart(np.unique(more_x), x), _apart(np.unique(more_y), y), scaled


def _apart(lines: Floats, plain: Floats) -> Floats:
    """The lines with the ends of the plain ones, and none doubled by rounding."""
    kept = [float(plain[0])]
    for value in lines:
        if value > kept[-1] * (1.0 + 1e-12) + 1e-300 and value < plain[-1]:
            kept.append(float(value))
    if kept[-1] >= plain[-1] * (1.0 - 1e-12):
        kept.pop()
    return np.array([*kept, float(plain[-1])])


def _at_ballast(
    problem: OneAxisProblem, unknowns: tuple[SizingUnknown, ...], values: Floats
) -> OneAxisProblem:
    if problem.ballast is None:
        return problem
    column = next(k for k, unknown in enumerate(unknowns) if unknown.kind == "ballast")
    added = float(values[column])
    return replace(problem, ballast=Ballast(added, added))


def part_dots(
    brief: Brief,
    first: SizingUnknown,
    second: SizingUnknown,
    values: Floats,
    mounts: tuple[Mount, ...],
    axis: OneAxis | None,
) -> tuple[PartDot, ...]:
    """Every part of the lists where it stands in these two unknowns; ballast steps where one of them is ballast."""
    dots: dict[tuple[float, float], list[str]] = {}
    steps = () if brief.ballast is None else brief.ballast.steps
    for mount in mounts:
        pairs = []
        for unknown in (first, second):
            if unknown.kind == "ballast":
                pairs.append(list(steps))
            else:
                figure = figure_of(mount, unknown)
                pairs.append([] if figure is None else [figure])
        for x in pairs[0]:
            for y in pairs[1]:
                dots.setdefault((x, y), []).append(mount.part)
    return tuple(PartDot(", ".join(dict.fromkeys(names)), x, y) for (x, y), names in dots.items())


def figure_of(mount: Mount, unknown: SizingUnknown) -> float | None:
    """The figure of a real part that an unknown stands for, None where it has none.

    A loss factor and a viscous coefficient are read into each other at the mount's own rated frequency only where
    the list states the load it is rated for.
    """
    stiffness = mount.stiffness_dynamic[2]
    omega = None
    if mount.load_rated:
        omega = math.sqrt(stiffness * STANDARD_GRAVITY / mount.load_rated)
    if unknown.kind == "stiffness":
        along = {"axial": 2, "x": 0, "y": 1, "lateral": 0}[str(unknown.axis)]
        return mount.stiffness_dynamic[along]
    if unknown.kind == "viscous":
        loss = mount.loss_factor[2]
        return mount.viscous[2] + (loss * stiffness / omega if loss and omega else 0.0)
    if unknown.kind == "loss-factor":
        viscous = mount.viscous[2]
        return mount.loss_factor[2] + (viscous * omega / stiffness if viscous and omega else 0.0)
    return None
