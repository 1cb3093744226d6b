"""A second opinion on one-axis sizing: the same brief stated again in Pyomo and solved globally by SCIP.

The two share the statement of the limits (`one_axis_statement`) and nothing after it: the exact method walks
along the limits, SCIP branches over stiffness, damping, ballast and the number of parts. Where they differ by
more than AGREE neither is believed.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.problem.build import Problem
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.sizing.made_parts import made_design, made_table, parallel_range, sizing_of, with_parallel
from detune.sizing.one_axis import SizedDesign
from detune.sizing.one_axis_pyomo import PartCount, ScipAnswer, Status
from detune.solvers.one_axis_statement import OneAxis, one_axis, why_not_one_axis
from detune.solvers.size_one_axis import OneAxisSizing, constant_cost, solve, values_of
from detune.solvers.size_scip import solve_with_scip

Floats = NDArray[np.float64]
# Largest relative difference of two objectives that are called the same, and the time SCIP has where none is stated; s.
AGREE, TIME_LIMIT = 1e-6, 60.0


@dataclass(frozen=True)
class SizingOpinion:
    """What SCIP said of the one-axis problem, beside the exact answer.

    `status` "optimal" and "infeasible" are proofs of SCIP's; a "time limit" or "failed" says nothing of the
    problem. `objective`, `bound`, `values` (u,) and `assessment` are NaN or None without a design.
    `difference` is relative, to the exact objective. `agrees` is None where SCIP came to no end. `seconds` of both
    (of processor time) are from the statement to the answer, of the exact method with every branch. `relaxed`: what
    the statement leaves to the assessor.
    """

    status: Status
    objective: float
    bound: float
    values: Floats | None
    assessment: Assessment | None
    exact: float | None
    difference: float | None
    agrees: bool | None
    seconds: float
    exact_seconds: float
    runs: int
    detail: str
    relaxed: tuple[str, ...]

    def worth(self, exact: str) -> str:
        """What the exact answer is worth after this opinion, from what it was worth before."""
        if self.agrees:
            return f"{exact}; confirmed by SCIP on a second statement"
        if self.agrees is None:
            return f"{exact}; SCIP came to no end on a second statement ({self.status})"
        return "withdrawn: SCIP, on a second statement, came to another answer, and neither is proven"


def second_opinion(
    brief: Brief,
    problem: Problem,
    exact: OneAxisSizing,
    time_limit: float | None = None,
    stop: Callable[[], bool] | None = None,
) -> SizingOpinion:
    """Ask SCIP about the problem that `exact` answers; `time_limit` (s) is hard. Raises ValueError off one axis."""
    why = why_not_one_axis(brief)
    if why is not None:
        raise ValueError(why)
    started = time.process_time()
    solve(brief, problem)
    exact_seconds = time.process_time() - started
    statement, count = _statement(brief, problem)
    level = sizing_of(brief).goal == "worst-response"
    answer = solve_with_scip([statement.problem], time_limit or TIME_LIMIT, [count], level, stop)[0]
    return _told(brief, statement, answer, exact, exact_seconds)


def _statement(brief: Brief, problem: Problem) -> tuple[OneAxis, PartCount | None]:
    """The problem with every limit, for one part side by side, and what their number changes in it."""
    counts = parallel_range(brief)
    if counts is None:
        return one_axis(brief, problem, every_limit=True), None
    single = with_parallel(brief, 1)
    first, second = (one_axis(with_parallel(brief, n), problem, every_limit=True) for n in (1, 2))
    pairs = zip(first.problem.limits, second.problem.limits, strict=True)
    shared = tuple(a.name for a, b in pairs if b.limit > 1.5 * a.limit)
    made = made_table(brief, brief.groups[0])
    weighted = sizing_of(brief).goal == "cost"
    loss = weighted and first.problem.damping_kind == "loss factor"
    stations = len(brief.stations)
    count = PartCount(
        *counts,
        cost=constant_cost(single) if weighted else 0.0,
        cost_per_damping=stations * made.cost_per_loss_factor if loss else 0.0,
        shared=shared,
    )
    if loss:
        # The price of damping is that of every part, so it goes with their number.
        objective = replace(first.problem.objective, damping_weight=0.0)
        first = replace(first, problem=replace(first.problem, objective=objective))
    return first, count


def _told(
    brief: Brief, statement: OneAxis, answer: ScipAnswer, exact: OneAxisSizing, exact_seconds: float
) -> SizingOpinion:
    counted = parallel_range(brief) is not None
    shift = constant_cost(brief) if sizing_of(brief).goal == "cost" and not counted else 0.0
    best = exact.branches[0].objective if exact.branches else None
    objective, bound = answer.objective + shift, answer.bound + shift
    values = assessment = difference = agrees = None
    if math.isfinite(answer.stiffness):
        values = _values(brief, answer)
        made = made_design(brief, values)
        assessment = assess(made.brief, made.design)
    if answer.status == "infeasible":
        agrees = best is None
    elif answer.status == "optimal":
        agrees = False
        if best is not None:
            difference = abs(objective - best) / max(abs(best), 1e-9)
            agrees = difference <= AGREE
    return SizingOpinion(
        answer.status, objective, bound, values, assessment, best, difference, agrees, answer.seconds, exact_seconds,
        answer.runs, answer.detail, statement.relaxed,
    )  # fmt: skip


def _values(brief: Brief, answer: ScipAnswer) -> Floats:
    nan = math.nan
    design = SizedDesign(answer.stiffness, answer.damping, answer.ballast, nan, nan, nan, (), ())
    pieces = sum(station.parallel for station in brief.stations)
    if parallel_range(brief) is not None:
        pieces = answer.count * len(brief.stations)
    return values_of(brief, pieces, design)


def at_best_count(brief: Brief, values: Floats | None) -> Brief:
    """The brief with the number of parts side by side held where `values` (u,) have it."""
    counted = [k for k, u in enumerate(sizing_of(brief).unknown) if u.kind == "parallel"]
    if not counted or values is None:
        return brief
    return with_parallel(brief, round(float(values[counted[0]])))
