"""Sizing one axis exactly: every feasible branch with its best design, the global best first."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.problem.build import Problem
from detune.sizing.made_parts import parallel_range, sizing_of, with_parallel
from detune.sizing.one_axis import OneAxisOutcome, SizedDesign, solve_one_axis
from detune.sizing.statement import OneAxisProblem, ResponseLimit
from detune.solvers.one_axis_statement import OneAxis, is_viscous, one_axis, why_not_one_axis

Floats = NDArray[np.float64]
# The design returned stands this far (relative) inside its limits, so that rounding does not decide.
ROOM = 2e-6
# Levels of the least worst response are bisected to this relative width.
LEVEL = 1e-9


@dataclass(frozen=True)
class SizedBranch:
    """One disjoint feasible region: its name, stiffness interval (N/m, one part), best values (u,) and objective.

    `values` stand ROOM inside the limits; `objective` is the exact optimum on them.
    """

    name: str
    stiffness: tuple[float, float]
    values: Floats
    objective: float
    natural_frequency: float
    tight: tuple[str, ...]


@dataclass(frozen=True)
class OneAxisSizing:
    """All branches, global best first, and what the one-axis problem leaves to the assessor (`relaxed`).

    `bound` is proven: no design within the bounds does better. `gap` is its distance to the best branch. Without
    branches `proven` says whether it is proven that there are none.
    """

    statement: OneAxis
    branches: tuple[SizedBranch, ...]
    bound: float
    gap: float
    proven: bool = True


def solve(brief: Brief, problem: Problem) -> OneAxisSizing | str:
    """The exact answer, or why the brief is no one-axis problem.

    A number of parts side by side that is sought is tried from the least to the greatest, each answer exact.
    """
    why = why_not_one_axis(brief)
    if why is not None:
        return why
    counts = parallel_range(brief)
    if counts is None:
        return _solve(brief, problem)
    return _best_count(
        brief, [_solve(with_parallel(brief, n), problem) for n in range(counts[0], counts[1] + 1)]
    )


def _best_count(brief: Brief, found: list[OneAxisSizing]) -> OneAxisSizing:
    """The answers for every number of parts as one: branches, best first, and the best of the bounds.

    Of ballast in steps the best of each position of the natural frequency is kept, unless the assessor has to decide.
    """
    sense = sizing_of(brief).sense
    column = next(k for k, u in enumerate(sizing_of(brief).unknown) if u.kind == "parallel")
    told = [
        replace(branch, name=f"{branch.name}, {round(branch.values[column])} in parallel")
        for each in found
        for branch in (each.branches if each.statement.relaxed else _of_positions(each.branches))
    ]
    bound = sense * min(sense * each.bound for each in found)
    if not told:
        return replace(found[0], bound=bound, proven=all(each.proven for each in found))
    branches = tuple(sorted(told, key=lambda branch: sense * branch.objective))
    best = min((each for each in found if each.branches), key=lambda each: sense * each.branches[0].objective)
    return OneAxisSizing(best.statement, branches, bound, max(0.0, sense * (branches[0].objective - bound)))


def _of_positions(branches: tuple[SizedBranch, ...]) -> tuple[SizedBranch, ...]:
    """The first branch of each position among the excitations."""
    first: dict[str, SizedBranch] = {}
    for branch in branches:
        first.setdefault(branch.name.split(", ballast")[0], branch)
    return tuple(first.values())


def _solve(brief: Brief, problem: Problem) -> OneAxisSizing:
    """The exact answer to a one-axis brief whose number of parts is known."""
    statement = one_axis(brief, problem)
    if sizing_of(brief).goal == "worst-response":
        level, outcome = least_level(statement.problem)
        inside = solve_one_axis(with_room(at_level(statement.problem, level * (1.0 + 2.0 * ROOM))))
        return _told(brief, statement, outcome, inside, level)
    outcome = solve_one_axis(statement.problem)
    return _told(brief, statement, outcome, solve_one_axis(with_room(statement.problem)), None)


def with_room(problem: OneAxisProblem) -> OneAxisProblem:
    """The problem with every limit tightened by ROOM."""
    sag = problem.sag
    if sag is not None:
        sag = replace(sag, most=sag.most * (1.0 - ROOM), least=sag.least * (1.0 + ROOM))
    separation = problem.separation
    if separation is not None:
        separation += 2.0 * ROOM
    return replace(at_level(problem, 1.0 - ROOM), sag=sag, separation=separation)


def at_level(problem: OneAxisProblem, level: float) -> OneAxisProblem:
    """The problem with every response limit multiplied by `level`."""
    return replace(problem, limits=tuple(_relaxed(limit, level) for limit in problem.limits))


def _relaxed(limit: ResponseLimit, level: float) -> ResponseLimit:
    return replace(limit, limit=limit.limit * level)


def least_level(problem: OneAxisProblem) -> tuple[float, OneAxisOutcome]:
    """Least factor on all response limits that leaves a design, and the outcome just above it (bisection, exact).

    A feasible level stays feasible when it is raised, so the bracket holds the global least worst ratio.
    """
    high, low = 1.0, 0.0
    outcome = solve_one_axis(at_level(problem, high))
    while not outcome.branches and high < 1e9:
        low, high = high, 4.0 * high
        outcome = solve_one_axis(at_level(problem, high))
    while high - low > LEVEL * high and outcome.branches:
        middle = 0.5 * (low + high) if low > 0.0 else 0.25 * high
        tried = solve_one_axis(at_level(problem, middle))
        if tried.branches:
            high, outcome = middle, tried
        else:
            low = middle
        if high < 1e-9:
            break
    return high, outcome


def values_of(brief: Brief, pieces: int, design: SizedDesign) -> Floats:
    """The unknowns (u,) of the brief at a one-axis design."""
    given = {
        "stiffness": design.stiffness / pieces,
        "viscous": design.damping / pieces,
        "loss-factor": design.damping,
        "ballast": design.ballast,
        "parallel": pieces / len(brief.stations),
    }
    unknowns = sizing_of(brief).unknown
    return np.array([np.clip(given[unknown.kind], *unknown.bounds) for unknown in unknowns])


def _told(
    brief: Brief, statement: OneAxis, outcome: OneAxisOutcome, inside: OneAxisOutcome, level: float | None
) -> OneAxisSizing:
    branches = []
    constant = constant_cost(brief) if sizing_of(brief).goal == "cost" else 0.0
    for branch in outcome.branches:
        best = branch.best
        value = best.objective + constant if level is None else level
        low, high = branch.stiffness_interval
        branches.append(
            SizedBranch(
                name=branch.name,
                stiffness=(low / statement.pieces, high / statement.pieces),
                values=values_of(brief, statement.pieces, _inside(inside, best)),
                objective=value,
                natural_frequency=best.natural_frequency,
                tight=best.tight,
            )
        )
    branches = _named_apart(branches, brief)
    bound = outcome.bound + constant if level is None else level
    gap = outcome.gap if level is None else LEVEL * level
    return OneAxisSizing(statement, tuple(branches), bound, gap, bool(branches) or outcome.decided)


def _inside(inside: OneAxisOutcome, best: SizedDesign) -> SizedDesign:
    """The design of the tightened problem that belongs to a branch; the branch's own where its island is too small."""

    def away(other: SizedDesign) -> float:
        pairs = ((best.stiffness, other.stiffness), (best.damping, other.damping), (best.mass, other.mass))
        return max(abs(a - b) / max(abs(a), abs(b), 1e-300) for a, b in pairs)

    near = min((branch.best for branch in inside.branches), key=away, default=best)
    return near if away(near) < 0.02 else best


def _named_apart(branches: list[SizedBranch], brief: Brief) -> list[SizedBranch]:
    """Branches of one name told apart by their ballast, or else by number."""
    from detune.ground.units import show

    names = [branch.name for branch in branches]
    column = next((k for k, u in enumerate(sizing_of(brief).unknown) if u.kind == "ballast"), None)
    told: list[SizedBranch] = []
    for branch in branches:
        name = branch.name
        if names.count(name) > 1 and column is not None:
            name = f"{name}, ballast {show(float(branch.values[column]), 'mass')}"
        earlier = sum(1 for other in told if other.name.split(" (")[0] == name)
        told.append(replace(branch, name=f"{name} ({earlier + 1})" if earlier else name))
    return told


def constant_cost(brief: Brief) -> float:
    """What the parts cost whatever their stiffness and damping, in the cost of a one-axis problem."""
    from detune.sizing.made_parts import made_table

    made = made_table(brief, brief.groups[0])
    pieces = sum(station.parallel for station in brief.stations)
    fixed = made.cost
    # A fixed damping of the other kind is no unknown of the one-axis problem.
    if is_viscous(brief):
        fixed += made.cost_per_loss_factor * (made.loss_factor or 0.0)
    elif made.viscous:
        fixed += made.cost_per_damping * made.viscous
    return pieces * fixed
