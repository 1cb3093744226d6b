"""Fronts of two or three objectives of a sizing problem: exact for one axis, else by local searches with no gap known.

One objective is minimised while the others are held below a row of levels (epsilon constraint). On one axis each
of these is solved globally, so every point is nondominated and exact to the tolerance of the solver.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.sizing.made_parts import made_table, sizing_of
from detune.sizing.one_axis import OneAxisOutcome, solve_one_axis
from detune.sizing.statement import Ballast, OneAxisProblem
from detune.solvers.one_axis_statement import OneAxis, objective_of
from detune.solvers.size_one_axis import at_level, constant_cost, least_level, values_of, with_room

Floats = NDArray[np.float64]
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


def one_axis_front(brief: Brief, axis: OneAxis, count: int) -> SizingFront:
    """The exact front of a one-axis problem over the traded objectives, `count` levels of each objective held."""
    trade = sizing_of(brief).trade
    minimised = next(name for name in ORDER if name in trade)
    held = tuple(name for name in trade if name != minimised)
    problem = with_room(axis.problem)
    ranges = [_range(brief, axis, problem, name) for name in held]
    found: list[FrontPoint] = []
    if all(span is not None for span in ranges):
        levels = [np.linspace(*span, count) for span in ranges if span is not None]
        for each in itertools.product(*levels):
            outcome = _held(brief, problem, minimised, dict(zip(held, each, strict=True)))
            if outcome is not None and outcome.branches:
                best = outcome.branches[0]
                values = values_of(brief, axis.pieces, best.best)
                objectives = one_axis_objectives(brief, axis, values[None])
                told = {name: float(objectives[name][0]) for name in objectives}
                found.append(FrontPoint(values, told, best.name))
    points = nondominated(found, trade)
    worth = (
        f"least {minimised} for each level of {', '.join(held)}: exact and global on one axis "
        f"(epsilon constraint, {count} levels each; between two levels nothing is said)"
    )
    return SizingFront(trade, minimised, points, worth)


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


def _range(brief: Brief, axis: OneAxis, problem: OneAxisProblem, name: str) -> tuple[float, float] | None:
    """Levels of an objective from its best to the worst it needs where another is best; None where none is feasible."""
    if name == "worst-response":
        low, outcome = least_level(problem)
        return (low * (1.0 + 1e-6), 1.0) if outcome.branches and low <= 1.0 else None
    best = _best(brief, axis, problem, name)
    if best is None:
        return None
    ends = [best]
    for other in sizing_of(brief).trade:
        if other == name:
            continue
        held = _at_best(brief, axis, problem, other)
        value = None if held is None else _best(brief, axis, held, name)
        if other == "cost":
            free = solve_one_axis(replace(problem, objective=objective_of(brief, problem, "cost")))
            at = values_of(brief, axis.pieces, free.branches[0].best)
            value = float(one_axis_objectives(brief, axis, at[None])[name][0])
        ends += [] if value is None else [value]
    low, high = min(ends), max(ends)
    if name == "separation":
        return low, high * (1.0 - 1e-6)
    return low * (1.0 + 1e-6), high * (1.0 + 2e-6)


def _best(brief: Brief, axis: OneAxis, problem: OneAxisProblem, name: str) -> float | None:
    outcome = solve_one_axis(replace(problem, objective=objective_of(brief, problem, name)))
    return outcome.branches[0].best.objective if outcome.branches else None


def _at_best(brief: Brief, axis: OneAxis, problem: OneAxisProblem, name: str) -> OneAxisProblem | None:
    """The problem with an objective held at its own best."""
    if name == "cost":
        return None
    if name == "worst-response":
        return at_level(problem, least_level(problem)[0] * (1.0 + 1e-6))
    best = _best(brief, axis, problem, name)
    if best is None:
        return None
    return HOLD[name](problem, best * (1.0 - 1e-6) if name == "separation" else best * (1.0 + 1e-6))


def _held(
    brief: Brief, problem: OneAxisProblem, minimised: str, levels: dict[str, float]
) -> OneAxisOutcome | None:
    changed: OneAxisProblem | None = problem
    for name, level in levels.items():
        if changed is None:
            return None
        changed = HOLD[name](changed, float(level))
    if changed is None:
        return None
    return solve_one_axis(replace(changed, objective=objective_of(brief, changed, minimised)))


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
