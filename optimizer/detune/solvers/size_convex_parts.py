"""What real parts cost at least on one side of all excitation: catalog weights in [0, 1] under one matrix inequality.

A design takes one part for each group; with weights instead of a choice the least cost is a semidefinite
program, and no real design of that side is cheaper. Prices are the lowest of any quantity; every step of the
ballast is a program of its own, and the least of them is the bound.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.problem.build import Problem
from detune.response.prices import least_costs
from detune.sizing.convex_selection import selection_bound
from detune.sizing.lmi import Side
from detune.solvers.size_convex import asked_separation

# Weights of more parts than this, or more ballast steps, take the solver minutes.
MOST_PARTS, MOST_STEPS = 1500, 12


@dataclass(frozen=True)
class PartsBound:
    """Least cost of real designs with every mode on one `side`; infinite where it is proven that none is there."""

    side: Side
    cost: float


def parts_bounds(real: Problem) -> tuple[PartsBound, ...]:
    """Bounds for both sides; empty where the parts have no fixed stiffness or nothing excites the machine steadily."""
    model = real.model
    if not real.intervals or len(real.states) > 1 or model.absorbers:
        return ()
    if any(group.laws is not None for group in model.groups):
        return ()
    if sum(len(group.mounts) for group in model.groups) > MOST_PARTS:
        return ()
    if len(model.ballast_mass) > MOST_STEPS:
        return ()
    own = model.geometric if model.with_gravity_stiffness else np.zeros_like(model.mass)
    asked = asked_separation(real.brief)
    low = min(a for a, _ in real.intervals)
    high = max(b for _, b in real.intervals)
    matrices = tuple(_matrices(real, index) for index in range(len(model.groups)))
    costs = tuple(least_costs(model, index) for index in range(len(model.groups)))
    found = []
    sides: tuple[Side, ...] = ("below", "above")
    for side in sides:
        below = low * (1.0 - asked) if side == "below" else None
        above = high * (1.0 + asked) if side == "above" else None
        steps = [
            selection_bound(mass, model.fixed_dynamic + gravity, matrices, costs, below, above)
            for mass, gravity in zip(model.mass, own, strict=True)
        ]
        if all(step.status in ("solved", "infeasible") for step in steps):
            least = min(
                float(step.cost + extra) for step, extra in zip(steps, model.ballast_cost, strict=True)
            )
            found.append(PartsBound(side, least))
    return tuple(found)


def _matrices(real: Problem, index: int) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
    """What each part of a group adds to the stiffness (P, n, n)."""
    stations = [station for station in real.model.stations if station.group == index]
    stack = []
    for mount in real.model.groups[index].mounts:
        k = np.array([0.0 if each is None else each for each in mount.stiffness_dynamic])
        stack.append(sum(s.parallel * s.factor * s.rows.T @ (k[:, None] * s.rows) for s in stations))
    return np.array(stack)
