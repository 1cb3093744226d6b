"""Running a study: build, solve, assess, and gather what the report needs."""

import time
from dataclasses import dataclass, replace

import numpy as np

from detune.ground.errors import BriefError, Fault, SolveError
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs
from detune.solvers import SOLVERS, choose
from detune.solvers.outcome import Outcome, Settings
from detune.solvers.robust import RobustResult, numbers_of, robust_selection
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
    robust: RobustResult | None = None
    robust_answer: Assessment | None = None

    @property
    def guaranteed(self) -> bool:
        """Whether the brief asks for every limit over an interval of scatter."""
        return self.robust is not None and self.robust.judge == "interval"

    @property
    def subject(self) -> Assessment | None:
        """The design a reader looks at: the proven one, else the nominal answer, else the closest."""
        return self.robust_answer or self.answer or self.closest

    @property
    def exit_code(self) -> int:
        """0 a design meets the brief (over its scatter, where it states an interval), 1 none does, 3 stopped early.

        Where no design could be proven and some could not be decided either, that is 3 as well.
        """
        if self.outcome.stopped != "finished" or (
            self.robust is not None and self.robust.stopped != "finished"
        ):
            return 3
        if self.robust is not None and self.guaranteed and self.robust.winner is None:
            return 3 if self.robust.undecided or self.robust.sampled else 1
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
    robust = _over_scatter(problem, outcome, front, settings or Settings(), started)
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
        robust=robust,
        robust_answer=_robust_answer(problem, robust),
        seconds=time.perf_counter() - started,
    )


def _over_scatter(
    problem: Problem, outcome: Outcome, front: Front, settings: Settings, started: float
) -> RobustResult | None:
    """Return what the brief's scatter makes of the designs that meet it at listed values, None without scatter."""
    if problem.brief.scatter is None:
        return None
    left = settings.time_limit
    if left is not None:
        left = max(0.0, left - (time.perf_counter() - started))
    points = [numbers_of(front.designs, index) for index in front.index]
    return robust_selection(problem, outcome, points, replace(settings, time_limit=left))


def _robust_answer(problem: Problem, robust: RobustResult | None) -> Assessment | None:
    """Return the assessment of the proven design at listed values. Raises SolveError where the assessor refuses it."""
    if robust is None or robust.winner is None:
        return None
    chosen = Designs(
        np.array([robust.winner.part], dtype=np.intp), np.array([robust.winner.step], dtype=np.intp)
    )
    assessment = assess(problem.brief, problem.design(chosen, 0))
    if not assessment.meets:
        raise SolveError(
            f"The design ({assessment.design}) was proven over the scatter, but the assessor finds "
            f"{assessment.tightest.label} missed at listed values. No answer is given; please report this."
        )
    return assessment


def _closest(problem: Problem, outcome: Outcome) -> Assessment | None:
    """Return the design that came nearest: of the furthest ones of each part, the one that misses least."""
    if outcome.closest.count == 0:
        return None
    judged = [assess(problem.brief, problem.design(outcome.closest, i)) for i in _few(outcome.closest.count)]
    return max(judged, key=lambda assessment: assessment.tightest.margin)


def _few(count: int) -> range:
    return range(0, count, max(1, count // 24))
