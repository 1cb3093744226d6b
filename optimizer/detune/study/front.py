"""The front: every nondominated design, each judged by the assessor."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.choice import LARGER_IS_BETTER
from detune.ground.errors import SolveError
from detune.problem.build import Problem
from detune.response.assess import assess
from detune.response.assessment import Assessment
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
    of a limit and not confirmed.
    """

    trade: tuple[str, ...]
    points: tuple[Assessment, ...]
    index: tuple[int, ...]
    designs: Designs
    objectives: dict[str, Floats]
    withdrawn: tuple[Assessment, ...]


def objective_of(assessment: Assessment, name: str) -> float:
    """Return one objective of an assessed design."""
    return {
        "cost": assessment.cost,
        "separation": assessment.separation,
        "least-margin": assessment.least_margin,
        "added-mass": assessment.added_mass,
        "part-numbers": float(assessment.part_numbers),
    }[name]


def assessed_front(problem: Problem, outcome: Outcome) -> Front:
    """Return the front over the traded objectives, every point assessed.

    Raises SolveError where solver and assessor disagree by more than rounding: that is an error
    report, not an answer.
    """
    trade = problem.brief.objectives.trade
    alive = np.arange(outcome.designs.count)
    known: dict[int, Assessment] = {}
    withdrawn: list[Assessment] = []
    while True:
        values = {name: value[alive] for name, value in outcome.objectives.items()}
        front = alive[nondominated(as_minimised(values, trade))] if len(alive) else alive
        for index in front:
            if int(index) not in known:
                known[int(index)] = assess(problem.brief, problem.design(outcome.designs, int(index)))
        refused = [int(index) for index in front if not known[int(index)].meets]
        if not refused:
            break
        for index in refused:
            _check_agreement(known[index])
            withdrawn.append(known[index])
        alive = np.setdiff1d(alive, refused)
    position = {int(index): place for place, index in enumerate(alive)}
    return Front(
        trade=trade,
        points=tuple(known[int(index)] for index in front),
        index=tuple(position[int(index)] for index in front),
        designs=outcome.designs.take(alive),
        objectives={name: value[alive] for name, value in outcome.objectives.items()},
        withdrawn=tuple(withdrawn),
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
