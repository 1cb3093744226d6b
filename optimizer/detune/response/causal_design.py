"""One design of a batch as a causal system for calculations in time."""

import numpy as np
from numpy.typing import NDArray

from detune.response.assemble import Dynamic
from detune.response.modes import ModeBatch

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi


def causal_matrices(dynamic: Dynamic, modal: ModeBatch, index: int) -> tuple[Floats, Floats]:
    """Return stiffness and damping (n, n) of one design with viscous stand-ins for what is not causal.

    Each mode gets the viscous damping of its own loss factor (physics.causal). Where stiffness depends on
    frequency, each mode also keeps the stiffness of its own frequency.
    """
    mass, shapes, omega = dynamic.mass[index], modal.shapes[index], TWO_PI * modal.frequency[index]
    carried = mass @ shapes
    if not dynamic.parts.with_frequency:
        lost = np.sum(shapes * (dynamic.hysteretic[index] @ shapes), axis=0)
        return dynamic.stiffness[index], dynamic.viscous[index] + (carried * (lost / omega)) @ carried.T
    damping = (carried * (modal.loss_factor[index] * omega)) @ carried.T
    return (carried * omega**2) @ carried.T, damping
