"""How far a point of a searched front can lie from the true front: bounds on the objective that was minimised.

Two bounds are asked for. Where every price is zero or more, no design within the bounds of the unknowns has less than
the one with every unknown at its lower end. And no design with every mode on the point's side of all
excitation, as good
as the point in separation and added mass, has less than the convex answer of that side (`size_convex`). Where neither
exists no bound is known.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.problem.build import Problem
from detune.response.assemble import dynamic_matrices
from detune.response.modes import mode_batch
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_convex import ConvexSizing, convex_answers, why_not_convex
from detune.solvers.size_front import FrontPoint

Floats = NDArray[np.float64]
RISING = ("cost", "stiffness", "damping", "added-mass", "absorber-mass")
ANY = "any design within the bounds"


def with_bounds(brief: Brief, minimised: str, points: tuple[FrontPoint, ...]) -> tuple[FrontPoint, ...]:
    """The points with what bounds their minimised objective: (which designs, bound) each."""
    least = _least(brief, minimised)
    known: dict[tuple[float, float], tuple[ConvexSizing, ...]] = {}
    told = []
    for point in points:
        found = [] if least is None else [(ANY, least)]
        found += _of_side(brief, minimised, point, known)
        told.append(replace(point, bounds=tuple(found)))
    return tuple(told)


def gap(minimised: str, point: FrontPoint) -> tuple[float, str] | None:
    """The smallest gap (a share of the bound; of separation a difference) and among which designs; None without one."""
    gaps = []
    for which, bound in point.bounds:
        value = point.objectives[minimised]
        if minimised == "separation":
            gaps.append((max(bound - value, 0.0), which))
        elif bound > 0.0:
            gaps.append((max(value / bound - 1.0, 0.0), which))
    return min(gaps, default=None)


def _least(brief: Brief, minimised: str) -> float | None:
    """The objective with every unknown at its lower end, where it cannot fall as an unknown grows."""
    if minimised not in RISING:
        return None
    prices = [made.cost_per_stiffness for made in sizing_of(brief).made]
    prices += [] if brief.ballast is None else [brief.ballast.cost_per_kg]
    if minimised == "cost" and min(prices, default=0.0) < 0.0:
        return None
    low, _ = bounds(brief)
    return float(judge(brief, low[None]).objectives[minimised][0])


def _of_side(
    brief: Brief,
    minimised: str,
    point: FrontPoint,
    known: dict[tuple[float, float], tuple[ConvexSizing, ...]],
) -> list[tuple[str, float]]:
    problem, designs = batch(brief, [made_design(brief, point.values)])
    if why_not_convex(brief, problem) is not None:
        return []
    side = _side(problem, mode_batch(dynamic_matrices(problem.model, designs)).frequency[0])
    if side is None:
        return []
    trade = sizing_of(brief).trade
    apart = point.objectives["separation"] if "separation" in trade and minimised != "separation" else 0.0
    added = point.objectives["added-mass"] if "added-mass" in trade else float("inf")
    key = (apart, added)
    if key not in known:
        changed = _as_good(brief, minimised, apart, added)
        known[key] = convex_answers(changed, problem, point.values)
    for answer in known[key]:
        usable = answer.form in ("bound", "global") and not answer.partial
        if answer.side == side and answer.what == minimised and usable and np.isfinite(answer.bound):
            return [(f"designs with every mode {side} all excitation", answer.bound)]
    return []


def _side(problem: Problem, frequency: Floats) -> str | None:
    low, high = min(a for a, _ in problem.intervals), max(b for _, b in problem.intervals)
    if np.all(frequency < low):
        return "below"
    return "above" if np.all(frequency > high) else None


def _as_good(brief: Brief, minimised: str, apart: float, added: float) -> Brief:
    """The brief that asks for the separation of a point and admits no more ballast than it has."""
    sizing = sizing_of(brief)
    unknowns = tuple(
        _up_to(unknown, added) if unknown.kind == "ballast" and added < unknown.bounds[1] else unknown
        for unknown in sizing.unknown
    )
    goal: dict[str, str | None] = {"minimise": minimised, "maximise": None}
    if minimised == "separation":
        goal = {"maximise": minimised, "minimise": None}
    allowables = brief.allowables
    # Rounding of the separation itself must not shut out the point.
    asked = apart - 1e-6
    if asked > 0.0:
        kept = tuple(a for a in allowables if not isinstance(a, Separation))
        others = [a.limit for a in allowables if isinstance(a, Separation)]
        limit = max([asked, *others])
        allowables = (*kept, Separation.model_validate({"kind": "separation", "limit": limit}))
    return brief.model_copy(
        update={
            "allowables": allowables,
            "sizing": sizing.model_copy(update={"unknown": unknowns, **goal}),
        }
    )


def _up_to(unknown: SizingUnknown, most: float) -> SizingUnknown:
    low, high = unknown.bounds
    ceiling = min(max(most * (1.0 + 1e-9), low), high)
    return SizingUnknown.model_validate(
        {**unknown.model_dump(exclude_unset=True), "lower": f"{low} kg", "upper": f"{ceiling} kg"}
    )
