"""Limits that no design within the bounds can miss, found without solving anything."""

from __future__ import annotations

import numpy as np

from detune.sizing.statement import OneAxisProblem, ResponseLimit, power_form


def never_binds(problem: OneAxisProblem, limit: ResponseLimit) -> bool:
    """Whether a limit is met by every design within the bounds, by |D| >= Im D alone.

    Viscous: |D| >= w c and |K/D|^2 <= 1 + (k/(w c))^2; loss factor: |D| >= eta k and |K/D|^2 <= 1 + 1/eta^2. With the
    greatest k and least damping of the bounds and the ends of the range, whichever is worse.
    """
    form = power_form(limit)
    if problem.damping_bounds[0] <= 0.0:
        return False
    (softest, stiffest), damping = problem.stiffness_bounds, problem.damping_bounds[0]
    heaviest = problem.mass + (0.0 if problem.ballast is None else problem.ballast.most)
    ends = [2.0 * np.pi * f for f in (limit.lower_frequency, limit.upper_frequency)]
    loss = ends[0] * damping if problem.damping_kind == "viscous" else damping * softest
    angle = stiffest / (ends[0] * damping) if problem.damping_kind == "viscous" else 1.0 / damping
    # The factor and the power of w at their worst each: never below the true ratio.
    top = 1.0 + angle**2 if form.transmission else 1.0 / loss**2
    scale = form.scale * (heaviest**2 if form.mass_proportional else 1.0)
    return bool(scale * max(w ** (2 * form.power) for w in ends) * top < 1.0)
