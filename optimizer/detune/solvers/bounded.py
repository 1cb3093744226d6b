"""Exact selection by bounded search, for more designs than can be gone through one by one.

Depth-first in cost order with the eigenvalue and static bounds of the proof floor; the final test of each
design that is left is the problem's own stages, so what is accepted met every requirement.
"""

import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.problem.build import Problem
from detune.problem.stages import Stage, objective_values, stages
from detune.proof.search import SearchResult, SearchSettings
from detune.proof.search_front import search_front, search_least_cost
from detune.response.designs import Designs
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome, ProofRecord, RuleCount, Settings, Stopped
from detune.solvers.selection import selection_of, why_not

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
NAME = "bounded search"
RULES = {
    "cost": "dearer than a design already found that is at least as good",
    "static_box": "static limits of a whole set of designs (bound on K^-1)",
    "eigenvalue_box": "a natural frequency inside a forbidden band for a whole set of designs (eigenvalue count)",
    "pair": "static limits of a whole set of pairs of parts",
    "static": "static limits of the design",
    "eigenvalue": "a natural frequency inside a forbidden band",
    "response": "response at sampled speeds",
    "exact": "the requirements in full",
}
FRONTS = {("cost", "separation"): "separation", ("cost", "least-margin"): "margin"}


def accepts(problem: Problem) -> bool:
    """Return whether this solver can treat the problem."""
    return why_not(problem) is None and problem.brief.objectives.trade in FRONTS


def solve(problem: Problem, settings: Settings) -> Outcome:
    """Return the whole front of cost against separation (or least margin), its cheapest design first."""
    started = time.perf_counter()
    tests = _FinalTest(problem)
    found: list[tuple[tuple[int, ...], int]] = []
    counts: dict[str, int] = {}
    stopped: Stopped = "finished"
    bound = np.inf
    steps = np.argsort(problem.model.ballast_cost, kind="stable")
    for number, step in enumerate(steps):
        result = _search(problem, int(step), tests, settings, started, number, len(steps))
        found += [(design.parts, int(step)) for design in result.designs]
        for rule, count in result.counts.items():
            counts[rule] = counts.get(rule, 0) + count
        bound = min(bound, result.lower_bound)
        if result.status != "complete":
            stopped = "time limit" if result.status == "time_limit" else "interrupted"
            break
    return _outcome(problem, tests, found, counts, stopped, bound, time.perf_counter() - started)


def _search(
    problem: Problem, step: int, tests: "_FinalTest", settings: Settings, started: float, number: int, of: int
) -> SearchResult:
    left = None if settings.time_limit is None else settings.time_limit - (time.perf_counter() - started)
    trade = problem.brief.objectives.trade
    chosen = SearchSettings(
        value=FRONTS[trade],  # type: ignore[arg-type]
        static_counts=trade[1] == "least-margin",
        response_counts=trade[1] == "least-margin",
        time_limit=None if left is None else max(left, 0.0),
        interrupted=settings.interrupted,
        announce=settings.announce,
        progress=_progress(settings, number, of),
        workers=settings.workers,
    )
    ask = search_front if settings.front else search_least_cost
    return ask(selection_of(problem, step), tests.at_step(step, trade[1]), chosen)


def _progress(settings: Settings, number: int, of: int) -> Callable[..., None] | None:
    if settings.progress is None:
        return None
    tell = settings.progress

    def report(state: object) -> None:
        share = float(getattr(state, "share_excluded", 0.0))
        tell(int(1000 * (number + share) / of), 1000)

    return report


class _FinalTest:
    """The problem's own stages as the last word on designs the bounds could not settle."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.steps: tuple[Stage, ...] = stages(problem)
        self.asked = 0
        self.failed: dict[tuple[str, str], int] = {}

    def at_step(self, step: int, value: str) -> Callable[[Integers], tuple[NDArray[np.bool_], Floats]]:
        """Return the test of designs (D, G + 1) at one ballast step."""

        def accept(numbers: Integers) -> tuple[NDArray[np.bool_], Floats]:
            part = np.asarray(numbers[:, :-1], dtype=np.intp)
            designs = Designs(part, np.full(len(part), step, dtype=np.intp))
            feasible, least = self.judge(designs)
            worth = np.full(designs.count, -np.inf)
            if feasible.any():
                chosen = designs.take(feasible)
                worth[feasible] = objective_values(self.problem, chosen, least[feasible])[value]
            return feasible, worth

        return accept

    def judge(self, designs: Designs) -> tuple[NDArray[np.bool_], Floats]:
        """Return which designs meet every requirement (D,), and their least margin (D,)."""
        self.asked += designs.count
        least = np.full(designs.count, np.inf)
        alive = np.arange(designs.count)
        for step in self.steps:
            for first in range(0, len(alive), step.size):
                index = alive[first : first + step.size]
                margins = np.nan_to_num(step.margins(designs.take(index)), nan=-np.inf)
                counted = [i for i, r in enumerate(step.requirements) if not r.is_total]
                if counted and not step.bound:
                    least[index] = np.minimum(least[index], margins[counted].min(axis=0))
                failed = margins < 0.0
                least[index[failed.any(axis=0)]] = -np.inf
                rows, numbers = np.unique(failed.argmax(axis=0)[failed.any(axis=0)], return_counts=True)
                for row, number in zip(rows, numbers, strict=True):
                    key = (step.name, step.requirements[row].label)
                    self.failed[key] = self.failed.get(key, 0) + int(number)
            alive = alive[np.isfinite(least[alive]) | (least[alive] == np.inf)]
        kept = np.zeros(designs.count, dtype=bool)
        kept[alive] = True
        return kept, least


def _outcome(
    problem: Problem,
    tests: _FinalTest,
    found: list[tuple[tuple[int, ...], int]],
    counts: dict[str, int],
    stopped: Stopped,
    bound: float,
    seconds: float,
) -> Outcome:
    groups = len(problem.model.groups)
    part = np.array([parts for parts, _ in found], dtype=np.intp).reshape(-1, groups)
    designs = Designs(part, np.array([step for _, step in found], dtype=np.intp))
    least = tests.judge(designs)[1] if designs.count else np.zeros(0)
    objectives = objective_values(problem, designs, least) if designs.count else {}
    if designs.count:
        front = nondominated(as_minimised(objectives, problem.brief.objectives.trade))
        designs, least = designs.take(front), least[front]
        objectives = {name: value[front] for name, value in objectives.items()}
    met = counts.pop("met", 0)
    rules = [RuleCount("bounded search", RULES.get(rule, rule), count, ()) for rule, count in counts.items()]
    tested = [RuleCount(stage, rule, count, ()) for (stage, rule), count in tests.failed.items()]
    closest, closest_of = _replaced(problem, designs)
    record = ProofRecord(NAME, problem.count, problem.count, tuple(rules), met, seconds)
    return Outcome(
        method=NAME,
        stopped=stopped,
        designs=designs,
        objectives=objectives,
        least_margin=least,
        record=replace(record, tested=tuple(tested), lower_bound=float(bound)),
        closest=closest,
        closest_of=closest_of,
    )


def _replaced(problem: Problem, designs: Designs) -> tuple[Designs, tuple[tuple[int, int], ...]]:
    """Return for every part outside the front the cheapest design with that one part put in."""
    groups = len(problem.model.groups)
    numbers: list[list[int]] = []
    which: list[tuple[int, int]] = []
    if designs.count:
        first = [*designs.part[0].tolist(), int(designs.step[0])]
        for group in range(groups):
            used = set(designs.part[:, group].tolist())
            for part in range(len(problem.model.groups[group].mounts)):
                if part not in used:
                    numbers.append([*first[:group], part, *first[group + 1 :]])
                    which.append((group, part))
    table = np.array(numbers, dtype=np.intp).reshape(-1, groups + 1)
    return Designs(table[:, :-1], table[:, -1]), tuple(which)
