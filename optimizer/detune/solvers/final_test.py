"""The problem's own stages as the last word on designs that a solver's rules could not settle."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from detune.problem.build import Problem
from detune.problem.stages import Stage, objective_values, stages
from detune.response.designs import Designs

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]


class FinalTest:
    """Judges designs by every requirement, and counts how many it was asked and which requirement failed first."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.steps: tuple[Stage, ...] = stages(problem)
        self.asked = 0
        self.failed: dict[tuple[str, str], int] = {}

    def at_step(
        self, step: int, value: str, fixed: tuple[tuple[int, int], ...] = ()
    ) -> Callable[[Integers], tuple[NDArray[np.bool_], Floats]]:
        """Return the test of designs (D, G + 1) at one ballast step; `fixed` holds the part of some groups."""

        def accept(numbers: Integers) -> tuple[NDArray[np.bool_], Floats]:
            part = np.array(numbers[:, :-1], dtype=np.intp)
            for group, chosen in fixed:
                part[:, group] = chosen
            designs = Designs(part, np.full(len(part), step, dtype=np.intp))
            feasible, least = self.judge(designs)
            worth = np.full(designs.count, -np.inf)
            if feasible.any():
                kept = designs.take(feasible)
                worth[feasible] = objective_values(self.problem, kept, least[feasible])[value]
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
                margins = step.margins(designs.take(index))
                # A value that is not a number must never pass.
                margins = np.where(np.isnan(margins), -np.inf, margins)
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
