"""A second opinion on the least cost: the problem stated again in Pyomo and solved as a MILP in a process of its own.

The model is a relaxation. Its cheapest design is put to the problem's own final test: if it passes, nothing cheaper
can; if not, it is cut off (with all designs that break the separation for the same reason), or the tone by which it
broke a limit is stated in full, and the model is solved again. Slow, and meant as a check on small problems.
"""

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from detune.ground.errors import SolveError
from detune.problem.build import Problem
from detune.problem.stages import objective_values
from detune.response.designs import Designs
from detune.response.prices import has_breaks
from detune.solvers.final_test import FinalTest
from detune.solvers.interrupt import Stop, stop_on_interrupt
from detune.solvers.outcome import Outcome, Progress, ProofRecord, RuleCount, Settings, Stopped
from detune.solvers.own_process import OwnProcess
from detune.solvers.pyomo_bounds import Cut, Tone, separation_cut, worst_tone
from detune.solvers.pyomo_model import Answer, Backend, Task, run
from detune.solvers.pyomo_statement import statement_of

NAME = "second opinion"
MOST_PARTS, MOST_GROUPS, MOST_STEPS = 20, 3, 6
# Tones stated in full: each adds about a thousand rows, and a few cut off what many single designs would.
MOST_TONES = 4
NO_LIMIT = 1.0e6


@dataclass(frozen=True)
class Opinion:
    """What came of it: the design of least cost, or none, why it stopped, and below what cost none lies.

    `runs` counts the solver's runs, `cuts` what was cut off; `solver_seconds` is its processor time alone.
    """

    stopped: Stopped
    parts: tuple[int, ...] | None
    step: int
    lower_bound: float
    runs: int
    cuts: int
    tones: int
    solver_seconds: float


def refusal(problem: Problem) -> str | None:
    """Return why this solver does not treat the problem, None if it does."""
    sizes = [len(group.mounts) for group in problem.model.groups]
    if problem.brief.objectives.trade[0] != "cost":
        return "it looks for the least cost, and the brief puts another objective first"
    if problem.model.floor_table is not None:
        return "the floor's stiffness follows frequency"
    if any(group.laws is not None for group in problem.model.groups):
        return "some parts' stiffness follows load, frequency or amplitude, which it does not state"
    if any(has_breaks(group.mounts) for group in problem.model.groups):
        return "prices fall with the quantity bought, which it does not state"
    if problem.model.absorbers:
        return "an absorber's mass depends on the part, which it does not state"
    if max(sizes) > MOST_PARTS or len(sizes) > MOST_GROUPS or len(problem.model.ballast_mass) > MOST_STEPS:
        return (
            f"it is a check on small problems: up to {MOST_PARTS} parts for each of {MOST_GROUPS} groups and "
            f"{MOST_STEPS} ballast steps, not {' x '.join(map(str, sizes))} parts with "
            f"{len(problem.model.ballast_mass)} steps"
        )
    return None


def accepts(problem: Problem) -> bool:
    """Return whether this solver can treat the problem."""
    return refusal(problem) is None


def solve(problem: Problem, settings: Settings, backend: Backend = "highs") -> Outcome:
    """Return the design of least cost alone, as the only point of its front.

    Raises SolveError for a problem it does not treat, and where the MILP solver fails.
    """
    reason = refusal(problem)
    if reason is not None:
        raise SolveError(f"the second opinion does not apply: {reason}")
    started = time.perf_counter()
    tests = FinalTest(problem)

    def meets(parts: tuple[int, ...], step: int) -> bool:
        return bool(tests.judge(_designs(parts, step))[0][0])

    with stop_on_interrupt(settings.interrupted) as stop, OwnProcess(run) as process:
        if settings.announce is not None:
            settings.announce("Asking for a second opinion; this takes seconds to minutes.")
        question = Task(statement_of(problem), (), (), backend, NO_LIMIT)
        limit = settings.time_limit
        tell = _teller(problem, settings, stop)
        opinion = least_cost(process, question, meets, limit, stop, tell)
    return _outcome(problem, tests, opinion, time.perf_counter() - started)


def _teller(problem: Problem, settings: Settings, stop: Stop) -> Callable[[int, float], None]:
    def tell(cut_off: int, bound: float) -> None:
        if settings.progress is not None:
            known = bound if np.isfinite(bound) else None
            stop.told(settings.progress, Progress(cut_off, problem.count, None, known))

    return tell


def least_cost(
    process: OwnProcess,
    question: Task,
    meets: Callable[[tuple[int, ...], int], bool],
    time_limit: float | None = None,
    stop: Callable[[], bool] | None = None,
    tell: Callable[[int, float], None] | None = None,
) -> Opinion:
    """Return the cheapest design of a statement that `meets` admits. Raises SolveError where the solver fails.

    `tell` hears how many designs were cut off one by one, and the lower bound.
    """
    started = time.perf_counter()
    bound, seconds, runs, single = -np.inf, 0.0, 0, 0
    cuts: list[Cut] = []
    tones: list[Tone] = []

    def opinion(stopped: Stopped, answer: Answer | None) -> Opinion:
        parts = None if answer is None or answer.status != "optimal" else answer.parts
        proven = float(np.inf) if stopped == "finished" else float(bound)
        step = 0 if answer is None else answer.step
        return Opinion(stopped, parts, step, proven, runs, len(cuts), len(tones), seconds)

    while True:
        left = NO_LIMIT if time_limit is None else time_limit - (time.perf_counter() - started)
        if stop is not None and stop():
            return opinion("interrupted", None)
        if left <= 0.0:
            return opinion("time limit", None)
        asked = replace(question, cuts=tuple(cuts), tones=tuple(tones), time_limit=left)
        answer: Answer | None = process.ask(asked, left, stop)
        if answer is None:
            return opinion("interrupted" if stop is not None and stop() else "time limit", None)
        runs, seconds = runs + 1, seconds + answer.seconds
        if answer.status == "failed":
            raise SolveError(f"the solver failed: {answer.detail}")
        bound = max(bound, answer.bound)
        if answer.status == "time limit":
            return opinion("time limit", None)
        if answer.status == "infeasible" or meets(answer.parts, answer.step):
            return opinion("finished", answer)
        cut = separation_cut(question.statement, answer.parts, answer.step)
        if cut is None:
            single += 1
            cut = Cut(tuple((part,) for part in answer.parts), answer.step)
            tone = worst_tone(question.statement, answer.parts, answer.step)
            if tone is not None and len(tones) < MOST_TONES:
                tones.append(tone)
        cuts.append(cut)
        if tell is not None:
            tell(single, bound)


def _designs(parts: tuple[int, ...], step: int) -> Designs:
    return Designs(np.array([parts], dtype=np.intp), np.array([step], dtype=np.intp))


def _outcome(problem: Problem, tests: FinalTest, opinion: Opinion, seconds: float) -> Outcome:
    groups = len(problem.model.groups)
    none = Designs(np.zeros((0, groups), dtype=np.intp), np.zeros(0, dtype=np.intp))
    designs = none if opinion.parts is None else _designs(opinion.parts, opinion.step)
    least = tests.judge(designs)[1] if designs.count else np.zeros(0)
    finished = opinion.stopped == "finished"
    rule = f"not cheaper, or excluded by a static limit, a tone or one of {opinion.cuts} cuts: proven by a MILP solver"
    excluded = problem.count - designs.count if finished else 0
    return Outcome(
        method=NAME,
        stopped=opinion.stopped,
        designs=designs,
        objectives=objective_values(problem, designs, least) if designs.count else {},
        least_margin=least,
        record=ProofRecord(
            method=NAME,
            designs=problem.count,
            looked_at=problem.count if finished else tests.asked,
            rules=(RuleCount(NAME, rule, excluded, ()),),
            met=designs.count,
            seconds=seconds,
            tested=tuple(RuleCount(stage, name, count, ()) for (stage, name), count in tests.failed.items()),
            lower_bound=opinion.lower_bound,
        ),
        closest=none,
        closest_of=(),
    )
