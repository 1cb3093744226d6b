"""Running a study: build, solve, assess, and gather what the report needs."""

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from detune.ground.errors import BriefError, Fault, SolveError
from detune.problem.build import Problem, build
from detune.response.assessment import Assessment
from detune.response.assessor import Assessor
from detune.response.design import Design
from detune.response.designs import Designs
from detune.solvers import SOLVERS, choose
from detune.solvers.outcome import Outcome, Settings
from detune.solvers.robust import RobustResult, numbers_of, robust_selection
from detune.study.after_search import AfterSearch
from detune.study.closest import ClosestDesigns, judge_closest
from detune.study.front import Front, assessed_front
from detune.study.load import Study
from detune.study.why import PartReason, part_reasons

# Share of the time left after the search that the reasons may take, and designs assessed to find the nearest one.
SHARE_OF_REASONS = 0.4
NEAREST = 5


@dataclass(frozen=True)
class Result:
    """Everything a study came to.

    `answer` is the assessed design that is best in the first traded objective (of equal ones the
    best in the next), None where no design meets the brief. `compared` are designs the user named.
    `closest` is the assessed design that came nearest where none meets the brief. `left_out`: optional work for which
    there was no time, in words, and why. `assess`: the assessor of this run, which keeps what it has said.
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
    left_out: tuple[str, ...] = ()
    why_left_out: str | None = None
    assess: Callable[[Design], Assessment] = field(kw_only=True, repr=False, compare=False)

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
    work: AfterSearch | None = None,
) -> Result:
    """Return the result of a study. Raises SolveError on a solver's fault.

    work: what follows the search, where more (a report) is to follow within the same time limit. Raises BriefError on a
    faulty brief, and for a solver that is asked for and cannot treat the problem.
    """
    started = time.perf_counter()
    chosen = settings or Settings()
    work = work or AfterSearch(chosen)
    problem = build(study.brief, study.catalogs)
    method, why_method = choose(problem) if solver == "auto" else (solver, "asked for")
    refusal = SOLVERS[method].refusal(problem)
    if refusal is not None:
        others = ", ".join(name for name, other in SOLVERS.items() if other.refusal(problem) is None)
        raise BriefError([Fault("--method", None, "--method", f"{method} ({refusal})", f"one of {others}")])
    outcome = SOLVERS[method].solve(problem, chosen)
    with work.listening():
        return _after(study, problem, outcome, chosen, compared, work, started, why_method)


def _after(
    study: Study,
    problem: Problem,
    outcome: Outcome,
    settings: Settings,
    compared: tuple[Design, ...],
    work: AfterSearch,
    started: float,
    why_method: str,
) -> Result:
    """Return the result of a search: what the assessor says of it, what the scatter does, and the reasons."""
    assessor = Assessor(problem.brief)
    if outcome.designs.count:
        work.tell("Assessing the designs on the front.")
    front = assessed_front(problem, outcome, assessor, work.may_begin)
    if front.unassessed:
        work.leave_out(
            f"{front.unassessed} designs that the search claims to lie on the front: they were not assessed, so that "
            "the front shown is not whole"
        )
    if problem.brief.scatter is not None and front.points:
        work.tell("Judging designs over the scatter.")
    robust = _over_scatter(problem, outcome, front, settings, started)
    robust_answer = _robust_answer(problem, robust, assessor)
    if compared:
        work.tell("Assessing the named designs.")
    named = tuple(assessor(design) for design in compared)
    if outcome.closest.count:
        work.tell("Judging the closest design of every part that fell out.")
    closest = judge_closest(problem, outcome, work.share(SHARE_OF_REASONS))
    if closest.unjudged:
        work.leave_out(
            f"what records and passages do to the closest designs of {closest.unjudged} parts that fell out: of these "
            "parts the hardest of the other requirements is told"
        )
    return Result(
        study=study,
        problem=problem,
        outcome=outcome,
        front=front,
        answer=front.points[0] if front.points else None,
        compared=named,
        closest=None if front.points else _closest(problem, outcome, closest, assessor, work),
        reasons=part_reasons(problem, outcome, closest),
        why_method=why_method,
        robust=robust,
        robust_answer=robust_answer,
        seconds=time.perf_counter() - started,
        left_out=work.left_out,
        why_left_out=work.why,
        assess=assessor,
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


def _robust_answer(problem: Problem, robust: RobustResult | None, assessor: Assessor) -> Assessment | None:
    """Return the assessment of the proven design at listed values. Raises SolveError where the assessor refuses it."""
    if robust is None or robust.winner is None:
        return None
    chosen = Designs(
        np.array([robust.winner.part], dtype=np.intp), np.array([robust.winner.step], dtype=np.intp)
    )
    assessment = assessor(problem.design(chosen, 0))
    if not assessment.meets:
        raise SolveError(
            f"The design ({assessment.design}) was proven over the scatter, but the assessor finds "
            f"{assessment.tightest.label} missed at listed values. No answer is given; please report this."
        )
    return assessment


def _closest(
    problem: Problem, outcome: Outcome, judged: ClosestDesigns, assessor: Assessor, work: AfterSearch
) -> Assessment | None:
    """Return the design that came nearest: of those the solver has miss least, the one the assessor has miss least."""
    if outcome.closest.count == 0:
        return None
    work.tell("Assessing the designs that came nearest.")
    found: dict[Design, Assessment] = {}
    for index in np.argsort(-judged.least, kind="stable"):
        if len(found) == NEAREST or (found and not work.may_begin()):
            break
        design = problem.design(outcome.closest, int(index))
        found[design] = assessor(design)
    return max(found.values(), key=lambda assessment: assessment.tightest.margin)
