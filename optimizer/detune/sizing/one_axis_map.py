"""The exact feasible region of a one-axis problem in stiffness and damping, with the limit that bounds each part.

For one stiffness the feasible damping is an interval (`slice_envelope`), so each disjoint branch is drawn by its lower
and its upper curve over its exact interval of stiffness: a sliver thinner than any grid cell is drawn as it is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.slice_kernels import Slices
from detune.sizing.statement import Objective, OneAxisProblem, SizingError

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class RegionPiece:
    """One branch: stiffness (n,) N/m rising, least and greatest damping (n,), and what sets each (n names)."""

    stiffness: Floats
    least_damping: Floats
    greatest_damping: Floats
    least_set_by: tuple[str, ...]
    greatest_set_by: tuple[str, ...]


def feasible_region(problem: OneAxisProblem, points: int = 40) -> tuple[RegionPiece, ...]:
    """Every branch of a problem of fixed mass, softest first, at `points` stiffnesses and all its corners.

    Raises SizingError when ballast is free: the region then has three unknowns; fix the ballast first.
    """
    ballast = problem.ballast
    if ballast is not None and ballast.least != ballast.most:
        raise SizingError("the map of stiffness and damping needs a fixed ballast; set its bounds equal")
    slices = Slices(replace(problem, objective=Objective("least damping")))
    mass = problem.mass + (ballast.least if ballast is not None else 0.0)
    names = {i: limit.name for i, limit in enumerate(problem.limits)}
    names |= {-1: "least damping", -2: "greatest damping"}
    answer = slices.at(mass)
    corners = [slices.cuts(mass, segment) for segment in answer.segments]
    pieces = []
    for segment, inner in zip(answer.segments, corners, strict=True):
        cosine = 0.5 * (1 - np.cos(np.linspace(0.0, np.pi, points)))
        k = np.unique([*(segment.left + (segment.right - segment.left) * cosine), *inner])
        k = k[(k >= segment.left) & (k <= segment.right)]
        found = [slices.damping_at(mass, each) for each in k.tolist()]
        pieces.append(
            RegionPiece(
                k,
                np.array([low for low, _, _, _ in found]),
                np.array([high for _, high, _, _ in found]),
                tuple(names[below] for _, _, below, _ in found),
                tuple(names[above] for _, _, _, above in found),
            )
        )
    return tuple(pieces)
