"""Exact selection by bounded search, for more designs than can be gone through one by one.

Depth-first in cost order with the eigenvalue and static bounds of the proof floor; the final test of each
design that is left is the problem's own stages, so what is accepted met every requirement.
"""

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.problem.build import Problem
from detune.problem.stages import objective_values
from detune.proof.search import SearchProgress, SearchResult, SearchSettings
from detune.proof.search_front import search_front, search_least_cost
from detune.response.designs import Designs
from detune.response.prices import least_costs
from detune.solvers.final_test import FinalTest
from detune.solvers.interrupt import Stop, stop_on_interrupt
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome, Progress, ProofRecord, RuleCount, Settings, Stopped
from detune.solvers.selection import Case, cases_of, selection_of, why_not

NAME = "bounded search"
RULES = {
    "cost": "dearer than a design already found that is at least as good",
    "static_box": "static limits of a whole set of designs (bound on K^-1)",
    "eigenvalue_box": "a natural frequency inside a forbidden band for a whole set of designs (eigenvalue count)",
    "static_pair": "static limits of a whole set of pairs of parts",
    "static": "static limits of the design",
    "eigenvalue": "a natural frequency inside a forbidden band",
    "response": "response at sampled speeds",
    "exact": "the requirements in full",
}
FRONTS = (("cost", "separation"), ("cost", "least-margin"))


def refusal(problem: Problem) -> str | None:
    """Return why this solver cannot treat the problem, None if it can."""
    reason = why_not(problem)
    if reason is None and problem.brief.objectives.trade not in FRONTS:
        return "it finds fronts of cost against separation or least margin alone"
    return reason


def accepts(problem: Problem) -> bool:
    """Return whether this solver can treat the problem."""
    return refusal(problem) is None


def solve(problem: Problem, settings: Settings) -> Outcome:
    """Return the whole front of cost against separation (or least margin), its cheapest design first.

    Without `settings.front` it is the cheapest design alone. One search for each ballast step and each choice of
    absorbers, which decide the mass: those with the cheapest designs first.
    """
    with stop_on_interrupt(settings.interrupted) as stop:
        work = _Work(problem, settings, stop)
        for case in sorted(work.open, key=lambda case: work.open[case]):
            # A search may be over before it first looks at the clock.
            if stop():
                work.stopped = "interrupted"
            elif work.left() == 0.0:
                work.stopped = "time limit"
            if work.stopped != "finished":
                break
            work.search(case)
        return work.outcome()


class _Work:
    """The searches of all cases: what they found, what they excluded, and what is still open."""

    def __init__(self, problem: Problem, settings: Settings, stop: Stop) -> None:
        self.started = time.perf_counter()
        self.problem, self.settings, self.stop = problem, settings, stop
        self.tests = FinalTest(problem)
        self.found: list[_Found] = []
        self.counts: dict[str, int] = {}
        self.stopped: Stopped = "finished"
        self.open = {case: self._least(case) for case in cases_of(problem)}

    def left(self) -> float | None:
        """Seconds left, None for no limit."""
        limit = self.settings.time_limit
        return None if limit is None else max(0.0, limit - (time.perf_counter() - self.started))

    def bound(self) -> float:
        """A cost that no unsettled design falls below."""
        return min(self.open.values())

    def search(self, case: Case) -> None:
        """Search one ballast step with one choice of absorbers."""
        settings, trade = self.settings, self.problem.brief.objectives.trade
        margin = trade[1] == "least-margin"
        chosen = SearchSettings(
            value="margin" if margin else "separation",
            static_counts=margin,
            response_counts=margin,
            cost_cap=np.inf if settings.front else min((each.cost for each in self.found), default=np.inf),
            time_limit=self.left(),
            interrupted=self.stop,
            announce=settings.announce,
            progress=None if settings.progress is None else self._progress(case),
            workers=settings.workers,
        )
        ask = search_front if settings.front else search_least_cost
        accept = self.tests.at_step(case.step, trade[1], case.fixed)
        result = ask(selection_of(self.problem, case.step, case.fixed), accept, chosen)
        self._take(case, result)

    def _take(self, case: Case, result: SearchResult) -> None:
        self.found += [_Found(case.parts(design.parts), case.step, design.cost) for design in result.designs]
        for rule, count in result.counts.items():
            self.counts[rule] = self.counts.get(rule, 0) + count
        self.open[case] = result.lower_bound
        if result.status != "complete":
            self.stopped = "time limit" if result.status == "time_limit" else "interrupted"

    def _least(self, case: Case) -> float:
        """The cost of the cheapest parts of one case."""
        model, fixed = self.problem.model, dict(case.fixed)
        costs = [least_costs(model, index) for index in range(len(model.groups))]
        least = (float(each[fixed[g]] if g in fixed else each.min()) for g, each in enumerate(costs))
        return float(model.ballast_cost[case.step]) + sum(least)

    def _progress(self, case: Case) -> Callable[[SearchProgress], None]:
        tell, before = self.settings.progress, sum(self.counts.values())
        assert tell is not None
        each = self.problem.count // len(self.open)

        def report(state: SearchProgress) -> None:
            costs = [found.cost for found in self.found]
            others = [bound for number, bound in self.open.items() if number != case]
            progress = Progress(
                settled=before + round(state.share_excluded * each),
                designs=self.problem.count,
                incumbent=min(
                    [*costs, *([] if state.incumbent is None else [state.incumbent])], default=None
                ),
                lower_bound=min([*others, state.lower_bound]),
            )
            self.stop.told(tell, progress)

        return report

    def outcome(self) -> Outcome:
        """Return what all searches came to."""
        problem, tests = self.problem, self.tests
        part = np.array([found.parts for found in self.found], dtype=np.intp).reshape(
            -1, len(problem.model.groups)
        )
        designs = Designs(part, np.array([found.step for found in self.found], dtype=np.intp))
        least = tests.judge(designs)[1] if designs.count else np.zeros(0)
        objectives = objective_values(problem, designs, least) if designs.count else {}
        if designs.count:
            front = nondominated(as_minimised(objectives, problem.brief.objectives.trade))
            designs, least = designs.take(front), least[front]
            objectives = {name: value[front] for name, value in objectives.items()}
        settled = sum(self.counts.values())
        met = self.counts.pop("met", 0)
        rules = [RuleCount("bounded search", RULES.get(r, r), count, ()) for r, count in self.counts.items()]
        tested = [RuleCount(stage, rule, count, ()) for (stage, rule), count in tests.failed.items()]
        closest, closest_of = _replaced(problem, designs)
        return Outcome(
            method=NAME,
            stopped=self.stopped,
            designs=designs,
            objectives=objectives,
            least_margin=least,
            record=ProofRecord(
                method=NAME,
                designs=problem.count,
                looked_at=settled,
                rules=tuple(rules),
                met=met,
                seconds=time.perf_counter() - self.started,
                tested=tuple(tested),
                lower_bound=self.bound(),
            ),
            closest=closest,
            closest_of=closest_of,
        )


@dataclass(frozen=True)
class _Found:
    """A design that met every requirement: part of each group, ballast step, cost."""

    parts: tuple[int, ...]
    step: int
    cost: float


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
