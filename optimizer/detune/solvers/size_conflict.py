"""Which limits contradict each other, where the exact one-axis method proves that no design meets them all.

Limits are taken away one after the other, and stay away where the rest still has no design (a deletion filter): what
is left has no design, and without any one of it there is one. Every step is an exact solution.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass, replace

from detune.brief.brief import Brief
from detune.problem.build import Problem
from detune.sizing.made_parts import parallel_range, sizing_of, with_parallel
from detune.sizing.one_axis import solve_one_axis
from detune.sizing.statement import Objective, OneAxisProblem
from detune.solvers.one_axis_statement import OneAxis, one_axis

SAG, SEPARATION = "sag", "separation"
# Factor by which bounds are widened to see whether they are what leaves no design.
WIDER = 1e4
# No further limit is tried after so long (s).
PATIENCE = 20.0


@dataclass(frozen=True)
class Conflict:
    """Limits (their names) that no design within the bounds meets together.

    `least`: without any one of them there is a design; otherwise time ran out, and fewer of them may suffice. `bounds`
    names the unknowns of which wider bounds would let a design through.
    """

    limits: tuple[str, ...]
    least: bool
    bounds: tuple[str, ...]


def conflict(brief: Brief, problem: Problem) -> Conflict | None:
    """The limits of a one-axis brief that contradict each other; None where there is a design, or nothing is proven.

    Where the worst response is sought its limits are no obstacle, and what is left over is looked at.
    """
    counts = parallel_range(brief)
    each = [brief] if counts is None else [with_parallel(brief, n) for n in range(counts[0], counts[1] + 1)]
    stated = [one_axis(every, problem) for every in each]
    names = _names(stated[0], sizing_of(brief).goal == "worst-response")
    until = time.perf_counter() + PATIENCE
    if not _empty(stated, names):
        return None
    left, least = list(names), True
    for name in names:
        if time.perf_counter() > until:
            least = False
            break
        rest = [other for other in left if other != name]
        if _empty(stated, rest):
            left = rest
    bounds = tuple(
        what
        for what in ("stiffness", "damping", "ballast")
        if time.perf_counter() < until and not _empty([_wider(one, what) for one in stated], left)
    )
    return Conflict(tuple(left), least, bounds)


def _names(stated: OneAxis, without_responses: bool) -> list[str]:
    problem = stated.problem
    found = [] if without_responses else list(dict.fromkeys(stated.labels))
    found += [SAG] if problem.sag is not None else []
    return found + ([SEPARATION] if problem.separation is not None else [])


def _empty(stated: Sequence[OneAxis], names: Sequence[str]) -> bool:
    """Whether it is proven that no design meets these limits."""
    for each in stated:
        outcome = solve_one_axis(_only(each, names))
        if outcome.branches or not outcome.decided:
            return False
    return True


def _only(stated: OneAxis, names: Sequence[str]) -> OneAxisProblem:
    problem = stated.problem
    pairs = zip(stated.labels, problem.limits, strict=True)
    return replace(
        problem,
        objective=Objective("softest"),
        limits=tuple(limit for label, limit in pairs if label in names),
        sag=problem.sag if SAG in names else None,
        separation=problem.separation if SEPARATION in names else None,
    )


def _wider(stated: OneAxis, what: str) -> OneAxis:
    problem = stated.problem
    if what == "stiffness":
        low, high = problem.stiffness_bounds
        return replace(stated, problem=replace(problem, stiffness_bounds=(low / WIDER, high * WIDER)))
    if what == "damping":
        most = problem.damping_bounds[1] * WIDER if problem.damping_kind == "viscous" else 1.0
        return replace(
            stated, problem=replace(problem, damping_bounds=(0.0, max(most, problem.damping_bounds[1])))
        )
    ballast = problem.ballast
    if ballast is None or ballast.step is not None:
        return stated
    wide = replace(ballast, least=0.0, most=max(ballast.most, 10.0 * problem.mass))
    return replace(stated, problem=replace(problem, ballast=wide))


def conflict_text(found: Conflict) -> str:
    """The conflict in the user's words."""
    if not found.limits:
        text = "No design lies within the bounds at all"
    elif len(found.limits) == 1:
        text = f"This limit alone leaves no design within the bounds: {found.limits[0]}"
    else:
        also = "without any one of them there is a design" if found.least else "fewer of them may suffice"
        text = f"These limits contradict each other within the bounds: {'; '.join(found.limits)} ({also})"
    if found.bounds:
        text += f". Wider bounds of {' or '.join(found.bounds)} would leave a design"
    return text + "."
