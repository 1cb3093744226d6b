"""What SciPy is handed of a sizing problem at one point: rows that must not be negative, the goal, and their slopes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.solvers.size_gradients import Gradients, Point, Sides, evaluated

Floats = NDArray[np.float64]
# The search keeps this margin, so that rounding of two ways to the same number does not decide.
ROOM = 1e-5


@dataclass(frozen=True)
class Handed:
    """Rows (m,) with slopes (m, u), and the goal with its slopes (u,), None where it is the last variable."""

    rows: Floats
    slopes: Floats
    goal: float
    goal_slopes: Floats | None


def handed(
    gradients: Gradients,
    values: Floats,
    scale: Floats,
    sides: Sides,
    goal: str,
    held: dict[str, float],
    level: float,
) -> Handed:
    """Rows and goal at values (u,); `scale` (u,) is how they change with the search's own variables.

    `level` is the variable of a goal that is a worst of many: the log of the worst response, or the separation. Its
    slopes come last. `held` are objectives held at levels.
    """
    point = evaluated(gradients, values, sides)
    kept = point.rows
    responds = np.isfinite(kept.log)
    parts: list[tuple[Floats, Floats, float]] = []
    if goal == "worst-response":
        parts.append((kept.value[~responds], kept.slopes[~responds], 0.0))
        parts.append((level - kept.log[responds], -kept.log_slopes[responds], 1.0))
    else:
        parts.append((kept.value, kept.slopes, 0.0))
    if goal == "separation":
        parts.append((point.apart - level, point.apart_slopes, -1.0))
    parts += [_held(point, responds, name, value) for name, value in held.items()]
    rows = np.concatenate([value for value, _, _ in parts])
    slopes = np.concatenate([by for _, by, _ in parts]) * scale
    # What no unknown changes and is just met, such as a number of part numbers, must not look missed by the room.
    last = np.concatenate([np.full(len(value), by) for value, _, by in parts])
    settled = (slopes == 0.0).all(axis=1) & (last == 0.0) & (rows >= 0.0)
    rows = np.where(settled, np.maximum(rows, ROOM), rows) - ROOM
    if goal in ("worst-response", "separation"):
        return Handed(rows, np.column_stack([slopes, last]), level, None)
    total, by_total = point.objectives[goal]
    return Handed(rows, slopes, total, by_total * scale)


def _held(point: Point, responds: NDArray[np.bool_], name: str, level: float) -> tuple[Floats, Floats, float]:
    if name == "separation":
        return point.apart - level, point.apart_slopes, 0.0
    if name == "worst-response":
        rows = point.rows
        return np.log(max(level, 1e-9)) - rows.log[responds], -rows.log_slopes[responds], 0.0
    total, by_total = point.objectives[name]
    bound = max(level, 1e-9)
    return np.array([1.0 - total / bound]), -by_total[None] / bound, 0.0
