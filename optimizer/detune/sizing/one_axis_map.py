"""The exact feasible region of a one-axis problem in stiffness and damping, with the limit that bounds each part.

For one stiffness the feasible damping is an interval (`envelope`), so each disjoint branch is drawn by its lower
and its upper curve over its exact interval of stiffness: a sliver thinner than any grid cell is drawn as it is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.envelope import Rows, gamma_interval
from detune.sizing.exchange import VIOLATION, LinePool, solve_slice
from detune.sizing.statement import Objective, OneAxisProblem, SizingError
from detune.sizing.worst_frequency import worst

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class RegionPiece:
    """One branch: stiffness (n,) N/m rising, least and greatest damping (n,), and what sets each (n names)."""

    stiffness: Floats
    least_damping: Floats
    greatest_damping: Floats
    least_set_by: tuple[str, ...]
    greatest_set_by: tuple[str, ...]


def _names(pool: LinePool, mass: float) -> list[str]:
    limits = pool.problem.limits
    names = [limits[i].name for i in pool.index]
    names += ["least damping", "greatest damping"]
    return names + [limits[i].name for i in pool.closed_ranges(mass)]


def _settle(pool: LinePool, mass: float, k: Floats) -> Rows:
    """Add lines until both damping curves meet every range limit at all stiffnesses `k` (scaled)."""
    kind = pool.problem.damping_kind
    while True:
        table = pool.table((mass,))
        low, high = gamma_interval(table, k)
        added = False
        for i in pool.open_ranges():
            for gamma in (low, np.maximum(low, high)):
                ratio, u = worst(pool.forms[i], kind, k, gamma, mass, *pool.ranges[i])
                # A few worst ones a round: each new line serves its neighbours too.
                for j in np.argsort(ratio)[::-1][:8]:
                    if ratio[j] > 1 + max(VIOLATION, 1e-9):
                        added |= pool.add(i, float(u[j]))
        if not added:
            return table


def feasible_region(problem: OneAxisProblem, points: int = 40) -> tuple[RegionPiece, ...]:
    """Every branch of a problem of fixed mass, softest first, at `points` stiffnesses and all its corners.

    Raises SizingError when ballast is free: the region then has three unknowns; fix the ballast first.
    """
    ballast = problem.ballast
    if ballast is not None and ballast.least != ballast.most:
        raise SizingError("the map of stiffness and damping needs a fixed ballast; set its bounds equal")
    problem = replace(problem, objective=Objective("least damping"))
    pool = LinePool.of(problem)
    mass = (problem.mass + (ballast.least if ballast is not None else 0.0)) / pool.scales.mass()
    scales = pool.scales
    viscous = problem.damping_kind == "viscous"
    pieces = []
    for segment in solve_slice(pool, mass, (0.0, math.inf)).segments:
        cosine = 0.5 * (1 - np.cos(np.linspace(0.0, np.pi, points)))
        k = segment.left + (segment.right - segment.left) * cosine
        k = np.unique(np.concatenate([k, segment.inner]))
        k = k[(k >= segment.left) & (k <= segment.right)]
        table = _settle(pool, mass, k)
        low, high = gamma_interval(table, k)
        high = np.maximum(low, high)
        lower, upper = _active(table, k)
        names = _names(pool, mass)
        stiffness = k * scales.stiffness
        unit = math.sqrt(scales.gamma(viscous))
        divide = np.ones_like(k) if viscous else stiffness
        pieces.append(
            RegionPiece(
                stiffness,
                np.sqrt(low) * unit / divide,
                np.sqrt(high) * unit / divide,
                tuple(names[i] for i in lower),
                tuple(names[i] for i in upper),
            )
        )
    return tuple(pieces)


def _active(table: Rows, k: Floats) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Row that sets the least and the greatest gamma at each stiffness."""
    powers = np.stack([np.ones_like(k), k, k * k])
    alpha = table.alpha[0] @ powers
    if table.window.size:
        first = alpha.shape[0] - table.window.shape[0]
        outside = (k < table.window[:, :1]) | (k > table.window[:, 1:])
        alpha[first:] = np.where(outside, np.inf, alpha[first:])
    with np.errstate(divide="ignore", invalid="ignore"):
        bound = -alpha / table.beta[:, None]
    below = np.where(table.beta[:, None] > 0, bound, -np.inf)
    above = np.where(table.beta[:, None] < 0, bound, np.inf)
    return np.argmax(below, axis=0), np.argmin(above, axis=0)
