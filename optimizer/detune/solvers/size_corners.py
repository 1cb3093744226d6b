"""The unknowns with the least worst response at the corners of the scatter, by a simplex search from a sized design.

A tuning that is best at listed values has two peaks of equal height, and every deviation raises one of them. Over the
scatter another tuning, with more damping, is better. The search looks at the worst corners found so far and takes in
further ones until the worst of all corners is among them: sampled, and no proof, which has to follow.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.sizing.made_parts import Made, made_design, sizing_of
from detune.solvers.perturbed import perturbed
from detune.solvers.scatter_machine import scatter_map
from detune.solvers.size_absorber import scatter_points
from detune.solvers.size_batch import judge, judge_alike
from detune.solvers.size_many_starts import Coordinates

Floats = NDArray[np.float64]
Point = tuple[float, ...]
# With more unknowns a simplex creeps.
MOST_UNKNOWNS = 4
# Corners that are looked at to begin with, rounds, and steps of each.
WORST, ROUNDS, STEPS = 4, 3, 60
# Weight of limits that are missed at listed values.
MISSED = 10.0


def least_over_corners(brief: Brief, values: Floats) -> Floats | None:
    """Values (u,) with the least worst response over its limit at the corners of the scatter; None if that is not for
    this brief: another objective, or more than MOST_UNKNOWNS unknowns.
    """
    from scipy.optimize import minimize

    sizing = sizing_of(brief)
    if sizing.goal != "worst-response" or len(values) > MOST_UNKNOWNS or brief.scatter is None:
        return None
    made = made_design(brief, values)
    points, _ = scatter_points(scatter_map(made.brief, made.design))
    to = Coordinates(brief)
    best = to.inward(values)
    every = _at(brief, values, points)
    looked = [points[k] for k in np.argsort(-every, kind="stable")[:WORST].tolist()]

    def cost(y: Floats) -> float:
        there = to.outward(np.clip(y, 0.0, 1.0))
        missed = float(np.minimum(judge(brief, there[None]).margins, 0.0).sum())
        return float(_at(brief, there, looked).max()) - MISSED * missed

    for _ in range(ROUNDS):
        found = minimize(
            cost, best, method="Nelder-Mead", bounds=[(0.0, 1.0)] * len(best),
            options={"maxfev": STEPS, "xatol": 1e-4, "fatol": 1e-5},
        )  # fmt: skip
        best = np.clip(found.x, 0.0, 1.0)
        every = _at(brief, to.outward(best), points)
        worst = points[int(np.argmax(every))]
        if worst in looked:
            break
        looked.append(worst)
    return to.outward(best)


def _at(brief: Brief, values: Floats, points: list[Point]) -> Floats:
    """Worst response over its limit at every point of the scatter, for one design."""
    made = made_design(brief, values)
    found = scatter_map(made.brief, made.design)
    worst = []
    for point in points:
        changed, design = perturbed(made.brief, made.design, found, point)
        worst.append(float(judge_alike(changed, [Made(changed, design)]).objectives["worst-response"][0]))
    return np.array(worst)
