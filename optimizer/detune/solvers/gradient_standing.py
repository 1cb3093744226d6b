"""Whether a machine stands against gravity, as a smooth number: on its static stiffness, and on its dynamic one.

With E an elastic stiffness and G gravity's geometric one, let mu be the least number with G y = mu E y. The weight that
topples the machine is -1/mu times its weight, and E + G stands as long as 1 + mu is above zero. With y^T E y = 1,
d mu = y^T (dG - mu dE) y.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.part_slopes import FIGURES, STIFFNESS
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import by_groups

Floats = NDArray[np.float64]


def least_share(at: StateAt, static: bool) -> tuple[float, Floats]:
    """The number mu and its slopes (u,), at the static or the dynamic stiffness of the parts."""
    elastic = at.static
    if not static:
        elastic = at.stiffness - (at.geometric if at.sized.model.with_gravity_stiffness else 0.0)
    inverse = np.linalg.inv(np.linalg.cholesky(elastic))
    values, vectors = np.linalg.eigh(inverse @ at.geometric @ inverse.T)
    least, shape = float(values[0]), inverse.T @ vectors[:, 0]
    carry = at.sized.carry / at.ratio[at.sized.group] if static else at.sized.carry
    turned = at.rows @ shape
    figures = np.zeros((1, len(at.rows), FIGURES))
    figures[0, :, STIFFNESS] = -least * carry[:, None] * turned**2
    slopes = by_groups(at, figures)[0]
    machine = at.sized.slopes
    if machine.columns:
        by_column = np.einsum("i,kij,j->k", shape, at.geometric_slopes, shape)
        spring = carry[:, None] * at.station_parts()[:, STIFFNESS]
        by_column -= 2.0 * least * np.einsum("ksa,sa,sa->k", machine.rows @ shape, spring, turned)
        slopes[list(machine.columns)] += by_column
    return least, slopes


def without_gravity(at: StateAt) -> StateAt:
    """The same state with gravity's stiffness left out, for the numbers of a machine that topples."""
    return replace(
        at,
        stiffness=at.stiffness - at.geometric,
        geometric=np.zeros_like(at.geometric),
        geometric_slopes=np.zeros_like(at.geometric_slopes),
    )
