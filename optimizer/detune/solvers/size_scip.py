"""SCIP on one-axis sizing problems, in a process of its own that is ended when it overruns its time limit."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from detune.ground.errors import SolveError
from detune.sizing.one_axis_pyomo import PartCount, ScipAnswer, ScipTask, nothing, run
from detune.sizing.statement import OneAxisProblem
from detune.solvers.own_process import OwnProcess

# Relative gap at which SCIP may stop, and what its process may take to import its libraries; seconds.
GAP, IMPORTS = 1e-8, 60.0


def solve_with_scip(
    problems: Sequence[OneAxisProblem],
    time_limit: float,
    counts: Sequence[PartCount | None] | None = None,
    level: bool = False,
    stop: Callable[[], bool] | None = None,
) -> list[ScipAnswer]:
    """Solve each problem globally by SCIP; `time_limit` (s) is hard and for each, imports apart.

    `level`: find the least factor on all response limits instead of the objective. A process that dies or
    raises is an answer "failed", never an exception; one that overruns is ended, and another takes the next
    problem.
    """
    many = counts if counts is not None else [None] * len(problems)
    answers = []
    with OwnProcess(run) as process:
        for problem, count in zip(problems, many, strict=True):
            task = ScipTask(problem, count, level, time_limit, GAP)
            try:
                if process.pipe is None:
                    process.ask(None, IMPORTS, stop)
                answer = process.ask(task, time_limit, stop)
            except SolveError as error:
                answers.append(nothing("failed", str(error)))
                continue
            if answer is None:
                detail = "ended from outside: it did not answer within its time limit"
                answer = nothing("time limit", detail, time_limit)
            answers.append(answer)
    return answers
