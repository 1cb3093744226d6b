"""Gravity's geometric stiffness of a machine, and how far a design is from toppling.

The static forces in it are those that equal springs at all stations would carry. So it does not depend on the
parts chosen; how unequal parts share the load shifts it only where stations stand at different heights.
"""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from detune.physics.gravity import geometric_stiffness

Floats = NDArray[np.float64]
# Geometric stiffness below this share of the elastic one is rounding.
NEVER = 1e-9


def gravity_stiffness(turn: Floats, arms: Sequence[Floats], forces: Sequence[Floats]) -> Floats:
    """Return the geometric stiffness (B, n, n) of static forces on one body (physics.gravity).

    turn (3, n): its rotation rows. arms (3,) or (B, 3) m from its reference point, forces (B, 3) N: everything static
    that acts on it, its weight included, so that the reference point does not matter.
    """
    steps = len(forces[0])
    places = np.stack([np.broadcast_to(arm, (steps, 3)) for arm in arms], axis=1)
    each = geometric_stiffness(places, np.stack(forces, axis=1))
    return np.asarray(np.einsum("ai,bac,cj->bij", turn, each, turn, optimize=True))


def weight_to_topple(stiffness: Floats, geometric: Floats) -> Floats:
    """Return by how much all static forces could grow (D,) before the machine topples; infinite if never.

    The smallest positive x with det(K + x K_g) = 0, from the eigenvalues of K^-1/2 (-K_g) K^-1/2. stiffness and
    geometric (D, n, n); nan where the stiffness is not positive definite.
    """
    worst = np.full(len(stiffness), np.nan)
    held = np.all(np.isfinite(stiffness), axis=(1, 2))
    held[held] = np.linalg.eigvalsh(stiffness[held])[:, 0] > 0.0
    if not held.any():
        return worst
    inverse = np.linalg.inv(np.linalg.cholesky(stiffness[held]))
    turned = inverse @ -geometric[held] @ np.swapaxes(inverse, 1, 2)
    largest = np.linalg.eigvalsh(turned)[:, -1]
    worst[held] = np.where(largest > NEVER, 1.0 / np.maximum(largest, NEVER), np.inf)
    return worst
