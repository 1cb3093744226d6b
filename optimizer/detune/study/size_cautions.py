"""What to say of the unknowns of a sized design: those on their own bound, and those that nothing fixes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_batch import judge
from detune.solvers.size_many_starts import MET, Coordinates

Floats = NDArray[np.float64]
# How far an unknown is moved, of its range, to see whether anything holds it.
MOVED = 0.02


def at_ends(brief: Brief, values: Floats) -> list[str]:
    """Say where an unknown came to rest on the bound the user gave."""
    notes = []
    for unknown, value in zip(sizing_of(brief).unknown, values.tolist(), strict=True):
        low, high = unknown.bounds
        if low == high:
            continue
        for end, name in ((low, "lower"), (high, "upper")):
            if abs(value - end) <= 1e-6 * max(abs(end), 1e-9) and not (end == 0.0 and name == "lower"):
                notes.append(
                    f"{unknown.title} rests on its {name} bound, which the study states: no requirement stops it "
                    "there, and a wider bound would change the answer"
                )
    return notes


def not_fixed(brief: Brief, values: Floats, objective: float) -> list[str]:
    """Say which unknowns could be others by two per cent of their range with the same objective and every limit met."""
    sizing, to = sizing_of(brief), Coordinates(brief)
    place = to.inward(values)
    chosen = [
        k
        for k, unknown in enumerate(sizing.unknown)
        if unknown.bounds[0] < unknown.bounds[1] and MOVED < place[k] < 1.0 - MOVED and unknown.steps is None
    ]
    if not chosen:
        return []
    rows = np.repeat(place[None], 2 * len(chosen), axis=0)
    for number, k in enumerate(chosen):
        rows[2 * number, k] -= MOVED
        rows[2 * number + 1, k] += MOVED
    found = judge(brief, to.outward(rows))
    same = np.abs(found.objectives[sizing.goal] - objective) <= 1e-9 * max(abs(objective), 1e-9)
    free = same & (found.margins >= MET).all(axis=0)
    return [
        f"{sizing.unknown[k].title} is not fixed by the answer: its neighbours have the same objective and meet every "
        "limit"
        for number, k in enumerate(chosen)
        if free[2 * number] and free[2 * number + 1]
    ]
