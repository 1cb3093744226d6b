"""Running a study: build, solve, assess, and gather what the report needs."""

import time
from dataclasses import dataclass

from detune.ground.errors import BriefError, Fault
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.solvers import SOLVERS, choose
from detune.solvers.outcome import Outcome, Settings
from detune.study.front import Front, assessed_front
from detune.study.load import Study
from detune.study.why import PartReason, part_reasons


@dataclass(frozen=True)
class Result:
    """Everything a study came to.

    `answer` is the assessed design that is best in the first traded objective (of equal ones the
    best in the next), None where no design meets the brief. `compared` are designs the user named.
    `closest` is the assessed design that came nearest where none meets the brief.
    """

    study: Study
    problem: Problem
    outcome: Outcome
    front: Front
    answer: Assessment | None
    compared: tuple[Assessment, ...]
    closest: Assessment | None
    reasons: tuple[PartReason, ...]
    seconds: float
    why_method: str = ""

    @property
    def exit_code(self) -> int:
        """0 a design meets the brief, 1 none does, 3 stopped early."""
        if self.outcome.stopped != "finished":
            return 3
        return 0 if self.answer is not None else 1


def run_study(
    study: Study,
    settings: Settings | None = None,
    compared: tuple[Design, ...] = (),
    solver: str = "auto",
) -> Result:
    """Return the result of a study. Raises SolveError on a solver's fault.

    Raises BriefError on a faulty brief, and for a solver that is asked for and cannot treat the problem.
    """
    started = time.perf_counter()
    problem = build(study.brief, study.catalogs)
    method, why_method = choose(problem) if solver == "auto" else (solver, "asked for")
    refusal = SOLVERS[method].refusal(problem)
    if refusal is not None:
        others = ", ".join(name for name, other in SOLVERS.items() if other.refusal(problem) is None)
        raise BriefError([Fault("--method", None, "--method", f"{method} ({refusal})", f"one of {others}")])
    outcome = SOLVERS[method].solve(problem, settings or Settings())
    front = assessed_front(problem, outcome)
    reasons = part_reasons(problem, outcome)
    return Result(
        study=study,
        problem=problem,
        outcome=outcome,
        front=front,
        answer=front.points[0] if front.points else None,
        compared=tuple(assess(study.brief, design) for design in compared),
        closest=None if front.points else _closest(problem, outcome),
        reasons=reasons,
        why_method=why_method,
        seconds=time.perf_counter() - started,
    )


def _closest(problem: Problem, outcome: Outcome) -> Assessment | None:
    """Return the design that came nearest: of the furthest ones of each part, the one that misses least."""
    if outcome.closest.count == 0:
        return None
    judged = [assess(problem.brief, problem.design(outcome.closest, i)) for i in _few(outcome.closest.count)]
    return max(judged, key=lambda assessment: assessment.tightest.margin)


def _few(count: int) -> range:
    return range(0, count, max(1, count // 24))
