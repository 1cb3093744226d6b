"""One mass on one mount: closed forms for maps, first guesses and tests.

r is the frequency ratio w/wn, ``ratio`` the viscous damping ratio, ``loss_factor`` the constant loss factor;
both may stand together. Den Hartog, Mechanical Vibrations, ch. 2; Rao, Mechanical Vibrations, ch. 3 and 9.
All arguments broadcast unless said otherwise.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.rigid_body import STANDARD_GRAVITY


def relative_stiffness(r: ArrayLike, ratio: ArrayLike = 0.0, loss_factor: ArrayLike = 0.0) -> ComplexArray:
    """Complex stiffness of the mount over its k: 1 + j (eta + 2 z r)."""
    r, z, eta = (np.asarray(a, dtype=float) for a in (r, ratio, loss_factor))
    return np.asarray(1.0 + 1j * (eta + 2.0 * z * r))


def dynamic_displacement(r: ArrayLike, ratio: ArrayLike = 0.0, loss_factor: ArrayLike = 0.0) -> ComplexArray:
    """Displacement under a constant force over the static one, X k / F, complex."""
    r = np.asarray(r, dtype=float)
    return np.asarray(1.0 / (relative_stiffness(r, ratio, loss_factor) - r**2))


def transmissibility(r: ArrayLike, ratio: ArrayLike = 0.0, loss_factor: ArrayLike = 0.0) -> ComplexArray:
    """Force into a rigid ground over the force on the mass, or mass motion over base motion, complex."""
    return np.asarray(relative_stiffness(r, ratio, loss_factor) * dynamic_displacement(r, ratio, loss_factor))


def relative_transmissibility(
    r: ArrayLike, ratio: ArrayLike = 0.0, loss_factor: ArrayLike = 0.0
) -> ComplexArray:
    """Mount deflection over base displacement, complex: r^2 times ``dynamic_displacement``."""
    return np.asarray(np.asarray(r, dtype=float) ** 2 * dynamic_displacement(r, ratio, loss_factor))


def unbalance_response(r: ArrayLike, ratio: ArrayLike = 0.0, loss_factor: ArrayLike = 0.0) -> ComplexArray:
    """Displacement times mass over unbalance, M X / (m e), complex; equals ``relative_transmissibility``."""
    return relative_transmissibility(r, ratio, loss_factor)


def natural_frequency(stiffness: ArrayLike, mass: ArrayLike) -> FloatArray:
    """Undamped natural frequency in Hz from N/m and kg."""
    k, m = np.asarray(stiffness, dtype=float), np.asarray(mass, dtype=float)
    return np.asarray(np.sqrt(k / m) / (2.0 * np.pi))


def natural_frequency_from_deflection(
    deflection: ArrayLike, gravity: float = STANDARD_GRAVITY, dynamic_to_static: ArrayLike = 1.0
) -> FloatArray:
    """Natural frequency in Hz from the static deflection in m under the machine's own weight.

    sqrt(g / d) / 2 pi holds only for a linear mount whose dynamic stiffness is the static one;
    ``dynamic_to_static`` is the ratio of the two. ValueError unless the deflection is positive.
    """
    d = np.asarray(deflection, dtype=float)
    if np.any(~(d > 0.0)):
        raise ValueError("a static deflection must be positive")
    return np.asarray(np.sqrt(gravity * np.asarray(dynamic_to_static, dtype=float) / d) / (2.0 * np.pi))


def deflection_for_isolation(
    frequency: ArrayLike, isolation: ArrayLike, gravity: float = STANDARD_GRAVITY
) -> FloatArray:
    """Static deflection in m that isolates by ``isolation`` = 1 - T at a frequency in Hz, undamped.

    d = g (2 - R) / ((1 - R) w^2), from T = 1/(r^2 - 1) (Rao, eq. 9.106). ValueError unless 0 <= isolation <
    1.
    """
    isolation = np.asarray(isolation, dtype=float)
    if not (np.all(isolation >= 0.0) and np.all(isolation < 1.0)):
        raise ValueError("an isolation lies between 0 and 1; 90 per cent is 0.9")
    omega = 2.0 * np.pi * np.asarray(frequency, dtype=float)
    return np.asarray(gravity * (2.0 - isolation) / ((1.0 - isolation) * omega**2))


def displacement_peak(ratio: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """(r, height) of the displacement peak under a constant force, viscous damping.

    r = sqrt(1 - 2 z^2), height 1/(2 z sqrt(1 - z^2)); from z = 1/sqrt(2) on the curve only falls: (0, 1).
    Infinite height without damping.
    """
    z = np.asarray(ratio, dtype=float)
    peaked = 2.0 * z**2 < 1.0
    inside = np.where(peaked, z, 0.5)
    r = np.where(peaked, np.sqrt(1.0 - 2.0 * inside**2), 0.0)
    damped = inside > 0.0
    safe = np.where(damped, inside, 0.5)
    height = np.where(damped, 1.0 / (2.0 * safe * np.sqrt(1.0 - safe**2)), np.inf)
    return r, np.where(peaked, height, 1.0)


def unbalance_peak(ratio: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """(r, height) of the unbalance curve's peak: r = 1/sqrt(1 - 2 z^2), the height of ``displacement_peak``.

    From z = 1/sqrt(2) on the curve only rises, towards 1: (inf, 1).
    """
    r, height = displacement_peak(ratio)
    peaked = r > 0.0
    return np.where(peaked, 1.0 / np.where(peaked, r, 1.0), np.inf), height


def transmissibility_peak(ratio: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """(r, height) of the transmissibility peak of a viscous mount, Inman, Engineering Vibration, sec. 2.4.

    r^2 = (sqrt(1 + 8 z^2) - 1) / (4 z^2) and T^2 = 1 / (1 - r^4); (1, inf) without damping.
    """
    z = np.asarray(ratio, dtype=float)
    # r^2 = 2 / (1 + sqrt(1 + 8 z^2)) is the same without the division by z^2.
    square = 2.0 / (1.0 + np.sqrt(1.0 + 8.0 * z**2))
    # By the peak condition 1 - r^2 = 2 z^2 r^4, so 1 - r^4 also comes without cancellation.
    rest = 2.0 * z**2 * square**2 * (1.0 + square)
    damped = z > 0.0
    return np.sqrt(square), np.where(damped, 1.0 / np.sqrt(np.where(damped, rest, 1.0)), np.inf)


def half_power_band_of_mobility(
    mass: ArrayLike, viscous: ArrayLike, stiffness: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Lower and upper half-power omega of mobility: wn (sqrt(1 + z^2) -+ z) in rad/s, exactly c/m apart."""
    m, c, k = (np.asarray(a, dtype=float) for a in (mass, viscous, stiffness))
    half = c / (2.0 * m)
    middle = np.sqrt(k / m + half**2)
    upper = middle + half
    return np.asarray(k / m / upper), np.asarray(upper)
