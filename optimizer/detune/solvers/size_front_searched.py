"""Fronts where no exact method applies: epsilon constraint, each point the best of local searches, its gap stated."""

from __future__ import annotations

import itertools

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.sizing.made_parts import sizing_of
from detune.solvers import size_many_starts
from detune.solvers.size_batch import judge
from detune.solvers.size_front import ORDER, FrontPoint, SizingFront, nondominated
from detune.solvers.size_front_bounds import with_bounds
from detune.solvers.size_gradients import prepared
from detune.solvers.size_whole import on_steps

Floats = NDArray[np.float64]
STARTS = 2
MOST = 12


def searched_front(brief: Brief, best: Floats) -> SizingFront:
    """The front over the traded objectives round the best design `best` (u,)."""
    sizing = sizing_of(brief)
    trade: tuple[str, ...] = sizing.trade
    minimised = next(name for name in ORDER if name in trade)
    held = tuple(name for name in trade if name != minimised)
    ends: list[Floats] = [best]
    once = prepared(brief) if all(unknown.kind != "parallel" for unknown in sizing.unknown) else None
    for name in trade:
        sense = -1.0 if name == "separation" else 1.0
        found = size_many_starts.solve(
            brief, name, sense, starts=STARTS, seed=sizing.seed, first=(best,), gradients=once
        )
        found = on_steps(brief, found, name, sense, few=1)
        if found.best is not None:
            ends.append(found.best.values)
    points = [_point(brief, values, "end") for values in ends]
    count = max(2, round(min(sizing.front_points, MOST) ** (1.0 / len(held))))
    spans = [[point.objectives[name] for point in points] for name in held]
    levels = [np.linspace(min(span), max(span), count + 2)[1:-1] for span in spans]
    for each in itertools.product(*levels):
        limits: dict[str, float] = {name: float(level) for name, level in zip(held, each, strict=True)}
        near = min(points, key=lambda point: _misses(point, limits))
        sense = -1.0 if minimised == "separation" else 1.0
        found = size_many_starts.solve(
            brief,
            minimised,
            sense,
            starts=1,
            seed=sizing.seed,
            first=(near.values,),
            held=limits,
            gradients=once,
        )
        found = on_steps(brief, found, minimised, sense, limits, few=1)
        if found.best is not None:
            points.append(_point(brief, found.best.values, "local"))
    worth = (
        f"least {minimised} at levels of {', '.join(held)}, each the best of a few local searches: no proof; "
        "the gap of each point says by how much it can lie above what no design falls below, where that is "
        "known"
    )
    kept = with_bounds(brief, minimised, nondominated(points, trade))
    return SizingFront(trade, minimised, kept, worth, exact=False)


def _misses(point: FrontPoint, limits: dict[str, float]) -> float:
    return sum(abs(point.objectives[name] / max(abs(level), 1e-12) - 1.0) for name, level in limits.items())


def _point(brief: Brief, values: Floats, branch: str) -> FrontPoint:
    objectives = judge(brief, values[None]).objectives
    return FrontPoint(values, {name: float(value[0]) for name, value in objectives.items()}, branch)
