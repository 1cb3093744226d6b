"""Local searches over unknowns that come in steps: ballast in steps, whole numbers of parts side by side.

A local search takes every unknown as continuous. Its best points are then put on the steps round them (on every step
where there are few) and searched again with these held, so that what is shown can be built.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.sizing.made_parts import sizing_of
from detune.solvers import size_many_starts
from detune.solvers.size_many_starts import ManyStarts

Floats = NDArray[np.float64]
# So many combinations of steps are all tried; of more, those next to the best searches.
FEW, BEST = 8, 2


def step_of(unknown: SizingUnknown) -> float | None:
    """The step of an unknown, None where it is continuous or known."""
    low, high = unknown.bounds
    if low == high:
        return None
    return 1.0 if unknown.kind == "parallel" else unknown.steps


def on_steps(
    brief: Brief,
    found: ManyStarts,
    goal: str | None = None,
    sense: float | None = None,
    levels: dict[str, float] | None = None,
    few: int = FEW,
) -> ManyStarts:
    """The searches again with every stepped unknown on a step; `found` itself where nothing comes in steps.

    `goal`, `sense` and `levels` are those `found` was searched with (the study's own goal when left out). Up to
    `few` combinations are all tried.
    """
    sizing = sizing_of(brief)
    goal, sense = goal or sizing.goal, sizing.sense if sense is None else sense
    stepped = {k: step for k, u in enumerate(sizing.unknown) if (step := step_of(u)) is not None}
    if not stepped or not found.searches:
        return found
    searches, evaluations, slopes = [], found.evaluations, found.slopes
    for combination, start in _combinations(sizing.unknown, stepped, found, few):
        values = start.copy()
        for k, value in combination.items():
            values[k] = value
        held = _held(brief, combination)
        again = size_many_starts.solve(
            held, goal, sense, starts=1, seed=sizing.seed, first=(values,), held=levels, pool=4
        )
        searches += list(again.searches)
        evaluations, slopes = evaluations + again.evaluations, slopes + again.slopes
    good, bad = size_many_starts.ordered(searches, sizing.sense)
    spread, near = (math.nan,) * 3, 0.0
    if good:
        reached = np.array([s.objective for s in good])
        spread = (float(reached[0]), float(np.median(reached)), float(reached[-1]))
        near = float(np.mean(np.abs(reached - reached[0]) <= 0.01 * abs(reached[0])))
    return replace(
        found,
        searches=(*good, *bad),
        met=len(good),
        spread=spread,
        near=near,
        evaluations=evaluations,
        slopes=slopes,
        worth=f"{found.worth}, with ballast and numbers of parts on their steps",
    )


def _combinations(
    unknowns: tuple[SizingUnknown, ...], stepped: dict[int, float], found: ManyStarts, few: int
) -> list[tuple[dict[int, float], Floats]]:
    """Values of the stepped unknowns to hold, each with the point (u,) to start from."""
    steps = {}
    for k, step in stepped.items():
        low, high = unknowns[k].bounds
        steps[k] = [low + i * step for i in range(math.floor((high - low) / step * (1 + 1e-12) + 1e-9) + 1)]
    if math.prod(len(each) for each in steps.values()) <= few:
        start = found.searches[0].values
        return [(dict(zip(steps, each, strict=True)), start) for each in itertools.product(*steps.values())]
    chosen: dict[tuple[float, ...], Floats] = {}
    for search in found.searches[:BEST]:
        around = []
        for k, each in steps.items():
            order = sorted(each, key=lambda value, k=k, at=search: abs(value - at.values[k]))  # type: ignore[misc]
            around.append(order[:2])
        for combination in itertools.product(*around):
            chosen.setdefault(combination, search.values)
    return [(dict(zip(steps, each, strict=True)), start) for each, start in chosen.items()]


def _held(brief: Brief, values: dict[int, float]) -> Brief:
    """The brief with some unknowns held at values."""
    sizing = sizing_of(brief)
    unknowns = []
    for k, unknown in enumerate(sizing.unknown):
        if k not in values:
            unknowns.append(unknown)
            continue
        bound: str | float = values[k] if unknown.kind == "parallel" else f"{values[k]!r} kg"
        stated = unknown.model_dump(exclude_unset=True)
        stated.pop("step", None)
        unknowns.append(SizingUnknown.model_validate({**stated, "lower": bound, "upper": bound}))
    return brief.model_copy(update={"sizing": sizing.model_copy(update={"unknown": tuple(unknowns)})})
