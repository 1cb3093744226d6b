"""The closest design of every part that fell out, judged by all requirements."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.problem.stages import Stage, stages
from detune.response.designs import Designs
from detune.solvers.outcome import Outcome

Floats = NDArray[np.float64]
# Designs that are judged before the time is looked at again where each is simulated by itself.
AT_ONCE = 4


@dataclass(frozen=True, eq=False)
class ClosestDesigns:
    """The closest designs (C) of a solver's outcome: the margins (R, C) of every requirement, under its label.

    `whole` (C,) tells of which designs every requirement was judged. Of the others, requirements of conditions with
    records or passages count as they would without these, so that the true margin may be less.
    """

    labels: tuple[str, ...]
    margins: Floats
    whole: NDArray[np.bool_]

    @property
    def least(self) -> Floats:
        """The least margin (C,) of each design."""
        return np.asarray(self.margins.min(axis=0)) if len(self.labels) else np.full(len(self.whole), np.inf)

    @property
    def unjudged(self) -> int:
        """How many designs were not judged by every requirement."""
        return int(np.sum(~self.whole))


def judge_closest(
    problem: Problem, outcome: Outcome, may_begin: Callable[[], bool] = lambda: True
) -> ClosestDesigns:
    """Judge the closest designs of an outcome; what is simulated design by design only while `may_begin` says so."""
    if not outcome.closest.count:
        return ClosestDesigns((), np.zeros((0, 0)), np.ones(0, dtype=bool))
    table = np.column_stack([outcome.closest.part, outcome.closest.step])
    # One design may be the closest of several parts.
    _, first, back = np.unique(table, axis=0, return_index=True, return_inverse=True)
    designs = outcome.closest.take(first)
    slow = {group.requirements for group in problem.harmonics if group.rows.has_slow_parts}
    without: dict[tuple[Requirement, ...], Floats] = {}
    labels: list[str] = []
    margins = []
    whole = np.ones(designs.count, dtype=bool)
    for stage in stages(problem):
        if stage.bound:
            # Of the bounds of a slow group the last is the closest one.
            if stage.requirements in slow:
                without[stage.requirements] = stage.margins(designs)
            continue
        labels += [requirement.label for requirement in stage.requirements]
        if stage.requirements not in slow:
            margins.append(_known(stage.margins(designs)))
            continue
        found = _known(without[stage.requirements]) if stage.requirements in without else None
        judged, done = _while_time(stage, designs, may_begin)
        whole[done:] = False
        rest = np.full((len(stage.requirements), designs.count), np.inf) if found is None else found
        rest[:, :done] = judged
        margins.append(rest)
    back = back.reshape(-1)
    return ClosestDesigns(tuple(labels), np.concatenate(margins)[:, back], whole[back])


def _known(margins: Floats) -> Floats:
    """Margins, with what is no number as missed without end."""
    return np.nan_to_num(margins, nan=-np.inf)


def _while_time(stage: Stage, designs: Designs, may_begin: Callable[[], bool]) -> tuple[Floats, int]:
    """Return the margins (R, done) of the first designs, and how many there was time for."""
    blocks = [np.zeros((len(stage.requirements), 0))]
    done = 0
    while done < designs.count and may_begin():
        chosen = np.arange(done, min(done + AT_ONCE, designs.count))
        blocks.append(_known(stage.margins(designs.take(chosen))))
        done += len(chosen)
    return np.concatenate(blocks, axis=1), done
