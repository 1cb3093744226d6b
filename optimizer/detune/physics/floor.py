"""A floor as the practitioner knows it (sag, or frequency and effective mass) as a mass on spring and damper."""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray
from detune.physics.rigid_body import STANDARD_GRAVITY


def floor_frequency_from_sag(sag: ArrayLike, gravity: float = STANDARD_GRAVITY) -> FloatArray:
    """First frequency in Hz of a floor from its sag in m under its own weight.

    A uniform, simply supported, one-way span (Euler-Bernoulli beam): sag = 5 m' g L^4 / (384 E I) and f =
    (pi/2) sqrt(E I / (m' L^4)), so f = (pi/2) sqrt(5 g / (384 sag)), which is 17.75/sqrt(sag in mm) Hz. Rao,
    Mechanical Vibrations, ch. 8 (beam frequencies); Murray and others, AISC Design Guide 11, eq. 3.3 (the
    same with the trade's 0.18 sqrt(g/sag)); from memory, recomputed. Shapes broadcast. ValueError unless sag
    > 0.
    """
    sag = np.asarray(sag, dtype=float)
    if np.any(~(sag > 0.0)):
        raise ValueError("the sag of a floor must be positive")
    return np.asarray(np.pi / 2.0 * np.sqrt(5.0 * gravity / (384.0 * sag)))


def floor_modal_mass(total_mass: ArrayLike) -> FloatArray:
    """Effective mass in kg at midspan of the first mode of a uniform simply supported span: half of its mass.

    The mode is a half sine, and the mean of its square is 1/2.
    """
    return np.asarray(np.asarray(total_mass, dtype=float) / 2.0)


def floor_from_frequency(
    frequency: ArrayLike, effective_mass: ArrayLike, damping_ratio: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Mass, stiffness and viscous damping (kg, N/m, N s/m) of a floor: k = m w^2, c = 2 z m w.

    frequency in Hz, effective_mass in kg at the place of the machine, damping_ratio dimensionless; all
    broadcast. ValueError unless frequency and mass are positive and the ratio is not negative.
    """
    f, m, z = np.broadcast_arrays(
        *(np.asarray(a, dtype=float) for a in (frequency, effective_mass, damping_ratio))
    )
    if np.any(~(f > 0.0)) or np.any(~(m > 0.0)) or np.any(~(z >= 0.0)):
        raise ValueError(
            "a floor needs a positive frequency and mass, and a damping ratio that is not negative"
        )
    omega = 2.0 * np.pi * f
    return np.array(m), np.asarray(m * omega**2), np.asarray(2.0 * z * m * omega)
