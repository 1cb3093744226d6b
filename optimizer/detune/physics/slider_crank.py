"""Primary and secondary inertia forces and couples of a machine with one or more slider-cranks.

The acceleration of a piston, r w^2 (cos a + (r/l) cos 2a), is the exact one to first order in r/l: the second
order lacks the relative term (r/l)^2/4 (2 per cent at r/l = 0.28) and the fourth order, (r/l)^3/4 of the
primary, is left out. Den Hartog, Mechanical Vibrations, ch. 5; Bevan, Theory of Machines, ch. 14 (balancing
of reciprocating parts).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.rigid_body import skew


@dataclass(frozen=True)
class ReciprocatingForces:
    """Phasors on the frame divided by the square of the shaft's omega (rad/s), so that forces are in kg m.

    force (2, 3) in kg m and moment (2, 3) in kg m2: row 0 turns with the shaft (primary), row 1 twice as fast
    (secondary). The force in time is w^2 Re(force[0] exp(j w t) + force[1] exp(2 j w t)).
    """

    force: ComplexArray
    moment: ComplexArray


def reciprocating_forces(
    reciprocating_mass: ArrayLike,
    crank_radius: ArrayLike,
    rod_length: ArrayLike,
    crank_angle: ArrayLike,
    direction: ArrayLike,
    position: ArrayLike,
) -> ReciprocatingForces:
    """Inertia force and couple of the reciprocating masses on the frame.

    Shapes: reciprocating_mass, crank_radius, rod_length, crank_angle (k) or scalars, in kg, m, m, rad;
    direction (k, 3) or (3), from the crank to the piston; position (k, 3) in m of a point on each cylinder's
    line from the reference point. crank_angle is the angle past the cylinder's own top dead centre at t = 0.
    At top dead centre the force on the frame points outward, along direction. The inertia torque about the
    shaft and the rotating masses (an unbalance, see ``balance``) are not part of it. ValueError unless
    rod_length > crank_radius.
    """
    place = np.atleast_2d(np.asarray(position, dtype=float))
    k = place.shape[0]
    mass, radius, rod, angle = (
        np.broadcast_to(np.asarray(a, dtype=float), (k,))
        for a in (reciprocating_mass, crank_radius, rod_length, crank_angle)
    )
    if not np.all(rod > radius):
        raise ValueError("a connecting rod must be longer than its crank radius")
    along = np.broadcast_to(np.asarray(direction, dtype=float), (k, 3))
    along = along / np.linalg.norm(along, axis=-1, keepdims=True)
    primary = mass * radius * np.exp(1j * angle)
    secondary = mass * radius * (radius / rod) * np.exp(2j * angle)
    each = np.stack([primary, secondary])[..., None] * along
    turned = (skew(place) @ each[..., None])[..., 0]
    return ReciprocatingForces(force=each.sum(axis=1), moment=turned.sum(axis=1))


def angle_past_dead_centre(crank_throw: ArrayLike, cylinder: ArrayLike) -> FloatArray:
    """Angle past top dead centre from the angle of the crank throw and of the cylinder, both in rad.

    Both are measured at t = 0 about the shaft in its sense of rotation, from one common line; for a V engine
    every bank has its own cylinder angle. Shapes broadcast.
    """
    return np.asarray(np.asarray(crank_throw, dtype=float) - np.asarray(cylinder, dtype=float))
