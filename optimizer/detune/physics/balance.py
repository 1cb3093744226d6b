"""Balance quality of rotors: permissible residual unbalance and the force it makes (ISO 21940-11:2016).

A balance grade G is the velocity of the mass centre, e_per times omega: G6.3 is 6.3 mm/s = 0.0063 m/s.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray


def permissible_eccentricity(grade: ArrayLike, frequency: ArrayLike) -> FloatArray:
    """Permissible eccentricity in m, grade / (2 pi f).

    grade in m/s, frequency of rotation in Hz; both broadcast. ValueError unless both are positive.
    """
    g, f = np.asarray(grade, dtype=float), np.asarray(frequency, dtype=float)
    if not (np.all(g > 0.0) and np.all(f > 0.0)):
        raise ValueError("a balance grade and its service speed must be positive")
    return np.asarray(g / (2.0 * np.pi * f))


def permissible_unbalance(grade: ArrayLike, rotor_mass: ArrayLike, frequency: ArrayLike) -> FloatArray:
    """Permissible residual unbalance in kg m: rotor mass in kg times permissible eccentricity; broadcast."""
    return np.asarray(np.asarray(rotor_mass, dtype=float) * permissible_eccentricity(grade, frequency))


def unbalance_force(unbalance: ArrayLike, omega: ArrayLike) -> FloatArray:
    """Rotating force in N of an unbalance in kg m at omega in rad/s: U w^2. Both broadcast."""
    return np.asarray(np.asarray(unbalance, dtype=float) * np.asarray(omega, dtype=float) ** 2)


def rotating_force_vector(shaft: ArrayLike, start: ArrayLike | None = None) -> tuple[FloatArray, FloatArray]:
    """Two unit vectors (a, b) square to the shaft: the force of a unit unbalance is a - j b.

    Re((a - j b) exp(j w t)) = a cos w t + b sin w t turns about the shaft by the right-hand rule. ``start``
    gives the direction at t = 0 (its part square to the shaft). Shapes: (3), (3) -> (3), (3). ValueError if
    the shaft has no direction or the start lies along it.
    """
    s = np.asarray(shaft, dtype=float)
    length = float(np.linalg.norm(s))
    if not length > 0.0:
        raise ValueError("a shaft needs a direction")
    s = s / length
    guess = np.eye(3)[int(np.argmin(np.abs(s)))] if start is None else np.asarray(start, dtype=float)
    a = guess - (guess @ s) * s
    size = float(np.linalg.norm(a))
    if not size > 1e-9 * float(np.linalg.norm(guess)):
        raise ValueError("the start direction of an unbalance must not lie along the shaft")
    a = a / size
    return a, np.cross(s, a)
