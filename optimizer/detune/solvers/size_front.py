"""Fronts of two or three objectives of a sizing problem: exact for one axis, else by local searches with no gap known.

One objective is minimised while the others are held below a row of levels (epsilon constraint). On one axis each
of these is solved globally, so every point is nondominated and exact to the tolerance of the solver.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.sizing.made_parts import made_table, sizing_of
from detune.sizing.one_axis import OneAxisOutcome, solve_one_axis
from detune.sizing.statement import Ballast, OneAxisProblem
from detune.solvers.one_axis_objective import objective_of
from detune.solvers.one_axis_statement import OneAxis
from detune.solvers.size_one_axis import at_level, constant_cost, least_level, values_of, with_room

Floats = NDArray[np.float64]
# Levels between which designs differ by less than this share of their spans get none between them.
NEAR, FINEST = 0.04, 1e-4
# Of these one is minimised, the others are held; the first that is traded is the one minimised.
ORDER = ("cost", "damping", "stiffness", "separation", "added-mass", "worst-response")


@dataclass(frozen=True)
class FrontPoint:
    """One design of the front: the unknowns (u,), its objectives by name, and whether it is exact.

    `bounds` say what no design has less of than the objective that is minimised (more, of separation): among which
    designs, and the bound. A searched point without any has a gap that is not known.
    """

    values: Floats
    objectives: dict[str, float]
    branch: str
    bounds: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True)
class SizingFront:
    """Nondominated points over the traded objectives. `worth` says in words what the points are worth."""

    trade: tuple[str, ...]
    minimised: str
    points: tuple[FrontPoint, ...]
    worth: str
    exact: bool = True


def one_axis_objectives(brief: Brief, axis: OneAxis, points: Floats) -> dict[str, Floats]:
    """Every objective (N,) at points (N, u) of a one-axis problem."""
    from detune.physics.separation import separation as distance
    from detune.solvers.size_map import axis_values, one_axis_margins

    stiffness, damping, mass = axis_values(brief, axis, points)
    problem = axis.problem
    weights = objective_of(brief, problem, "cost")
    added = mass - problem.mass
    frequency = np.sqrt(stiffness / mass) / (2.0 * np.pi)
    intervals = problem.excitation_intervals
    apart = (
        np.min([distance(frequency, a, b) for a, b in intervals], axis=0)
        if intervals
        else np.full(len(mass), np.inf)
    )
    names, margins = one_axis_margins(axis, stiffness, damping, mass)
    response = [k for k, name in enumerate(names) if name in set(axis.labels)]
    worst = 1.0 / (1.0 + margins[response].min(axis=0)) if response else np.zeros(len(mass))
    return {
        "cost": weights.stiffness_weight * stiffness
        + weights.damping_weight * damping
        + weights.mass_weight * added
        + constant_cost(brief),
        "damping": damping,
        "stiffness": stiffness,
        "separation": apart,
        "added-mass": added,
        "worst-response": worst,
    }


class _Solved:
    """Exact answers of one problem with objectives held, each found once."""

    def __init__(self, brief: Brief, axis: OneAxis, problem: OneAxisProblem) -> None:
        self.brief, self.axis, self.problem = brief, axis, problem
        self._known: dict[tuple[str, tuple[tuple[str, float], ...]], tuple[OneAxisOutcome, float] | None] = {}

    def outcome(self, name: str, limits: dict[str, float]) -> tuple[OneAxisOutcome, float] | None:
        """The best in one objective with others held at levels, and the level of all responses that was sought, else
        NaN; None where no design is there.
        """
        key = (name, tuple(sorted(limits.items())))
        if key not in self._known:
            self._known[key] = self._solve(name, limits)
        return self._known[key]

    def _solve(self, name: str, limits: dict[str, float]) -> tuple[OneAxisOutcome, float] | None:
        changed = self.problem
        for held, most in limits.items():
            tighter = HOLD[held](changed, float(most))
            if tighter is None:
                return None
            changed = tighter
        if name == "worst-response":
            level, outcome = least_level(changed)
            return (outcome, level) if outcome.branches and level <= 1.0 else None
        outcome = solve_one_axis(replace(changed, objective=objective_of(self.brief, changed, name)))
        return (outcome, float("nan")) if outcome.branches else None

    def best(self, name: str, limits: dict[str, float]) -> float | None:
        """The best value of one objective with others held; None where no design is there."""
        if name == "worst-response":
            found = self.outcome(name, limits)
            return None if found is None else found[1]
        point = self.point(name, limits)
        return None if point is None else point.objectives[name]

    def point(self, name: str, limits: dict[str, float]) -> FrontPoint | None:
        """The design that is best in one objective with others held; None where no design is there."""
        found = self.outcome(name, limits)
        if found is None:
            return None
        best = found[0].branches[0]
        values = values_of(self.brief, self.axis.pieces, best.best)
        objectives = one_axis_objectives(self.brief, self.axis, values[None])
        return FrontPoint(values, {key: float(value[0]) for key, value in objectives.items()}, best.name)


def _range(solved: _Solved, name: str) -> tuple[float, float] | None:
    """Levels of an objective from its best to the worst it needs where another is best; None where none is feasible."""
    best = solved.best(name, {})
    if best is None:
        return None
    if name == "worst-response":
        return best * (1.0 + 1e-6), 1.0
    ends = [best]
    for other in sizing_of(solved.brief).trade:
        if other == name:
            continue
        if other == "cost":
            cheapest = solved.point("cost", {})
            ends += [] if cheapest is None else [cheapest.objectives[name]]
            continue
        most = solved.best(other, {})
        if most is None:
            continue
        level = most * (1.0 - 1e-6 if other == "separation" else 1.0 + 1e-6)
        value = solved.best(name, {other: level})
        ends += [] if value is None else [value]
    low, high = min(ends), max(ends)
    if name == "separation":
        return low, high * (1.0 - 1e-6)
    return low * (1.0 + 1e-6), high * (1.0 + 2e-6)


def one_axis_front(brief: Brief, axis: OneAxis, count: int) -> SizingFront:
    """The exact front of a one-axis problem over the traded objectives, `count` levels of each objective held.

    A level of a bound that the design of a looser level keeps anyway gives the same design and is passed over. What
    that saves goes into levels between those whose designs differ most.
    """
    trade = sizing_of(brief).trade
    minimised = next(name for name in ORDER if name in trade)
    held = tuple(name for name in trade if name != minimised)
    solved = _Solved(brief, axis, with_room(axis.problem))
    ranges = [_range(solved, name) for name in held]
    found: list[FrontPoint] = []
    if all(span is not None for span in ranges):
        spans = [span for span in ranges if span is not None]
        first = np.linspace(*spans[0], count).tolist()
        rest = [np.linspace(*span, count).tolist() for span in spans[1:]]
        cut = {level: _cut(solved, minimised, held, level, rest) for level in first}
        for _ in range(count):
            between = _between(cut, trade)
            if between is None:
                break
            cut[between] = _cut(solved, minimised, held, between, rest)
        found = [point for level in sorted(cut) for point in cut[level]]
    points = nondominated(found, trade)
    worth = (
        f"least {minimised} for each level of {', '.join(held)}: exact and global on one axis "
        f"(epsilon constraint, {count} levels each and more where the designs differ most; between two levels nothing "
        "is said)"
    )
    return SizingFront(trade, minimised, points, worth)


def _cut(
    solved: _Solved, minimised: str, held: tuple[str, ...], level: float, rest: list[list[float]]
) -> list[FrontPoint]:
    """The best designs with the first objective held at a level, for all levels of a second one, loosest first."""
    limits = {held[0]: level}
    if not rest:
        point = solved.point(minimised, limits)
        return [] if point is None else [point]
    name = held[1]
    loosest_first = sorted(rest[0], reverse=name != "separation")
    if name == "added-mass":
        # Ballast is held at its level and not below it: no level stands for another.
        points = [solved.point(minimised, {**limits, name: each}) for each in loosest_first]
        return [point for point in points if point is not None]
    found: list[FrontPoint] = []
    for each in loosest_first:
        reached = found[-1].objectives[name] if found else None
        if reached is not None and (each <= reached if name == "separation" else each >= reached):
            continue
        point = solved.point(minimised, {**limits, name: each})
        if point is None:
            break
        found.append(point)
    return found


def _between(cut: dict[float, list[FrontPoint]], trade: tuple[str, ...]) -> float | None:
    """The middle of the two neighbouring levels whose first designs differ most, by the spans of all objectives."""
    levels = sorted(level for level, points in cut.items() if points)
    if len(levels) < 2:
        return None
    table = np.array([[cut[level][0].objectives[name] for name in trade] for level in levels])
    span = np.maximum(np.ptp(table, axis=0), 1e-12 * np.maximum(np.abs(table).max(axis=0), 1e-300))
    away = np.abs(np.diff(table, axis=0) / span).max(axis=1)
    # Levels that are as good as one are not cut again.
    away[np.diff(levels) <= FINEST * (levels[-1] - levels[0])] = 0.0
    widest = int(np.argmax(away))
    return 0.5 * (levels[widest] + levels[widest + 1]) if away[widest] > NEAR else None


def nondominated(points: list[FrontPoint], trade: tuple[str, ...]) -> tuple[FrontPoint, ...]:
    """The points no other one beats, in the order of the first traded objective."""
    if not points:
        return ()
    sign = np.array([-1.0 if name == "separation" else 1.0 for name in trade])
    table = np.array([[point.objectives[name] for name in trade] for point in points]) * sign
    scale = np.maximum(np.abs(table).max(axis=0), 1e-300)
    kept: list[FrontPoint] = []
    for index, row in enumerate(table):
        # Equal within rounding counts once, at its first place.
        slack = 1e-7 * scale
        beats = np.all(table <= row + slack, axis=1) & np.any(table < row - slack, axis=1)
        same = np.all(np.abs(table - row) <= slack, axis=1)
        if not beats.any() and not same[:index].any():
            kept.append(points[index])
    return tuple(sorted(kept, key=lambda point: point.objectives[trade[0]]))


def _mass_at(problem: OneAxisProblem, level: float) -> OneAxisProblem | None:
    """Ballast held at the level itself: every point of the front has some ballast, and is best among its equals."""
    ballast = problem.ballast
    if ballast is None or not ballast.least - 1e-9 <= level <= ballast.most + 1e-9:
        return None
    level = min(max(level, ballast.least), ballast.most)
    return replace(problem, ballast=Ballast(level, level))


def _bounded(key: str) -> Callable[[OneAxisProblem, float], OneAxisProblem | None]:
    def hold(problem: OneAxisProblem, level: float) -> OneAxisProblem | None:
        low, high = getattr(problem, key)
        changes: dict[str, object] = {key: (low, min(high, level))}
        return replace(problem, **changes) if level >= low else None  # type: ignore[arg-type]

    return hold


def _apart(problem: OneAxisProblem, level: float) -> OneAxisProblem | None:
    return replace(problem, separation=min(max(level, problem.separation or 0.0), 0.999))


HOLD: dict[str, Callable[[OneAxisProblem, float], OneAxisProblem | None]] = {
    "added-mass": _mass_at,
    "damping": _bounded("damping_bounds"),
    "stiffness": _bounded("stiffness_bounds"),
    "separation": _apart,
    "worst-response": at_level,
}


def part_note(brief: Brief) -> str:
    """What the cost of the front counts."""
    made = made_table(brief, brief.groups[0])
    priced = made.cost or made.cost_per_stiffness or made.cost_per_damping or made.cost_per_loss_factor
    return "" if priced else "the study states no price of made parts; cost counts ballast alone"
