"""What a Gaussian response of known variance does in a stated time: crossings, expected extremes, resultants.

Three sigma is no maximum: in an hour at 10 Hz the expected extreme is 4.7 sigma.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray

EULER_CONSTANT = 0.5772156649015329
FEWEST_CYCLES = 10.0


def zero_crossing_rate(variance: ArrayLike, rate_variance: ArrayLike) -> FloatArray:
    """Upward zero crossings in Hz of a Gaussian response: sqrt(variance of its rate/variance)/(2 pi).

    Shapes broadcast; a response that does not move crosses at rate 0. S. O. Rice, Bell Syst. Tech. J. 24
    (1945) 46.
    """
    still = np.asarray(variance, dtype=float)
    moving = np.asarray(rate_variance, dtype=float)
    safe = np.where(still > 0.0, still, 1.0)
    return np.asarray(np.where(still > 0.0, np.sqrt(moving / safe), 0.0) / (2.0 * np.pi))


def expected_extreme_factor(crossing_rate: ArrayLike, duration: ArrayLike, sides: int = 1) -> FloatArray:
    """Mean largest value in a duration, in standard deviations: u + 0.5772/u with u = sqrt(2 ln(sides f T)).

    crossing_rate f in Hz and duration T in s broadcast. sides = 1 for the largest value, 2 for the largest
    magnitude (both signs count). Fewer than ten cycles are counted as ten, which is on the safe side: the
    formula is asymptotic. A. G. Davenport, Proc. Instn Civ. Engrs 28 (1964) 187. Raises ValueError for other
    sides and for a duration not above zero.
    """
    if sides not in (1, 2):
        raise ValueError("an extreme counts one side or two")
    time = np.asarray(duration, dtype=float)
    if np.any(~(time > 0.0)):
        raise ValueError("the duration of a random forcing lies above zero")
    cycles = np.maximum(np.asarray(crossing_rate, dtype=float) * time, FEWEST_CYCLES)
    u = np.sqrt(2.0 * np.log(sides * cycles))
    return np.asarray(u + EULER_CONSTANT / u)


def expected_extreme(
    variance: ArrayLike, rate_variance: ArrayLike, duration: ArrayLike, sides: int = 2
) -> FloatArray:
    """Mean largest magnitude (sides = 2) in a duration in s, in the unit of the response. Shapes
    broadcast.
    """
    rate = zero_crossing_rate(variance, rate_variance)
    return np.asarray(
        np.sqrt(np.asarray(variance, dtype=float)) * expected_extreme_factor(rate, duration, sides)
    )


def resultant_exceedance(covariance: ArrayLike, level: ArrayLike) -> FloatArray:
    """Share of the time in which the resultant of three Gaussian axes exceeds a level.

    covariance (..., 3, 3) of the axes, level (...) in their unit; leading axes broadcast. For three equal
    independent axes and level 3 sigma this is 0.0293. In polar form the distance along a direction n has a
    standard deviation sqrt(n^T C n); the chance is the mean over all directions of the survival function of
    the chi distribution with three degrees of freedom. Fewer axes: zeros in the covariance. Accuracy 1e-6.
    """
    from scipy.special import erfc

    spread = np.linalg.eigvalsh(np.asarray(covariance, dtype=float))
    limit = np.asarray(level, dtype=float)
    if np.any(~(limit > 0.0)):
        raise ValueError("the level of a resultant lies above zero")
    direction, weight = _octant()
    deviation = np.sqrt(np.maximum(spread, 0.0) @ (direction**2).T)
    with np.errstate(divide="ignore"):
        distance = limit[..., None] / deviation
    far = np.minimum(distance, 40.0)
    survival = erfc(far / np.sqrt(2.0)) + np.sqrt(2.0 / np.pi) * far * np.exp(-0.5 * far**2)
    return np.asarray(survival @ weight)


def resultant_level(covariance: ArrayLike, exceedance: float) -> FloatArray:
    """Level (...) that the resultant of three Gaussian axes exceeds in the stated share of the time.

    covariance (..., 3, 3). By bisection to 1e-9 of the level. Raises ValueError unless 0 < exceedance < 1.
    """
    if not 0.0 < exceedance < 1.0:
        raise ValueError("the share of time lies between 0 and 1")
    matrix = np.asarray(covariance, dtype=float)
    total = np.sqrt(np.trace(matrix, axis1=-2, axis2=-1))
    scale = np.where(total > 0.0, total, 1.0)
    unit = matrix / scale[..., None, None] ** 2
    low, high = np.zeros_like(scale), np.full_like(scale, 40.0)
    for _ in range(60):
        middle = 0.5 * (low + high)
        beyond = resultant_exceedance(unit, middle) > exceedance
        low, high = np.where(beyond, middle, low), np.where(beyond, high, middle)
    return np.asarray(high * total)


def polarised_rows(rows: ArrayLike) -> FloatArray:
    """Six response rows (6, n) from three (3, n), whose variances give the covariance: x, y, z, x+y, y+z,
    z+x.
    """
    x, y, z = np.asarray(rows, dtype=float)
    return np.stack([x, y, z, x + y, y + z, z + x])


def covariance_of_polarised(variances: ArrayLike) -> FloatArray:
    """Covariance (..., 3, 3) of three responses from the variances (6, ...) of their `polarised_rows`.

    2 cov(x, y) = var(x + y) - var(x) - var(y).
    """
    xx, yy, zz, sum_xy, sum_yz, sum_zx = np.asarray(variances, dtype=float)
    xy, yz, zx = 0.5 * (sum_xy - xx - yy), 0.5 * (sum_yz - yy - zz), 0.5 * (sum_zx - zz - xx)
    rows = [np.stack(row, axis=-1) for row in ((xx, xy, zx), (xy, yy, yz), (zx, yz, zz))]
    return np.stack(rows, axis=-2)


def _octant(count: int = 32) -> tuple[FloatArray, FloatArray]:
    """Directions (N, 3) in the first octant in the axes of the covariance, and weights (N,) that add to
    one.
    """
    node, weight = np.polynomial.legendre.leggauss(count)
    height = 0.5 * (node + 1.0)
    angle = 0.25 * np.pi * (node + 1.0)
    z, phi = np.meshgrid(height, angle, indexing="ij")
    across = np.sqrt(1.0 - z**2)
    direction = np.stack([across * np.cos(phi), across * np.sin(phi), z], axis=-1).reshape(-1, 3)
    return direction, np.asarray(np.outer(weight, weight).ravel() / 4.0)


def miles_pseudo_acceleration(frequency: ArrayLike, quality: ArrayLike, density: ArrayLike) -> FloatArray:
    """Rms of w^2 times the relative displacement under a flat base density: sqrt(pi/2 f Q S). A check only.

    frequency in Hz, quality Q = 1/(2 z), density in (unit of acceleration)^2/Hz. Exact for a density flat
    over all frequencies. J. W. Miles, J. Aeronaut. Sci. 21 (1954) 753.
    """
    f, q, s = (np.asarray(a, dtype=float) for a in (frequency, quality, density))
    return np.asarray(np.sqrt(0.5 * np.pi * f * q * s))


def miles_absolute_acceleration(frequency: ArrayLike, quality: ArrayLike, density: ArrayLike) -> FloatArray:
    """Rms of the absolute acceleration of the mass: Miles' value times sqrt(1 + 1/Q^2), as 4 z^2 = 1/Q^2."""
    q = np.asarray(quality, dtype=float)
    return np.asarray(miles_pseudo_acceleration(frequency, q, density) * np.sqrt(1.0 + 1.0 / q**2))
