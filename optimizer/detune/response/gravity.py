"""Gravity's geometric stiffness of a batch of designs, and how far each is from toppling."""

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.physics.gravity import geometric_stiffness
from detune.response.designs import Designs
from detune.response.model import Model

if TYPE_CHECKING:
    from detune.response.views_static import StaticBatch

Floats = NDArray[np.float64]
# Geometric stiffness below this share of the elastic one is rounding.
NEVER = 1e-9


def gravity_stiffness(model: Model, designs: Designs, static: "StaticBatch") -> Floats:
    """Return the geometric stiffness (D, n, n) of all static forces on each body (physics.gravity).

    Weights stand in the sum with their own places, so the reference point does not matter.
    """
    n = model.frame.count
    total = np.zeros((designs.count, n, n))
    for body in model.frame.references:
        turn = model.frame.rotation_rows(body)
        if not turn.any():
            continue
        arms: list[Floats] = []
        forces: list[Floats] = []
        for place in model.dead_loads:
            if place.body == body:
                arms.append(np.broadcast_to(place.arm, (designs.count, 3)))
                forces.append(place.force[designs.step])
        for station in model.stations:
            if station.parallel == 0:
                continue
            pushed = -station.parallel * static.station_load(station.name) @ station.axes.T
            for other, sign in ((station.on, 1.0), (station.to, -1.0)):
                if other == body:
                    arms.append(np.broadcast_to(station.position - model.frame.references[body], (designs.count, 3)))
                    forces.append(sign * pushed)
        for c in model.connections:
            pushed = -c.stiffness_static * (static.q @ c.rows.T)
            for other, sign in ((c.on, 1.0), (c.to, -1.0)):
                if other == body:
                    arms.append(np.broadcast_to(c.position - model.frame.references[body], (designs.count, 3)))
                    forces.append(sign * pushed)
        each = geometric_stiffness(np.stack(arms, axis=1), np.stack(forces, axis=1))
        total += np.einsum("ai,dab,bj->dij", turn, each, turn, optimize=True)
    return total


def weight_to_topple(stiffness: Floats, geometric: Floats) -> Floats:
    """Return by how much all static forces could grow (D,) before the machine topples; infinite if never.

    The smallest positive x with det(K + x K_g) = 0, from the eigenvalues of K^-1/2 (-K_g) K^-1/2. stiffness and
    geometric (D, n, n); nan where the stiffness is not positive definite.
    """
    worst = np.full(len(stiffness), np.nan)
    held = np.all(np.isfinite(stiffness), axis=(1, 2)) & np.all(np.isfinite(geometric), axis=(1, 2))
    held[held] = np.linalg.eigvalsh(stiffness[held])[:, 0] > 0.0
    if not held.any():
        return worst
    inverse = np.linalg.inv(np.linalg.cholesky(stiffness[held]))
    turned = inverse @ -geometric[held] @ np.swapaxes(inverse, 1, 2)
    largest = np.linalg.eigvalsh(turned)[:, -1]
    worst[held] = np.where(largest > NEVER, 1.0 / np.maximum(largest, NEVER), np.inf)
    return worst
