"""Lines that make feasible islands of a one-axis map visible to a grid, however small they are.

Stiffness against damping: each branch is known exactly (`one_axis_map`), and a line is laid through it. With ballast
on an axis, every mass line is solved exactly in the other unknown, and each run of mass lines without a feasible
point is searched between the lines by branch and bound over the mass (`solve_one_axis`), which proves that nothing is
there or finds it. Not searched is what lies between two lines of which one holds something feasible.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.one_axis import SizedDesign, solve_one_axis
from detune.sizing.one_axis_map import feasible_region
from detune.sizing.statement import Ballast, Objective, OneAxisProblem
from detune.solvers.map_axes import MapPlane

Floats = NDArray[np.float64]
# The least margin (N,) at places x (N,), y (N,).
Least = Callable[[Floats, Floats], Floats]
MASS_LINES = 61
# Lines laid through one island in each direction.
ACROSS = 7
# Islands that get lines of their own, and runs that are searched.
MOST, MOST_RUNS = 12, 24
SMALLEST = 1e-9


@dataclass(frozen=True)
class Islands:
    """Lines x and y that cut every island, and the exact outline (n, 2) of each branch of stiffness and damping."""

    x: Floats
    y: Floats
    pieces: tuple[Floats, ...]


def islands_of(plane: MapPlane, margins: Least) -> Islands:
    """The lines for the islands of a one-axis plane; `margins` gives the least margin (N,) at places x (N,), y (N,)."""
    kinds = {plane.first.kind, plane.second.kind}
    if "ballast" not in kinds:
        return _by_branches(plane)
    x: list[float] = []
    y: list[float] = []
    for point in _with_ballast(plane, kinds - {"ballast"})[:MOST]:
        place = plane.place(point[None])[0]
        lines = _through(plane, place, margins)
        x += lines[0].tolist()
        y += lines[1].tolist()
    return Islands(np.array(x), np.array(y), ())


def held(plane: MapPlane, free: set[str]) -> OneAxisProblem:
    """The one-axis problem with every unknown held where the map holds it but those of these kinds."""
    assert plane.axis is not None
    problem = replace(plane.axis.problem, objective=Objective("least damping"))
    point = plane.values[None]
    if "stiffness" not in free:
        k = float(plane.stiffness(point)[0])
        problem = replace(problem, stiffness_bounds=(k, k))
    if "viscous" not in free and "loss-factor" not in free:
        c = _damping(plane)
        problem = replace(problem, damping_bounds=(c, c))
    if problem.ballast is not None and "ballast" not in free:
        added = float(plane.mass(point)[0]) - problem.mass
        problem = replace(problem, ballast=Ballast(added, added))
    return problem


def _damping(plane: MapPlane) -> float:
    from detune.solvers.size_map import axis_values

    assert plane.axis is not None
    return float(axis_values(plane.brief, plane.axis, plane.values[None])[1][0])


def _by_branches(plane: MapPlane) -> Islands:
    assert plane.axis is not None
    per = plane.axis.pieces if plane.axis.problem.damping_kind == "viscous" else 1
    flipped = plane.second.kind == "stiffness"
    lines: tuple[list[float], list[float]] = ([], [])
    pieces = []
    for piece in feasible_region(held(plane, {"stiffness", "viscous", "loss-factor"})):
        least, most = (
            _drawn(plane, piece.stiffness, damping, per)
            for damping in (piece.least_damping, piece.greatest_damping)
        )
        # A node inside every branch, however small; the branch itself is drawn from its exact curves.
        for k in np.linspace(0, len(least) - 1, 5).astype(int)[1:-1]:
            lines[flipped].append(float(least[k, int(flipped)]))
            lines[not flipped].append(float(0.5 * (least[k] + most[k])[int(not flipped)]))
        pieces.append(np.concatenate([least, most[::-1]]))
    return Islands(np.array(lines[0]), np.array(lines[1]), tuple(pieces))


def _drawn(plane: MapPlane, stiffness: Floats, damping: Floats, per: int) -> Floats:
    """Places (n, 2) of total stiffness and damping on the map."""
    points = np.repeat(plane.values[None], len(stiffness), axis=0)
    assert plane.axis is not None
    for own in (plane.first, plane.second):
        points[:, own.column] = stiffness / plane.axis.pieces if own.kind == "stiffness" else damping / per
    return plane.place(points)


def _with_ballast(plane: MapPlane, other: set[str]) -> list[Floats]:
    """Unknowns (u,) inside islands of a map with ballast on an axis: of each mass line, and of runs between them."""
    problem = held(plane, {"ballast", *other})
    assert problem.ballast is not None
    least, most = problem.ballast.least, problem.ballast.most
    lines = np.linspace(least, most, MASS_LINES)
    step = problem.ballast.step
    found: list[Floats] = []
    feasible = []
    for mass in lines.tolist():
        outcome = solve_one_axis(replace(problem, ballast=Ballast(mass, mass)))
        feasible.append(bool(outcome.branches))
        found += [_values(plane, branch.best) for branch in outcome.branches]
    runs = _runs(lines, feasible)
    between: list[Floats] = []
    while runs and len(between) < MOST_RUNS and step is None:
        low, high = runs.pop(0)
        outcome = solve_one_axis(replace(problem, ballast=Ballast(low, high)))
        if not outcome.branches:
            continue
        between += [_values(plane, branch.best) for branch in outcome.branches]
        at = outcome.branches[0].best.ballast
        width = 0.02 * (high - low)
        if high - low > 1e-3 * (most - least):
            runs += [(a, b) for a, b in ((low, at - width), (at + width, high)) if b > a]
    return [*between, *_sparse(found, plane)]


def _runs(lines: Floats, feasible: list[bool]) -> list[tuple[float, float]]:
    """Intervals of mass between feasible lines that hold none, longest first."""
    runs = []
    start: int | None = None
    for number, good in enumerate([*feasible, True]):
        if not good and start is None:
            start = number
        if good and start is not None:
            runs.append((float(lines[max(start - 1, 0)]), float(lines[min(number, len(lines) - 1)])))
            start = None
    # The feasible lines at the ends of a run are known already.
    inner = [(a + 1e-6 * (b - a), b - 1e-6 * (b - a)) for a, b in runs]
    return sorted(inner, key=lambda run: run[0] - run[1])


def _sparse(found: list[Floats], plane: MapPlane) -> list[Floats]:
    """Points at either end and the middle of what the mass lines show; the grid shows the rest."""
    if len(found) <= 3:
        return found
    return [found[0], found[len(found) // 2], found[-1]]


def _values(plane: MapPlane, design: SizedDesign) -> Floats:
    from detune.solvers.size_one_axis import values_of

    assert plane.axis is not None
    return values_of(plane.brief, plane.axis.pieces, design)


def _through(plane: MapPlane, place: Floats, margins: Least) -> tuple[Floats, Floats]:
    """Lines through the inside of the island at a place on its rim, and across its width and height."""
    middle = _inner(plane, place, margins)
    spans = []
    for number, own in enumerate((plane.first, plane.second)):
        ends = []
        for limit in (own.low, own.high):
            shares = np.concatenate([[0.0], np.geomspace(SMALLEST, 1.0, 200)])
            at = np.repeat(middle[None], len(shares), axis=0)
            at[:, number] = middle[number] + shares * (limit - middle[number])
            good = margins(at[:, 0], at[:, 1]) >= 0.0
            last = len(shares) - 1 if good.all() else max(int(np.argmin(good)) - 1, 0)
            ends.append(float(at[last, number]))
        spans.append(np.linspace(ends[0], ends[1], ACROSS))
    return spans[0], spans[1]


def _inner(plane: MapPlane, place: Floats, margins: Least) -> Floats:
    """The place of the greatest least margin near a place on the rim of an island, by ever closer looks."""
    spans = np.array([plane.first.high - plane.first.low, plane.second.high - plane.second.low])
    low = np.array([plane.first.low, plane.second.low])
    best, greatest = place.copy(), -np.inf
    for reach in np.geomspace(0.05, SMALLEST, 14):
        share = np.linspace(-1.0, 1.0, 17) * reach
        xx, yy = np.meshgrid(best[0] + share * spans[0], best[1] + share * spans[1])
        x, y = np.clip(xx.ravel(), low[0], low[0] + spans[0]), np.clip(yy.ravel(), low[1], low[1] + spans[1])
        found = margins(x, y)
        top = int(np.argmax(found))
        if found[top] > greatest:
            greatest, best = float(found[top]), np.array([x[top], y[top]])
    return best
