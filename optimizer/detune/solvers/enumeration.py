"""Exact selection by going through every design, cheap stages first.

Exact for as many designs as the time allows: each one is either excluded by a stated requirement or
kept, so the cheapest kept one is the optimum and the nondominated kept ones are the whole front.
"""

import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from detune.problem.build import Problem
from detune.problem.stages import Stage, objective_values, stages
from detune.response.designs import Designs, all_designs, total_cost
from detune.response.prices import least_costs
from detune.solvers.outcome import Outcome, Progress, ProofRecord, RuleCount, Settings, Stopped

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
BLOCK = 20_000
FIRST_BLOCK = 500
BLOCK_SECONDS = 5.0
"""A block is booked as a whole, so that a stop loses no more than about this much work."""
LOOK_SECONDS = 0.7
"""How often the time and a wish to stop are looked at."""
FIRST_CHUNK = 16
NAME = "enumeration"


def refusal(problem: Problem) -> str | None:
    """Return why this solver cannot treat the problem: it can treat any, though large ones take long."""
    return None


def accepts(problem: Problem) -> bool:
    """Return whether this solver can treat the problem."""
    return refusal(problem) is None


def solve(problem: Problem, settings: Settings) -> Outcome:
    """Return all designs that meet the requirements, with the count of what each requirement excluded."""
    started = time.perf_counter()
    tally = _Tally(problem, stages(problem))
    stopped: Stopped = "finished"
    # Without a limit and nobody to ask, Ctrl-C alone stops the work, at once; large batches are quicker then.
    hurried = settings.time_limit is not None or settings.interrupted is not None
    looked_at, block = 0, min(FIRST_BLOCK, BLOCK) if hurried else BLOCK

    def look() -> None:
        if settings.time_limit is not None and time.perf_counter() - started > settings.time_limit:
            raise _Halted("time limit")
        if settings.interrupted is not None and settings.interrupted():
            raise _Halted("interrupted")

    try:
        while looked_at < problem.count:
            look()
            begun, last = time.perf_counter(), min(looked_at + block, problem.count)
            tally.go_through(all_designs(problem.model, looked_at, last), look if hurried else None)
            looked_at = last
            if settings.progress is not None:
                settings.progress(tally.progress(looked_at))
            taken = max(time.perf_counter() - begun, 1e-6)
            if hurried:
                block = int(min(BLOCK, max(1.0, 4.0 * block), max(1.0, block * BLOCK_SECONDS / taken)))
    except _Halted as halted:
        stopped = halted.why
    except KeyboardInterrupt:
        stopped = "interrupted"
    return tally.outcome(problem, stopped, looked_at, time.perf_counter() - started)


class _Halted(Exception):
    """The time is up, or a stop is wished for; the block under work counts as not looked at."""

    def __init__(self, why: Stopped) -> None:
        super().__init__(why)
        self.why: Stopped = why


@dataclass
class _Tally:
    """What has been excluded and kept so far."""

    problem: Problem
    steps: tuple[Stage, ...]
    kept: list[Designs] = field(default_factory=list)
    margins: list[Floats] = field(default_factory=list)
    counts: list[list[Integers]] = field(default_factory=list)
    reach: list[Floats] = field(default_factory=list)
    furthest: list[Integers] = field(default_factory=list)
    chunk: dict[int, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        sizes = choice_sizes(self.problem)
        rules = sum(len(step.requirements) for step in self.steps)
        self.counts = [[np.zeros(size, dtype=np.int64) for size in sizes] for _ in range(rules)]
        self.reach = [np.full(size, -np.inf) for size in sizes]
        columns = len(self.problem.model.groups) + 1
        self.furthest = [np.zeros((size, columns), dtype=np.int64) for size in sizes]

    def progress(self, looked_at: int) -> Progress:
        """How far the work is, with the least cost among the designs kept."""
        least = [float(total_cost(self.problem.model, kept).min()) for kept in self.kept]
        return Progress(
            looked_at, self.problem.count, min(least, default=None), open_bound(self.problem, looked_at)
        )

    def go_through(self, designs: Designs, look: Callable[[], None] | None) -> None:
        """Judge a block of designs, asking `look` now and then, which raises to stop: then nothing is booked.

        Without `look` the batches are as large as each stage has them best.
        """
        least = np.full(designs.count, np.inf)
        rule = 0
        # Booked at the end of the block, so that an interrupt leaves no half-counted designs behind.
        excluded: list[tuple[Designs, Floats, NDArray[np.bool_], int, int]] = []
        for number, step in enumerate(self.steps):
            alive = []
            for index in self._chunks(number, designs.count, step.size, look):
                margins = step.margins(designs.take(index))
                # A value that is not a number must never pass.
                margins = np.where(np.isnan(margins), -np.inf, margins)
                if not step.bound:
                    counted = [i for i, r in enumerate(step.requirements) if not r.is_total]
                    if counted:
                        least[index] = np.minimum(least[index], margins[counted].min(axis=0))
                failed = margins < 0.0
                fails = failed.any(axis=0)
                excluded.append(
                    (designs.take(index[fails]), margins[:, fails], failed[:, fails], rule, number)
                )
                alive.append(index[~fails])
            rule += len(step.requirements)
            keep = np.concatenate(alive) if alive else np.zeros(0, dtype=np.intp)
            designs, least = designs.take(keep), least[keep]
            if designs.count == 0:
                break
        for block in excluded:
            self._exclude(*block)
        if designs.count > 0:
            self.kept.append(designs)
            self.margins.append(least)

    def _chunks(
        self, number: int, count: int, most: int, look: Callable[[], None] | None
    ) -> Iterator[NDArray[np.intp]]:
        """Indices of designs to judge at once in a stage: as many as are quick enough, at most `most`."""
        first = 0
        while first < count:
            if look is None:
                yield np.arange(first, min(first + most, count))
                first += most
                continue
            look()
            size = min(self.chunk.get(number, FIRST_CHUNK), most)
            begun = time.perf_counter()
            yield np.arange(first, min(first + size, count))
            taken = max(time.perf_counter() - begun, 1e-6)
            done = min(first + size, count) - first
            first += size
            self.chunk[number] = int(max(1.0, min(most, 4.0 * size, done * LOOK_SECONDS / taken)))

    def _exclude(
        self, designs: Designs, margins: Floats, failed: NDArray[np.bool_], rule: int, stage: int
    ) -> None:
        if designs.count == 0:
            return
        first = failed.argmax(axis=0)
        # Later stages outrank; within one, the design that misses by least got furthest.
        reach = stage + 1.0 / (1.0 - margins.min(axis=0))
        numbers = np.column_stack([designs.part, designs.step])
        for group, part in enumerate(numbers.T[: len(self.reach)]):
            for row in np.unique(first):
                chosen = part[first == row]
                self.counts[rule + row][group] += np.bincount(
                    chosen, minlength=len(self.counts[rule + row][group])
                )
            order = np.argsort(reach, kind="stable")
            best = np.full(len(self.reach[group]), -1, dtype=np.int64)
            best[part[order]] = order
            present = np.flatnonzero(best >= 0)
            better = present[reach[best[present]] > self.reach[group][present]]
            self.reach[group][better] = reach[best[better]]
            self.furthest[group][better] = numbers[best[better]]

    def outcome(self, problem: Problem, stopped: Stopped, looked_at: int, seconds: float) -> Outcome:
        groups = len(problem.model.groups)
        empty = Designs(np.zeros((0, groups), dtype=np.intp), np.zeros(0, dtype=np.intp))
        kept = empty
        least = np.zeros(0)
        if self.kept:
            kept = Designs(
                np.concatenate([d.part for d in self.kept]), np.concatenate([d.step for d in self.kept])
            )
            least = np.concatenate(self.margins)
        labels = [(step.name, requirement.label) for step in self.steps for requirement in step.requirements]
        rules = tuple(
            RuleCount(stage, label, int(by_part[0].sum()), tuple(by_part))
            for (stage, label), by_part in zip(labels, self.counts, strict=True)
        )
        closest_of = []
        closest = []
        every = np.column_stack([kept.part, kept.step])
        for group in range(len(self.reach)):
            alive = np.unique(every[:, group])
            for part in range(len(self.reach[group])):
                if part not in alive and np.isfinite(self.reach[group][part]):
                    closest_of.append((group, part))
                    closest.append(self.furthest[group][part])
        numbers = np.array(closest, dtype=np.intp).reshape(-1, groups + 1)
        return Outcome(
            method=NAME,
            stopped=stopped,
            designs=kept,
            objectives=objective_values(problem, kept, least) if kept.count else {},
            least_margin=least,
            record=ProofRecord(
                NAME,
                problem.count,
                looked_at,
                rules,
                kept.count,
                seconds,
                lower_bound=open_bound(problem, looked_at),
            ),
            closest=Designs(numbers[:, :-1], numbers[:, -1]),
            closest_of=tuple(closest_of),
        )


def choice_sizes(problem: Problem) -> list[int]:
    """Return how many parts each group may take, and last how much ballast, where that is taken from a list."""
    sizes = [len(group.mounts) for group in problem.model.groups]
    return [*sizes, len(problem.model.ballast)] if problem.model.ballast[0].listed else sizes


def open_bound(problem: Problem, looked_at: int) -> float:
    """Return a cost that no design from number `looked_at` on falls below; infinite where none is left."""
    model = problem.model
    if looked_at >= problem.count:
        return float(np.inf)
    bound = float(model.ballast_cost.min())
    # The part of the first group changes slowest: those before the present one are done with.
    sizes = [len(group.mounts) for group in model.groups]
    done = looked_at * sizes[0] // problem.count
    for index in range(len(model.groups)):
        bound += float(least_costs(model, index)[done if index == 0 else 0 :].min())
    return bound
