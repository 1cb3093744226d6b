"""The front: every nondominated design, each judged by the assessor."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.choice import LARGER_IS_BETTER
from detune.ground.errors import SolveError
from detune.problem.build import Problem
from detune.response.assessment import Assessment
from detune.response.assessor import Assessor
from detune.response.designs import Designs
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome

Floats = NDArray[np.float64]
# Two routes to a supremum agree to about 1e-4; a wider gap between solver and assessor is a fault.
AGREEMENT = 2e-3


@dataclass(frozen=True)
class Front:
    """Nondominated designs in the order of the first objective, all meeting the brief.

    `objectives` (each (D,)) are those of every design that met it, `designs` the same designs;
    `index` says which of them the points are. `withdrawn` were claimed by the solver within rounding
    of a limit and not confirmed. `unassessed`: how many more the solver claims to lie on the front, which were not
    assessed for want of time; the first point never is one of them.
    """

    trade: tuple[str, ...]
    points: tuple[Assessment, ...]
    index: tuple[int, ...]
    designs: Designs
    objectives: dict[str, Floats]
    withdrawn: tuple[Assessment, ...]
    unassessed: int = 0


def objective_of(assessment: Assessment, name: str) -> float:
    """Return one objective of an assessed design."""
    return {
        "cost": assessment.cost,
        "separation": assessment.separation,
        "least-margin": assessment.least_margin,
        "added-mass": assessment.added_mass,
        "part-numbers": float(assessment.part_numbers),
    }[name]


def assessed_front(
    problem: Problem,
    outcome: Outcome,
    assessor: Assessor | None = None,
    may_begin: Callable[[], bool] = lambda: True,
) -> Front:
    """Return the front over the traded objectives, every point assessed.

    `may_begin` is asked before each assessment but those it takes to find the first point. Raises SolveError where
    solver and assessor disagree by more than rounding: that is an error report, not an answer.
    """
    judge = assessor or Assessor(problem.brief)
    trade = problem.brief.objectives.trade
    alive = np.arange(outcome.designs.count)
    known: dict[int, Assessment] = {}
    withdrawn: list[Assessment] = []
    while True:
        values = {name: value[alive] for name, value in outcome.objectives.items()}
        front = alive[nondominated(as_minimised(values, trade))] if len(alive) else alive
        found = False
        for index in map(int, front):
            if index not in known and (not found or may_begin()):
                known[index] = judge(problem.design(outcome.designs, index))
            found = found or (index in known and known[index].meets)
        refused = [index for index in map(int, front) if index in known and not known[index].meets]
        if not refused:
            break
        for index in refused:
            _check_agreement(known[index])
            withdrawn.append(known[index])
        alive = np.setdiff1d(alive, refused)
    position = {int(index): place for place, index in enumerate(alive)}
    points = [index for index in map(int, front) if index in known]
    return Front(
        trade=trade,
        points=tuple(known[index] for index in points),
        index=tuple(position[index] for index in points),
        designs=outcome.designs.take(alive),
        objectives={name: value[alive] for name, value in outcome.objectives.items()},
        withdrawn=tuple(withdrawn),
        unassessed=len(front) - len(points),
    )


def _check_agreement(assessment: Assessment) -> None:
    worst = assessment.tightest
    if worst.margin < -AGREEMENT:
        raise SolveError(
            f"The solver claimed that the design ({assessment.design}) meets the brief, but the assessor finds "
            f"{worst.label} missed by {-worst.margin:.2%}. No answer is given; please report this with the study file."
        )


def better(first: float, second: float, objective: str) -> bool:
    """Return whether the first value of an objective is strictly better than the second."""
    return first > second if LARGER_IS_BETTER[objective] else first < second
