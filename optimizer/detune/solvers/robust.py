"""Selection over the scatter: nominally feasible designs certified in order of cost; the first proven one is cheapest.

Meeting the brief at listed values is necessary for meeting it over the scatter, so the designs that a solver leaves
are a complete list of candidates. An undecided one is reported with its bracket, never dropped.
"""

import time
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.problem.build import Problem
from detune.proof.designs_between import designs_between
from detune.proof.search import SearchSettings
from detune.response.designs import Designs
from detune.solvers import bounded
from detune.solvers.certify import MAX_BOXES, certify
from detune.solvers.final_test import FinalTest
from detune.solvers.interrupt import Stop, stop_on_interrupt
from detune.solvers.outcome import Outcome, Progress, Settings, Stopped
from detune.solvers.selection import cases_of, selection_of
from detune.solvers.verdict import DesignVerdict
from detune.solvers.yields import Yield, design_yield

Numbers = tuple[tuple[int, ...], int]
FIRST_STEP = 0.05
RETRIED = 3
MORE_BOXES = 5
"""How many undecided designs get a second look, the cheapest first, and with how many times as many boxes."""


@dataclass(frozen=True)
class RobustResult:
    """What the scatter makes of a study.

    nominal: verdict of the nominal winner (None in a partial run that did not come so far). winner: the cheapest proven
    design. undecided, sampled: designs cheaper than the winner that could be neither proven nor violated; violated:
    those violated, each with its witness. front: verdicts of the nominal front's points, in order. examined of
    `candidates` (None: not counted) nominally feasible designs were certified in order of cost. yields: with
    judge = "distribution", of the front's points.
    """

    judge: Literal["interval", "distribution"]
    stopped: Stopped
    nominal: DesignVerdict | None
    winner: DesignVerdict | None
    undecided: tuple[DesignVerdict, ...]
    sampled: tuple[DesignVerdict, ...]
    violated: tuple[DesignVerdict, ...]
    front: tuple[DesignVerdict | None, ...]
    examined: int
    candidates: int | None
    lower_bound: float | None
    yields: tuple[Yield | None, ...]
    seconds: float
    assumed: tuple[str, ...] = ()

    @property
    def optimal(self) -> bool:
        """Whether the winner is proven to be the cheapest proven design and nothing cheaper is undecided."""
        return self.stopped == "finished" and self.winner is not None and not (self.undecided or self.sampled)

    @property
    def price(self) -> float | None:
        """Price of robustness: the winner's cost over the nominal winner's, less one."""
        if self.winner is None or self.nominal is None or self.nominal.cost <= 0.0:
            return None
        return self.winner.cost / self.nominal.cost - 1.0


def robust_selection(
    problem: Problem,
    outcome: Outcome,
    front: list[Numbers],
    settings: Settings,
    *,
    max_boxes: int = MAX_BOXES,
) -> RobustResult:
    """Return what the scatter of the problem's brief makes of a solver's outcome.

    front: part numbers and ballast step of every nominal front point, the nominal winner first. Raises BriefError
    where a tolerance is not stated.
    """
    scatter = problem.brief.scatter
    assert scatter is not None
    with stop_on_interrupt(settings.interrupted) as stop:
        work = _Certifying(problem, settings, stop, max_boxes)
        if scatter.judge == "distribution":
            return work.yields(front, outcome)
        return work.interval(outcome, front)


class _Certifying:
    def __init__(self, problem: Problem, settings: Settings, stop: Stop, max_boxes: int) -> None:
        self.problem, self.settings, self.stop, self.max_boxes = problem, settings, stop, max_boxes
        self.started = time.perf_counter()
        self.known: dict[Numbers, DesignVerdict] = {}
        self.stopped: Stopped = "finished"

    def halt(self) -> bool:
        """Whether to stop; says why in `stopped`."""
        if self.stop():
            self.stopped = "interrupted"
        elif self.settings.time_limit is not None and (
            time.perf_counter() - self.started > self.settings.time_limit
        ):
            self.stopped = "time limit"
        return self.stopped != "finished"

    def of(self, numbers: Numbers) -> DesignVerdict:
        """Certify a design once."""
        if numbers not in self.known:
            self.known[numbers] = certify(
                self.problem,
                np.array(numbers[0], dtype=np.intp),
                numbers[1],
                max_boxes=self.max_boxes,
                interrupted=self.halt,
            )
        return self.known[numbers]

    def interval(self, outcome: Outcome, front: list[Numbers]) -> RobustResult:
        """Certify candidates in order of cost until one is proven, then the nominal front."""
        found: dict[str, list[DesignVerdict]] = {"undecided": [], "sampled": [], "violated": []}
        winner: DesignVerdict | None = None
        examined, bound = 0, None
        total = outcome.designs.count if outcome.method != bounded.NAME else None
        for numbers, cost in self._candidates(outcome):
            bound = cost
            if self.halt():
                break
            verdict = self.of(numbers)
            if self.stopped != "finished" and verdict.status == "undecided":
                break
            examined += 1
            self._tell(examined, total, cost)
            if verdict.status == "proven":
                winner = verdict
                break
            found[verdict.status].append(verdict)
        winner = self._second_look(found, winner)
        if self.halt() and winner is None and outcome.stopped != "finished":
            bound = None
        judged: list[DesignVerdict | None] = []
        for numbers in front:
            judged.append(self.known.get(numbers) if self.halt() else self.of(numbers))
        return RobustResult(
            judge="interval",
            stopped=self.stopped if outcome.stopped == "finished" else outcome.stopped,
            nominal=judged[0] if judged else None,
            winner=winner,
            undecided=tuple(found["undecided"]),
            sampled=tuple(found["sampled"]),
            violated=tuple(found["violated"]),
            front=tuple(judged),
            examined=examined,
            candidates=total,
            lower_bound=bound,
            yields=(),
            seconds=time.perf_counter() - self.started,
        )

    def _second_look(
        self, found: dict[str, list[DesignVerdict]], winner: DesignVerdict | None
    ) -> DesignVerdict | None:
        """Look at the cheapest undecided designs with more boxes; the winner, which may be a cheaper one then."""
        for verdict in sorted(found["undecided"], key=lambda v: v.cost)[:RETRIED]:
            if self.halt():
                break
            numbers = (verdict.part, verdict.step)
            again = certify(
                self.problem,
                np.array(verdict.part, dtype=np.intp),
                verdict.step,
                max_boxes=MORE_BOXES * self.max_boxes,
                interrupted=self.halt,
            )
            if self.stopped != "finished" and again.status == "undecided":
                break
            self.known[numbers] = again
            found["undecided"].remove(verdict)
            if again.status == "proven":
                for status, verdicts in found.items():
                    # What was looked at after it costs as much or more.
                    found[status] = [v for v in verdicts if v.cost < again.cost]
                return again
            found[again.status].append(again)
        return winner

    def yields(self, front: list[Numbers], outcome: Outcome) -> RobustResult:
        """Estimate the yield of every front point."""
        found: list[Yield | None] = []
        for numbers in front:
            found.append(
                None
                if self.halt()
                else design_yield(self.problem, np.array(numbers[0], dtype=np.intp), numbers[1])
            )
        return RobustResult(
            "distribution", self.stopped if outcome.stopped == "finished" else outcome.stopped,
            None, None, (), (), (), (), 0, None, None, tuple(found), time.perf_counter() - self.started,
        )  # fmt: skip

    def _tell(self, examined: int, total: int | None, cost: float) -> None:
        if self.settings.progress is not None and total:
            self.stop.told(self.settings.progress, Progress(examined, total, None, cost))

    def _candidates(self, outcome: Outcome) -> Iterator[tuple[Numbers, float]]:
        """Every nominally feasible design in order of cost."""
        if outcome.method != bounded.NAME:
            cost = outcome.objectives.get("cost", np.zeros(0))
            for index in np.argsort(cost, kind="stable"):
                part = tuple(int(p) for p in outcome.designs.part[index])
                yield (part, int(outcome.designs.step[index])), float(cost[index])
            return
        yield from self._by_bounded_search(outcome)

    def _by_bounded_search(self, outcome: Outcome) -> Iterator[tuple[Numbers, float]]:
        """All designs below a rising cost cap, found by the bounded search, which keeps the front alone."""
        if not outcome.designs.count:
            return
        tests = FinalTest(self.problem)
        trade = self.problem.brief.objectives.trade[1]
        cap, done_to, rise = float(outcome.objectives["cost"].min()), -np.inf, FIRST_STEP
        most = sum(
            sum(s.bought for s in self.problem.model.stations if s.group == g)
            * float(group.arrays.cost.max())
            for g, group in enumerate(self.problem.model.groups)
        ) + float(self.problem.model.ballast_cost.max())
        while not self.halt():
            every: list[tuple[Numbers, float]] = []
            for case in cases_of(self.problem):
                chosen = SearchSettings(
                    value="margin" if trade == "least-margin" else "separation",
                    static_counts=trade == "least-margin",
                    response_counts=trade == "least-margin",
                    interrupted=self.halt,
                    workers=self.settings.workers,
                )
                selection = selection_of(self.problem, case.step, case.fixed)
                accept = tests.at_step(case.step, trade, case.fixed)
                found, result = designs_between(selection, accept, chosen, cap, done_to)
                if result.status != "complete":
                    self.halt()
                    return
                every += [((case.parts(design.parts), case.step), design.cost) for design in found]
            yield from sorted(every, key=lambda item: item[1])
            if cap >= most:
                return
            done_to, cap, rise = cap, cap * (1.0 + rise), 2.0 * rise


def numbers_of(designs: Designs, index: int) -> Numbers:
    """Part numbers and ballast step of one design of a batch."""
    return tuple(int(p) for p in designs.part[index]), int(designs.step[index])
