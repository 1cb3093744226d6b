"""The stages of a problem that are quick enough to judge many designs for a drawing or a short list."""

import numpy as np
from numpy.typing import NDArray

from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.problem.stages import Stage, stages
from detune.response.designs import Designs

Floats = NDArray[np.float64]


def has_slow_parts(problem: Problem) -> bool:
    """Return whether `quick_stages` leaves out records or passages."""
    return any(group.rows.has_slow_parts for group in problem.harmonics)


def quick_stages(problem: Problem) -> tuple[Stage, ...]:
    """Return one stage for each set of requirements; records and passages are left out, totals as well."""
    slow = [group.requirements for group in problem.harmonics if group.rows.has_slow_parts]
    chosen: dict[tuple[Requirement, ...], Stage] = {}
    for stage in stages(problem):
        if stage.requirements == problem.totals:
            continue
        # Of the bounds of a slow group the last is the closest one.
        if stage.bound == (stage.requirements in slow):
            chosen[stage.requirements] = stage
    return tuple(chosen.values())


def stage_margins(stage: Stage, designs: Designs) -> Floats:
    """Return the margins (R, D) of a stage, a few designs at a time; what is no number counts as missed."""
    numbers = np.arange(designs.count)
    blocks = [designs.take(numbers[i : i + stage.size]) for i in range(0, designs.count, stage.size)]
    margins = np.concatenate([stage.margins(block) for block in blocks], axis=1)
    return np.where(np.isnan(margins), -1.0, margins)
